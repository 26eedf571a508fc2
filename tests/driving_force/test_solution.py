"""Laws of binary solutions, closed forms, and digits kept down to 1e-30 of either component."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from purity.constants import R
from purity.driving_force import solution
from purity.errors import OutOfRangeError

LAWS = settings(deadline=None, max_examples=60)
OMEGA = st.floats(-80e3, 80e3)
T = st.floats(300.0, 2500.0)
LN_SMALL = st.floats(-69.0, -0.7)
GRID = np.logspace(-30, np.log10(0.5), 60)


def pair(x: float, side: str) -> tuple[float, float]:
    """Host and impurity fractions with the small one exact."""
    return (1.0 - x, x) if side == "impurity" else (x, 1.0 - x)


def exact(x: float, side: str) -> tuple[mpmath.mpf, mpmath.mpf]:
    small = mpmath.mpf(x)
    return (1 - small, small) if side == "impurity" else (small, 1 - small)


def exact_partial(
    a: mpmath.mpf, b: mpmath.mpf, o: tuple[float, float], t: float
) -> tuple[mpmath.mpf, mpmath.mpf]:
    rt, o_a, o_b = mpmath.mpf(R) * mpmath.mpf(t), mpmath.mpf(o[0]), mpmath.mpf(o[1])
    of_a = rt * mpmath.log(a) + b**2 * (o_b + 2 * a * (o_a - o_b))
    of_b = rt * mpmath.log(b) + a**2 * (o_a + 2 * b * (o_b - o_a))
    return of_a, of_b


@pytest.mark.parametrize("side", ["impurity", "host"])
@pytest.mark.parametrize("x", [1e-30, 1e-20, 1e-9, 1e-4, 0.03, 0.3, 0.49])
@pytest.mark.parametrize("omegas", [(0.0, 0.0), (-30e3, -30e3), (20e3, 35e3)])
def test_fifty_digits_confirm_twelve(x: float, side: str, omegas: tuple[float, float]) -> None:
    model, t = solution.SubRegular(*omegas), 1234.5
    a, b = pair(x, side)
    with mpmath.workdps(50):
        exact_a, exact_b = exact(x, side)
        of_a, of_b = exact_partial(exact_a, exact_b, omegas, t)
        expected = {
            "mixing": float(exact_a * of_a + exact_b * of_b),
            "slope": float(of_b - of_a),
            "gamma": [float(mpmath.exp(v / (mpmath.mpf(R) * t))) for v in (of_a, of_b)],
        }
        # What the answer is a difference of: cancellation between these is in the physics.
        size = abs(exact_a * mpmath.log(exact_a)) + abs(exact_b * mpmath.log(exact_b))
        terms = float(size) * R * t + abs(float(exact_a * exact_b)) * max(map(abs, omegas))
        partials = float(of_a), float(of_b)
    assert float(solution.mixing(model, a, b, t)) == pytest.approx(expected["mixing"], abs=1e-12 * terms)
    assert float(solution.slope(model, a, b, t)) == pytest.approx(expected["slope"], rel=1e-12, abs=1e-9)
    activities = solution.activity(model, a, b, t)
    assert [float(v) for v in activities] == pytest.approx(expected["gamma"], rel=1e-12)
    if omegas == (0.0, 0.0):
        found = solution.partial(model, a, b, t)
        assert [float(v) for v in found] == pytest.approx(partials, rel=1e-12)


@LAWS
@given(OMEGA, OMEGA, T, LN_SMALL)
def test_partial_energies_add_up_and_the_slope_is_their_difference(
    o_a: float, o_b: float, t: float, ln: float
) -> None:
    model, x = solution.SubRegular(o_a, o_b), np.exp(ln)
    of_a, of_b = solution.partial(model, 1 - x, x, t)
    size = R * t + abs(o_a) + abs(o_b)
    assert (1 - x) * of_a + x * of_b == pytest.approx(
        float(solution.mixing(model, 1 - x, x, t)), abs=1e-11 * size
    )
    h = 1e-5 * min(x, 0.1)
    rise = solution.mixing(model, 1 - x - h, x + h, t) - solution.mixing(model, 1 - x + h, x - h, t)
    if x > 1e-3:
        assert solution.slope(model, 1 - x, x, t) == pytest.approx(rise / (2 * h), abs=1e-5 * size)
        turn = solution.slope(model, 1 - x - h, x + h, t) - solution.slope(model, 1 - x + h, x - h, t)
        curvature = solution.curvature(model, 1 - x, x, t)
        assert curvature == pytest.approx(turn / (2 * h), abs=1e-5 * size / x)


@LAWS
@given(OMEGA, OMEGA, T, LN_SMALL)
def test_a_solution_seen_from_the_other_side_is_the_same(o_a: float, o_b: float, t: float, ln: float) -> None:
    x = np.exp(ln)
    one, other = solution.SubRegular(o_a, o_b), solution.SubRegular(o_b, o_a)
    assert solution.mixing(one, 1 - x, x, t) == pytest.approx(
        float(solution.mixing(other, x, 1 - x, t)), rel=1e-13
    )
    a, b = solution.partial(one, 1 - x, x, t)
    b_seen, a_seen = solution.partial(other, x, 1 - x, t)
    assert (a, b) == pytest.approx((float(a_seen), float(b_seen)), rel=1e-12, abs=1e-9)
    assert solution.curvature(one, 1 - x, x, t) == pytest.approx(
        float(solution.curvature(other, x, 1 - x, t))
    )


@LAWS
@given(OMEGA, T)
def test_the_first_trace_is_always_downhill(omega: float, t: float) -> None:
    model = solution.regular(omega)
    slopes = solution.slope(model, 1 - GRID, GRID, t)
    deep = GRID < 1e-12
    per_decade = np.diff(slopes[deep]) / np.diff(np.log10(GRID[deep]))
    assert per_decade == pytest.approx(R * t * np.log(10), rel=1e-9)
    start = np.exp(-abs(omega) / (R * t) - 2.0)
    assert solution.slope(model, 1 - start, start, t) < 0
    assert solution.mixing(model, 1 - start, start, t) < 0


@LAWS
@given(st.floats(2.001, 60.0), T)
def test_the_regular_spinodal_is_its_closed_form(w: float, t: float) -> None:
    low, high = solution.spinodal(solution.regular(w * R * t), t)
    root = np.sqrt(1 - 2 / w)
    assert float(low) == pytest.approx((1 / w) / (1 + root), rel=1e-11)
    assert float(low + high) == pytest.approx(1.0, abs=1e-12)


@pytest.mark.parametrize("w", [-3.0, 0.0, 1.0, 1.999])
def test_below_twice_rt_a_regular_solution_mixes_in_all_proportions(w: float) -> None:
    model = solution.regular(w * R * 1000.0)
    assert np.isnan(solution.spinodal(model, 1000.0)).all()
    assert np.isnan(solution.miscibility_gap(model, 1000.0)).all()
    x = np.linspace(0.01, 0.99, 99)
    assert (solution.curvature(model, 1 - x, x, 1000.0) > 0).all()


@LAWS
@given(st.floats(2.01, 69.0), T)
def test_the_regular_gap_is_symmetric_and_solves_its_equation(w: float, t: float) -> None:
    """ln x/(1-x) = -w (1 - 2x), down to contents of 1e-30."""
    left, right = solution.miscibility_gap(solution.regular(w * R * t), t)
    assert float(left) == pytest.approx(float(right), rel=1e-10)
    with mpmath.workdps(40):
        u = mpmath.findroot(
            lambda v: v - mpmath.log(1 - mpmath.exp(v)) + w * (1 - 2 * mpmath.exp(v)), mpmath.log(float(left))
        )
    assert float(left) == pytest.approx(float(mpmath.exp(u)), rel=1e-10)


@LAWS
@given(st.floats(-2.0, 30.0), st.floats(-2.0, 30.0), T)
def test_the_common_tangent_leaves_both_potentials_equal(w_a: float, w_b: float, t: float) -> None:
    model = solution.SubRegular(w_a * R * t, w_b * R * t)
    low, high = solution.spinodal(model, t)
    left, right = solution.miscibility_gap(model, t)
    assert np.isnan(low) == np.isnan(left) == np.isnan(right)
    if np.isnan(left):
        x = np.linspace(0.002, 0.998, 499)
        assert (solution.curvature(model, 1 - x, x, t) > -1e-9 * R * t).all()
        return
    assert 0 < left < low < high
    assert right < 1 - high
    one = solution.partial(model, 1 - left, left, t)
    two = solution.partial(model, right, 1 - right, t)
    assert one == pytest.approx([float(v) for v in two], abs=1e-10 * R * t * (1 + abs(w_a) + abs(w_b)))
    # Nowhere does the curve pass below the tangent.
    x = np.linspace(0.002, 0.998, 499)
    line = (1 - x) * one[0] + x * one[1]
    assert (solution.mixing(model, 1 - x, x, t) >= line - 1e-9 * R * t).all()


def test_arrays_broadcast_over_contents_temperatures_and_draws() -> None:
    omega = np.array([10e3, 20e3, 30e3])
    t = np.array([[800.0], [1200.0]])
    x = np.full((4, 1, 1), 0.1)
    assert solution.mixing(solution.regular(omega), 1 - x, x, t).shape == (4, 2, 3)
    left, _ = solution.miscibility_gap(solution.regular(omega), t)
    assert left.shape == (2, 3)
    alone = solution.miscibility_gap(solution.regular(30e3), 800.0)[0]
    assert left[0, 2] == pytest.approx(float(alone), rel=1e-13)


@pytest.mark.parametrize("epsilon", [-8.0, 0.0, 5.0])
@pytest.mark.parametrize("x", [1e-30, 1e-6, 0.003, 0.03])
def test_a_dilute_solution_obeys_gibbs_and_duhem(epsilon: float, x: float) -> None:
    model = solution.Dilute(-4.0, epsilon)
    of_a, of_b = solution.ln_gamma(model, 1 - x, x, 1500.0)
    assert float(of_b) == pytest.approx(-4.0 + epsilon * x, rel=1e-14)
    with mpmath.workdps(50):
        host = epsilon * (mpmath.mpf(x) + mpmath.log(1 - mpmath.mpf(x)))
    assert float(of_a) == pytest.approx(float(host), rel=1e-12, abs=0.0)
    h = 1e-4 * x
    up, down = (solution.ln_gamma(model, 1 - x - s, x + s, 1500.0) for s in (h, -h))
    assert (1 - x) * (up[0] - down[0]) + x * (up[1] - down[1]) == pytest.approx(
        0.0, abs=1e-6 * abs(epsilon) * h
    )
    curvature = solution.curvature(model, 1 - x, x, 1500.0)
    assert float(curvature) == pytest.approx(R * 1500.0 * (1 / (x * (1 - x)) + epsilon / (1 - x)), rel=1e-12)
    whole = solution.excess(model, 1 - x, x, 1500.0) / (R * 1500.0)
    assert float(whole) == pytest.approx(float((1 - x) * of_a + x * of_b), rel=1e-12)


def test_interaction_coefficients_are_refused_beyond_their_range() -> None:
    with pytest.raises(OutOfRangeError, match="reaches 0\\.32"):
        solution.mixing(solution.Dilute(-4.0, -8.0), 0.96, 0.04, 1500.0)
    solution.mixing(solution.Dilute(-4.0, -8.0), 0.97, 0.03, 1500.0)
    epsilon = np.array([[1.0, -20.0], [-20.0, 3.0]])
    inf = np.array([[-3.0], [-5.0]])
    x = np.array([[0.01], [0.004]])
    found = solution.wagner(inf, epsilon, x)
    assert found[:, 0] == pytest.approx([-3.0 + 0.01 - 0.08, -5.0 - 0.2 + 0.012], rel=1e-14)
    with pytest.raises(OutOfRangeError, match="0\\.3;"):
        solution.wagner(inf, epsilon, 10 * x)
    each = np.repeat(epsilon[:, :, None], 2, axis=2)
    assert solution.wagner(inf, each, x) == pytest.approx(np.repeat(found, 2, axis=1))


@LAWS
@given(st.floats(-60, -1), st.floats(-60, -1), T)
def test_the_driving_force_changes_sign_at_the_ceiling(ln_x: float, ln_ceiling: float, t: float) -> None:
    force = solution.driving_force(ln_x, ln_ceiling, t)
    assert np.sign(force) == np.sign(ln_ceiling - ln_x)
    assert force == pytest.approx(-float(solution.driving_force(ln_ceiling, ln_x, t)))


@pytest.mark.parametrize(
    ("x0", "x"),
    [
        (1e-6, 2e-6),
        (1e-6, 1e-6 * (1 + 2.0**-30)),
        (1e-30, 1e-4),
        (3e-4, 1e-9),
        (0.0, 1e-5),
        (2e-5, 0.0),
        (1e-5, 1.04e-5),
        (1e-5, 1.06e-5),
    ],
)
@pytest.mark.parametrize("ln_ceiling", [np.log(1e-4), np.log(1e-6), -40.0])
def test_release_is_the_integral_of_the_driving_force(x0: float, x: float, ln_ceiling: float) -> None:
    with mpmath.workdps(60):

        def total(v: float) -> mpmath.mpf:
            y = mpmath.mpf(v)
            return y * (1 + mpmath.mpf(float(ln_ceiling))) - (y * mpmath.log(y) if v else 0)

        expected = float(mpmath.mpf(R) * 1400 * (total(x) - total(x0)))
    # At the ceiling itself the driving force is the difference of two equal logarithms.
    logarithm = 4e-16 * abs(ln_ceiling) * abs(x - x0) * R * 1400.0
    found = float(solution.release(x0, x, ln_ceiling, 1400.0))
    assert found == pytest.approx(expected, rel=1e-12, abs=logarithm)


def test_release_from_nothing_to_the_ceiling_is_rt_a_mole() -> None:
    """The integral of RT ln(c/x) from 0 to c is RT c."""
    assert float(solution.release(0.0, 1e-5, np.log(1e-5), 1000.0)) == pytest.approx(
        R * 1000.0 * 1e-5, rel=1e-12
    )
    assert float(solution.release(1e-5, 1e-5, np.log(1e-5), 1000.0)) == 0.0
