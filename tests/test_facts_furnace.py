"""Facts of furnace practice without numbers: which of two ways is the better one.

Each is common practice, no source, unless a source stands beside it. Contents are of reduced scenarios on a
few draws: only the order counts.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from purity.assess import assess, followed, initial, molar_masses
from purity.contacts import expose
from purity.database import Library, load
from purity.draws import Draws
from purity.followers import total
from purity.kinetics.exposure import Exposure
from purity.moving import move
from purity.passing import make_setting
from purity.result import ChoiceResult, Line
from purity.scenario_file import read_string

DRAWS = Draws(1, 1, 32)

FURNACE = """
[furnace]
volume = "100 L"
leak = "1e-4 mbar L/s"
pump = "100 L/s"
outgassing = "1e-4 mbar L/s"
hot_zone = "molybdenum"
purges = 3
"""


@pytest.fixture(scope="module")
def library() -> Library:
    return load()


def lot(host: str, mass: str, certificate: str, limits: str) -> str:
    return f"""
title = "fact"
[lot]
host = "{host}"
mass = "{mass}"
certificate = {{ {certificate} }}
limits = {{ {limits} }}
"""


def melt(temperature: str, duration: str, choices: str) -> str:
    return f"""
[lot.charge]
form = {{ shape = "slab", thickness = "25 mm", width = "50 mm", length = "50 mm" }}
surface = "etched"
days_in_air = 1
{FURNACE}
[[step]]
name = "melt"
process = "melt"
temperature = "{temperature}"
duration = "{duration}"
wall_area = "200 cm2"
free_surface = "50 cm2"
stirring = "induction"
immersed = []
atmosphere = "argon N6.0"
flow = "2 L/min"
{choices}
"""


def container(*phases: str) -> str:
    return "".join(
        f'[[step.choice]]\nname = "{phase}"\ncontainer = {{ name = "{phase}", phases = {{ {phase} = 1 }} }}\n'
        for phase in phases
    )


def heat(profile: str, choices: str) -> str:
    return f"""
{FURNACE}
[[step]]
name = "heat"
process = "heat"
form = {{ shape = "slab", thickness = "3 mm", width = "100 mm", length = "100 mm" }}
support = []
temperature = {profile}
vent = {{ temperature = "60 degC", gas = "argon N5.0" }}
{choices}
"""


def run(text: str, library: Library) -> dict[str, ChoiceResult]:
    result = assess(read_string(text, library), library, DRAWS)
    return {choice.name: choice for choice in result.steps[0].choices}


def of(choice: ChoiceResult, element: str) -> Line:
    return next(line for line in choice.lines if line.impurity == element)


def through(choice: ChoiceResult, element: str, contact: str) -> float:
    return next(c.pickup.median for c in of(choice, element).contacts if c.contact == contact)


def test_titanium_takes_more_oxygen_from_silica_than_from_alumina_than_from_yttria(library: Library) -> None:
    known = lot("Ti", "1 kg", "O = 300, Si = 5, Al = 5, Y = 1", "O = 1000, Si = 100, Al = 100, Y = 100")
    found = run(known + melt("1720 degC", "10 min", container("SiO2", "Al2O3", "Y2O3")), library)
    silica, alumina, yttria = (through(found[w], "O", "wall") for w in ("SiO2", "Al2O3", "Y2O3"))
    assert silica > alumina > yttria > 0


def test_a_wall_with_a_record_of_its_loss_is_ranked_and_its_depth_told(library: Library) -> None:
    known = lot("Ti", "1 kg", "O = 300, Al = 5, Si = 5", "O = 1000, Al = 100, Si = 100")
    found = run(known + melt("1720 degC", "10 min", container("SiO2", "Al2O3")), library)
    assert (found["SiO2"].state, found["SiO2"].attack_um) == ("attacked", None)
    # 1e-6 m/s (table of attack) for 10 min
    assert found["Al2O3"].state == "ranked"
    assert found["Al2O3"].attack_um == pytest.approx(600.0, rel=0.3)
    # Al2O3 gives 3 O for 2 Al
    ratio = through(found["Al2O3"], "O", "wall") / through(found["Al2O3"], "Al", "wall")
    assert ratio == pytest.approx(3 * 15.999 / (2 * 26.982), rel=1e-3)


def test_another_wall_that_is_eaten_without_a_record_keeps_the_choice_attacked(library: Library) -> None:
    known = lot("Ti", "1 kg", "O = 300, Al = 5, Si = 5", "O = 1000, Al = 100, Si = 100")
    step = melt("1720 degC", "10 min", container("Al2O3")).replace(
        "immersed = []", 'immersed = [{ name = "sheath", phases = { SiO2 = 1 }, area = "20 cm2" }]'
    )
    choice = run(known + step, library)["Al2O3"]
    assert (choice.state, choice.attack_um) == ("attacked", None)


def test_aluminium_in_boron_nitride_is_not_saturated_with_boron(library: Library) -> None:
    known = lot("Al", "1 kg", "B = 0.5, N = 1", "B = 10, N = 10")
    boron = of(run(known + melt("720 degC", "20 min", container("BN")), library)["BN"], "B")
    assert boron.end is not None
    assert boron.ceiling is not None
    assert boron.end.median < 0.1 * boron.ceiling.median


def test_a_wall_covered_by_what_it_forms_does_not_eat_on(library: Library) -> None:
    """Aluminium is melted in boron nitride for hours: AlN and a boride cover it, and the melt stays pure."""
    known = lot("Al", "8 kg", "B = 0.1, N = 1", "B = 100, N = 100")
    choice = run(known + melt("740 degC", "3 h", container("BN")), library)["BN"]
    boron = of(choice, "B")
    assert choice.state == "ranked"
    # solubility of boron in liquid aluminium at 973 K: 0.02 mass % (from memory)
    assert boron.end is not None
    assert 0.1 < boron.end.median < 200.0


def test_a_wall_product_that_is_swept_away_lets_more_oxygen_in_than_one_that_is_kept(
    library: Library,
) -> None:
    known = lot("Ni", "2 kg", "O = 5, Mg = 0.1", "O = 50, Mg = 10")
    way = container("MgO") + 'atmosphere = "vacuum"\npressure = "1e-4 mbar"\n'
    step = melt("1600 degC", "60 min", way).replace('atmosphere = "argon N6.0"\nflow = "2 L/min"\n', "", 1)
    scenario = read_string(known + step, library)
    elements = followed(scenario)
    masses = molar_masses(library, ("Ni", *elements))
    choice = scenario.steps[0].choices[0]
    setting, schedule = make_setting(scenario.lot, choice, elements, masses, library, DRAWS)
    start = initial(scenario.lot, elements, masses, library, DRAWS)
    swept = [expose(contact, setting) for contact in choice.contacts]
    kept = [replace(one, exposure=_without(one.exposure, "evaporation of Mg")) for one in swept]
    ends = []
    for exposed in (swept, kept):
        parts = move(start, setting, schedule, exposed, history=False)
        i = elements.index("O")
        part = next(p for p in parts if i in p.index)
        ends.append(total(part.pickup.state)[list(part.index).index(i)])
    assert np.all(ends[0] >= ends[1] * (1.0 - 1e-6))
    assert np.median(ends[0] / ends[1]) > 1.01


def _without(exposure: Exposure, name: str) -> Exposure:
    return replace(exposure, carriers=tuple(c for c in exposure.carriers if c.name != name))


def test_niobium_cooled_in_hydrogen_takes_it_when_cold(library: Library) -> None:
    known = lot("Nb", "2 kg", "O = 5, H = 1", "O = 10, H = 2")
    gas = 'atmosphere = { Ar = "rest", H2 = "1 %" }\npressure = "1 bar"\nflow = "2 L/min"\n'
    up = '["0 min", "20 degC"], ["60 min", "800 degC"], ["120 min", "800 degC"]'
    ways = (
        f'[[step.choice]]\nname = "cooled"\n{gas}temperature = [{up}, ["600 min", "100 degC"]]\n'
        f'[[step.choice]]\nname = "out hot"\n{gas}temperature = [{up}]\n'
    )
    found = run(known + heat(f"[{up}]", ways), library)
    cooled, hot = (of(found[name], "H").end for name in ("cooled", "out hot"))
    assert cooled is not None
    assert hot is not None
    assert cooled.median > 2.0 * hot.median


FOIL = """
[[step.choice]]
name = "argon"
atmosphere = "argon N5.0"
flow = "2 L/min"
[[step.choice]]
name = "argon and foil"
atmosphere = "argon N5.0"
flow = "2 L/min"
wrap = ["titanium foil"]
"""


def test_a_getter_foil_helps_titanium_in_argon(library: Library) -> None:
    known = lot("Ti", "2 kg", "O = 500, N = 50", "O = 1000, N = 100")
    profile = '[["0 min", "20 degC"], ["60 min", "950 degC"], ["120 min", "950 degC"]]'
    found = run(known + heat(profile, FOIL), library)
    for element in ("O", "N"):
        assert through(found["argon and foil"], element, "gas") < 0.7 * through(
            found["argon"], element, "gas"
        )


def test_a_getter_foil_does_not_help_copper_in_argon(library: Library) -> None:
    # where the foil touches, more titanium goes into the copper than the lot may take
    known = lot("Cu", "4 kg", "Fe = 1, Ti = 0.1", "Fe = 2, Ti = 1")
    profile = '[["0 min", "20 degC"], ["30 min", "700 degC"], ["60 min", "700 degC"]]'
    scenario = read_string(known + heat(profile, FOIL), library)
    elements = followed(scenario)
    masses = molar_masses(library, ("Cu", *elements))
    choice = scenario.steps[0].choices[1]
    setting, _ = make_setting(scenario.lot, choice, elements, masses, library, DRAWS)
    foil = expose(next(c for c in choice.contacts if c.role == "wrap"), setting)
    assert foil.gain is not None
    gained = foil.gain[elements.index("Ti")] * masses["Ti"] / masses["Cu"]
    assert np.median(gained) > scenario.lot.limits["Ti"]


def test_only_a_wall_that_is_not_wetted_is_said_to_hold_back_for_that(library: Library) -> None:
    """Titanium wets what it reduces; aluminium does not wet silica below some 1100 K (from memory)."""
    aluminium = lot("Al", "1 kg", "O = 1, Si = 1", "O = 100, Si = 1000")
    titanium = lot("Ti", "1 kg", "O = 300, Y = 1", "O = 1000, Y = 100")
    dry = of(run(aluminium + melt("720 degC", "20 min", container("SiO2")), library)["SiO2"], "Si")
    wet = of(run(titanium + melt("1720 degC", "10 min", container("Y2O3")), library)["Y2O3"], "O")
    assert dry.held_back_by == "wetting"
    assert wet.held_back_by != "wetting"
