"""Speed of a stirred bath, alone and against a loop of LSODA over the draws.

Run with ``pytest --benchmark-only tests/benchmarks``, one BLAS thread (OPENBLAS_NUM_THREADS=1). Processor
time is measured, so that other work on the machine counts less. Constants are invented round numbers.
"""

from __future__ import annotations

import time
from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray
from pytest_benchmark.fixture import BenchmarkFixture
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from purity.kinetics.advance import Host, State, advance
from purity.kinetics.bath import Case, integrate
from purity.kinetics.exposure import Carrier, Curve, Exposure, Skin, at
from purity.kinetics.schedule import Schedule

Array = NDArray[np.float64]
DRAWS = 2048
ELEMENTS = ("Al", "C", "O", "H", "Zn", "Pb", "Fe", "Ni", "Si", "Mg")
KNOTS = np.array([1400.0, 1600.0])
RAMP = Schedule(np.array([0.0, 1200.0, 3600.0]), np.array([1400.0, 1600.0, 1600.0]))
processor_time = pytest.mark.benchmark(timer=time.process_time)


def melt(*, skin: bool) -> Case:
    """Ten elements between an oxide wall with two metals in it, moist gas and open evaporation."""
    rng = np.random.default_rng(3)

    def curve(cold: float, hot: float, sd: float) -> Curve:
        return Curve(KNOTS, np.array([[cold], [hot]]) + sd * rng.standard_normal(DRAWS))

    def exchange() -> Curve:
        ln = np.log(3e-5) + np.array([0.0, 0.3])[:, None] + 0.5 * rng.standard_normal(DRAWS)
        return Curve(KNOTS, np.broadcast_to(ln, (len(ELEMENTS), 2, DRAWS)))

    def nu(**atoms: float) -> Array:
        return np.array([atoms.get(name, 0.0) for name in ELEMENTS])

    oxide = nu(Al=2, O=3)
    wall = (
        Carrier("oxide", oxide, curve(-66.0, -58.0, 2.0), np.ones(1)),
        Carrier("Fe", nu(Fe=1), curve(-12.0, -11.0, 1.0), np.ones(1)),
        Carrier("Ni", nu(Ni=1), curve(-12.0, -11.0, 1.0), np.ones(1)),
    )
    gas = (
        Carrier("O2", nu(O=2), curve(-14.0, -13.0, 1.0), np.array([1e-6]), curve(-1.0, -1.0, 0.5)),
        Carrier("H2O", nu(H=2, O=1), curve(-14.0, -13.0, 1.0), np.array([3e-6]), curve(-1.0, -1.0, 0.5)),
        Carrier("H2", nu(H=2), curve(-16.0, -15.5, 0.5), np.zeros(1), curve(0.0, 0.0, 0.5)),
        Carrier("CO", nu(C=1, O=1), curve(-18.0, -17.0, 1.0), np.array([1e-6]), curve(-1.0, -1.0, 0.5)),
        Carrier("Zn", nu(Zn=1), curve(2.0, 2.5, 0.5), np.zeros(1), curve(-2.0, -1.5, 0.5)),
        Carrier("Pb", nu(Pb=1), curve(4.0, 3.5, 0.5), np.zeros(1), curve(-2.0, -1.5, 0.5)),
    )
    skins = (Skin("oxide", oxide, curve(-63.0, -56.0, 2.0)),) if skin else ()
    exposures = (
        Exposure("wall", np.array([4e-4]), exchange(), wall, skins),
        Exposure("gas", np.array([1.3e-4]), exchange(), gas),
    )
    start = np.array([1e-6, 1e-6, 1e-5, 1e-7, 1e-6, 1e-6, 2e-6, 1e-6, 2e-6, 1e-6])[:, None]
    total = start * np.exp(0.3 * rng.standard_normal((len(ELEMENTS), DRAWS)))
    return Case(total, np.array([1e5]), np.ones(1), RAMP, exposures)


def bounded(benchmark: BenchmarkFixture, seconds: float) -> None:
    if benchmark.stats is not None:
        assert benchmark.stats.stats.min < seconds


@processor_time
def test_ramp_and_hold_with_a_skin(benchmark: BenchmarkFixture) -> None:
    """2,048 draws, 64 steps, Newton on all fluxes."""
    assert benchmark(integrate, melt(skin=True)).solved.all()
    bounded(benchmark, 1.3)


@processor_time
def test_ramp_and_hold_tied_by_oxygen(benchmark: BenchmarkFixture) -> None:
    """2,048 draws, 64 steps, one unknown a contact."""
    assert benchmark(integrate, melt(skin=False)).solved.all()
    bounded(benchmark, 0.6)


@processor_time
@pytest.mark.parametrize("skin", [True, False])
def test_a_whole_step_with_its_error_and_shares(benchmark: BenchmarkFixture, skin: bool) -> None:
    """As the assessment takes it: 16 steps a segment, 8 for the error, elasticities of a sample."""
    case = melt(skin=skin)
    state = State(case.total, np.zeros_like(case.total))
    host = Host("liquid", case.density, case.amount)
    benchmark(advance, state, host, None, RAMP, case.exposures, nodes=16)
    bounded(benchmark, 1.8)


@processor_time
def test_one_draw(benchmark: BenchmarkFixture) -> None:
    benchmark(integrate, melt(skin=True).take(np.array([0])), nodes=16)
    bounded(benchmark, 0.15)


def lsoda(case: Case) -> float:
    """Processor time of one draw of an oxide wall and CO leaving, with scalar surface roots, s."""
    begin = time.process_time()
    k = [at(e.exchange, 1600.0)[:, 0] for e in case.exposures]

    def rates(t: float, x: Array) -> Array:
        T = float(np.interp(t, RAMP.time, RAMP.T))
        total = np.zeros_like(x)
        for m, exposure in zip(k, case.exposures, strict=True):
            for carrier in exposure.carriers:
                K = at(carrier.ln_k, T)[0]
                g = np.inf if carrier.conductance is None else at(carrier.conductance, T)[0]
                acts = carrier.nu > 0
                n, x_a, m_a = carrier.nu[acts], np.maximum(x[acts], 1e-30), 1e5 * m[acts]
                a = carrier.activity[0]

                def law(R: float, n=n, x_a=x_a, m_a=m_a, K=K, a=a, g=g) -> float:
                    return float(np.prod((x_a + n * R / m_a) ** n) / K - a + R / g)

                R = brentq(law, -np.min(m_a * x_a / n), np.max(m_a / n), xtol=1e-30, rtol=1e-14)
                total[acts] += exposure.area[0] * n * R
        return total

    solve_ivp(rates, (0.0, 3600.0), case.total[:, 0], method="LSODA", rtol=1e-4, atol=1e-14)
    return time.process_time() - begin


@processor_time
def test_draws_are_a_hundred_times_faster_than_a_loop_of_lsoda(benchmark: BenchmarkFixture) -> None:
    """The same wall and gas; LSODA at rtol 1e-4 calls a scalar root finder in Python at every surface."""
    full = melt(skin=False)
    wall, gas = full.exposures
    exposures = (replace(wall, carriers=wall.carriers[:1]), replace(gas, carriers=gas.carriers[3:4]))
    case = replace(full, exposures=exposures)
    loop = np.mean([lsoda(case.take(np.array([n]))) for n in range(4)])
    benchmark(integrate, case)
    if benchmark.stats is not None:
        ours = benchmark.stats.stats.min / DRAWS
        benchmark.extra_info["ms a draw, LSODA"] = round(1e3 * loop, 2)
        benchmark.extra_info["ms a draw, ours"] = round(1e3 * ours, 4)
        assert loop > 100 * ours
