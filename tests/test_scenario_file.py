"""A scenario file is read whole, or every fault in it is told with its line and its cure."""

# ruff: noqa: E501  (one fault, one row)

from __future__ import annotations

import math
import os
import re
from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from purity.database import Library, load
from purity.errors import ScenarioError
from purity.quantities import frost_point_pressure
from purity.scenario import (
    Atmosphere,
    Charge,
    Choice,
    Dust,
    Flowing,
    Given,
    Material,
    Package,
    Pumped,
    Residue,
    Scenario,
    Sealed,
    Still,
    resolved,
    scenario_hash,
)
from purity.scenario_file import read, read_string
from purity.scenario_lines import line_map, parse_text

SCENARIOS = Path(__file__).resolve().parents[1] / "scenarios"

BASE = """\
title = "Trial melt"
risk = 0.05
prefer = []
exclude = ["Cu2O"]

[lot]
host = "Cu"
mass = "25 kg"
certificate = { Fe = 0.30, O = { value = 2.0, method = "inert gas fusion", detection = 0.5 }, Si = "<0.05" }
limits = { Fe = 1.0, O = 5.0, Si = 0.5, metals = 10.0, "Fe+Si" = 2.0 }

[lot.charge]
form = { shape = "slab", thickness = "25 mm", width = "100 mm", length = "200 mm" }
surface = "etched"
days_in_air = 3

[furnace]
volume = "120 L"
leak = "5e-4 mbar L/s"
pump = "150 L/s"
outgassing = "2e-3 mbar L/s x/ 3"
hot_zone = "graphite"
purges = 3
exhaust = { O2 = "3 ppm", dew_point = "-58 degC" }

[furnaces."retort"]
hot_zone = "steel retort"

[[step]]
name = "melt"
process = "melt"
temperature = [["0 min", "1095 degC"], ["20 min", "1180 degC"]]
wall_area = "1020 cm2"
free_surface = "175 cm2"
stirring = "induction"
immersed = ["fused silica sheath"]

[[step.choice]]
name = "graphite"
container = "isostatic graphite, purified"
atmosphere = "argon N5.0"
flow = "4 L/min"

[[step.choice]]
name = "own"
container = { name = "our alumina", phases = { Al2O3 = 0.997 }, traces = { SiO2 = "1000 ppm" } }
atmosphere = { Ar = "rest", O2 = "2 ppm", H2O = "5 ppm" }
sealed = "100 L"

[[step.choice]]
name = "vacuum"
container = "magnesia"
atmosphere = "vacuum"
pressure = "1e-3 mbar"

[[step]]
name = "anneal"
process = "heat"
temperature = "400 degC"
duration = "2 h 30 min"
form = { shape = "cylinder", diameter = "150 mm", height = "12 mm" }
support = ["molybdenum"]
atmosphere = "vacuum"
pressure = "1e-4 mbar"
vent = { temperature = "60 degC", gas = "argon N5.0" }

[[step]]
name = "store"
process = "store"
temperature = "22 degC"
duration = "180 d"
area = "0.54 m2"
atmosphere = "clean-room air"
dust = { rate = "5 mg/(m2 d)", contents = { Fe = 0.05, Si = 0.2 } }

[[step.choice]]
name = "shelf"

[[step.choice]]
name = "bag"
package = { barrier = "polyethylene", thickness = "100 um", area = "0.6 m2", head_space = "2 L", fill = "argon N5.0" }
"""


@pytest.fixture(scope="module")
def library() -> Library:
    return load()


@pytest.fixture(scope="module")
def scenario(library: Library) -> Scenario:
    return read_string(BASE, library)


def changed(old: str, new: str, text: str = BASE) -> str:
    assert text.count(old) >= 1, f"{old!r} is not in the text"
    return text.replace(old, new, 1)


def choices(scenario: Scenario) -> dict[str, Choice]:
    return {choice.name: choice for step in scenario.steps for choice in step.choices}


def body(choice: Choice, role: str) -> object:
    return next(contact.body for contact in choice.contacts if contact.role == role)


# --- what a sound file becomes ------------------------------------------------------------------


def test_lot(scenario: Scenario) -> None:
    lot = scenario.lot
    assert lot.mass == Given("lot/mass", "exact", 25.0, 25.0)
    oxygen = lot.certificate["O"]
    assert oxygen.given == Given("lot/certificate/O", "exact", 2e-6, 2e-6)
    assert (oxygen.method, oxygen.detection_limit) == ("inert gas fusion", pytest.approx(5e-7))
    silicon = lot.certificate["Si"]
    assert (silicon.given.law, silicon.given.low, silicon.given.high) == ("below", 0.0, pytest.approx(5e-8))
    assert silicon.detection_limit == pytest.approx(5e-8)
    assert lot.groups == {"Fe+Si": ("Fe", "Si")}
    assert lot.metals_limit == pytest.approx(1e-5)
    assert lot.limits == {
        k: pytest.approx(v * 1e-6) for k, v in {"Fe": 1, "O": 5, "Si": 0.5, "Fe+Si": 2}.items()
    }
    assert scenario.exclude == ("Cu2O",)


def test_contacts_of_a_melt(scenario: Scenario) -> None:
    graphite = choices(scenario)["graphite"]
    assert [(c.role, c.name) for c in graphite.contacts] == [
        ("wall", "wall"),
        ("wall", "fused silica sheath"),
        ("gas", "gas"),
        ("charge", "charge surface"),
    ]
    wall, sheath, gas, charge = graphite.contacts
    assert wall.area == Given("melt/wall_area", "exact", pytest.approx(0.102), pytest.approx(0.102))
    assert isinstance(wall.body, Material)
    assert wall.body.origin == "containers:isostatic graphite, purified"
    assert sheath.area.assumed
    assert sheath.area.key == "melt/immersed/fused silica sheath/area"
    assert gas.area.median == pytest.approx(0.0175)
    assert isinstance(charge.body, Charge)
    assert charge.area.median == charge.body.piece.area
    assert graphite.form is None
    assert graphite.stirring == "induction"


def test_gas_states(scenario: Scenario) -> None:
    by_name = choices(scenario)
    flowing, shut, pumped = (body(by_name[n], "gas") for n in ("graphite", "own", "vacuum"))
    assert isinstance(flowing, Atmosphere)
    assert flowing.supply == Flowing(
        Given("melt/graphite/flow", "exact", pytest.approx(4e-3 / 60), pytest.approx(4e-3 / 60))
    )
    assert flowing.pressure == Given("melt/graphite/pressure", "exact", 101325.0, 101325.0, True)
    assert isinstance(shut, Atmosphere)
    assert isinstance(shut.supply, Sealed)
    assert shut.fractions["Ar"].median == pytest.approx(1 - 7e-6, abs=1e-12)
    assert shut.origin == f"your file, line {line_of('atmosphere = { Ar', BASE)}"
    assert isinstance(pumped, Atmosphere)
    assert pumped.supply == Pumped()
    assert pumped.pressure.median == pytest.approx(0.1)
    shelf = body(by_name["shelf"], "gas")
    assert isinstance(shelf, Atmosphere)
    assert shelf.supply == Still()


def test_furnace_goes_to_every_choice_and_its_exhaust_not_to_a_pumped_one(scenario: Scenario) -> None:
    by_name = choices(scenario)
    furnace = by_name["graphite"].furnace
    assert furnace is not None
    assert furnace.exhaust is not None
    assert furnace.exhaust["H2O"].median == pytest.approx(frost_point_pressure(215.15) / 101325)
    assert furnace.leak == Given("furnace/leak", "exact", pytest.approx(5e-5), pytest.approx(5e-5))
    pumped = by_name["vacuum"].furnace
    assert pumped == replace(furnace, exhaust=None)
    assert by_name["anneal"].furnace == pumped
    assert by_name["shelf"].furnace is None


def test_inline_material(scenario: Scenario) -> None:
    own = body(choices(scenario)["own"], "wall")
    assert isinstance(own, Material)
    assert own.phases == {"Al2O3": 0.997}
    assert own.traces["SiO2"] == Given("melt/own/container/SiO2", "exact", 1e-3, 1e-3)
    assert own.leach_depth is not None
    assert own.leach_depth.assumed
    assert any("20 um" in note for note in choices(scenario)["own"].notes)


def test_solid_pieces(scenario: Scenario) -> None:
    anneal = choices(scenario)["anneal"]
    assert anneal.form is not None
    # a disc is entered through its faces
    assert (anneal.form.shape, anneal.form.half_thickness) == ("slab", pytest.approx(6e-3))
    one = math.pi / 4 * 0.15**2 * 0.012
    assert anneal.form.count == pytest.approx(anneal.form.volume / one)
    assert anneal.form.area == pytest.approx(
        anneal.form.count * (math.pi * 0.15 * 0.012 + math.pi / 2 * 0.15**2)
    )
    assert [time.median for time, _ in anneal.profile] == [0.0, 9000.0]
    assert anneal.vent["temperature"].median == pytest.approx(333.15)
    support = next(c for c in anneal.contacts if c.role == "support")
    assert support.inputs["contact_share"].assumed
    assert support.area.median == pytest.approx(0.02 * anneal.form.area)
    shelf = choices(scenario)["shelf"].form
    assert shelf is not None
    assert (shelf.shape, shelf.area) == ("area", pytest.approx(0.54))
    assert shelf.half_thickness == pytest.approx(shelf.volume / 0.54)


def test_package_and_dust(scenario: Scenario) -> None:
    bag = choices(scenario)["bag"]
    package, dust = body(bag, "package"), body(bag, "dust")
    assert isinstance(package, Package)
    assert package.fill.supply == Sealed(package.head_space)
    assert package.outside.fractions["O2"].median == pytest.approx(0.207, abs=0.005)
    assert [c.role for c in bag.contacts] == ["package", "dust"]
    assert isinstance(dust, Dust)
    assert dust.rate.median == pytest.approx(5e-6 / 86400)


def test_a_choice_wins_over_its_step(library: Library) -> None:
    text = changed(
        'immersed = ["fused silica sheath"]', 'immersed = []\natmosphere = "argon N5.0"\nflow = "4 L/min"'
    )
    text = changed(
        'atmosphere = "argon N5.0"\nflow = "4 L/min"\n\n[[step.choice]]\nname = "own"',
        '[[step.choice]]\nname = "own"',
        text,
    )
    by_name = choices(read_string(text, library))
    gas = body(by_name["graphite"], "gas")
    assert isinstance(gas, Atmosphere)
    assert isinstance(gas.supply, Flowing)
    # a flow that stands with the step is shared, and so are its draws
    assert gas.supply.flow.key == "melt/flow"
    # the choice's own way of renewing the gas replaces the step's
    for name, kind in (("own", Sealed), ("vacuum", Pumped)):
        other = body(by_name[name], "gas")
        assert isinstance(other, Atmosphere)
        assert isinstance(other.supply, kind)
    # a composition with its pressure says all of a gas: the step's flow is not for it
    text = changed(
        'container = "magnesia"\natmosphere = "vacuum"',
        'container = "magnesia"\natmosphere = { O2 = 1 }',
        text,
    )
    held = body(choices(read_string(text, library))["vacuum"], "gas")
    assert isinstance(held, Atmosphere)
    assert held.supply == Still()


def test_named_furnace(library: Library) -> None:
    text = changed('pressure = "1e-4 mbar"', 'pressure = "1e-4 mbar"\nfurnace = "retort"')
    furnace = choices(read_string(text, library))["anneal"].furnace
    assert furnace is not None
    assert (furnace.hot_zone, furnace.leak) == ("steel retort", None)


def test_pressure_rise_becomes_a_leak(library: Library) -> None:
    text = changed('leak = "5e-4 mbar L/s"', 'leak_up = "0.6 Pa/h"')
    furnace = choices(read_string(text, library))["graphite"].furnace
    assert furnace is not None
    assert furnace.leak is not None
    assert furnace.leak.median == pytest.approx(0.6 / 3600 * 0.120)
    assert furnace.leak.key == "furnace/leak"


def test_bath_from_its_form(library: Library) -> None:
    text = changed(
        'wall_area = "1020 cm2"\nfree_surface = "175 cm2"',
        'form = { shape = "cylinder", diameter = "150 mm" }',
    )
    wall, *_, gas, _ = choices(read_string(text, library))["graphite"].contacts
    section = math.pi / 4 * 0.15**2
    assert gas.area.median == pytest.approx(section)
    # 25 kg of liquid copper (about 7.9 kg/L) stand 0.18 m high in it
    assert wall.area.median == pytest.approx(math.pi * 0.15 * 0.179 + section, rel=0.01)


def test_relative_humidity_sets_the_water(library: Library) -> None:
    text = changed('area = "0.54 m2"', 'area = "0.54 m2"\nhumidity = "40 to 50 %RH"')
    room = body(choices(read_string(text, library))["shelf"], "gas")
    assert isinstance(room, Atmosphere)
    assert room.humidity is not None
    assert room.fractions["H2O"].low == pytest.approx(0.4 * frost_point_pressure(295.15) / 101325)
    assert room.fractions["H2O"].key == room.humidity.key == "store/humidity"


def test_contents_by_mole(library: Library) -> None:
    scenario = read_string(changed("Fe = 0.30,", 'Fe = "1 ppm(mol)",'), library)
    assert scenario.lot.certificate["Fe"].given.median == pytest.approx(1e-6 * 55.845 / 63.546, rel=1e-5)


def test_a_named_material_takes_its_lot_certificate(library: Library) -> None:
    new = 'container = { ref = "magnesia", traces = { CaO = "50 to 90 ppm" } }'
    magnesia = body(choices(read_string(changed('container = "magnesia"', new), library))["vacuum"], "wall")
    table = library.material("magnesia")
    assert isinstance(magnesia, Material)
    assert isinstance(table, Material)
    assert magnesia.phases == table.phases
    assert set(magnesia.traces) == {"CaO"}
    assert "changed by your file, line" in magnesia.origin


def test_every_kind_of_step(library: Library) -> None:
    more = """
[[step]]
name = "pour"
process = "cast"
temperature = [["0 s", "1180 degC"], ["5 min", "600 degC"]]
form = { shape = "cylinder", diameter = "100 mm", height = "300 mm" }
container = "isostatic graphite"
immersed = []
free_surface = "78 cm2"
atmosphere = "argon N5.0"
flow = "10 L/min"
pour = { time = "20 s", area = "200 cm2" }
freezing_time = "90 s x/ 2"
crop = "5 %"

[[step]]
name = "etch"
process = "clean"
temperature = "20 degC"
duration = "2 min"
area = "0.54 m2"
clean = { name = "nitric acid", removes = "20 um", leaves = { N = "5 ng/cm2" } }

[[step]]
name = "grip"
process = "touch"
area = "0.54 m2"
handling = [{ name = "glove", touched = "10 %", leaves = { Na = "<2 ng/cm2", Cl = "1 ng/cm2 x/ 3" } }]

[[step]]
name = "remelt"
process = "melt"
temperature = "1150 degC"
duration = "20 min"
wall_area = "1020 cm2"
free_surface = "175 cm2"
container = "yttria"
immersed = []
charge = { form = { shape = "granules", diameter = "4 mm" }, surface = "as received", days_in_air = "12 h" }
heel = { mass = "50 g", contents = { Fe = "100 ppm", Sn = "20 ppm" } }
neighbour = [{ material = "molybdenum", area = "100 cm2", temperature = "1400 degC" }]
removal = { Al2O3 = "50 %" }
atmosphere = { Ar = 0.95, H2 = 0.05 }
pressure = "0.5 bar"
"""
    scenario = read_string(BASE + more, library)
    by_name = choices(scenario)
    mould, gas = by_name["pour"].contacts
    assert mould.role == "mould"
    assert set(mould.inputs) == {"freezing_time", "crop"}
    assert gas.inputs["pour_time"].median == pytest.approx(20.0)
    clean = next(c for c in by_name["etch"].contacts if c.role == "clean")
    assert clean.inputs["removes"].median == pytest.approx(20e-6)
    assert isinstance(clean.body, Residue)
    assert clean.body.amounts["N"].median == pytest.approx(5e-8)
    touch = next(c for c in by_name["grip"].contacts if c.role == "handling")
    assert touch.area.median == pytest.approx(0.054)
    assert all(point.assumed for _, point in by_name["grip"].profile)
    heel = next(c for c in by_name["remelt"].contacts if c.role == "heel")
    assert isinstance(heel.body, Residue)
    # amounts times area are kg
    assert heel.area.median * heel.body.amounts["Fe"].median == pytest.approx(0.05 * 100e-6)
    neighbour = next(c for c in by_name["remelt"].contacts if c.role == "neighbour")
    assert neighbour.inputs["temperature"].median == pytest.approx(1673.15)
    charge = body(by_name["remelt"], "charge")
    assert isinstance(charge, Charge)
    assert charge.piece.half_thickness == pytest.approx(2e-3)
    assert charge.piece.area == pytest.approx(6 / 4e-3 * charge.piece.volume)
    # a composition with its pressure says all of a gas that is held
    held = body(by_name["remelt"], "gas")
    assert isinstance(held, Atmosphere)
    assert held.supply == Still()
    assert by_name["remelt"].removal["Al2O3"].median == pytest.approx(0.5)
    assert "assumed: quiescent melt" in by_name["remelt"].notes


def test_a_step_without_choices_is_its_own(scenario: Scenario) -> None:
    assert [choice.name for choice in scenario.steps[1].choices] == ["anneal"]


@pytest.mark.parametrize("path", sorted(SCENARIOS.glob("*.toml")), ids=lambda p: p.stem)
def test_shipped_scenarios_read(path: Path, library: Library) -> None:
    scenario = read(path, library)
    assert all(choice.contacts for step in scenario.steps for choice in step.choices)


def test_inline_and_tabulated_are_the_same(library: Library) -> None:
    table = library.material("fused silica")
    assert isinstance(table, Material)
    phases = ", ".join(f"{f} = {v!r}" for f, v in table.phases.items())
    traces = ", ".join(f'{f} = "{g.low * 1e6!r} ppm"' for f, g in table.traces.items())
    inline = f'{{ name = "{table.name}", phases = {{ {phases} }}, traces = {{ {traces} }} }}'
    made = body(choices(read_string(changed('"magnesia"', inline), library))["vacuum"], "wall")
    assert isinstance(made, Material)
    assert (made.name, made.phases, set(made.traces)) == (table.name, table.phases, set(table.traces))
    assert {f: g.low for f, g in made.traces.items()} == pytest.approx(
        {f: g.low for f, g in table.traces.items()}
    )


# --- hash ---------------------------------------------------------------------------------------


def test_hash_knows_what_is_said_not_how(library: Library, scenario: Scenario) -> None:
    told = scenario_hash(scenario)
    assert re.fullmatch(r"[0-9a-f]{32}", told)
    assert scenario_hash(read_string("# a comment\n\n" + BASE, library)) == told
    same = changed('mass = "25 kg"', 'mass = "25000 g"')
    assert scenario_hash(read_string(same, library)) == told
    for old, new in (('"25 kg"', '"25.1 kg"'), ("Fe = 0.30", "Fe = 0.31"), ('"4 L/min"', '"5 L/min"')):
        assert scenario_hash(read_string(changed(old, new), library)) != told


def test_resolved_holds_plain_values(scenario: Scenario) -> None:
    plain = resolved(scenario)
    assert plain["lot"]["host"] == "Cu"
    assert plain["steps"][0]["choices"][0]["contacts"][0]["role"] == "wall"
    with pytest.raises(TypeError, match="no part of a scenario"):
        resolved({"a": object()})


# --- faults -------------------------------------------------------------------------------------


def line_of(fragment: str, text: str) -> int:
    """Line that holds a fragment; the one before it where that begins with "above"."""
    sought = fragment.removeprefix("above ")
    line = next(n for n, line in enumerate(text.splitlines(), 1) if sought in line)
    return line - (sought != fragment)


STEP = 'stirring = "induction"'
#: old text, new text, key of the fault, what it says, and a fragment of the line it names (the new text's
#: first line if left out)
FAULTS = [
    ('title = "Trial melt"', "", "title", "missing: title", ""),
    ("risk = 0.05", "risk = 2", "risk", "exceed 1", ""),
    ("risk = 0.05", "risk = 0", "risk", "between 0 and 1", ""),
    ("risk = 0.05", "rsik = 0.05", "rsik", "unknown key; nearest: risk", ""),
    ("prefer = []", 'prefer = ["nobody1900"]', "prefer.1", "no source 'nobody1900'", ""),
    ('exclude = ["Cu2O"]', 'exclude = ["copper oxide"]', "exclude.1", "no formula", ""),
    ('exclude = ["Cu2O"]', 'exclude = "Cu2O"', "exclude", "a list is wanted", ""),
    ('host = "Cu"\n', "", "lot.host", "missing: the metal", "[lot]"),
    ('host = "Cu"', 'host = "copper"', "lot.host", "write Cu", ""),
    ('host = "Cu"', 'host = "cu"', "lot.host", "nearest: Cu", ""),
    ('host = "Cu"', 'host = "Ar"', "lot.host", "no density of Ar", ""),
    ('host = "Cu"', "host = 29", "lot.host", "text in quotes", ""),
    ('mass = "25 kg"\n', "", "lot.mass", "missing: mass", "[lot]"),
    ('mass = "25 kg"', 'mass = "25 kilo"', "lot.mass", "no unit 'kilo'", ""),
    ('mass = "25 kg"', 'mass = "2,5 kg"', "lot.mass", "decimal comma", ""),
    ('mass = "25 kg"', 'mass = "0 kg"', "lot.mass", "above zero", ""),
    ('mass = "25 kg"', 'mass = "25 kg"\nmaas = 3', "lot.maas", "nearest: mass", "maas"),
    ("Fe = 0.30,", "Fee = 0.30,", "lot.certificate.Fee", "nearest: Fe", ""),
    ("Fe = 0.30,", "Iron = 0.30,", "lot.certificate.Iron", "write Fe", ""),
    ("Fe = 0.30,", "Cu = 0.30,", "lot.certificate.Cu", "host itself", ""),
    ("Fe = 0.30,", 'Fe = "30 %",', "lot.certificate", "add up to 30 %", ""),
    ("value = 2.0, method", "valeu = 2.0, method", "lot.certificate.O.valeu", "nearest: value", ""),
    ("value = 2.0, method", "method", "lot.certificate.O", "missing: content", "certificate"),
    ("Fe = 1.0, O", 'Fe = "<1.0", O', "lot.limits.Fe", "without '<'", ""),
    ("Fe = 1.0, O", 'Fe = "1 to 2 ppm", O', "lot.limits.Fe", "without a range", ""),
    ("Fe = 1.0, O", "Fe = 0, O", "lot.limits.Fe", "above zero", ""),
    ('"Fe+Si" = 2.0', '"Fe+Sj" = 2.0', "lot.limits.Fe+Sj", "'Sj' is no symbol", ""),
    ('"Fe+Si" = 2.0', '"Fe+Fe" = 2.0', "lot.limits.Fe+Fe", "stands twice", ""),
    ('"Fe+Si" = 2.0', '"Fe+Si" = "2 ppm(mol)"', "lot.limits.Fe+Si", "is by mass", ""),
    ("metals = 10.0", 'metals = "10 ppm(mol)"', "lot.limits.metals", "is by mass", ""),
    ('shape = "slab", thickness = "25 mm"', 'shape = "slab"', "lot.charge.form.thickness", "missing: thickness", "form ="),
    ('shape = "slab"', 'shape = "brick"', "lot.charge.form.shape", "'brick' is not known", ""),
    ('length = "200 mm" }', 'length = "200 mm", count = 6 }', "lot.charge.form.count", "6 pieces of 500 cm3 weigh 26.89 kg, the lot 25 kg", ""),
    ('length = "200 mm" }', 'height = "200 mm" }', "lot.charge.form.height", "a slab has thickness, width, length, no height", ""),
    (', length = "200 mm" }', " }", "lot.charge.form.length", "go together", "form ="),
    ('thickness = "25 mm"', 'thickness = "20 to 25 mm"', "lot.charge.form.thickness", "without a range", ""),
    ('surface = "etched"', 'surface = "polished"', "lot.charge.surface", "as received", ""),
    ("days_in_air = 3\n", "", "lot.charge.days_in_air", "missing: days", "[lot.charge]"),
    ('hot_zone = "graphite"', 'hot_zone = "wood"', "furnace.hot_zone", "'wood' is not known", ""),
    ("purges = 3", "purges = 2.5", "furnace.purges", "whole number", ""),
    ('leak = "5e-4 mbar L/s"', 'leak = "5e-4 mbar"', "furnace.leak", "'mbar' measures a pressure", ""),
    ('leak = "5e-4', 'leak_up = "0.6 Pa/h"\nleak = "5e-4', "furnace.leak_up", "not both", ""),
    ('volume = "120 L"\nleak = "5e-4 mbar L/s"', 'leak_up = "0.6 Pa/h"', "furnace.volume", "gives no leak", "[furnace]"),
    ('O2 = "3 ppm", dew_point', 'O2 = "3 ppm", H2O = "9 ppm", dew_point', "furnace.exhaust.dew_point", "not both", ""),
    ('dew_point = "-58 degC"', 'dew_point = "-58 C"', "furnace.exhaust.dew_point", "write degC", ""),
    ('name = "melt"\n', "", "step.1.name", "missing: name of the step", "[[step]]"),
    ('name = "melt"', 'name = "a/b"', "step.a/b.name", "may not hold '/'", ""),
    ('name = "anneal"', 'name = "melt"', "step.melt.name", "another step", ""),
    ('name = "own"', 'name = "graphite"', "step.melt.graphite.name", "another choice", ""),
    ('process = "melt"\n', "", "step.melt.process", "missing: process", "[[step]]"),
    ('process = "melt"', 'process = "smelt"', "step.melt.process", "'smelt' is not known", ""),
    ('[["0 min", "1095 degC"], ["20 min", "1180 degC"]]', '[["0 min", "900 degC"], ["20 min", "950 degC"]]', "step.melt.temperature", "a melt must be liquid", ""),
    ('"1095 degC"]', '"1095 C"]', "step.melt.temperature", "write degC", ""),
    ('[["0 min",', '[["5 min",', "step.melt.temperature", "must be 0 min", ""),
    ('["20 min", "1180 degC"]]', '["0 min", "1180 degC"]]', "step.melt.temperature", "must rise", ""),
    ('[["0 min", "1095 degC"], ["20 min", "1180 degC"]]', '[["0 min"]]', "step.melt.temperature", "pairs of time", ""),
    ('temperature = "400 degC"', 'temperature = "1200 degC"', "step.anneal.temperature", "is liquid at 1200 degC", ""),
    ('temperature = "400 degC"\n', "", "step.anneal.temperature", "missing: temperature", 'above name = "anneal"'),
    ('duration = "2 h 30 min"\n', "", "step.anneal.duration", "missing: duration", 'above name = "anneal"'),
    ('duration = "2 h 30 min"', 'duration = "2 h 70 min"', "step.anneal.duration", "one unit only", ""),
    (STEP, 'stirring = "strong"', "step.melt.stirring", "'strong' is not known", ""),
    (STEP, STEP + '\nduration = "1 h"', "step.melt.duration", "already ends the step", "duration = \"1 h\""),
    (STEP, STEP + '\npackage = { barrier = "paper" }', "step.melt.package", "not used by process 'melt'", "package = { barrier = \"paper\" }"),
    (STEP, STEP + "\nstiring = 3", "step.melt.stiring", "nearest: stirring", "stiring"),
    ('wall_area = "1020 cm2"\n', "", "step.melt.wall_area", "missing: wetted wall area", 'above name = "melt"'),
    ('wall_area = "1020 cm2"', 'wall_area = "1020 cm2"\nform = { shape = "cylinder", diameter = "150 mm" }', "step.melt.wall_area", "not both", "wall_area"),
    ('wall_area = "1020 cm2"', 'form = { shape = "cylinder", diameter = "150 mm", height = "300 mm" }', "step.melt.form.height", "the lot weighs 25 kg", ""),
    ('wall_area = "1020 cm2"', 'form = { shape = "sphere", diameter = "150 mm" }', "step.melt.form.shape", "give wall_area and free_surface", ""),
    ('wall_area = "1020 cm2"', 'form = { shape = "cylinder", height = "150 mm" }', "step.melt.form.diameter", "missing: inner diameter", ""),
    ('free_surface = "175 cm2"\n', "", "step.melt.free_surface", "missing: free surface", 'above name = "melt"'),
    ('immersed = ["fused silica sheath"]\n', "", "step.melt.immersed", "[] says none", 'above name = "melt"'),
    ('["fused silica sheath"]', '["fused slica sheath"]', "step.melt.immersed.1", "nearest: fused silica", ""),
    ('container = "isostatic graphite, purified"\n', "", "step.melt.graphite.container", "missing: container", 'above name = "graphite"'),
    ('container = "magnesia"', 'container = "magnesja"', "step.melt.vacuum.container", "nearest: magnesia", ""),
    ('container = "magnesia"', "container = 5", "step.melt.vacuum.container", "a name in quotes or a table", ""),
    ("phases = { Al2O3 = 0.997 }", "phases = { Al2O3 = 0.5 }", "step.melt.own.container.phases", "must make 1", ""),
    ("phases = { Al2O3 = 0.997 }", "phases = { Al2O4 = 0.997 }", "step.melt.own.container.phases.Al2O4", "; Al2O3", ""),
    ("phases = { Al2O3 = 0.997 }", "phases = { alumina = 0.997 }", "step.melt.own.container.phases.alumina", "no formula", ""),
    ("phases = { Al2O3 = 0.997 }, ", "", "step.melt.own.container.phases", "missing: phases", "our alumina"),
    ('SiO2 = "1000 ppm"', 'SiO2 = "1000 ppm(mol)"', "step.melt.own.container.traces.SiO2", "by mass", ""),
    ('SiO2 = "1000 ppm" }', 'SiO2 = "1000 ppm" }, service = { wet = "900 degC" }', "step.melt.own.container.service.wet", "oxidising", ""),
    ('atmosphere = "argon N5.0"\nflow', 'atmosphere = "argon N5"\nflow', "step.melt.graphite.atmosphere", "no gas 'argon N5'; nearest: argon n5.0", ""),
    ('atmosphere = "argon N5.0"\nflow', "flow", "step.melt.graphite.atmosphere", "missing: the gas", 'above name = "graphite"'),
    ('flow = "4 L/min"\n', "", "step.melt.graphite.flow", "how the gas is renewed", 'above name = "graphite"'),
    ('flow = "4 L/min"', 'flow = "4 L/min"\nsealed = "3 L"', "step.melt.graphite.sealed", "not both", "sealed = \"3 L\""),
    ('flow = "4 L/min"', 'flow = "4 kg/min"', "step.melt.graphite.flow", "no unit 'kg/min'", ""),
    ('Ar = "rest", O2 = "2 ppm"', 'Ar = 0.5, O2 = "2 ppm"', "step.melt.own.atmosphere", 'make one species "rest"', ""),
    ('Ar = "rest", O2 = "2 ppm"', 'Ar = "rest", N2 = "rest"', "step.melt.own.atmosphere", "only one species", ""),
    ('Ar = "rest", O2 = "2 ppm"', 'Ar = "rest", O2 = 0.7, N2 = 0.8', "step.melt.own.atmosphere", "cannot exceed 1", ""),
    ('Ar = "rest", O2', 'argon = "rest", O2', "step.melt.own.atmosphere.argon", "no formula", ""),
    ('pressure = "1e-3 mbar"\n', "", "step.melt.vacuum.pressure", "missing: pressure under the pump", 'above name = "vacuum"'),
    ('pressure = "1e-3 mbar"', 'pressure = "1 bar"', "step.melt.vacuum.pressure", "no vacuum", ""),
    ('pressure = "1e-3 mbar"', 'pressure = "1e-3 mbar"\nflow = "1 L/min"', "step.melt.vacuum.flow", "a vacuum has no flow", "flow = \"1 L/min\""),
    ('pressure = "1e-4 mbar"', 'pressure = "1e-4 mbar"\nfurnace = "retrt"', "step.anneal.furnace", "nearest: retort", "furnace = \"retrt\""),
    ('support = ["molybdenum"]\n', "", "step.anneal.support", "says that nothing touches", 'above name = "anneal"'),
    ('form = { shape = "cylinder", diameter = "150 mm", height = "12 mm" }\n', "", "step.anneal.form", "missing: size of the pieces", 'above name = "anneal"'),
    ('form = { shape = "cylinder", diameter = "150 mm", height = "12 mm" }', 'form = { shape = "area" }', "step.anneal.form.shape", 'area = "1.2 m2"', ""),
    ('temperature = "60 degC", gas', "gas", "step.anneal.vent.temperature", "missing: temperature at which", "vent"),
    ('area = "0.54 m2"', 'area = "0.54 m"', "step.store.area", "'m' measures a length", ""),
    ('rate = "5 mg/(m2 d)", ', "", "step.store.dust.rate", "missing: settling rate", "dust"),
    ("contents = { Fe = 0.05, Si = 0.2 }", "contents = { Fe = 0.9, Si = 0.2 }", "step.store.dust.contents", "more than 1", ""),
    ('barrier = "polyethylene", ', "", "step.store.bag.package.barrier", "missing: barrier", "package"),
    ('barrier = "polyethylene"', 'barrier = "polyethilene"', "step.store.bag.package.barrier", "nearest: polyethylene", ""),
    ('thickness = "100 um", ', "", "step.store.bag.package.thickness", "missing: thickness of the polyethylene", "package"),
    ('fill = "argon N5.0" }', 'fill = "argon N5.0", desiccant = "50 g" }', "step.store.bag.package.desiccant_kind", "missing: kind", ""),
    ('fill = "argon N5.0" }', 'fill = "argon N5.0", desiccant = "50 g", desiccant_kind = "rice" }', "step.store.bag.package.desiccant_kind", "no desiccant 'rice'", ""),
]  # fmt: skip


@pytest.mark.parametrize("old, new, key, says, at", FAULTS, ids=[f"{f[2]}: {f[3]}" for f in FAULTS])
def test_fault(old: str, new: str, key: str, says: str, at: str, library: Library) -> None:
    text = changed(old, new)
    with pytest.raises(ScenarioError) as error:
        read_string(text, library, "trial.toml")
    found = [fault for fault in error.value.faults if fault.key == key and says in fault.text]
    assert found, f"not told: {error.value}"
    line = line_of(at, text) if at else BASE[: BASE.index(old)].count("\n") + 1
    assert [fault.line for fault in found] == [line]
    assert f"trial.toml:{line}: {key}: " in str(error.value)


def test_one_mistake_gives_one_fault(library: Library) -> None:
    """A value that is wrong is not told a second time as missing, nor once for every choice."""
    single = [f for f in FAULTS if f[0].startswith(("mass", 'wall_area = "1020 cm2"\n', "temperature"))]
    for old, new, *_ in [*single, ('wall_area = "1020 cm2"', 'wall_area = "1020 cm"', "", "", "")]:
        with pytest.raises(ScenarioError) as error:
            read_string(changed(old, new), library)
        assert len(error.value.faults) == 1, error.value


def test_all_faults_of_a_file_come_at_once_in_order(library: Library) -> None:
    text = BASE
    edits = [
        f for f in FAULTS if f[3] in ("no unit 'kilo'", "nearest: Fe", "'wood' is not known", "must rise")
    ]
    edits += [f for f in FAULTS if f[3] in ("nearest: magnesia", "one unit only", "no unit 'kg/min'")]
    for old, new, *_ in edits:
        text = changed(old, new, text)
    with pytest.raises(ScenarioError) as error:
        read_string(text, library)
    faults = error.value.faults
    assert {(f[2]) for f in edits} <= {fault.key for fault in faults}
    assert list(faults) == sorted(faults)


def test_there_are_forty_different_faults() -> None:
    assert len({says for _, _, _, says, _ in FAULTS}) >= 80


def test_empty_file_asks_for_everything(library: Library) -> None:
    with pytest.raises(ScenarioError) as error:
        read_string("", library)
    assert [fault.key for fault in error.value.faults] == ["lot", "step", "title"]


@pytest.mark.parametrize(
    "text, says",
    [
        ("lot = 5", "a table is wanted"),
        ("step = 5", "tables are wanted"),
        ("[step]\nname = 'x'", "tables are wanted"),
        ("furnace = 'big'", "a table is wanted"),
        ("[[step]]\nname = 'x'\nchoice = 3", "tables are wanted"),
        ("[lot]\ncertificate = 5", "a table is wanted"),
        ("[lot]\ncertificate = { Fe = 2024-01-01 }", "is wanted"),
        ("title = 5", "text in quotes"),
    ],
)
def test_wrong_kinds(text: str, says: str, library: Library) -> None:
    with pytest.raises(ScenarioError, match=says):
        read_string(text, library)


# --- warnings -----------------------------------------------------------------------------------


def test_an_allowance_that_is_spent_is_a_warning(library: Library) -> None:
    scenario = read_string(changed("O = 5.0", "O = 1.5"), library)
    assert any(
        warning.startswith("O is closed: certified 2.0 ppm, limit 1.5 ppm") for warning in scenario.warnings
    )


def test_other_warnings(library: Library, scenario: Scenario) -> None:
    assert scenario.warnings == ()
    text = changed(
        'Si = 0.5, metals = 10.0, "Fe+Si" = 2.0', 'Si = 0.02, Y = 0.2, metals = 0.2, "Fe+Co" = 2.0'
    )
    told = " | ".join(read_string(text, library).warnings)
    assert "Y not certified" in told
    assert "Co not certified: pickup is given for Fe+Co" in told
    assert "metals is closed" in told
    assert "Si: the detection limit 50 ppb lies above the limit 20 ppb" in told


# --- text ---------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "raw, line, says",
    [
        (b'title = "caf\xe9"\n', 1, "byte 0xe9 is not UTF-8"),
        (b"title = 'x'\n# \xff\n", 2, "byte 0xff is not UTF-8"),
        (b"a = " + b"[" * 5000 + b"]" * 5000, 1, "nested too deeply"),
        (b"a = " + b"{a=" * 5000, 1, "nested too deeply"),
        (b"a = 1\nb = c\n", 2, "Invalid value; text must stand in quotes"),
        (b"a = 1\na = 2\n", 2, "Cannot overwrite"),
        (b"a = " + b"9" * 5000, 1, "too many digits"),
        (b"a = 'x", 1, "not valid TOML"),
        (b"\x00", 1, "not valid TOML"),
    ],
)
def test_text_that_is_no_toml(raw: bytes, line: int, says: str, tmp_path: Path, library: Library) -> None:
    path = tmp_path / "bad.toml"
    path.write_bytes(raw)
    with pytest.raises(ScenarioError, match=re.escape(says)) as error:
        read(path, library)
    assert [fault.line for fault in error.value.faults] == [line]


def test_a_byte_order_mark_and_windows_lines_are_read(tmp_path: Path, library: Library) -> None:
    path = tmp_path / "windows.toml"
    path.write_bytes(b"\xef\xbb\xbf" + BASE.replace("\n", "\r\n").encode())
    assert read(path, library).title == "Trial melt"


def test_a_missing_file_or_a_folder_is_told(tmp_path: Path, library: Library) -> None:
    for path in (tmp_path / "none.toml", tmp_path):
        with pytest.raises(ScenarioError, match="cannot be read"):
            read(path, library)


def test_nothing_is_written(tmp_path: Path, library: Library) -> None:
    path = tmp_path / "one.toml"
    path.write_text(BASE + "nonsense = 1\n", encoding="utf-8")
    before = path.stat().st_mtime_ns
    with pytest.raises(ScenarioError):
        read(path, library)
    assert os.listdir(tmp_path) == ["one.toml"]
    assert path.stat().st_mtime_ns == before


def test_lines_of_keys() -> None:
    text = '''\
title = "a [x] # no"   # yes
note = """
[no]
k = 1
"""
[lot]
certificate = { Ag = 1.2, O = { value = 2.0 }, "Fe+Ni" = 3 }
a.b = 3
[[step]]
temperature = [
  ["0 min", "1"],  # c
  ["1", "2"],
]
[[step.choice]]
name = 'x'
when = 1979-05-27 07:32:00
[[step.choice]]
atmosphere = { Ar = "rest" }
[step.form]
[[step]]
name = "z"
'''
    at = line_map(text).at
    assert at["lot", "certificate", "O", "value"] == at["lot", "certificate", "Fe+Ni"] == 7
    assert at["lot", "a", "b"] == 8
    assert (at["step", 0], at["step", 1], at["step", 1, "name"]) == (9, 20, 21)
    assert at["step", 0, "temperature", 1, 0] == 12
    assert at["step", 0, "choice", 0, "when"] == 16
    assert at["step", 0, "choice", 1, "atmosphere", "Ar"] == 18
    assert at["step", 0, "form"] == 19
    assert ("no",) not in at
    assert line_map(text).line(("step", 0, "choice", 1, "flow")) == 17


keys = st.text("abcXYZ09_-", min_size=1, max_size=5)
scalars = st.one_of(st.integers(-9, 9), st.booleans(), st.text("abc[]{}=#,.\"' \n", max_size=8))
values = st.recursive(
    scalars,
    lambda inner: st.one_of(st.lists(inner, max_size=3), st.dictionaries(keys, inner, max_size=3)),
    max_leaves=8,
)


def toml(value: object) -> str:
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, str):
        escaped = value.replace("\\", "\\\\").replace('"', '\\"').replace("\n", "\\n")
        return f'"{escaped}"'
    if isinstance(value, list):
        return "[" + ",\n".join(map(toml, value)) + "]"
    if isinstance(value, dict):
        return "{" + ", ".join(f"{k} = {toml(v)}" for k, v in value.items()) + "}"
    return str(value)


def places(value: object, at: tuple[str | int, ...] = ()) -> set[tuple[str | int, ...]]:
    inner = value.items() if isinstance(value, dict) else enumerate(value) if isinstance(value, list) else ()
    return {at} | {place for key, item in inner for place in places(item, (*at, key))}


@settings(max_examples=200)
@given(st.dictionaries(keys, values, max_size=5))
def test_every_key_has_a_line(data: dict[str, object]) -> None:
    text = "".join(f"{key} = {toml(value)}\n" for key, value in data.items())
    read_back, lines = parse_text("x", text.encode())
    assert read_back == data
    assert set(lines.at) == places(data) - {()}
    numbers = [lines.at[key,] for key in data]
    assert numbers == sorted(numbers)


@settings(max_examples=150)
@given(st.sampled_from(sorted(set(re.findall(r'"[^"\n]*"|\d[\d.]*|\w+', BASE)))), st.text(max_size=6))
def test_any_edit_reads_or_tells(library: Library, old: str, new: str) -> None:
    try:
        told = scenario_hash(read_string(BASE.replace(old, new, 1), library))
    except ScenarioError as error:
        told = " ".join(fault.text for fault in error.faults if fault.line >= 1)
    assert told
