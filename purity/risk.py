"""Allowance, spent, words and ranking: numbers and arrays in, ranks out.

spent = (median end - median start) / (limit - median start). Choices rank by the chance that any element
passes its limit, then by spent. Two choices are told apart only where their difference on shared draws is
larger than its sampling error. Unknown never wins: what is not fully assessed, or attacked, has no rank.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from purity.result import Result, StateWord, Word
from purity.uncertainty import chance_of, difference, median_difference

Array = NDArray[np.float64]
Bools = NDArray[np.bool_]

#: Upper ends of the words for spent.
WORDS: tuple[tuple[float, Word], ...] = ((0.1, "ample"), (0.5, "fair"), (1.0, "tight"))


def spent(start: float, end: float, limit: float) -> float | None:
    """Return the share of the allowance that a step uses.

    Parameters
    ----------
    start, end : float
        Median contents before and after, in the unit of `limit`.
    limit : float

    Returns
    -------
    float or None
        Negative where the lot gives off; None where nothing is allowed at the start (limit <= start).
    """
    return (end - start) / (limit - start) if limit > start else None


def word(start: float, end: float, limit: float) -> Word:
    """Return the word for the share of the allowance spent.

    Parameters
    ----------
    start, end, limit : float
        As in :func:`spent`.

    Returns
    -------
    str
        gives off (<= 0), ample (< 0.1), fair (< 0.5), tight (< 1), over (>= 1), closed (nothing
        allowed at the start).
    """
    share = spent(start, end, limit)
    if share is None:
        return "closed"
    if share <= 0:
        return "gives off"
    return next((name for end_of, name in WORDS if share < end_of), "over")


def margin(upper: float, limit: float) -> float:
    """Return what is left between the upper 95 % content and the limit (negative: passed)."""
    return limit - upper


def load(start: float, end: Array, limit: float) -> Array:
    """Return spent per draw, for comparing choices.

    Its median is :func:`spent` of the medians. Where nothing is allowed at the start it is end / limit,
    which also is 1 at the limit.

    Parameters
    ----------
    start : float
        Median content before.
    end : (N,) array
    limit : float
        Above 0.

    Returns
    -------
    (N,) array
    """
    return np.asarray((end - start) / (limit - start) if limit > start else end / limit)


def state(assessed: int, of: int, *, attacked: bool) -> StateWord:
    """Return where a choice stands: ranked only if everything that matters was assessed."""
    if attacked:
        return "attacked"
    return "ranked" if assessed == of else "not ranked"


@dataclass(frozen=True, slots=True)
class Standing:
    """Place of one choice among those of its step.

    Parameters
    ----------
    rank : int or None
        From 1; ties share a rank and the next one is skipped. None: not ranked.
    tied_with : tuple of int
        Positions of the choices it cannot be told from.
    chance_over, chance_error : float or None
        That any element passes its limit; of the assessed elements only where not ranked.
    deciding : int or None
        Position of the element with the highest chance, then the most spent.
    spent : float or None
        Largest median of spent over the elements.
    """

    rank: int | None
    tied_with: tuple[int, ...]
    chance_over: float | None
    chance_error: float | None
    deciding: int | None
    spent: float | None


def standings(
    states: Sequence[StateWord], over: Sequence[Bools], loads: Sequence[Array], blocks: int
) -> tuple[Standing, ...]:
    """Rank the choices of a step (or routes) on shared draws.

    Parameters
    ----------
    states : sequence of str
        One a choice.
    over : sequence of (E, N) bool arrays
        True where the element passes its limit; E may differ and may be 0.
    loads : sequence of (E, N) arrays
        :func:`load` of the same elements.
    blocks : int
        Replicates in the draws.

    Returns
    -------
    tuple of Standing
        In the order of the choices.
    """
    alone = [_alone(o, s, blocks) for o, s in zip(over, loads, strict=True)]
    entered = [j for j, name in enumerate(states) if name == "ranked" and alone[j].chance_over is not None]
    any_over = {j: np.any(over[j], axis=0) for j in entered}
    worst = {j: np.asarray(loads[j][int(np.argmax(np.median(loads[j], axis=-1)))]) for j in entered}
    found = list(alone)
    place = 1
    for group in _groups(entered, alone, any_over, worst, blocks):
        for j in group:
            tied = tuple(k for k in group if k != j)
            one = alone[j]
            found[j] = Standing(place, tied, one.chance_over, one.chance_error, one.deciding, one.spent)
        place += len(group)
    return tuple(found)


def _decider(over: Bools, loads: Array) -> int:
    chances, medians = np.mean(over, axis=-1), np.median(loads, axis=-1)
    return int(np.lexsort((-medians, -chances))[0])


def _alone(over: Bools, loads: Array, blocks: int) -> Standing:
    if not len(over):
        return Standing(None, (), None, None, None, None)
    chance, error = chance_of(np.any(over, axis=0), blocks)
    spent_most = float(np.max(np.median(loads, axis=-1)))
    return Standing(None, (), chance, error, _decider(over, loads), spent_most)


def _groups(
    entered: list[int], alone: list[Standing], over: dict[int, Bools], worst: dict[int, Array], blocks: int
) -> list[list[int]]:
    """Tied groups, best first: those that chance cannot part are parted by spent, else they are tied."""

    def parted_by_chance(j: int, k: int) -> bool:
        apart, error = difference(over[j].astype(float), over[k].astype(float), blocks)
        return abs(apart) > error

    def parted_by_spent(j: int, k: int) -> bool:
        apart, error = median_difference(worst[j], worst[k], blocks)
        return abs(apart) > error

    groups: list[list[int]] = []
    for level in _split(sorted(entered, key=lambda j: alone[j].chance_over or 0.0), parted_by_chance):
        groups += _split(sorted(level, key=lambda j: float(np.median(worst[j]))), parted_by_spent)
    return groups


def _split(ordered: list[int], parted: Callable[[int, int], bool]) -> list[list[int]]:
    """Cut an ordered list where an entry differs from the first of its group."""
    groups: list[list[int]] = []
    for j in ordered:
        if groups and not parted(groups[-1][0], j):
            groups[-1].append(j)
        else:
            groups.append([j])
    return groups


def beyond(result: Result) -> tuple[str, ...]:
    """Return the steps in which no ranked choice keeps its chance over within the accepted risk."""
    return tuple(
        step.name
        for step in result.steps
        if not any(
            choice.rank is not None
            and choice.chance_over is not None
            and choice.chance_over <= result.scenario.risk
            for choice in step.choices
        )
    )
