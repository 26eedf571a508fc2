"""Pickup and release of a solid piece under its contacts.

Fick's second law in a slab, cylinder or sphere, D(T(t)), with the surface law of
:mod:`purity.kinetics.exposure` at its surface: one surface content per impurity, on which every contact
acts with its own area (the flux is spread over the whole surface; a face that is touched apart from the
rest is averaged with it). One hold of a piece of uniform content under linear carriers is exact
(:mod:`purity.kinetics.laplace`); everything else goes through modes and implicit stages
(:mod:`purity.kinetics.passage`). Number of steps is fixed, so the error is known by doubling it.

A compound that would form at the surface caps the content there; what comes beyond it stays as a film and
dissolves again while it lasts. Impurities without a diffusivity (ln D not finite) stay at the surface: they
do not enter. Limits: one phase, contents that do not act on each other inside the piece, no moving front.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from purity.errors import OutOfRangeError
from purity.kinetics import laplace
from purity.kinetics.exposure import Array, Curve, Exposure, scale
from purity.kinetics.modes import GRADING, basis, uniform
from purity.kinetics.passage import Passage, finest
from purity.kinetics.pieces import (
    STEPS,
    STEPS_HISTORY,
    Flags,
    Index,
    Piece,
    Step,
    coefficients,
    rates,
    spread,
    steps,
    surface,
    take,
    take_steps,
    with_skins,
)
from purity.kinetics.schedule import Schedule
from purity.scenario import Form

#: Shapes of a form as bodies. "area" is a slab of the thickness that volume and area give.
SHAPES: dict[str, str] = {
    "slab": "slab",
    "area": "slab",
    "cylinder": "cylinder",
    "wire": "cylinder",
    "sphere": "sphere",
    "granules": "sphere",
}
#: Rows (impurities x draws) that pass together, so that work arrays stay in the cache.
ROWS = 4096
#: Draws on which error and shares are estimated.
SAMPLE = 64
#: Error above which the steps are doubled, at most twice.
WANTED = 0.01
#: Step of ln rate in the differences that give elasticities.
NUDGE = 1e-3
#: Elasticity to time below which nothing but the ceiling holds the pickup back.
AT_CEILING = 0.1


@dataclass(frozen=True, slots=True)
class BodyRun:
    """What became of a piece.

    Parameters
    ----------
    mean : (I, N) array
        Mean dissolved contents, mol per mol of host.
    film : (I, N) array
        Held by compounds that formed at the surface, mol per mol of host.
    profile : (I, M, N) array
        Modal amplitudes, for the next step.
    ledger : (C, I, N) array
        Gained through each exposure; sums to the change of mean and film.
    limits : tuple of str
        Names of the rows of `shares`.
    shares : (L, I, N) array
        Shares of what holds the pickup back; evaluated on a sample of the draws and repeated over the rest.
    error : float
        Own estimate of the relative error of the pickup, by refining: 95 % of the draws of the worst
        impurity lie below.
    flags : (N,) bool array
        Draws that were not solved.
    attacked : (N,) bool array
        Draws whose surface left the dilute range.
    history : (I, K, N) array or None
        Contents with film at `times`.
    times : (K,) or (K, N) array or None
        s.
    """

    mean: Array
    film: Array
    profile: Array
    ledger: Array
    limits: tuple[str, ...]
    shares: Array
    error: float
    flags: Flags
    attacked: Flags
    history: Array | None = None
    times: Array | None = None


def body(
    x0: Array,
    profile: Array | None,
    form: Form,
    molar_density: Array,
    amount: Array,
    diffusivity: Curve,
    schedule: Schedule,
    exposures: Sequence[Exposure],
    *,
    nodes: int | None = None,
    history: bool = False,
) -> BodyRun:
    """Carry a piece through a schedule under its contacts.

    Parameters
    ----------
    x0 : (I, N) array
        Mean contents at the start, mol per mol of host.
    profile : (I, M, N) array or None
        Modal amplitudes at the start, as an earlier run gave them; None: uniform.
    form : Form
    molar_density, amount : (N,) or (1,) arrays
        Host, mol/m3; mol in the lot.
    diffusivity : Curve
        m2/s, ``ln`` of shape (I, K, N); not finite: no record.
    schedule : Schedule
    exposures : sequence of Exposure
        Their areas should not add up to more than the surface of the piece.
    nodes : int or None
        Steps of a hold; a ramp takes half as many again.
    history : bool
        Record contents over time.

    Returns
    -------
    BodyRun

    Raises
    ------
    OutOfRangeError
        A shape that is no body, or a thickness that is not positive.
    """
    exposures, _ = with_skins(exposures)
    piece = _piece(x0, profile, form, molar_density, amount, diffusivity, exposures)
    counts = STEPS_HISTORY if history else STEPS
    counts = counts if nodes is None else (nodes, nodes + nodes // 2, counts[2])
    sample = _sample(piece.x0.shape[1])
    for doubling in range(3):
        course = steps(schedule, counts)
        exact = not history and _is_hold(piece, course)
        error, modes_used = 1e-7, 25
        if not exact:
            error, modes_used = _error(piece, course, steps(schedule, _twice(counts)), sample)
        if error <= WANTED or doubling == 2:
            break
        counts = _twice(counts)
    run = _whole(piece, course, exact, history, modes_used)
    limits, shares = _shares(piece, course, exact, sample, modes_used)
    times = np.stack(np.broadcast_arrays(*_times(course))) if history else None
    return BodyRun(
        run.mean,
        run.film,
        run.profile,
        run.ledger,
        limits,
        shares,
        error,
        run.flags,
        run.attacked,
        run.history,
        times,
    )


def _piece(
    x0: Array,
    profile: Array | None,
    form: Form,
    molar_density: Array,
    amount: Array,
    diffusivity: Curve,
    exposures: tuple[Exposure, ...],
) -> Piece:
    if form.shape not in SHAPES:
        raise OutOfRangeError(f"shape {form.shape!r} is no body that impurities diffuse into")
    R = form.volume / form.area if form.shape == "area" else form.half_thickness
    if not R > 0:
        raise OutOfRangeError("the half thickness (or radius) of the pieces must be positive")
    draws = (x0.shape[-1],)
    density, amount = (np.broadcast_to(np.asarray(v, dtype=float), draws) for v in (molar_density, amount))
    return Piece(
        SHAPES[form.shape],
        np.full(draws, R),
        np.asarray(x0, dtype=float),
        profile,
        density,
        amount,
        diffusivity,
        exposures,
    )


def _times(course: Sequence[Step]) -> list[Array]:
    times: list[Array] = [np.asarray(0.0)]
    for step in course:
        times.append(np.asarray(times[-1] + step.length))
    return times


def _twice(counts: tuple[int, int, float]) -> tuple[int, int, float]:
    return 2 * counts[0], 2 * counts[1], counts[2] / 2.0


def _sample(draws: int) -> Index:
    return np.unique(np.linspace(0, draws - 1, min(SAMPLE, draws)).astype(np.int64))


def _is_hold(piece: Piece, course: Sequence[Step]) -> bool:
    """Tell whether the exact hold applies."""
    linear = not any(row for row in surface(take(piece, np.zeros(1, dtype=np.int64))).bath.rows)
    return (
        piece.profile is None
        and linear
        and bool(course)
        and course[-1].part == course[0].part
        and course[0].hold
    )


def _whole(
    piece: Piece, course: Sequence[Step], exact: bool, history: bool = False, least: int = 25
) -> Passage:
    """All draws, in chunks."""
    count, draws = piece.x0.shape
    size = max(64, ROWS // max(count, 1))
    parts = []
    for start in range(0, draws, size):
        chosen = np.arange(start, min(start + size, draws))
        part, path = (piece, course) if draws <= size else (take(piece, chosen), take_steps(course, chosen))
        parts.append(_hold(part, path) if exact else finest(part, path, history=history, least=least))
    if len(parts) == 1:
        return parts[0]
    deepest = max(part.profile.shape[1] for part in parts)
    profiles = [_deepen(piece.shape, part.profile, deepest) for part in parts]
    return Passage(
        np.concatenate([p.mean for p in parts], axis=-1),
        np.concatenate([p.film for p in parts], axis=-1),
        np.concatenate(profiles, axis=-1),
        np.concatenate([p.ledger for p in parts], axis=-1),
        np.concatenate([p.flags for p in parts]),
        np.concatenate([p.attacked for p in parts]),
        any(p.coarse for p in parts),
        np.concatenate([p.history for p in parts if p.history is not None], axis=-1) if history else None,
    )


def _deepen(shape: str, profile: Array, count: int) -> Array:
    from purity.kinetics.modes import carry_over

    if profile.shape[1] == count:
        return profile
    return np.asarray(np.einsum("ab,ibn->ian", carry_over(shape, count, shape, profile.shape[1]), profile))


def _hold(piece: Piece, course: Sequence[Step]) -> Passage:
    """The exact hold."""
    length = np.broadcast_to(np.asarray(sum(step.length for step in course)), piece.x0.shape[1:])
    step = Step(length, course[0].T1, course[0].T1, 0)
    path, contact = spread(piece, step), surface(piece)
    D = path / np.maximum(length, 1e-300)
    of = coefficients(contact.laws, rates(contact.laws, step, 1e8 * piece.density * D / piece.R), step.T1)
    modes_of, g = basis(piece.shape), laplace.GEOMETRY[piece.shape]
    supply, loss = of.supply.sum(axis=0), of.loss.sum(axis=0)
    Fo, whole = path / piece.R**2, piece.R**2 / (g * D)
    Bi = np.clip(loss * whole, laplace.BI_MIN, laplace.BI_MAX)
    # Written with the flux at the start, so that a ceiling without end needs no number.
    drive = (supply - loss * piece.x0) * whole / Bi
    gained = drive * laplace.uptake(piece.shape, Fo, Bi)
    y = uniform(modes_of, piece.x0) + drive * laplace.amplitudes(
        piece.shape, Fo, Bi, modes_of.rate, modes_of.surface
    )
    y[0] = (piece.x0 + gained) / np.sqrt(g)
    if len(piece.exposures) > 1:
        stay = drive * laplace.surface_integral(piece.shape, Fo, Bi) * piece.R**2 / D
        ledger = (of.supply - of.loss * piece.x0) * length - of.loss * stay
        ledger[0] += gained - ledger.sum(axis=0)
    else:
        ledger = np.broadcast_to(gained, (len(piece.exposures), *gained.shape)).copy()
    no = np.zeros(piece.x0.shape[1], dtype=bool)
    top = np.maximum(piece.x0, piece.x0 + drive * laplace.surface_content(piece.shape, Fo, Bi)).max(axis=0)
    mean = piece.x0 + gained
    return Passage(mean, np.zeros_like(mean), np.moveaxis(y, 0, 1), ledger, no, top > 0.02, False, None)


def _pickup(run: Passage) -> Array:
    return np.asarray(run.ledger.sum(axis=0))


def _error(piece: Piece, course: Sequence[Step], finer: Sequence[Step], sample: Index) -> tuple[float, int]:
    """Relative change of the pickup when refined (95 % of a sample lie below), and modes used."""
    few = take(piece, sample)
    rough = _whole(few, take_steps(course, sample), False)
    modes_used = rough.profile.shape[1]
    least = min((n for n in GRADING if n > modes_used), default=modes_used)
    fine = _whole(few, take_steps(finer, sample), False, least=least)
    change = np.abs(_pickup(fine) - _pickup(rough))
    size = np.maximum(np.abs(_pickup(fine)), 1e-3 * np.maximum(few.x0, fine.mean))
    return float(np.quantile(change / np.maximum(size, 1e-300), 0.95, axis=1).max(initial=0.0)), modes_used


def _shares(
    piece: Piece, course: Sequence[Step], exact: bool, sample: Index, least: int
) -> tuple[tuple[str, ...], Array]:
    """Elasticities of the pickup to every rate, as shares, by central differences in the logarithm."""
    carriers = [c for exposure in piece.exposures for c in exposure.carriers]
    sides = sorted({c.limit for c in carriers if c.conductance is not None} - {"surface"})
    stocked = any(c.inventory is not None and np.any(c.inventory > 0) for c in carriers)
    rates_named = ("diffusion", "surface", *sides)
    names = (*rates_named, *(("inventory",) if stocked else ()))
    few, n = take(piece, sample), len(sample)
    copies = 2 * len(names) + 1
    draws = np.tile(np.arange(n), copies)
    factors: dict[str, Array] = {}
    for k, name in enumerate(names):
        factor: Array = np.zeros((copies, n))
        factor[2 * k], factor[2 * k + 1] = NUDGE, -NUDGE
        factors[name] = factor.reshape(-1)
    nudged = _nudged(take(few, draws), factors, rates_named)
    pickup = _pickup(_whole(nudged, take_steps(take_steps(course, sample), draws), exact, False, least))
    pickup = pickup.reshape(len(few.x0), copies, n)
    base = pickup[:, -1]
    moved = (pickup[:, 0:-1:2] - pickup[:, 1:-1:2]) / (2.0 * NUDGE)
    with np.errstate(divide="ignore", invalid="ignore"):
        E = np.where(base[:, None] != 0, moved / base[:, None], 0.0)
    shares = _to_shares(np.moveaxis(E, 1, 0), len(rates_named), base != 0)
    repeat = np.searchsorted(sample, np.arange(piece.x0.shape[1]), side="right") - 1
    return ("ceiling", *names), shares[..., repeat]


def _nudged(piece: Piece, factors: dict[str, Array], rates_named: Sequence[str]) -> Piece:
    D = piece.diffusivity
    none = np.zeros(1)
    exposures = tuple(
        scale(
            exposure,
            factors["surface"],
            {name: factors[name] for name in rates_named[1:]},
            factors.get("inventory", none),
        )
        for exposure in piece.exposures
    )
    faster = Curve(D.T, D.ln + factors["diffusion"])
    return Piece(
        piece.shape, piece.R, piece.x0, piece.profile, piece.density, piece.amount, faster, exposures
    )


def _to_shares(E: Array, count: int, moves: Flags) -> Array:
    """Shares from elasticities (P, I, n); the first `count` are rates, the next an inventory."""
    total = E[:count].sum(axis=0)
    free = total >= AT_CEILING
    shares: Array = np.zeros((1 + len(E), *total.shape))
    shares[1 : 1 + count] = np.where(free, E[:count] / np.where(free, total, 1.0), 0.0)
    if len(E) > count:
        shares[-1] = np.where(~free & moves & (E[count] > 0.5), 1.0, 0.0)
    shares[0] = np.where(~free & moves, 1.0, 0.0) - (shares[-1] if len(E) > count else 0.0)
    return shares
