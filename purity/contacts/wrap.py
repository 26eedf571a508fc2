"""Foil around the pieces: gas comes in through its gaps, and a reactive foil shares what comes.

A network of conductances per area of metal, all in steady uptake. The vessel renews the gas at the
supply S; outside, the foil takes f; through the gaps goes p; inside, foil f and metal m share it::

    inward  q = p m / (p + f + m),   taken inside  y = p (f + m) / (p + f + m)
    metal's conductance              S q / (S + f + y)        [q where the vessel renews without limit]

A foil whose metal has a record of sticking for a gas takes it; one without only stands in the way. What the
foil can hold is taken to be without end, which is right for oxygen and nitrogen in a fresh foil.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from purity.contacts.setting import Setting, spread_factor
from purity.database import Found
from purity.driving_force.pure import atoms
from purity.scenario import Contact, Given, Material

Array = NDArray[np.float64]

#: Share of its area that a foil folded around pieces leaves open, 90 % band (common practice, no source).
OPEN = (0.01 / 3.0, 0.01 * 3.0)


def wraps(setting: Setting) -> list[Contact]:
    """Return the foils around the pieces of a choice."""
    return [c for c in setting.choice.contacts if c.role == "wrap" and isinstance(c.body, Material)]


def gaps(setting: Setting) -> dict[str, Given]:
    """Return the open share of each foil, by the name of its contact: assumed, for nobody measures it."""
    return {c.name: Given(f"{c.area.key}/open share", "lognormal", *OPEN, True) for c in wraps(setting)}


def wrapped(
    setting: Setting, gas: str, area: Array, supply: Array | None, free: Array, metal: Array
) -> tuple[Array, tuple[Found, ...]]:
    """Return the conductance of a gas to wrapped metal.

    Parameters
    ----------
    setting : Setting
    gas : str
    area : (N,) array
        Surface of the metal, m2.
    supply : (N,) array or None
        What the vessel renews, mol m-2 s-1 per unit activity.
    free : (K, N) array
        Gas film and free flight in series, without sticking.
    metal : (K, N) array
        The same with sticking on the metal.

    Returns
    -------
    (array, records)
        mol m-2 s-1 per unit activity. Foils around each other are taken one after the other.
    """
    records: tuple[Found, ...] = ()
    inward = metal
    outside: Array = np.zeros(1)
    inside = metal
    for contact in wraps(setting):
        sticks, found = _takes(setting, contact, gas)
        records = (*records, *found)
        foil = sticks * free * setting.sample(contact.area) / area
        gap = setting.sample(gaps(setting)[contact.name]) * free
        inward = inward * gap / (gap + foil + inside)
        inside = gap * (foil + inside) / (gap + foil + inside)
        outside = foil
    if supply is None:
        return inward, records
    return np.asarray(supply * inward / (supply + outside + inside)), records


def _takes(setting: Setting, contact: Contact, gas: str) -> tuple[Array, tuple[Found, ...]]:
    """Share of the molecules that stay on a foil, (N,): that of its main metal, 0 without a record."""
    body = contact.body
    assert isinstance(body, Material)
    main = max(body.phases, key=lambda formula: body.phases[formula])
    if len(atoms(main)) != 1:
        return np.zeros(1), ()
    found = setting.library.find("sticking", host=main, gas=gas, state="hot")
    if not isinstance(found, Found):
        return np.zeros(1), ()
    value = found.record.fields["probability"] * spread_factor(setting, found.record)
    return np.minimum(1.0, value), (found,)


__all__ = ["gaps", "wrapped", "wraps"]
