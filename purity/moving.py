"""How the elements of a lot move through a choice: who leads, who follows, what forms on the way.

Elements that no carrier and no skin ties together are moved apart from each other, so that a record
changes only the elements it has to do with, to the last bit. Compounds that could form are watched:
where the metal ends beyond the saturation of one, the step is redone with that compound as a skin.
Traces of a wall follow the bath that leads (:mod:`purity.kinetics.groups`).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from functools import partial

import numpy as np
from numpy.typing import NDArray

from purity.contacts import products
from purity.contacts.setting import Exposed, Setting, diffusivity
from purity.database import Found, Gap
from purity.followers import NODES, Course, Part, move_followers, nodes_of, total, ways_of
from purity.kinetics.advance import Host, State, advance
from purity.kinetics.exposure import Carrier, Curve, Exposure, Skin
from purity.kinetics.groups import follower, heavy, idle, may_follow, restrict, spare, tied, ties, turnover
from purity.kinetics.schedule import Schedule

Array = NDArray[np.float64]
Index = NDArray[np.int64]

#: Share of what another gas moves of an element below which a gas is left out.
IDLE = 1e-2
#: Share of a content of a melt below which a gas is left out in any case: it does not show in a band.
FLOOR = 1e-2
#: Share of a content below which a single element is taken not to cross.
STILL = 1e-6
#: Share of the draws in which a compound may act back on the leaders and still follow.
RARE = 0.05
#: ln of saturation beyond which a compound is taken to form.
BEYOND = 1e-6
#: Most rounds in which compounds and sinks that turn out to matter are added.
ROUNDS = 5
#: Error of the time steps from which a short step is done again with as many as a long one.
ROUGH = 0.02


@dataclass(frozen=True, slots=True)
class Plan:
    """What is followed together: exposures without what is left out, skins, and compounds that lead."""

    exposures: tuple[Exposure, ...]
    skins: Mapping[str, tuple[Skin, tuple[Found, ...]]]
    heavy: frozenset[str] = frozenset()


def move(
    entered: State,
    setting: Setting,
    schedule: Schedule,
    exposed: Sequence[Exposed],
    history: bool,
    *,
    explain: bool = True,
) -> list[Part]:
    """Lead with what is tied together, then let the others follow; add what turns out to matter.

    Parameters
    ----------
    entered : State
        With what the contacts bring at once already in it.
    setting : Setting
    schedule : Schedule
    exposed : sequence of Exposed
    history : bool
    explain : bool
        Find what holds each pickup back.

    Returns
    -------
    list of Part
        Leading groups first.
    """
    whole = tuple(one.exposure for one in exposed)
    if not setting.liquid:
        return _move_solid(whole, entered, setting, schedule, history)
    seen = products.watched(setting)
    plan = Plan(_without_idle(whole, entered, setting, schedule, seen), {})
    plan = replace(plan, heavy=_heavy_beside_carbon(plan))
    plan = replace(plan, skins=_present(plan, entered, setting, schedule, seen))
    leading: list[Part] = []
    for _ in range(ROUNDS):
        lead, groups, traces = _leaders(plan, len(setting.impurities))
        leading = [_advance(entered, setting, schedule, lead, index, history, explain) for index in groups]
        x = _collect(entered.x, leading)
        grown = _grown(plan, whole, groups, traces, entered, setting, schedule, seen, x)
        if grown is None:
            break
        plan = grown
    course = Course(x, np.minimum(entered.x, x), {int(i) for group in groups for i in group}, seen)
    ways = ways_of(plan.exposures, traces, course, setting, entered.x)
    alone = [way for way in ways if not way.linear]
    return [
        *leading,
        *(
            _advance(entered, setting, schedule, plan, np.array([way.element]), history, explain)
            for way in alone
        ),
        *move_followers(
            [way for way in ways if way.linear], plan.exposures, setting, schedule, entered, history, explain
        ),
    ]


def _move_solid(
    whole: tuple[Exposure, ...], entered: State, setting: Setting, schedule: Schedule, history: bool
) -> list[Part]:
    """Move a solid: compounds with its host cap its surface; stored metal only grows films."""
    if any(e.films for e in whole):
        plan = Plan(whole, {})
    else:
        moving = _without_still(
            _without_idle(whole, entered, setting, schedule, {}), entered, setting, schedule
        )
        plan = Plan(moving, products.host_compounds(setting))
    groups = tied(plan.exposures, (), len(setting.impurities))
    return [_advance(entered, setting, schedule, plan, index, history) for index in groups]


def _without_still(
    whole: tuple[Exposure, ...], entered: State, setting: Setting, schedule: Schedule
) -> tuple[Exposure, ...]:
    """Leave out single elements that a gas could not move by more than STILL: metals far from boiling."""
    hot = np.broadcast_to(schedule.T.max(axis=0), (setting.draws.n,))
    held = np.maximum(total(entered), 1e-12)
    kept = []
    for e in whole:
        moved = {
            c.name: turnover(c, e.area, setting.amount, held, held, setting.duration, hot).max()
            for c in e.carriers
            if np.count_nonzero(c.nu) == 1
        }
        kept.append(replace(e, carriers=tuple(c for c in e.carriers if moved.get(c.name, np.inf) > STILL)))
    return tuple(kept)


def _leaders(plan: Plan, count: int) -> tuple[Plan, list[Index], dict[int, list[tuple[int, Carrier]]]]:
    """Return what leads, its groups, and by following element its traces with the contact they sit in.

    Elements that a gas ties to others lead, and those of a wall that no more than one follower tells from
    them; one that only traces hold, or nothing but itself, follows.
    """
    bare = [
        replace(e, carriers=tuple(c for c in e.carriers if not may_follow(c) or c.name in plan.heavy))
        for e in plan.exposures
    ]
    skins = [skin for skin, _ in plan.skins.values()]
    lead = {int(i) for group in tied(bare, skins, count) if len(group) > 1 for i in group}
    for carrier in (c for e in plan.exposures for c in e.carriers if may_follow(c) and c.inventory is None):
        if follower(carrier, lead) is None:
            lead |= set(np.flatnonzero(carrier.nu).tolist())
    traces: dict[int, list[tuple[int, Carrier]]] = {}
    kept = []
    for c, exposure in enumerate(plan.exposures):
        stay = []
        for carrier in exposure.carriers:
            element = None if carrier.name in plan.heavy else follower(carrier, lead)
            if element is None:
                stay.append(carrier)
            else:
                traces.setdefault(element, []).append((c, carrier))
        kept.append(replace(exposure, carriers=tuple(stay)))
    groups = [group for group in tied(kept, skins, count) if set(group.tolist()) & lead]
    return replace(plan, exposures=tuple(kept)), groups, traces


def _advance(
    entered: State,
    setting: Setting,
    schedule: Schedule,
    plan: Plan,
    index: Index,
    history: bool,
    explain: bool = True,
) -> Part:
    """Move one group of tied elements."""
    rows, sub = [], []
    for c, exposure in enumerate(plan.exposures):
        part = restrict(exposure, index)
        if part.carriers or part.films:
            rows.append(c)
            sub.append(part)
    own = {name: pair for name, pair in plan.skins.items() if pair[0].nu[index].any()}
    if own and sub:
        sub[0] = replace(sub[0], skins=tuple(replace(s, nu=s.nu[index]) for s, _ in own.values()))
    state = State(
        entered.x[index],
        entered.suspended[index],
        None if entered.profile is None else entered.profile[index],
        entered.film,
        entered.films,
        None if entered.surface is None else entered.surface[index],
    )
    diffusivity = None if setting.liquid else _diffusivity(setting, index)
    host = Host("liquid" if setting.liquid else "solid", setting.molar_density, setting.amount, diffusivity)
    taken = {name: setting.sample(share) for name, share in setting.choice.removal.items()}
    run = partial(
        advance,
        state,
        host,
        setting.choice.form,
        schedule,
        sub,
        history=history,
        removal=taken if taken and setting.liquid else None,
        explain=explain,
    )
    pickup = run(nodes=nodes_of(setting))
    if pickup.error > ROUGH and nodes_of(setting) < NODES:
        pickup = run(nodes=NODES)
    names = tuple(dict.fromkeys(carrier.name for one in sub for carrier in one.carriers))
    return Part(index, tuple(rows), pickup, tuple(own.values()), (), names)


def _heavy_beside_carbon(plan: Plan) -> frozenset[str]:
    """Wall compounds that lead from the start: those beside a wall that holds an element of theirs down.

    A wall of one pure element (carbon) ties up what it reacts with, so that the compounds answer.
    """
    pure = any(
        c.conductance is None and c.inventory is None and np.count_nonzero(c.nu) == 1
        for e in plan.exposures
        for c in e.carriers
    )
    mixed = {c.name for e in plan.exposures for c in e.carriers if may_follow(c) and c.inventory is None}
    return frozenset(mixed) if pure else frozenset()


def _present(
    plan: Plan,
    entered: State,
    setting: Setting,
    schedule: Schedule,
    seen: Mapping[str, tuple[Array, float]],
) -> dict[str, tuple[Skin, tuple[Found, ...]]]:
    """Compounds of at most two leading elements that are beyond saturation as the lot enters."""
    _, groups, _ = _leaders(plan, len(setting.impurities))
    leaders = {int(i) for group in groups for i in group}
    start = np.broadcast_to(schedule.T[0], (setting.draws.n,))
    own = _simple(seen, leaders, plan)
    near = {name: products.skin(setting, name) for name in products.within_reach(own, entered.x, ())}
    excess = {n: float(products.saturation(s[0], entered.x, start).max()) for n, s in near.items()}
    first: dict[tuple[int, ...], str] = {}
    for name in sorted(near, key=lambda n: -excess[n]):
        if excess[name] > BEYOND:
            first.setdefault(tuple(np.flatnonzero(near[name][0].nu).tolist()), name)
    return {name: near[name] for name in first.values()}


def _simple(
    seen: Mapping[str, tuple[Array, float]], leaders: set[int], plan: Plan
) -> dict[str, tuple[Array, float]]:
    """Compounds of at most two of the leading elements: no slag or mixed oxide forms in the bath.

    What a leading wall ties (its own compound, or another of the same elements) goes to that wall, not to
    a skin beside it: two of them would leave the bath no one answer.
    """
    walls = {
        frozenset(np.flatnonzero(c.nu).tolist())
        for e in plan.exposures
        for c in e.carriers
        if c.conductance is None and c.inventory is None
    }
    taken = walls | {frozenset(np.flatnonzero(skin.nu).tolist()) for skin, _ in plan.skins.values()}
    own = {f: frozenset(np.flatnonzero(nu).tolist()) for f, (nu, _) in seen.items()}
    return {f: s for f, s in seen.items() if len(own[f]) <= 2 and own[f] <= leaders and own[f] not in taken}


def _without_idle(
    whole: tuple[Exposure, ...],
    entered: State,
    setting: Setting,
    schedule: Schedule,
    seen: Mapping[str, tuple[Array, float]],
) -> tuple[Exposure, ...]:
    """Leave out gases that tie elements and move next to nothing of them, and spare inventories."""
    dissolved = products.supported(seen, entered.x)
    out = _idle_gases(whole, dissolved, entered, setting, schedule)
    held = np.maximum(total(entered), dissolved)
    out |= {c.name for e in whole for c in e.carriers if spare(c, setting.amount, held)}
    return tuple(replace(e, carriers=tuple(c for c in e.carriers if c.name not in out)) for e in whole)


def _idle_gases(
    exposures: Sequence[Exposure], dissolved: Array, entered: State, setting: Setting, schedule: Schedule
) -> set[str]:
    hot = np.broadcast_to(schedule.T.max(axis=0), (setting.draws.n,))
    held = np.maximum(total(entered), dissolved)
    found: set[str] = set()
    for e in exposures:
        gases = [c for c in e.carriers if c.conductance is not None and (ties(c) or c.nu.max() > 1)]
        moved = {
            c.name: turnover(c, e.area, setting.amount, dissolved, held, setting.duration, hot) for c in gases
        }
        found |= idle(moved, IDLE, FLOOR if setting.liquid else STILL) & {c.name for c in gases if ties(c)}
    return found


def _grown(
    plan: Plan,
    whole: Sequence[Exposure],
    groups: Sequence[Index],
    traces: Mapping[int, Sequence[tuple[int, Carrier]]],
    entered: State,
    setting: Setting,
    schedule: Schedule,
    seen: Mapping[str, tuple[Array, float]],
    x: Array,
) -> Plan | None:
    """Return the plan with the compound furthest beyond saturation and the gases that count, or None."""
    leaders = {int(i) for group in groups for i in group}
    own = _simple(seen, leaders, plan)
    end = np.broadcast_to(schedule.T[-1], (setting.draws.n,))
    near = {name: products.skin(setting, name) for name in products.within_reach(own, x, plan.skins)}
    excess = {n: float(products.saturation(s[0], x, end).max() / s[0].nu.sum()) for n, s in near.items()}
    worst = max(excess, key=lambda name: excess[name], default=None)
    beyond = {worst: near[worst]} if worst is not None and excess[worst] > BEYOND else {}
    used = {c.name for e in plan.exposures for c in e.carriers}
    dissolved = products.supported(seen, x)
    tying = {c.name for e in whole for c in e.carriers if ties(c)}
    busy = tying - _idle_gases(whole, dissolved, entered, setting, schedule) - used
    weighty = _weighty(plan, traces, setting, np.minimum(entered.x, x))
    if not beyond and not busy and not weighty:
        return None
    exposures = tuple(
        replace(e, carriers=tuple(c for c in o.carriers if c.name in used | busy))
        for e, o in zip(plan.exposures, whole, strict=True)
    )
    grown = Plan(exposures, {**plan.skins, **beyond}, plan.heavy | weighty)
    present = _present(grown, entered, setting, schedule, seen) if weighty else {}
    return replace(grown, skins={**grown.skins, **present})


def _weighty(
    plan: Plan, traces: Mapping[int, Sequence[tuple[int, Carrier]]], setting: Setting, x: Array
) -> set[str]:
    """Names of compounds that would act back on the leaders in more than RARE of the draws."""
    density = setting.molar_density / setting.amount
    return {
        carrier.name
        for element, found in traces.items()
        for c, carrier in found
        if heavy(carrier, element, plan.exposures[c], density, x, setting.duration).mean() > RARE
    }


def _diffusivity(setting: Setting, index: Index) -> Curve:
    rows = []
    for i in index:
        found = diffusivity(setting, setting.impurities[int(i)])
        rows.append(np.full((len(setting.T), 1), -np.inf) if isinstance(found, Gap) else found[0])
    return Curve(setting.T, np.stack(np.broadcast_arrays(*rows)))


def _collect(x: Array, parts: Sequence[Part]) -> Array:
    after = x.copy()
    for part in parts:
        after[part.index] = part.pickup.state.x
    return after
