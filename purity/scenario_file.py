"""The scenario file: TOML read, checked against its schema and completed, every fault with its line.

What must be given is never defaulted: mass, size or area, temperature and time, certificate, limits,
material of the container, what else touches, the state of the gas. What may be defaulted (pressure
1 atm, a quiescent melt, the depth of traces, the touching share) is marked as assumed and noted.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

from purity.constants import DILUTE, GAS_FORMERS
from purity.database import Library
from purity.errors import ScenarioError
from purity.quantities import show_content
from purity.scenario import Certified, Furnace, Given, Lot, Scenario
from purity.scenario_check import validate
from purity.scenario_choices import Known, charge_of, furnace_of, step
from purity.scenario_lines import Lines, Place, parse_text, read_text
from purity.scenario_names import Findings, content, known_element, known_formula, nearest
from purity.scenario_schema import ChargeTable, Content, FurnaceTable, LotTable, TopTable

#: Limit on the sum of all metals in the table of limits.
METALS = "metals"
#: Keys at the top of a file that hold tables.
TABLES = ("lot", "furnace", "furnaces", "step")
_NO_MASS = Given("lot/mass", "exact", 0.0, 0.0)


def _table(findings: Findings, data: Mapping[str, Any], key: str) -> Mapping[str, Any] | None:
    value = data.get(key)
    if value is None or isinstance(value, dict):
        return value
    findings.add((key,), f"a table is wanted: [{key}]")
    return None


def _host(findings: Findings, table: Mapping[str, Any], library: Library) -> str:
    """Return the host, "" where it is missing or no metal of the tables."""
    host = table.get("host")
    if not isinstance(host, str):
        findings.missing(("lot", "host"), 'the metal, such as "Cu"')
        return ""
    hosts = library.names("hosts", "host")
    if not known_element(findings, ("lot", "host"), host, library):
        return ""
    if host not in hosts:
        findings.add(("lot", "host"), f"no density of {host} is tabulated; hosts are {', '.join(hosts)}")
        return ""
    return host


def _certificate(
    findings: Findings, table: Mapping[str, Any], host: str, library: Library
) -> dict[str, Certified]:
    """Contents of the certificate as mass fractions."""
    rows = table.get("certificate")
    if rows is None:
        findings.missing(("lot", "certificate"), "certificate, such as { Fe = 0.3, O = '<1' } in ppm by mass")
        return {}
    out: dict[str, Certified] = {}
    for element, row in rows.items():
        place: Place = ("lot", "certificate", element)
        if not known_element(findings, place, element, library):
            continue
        if element == host:
            findings.add(place, "the host itself is no impurity; list the impurities only")
        if row.value is None:
            findings.missing((*place, "value"), "content in ppm by mass")
            continue
        given = content(findings, place, row.value, element, host, library, f"lot/certificate/{element}")
        limit = row.detection and content(
            findings, (*place, "detection"), row.detection, element, host, library, ""
        )
        if given:
            detection = limit.median if limit else given.high if given.law == "below" else None
            out[element] = Certified(given, row.method, detection)
    total = sum(c.given.median for c in out.values())
    if total > DILUTE:
        findings.add(
            ("lot", "certificate"),
            f"the contents add up to {total * 100:.3g} %; the dilute laws hold to {DILUTE * 100:g} %: "
            "numbers alone are ppm by mass",
        )
    return out


def _members(findings: Findings, place: Place, name: str, library: Library, host: str) -> tuple[str, ...]:
    """Elements that a limit is for."""
    members = tuple(part.strip() for part in name.split("+"))
    if len(set(members)) < len(members):
        findings.add(place, "an element stands twice in the sum")
    sound = [known_element(findings, place, part, library) for part in members]
    if host in members:
        findings.add(place, "the host itself is no impurity")
    return members if all(sound) else ()


def _limit(
    findings: Findings, place: Place, written: Content, element: str, host: str, library: Library
) -> float | None:
    if written.given.law == "below":
        findings.add(place, f"write the limit itself, {show_content(written.given.high)}, without '<'")
        return None
    if written.given.law != "exact":
        findings.add(place, "a limit is one number, without a range")
        return None
    if written.given.low <= 0:
        findings.add(place, "a limit must be above zero: no analysis shows nothing")
        return None
    given = content(findings, place, written, element, host, library, "")
    return given.low if given else None


def _limits(
    findings: Findings, table: Mapping[str, Any], host: str, library: Library
) -> tuple[dict[str, float], dict[str, tuple[str, ...]], float | None]:
    """Limits of elements and sums, members of the sums, and the limit on all metals."""
    rows = table.get("limits")
    if not rows:
        findings.missing(
            ("lot", "limits"), "limits, such as { Fe = 1.0, O = 5.0, metals = 10 } in ppm by mass"
        )
        return {}, {}, None
    limits: dict[str, float] = {}
    groups: dict[str, tuple[str, ...]] = {}
    metals = None
    for name, written in rows.items():
        place: Place = ("lot", "limits", name)
        if name == METALS:
            if written.by_mole:
                findings.add(place, "the sum of metals is by mass: write ppm")
            metals = _limit(findings, place, written, host, host, library)
            continue
        members = _members(findings, place, name, library, host)
        if len(members) > 1 and written.by_mole:
            findings.add(place, "a sum of elements is by mass: write ppm")
        value = _limit(findings, place, written, members[0], host, library) if members else None
        if value is not None:
            limits[name] = value
            if len(members) > 1:
                groups[name] = members
    return limits, groups, metals


def _closed(findings: Findings, lot: Lot) -> None:
    """Warn of allowances that are spent before the first step, and of limits that no certificate names."""
    known = {element: row.given.median for element, row in lot.certificate.items()}
    sums = {name: lot.groups.get(name, (name,)) for name in lot.limits}
    rows = [(name, lot.limits[name], members) for name, members in sums.items()]
    if lot.metals_limit is not None:
        rows.append((METALS, lot.metals_limit, tuple(e for e in known if e not in GAS_FORMERS)))
    for name, limit, members in rows:
        absent = [element for element in members if element not in known]
        if absent:
            findings.warn(f"{', '.join(absent)} not certified: pickup is given for {name}, its end is not")
        start = sum(known.get(element, 0.0) for element in members)
        if start >= limit:
            findings.warn(
                f"{name} is closed: certified {show_content(start)}, limit {show_content(limit)}; "
                "only a step that takes it out can bring the lot into grade"
            )
    for element, row in lot.certificate.items():
        limit_of = lot.limits.get(element)
        if row.given.law == "below" and limit_of is not None and row.given.high > limit_of:
            findings.warn(
                f"{element}: the detection limit {show_content(row.given.high)} lies above the limit "
                f"{show_content(limit_of)}; ask for a finer analysis"
            )


def _lot(findings: Findings, data: Mapping[str, Any], library: Library) -> Lot:
    raw = _table(findings, data, "lot")
    if raw is None:
        findings.missing(("lot",), "[lot] with host, mass, certificate and limits")
        return Lot("", _NO_MASS, {}, {})
    table = validate(LotTable, raw, lambda place, text: findings.add(("lot", *place), text))
    host = _host(findings, table, library)
    mass = table.get("mass")
    if mass is None:
        findings.missing(("lot", "mass"), "mass of the lot, such as '25 kg'")
    certificate = _certificate(findings, table, host, library)
    limits, groups, metals = _limits(findings, table, host, library)
    mass = replace(mass, key="lot/mass") if mass else _NO_MASS
    charge = None
    if isinstance(pieces := table.get("charge"), ChargeTable):
        weight = mass if mass.high > 0 else None
        charge = charge_of(findings, ("lot", "charge"), pieces, library, host, weight, "lot/charge")
    return Lot(host, mass, certificate, limits, groups, charge, metals)


def _vessel(findings: Findings, place: Place, raw: object, library: Library, path: str) -> Furnace | None:
    if not isinstance(raw, dict):
        findings.add(place, f"a table is wanted: [{'.'.join(map(str, place))}]")
        return None
    table = validate(FurnaceTable, raw, lambda inner, text: findings.add((*place, *inner), text))
    return furnace_of(findings, place, FurnaceTable.model_construct(**table), library, path)


def _furnaces(
    findings: Findings, data: Mapping[str, Any], library: Library
) -> tuple[Furnace | None, dict[str, Furnace]]:
    """Return the furnace of all steps, and those that a step may name."""
    common = None
    if "furnace" in data:
        common = _vessel(findings, ("furnace",), data["furnace"], library, "furnace")
    others: dict[str, Furnace] = {}
    for name, raw in (_table(findings, data, "furnaces") or {}).items():
        if made := _vessel(findings, ("furnaces", name), raw, library, f"furnaces/{name}"):
            others[name] = made
    return common, others


def _top(findings: Findings, data: Mapping[str, Any], library: Library) -> dict[str, Any]:
    own = {key: value for key, value in data.items() if key in TopTable.model_fields}
    for key in data.keys() - own.keys() - set(TABLES):
        findings.add((key,), f"unknown key; {nearest(key, (*TopTable.model_fields, *TABLES))}")
    table = validate(TopTable, own, lambda place, text: findings.add(place, text))
    if "title" not in table:
        findings.missing(("title",), "title of the scenario")
    risk = table.get("risk")
    if risk is not None and not (risk.law == "exact" and 0 < risk.low < 1):
        findings.add(("risk",), "the accepted chance of passing a limit lies between 0 and 1, such as 0.05")
    for index, entry in enumerate(table.get("prefer") or []):
        source = entry.rpartition("=")[2]
        if source not in library.sources:
            known = tuple(sorted(library.sources))
            findings.add(("prefer", index), f"no source {source!r}; {nearest(source, known)}")
    for index, formula in enumerate(table.get("exclude") or []):
        known_formula(findings, ("exclude", index), formula, library)
    return table


def _steps(findings: Findings, data: Mapping[str, Any]) -> list[Mapping[str, Any]]:
    rows = data.get("step")
    if not rows:
        findings.missing(("step",), "at least one [[step]]")
        return []
    if isinstance(rows, list) and all(isinstance(row, dict) for row in rows):
        return rows
    findings.add(("step",), "tables are wanted: [[step]]")
    return []


def build(path: str, data: dict[str, Any], lines: Lines, library: Library) -> Scenario:
    """Complete a scenario from parsed TOML; see :func:`read`."""
    findings = Findings(data, lines)
    top = _top(findings, data, library)
    lot = _lot(findings, data, library)
    furnace, furnaces = _furnaces(findings, data, library)
    mass, charge, taken = lot.mass if lot.mass.high > 0 else None, lot.charge, set[str]()
    said = isinstance(data.get("lot"), dict) and "charge" in data["lot"]
    steps = []
    for index, raw in enumerate(_steps(findings, data)):
        known = Known(lot.host, mass, charge, charge is None and said, furnace, furnaces)
        made = step(findings, index, raw, library, known, taken)
        if made:
            steps.append(made)
            # pieces are melted once; what goes into a second melt is not what was bought
            charge, said = (None, False) if made.process == "melt" else (charge, said)
    if findings.faults:
        raise ScenarioError(path, findings.faults)
    _closed(findings, lot)
    risk = top["risk"].low if "risk" in top else 0.05
    prefer, exclude = tuple(top.get("prefer") or ()), tuple(top.get("exclude") or ())
    return Scenario(top["title"], lot, tuple(steps), risk, prefer, exclude, tuple(findings.warnings))


def read(path: Path | str, library: Library) -> Scenario:
    """Read a scenario file.

    Parameters
    ----------
    path : path
        TOML in UTF-8.
    library : Library
        Holds the names of elements, compounds, materials, gases and packages.

    Returns
    -------
    Scenario
        In SI; every choice is complete.

    Raises
    ------
    ScenarioError
        Holds all faults of the file, sorted by line. Nothing is written.
    """
    data, lines = read_text(Path(path))
    return build(str(path), data, lines, library)


def read_string(text: str, library: Library, name: str = "scenario") -> Scenario:
    """Read a scenario from text; see :func:`read`."""
    data, lines = parse_text(name, text.encode())
    return build(name, data, lines, library)
