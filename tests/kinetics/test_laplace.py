"""Exact holds: against values of 40 digits, series with roots, and the laws of uptake."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import brentq

from purity.kinetics.laplace import (
    elasticities,
    flux,
    half_space,
    half_space_content,
    half_space_surface,
    impedance,
    invert,
    surface_content,
    surface_integral,
    time_to,
    uptake,
)

# Inverted with 40 digits of precision from the transform of the module.
UPTAKE = [
    ("slab", 1.0, 0.3, 0.2098966009828),
    ("slab", 10.0, 0.1, 0.273882278841),
    ("slab", 0.01, 5.0, 0.04861455023289),
    ("cylinder", 1.0, 0.2, 0.2814837413296),
    ("cylinder", 5.0, 0.1, 0.4026029898377),
    ("sphere", 2.0, 0.1, 0.3648392509888),
    ("sphere", 20.0, 0.05, 0.5285038028265),
]


@pytest.mark.parametrize(("shape", "Bi", "Fo", "expected"), UPTAKE)
def test_uptake(shape: str, Bi: float, Fo: float, expected: float) -> None:
    assert uptake(shape, Fo, Bi, nodes=20)[0] == pytest.approx(expected, rel=1e-9)
    assert uptake(shape, Fo, Bi)[0] == pytest.approx(expected, rel=1e-7)


@pytest.mark.parametrize(
    ("shape", "Bi", "roots"),
    [
        ("slab", 1.0, [0.86033359, 3.42561846, 6.43729818]),
        ("cylinder", 1.0, [1.25578371, 4.07947771]),
        ("sphere", 2.0, [2.02875784, 4.91318044]),
    ],
)
def test_poles_are_the_roots_of_the_series(shape: str, Bi: float, roots: list[float]) -> None:
    """Crank 1975, tables 4.1, 5.2, 6.2 give four digits of these."""

    def pole(beta: float) -> float:
        return float(1.0 / Bi + impedance(shape, np.array([-(beta**2) + 0j]))[0].real)

    for root in roots:
        assert brentq(pole, root - 1e-3, root + 1e-3) == pytest.approx(root, abs=1e-7)


@pytest.mark.parametrize(
    ("shape", "Fo", "expected"), [("slab", 0.1, 0.3568234004525), ("sphere", 0.05, 0.6069397566788)]
)
def test_uptake_with_the_surface_at_its_ceiling(shape: str, Fo: float, expected: float) -> None:
    assert uptake(shape, Fo, np.inf, nodes=20)[0] == pytest.approx(expected, rel=1e-7)


@pytest.mark.parametrize(
    ("z", "expected"),
    [(1e-6, 9.999992477477e-13), (0.1, 0.009294896678678), (1.0, 0.5559627432513), (10.0, 10.3399326637)],
)
def test_half_space(z: float, expected: float) -> None:
    assert half_space(z)[0] == pytest.approx(expected, rel=1e-11)
    Fo, Bi = 1.0, z
    assert uptake("half-space", Fo, Bi, nodes=20)[0] == pytest.approx(expected / Bi, rel=1e-8)


def test_half_space_series_meets_the_closed_form() -> None:
    z = np.array([0.5 - 1e-12, 0.5 + 1e-12])
    assert np.diff(half_space(z))[0] == pytest.approx(0.0, abs=1e-11)
    for value in (1e-9, 1e-3, 0.49, 3.0):
        with mpmath.workdps(40):
            v = mpmath.mpf(value)
            exact = mpmath.exp(v**2) * mpmath.erfc(v) - 1 + 2 * v / mpmath.sqrt(mpmath.pi)
        assert half_space(value)[0] == pytest.approx(float(exact), rel=1e-12)


@pytest.mark.parametrize(
    ("z", "expected"), [(0.1, 0.1035430200309), (1.0, 0.5724164238442), (10.0, 0.9438590072562)]
)
def test_half_space_surface(z: float, expected: float) -> None:
    assert half_space_surface(z) == pytest.approx(expected, rel=1e-12)
    assert surface_content("half-space", 1.0, z, nodes=20)[0] == pytest.approx(expected, rel=1e-8)


@pytest.mark.parametrize(
    ("alpha", "expected"), [(0.2, 0.8294436672), (1.0, 0.5528407234), (5.0, 0.4052837439)]
)
def test_closed_reservoir(alpha: float, expected: float) -> None:
    """Fraction of the final uptake, Fo 0.1, surface at the ceiling (roots of tan q = -alpha q)."""
    final = alpha / (1.0 + alpha)
    assert uptake("slab", 0.1, np.inf, alpha=alpha, nodes=20)[0] / final == pytest.approx(expected, rel=1e-7)


def test_closed_reservoir_behind_a_resistance() -> None:
    assert uptake("slab", 0.2, 2.0, alpha=0.5, nodes=20)[0] == pytest.approx(0.1796694069, rel=1e-8)


@pytest.mark.parametrize("shape", ["slab", "cylinder", "sphere", "half-space"])
def test_extremes_stay_right(shape: str) -> None:
    """A surface-limited piece takes up g Bi Fo; at any time no number is lost."""
    g = {"slab": 1, "half-space": 1, "cylinder": 2, "sphere": 3}[shape]
    tiny = uptake(shape, np.array([0.0, 1e-90, 1e-30, 1e-12]), 1e-6)
    assert tiny == pytest.approx(g * 1e-6 * np.array([0.0, 1e-90, 1e-30, 1e-12]), rel=1e-5, abs=0)
    assert uptake(shape, 1e-12, 1e-30)[0] == pytest.approx(g * 1e-42, rel=1e-6, abs=0)
    assert np.isfinite(uptake(shape, np.array([1e3, 1e9, 1e15, np.inf]), 1e8)).all()
    if shape != "half-space":
        assert uptake(shape, np.array([1e3, 1e9, 1e15]), 1.0) == pytest.approx(np.ones(3), rel=1e-6)
        lumped = uptake(shape, 1e10, np.array([1e-12, 1e-11, 1e-10, 1e-9]))
        assert flux(shape, 1e10, 1e-12)[0] == pytest.approx(g * 1e-12 * np.exp(-g * 1e-2), rel=1e-5, abs=0)
        assert lumped == pytest.approx(-np.expm1(-g * 1e10 * np.array([1e-12, 1e-11, 1e-10, 1e-9])), rel=1e-5)


bi = st.floats(-5.0, 7.0).map(lambda v: 10.0**v)
fo = st.floats(-8.0, 3.0).map(lambda v: 10.0**v)
shapes = st.sampled_from(["slab", "cylinder", "sphere"])


@settings(deadline=None, max_examples=150)
@given(shapes, bi, fo, st.floats(1.01, 10.0))
def test_laws_of_uptake(shape: str, Bi: float, Fo: float, more: float) -> None:
    base = uptake(shape, Fo, Bi)[0]
    slack = 1e-6
    assert -slack <= base <= 1.0 + slack
    assert uptake(shape, Fo * more, Bi)[0] >= base * (1 - slack), "falls with time"
    assert uptake(shape, Fo, Bi * more)[0] >= base * (1 - slack), "falls with the surface coefficient"
    assert uptake(shape, Fo * more, Bi / more)[0] >= base * (1 - slack), "falls with diffusivity"
    slab, cylinder, sphere = (uptake(s, Fo, Bi)[0] for s in ("slab", "cylinder", "sphere"))
    assert slab <= cylinder * (1 + slack)
    assert cylinder <= sphere * (1 + slack)
    assert base <= surface_content(shape, Fo, Bi)[0] * (1 + 1e-5)
    assert uptake(shape, Fo, Bi, alpha=more)[0] <= base * (1 + slack), "an emptying reservoir gives more"


@settings(deadline=None, max_examples=60)
@given(shapes, bi, fo)
def test_flux_is_the_rate_of_uptake(shape: str, Bi: float, Fo: float) -> None:
    step = 1e-3
    slope = (uptake(shape, Fo * (1 + step), Bi, nodes=20) - uptake(shape, Fo * (1 - step), Bi, nodes=20)) / (
        2 * step * Fo
    )
    assert flux(shape, Fo, Bi, nodes=20)[0] == pytest.approx(slope[0], rel=2e-3, abs=1e-7 / Fo)
    balance = (
        {"slab": 1, "cylinder": 2, "sphere": 3}[shape]
        * Bi
        * (Fo - surface_integral(shape, Fo, Bi, nodes=20)[0])
    )
    if Bi < 1e2 and Fo < 1e2:
        assert balance == pytest.approx(uptake(shape, Fo, Bi, nodes=20)[0], rel=1e-5)


def test_elasticities_of_a_hold() -> None:
    """Differentiated with 40 digits."""
    E_h, E_D, E_t = elasticities("slab", 0.1, 1.0)
    assert [E_h[0], E_D[0], E_t[0]] == pytest.approx([0.79987, 0.10006, 0.89994], abs=1e-5)
    E_h, E_D, E_t = elasticities("sphere", 0.01, 100.0)
    assert [E_h[0], E_D[0], E_t[0]] == pytest.approx([0.07563, 0.41934, 0.49497], abs=1e-5)


def test_half_space_control_is_shared_at_one_place() -> None:
    """Equal control by surface and diffusion at h sqrt(t/D) = 2.147705."""
    E_h, E_D, _ = elasticities("half-space", 1.0, 2.147705, nodes=20)
    assert E_h[0] == pytest.approx(E_D[0], abs=1e-6)


@pytest.mark.parametrize(("shape", "Bi", "Fo", "content"), UPTAKE)
def test_time_to_a_content_returns(shape: str, Bi: float, Fo: float, content: float) -> None:
    assert time_to(shape, content, Bi)[0] == pytest.approx(Fo, rel=1e-6)


def test_time_to_what_is_never_or_already_reached() -> None:
    assert time_to("slab", np.array([-0.1, 0.0, 1.0, 1.5]), 1.0).tolist() == [0.0, 0.0, np.inf, np.inf]


@settings(deadline=None, max_examples=60)
@given(shapes, st.floats(-4, 5), st.floats(-8, -0.0005))
def test_time_to_is_the_inverse_of_uptake(shape: str, lg_Bi: float, lg_m: float) -> None:
    Bi, m = 10.0**lg_Bi, 10.0**lg_m
    Fo = time_to(shape, m, Bi)[0]
    assert uptake(shape, Fo, Bi, nodes=20)[0] == pytest.approx(m, rel=1e-7)
    assert time_to(shape, min(1.1 * m, 0.9999), Bi)[0] >= Fo * (1 - 1e-6) or 1.1 * m > 0.9999


def test_inversion_of_a_known_transform() -> None:
    """1 - exp(-t)."""
    t = np.array([1e-3, 0.1, 1.0, 5.0])
    assert invert(lambda s: 1.0 / (s * (s + 1.0)), t, 20) == pytest.approx(-np.expm1(-t), rel=1e-8)


def test_profile_of_a_half_space_meets_its_surface() -> None:
    z = np.array([0.01, 1.0, 30.0])
    assert half_space_content(0.0, z) == pytest.approx(half_space_surface(z))
    depth = np.linspace(0.0, 6.0, 4001)
    inside = np.trapezoid(half_space_content(depth, 1.0), 2 * depth)
    assert inside == pytest.approx(half_space(1.0)[0], rel=1e-5)
