"""Certified contact equilibrium: minimum of the Gibbs energy under element balances."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields
from enum import IntEnum

import numpy as np
from numpy.typing import NDArray

from purity import constants
from purity.driving_force import components, interior, newton
from purity.driving_force.problem import GAS, Problem, System, reduce, refuse

__all__ = ["Equilibrium", "Outcome", "System", "equilibrium"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Draws solved together: fewer leave the tails of small batches, more leave the cache.
CHUNK = 4000
#: Rounding error of ln activity or of a balance above which they are rewritten in the stable compounds.
ROUNDING = 1e-11
#: Rounding error of ln activity above which a draw is refused.
UNSURE = 1e-6
#: Certificate asked of every solved draw: RT per mole of atoms (in proportion where an energy passes 500 RT),
#: and relative error of a balance.
CERTIFIED = 1e-9


class Outcome(IntEnum):
    """State of one solved draw."""

    SOLVED = 0
    HOST_CONSUMED = 1
    OUTSIDE_DILUTE = 2
    REFUSED = 3


@dataclass(frozen=True, slots=True)
class Equilibrium:
    """Answer and certificate, one column a draw; NaN throughout a refused one.

    Parameters
    ----------
    ln_activity : (S, N) array
        Of every species; for an absent phase it measures saturation, never a content. Minus infinity for
        a species of an element that is not there.
    amounts : (S, N) array
        mol.
    potentials : (E, N) array
        Chemical potential of each element over RT. An element that occurs only bound in one proportion
        to another has the value 0, and the other carries the sum.
    saturation : (P, N) array
        exp F of each phase: 1 where present, below 1 where absent; for a gas at fixed volume its total
        pressure over P0.
    present : (P, N) bool array
    gap : (N,) array
        Duality gap, RT per mole of atoms.
    residual : (N,) array
        Largest relative error of an element balance.
    rounding : (N,) array
        Estimated rounding error of ln activity; infinite where the metal is gone and the pure phases left
        leave a potential open.
    state : (N,) int8 array
        :class:`Outcome`.
    start : (N,) int8 array
        Start of the restart chain that converged, from 1; 0: from the nominal answer; -1: none.
    """

    ln_activity: Array
    amounts: Array
    potentials: Array
    saturation: Array
    present: Mask
    gap: Array
    residual: Array
    rounding: Array
    state: NDArray[np.int8]
    start: NDArray[np.int8]


@dataclass(slots=True)
class _Solved:
    """What has been proved so far: potentials of the independent elements, ln activities, amounts."""

    lam: Array
    u: Array
    n: Array
    active: Mask
    rounding: Array
    start: NDArray[np.int8]

    @classmethod
    def none(cls, problem: Problem) -> _Solved:
        draws = problem.g.shape[1]
        lam: Array = np.full((len(problem.columns), draws), np.nan)
        u: Array = np.full(problem.g.shape, np.nan)
        active = np.zeros((len(problem.phases), draws), dtype=bool)
        return cls(lam, u, u.copy(), active, np.zeros(draws), np.full(draws, -1, dtype=np.int8))

    def put(self, draws: NDArray[np.intp], part: _Solved) -> None:
        for name in ("lam", "u", "n", "active", "rounding", "start"):
            getattr(self, name)[..., draws] = getattr(part, name)

    def keep(self, draws: NDArray[np.intp], answer: newton.Polished, base: components.Basis) -> None:
        good = answer.done
        at = draws[good]
        self.lam[:, at] = np.linalg.solve(base.members, answer.lam[:, good])
        self.u[:, at], self.n[:, at] = answer.u[:, good], answer.n[:, good]
        self.active[: len(answer.active), at] = answer.active[:, good]
        self.rounding[at] = answer.rounding[good]


def _numbers(some: Problem, base: components.Basis, lam: Array, size: Array) -> newton.Draws:
    fixed = newton.balances(some.g, some.volume, some.fed, some.weight, base)
    return {**fixed, "lam": base.members @ lam, "size": size}


def _sizes(problem: Problem, n: Array) -> Array:
    """Amount of each phase, mol."""
    edges = problem.layout.edges
    return np.array([n[i:j].sum(axis=0) for i, j in edges]).reshape(len(edges), n.shape[1])


def _solve(problem: Problem, warm: Equilibrium | None) -> _Solved:
    """Run the chain of starts, each only on the draws that the one before left unproved."""
    base, out = problem.basis, _Solved.none(problem)
    layout = problem.layout
    for number in range(0 if warm else 1, len(interior.CHAIN) + 1):
        todo = np.flatnonzero(out.start < 0)
        if not len(todo):
            break
        some = problem.take(todo)
        if number == 0 and warm:
            guess = _recalled(some, warm)
        else:
            total = some.total[some.columns]
            start = interior.CHAIN[number - 1]
            guess = interior.interior(layout, some.g, total, some.weight, some.volume, start)
        lam, size, active = guess
        limit = newton.LIMIT if number else newton.WARM_LIMIT
        answer = newton.polish(layout, base, _numbers(some, base, lam, size), active, limit=limit)
        out.keep(todo, answer, base)
        out.start[todo[answer.done]] = number
    _rebase(problem, out)
    return out


def _columns(warm: Equilibrium, draws: NDArray[np.intp]) -> Equilibrium:
    """Nominal answer of some draws; one column serves all."""
    pick = draws if len(warm.gap) > 1 else np.zeros(len(draws), dtype=np.intp)
    return Equilibrium(**{f.name: getattr(warm, f.name)[..., pick] for f in fields(Equilibrium)})


def _explain(system: System, problem: Problem) -> None:
    """Raise where a draw failed because the species leave some potential without a finite value."""
    zero = components.forced_zero(problem.formula, problem.total[:, 0])
    if zero != []:
        elements = [system.elements[e] for e in problem.elements]
        refuse(zero, [system.species[i] for i in problem.species], elements)


def _recalled(some: Problem, warm: Equilibrium) -> tuple[Array, Array, Mask]:
    """Potentials, amounts and phases of a nominal answer; a polymorph gives way to the one now stable."""
    closed = some.phases[: len(some.layout.edges)]
    lam: Array = np.nan_to_num(warm.potentials[some.elements[some.columns]], neginf=-1e3)
    active = warm.present[closed]
    n: Array = np.nan_to_num(warm.amounts[some.species])
    size = _sizes(some, n)
    for family in some.layout.families:
        at = np.array(family)
        each = some.g[[some.layout.edges[p][0] for p in family]]
        best = np.arange(len(at))[:, None] == each.argmin(axis=0)
        moved: Array = size[at].sum(axis=0)
        active[at] = best & active[at].any(axis=0)
        size[at] = np.where(best, moved, 0.0)
    return lam, np.maximum(size, 1e-12 * some.weight), active


def _rebase(problem: Problem, out: _Solved) -> None:
    """Rewrite the balances in the stable compounds where rounding would show, and solve once more."""
    shown: Mask = (out.rounding > ROUNDING) | (_residual(problem, out) > ROUNDING)
    worn = np.flatnonzero((out.start >= 0) & shown)
    if not len(worn):
        return
    edges = np.flatnonzero(np.append(True, np.diff(problem.layout.phase) > 0))
    ends = np.append(edges[1:], len(problem.layout.phase))
    leading = np.stack([i + out.n[i:j, worn].argmax(axis=0) for i, j in zip(edges, ends, strict=True)])
    leading = np.where(np.take_along_axis(out.n[:, worn], leading, axis=0) > 0.0, leading, -1)
    patterns, which = np.unique(leading, axis=1, return_inverse=True)
    for k in range(patterns.shape[1]):
        draws = worn[which.ravel() == k]
        amount: Array = np.median(out.n[:, draws], axis=1)
        first = np.isin(np.arange(len(amount)), patterns[:, k])
        order = np.lexsort((-amount, ~first))
        base = components.basis(problem.rows, problem.inputs, tuple(problem.rows[i] for i in order))
        some = problem.take(draws)
        size = _sizes(some, out.n[:, draws])
        active = out.active[: len(size), draws]
        data = _numbers(some, base, out.lam[:, draws], np.maximum(size, 1e-12 * some.weight))
        out.keep(draws, newton.polish(problem.layout, base, data, active), base)


def _oversaturated(system: System, own: Array, problem: Problem, closed: Mask) -> Mask:
    """Draws in which the reservoirs alone pass the saturation of a phase."""
    bare = ~(system.formula[:, problem.elements] > 0).any(axis=1)
    bare &= ~(system.formula[:, problem.absent] > 0).any(axis=1)
    over = np.zeros(own.shape[1], dtype=bool)
    for p in np.flatnonzero(closed):
        members = bare & (system.phase == p)
        over |= np.exp(np.minimum(-own[members], 700.0)).sum(axis=0) >= 1.0
    return over


def _residual(problem: Problem, out: _Solved) -> Array:
    balance: Array = problem.formula.T @ out.n
    largest: Array = np.abs(balance / problem.total - 1.0).max(axis=0)
    return largest


def _gap(problem: Problem, out: _Solved) -> Array:
    """Gibbs energy of the answer less that of a feasible dual point, RT per mole of atoms."""
    layout, k = problem.layout, problem.layout.closed
    n, total = out.n, problem.total
    atoms: Array = layout.a.sum(axis=1)
    f, x = interior.mix(layout, layout.a @ out.lam - problem.g)
    primal, excess = np.zeros(n.shape[1]), np.zeros(n.shape[1])
    for p, (i, j) in enumerate(layout.edges):
        share = n[i:j] / np.maximum(n[i:j].sum(axis=0), 1e-300)
        primal += (n[i:j] * (problem.g[i:j] + np.log(np.maximum(share, 1e-300)))).sum(axis=0)
        fixed: Array = np.where(atoms[i:j, None] > 0.0, 0.0, x[i:j]).sum(axis=0)
        excess = np.maximum(excess, f[p] / np.maximum(1.0 - fixed, 1e-9))
    lam = out.lam - excess
    dual = (total[problem.columns] * lam).sum(axis=0)
    if k < len(n):
        pressure = np.exp(layout.a[k:] @ lam - problem.g[k:])
        room = np.maximum(n[k:], 1e-300) / np.maximum(problem.volume, 1e-300)
        primal += (n[k:] * (problem.g[k:] + np.log(room) - 1.0)).sum(axis=0)
        dual -= problem.volume * pressure.sum(axis=0)
    gap: Array = (primal - dual) / total.sum(axis=0)
    return gap


def _outcome(system: System, amounts: Array, present: Mask) -> NDArray[np.int8]:
    members: NDArray[np.intp] = np.flatnonzero(system.phase == system.host)
    metal = amounts[members]
    x: Array = metal / np.maximum(metal.sum(axis=0), 1e-300)
    state = np.full(amounts.shape[1], Outcome.SOLVED, dtype=np.int8)
    state[(x[1:] > constants.DILUTE).any(axis=0)] = Outcome.OUTSIDE_DILUTE
    state[~present[system.host] | (x[0] < constants.HOST_CONSUMED)] = Outcome.HOST_CONSUMED
    return state


def _saturation(system: System, u: Array) -> Array:
    activity: Array = np.exp(u)
    return np.stack([activity[system.phase == p].sum(axis=0) for p in range(len(system.phases))])


def _assemble(
    system: System, problem: Problem, out: _Solved, own: Array, held: Mapping[str, Array]
) -> Equilibrium:
    """Put the answer back into the system's own order, with its certificate."""
    draws = own.shape[1]
    residual = _residual(problem, out)
    gap = _gap(problem, out)
    # A balance met to 1e-12 leaves a gap of that times the energies, which grow as T falls.
    allowed = CERTIFIED * np.maximum(1.0, np.abs(problem.g).max(axis=0) / 500.0)
    proved = (out.start >= 0) & (np.abs(gap) < allowed) & (residual < CERTIFIED)
    lacking: Array = system.formula[:, problem.absent].sum(axis=1, keepdims=True)
    u: Array = np.where(lacking > 0, -np.inf, -own)
    u[problem.species] = out.u + problem.g - own[problem.species]
    amounts: Array = np.zeros_like(u)
    amounts[problem.species] = out.n
    potentials: Array = np.zeros((len(system.elements), draws))
    potentials[problem.elements[problem.columns]] = out.lam
    potentials[problem.absent] = -np.inf
    for element, value in held.items():
        potentials[system.elements.index(element)] = value
    present = np.zeros((len(system.phases), draws), dtype=bool)
    present[problem.phases] = out.active
    if len(problem.phases) > len(problem.layout.edges):
        present[problem.phases[-1]] = True
    without = (system.formula[:, problem.elements] > 0).astype(float) @ problem.missing > 0.0
    u[without], amounts[without] = -np.inf, 0.0
    potentials[problem.elements] = np.where(problem.missing, -np.inf, potentials[problem.elements])
    present &= np.stack([(amounts[system.phase == p] > 0).any(axis=0) for p in range(len(present))])
    state = _outcome(system, amounts, present)
    # Without a metal the amounts may be proved though some potential is not: they say that it is gone.
    proved &= (out.rounding <= UNSURE) | (state == Outcome.HOST_CONSUMED)
    state[~proved] = Outcome.REFUSED
    for array in (u, amounts, potentials):
        array[:, ~proved] = np.nan
    present[:, ~proved] = False
    out.start[~proved] = -1
    sure = [np.where(proved, v, np.nan) for v in (gap, residual, out.rounding)]
    return Equilibrium(
        u, amounts, potentials, _saturation(system, u), present, sure[0], sure[1], sure[2], state, out.start
    )


def broadcast(
    g: Array, amounts: Array, held: Mapping[str, Array] | None, gas_volume: Array | None
) -> tuple[Array, Array, dict[str, Array], Array | None]:
    """Bring every input to the same number of draws; parameters as for :func:`equilibrium`."""
    g, amounts = np.atleast_2d(np.asarray(g, float)), np.atleast_2d(np.asarray(amounts, float))
    levels = {e: np.atleast_1d(np.asarray(v, float)) for e, v in (held or {}).items()}
    room = None if gas_volume is None else np.atleast_1d(np.asarray(gas_volume, float))
    sizes = [g.shape[1], amounts.shape[1], *(len(v) for v in levels.values())]
    count = max(sizes if room is None else [*sizes, len(room)])
    return (
        np.broadcast_to(g, (len(g), count)),
        np.broadcast_to(amounts, (len(amounts), count)),
        {e: np.broadcast_to(v, (count,)) for e, v in levels.items()},
        None if room is None else np.broadcast_to(room, (count,)),
    )


def equilibrium(
    system: System,
    g: Array,
    amounts: Array,
    *,
    held: Mapping[str, Array] | None = None,
    gas_volume: Array | None = None,
    inputs: NDArray[np.int64] | None = None,
    warm: Equilibrium | None = None,
) -> Equilibrium:
    """Find the stable assemblage of a contact and prove it.

    Parameters
    ----------
    system : System
    g : (S, N) array
        Gibbs energies over RT at unit activity (mole fraction 1, or P0 for a gas at its fixed total
        pressure, already included).
    amounts : (E, N) or (inputs, N) array
        mol of each element, or of each input substance when `inputs` gives their formulas. Substances
        keep the digits that element totals lose: give them where contents are far below the wall.
    held : mapping of str to (N,) array, optional
        Chemical potential over RT of elements that a reservoir holds. Their amounts are not balanced. A
        draw in which they alone saturate a phase (a pressure held above the total, an element held above
        mole fraction 1 in the metal) has no answer and is refused.
    gas_volume : (N,) array or None
        P0 V / (R T) of a gas at fixed volume, mol; None: the gas is at fixed total pressure.
    inputs : (inputs, E) integer array or None
    warm : Equilibrium or None
        Nominal answer of the same system to start from. Draws it does not lead to are solved cold.

    Returns
    -------
    Equilibrium

    Raises
    ------
    IllPosedError
        The species cannot describe the inputs; the text names the species or element.

    Notes
    -----
    With constant activity coefficients the Gibbs energy is convex, so that the duality gap proves the
    optimum. Interior point on the dual (G. Lidor, Stanford 1975, ADA012989), then Newton's method on the
    assemblage in component substances (W. R. Smith and R. W. Missen, Chemical Reaction Equilibrium
    Analysis, 1982). A missing species or phase is not seen by any certificate. A closed gas at a fixed low
    pressure grows until it has evaporated the charge: give a vacuum vessel its volume instead.
    """
    g, amounts, levels, room = broadcast(g, amounts, held, gas_volume)
    problem, own = reduce(system, g, amounts, levels, room, inputs)
    closed = np.array([room is None or name != GAS for name in system.phases])
    out = _Solved.none(problem)
    fit = np.flatnonzero(~_oversaturated(system, own, problem, closed))
    for k in range(0, len(fit), CHUNK):
        at = fit[k : k + CHUNK]
        nominal = None if warm is None else _columns(warm, at)
        # Draws that run away leave by their infinities and go to the next start.
        with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
            out.put(at, _solve(problem.take(at), nominal))
    if (lost := fit[(out.start[fit] < 0) | (out.rounding[fit] > UNSURE)]).size:
        _explain(system, problem.take(lost[:1]))
    with np.errstate(over="ignore", invalid="ignore"):
        return _assemble(system, problem, out, own, levels)
