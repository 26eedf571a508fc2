"""Faults of a scenario file, and the names in it: elements, compounds, materials, gases.

Every function tells its faults to a :class:`Findings` and returns None where there is no answer, so
that one reading finds them all.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from difflib import get_close_matches
from typing import Any

from purity.composition import mass_from_fraction
from purity.constants import ATM
from purity.database import Found, Gap, Library
from purity.errors import Fault, OutOfRangeError
from purity.quantities import frost_point_fraction
from purity.scenario import Atmosphere, Given, Material, Still, exact
from purity.scenario_lines import Lines, Place, named
from purity.scenario_schema import Content, GasTable, MaterialTable

#: Names of parts that may follow the name of their material: "fused silica sheath".
PARTS = (
    "sheath",
    "tube",
    "rod",
    "stirrer",
    "stopper",
    "nozzle",
    "lance",
    "plunger",
    "skimmer",
    "filter",
    "thermowell",
    "tray",
    "boat",
    "plate",
    "foil",
    "setter",
    "lid",
    "liner",
    "mould",
    "crucible",
)
#: Keys that the long form of a table has and the file may not.
_HIDDEN = ("fractions", "rest")
_SUM = 1e-6


@dataclass(slots=True)
class Findings:
    """What is wrong and what deserves a warning, gathered over one reading."""

    data: Mapping[str, Any]
    lines: Lines
    faults: set[Fault] = field(default_factory=set)
    broken: set[Place] = field(default_factory=set)
    warnings: list[str] = field(default_factory=list)

    def place(self, place: Place) -> Place:
        """Return a place as the file has it, without the keys of long forms."""
        place = tuple(key for key in place if key not in _HIDDEN)
        while place and place[-1] in ("ref", "value", "material", 0) and place not in self.lines.at:
            place = place[:-1]
        return place

    def add(self, place: Place, text: str) -> None:
        """Note a fault, and that the value there is of no use."""
        place = self.place(place)
        self.faults.add(Fault(self.lines.line(place), named(self.data, place), text))
        self.broken.add(place)

    def missing(self, place: Place, text: str) -> None:
        """Note that a value is missing, unless it was there and had a fault of its own."""
        place = self.place(place)
        if not any(bad[: len(place)] == place for bad in self.broken):
            self.faults.add(Fault(self.lines.line(place), named(self.data, place), f"missing: {text}"))

    def warn(self, text: str) -> None:
        """Note a warning once."""
        if text not in self.warnings:
            self.warnings.append(text)


def nearest(name: str, known: tuple[str, ...], count: int = 3) -> str:
    """Return the known names nearest to one, as the end of a message."""
    folded = {other.casefold(): other for other in reversed(known)}
    near = [folded[word] for word in get_close_matches(name.casefold(), folded, count, 0.5)]
    if near:
        return f"nearest: {'; '.join(near)}"
    return f"known: {'; '.join(known[:12])}{'; ...' if len(known) > 12 else ''}"


def _gap(gap: Gap, known: tuple[str, ...], name: str) -> str:
    return f"nearest: {'; '.join(gap.nearest)}" if gap.nearest else nearest(name, known)


def molar_mass(library: Library, element: str) -> float | None:
    """kg/mol of an element, None where the table does not hold it."""
    found = library.find("elements", element=element)
    return found.record.fields["molar_mass_g_per_mol"] * 1e-3 if isinstance(found, Found) else None


def known_element(findings: Findings, place: Place, symbol: str, library: Library) -> bool:
    """Check the symbol of an element."""
    elements = library.names("elements", "element")
    if symbol in elements:
        return True
    words = {row.words.get("name", "").casefold(): row.words["element"] for row in library.rows("elements")}
    cure = f"write {words[symbol.casefold()]}" if symbol.casefold() in words else nearest(symbol, elements)
    findings.add(place, f"{symbol!r} is no symbol of an element; {cure}")
    return False


def elements_of(formula: str) -> tuple[str, ...] | None:
    """Elements of a formula without brackets (Al2O3, Fe0.947O); None where it is no formula."""
    if not re.fullmatch(r"(?:[A-Z][a-z]?\d*\.?\d*)+", formula):
        return None
    return tuple(dict.fromkeys(re.findall(r"[A-Z][a-z]?", formula)))


def known_formula(findings: Findings, place: Place, formula: str, library: Library) -> bool:
    """Check that a formula is made of elements."""
    symbols = elements_of(formula)
    known = library.names("elements", "element")
    if symbols is not None and all(symbol in known for symbol in symbols):
        return True
    findings.add(place, f"{formula!r} is no formula of a compound or gas, such as Al2O3 or H2O")
    return False


def content(
    findings: Findings, place: Place, written: Content, element: str, host: str, library: Library, key: str
) -> Given | None:
    """Return a content as a mass fraction; one by mole is turned with the molar masses."""
    given = replace(written.given, key=key)
    if not written.by_mole:
        return given
    mass, host_mass = molar_mass(library, element), molar_mass(library, host)
    if mass is None or host_mass is None:
        findings.add(place, f"a content by mole needs the molar mass of {element} in {host}; give it by mass")
        return None
    low, high = (float(mass_from_fraction(x, [mass], host_mass)[0]) for x in (given.low, given.high))
    return replace(given, low=low, high=high)


def _phases(
    findings: Findings, place: Place, table: Mapping[str, Given], library: Library
) -> Mapping[str, float]:
    compounds = library.names("gibbs", "formula")
    for formula, given in table.items():
        if known_formula(findings, (*place, formula), formula, library) and formula not in compounds:
            alike = tuple(
                f for f in compounds if set(elements_of(f) or ()) == set(elements_of(formula) or ())
            )
            near = nearest(formula, alike or compounds)
            findings.add((*place, formula), f"no table holds the compound {formula}; {near}")
        if given.law != "exact":
            findings.add((*place, formula), "one number is wanted for a phase, without a range")
    return {formula: given.median for formula, given in table.items()}


def _inline_material(
    findings: Findings, place: Place, table: MaterialTable, library: Library, key: str
) -> Material | None:
    if not table.phases:
        findings.missing((*place, "phases"), "phases, such as { Al2O3 = 0.997 }, by mass")
        return None
    phases = _phases(findings, (*place, "phases"), table.phases, library)
    return Material(
        name=table.name or " + ".join(phases),
        phases=phases,
        origin=f"your file, line {findings.lines.line(findings.place(place))}",
    )


def _named_material(findings: Findings, place: Place, ref: str, library: Library) -> Material | None:
    found = library.material(ref)
    words = ref.split()
    if isinstance(found, Gap) and len(words) > 1 and words[-1].lower() in PARTS:
        part = library.material(" ".join(words[:-1]))
        found = part if isinstance(part, Material) else found
    if isinstance(found, Gap):
        known = library.names("containers", "material")
        findings.add(
            place,
            f"no material {ref!r}; {_gap(found, known, ref)}; or describe it: "
            "{ phases = { Al2O3 = 0.997 }, traces = { SiO2 = '500 ppm' } }",
        )
        return None
    return found


def material(
    findings: Findings, place: Place, table: MaterialTable, library: Library, key: str
) -> Material | None:
    """Return the material that a table names or describes.

    What the table gives beside a name replaces that part of the material, as a lot certificate of a
    crucible does.
    """
    given = table.model_fields_set
    if table.ref is not None:
        base = _named_material(findings, place, table.ref, library)
    else:
        base = _inline_material(findings, place, table, library, key)
    if base is None:
        return None
    if table.ref is not None and given & {"phases", "traces", "leach_depth", "open_porosity", "service"}:
        line = findings.lines.line(findings.place(place))
        base = replace(base, origin=f"{base.origin}, changed by your file, line {line}")
    if table.ref is not None and table.phases:
        base = replace(base, phases=_phases(findings, (*place, "phases"), table.phases, library))
    traces = dict(base.traces)
    if table.traces is not None:
        traces = {}
        for formula, written in table.traces.items():
            if known_formula(findings, (*place, "traces", formula), formula, library):
                traces[formula] = replace(written.given, key=f"{key}/{formula}")
                if written.by_mole:
                    findings.add((*place, "traces", formula), "traces of a material are by mass: write ppm")
    total = sum(base.phases.values()) + sum(trace.median for trace in traces.values())
    if "phases" in given and not 0.9 <= total <= 1 + 1e-3:
        findings.add((*place, "phases"), f"phases and traces add up to {total:.4g}; by mass they must make 1")
    depth = replace(table.leach_depth, key=f"{key}/leach_depth") if table.leach_depth else base.leach_depth
    porosity = table.open_porosity
    return replace(
        base,
        name=table.name or base.name,
        traces=traces,
        leach_depth=depth,
        open_porosity=replace(porosity, key=f"{key}/open_porosity") if porosity else base.open_porosity,
        service={k: v.median for k, v in table.service.items()} if table.service else base.service,
    )


def species(
    findings: Findings, place: Place, table: GasTable, library: Library, key: str
) -> dict[str, Given] | None:
    """Mole fractions that a table gives, water from a dew point among them; "rest" is not filled in."""
    fractions: dict[str, Given] = {}
    sound = True
    for formula, given in (table.fractions or {}).items():
        sound &= known_formula(findings, (*place, "fractions", formula), formula, library)
        fractions[formula] = replace(given, key=f"{key}/{formula}")
    for formula in table.rest or []:
        sound &= known_formula(findings, (*place, "rest", formula), formula, library)
    if table.dew_point:
        if "H2O" in fractions:
            findings.add((*place, "dew_point"), "give H2O or dew_point, not both")
        try:
            fractions["H2O"] = frost_point_fraction(replace(table.dew_point, key=f"{key}/H2O"))
        except OutOfRangeError as error:
            findings.add((*place, "dew_point"), str(error))
    return fractions if sound else None


def _inline_gas(
    findings: Findings, place: Place, table: GasTable, library: Library, key: str
) -> Atmosphere | None:
    fractions = species(findings, place, table, library, key)
    if fractions is None:
        return None
    rest, total = table.rest or [], sum(given.median for given in fractions.values())
    if not fractions and not rest:
        findings.missing(place, 'a gas by name or by its fractions, { Ar = "rest", O2 = "2 ppm" }')
        return None
    if len(rest) > 1:
        findings.add(place, f"only one species can be the rest; there are {', '.join(rest)}")
    elif total > 1 + _SUM:
        findings.add(place, f"the fractions add up to {total:.6g}; they cannot exceed 1")
    elif not rest and total < 1 - _SUM:
        findings.add(place, f'the fractions add up to {total:.6g}; make one species "rest"')
    elif rest:
        fractions[rest[0]] = exact(f"{key}/{rest[0]}", max(1 - total, 0.0))
    line = findings.lines.line(findings.place(place))
    name = table.name or ", ".join([*rest, *(f for f in fractions if f not in rest)])
    pressure = exact(f"{key}/pressure", ATM, assumed=True)
    return Atmosphere(name, fractions, pressure, Still(), f"your file, line {line}")


def gas(findings: Findings, place: Place, table: GasTable, library: Library, key: str) -> Atmosphere | None:
    """Return the gas that a table names or describes, at 1 atm in a room until said otherwise."""
    if table.ref is None:
        return _inline_gas(findings, place, table, library, key)
    found = library.atmosphere(table.ref)
    if isinstance(found, Gap):
        known = library.names("atmospheres", "atmosphere")
        findings.add(
            place,
            f"no gas {table.ref!r}; {_gap(found, known, table.ref)}; or describe it: "
            "{ Ar = 'rest', O2 = '2 ppm', H2O = '3 ppm' }",
        )
        return None
    own = species(findings, place, table, library, key)
    if own:
        line = findings.lines.line(findings.place(place))
        found = replace(
            found,
            fractions={**found.fractions, **own},
            origin=f"{found.origin}, changed by your file, line {line}",
        )
    return found
