"""Facts of the trade that need no numbers, asked of the whole road from a scenario to its contents.

Every fact here is common practice, no source. They are asked at the medians of all records, where a fact
must hold exactly, and not on average.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from functools import partial

import numpy as np
import pytest

from purity.assess import followed, initial, molar_masses
from purity.contacts.package import desiccant as dry
from purity.contacts.package import let_in, partial_pressure, wall_conductance
from purity.database import Gap, Library, load
from purity.draws import Draws
from purity.followers import total
from purity.lines import to_ppm
from purity.passing import Passed, pass_step
from purity.scenario import Package, Scenario
from purity.scenario_file import read_string

MELT = """
title = "One melt"
risk = 0.05

[lot]
host = "Cu"
mass = "{mass}"
certificate = {{ {certificate} }}
limits = {{ O = 50.0, H = 5.0, Si = 5.0 }}

[lot.charge]
form = {{ shape = "slab", thickness = "25 mm", width = "100 mm", length = "200 mm" }}
surface = "etched"
days_in_air = 0

[furnace]
{furnace}

[[step]]
name = "melt"
process = "melt"
temperature = "{T}"
duration = "{time}"
wall_area = "1020 cm2"
free_surface = "175 cm2"
stirring = "induction"
immersed = []
{gas}
container = {container}
"""

ARGON = 'atmosphere = "argon N5.0"\nflow = "4 L/min"'
DRY, DAMP = (f'exhaust = {{ O2 = "3 ppm", dew_point = "{dew} degC" }}' for dew in (-70, -40))
SILICA = '{ name = "our silica", phases = { SiO2 = 1.0 } }'
ALUMINA = '{ name = "our alumina", phases = { Al2O3 = 1.0 } }'
#: A wall whose nickel comes from an inventory far below any ceiling, through the melt side.
TRACED = (
    '{ name = "our yttria", phases = { Y2O3 = 1.0 }, traces = { NiO = "500 ppm" }, leach_depth = "20 um" }'
)
GRAPHITE = '{ name = "our graphite", phases = { C = 1.0 } }'

DEFAULTS: Mapping[str, str] = {
    "mass": "25 kg",
    "certificate": "O = 5.0, H = 0.1, C = 0.1, Si = 0.01, Ni = 0.01",
    "furnace": DRY,
    "T": "1180 degC",
    "time": "40 min",
    "gas": ARGON,
    "container": ALUMINA,
}

SHEET = """
title = "One bake"
risk = 0.05

[lot]
host = "Nb"
mass = "25.7 kg"
certificate = {{ O = 5.0, N = 5.0, H = 1.0, C = 3.0 }}
limits = {{ O = 50.0, N = 50.0 }}

[furnace]
volume = "500 L"
leak = "{leak}"
pump = "{pump}"
outgassing = "2e-6 mbar L/s"

[[step]]
name = "bake"
process = "heat"
temperature = "800 degC"
duration = "{time}"
form = {{ shape = "slab", thickness = "3 mm", width = "250 mm", length = "400 mm", count = 10 }}
support = []
vent = {{ temperature = "60 degC", gas = "argon N5.0" }}
atmosphere = "vacuum"
pressure = "1e-6 mbar"
"""


@pytest.fixture(scope="session")
def library() -> Library:
    return load()


def run(scenario: Scenario, library: Library) -> Passed:
    """Take the first choice of the first step at the medians, with nothing on the charge."""
    choice = scenario.steps[0].choices[0]
    choice = replace(choice, contacts=tuple(c for c in choice.contacts if c.role != "charge"))
    impurities = followed(scenario)
    masses = molar_masses(library, (scenario.lot.host, *impurities))
    nominal = Draws.nominal()
    start = initial(scenario.lot, impurities, masses, library, nominal)
    return pass_step(start, choice, scenario.lot, impurities, masses, library, nominal)


def melt(library: Library, **changed: str) -> Passed:
    return run(read_string(MELT.format(**{**DEFAULTS, **changed}), library), library)


def bake(library: Library, leak: str = "1e-6 mbar L/s", pump: str = "1000 L/s", time: str = "2 h") -> Passed:
    return run(read_string(SHEET.format(leak=leak, pump=pump, time=time), library), library)


def end(passed: Passed, element: str) -> float:
    """Whole content at the end, mass ppm."""
    i = passed.impurities.index(element)
    return float((total(passed.after) * to_ppm(passed))[i, 0])


def gained(passed: Passed, element: str) -> float:
    i = passed.impurities.index(element)
    return float(((total(passed.after) - total(passed.before)) * to_ppm(passed))[i, 0])


def from_contact(passed: Passed, contact: str, element: str) -> float:
    c, i = passed.contacts.index(contact), passed.impurities.index(element)
    return float((passed.ledger[c] * to_ppm(passed))[i, 0])


def test_deoxidised_copper_takes_more_silicon_from_silica(library: Library) -> None:
    poor = melt(library, container=SILICA, certificate="O = 0.05, H = 0.1, C = 0.1, Si = 0.01")
    rich = melt(library, container=SILICA, certificate="O = 50, H = 0.1, C = 0.1, Si = 0.01")
    assert from_contact(poor, "wall", "Si") > 1.5 * from_contact(rich, "wall", "Si")


def test_an_oxide_wall_closes_itself_off_as_oxygen_rises(library: Library) -> None:
    given = [
        from_contact(
            melt(library, container=ALUMINA, certificate=f"O = {o}, H = 0.1, C = 0.01, Si = 0.01"),
            "wall",
            "Al",
        )
        for o in (0.02, 0.2, 2.0)
    ]
    assert given[0] >= given[1] >= given[2]
    assert given[0] > given[2]


def test_drier_gas_less_hydrogen(library: Library) -> None:
    assert end(melt(library, furnace=DRY), "H") < 0.9 * end(melt(library, furnace=DAMP), "H")


def test_longer_never_gives_less_of_a_trace(library: Library) -> None:
    taken = [gained(melt(library, container=TRACED, time=f"{t} min"), "Ni") for t in (5, 20, 80, 320)]
    assert np.all(np.diff(taken) >= 0)
    assert taken[0] < taken[-1]


def test_a_wall_never_gives_more_than_it_holds(library: Library) -> None:
    made = melt(library, container=TRACED, time="1000 h")
    wall = next(e.exposure for e in made.exposed if e.exposure.contact == "wall")
    held = next(c.inventory for c in wall.carriers if c.name.startswith("NiO"))
    assert held is not None
    i = made.impurities.index("Ni")
    given = made.ledger[made.contacts.index("wall"), i] * made.setting.amount
    assert given[0] <= held[0] * (1 + 1e-9)
    assert given[0] > 0.9 * held[0]


def test_hotter_is_never_slower(library: Library) -> None:
    """Share of the inventory that has come out in a short time."""
    taken = [
        gained(melt(library, container=TRACED, T=f"{t} degC", time="2 min"), "Ni") for t in (1100, 1180, 1260)
    ]
    assert np.all(np.diff(taken) >= 0)


def test_half_the_lot_takes_twice_from_the_same_wall_and_meets_the_same_ceiling(library: Library) -> None:
    """What transfer or supply limits doubles; where the wall or gas stops it does not move."""
    short = partial(melt, library, container=TRACED, time="20 s", certificate="O = 5, H = 0.1, Ni = 0")
    whole, half = short(mass="25 kg"), short(mass="12.5 kg")
    assert gained(half, "Ni") == pytest.approx(2 * gained(whole, "Ni"), rel=0.05)
    long = partial(melt, library, container=GRAPHITE, time="200 h")
    assert end(long(mass="12.5 kg"), "C") == pytest.approx(end(long(mass="25 kg"), "C"), rel=0.02)


def test_a_larger_leak_more_oxygen_and_a_better_pump_less(library: Library) -> None:
    """Through the gas: what grows on the sheet when it is vented comes on top."""
    tight, leaky = (bake(library, leak=f"{leak} mbar L/s") for leak in ("1e-7", "1e-4"))
    assert from_contact(leaky, "gas", "O") > 2 * from_contact(tight, "gas", "O") > 0
    slow, fast = (bake(library, leak="1e-4 mbar L/s", pump=f"{pump} L/s") for pump in (300, 8000))
    assert from_contact(fast, "gas", "O") < from_contact(slow, "gas", "O")


def test_a_tighter_furnace_is_never_worse(library: Library) -> None:
    tight, leaky = bake(library, leak="1e-7 mbar L/s"), bake(library, leak="1e-4 mbar L/s")
    for element in ("O", "N", "C", "H"):
        assert end(tight, element) <= end(leaky, element) * (1 + 1e-9), element


def test_a_longer_bake_under_a_leak_more_oxygen(library: Library) -> None:
    taken = [gained(bake(library, leak="1e-5 mbar L/s", time=t), "O") for t in ("30 min", "2 h", "8 h")]
    assert np.all(np.diff(taken) > 0)


def test_no_dissolved_content_stands_above_saturation_with_a_compound_of_the_wall(library: Library) -> None:
    for oxygen in (0.05, 5.0, 500.0):
        made = melt(library, certificate=f"O = {oxygen}, H = 0.1, C = 0.05, Al = 1.0")
        wall = next(e.exposure for e in made.exposed if e.exposure.contact == "wall")
        alumina = next(c for c in wall.carriers if c.name == "Al2O3")
        beyond = alumina.nu @ np.log(made.after.x) - alumina.ln_k.ln[-1]
        assert beyond[0] < 0.05


STORE = """
title = "One shelf"
risk = 0.05

[lot]
host = "Cu"
mass = "25 kg"
certificate = {{ O = 2.0, H = 0.1 }}
limits = {{ O = 5.0, H = 0.5 }}

[[step]]
name = "store"
process = "store"
temperature = "22 degC"
duration = "{time}"
form = {{ shape = "cylinder", diameter = "150 mm", height = "12 mm" }}
atmosphere = "clean-room air"
package = {{ {package} }}
"""
BAG = (
    'barrier = "polyethylene", thickness = "{thickness} um", area = "0.6 m2", head_space = "2 L",'
    ' fill = "argon N6.0", desiccant = "{desiccant} g", desiccant_kind = "silica gel"'
)


def bag(
    library: Library, thickness: int = 100, desiccant: float = 50.0, time: str = "180 d"
) -> tuple[float, float]:
    """Water let in (mol) and its pressure inside at the end (Pa)."""
    text = STORE.format(time=time, package=BAG.format(thickness=thickness, desiccant=desiccant))
    made = run(read_string(text, library), library)
    contact = next(c for c in made.choice.contacts if c.role == "package")
    body, setting = contact.body, made.setting
    assert isinstance(body, Package)
    through = wall_conductance(body, "H2O", setting)
    assert not isinstance(through, Gap)
    capacity, floor, _ = dry(body, "H2O", setting)
    inside = let_in(
        through[0],
        partial_pressure(body.outside, "H2O", setting),
        partial_pressure(body.fill, "H2O", setting),
        setting.sample(body.head_space),
        setting.duration,
        295.15,
        capacity,
        floor,
    )
    return float(inside.let_in[0]), float(inside.pressure[0])


def test_twice_the_thickness_of_a_bag_halves_the_water_let_in(library: Library) -> None:
    thin, thick = bag(library, thickness=100, desiccant=500), bag(library, thickness=200, desiccant=500)
    assert thin[0] == pytest.approx(2 * thick[0], rel=0.02)


def test_more_desiccant_drier_bag(library: Library) -> None:
    pressures = [bag(library, desiccant=mass)[1] for mass in (0.1, 1.0, 5.0, 500.0)]
    assert np.all(np.diff(pressures) <= 0)
    assert pressures[-1] < 0.9 * pressures[0]
