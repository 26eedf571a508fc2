"""From a scenario to a result: walk the steps, rank the choices of each, carry the lot on.

Draw j of a step starts from draw j of the step before, so choices and routes are compared on the same
draws. Physics is :mod:`purity.passing`; what is said of it is :mod:`purity.lines`.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass
from difflib import get_close_matches
from functools import partial

import numpy as np
from numpy.typing import NDArray

from purity import __version__
from purity.catalogue import bibliography
from purity.cautions import cautions, for_choice
from purity.constants import GAS_FORMERS
from purity.database import Found, Gap, Library
from purity.draws import Draws
from purity.driving_force.pure import atoms
from purity.errors import Fault, ScenarioError
from purity.followers import total
from purity.kinetics.advance import State
from purity.lines import Column, block, columns, counts, from_nothing, group_columns, group_line, line, to_ppm
from purity.passing import Passed, pass_step
from purity.result import ChoiceResult, Result, RouteResult, ScenarioFacts, Stamp, StateWord, StepResult
from purity.risk import Standing, load, standings
from purity.risk import state as standing_state
from purity.scenario import Choice, Dust, Lot, Material, Residue, Scenario, Step, scenario_hash
from purity.starting import assumed_records, initial, molar_masses, prior
from purity.uncertainty import assumed_share, band, drivers

Array = NDArray[np.float64]

#: Most runs of a choice that one assessment may make for its routes.
MOST_RUNS = 400
#: Runs up to which every route is walked; beyond, only those from the best HEADS choices of the first step.
FULL_RUNS, HEADS = 40, 3
#: Share of a content that an error of the time steps has to reach to be told.
WORTH_SAYING = 0.05

Came = Mapping[str, tuple[Found, ...]]


def assess(
    scenario: Scenario,
    library: Library,
    draws: Draws,
    *,
    executor: Executor | None = None,
    history: bool = False,
    route: Sequence[str] | None = None,
) -> Result:
    """Rank the choices of every step and the routes through them.

    Parameters
    ----------
    scenario : Scenario
    library : Library
    draws : Draws
    executor : concurrent.futures.Executor, optional
        Runs choices and routes side by side; the result does not depend on it.
    history : bool
        Keep contents over time.
    route : sequence of str, optional
        Choices by which later steps are entered; default: the best of each step.

    Returns
    -------
    Result
    """
    impurities = followed(scenario)
    molar_mass = molar_masses(library, (scenario.lot.host, *impurities))
    run = partial(
        pass_step,
        lot=scenario.lot,
        impurities=impurities,
        molar_mass=molar_mass,
        library=library,
        draws=draws,
        exclude=scenario.exclude,
        history=history,
    )
    start = initial(scenario.lot, impurities, molar_mass, library, draws)
    known = assumed_records(scenario.lot, impurities, library)
    walked: dict[tuple[str, ...], Passed] = {}
    steps: list[StepResult] = []
    taken: tuple[str, ...] = ()
    for number, step in enumerate(scenario.steps):
        before, came = (start, known) if not taken else (walked[taken].after, walked[taken].behind)
        passed = _run(run, before, came, step.choices, executor)
        for one in passed:
            walked[(*taken, one.choice.name)] = one
        steps.append(_step_result(step.name, step.process, taken, passed, scenario, library, draws))
        taken = (*taken, _next(steps[-1], route, number, scenario))
    heads, left_out = _heads(scenario, steps)
    routes = _routes(scenario, run, walked, draws, executor, heads)
    gaps = tuple(
        dict.fromkeys(gap_text(g) for one in walked.values() for found in one.gaps.values() for g in found)
    )
    gone = tuple(f"{quantity}: withdrawn by your own table" for quantity in sorted(library.withdrawn))
    used = dict.fromkeys(
        f.record.quantity for one in walked.values() for found in one.records.values() for f in found
    )
    return Result(
        Stamp(__version__, library.data_hash, scenario_hash(scenario), draws.seed, draws.n),
        _facts(scenario, walked.values()),
        tuple(steps),
        routes,
        cautions(scenario, library),
        tuple(dict.fromkeys((*gone, *gaps, *left_out))),
        tuple(sorted({citation for _, citation, _ in bibliography(library, used)})),
    )


def followed(scenario: Scenario) -> tuple[str, ...]:
    """Return the elements of a run, sorted: certified, limited, gas formers, those of walls and residues."""
    lot = scenario.lot
    elements = {*counts(lot), *GAS_FORMERS}
    for step in scenario.steps:
        for choice in step.choices:
            for contact in choice.contacts:
                if isinstance(contact.body, Material):
                    for formula in (*contact.body.phases, *contact.body.traces):
                        elements |= set(atoms(formula))
                if isinstance(contact.body, Residue):
                    elements |= set(contact.body.amounts)
                if isinstance(contact.body, Dust):
                    elements |= set(contact.body.contents)
    return tuple(sorted(elements - {lot.host}))


def gap_text(gap: Gap) -> str:
    """Return a gap as a sentence."""
    near = f"; nearest: {', '.join(gap.nearest)}" if gap.nearest else ""
    return f"{gap.quantity}: {gap.reason}{near}"


def _run(
    run: Callable[..., Passed],
    before: State,
    came: Came,
    choices: Sequence[Choice],
    executor: Executor | None,
) -> list[Passed]:
    if executor is None:
        return [run(before, choice, came=came) for choice in choices]
    return list(executor.map(partial(run, came=came), [before] * len(choices), choices))


def _next(done: StepResult, route: Sequence[str] | None, number: int, scenario: Scenario) -> str:
    """Name of the choice by which the next step is entered."""
    if route is not None and number < len(route):
        names = [choice.name for choice in scenario.steps[number].choices]
        if route[number] not in names:
            name = scenario.steps[number].name
            near = ", ".join(get_close_matches(route[number], names, 3)) or ", ".join(names)
            what = f"step {name!r} has no choice {route[number]!r}; nearest: {near}"
            raise ScenarioError(scenario.title, [Fault(0, "route", what)])
        return route[number]
    ranked = [choice for choice in done.choices if choice.rank is not None]
    first = min(ranked, key=lambda choice: choice.rank or 0) if ranked else done.choices[0]
    return first.name


@dataclass(frozen=True, slots=True)
class _Weighed:
    """Columns of a choice that have a limit, as arrays for ranking."""

    names: tuple[str, ...]
    over: NDArray[np.bool_]
    loads: Array


def _weigh(passed: Passed, lot: Lot) -> _Weighed:
    """Weigh every limited element; one without a certificate by what it gains, the least it can hold."""
    found = columns(passed, lot)
    singles = [
        c if c.certified else from_nothing(c) for c in found.values() if not passed.gaps.get(c.element)
    ]
    rows = [c for c in (*singles, *group_columns(found, lot)) if c.limit is not None]
    n = passed.setting.draws.n
    over = np.array([c.end > (c.limit or 0.0) for c in rows]).reshape(len(rows), n)
    loads = np.array([load(float(np.median(c.start)), c.end, c.limit or 0.0) for c in rows])
    return _Weighed(tuple(c.element for c in rows), over, loads.reshape(len(rows), n))


def _standing_state(passed: Passed, lot: Lot) -> tuple[StateWord, tuple[int, int]]:
    needed = [*counts(lot), *(("metals",) if lot.metals_limit is not None else ())]
    missing = {element for element, gaps in passed.gaps.items() if gaps}
    if any(block(element) == "metals" for element in missing & set(passed.impurities)):
        missing.add("metals")
    assessed = sum(element not in missing for element in needed)
    attacked = bool(passed.attacked.mean() > 0.05)
    return standing_state(assessed, len(needed), attacked=attacked), (assessed, len(needed))


def _step_result(
    name: str,
    process: str,
    taken: tuple[str, ...],
    passed: Sequence[Passed],
    scenario: Scenario,
    library: Library,
    draws: Draws,
) -> StepResult:
    lot, blocks = scenario.lot, max(draws.blocks, 1)
    states = [_standing_state(one, lot) for one in passed]
    weighed = [_weigh(one, lot) for one in passed]
    ranks = standings(
        [s for s, _ in states],
        [w.over for w in weighed],
        [w.loads for w in weighed],
        blocks,
    )
    names = [one.choice.name for one in passed]
    done = [
        _choice_result(one, state, assessed, standing, w, names, scenario, library, draws)
        for one, (state, assessed), standing, w in zip(passed, states, ranks, weighed, strict=True)
    ]
    order = sorted(done, key=lambda c: (c.rank is None, c.rank or 0, c.state == "attacked"))
    return StepResult(name, process, taken, tuple(order))


def _choice_result(
    passed: Passed,
    state: StateWord,
    assessed: tuple[int, int],
    standing: Standing,
    weighed: _Weighed,
    names: Sequence[str],
    scenario: Scenario,
    library: Library,
    draws: Draws,
) -> ChoiceResult:
    lot, blocks = scenario.lot, max(draws.blocks, 1)
    found = columns(passed, lot)
    lines = [line(passed, column, lot, blocks) for column in found.values() if _worth_a_line(passed, column)]
    lines += [group_line(passed, column, lot, blocks) for column in group_columns(found, lot)]
    deciding = None if standing.deciding is None else weighed.names[standing.deciding]
    share, measure = _assumed(passed, found, deciding, draws)
    loss = float(np.median(passed.host_loss)) * 100.0
    return ChoiceResult(
        name=passed.choice.name,
        rank=standing.rank,
        state=state,
        tied_with=tuple(names[j] for j in standing.tied_with),
        chance_over=standing.chance_over,
        chance_error=standing.chance_error,
        deciding=deciding,
        spent=standing.spent,
        assessed=assessed,
        complete=assessed[0] == assessed[1],
        assumed_share=share,
        lines=tuple(lines),
        host_loss_percent=loss,
        attack_um=None if passed.attack is None else 1e6 * float(np.median(passed.attack)),
        warnings=(*passed.notes, *_numerical(passed, lot), *for_choice(passed.choice, lot, library)),
        species=tuple(dict.fromkeys(s for one in passed.parcels.values() for s in one.species)),
        measure=measure,
    )


def _worth_a_line(passed: Passed, column: Column) -> bool:
    """Certified and limited elements always; others where they move, or could not be assessed."""
    moved = bool(np.any(np.abs(column.end - column.start) > 1e-6))
    return column.certified or column.limit is not None or moved or bool(passed.gaps.get(column.element))


def _numerical(passed: Passed, lot: Lot) -> tuple[str, ...]:
    needed = counts(lot)
    texts = [
        f"time steps leave an error of up to {error:.0%} in {element}"
        for element, error in zip(passed.impurities, passed.errors, strict=True)
        if element in needed and error > WORTH_SAYING
    ]
    if passed.flags.any():
        texts.append(
            f"{passed.flags.mean():.1%} of the draws were not solved cleanly and are kept as they are"
        )
    return tuple(texts)


def _assumed(
    passed: Passed, found: Mapping[str, Column], deciding: str | None, draws: Draws
) -> tuple[float | None, tuple[str, ...]]:
    """Share of the deciding band that comes from assumed inputs, and those inputs, first the largest."""
    from purity.draws import normal

    if deciding is None or deciding not in found or not draws.blocks:
        return None, ()
    givens = {g.key: g for one in passed.exposed for g in one.inputs if g.law != "exact"}
    inputs = {key: normal(draws, key)[0] for key in givens}
    inputs |= {
        f.record.quantity: normal(draws, f.record.quantity)[0] for f in passed.records.get(deciding, ())
    }
    drive = drivers(inputs, found[deciding].end)
    assumed = {key for key, given in givens.items() if given.assumed}
    return assumed_share(drive, assumed), tuple(key for key in drive.shares if key in assumed)[:3]


def _facts(scenario: Scenario, walked: Iterable[Passed]) -> ScenarioFacts:
    lot = scenario.lot
    assumed = {
        given.key for one in walked for exposed in one.exposed for given in exposed.inputs if given.assumed
    }
    limits = {element: 1e6 * limit for element, limit in lot.limits.items()}
    if lot.metals_limit is not None:
        limits["metals"] = 1e6 * lot.metals_limit
    return ScenarioFacts(
        scenario.title,
        lot.host,
        lot.mass.median,
        scenario.risk,
        tuple(sorted(assumed)),
        limits,
        scenario.warnings,
    )


@dataclass(frozen=True, slots=True)
class _End:
    """End of a route: its choices, whether all of it could be assessed, weight of its last step."""

    path: tuple[str, ...]
    state: StateWord
    weighed: _Weighed


def _heads(scenario: Scenario, steps: Sequence[StepResult]) -> tuple[list[str], tuple[str, ...]]:
    """Return the first choices whose routes are walked, and what is left out in words.

    All of them while that takes at most FULL_RUNS runs; else the best few of the first step, for a later
    step mends little of what the first one brought in.
    """
    sizes = [len(step.choices) for step in scenario.steps]
    names = [choice.name for choice in scenario.steps[0].choices]
    if len(sizes) < 2 or int(np.sum(np.cumprod(sizes))) <= FULL_RUNS:
        return names, ()
    ranked = [choice.name for choice in steps[0].choices if choice.rank is not None][:HEADS]
    best = ranked or [steps[0].choices[0].name]
    later = int(np.sum(np.cumprod(sizes[1:])))
    if later * len(best) > MOST_RUNS:
        return [], (f"routes: {int(np.prod(sizes))} are too many to walk; give --route",)
    text = f"routes: walked from the best {len(best)} of {len(names)} choices of {scenario.steps[0].name}"
    return best, (text,) if len(best) < len(names) else ()


def _routes(
    scenario: Scenario,
    run: Callable[..., Passed],
    walked: Mapping[tuple[str, ...], Passed],
    draws: Draws,
    executor: Executor | None,
    names: Sequence[str],
) -> tuple[RouteResult, ...]:
    """Routes that begin with some choices, best first; each prefix is run once and shared."""
    if len(scenario.steps) < 2 or not names:
        return ()
    known = [{path: one for path, one in walked.items() if path[0] == name} for name in names]
    walk = partial(_ends, partial(run, explain=False), scenario.steps[1:], scenario.lot)
    heads = [(walked[(name,)],) for name in names]
    branches = map(walk, known, heads) if executor is None else executor.map(walk, known, heads)
    ends = [end for branch in branches for end in branch]
    ranks = standings(
        [end.state for end in ends],
        [end.weighed.over for end in ends],
        [end.weighed.loads for end in ends],
        max(draws.blocks, 1),
    )
    results = [
        RouteResult(
            end.path,
            r.chance_over,
            r.chance_error,
            None if r.deciding is None else end.weighed.names[r.deciding],
            r.rank,
            None if end.state == "ranked" else end.state,
        )
        for end, r in zip(ends, ranks, strict=True)
    ]
    return tuple(sorted(results, key=lambda r: (r.rank is None, r.rank or 0)))


def _ends(
    run: Callable[..., Passed],
    steps: Sequence[Step],
    lot: Lot,
    known: Mapping[tuple[str, ...], Passed],
    legs: tuple[Passed, ...],
) -> list[_End]:
    """Walk every route that begins with these legs; `known` holds those that have been walked."""
    path = tuple(leg.choice.name for leg in legs)
    if not steps:
        return [_End(path, _route_state(legs, lot), _weigh(legs[-1], lot))]
    ends: list[_End] = []
    for choice in steps[0].choices:
        next_leg = known.get((*path, choice.name))
        if next_leg is None:
            next_leg = run(legs[-1].after, choice, came=legs[-1].behind)
        ends += _ends(run, steps[1:], lot, known, (*legs, next_leg))
    return ends


def _route_state(legs: Sequence[Passed], lot: Lot) -> StateWord:
    found: list[StateWord] = [_standing_state(leg, lot)[0] for leg in legs]
    return next((state for state in found if state != "ranked"), "ranked")


__all__ = ["assess", "band", "block", "followed", "initial", "molar_masses", "prior", "to_ppm", "total"]
