"""Speed of solid pieces; run with ``pytest tests/benchmarks --benchmark-only``.

The peer is SciPy's BDF on a method of lines, one draw at a time, which solves far more general problems:
what is gained comes from the draws that pass together and from a basis made for this one problem.
"""

from __future__ import annotations

import time
import tracemalloc

import numpy as np
import pytest
from numpy.typing import NDArray
from pytest_benchmark.fixture import BenchmarkFixture
from scipy.integrate import solve_ivp

from purity.kinetics.exposure import Carrier, Curve, Exposure
from purity.kinetics.laplace import uptake
from purity.kinetics.march import Surface, march
from purity.kinetics.modes import basis
from purity.kinetics.passage import whole
from purity.kinetics.pieces import Piece, steps
from purity.kinetics.schedule import Schedule, geometric

Array = NDArray[np.float64]
R = 8.314462618
KNOTS = np.array([250.0, 500.0, 900.0, 1500.0])


def draws(n: int) -> tuple[Array, Array]:
    rng = np.random.default_rng(5)
    return 2.0 * np.exp(0.5 * rng.standard_normal(n)), 0.3 * np.exp(0.5 * rng.standard_normal(n))


def lines(Bi: float, Fo: float, cells: int = 40) -> float:
    """Finite volumes graded to the surface, ratio 1000, and BDF."""
    width = np.geomspace(1.0, 1e3, cells)
    width /= width.sum()
    middle = np.cumsum(width) - width / 2
    inner = 1.0 / np.diff(middle)
    skin = 1.0 / (1.0 / Bi + width[0] / 2)

    def slope(t: float, c: Array) -> Array:
        flux = np.concatenate([[skin * (1.0 - c[0])], -inner * np.diff(c), [0.0]])
        return -np.diff(flux) / width

    run = solve_ivp(slope, (0.0, Fo), np.zeros(cells), method="BDF", rtol=1e-4, atol=1e-7)
    return float(run.y[:, -1] @ width)


def test_slab_against_lines(benchmark: BenchmarkFixture) -> None:
    """1,000 draws of one hold, implicit steps and exact; the peer on 40 of them."""
    Bi, Fo = draws(1000)
    d = np.diff(geometric(12, 0.03))[:, None] * Fo
    slab = basis("slab")
    ours = benchmark(lambda: march(slab, d, Surface(Bi, 1.0)).mean)
    begin = time.perf_counter()
    peer = np.array([lines(b, f) for b, f in zip(Bi[:40], Fo[:40], strict=True)])
    looped = (time.perf_counter() - begin) / 40 * 1000
    begin = time.perf_counter()
    exact = uptake("slab", Fo, Bi)
    closed = time.perf_counter() - begin
    assert ours == pytest.approx(exact, rel=2e-3)
    assert peer == pytest.approx(exact[:40], rel=2e-3)
    benchmark.extra_info["looped_over_steps"] = looped / benchmark.stats["min"]
    benchmark.extra_info["looped_over_exact"] = looped / closed
    assert looped / closed > 5000


def test_million_holds(benchmark: BenchmarkFixture) -> None:
    Bi, Fo = draws(1_000_000)
    benchmark.pedantic(uptake, args=("slab", Fo, Bi), rounds=2, iterations=1)
    tracemalloc.start()
    uptake("slab", Fo, Bi)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    benchmark.extra_info["peak_MB"] = peak / 1e6
    assert benchmark.stats["min"] < 1.5
    assert peak < 50e6


def test_ramp_hold_ramp(benchmark: BenchmarkFixture) -> None:
    """48 steps, 10 impurities, 2,048 draws: Arrhenius rates, contact and metal side, ledger and profile."""
    rng, count, n = np.random.default_rng(0), 10, 2048

    def line(A: Array, Q: Array) -> Array:
        return A - Q / (R * KNOTS[:, None])

    D = Curve(
        KNOTS, np.stack([line(rng.uniform(-14, -9, n), rng.uniform(6e4, 2e5, n)) for _ in range(count)])
    )
    gases = tuple(
        Carrier(
            f"gas {i}",
            np.eye(count)[i],
            Curve(KNOTS, line(rng.uniform(-14, -10, n), np.full(n, 1e4 * (i % 3)))),
            np.full(n, 1e-3),
            Curve(KNOTS, line(rng.uniform(-6, 0, n), np.zeros(n))),
        )
        for i in range(count)
    )
    exchange = Curve(KNOTS, np.full((count, len(KNOTS), 1), np.log(1e2)))
    contact = Exposure("gas", np.full(n, 2.0), exchange, gases)
    ones = np.ones(n)
    piece = Piece("slab", 1e-3 * ones, np.full((count, n), 1e-7), None, 1e5 * ones, 200 * ones, D, (contact,))
    schedule = Schedule(np.array([0.0, 3600.0, 7200.0, 10800.0]), np.array([300.0, 1200.0, 1200.0, 300.0]))
    course = steps(schedule, (16, 16, 0.03))
    assert len(course) == 48
    run = benchmark.pedantic(whole, args=(piece, course, False), rounds=3, iterations=1)
    assert np.isfinite(run.mean).all()
    assert benchmark.stats["min"] < 1.5
