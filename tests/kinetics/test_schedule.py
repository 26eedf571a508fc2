"""Temperature over time."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from purity.errors import OutOfRangeError
from purity.kinetics.schedule import (
    Schedule,
    T_at,
    check,
    duration,
    first_crossing,
    fractions,
    geometric,
    hold,
    segments,
    split_at,
)

CURVE = Schedule(np.array([0.0, 600.0, 4200.0, 5400.0]), np.array([300.0, 1200.0, 1200.0, 300.0]))


def test_segments_and_duration() -> None:
    parts = segments(CURVE)
    assert [part.hold for part in parts] == [False, True, False]
    assert float(duration(CURVE)) == 5400.0
    assert T_at(CURVE, 300.0) == pytest.approx(750.0)
    assert T_at(CURVE, 1e9) == pytest.approx(300.0)


def test_a_segment_without_time_is_left_out() -> None:
    quench = Schedule(np.array([0.0, 60.0, 60.0, 120.0]), np.array([1000.0, 1000.0, 300.0, 300.0]))
    assert len(segments(quench)) == 2


@pytest.mark.parametrize(
    ("time", "T", "words"),
    [
        ([0.0], [300.0], "two points"),
        ([0.0, 10.0, 5.0], [300.0, 400.0, 500.0], "run back"),
        ([0.0, 10.0], [300.0, -5.0], "absolute zero"),
        ([0.0, np.nan], [300.0, 400.0], "not a number"),
    ],
)
def test_schedules_that_no_furnace_follows(time: list[float], T: list[float], words: str) -> None:
    with pytest.raises(OutOfRangeError, match=words):
        check(Schedule(np.array(time), np.array(T)))


def test_split_at_a_phase_change_on_the_way_up_and_down() -> None:
    cut = split_at(CURVE, [1185.0, 700.0])
    assert cut.T.tolist() == pytest.approx([300, 700, 1185, 1200, 1200, 1185, 700, 300])
    for time in np.linspace(0, 5400, 31):
        assert T_at(cut, time) == pytest.approx(float(T_at(CURVE, time)))


def test_split_where_only_some_draws_pass() -> None:
    top = np.array([900.0, 1100.0, 1300.0])
    ramp = Schedule(np.array([0.0, 100.0]), np.stack([np.full(3, 300.0), top]))
    cut = split_at(ramp, [1000.0])
    assert cut.T.shape == (3, 3)
    assert cut.T[1] == pytest.approx([900.0, 1000.0, 1000.0])
    assert cut.time[1] == pytest.approx([100.0, 87.5, 70.0])
    assert np.all(np.diff(cut.time, axis=0) >= 0)
    assert T_at(cut, np.full(3, 50.0)) == pytest.approx(T_at(ramp, np.full(3, 50.0)))


def test_split_where_draws_run_opposite_ways() -> None:
    ramp = Schedule(np.array([0.0, 100.0]), np.array([[400.0, 900.0], [900.0, 400.0]]))
    cut = split_at(ramp, [500.0, 800.0])
    assert np.all(np.diff(cut.time, axis=0) >= 0)
    assert sorted(cut.T[1:-1, 0]) == [500.0, 800.0]
    assert sorted(cut.T[1:-1, 1]) == [500.0, 800.0]


@settings(deadline=None)
@given(st.integers(1, 1500), st.floats(1e-5, 0.9))
def test_growing_steps_fill_the_segment(n: int, first: float) -> None:
    edges = geometric(n, first)
    assert len(edges) == n + 1
    assert edges[0] == 0.0
    assert edges[-1] == pytest.approx(1.0)
    assert np.all(np.diff(edges) > 0)
    if 2 <= n <= 1000 and first * n < 1.0:
        assert edges[1] == pytest.approx(first, rel=1e-6)


def test_steps_of_holds_and_ramps() -> None:
    ramp, still, _ = segments(CURVE)
    assert len(fractions(still)) == 17
    assert fractions(still)[1] == pytest.approx(0.03)
    T = 300.0 + 900.0 * fractions(ramp)
    assert len(T) == 25
    assert np.diff(np.log(T)) == pytest.approx(np.full(24, np.log(4.0) / 24))


def test_hold_of_many_draws() -> None:
    made = hold(np.array([900.0, 1000.0]), 60.0)
    assert made.T.shape == (2, 2)
    assert duration(made) == pytest.approx(60.0)
    assert segments(made)[0].hold


def test_first_crossing() -> None:
    t = np.linspace(0.0, 10.0, 25)
    c = np.stack([1 - np.exp(-t / 3), 1 - np.exp(-t / 3), 1 - np.exp(-t / 3), t * (10 - t) / 25], axis=1)
    found = first_crossing(t, c, np.array([0.5, 2.0, 0.0, 0.75]))
    assert found[0] == pytest.approx(3 * np.log(2), rel=2e-4)
    assert found[1] == np.inf
    assert found[2] == 0.0
    assert found[3] == pytest.approx(2.5, rel=1e-3)
