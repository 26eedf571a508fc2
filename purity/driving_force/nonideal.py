"""Equilibrium of a metal whose activity coefficients depend on its composition."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from purity.driving_force.equilibrium import Equilibrium, broadcast, equilibrium
from purity.driving_force.problem import System
from purity.driving_force.sensitivity import sensitivity

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

_NUDGE = 1e-6
_REACH = 2.0
_SPELL = 10


@dataclass(frozen=True, slots=True)
class Nonideal:
    """Answer of an outer iteration, with its own statement of convergence.

    Parameters
    ----------
    equilibrium : Equilibrium
        At the coefficients found. Its certificate proves the assemblage for these coefficients; it does not
        exclude a second metal of another composition. ln_activity of a metal species is ln x.
    ln_gamma : (M, N) array
        Coefficients used, species of the metal in their order.
    change : (N,) array
        Largest difference between the coefficients used and those of the composition found; NaN if refused.
    error : (N,) array
        Estimated error of ln x that this leaves (one Newton step); NaN if refused.
    rounds : (N,) integer array
    converged : (N,) bool array
        `change` is within the tolerance.
    stable : (N,) bool array
        The metal found resists small fluctuations of composition: it lies outside the spinodal.
    """

    equilibrium: Equilibrium
    ln_gamma: Array
    change: Array
    error: Array
    rounds: NDArray[np.intp]
    converged: Mask
    stable: Mask


def with_activity(
    system: System,
    g: Array,
    amounts: Array,
    ln_gamma: Callable[[Array], Array],
    *,
    held: Mapping[str, Array] | None = None,
    gas_volume: Array | None = None,
    inputs: NDArray[np.int64] | None = None,
    tolerance: float = 1e-10,
    limit: int = 60,
) -> Nonideal:
    """Solve an equilibrium whose metal has composition-dependent activity coefficients.

    Parameters
    ----------
    system, g, amounts, held, gas_volume, inputs
        As for :func:`purity.driving_force.equilibrium.equilibrium`; g of the metal without the coefficients.
    ln_gamma : callable
        From the mole fractions of the metal, (M, N), its species in their order, to ln gamma, (M, N). It is
        always called with every draw. What it raises beyond its range passes through.
    tolerance : float
        On ln gamma.
    limit : int
        Rounds.

    Returns
    -------
    Nonideal

    Notes
    -----
    Each round solves the convex problem with fixed coefficients and corrects them by Newton's method on the
    answer's derivatives, halved while the difference grows; ten rounds of plain substitution follow ten of
    these. Convexity is lost as a whole:
    convergence proves a stationary state, `stable` a local minimum.
    """
    g, amounts, levels, room = broadcast(g, amounts, held, gas_volume)
    metal = np.flatnonzero(system.phase == system.host)

    def respond(used: Array, warm: Equilibrium | None) -> tuple[Equilibrium, Array]:
        shifted = g.copy()
        shifted[metal] += used
        found = equilibrium(system, shifted, amounts, held=levels, gas_volume=room, inputs=inputs, warm=warm)
        slope = sensitivity(system, found, shifted, amounts, held=levels, gas_volume=room, inputs=inputs)
        return found, slope.by_g[np.ix_(metal, metal)]

    draws = g.shape[1]
    used: Array = np.zeros((len(metal), draws))
    damping, before = np.ones(draws), np.full(draws, np.inf)
    rounds = np.zeros(draws, dtype=np.intp)
    answer, gain = respond(used, None)
    for turn in range(limit + 1):
        x = _composition(answer, metal)
        off: Array = np.asarray(ln_gamma(x), dtype=float) - used
        slopes = _slopes(ln_gamma, x)
        # ln x = u - F, and F answers too where the metal is absent.
        gain = np.nan_to_num(gain - (x[:, None] * gain).sum(axis=0))
        step = _correction(slopes, gain, off)
        change: Array = np.where(answer.start >= 0, np.abs(off).max(axis=0), np.nan)
        going = (change > tolerance) & np.isfinite(change)
        if turn == limit or not going.any():
            break
        damping = np.where(change > before, np.maximum(0.5 * damping, 0.06), np.minimum(2.0 * damping, 1.0))
        before, rounds = change, rounds + going
        # Newton's method cannot pass a fold, where the assemblage changes for good; plain substitution can.
        move = off if turn // _SPELL % 2 else damping * np.clip(step, -_REACH, _REACH)
        used = used + np.where(going, move, 0.0)
        answer, gain = respond(used, answer)
    moved: Array = np.abs(np.einsum("ijn,jn->in", gain, step)).max(axis=0)
    error: Array = np.where(np.isfinite(change), moved, np.nan)
    converged: Mask = change <= tolerance
    return Nonideal(answer, used, change, error, rounds, converged, converged & _stable(slopes, x))


def _composition(answer: Equilibrium, metal: NDArray[np.intp]) -> Array:
    """Mole fractions of the metal; where it is absent, of the metal that would form first."""
    u: Array = answer.ln_activity[metal]
    refused = answer.start < 0
    u = np.where(refused, 0.0, u)
    share: Array = np.exp(u - u.max(axis=0))
    share /= share.sum(axis=0)
    return share


def _slopes(ln_gamma: Callable[[Array], Array], x: Array) -> Array:
    """Differentiate ln gamma_i by ln x_j, by central differences: (M, M, N)."""
    columns = []
    for j in range(len(x)):
        up, down = x.copy(), x.copy()
        up[j] *= np.exp(_NUDGE)
        down[j] *= np.exp(-_NUDGE)
        columns.append((np.asarray(ln_gamma(up)) - np.asarray(ln_gamma(down))) / (2.0 * _NUDGE))
    return np.stack(columns, axis=1)


def _correction(slopes: Array, respond: Array, off: Array) -> Array:
    """Newton step of the coefficients; the plain difference where the matrix is singular."""
    loop: Array = np.einsum("ijn,jkn->nik", slopes, respond)
    matrix: Array = np.eye(len(off)) - loop
    right: Array = off.T[:, :, None]
    near = np.abs(np.linalg.det(matrix)) < 1e-8
    matrix[near] = np.eye(len(off))
    return np.asarray(np.linalg.solve(matrix, right)[:, :, 0].T, dtype=np.float64)


def _stable(slopes: Array, x: Array) -> Mask:
    """Whether the Gibbs energy of the metal is convex in its solutes, from the Hessian scaled to x."""
    if len(x) == 1:
        return np.ones(x.shape[1], dtype=bool)
    root: Array = np.maximum(np.sqrt(x[1:]), 1e-150)
    gain: Array = slopes[1:, 1:] - slopes[:1, 1:]
    gain = gain / root[None] - (slopes[1:, :1] - slopes[:1, :1]) * root[None] / x[0]
    hessian: Array = gain * root[:, None] + root[:, None] * root[None] / x[0]
    hessian += np.eye(len(root))[:, :, None]
    symmetric: Array = 0.5 * (hessian + hessian.transpose(1, 0, 2)).transpose(2, 0, 1)
    stable: Mask = np.linalg.eigvalsh(symmetric).min(axis=1) > 0.0
    return stable
