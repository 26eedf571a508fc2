"""One unknown a contact, where one element ties all carriers of a group together (mostly oxygen).

Given z = ln x of that element, the hub, at each contact, every other element, a leaf, is closed if it
meets carriers at one contact only: with a wall M_n H_b from its law, x = (K a / x_h^b)^(1/n); with films
of the same n = 1 or 2 from X = rest + n G sum g a and q = n G sum g x_h^b / K, x = X/(1 + q) or
2X/(1 + sqrt(1 + 4 q X)). What is left is F_s = x_h,s - rest_s - sum G N = 0 with
J = diag(x_h) + G |dN/dz|: as many equations as contacts. Draws that do not settle soon, or in which
opposing fluxes cancel beyond rounding, are left to the Newton on fluxes.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from purity.kinetics.exposure import Array
from purity.kinetics.flux_newton import HIGHEST, LEAST_ACTIVITY, LOWEST, Block, Flags, Point, eliminate, weigh
from purity.kinetics.stage import Bath, Index, Stage, response

#: Longest fall of a logarithm in a pass, and passes.
LIMIT, PASSES = 4.0, 20
#: Relative rounding of a content, from opposing fluxes, beyond which a draw is not taken.
CANCELS = 1e-9
ROUNDING = 1e-16


@dataclass(frozen=True, slots=True)
class Leaf:
    """An element that hangs on the hub at one contact.

    Parameters
    ----------
    contact : int
        Position in the contacts of the plan.
    unknown : int
        Its content, among those of the block.
    rows : (K,) int array
        Its rows in the block.
    n : float
        Its atoms in a unit.
    b : (K, 1) array
        Atoms of the hub in a unit of each row.
    wall : bool
    """

    contact: int
    unknown: int
    rows: Index
    n: float
    b: Array
    wall: bool


@dataclass(frozen=True, slots=True)
class Plan:
    """How a block is solved: hub contents at its contacts, leaves, and rows that move the hub alone.

    Parameters
    ----------
    hub : (S,) int array
        Unknowns of the block.
    leaves : tuple of Leaf
    alone : tuple of (contact, row, atoms)
    atoms : (S, C) array
        Atoms of the hub that a unit of each row brings to each contact.
    contact : (C,) int array
        Contact of each row.
    """

    hub: Index
    leaves: tuple[Leaf, ...]
    alone: tuple[tuple[int, int, float], ...]
    atoms: Array
    contact: Index


@dataclass(frozen=True, slots=True)
class System:
    """One stage: G of the hub (S, S, N), of each leaf (M, N), rests (U, N), g a and g/K or ln K a (C, N)."""

    hub: Array
    leaf: Array
    rest: Array
    supply: Array
    back: Array
    ln_law: Array

    def take(self, draws: Index | Flags) -> System:
        """Some draws."""
        return System(*(getattr(self, name)[..., draws] for name in self.__slots__))


@dataclass(frozen=True, slots=True)
class Fluxes:
    """At given z: fluxes and minus their slopes in z (C, N), loads on rounding (C, N), leaf contents."""

    flux: Array
    slope: Array
    load: Array
    leaves: tuple[Array, ...]


def plan(block: Block) -> Plan | None:
    """Find the hub of a block, or None where no element ties it together in this way."""
    if (block.skin | block.stock).any():
        return None
    film = np.zeros(len(block.rows), dtype=bool)
    film[block.film] = True
    shared = {int(i): int((block.nu[:, block.impurity == i] > 0).sum()) for i in set(block.impurity.tolist())}
    for impurity in sorted(shared, key=lambda i: (-shared[i], i)):
        found = _plan(block, film, impurity)
        if found is not None:
            return found
    return None


def _plan(block: Block, film: Flags, impurity: int) -> Plan | None:
    hub = np.flatnonzero(block.impurity == impurity)
    places = block.place[hub].tolist()
    leaves, alone = [], []
    others = [u for u in range(len(block.place)) if u not in hub]
    if len({int(block.impurity[u]) for u in others}) < len(others):
        return None
    for row in range(len(block.rows)):
        mine = [u for u in others if block.nu[row, u] > 0]
        if len(mine) > 1 or (not mine and not film[row]):
            return None
    for u in others:
        rows = np.flatnonzero(block.nu[:, u] > 0)
        n = block.nu[rows, u]
        walls = int((~film[rows]).sum())
        if int(block.place[u]) not in places or (walls and len(rows) > 1):
            return None
        if not walls and (np.ptp(n) > 0 or n[0] not in (1, 2)):
            return None
        s = places.index(int(block.place[u]))
        leaves.append(Leaf(s, u, rows, float(n[0]), block.nu[rows, hub[s], None], bool(walls)))
    atoms = block.nu[:, hub].T
    contact = np.zeros(len(block.rows), dtype=np.int64)
    for leaf in leaves:
        contact[leaf.rows] = leaf.contact
    for row in range(len(block.rows)):
        if not any(block.nu[row, u] > 0 for u in others):
            s = int(np.argmax(atoms[:, row]))
            contact[row] = s
            alone.append((s, row, float(atoms[s, row])))
    return Plan(hub, tuple(leaves), tuple(alone), atoms, contact)


def system(bath: Bath, block: Block, tie: Plan, at_stage: Stage) -> System:
    """Write the equations of one stage."""
    c, rows = at_stage.coefficients, block.rows
    places, impurity = block.place[tie.hub], block.impurity[tie.hub]
    size = len(places)
    at, source = np.repeat(places, size), np.tile(places, size)
    G = response(at_stage, at, np.repeat(impurity, size), source).reshape(size, size, -1)
    u = np.array([leaf.unknown for leaf in tie.leaves], dtype=np.int64)
    own = response(at_stage, block.place[u], block.impurity[u], block.place[u])
    activity, resistance = c.activity[rows], c.resistance[rows]
    g = 1 / np.where(resistance > 0, resistance, np.inf)
    wall = np.ones(len(rows), dtype=bool)
    wall[block.film] = False
    ln_law = c.ln_k[rows]
    ln_law[wall] += np.log(np.maximum(activity[wall], LEAST_ACTIVITY))
    back = np.zeros_like(g)
    back[block.film] = g[block.film] * np.exp(-ln_law[block.film])
    return System(G, own, at_stage.rest[block.place, block.impurity], g * activity, back, ln_law)


def _fluxes(tie: Plan, system: System, z: Array) -> Fluxes:
    flux, slope, load = (np.zeros_like(system.supply) for _ in range(3))
    x_hub, contents = np.exp(z), []
    for k, leaf in enumerate(tie.leaves):
        G, rest, n = system.leaf[k], system.rest[leaf.unknown], leaf.n
        if leaf.wall:
            row, b = int(leaf.rows[0]), float(leaf.b[0, 0])
            x = np.exp((system.ln_law[row] - b * z[leaf.contact]) / n)
            flux[row] = (x - rest) / (n * G)
            slope[row] = b / n * x / (n * G)
            load[row] = np.abs(flux[row])
        else:
            back = system.back[leaf.rows] * _power(x_hub[leaf.contact], leaf.b)
            q, tilt = n * G * back.sum(axis=0), n * G * (leaf.b * back).sum(axis=0)
            X = rest + n * G * system.supply[leaf.rows].sum(axis=0)
            root = 1 + q if n == 1 else np.sqrt(1 + 4 * q * X)
            x = X / root if n == 1 else 2 * X / (1 + root)
            out = back * (x if n == 1 else x * x)
            fall = n * tilt * (1.0 if n == 1 else x) / root
            flux[leaf.rows] = system.supply[leaf.rows] - out
            slope[leaf.rows] = out * (leaf.b - fall)
            load[leaf.rows] = system.supply[leaf.rows] + out
        contents.append(x)
    for s, row, b in tie.alone:
        out = system.back[row] * x_hub[s] ** b
        flux[row], slope[row], load[row] = system.supply[row] - out, b * out, system.supply[row] + out
    return Fluxes(flux, slope, load, tuple(contents))


def _power(x: Array, b: Array) -> Array:
    """x^b for small whole b, row by row."""
    whole: dict[float, Array] = {0.0: np.ones_like(x), 1.0: x, 2.0: x * x}
    return np.stack([whole[p] if p in whole else x**p for p in b[:, 0].tolist()])


def solve(tie: Plan, equations: System, warm: Point, tolerance: float) -> tuple[Point, Flags]:
    """Solve one stage.

    Parameters
    ----------
    tie : Plan
    equations : System
    warm : Point
        Of which the hub's y are used.
    tolerance : float
        Largest step of a logarithm at which a draw is done.

    Returns
    -------
    Point
        Hub's y and all fluxes; the other y and p of solved draws are left as they were.
    solved : (N,) bool array
    """
    answer = warm.copy()
    solved = np.zeros(warm.y.shape[-1], dtype=bool)
    draws: Index = np.arange(len(solved))
    z, part = warm.y[tie.hub], equations
    with np.errstate(all="ignore"):
        for _ in range(PASSES):
            at = _fluxes(tie, part, z)
            step, sound = _step(tie, part, z, at)
            z = z + np.log1p(np.maximum(step, 0)) + np.clip(step, -LIMIT, 0)
            z = np.clip(z, LOWEST, HIGHEST)
            done = (np.abs(step) < tolerance).all(axis=0)
            if done.any():
                flux = at.flux - at.slope * step[tie.contact]
                good = done & sound & np.isfinite(flux).all(axis=0)
                answer.y[np.ix_(tie.hub, draws[good])] = z[:, good]
                answer.flux[:, draws[good]] = flux[:, good]
                solved[draws[good]] = True
                left = np.asarray(~done)
                if not left.any():
                    break
                z, part, draws = z[:, left], part.take(left), draws[left]
    return answer, solved


def _step(tie: Plan, part: System, z: Array, at: Fluxes) -> tuple[Array, Flags]:
    x = np.exp(z)
    total = np.einsum("stn,tn->sn", part.hub, weigh(tie.atoms, at.flux))
    J = part.hub * weigh(tie.atoms, at.slope)
    every = np.arange(len(z))
    J[every, every] += x
    step = eliminate(J, part.rest[tie.hub] + total - x)
    rough = np.einsum("stn,tn->sn", part.hub, weigh(tie.atoms, at.load)) / x
    sound = rough.max(axis=0) * ROUNDING < CANCELS
    for k, leaf in enumerate(tie.leaves):
        if not leaf.wall:
            load = leaf.n * part.leaf[k] * at.load[leaf.rows].sum(axis=0)
            sound &= load * ROUNDING < CANCELS * at.leaves[k]
    return step, sound


def unfold(block: Block, tie: Plan, equations: System, point: Point) -> Point:
    """Fill in the other points of linearisation from the hub's, for the Newton on fluxes to begin from."""
    with np.errstate(all="ignore"):
        at = _fluxes(tie, equations, point.y[tie.hub])
        y = point.y.copy()
        for leaf, x in zip(tie.leaves, at.leaves, strict=True):
            y[leaf.unknown] = np.log(x)
        p = weigh(block.nu[block.film], y) - equations.ln_law[block.film]
    sane = np.isfinite(y).all(axis=0) & np.isfinite(p).all(axis=0)
    y, p = np.where(sane, y, point.y), np.where(sane, p, point.p)
    return Point(np.clip(y, LOWEST, HIGHEST), np.clip(p, LOWEST, HIGHEST), point.flux, point.bound)
