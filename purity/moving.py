"""How the elements of a lot move through a choice: who leads, who follows, what forms on the way.

Elements that no carrier and no skin ties together are moved apart from each other, so that a record
changes only the elements it has to do with, to the last bit. Compounds that could form are watched:
where the metal ends beyond the saturation of one, the step is redone with that compound as a skin.
Traces of a wall follow the bath that leads (:mod:`purity.kinetics.groups`).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from purity.contacts import products
from purity.contacts.setting import Exposed, Setting, diffusivity
from purity.database import Found, Gap
from purity.kinetics.advance import Host, Pickup, State, advance
from purity.kinetics.exposure import Carrier, Curve, Exposure, Skin
from purity.kinetics.groups import follow, follower, leached, loss, restrict, sink, tied
from purity.kinetics.schedule import Schedule

Array = NDArray[np.float64]
Index = NDArray[np.int64]

#: Share of a content below which what a sink would carry off is left out.
IDLE = 1e-4
#: Nodes a segment of the bath and body integrators in the main job.
NODES = 16
#: ln of saturation beyond which a compound is taken to form.
BEYOND = 1e-6
#: Most rounds in which compounds and sinks that turn out to matter are added.
ROUNDS = 5


def total(state: State) -> Array:
    """Return the whole content, dissolved, suspended and at the surface, (I, N) mol per mol of host."""
    x = state.x + state.suspended
    return x if state.surface is None else x + state.surface


@dataclass(frozen=True, slots=True)
class Part:
    """One group of tied elements and what became of it.

    `behind` are the elements whose course this group took as given; `shared` says what each contact
    gives of another element with one atom of the following one: (contact, element, atoms).
    """

    index: Index
    rows: tuple[int, ...]
    pickup: Pickup
    skins: tuple[tuple[Skin, tuple[Found, ...]], ...]
    behind: tuple[int, ...] = ()
    names: tuple[str, ...] = ()
    shared: tuple[tuple[int, int, float], ...] = ()


@dataclass(frozen=True, slots=True)
class Plan:
    """What is followed together: exposures without what is left out, and the skins found so far."""

    exposures: tuple[Exposure, ...]
    skins: Mapping[str, tuple[Skin, tuple[Found, ...]]]


def move(
    entered: State, setting: Setting, schedule: Schedule, exposed: Sequence[Exposed], history: bool
) -> list[Part]:
    """Lead with what is tied together, then let the traces follow; add what turns out to matter."""
    whole = tuple(one.exposure for one in exposed)
    seen = products.watched(setting)
    plan = Plan(_without_idle_sinks(whole, entered, setting, schedule, seen), {})
    leading: list[Part] = []
    for _ in range(ROUNDS):
        leaders, traces = _leaders(plan, len(setting.impurities))
        leading = [_advance(entered, setting, schedule, plan, index, history) for index in leaders]
        grown = _grown(plan, whole, entered, setting, schedule, seen, _collect(entered.x, leading))
        if grown is None:
            break
        plan = grown
    return [*leading, *_followers(plan, traces, leading, entered, setting, schedule, history)]


def _leaders(plan: Plan, count: int) -> tuple[list[Index], dict[int, list[tuple[int, Carrier]]]]:
    """Return the groups that lead, and by following element its traces with the contact they sit in."""
    bare = [replace(e, carriers=tuple(c for c in e.carriers if not leached(c))) for e in plan.exposures]
    skins = [skin for skin, _ in plan.skins.values()]
    lead = {int(i) for group in tied(bare, skins, count) if len(group) > 1 for i in group}
    traces: dict[int, list[tuple[int, Carrier]]] = {}
    kept = []
    for c, exposure in enumerate(plan.exposures):
        stay = []
        for carrier in exposure.carriers:
            element = follower(carrier, lead)
            if element is None:
                stay.append(carrier)
            else:
                traces.setdefault(element, []).append((c, carrier))
        kept.append(replace(exposure, carriers=tuple(stay)))
    groups = [g for g in tied(kept, skins, count) if not (len(g) == 1 and int(g[0]) in traces)]
    return groups, traces


def _advance(
    entered: State,
    setting: Setting,
    schedule: Schedule,
    plan: Plan,
    index: Index,
    history: bool,
    behind: tuple[int, ...] = (),
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
    pickup = advance(state, host, setting.choice.form, schedule, sub, history=history, nodes=NODES)
    names = tuple(dict.fromkeys(carrier.name for one in sub for carrier in one.carriers))
    return Part(index, tuple(rows), pickup, tuple(own.values()), behind, names)


def _followers(
    plan: Plan,
    traces: Mapping[int, Sequence[tuple[int, Carrier]]],
    leading: Sequence[Part],
    entered: State,
    setting: Setting,
    schedule: Schedule,
    history: bool,
) -> list[Part]:
    """Move each element that only traces hold, at the lowest contents that the leading bath had."""
    lowest = np.minimum(entered.x, _collect(entered.x, leading))
    parts = []
    for element, found in traces.items():
        behind = tuple({int(i) for _, c in found for i in np.flatnonzero(c.nu)} - {element})
        added: dict[int, list[Carrier]] = {}
        for c, carrier in found:
            added.setdefault(c, []).append(follow(carrier, element, lowest))
        exposures = tuple(
            replace(e, carriers=(*_alone(e, element), *added.get(c, ())))
            for c, e in enumerate(plan.exposures)
        )
        part = _advance(entered, setting, schedule, Plan(exposures, {}), np.array([element]), history, behind)
        shared = {(c, int(i), float(t.nu[i] / t.nu[element])) for c, t in found for i in np.flatnonzero(t.nu)}
        parts.append(replace(part, shared=tuple(sorted(s for s in shared if s[1] != element))))
    return parts


def _alone(exposure: Exposure, element: int) -> tuple[Carrier, ...]:
    return tuple(c for c in exposure.carriers if np.flatnonzero(c.nu).tolist() == [element])


def _without_idle_sinks(
    whole: tuple[Exposure, ...],
    entered: State,
    setting: Setting,
    schedule: Schedule,
    seen: Mapping[str, tuple[Array, float]],
) -> tuple[Exposure, ...]:
    """Leave out what could only carry off, and would carry off next to nothing of what is there."""
    dissolved = products.supported(seen, entered.x)
    idle = _sinks(whole, dissolved, entered, setting, schedule, at_least=False)
    return tuple(replace(e, carriers=tuple(c for c in e.carriers if c.name not in idle)) for e in whole)


def _sinks(
    exposures: Sequence[Exposure],
    dissolved: Array,
    entered: State,
    setting: Setting,
    schedule: Schedule,
    *,
    at_least: bool,
) -> set[str]:
    """Names of sinks that would take more (or less) than IDLE of some content."""
    hot = np.broadcast_to(schedule.T.max(axis=0), (setting.draws.n,))
    held = np.maximum(total(entered), dissolved)
    return {
        c.name
        for e in exposures
        for c in e.carriers
        if sink(c)
        and (loss(c, e.area, setting.amount, dissolved, held, setting.duration, hot) > IDLE) == at_least
    }


def _grown(
    plan: Plan,
    whole: Sequence[Exposure],
    entered: State,
    setting: Setting,
    schedule: Schedule,
    seen: Mapping[str, tuple[Array, float]],
    x: Array,
) -> Plan | None:
    """Return the plan with the compounds that form and the sinks that count after all, or None."""
    end = np.broadcast_to(schedule.T[-1], (setting.draws.n,))
    near = {name: products.skin(setting, name) for name in products.within_reach(seen, x, plan.skins)}
    beyond = {n: s for n, s in near.items() if products.saturation(s[0], x, end).max() > BEYOND}
    used = {c.name for e in plan.exposures for c in e.carriers}
    busy = _sinks(whole, x, entered, setting, schedule, at_least=True) - used
    if not beyond and not busy:
        return None
    exposures = tuple(
        replace(e, carriers=tuple(c for c in o.carriers if c.name in used | busy))
        for e, o in zip(plan.exposures, whole, strict=True)
    )
    return Plan(exposures, {**plan.skins, **beyond})


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
