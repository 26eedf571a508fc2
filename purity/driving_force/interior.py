"""Interior-point method for the dual of a Gibbs energy minimum: finds which phases are stable.

Every phase p is an ideal solution in its reference state (constant activity coefficients are part of g), so
the Gibbs energy is convex and its dual a geometric programme: maximise b.lambda subject to
F_p(lambda) = ln sum_i exp(a_i.lambda - g_i) <= 0. Balances are met in logarithms, so that a trace element
counts like any other, and each phase has a slack s_p of its own.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from purity.driving_force.components import Layout

Array = NDArray[np.float64]
Draws = dict[str, Array]


@dataclass(frozen=True, slots=True)
class Start:
    """One start of the restart chain.

    Parameters
    ----------
    mu : float
        First barrier parameter.
    fast, slow : float
        Factors on the barrier after a well and a fairly centred iteration.
    end : float
        Barrier at which to stop.
    limit : int
        Iterations.
    homotopy : float
        Nats by which the distance between the balances met and those asked shrinks at each centred
        iteration; 0: the balances are asked at once.
    """

    mu: float
    fast: float
    slow: float
    end: float
    limit: int
    homotopy: float = 0.0


#: Only the draws that fail move to the next start.
CHAIN = (
    Start(10.0, 3e-3, 0.1, 1e-9, 70),
    Start(1.0, 0.03, 0.3, 1e-12, 200),
    Start(1e-4, 0.03, 0.3, 1e-12, 300),
    Start(30.0, 0.03, 0.3, 1e-12, 400, 1.0),
    Start(1.0, 0.03, 0.3, 1e-12, 600, 0.5),
)

_FLOOR = 1e-280
_T_FLOOR = 0.03
#: What a trial step reads.
_NEEDED = ("g", "target", "off", "volume", "mu", "weight", "lam", "size", "slack", "merit")
#: Draws below which one call to LAPACK is faster than elimination over the draw axis.
_FEW = 64


def mix(layout: Layout, u: Array) -> tuple[Array, Array]:
    """Sum the activities of every phase.

    Parameters
    ----------
    layout : Layout
    u : (S, N) array
        ln activity of each species.

    Returns
    -------
    (P, N) array, (S, N) array
        F_p = ln sum exp u, and the composition x = exp(u - F); ones for a gas at fixed volume.
    """
    total: Array = np.empty((len(layout.edges), u.shape[1]))
    x: Array = np.ones_like(u)
    total[layout.pure[0]] = u[layout.pure[1]]
    for p, i, j in layout.mixed:
        top = u[i:j].max(axis=0)
        share = np.exp(u[i:j] - top)
        whole = share.sum(axis=0)
        total[p] = top + np.log(whole)
        x[i:j] = np.maximum(share / whole, _FLOOR)
    return total, x


def _evaluate(layout: Layout, d: Draws, lam: Array, size: Array, slack: Array) -> Draws:
    u: Array = layout.a @ lam - d["g"]
    total, x = mix(layout, u)
    k = layout.closed
    n: Array = np.empty_like(u)
    n[:k] = size[layout.phase[:k]] * x[:k]
    n[k:] = d["volume"] * np.exp(np.minimum(u[k:], 600.0))
    flow: Array = np.maximum(layout.a.T @ n, 1e-300)
    e1: Array = np.log(flow) - d["target"] - d["off"]
    point = {"lam": lam, "size": size, "slack": slack, "x": x, "n": n, "flow": flow, "e1": e1}
    point["e3"] = total + slack
    return _centre(point, d)


def _centre(point: Draws, d: Draws) -> Draws:
    t: Array = point["size"] * point["slack"] / (d["mu"] * d["weight"])
    # Logarithm of t below 1, linear above: Newton's method stays quick from either side.
    point["t"], point["below"], point["above"] = t, np.log(np.minimum(t, 1.0)), np.maximum(t, 1.0)
    off = (point["e1"], point["e3"], point["below"] + (point["above"] - 1.0))
    point["merit"] = sum((np.einsum("in,in->n", e, e) for e in off), np.zeros(t.shape[1]))
    return point


def solve_spd(k: Array, r: Array) -> Array:
    """Solve one small symmetric positive definite system a draw, by Cholesky over the draw axis.

    Parameters
    ----------
    k : (C, C, N) array
        Symmetric, overwritten.
    r : (C, N) array

    Returns
    -------
    (C, N) array
    """
    size = len(r)
    if r.shape[1] < _FEW:
        few = np.linalg.solve(k.transpose(2, 0, 1), r.T[:, :, None])
        return np.asarray(few[:, :, 0].T, dtype=np.float64)
    y: Array = r.copy()
    for j in range(size):
        for m in range(j):
            k[j:, j] -= k[j:, m] * k[j, m]
        k[j:, j] /= np.sqrt(np.maximum(k[j, j], 1e-30))
        y[j] /= k[j, j]
        for i in range(j + 1, size):
            y[i] -= k[i, j] * y[j]
    for j in range(size - 1, -1, -1):
        y[j] /= k[j, j]
        for i in range(j):
            y[i] -= k[j, i] * y[j]
    return y


def _matrix(layout: Layout, d: Draws) -> Array:
    ratio: Array = d["size"] / d["slack"]
    weight: Array = d["n"].copy()
    phases, alone = layout.pure
    weight[alone] = ratio[phases]
    low, high, c = layout.low, layout.high, layout.a.shape[1]
    flat: Array = layout.pairs @ weight
    for p, i, j in layout.mixed:
        mean = layout.a[i:j].T @ d["x"][i:j]
        flat += (ratio[p] - d["size"][p]) * mean[low] * mean[high]
    full: Array = np.empty((c, c, weight.shape[1]))
    full[low, high] = flat
    full[high, low] = flat
    return full


def _direction(layout: Layout, d: Draws) -> tuple[Array, Array, Array]:
    """Newton direction: d lambda, d s, d ln N."""
    a, k = layout.a, layout.closed
    phase = layout.phase[:k]
    rc: Array = d["below"] + (1.0 - 1.0 / d["above"])
    load: Array = d["size"] * (rc - d["e3"] / d["slack"])
    r: Array = a[:k].T @ (load[phase] * d["x"][:k]) - d["flow"] * d["e1"]
    matrix = _matrix(layout, d)
    c = np.arange(a.shape[1])
    scale: Array = 1.0 / np.sqrt(np.maximum(matrix[c, c], 1e-300))
    matrix *= scale[:, None] * scale[None, :]
    matrix[c, c] = 1.0 + 1e-13
    step = scale * solve_spd(matrix, scale * r)
    du: Array = a[:k] @ step
    moved: Array = np.empty_like(d["slack"])
    moved[layout.pure[0]] = du[layout.pure[1]]
    for p, i, j in layout.mixed:
        moved[p] = (du[i:j] * d["x"][i:j]).sum(axis=0)
    ds: Array = -d["e3"] - moved
    return step, ds, -rc - ds / d["slack"]


def _move(layout: Layout, d: Draws, move: tuple[Array, Array, Array], alpha: Array) -> Draws:
    step, ds, dn = move
    q: Array = alpha * dn
    size: Array = d["size"] * np.where(q > 0.0, 1.0 + np.maximum(q, 0.0), np.exp(np.minimum(q, 0.0)))
    size = np.clip(size, 1e-290, 1e290)
    return _evaluate(layout, d, d["lam"] + alpha * step, size, d["slack"] + alpha * ds)


def _advance(layout: Layout, d: Draws) -> tuple[Draws, NDArray[np.bool_]]:
    """One damped Newton iteration; tells which draws found no acceptable step."""
    move = _direction(layout, d)
    step, ds, _ = move
    reach: Array = 20.0 / np.maximum(np.abs(step).max(axis=0), 1e-300)
    inside: Array = 0.95 / np.maximum((-ds / d["slack"]).max(axis=0, initial=0.0), 1e-300)
    alpha: Array = np.minimum(np.minimum(reach, inside), 1.0)
    new = {**d, **_move(layout, d, move, alpha)}
    least: Array = 0.999 * np.minimum(d["t"], _T_FLOOR)
    bad = _rejected(d, new, alpha, least)
    index = np.flatnonzero(bad)
    for _ in range(20):
        if not len(index):
            break
        alpha[index] *= 0.4
        part = {key: d[key][..., index] for key in _NEEDED}
        tried = _move(layout, part, (step[:, index], ds[:, index], move[2][:, index]), alpha[index])
        still = _rejected(part, tried, alpha[index], least[:, index])
        taken = index[~still]
        for key, value in tried.items():
            new[key][..., taken] = value[..., ~still]
        index = index[still]
    new["alpha"] = alpha
    stuck = np.zeros(alpha.shape, dtype=bool)
    stuck[index] = True
    return new, stuck


def _rejected(old: Draws, new: Draws, alpha: Array, least: Array) -> NDArray[np.bool_]:
    falls = new["merit"] <= (1.0 - 1e-3 * alpha) * old["merit"]
    bad: NDArray[np.bool_] = ~(falls & (new["t"] >= least).all(axis=0))
    return bad


def _first(layout: Layout, g: Array, target: Array, weight: Array, volume: Array, start: Start) -> Draws:
    a = layout.a
    counts = np.bincount(layout.phase, minlength=len(layout.edges) + 1).astype(float)
    atoms = np.maximum(a.sum(axis=1), 1.0)[:, None]
    each: Array = (g - np.log(counts[layout.phase])[:, None]) / atoms
    lam: Array = np.stack([np.where(a[:, [e]] > 0, each, np.inf).min(axis=0) for e in range(a.shape[1])])
    lam -= 0.5
    ones = np.ones(g.shape[1])
    d: Draws = {"g": g, "target": target, "weight": weight, "volume": volume * ones, "alpha": 1.0 * ones}
    d |= {"mu": start.mu * ones, "off": np.zeros_like(target)}
    total, _ = mix(layout, a @ lam - g)
    slack: Array = np.maximum(-total, 0.01)
    size: Array = np.minimum(start.mu * weight / slack, weight)
    d |= _evaluate(layout, d, lam, size, slack)
    if start.homotopy:
        d["off"] = d["e1"].copy()
        d |= _evaluate(layout, d, lam, size, slack)
    return d | {"size0": size, "slack0": slack}


def _reduce(d: Draws, start: Start) -> None:
    """Shrink the barrier, or first the distance to the balances asked, where the iteration is centred."""
    e1 = np.abs(d["e1"]).max(axis=0)
    e3 = np.abs(d["e3"]).max(axis=0, initial=0.0)
    near = (e1 < 1.0) & (e3 < 0.3) & (d["t"] > 0.1).all(axis=0) & (d["t"] < 3.0).all(axis=0)
    if start.homotopy:
        away = np.abs(d["off"]).max(axis=0) > 0.0
        shrunk: Array = np.sign(d["off"]) * np.maximum(np.abs(d["off"]) - start.homotopy, 0.0)
        new: Array = np.where(near & away, shrunk, d["off"])
        d["e1"] = d["e1"] + d["off"] - new
        d["off"] = new
        near &= ~away
    good = near & (d["alpha"] > 0.9) & (e1 < 0.1) & (e3 < 0.01)
    factor: Array = np.where(near, np.where(good, start.fast, start.slow), 1.0)
    factor = np.where(d["mu"] > start.end, factor, 1.0)
    cut = factor < 1.0
    if not (cut.any() or start.homotopy):
        return
    for kept, now in (("size0", "size"), ("slack0", "slack")):
        d[kept] = np.where(cut, d[now], d[kept])
    d["mu"] = d["mu"] * factor
    _centre(d, d)


def interior(
    layout: Layout, g: Array, total: Array, weight: Array, volume: Array, start: Start
) -> tuple[Array, Array, NDArray[np.bool_]]:
    """Follow the central path to the stable assemblage.

    Parameters
    ----------
    layout : Layout
    g : (S, N) array
        Gibbs energies over RT.
    total : (C, N) array
        mol of each independent element, positive.
    weight : (P, N) array
        Largest possible amount of each phase, mol.
    volume : (N,) array
        P0 V / (R T) of a gas at fixed volume, mol.
    start : Start

    Returns
    -------
    lambda : (C, N) array
        Potentials of the elements over RT.
    size : (P, N) array
        mol of each phase.
    active : (P, N) bool array
        Phases whose slack went to zero faster than their amount: the stable ones (indicators of El-Bakry,
        Tapia and Zhang, SIAM Review 36 (1994) 45).

    Notes
    -----
    The dual as a geometric programme: G. Lidor, Stanford University 1975 (ADA012989).
    """
    draws = g.shape[1]
    d = _first(layout, g, np.log(total), weight, volume, start)
    live = np.arange(draws)
    lam, size = d["lam"].copy(), d["size"].copy()
    active = np.zeros(size.shape, dtype=bool)
    for left in range(start.limit - 1, -1, -1):
        d, stuck = _advance(layout, d)
        ready = _finished(d, start)
        leave = ready | stuck if left else np.ones_like(stuck)
        if leave.any():
            out = live[leave]
            lam[:, out], size[:, out] = d["lam"][:, leave], d["size"][:, leave]
            grown = np.log(d["slack"] / d["slack0"]) < np.log(d["size"] / d["size0"])
            active[:, out] = grown[:, leave]
            live = live[~leave]
            if not len(live):
                break
            d = {key: value[..., ~leave] for key, value in d.items()}
        _reduce(d, start)
    return lam, size, active


def _finished(d: Draws, start: Start) -> NDArray[np.bool_]:
    near = (d["t"] > 0.1).all(axis=0) & (d["t"] < 3.0).all(axis=0)
    met = (np.abs(d["e1"]).max(axis=0) < 1e-2) & (np.abs(d["e3"]).max(axis=0, initial=0.0) < 1e-6)
    ready: NDArray[np.bool_] = near & met & (d["mu"] <= start.end) & ~d["off"].any(axis=0)
    return ready
