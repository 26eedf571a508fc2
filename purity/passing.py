"""One choice of one step: the lot goes in as it is, and comes out as kinetics leaves it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from purity.contacts import expose
from purity.contacts.cast import course, segregation
from purity.contacts.gas import host_evaporation
from purity.contacts.parcel import Parcel, parcel
from purity.contacts.setting import Exposed, Setting
from purity.contacts.wall import wetting
from purity.database import Found, Gap, Library, phase_at
from purity.draws import Draws, normal, sample
from purity.errors import MissingRecordError
from purity.finishing import Done, extra_rows, finish, removed, strip, without_partners
from purity.followers import Part, total
from purity.kinetics.advance import HELD_BACK_BY, State
from purity.kinetics.arrhenius import curve_integral
from purity.kinetics.exposure import Curve
from purity.kinetics.schedule import Schedule, segments
from purity.moving import move
from purity.provenance import moved_by, seen_in
from purity.scenario import Choice, Contact, Lot, Material

Array = NDArray[np.float64]

#: Knots of temperature in a step, for curves.
KNOTS = 6


@dataclass(frozen=True, slots=True)
class Passed:
    """What one choice did to the lot.

    Parameters
    ----------
    choice : Choice
    impurities : tuple of str
    contacts : tuple of str
    before, after : State
    ledger : (C, I, N) array
        mol per mol of host gained through each contact.
    settings : Setting
    exposed : tuple of Exposed
    records : mapping of element to records
        Behind every number said of it.
    own : mapping of element to records
        Those of them that this step itself hangs on.
    behind : mapping of element to records
        Behind its content as the lot leaves: earlier steps and start included.
    gaps : mapping of element to gaps
    shares : (L, I) array
        Shares of HELD_BACK_BY, middle of the draws.
    formed : mapping of element to names of compounds
    attacked, flags : (N,) bool arrays
    errors : (I,) array
        Share of the content at the end that the time steps may have left as an error.
    host_loss : (N,) array
        Share of the host that evaporated.
    hot : (N,) array
        Highest temperature, K.
    series : mapping of element to (times (K,), contents (K, N))
    notes : tuple of str
    parcels : mapping of contact to Parcel
        Where the walls of a melt lead.
    attack : (N,) array or None
        Depth of wall lost, m, where one is eaten.
    worst : mapping of element to (N,) array
        Dissolved content at the worst position of a casting, after the crop, over its mean.
    """

    choice: Choice
    impurities: tuple[str, ...]
    contacts: tuple[str, ...]
    before: State
    after: State
    ledger: Array
    setting: Setting
    exposed: tuple[Exposed, ...]
    records: Mapping[str, tuple[Found, ...]]
    own: Mapping[str, tuple[Found, ...]]
    behind: Mapping[str, tuple[Found, ...]]
    gaps: Mapping[str, tuple[Gap, ...]]
    shares: Array
    formed: Mapping[str, tuple[str, ...]]
    attacked: NDArray[np.bool_]
    flags: NDArray[np.bool_]
    errors: Array
    host_loss: Array
    hot: Array
    series: Mapping[str, tuple[Array, Array]] = field(default_factory=dict)
    notes: tuple[str, ...] = ()
    parcels: Mapping[int, Parcel] = field(default_factory=dict)
    attack: Array | None = None
    worst: Mapping[str, Array] = field(default_factory=dict)


def make_setting(
    lot: Lot,
    choice: Choice,
    impurities: tuple[str, ...],
    molar_mass: Mapping[str, float],
    library: Library,
    draws: Draws,
    exclude: tuple[str, ...] = (),
) -> tuple[Setting, Schedule]:
    """Return what the contacts of a choice share, and its temperature over time."""
    time = np.stack(np.broadcast_arrays(*(sample(draws, t) for t, _ in choice.profile)))
    T = np.stack(np.broadcast_arrays(*(sample(draws, temperature) for _, temperature in choice.profile)))
    time, T = np.maximum.accumulate(time, axis=0), np.asarray(T)
    hottest = float(np.median(T.max(axis=0)))
    melts = choice.process in ("melt", "cast")
    phase = "liquid" if melts else phase_at(library, lot.host, hottest)
    if phase == "liquid":
        melting = _melting(library, lot.host)
        T = np.maximum(T, melting)
    schedule = Schedule(*(v[:, 0] if v.shape[-1] == 1 else v for v in (time, T)))
    high, knots = float(T.max()), _knots(schedule)
    row = library.find("hosts", host=lot.host, phase=phase)
    if isinstance(row, Gap):
        raise MissingRecordError(row.quantity, "density of the metal")
    fields = row.record.fields
    density = fields["density_kg_per_m3"] - fields["density_slope_kg_per_m3_K"] * (high - fields["T_ref_K"])
    density = density * np.exp(row.record.spread * normal(draws, row.record.quantity)[0])
    mass = sample(draws, lot.mass)
    cast = choice.process == "cast"
    setting = Setting(
        library,
        draws,
        lot,
        replace(choice, stirring="poured") if cast else choice,
        phase,
        impurities,
        molar_mass,
        knots,
        time[-1] - time[0],
        mass / molar_mass[lot.host],
        density / molar_mass[lot.host],
        exclude,
    )
    if cast:
        schedule = course(setting, schedule, _melting(library, lot.host))
        setting = replace(setting, T=_knots(schedule), duration=schedule.time[-1])
    return setting, schedule


def _knots(schedule: Schedule) -> Array:
    """Temperatures for curves, equally far apart in 1/T."""
    low, high = float(schedule.T.min()), float(schedule.T.max())
    return np.array([low]) if high - low < 0.5 else 1.0 / np.linspace(1.0 / low, 1.0 / high, KNOTS)


def pass_step(
    state: State,
    choice: Choice,
    lot: Lot,
    impurities: tuple[str, ...],
    molar_mass: Mapping[str, float],
    library: Library,
    draws: Draws,
    *,
    came: Mapping[str, tuple[Found, ...]] | None = None,
    exclude: tuple[str, ...] = (),
    history: bool = False,
    explain: bool = True,
) -> Passed:
    """Move a lot through one choice.

    Parameters
    ----------
    state : State
        As the lot enters, draw by draw.
    choice : Choice
    lot : Lot
    impurities : tuple of str
        Elements followed, in the order of `state`.
    molar_mass : mapping
        kg/mol of the host and the impurities.
    library : Library
    draws : Draws
    came : mapping of element to records, optional
        Behind the contents with which the lot enters.
    exclude : tuple of str
        Compounds that the user keeps from forming.
    history : bool
    explain : bool
        Find what holds each pickup back, where the walls lead and where in a casting impurities gather;
        without, contents alone, the same in all else.

    Returns
    -------
    Passed
    """
    setting, schedule = make_setting(lot, choice, impurities, molar_mass, library, draws, exclude)
    exposed = (*(expose(contact, setting) for contact in choice.contacts), *extra_rows(setting))
    cleaned, off, said = strip(state, setting)
    entered = _enter(cleaned, setting, exposed)
    n = draws.n
    ledger = np.zeros((len(exposed), len(impurities), n))
    for c, one in enumerate(exposed):
        if one.gain is not None:
            ledger[c] += one.gain
    for c, taken in off.items():
        ledger[c] += taken
    parts = move(entered, setting, schedule, exposed, history, explain=explain)
    partners = removed(ledger, exposed, parts, impurities)
    passed = _gather(state, entered, setting, schedule, exposed, ledger, parts, came or {}, explain)
    passed = replace(passed, after=without_partners(passed.after, passed.ledger, partners))
    done = _finished(passed, entered, said)
    return _frozen(done) if explain and choice.process == "cast" else done


def _frozen(passed: Passed) -> Passed:
    """Add where in a casting the impurities gather."""
    worst, behind, notes = segregation(passed.setting)
    records = {
        element: tuple({f.record.quantity: f for f in (*found, *behind.get(element, ()))}.values())
        for element, found in passed.records.items()
    }
    return replace(passed, worst=worst, records=records, notes=(*passed.notes, *notes))


def _finished(passed: Passed, entered: State, said: tuple[str, ...]) -> Passed:
    """Have the last word: walls that were eaten, furnaces that were opened."""
    notes = (*passed.notes, *said)
    begun = Done(passed.after, passed.ledger, passed.attacked, passed.shares, None, passed.records, notes)
    done = finish(begun, entered, passed.setting, passed.exposed)
    return replace(
        passed,
        after=done.after,
        ledger=done.ledger,
        attacked=done.attacked,
        shares=done.shares,
        attack=done.attack,
        records=done.records,
        notes=done.notes,
    )


def _enter(state: State, setting: Setting, exposed: Sequence[Exposed]) -> State:
    """Melting folds what is at the surface into the bath; on a solid it stays there."""
    n = setting.draws.n
    gains = [one.gain for one in exposed if one.gain is not None]
    zero = np.zeros((len(setting.impurities), n))
    brought = sum((np.broadcast_to(g, zero.shape) for g in gains), zero)
    surface = np.zeros_like(brought) if state.surface is None else state.surface
    if setting.liquid:
        return State(state.x + surface + brought, state.suspended)
    return replace(state, surface=surface + brought)


def _melting(library: Library, host: str) -> float:
    found = library.find("transitions", element=host, kind="melting", to_state="liquid")
    if isinstance(found, Gap):
        raise MissingRecordError(found.quantity, f"melting point of {host}")
    return found.record.fields["T_K"]


def _gather(
    state: State,
    entered: State,
    setting: Setting,
    schedule: Schedule,
    exposed: tuple[Exposed, ...],
    ledger: Array,
    parts: Sequence[Part],
    came: Mapping[str, tuple[Found, ...]],
    explain: bool,
) -> Passed:
    """Put the groups together again, with what is known of each element."""
    n, count = setting.draws.n, len(setting.impurities)
    x, suspended = entered.x.copy(), entered.suspended.copy()
    surface = None if entered.surface is None else entered.surface.copy()
    film: dict[str, Array] = {}
    shares = np.zeros((len(HELD_BACK_BY), count))
    attacked, flags = np.zeros(n, dtype=bool), np.zeros(n, dtype=bool)
    formed: dict[str, tuple[str, ...]] = {}
    series: dict[str, tuple[Array, Array]] = {}
    for part in parts:
        done = part.pickup
        x[part.index], suspended[part.index] = done.state.x, done.state.suspended
        if done.state.surface is not None and surface is not None:
            surface[part.index] = done.state.surface
        if done.state.film is not None:
            film |= dict(zip(done.state.films, done.state.film, strict=True))
        for c, row in zip(part.rows, done.ledger[: len(part.rows)], strict=True):
            ledger[c][part.index] += row
            for _, other, atoms in (s for s in part.shared if s[0] == c):
                ledger[c][other] += atoms * row[0]
                x[other] += atoms * row[0]
        shares[:, part.index] = np.median(done.shares, axis=-1)
        attacked |= done.attacked
        flags |= done.flags
        for skin, _ in part.skins:
            if skin.name in done.formed:
                for i in np.flatnonzero(skin.nu):
                    formed[setting.impurities[i]] = (*formed.get(setting.impurities[i], ()), skin.name)
        if done.history is not None and done.times is not None:
            for row, i in enumerate(part.index):
                series[setting.impurities[int(i)]] = (done.times, done.history[row])
    shares = _named_for_wetting(shares, ledger, setting)
    after = State(x, suspended, None, np.stack(list(film.values())) if film else None, tuple(film), surface)
    loss, loss_records = _host_loss(setting, schedule, exposed)
    after, ledger = _enrich(after, ledger, setting, loss)
    hot = np.broadcast_to(schedule.T.max(axis=0), (n,))
    parcels = _parcels(setting, after, hot) if explain else {}
    moved = moved_by(setting, exposed, parts, loss_records, came)
    own = moved_by(setting, exposed, parts, loss_records, {})
    return Passed(
        setting.choice,
        setting.impurities,
        tuple(one.exposure.contact for one in exposed),
        state,
        after,
        ledger,
        setting,
        exposed,
        seen_in(setting, exposed, parcels.values(), moved),
        seen_in(setting, exposed, parcels.values(), own),
        {element: tuple(found.values()) for element, found in moved.items()},
        _gaps(exposed),
        shares,
        formed,
        attacked,
        flags,
        _errors(parts, count),
        loss,
        hot,
        series,
        tuple(dict.fromkeys(note for one in exposed for note in one.notes)),
        parcels,
    )


def _errors(parts: Sequence[Part], count: int) -> Array:
    errors = np.zeros(count)
    for part in parts:
        errors[part.index] = np.maximum(errors[part.index], part.pickup.error)
    return errors


def _parcels(setting: Setting, after: State, hot: Array) -> dict[int, Parcel]:
    """Where each wall of a melt leads, at the hottest point and the contents of the end."""
    if not setting.liquid:
        return {}
    found = {}
    for c, contact in enumerate(setting.choice.contacts):
        if isinstance(contact.body, Material) and contact.role in ("wall", "mould"):
            one = parcel(contact.body, setting, after.x, hot)
            if one is not None:
                found[c] = one
    return found


def _named_for_wetting(shares: Array, ledger: Array, setting: Setting) -> Array:
    """Call the metal side of the contact that moves most by what slows it: no wetting, or the stirring."""
    if not setting.liquid:
        return shares
    shut = np.array([_unwetted(contact, setting) for contact in setting.choice.contacts])
    moved = np.abs(np.median(ledger[: len(shut)], axis=-1))
    gate, stirring = HELD_BACK_BY.index("wetting"), HELD_BACK_BY.index("melt transfer")
    held = shut[np.argmax(moved, axis=0)]
    named = shares.copy()
    named[gate, held], named[stirring, held] = shares[stirring, held], 0.0
    return named


def _unwetted(contact: Contact, setting: Setting) -> bool:
    if not isinstance(contact.body, Material):
        return False
    opening, _ = wetting(setting, contact.body)
    return bool(np.median(opening.max(axis=0)) < 0.5)


def _host_loss(
    setting: Setting, schedule: Schedule, exposed: Sequence[Exposed]
) -> tuple[Array, tuple[Found, ...]]:
    """Share of the host that evaporates, (N,)."""
    lost = np.zeros(setting.draws.n)
    records: tuple[Found, ...] = ()
    for contact in setting.choice.contacts:
        if contact.role != "gas" or not setting.liquid:
            continue
        found = host_evaporation(contact, setting)
        if isinstance(found, Gap):
            continue
        rate = Curve(setting.T, np.log(np.maximum(found[0], 1e-300)))
        lost = lost + _time_integral(rate, schedule) / setting.amount
        records = (*records, *found[1])
    return np.minimum(lost, 1.0), records


def _time_integral(rate: Curve, schedule: Schedule) -> Array:
    parts = [curve_integral(rate, s.T1, s.T2, s.duration) for s in segments(schedule)]
    return np.asarray(sum(parts, np.zeros(1)))


def _enrich(after: State, ledger: Array, setting: Setting, loss: Array) -> tuple[State, Array]:
    """What stays behind while the host leaves is counted on less metal."""
    if not np.any(loss > 0):
        return after, ledger
    factor = 1.0 / np.maximum(1.0 - loss, 0.05)
    gas = next(c for c, contact in enumerate(setting.choice.contacts) if contact.role == "gas")
    richer = replace(after, x=after.x * factor, suspended=after.suspended * factor)
    ledger = ledger.copy()
    ledger[gas] += total(richer) - total(after)
    return richer, ledger


def _gaps(exposed: Sequence[Exposed]) -> dict[str, tuple[Gap, ...]]:
    gaps: dict[str, tuple[Gap, ...]] = {}
    for one in exposed:
        for element, found in one.gaps.items():
            gaps[element] = (*gaps.get(element, ()), *found)
    return gaps
