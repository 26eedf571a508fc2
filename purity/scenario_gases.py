"""The gas around the metal in one choice, and the package between stored metal and the room."""

from __future__ import annotations

import re
from dataclasses import replace
from typing import Final

from purity.constants import ATM
from purity.quantities import frost_point_pressure
from purity.scenario import Atmosphere, Contact, Flowing, Form, Package, Pumped, Sealed, Still, exact
from purity.scenario_forms import Bath
from purity.scenario_keys import Keys
from purity.scenario_names import gas, nearest
from purity.scenario_schema import GasTable, PackageTable

#: Keys of which one says how the gas is renewed.
RENEWAL: Final = ("flow", "sealed", "still", "pumped")
#: Highest pressure that is still called a vacuum, Pa.
_VACUUM: Final = 5e4


def _renewal(keys: Keys) -> tuple[str, ...]:
    """Keys that say how the gas is renewed.

    Those of a step hold unless the choice has its own, or describes its gas whole: a vacuum, or a
    composition with its pressure.
    """
    own = tuple(key for key in RENEWAL if keys.choice.get(key))
    table = keys.choice.get("atmosphere")
    described = isinstance(table, GasTable) and (
        _is_vacuum(table) or (table.ref is None and "pressure" in keys.choice)
    )
    if own or described:
        return own
    return tuple(key for key in RENEWAL if keys.step.get(key))


def _is_vacuum(table: GasTable) -> bool:
    return table.ref is not None and table.ref.strip().casefold() == "vacuum"


def _supplied(keys: Keys, found: Atmosphere, table: GasTable, open_room: bool) -> Atmosphere | None:
    """Add to a gas how it is renewed and at what pressure."""
    how = _renewal(keys)
    vacuum = _is_vacuum(table) and not how
    if _is_vacuum(table) and how and any(key in keys.choice for key in how if key != "pumped"):
        keys.findings.add(
            keys.place(how[0]), f"a vacuum has no {how[0]}; name the gas that flows, or leave {how[0]} out"
        )
        return None
    if len(how) > 1:
        keys.findings.add(keys.place(how[1]), f"give one of {' and '.join(how)}, not both")
        return None
    pressure = keys.given("pressure")
    pumped = vacuum or how == ("pumped",) or _is_vacuum(table)
    if pumped:
        if pressure is None:
            keys.missing("pressure", "pressure under the pump, such as '1e-3 mbar'")
            return None
        if pressure.median > _VACUUM:
            keys.findings.add(keys.place("pressure"), f"{pressure.median / 100:.4g} mbar is no vacuum")
        return replace(found, pressure=pressure, supply=Pumped())
    inline_held = table.ref is None and pressure is not None
    if not how and not open_room and not inline_held:
        keys.missing(
            "flow",
            'how the gas is renewed: flow = "4 L/min", sealed = "120 L", pumped = true or still = true',
        )
        return None
    if pressure is None:
        pressure = keys.assume("pressure", ATM, "pressure 1 atm")
    if flow := (keys.given("flow") if how == ("flow",) else None):
        return replace(found, pressure=pressure, supply=Flowing(flow))
    if volume := (keys.given("sealed") if how == ("sealed",) else None):
        return replace(found, pressure=pressure, supply=Sealed(volume))
    return replace(found, pressure=pressure, supply=Still())


def atmosphere(keys: Keys, T: float, *, open_room: bool) -> Atmosphere | None:
    """Return the gas around the metal, with its pressure, renewal and humidity.

    Parameters
    ----------
    keys : Keys
    T : float
        Temperature at which a relative humidity was read, K.
    open_room : bool
        Whether a gas that nobody renews is that of a room (storage, handling).
    """
    table = keys.get("atmosphere")
    if not isinstance(table, GasTable):
        keys.missing(
            "atmosphere", 'the gas, by name ("argon N5.0", "vacuum") or { Ar = "rest", O2 = "2 ppm" }'
        )
        return None
    found = gas(keys.findings, keys.place("atmosphere"), table, keys.library, keys.path("atmosphere"))
    found = _supplied(keys, found, table, open_room) if found else None
    humidity = keys.given("humidity")
    if found is None or humidity is None:
        return found
    if T > 373.15:
        keys.findings.add(keys.place("humidity"), "a relative humidity is that of a room, below 100 degC")
        return None
    share = frost_point_pressure(T) / found.pressure.median
    water = replace(humidity, low=humidity.low * share, high=humidity.high * share)
    return replace(found, fractions={**found.fractions, "H2O": water}, humidity=humidity)


def _package(keys: Keys, table: PackageTable, outside: Atmosphere | None) -> Package | None:
    place, path, findings = keys.place("package"), keys.path("package"), keys.findings
    needs = {
        "barrier": 'barrier, such as "polyethylene"',
        "area": "area of the package wall",
        "head_space": "gas volume in the package, such as '2 L'",
        "fill": 'gas shut in when it is closed, such as "clean-room air"',
    }
    for key, text in needs.items():
        if getattr(table, key) is None:
            findings.missing((*place, key), text)
    if table.desiccant is not None and table.desiccant_kind is None:
        findings.missing((*place, "desiccant_kind"), 'kind of desiccant, such as "silica gel"')
    kinds = keys.library.names("desiccants", "desiccant")
    if table.desiccant_kind is not None and table.desiccant_kind not in kinds:
        findings.add(
            (*place, "desiccant_kind"),
            f"no desiccant {table.desiccant_kind!r}; {nearest(table.desiccant_kind, kinds)}",
        )
    barrier = _barrier(keys, table)
    fill = gas(findings, (*place, "fill"), table.fill, keys.library, f"{path}/fill") if table.fill else None
    if table.outside:
        outside = gas(findings, (*place, "outside"), table.outside, keys.library, f"{path}/outside")
    if not (barrier and fill and outside and table.area and table.head_space):
        return None
    head_space = replace(table.head_space, key=f"{path}/head_space")
    return Package(
        name=table.name or barrier,
        barrier=barrier,
        thickness=replace(table.thickness, key=f"{path}/thickness") if table.thickness else None,
        area=replace(table.area, key=f"{path}/area"),
        head_space=head_space,
        fill=replace(fill, supply=Sealed(head_space)),
        outside=outside,
        desiccant=replace(table.desiccant, key=f"{path}/desiccant") if table.desiccant else None,
        desiccant_kind=table.desiccant_kind,
        origin=f"packages:{barrier}",
    )


def _barrier(keys: Keys, table: PackageTable) -> str | None:
    """Return the key of a barrier by key, title or alias; a film needs its thickness."""
    if table.barrier is None:
        return None
    place, wanted = keys.place("package"), table.barrier.strip().casefold()
    rows = keys.library.rows("packages")
    words = {
        word.strip().casefold(): row.words["barrier"]
        for row in rows
        for word in (row.words["barrier"], row.words["title"], *re.split("[|;]", row.words["aliases"]))
        if word.strip()
    }
    if wanted not in words:
        known = keys.library.names("packages", "barrier")
        keys.findings.add(
            (*place, "barrier"), f"no barrier {table.barrier!r}; {nearest(table.barrier, known)}"
        )
        return None
    barrier = words[wanted]
    finished = any(
        "permeance_mol_per_m2_s_Pa" in row.fields for row in rows if row.words["barrier"] == barrier
    )
    if not finished and table.thickness is None:
        keys.findings.missing((*place, "thickness"), f"thickness of the {barrier}, such as '100 um'")
    return barrier


def stored(keys: Keys, room: Atmosphere | None, form: Form | None) -> list[Contact]:
    """Return the package with its room, or the gas of the room itself."""
    table = keys.get("package")
    if isinstance(table, PackageTable):
        package = _package(keys, table, room)
        return [Contact("package", package, package.area, package.name)] if package else []
    if room is None or form is None:
        return []
    return [Contact("gas", room, exact(f"{keys.path_choice}/area", form.area), "gas")]


def melt_gas(keys: Keys, found: Atmosphere | None, bath: Bath | None) -> list[Contact]:
    """Return the gas over a melt, or over the top of a cast with the stream that fell through it."""
    own_form = "form" in keys.choice and "free_surface" not in keys.choice
    free = None if bath is not None and own_form else keys.given("free_surface")
    if free is None and bath is not None:
        free = exact(keys.path("form"), bath.free)
    if free is None:
        keys.missing("free_surface", "free surface of the melt, such as '175 cm2'")
    pour, inputs = keys.get("pour"), {}
    if pour is not None:
        for name in ("time", "area"):
            value = getattr(pour, name)
            if value is None:
                keys.findings.missing((*keys.place("pour"), name), f"{name} of the stream")
            else:
                inputs[f"pour_{name}"] = replace(value, key=f"{keys.path('pour')}/{name}")
    return [Contact("gas", found, free, "gas", inputs)] if found and free else []
