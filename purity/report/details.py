"""Lines below an element table: what a reader must know, and with --detail all that stands behind it."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence

from purity.report import words
from purity.result import ChoiceResult, Line

#: A pickup below this (ppm) of an element without limit and certificate is not worth a word.
WORTH_A_WORD = 1e-3


def stands_alone(line: Line) -> bool:
    """Say whether a line belongs in the table: it has a limit, a certified content or a gap."""
    return line.limit is not None or line.start is not None or line.pickup is None


def notes(
    choice: ChoiceResult, shown: Sequence[Line], *, methods: bool, known: Iterable[str]
) -> Iterator[str]:
    """Yield what the figures of a choice cannot be read without.

    Parameters
    ----------
    choice : ChoiceResult
    shown : sequence of Line
        Lines that stand in the table.
    methods : bool
        Name the methods of analysis here, because the table has no room for them.
    known : iterable of str
        Cautions printed once for the whole run, not to be repeated.
    """
    if methods:
        yield from _methods(choice)
    below = [line for line in shown if line.end and line.detection and line.end.high < line.detection]
    if methods and below:
        yield "in brackets: predicted, for it lies below the detection limit (DL)"
    worst = [f"{line.impurity} {words.content(line.worst)}" for line in shown if line.worst is not None]
    if worst:
        yield f"worst position in the piece: {', '.join(worst)}"
    alone = [line.impurity for line in shown if line.end is None and line.pickup is not None]
    if alone:
        yield f"the pickup alone, for the certificate does not name it: {', '.join(alone)}"
    yield from _left_out(line for line in choice.lines if shown and line not in shown)
    outside = [line.impurity for line in shown if line.extrapolated]
    if outside:
        yield f"records used outside their range (band widened): {', '.join(outside)}"
    yield from _gaps(shown)
    if choice.host_loss_percent is not None and choice.host_loss_percent >= 0.01:
        yield f"metal lost: {words.figures(choice.host_loss_percent)} %"
    if choice.attack_um is not None:
        yield f"wall taken by the metal: {words.figures(choice.attack_um)} um"
    told = set(known)
    for warning in choice.warnings:
        if warning not in told:
            yield f"warning: {warning}"


def _left_out(lines: Iterable[Line]) -> Iterator[str]:
    """Elements that neither certificate nor limits name: the most they may gain."""
    gained = [line for line in lines if line.pickup is not None and line.pickup.high >= WORTH_A_WORD]
    gained.sort(key=lambda line: -line.pickup.high if line.pickup else 0.0)
    if gained:
        listed = ", ".join(
            f"{line.impurity} {words.signed(line.pickup.high)}" for line in gained if line.pickup
        )
        yield f"neither certified nor limited, upper 95 % of the pickup: {listed}"


def _gaps(lines: Iterable[Line]) -> Iterator[str]:
    """What is not known or only partly, elements with the same reason together."""
    by: dict[str, list[str]] = {}
    for line in lines:
        if line.gap and (line.end is not None or line.pickup is None):
            by.setdefault(line.gap, []).append(line.impurity)
    yield from (f"{', '.join(names)}: {gap}" for gap, names in by.items())


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
