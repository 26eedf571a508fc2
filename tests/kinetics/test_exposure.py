"""Curves, and a carrier as one impurity sees it."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from purity.kinetics.exposure import (
    Carrier,
    Curve,
    Exposure,
    Film,
    Skin,
    activity_at,
    at,
    ln_at,
    scale,
    select,
    split,
    width,
)

T = 1000.0


def flat(*ln: float) -> Curve:
    return Curve(np.array([T]), np.array([ln]))


def ramp() -> Curve:
    return Curve(np.array([1000.0, 1500.0, 2000.0]), np.array([[-10.0], [-6.0], [-5.0]]))


def test_curve_is_linear_in_reciprocal_temperature() -> None:
    middle = 2.0 / (1 / 1000.0 + 1 / 1500.0)
    assert ln_at(ramp(), middle)[0] == pytest.approx(-8.0, rel=1e-12)
    assert at(ramp(), 1500.0)[0] == pytest.approx(np.exp(-6.0), rel=1e-12)


def test_curve_takes_one_temperature_a_draw() -> None:
    many = ln_at(ramp(), np.array([1000.0, 1500.0, 2000.0, 1700.0]))
    alone = [ln_at(ramp(), float(one))[0] for one in (1000.0, 1500.0, 2000.0, 1700.0)]
    assert many == pytest.approx(alone, rel=1e-14)


def test_curve_continues_its_last_segment() -> None:
    slope = (-5.0 + 6.0) / (1 / 2000.0 - 1 / 1500.0)
    expected = -5.0 + slope * (1 / 2500.0 - 1 / 2000.0)
    assert ln_at(ramp(), 2500.0)[0] == pytest.approx(expected, rel=1e-12)


def test_split_of_one_atom_is_resistances_in_series() -> None:
    zinc = Carrier("Zn", np.array([0.0, 1.0]), flat(-5.0), np.array([0.2]), flat(np.log(3.0)))
    ceiling, exchange = split(zinc, np.array([[1e-6], [1e-4]]), T)
    assert ceiling[:, 0] == pytest.approx([0.0, 0.2 * np.exp(-5.0)], rel=1e-12)
    assert exchange[:, 0] == pytest.approx([0.0, 3.0 * np.exp(5.0)], rel=1e-12)


def test_split_holds_the_other_elements() -> None:
    """x_M = (K a / x_O^3)^(1/2) for M2O3."""
    wall = Carrier("M2O3", np.array([2.0, 3.0]), flat(-40.0), np.ones(1))
    x = np.array([[1e-7], [1e-5]])
    ceiling, exchange = split(wall, x, T)
    assert ceiling[0, 0] == pytest.approx((np.exp(-40.0) / 1e-15) ** 0.5, rel=1e-12)
    assert ceiling[1, 0] == pytest.approx((np.exp(-40.0) / 1e-14) ** (1 / 3), rel=1e-12)
    assert np.isinf(exchange).all()


contents = st.floats(-25.0, -5.0)


@settings(deadline=None, max_examples=200)
@given(contents, contents, st.floats(-40.0, -10.0), st.floats(-12.0, 0.0), st.sampled_from([1.0, 2.0, 3.0]))
def test_split_is_the_secant_of_the_law(
    ln_x: float, ln_o: float, ln_k: float, ln_a: float, nu: float
) -> None:
    """exchange (x* - x) is the flux of the impurity, nu g (a - a_s)."""
    unit = Carrier("MO", np.array([nu, 1.0]), flat(ln_k), np.exp([ln_a]), flat(0.5))
    x = np.exp(np.array([[ln_x], [ln_o]]))
    ceiling, exchange = split(unit, x, T)
    a_s = np.exp(nu * ln_x + ln_o - ln_k)
    flux = nu * np.exp(0.5) * (np.exp(ln_a) - a_s)
    assert exchange[0, 0] * (ceiling[0, 0] - x[0, 0]) == pytest.approx(
        flux, rel=1e-6, abs=1e-7 * (np.exp(ln_a) + a_s)
    )


def test_split_at_the_ceiling_has_the_slope_of_the_law() -> None:
    oxygen = Carrier("O2", np.array([2.0]), flat(-4.0), np.array([1e-5]), flat(0.0))
    x = np.sqrt(1e-5 * np.exp(-4.0))
    ceiling, exchange = split(oxygen, np.array([[x]]), T)
    assert ceiling[0, 0] == pytest.approx(x, rel=1e-12)
    assert exchange[0, 0] == pytest.approx(2 * 2 * x * np.exp(4.0), rel=1e-6)


def test_split_of_a_clean_gas_is_a_sink() -> None:
    hydrogen = Carrier("H2", np.array([2.0]), flat(-16.0), np.zeros(1), flat(0.0))
    ceiling, exchange = split(hydrogen, np.array([[1e-6]]), T)
    assert ceiling[0, 0] == 0.0
    assert exchange[0, 0] * 1e-6 == pytest.approx(2 * 1e-12 * np.exp(16.0), rel=1e-12)


def whole(n: int) -> Exposure:
    z = np.linspace(-1.0, 1.0, n)
    return Exposure(
        "wall",
        np.exp(z),
        Curve(np.array([T]), np.broadcast_to(z, (2, 1, n)) - 10.0),
        (
            Carrier("O2", np.array([0.0, 2.0]), Curve(np.array([T]), z[None]), np.exp(z), flat(-3.0)),
            Carrier("M", np.array([1.0, 0.0]), flat(-9.0), Curve(np.array([T]), z[None]), None, np.exp(z)),
        ),
        (Skin("MO", np.ones(2), Curve(np.array([T]), z[None])),),
        (Film("MO", np.ones(2), "parabolic", (Curve(np.array([T]), z[None]),)),),
    )


def test_some_draws_are_taken_everywhere() -> None:
    picked = select(whole(5), np.array([4, 0, 4]))
    assert width(picked) == 3
    assert picked.area == pytest.approx(np.exp([1.0, -1.0, 1.0]))
    assert picked.carriers[0].activity == pytest.approx(np.exp([1.0, -1.0, 1.0]))
    assert activity_at(picked.carriers[1], T) == pytest.approx(np.exp([1.0, -1.0, 1.0]))
    assert picked.carriers[1].inventory == pytest.approx(np.exp([1.0, -1.0, 1.0]))
    assert picked.skins[0].ln_k.ln[0] == pytest.approx([1.0, -1.0, 1.0])
    assert picked.films[0].parameters[0].ln[0] == pytest.approx([1.0, -1.0, 1.0])


def test_rates_are_scaled_by_the_limit_they_stand_for() -> None:
    before = whole(2)
    after = scale(before, np.array([0.1]), {"gas film": np.array([0.2])}, np.array([0.3]))
    assert after.exchange.ln - before.exchange.ln == pytest.approx(0.1)
    conductance = after.carriers[0].conductance
    assert conductance is not None
    assert conductance.ln[0, 0] == pytest.approx(-2.8)
    assert after.carriers[1].conductance is None
    inventory, held = after.carriers[1].inventory, before.carriers[1].inventory
    assert inventory is not None
    assert held is not None
    assert inventory / held == pytest.approx(np.exp(0.3))


def test_width_is_one_where_all_draws_are_alike() -> None:
    wall = Exposure("wall", np.ones(1), Curve(np.array([T]), np.zeros((1, 1, 1))), ())
    assert width(wall) == 1
