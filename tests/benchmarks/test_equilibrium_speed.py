"""Speed of contact equilibria, alone and against Cantera's vcs solver on the same contacts.

Run with ``pytest --benchmark-only tests/benchmarks``, one BLAS thread (OPENBLAS_NUM_THREADS=1). Processor
time is measured, so that other work on the machine counts less.
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
processor_time = pytest.mark.benchmark(timer=time.process_time)


def seconds_outside(name: str, draws: int) -> tuple[float, float]:
    """Mean times of loading a draw's own energies, as a Monte Carlo run must, and of one vcs solve."""
    outside, (g, amounts) = cs.Outside(name), cs.mild(name, draws, 5)
    load = solve = 0.0
    for k in range(draws):
        start = time.process_time()
        outside.load(g[:, k])
        middle = time.process_time()
        outside.solve(amounts[:, k])
        load, solve = load + middle - start, solve + time.process_time() - middle
    return load / draws, solve / draws


@processor_time
@pytest.mark.parametrize("name", NAMES)
def test_one_solve_takes_milliseconds(benchmark: BenchmarkFixture, name: str) -> None:
    made, (g, amounts) = cs.setup(name), cs.nominal(name)
    benchmark(equilibrium, made.system, g, amounts, inputs=made.inputs)
    if benchmark.stats is not None:
        assert benchmark.stats.stats.min < 15e-3


@processor_time
def test_ten_thousand_draws_are_four_times_faster_than_vcs(benchmark: BenchmarkFixture) -> None:
    drawn = {name: cs.mild(name, 10_000, 5) for name in NAMES}

    def every() -> None:
        for name, (g, amounts) in drawn.items():
            made = cs.setup(name)
            answer = equilibrium(made.system, g, amounts, inputs=made.inputs)
            assert (answer.state != Outcome.REFUSED).all()

    benchmark.pedantic(every, rounds=3, warmup_rounds=1)
    load, solve = np.mean([seconds_outside(name, 200) for name in NAMES], axis=0)
    if benchmark.stats is not None:
        ours = benchmark.stats.stats.min / (10_000 * len(NAMES))
        benchmark.extra_info |= {"ours": ours, "vcs_load": load, "vcs_solve": solve}
        print(f"us a draw: ours {1e6 * ours:.0f}, vcs {1e6 * load:.0f} to load, {1e6 * solve:.0f} to solve")
        assert load + solve > 4.0 * ours


@processor_time
@pytest.mark.parametrize("name", NAMES)
def test_twenty_thousand_wild_draws_all_end_with_a_proof(benchmark: BenchmarkFixture, name: str) -> None:
    made, (g, amounts) = cs.setup(name), cs.wild(name, 20_000, 4711)
    answer = benchmark.pedantic(
        equilibrium, (made.system, g, amounts), {"inputs": made.inputs}, rounds=1, iterations=1
    )
    assert (answer.state != Outcome.REFUSED).all()
    assert np.abs(answer.gap).max() < 1e-9
    assert answer.residual.max() < 1e-9
