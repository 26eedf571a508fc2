"""What touches the metal in one choice: from the keys of a scenario file to contacts.

Inputs of a contact, by role (SI):

========== ========================================================================================
wall       none
mould      freezing_time (s), front_speed (m/s), crop (share cut off), water (kg/m2)
gas        pour_time (s), pour_area (m2) in a cast; its area is the free surface of a melt, the whole
           surface of a solid
support    contact_share (share of the metal's surface); its area is that share of the surface
wrap       none; its area is the metal's surface unless given
package    none; its area is the package's
dust       none; its area is the metal's surface
handling   touched (share of the surface); its area is that share
clean      removes (thickness taken off, m)
heel       mass (kg); amounts are kg over an area of 1 m2, so that area times amount is kg
neighbour  temperature (K), view (share of its vapour that lands); its area is the part's own
charge     none; its area is that of the pieces
========== ========================================================================================
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Final

from purity.scenario import Charge, Contact, Dust, Form, Given, Residue, Role, exact
from purity.scenario_keys import Keys, scaled
from purity.scenario_lines import Place
from purity.scenario_names import content, known_element
from purity.scenario_schema import DustTable, HeelTable, MaterialTable, NeighbourTable, ResidueTable

#: Share of a supported surface that truly touches, and share of the wall that an immersed part has, where
#: nobody says: common practice, no source.
_TOUCH: Final = (0.02 / 3, 0.02 * 3)
_PART: Final = (0.05 / 3, 0.05 * 3)


def walls(keys: Keys, role: Role, area: Given | None, inputs: Mapping[str, Given]) -> list[Contact]:
    """Return the container and what is immersed."""
    contacts: list[Contact] = []
    table = keys.get("container")
    if not isinstance(table, MaterialTable):
        keys.missing("container", 'container material and grade, such as "isostatic graphite, purified"')
    elif (body := keys.body("container", None, table)) and area is not None:
        contacts.append(Contact(role, body, area, role, inputs))
    if "immersed" not in keys:
        keys.missing(
            "immersed", 'everything else that touches the melt, such as ["fused silica sheath"]; [] says none'
        )
    for index, part in enumerate(keys.get("immersed") or []):
        body = keys.body("immersed", index, part)
        name = part.name or part.ref or (body.name if body else "")
        path = f"{keys.path('immersed')}/{name}/area"
        if part.area:
            surface: Given | None = replace(part.area, key=path)
        elif area is not None:
            low, high = (share * area.median for share in _PART)
            surface = keys.assume(path, (low, high), f"{name} has 5 % x/ 3 of the wall's area")
            surface = replace(surface, key=path)
        else:
            surface = None
        if body and surface:
            contacts.append(Contact("wall", body, surface, name))
    return contacts


def supports(keys: Keys, form: Form | None) -> list[Contact]:
    """Return what a solid lies on and what it is wrapped in."""
    contacts: list[Contact] = []
    parts = keys.get("support") or []
    share = keys.given("contact_share")
    if parts and share is None:
        share = keys.assume("contact_share", _TOUCH, "2 % x/ 3 of the surface touches the support")
    for index, part in enumerate(parts):
        body = keys.body("support", index, part)
        if body and form and share:
            area = scaled(share, form.area / len(parts))
            contacts.append(Contact("support", body, area, part.ref or body.name, {"contact_share": share}))
    for index, part in enumerate(keys.get("wrap") or []):
        body = keys.body("wrap", index, part)
        if body and form:
            path = f"{keys.path('wrap')}/{part.ref or body.name}/area"
            surface = replace(part.area, key=path) if part.area else exact(path, form.area)
            contacts.append(Contact("wrap", body, surface, part.ref or body.name))
    return contacts


def _elements(keys: Keys, place: Place, path: str, table: Mapping[str, Given] | None) -> dict[str, Given]:
    return {
        element: replace(given, key=f"{path}/{element}")
        for element, given in (table or {}).items()
        if known_element(keys.findings, (*place, element), element, keys.library)
    }


def dust(keys: Keys, area: Given | None) -> list[Contact]:
    """Return the particles that settle, by mass per area and time."""
    table = keys.get("dust")
    if not isinstance(table, DustTable):
        return []
    place, path = keys.place("dust"), keys.path("dust")
    contents = _elements(keys, (*place, "contents"), path, table.contents)
    if table.rate is None:
        keys.findings.missing((*place, "rate"), "settling rate, such as '5 mg/(m2 d)'")
    if not table.contents:
        keys.findings.missing(
            (*place, "contents"), "what it is made of by mass, such as { Fe = 0.05, Si = 0.2 }"
        )
    elif sum(given.median for given in contents.values()) > 1 + 1e-6:
        keys.findings.add((*place, "contents"), "the shares of the dust add up to more than 1")
    if area is None or table.rate is None or not contents:
        return []
    line = keys.findings.lines.line(place)
    body = Dust(
        table.name or "dust", replace(table.rate, key=f"{path}/rate"), contents, f"your file, line {line}"
    )
    return [Contact("dust", body, area, body.name)]


def touched(keys: Keys, form: Form | None) -> list[Contact]:
    """Return what handling, cutting or gripping leaves."""
    contacts: list[Contact] = []
    parts: list[ResidueTable] = keys.get("handling") or []
    if "handling" not in keys:
        keys.missing("handling", "what touches the metal and what it leaves; [] says nothing")
    for index, table in enumerate(parts):
        place = (*keys.place("handling"), index)
        name = table.name or f"handling {index + 1}"
        path = f"{keys.path('handling')}/{name}"
        amounts = _elements(keys, (*place, "leaves"), path, table.leaves)
        if not table.leaves:
            keys.findings.missing((*place, "leaves"), "what it leaves per area, such as { Na = '2 ug/cm2' }")
        if table.touched is None:
            keys.findings.missing((*place, "touched"), "share of the surface that is touched, such as '10 %'")
        if form and amounts and table.touched:
            share = replace(table.touched, key=f"{path}/touched")
            origin = f"your file, line {keys.findings.lines.line(keys.findings.place(place))}"
            area = scaled(share, form.area)
            contacts.append(
                Contact("handling", Residue(name, amounts, origin), area, name, {"touched": share})
            )
    return contacts


def cleaned(keys: Keys, area: Given | None) -> list[Contact]:
    """Return a bath or rinse."""
    table = keys.get("clean")
    if table is None:
        keys.missing(
            "clean", "what it takes off and leaves: { removes = '20 um', leaves = { F = '5 ng/cm2' } }"
        )
        return []
    place, path = keys.place("clean"), keys.path("clean")
    amounts = _elements(keys, (*place, "leaves"), path, table.leaves)
    if table.removes is None:
        keys.findings.missing(
            (*place, "removes"), "thickness taken off, such as '20 um'; 0 is a rinse: '1 nm'"
        )
    if area is None or table.removes is None:
        return []
    body = Residue(table.name or "clean", amounts, f"your file, line {keys.findings.lines.line(place)}")
    return [
        Contact("clean", body, area, body.name, {"removes": replace(table.removes, key=f"{path}/removes")})
    ]


def neighbours(keys: Keys) -> list[Contact]:
    """Return hot parts that evaporate onto the metal."""
    contacts: list[Contact] = []
    parts: list[NeighbourTable] = keys.get("neighbour") or []
    for index, table in enumerate(parts):
        place = (*keys.place("neighbour"), index)
        needs = {
            "material": "material of the part",
            "area": "area of the part that the metal sees",
            "temperature": "temperature of the part",
        }
        for key, text in needs.items():
            if getattr(table, key) is None:
                keys.findings.missing((*place, key), text)
        body = keys.body("neighbour", index, table.material) if table.material else None
        if not (body and table.area and table.temperature):
            continue
        path = f"{keys.path('neighbour')}/{body.name}"
        view = table.view and replace(table.view, key=f"{path}/view")
        if view is None:
            view = keys.assume(f"{path}/view", 1.0, f"all vapour of {body.name} lands on the metal")
        inputs = {"temperature": replace(table.temperature, key=f"{path}/temperature"), "view": view}
        contacts.append(
            Contact("neighbour", body, replace(table.area, key=f"{path}/area"), body.name, inputs)
        )
    return contacts


def heel(keys: Keys) -> list[Contact]:
    """Return what the crucible keeps of the last charge."""
    table = keys.get("heel")
    if not isinstance(table, HeelTable):
        return []
    place, path = keys.place("heel"), keys.path("heel")
    if table.mass is None:
        keys.findings.missing((*place, "mass"), "mass of the heel, such as '50 g'")
    if not table.contents:
        keys.findings.missing((*place, "contents"), "its contents, such as { Fe = '100 ppm' }")
    if table.mass is None or not table.contents:
        return []
    mass = replace(table.mass, key=f"{path}/mass")
    amounts: dict[str, Given] = {}
    for element, written in table.contents.items():
        where = (*place, "contents", element)
        if known_element(keys.findings, where, element, keys.library):
            inner = f"{path}/{element}"
            share = content(keys.findings, where, written, element, keys.host, keys.library, inner)
            if share:
                amounts[element] = scaled(share, mass.median)
    body = Residue("heel", amounts, f"your file, line {keys.findings.lines.line(place)}")
    return [Contact("heel", body, exact(f"{path}/area", 1.0), "heel", {"mass": mass})]


def charged(charge: Charge | None) -> list[Contact]:
    """Return the surface of what is charged."""
    if charge is None:
        return []
    return [Contact("charge", charge, exact("lot/charge/area", charge.piece.area), charge.name)]
