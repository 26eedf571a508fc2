"""Result -> the table of a terminal: plain text that fits 80 columns and widens."""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator, Sequence
from io import StringIO

from rich.console import Console, RenderableType
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from purity.report import details, words
from purity.result import Block, ChoiceResult, Line, Result, StepResult

#: From this width on the method of analysis and the word for spent stand in the element table.
WIDE = 110
ROUTES_SHOWN = 5
FIGURES = ("limit", "start", "end 95 %", "median", "margin", "chance over")
#: Stands for the blank between a number and its unit until the lines are broken.
GLUE = "\ue000"
BLOCKS: tuple[Block, ...] = ("metals", "gas formers")
CLOSING = (
    "An estimate for planning, not a release: analysis decides. Your standards, safety data sheets, "
    "local codes and licensed practice come first."
)


def render(result: Result, *, width: int = 80, detail: bool = False, color: bool = False) -> str:
    """Return the risk table as text.

    Parameters
    ----------
    result : Result
    width : int
        Columns, at least 80; a cell that is too narrow wraps between words, never inside a number.
    detail : bool
        Element tables of every choice, with driving force, ceilings, contacts, records and species.
    color : bool
        Repeat the words in colour; no meaning hangs on it.

    Returns
    -------
    str
        Lines without trailing blanks, ended by a line feed.
    """
    out = StringIO()
    console = Console(
        file=out,
        width=max(width, 80),
        force_terminal=color,
        force_jupyter=False,
        color_system="standard" if color else None,
        no_color=not color,
        legacy_windows=False,
        markup=False,
        highlight=False,
        emoji=False,
    )
    for part in _parts(result, console.width, detail):
        console.print(part)
    text = out.getvalue().replace(GLUE, " ")
    return "\n".join(line.rstrip() for line in text.splitlines()) + "\n"


def _parts(result: Result, width: int, detail: bool) -> Iterator[RenderableType]:
    yield from _head(result)
    for number, step in enumerate(result.steps, 1):
        yield from _step(result, step, number, width, detail)
    yield from _routes(result, width)
    yield from _listed("cautions", result.cautions)
    yield from _listed("not known", result.gaps)
    yield from _listed(f"assumed, not given ({words.DAGGER})", result.scenario.assumed)
    if detail:
        yield from _listed("sources", result.sources)
    stamp = result.stamp
    yield Text()
    if not result.cautions:
        yield Text(CLOSING)
    yield Text(
        f"purity {stamp.version}, data {stamp.data_hash[:12]}, scenario {stamp.scenario_hash[:12]}, "
        f"seed {stamp.seed}, {stamp.draws} draws"
    )


def _head(result: Result) -> Iterator[RenderableType]:
    head = result.scenario
    yield Text(head.title, style="bold")
    yield Text(
        f"{head.host}, {head.mass_kg:g} kg; accepted chance of passing a limit {words.accepted(head.risk)}"
    )
    yield Text("Contents in ppm by mass, below 0.1 ppm in ppb. End: upper 95 % first, then the median.")
    for warning in head.warnings:
        yield _indented(f"note: {warning}")


def _step(
    result: Result, step: StepResult, number: int, width: int, detail: bool
) -> Iterator[RenderableType]:
    title = f"STEP {number}  {step.name}" + (f" ({step.process})" if step.process != step.name else "")
    entered = (
        f"entered after {', '.join(step.entered_after)}" if step.entered_after else "entered as certified"
    )
    yield Text()
    yield Text(f"{title}, {entered}", style="bold")
    yield Text("-" * width)
    ranked = sorted((choice for choice in step.choices if choice.rank is not None), key=lambda c: c.rank or 0)
    if ranked:
        yield _overview(result, step, ranked)
        yield from _ties(ranked)
    else:
        yield Text("No choice could be ranked.")
    yield from _apart(step)
    for choice in ranked + [c for c in step.choices if c.rank is None] if detail else _shown(step, ranked):
        yield from _elements(choice, width, detail, known=result.cautions)


def _shown(step: StepResult, ranked: list[ChoiceResult]) -> list[ChoiceResult]:
    """The one choice whose elements are printed without --detail."""
    return (ranked or [choice for choice in step.choices if choice.state == "not ranked" and choice.lines])[
        :1
    ]


def _grid() -> Table:
    return Table(box=None, expand=True, pad_edge=False, padding=(0, 1, 0, 0), header_style="underline")


def _overview(result: Result, step: StepResult, ranked: list[ChoiceResult]) -> Table:
    table = _grid()
    table.add_column("rank", no_wrap=True, justify="right")
    table.add_column("choice", ratio=3, overflow="fold")
    table.add_column("chance over", no_wrap=True, justify="right")
    table.add_column("decides", no_wrap=True)
    table.add_column("limited by", ratio=2, overflow="fold")
    table.add_column("allowance spent", no_wrap=True)
    for choice in ranked:
        line = _deciding(choice)
        table.add_row(
            Text(str(choice.rank)),
            Text(choice.name + _dagger(result, step, choice)),
            Text(words.chance(choice.chance_over, choice.chance_error)),
            Text(choice.deciding or ""),
            Text(words.limits_it(line) if line else ""),
            _spent(line),
        )
    return table


def _dagger(result: Result, step: StepResult, choice: ChoiceResult) -> str:
    key = f"{step.name}/{choice.name}/"
    return f" {words.DAGGER}" if any(name.startswith(key) for name in result.scenario.assumed) else ""


def _deciding(choice: ChoiceResult) -> Line | None:
    return next((line for line in choice.lines if line.impurity == choice.deciding), None)


def _spent(line: Line | None) -> Text:
    if line is None or line.word is None:
        return Text("")
    return Text(
        f"{words.bar(line.spent, line.word)} {line.word}", style=words.COLOURS.get(line.word, "green")
    )


def _ties(ranked: list[ChoiceResult]) -> Iterator[RenderableType]:
    """One line for each group whose order is inside the sampling error."""
    for choice in ranked:
        group = [other.name for other in ranked if other.rank == choice.rank]
        if len(group) > 1 and group[0] == choice.name:
            yield _indented(f"tied: {' = '.join(group)} (their difference is inside its sampling error)")


def _apart(step: StepResult) -> Iterator[RenderableType]:
    """Choices without a rank, with the reason."""
    for choice in step.choices:
        counted = f"{choice.assessed[0]} of {choice.assessed[1]} assessed"
        if choice.state == "not ranked":
            missing = [
                f"{line.impurity} ({line.gap.removeprefix('no data: ')})"
                for line in choice.lines
                if line.gap and line.pickup is None
            ]
            reason = "; ".join(missing or choice.warnings or ["the contact itself"])
            yield _indented(f"not ranked: {choice.name}, {counted}, no data for {reason}")
        elif choice.state == "attacked":
            yield _indented(
                f"attacked: {choice.name}, {counted}; a contact dissolves in the metal beyond the dilute "
                "range, and no rate of attack is on record"
            )


def _elements(
    choice: ChoiceResult, width: int, detail: bool, *, known: Iterable[str]
) -> Iterator[RenderableType]:
    place = f"rank {choice.rank}" if choice.rank is not None else choice.state
    counted = f"{choice.assessed[0]} of {choice.assessed[1]} assessed"
    yield Text()
    yield Text(f"{choice.name}: {place}, {counted}", style="bold")
    if choice.assumed_share is not None and choice.assumed_share > 0.5:
        yield _indented(
            f"indicative: measure {', '.join(choice.measure) or 'the assumed inputs'} first "
            f"({100 * choice.assumed_share:.0f} % of the band is assumed)"
        )
    # The dilute law has no number to give where the metal or its surface left it.
    told = () if choice.state == "attacked" else choice.lines
    lines = [line for line in told if detail or details.stands_alone(line)]
    yield from _blocks(lines, width)
    for note in details.notes(choice, lines, methods=width < WIDE, known=known):
        yield _indented(note)
    if detail and told:
        yield from (_indented(line) for line in details.choice(choice))


def worst_first(lines: Iterable[Line]) -> list[Line]:
    """Order lines: limits of which nothing is known, then by chance over and spent; without a limit last."""

    def place(line: Line) -> tuple[bool, bool, float, float, str]:
        used = line.spent if line.spent is not None else 1e9 * (line.word == "closed")
        return (
            line.limit is None,
            line.chance_over is not None,
            -(line.chance_over or 0.0),
            -used,
            line.impurity,
        )

    return sorted(lines, key=place)


def _blocks(lines: Sequence[Line], width: int) -> Iterator[Table]:
    """Metals, then gas formers, in columns of one width."""
    cells = {line.impurity: _cells(line, wide=width >= WIDE) for line in lines}
    name_width = max(7, *(min(14, len(name)) for name in cells), 0)
    widths = [max(len(row[column]) for row in (FIGURES, *cells.values())) for column in range(len(FIGURES))]
    for block in BLOCKS:
        inside = worst_first(line for line in lines if line.block == block)
        if not inside:
            continue
        table = _grid()
        table.add_column(block, width=name_width, overflow="fold")
        for title, column_width in zip(FIGURES, widths, strict=True):
            table.add_column(title, width=column_width, justify="right", no_wrap=True)
        if width >= WIDE:
            table.add_column("spent", width=9, no_wrap=True)
        table.add_column("limited by", ratio=1, overflow="fold")
        for line in inside:
            table.add_row(
                Text(line.impurity),
                *map(Text, cells[line.impurity]),
                *([Text(line.word or "")] if width >= WIDE else []),
                Text(words.limits_it(line)),
                style=words.COLOURS.get(line.word or "", ""),
            )
        yield table


def _cells(line: Line, *, wide: bool) -> tuple[str, ...]:
    upper, median = words.ends(line, wide=wide)
    margin = "" if line.margin is None else words.content(line.margin)
    return (words.limit(line.limit), words.start(line, method=wide), upper, median, margin, _chance(line))


def _chance(line: Line) -> str:
    if line.limit is None:
        return "no limit"
    if line.end is None and line.pickup is not None:
        return "uncertified"
    return words.chance(line.chance_over, line.chance_error)


def _routes(result: Result, width: int) -> Iterator[RenderableType]:
    ranked = sorted((route for route in result.routes if route.rank is not None), key=lambda r: r.rank or 0)
    if len(result.steps) < 2 or not ranked:
        return
    yield Text()
    yield Text("BEST ROUTES" if len(ranked) > 1 else "BEST ROUTE", style="bold")
    yield Text("-" * width)
    table = _grid()
    table.add_column("rank", no_wrap=True, justify="right")
    table.add_column("one choice for every step", ratio=1, overflow="fold")
    table.add_column("chance over", no_wrap=True, justify="right")
    table.add_column("decides", no_wrap=True)
    for route in ranked[:ROUTES_SHOWN]:
        table.add_row(
            Text(str(route.rank)),
            Text(", then ".join(route.choices)),
            Text(words.chance(route.chance_over, route.chance_error)),
            Text(route.deciding or ""),
        )
    yield table
    if len(ranked) > ROUTES_SHOWN:
        yield _indented(f"{len(ranked) - ROUTES_SHOWN} more in --json")


def _listed(title: str, items: Iterable[str]) -> Iterator[RenderableType]:
    for position, item in enumerate(items):
        if not position:
            yield Text()
            yield Text(title.upper(), style="bold")
        yield _indented(item)


def _indented(text: str) -> Padding:
    """A paragraph that never breaks between a number and its unit."""
    return Padding(Text(re.sub(r"(?<=\d) (?=(?:%|ppb|um|kJ/mol|degC|kg)\b|%)", GLUE, text)), (0, 0, 0, 2))
