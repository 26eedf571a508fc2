"""Packages: what a bag, box or cabinet lets in, and what its desiccant holds off.

Permeation is Fick's law across the wall, n = (P A / l)(p_out - p_in) t. A desiccant keeps the water
inside at its floor until its capacity is used; then the head space drifts to the room.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from purity.constants import R
from purity.contacts.setting import Exposed, Setting, spread_factor
from purity.contacts.storage import environment_of, relative_humidity, stored
from purity.database import Found, Gap
from purity.driving_force.pure import atoms
from purity.scenario import Atmosphere, Contact, Package

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Inside:
    """One gas in a package at the end of storage.

    Parameters
    ----------
    let_in : (N,) array
        mol through the wall.
    taken : (N,) array
        mol held by the desiccant.
    pressure : (N,) array
        Partial pressure inside at the end, Pa.
    """

    let_in: Array
    taken: Array
    pressure: Array


def package(contact: Contact, setting: Setting) -> Exposed:
    """Return how packed metal fares: films and adsorbed water, bounded by what the package lets in.

    Parameters
    ----------
    contact : Contact
        With a :class:`Package` as its body.
    setting : Setting

    Returns
    -------
    Exposed
    """
    body = contact.body
    assert isinstance(body, Package)
    found: list[Found] = []
    gaps: list[Gap] = []
    inside: dict[str, Inside] = {}
    supply: dict[str, Array] = {}
    volume = setting.sample(body.head_space)
    for gas in ("O2", "H2O"):
        conductance = wall_conductance(body, gas, setting)
        if isinstance(conductance, Gap):
            gaps.append(conductance)
            continue
        found.append(conductance[1])
        outside = partial_pressure(body.outside, gas, setting)
        filled = partial_pressure(body.fill, gas, setting)
        capacity, floor, used = desiccant(body, gas, setting)
        found.extend(used)
        T = float(setting.T[0])
        one = let_in(conductance[0], outside, filled, volume, setting.duration, T, capacity, floor)
        inside[gas] = one
        supply[gas] = filled * volume / (R * T) + one.let_in - one.taken
    if gaps:
        made = stored(contact, setting, "indoor air", np.ones(1), {}, ())
        by_element = dict.fromkeys(("H", "O"), tuple(gaps))
        return Exposed(made.exposure, made.gain, {}, made.element_records, (), by_element, ())
    humidity = relative_humidity(setting, inside["H2O"].pressure)
    oxygen = float(np.median(partial_pressure(body.outside, "O2", setting)) / 101325.0)
    environment = environment_of(oxygen, float(np.median(humidity)))
    given = [body.area, body.head_space, body.thickness, body.desiccant]
    given += [*body.outside.fractions.values(), *body.fill.fractions.values()]
    inputs = tuple(g for g in given if g is not None)
    return stored(contact, setting, environment, humidity, supply, inputs, tuple(found))


def wall_conductance(body: Package, gas: str, setting: Setting) -> tuple[Array, Found] | Gap:
    """Return mol s-1 Pa-1 through the whole wall, (N,), and its record.

    A film has a permeability and needs its thickness; a finished wall has a permeance.
    """
    found = setting.library.find("packages", barrier=_barrier(body, setting), gas=gas)
    if isinstance(found, Gap):
        return found
    fields = found.record.fields
    if "permeance_mol_per_m2_s_Pa" in fields:
        per_area = np.array([fields["permeance_mol_per_m2_s_Pa"]])
    elif body.thickness is None:
        return Gap(found.record.quantity, "a film needs its thickness")
    else:
        per_area = fields["permeability_mol_per_m_s_Pa"] / setting.sample(body.thickness)
    return np.asarray(per_area * setting.sample(body.area) * spread_factor(setting, found.record)), found


def partial_pressure(atmosphere: Atmosphere, gas: str, setting: Setting) -> Array:
    """Return the partial pressure of a gas, Pa, (N,)."""
    given = atmosphere.fractions.get(gas)
    return np.zeros(1) if given is None else setting.sample(given) * setting.sample(atmosphere.pressure)


def desiccant(body: Package, gas: str, setting: Setting) -> tuple[Array, Array, tuple[Found, ...]]:
    """Return the capacity (mol) and floor (Pa) of the desiccant for a gas."""
    none = np.zeros(1)
    if body.desiccant is None or gas != "H2O":
        return none, none, ()
    found = setting.library.find("desiccants", desiccant=body.desiccant_kind or "silica gel")
    if isinstance(found, Gap):
        return none, none, ()
    fields = found.record.fields
    mass = (
        setting.sample(body.desiccant) * fields["capacity_kg_per_kg"] * spread_factor(setting, found.record)
    )
    molar = sum(setting.molar_mass[element] * count for element, count in atoms("H2O").items())
    return mass / molar, np.array([fields["floor_Pa"]]), (found,)


def let_in(
    conductance: Array,
    outside: Array,
    filled: Array,
    volume: Array,
    time: Array,
    T: float,
    capacity: Array,
    floor: Array,
) -> Inside:
    """Return what comes through a wall in a time.

    Parameters
    ----------
    conductance : (N,) array
        mol s-1 Pa-1.
    outside, filled : (N,) arrays
        Partial pressure in the room, and inside when closed, Pa.
    volume : (N,) array
        Head space, m3.
    time : (N,) array
        s.
    T : float
        K.
    capacity, floor : (N,) arrays
        mol that the desiccant takes, and the pressure it keeps, Pa. Without desiccant both are 0.

    Returns
    -------
    Inside
    """
    holds = volume / (R * T)
    dry = capacity > 0
    low = np.where(dry, np.minimum(floor, np.maximum(filled, 0.0)), filled)
    low = np.where(dry & (outside > floor), np.minimum(floor, outside), low)
    first = np.where(dry, np.minimum(capacity, np.maximum(filled - low, 0.0) * holds), 0.0)
    flow = conductance * np.maximum(outside - low, 0.0)
    lasts = np.where(dry, (capacity - first) / np.maximum(flow, 1e-300), 0.0)
    held = np.minimum(time, lasts)
    drift = np.exp(-conductance / holds * np.maximum(time - lasts, 0.0))
    end = outside - (outside - low) * drift
    entered = flow * held + holds * (end - low)
    return Inside(entered, first + flow * held, end)


def _barrier(body: Package, setting: Setting) -> str:
    wanted = body.barrier.casefold()
    for record in setting.library.rows("packages"):
        names = (record.words["barrier"], record.words["title"], *record.words["aliases"].split("|"))
        if wanted in (name.strip().casefold() for name in names):
            return record.words["barrier"]
    return body.barrier
