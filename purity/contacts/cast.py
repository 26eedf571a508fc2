"""Casting: the stream as it falls, the mould until the shell stands, and what freezing does to contents.

The metal is a bath from the start of the pour until it is frozen. Its temperature follows the profile
while it is poured and then falls to the melting point. Stream and top of the casting are one surface,
each counted for its share of the time; the mould touches the metal while it freezes. What is below the
melting point takes up nothing more here: a hot solid is a step of its own.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from purity.constants import GAS_FORMERS, R
from purity.contacts.gas import gas
from purity.contacts.setting import (
    T_ROOM,
    Exposed,
    Setting,
    dissolution,
    exchange,
    spread_factor,
)
from purity.contacts.wall import wall
from purity.database import Found, Gap, phase_at
from purity.draws import normal
from purity.driving_force.pure import atoms
from purity.errors import MissingRecordError
from purity.kinetics.casting import chvorinov_time, partition, worst_position
from purity.kinetics.schedule import Schedule, T_at
from purity.scenario import Contact, Given, Material

Array = NDArray[np.float64]

#: Row of the transfer table for a metal that is poured, and for one that stands and freezes.
POURED, STANDING = "poured", "quiescent"
#: Heat capacity of a liquid metal, J/(mol K): Dulong and Petit's rule with a tenth for the melt.
HEAT_CAPACITY = 1.1 * 3.0 * R
#: A partition coefficient from two activity records beyond these bounds says that the records do not fit.
FITTING = (1e-5, 5.0)


@dataclass(frozen=True, slots=True)
class Freezing:
    """How one casting freezes.

    Parameters
    ----------
    pour, time : (N,) array
        Time of the pour, and from its end until all is frozen, s.
    front : (N,) array
        Speed of the freezing front, m/s.
    crop : (N,) array
        Share that freezes last and is cut off.
    records : tuple of Found
    notes : tuple of str
    """

    pour: Array
    time: Array
    front: Array
    crop: Array
    records: tuple[Found, ...]
    notes: tuple[str, ...]


def freezing(setting: Setting) -> Freezing:
    """Return how the casting of a choice freezes.

    A freezing time that nobody gave follows from the modulus (volume over cooled area) and the mould:
    the resistance of the face and that of a thick mould, one after the other. The second is Chvorinov's
    rule (1940); both after Flemings, Solidification Processing (1974), chapter 1.

    Parameters
    ----------
    setting : Setting
        Of a cast.
    """
    stream, mould = _contact(setting, "gas"), _contact(setting, "mould")
    pour, zero = _drawn(setting, stream, "pour_time"), np.zeros(1)
    given, crop = _drawn(setting, mould, "freezing_time"), _drawn(setting, mould, "crop")
    modulus = _modulus(setting, mould)
    records: tuple[Found, ...] = ()
    notes: list[str] = []
    if pour is None:
        notes.append("the stream is left out: give pour = { time = ..., area = ... }")
    if given is None:
        given, records = _chvorinov(setting, mould, modulus)
        notes.append("freezing time from the size of the casting and the mould (Chvorinov)")
    front = _drawn(setting, mould, "front_speed")
    return Freezing(
        zero if pour is None else pour,
        given,
        modulus / given if front is None else front,
        zero if crop is None else crop,
        records,
        tuple(notes),
    )


def course(setting: Setting, schedule: Schedule, melting: float) -> Schedule:
    """Return the temperature of the metal while it is liquid: as poured, then down to the melting point.

    Parameters
    ----------
    setting : Setting
    schedule : Schedule
        As the user wrote it.
    melting : float
        K.
    """
    run = freezing(setting)
    n = (setting.draws.n,)
    start = np.maximum(np.asarray(schedule.T)[0], melting)
    full = np.minimum(start, np.maximum(T_at(schedule, np.broadcast_to(run.pour, n)), melting))
    time = [np.zeros(1), run.pour, run.pour + run.time]
    T = [start, full, np.array([melting])]
    return Schedule(*(np.stack([np.broadcast_to(v, n) for v in row]) for row in (time, T)))


def stream(contact: Contact, setting: Setting) -> Exposed:
    """Return what the gas does to the top of the casting and to the stream that fell through it.

    Parameters
    ----------
    contact : Contact
        With the free surface of the casting as its area, `pour_time` and `pour_area` in its inputs.
    setting : Setting
    """
    time, area = contact.inputs.get("pour_time"), contact.inputs.get("pour_area")
    run = freezing(setting)
    if time is None or area is None:
        return replace(gas(contact, setting), notes=run.notes)
    free = setting.sample(contact.area)
    whole = free + setting.sample(area) * run.pour / (run.pour + run.time)
    middle = float(np.median(whole)) / contact.area.median
    widened = replace(contact.area, low=contact.area.low * middle, high=contact.area.high * middle)
    one = gas(replace(contact, area=widened), setting)
    exposure = replace(one.exposure, area=whole)
    return replace(one, exposure=exposure, inputs=(*one.inputs, time, area), notes=(*one.notes, *run.notes))


def mould(contact: Contact, setting: Setting) -> Exposed:
    """Return what a mould gives: its compounds until all is frozen, and the water on its face.

    A dressing is the mould that the metal sees: write it as the phases and traces of the container. The
    face is taken to be as hot as the metal, which is the cautious side for a chill, and all water on it
    to go into the metal, as hydrogen and oxygen, before the gas takes its part.

    Parameters
    ----------
    contact : Contact
        With a :class:`Material` as its body; `water` (kg/m2) in its inputs overrides the table.
    setting : Setting
    """
    material = contact.body
    assert isinstance(material, Material)
    run = freezing(setting)
    one = wall(contact, setting)
    water, behind = _water(contact, setting)
    mass = sum(setting.molar_mass[element] * count for element, count in atoms("H2O").items())
    mol = water * setting.sample(contact.area) / mass / setting.amount
    counts = atoms("H2O")
    n = (setting.draws.n,)
    gain = np.stack([np.broadcast_to(counts.get(e, 0.0) * mol, n) for e in setting.impurities])
    records = dict(one.element_records)
    for element in counts:
        if element in setting.impurities:
            records[element] = (*records.get(element, ()), *behind, *run.records)
    share = run.time / (run.pour + run.time)
    exposure = replace(one.exposure, area=one.exposure.area * share)
    inputs = (*one.inputs, *contact.inputs.values())
    return replace(one, exposure=exposure, gain=gain, element_records=records, inputs=inputs)


def segregation(setting: Setting) -> tuple[dict[str, Array], dict[str, tuple[Found, ...]], tuple[str, ...]]:
    """Return the content at the worst position of a casting over its mean, after the crop.

    Equilibrium partition becomes the effective one by the layer at rest before the front (Burton, Prim
    and Slichter 1953), D over the layer being the exchange of a standing melt; the last to freeze then
    holds what normal freezing says (Gulliver 1913, Scheil 1942). Differences between dendrite arms, far
    below the size of a sample, are not in it, nor are compounds that float.

    Parameters
    ----------
    setting : Setting
        Of a cast.

    Returns
    -------
    factors : dict of element to (N,) array
    records : dict of element to tuple of Found
    notes : tuple of str
        Names the certified and limited elements whose worst position is not known.
    """
    run = freezing(setting)
    still = replace(setting, T=setting.T[:1], choice=replace(setting.choice, stirring=STANDING))
    rate, behind = exchange(still, "wall")
    factors: dict[str, Array] = {}
    records: dict[str, tuple[Found, ...]] = {}
    unknown: list[str] = []
    for i, element in enumerate(setting.impurities):
        found = _partition(still, element)
        if isinstance(found, Gap):
            unknown += [element] if element in {*setting.lot.certificate, *setting.lot.limits} else []
            continue
        effective = partition(found[0], run.front, 1.0, np.exp(rate.ln[i, 0]))
        factors[element] = np.broadcast_to(worst_position(effective, run.crop), (setting.draws.n,))
        records[element] = (*found[1], *behind.get(element, ()), *run.records)
    notes = (f"worst position not known, no partition record: {', '.join(unknown)}",) if unknown else ()
    return factors, records, notes


def _partition(setting: Setting, element: str) -> tuple[Array, tuple[Found, ...]] | Gap:
    """k0 of the table, else from the Henrian constants of solid and liquid where both are measured."""
    found = setting.library.find("partition", host=setting.host, solute=element)
    if isinstance(found, Found):
        return found.record.fields["k0"] * spread_factor(setting, found.record), (found,)
    solid = replace(setting, phase=phase_at(setting.library, setting.host, float(setting.T[0]) - 1.0))
    diatomic = element in GAS_FORMERS and element != "C"
    formula, state = (f"{element}2", "gas") if diatomic else (element, "solid")
    both = [dissolution(one, formula, state) for one in (solid, setting)]
    nominal = [dissolution(one, formula, state, setting.draws.nominal()) for one in (solid, setting)]
    for energy in (*both, *nominal):
        if isinstance(energy, Gap):
            return found
        if any(f.how == "estimate" for f in energy.found):
            return found
    ln_k, middle = (
        np.subtract(*(e.value[0] for e in pair if not isinstance(e, Gap))) / (2.0 if diatomic else 1.0)
        for pair in (both, nominal)
    )
    if not FITTING[0] < float(np.exp(middle[0])) < FITTING[1]:
        return Gap(found.quantity, "the activity records of solid and liquid do not fit together")
    behind = tuple(f for energy in both if not isinstance(energy, Gap) for f in energy.found)
    return np.exp(ln_k), behind


def _contact(setting: Setting, role: str) -> Contact | None:
    return next((c for c in setting.choice.contacts if c.role == role), None)


def _drawn(setting: Setting, contact: Contact | None, name: str) -> Array | None:
    given: Given | None = None if contact is None else contact.inputs.get(name)
    return None if given is None else setting.sample(given)


def _modulus(setting: Setting, mould: Contact | None) -> Array:
    """Volume over cooled area, m."""
    form = setting.choice.form
    if form is not None or mould is None:
        return np.array([form.volume / form.area if form is not None else 0.01])
    return setting.amount / setting.molar_density / setting.sample(mould.area)


def _row(setting: Setting, mould: Contact | None) -> Found:
    body = None if mould is None else mould.body
    name = body.origin.removeprefix("containers:") if isinstance(body, Material) else "*"
    for material in (name, "*"):
        found = setting.library.find("moulds", material=material)
        if isinstance(found, Found):
            return found
    raise MissingRecordError("moulds:*", "how a mould takes heat")


def _chvorinov(setting: Setting, mould: Contact | None, modulus: Array) -> tuple[Array, tuple[Found, ...]]:
    row = _row(setting, mould)
    fusion = setting.library.find("transitions", element=setting.host, kind="melting", to_state="liquid")
    if isinstance(fusion, Gap):
        raise MissingRecordError(fusion.quantity, f"heat of fusion of {setting.host}")
    melting = fusion.record.fields["T_K"]
    above = max(float(np.max(setting.T)) - melting, 0.0)
    heat = setting.molar_density * (fusion.record.fields["dH_J_per_mol"] + HEAT_CAPACITY * above)
    heat = heat / (melting - T_ROOM)
    face = heat * modulus / row.record.fields["interface_W_per_m2_K"]
    thick = np.pi / 4.0 * (heat / row.record.fields["effusivity_J_per_m2_K_s05"]) ** 2
    return (face + chvorinov_time(thick, modulus, 1.0)) * spread_factor(setting, row.record), (row, fusion)


def _water(contact: Contact, setting: Setting) -> tuple[Array, tuple[Found, ...]]:
    given = contact.inputs.get("water")
    if given is not None:
        return setting.sample(given), ()
    row = _row(setting, contact)
    factor = np.exp(np.log(row.record.spread) * normal(setting.draws, f"{row.record.quantity}/water")[0])
    return row.record.fields["water_kg_per_m2"] * factor, (row,)


__all__ = ["Freezing", "course", "freezing", "mould", "segregation", "stream"]
