"""What holds the pickup of a bath back: elasticities to its rates.

E = d ln(pickup) / d ln(rate), by central differences on the same steps, so that no adaptivity adds noise.
Over all rates they sum to the elasticity to stretching time: 1 where a rate decides, 0 at the ceiling.
In steady transfer through resistances in series E / sum E is the share of each resistance.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from purity.kinetics.bath import Case, integrate
from purity.kinetics.exposure import Array, scale
from purity.kinetics.flux_newton import Flags
from purity.kinetics.stage import Index

#: Step of ln rate, and of the Newton that goes with it.
NUDGE = 1e-4
TIGHT = 1e-6
#: Draws and steps a segment on which elasticities are evaluated.
SAMPLE = 16
NODES = 8
#: Elasticity to time below which nothing but the ceiling holds the pickup back.
AT_CEILING = 0.1
#: Pickup relative to the content below which there is none to speak of.
NONE = 1e-6
#: Name of the metal-side rate.
MELT = "melt transfer"
INVENTORY = "inventory"


def elasticities(case: Case, *, nodes: int = NODES) -> tuple[tuple[str, ...], Array, Flags]:
    """Elasticities of the pickup of every impurity.

    Parameters
    ----------
    case : Case
    nodes : int
        Steps a segment.

    Returns
    -------
    names : tuple of str
        ``melt transfer``, the contact-side limits in use, and ``inventory`` last where a contact has one.
    E : (P, I, N) array
        0 where there is no pickup.
    moves : (I, N) bool array
        Whether there is a pickup.
    """
    carriers = [c for exposure in case.exposures for c in exposure.carriers if c.nu.any()]
    sides = sorted({c.limit for c in carriers if c.conductance is not None})
    stocked = any(c.inventory is not None for c in carriers)
    names = (MELT, *sides, *((INVENTORY,) if stocked else ()))
    n, copies = case.total.shape[-1], 2 * len(names) + 1
    wide = case.take(np.tile(np.arange(n), copies))
    nudge = np.zeros((len(names), copies, n))
    for k in range(len(names)):
        nudge[k, 2 * k], nudge[k, 2 * k + 1] = NUDGE, -NUDGE
    factors = dict(zip(names, nudge.reshape(len(names), -1), strict=True))
    none = np.zeros(1)
    exposures = tuple(
        scale(exposure, factors[MELT], {s: factors[s] for s in sides}, factors.get(INVENTORY, none))
        for exposure in wide.exposures
    )
    path = integrate(replace(wide, exposures=exposures), nodes=nodes, tolerance=TIGHT)
    pickup = path.ledger.sum(axis=0).reshape(-1, copies, n)
    base = pickup[:, -1]
    least = NONE * np.maximum(case.total, case.total + base)
    moved = (pickup[:, 0:-1:2] - pickup[:, 1:-1:2]) / (2 * NUDGE)
    counts = (np.abs(base) > least) & (base != 0)
    E = np.where(counts[:, None], moved / np.where(counts, base, 1.0)[:, None], 0.0)
    return names, np.asarray(np.moveaxis(E, 1, 0)), counts


def sample(draws: int) -> Index:
    """Draws spread evenly over all."""
    return np.unique(np.linspace(0, draws - 1, min(draws, SAMPLE)).astype(np.int64))


def shares(names: tuple[str, ...], E: Array, moves: Flags) -> Array:
    """Shares of what holds the pickup back.

    Parameters
    ----------
    names, E, moves
        As :func:`elasticities` gives them.

    Returns
    -------
    (P + 1, I, N) array
        ``ceiling`` first, then `names`; they sum to 1 where there is a pickup, else to 0.
    """
    stocked = names[-1:] == (INVENTORY,)
    rates = E[:-1] if stocked else E
    total = rates.sum(axis=0)
    free = total >= AT_CEILING
    found = np.zeros((len(names) + 1, *total.shape))
    found[1 : 1 + len(rates)] = np.where(free, rates / np.where(free, total, 1.0), 0.0)
    ends = moves & ~free
    if stocked:
        found[-1] = np.where(ends & (E[-1] > 0.5), 1.0, 0.0)
    found[0] = np.where(ends, 1.0, 0.0) - (found[-1] if stocked else 0.0)
    return found
