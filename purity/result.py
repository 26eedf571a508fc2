"""Result: plain numbers and words, the one product of a run. No arrays, no NaN, no physics."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

Word = Literal["gives off", "ample", "fair", "tight", "over", "closed"]
StateWord = Literal["ranked", "not ranked", "attacked"]
Block = Literal["metals", "gas formers"]


@dataclass(frozen=True, slots=True)
class Band:
    """5 %, 50 % and 95 % points."""

    low: float
    median: float
    high: float


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
