"""Elements that follow a bath: what nothing but themselves, a trace of a wall or a compound holds.

They are moved together, each by its own contacts, at the contents that the leading elements had.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from purity.constants import DILUTE
from purity.contacts import products
from purity.contacts.setting import Setting
from purity.database import Found
from purity.kinetics.advance import HELD_BACK_BY, Pickup, State
from purity.kinetics.exposure import Carrier, Curve, Exposure, Skin, activity_at, ln_at
from purity.kinetics.following import Channel, Followed, follow_along, shares
from purity.kinetics.groups import follow
from purity.kinetics.schedule import Schedule

Array = NDArray[np.float64]
Index = NDArray[np.int64]

#: Steps a segment in the main job.
NODES = 16
#: The same in a cast: seconds to minutes, far from rest.
NODES_CAST = 4
#: ln that stands for no limit: exp of it and of its negative are finite.
NO_LIMIT = 300.0


def total(state: State) -> Array:
    """Return the whole content, dissolved, suspended and at the surface, (I, N) mol per mol of host."""
    x = state.x + state.suspended
    return x if state.surface is None else x + state.surface


def nodes_of(setting: Setting) -> int:
    """Return the number of steps a segment."""
    return NODES_CAST if setting.choice.process == "cast" else NODES


@dataclass(frozen=True, slots=True)
class Part:
    """One group of tied elements and what became of it.

    `behind` are the elements whose course this group took as given; `shared` says what each contact
    gives of another element with one atom of the following one: (contact, element, atoms).
    """

    index: Index
    rows: tuple[int, ...]
    pickup: Pickup
    skins: tuple[tuple[Skin, tuple[Found, ...]], ...]
    behind: tuple[int, ...] = ()
    names: tuple[str, ...] = ()
    shared: tuple[tuple[int, int, float], ...] = ()


@dataclass(frozen=True, slots=True)
class Course:
    """What the leaders did: contents at the end and lowest (I, N), who they are, what could form."""

    end: Array
    lowest: Array
    leaders: set[int]
    seen: Mapping[str, tuple[Array, float]]


@dataclass(frozen=True, slots=True)
class Way:
    """How one element follows.

    Parameters
    ----------
    element : int
    carriers : tuple of (contact, Carrier)
        One atom of the element a unit each, where `linear`.
    cap : (Skin, records) or None
        The compound that takes it out of solution.
    behind : tuple of int
        Leaders whose contents were used.
    shared : tuple of (contact, element, atoms)
        What a trace gives of a leader with one atom of this element.
    linear : bool
        False for an element that crosses in pairs (N2) and has to be integrated for itself.
    """

    element: int
    carriers: tuple[tuple[int, Carrier], ...]
    cap: tuple[Skin, tuple[Found, ...]] | None
    behind: tuple[int, ...]
    shared: tuple[tuple[int, int, float], ...]
    linear: bool


def ways_of(
    exposures: Sequence[Exposure],
    traces: Mapping[int, Sequence[tuple[int, Carrier]]],
    course: Course,
    setting: Setting,
    x: Array,
) -> list[Way]:
    """Return the way of every element that does not lead and that something touches."""
    touched = {int(i) for e in exposures for c in e.carriers for i in np.flatnonzero(c.nu)}
    bound = {int(i) for nu, _ in course.seen.values() for i in np.flatnonzero(nu)}
    following = sorted((touched | set(traces) | bound) - course.leaders)
    return [_way(i, exposures, traces.get(i, ()), course, setting, x) for i in following]


def _way(
    element: int,
    exposures: Sequence[Exposure],
    traces: Sequence[tuple[int, Carrier]],
    course: Course,
    setting: Setting,
    x: Array,
) -> Way:
    own = [
        (c, k)
        for c, e in enumerate(exposures)
        for k in e.carriers
        if np.flatnonzero(k.nu).tolist() == [element]
    ]
    linear = all(k.nu[element] == 1.0 for _, k in own)
    rows = np.arange(len(x))[:, np.newaxis] == element
    cap = products.follower_skin(setting, course.seen, element, course.leaders, np.where(rows, x, course.end))
    least = x[element]
    if cap is not None:
        least = np.minimum(least, np.exp(cap[0].ln_k.ln.min(axis=0)))
    made = [(c, follow(k, element, course.lowest, least)) for c, k in traces]
    behind = {int(i) for _, k in traces for i in np.flatnonzero(k.nu)}
    for found in () if cap is None else cap[1]:
        compound = course.seen.get(found.record.words.get("formula", ""))
        if compound is not None and compound[0][element] > 0:
            behind |= set(np.flatnonzero(compound[0]).tolist())
    shared = {(c, int(i), float(k.nu[i] / k.nu[element])) for c, k in traces for i in np.flatnonzero(k.nu)}
    return Way(
        element,
        (*own, *made),
        cap,
        tuple(sorted((behind - {element}) & course.leaders)),
        tuple(sorted(s for s in shared if s[1] != element)),
        linear,
    )


def move_followers(
    ways: Sequence[Way],
    exposures: Sequence[Exposure],
    setting: Setting,
    schedule: Schedule,
    entered: State,
    history: bool,
    explain: bool = True,
) -> list[Part]:
    """Move all linear followers at once.

    Returns
    -------
    list of Part
        One an element, in the order of `ways`.
    """
    if not ways:
        return []
    index = np.array([way.element for way in ways])
    n = setting.draws.n
    rows, channels = _channels(ways, exposures, setting, n)
    cap = _cap(ways, setting, n)
    whole = total(State(entered.x[index], entered.suspended[index]))
    nodes = nodes_of(setting)
    done = follow_along(whole, channels, cap, schedule, nodes=nodes, history=history)
    error = _error(whole, channels, cap, schedule, nodes, done) if explain else np.zeros(len(ways))
    held = shares(done) if explain and rows else None
    parts = [_part(f, way, rows, done, float(error[f]), held) for f, way in enumerate(ways)]
    return [_skimmed(part, setting) for part in parts]


def _error(
    whole: Array, channels: Sequence[Channel], cap: Curve, schedule: Schedule, nodes: int, done: Followed
) -> Array:
    """Relative error of each follower (95 % of a quarter of the draws lie below), from half the steps."""
    some = slice(None, None, 4)
    if np.ndim(schedule.T) == 2 or np.ndim(schedule.time) == 2:
        schedule = Schedule(*(v[:, some] if v.ndim == 2 else v for v in (schedule.time, schedule.T)))
    part = [_thin(channel, some) for channel in channels]
    half = follow_along(whole[:, some], part, Curve(cap.T, cap.ln[..., some]), schedule, nodes=nodes // 2)
    size = np.maximum(done.total[:, some], 1e-2 * np.maximum(whole[:, some], 1e-12))
    return np.asarray(np.quantile(np.abs(done.total[:, some] - half.total) / (3.0 * size), 0.95, axis=-1))


def _thin(channel: Channel, some: slice) -> Channel:
    curves = (Curve(c.T, c.ln[..., some]) for c in (channel.metal, channel.side, channel.ceiling))
    metal, side, ceiling = curves
    return Channel(metal, side, ceiling, channel.inventory[:, some])


def _skimmed(part: Part, setting: Setting) -> Part:
    """Take the share of the compound that holds a follower out of the bath; a last row of its ledger."""
    share = setting.choice.removal.get(part.skins[0][0].name) if part.skins else None
    if share is None:
        return part
    state = part.pickup.state
    taken = setting.sample(share) * state.suspended
    ledger = np.concatenate([part.pickup.ledger, -taken[np.newaxis]])
    left = replace(state, suspended=state.suspended - taken)
    return replace(part, pickup=replace(part.pickup, state=left, ledger=ledger))


def _channels(
    ways: Sequence[Way], exposures: Sequence[Exposure], setting: Setting, n: int
) -> tuple[list[int], list[Channel]]:
    """One channel a contact for what it holds in excess of the metal, one for what crosses a resistance."""
    rows, channels = [], []
    for c, exposure in enumerate(exposures):
        for held in (True, False):
            mine = [
                [k for s, k in way.carriers if s == c and (k.conductance is None) == held] for way in ways
            ]
            if any(mine):
                rows.append(c)
                channels.append(_channel(mine, ways, exposure, setting, n, held))
    return rows, channels


def _channel(
    mine: Sequence[Sequence[Carrier]],
    ways: Sequence[Way],
    exposure: Exposure,
    setting: Setting,
    n: int,
    held: bool,
) -> Channel:
    T = setting.T
    shape = (len(ways), len(T), n)
    metal, side = np.full(shape, -NO_LIMIT), np.full(shape, NO_LIMIT if held else -NO_LIMIT)
    ceiling, inventory = np.full(shape, -NO_LIMIT), np.full((len(ways), n), np.inf)
    per_mol = np.log(exposure.area / setting.amount)
    for f, (way, carriers) in enumerate(zip(ways, mine, strict=True)):
        if not carriers:
            continue
        rate = Curve(exposure.exchange.T, exposure.exchange.ln[way.element])
        metal[f] = _on(rate, T) + per_mol + np.log(setting.molar_density)
        tops, stores, slopes = [], [], []
        for k in carriers:
            ln_a = np.log(np.maximum(np.stack([np.broadcast_to(activity_at(k, t), (n,)) for t in T]), 1e-300))
            tops.append(np.maximum(ln_a + _on(k.ln_k, T), -NO_LIMIT))
            stores.append(np.inf if k.inventory is None else k.inventory / setting.amount)
            if k.conductance is not None:
                slopes.append(_on(k.conductance, T) - _on(k.ln_k, T))
        ceiling[f] = np.minimum(np.max(np.stack(np.broadcast_arrays(*tops)), axis=0), np.log(DILUTE))
        inventory[f] = np.sum(np.stack(np.broadcast_arrays(*stores)), axis=0)
        if slopes:
            side[f] = np.logaddexp.reduce(np.stack(np.broadcast_arrays(*slopes)), axis=0) + per_mol
    return Channel(Curve(T, metal), Curve(T, side), Curve(T, ceiling), inventory)


def _on(curve: Curve, T: Array) -> Array:
    """Ln of a curve at knots, (K, N)."""
    return np.stack([ln_at(curve, float(t)) for t in T])


def _cap(ways: Sequence[Way], setting: Setting, n: int) -> Curve:
    rows = []
    for way in ways:
        if way.cap is None:
            rows.append(np.full((len(setting.T), n), NO_LIMIT))
        else:
            rows.append(np.broadcast_to(_on(way.cap[0].ln_k, setting.T), (len(setting.T), n)))
    return Curve(setting.T, np.stack(rows))


def _part(
    f: int,
    way: Way,
    rows: Sequence[int],
    done: Followed,
    error: float,
    held: tuple[Array, Array, Array, Array] | None,
) -> Part:
    n = done.total.shape[-1]
    contacts = tuple(dict.fromkeys(c for c, _ in way.carriers))
    ledger = np.zeros((len(contacts), 1, n))
    for row, c in enumerate(rows):
        if c in contacts:
            ledger[contacts.index(c), 0] += done.ledger[row, f]
    formed: tuple[str, ...] = ()
    if way.cap is not None and np.mean(done.total[f] > done.x[f]) >= 0.5:
        formed = (way.cap[0].name,)
    pickup = Pickup(
        State(done.x[f : f + 1], (done.total - done.x)[f : f + 1]),
        ledger,
        None,
        None,
        _shares(f, held)[:, np.newaxis, np.newaxis],
        error,
        np.zeros(n, dtype=bool),
        np.zeros(n, dtype=bool),
        None if done.history is None else done.history[f : f + 1],
        done.times,
        formed,
    )
    names = tuple(dict.fromkeys(k.name for _, k in way.carriers))
    skins = () if way.cap is None else (way.cap,)
    return Part(np.array([way.element]), contacts, pickup, skins, way.behind, names, way.shared)


def _shares(f: int, found: tuple[Array, Array, Array, Array] | None) -> Array:
    """Shares of HELD_BACK_BY for one element, from the channel that moves it most."""
    held = np.zeros(len(HELD_BACK_BY))
    if found is None:
        return held
    _, ceiling, inventory, metal = found
    held[HELD_BACK_BY.index("ceiling")] = ceiling[f]
    held[HELD_BACK_BY.index("inventory")] = inventory[f]
    held[HELD_BACK_BY.index("melt transfer")] = metal[f]
    rest = 1.0 - ceiling[f] - inventory[f] - metal[f]
    held[HELD_BACK_BY.index("gas film")] = max(rest, 0.0)
    return held
