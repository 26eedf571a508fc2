"""Speed of contact equilibria, alone and against Cantera's vcs solver on the same contacts.

Run with ``pytest --benchmark-only tests/benchmarks``. One BLAS thread (OPENBLAS_NUM_THREADS=1).
"""

from __future__ import annotations

import importlib.util
import sys
import time
from pathlib import Path
from types import ModuleType

import numpy as np
import pytest
from pytest_benchmark.fixture import BenchmarkFixture

from purity.driving_force.equilibrium import Outcome, equilibrium


def _shared() -> ModuleType:
    path = Path(__file__).parents[1] / "reference" / "contact_systems.py"
    spec = importlib.util.spec_from_file_location("contact_systems", path)
    assert spec is not None
    assert spec.loader is not None
    module = sys.modules.setdefault(spec.name, importlib.util.module_from_spec(spec))
    spec.loader.exec_module(module)
    return module


cs = _shared()
NAMES = sorted(cs.CONTACTS)


def seconds_outside(name: str, draws: int) -> float:
    """Mean time of one vcs solve with energies of its own, as a Monte Carlo run needs it."""
    outside, (g, amounts) = cs.Outside(name), cs.mild(name, draws, 5)
    start = time.perf_counter()
    for k in range(draws):
        outside.load(g[:, k])
        outside.solve(amounts[:, k])
    return (time.perf_counter() - start) / draws


@pytest.mark.parametrize("name", NAMES)
def test_one_solve_takes_milliseconds(benchmark: BenchmarkFixture, name: str) -> None:
    made, (g, amounts) = cs.setup(name), cs.nominal(name)
    benchmark(equilibrium, made.system, g, amounts, inputs=made.inputs)
    if benchmark.stats is not None:
        assert benchmark.stats.stats.min < 15e-3


def test_ten_thousand_draws_are_four_times_faster_than_vcs(benchmark: BenchmarkFixture) -> None:
    drawn = {name: cs.mild(name, 10_000, 5) for name in NAMES}

    def every() -> None:
        for name, (g, amounts) in drawn.items():
            made = cs.setup(name)
            answer = equilibrium(made.system, g, amounts, inputs=made.inputs)
            assert (answer.state != Outcome.REFUSED).all()

    benchmark.pedantic(every, rounds=3, warmup_rounds=1)
    outside = min(np.mean([seconds_outside(name, 200) for name in NAMES]) for _ in range(2))
    benchmark.extra_info["vcs_us"] = 1e6 * outside
    if benchmark.stats is not None:
        ours = benchmark.stats.stats.min / (10_000 * len(NAMES))
        benchmark.extra_info |= {"ours_us": 1e6 * ours, "ratio": outside / ours}
        print(f"ours {1e6 * ours:.0f} us, vcs {1e6 * outside:.0f} us a solve: {outside / ours:.1f} times")
        assert outside > 4.0 * ours


@pytest.mark.parametrize("name", NAMES)
def test_twenty_thousand_wild_draws_all_end_with_a_proof(benchmark: BenchmarkFixture, name: str) -> None:
    made, (g, amounts) = cs.setup(name), cs.wild(name, 20_000, 4711)
    answer = benchmark.pedantic(
        equilibrium, (made.system, g, amounts), {"inputs": made.inputs}, rounds=1, iterations=1
    )
    assert (answer.state != Outcome.REFUSED).all()
    assert np.abs(answer.gap).max() < 1e-9
    assert answer.residual.max() < 1e-9
