"""One time step of the impurities that meet carriers which are not linear.

SDIRK2 (Alexander 1977): stage 1 at gamma dt from T_n, stage 2 at dt from
T_n + ((1 - gamma)/gamma) (T_1 - T_n); the answer is that of stage 2, L-stable and of second order.
No linear method of order above one is positive for every step: where the right side of stage 2 or a
content falls below zero, the step of that draw is redone by backward Euler.

An inventory bounds the fluxes so that both stages together give no more than is left:
R_1 <= left/dt, R_2 <= (left/dt - (1 - gamma) R_1)/gamma.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from purity.kinetics import arrow, flux_newton
from purity.kinetics.arrow import Plan
from purity.kinetics.exposure import Array
from purity.kinetics.flux_newton import Block, Flags, Point
from purity.kinetics.passive import GAMMA
from purity.kinetics.stage import Bath, Coefficients, Index, Stage, contents, stage

#: A content below this is nil: rounding may leave it on either side of zero.
NIL = 1e-24
#: Steps into which a backward Euler step is cut where it is not solved whole.
PIECES = 8


@dataclass(frozen=True, slots=True)
class Change:
    """What a step does to some draws: R reactive impurities, L places, S contacts, C rows.

    Parameters
    ----------
    x : (L, R, N) array
        Contents after it, in the bath and at every contact.
    held : (R, N) array
        What skins hold, mol per mol of host.
    gained : (S, R, N) array
        Through each contact, mol per mol of host.
    given : (C, N) array
        mol of units per m2 that each row gave.
    flux : (C, N) array
        Of the last stage.
    points : list of Point
        Where the next step begins.
    ok : (N,) bool array
    """

    x: Array
    held: Array
    gained: Array
    given: Array
    flux: Array
    points: list[Point]
    ok: Flags

    @property
    def total(self) -> Array:
        """Dissolved and held."""
        return np.asarray(self.x[0] + self.held)

    def take(self, draws: Index) -> Change:
        """Some draws."""
        return Change(
            self.x[..., draws],
            self.held[..., draws],
            self.gained[..., draws],
            self.given[..., draws],
            self.flux[..., draws],
            [point.take(draws) for point in self.points],
            self.ok[draws],
        )

    def put(self, draws: Index, part: Change) -> None:
        """Overwrite some draws."""
        for name in ("x", "held", "gained", "given", "flux", "ok"):
            getattr(self, name)[..., draws] = getattr(part, name)
        for point, other in zip(self.points, part.points, strict=True):
            point.put(draws, other)


@dataclass(frozen=True, slots=True)
class Task:
    """The bath that a step moves: rates at the two stages, start and what each row has left per m2."""

    bath: Bath
    blocks: Sequence[Block]
    plans: Sequence[Plan | None]
    first: Coefficients
    last: Coefficients
    total: Array
    dt: Array
    left: Array
    points: list[Point]
    tolerance: float

    def take(self, draws: Index) -> Task:
        """Some draws."""
        return replace(
            self,
            first=self.first.take(draws),
            last=self.last.take(draws),
            total=self.total[:, draws],
            dt=self.dt[draws],
            left=self.left[:, draws],
            points=[point.take(draws) for point in self.points],
        )


def step(task: Task) -> Change:
    """Take one step.

    Parameters
    ----------
    task : Task

    Returns
    -------
    Change
        Draws that no method solved stay where they were, with `ok` false.
    """
    dt, rest = task.dt, (1 - GAMMA) / GAMMA
    one = _solve(task, task.first, task.total, GAMMA * dt, _per_time(task.left, dt))
    right = task.total + rest * (one.total - task.total)
    good = one.ok & (right >= -NIL).all(axis=0)
    if good.all():
        answer, done = _second(task, one, right), good
    else:
        answer, done = one, np.zeros(len(good), dtype=bool)
        some = np.flatnonzero(good)
        if len(some):
            answer.put(some, _second(task.take(some), one.take(some), right[:, some]))
            done[some] = True
    done = done & answer.ok & (answer.x[0] >= -NIL).all(axis=0)
    if not done.all():
        some = np.flatnonzero(~done)
        answer.put(some, euler(replace(task, points=one.points).take(some)))
    return answer


def _second(task: Task, one: Change, right: Array) -> Change:
    dt = task.dt
    most = np.maximum(_per_time(task.left, dt) - (1 - GAMMA) * one.flux, 0) / GAMMA
    two = _solve(replace(task, points=one.points), task.last, right, GAMMA * dt, most)
    return replace(
        two,
        gained=dt * ((1 - GAMMA) * one.gained + GAMMA * two.gained),
        given=dt * ((1 - GAMMA) * one.given + GAMMA * two.given),
    )


def euler(task: Task) -> Change:
    """Take one step of backward Euler, cut into pieces in draws where it is not solved whole."""
    whole = _solve(task, task.last, task.total, task.dt, _per_time(task.left, task.dt))
    whole = replace(whole, gained=task.dt * whole.gained, given=task.dt * whole.given)
    if not whole.ok.all():
        some = np.flatnonzero(~whole.ok)
        whole.put(some, _pieces(task.take(some)))
    return whole


def _pieces(task: Task) -> Change:
    dt = task.dt / PIECES
    ok = np.ones(len(dt), dtype=bool)
    gained: Array = np.zeros((len(task.first.supply), *task.total.shape))
    given: Array = np.zeros_like(task.left)
    left = task.left
    for _ in range(PIECES):
        part = _solve(task, task.last, task.total + gained.sum(axis=0), dt, _per_time(left, dt))
        ok &= part.ok
        gained, given = gained + dt * part.gained, given + dt * part.given
        left = np.maximum(left - dt * part.given, 0)
        task = replace(task, points=part.points)
    gained, given = np.where(ok, gained, 0.0), np.where(ok, given, 0.0)
    held = np.where(ok, part.held, 0.0)
    x = np.where(ok, part.x, task.total - held)
    return Change(x, held, gained, given, part.flux, part.points, ok)


def _solve(task: Task, c: Coefficients, right: Array, span: Array, most: Array) -> Change:
    """Solve one stage; `gained` and `given` are rates."""
    at_stage = stage(c, right, span)
    flux, points, ok = np.zeros_like(most), [], np.ones(len(span), dtype=bool)
    for block, tie, warm in zip(task.blocks, task.plans, task.points, strict=True):
        point, solved = _solve_block(task, block, tie, at_stage, most, warm)
        flux[block.rows] = point.flux
        points.append(point)
        ok &= solved
    x, gain, held = contents(task.bath, at_stage, flux)
    ok &= np.isfinite(x).all(axis=(0, 1))
    return Change(x, held, gain, np.where(task.bath.skin[:, None], 0.0, flux), flux, points, ok)


def _solve_block(
    task: Task, block: Block, tie: Plan | None, at_stage: Stage, most: Array, warm: Point
) -> tuple[Point, Flags]:
    if tie is None:
        system = flux_newton.equations(task.bath, block, at_stage, most)
        return flux_newton.solve(block, system, warm, task.tolerance)
    ties = arrow.system(task.bath, block, tie, at_stage)
    point, solved = arrow.solve(tie, ties, warm, task.tolerance)
    if not solved.all():
        left = np.flatnonzero(~solved)
        begin = arrow.unfold(block, tie, ties.take(left), warm.take(left))
        system = flux_newton.equations(task.bath, block, at_stage.take(left), most[:, left])
        found, solved[left] = flux_newton.solve(block, system, begin, task.tolerance)
        point.put(left, found)
    return point, solved


def _per_time(left: Array, dt: Array) -> Array:
    return left / np.maximum(dt, np.finfo(float).tiny)
