"""State of a lot and how a step moves it: chooses bath, body or films, never by the contact."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy import bool_
from numpy.typing import NDArray

from purity.errors import OutOfRangeError
from purity.kinetics import elasticity
from purity.kinetics.bath import Case, Path, integrate
from purity.kinetics.body import body
from purity.kinetics.exposure import Array, Curve, Exposure, Film, width
from purity.kinetics.films import content, grow
from purity.kinetics.refine import Refined, refined
from purity.kinetics.schedule import Schedule
from purity.kinetics.stage import Index
from purity.scenario import Form

#: What can hold a pickup back; reports print shop words for them.
HELD_BACK_BY = (
    "ceiling",
    "melt transfer",
    "gas film",
    "surface",
    "wetting",
    "diffusion",
    "supply",
    "inventory",
    "film growth",
    "permeation",
)


@dataclass(frozen=True, slots=True)
class Host:
    """The metal, in numbers.

    Parameters
    ----------
    phase : {"liquid", "solid"}
    molar_density : (N,) array
        mol/m3.
    amount : (N,) array
        mol of host in the lot.
    diffusivity : Curve or None
        m2/s per impurity, ``ln`` of shape (I, K, N); solids only.
    """

    phase: str
    molar_density: Array
    amount: Array
    diffusivity: Curve | None = None


@dataclass(frozen=True, slots=True)
class State:
    """What the lot is now: contents in mol per mol of host.

    Parameters
    ----------
    x : (I, N) array
        Dissolved, mean over the piece.
    suspended : (I, N) array
        Held in compounds.
    profile : (I, M, N) array or None
        Modal amplitudes of a solid piece; None: uniform.
    film : (F, N) array or None
        Film thickness, m, in the order of the films of the last exposure.
    films : tuple of str
        Names of the films in `film`.
    surface : (I, N) array or None
        Content bound at the surface (films, adsorbed), mol per mol of host; melting folds it into x.
    """

    x: Array
    suspended: Array
    profile: Array | None = None
    film: Array | None = None
    films: tuple[str, ...] = ()
    surface: Array | None = None


@dataclass(frozen=True, slots=True)
class Pickup:
    """What a step did.

    Parameters
    ----------
    state : State
        After the step.
    ledger : (C, I, N) array
        Content gained through each contact, mol per mol of host; sums to the change. With a removal
        share a last row holds what was removed.
    keep, gain : (I, N) arrays or None
        The affine map of the whole content, keep x + gain, where the step is linear in every content.
    shares : (L, I, N) array
        Shares of HELD_BACK_BY, from elasticities on a sample of the draws, repeated over the rest.
    error : float
        Own estimate of the relative error, by refining: 95 % of the draws of the worst impurity lie below.
    flags : (N,) bool array
        Draws that were not solved or had two answers.
    attacked : (N,) bool array
        Draws whose metal or surface left the dilute range.
    history : (I, K, N) array or None
        Total contents at the nodes.
    times : (K,) or (K, N) array or None
    formed : tuple of str
        Skins that hold content in at least half of the draws.
    """

    state: State
    ledger: Array
    keep: Array | None
    gain: Array | None
    shares: Array
    error: float
    flags: NDArray[bool_]
    attacked: NDArray[bool_]
    history: Array | None = None
    times: Array | None = None
    formed: tuple[str, ...] = ()


def advance(
    state: State,
    host: Host,
    form: Form | None,
    schedule: Schedule,
    exposures: Sequence[Exposure],
    *,
    history: bool = False,
    nodes: int = 32,
    removal: Mapping[str, Array] | None = None,
    check: bool = True,
    explain: bool = True,
) -> Pickup:
    """Move a lot through one step.

    A liquid is a stirred bath; melting folds suspended and surface contents into it. A solid takes up
    through its surface (with a form and carriers), and grows the films of its exposures.

    Parameters
    ----------
    state : State
    host : Host
    form : Form or None
        None for a bath.
    schedule : Schedule
    exposures : sequence of Exposure
    history : bool
        Record contents at the nodes.
    nodes : int
        Steps a segment.
    removal : mapping of str to (N,) array, or None
        Share of a skin, by its name, that skimming, floating or filtering takes out of a bath at the end.
    check : bool
        Estimate the error of a bath, redo what is wrong, and find what holds the pickup back. Without,
        `error` and `shares` are 0: for a first look at less than half the cost.
    explain : bool
        Find what holds the pickup of a bath back. Without, `shares` are 0 and all else is the same.

    Returns
    -------
    Pickup

    Raises
    ------
    OutOfRangeError
        A solid under carriers without a form.
    """
    if host.phase == "liquid":
        return _bath(state, host, schedule, exposures, history, nodes, removal, check, explain)
    return _solid(state, host, form, schedule, exposures, history)


def _bath(
    state: State,
    host: Host,
    schedule: Schedule,
    exposures: Sequence[Exposure],
    history: bool,
    nodes: int,
    removal: Mapping[str, Array] | None,
    check: bool,
    explain: bool,
) -> Pickup:
    start = state.x + state.suspended
    start = start if state.surface is None else start + state.surface
    total = _wide(start, host, schedule, exposures)
    case = Case(total, host.molar_density, host.amount, schedule, tuple(exposures))
    shares = np.zeros((len(HELD_BACK_BY), *total.shape))
    if check:
        run = refined(case, nodes=nodes, history=history)
    else:
        path = integrate(case, nodes=nodes, history=history)
        run = Refined(path, 0.0, ~path.solved)
    if check and explain:
        sample = elasticity.sample(total.shape[-1])
        names, E, moves = elasticity.elasticities(case.take(sample))
        held_back = elasticity.shares(names, E, moves)
        shares = _by_limit(("ceiling", *names), held_back, sample, total.shape[-1])
    return _after_bath(run, shares, exposures, removal)


def _after_bath(
    run: Refined, shares: Array, exposures: Sequence[Exposure], removal: Mapping[str, Array] | None
) -> Pickup:
    path = run.path
    suspended, ledger = path.suspended, path.ledger
    if removal is not None:
        taken = np.minimum(_removed(path, exposures, removal), suspended)
        suspended, ledger = suspended - taken, np.concatenate([ledger, -taken[None]])
    return Pickup(
        State(path.x, suspended),
        ledger,
        path.keep,
        path.gain,
        shares,
        run.error,
        run.doubtful,
        path.attacked,
        path.history,
        path.times,
        tuple(name for name, held in path.skins.items() if np.mean(held > 0) >= 0.5),
    )


def _removed(path: Path, exposures: Sequence[Exposure], removal: Mapping[str, Array]) -> Array:
    """What is taken out with the skins, (I, N) mol per mol of host."""
    taken = np.zeros_like(path.x)
    nu = {skin.name: skin.nu for exposure in exposures for skin in exposure.skins}
    for name, units in path.skins.items():
        taken += nu[name][:, None] * (removal.get(name, np.zeros(1)) * units)
    return taken


def _wide(start: Array, host: Host, schedule: Schedule, exposures: Sequence[Exposure]) -> Array:
    """Spread the contents over as many draws as anything in the step has."""
    time, T = np.asarray(schedule.time), np.asarray(schedule.T)
    sizes = [start.shape[-1], host.molar_density.shape[-1], host.amount.shape[-1]]
    sizes += [values.shape[-1] for values in (time, T) if values.ndim == 2]
    draws = max(sizes + [width(exposure) for exposure in exposures])
    return np.array(np.broadcast_to(start, (len(start), draws)))


def _by_limit(names: Sequence[str], found: Array, sample: Index, draws: int) -> Array:
    """Put shares in the order of HELD_BACK_BY and repeat those of a sample over all draws."""
    repeat = np.searchsorted(sample, np.arange(draws), side="right") - 1
    shares = np.zeros((len(HELD_BACK_BY), found.shape[1], draws))
    for name, values in zip(names, found, strict=True):
        shares[HELD_BACK_BY.index(name)] += values[:, repeat]
    return shares


def _solid(
    state: State,
    host: Host,
    form: Form | None,
    schedule: Schedule,
    exposures: Sequence[Exposure],
    history: bool,
) -> Pickup:
    x = _wide(state.x, host, schedule, exposures)
    draws = x.shape[-1]
    carried = any(exposure.carriers and not exposure.films for exposure in exposures)
    if carried and form is None:
        raise OutOfRangeError("a solid that takes up through its surface needs a form (shape and size)")
    surface = np.zeros_like(x) if state.surface is None else np.broadcast_to(state.surface, x.shape)
    names, film, bound = _films(state, host, schedule, exposures, x.shape)
    suspended = np.array(np.broadcast_to(state.suspended, x.shape))
    found = Pickup(
        State(x, suspended, state.profile, film, names, surface + bound.sum(axis=0)),
        bound,
        None,
        None,
        np.zeros((len(HELD_BACK_BY), len(x), draws)),
        0.0,
        np.zeros(draws, dtype=bool),
        np.zeros(draws, dtype=bool),
    )
    if carried and form is not None:
        found = _body(found, host, form, schedule, exposures, history)
    return _with_film_growth(found, bound)


def _body(
    before: Pickup,
    host: Host,
    form: Form,
    schedule: Schedule,
    exposures: Sequence[Exposure],
    history: bool,
) -> Pickup:
    """Let a solid take up through its surface."""
    state, (count, draws) = before.state, before.state.x.shape
    unknown = Curve(np.atleast_1d(np.asarray(schedule.T).flat[0]), np.full((count, 1, 1), -np.inf))
    run = body(
        state.x,
        state.profile,
        form,
        host.molar_density,
        host.amount,
        host.diffusivity or unknown,
        schedule,
        [replace(exposure, carriers=()) if exposure.films else exposure for exposure in exposures],
        bound=state.surface,
        history=history,
    )
    skins = {skin.name: skin.nu > 0 for exposure in exposures for skin in exposure.skins}
    formed = tuple(name for name, bound in skins.items() if np.mean((run.film[bound] > 0).all(axis=0)) >= 0.5)
    shares = _by_limit(run.limits, run.shares, np.arange(draws), draws)
    return replace(
        before,
        state=replace(state, x=run.mean, profile=run.profile, surface=run.film),
        ledger=before.ledger + run.ledger,
        shares=shares,
        error=run.error,
        flags=run.flags,
        attacked=run.attacked,
        history=run.history,
        times=run.times,
        formed=formed,
    )


def _films(
    state: State, host: Host, schedule: Schedule, exposures: Sequence[Exposure], shape: tuple[int, int]
) -> tuple[tuple[str, ...], Array | None, Array]:
    """Grow the films of the exposures: names, thickness (F, N), content bound by each exposure (C, I, N)."""
    bound = np.zeros((len(exposures), *shape))
    thickness = {}
    if state.film is not None:
        thickness = {
            name: np.broadcast_to(x, shape[1:]) for name, x in zip(state.films, state.film, strict=True)
        }
    for c, exposure in enumerate(exposures):
        for film in exposure.films:
            x0 = thickness.get(film.name, np.zeros(shape[1]))
            x = np.broadcast_to(grow(film.law, film.parameters, x0, schedule), shape[1:])
            share = _fed(film, x - x0, exposure, host)
            x = x0 + share * (x - x0)
            bound[c] += content(film, x - x0, exposure.area, host.amount)
            thickness[film.name] = x
    names = tuple(thickness)
    return names, np.stack([thickness[name] for name in names]) if names else None, bound


def _fed(film: Film, growth: Array, exposure: Exposure, host: Host) -> Array:
    """Share of a film's growth that the supply of its contact can feed, (N,).

    The carriers of a contact with films are its supply: what comes through a package and what was shut in.
    An element that none of them holds is without limit.
    """
    share = np.ones(1)
    wanted = content(film, growth, exposure.area, host.amount)
    for i in np.flatnonzero(film.nu):
        stores = [c for c in exposure.carriers if c.nu[i] > 0 and c.inventory is not None]
        if stores:
            there = sum(
                (c.nu[i] * c.inventory / host.amount for c in stores if c.inventory is not None), np.zeros(1)
            )
            share = np.minimum(share, there / np.maximum(wanted[i], np.finfo(float).tiny))
    return np.asarray(share)


def _with_film_growth(found: Pickup, bound: Array) -> Pickup:
    """Share what holds the pickup back between the growth of films and the rest."""
    grown = np.abs(bound).sum(axis=0)
    rest = np.abs(found.ledger - bound).sum(axis=0)
    part = grown / np.maximum(grown + rest, np.finfo(float).tiny)
    shares = found.shares * (1 - part)
    shares[HELD_BACK_BY.index("film growth")] += part
    return replace(found, shares=shares)
