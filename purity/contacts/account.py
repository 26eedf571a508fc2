"""What a contact hangs on besides its carriers: records behind its inputs, and rows that were taken out.

A contact that loses a row must not look better for it. Where a user's own table takes out something that
a contact would use, and nothing stands in for it, the elements that hung on it are left unassessed.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from purity.constants import GAS_FORMERS
from purity.contacts.gas import LEAK, gases
from purity.contacts.setting import (
    T_ROOM,
    Exposed,
    Setting,
    behind,
    by_element,
    exchange_gaps,
    for_all,
    together,
    withdrawn,
)
from purity.contacts.storage import water_gaps
from purity.database import Found, Gap, phase_at
from purity.driving_force.pure import atoms
from purity.scenario import Atmosphere, Charge, Contact, Furnace, Material, Package

Gaps = Mapping[str, tuple[Gap, ...]]


def accounted(made: Exposed, contact: Contact, setting: Setting) -> Exposed:
    """Return a contact with the records behind its inputs, and with a gap for every row taken out.

    Parameters
    ----------
    made : Exposed
    contact : Contact
    setting : Setting

    Returns
    -------
    Exposed
    """
    match contact.body:
        case Material():
            gaps = _wall(contact.body, setting)
        case Atmosphere():
            stored = setting.choice.process == "store"
            gaps = _stored(setting, contact.body) if stored else _gas(contact.body, setting)
        case Package():
            gaps = _package(contact.body, setting)
        case Charge():
            gaps = _charge(contact.body, setting)
        case _:
            return made
    made = replace(made, gaps=together(made.gaps, gaps))
    if isinstance(contact.body, Charge):
        return _with_records(made, _pieces(setting))
    if not isinstance(contact.body, Atmosphere | Package):
        return made
    felt = {"O2", "H2O", *(carrier.name for carrier in made.exposure.carriers)}
    records = behind(setting, *made.inputs)
    if setting.choice.process == "store":
        records = (*records, *_pieces(setting))
    return _with_records(made, tuple(f for f in records if f.record.words.get("species", "O2") in felt))


def _pieces(setting: Setting) -> tuple[Found, ...]:
    """Return the density from which the number of pieces, and so their surface, follows."""
    phase = phase_at(setting.library, setting.host, T_ROOM)
    found = setting.library.find("hosts", host=setting.host, phase=phase)
    return () if isinstance(found, Gap) else (found,)


def _with_records(made: Exposed, records: tuple[Found, ...]) -> Exposed:
    """A gas is one mixture: what any of it hangs on is behind all that crosses with it."""
    carriers = {c.name: (*made.carrier_records.get(c.name, ()), *records) for c in made.exposure.carriers}
    element = {name: (*found, *records) for name, found in made.element_records.items() if found}
    return replace(made, carrier_records=carriers, element_records={**made.element_records, **element})


def _wall(material: Material, setting: Setting) -> Gaps:
    name = material.origin.removeprefix("containers:")
    traced = {e for formula in material.traces for e in atoms(formula)} - {setting.host}
    held = {e for formula in material.phases for e in atoms(formula)} - {setting.host} | traced
    main = max(material.phases, key=lambda formula: material.phases[formula], default="")
    depth = [
        gap
        for value in ("density", *(() if material.leach_depth else ("leach_depth",)))
        for gap in _value_gaps(setting, name, value)
    ]
    return together(
        by_element(setting, withdrawn(setting, f"containers:{name}", f"traces:{name}")),
        for_all(sorted(held), withdrawn(setting, f"wetting:{setting.host}/{main}")),
        for_all(sorted(traced), tuple(depth)),
        exchange_gaps(setting, "wall"),
    )


def _value_gaps(setting: Setting, name: str, value: str) -> tuple[Gap, ...]:
    """Return what is missing of a wall's own value; the general row where it has none."""
    own = setting.library.find("wall_values", material=name, property=value)
    gone = withdrawn(setting, f"wall_values:{name}/{value}")
    if gone or isinstance(own, Found):
        return gone
    general = setting.library.find("wall_values", material="*", property=value)
    return (general,) if isinstance(general, Gap) else ()


def _gas(atmosphere: Atmosphere, setting: Setting) -> Gaps:
    furnace = setting.choice.furnace or Furnace()
    zone = furnace.hot_zone or "none"
    row = setting.library.find("hot_zones", zone=zone)
    own = row.record.words["outgassing"] if isinstance(row, Found) else "outgassing"
    made_of = [f"atmospheres:{atmosphere.name}", atmosphere.origin]
    made_of += [f"atmospheres:{LEAK}"] if furnace.leak else []
    made_of += [f"atmospheres:{own}"] if furnace.outgassing else []
    crossing = {e for name in gases(setting) for e in atoms(name)} & set(setting.impurities)
    return together(
        by_element(setting, withdrawn(setting, *dict.fromkeys(made_of))),
        for_all(sorted(crossing), withdrawn(setting, f"hot_zones:{zone}")),
        _rates(setting),
        exchange_gaps(setting, "free surface"),
    )


def _rates(setting: Setting) -> Gaps:
    """Return what was taken out of the rates at which gases and vapours cross."""
    film = withdrawn(setting, "transfer:gas film")
    found: list[Gaps] = [for_all(setting.impurities, film)]
    metals = [e for e in setting.impurities if e not in GAS_FORMERS]
    for name in (*gases(setting), *metals):
        gone = withdrawn(
            setting, f"gas_transport:{name}", f"sticking:{setting.host}/{name}", f"sticking:*/{name}"
        )
        vapour = withdrawn(setting, f"gibbs:{name}/gas", *(("sticking:*/*",) if name in metals else ()))
        general = () if _knows(setting, name) else withdrawn(setting, "gas_transport:*")
        members = sorted(set(atoms(name)) & set(setting.impurities))
        found.append(for_all(members, (*gone, *vapour, *general)))
    return together(*found)


def _knows(setting: Setting, name: str) -> bool:
    return bool(setting.library.rows("gas_transport", gas=name))


def _films(setting: Setting) -> Gaps:
    held = [e for e in setting.impurities if e in GAS_FORMERS]
    return for_all(held, withdrawn(setting, f"films:{setting.host}"))


def _stored(setting: Setting, *rooms: Atmosphere) -> Gaps:
    made_of = {f"atmospheres:{room.name}": None for room in rooms} | {room.origin: None for room in rooms}
    return together(_films(setting), water_gaps(setting), by_element(setting, withdrawn(setting, *made_of)))


def _package(package: Package, setting: Setting) -> Gaps:
    drier = withdrawn(setting, f"desiccants:{package.desiccant_kind or 'silica gel'}")
    return together(
        _stored(setting, package.outside, package.fill),
        for_all(("H", "O"), drier if package.desiccant is not None else ()),
    )


def _charge(charge: Charge, setting: Setting) -> Gaps:
    rows = withdrawn(setting, f"surfaces:*/{charge.surface}", f"surfaces:{setting.host}/{charge.surface}")
    return together(by_element(setting, rows), _films(setting))


__all__ = ["accounted"]
