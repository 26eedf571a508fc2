"""Rates over temperature."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from purity.kinetics.arrhenius import (
    curve_integral,
    hart,
    ln_rate,
    ln_rate_spread,
    ramp_integral,
    rate,
    reference_temperature,
)
from purity.kinetics.exposure import Curve

R = 8.314462618


def arrhenius_curve(D0: float, Q: float) -> Curve:
    T = np.array([300.0, 2000.0])
    return Curve(T, (np.log(D0) - Q / (R * T))[:, None])


def test_ramp_integral_of_a_rate() -> None:
    """Computed with 40 digits: integral of exp(-Q/RT) dt, 150 kJ/mol, 300 to 1200 K in 3600 s."""
    assert ramp_integral(1.0, 150e3, 300.0, 1200.0, 3600.0) == pytest.approx(8.38398152e-5, rel=1e-8)


def test_ramp_down_equals_ramp_up() -> None:
    up, down = ramp_integral(2e-7, 90e3, 400.0, 1300.0, 60.0), ramp_integral(2e-7, 90e3, 1300.0, 400.0, 60.0)
    assert up == pytest.approx(float(down), rel=1e-14)


@pytest.mark.parametrize("step", [0.0, 1e-6, 0.9e-3, 1.1e-3, 1e-2, 1.0])
def test_short_ramps_lose_no_digits(step: float) -> None:
    exact = rate(1.0, 300e3, 1000.0 + step / 2)
    assert ramp_integral(1.0, 300e3, 1000.0, 1000.0 + step, 10.0) == pytest.approx(
        10 * float(exact), rel=1e-5
    )


@settings(deadline=None)
@given(st.floats(0.0, 4e5), st.floats(250.0, 2500.0), st.floats(250.0, 2500.0), st.floats(0.05, 0.95))
def test_ramp_integral_adds_up_and_is_bounded(Q: float, T1: float, T2: float, cut: float) -> None:
    middle = T1 + cut * (T2 - T1)
    whole = float(ramp_integral(1.0, Q, T1, T2, 100.0))
    parts = float(ramp_integral(1.0, Q, T1, middle, 100 * cut)) + float(
        ramp_integral(1.0, Q, middle, T2, 100 * (1 - cut))
    )
    assert parts == pytest.approx(whole, rel=1e-5)
    low, high = sorted((float(rate(1.0, Q, T1)), float(rate(1.0, Q, T2))))
    assert 100 * low * (1 - 1e-6) <= whole <= 100 * high * (1 + 1e-6)


@pytest.mark.parametrize(("Q", "error"), [(150e3, 3e-10), (300e3, 6e-7)])
def test_four_gauss_points_on_an_eighth_of_a_ramp(Q: float, error: float) -> None:
    edges = np.linspace(300.0, 1200.0, 9)
    curve = arrhenius_curve(1.0, Q)
    total = sum(float(curve_integral(curve, a, b, 450.0)[0]) for a, b in pairwise(edges))
    assert total == pytest.approx(float(ramp_integral(1.0, Q, 300.0, 1200.0, 3600.0)), rel=error)


def test_curve_integral_keeps_leading_axes_and_draws() -> None:
    T = np.array([300.0, 2000.0])
    ln = -np.array([50e3, 90e3])[:, None, None] / (R * T[:, None]) * np.ones(3)
    out = curve_integral(Curve(T, ln), np.array([400.0, 500.0, 600.0]), 800.0, 60.0)
    assert out.shape == (2, 3)
    assert np.all(np.diff(out, axis=1) > 0)


def test_reference_temperature_is_the_harmonic_middle() -> None:
    """Measured from 900 to 1500 K: 1125 K."""
    assert reference_temperature(900.0, 1500.0) == pytest.approx(1125.0)


def test_spread_of_a_rate_follows_the_activation_energy() -> None:
    """Factor two at the 90 % points at 1200 K and 12 kJ/mol on Q: the hypot of both, in ln D."""
    s_ref, s_Q = np.log(2) / 1.645, 12e3
    expected = np.array([0.5816, 0.4214, 0.4852])
    T = np.array([900.0, 1200.0, 1500.0])
    assert ln_rate_spread(T, T_ref=1200.0, spread=s_ref, spread_Q=s_Q) == pytest.approx(expected, rel=1e-3)
    z = np.random.default_rng(7).standard_normal((2, 200_000))
    sampled = [
        ln_rate(-20.0, 150e3, t, T_ref=1200.0, spread=s_ref, spread_Q=s_Q, z=z).std()
        for t in (900.0, 1200.0, 1500.0)
    ]
    assert sampled == pytest.approx(expected, rel=1e-2)


def test_rate_at_the_reference_does_not_feel_the_activation_energy() -> None:
    z = np.stack([np.zeros(3), np.array([-2.0, 0.0, 2.0])])
    drawn = ln_rate(-20.0, 150e3, 1125.0, T_ref=1125.0, spread=0.3, spread_Q=2e4, z=z)
    assert drawn == pytest.approx(np.full(3, -20.0))
    assert ln_rate(-20.0, 150e3, 1125.0, T_ref=1125.0) == pytest.approx(-20.0)


def test_hart_without_boundaries_is_the_lattice() -> None:
    assert hart(1e-14, 0.0, 5e-10, 1e-5) == pytest.approx(1e-14)
    assert hart(1e-14, 1e-9, 5e-10, 1e-5) > hart(1e-14, 1e-9, 5e-10, 1e-4)
