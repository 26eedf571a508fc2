"""What happens to a lot around the kinetics of a step: layers taken off, walls eaten, furnaces opened.

Cleaning takes off what is bound at the surface. A wall that has no ceiling in the dilute range gives what
its measured rate of loss gives, in place of what the dilute law says. A furnace that is opened lets its
gas and then room air at the pieces: hydrogen of water goes into a metal that takes it the more the colder
it is, and a film of oxide grows.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from purity.constants import ATM, DILUTE, P0
from purity.contacts.gas import Load, gas_conductance
from purity.contacts.setting import T_ROOM, Exposed, Setting, spread_factor, vapour_speed
from purity.contacts.storage import grown, storage_films, water_feeds
from purity.contacts.vessel import vessel_moles
from purity.database import Found, Gap
from purity.draws import normal
from purity.driving_force.pure import atoms
from purity.driving_force.substances import ln_dissolution
from purity.followers import Part
from purity.kinetics.advance import HELD_BACK_BY, State
from purity.kinetics.exposure import Curve, Exposure, at
from purity.scenario import Contact, Furnace, Given, Material

Array = NDArray[np.float64]
Records = Mapping[str, tuple[Found, ...]]

#: Depth that residues and adsorbed layers reach, m: what takes off more leaves none of them (common
#: practice, no source).
RESIDUE = 5e-9
#: Time in which opened pieces cool to room temperature, 90 % band, s (common practice, no source).
COOLING = (200.0, 1800.0)
#: Temperature below which the film that forms at once keeps hydrogen out, K (from memory).
TIGHT = 373.0
#: Oxygen fraction from which a gas is the air of a room, renewed without end.
AIRY = 0.01
#: Share of the draws in which a wall has to leave the dilute range to be taken as eaten.
EATEN = 0.05
#: Rows of the ledger besides the contacts.
REMOVAL, VENTING = "removal", "venting"


@dataclass(frozen=True, slots=True)
class Done:
    """A lot after a step, on its way to the last word.

    Parameters
    ----------
    after : State
    ledger : (C, I, N) array
    attacked : (N,) bool array
    attack : (N,) array or None
        Depth of wall lost, m.
    shares : (L, I) array
        Shares of HELD_BACK_BY.
    records : mapping of element to records
    notes : tuple of str
    """

    after: State
    ledger: Array
    attacked: NDArray[np.bool_]
    shares: Array
    attack: Array | None = None
    records: Records = field(default_factory=dict)
    notes: tuple[str, ...] = ()


def extra_rows(setting: Setting) -> tuple[Exposed, ...]:
    """Return what changes the lot and is no contact, so that the ledger has a row for it."""
    rows = []
    if setting.choice.removal and setting.liquid:
        rows.append(_row(REMOVAL, setting, tuple(setting.choice.removal.values())))
    if setting.choice.vent and not setting.liquid:
        rows.append(_row(VENTING, setting, (*setting.choice.vent.values(), _cooling(setting))))
    return tuple(rows)


def _row(name: str, setting: Setting, inputs: tuple[Given, ...]) -> Exposed:
    rate = Curve(setting.T[:1], np.zeros((len(setting.impurities), 1, 1)))
    return Exposed(Exposure(name, np.ones(1), rate, ()), inputs=inputs)


def _cooling(setting: Setting) -> Given:
    where = setting.choice.vent["temperature"].key.rpartition("/")[0]
    return Given(f"{where}/cooling", "lognormal", *COOLING, True)


def strip(state: State, setting: Setting) -> tuple[State, dict[int, Array], tuple[str, ...]]:
    """Take off what cleaning takes off.

    Parameters
    ----------
    state : State
        As the lot enters.
    setting : Setting

    Returns
    -------
    (State, mapping of contact to (I, N), notes)
        Films thinner by what was taken off, residues gone where more than :data:`RESIDUE` goes. What is
        dissolved is taken off with its metal: the content of the rest does not change.
    """
    lost: dict[int, Array] = {}
    notes: tuple[str, ...] = ()
    for c, contact in enumerate(setting.choice.contacts):
        given = contact.inputs.get("removes")
        if contact.role != "clean" or given is None:
            continue
        depth = setting.sample(given)
        state, taken = _without(state, depth)
        if taken is not None:
            lost[c] = -taken
        notes = (*notes, *_thinner(setting, contact, depth))
    return state, lost, notes


def _without(state: State, depth: Array) -> tuple[State, Array | None]:
    thick = np.full(state.x.shape[-1], RESIDUE)
    film = state.film
    if film is not None:
        thick = np.maximum(thick, film.sum(axis=0))
        film = film * np.maximum(1.0 - depth / thick, 0.0)
    if state.surface is None:
        return replace(state, film=film), None
    taken = state.surface * np.minimum(depth / thick, 1.0)
    return replace(state, film=film, surface=state.surface - taken), taken


def _thinner(setting: Setting, contact: Contact, depth: Array) -> tuple[str, ...]:
    form = setting.choice.form
    if form is None:
        return ()
    share = float(np.median(depth)) * contact.area.median / form.volume
    return (f"{contact.name} takes off {share:.1%} of the metal",) if share >= 5e-4 else ()


def removed(
    ledger: Array, exposed: Sequence[Exposed], parts: Sequence[Part], impurities: Sequence[str]
) -> Array:
    """Book what was taken out of a bath on its own row of the ledger, (C, I, N), in place.

    Returns
    -------
    (I, N) array
        What went out with the compound of an element that follows, of the elements that lead: still in the
        bath as the parts have it.
    """
    partners: Array = np.zeros_like(ledger[0])
    rows = [c for c, one in enumerate(exposed) if one.exposure.contact == REMOVAL]
    for part in parts:
        taken = part.pickup.ledger[len(part.rows) :].sum(axis=0)
        for c in rows:
            ledger[c][part.index] += taken
        if len(part.index) != 1 or not part.skins or not np.any(taken):
            continue
        counts = atoms(part.skins[0][0].name)
        own = int(part.index[0])
        for j, other in enumerate(impurities):
            if j != own and other in counts:
                partners[j] -= counts[other] / counts[impurities[own]] * taken[0]
    return partners


def without_partners(state: State, ledger: Array, partners: Array) -> State:
    """Take out of the bath what went with a compound; the last row of the ledger is that of removal."""
    if not np.any(partners):
        return state
    gone = np.minimum(partners, state.x)
    ledger[-1] -= gone
    return replace(state, x=state.x - gone)


def finish(done: Done, entered: State, setting: Setting, exposed: Sequence[Exposed]) -> Done:
    """Return the lot after walls were eaten and the furnace was opened."""
    return _vented(_eaten(done, entered, setting), setting, exposed)


def _eaten(done: Done, entered: State, setting: Setting) -> Done:
    """Replace what walls with a measured rate of loss give by that rate, unless another wall is eaten too."""
    if not setting.liquid or done.attacked.mean() <= EATEN:
        return done
    walls = [(c, one) for c, one in enumerate(setting.choice.contacts) if one.role in ("wall", "mould")]
    rates = [(c, one, known) for c, one in walls if (known := _rate_of_loss(setting, one)) is not None]
    known_walls = {c for c, _, _ in rates}
    if not rates or any(_eats(done.ledger[c]) for c, _ in walls if c not in known_walls):
        return done
    ledger, x, suspended = done.ledger.copy(), done.after.x.copy(), done.after.suspended.copy()
    records = dict(done.records)
    notes, deepest = done.notes, np.zeros(setting.draws.n)
    start = entered.x + entered.suspended
    for c, contact, (formula, found) in rates:
        fields = found.record.fields
        z = normal(setting.draws, found.record.quantity)[0]
        depth = fields["rate_m_per_s"] * np.exp(found.record.spread * z) * setting.duration
        deepest = np.maximum(deepest, depth)
        units, used = _units(setting, contact, formula, depth)
        for element, count in atoms(formula).items():
            if element not in setting.impurities:
                continue
            i = setting.impurities.index(element)
            others = np.maximum(np.nan_to_num(ledger[:, i]), 0.0)
            ledger[:, i] = others
            ledger[c, i] = count * units / setting.amount
            x[i], suspended[i] = start[i] + ledger[:, i].sum(axis=0), 0.0
            records[element] = (*records.get(element, ()), found, *used)
        celsius = fields["T_K"] - 273.15
        notes = (*notes, f"{contact.name} is eaten: wall loss taken as measured at {celsius:.0f} degC")
    after = replace(done.after, x=x, suspended=suspended)
    return Done(after, ledger, np.zeros_like(done.attacked), done.shares, deepest, records, notes)


def _eats(gained: Array) -> bool:
    """Whether a wall alone takes the metal out of the dilute range in more than EATEN of the draws."""
    return bool(np.mean(np.nan_to_num(gained).max(axis=0) > DILUTE) > EATEN)


def _rate_of_loss(setting: Setting, contact: Contact) -> tuple[str, Found] | None:
    body = contact.body
    assert isinstance(body, Material)
    main = max(body.phases, key=lambda formula: body.phases[formula])
    found = setting.library.find("attack", host=setting.host, formula=main)
    return (main, found) if isinstance(found, Found) else None


def _units(setting: Setting, contact: Contact, formula: str, depth: Array) -> tuple[Array, tuple[Found, ...]]:
    """Return mol of a compound in a depth of wall, (N,)."""
    assert isinstance(contact.body, Material)
    name = contact.body.origin.removeprefix("containers:")
    density = setting.library.find("wall_values", material=name, property="density")
    if isinstance(density, Gap):
        density = setting.library.find("wall_values", material="*", property="density")
    assert isinstance(density, Found), "the table of wall values has no general density"
    rho = density.record.fields["value_SI"] * spread_factor(setting, density.record)
    molar = _molar_mass(setting, formula)
    return np.asarray(depth * setting.sample(contact.area) * rho / molar), (density,)


def _molar_mass(setting: Setting, formula: str) -> float:
    rows = setting.library.rows("elements")
    mass = {row.words["element"]: row.fields["molar_mass_g_per_mol"] / 1000.0 for row in rows}
    return sum(mass[element] * count for element, count in atoms(formula).items())


def _vented(done: Done, setting: Setting, exposed: Sequence[Exposed]) -> Done:
    """Open the furnace: hydrogen on cooling, and the film that grows in air."""
    choice = setting.choice
    if choice.process != "heat" or setting.liquid:
        return done
    names = [one.exposure.contact for one in exposed]
    if VENTING not in names or choice.form is None:
        note = "vent not given: hydrogen taken up on opening and the film that grows in air are not counted"
        return replace(done, notes=(*done.notes, note))
    gained, used, notes = _hydrogen(setting)
    after, film, grew, said = _air_film(done.after, setting, choice.form.area)
    ledger = done.ledger.copy()
    ledger[names.index(VENTING)] += gained + film
    surface = film if after.surface is None else after.surface + film
    records = dict(done.records)
    for element, found in (("H", used), ("O", grew)):
        if element in setting.impurities:
            records[element] = (*records.get(element, ()), *found)
    return replace(
        done,
        after=replace(after, x=after.x + gained, surface=surface),
        ledger=ledger,
        shares=_by_film(done.shares, ledger, film),
        records=records,
        notes=(*done.notes, *notes, *said),
    )


def _by_film(shares: Array, ledger: Array, film: Array) -> Array:
    """Share what holds the pickup back between the growth of the film and the rest."""
    moved = np.abs(ledger).sum(axis=0)
    part = np.median(np.abs(film) / np.maximum(moved, np.finfo(float).tiny), axis=-1)
    shared = shares * (1.0 - part)
    shared[HELD_BACK_BY.index("film growth")] += part
    return np.asarray(shared)


def _hydrogen(setting: Setting) -> tuple[Array, tuple[Found, ...], tuple[str, ...]]:
    """Content that comes in from the gas let in while the pieces cool, (I, N).

    Below :data:`TIGHT` the film that forms at once is in the way (sticking on an oxide film); above, the
    bare metal takes what reaches it. What was let into a closed vessel bounds it.
    """
    gained = np.zeros((len(setting.impurities), setting.draws.n))
    vent, form = setting.choice.vent, setting.choice.form
    assert form is not None
    if "H" not in setting.impurities or not _occludes(setting):
        return gained, (), ()
    hot = setting.sample(vent["temperature"])
    T, time = 0.5 * (hot + T_ROOM), setting.sample(_cooling(setting))
    airy = "O2" in vent and vent["O2"].median >= AIRY
    vessel = None if airy else vessel_moles(setting, setting.choice.furnace or Furnace())
    tight = vent["temperature"].median < TIGHT
    records: tuple[Found, ...] = ()
    for gas in ("H2", "H2O"):
        if gas not in vent or (gas == "H2O" and not _strips_water(setting)):
            continue
        fraction = setting.sample(vent[gas])
        conductance, found = _open_conductance(setting, gas, T, tight=tight)
        mol = conductance * fraction * ATM / P0 * form.area * time
        if vessel is not None:
            mol = np.minimum(mol, fraction * vessel)
        for element, count in atoms(gas).items():
            if element == "H" or (element in setting.impurities and not tight):
                gained[setting.impurities.index(element)] += count * mol / setting.amount
        records = (*records, *found)
    late = ("opened hot: the metal is bare and takes what reaches it",) if not tight else ()
    return gained, records, late


def _open_conductance(
    setting: Setting, gas: str, T: Array, *, tight: bool
) -> tuple[Array, tuple[Found, ...]]:
    """Conductance, mol m-2 s-1 per unit activity: past a film by its sticking, to bare metal as a gas."""
    bare = Load({}, None, {}, np.full(1, ATM), (), (), (), "Ar")
    curve, found = gas_conductance(setting, gas, bare)
    if not tight:
        return at(curve, T), found
    film = setting.library.find("sticking", host=setting.host, gas=gas, state="oxide film")
    if isinstance(film, Gap):
        film = setting.library.find("sticking", host="*", gas=gas, state="oxide film")
    if isinstance(film, Gap):
        return at(curve, T), found
    molar = _molar_mass(setting, gas)
    share = np.minimum(film.record.fields["probability"] * spread_factor(setting, film.record), 1.0)
    return np.minimum(at(curve, T), share * P0 * vapour_speed(T, molar)), (film,)


def _occludes(setting: Setting) -> bool:
    """Whether the metal takes more hydrogen the colder it is."""
    T = np.array([[350.0], [700.0]])
    nominal = replace(setting.draws, blocks=0) if setting.draws.blocks else setting.draws
    energy = ln_dissolution(setting.library, setting.host, setting.phase, "H2", "gas", T, nominal)
    return not isinstance(energy, Gap) and float(energy.value[0, 0]) > float(energy.value[1, 0])


def _strips_water(setting: Setting) -> bool:
    films = storage_films(setting, "indoor air")
    return any(water_feeds(setting, found.record) for _, found in films) if films else True


def _air_film(
    state: State, setting: Setting, area: float
) -> tuple[State, Array, tuple[Found, ...], tuple[str, ...]]:
    """Grow the film of room air on what is left of the one before; content bound anew, (I, N)."""
    bound = np.zeros((len(setting.impurities), setting.draws.n))
    time = setting.sample(_cooling(setting))
    thickness = {} if state.film is None else dict(zip(state.films, state.film, strict=True))
    films = storage_films(setting, "indoor air")
    records: tuple[Found, ...] = ()
    for film, found in films:
        before = _left(state, setting, film.nu, thickness.get(film.name), area)
        end = np.broadcast_to(np.maximum(before, grown(film, time, T_ROOM)), before.shape)
        bound += film.nu[:, np.newaxis] * (end - before) * area / setting.amount
        thickness[film.name] = end
        records = (*records, found)
    notes = () if films else ("no record of the film that grows on this metal in air: none is counted",)
    if films and setting.choice.vent["temperature"].median > TIGHT:
        notes = (*notes, "opened hot: the film grows thicker than the one of a cold piece that is counted")
    stacked = (
        np.stack([np.broadcast_to(t, (setting.draws.n,)) for t in thickness.values()]) if thickness else None
    )
    return replace(state, film=stacked, films=tuple(thickness)), bound, records, notes


def _left(state: State, setting: Setting, nu: Array, thickness: Array | None, area: float) -> Array:
    """Thickness that is left of a film, m, (N,): what the content at the surface still makes."""
    if thickness is None or state.surface is None:
        return np.zeros(setting.draws.n)
    own = np.flatnonzero(nu)
    makes = [state.surface[i] * setting.amount / (nu[i] * area) for i in own]
    return np.asarray(np.minimum(thickness, np.min(np.stack(makes), axis=0)))


__all__ = ["Done", "extra_rows", "finish", "removed", "strip", "without_partners"]
