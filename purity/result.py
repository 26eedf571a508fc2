"""Result: plain numbers and words, the one product of a run. No arrays, no NaN, no physics.

A number that is not finite is refused when it enters, so that none can reach a table. What is unknown
is None, with the reason in ``gap``.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields
from html import escape
from math import isfinite
from typing import TYPE_CHECKING, Any, Literal

if TYPE_CHECKING:
    import pandas as pd

#: Version of the machine-readable shape; keys may be added within one version, none changes meaning.
SCHEMA = 1
#: Significant digits of machine-readable numbers.
DIGITS = 9

Word = Literal["gives off", "ample", "fair", "tight", "over", "closed"]
StateWord = Literal["ranked", "not ranked", "attacked"]
Block = Literal["metals", "gas formers"]


def _refuse_non_finite(thing: Any) -> None:
    for item in fields(thing):
        value = getattr(thing, item.name)
        if isinstance(value, float) and not isfinite(value):
            raise ValueError(f"{type(thing).__name__}.{item.name} is {value}; give None and the reason")


@dataclass(frozen=True, slots=True)
class Band:
    """5 %, 50 % and 95 % points."""

    low: float
    median: float
    high: float

    def __post_init__(self) -> None:
        _refuse_non_finite(self)


@dataclass(frozen=True, slots=True)
class ContactLine:
    """Share of one contact in the pickup of one impurity (mass ppm)."""

    contact: str
    pickup: Band
    ceiling: Band | None


@dataclass(frozen=True, slots=True)
class Line:
    """One impurity in one choice; contents in mass ppm, energies in J/mol."""

    impurity: str
    block: Block
    start: Band | None
    end: Band | None
    dissolved: Band | None
    pickup: Band | None
    limit: float | None
    margin: float | None
    worst: float | None
    detection: float | None
    spent: float | None
    word: Word | None
    chance_over: float | None
    chance_error: float | None
    ceiling: Band | None
    driving_force: float | None
    held_back_by: str | None
    shares: Mapping[str, float]
    contacts: tuple[ContactLine, ...]
    forms: tuple[str, ...]
    records: tuple[str, ...]
    quality: str | None
    extrapolated: bool
    gap: str | None
    series: tuple[tuple[float, Band], ...] | None = None
    start_method: str | None = None

    def __post_init__(self) -> None:
        _refuse_non_finite(self)


@dataclass(frozen=True, slots=True)
class ChoiceResult:
    """One choice of one step, ranked or set apart."""

    name: str
    rank: int | None
    state: StateWord
    tied_with: tuple[str, ...]
    chance_over: float | None
    chance_error: float | None
    deciding: str | None
    spent: float | None
    assessed: tuple[int, int]
    complete: bool
    assumed_share: float | None
    lines: tuple[Line, ...]
    host_loss_percent: float | None
    attack_um: float | None
    warnings: tuple[str, ...]
    species: tuple[str, ...] = ()
    #: Assumed inputs that drive the band most, first the one to measure first.
    measure: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        _refuse_non_finite(self)


@dataclass(frozen=True, slots=True)
class StepResult:
    """One step: how it was entered and how its choices rank."""

    name: str
    process: str
    entered_after: tuple[str, ...]
    choices: tuple[ChoiceResult, ...]


@dataclass(frozen=True, slots=True)
class RouteResult:
    """One choice for every step, in order."""

    choices: tuple[str, ...]
    chance_over: float | None
    chance_error: float | None
    deciding: str | None
    rank: int | None
    gap: str | None = None

    def __post_init__(self) -> None:
        _refuse_non_finite(self)


@dataclass(frozen=True, slots=True)
class Stamp:
    """What made the result."""

    version: str
    data_hash: str
    scenario_hash: str
    seed: int
    draws: int


@dataclass(frozen=True, slots=True)
class ScenarioFacts:
    """The head of a report: what was assessed and what was assumed."""

    title: str
    host: str
    mass_kg: float
    risk: float
    assumed: tuple[str, ...]
    limits_ppm: Mapping[str, float]
    warnings: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Result:
    """Everything a report needs."""

    stamp: Stamp
    scenario: ScenarioFacts
    steps: tuple[StepResult, ...]
    routes: tuple[RouteResult, ...]
    cautions: tuple[str, ...]
    gaps: tuple[str, ...]
    sources: tuple[str, ...] = ()

    def _repr_html_(self) -> str:
        return _html(self)


def to_dict(result: Result) -> dict[str, Any]:
    """Return a run as plain Python numbers, words, lists and dicts: the promised JSON shape.

    Parameters
    ----------
    result : Result

    Returns
    -------
    dict
        Numbers have 9 significant digits; contents are mass ppm; unknown is None.
    """
    stamp, head = result.stamp, result.scenario
    return {
        "schema": SCHEMA,
        "stamp": {
            "version": stamp.version,
            "data_hash": stamp.data_hash,
            "scenario_hash": stamp.scenario_hash,
            "seed": int(stamp.seed),
            "draws": int(stamp.draws),
        },
        "scenario": {
            "title": head.title,
            "host": head.host,
            "mass_kg": _number(head.mass_kg),
            "risk": _number(head.risk),
            "assumed": list(head.assumed),
            "limits_ppm": {name: _number(limit) for name, limit in head.limits_ppm.items()},
            "warnings": list(head.warnings),
        },
        "steps": [_step(step) for step in result.steps],
        "routes": [_route(route) for route in result.routes],
        "cautions": list(result.cautions),
        "gaps": list(result.gaps),
        "sources": list(result.sources),
    }


def _number(value: float | None) -> float | None:
    return None if value is None else float(f"{value:.{DIGITS}g}")


def _band(band: Band | None) -> dict[str, float | None] | None:
    if band is None:
        return None
    return {"median": _number(band.median), "low": _number(band.low), "high": _number(band.high)}


def _route(route: RouteResult) -> dict[str, Any]:
    return {
        "choices": list(route.choices),
        "chance_over": _number(route.chance_over),
        "chance_error": _number(route.chance_error),
        "deciding": route.deciding,
        "rank": None if route.rank is None else int(route.rank),
        "gap": route.gap,
    }


def _step(step: StepResult) -> dict[str, Any]:
    return {
        "name": step.name,
        "process": step.process,
        "entered_after": list(step.entered_after),
        "choices": [_choice(choice) for choice in step.choices],
    }


def _choice(choice: ChoiceResult) -> dict[str, Any]:
    return {
        "name": choice.name,
        "rank": None if choice.rank is None else int(choice.rank),
        "state": choice.state,
        "tied_with": list(choice.tied_with),
        "chance_over": _number(choice.chance_over),
        "chance_error": _number(choice.chance_error),
        "deciding": choice.deciding,
        "spent": _number(choice.spent),
        "assessed": [int(count) for count in choice.assessed],
        "complete": bool(choice.complete),
        "host_loss_percent": _number(choice.host_loss_percent),
        "attack_um": _number(choice.attack_um),
        "assumed_share": _number(choice.assumed_share),
        "measure": list(choice.measure),
        "warnings": list(choice.warnings),
        "species": list(choice.species),
        "impurities": [_line(line) for line in choice.lines],
    }


def _line(line: Line) -> dict[str, Any]:
    series = line.series
    return {
        "impurity": line.impurity,
        "block": line.block,
        "start_ppm": _band(line.start),
        "start_method": line.start_method,
        "end_ppm": _band(line.end),
        "dissolved_ppm": _band(line.dissolved),
        "worst_ppm": _number(line.worst),
        "pickup_ppm": _band(line.pickup),
        "limit_ppm": _number(line.limit),
        "margin_ppm": _number(line.margin),
        "spent": _number(line.spent),
        "word": line.word,
        "chance_over": _number(line.chance_over),
        "chance_error": _number(line.chance_error),
        "ceiling_ppm": _band(line.ceiling),
        "driving_force_J_per_mol": _number(line.driving_force),
        "detection_ppm": _number(line.detection),
        "held_back_by": line.held_back_by,
        "shares": {name: _number(share) for name, share in line.shares.items()},
        "contacts": [
            {
                "contact": part.contact,
                "pickup_ppm": _band(part.pickup),
                "ceiling_ppm": _band(part.ceiling),
            }
            for part in line.contacts
        ],
        "forms": list(line.forms),
        "records": list(line.records),
        "quality": line.quality,
        "extrapolated": bool(line.extrapolated),
        "gap": line.gap,
        "series": None
        if series is None
        else [{"time_s": _number(time), "content_ppm": _band(band)} for time, band in series],
    }


def to_rows(result: Result) -> list[dict[str, Any]]:
    """Return one flat row per step, choice and impurity, all with the same keys.

    Parameters
    ----------
    result : Result

    Returns
    -------
    list of dict
        Bands become ``end_ppm_low``, ``end_ppm_median``, ``end_ppm_high``; lists become one text.
    """
    return [
        _flat(step, choice, line) for step in result.steps for choice in step.choices for line in choice.lines
    ]


def _flat(step: StepResult, choice: ChoiceResult, line: Line) -> dict[str, Any]:
    row: dict[str, Any] = {
        "step": step.name,
        "process": step.process,
        "choice": choice.name,
        "rank": choice.rank,
        "state": choice.state,
        "tied_with": "; ".join(choice.tied_with),
        "choice_chance_over": _number(choice.chance_over),
        "deciding": choice.deciding,
        "impurity": line.impurity,
        "block": line.block,
        "start_method": line.start_method,
    }
    for name in ("start", "end", "dissolved", "pickup", "ceiling"):
        band: Band | None = getattr(line, name)
        for point in ("low", "median", "high"):
            row[f"{name}_ppm_{point}"] = None if band is None else _number(getattr(band, point))
    for name in ("limit", "margin", "worst", "detection"):
        row[f"{name}_ppm"] = _number(getattr(line, name))
    return row | {
        "spent": _number(line.spent),
        "word": line.word,
        "chance_over": _number(line.chance_over),
        "chance_error": _number(line.chance_error),
        "driving_force_J_per_mol": _number(line.driving_force),
        "held_back_by": line.held_back_by,
        "forms": "; ".join(line.forms),
        "records": "; ".join(line.records),
        "quality": line.quality,
        "extrapolated": bool(line.extrapolated),
        "gap": line.gap,
    }


def to_frame(result: Result) -> pd.DataFrame:
    """Return :func:`to_rows` as a pandas DataFrame."""
    import pandas as pd

    return pd.DataFrame(to_rows(result))


_HTML_COLUMNS = {
    "step": "step",
    "rank": "rank",
    "choice": "choice",
    "impurity": "impurity",
    "limit_ppm": "limit",
    "start_ppm_median": "start",
    "end_ppm_high": "end, upper 95 %",
    "end_ppm_median": "end, median",
    "chance_over": "chance over",
    "word": "spent",
    "gap": "gap",
}


def _html(result: Result, most: int = 50) -> str:
    rows = to_rows(result)
    head = "".join(f"<th>{escape(title)}</th>" for title in _HTML_COLUMNS.values())
    body = "".join(
        "<tr>" + "".join(f"<td>{_html_cell(row[key])}</td>" for key in _HTML_COLUMNS) + "</tr>"
        for row in rows[:most]
    )
    more = f"<p>{len(rows) - most} more rows in to_frame()</p>" if len(rows) > most else ""
    stamp = result.stamp
    foot = f"purity {stamp.version}, data {stamp.data_hash}, scenario {stamp.scenario_hash}, "
    foot += f"seed {stamp.seed}, {stamp.draws} draws; contents in mass ppm"
    return (
        f"<table><caption>{escape(result.scenario.title)}</caption><thead><tr>{head}</tr></thead>"
        f"<tbody>{body}</tbody></table>{more}<p>{escape(foot)}</p>"
    )


def _html_cell(value: object) -> str:
    if value is None:
        return ""
    return escape(f"{value:.2g}" if isinstance(value, float) else str(value))
