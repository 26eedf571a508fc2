"""One passage of a piece through a course of steps: SDIRK stages, ledger, inventories, profile."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from purity.constants import DILUTE, R
from purity.kinetics import laplace, modes
from purity.kinetics.exposure import Array
from purity.kinetics.modes import CARRY, GAMMA
from purity.kinetics.pieces import (
    MOST_BI,
    SKIN,
    Flags,
    Interior,
    Piece,
    Rates,
    Step,
    coefficients,
    interior,
    layer_share,
    rates,
    spread,
    take,
    take_steps,
)
from purity.kinetics.stage import Coefficients
from purity.kinetics.surface import Action, Surface, act, surface

#: A part of a schedule that gives more than this share of the uptake must be resolved by the basis.
MATTERS = 0.01
#: Smallest Bi: below it nothing passes.
LEAST_BI = 1e-250
#: Rows (impurities x draws) that pass together, so that work arrays stay in the cache.
ROWS = 4096
#: Activation energy (J/mol) by which the first stage of a ramp is placed. The order of the method does not
#: depend on it, and one value for all keeps every draw apart from its neighbours.
TYPICAL = 100e3


@dataclass(frozen=True, slots=True)
class Passage:
    """What became of a piece.

    Parameters
    ----------
    mean : (I, N) array
        Mean dissolved content.
    film : (I, N) array
        Held by skins, mol per mol of host.
    profile : (I, M, N) array
        Modal amplitudes of the piece.
    ledger : (S, I, N) array
        Gained through each contact.
    flags, attacked : (N,) bool arrays
        Not solved; surface beyond the dilute range.
    needs : int
        Modes that resolve what is gained last.
    history : (I, K, N) array or None
    """

    mean: Array
    film: Array
    profile: Array
    ledger: Array
    flags: Flags
    attacked: Flags
    needs: int
    history: Array | None


@dataclass(slots=True)
class _State:
    """Where a passage stands."""

    y: Array
    mean: Array
    ledger: Array
    film: Array
    peak: Array


def carry(piece: Piece, course: Sequence[Step], count: int = 25, *, history: bool = False) -> Passage:
    """Carry a piece through a course of steps.

    Parameters
    ----------
    piece : Piece
    course : sequence of Step
    count : {25, 33, 41}
        Modes.
    history : bool
        Record contents (with skins) at the ends of the steps.
    """
    paths = [spread(piece, step) for step in course]
    share = layer_share(piece, np.asarray(sum(paths)))
    inside, contact = interior(piece, count, share), surface(piece)
    state = _begin(piece, inside, len(piece.exposures))
    record = [state.mean + state.film]
    gained: list[Array] = []
    last: tuple[Step, Rates, tuple[Coefficients, Coefficients]] | None = None
    scale = (piece.R * share) ** 2
    for step, path in zip(course, paths, strict=True):
        d, before = path / scale, state.mean + state.film
        laws = _laws(piece, contact, step, path, share, last)
        last = (step, *laws)
        _advance(piece, inside, contact, state, step, d, laws[1])
        gained.append(np.abs(state.mean + state.film - before))
        if history:
            record.append(state.mean + state.film)
    return Passage(
        state.mean,
        np.maximum(state.film, 0.0),
        _profile(piece, inside, state, count),
        state.ledger,
        ~contact.solved,
        np.asarray(state.peak > DILUTE),
        _needed(gained, [path / scale for path in paths], count),
        np.stack(record, axis=1) if history else None,
    )


def _begin(piece: Piece, inside: Interior, contacts: int) -> _State:
    count, draws = piece.x0.shape
    if piece.profile is None:
        plain = np.where(inside.share < 1.0, 1.0, inside.modes.g)
        y: Array = np.zeros((len(inside.modes.rate), count, draws))
        y[0] = piece.x0 / np.sqrt(plain)
    else:
        y = np.moveaxis(piece.profile, 1, 0)
        matrix = modes.carry_over(piece.shape, len(inside.modes.rate), piece.shape, len(y))
        y = np.tensordot(matrix, y, axes=1)
    empty = np.zeros((contacts, count, draws))
    flat = np.ascontiguousarray(y.reshape(len(y), -1))
    return _State(flat, piece.x0.copy(), empty, _held(piece), np.zeros(draws))


def _held(piece: Piece) -> Array:
    """What skins hold at the start, (I, N)."""
    held: Array = np.zeros(piece.x0.shape)
    for exposure in piece.exposures:
        for carrier in exposure.carriers:
            if carrier.limit == SKIN and carrier.inventory is not None:
                held += carrier.nu[:, None] * (carrier.inventory / piece.amount)
    return held


def _laws(
    piece: Piece,
    contact: Surface,
    step: Step,
    path: Array,
    share: Array,
    last: tuple[Step, Rates, tuple[Coefficients, Coefficients]] | None,
) -> tuple[Rates, tuple[Coefficients, Coefficients]]:
    """Coefficients of both stages; kept through a hold."""
    if last is not None and step.hold and last[0].hold and last[0].part == step.part:
        return last[1], last[2]
    length = np.maximum(step.length, 1e-300)
    most = MOST_BI * piece.density * (path / length) / (piece.R * share)
    mean = rates(contact.laws, step, np.maximum(most, 1e-200))
    second = coefficients(contact.laws, mean, step.T2)
    if step.hold:
        return mean, (second, second)
    return mean, (
        coefficients(contact.laws, mean, step.T1 + _place(step) * (step.T2 - step.T1)),
        second,
    )


def _place(step: Step) -> Array:
    """Fraction of the time of a step at which the first stage lies: gamma of a typical Fo."""
    b = TYPICAL / R * (1.0 / step.T1 - 1.0 / step.T2)
    flat = np.abs(b) < 1e-6
    b = np.where(flat, 1.0, b)
    return np.asarray(np.where(flat, GAMMA, np.log1p(GAMMA * np.expm1(b)) / b))


def _advance(
    piece: Piece,
    inside: Interior,
    contact: Surface,
    state: _State,
    step: Step,
    d: Array,
    laws: tuple[Coefficients, Coefficients],
) -> None:
    shape = piece.x0.shape
    length = np.broadcast_to(step.length, shape[1:])
    start, before = state.y, contact.points
    most = contact.most(length)
    y, _, first = _stage(inside, contact, laws[0], start, d, GAMMA, length, most)
    contact.points = first.points
    right = (1.0 - CARRY) * start + CARRY * y
    later = (most - (1.0 - GAMMA) * first.flux) / GAMMA
    state.y, H, second = _stage(inside, contact, laws[1], right, d, GAMMA, length, later)
    # A law of logarithms has no answer below nothing: there, one backward Euler step.
    steep = np.any(H[contact.tied] <= 0.0, axis=0) | ~second.solved
    if steep.any() and len(contact.tied):
        contact.points = before
        whole_step, _, only = _stage(inside, contact, laws[1], start, d, 1.0, length, most)
        state.y = np.where(np.tile(steep, shape[0]), whole_step, state.y)
        first, second = first.where(steep, only), second.where(steep, only)
    contact.points = second.points
    contact.solved &= second.solved
    gain = length * ((1.0 - GAMMA) * first.gain + GAMMA * second.gain)
    state.mean = state.mean + gain.sum(axis=0)
    state.ledger = state.ledger + gain
    state.peak = np.maximum(state.peak, second.x[0].max(axis=0))
    _settle(piece, contact, state, length * ((1.0 - GAMMA) * first.flux + GAMMA * second.flux))


def _stage(
    inside: Interior,
    contact: Surface,
    law: Coefficients,
    right: Array,
    d: Array,
    weight: float,
    length: Array,
    most: Array,
) -> tuple[Array, Array, Action]:
    """One implicit stage: amplitudes, surface contents without flux, and what the contacts do."""
    span, shape = weight * length, d.shape
    response = modes.respond(inside.modes, d.reshape(-1), weight)
    rest, H = modes.still(inside.modes, response, right)
    H = H.reshape(shape)
    action = act(contact, law, H, response.reach.reshape(shape) * inside.factor, span, most)
    flux_step = span * inside.factor * action.gain.sum(axis=0)
    return modes.push(inside.modes, response, rest, flux_step.reshape(-1)), H, action


def _settle(piece: Piece, contact: Surface, state: _State, passed: Array) -> None:
    """Take what the rows passed (mol/m2) off the inventories; what skins took stays a film."""
    bath = contact.bath
    for c, row in enumerate(bath.rows):
        place = bath.place[c] - 1
        units = bath.area[place] * passed[c]
        if row.inventory is not None:
            contact.left[c] = np.maximum(contact.left[c] - units, 0.0)
        if row.limit == SKIN:
            held = row.nu[:, None] * (units / piece.amount)
            state.film = state.film - held
            state.ledger[place] = state.ledger[place] - held


def _profile(piece: Piece, inside: Interior, state: _State, count: int) -> Array:
    """Amplitudes of the piece from those of its layers."""
    y = state.y.reshape(count, *piece.x0.shape)
    whole = modes.basis(piece.shape, count)
    for share in np.unique(inside.share[inside.share < 1.0]):
        rows = inside.share == share
        deviation = y[:, rows]
        deviation[0] -= piece.x0[rows]
        y[:, rows] = modes.carry_over(piece.shape, count, "slab", count, float(share)) @ deviation
    y[0] = state.mean / np.sqrt(whole.g)
    return np.ascontiguousarray(np.moveaxis(y, 0, 1))


def _needed(gained: Sequence[Array], Fo: Sequence[Array], count: int) -> int:
    """Modes that resolve every step that matters: what is gained last has the least time to spread."""
    matters = MATTERS * np.asarray(sum(gained))
    ahead: Array = np.zeros(matters.shape)
    thinnest = np.inf
    for gain, d in zip(reversed(gained), reversed(Fo), strict=True):
        ahead = ahead + d
        thinnest = min(thinnest, float(np.min(ahead, where=gain > matters, initial=np.inf)))
        if np.all(ahead >= modes.GRADING[min(modes.GRADING)][2]):
            break
    return next(n for n, grading in modes.GRADING.items() if n >= count and thinnest >= grading[2])


def finest(piece: Piece, course: Sequence[Step], *, history: bool = False, least: int = 25) -> Passage:
    """Carry a piece with as many modes as what it gains last needs."""
    passage = carry(piece, course, least, history=history)
    if passage.needs > least:
        return carry(piece, course, passage.needs, history=history)
    return passage


def is_hold(piece: Piece, course: Sequence[Step]) -> bool:
    """Tell whether the exact hold applies: one temperature, a uniform start, linear carriers."""
    rows = surface(take(piece, np.zeros(1, dtype=np.int64))).bath.rows
    one_T = all(step.hold and np.array_equal(step.T1, course[0].T1) for step in course)
    return piece.profile is None and not rows and one_T


def whole(
    piece: Piece, course: Sequence[Step], exact: bool, history: bool = False, least: int = 25
) -> Passage:
    """All draws, in chunks, with the modes that the most demanding of them needs."""
    count, draws = piece.x0.shape
    size = max(64, ROWS // max(count, 1))
    parts = []
    for start in range(0, draws, size):
        chosen = np.arange(start, min(start + size, draws))
        part, path = (piece, course) if draws <= size else (take(piece, chosen), take_steps(course, chosen))
        parts.append(hold(part, path) if exact else finest(part, path, history=history, least=least))
    deepest = max(part.profile.shape[1] for part in parts)
    if any(part.profile.shape[1] < deepest for part in parts):
        return whole(piece, course, exact, history, deepest)
    if len(parts) == 1:
        return parts[0]
    return Passage(
        np.concatenate([p.mean for p in parts], axis=-1),
        np.concatenate([p.film for p in parts], axis=-1),
        np.concatenate([p.profile for p in parts], axis=-1),
        np.concatenate([p.ledger for p in parts], axis=-1),
        np.concatenate([p.flags for p in parts]),
        np.concatenate([p.attacked for p in parts]),
        deepest,
        np.concatenate([p.history for p in parts if p.history is not None], axis=-1) if history else None,
    )


def hold(piece: Piece, course: Sequence[Step]) -> Passage:
    """The exact hold."""
    length = np.broadcast_to(np.asarray(sum(step.length for step in course)), piece.x0.shape[1:])
    step, contact = Step(np.ones(1), course[0].T1, course[0].T1, 0), surface(piece)
    D = spread(piece, step)
    of = coefficients(contact.laws, rates(contact.laws, step, MOST_BI * piece.density * D / piece.R), step.T1)
    modes_of, g = modes.basis(piece.shape), laplace.GEOMETRY[piece.shape]
    supply, loss = of.supply.sum(axis=0), of.loss.sum(axis=0)
    Fo, scale = D * length / piece.R**2, piece.R**2 / (g * D)
    Bi = np.clip(loss * scale, LEAST_BI, laplace.BI_MAX)
    # Written with the flux at the start, so that a ceiling without end needs no number.
    drive = (supply - loss * piece.x0) * scale / Bi
    gained = drive * laplace.uptake(piece.shape, Fo, Bi)
    y = modes.uniform(modes_of, piece.x0) + drive * laplace.amplitudes(
        piece.shape, Fo, Bi, modes_of.rate, modes_of.surface
    )
    y[0] = (piece.x0 + gained) / np.sqrt(g)
    if len(piece.exposures) > 1:
        stay = drive * laplace.surface_integral(piece.shape, Fo, Bi) * piece.R**2 / D
        ledger = (of.supply - of.loss * piece.x0) * length - of.loss * stay
        ledger += (gained - ledger.sum(axis=0)) * (of.loss / np.maximum(loss, 1e-300))
    else:
        ledger = np.broadcast_to(gained, (len(piece.exposures), *gained.shape)).copy()
    no = np.zeros(piece.x0.shape[1], dtype=bool)
    top = np.maximum(piece.x0, piece.x0 + drive * laplace.surface_content(piece.shape, Fo, Bi)).max(axis=0)
    mean = piece.x0 + gained
    return Passage(mean, np.zeros_like(mean), np.moveaxis(y, 0, 1), ledger, no, top > DILUTE, 25, None)
