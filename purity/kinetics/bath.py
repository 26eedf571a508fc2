"""A stirred melt between its contacts: contents, ledgers and what forms, over a temperature schedule.

Time runs in fixed steps, 32 a segment: short at first and growing where the lot meets its contacts and in
holds, uniform in temperature on later ramps. The state is the total content; skins, at equilibrium with the
bulk, share it between dissolved and suspended at every stage, so that what they hold dissolves again by
itself.

Limits: solutes follow Henry's law, compounds have unit activity, skins need no nucleation, gases that
buffer each other act as independent carriers at held pressures. A bath or surface that leaves the dilute
range is attacked: counting stops there.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np

from purity.constants import DILUTE
from purity.kinetics import arrow, flux_newton, passive
from purity.kinetics.exposure import FLOOR, Array, Exposure, select
from purity.kinetics.flux_newton import SETTLED, Block, Flags, Point
from purity.kinetics.passive import GAMMA, GAUSS
from purity.kinetics.schedule import Schedule, geometric, segments
from purity.kinetics.sdirk import Change, Task
from purity.kinetics.sdirk import step as reactive_step
from purity.kinetics.stage import Bath, Coefficients, Index, coefficients, lay_out

#: First step of the first segment and of a hold, in shares of an equal step. With 0.5 instead of 0.05 at
#: the start, melts that lose oxygen as carbon monoxide in vacuum were 30 % off at 16 steps, not 2 %.
MEETING, HOLDING = 0.05, 0.5

Rates = tuple[Coefficients, Coefficients]
Live = Index | slice


@dataclass(frozen=True, slots=True)
class Case:
    """A bath and what happens to it.

    Parameters
    ----------
    total : (I, N) array
        Total contents at the start, mol per mol of host.
    density, amount : (1,) or (N,) arrays
        Host, mol/m3 and mol.
    schedule : Schedule
    exposures : tuple of Exposure
    """

    total: Array
    density: Array
    amount: Array
    schedule: Schedule
    exposures: tuple[Exposure, ...]

    def take(self, draws: Index) -> Case:
        """Some draws, in the order and as often as given."""

        def pick(values: Array) -> Array:
            return values if values.ndim == 0 or values.shape[-1] == 1 else np.asarray(values[..., draws])

        time, T = (v[..., draws] if v.ndim == 2 and v.shape[-1] > 1 else v for v in self._knots)
        return Case(
            self.total[:, draws],
            pick(self.density),
            pick(self.amount),
            Schedule(time, T),
            tuple(select(exposure, draws) for exposure in self.exposures),
        )

    @property
    def _knots(self) -> tuple[Array, Array]:
        return np.asarray(self.schedule.time), np.asarray(self.schedule.T)


@dataclass(frozen=True, slots=True)
class Step:
    """One time step: start and length (s), temperatures (K) at its ends, whether they are the same."""

    start: Array
    dt: Array
    T0: Array
    T1: Array
    hold: bool

    def at(self, share: float) -> Array:
        """Temperature at a share of the step."""
        return np.asarray(self.T0 + share * (self.T1 - self.T0))


@dataclass(frozen=True, slots=True)
class Path:
    """How a bath went.

    Parameters
    ----------
    x, suspended : (I, N) arrays
        At the end, mol per mol of host.
    ledger : (S, I, N) array
        Gained through each contact.
    keep, gain : (I, N) arrays or None
        The affine map of the contents where every carrier is linear and no draw is attacked.
    solved : (N,) bool array
    crossed : (N,) array
        Time at which a content left the dilute range, s; infinite where none did.
    two_roots : bool
        Two contacts bind the same elements in different ratios: a stage can have two answers.
    skins : mapping of str to (N,) array
        What each skin holds, mol of units per mol of host.
    left : (C, N) array
        Units that each row still holds, mol; infinite without an inventory.
    times : (K,) or (K, N) array
    history : (I, K, N) array or None
        Total contents at the ends of the steps.
    """

    x: Array
    suspended: Array
    ledger: Array
    keep: Array | None
    gain: Array | None
    solved: Flags
    crossed: Array
    two_roots: bool
    skins: dict[str, Array]
    left: Array
    times: Array
    history: Array | None

    @property
    def total(self) -> Array:
        """Dissolved and suspended."""
        return np.asarray(self.x + self.suspended)

    @property
    def attacked(self) -> Flags:
        """Draws that left the dilute range."""
        return np.isfinite(self.crossed)


@dataclass(slots=True)
class _Melt:
    """Working state of all draws; arrays as in Path, `stock` in mol per m2 of contact."""

    bath: Bath
    blocks: tuple[Block, ...]
    plans: tuple[arrow.Plan | None, ...]
    total: Array
    held: Array
    ledger: Array
    keep: Array
    gain: Array
    flux: Array
    stock: Array
    points: list[Point]
    peak: Array
    solved: Flags
    crossed: Array
    record: list[Array] = field(default_factory=list)


def steps(schedule: Schedule, nodes: int) -> Iterator[Step]:
    """Cut a schedule into steps, `nodes` a segment.

    The first segment, where the metal is far from rest with what it has just met, and holds begin with
    short steps that grow; other ramps are uniform in temperature.
    """
    for number, part in enumerate(segments(schedule)):
        if number == 0:
            edges = geometric(nodes, MEETING / nodes)
        else:
            edges = geometric(nodes, HOLDING / nodes) if part.hold else np.linspace(0.0, 1.0, nodes + 1)
        for low, high in pairwise(edges):
            T0 = part.T1 + low * (part.T2 - part.T1)
            T1 = part.T1 + high * (part.T2 - part.T1)
            start, dt = part.start + low * part.duration, (high - low) * part.duration
            yield Step(start, dt, part.T1 if part.hold else T0, part.T1 if part.hold else T1, part.hold)


def two_roots(bath: Bath) -> bool:
    """Tell whether two contacts bind the same elements in different ratios.

    One surface, or contacts that share one element, have one answer (the Jacobian is inverse-positive);
    two shared elements in different ratios can have two.
    """
    for c in range(len(bath.rows)):
        for d in range(c):
            if bath.place[c] == bath.place[d] or bath.skin[c] or bath.skin[d]:
                continue
            shared = (bath.nu[c] > 0) & (bath.nu[d] > 0)
            ratio = bath.nu[c][shared] / bath.nu[d][shared]
            if len(ratio) > 1 and not np.allclose(ratio, ratio[0]):
                return True
    return False


def integrate(case: Case, *, nodes: int = 32, history: bool = False, tolerance: float = SETTLED) -> Path:
    """Integrate a bath.

    Parameters
    ----------
    case : Case
    nodes : int
        Steps a segment.
    history : bool
        Keep the total contents at the end of every step.
    tolerance : float
        Largest step of a logarithm at which a stage is solved.

    Returns
    -------
    Path
    """
    total, schedule = case.total, case.schedule
    bath = lay_out(case.exposures, case.density, case.amount, *total.shape)
    melt = _begin(bath, total, coefficients(bath, np.asarray(schedule.T[0]))[0])
    times = [np.asarray(schedule.time[0], dtype=float)]
    held: tuple[Array, Rates] | None = None
    for step in steps(schedule, nodes):
        if step.hold:
            held = held if held and held[0] is step.T1 else (step.T1, coefficients(bath, step.T1))
            first = last = held[1]
        else:
            first, last = coefficients(bath, step.at(GAMMA)), coefficients(bath, step.T1)
        if not np.isfinite(melt.crossed).all():
            _move(melt, step, first, last, tolerance)
        times.append(step.start + step.dt)
        if history:
            melt.record.append(melt.total.copy())
    return _path(melt, np.stack(np.broadcast_arrays(*times)))


def _begin(bath: Bath, total: Array, rates: Coefficients) -> _Melt:
    blocks = flux_newton.blocks(bath)
    rows, draws = len(bath.rows), bath.draws
    stock = np.full((rows, draws), np.inf)
    for c, row in enumerate(bath.rows):
        if row.inventory is not None:
            stock[c] = row.inventory / np.maximum(bath.area[bath.place[c] - 1], 1e-30)
    reactive = total[bath.reactive]
    points = [flux_newton.start(block, rates, reactive) for block in blocks]
    return _Melt(
        bath=bath,
        blocks=blocks,
        plans=tuple(arrow.plan(block) for block in blocks),
        total=total.copy(),
        held=np.zeros_like(total),
        ledger=np.zeros((len(bath.exposures), *total.shape)),
        keep=np.ones_like(total),
        gain=np.zeros_like(total),
        flux=np.zeros((rows, draws)),
        stock=stock,
        points=points,
        peak=total.max(axis=0, initial=FLOOR),
        solved=np.ones(draws, dtype=bool),
        crossed=np.full(draws, np.inf),
        record=[total.copy()],
    )


def _move(melt: _Melt, step: Step, first: Rates, last: Rates, tolerance: float) -> None:
    """Take one step with the draws that are not attacked."""
    bath, attacked = melt.bath, np.isfinite(melt.crossed)
    live: Live = slice(None)
    if attacked.any():
        live = np.flatnonzero(~attacked)
        first, last = _take(first, live), _take(last, live)
    dt = np.broadcast_to(step.dt, (bath.draws,))[live]
    gained = np.zeros((len(bath.exposures), len(melt.total), len(dt)))
    peak, held = np.full(len(dt), FLOOR), np.zeros((len(melt.total), len(dt)))
    change: Change | None = None
    if len(bath.reactive):
        points = [point.take(live) for point in melt.points] if attacked.any() else melt.points
        total, stock = melt.total[bath.reactive][:, live], melt.stock[:, live]
        task = Task(bath, melt.blocks, melt.plans, first[0], last[0], total, dt, stock, points, tolerance)
        change = reactive_step(task)
        gained[:, bath.reactive], held[bath.reactive] = change.gained, change.held
        peak = np.maximum(peak, _peak(bath, change.x, live))
    if len(bath.passive):
        x = melt.total[bath.passive][:, live]
        keep, gain, gained[:, bath.passive] = _passive(bath, step, first[1], last[1], x, dt, live)
        if not len(bath.reactive):
            melt.gain[:, live] = keep * melt.gain[:, live] + gain
            melt.keep[:, live] *= keep
        after = keep * x + gain
        peak = np.maximum(peak, _peak(bath, last[1].phi * after + last[1].rest, live))
    _count(melt, step, live, change, gained, held, peak)


def _passive(
    bath: Bath, step: Step, first: Coefficients, last: Coefficients, x: Array, dt: Array, live: Live
) -> tuple[Array, Array, Array]:
    if step.hold:
        return passive.hold(last, x, dt)

    def between() -> tuple[Coefficients, list[Coefficients]]:
        begin, *points = (coefficients(bath, step.at(s))[1].take(live) for s in (0.0, *GAUSS))
        return begin, points

    return passive.ramp(first, last, x, dt, between)


def _take(rates: Rates, draws: Live) -> Rates:
    return rates[0].take(draws), rates[1].take(draws)


def _peak(bath: Bath, x: Array, live: Live) -> Array:
    """Largest content in the bath or at a contact that has an area."""
    touched = np.concatenate([np.ones((1, x.shape[-1]), dtype=bool), bath.area[:, live] > 0])
    return np.asarray(np.where(touched, x.max(axis=1, initial=FLOOR), FLOOR).max(axis=0))


def _count(
    melt: _Melt, step: Step, live: Live, change: Change | None, gained: Array, held: Array, peak: Array
) -> None:
    """Add a step, up to the time at which a content leaves the dilute range."""
    reactive = melt.bath.reactive
    before = np.minimum(melt.peak[live], DILUTE)
    out = peak > DILUTE
    rise = np.log(np.where(out, peak / before, 2.0))
    share = np.where(out, np.clip(np.log(DILUTE / before) / rise, 0.0, 1.0), 1.0)
    dt, start = (np.broadcast_to(value, (melt.bath.draws,))[live] for value in (step.dt, step.start))
    melt.crossed[live] = np.where(out, start + share * dt, np.inf)
    melt.peak[live] = peak
    after = melt.total[:, live] + share * gained.sum(axis=0)
    if change is not None:
        whole = change.total
        after[reactive] = np.where(out, after[reactive], whole)
        melt.flux[:, live] = change.flux
        melt.solved[live] &= change.ok
        stock = np.maximum(melt.stock[:, live] - share * change.given, 0.0)
        for block, point in zip(melt.blocks, change.points, strict=True):
            empty = point.bound & block.stock[:, None] & ~out
            stock[block.rows] = np.where(empty, 0.0, stock[block.rows])
        melt.stock[:, live] = stock
        if isinstance(live, slice):
            melt.points = change.points
        else:
            for point, new in zip(melt.points, change.points, strict=True):
                point.put(live, new)
    melt.total[:, live] = np.maximum(after, 0.0)
    melt.held[:, live] += share * (held - melt.held[:, live])
    melt.ledger[..., live] += share * gained


def _path(melt: _Melt, times: Array) -> Path:
    bath = melt.bath
    x = melt.total - melt.held
    for block, point in zip(melt.blocks, melt.points, strict=True):
        # what a skin leaves dissolved is known to its own rounding from the law, not as a difference
        inside = np.flatnonzero(block.place == 0)
        i = bath.reactive[block.impurity[inside]]
        law = np.where((melt.held[i] > 0) & ~np.isfinite(melt.crossed), np.exp(point.y[inside]), x[i])
        x[i] = np.minimum(law, melt.total[i])
    skins = {bath.rows[c].name: np.maximum(-melt.flux[c], 0.0) for c in np.flatnonzero(bath.skin)}
    linear = not len(bath.reactive) and not np.isfinite(melt.crossed).any()
    area = np.array([bath.area[p - 1] if p else np.ones(bath.draws) for p in bath.place])
    return Path(
        x=x,
        suspended=melt.total - x,
        ledger=melt.ledger,
        keep=melt.keep if linear else None,
        gain=melt.gain if linear else None,
        solved=melt.solved,
        crossed=melt.crossed,
        two_roots=two_roots(bath),
        skins=skins,
        left=melt.stock * area.reshape(melt.stock.shape),
        times=times,
        history=np.stack(melt.record, axis=1) if len(melt.record) > 1 else None,
    )
