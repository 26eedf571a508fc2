"""Newton on the fluxes of the carriers that are not linear.

Contents are affine in the fluxes R, so the unknowns are one flux a carrier; every exponential keeps
its own point of linearisation: y = ln x where a carrier acts, p = ln a_s of carriers with a resistance
on the contact side. With q = (rest + G nu R) / e^y - 1::

    M   = nu G nu / e^y + diag(e^-p / g)
    M dR = ln K + ln a - nu y - nu q                                   (walls, skins)
    M dR = ln K + p - nu y - nu q + (a - R/g) e^-p - 1                 (g finite)
    dy   = q + G nu dR / e^y,   dp = (a - R/g) e^-p - 1

A rise of y or p keeps the content (log1p), a fall keeps the logarithm up to a limit: from any start
this settles without a line search. Fluxes are carried and only their increments solved for; without
that, fluxes that cancel do not converge.

Measured on wild single stages from cold (contents 1e-12 to 1e-2, rates over six decades, ln K of standard
deviation 4 sqrt(sum nu^2), six kinds of bath of one to four contacts): none of 120,000 unsolved.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from purity.kinetics.exposure import FLOOR, Array
from purity.kinetics.stage import Bath, Coefficients, Index, Stage, response

Flags = NDArray[np.bool_]

#: Longest fall of a logarithm in a pass, and passes: the first settles nearly all, the rest what is left.
LADDER = ((12.0, 80), (20.0, 150), (6.0, 150), (40.0, 150), (2.0, 150), (1.0, 150))
#: Largest step of a logarithm at which a stage is solved. The error that is left is its square, and
#: moved no content of a melt by more than 5e-7; balances are exact whatever it is.
SETTLED = 1e-3
#: Ratio beyond which a difference is left to the law that it comes from.
CANCELS_ACTIVITY = 1e9
CANCELS_CONTENT = 1e8
#: Activity that stands for none at a contact without resistance.
LEAST_ACTIVITY = 1e-60
LOWEST, HIGHEST = -300.0, 100.0


@dataclass(frozen=True, slots=True)
class Block:
    """Rows that share impurities, and the contents that they see.

    Parameters
    ----------
    rows : (C,) int array
        Into the rows of the bath.
    place, impurity : (U,) int arrays
        Where each unknown content is, and of what.
    nu : (C, U) array
        Atoms of each unknown content in a unit of each row (0 at other places).
    unknown, row : int arrays
        Pairs (content, row) of the same impurity, wherever they are.
    film : (F,) int array
        Rows with a resistance on the contact side.
    skin, stock : (C,) bool arrays
        Skins, and rows with an inventory.
    """

    rows: Index
    place: Index
    impurity: Index
    nu: Array
    unknown: Index
    row: Index
    film: Index
    skin: Flags
    stock: Flags

    @property
    def bounded(self) -> Index:
        """Rows whose flux has an upper bound."""
        return np.flatnonzero(self.skin | self.stock)


@dataclass(slots=True)
class Point:
    """Where the Newton stands: y (U, N), p (F, N), R (C, N), and rows held at their bound (C, N)."""

    y: Array
    p: Array
    flux: Array
    bound: Flags

    def take(self, draws: Index | Flags | slice) -> Point:
        """Some draws."""
        return Point(self.y[:, draws], self.p[:, draws], self.flux[:, draws], self.bound[:, draws])

    def put(self, draws: Index | Flags, point: Point) -> None:
        """Overwrite some draws."""
        self.y[:, draws], self.p[:, draws] = point.y, point.p
        self.flux[:, draws], self.bound[:, draws] = point.flux, point.bound

    def copy(self) -> Point:
        """Fresh arrays."""
        return Point(self.y.copy(), self.p.copy(), self.flux.copy(), self.bound.copy())


@dataclass(frozen=True, slots=True)
class Equations:
    """One stage of one block: B = G nu (U, C, N), rest (U, N), and the laws of the rows (C or F, N)."""

    B: Array
    rest: Array
    ln_k: Array
    ln_a: Array
    activity: Array
    resistance: Array
    most: Array

    def take(self, draws: Index | Flags) -> Equations:
        """Some draws."""
        return Equations(
            self.B[..., draws],
            self.rest[:, draws],
            self.ln_k[:, draws],
            self.ln_a[:, draws],
            self.activity[:, draws],
            self.resistance[:, draws],
            self.most[:, draws],
        )


def blocks(bath: Bath) -> tuple[Block, ...]:
    """Split the rows of a bath into groups that share no impurity."""
    nu = bath.nu
    left = list(range(len(bath.rows)))
    found = []
    while left:
        group, grown = [left.pop(0)], True
        while grown:
            seen = (nu[group] > 0).any(axis=0)
            more = [c for c in left if (nu[c][seen] > 0).any()]
            group, left, grown = group + more, [c for c in left if c not in more], bool(more)
        found.append(_block(bath, np.array(sorted(group), dtype=np.int64)))
    return tuple(found)


def _block(bath: Bath, rows: Index) -> Block:
    nu, place = bath.nu[rows], bath.place[rows]
    seen = sorted({(int(place[c]), int(i)) for c in range(len(rows)) for i in np.flatnonzero(nu[c])})
    at = np.array([s for s, _ in seen], dtype=np.int64)
    impurity = np.array([i for _, i in seen], dtype=np.int64)
    own = np.where(place[:, None] == at, nu[:, impurity], 0.0)
    unknown, row = np.nonzero(nu[:, impurity].T > 0)
    film = [c for c in range(len(rows)) if bath.rows[rows[c]].conductance is not None]
    stock = [bath.rows[c].inventory is not None for c in rows]
    return Block(
        rows,
        at,
        impurity,
        own,
        unknown.astype(np.int64),
        row.astype(np.int64),
        np.array(film, dtype=np.int64),
        bath.skin[rows],
        np.array(stock, dtype=bool),
    )


def equations(bath: Bath, block: Block, at_stage: Stage, most: Array) -> Equations:
    """Write the equations of one stage.

    Parameters
    ----------
    most : (C, N) array
        Largest flux of each row of the bath, mol m-2 s-1; infinite without an inventory.
    """
    c, rows = at_stage.coefficients, block.rows
    u, j = block.unknown, block.row
    B = np.zeros((len(block.place), len(rows), at_stage.span.shape[-1]))
    place = bath.place[rows]
    G = response(at_stage, block.place[u], block.impurity[u], place[j])
    B[u, j] = G * bath.nu[rows[j], block.impurity[u], None]
    activity = c.activity[rows]
    ln_a = np.log(np.maximum(activity, LEAST_ACTIVITY))
    return Equations(
        B,
        at_stage.rest[block.place, block.impurity],
        c.ln_k[rows],
        ln_a,
        activity[block.film],
        c.resistance[rows][block.film],
        np.where(block.skin[:, None], 0.0, most[rows]),
    )


def start(block: Block, coefficients: Coefficients, total: Array) -> Point:
    """Begin with surfaces at the bath's contents (I, N), no flux and no skin."""
    y = np.log(np.maximum(total, FLOOR))[block.impurity]
    rows = block.rows[block.film]
    with np.errstate(divide="ignore"):
        ln_a = np.log(coefficients.activity[rows])
    p = weigh(block.nu[block.film], y) - coefficients.ln_k[rows]
    p = np.where(ln_a > -np.inf, np.minimum(p, ln_a), p)
    shape = (len(block.rows), total.shape[-1])
    return Point(y, p, np.zeros(shape), np.broadcast_to(block.skin[:, None], shape).copy())


def solve(block: Block, system: Equations, warm: Point, tolerance: float = SETTLED) -> tuple[Point, Flags]:
    """Solve one stage.

    Parameters
    ----------
    block : Block
    system : Equations
    warm : Point
        Where to begin.
    tolerance : float
        Largest step of a logarithm at which a draw is done.

    Returns
    -------
    Point
        Fluxes and points of linearisation; draws left unsolved keep the start.
    solved : (N,) bool array
    """
    answer = warm.copy()
    left: Index = np.arange(warm.y.shape[-1])
    with np.errstate(all="ignore"):
        for limit, passes in LADDER:
            whole = len(left) == warm.y.shape[-1]
            part = system if whole else system.take(left)
            begin = warm.copy() if whole else warm.take(left)
            unsolved = np.ones(len(left), dtype=bool)
            for done, point in _iterate(block, part, begin, limit, passes, tolerance):
                answer.put(left[done], point)
                unsolved[done] = False
            left = left[unsolved]
            if not len(left):
                break
    solved = np.ones(warm.y.shape[-1], dtype=bool)
    solved[left] = False
    return answer, solved


def _iterate(
    block: Block, system: Equations, point: Point, limit: float, passes: int, tolerance: float
) -> Iterator[tuple[Index, Point]]:
    """Yield draws as they are done; a draw's answer does not depend on the others."""
    draws: Index = np.arange(point.y.shape[-1])
    waiting = np.ones(len(draws), dtype=bool)
    for _ in range(passes):
        point, settled = _step(block, system, point, limit, tolerance)
        new = settled & waiting
        if new.any():
            yield draws[new], point.take(new)
            waiting &= ~new
            alive = int(waiting.sum())
            if not alive:
                return
            if alive < 0.7 * len(waiting):
                system, point, draws = system.take(waiting), point.take(waiting), draws[waiting]
                waiting = np.ones(alive, dtype=bool)


def _step(
    block: Block, system: Equations, point: Point, limit: float, tolerance: float
) -> tuple[Point, Flags]:
    film, nu, B = block.film, block.nu, system.B
    y, flux = point.y, point.flux
    w = np.exp(-y)
    q = (system.rest + np.einsum("ucn,cn->un", B, flux)) * w - 1
    size = (system.rest + np.einsum("ucn,cn->un", B, np.abs(flux))) * w
    M = _matrix(nu, B, w)
    right = system.ln_k - weigh(nu, y + q)
    wall = np.ones(len(nu), dtype=bool)
    wall[film] = False
    right[wall] += system.ln_a[wall]
    inverse = np.exp(-point.p)
    right[film] += point.p + (system.activity - flux[film] * system.resistance) * inverse - 1
    M[film, film] += inverse * system.resistance
    for c in block.bounded:
        free = ~point.bound[c]
        M[c] *= free
        M[c, c] += point.bound[c]
        right[c] = np.where(free, right[c], np.where(free, 0.0, system.most[c]) - flux[c])
    change = eliminate(M, right)
    flux = flux + change
    dy = q + np.einsum("ucn,cn->un", B, change) * w
    new_y = np.clip(y + np.log1p(np.maximum(dy, 0)) + np.clip(dy, -limit, 0), LOWEST, HIGHEST)
    _own_law(block, system, point, flux, size > CANCELS_CONTENT * np.maximum(1 + dy, 1), new_y, limit)
    new_p, noise_free = _new_p(block, system, point, flux, inverse, new_y, limit)
    bound, same = _bounds(block, system, new_y, flux, point.bound)
    off = np.abs(new_y - y)
    settled = same & np.isfinite(flux).all(axis=0) & (off.max(axis=0) < tolerance)
    if len(film):
        settled &= np.abs(noise_free).max(axis=0) < tolerance
    return Point(new_y, new_p, flux, bound), settled


def _matrix(nu: Array, B: Array, w: Array) -> Array:
    """Sum nu_cu w_u B_u over u, without a copy of B."""
    M = np.empty((len(nu), *B.shape[1:]))
    for c, row in enumerate(nu.tolist()):
        first, *others = (u for u, atoms in enumerate(row) if atoms)
        np.multiply(B[first], row[first] * w[first], out=M[c])
        for u in others:
            M[c] += B[u] * (row[u] * w[u])
    return M


def weigh(nu: Array, values: Array) -> Array:
    """Sum nu_cu values_u over u.

    Most of nu is 0, so this beats a dense product, and its rounding does not hang on the number of draws.
    """
    total: Array = np.zeros((len(nu), *values.shape[1:]))
    for c, row in enumerate(nu.tolist()):
        for u, atoms in enumerate(row):
            if atoms:
                total[c] += values[u] if atoms == 1 else atoms * values[u]
    return total


def eliminate(M: Array, b: Array) -> Array:
    """Solve M z = b for every draw, in place; M (C, C, N), b (C, N), diagonal positive, no pivoting."""
    size = len(b)
    for k in range(size - 1):
        f = M[k + 1 :, k] / M[k, k]
        M[k + 1 :, k + 1 :] -= f[:, None] * M[k, k + 1 :]
        b[k + 1 :] -= f * b[k]
    for k in range(size - 1, -1, -1):
        for j in range(k + 1, size):
            b[k] -= M[k, j] * b[j]
        b[k] /= M[k, k]
    return b


def _own_law(
    block: Block, system: Equations, point: Point, flux: Array, cancels: Flags, y: Array, limit: float
) -> None:
    """Take a content that is eaten down to rounding from the law of the row that eats it (in place)."""
    u, n = np.nonzero(cancels)
    if not len(u):
        return
    eaten = system.B[u, :, n] * flux[:, n].T
    eaten[block.nu[:, u].T == 0] = np.inf
    row = np.argmin(eaten, axis=1)
    ln_a = system.ln_a.copy()
    ln_a[block.film] = point.p
    own = block.nu[row, u]
    others = np.einsum("ku,uk->k", block.nu[row], y[:, n]) - own * y[u, n]
    law = (system.ln_k[row, n] + ln_a[row, n] - others) / own
    eats = eaten[np.arange(len(u)), row] < 0
    near = np.clip(law, point.y[u, n] - limit, point.y[u, n] + limit)
    y[u, n] = np.clip(np.where(eats & np.isfinite(law), near, y[u, n]), LOWEST, HIGHEST)


def _new_p(
    block: Block, system: Equations, point: Point, flux: Array, inverse: Array, y: Array, limit: float
) -> tuple[Array, Array]:
    """Next ln a_s, and its steps with those of idle rows left out."""
    film = block.film
    dp = (system.activity - flux[film] * system.resistance) * inverse - 1
    p = point.p + np.log1p(np.maximum(dp, 0)) + np.clip(dp, -limit, 0)
    law = weigh(block.nu[film], y) - system.ln_k[film]
    idle = point.bound[film]
    p = np.clip(np.where((system.activity * inverse > CANCELS_ACTIVITY) | idle, law, p), LOWEST, HIGHEST)
    return p, np.where(idle, 0.0, p - point.p)


def _bounds(block: Block, system: Equations, y: Array, flux: Array, bound: Flags) -> tuple[Flags, Flags]:
    """Which rows are held at their bound next, and in which draws nothing changed."""
    same = np.ones(y.shape[-1], dtype=bool)
    if not len(block.bounded):
        return bound, same
    bound = bound.copy()
    film = {int(c): f for f, c in enumerate(block.film)}
    for c in block.bounded:
        law = weigh(block.nu[c : c + 1], y)[0] - system.ln_k[c]
        if int(c) in film:
            f = film[int(c)]
            falls = system.activity[f] - np.exp(law) < system.most[c] * system.resistance[f]
        else:
            falls = law > system.ln_a[c]
        now = np.where(bound[c], ~falls, flux[c] > system.most[c])
        same &= now == bound[c]
        bound[c] = now
    return bound, same
