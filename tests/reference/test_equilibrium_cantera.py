"""Contact equilibria against the multiphase solver of Cantera (github.com/Cantera/cantera, 3.x, "vcs").

Both solvers get the same energies and charges, stated in contact_systems.py.
"""

from __future__ import annotations

import importlib.util
import sys
from pathlib import Path
from types import ModuleType

import numpy as np
import pytest
from numpy.typing import NDArray

from purity.driving_force.equilibrium import Outcome, System, equilibrium

Array = NDArray[np.float64]


def _shared() -> ModuleType:
    path = Path(__file__).with_name("contact_systems.py")
    spec = importlib.util.spec_from_file_location("contact_systems", path)
    assert spec is not None
    assert spec.loader is not None
    module = sys.modules.setdefault(spec.name, importlib.util.module_from_spec(spec))
    spec.loader.exec_module(module)
    return module


cs = _shared()
NAMES = sorted(cs.CONTACTS)
DRAWS = 40


def gibbs(system: System, g: Array, moles: Array) -> float:
    """Gibbs energy over RT of one draw, mol."""
    total = np.bincount(system.phase, weights=moles)[system.phase]
    there = moles > 0
    return float((moles[there] * (g[there] + np.log(moles[there] / total[there]))).sum())


def furthest(system: System, ours: Array, theirs: Array) -> float:
    """Largest relative difference over species with x > 1e-12 in phases that Cantera holds present."""
    total = np.bincount(system.phase, weights=theirs)[system.phase]
    seen = (theirs > 1e-12 * total) & (total > 1e-13)
    return float(np.abs(ours[seen] / theirs[seen] - 1.0).max())


@pytest.mark.parametrize("name", NAMES)
def test_the_contact_itself_agrees(name: str) -> None:
    made, outside = cs.setup(name), cs.Outside(name)
    g, amounts = cs.nominal(name)
    ours = equilibrium(made.system, g, amounts, inputs=made.inputs)
    assert ours.state[0] != Outcome.REFUSED
    assert abs(ours.gap[0]) < 1e-9
    outside.load(g[:, 0])
    # The solver's own first estimate fails on two of these contacts; starting from the moles given does not.
    theirs = outside.solve(amounts[:, 0], estimate_equil=-1)
    assert theirs is not None
    assert furthest(made.system, ours.amounts[:, 0], theirs) < 1e-6


@pytest.mark.parametrize("name", NAMES)
def test_uncertain_contacts_agree(name: str) -> None:
    made, outside = cs.setup(name), cs.Outside(name)
    g, amounts = cs.mild(name, DRAWS, 2024)
    ours = equilibrium(made.system, g, amounts, inputs=made.inputs)
    assert (ours.state != Outcome.REFUSED).all()
    assert np.abs(ours.gap).max() < 1e-9
    apart = []
    for k in range(DRAWS):
        outside.load(g[:, k])
        theirs = outside.solve(amounts[:, k])
        if theirs is None:
            theirs = outside.solve(amounts[:, k], estimate_equil=-1)
        if theirs is None:
            continue
        b = made.inputs.T @ amounts[:, k]
        if np.abs(made.system.formula.T @ theirs / b - 1).max() > 1e-6:
            continue
        energy = gibbs(made.system, g[:, k], theirs)
        assert gibbs(made.system, g[:, k], ours.amounts[:, k]) <= energy + 1e-6
        apart.append(furthest(made.system, ours.amounts[:, k], theirs))
    assert len(apart) >= 0.9 * DRAWS
    # Differences in minor species pile up just below 1e-6, where vcs stops whatever tolerance is asked.
    assert max(apart) < 5e-6
    assert np.quantile(apart, 0.95) < 1e-6


@pytest.mark.parametrize("name", NAMES)
def test_no_wild_draw_fails(name: str) -> None:
    made = cs.setup(name)
    g, amounts = cs.wild(name, 500, 77)
    ours = equilibrium(made.system, g, amounts, inputs=made.inputs)
    assert (ours.state != Outcome.REFUSED).all()
    assert np.abs(ours.gap).max() < 1e-9
    assert ours.residual.max() < 1e-9
    assert ours.rounding.max() < 1e-9
    assert (ours.start > 1).mean() < 0.02
