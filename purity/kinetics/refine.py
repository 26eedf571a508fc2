"""A bath with its own error, from half as many steps, and the draws that moved done again with more."""

from __future__ import annotations

from dataclasses import dataclass, fields, replace

import numpy as np

from purity.kinetics.bath import Case, Path, integrate
from purity.kinetics.exposure import Array
from purity.kinetics.flux_newton import Flags
from purity.kinetics.stage import Index, is_linear

#: Relative error above which a draw is done again with twice as many steps.
WANTED = 0.02
#: A large bath is judged by every so many of its draws, if that leaves enough of them; where these are
#: not good enough, or end elsewhere in a bath that can have two answers, all are checked.
EVERY, ENOUGH = 4, 256
#: Change on doubling the steps over the error that is left, for a method of second order.
ORDER = 3.0
#: Part of its start below which the rest of a content is not followed closely.
REST = 0.1
#: Relative error that tells another answer from the same one.
OTHER = 0.1


@dataclass(frozen=True, slots=True)
class Refined:
    """A path, its relative error (95 % of the draws of the worst impurity lie below) and doubtful draws.

    `doubtful` are draws that no method solved, and draws of a bath that can have two answers in which
    more steps end elsewhere.
    """

    path: Path
    error: float
    doubtful: Flags


def refined(case: Case, *, nodes: int = 32, history: bool = False) -> Refined:
    """Integrate a bath and check it.

    Parameters
    ----------
    case : Case
    nodes : int
        Steps a segment of the answer; half as many give the check.
    history : bool
        Keep contents over time; no draw is then done again.

    Returns
    -------
    Refined
    """
    path = integrate(case, nodes=nodes, history=history)
    if _exact(case):
        return Refined(path, 0.0, ~path.solved)
    few_steps = max(nodes // 2, 2)
    some = np.arange(0, case.total.shape[-1], EVERY)
    if len(some) >= ENOUGH:
        part = case.take(some)
        seen = _error(part, integrate(part, nodes=few_steps), _take(path, some))
        error = float(np.quantile(seen, 0.95, axis=-1).max(initial=0.0))
        elsewhere = path.two_roots and bool((seen > OTHER).any())
        if error < WANTED and not elsewhere:
            return Refined(path, error, ~path.solved)
    wrong = _error(case, integrate(case, nodes=few_steps), path)
    again = np.flatnonzero((wrong > WANTED).any(axis=0))
    if len(again) and not history:
        few = case.take(again)
        better = integrate(few, nodes=2 * nodes)
        wrong[:, again] = _error(few, _take(path, again), better)
        path = _put(path, again, better)
    error = float(np.quantile(wrong, 0.95, axis=-1).max(initial=0.0))
    doubtful = ~path.solved
    if path.two_roots:
        doubtful |= (wrong > OTHER).any(axis=0)
    return Refined(path, error, doubtful)


def _exact(case: Case) -> bool:
    """One temperature and linear carriers: the steps are exact, whatever their number."""
    still = bool(np.all(np.asarray(case.schedule.T) == np.asarray(case.schedule.T)[:1]))
    return still and all(
        is_linear(carrier) and not exposure.skins
        for exposure in case.exposures
        for carrier in exposure.carriers
        if carrier.nu.any()
    )


def _error(case: Case, rough: Path, fine: Path) -> Array:
    """Relative error of the finer path."""
    size = np.maximum(np.maximum(fine.total, REST * case.total), np.finfo(float).tiny)
    return np.asarray(np.abs(fine.total - rough.total) / (ORDER * size))


#: Fields of a path that have a value a draw.
_OF_DRAWS = ("x", "suspended", "ledger", "solved", "crossed", "left")


def _take(path: Path, draws: Index) -> Path:
    return replace(path, **{name: getattr(path, name)[..., draws] for name in _OF_DRAWS})


def _put(path: Path, draws: Index, part: Path) -> Path:
    merged = {field.name: getattr(path, field.name) for field in fields(path)}
    for name in _OF_DRAWS:
        merged[name] = merged[name].copy()
        merged[name][..., draws] = getattr(part, name)
    if path.keep is not None and path.gain is not None and part.keep is not None and part.gain is not None:
        merged["keep"], merged["gain"] = path.keep.copy(), path.gain.copy()
        merged["keep"][:, draws], merged["gain"][:, draws] = part.keep, part.gain
    else:
        merged["keep"] = merged["gain"] = None
    merged["skins"] = {name: amount.copy() for name, amount in path.skins.items()}
    for name, amount in part.skins.items():
        merged["skins"][name][draws] = amount
    return Path(**merged)
