"""Which records stand behind the numbers of each element: no more and no fewer than can move them."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

import numpy as np

from purity.contacts.ceilings import counted
from purity.contacts.parcel import Parcel
from purity.contacts.setting import Exposed, Setting
from purity.database import Found, Gap
from purity.followers import Part

#: Records by element and quantity.
Behind = dict[str, dict[str, Found]]


def moved_by(
    setting: Setting,
    exposed: Sequence[Exposed],
    parts: Sequence[Part],
    loss: Sequence[Found],
    came: Mapping[str, tuple[Found, ...]],
) -> Behind:
    """Return what stands behind the content of each element as the lot leaves.

    Parameters
    ----------
    setting : Setting
    exposed : sequence of Exposed
    parts : sequence of Part
        Leading groups first.
    loss : sequence of Found
        Behind what evaporates of the host.
    came : mapping of element to records
        Behind the contents with which the lot enters.

    Returns
    -------
    dict
        An element hangs on all that the elements tied to it hang on.
    """
    entered = _entered(setting, exposed, came)
    moved: Behind = {element: {**found, **_named(loss)} for element, found in entered.items()}
    row = setting.library.find("hosts", host=setting.host, phase=setting.phase)
    density = [] if isinstance(row, Gap) else [row]
    led: list[tuple[Part, dict[str, Found]]] = []
    for part in parts:
        members = [setting.impurities[int(i)] for i in part.index]
        own = _named([*density, *_through(part, members, exposed)])
        for element in (*members, *(setting.impurities[i] for i in part.behind)):
            own |= entered[element]
        for leader, found in led:
            if set(part.behind) & {int(i) for i in leader.index}:
                own |= found
        led.append((part, own))
        for element in members:
            moved[element] |= own
    for part, own in led:
        for _, other, _ in part.shared:
            moved[setting.impurities[other]] |= own
    return moved


def seen_in(
    setting: Setting, exposed: Sequence[Exposed], parcels: Iterable[Parcel], moved: Behind
) -> dict[str, tuple[Found, ...]]:
    """Return what stands behind all that is said of each element: its contents and its ceilings.

    A ceiling hangs on the contents of the other elements of its compound.
    """
    seen = {element: dict(found) for element, found in moved.items()}
    for i, element in enumerate(setting.impurities):
        for one in exposed:
            for carrier in counted(one, i):
                seen[element] |= _named(one.carrier_records.get(carrier.name, ()))
                for j in np.flatnonzero(carrier.nu):
                    seen[element] |= moved[setting.impurities[int(j)]]
    for parcel in parcels:
        for element in parcel.ln_ceiling:
            seen[element] |= _named(parcel.found)
            for other in parcel.ln_ceiling:
                seen[element] |= moved[other]
    return {element: tuple(found.values()) for element, found in seen.items()}


def _entered(setting: Setting, exposed: Sequence[Exposed], came: Mapping[str, tuple[Found, ...]]) -> Behind:
    entered = {element: _named(came.get(element, ())) for element in setting.impurities}
    for one in exposed:
        if one.gain is None:
            continue
        for element, found in one.element_records.items():
            if element in entered:
                entered[element] |= _named(found)
    return entered


def _through(part: Part, members: Sequence[str], exposed: Sequence[Exposed]) -> list[Found]:
    """Records of the carriers, the exchange, the films and the skins of one group."""
    used: list[Found] = []
    for one in exposed:
        touching = [c for c in one.exposure.carriers if c.name in part.names]
        for carrier in touching:
            used.extend(one.carrier_records.get(carrier.name, ()))
        if touching or one.exposure.films:
            for member in members:
                used.extend(one.element_records.get(member, ()))
    for _, found in part.skins:
        used.extend(found)
    return used


def _named(found: Iterable[Found]) -> dict[str, Found]:
    return {one.record.quantity: one for one in found}


__all__ = ["moved_by", "seen_in"]
