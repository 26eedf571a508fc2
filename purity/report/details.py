"""Lines below an element table: what a reader must know, and with --detail all that stands behind it."""

from __future__ import annotations

from collections.abc import Iterator

from purity.report import words
from purity.result import ChoiceResult, Line


def notes(choice: ChoiceResult, *, methods: bool) -> Iterator[str]:
    """Yield what the figures of a choice cannot be read without.

    Parameters
    ----------
    choice : ChoiceResult
    methods : bool
        Name the methods of analysis here, because the table has no room for them.
    """
    if methods:
        yield from _methods(choice)
    lines = choice.lines
    worst = [f"{line.impurity} {words.content(line.worst)}" for line in lines if line.worst is not None]
    if worst:
        yield f"worst position in the piece: {', '.join(worst)}"
    alone = [line.impurity for line in lines if line.end is None and line.pickup is not None]
    if alone:
        yield f"+ is the pickup alone, the certificate does not name it: {', '.join(alone)}"
    outside = [line.impurity for line in lines if line.extrapolated]
    if outside:
        yield f"records used outside their range (band widened): {', '.join(outside)}"
    for line in lines:
        if line.gap and line.pickup is None:
            yield f"{line.impurity}: {line.gap}"
    if choice.host_loss_percent is not None and choice.host_loss_percent >= 0.01:
        yield f"metal lost: {words.figures(choice.host_loss_percent)} %"
    if choice.attack_um is not None:
        yield f"wall taken by the metal: {words.figures(choice.attack_um)} um"
    for warning in choice.warnings:
        yield f"warning: {warning}"


def _methods(choice: ChoiceResult) -> Iterator[str]:
    by: dict[str, list[str]] = {}
    for line in choice.lines:
        if line.start_method:
            by.setdefault(line.start_method, []).append(line.impurity)
    if by:
        yield "start by: " + "; ".join(f"{method} ({', '.join(names)})" for method, names in by.items())


def choice(choice: ChoiceResult) -> Iterator[str]:
    """Yield driving force, ceiling, spent, contacts, forms and records of every element, then species."""
    for line in choice.lines:
        yield f"{line.impurity}: {'; '.join(_behind(line)) or 'nothing recorded'}"
    if choice.species:
        yield f"species considered: {', '.join(choice.species)}"


def _behind(line: Line) -> Iterator[str]:
    if line.driving_force is not None:
        way = "into the metal" if line.driving_force >= 0 else "out of the metal"
        yield f"driving force {words.figures(abs(line.driving_force) / 1000)} kJ/mol {way}"
    if line.ceiling is not None:
        yield f"ceiling {words.span(line.ceiling)}"
    if line.spent is not None:
        yield f"spent {words.figures(100 * line.spent)} % of the allowance"
    if line.dissolved is not None and line.end is not None and line.forms:
        yield f"dissolved {words.span(line.dissolved)}"
    for part in line.contacts:
        yield f"{part.contact} {words.span(part.pickup)}"
    shares = [f"{name} {100 * share:.0f} %" for name, share in line.shares.items() if share >= 0.005]
    if shares:
        yield f"held back by {', '.join(shares)}"
    if line.forms:
        yield f"forms {', '.join(line.forms)}"
    if line.records:
        yield f"records {', '.join(line.records)}"
    if line.quality:
        yield f"quality {line.quality}"
