"""What happens around the kinetics: cleaning, opening a furnace, hot neighbours, skimming."""

from __future__ import annotations

import numpy as np
import pytest

from purity.assess import followed, initial, molar_masses
from purity.contacts.neighbour import evaporation
from purity.database import Gap, Library, load
from purity.draws import Draws
from purity.kinetics.advance import State
from purity.passing import Passed, make_setting, pass_step
from purity.scenario_file import read_string

DRAWS = Draws(1, 1, 64)


@pytest.fixture(scope="module")
def library() -> Library:
    return load()


def sheet(step: str, host: str = "Nb", mass: str = "25.7 kg", limits: str = "O = 10, H = 2, N = 10") -> str:
    return f"""
title = "sheet"
[lot]
host = "{host}"
mass = "{mass}"
certificate = {{ O = 5, H = 1, N = 5 }}
limits = {{ {limits} }}
[furnace]
leak = "1e-6 mbar L/s"
pump = "8000 L/s"
volume = "500 L"
outgassing = "2e-4 mbar L/s"
[[step]]
name = "step"
form = {{ shape = "slab", thickness = "3 mm", width = "250 mm", length = "400 mm" }}
support = []
{step}
"""


def through(text: str, library: Library, before: State | None = None) -> Passed:
    scenario = read_string(text, library)
    elements = followed(scenario)
    masses = molar_masses(library, (scenario.lot.host, *elements))
    start = initial(scenario.lot, elements, masses, library, DRAWS)
    if before is not None:
        start = State(start.x, start.suspended, None, before.film, before.films, before.surface)
    return pass_step(start, scenario.steps[0].choices[0], scenario.lot, elements, masses, library, DRAWS)


def ppm(passed: Passed, contact: str, element: str) -> float:
    c, i = passed.contacts.index(contact), passed.impurities.index(element)
    setting = passed.setting
    scale = 1e6 * setting.molar_mass[element] / setting.molar_mass[setting.host]
    return float(np.median(passed.ledger[c, i])) * scale


BAKE = """
process = "heat"
temperature = [["0 min", "400 degC"], ["30 min", "400 degC"]]
atmosphere = "vacuum"
pressure = "2e-6 mbar"
vent = { temperature = "%s", gas = "%s" }
"""


@pytest.fixture(scope="module")
def opened(library: Library) -> Passed:
    return through(sheet(BAKE % ("60 degC", "argon N5.0")), library)


def test_opened_cold_the_film_is_the_oxygen_and_hydrogen_stays_out(opened: Passed) -> None:
    # 2.5 nm of Nb2O5 (4600 kg/m3, 30.1 % oxygen) on 2.06 m2 of 25.7 kg: 0.28 ppm
    assert ppm(opened, "venting", "O") == pytest.approx(0.28, rel=0.25)
    assert 0 < ppm(opened, "venting", "H") < 0.02
    film = opened.after.film
    assert film is not None
    assert np.median(film) == pytest.approx(2.5e-9, rel=0.2)


def test_opened_hot_hydrogen_goes_in(opened: Passed, library: Library) -> None:
    hot = through(sheet(BAKE % ("300 degC", "air")), library)
    assert ppm(hot, "venting", "H") > 10.0 * ppm(opened, "venting", "H")
    assert any("opened hot" in note for note in hot.notes)


def test_what_a_closed_vessel_was_filled_with_bounds_the_hydrogen(library: Library) -> None:
    hot = through(sheet(BAKE % ("300 degC", "argon N5.0")), library)
    i = hot.impurities.index("H")
    gained = hot.ledger[hot.contacts.index("venting"), i] * hot.setting.amount
    water = hot.setting.sample(hot.choice.vent["H2O"])
    hydrogen = hot.setting.sample(hot.choice.vent["H2"]) if "H2" in hot.choice.vent else np.zeros(1)
    filled = 101325.0 * 0.5 / (8.314462618 * 295.0)
    assert np.all(gained <= 2.0 * (water + hydrogen) * filled * (1 + 1e-9))


CLEAN = """
process = "clean"
temperature = "20 degC"
duration = "10 min"
clean = { removes = "%s", leaves = { F = "5 ng/cm2" } }
"""


@pytest.mark.parametrize(("removes", "left"), [("20 um", 0.0), ("1 nm", 1.0 - 1.0 / 5.0)])
def test_cleaning_takes_off_what_is_at_the_surface(removes: str, left: float, library: Library) -> None:
    text = sheet(CLEAN % removes, limits="O = 10, H = 2, N = 10, F = 1")
    scenario = read_string(text, library)
    count = len(followed(scenario))
    surface = np.full((count, DRAWS.n), 1e-6)
    dirty = State(
        np.zeros((count, 1)), np.zeros((count, 1)), None, np.full((1, DRAWS.n), 3e-9), ("oxide",), surface
    )
    passed = through(text, library, dirty)
    after = passed.after.surface
    assert after is not None
    i = passed.impurities.index("O")
    assert after[i] == pytest.approx(left * 1e-6, abs=1e-12)
    assert passed.ledger[0, i] == pytest.approx((left - 1.0) * 1e-6, abs=1e-12)
    assert np.array_equal(passed.after.x, passed.before.x)
    fluorine = passed.impurities.index("F")
    assert np.all(passed.ledger[0, fluorine] > -1e-6)


def test_a_pure_metal_evaporates_at_the_rate_of_hertz_and_knudsen(library: Library) -> None:
    text = sheet(
        """
process = "heat"
temperature = "1000 degC"
duration = "60 min"
atmosphere = "vacuum"
pressure = "2e-6 mbar"
[[step.neighbour]]
material = { name = "plate", phases = { Cr = 1 } }
area = "100 cm2"
temperature = "1200 degC"
""",
        limits="O = 10, H = 2, N = 10, Cr = 5",
    )
    scenario = read_string(text, library)
    elements = followed(scenario)
    masses = molar_masses(library, ("Nb", *elements))
    choice = scenario.steps[0].choices[0]
    setting, _ = make_setting(scenario.lot, choice, elements, masses, library, Draws.nominal())
    found = evaporation(setting, "Cr", np.full(1, 1475.0))
    assert not isinstance(found, Gap)
    # chromium has 1 Pa at 1383 degC and 0.1 Pa at 1250 degC, from memory of vapour pressure tables (handbook
    # of chemistry and physics): 0.03 Pa at 1202 degC within a factor of two
    flux = 0.84 * 0.03 / np.sqrt(2 * np.pi * 0.052 * 8.314 * 1475.0)
    assert 0.5 * flux < found[0][0] < 2.0 * flux
    passed = through(text, library)
    rate = ppm(passed, "plate", "Cr") * 1e-6 * 25.7 / 0.052
    assert rate == pytest.approx(float(found[0][0]) * 0.01 * 3600.0, rel=0.5)


def test_a_part_of_a_compound_leaves_its_elements_unassessed(library: Library) -> None:
    text = sheet(
        """
process = "heat"
temperature = "400 degC"
duration = "10 min"
atmosphere = "vacuum"
pressure = "2e-6 mbar"
[[step.neighbour]]
material = { name = "tube", phases = { SiO2 = 1 } }
area = "100 cm2"
temperature = "1200 degC"
"""
    )
    passed = through(text, library)
    assert any(gap.quantity == "vapour:SiO2" for gap in passed.gaps["Si"])


def test_skimming_takes_out_its_share_of_what_is_suspended(library: Library) -> None:
    text = """
title = "skim"
[lot]
host = "Cu"
mass = "2 kg"
certificate = { O = 40, Al = 10 }
limits = { O = 50, Al = 20 }
[lot.charge]
form = { shape = "slab", thickness = "25 mm", width = "50 mm", length = "50 mm" }
surface = "etched"
days_in_air = 1
[[step]]
name = "melt"
process = "melt"
temperature = "1150 degC"
duration = "10 min"
wall_area = "200 cm2"
free_surface = "50 cm2"
immersed = []
container = { name = "alumina", phases = { Al2O3 = 1 } }
atmosphere = "argon N6.0"
flow = "2 L/min"
"""
    kept = through(text, library)
    skimmed = through(text + 'removal = { Al2O3 = "75 %" }\n', library)
    metal, oxygen = (kept.impurities.index(element) for element in ("Al", "O"))
    suspended = kept.after.suspended[metal]
    # nearly all of the 10 ppm of aluminium
    assert np.median(suspended) == pytest.approx(np.median(kept.before.x[metal]), rel=0.05)
    assert skimmed.after.suspended[metal] == pytest.approx(0.25 * suspended, rel=1e-6)
    out = skimmed.ledger[skimmed.contacts.index("removal")]
    assert out[metal] == pytest.approx(-0.75 * suspended, rel=1e-6)
    # three atoms of oxygen leave with two of aluminium
    assert out[oxygen] == pytest.approx(1.5 * out[metal], rel=1e-6)
    lost = kept.after.x[oxygen] - skimmed.after.x[oxygen]
    assert lost == pytest.approx(-out[oxygen], rel=1e-6)
    assert "removal" not in kept.contacts
