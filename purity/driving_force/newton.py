"""Newton's method on a known assemblage, in component substances: gives the accuracy of an equilibrium.

Balances are written over component substances with exact coefficients, each as a logarithm of a ratio of two
sums of positive terms, so that contents of parts per trillion keep all their digits beside moles of wall.
"""

from __future__ import annotations

import contextlib
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from purity.driving_force.components import Basis, Layout, combine
from purity.driving_force.interior import mix
from purity.driving_force.pivots import exchange, serve

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]
Draws = dict[str, NDArray[np.float64]]

#: Saturation above which an absent phase is added, in ln.
ADMIT = 1e-9
#: Iterations after an interior-point solve, and from a nominal answer, which is close or of no use.
LIMIT, WARM_LIMIT = 75, 12
#: Share of its first amount below which a shrinking phase is given up.
_GONE = 1e-18
#: ln error of a balance at which rounding may stop the iteration.
_LOOSE = 1e-6
_EPS = float(np.finfo(float).eps)


@dataclass(frozen=True, slots=True)
class Polished:
    """Answer of the method, one column a draw.

    Parameters
    ----------
    lam : (C, N) array
        Potentials of the components over RT.
    u, n : (S, N) arrays
        ln activity, and mol of each species.
    active, done : bool arrays
        (P, N) and (N,).
    rounding : (N,) array
        Estimated rounding error of ln activity; 0 where not done.
    """

    lam: Array
    u: Array
    n: Array
    active: Mask
    done: Mask
    rounding: Array


def balances(g: Array, volume: Array, fed: Array, weight: Array, base: Basis) -> Draws:
    """Collect what does not change while an equilibrium is refined.

    Parameters
    ----------
    g : (S, N) array
    volume : (N,) array
    fed : (J, N) array
        mol of each input.
    weight : (P, N) array
    base : Basis

    Returns
    -------
    mapping
        With the amounts of the components under ``b``.
    """
    return {"g": g, "volume": volume, "weight": weight, "b": combine(fed, base.inputs, base.divisor)}


def evaluate(layout: Layout, base: Basis, d: Draws, active: Mask) -> Draws:
    """Compute activities, amounts, saturations and balances at a point.

    Parameters
    ----------
    layout, base
    d : mapping
        What :func:`balances` gives, ``lam`` and ``size``.
    active : (P, N) bool array

    Returns
    -------
    mapping
        ``u`` ln activity, ``x`` composition, ``n`` amounts, ``f`` ln saturation of each phase, ``plus`` and
        ``minus`` sums of each balance and ``e`` the logarithm of their ratio.
    """
    a, k = base.species, layout.closed
    u: Array = a @ d["lam"] - d["g"]
    total, x = mix(layout, u)
    n: Array = np.empty_like(u)
    n[:k] = np.where(active, d["size"], 0.0)[layout.phase[:k]] * x[:k]
    n[k:] = d["volume"] * np.exp(np.minimum(u[k:], 600.0))
    b = d["b"]
    plus: Array = np.maximum(a, 0.0).T @ n + np.maximum(-b, 0.0)
    minus: Array = np.maximum(-a, 0.0).T @ n + np.maximum(b, 0.0)
    # A component that nothing holds (held to 0 = 0) keeps both sums equal.
    plus, minus = np.maximum(plus, 1e-300), np.maximum(minus, 1e-300)
    return {"u": u, "x": x, "n": n, "f": total, "plus": plus, "minus": minus, "e": np.log(plus / minus)}


def slots(active: Mask) -> tuple[NDArray[np.intp], Mask]:
    """List the active phases of each draw first: positions (A, N), and which of them count."""
    width = int(active.sum(axis=0).max(initial=0))
    index = np.argsort(~active, axis=0, kind="stable")[:width]
    return index, np.take_along_axis(active, index, axis=0)


def jacobian(layout: Layout, base: Basis, point: Draws, active: Mask) -> tuple[Array, Array]:
    """Build the matrix of balances and saturations against potentials and ln amounts.

    Parameters
    ----------
    layout, base
    point : mapping
        Composition x, amounts n, sums plus and minus of the balances.
    active : (P, N) bool array

    Returns
    -------
    (N, C + A, C + A) array, (P, C, N) array
        Absent phases fill up with rows of the unit matrix. The second array is d E / d ln N of every phase.
    """
    a, n, x = base.species, point["n"], point["x"]
    c, draws = a.shape[1], n.shape[1]
    up, down = np.maximum(a, 0.0), np.maximum(-a, 0.0)
    pair_up: Array = (up[:, :, None] * a[:, None, :]).reshape(len(a), -1)
    pair_down: Array = (down[:, :, None] * a[:, None, :]).reshape(len(a), -1)
    square: Array = (pair_up.T @ n).reshape(c, c, draws) / point["plus"][:, None]
    square -= (pair_down.T @ n).reshape(c, c, draws) / point["minus"][:, None]
    mean: Array = np.empty((len(layout.edges), c, draws))
    flow: Array = np.empty_like(mean)
    for p, (i, j) in enumerate(layout.edges):
        mean[p] = a[i:j].T @ x[i:j]
        flow[p] = (up[i:j].T @ n[i:j]) / point["plus"] - (down[i:j].T @ n[i:j]) / point["minus"]
        square -= flow[p][:, None] * mean[p][None, :]
    index, valid = slots(active)
    rows = len(index)
    out: Array = np.zeros((draws, c + rows, c + rows))
    out[:, :c, :c] = square.transpose(2, 0, 1)
    cols = np.arange(draws)
    for q in range(rows):
        out[:, :c, c + q] = np.where(valid[q], flow[index[q], :, cols].T, 0.0).T
        out[:, c + q, :c] = np.where(valid[q], mean[index[q], :, cols].T, 0.0).T
        out[:, c + q, c + q] = np.where(valid[q], 0.0, 1.0)
    return out, flow


def _scales(matrix: Array) -> tuple[Array, Array]:
    row: Array = 1.0 / np.maximum(np.abs(matrix).max(axis=2), 1e-300)
    col: Array = 1.0 / np.maximum((np.abs(matrix) * row[:, :, None]).max(axis=1), 1e-300)
    return row, col


def _wild(answer: Array, load: Array) -> Mask:
    """Find systems that are singular to working precision."""
    largest = np.maximum(np.abs(load).max(axis=(1, 2)), 1e-300)
    wild: Mask = ~(np.abs(answer).max(axis=(1, 2)) < 1e8 * largest)
    return wild


def _scaled(matrix: Array, right: Array) -> tuple[Array, Array, Array, Array]:
    row, col = _scales(matrix)
    scaled: Array = matrix * row[:, :, None] * col[:, None, :]
    load: Array = right * row[:, :, None]
    answer: Array = np.full_like(load, np.inf)
    with contextlib.suppress(np.linalg.LinAlgError):
        answer[...] = np.linalg.solve(scaled, load)
    return scaled, load, answer, col


def solve(matrix: Array, right: Array) -> Array:
    """Solve scaled systems; least squares where a matrix is singular.

    Parameters
    ----------
    matrix : (N, M, M) array
    right : (N, M, K) array

    Returns
    -------
    (N, M, K) array
    """
    scaled, load, answer, col = _scaled(matrix, right)
    # A potential that no present phase fixes, or more pure phases than potentials.
    if (wild := _wild(answer, load)).any():
        answer[wild] = np.linalg.pinv(scaled[wild], rcond=1e-12) @ load[wild]
    return answer * col[:, :, None]


def _rounding(matrix: Array, base: Basis) -> Array:
    """Error of ln activity when every balance is off by one unit in the last place."""
    c = base.species.shape[1]
    unit = np.zeros((len(matrix), matrix.shape[1], c))
    unit[:, np.arange(c), np.arange(c)] = 1.0
    scaled, load, answer, col = _scaled(matrix, unit)
    if (wild := _wild(answer, load)).any():
        # The potentials along a singular direction are open; amounts along one do no harm.
        left, s, right = np.linalg.svd(scaled[wild])
        floor = np.maximum(s, 1e-18 * s[:, :1])
        answer[wild] = right.transpose(0, 2, 1) @ ((left.transpose(0, 2, 1) @ load[wild]) / floor[:, :, None])
    inverse = (answer * col[:, :, None])[:, :c]
    worst: Array = np.abs(base.species @ inverse).sum(axis=2).max(axis=1)
    return np.nan_to_num(worst * _EPS, nan=np.inf)


def _step(layout: Layout, base: Basis, d: Draws, point: Draws, active: Mask) -> Mask:
    """One Newton step in place; returns the phases that are left."""
    matrix, _ = jacobian(layout, base, point, active)
    index, valid = slots(active)
    c = len(d["lam"])
    f: Array = np.where(valid, np.take_along_axis(point["f"], index, axis=0), 0.0)
    right: Array = -np.concatenate([point["e"], f]).T[:, :, None]
    scaled, load, answer, col = _scaled(matrix, right)
    gone = np.zeros(valid.shape, dtype=bool)
    if (wild := _wild(answer, load)).any():
        answer[wild] = np.linalg.pinv(scaled[wild], rcond=1e-12) @ load[wild]
        held: Array = np.where(valid, np.take_along_axis(d["size"], index, axis=0), 0.0)[:, wild]
        answer[wild], gone[:, wild] = exchange(scaled[wild], answer[wild], col[wild], held, f[:, wild])
    move: Array = (answer[:, :, 0] * col).T
    largest: Array = np.abs(move[:c]).max(axis=0)
    move *= np.minimum(1.0, 15.0 / np.maximum(largest, 1e-300))
    d["lam"] = d["lam"] + move[:c]
    q: Array = np.zeros_like(d["size"])
    np.put_along_axis(q, index, np.where(valid, move[c:], 0.0), axis=0)
    d["size"] = d["size"] * np.where(q < -0.9, 0.1, 1.0 + q)
    left: Mask = active & ~((d["size"] < d["least"]) & (q < 0.0) & ~layout.needed[:, None])
    dropped = np.zeros_like(active)
    np.put_along_axis(dropped, index, gone & valid, axis=0)
    return left & ~dropped


def _measure(d: Draws, point: Draws, active: Mask) -> tuple[Mask, Mask]:
    """Draws that are solved to rounding, and draws that ran away.

    A balance in which wall compounds cancel can stop above the tolerance; it is then solved as well as this
    basis allows, and what is left counts as rounding error.
    """
    off_e = np.abs(point["e"]).max(axis=0)
    off_f = np.where(active, np.abs(point["f"]), 0.0).max(axis=0, initial=0.0)
    settled: Mask = (off_e < d["tol_e"]) & (off_f < d["tol_f"])
    idle: Mask = (off_e > 0.5 * d["before"]) & (off_e < _LOOSE) & (off_f < ADMIT)
    d["idle"] = np.where(idle, d["idle"] + 1.0, 0.0)
    d["before"], d["left"] = off_e, np.where(settled, 0.0, off_e)
    lost = ~np.isfinite(off_e + off_f + np.abs(d["size"]).max(axis=0, initial=0.0))
    return settled | (d["idle"] >= 3.0), lost


def _admit(d: Draws, point: Draws, active: Mask, settled: Mask) -> Mask:
    """Draws whose assemblage is stable; where it is not, the most oversaturated phase is added in place."""
    if not len(active):
        return settled
    over: Array = np.where(active, -np.inf, point["f"])
    worst, cols = over.argmax(axis=0), np.arange(len(settled))
    unstable = settled & (over[worst, cols] > ADMIT)
    where = (worst[unstable], cols[unstable])
    active[where] = True
    d["size"][where] = 1e-6 * d["weight"][where]
    d["least"][where] = _GONE * d["size"][where]
    good: Mask = settled & ~unstable
    return good


def polish(layout: Layout, base: Basis, draws: Draws, active: Mask, *, limit: int = LIMIT) -> Polished:
    """Solve balances and saturations of the active phases to rounding, and prove the assemblage.

    Parameters
    ----------
    layout : Layout
    base : Basis
    draws : mapping
        What :func:`balances` gives, and first guesses of the component potentials ``lam`` (C, N) and of the
        amounts of the phases ``size`` (P, N).
    active : (P, N) bool array
        First guess of the stable phases.
    limit : int
        Iterations.

    Returns
    -------
    Polished
    """
    d = dict(draws)
    count = d["g"].shape[1]
    span = np.abs(d["g"]).max(axis=0)
    d |= {"tol_e": 1e-12 + 4e-15 * span, "tol_f": 2e-14 * (1.0 + span), "least": _GONE * d["size"]}
    d |= {"idle": np.zeros(count), "before": np.full(count, np.inf), "left": np.zeros(count)}
    now, live = active | layout.needed[:, None], np.arange(count)
    lam, last = d["lam"].copy(), np.zeros_like(active)
    u, n = np.zeros_like(d["g"]), np.zeros_like(d["g"])
    done, rounding = np.zeros(count, dtype=bool), np.zeros(count)
    for _ in range(limit):
        point = evaluate(layout, base, d, now)
        settled, lost = _measure(d, point, now)
        before = now.copy()
        good = _admit(d, point, now, settled)
        leave = good | lost
        if leave.any():
            out, keep = live[leave], ~leave
            part = {key: value[..., good] for key, value in point.items()}
            estimate = _rounding(jacobian(layout, base, part, now[:, good])[0], base)
            rounding[live[good]] = np.maximum(estimate, d["left"][good])
            lam[:, out], last[:, out], done[out] = d["lam"][:, leave], now[:, leave], good[leave]
            u[:, out], n[:, out] = point["u"][:, leave], point["n"][:, leave]
            if not keep.any():
                break
            live, before = live[keep], before[:, keep]
            d, now = {key: value[..., keep] for key, value in d.items()}, now[:, keep]
            point = {key: value[..., keep] for key, value in point.items()}
        if serve(layout, base, d, point, now) or (now != before).any():
            point = evaluate(layout, base, d, now)
        now = _step(layout, base, d, point, now)
    return Polished(lam, u, n, last, done, rounding)
