"""Exchanges of phases where Newton's method has no direction of its own.

Pure phases make an equilibrium a linear programme, and it is then solved like one: by pivots of the simplex
method, from the side of the amounts or from that of the potentials (C. E. Lemke, Naval Research Logistics
Quarterly 1 (1954) 36).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from purity.driving_force.components import Basis, Layout

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]
Draws = dict[str, NDArray[np.float64]]

#: |ln| of a balance that no present phase can serve.
UNSERVED = 100.0
#: ln activity up to which a species of a present phase is let rise on the way to a new phase.
_TRACE = -30.0


def exchange(scaled: Array, answer: Array, col: Array, size: Array, f: Array) -> tuple[Array, Mask]:
    """Exchange phases whose compositions depend on each other, as a pivot of the simplex method does.

    Amounts can then move at constant balances; they go the way that lowers the Gibbs energy until the first
    phase is used up, which is left out.

    Parameters
    ----------
    scaled, answer, col
        Scaled matrix, scaled step to replace, and scales of the columns.
    size, f : (A, N) array
        mol and ln saturation of the active phases.

    Returns
    -------
    array, (A, N) bool array
        Step, and the phases to leave out.
    """
    c = scaled.shape[1] - len(size)
    if not len(size):
        return answer, np.zeros(size.shape, dtype=bool)
    _, s, turned = np.linalg.svd(scaled)
    null = turned[:, -1]
    way: Array = (null * col)[:, c:].T * (size > 0.0)
    gain: Array = (way * size * f).sum(axis=0)
    way = way * np.where(gain < 0.0, -1.0, 1.0)
    fall: Array = -way.min(axis=0)
    # The mean saturation that the exchange relieves: none where any split is as good (a neutral reaction).
    relief: Array = np.abs(gain) / np.maximum(np.abs(way * size).sum(axis=0), 1e-300)
    still = np.abs(null[:, :c]).max(axis=1) < 1e-6
    pivot = still & (s[:, -1] < 1e-10 * s[:, 0]) & (relief > 1e-8) & (fall > 0.0)
    gone: Mask = (way == way.min(axis=0)) & pivot
    along: Array = np.where(gone, 0.0, way / np.where(pivot, fall, 1.0))
    step: Array = np.concatenate([np.zeros((c, len(col))), along]).T / col
    return np.where(pivot[:, None, None], step[:, :, None], answer), gone


def serve(layout: Layout, base: Basis, d: Draws, point: Draws, active: Mask) -> bool:
    """Add the phase that takes up what no present phase can hold, in place.

    The potentials move at constant saturation of the present phases, so that the component in surplus rises,
    until the first absent phase forms; it gets the amount that the balance lacks.

    Parameters
    ----------
    layout, base
    d, point : mapping
        As for :func:`purity.driving_force.newton.evaluate`.
    active : (P, N) bool array

    Returns
    -------
    bool
        Whether anything moved.
    """
    missing: Array = np.where(np.abs(point["e"]) > UNSERVED, -np.sign(point["e"]), 0.0)
    draws = np.flatnonzero(missing.any(axis=0))
    if not len(draws) or not len(active):
        return False
    a, x, k = base.species, point["x"][:, draws], layout.closed
    rows = [a[i:j].T @ x[i:j] for i, j in layout.edges]
    fixed: Array = np.stack(rows) * active[:, None, draws]
    _, s, turned = np.linalg.svd(fixed.transpose(2, 0, 1))
    rank = s > 1e-9 * np.maximum(s[:, :1], 1e-300)
    span: Array = turned[:, : s.shape[1]] * rank[:, :, None]
    wish = missing[:, draws].T[:, :, None]
    way: Array = (wish - span.transpose(0, 2, 1) @ (span @ wish))[:, :, 0].T
    rate: Array = a[:k] @ way
    present = active[layout.phase[:k]][:, draws]
    end: Array = np.where(present, _TRACE, 0.0)
    below: Array = np.maximum(end - point["u"][:k, draws], 0.0)
    waits = (rate > 1e-9) & ~(present & (below == 0.0))
    reach: Array = np.where(waits, below / np.where(waits, rate, 1.0), np.inf)
    first, cols = reach.argmin(axis=0), np.arange(len(draws))
    good = np.isfinite(reach[first, cols]) & (np.abs(way).max(axis=0) > 1e-9)
    d["lam"][:, draws[good]] += way[:, good] * reach[first, cols][good]
    adds = good & ~present[first, cols]
    phase, column = layout.phase[first[adds]], draws[adds]
    active[phase, column] = True
    content: Array = a[first[adds]].T
    gap: Array = np.abs(point["plus"] - point["minus"])[:, column]
    lacking: Array = np.where((missing[:, column] != 0.0) & (np.abs(content) > 1e-9), gap, 0.0)
    amount = (lacking / np.maximum(np.abs(content), 1e-9)).max(axis=0)
    d["size"][phase, column] = np.maximum(amount, 1e-280)
    d["least"][phase, column] = 1e-18 * d["size"][phase, column]
    return bool(good.any())
