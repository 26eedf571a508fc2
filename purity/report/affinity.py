"""Affinity of one impurity for one metal, as plain mappings -> text."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from typing import Any

from purity.report import words
from purity.report.plain import table
from purity.result import Band

Facts = Mapping[str, Any]


def render(facts: Facts, *, width: int = 80) -> str:
    """Return the affinity of an impurity as text.

    Parameters
    ----------
    facts : mapping
        Fields of the answer by name, nested; energies in J/mol, contents in mass ppm, T in K.
    width : int

    Returns
    -------
    str
    """
    T = facts["T"]
    parts = [
        f"{facts['impurity']} in {facts['phase']} {facts['host']} at {T - 273.15:.0f} degC ({T:.0f} K)\n"
    ]
    parts.append("".join(f"{line}\n" for line in _activity(facts)))
    if facts["contents"]:
        parts.append(
            "\nFrom the pure element into the metal, by content\n" + _contents(facts["contents"], width)
        )
    if facts["saturations"]:
        parts.append("\nWhat forms, at the least content first\n" + _saturations(facts["saturations"], width))
    if facts["contacts"]:
        under = f" under {facts['atmosphere']}" if facts["atmosphere"] else ""
        parts.append(f"\nWhat contacts allow{under}\n" + _contacts(facts["contacts"], width))
    parts += [f"not known: {gap}\n" for gap in facts["gaps"]]
    return "".join(parts)


def _activity(facts: Facts) -> Iterator[str]:
    best = facts["activity"]
    if best is None:
        return
    ln = facts["ln_gamma"]
    value = (
        f"{best['ln_gamma']:.2f}"
        if ln is None
        else f"{ln['median']:.2f} ({ln['low']:.2f} to {ln['high']:.2f})"
    )
    far = ", outside the range of its record" if facts["extrapolated"] else ""
    yield f"ln gamma {value} against {best['reference']}{far}"
    yield f"  {best['how']}, class {best['quality']}: {best['source']}, {best['where']}"
    for rival in facts["rivals"]:
        yield f"  rival {rival['source']}: {rival['ln_gamma']:.2f} against {rival['reference']}"


def _contents(rows: Sequence[Facts], width: int) -> str:
    titles = ("content", "driving force, kJ/mol", "energy of mixing, J/mol of metal")
    cells = [
        (words.content(row["ppm"]), _kilojoule(row["driving_force"]), words.figures(row["mixing"], 3))
        for row in rows
    ]
    return table(titles, cells, width=width)


def _saturations(rows: Sequence[Facts], width: int) -> str:
    cells = []
    for row in rows:
        notes = [] if row["dilute"] else ["beyond the dilute range"]
        if row["measured"] is not None:
            notes.append(f"measured {words.content(row['measured'])}")
        if row["conflict"]:
            notes.append("computed and measured disagree: measured taken")
        cells.append((row["formula"], _span(row["ppm"]), ", ".join(notes)))
    return table(("phase", "content", ""), cells, width=width)


def _contacts(rows: Sequence[Facts], width: int) -> str:
    titles = ("ceiling", "kJ/mol at 1 ppm", "contact")
    cells = []
    for row in rows:
        known = _span(row["ceiling"]) if row["ceiling"] else "none"
        forms = f"; forms {', '.join(row['forms'])}" if row["forms"] else ""
        gap = f"; {row['gap']}" if row["gap"] else ""
        contact = f"{row['contact']} ({row['kind']}){forms}{gap}"
        cells.append((known, _kilojoule(row["driving_force"]), contact))
    return table(titles, cells, width=width)


def _span(band: Facts) -> str:
    return words.span(Band(**band))


def _kilojoule(band: Facts | None) -> str:
    if band is None:
        return ""
    median, low, high = (f"{band[point] / 1000:.0f}" for point in ("median", "low", "high"))
    return f"{median} ({low} to {high})"
