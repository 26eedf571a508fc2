"""Casting: stream, mould and water, what freezing does, and what no cast may do."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from purity.assess import assess, followed, initial, molar_masses
from purity.contacts.cast import freezing
from purity.database import load
from purity.draws import Draws
from purity.errors import ScenarioError
from purity.kinetics.casting import worst_position
from purity.passing import Passed, make_setting, pass_step
from purity.scenario import Scenario
from purity.scenario_file import read

LIBRARY = load()
DRAWS = Draws(seed=1, blocks=1)

FILE = """
title = "Copper cast, reduced"
[lot]
host = "Cu"
mass = "25 kg"
certificate = { Ag = 1.2, Fe = 0.3, Ni = 0.1, S = 0.8, O = 2.0, H = 0.1, C = 1.0, Y = 0.01 }
limits = { Fe = 1.0, O = 5.0, H = 0.5, S = 2.0 }
[[step]]
name = "cast"
process = "cast"
temperature = [["0 s", "1150 degC"], ["12 s", "1130 degC"]]
form = { shape = "cylinder", diameter = "150 mm", height = "159 mm" }
free_surface = "177 cm2"
pour = { time = "12 s", area = "120 cm2" }
immersed = []
atmosphere = "argon N5.0"
still = true
container = "water-cooled copper"
freezing_time = "60 s"
"""


def scenario(tmp_path: Path, *changes: tuple[str, str], more: str = "") -> Scenario:
    text = FILE
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    path = tmp_path / "lot.toml"
    path.write_text(text + more, encoding="utf-8")
    return read(path, LIBRARY)


def cast(tmp_path: Path, *changes: tuple[str, str], more: str = "") -> Passed:
    said = scenario(tmp_path, *changes, more=more)
    impurities = followed(said)
    masses = molar_masses(LIBRARY, (said.lot.host, *impurities))
    start = initial(said.lot, impurities, masses, LIBRARY, DRAWS)
    return pass_step(start, said.steps[0].choices[0], said.lot, impurities, masses, LIBRARY, DRAWS)


def gained(passed: Passed, element: str) -> np.ndarray:
    i = passed.impurities.index(element)
    before, after = passed.before, passed.after
    return np.asarray((after.x + after.suspended - before.x - before.suspended)[i])


def worst(passed: Passed, element: str) -> np.ndarray:
    return np.asarray(passed.worst[element])


AIR = ('atmosphere = "argon N5.0"', 'atmosphere = "clean-room air"')
SLOW = 'front_speed = "1 mm/h"\n'


def test_pouring_in_argon_takes_less_oxygen_than_in_air(tmp_path: Path) -> None:
    argon, air = cast(tmp_path), cast(tmp_path, AIR)
    assert np.median(gained(air, "O")) > 20.0 * np.abs(np.median(gained(argon, "O")))


def test_a_shorter_pour_takes_less_oxygen_in_air(tmp_path: Path) -> None:
    few = ('freezing_time = "60 s"', 'freezing_time = "5 s"')
    long = cast(tmp_path, AIR, few)
    short = cast(tmp_path, AIR, few, ('time = "12 s"', 'time = "3 s"'))
    assert np.median(gained(short, "O")) < np.median(gained(long, "O"))


def test_nothing_is_lost_between_the_contacts(tmp_path: Path) -> None:
    passed = cast(tmp_path, ('"water-cooled copper"', '"isostatic graphite, purified"'))
    change = passed.after.x + passed.after.suspended - passed.before.x - passed.before.suspended
    assert passed.ledger.sum(axis=0) == pytest.approx(change, rel=1e-6, abs=1e-13)


def test_a_mould_of_the_host_gives_nothing_but_its_traces_and_its_water(tmp_path: Path) -> None:
    passed = cast(
        tmp_path, ('"water-cooled copper"', "{ phases = { Cu = 1.0 } }"), more='mould_water = "0 mg/m2"'
    )
    mould = passed.contacts.index("mould")
    assert np.all(passed.ledger[mould] == 0.0)


def test_water_on_the_mould_gives_hydrogen_and_oxygen(tmp_path: Path) -> None:
    """100 mg/m2 on 0.11 m2 of 25 kg: 11 mg of water, 0.39 ppm of oxygen and 0.05 ppm of hydrogen."""
    inert = ('"water-cooled copper"', "{ phases = { Cu = 1.0 } }")
    dry = cast(tmp_path, inert, more='mould_water = "0 mg/m2"')
    wet = cast(tmp_path, inert, more='mould_water = "100 mg/m2"')
    mould = wet.contacts.index("mould")
    ppm = 1e6 * 0.0159994 / 0.063546
    brought = np.median(wet.ledger[mould][wet.impurities.index("O")]) * ppm
    assert brought == pytest.approx(0.39, rel=0.05)
    assert np.median(gained(wet, "H")) > np.median(gained(dry, "H"))


def test_cold_copper_gives_less_iron_than_bare_steel(tmp_path: Path) -> None:
    steel = cast(tmp_path, ('"water-cooled copper"', '"steel mould"'))
    assert np.median(gained(steel, "Fe")) > 1e3 * np.median(gained(cast(tmp_path), "Fe"))


def test_a_wash_keeps_the_iron_of_a_steel_mould_out(tmp_path: Path) -> None:
    wash = '{ name = "wash", phases = { C = 0.99 }, traces = { SiO2 = "1000 ppm" } }'
    coated = cast(tmp_path, ('"water-cooled copper"', wash))
    bare = cast(tmp_path, ('"water-cooled copper"', '"steel mould"'))
    assert np.median(gained(coated, "Fe")) < 1e-3 * np.median(gained(bare, "Fe"))


def test_what_parts_below_one_gathers_in_the_last_to_freeze_and_the_crop_takes_it(tmp_path: Path) -> None:
    whole = cast(tmp_path, more=SLOW)
    cropped = cast(tmp_path, more=SLOW + 'crop = "10 %"')
    for element in ("Ag", "S", "O", "H"):
        assert np.median(worst(whole, element)) > 1.5, element
        assert np.all(worst(cropped, element) <= worst(whole, element)), element
        assert np.median(worst(cropped, element)) < np.median(worst(whole, element)), element
    assert np.median(worst(whole, "Ni")) == pytest.approx(2.3, rel=0.1)


def test_a_fast_front_leaves_little_to_part(tmp_path: Path) -> None:
    fast, slow = cast(tmp_path), cast(tmp_path, more=SLOW)
    for element in ("Ag", "S"):
        assert np.median(worst(fast, element)) < 0.5 * np.median(worst(slow, element))


def test_worst_position_stands_in_the_result_and_the_mean_decides(tmp_path: Path) -> None:
    done = assess(scenario(tmp_path, more=SLOW), LIBRARY, DRAWS)
    lines = {line.impurity: line for line in done.steps[0].choices[0].lines}
    sulphur = lines["S"]
    assert sulphur.worst is not None
    assert sulphur.end is not None
    assert sulphur.worst > 2.0 > sulphur.end.high
    assert sulphur.chance_over == 0.0
    assert any(record.startswith("partition:Cu/Ag") for record in lines["Ag"].records)


def test_an_element_without_a_record_has_no_worst_position_and_is_named(tmp_path: Path) -> None:
    passed = cast(tmp_path)
    assert "C" not in passed.worst
    assert any("worst position not known" in note and "C" in note for note in passed.notes)


def test_the_course_ends_at_the_melting_point(tmp_path: Path) -> None:
    said = scenario(tmp_path)
    impurities = followed(said)
    masses = molar_masses(LIBRARY, ("Cu", *impurities))
    setting, schedule = make_setting(said.lot, said.steps[0].choices[0], impurities, masses, LIBRARY, DRAWS)
    assert np.all(schedule.T[-1] == 1357.77)
    assert np.all(schedule.time[-1] == 72.0)
    assert np.all(np.diff(schedule.T, axis=0) <= 0.0)
    assert np.median(freezing(setting).front) == pytest.approx(
        0.159 * 0.15**2 / 4 / (0.15 * (0.159 + 0.075)) / 60, rel=0.02
    )


def test_twice_the_size_in_a_cold_mould_takes_two_to_four_times_as_long(tmp_path: Path) -> None:
    """The face alone would make it two, a thick mould alone four (Flemings 1974, chapter 1)."""
    times = []
    for form in ('diameter = "150 mm", height = "159 mm"', 'diameter = "75 mm", height = "79.5 mm"'):
        change = ('diameter = "150 mm", height = "159 mm"', form)
        said = scenario(tmp_path, ('freezing_time = "60 s"\n', ""), change)
        impurities = followed(said)
        masses = molar_masses(LIBRARY, ("Cu", *impurities))
        setting, _ = make_setting(said.lot, said.steps[0].choices[0], impurities, masses, LIBRARY, DRAWS)
        times.append(np.median(freezing(setting).time))
    assert 2.0 <= times[0] / times[1] <= 4.0


def test_a_key_of_a_cast_is_refused_elsewhere(tmp_path: Path) -> None:
    with pytest.raises(ScenarioError):
        scenario(tmp_path, ('process = "cast"', 'process = "melt"'))


@given(st.floats(1e-6, 5.0), st.floats(0.0, 0.5), st.floats(0.0, 0.4))
def test_cutting_off_more_never_raises_the_worst_position(k: float, crop: float, more: float) -> None:
    assert worst_position(k, crop + more) <= worst_position(k, crop) * (1.0 + 1e-9)
    assert worst_position(k, crop) >= k * (1.0 - 1e-9)
