"""Packages: permeation, desiccant and head space against closed forms and facts of the trade."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from purity.contacts.package import let_in

R = 8.314462618
T = 295.0


def one(value: float) -> np.ndarray:
    return np.array([value])


def inside(
    conductance: float = 1e-12,
    outside: float = 1190.0,
    filled: float = 0.0,
    volume: float = 2e-3,
    time: float = 180 * 86400.0,
    capacity: float = 0.0,
    floor: float = 0.0,
):  # type: ignore[no-untyped-def]
    return let_in(
        one(conductance), one(outside), one(filled), one(volume), one(time), T, one(capacity), one(floor)
    )


def test_an_empty_package_drifts_to_the_room_by_its_own_time() -> None:
    """p = p_out (1 - exp(-t / tau)), tau = V / (R T P A / l); Fick's law across a thin wall."""
    made = inside(time=86400.0)
    tau = 2e-3 / (R * T * 1e-12)
    assert made.pressure[0] == pytest.approx(1190.0 * -np.expm1(-86400.0 / tau), rel=1e-9)
    assert made.let_in[0] == pytest.approx(made.pressure[0] * 2e-3 / (R * T), rel=1e-9)


def test_what_comes_in_is_held_by_the_gas_or_the_desiccant() -> None:
    made = inside(filled=1190.0, capacity=0.02, floor=634.0)
    moved = (made.pressure[0] - 1190.0) * 2e-3 / (R * T)
    assert made.let_in[0] == pytest.approx(moved + made.taken[0], rel=1e-9, abs=1e-15)


def test_twice_the_thickness_halves_the_water_let_in_while_the_desiccant_lasts() -> None:
    thin = inside(conductance=1e-12, capacity=10.0, floor=1.0)
    thick = inside(conductance=0.5e-12, capacity=10.0, floor=1.0)
    assert thin.let_in[0] == pytest.approx(2 * thick.let_in[0], rel=1e-9)
    assert thin.let_in[0] == pytest.approx(1e-12 * (1190.0 - 0.0) * 180 * 86400.0, rel=2e-3)


@given(
    st.floats(1e-16, 1e-8),
    st.floats(0.0, 3000.0),
    st.floats(0.0, 3000.0),
    st.floats(1e-4, 1.0),
    st.floats(0.0, 1e8),
    st.floats(0.0, 5.0),
    st.floats(0.0, 1000.0),
)
def test_pressure_stays_between_the_floor_and_the_room(
    conductance: float,
    outside: float,
    filled: float,
    volume: float,
    time: float,
    capacity: float,
    floor: float,
) -> None:
    made = inside(conductance, outside, filled, volume, time, capacity, floor)
    low = min(outside, filled, floor if capacity > 0 else filled)
    assert low - 1e-6 <= made.pressure[0] <= max(outside, filled) + 1e-6
    assert made.taken[0] <= capacity * (1 + 1e-9)


def test_the_desiccant_is_used_up_in_the_time_of_its_capacity() -> None:
    """Capacity over flow: 0.1 mol at 1e-12 x 1190 mol/s lasts 2.7 years."""
    flow = 1e-12 * 1190.0
    lasting = inside(time=0.99 * 0.1 / flow, capacity=0.1, floor=0.0)
    spent = inside(time=1.5 * 0.1 / flow, capacity=0.1, floor=0.0)
    assert lasting.pressure[0] == 0.0
    assert spent.taken[0] == pytest.approx(0.1, rel=1e-9)
    assert spent.pressure[0] > 0.0
