"""Hot zone, purging and foils: balances and order."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from purity.assess import followed, molar_masses
from purity.contacts import vessel
from purity.contacts.setting import Setting
from purity.contacts.wrap import wrapped
from purity.database import Library, load
from purity.draws import Draws
from purity.passing import make_setting
from purity.scenario import Furnace, exact
from purity.scenario_file import read_string

TEXT = """
title = "sheet"
[lot]
host = "Nb"
mass = "2 kg"
certificate = { O = 5, H = 1, N = 5, C = 3 }
limits = { O = 10, H = 2, N = 10, C = 10 }
[[step]]
name = "bake"
process = "heat"
form = { shape = "slab", thickness = "3 mm", width = "100 mm", length = "100 mm" }
support = []
temperature = "1000 degC"
duration = "60 min"
atmosphere = "argon N5.0"
flow = "2 L/min"
wrap = ["niobium foil"]
"""


@pytest.fixture(scope="module")
def library() -> Library:
    return load()


@pytest.fixture(scope="module")
def setting(library: Library) -> Setting:
    scenario = read_string(TEXT, library)
    elements = followed(scenario)
    masses = molar_masses(library, (scenario.lot.host, *elements))
    choice = scenario.steps[0].choices[0]
    return make_setting(scenario.lot, choice, elements, masses, library, Draws(1, 1, 64))[0]


def atoms_of(element: str, gas: dict[str, np.ndarray]) -> np.ndarray:
    counts = {
        "O": {"O2": 2, "H2O": 1, "CO2": 2, "CO": 1},
        "C": {"CO2": 1, "CO": 1},
        "H": {"H2O": 2, "H2": 2},
    }
    return sum(n * gas.get(g, np.zeros(1)) for g, n in counts[element].items())


GAS = {"O2": np.full(1, 3.0), "H2O": np.full(1, 5.0), "CO2": np.full(1, 1.0), "Ar": np.full(1, 1e6)}


def test_graphite_sends_on_every_atom_of_oxygen_and_hydrogen(setting: Setting) -> None:
    out, records = vessel.gettered(setting, Furnace(hot_zone="graphite"), GAS)
    assert records
    for element in ("O", "H"):
        assert atoms_of(element, out) == pytest.approx(np.broadcast_to(atoms_of(element, GAS), 64))
    # 0.7 of the molecules in the middle (table of hot zones)
    assert np.median(out["O2"]) == pytest.approx(3.0 * 0.3, rel=0.05)
    assert np.all((out["O2"] > 0) & (out["O2"] < 3.0))
    assert np.array_equal(out["Ar"], GAS["Ar"])


def test_a_metal_zone_binds_oxygen_and_lets_hydrogen_go(setting: Setting) -> None:
    out, _ = vessel.gettered(setting, Furnace(hot_zone="molybdenum"), GAS)
    assert np.all(atoms_of("O", out) < atoms_of("O", GAS))
    assert atoms_of("H", out) == pytest.approx(np.broadcast_to(atoms_of("H", GAS), 64))
    assert atoms_of("C", out) == pytest.approx(np.broadcast_to(atoms_of("C", GAS), 64))


@pytest.mark.parametrize("zone", [None, "quartz tube", "ceramic muffle"])
def test_what_is_no_getter_takes_nothing(setting: Setting, zone: str | None) -> None:
    assert vessel.gettered(setting, Furnace(hot_zone=zone), GAS) == (GAS, ())


def test_a_cold_zone_takes_nothing(setting: Setting) -> None:
    cold = tuple((t, exact("T", 900.0)) for t, _ in setting.choice.profile)
    cool = replace(setting, choice=replace(setting.choice, profile=cold))
    assert vessel.gettered(cool, Furnace(hot_zone="graphite"), GAS)[0] == GAS


def test_a_zone_that_evaporates_is_told(setting: Setting) -> None:
    assert "molybdenum oxide" in vessel.vapours(setting, Furnace(hot_zone="molybdenum"))[0]
    assert vessel.vapours(setting, Furnace(hot_zone="graphite")) == ()


def test_each_purge_leaves_less_air(setting: Setting) -> None:
    left = [np.median(vessel.air_left(setting, Furnace(purges=n))[0]) for n in (0, 1, 2, 3)]
    assert left[0] == 1.0
    assert np.all(np.diff(left) < 0)
    pumped = vessel.air_left(setting, Furnace(purges=2, pump=exact("pump", 0.1)))[0]
    assert np.median(pumped) < left[2]


def test_what_sweeping_carries_off_is_what_was_left() -> None:
    left, flow, volume = np.full(1, 0.01), np.full(1, 2e-3), np.full(1, 4.0)
    long, short = np.full(1, 1e7), np.full(1, 1.0)
    carried = vessel.swept(left, flow, volume, long) * flow * long
    assert carried == pytest.approx(left * volume)
    assert vessel.swept(left, flow, volume, short) == pytest.approx(left, rel=1e-3)


def test_a_foil_never_lets_more_through(setting: Setting) -> None:
    area = np.full(1, setting.choice.form.area if setting.choice.form else 1.0)
    free, metal = np.full((1, 1), 2.0), np.full((1, 1), 1.5)
    for supply in (None, np.full(1, 0.5), np.full(1, 1e6)):
        bare = metal if supply is None else supply * metal / (supply + metal)
        through, _ = wrapped(setting, "O2", area, supply, free, metal)
        assert np.all(through < bare)
    # niobium has a record of sticking for O2 and none for argon: a foil that takes nothing only stands in the
    # way
    taken, passed = (wrapped(setting, gas, area, None, free, metal)[0] for gas in ("O2", "Ar"))
    assert np.all(taken < passed)


@pytest.mark.parametrize(
    ("last", "told"),
    [("zinc castings", 1), ("Pb", 1), ("molybdenum", 0), ("niobium", 0), ("stainless steel", 0), (None, 0)],
)
def test_a_volatile_last_charge_is_told(setting: Setting, last: str | None, told: int) -> None:
    assert len(vessel.condensates(setting, Furnace(last_charge=last))) == told
