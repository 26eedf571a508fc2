"""Contacts that only bring something: charge surface, dust, touches, rinses, what a crucible kept.

What they hold goes to the metal at the start of the step, as content per mole of host. A melt takes
all of it in; on a solid it stays at the surface and is counted there.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from purity.contacts.setting import T_ROOM, Exposed, Setting, spread_factor
from purity.contacts.storage import grown, storage_films
from purity.database import Found
from purity.driving_force.pure import atoms
from purity.kinetics.exposure import Curve, Exposure
from purity.scenario import Charge, Contact, Dust, Given, Residue

Array = NDArray[np.float64]


def charge(contact: Contact, setting: Setting) -> Exposed:
    """Return what the surface of the charge carries: film, adsorbed water and carbon, residues.

    Parameters
    ----------
    contact : Contact
        With a :class:`Charge` as its body.
    setting : Setting

    Returns
    -------
    Exposed
        With `gain` set and no carriers. The certificate does not contain this.
    """
    body = contact.body
    assert isinstance(body, Charge)
    area = np.array([body.piece.area])
    amounts: dict[str, Array] = {}
    records: dict[str, tuple[Found, ...]] = {}
    for record in _surface_rows(setting, body.surface):
        species = record.record.quantity.split("/")[-1]
        if not set(atoms(species)) <= {*setting.impurities, setting.host}:
            continue
        mass = record.record.fields["amount_mg_per_m2"] * 1e-6 * spread_factor(setting, record.record)
        for element, mol in _elements(setting, species, mass * area).items():
            amounts[element] = amounts.get(element, np.zeros(1)) + mol
            records[element] = (*records.get(element, ()), record)
    seconds = setting.sample(body.days_in_air)
    for film, found in storage_films(setting, "indoor air"):
        thickness = grown(film, seconds, T_ROOM)
        for j, element in enumerate(setting.impurities):
            if film.nu[j]:
                amounts[element] = amounts.get(element, np.zeros(1)) + film.nu[j] * thickness * area
                records[element] = (*records.get(element, ()), found)
    return brought(contact, setting, amounts, records, (body.days_in_air,))


def dust(contact: Contact, setting: Setting) -> Exposed:
    """Return what settles on the metal: rate x area x time x content."""
    body = contact.body
    assert isinstance(body, Dust)
    mass = setting.sample(body.rate) * setting.sample(contact.area) * setting.duration
    amounts = {
        element: mass * setting.sample(share) / setting.molar_mass[element]
        for element, share in body.contents.items()
        if element in setting.impurities
    }
    return brought(contact, setting, amounts, {}, (body.rate, contact.area, *body.contents.values()))


def residue(contact: Contact, setting: Setting) -> Exposed:
    """Return what a touch, a cut, a rinse or a heel leaves: amount per area x area.

    A heel stands on an area of 1 m2; its own host is not added to the lot, for it is grams in kilograms.
    """
    body = contact.body
    assert isinstance(body, Residue)
    area = setting.sample(contact.area)
    amounts = {
        element: setting.sample(amount) * area / setting.molar_mass[element]
        for element, amount in body.amounts.items()
        if element in setting.impurities
    }
    return brought(contact, setting, amounts, {}, (contact.area, *body.amounts.values()))


def brought(
    contact: Contact,
    setting: Setting,
    amounts: Mapping[str, Array],
    records: Mapping[str, tuple[Found, ...]],
    inputs: tuple[Given, ...],
) -> Exposed:
    """Return a contact that brings amounts (mol, (N,)) by element at the start of the step, and no more."""
    zero = np.zeros(np.broadcast_shapes(setting.amount.shape, *(a.shape for a in amounts.values())))
    gain = np.stack(
        [np.broadcast_to(amounts.get(e, zero), zero.shape) / setting.amount for e in setting.impurities]
    )
    rate = Curve(setting.T[:1], np.zeros((len(setting.impurities), 1, 1)))
    exposure = Exposure(contact.name, setting.sample(contact.area), rate, ())
    return Exposed(exposure, gain, {}, records, inputs)


def _surface_rows(setting: Setting, surface: str) -> list[Found]:
    """Rows of the host for this surface; general ones for what the host has no row of."""
    rows: dict[str, Found] = {}
    for host in ("*", setting.host):
        for record in setting.library.rows("surfaces", host=host, surface=surface):
            rows[record.quantity.split("/")[-1]] = Found(record)
    return list(rows.values())


def _elements(setting: Setting, species: str, mass: Array) -> dict[str, Array]:
    """Mol of each impurity in a mass (kg) of a species."""
    counts = atoms(species)
    molar = sum(setting.molar_mass[element] * count for element, count in counts.items())
    return {
        element: mass / molar * count for element, count in counts.items() if element in setting.impurities
    }


__all__ = ["brought", "charge", "dust", "residue"]
