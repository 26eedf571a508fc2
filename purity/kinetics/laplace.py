"""Uptake of a solid piece in a hold, exact: numerical inversion of the Laplace transform.

Fick's second law in a slab, cylinder, sphere or half-space of uniform start, with the surface law
flux = h (ceiling - surface content). Contents are measured from the start, in units of ceiling minus
start; time is Fo = integral D dt / R^2 and the surface is Bi = h R / D, with R the half thickness or
radius. Transform: g / (s^2 (1/Bi + Z + g/(alpha s))) with g = 1, 2, 3 and the impedance Z of the shape
(Crank 1975; Carslaw and Jaeger 1959). Contour: modified Talbot (Trefethen, Weideman and Schmelzer 2006),
no roots, no branches: 16 nodes leave a relative error of 1e-7 for any Bi and Fo.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]
Number = Array | float

#: Ratio of surface to volume times R, by shape; a half-space counts on any length.
GEOMETRY: dict[str, int] = {"slab": 1, "half-space": 1, "cylinder": 2, "sphere": 3}

#: Draws that pass through together, so that work arrays stay in the cache.
CHUNK: int = 1024
FO_MAX: float = 1e6
BI_MIN, BI_MAX = 1e-12, 1e8
#: Below this Fo nothing has happened that a number can hold.
FO_MIN: float = 1e-100


def impedance(shape: str, s: Complex) -> Complex:
    """Surface content over flux in the transform, for a unit half thickness and diffusivity.

    Parameters
    ----------
    shape : {"slab", "cylinder", "sphere", "half-space"}
    s : complex array
        Away from the negative real axis, or on it away from the poles.

    Returns
    -------
    complex array
    """
    return _impedance(shape, s, np.sqrt(s))


def _impedance(shape: str, s: Complex, q: Complex) -> Complex:
    """Impedance with the root q of s given."""
    if shape == "half-space":
        return np.asarray(1.0 / q)
    if shape == "cylinder":
        return _cylinder(s, q)
    decay = np.exp(-2.0 * q)
    if shape == "slab":
        return np.asarray((1.0 + decay) / ((1.0 - decay) * q))
    small = np.abs(s) < 1e-2
    near = np.where(small, s, 1.0)
    series = 3.0 / (near * (1.0 - near / 15.0 + 2.0 * near**2 / 315.0 - near**3 / 1575.0))
    safe = np.where(small, 1.0, q)
    decay = np.exp(-2.0 * safe)
    return np.asarray(np.where(small, series, (1.0 - decay) / (safe * (1.0 + decay) - 1.0 + decay)))


def _cylinder(s: Complex, q: Complex) -> Complex:
    from scipy.special import ive

    far = np.abs(q) > 1e3
    safe = np.where(far, 1.0, q)
    near: Complex = ive(0, safe) / (safe * ive(1, safe))
    return np.asarray(np.where(far, (1.0 + 1.0 / (2.0 * q) + 3.0 / (8.0 * s)) / q, near))


def contour(nodes: int) -> tuple[Complex, Complex]:
    """Points z of the contour and the weights e^z dz/dtheta * 2/N, upper half."""
    theta = -np.pi + (np.arange(nodes // 2, nodes) + 0.5) * 2.0 * np.pi / nodes
    cot = 1.0 / np.tan(0.6407 * theta)
    z = nodes * (0.5017 * theta * cot - 0.6122 + 0.2645j * theta)
    slope = nodes * (0.5017 * cot - 0.5017 * 0.6407 * theta / np.sin(0.6407 * theta) ** 2 + 0.2645j)
    return z, np.exp(z) * slope * (2.0 / nodes)


def invert(transform: Callable[[Complex], Complex], Fo: Array, nodes: int = 16) -> Array:
    """Value at Fo of the function that has this transform; Fo > 0."""
    z, weight = contour(nodes)
    total: Array = np.zeros(np.shape(Fo))
    for point, factor in zip(z, weight, strict=True):
        total = total + (factor * transform(point / Fo)).imag
    return total / Fo


def _each_chunk(
    law: Callable[..., Complex],
    shape: str,
    Fo: Number,
    Bi: Number,
    alpha: Number | None,
    nodes: int,
    power: int = 0,
) -> Array:
    """Invert over all draws. Beyond FO_MAX only Bi Fo counts (the piece is even), and a result in units
    of Fo^power follows; below BI_MIN it is in proportion to Bi.
    """
    parts: list[Number] = [Fo, Bi] if alpha is None else [Fo, Bi, alpha]
    arrays = np.broadcast_arrays(*(np.atleast_1d(np.asarray(v, dtype=float)) for v in parts))
    flat = [a.ravel() for a in arrays]
    result: Array = np.zeros(flat[0].shape)
    for start in range(0, result.size, CHUNK):
        piece = [a[start : start + CHUNK] for a in flat]
        longer = np.maximum(piece[0] / FO_MAX, 1.0)
        wanted = np.minimum(piece[1], BI_MAX) * longer
        fo, bi = np.clip(piece[0], FO_MIN, FO_MAX), np.clip(wanted, BI_MIN, BI_MAX)
        rest = piece[2] if alpha is not None else None
        value = _sum(law, shape, fo, bi, rest, nodes) * np.minimum(wanted / BI_MIN, 1.0) * longer**power
        result[start : start + CHUNK] = np.where(piece[0] < FO_MIN, 0.0, value)
    return result.reshape(arrays[0].shape)


def _sum(
    law: Callable[..., Complex], shape: str, Fo: Array, Bi: Array, alpha: Array | None, nodes: int
) -> Array:
    """Sum over the contour; roots are taken of its points, not of every draw."""
    per_Fo, resistance = 1.0 / Fo, 1.0 / Bi
    root, total = np.sqrt(per_Fo), np.zeros(Fo.shape)
    for z, factor in zip(*contour(nodes), strict=True):
        s = z * per_Fo
        below = _impedance(shape, s, np.sqrt(z) * root)
        below += resistance
        if alpha is not None:
            below += GEOMETRY[shape] / (alpha * s)
        total += (factor * law(s, Bi, below)).imag
    return np.asarray(total * per_Fo)


def uptake(shape: str, Fo: Number, Bi: Number, *, alpha: Number | None = None, nodes: int = 16) -> Array:
    """Mean content of a piece after a hold, over ceiling minus start.

    Parameters
    ----------
    shape : {"slab", "cylinder", "sphere", "half-space"}
        For a half-space the content over one length R below the surface.
    Fo : array
        Integral of D dt over R^2.
    Bi : array
        h R / D; np.inf: the surface is at the ceiling.
    alpha : array or None
        What a closed reservoir can hold at the ceiling's activity over what the piece can hold (volume
        ratio times partition); None: a reservoir without end. The ceiling falls as it empties.
    nodes : int
        Of the contour: 16, or 20 where ten digits are wanted; not above 24.

    Returns
    -------
    array
        At least of shape (1,).
    """
    g = GEOMETRY[shape]
    return _each_chunk(lambda s, bi, below: g / (s * s * below), shape, Fo, Bi, alpha, nodes)


def surface_content(
    shape: str, Fo: Number, Bi: Number, *, alpha: Number | None = None, nodes: int = 16
) -> Array:
    """Content just below the surface, over ceiling minus start; arguments of :func:`uptake`."""
    return _each_chunk(lambda s, bi, below: impedance(shape, s) / (s * below), shape, Fo, Bi, alpha, nodes)


def flux(shape: str, Fo: Number, Bi: Number, *, alpha: Number | None = None, nodes: int = 16) -> Array:
    """Rate of the mean content, d uptake / d Fo; arguments of :func:`uptake`."""
    g = GEOMETRY[shape]
    return _each_chunk(lambda s, bi, below: g / (s * below), shape, Fo, Bi, alpha, nodes, -1)


def surface_integral(shape: str, Fo: Number, Bi: Number, *, nodes: int = 16) -> Array:
    """Integral of :func:`surface_content` over Fo; arguments of :func:`uptake`."""
    return _each_chunk(
        lambda s, bi, below: impedance(shape, s) / (s * s * below), shape, Fo, Bi, None, nodes, 1
    )


def amplitudes(shape: str, Fo: Number, Bi: Number, rate: Array, surface: Array, *, nodes: int = 16) -> Array:
    """Modal amplitudes after a hold, over ceiling minus start; modes of :mod:`purity.kinetics.modes`.

    Parameters
    ----------
    shape, Fo, Bi : as in :func:`uptake`
    rate, surface : (M,) arrays
        Decay of each mode per unit Fo, and its value at the surface.

    Returns
    -------
    (M, ...) array
    """
    parts = []
    for decay, value in zip(rate, surface, strict=True):

        def law(s: Complex, bi: Array, below: Complex, decay: float = decay) -> Complex:
            return np.asarray(1.0 / (s * below * (s + decay)))

        parts.append(value * _each_chunk(law, shape, Fo, Bi, None, nodes))
    return np.stack(parts)


def elasticities(shape: str, Fo: Number, Bi: Number, *, nodes: int = 16) -> tuple[Array, Array, Array]:
    """How the uptake of a hold follows its rates: d ln uptake / d ln rate.

    Returns
    -------
    E_h, E_D, E_t : arrays
        To the surface coefficient, the diffusivity and the time; E_h + E_D = E_t. E_t is 1 early,
        1/2 in a half-space at its ceiling, 0 at the ceiling.
    """
    g = GEOMETRY[shape]
    content = uptake(shape, Fo, Bi, nodes=nodes)
    to_surface = _each_chunk(
        lambda s, bi, below: g / (s * s) / bi / (below * below), shape, Fo, Bi, None, nodes
    )
    E_h = to_surface / content
    E_t = np.clip(Fo, FO_MIN, None) * flux(shape, Fo, Bi, nodes=nodes) / content
    return E_h, E_t - E_h, E_t


def time_to(shape: str, fraction: Number, Bi: Number, *, nodes: int = 20, passes: int = 40) -> Array:
    """Fo at which the uptake of a hold reaches a fraction of ceiling minus start.

    Newton on ln(-ln(1 - uptake)) over ln Fo, which is nearly straight.

    Returns
    -------
    array
        0 where the fraction is not positive, inf where it is 1 or more.
    """
    g = GEOMETRY[shape]
    fraction, Bi = np.broadcast_arrays(*(np.atleast_1d(np.asarray(v, dtype=float)) for v in (fraction, Bi)))
    bi = np.clip(Bi, BI_MIN, BI_MAX)
    open_end = shape == "half-space"
    inside = (fraction > 0) & (open_end | (fraction < 1))
    m = np.where(inside, fraction, 0.5)
    goal = np.log(m) if open_end else np.log(-np.log1p(-m))
    ln_fo = np.log(np.maximum(m / (g * bi), (m / g) ** 2 * np.pi / 8.0))
    for _ in range(passes):
        fo = np.exp(ln_fo)
        content = np.clip(uptake(shape, fo, bi, nodes=nodes), 1e-300, None)
        rate = fo * flux(shape, fo, bi, nodes=nodes)
        if open_end:
            value, slope = np.log(content), rate / content
        else:
            content = np.minimum(content, 1.0 - 1e-16)
            depth = -np.log1p(-content)
            value, slope = np.log(depth), rate / ((1.0 - content) * depth)
        step = (goal - value) / np.clip(slope, 0.3, 1.5)
        ln_fo = ln_fo + np.clip(step, -5.0, 5.0)
        if np.max(np.abs(step)) < 1e-11:
            break
    return np.where(inside, np.exp(ln_fo), np.where(fraction <= 0, 0.0, np.inf))


def half_space(z: Number) -> Array:
    """Uptake of a half-space with surface resistance: (h/D) M / (ceiling - start), z = h sqrt(t/D).

    erfcx(z) - 1 + 2 z / sqrt(pi) (Crank 1975, eq. 3.37), by its power series where that cancels.
    """
    from scipy.special import erfcx, gamma

    z = np.atleast_1d(np.asarray(z, dtype=float))
    small = z < 0.5
    low, high = np.where(small, z, 0.0), np.where(small, 1.0, z)
    powers = np.arange(2, 26)
    series: Array = np.zeros(z.shape)
    for n in powers[::-1]:
        series = series * -low + 1.0 / gamma(n / 2.0 + 1.0)
    return np.asarray(np.where(small, series * low**2, erfcx(high) - 1.0 + 2.0 * high / np.sqrt(np.pi)))


def half_space_surface(z: Number) -> Array:
    """Surface content of the same half-space over ceiling minus start: 1 - erfcx(z)."""
    from scipy.special import erfcx

    return np.asarray(1.0 - erfcx(np.asarray(z, dtype=float)))


def half_space_content(depth: Number, z: Number = np.inf) -> Array:
    """Content at a depth of that half-space over ceiling minus start (Crank 1975, eq. 3.35).

    Parameters
    ----------
    depth : array
        x / (2 sqrt(D t)).
    z : array
        h sqrt(t/D); inf: the surface is at the ceiling.
    """
    from scipy.special import erfc, erfcx

    depth = np.asarray(depth, dtype=float)
    return np.asarray(erfc(depth) - np.exp(-(depth**2)) * erfcx(depth + np.asarray(z)))
