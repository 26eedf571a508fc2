"""How good a passage is, and what held it back: refinement, and elasticities to every rate.

The elasticity of the pickup to a rate is d ln pickup / d ln rate; over all rates they sum to the elasticity
to time. A share is an elasticity over that sum: in steady transfer it is the share of the resistance.
Steps are fixed, so that differences in the logarithm are smooth.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from purity.kinetics.exposure import Array, Curve, scale
from purity.kinetics.modes import GRADING
from purity.kinetics.passage import Passage, whole
from purity.kinetics.pieces import SKIN, Flags, Index, Piece, Step, steps, take, take_steps
from purity.kinetics.schedule import Schedule

#: Draws on which error and shares are estimated.
SAMPLE = 64
#: Error above which the steps are doubled, and how often.
WANTED = 0.01
DOUBLINGS = 2
#: Step of ln rate in the differences that give elasticities.
NUDGE = 1e-3
#: Elasticity to time below which nothing but the ceiling holds the pickup back.
AT_CEILING = 0.1


def sample(draws: int) -> Index:
    """Draws spread evenly over all."""
    return np.unique(np.linspace(0, draws - 1, min(SAMPLE, draws)).astype(np.int64))


def pickup(run: Passage) -> Array:
    """Gain through all contacts, (I, N)."""
    return np.asarray(run.ledger.sum(axis=0))


@dataclass(frozen=True, slots=True)
class Plan:
    """Steps and modes that are fine enough.

    Parameters
    ----------
    course : tuple of Step
    modes : int
    error : float
        Relative to the pickup, or to a thousandth of the content where the pickup is less: 95 % of the
        draws of the worst impurity lie below.
    run : Passage or None
        The run of all draws, where the sample was all.
    """

    course: tuple[Step, ...]
    modes: int
    error: float
    run: Passage | None


def refine(piece: Piece, schedule: Schedule, counts: tuple[int, int, float]) -> Plan:
    """Double steps (at most twice) and modes until a sample of the pickup stays where it is.

    Parameters
    ----------
    piece : Piece
    schedule : Schedule
    counts : (int, int, float)
        Steps of a hold and of a ramp, and first step of a hold, to begin with.
    """
    draws = sample(piece.x0.shape[1])
    few, whole_lot = take(piece, draws), len(draws) == piece.x0.shape[1]
    course = steps(schedule, counts)
    rough = whole(few, take_steps(course, draws), False)
    for _ in range(DOUBLINGS):
        counts = twice(counts)
        finer, deeper = steps(schedule, counts), rough.profile.shape[1]
        deepest = min((n for n in GRADING if n > deeper), default=deeper)
        fine = whole(few, take_steps(finer, draws), False, least=deepest)
        error = _change(few, rough, fine)
        if error <= WANTED:
            return Plan(course, deeper, error, fine if whole_lot else None)
        course, rough = finer, fine
    # Of second order: what the finer steps leave is a third of what they moved.
    return Plan(course, rough.profile.shape[1], error / 3.0, rough if whole_lot else None)


def twice(counts: tuple[int, int, float]) -> tuple[int, int, float]:
    """Twice the steps."""
    return 2 * counts[0], 2 * counts[1], counts[2] / 2.0


def _change(piece: Piece, rough: Passage, fine: Passage) -> float:
    change = np.abs(pickup(fine) - pickup(rough))
    size = np.maximum(np.abs(pickup(fine)), 1e-3 * np.maximum(piece.x0, fine.mean))
    relative = change / np.maximum(size, 1e-300)
    return float(np.quantile(relative, 0.95, axis=1).max(initial=0.0))


def elasticities(
    piece: Piece, course: Sequence[Step], exact: bool, draws: Index, least: int = 25
) -> tuple[tuple[str, ...], int, Array, Array]:
    """Elasticities of the pickup, by central differences in the logarithm.

    Parameters
    ----------
    piece : Piece
    course : sequence of Step
    exact : bool
        Use the exact hold.
    draws : (n,) int array
        On which draws.
    least : int
        Modes.

    Returns
    -------
    names : tuple of str
        diffusion, surface (metal side), the limits of the contact sides, and inventory where there is one.
    rates : int
        How many of them are rates.
    E : (P, I, n) array
        0 where nothing is taken up.
    pickup : (I, n) array
    """
    carriers = [c for exposure in piece.exposures for c in exposure.carriers]
    sides = sorted({c.limit for c in carriers if c.conductance is not None} - {"surface"})
    stocked = any(c.inventory is not None and c.limit != SKIN for c in carriers)
    moving = ("diffusion", "surface", *sides)
    names = (*moving, *(("inventory",) if stocked else ()))
    n, copies = len(draws), 2 * len(names) + 1
    repeated = np.tile(draws, copies)
    factors: dict[str, Array] = {}
    for k, name in enumerate(names):
        factor: Array = np.zeros((copies, n))
        factor[2 * k], factor[2 * k + 1] = NUDGE, -NUDGE
        factors[name] = factor.reshape(-1)
    run = whole(nudged(take(piece, repeated), factors), take_steps(course, repeated), exact, False, least)
    gain = pickup(run).reshape(len(piece.x0), copies, n)
    base = gain[:, -1]
    moved = (gain[:, 0:-1:2] - gain[:, 1:-1:2]) / (2.0 * NUDGE)
    none = base[:, None] == 0
    E = np.where(none, 0.0, moved / np.where(none, 1.0, base[:, None]))
    return names, len(moving), np.moveaxis(E, 1, 0), base


def nudged(piece: Piece, factors: dict[str, Array]) -> Piece:
    """A piece with rates and inventories multiplied; factors in ln, by name."""
    D, none = piece.diffusivity, np.zeros(1)
    sides = {name: factor for name, factor in factors.items() if name not in ("diffusion", "inventory")}
    exposures = tuple(
        scale(exposure, factors.get("surface", none), sides, factors.get("inventory", none))
        for exposure in piece.exposures
    )
    faster = Curve(D.T, D.ln + factors.get("diffusion", none))
    return replace(piece, diffusivity=faster, exposures=exposures)


def shares(
    piece: Piece, course: Sequence[Step], exact: bool, draws: Index, least: int
) -> tuple[tuple[str, ...], Array]:
    """What holds the pickup back, as shares (L, I, N); a sample of the draws, repeated over the rest."""
    names, rates, E, base = elasticities(piece, course, exact, draws, least)
    found = to_shares(E, rates, base != 0)
    repeat = np.searchsorted(draws, np.arange(piece.x0.shape[1]), side="right") - 1
    return ("ceiling", *names), found[..., repeat]


def to_shares(E: Array, rates: int, moves: Flags) -> Array:
    """Shares from elasticities.

    Parameters
    ----------
    E : (P, I, n) array
        First the rates, then at most one inventory.
    rates : int
    moves : (I, n) bool array
        Whether anything is taken up or given off.

    Returns
    -------
    (1 + P, I, n) array
        First the ceiling: all of it where more time would bring next to nothing, unless the contact is
        exhausted.
    """
    total = E[:rates].sum(axis=0)
    free = moves & (total >= AT_CEILING)
    found: Array = np.zeros((1 + len(E), *total.shape))
    found[1 : 1 + rates] = np.where(free, E[:rates] / np.where(free, total, 1.0), 0.0)
    used_up = np.zeros(total.shape, dtype=bool)
    if len(E) > rates:
        used_up = moves & ~free & (E[rates] > 0.5)
        found[-1] = used_up
    found[0] = moves & ~free & ~used_up
    return found
