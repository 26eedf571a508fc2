"""Modes and implicit steps: against exact holds, caps, supplies, reservoirs and rising ceilings."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from purity.kinetics.laplace import uptake
from purity.kinetics.march import Surface, march
from purity.kinetics.modes import GAMMA, basis, carry_over, mean, profile, project, uniform
from purity.kinetics.schedule import geometric

Array = NDArray[np.float64]
SLAB = basis("slab")


def steps(Fo: Array | float, n: int, first: float = 0.03) -> Array:
    return np.diff(geometric(n, first))[:, None] * np.atleast_1d(Fo)


@pytest.mark.parametrize(
    ("shape", "first"), [("slab", np.pi), ("cylinder", 3.8317059702), ("sphere", 4.4934094579)]
)
@pytest.mark.parametrize("modes", [25, 33, 41])
def test_modes(shape: str, first: float, modes: int) -> None:
    """Zeros of sin, J1 and tan x = x (Abramowitz and Stegun, tables 9.5 and 4.19)."""
    b = basis(shape, modes)
    assert b.rate[0] == 0.0
    assert b.rate[1] == pytest.approx(first**2, rel=1e-4)
    assert b.surface[0] ** 2 == pytest.approx(b.g, rel=1e-14)


@pytest.mark.parametrize("shape", ["slab", "cylinder", "sphere"])
@pytest.mark.parametrize(("n", "worst", "median"), [(16, 5e-4, 3e-5), (24, 3e-4, 1e-5)])
def test_holds_against_the_exact_hold(shape: str, n: int, worst: float, median: float) -> None:
    rng = np.random.default_rng(1)
    Fo, Bi = 10 ** rng.uniform(-6, 2, 2000), 10 ** rng.uniform(-3, 6, 2000)
    error = np.abs(march(basis(shape), steps(Fo, n), Surface(Bi, 1.0)).mean / uptake(shape, Fo, Bi) - 1)
    assert error.max() < worst
    assert np.median(error) < median


@pytest.mark.parametrize(("modes", "Fo"), [(25, 1e-6), (33, 1e-8), (41, 1e-10)])
def test_thinnest_layer_that_a_basis_resolves(modes: int, Fo: float) -> None:
    got = march(basis("slab", modes), steps(Fo, 24), Surface(1e6, 1.0)).mean
    assert got[0] == pytest.approx(uptake("slab", Fo, 1e6)[0], rel=1e-3)


@pytest.mark.parametrize(("n", "error"), [(16, 5e-4), (32, 1e-4)])
def test_rising_ceiling(n: int, error: float) -> None:
    """Ceiling Fo/0.5, slab, Bi 2, Fo 0.5: convolution with 40 digits."""
    edges = geometric(n, 0.03) * 0.5
    d = np.diff(edges)
    ceiling = np.stack([edges[:-1] + GAMMA * d, edges[1:]], axis=1)[:, :, None] / 0.5
    assert march(SLAB, d[:, None], Surface(2.0, ceiling)).mean[0] == pytest.approx(0.2639152755, rel=error)


def test_profile_of_a_hold() -> None:
    """Slab, Bi 1, Fo 0.3: series with roots."""
    run = march(SLAB, steps(0.3, 32), Surface(1.0, 1.0))
    assert profile(SLAB, run.y, np.array([1.0, 0.0]))[:, 0] == pytest.approx([0.1082045, 0.4111495], rel=1e-4)


@pytest.mark.parametrize(
    ("Bi", "Fo", "cap", "expected"),
    [
        (0.5, 10.0, 0.1, 0.913812),
        (1.0, 5.0, 0.3, 0.956613),
        (10.0, 2.0, 0.8, 0.969412),
        (100.0, 1.0, 1.5, 0.901838),
        (1e4, 0.8, 1.0, 0.763396),
    ],
)
def test_flux_cap(Bi: float, Fo: float, cap: float, expected: float) -> None:
    """Fine finite volumes with the cap as a complementarity."""
    assert march(SLAB, steps(Fo, 24), Surface(Bi, 1.0, cap=cap)).mean[0] == pytest.approx(expected, rel=5e-4)


def test_flux_caps_at_the_ends() -> None:
    open_ = march(SLAB, steps(1.0, 16), Surface(5.0, 1.0)).mean
    assert march(SLAB, steps(1.0, 16), Surface(5.0, 1.0, cap=0.0)).mean[0] == 0.0
    assert march(SLAB, steps(1.0, 16), Surface(5.0, 1.0, cap=1e9)).mean == pytest.approx(open_, rel=1e-14)


def test_caps_hold_back_uptake_only() -> None:
    free = march(SLAB, steps(1.0, 16), Surface(5.0, 0.0), start=1.0).mean
    assert march(SLAB, steps(1.0, 16), Surface(5.0, 0.0, cap=0.0), start=1.0).mean == pytest.approx(free)


@settings(deadline=None, max_examples=40)
@given(st.floats(-2, 4), st.floats(-4, 1), st.floats(-4, 1))
def test_finite_supply(lg_Bi: float, lg_Fo: float, lg_supply: float) -> None:
    supply = 10.0**lg_supply * np.array([1.0, 1.5])
    run = march(SLAB, steps(np.full(2, 10.0**lg_Fo), 16), Surface(10.0**lg_Bi, 1.0, supply=supply))
    assert run.remaining is not None
    assert run.mean + run.remaining == pytest.approx(supply, abs=1e-14)
    assert run.mean[1] >= run.mean[0] * (1 - 1e-12)
    assert np.all(run.remaining >= 0.0)


def test_exhausted_supply_is_all_taken() -> None:
    run = march(SLAB, steps(50.0, 16), Surface(10.0, 1.0, supply=0.3))
    assert run.remaining is not None
    assert run.remaining[0] == 0.0
    assert run.mean[0] == pytest.approx(0.3, abs=1e-14)


@pytest.mark.parametrize(
    ("alpha", "expected"), [(0.2, 0.8294436672), (1.0, 0.5528407234), (5.0, 0.4052837439)]
)
def test_closed_reservoir(alpha: float, expected: float) -> None:
    run = march(SLAB, steps(0.1, 24), Surface(1e8, 1.0, reservoir=alpha))
    assert run.mean[0] * (1 + alpha) / alpha == pytest.approx(expected, rel=2e-4)


def test_closed_reservoir_takes_back_what_leaves() -> None:
    """At rest piece and reservoir share all in proportion: x + A c = x0 + A with x = ceiling c."""
    run = march(SLAB, steps(200.0, 32), Surface(3.0, 0.1, reservoir=0.5), start=2.0)
    left = (2.0 + 0.5) / (1.0 + 0.5 / 0.1)
    assert run.mean[0] == pytest.approx(left, rel=1e-6)


def test_sieverts_reservoir_at_rest() -> None:
    """x = c* sqrt(f) and x + A f = A: f from its quadratic."""
    A, ceiling = 0.7, 1.3
    run = march(SLAB, steps(500.0, 32), Surface(2.0, ceiling, reservoir=A, sieverts=True))
    w = (-ceiling + np.sqrt(ceiling**2 + 4 * A * A)) / (2 * A)
    assert run.mean[0] == pytest.approx(ceiling * w, rel=1e-6)


def test_sieverts_reservoir_against_a_fine_run() -> None:
    surface = Surface(5.0, 1.0, reservoir=0.4, sieverts=True)
    fine = march(basis("slab", 41), steps(0.3, 800), surface).mean
    assert march(SLAB, steps(0.3, 24), surface).mean == pytest.approx(fine, rel=3e-4)


def test_two_halves_are_the_whole() -> None:
    half = march(SLAB, steps(0.2, 24), Surface(4.0, 1.0))
    whole = march(SLAB, steps(0.4, 24), Surface(4.0, 1.0))
    assert march(SLAB, steps(0.2, 24), Surface(4.0, 1.0), start=half.y).mean == pytest.approx(
        whole.mean, rel=2e-4
    )


def test_no_time_changes_nothing() -> None:
    run = march(
        SLAB,
        np.zeros((4, 3)),
        Surface(np.array([0.0, 1.0, 1e8]), 1.0, supply=0.1, reservoir=2.0),
        start=0.2,
    )
    assert run.mean == pytest.approx(np.full(3, 0.2), rel=1e-15)


@pytest.mark.parametrize("shape", ["slab", "cylinder", "sphere"])
def test_profiles_keep_their_mass_between_bases(shape: str) -> None:
    run = march(basis(shape), steps(0.05, 16), Surface(20.0, 1.0))
    moved = carry_over(shape, 41, shape, 25) @ run.y
    assert mean(basis(shape, 41), moved) == pytest.approx(run.mean, rel=1e-14)
    depth = np.array([0.0, 0.01, 0.3, 1.0])
    assert profile(basis(shape, 41), moved, depth) == pytest.approx(
        profile(basis(shape), run.y, depth), abs=2e-7
    )


def test_a_layer_is_put_on_the_piece() -> None:
    layer = march(SLAB, steps(0.02, 24), Surface(1e3, 1.0))
    moved = carry_over("slab", 25, "slab", 25, 0.1) @ layer.y
    assert mean(SLAB, moved) == pytest.approx(0.1 * layer.mean, rel=1e-14)
    depth = np.array([0.0, 0.25, 0.5])
    assert profile(SLAB, moved, 0.1 * depth) == pytest.approx(profile(SLAB, layer.y, depth), abs=5e-4)


def test_projection_of_a_given_profile() -> None:
    b = basis("sphere")
    depth = np.linspace(0.0, 1.0, 41)
    contents = np.stack([np.exp(-3 * depth), np.ones(41)], axis=1)
    y = project(b, contents, depth)
    assert profile(b, y, depth) == pytest.approx(contents, abs=2e-3)
    assert y[:, 1] == pytest.approx(uniform(b, 1.0), abs=1e-9)
