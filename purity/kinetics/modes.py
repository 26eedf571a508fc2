"""Diffusion in a piece as independent modes that no draw changes.

In depth over half thickness and Fo, the diffusion operator of a slab, cylinder or sphere is the same for
every draw: it is diagonalised once, on spectral elements graded towards the surface. Each draw then carries
modal amplitudes y::

    dy_m/dFo = -lambda_m y_m + phi_m J,   surface content = sum phi_m y_m,   mean = sqrt(g) y_0

with g = 1, 2, 3 and the flux J through the surface. lambda_0 = 0 and phi_0^2 = g are exact, hence so is the
balance of mass. In time: SDIRK of two stages, gamma = 1 - 1/sqrt(2) (Alexander 1977), L-stable; a stage
relates the surface content to the flux by one number, so any law of the surface is one scalar equation.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from purity.kinetics.laplace import GEOMETRY

Array = NDArray[np.float64]

GAMMA: float = 1.0 - 1.0 / np.sqrt(2.0)
#: Weight of the first stage in the right side of the second.
CARRY: float = (1.0 - GAMMA) / GAMMA
ORDER = 4
#: Elements and thickness of the surface element over the half thickness, by number of modes, and the
#: smallest Fo of a stage that the basis resolves to 3e-4.
GRADING: dict[int, tuple[int, float, float]] = {25: (6, 1e-3, 1e-6), 33: (8, 1e-4, 1e-8), 41: (10, 1e-5, 0.0)}


@dataclass(frozen=True, slots=True)
class Basis:
    """Modes of one shape.

    Parameters
    ----------
    shape : str
    g : int
        Surface over volume times half thickness.
    rate : (M,) array, or (M, N) where draws differ in shape
        lambda, rising from 0.
    surface : (M,) or (M, N) array
        phi, value of the modes at the surface.
    vectors : (Q, M) array
        Values of the modes at the nodes.
    depth : (Q,) array
        Nodes, depth below the surface over half thickness, rising.
    edges : (E + 1,) array
        Ends of the elements, rising depth.
    """

    shape: str
    g: int
    rate: Array
    surface: Array
    vectors: Array
    depth: Array
    edges: Array


@lru_cache(maxsize=16)
def basis(shape: str, modes: int = 25) -> Basis:
    """Modes of a slab, cylinder or sphere.

    Parameters
    ----------
    shape : {"slab", "cylinder", "sphere"}
    modes : {25, 33, 41}
        How finely the surface is resolved.
    """
    from scipy.linalg import eigh

    g = GEOMETRY[shape]
    elements, finest, _ = GRADING[modes]
    inner = np.geomspace(finest, finest ** (1.0 / elements), elements - 1)
    edges = np.concatenate([[0.0], inner, [1.0]])
    stiffness, mass, depth = np.zeros((modes, modes)), np.zeros((modes, modes)), np.zeros(modes)
    local, points, weights = _lobatto(), *np.polynomial.legendre.leggauss(ORDER + 2)
    values, slopes = _lagrange(local, points)
    for e in range(elements):
        width = edges[e + 1] - edges[e]
        at = edges[e] + width * (1.0 + points) / 2.0
        share = weights * width / 2.0 * (1.0 - at) ** (g - 1)
        here = slice(e * ORDER, (e + 1) * ORDER + 1)
        depth[here] = edges[e] + width * (1.0 + local) / 2.0
        mass[here, here] += values.T @ (share[:, None] * values)
        stiffness[here, here] += slopes.T @ (share[:, None] * slopes) * (2.0 / width) ** 2
    rate, vectors = eigh(stiffness, mass)
    rate[0], vectors[:, 0] = 0.0, np.sqrt(g)
    vectors *= np.sign(vectors[0])
    return Basis(shape, g, rate, vectors[0].copy(), vectors, depth, edges)


def _lobatto() -> Array:
    inner = np.sqrt(3.0 / 7.0)
    return np.array([-1.0, -inner, 0.0, inner, 1.0])


def _lagrange(nodes: Array, points: Array) -> tuple[Array, Array]:
    """Values and slopes at points of the polynomials that are 1 at one node and 0 at the others."""
    powers = np.vander(nodes, increasing=True)
    coefficients = np.linalg.inv(powers)
    values = np.vander(points, len(nodes), increasing=True) @ coefficients
    factors = np.arange(1, len(nodes))
    slopes = np.vander(points, len(nodes) - 1, increasing=True) @ (factors[:, None] * coefficients[1:])
    return values, slopes


def evaluate(modes: Basis, depth: Array) -> Array:
    """Values of the modes at depths (over half thickness), (len(depth), M)."""
    depth = np.atleast_1d(np.asarray(depth, dtype=float))
    element = np.clip(np.searchsorted(modes.edges, depth, side="right") - 1, 0, len(modes.edges) - 2)
    low, high = modes.edges[element], modes.edges[element + 1]
    values, _ = _lagrange(_lobatto(), 2.0 * (depth - low) / (high - low) - 1.0)
    nodes = element[:, None] * ORDER + np.arange(ORDER + 1)
    return np.asarray(np.einsum("qp,qpm->qm", values, modes.vectors[nodes]))


def uniform(modes: Basis, content: Array) -> Array:
    """Amplitudes of a uniform content (...,): (M, ...)."""
    content = np.asarray(content, dtype=float)
    y: Array = np.zeros((len(modes.rate), *content.shape))
    y[0] = content / np.sqrt(modes.g)
    return y


def mean(modes: Basis, y: Array) -> Array:
    """Mean content of amplitudes (M, ...)."""
    return np.asarray(np.sqrt(modes.g) * y[0])


def profile(modes: Basis, y: Array, depth: Array) -> Array:
    """Contents at depths over half thickness (0 surface, 1 centre): (len(depth), ...)."""
    return np.asarray(np.tensordot(evaluate(modes, depth), y, axes=1))


def project(modes: Basis, contents: Array, depth: Array) -> Array:
    """Amplitudes of a profile given at rising depths (Q, ...), linear in between: (M, ...)."""
    inner = depth[(depth > 0.0) & (depth < 1.0)]
    at, weight = _quadrature(np.union1d(modes.edges, inner), modes.g)
    flat = contents.reshape(len(depth), -1)
    values = np.stack([np.interp(at, depth, column) for column in flat.T], axis=1)
    y = evaluate(modes, at).T @ (weight[:, None] * values)
    return np.asarray(y.reshape(len(modes.rate), *contents.shape[1:]))


def _quadrature(edges: Array, g: int, points: int = ORDER + 4) -> tuple[Array, Array]:
    """Nodes and weights, exact for products of two modes on elements between the edges."""
    x, w = np.polynomial.legendre.leggauss(points)
    low, width = edges[:-1, None], np.diff(edges)[:, None]
    at = (low + width * (1.0 + x) / 2.0).ravel()
    return at, (width * w / 2.0).ravel() * (1.0 - at) ** (g - 1)


@lru_cache(maxsize=256)
def carry_over(shape: str, modes: int, source: str, source_modes: int, share: float = 1.0) -> Array:
    """Matrix that takes amplitudes of one basis to another, mean content kept.

    Parameters
    ----------
    shape, modes : str, int
        Basis of the piece.
    source, source_modes : str, int
        Basis of the amplitudes given.
    share : float
        Thickness that the given amplitudes describe, over the half thickness of the piece; what lies below
        it is at zero. Amplitudes are then deviations from a uniform content.

    Returns
    -------
    (M, M') array
    """
    to, of = basis(shape, modes), basis(source, source_modes)
    edges = np.union1d(to.edges[to.edges < share], share * of.edges)
    at, weight = _quadrature(edges, to.g)
    matrix = evaluate(to, at).T @ (weight[:, None] * evaluate(of, at / share))
    matrix[0] = 0.0
    matrix[0, 0] = share * np.sqrt(of.g) / np.sqrt(to.g) * (to.g if share < 1.0 else 1.0)
    return np.asarray(matrix)


@dataclass(frozen=True, slots=True)
class Response:
    """One implicit stage: surface content = still + reach * flux step.

    Parameters
    ----------
    damping : (M, N) array
        1 / (1 + weight d lambda).
    reach : (N,) array
        sum of phi^2 damping.
    """

    damping: Array
    reach: Array


def respond(modes: Basis, d: Array, weight: float = GAMMA) -> Response:
    """Response of a stage of weight times d in Fo."""
    damping = np.asarray(_column(weight * modes.rate) * d)
    damping += 1.0
    np.reciprocal(damping, out=damping)
    return Response(damping, _sum(modes.surface**2, damping))


def still(modes: Basis, response: Response, right: Array) -> tuple[Array, Array]:
    """Amplitudes and surface content of a stage without flux."""
    y = response.damping * right
    return y, _sum(modes.surface, y)


def push(modes: Basis, response: Response, y: Array, flux_step: Array) -> Array:
    """Add the flux of a stage (gamma d J) to its amplitudes, in place."""
    y += response.damping * (_column(modes.surface) * flux_step)
    return y


def _column(values: Array) -> Array:
    return values[:, None] if values.ndim == 1 else values


def _sum(values: Array, y: Array) -> Array:
    return np.asarray(values @ y if values.ndim == 1 else np.einsum("mn,mn->n", values, y))
