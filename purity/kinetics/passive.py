"""Impurities that meet linear carriers only: each step is an affine map of the content.

With K = sum a phi gk and H = sum a phi h, dx/dt = H - K x. At constant temperature the step is exact::

    x1 = x0 e^-z + H dt phi1(z),   z = K dt,   phi1 = (1 - e^-z)/z

On a ramp it is SDIRK2 (gamma = 1 - 1/sqrt 2), which stays positive for every content while
gamma K dt <= 1/sqrt 2, and beyond that the exponential step in theta = int K dt (four Gauss points)
with H/K linear in theta, which is always positive.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from purity.kinetics.exposure import Array
from purity.kinetics.stage import Coefficients

GAMMA = 1 - 0.5**0.5
#: Largest gamma K dt at which the second stage of SDIRK2 is positive for every content.
POSITIVE = 0.5**0.5
#: Nodes on (0, 1) and weights of the four-point Gauss-Legendre rule.
GAUSS = tuple((1 + np.polynomial.legendre.leggauss(4)[0]) / 2)
GAUSS_WEIGHTS = tuple(np.polynomial.legendre.leggauss(4)[1] / 2)


def phi1(z: Array) -> Array:
    """(1 - e^-z)/z."""
    small = np.maximum(z, 1e-8)
    return np.asarray(np.where(z < 1e-8, 1 - z / 2, -np.expm1(-small) / small))


def phi2(z: Array) -> Array:
    """(1 - phi1(z))/z, by its series where that would cancel."""
    large = np.maximum(z, 1e-2)
    series = 1 / 2 - z / 6 * (1 - z / 4 * (1 - z / 5 * (1 - z / 6 * (1 - z / 7))))
    return np.asarray(np.where(z < 1e-2, series, (1 - phi1(large)) / large))


def hold(c: Coefficients, x: Array, dt: Array) -> tuple[Array, Array, Array]:
    """Take one step at constant temperature.

    Parameters
    ----------
    c : Coefficients
    x : (I, N) array
        Contents.
    dt : (N,) array
        s.

    Returns
    -------
    keep, gain : (I, N) arrays
        x after the step is keep x + gain.
    gained : (S, I, N) array
        Through each contact, mol per mol of host.
    """
    K, H = c.loss.sum(axis=0), c.supply.sum(axis=0)
    z = K * dt
    first = phi1(z)
    integral = x * dt * first + H * dt**2 * phi2(z)
    return np.exp(-z), H * dt * first, c.supply * dt - c.loss * integral


def ramp(
    first: Coefficients,
    last: Coefficients,
    x: Array,
    dt: Array,
    between: Callable[[], tuple[Coefficients, list[Coefficients]]],
) -> tuple[Array, Array, Array]:
    """Take one step on a ramp.

    Parameters
    ----------
    first, last : Coefficients
        At the two stages of SDIRK2.
    x : (I, N) array
    dt : (N,) array
    between : callable
        Gives the coefficients at the start of the step and at the Gauss points, where needed.

    Returns
    -------
    keep, gain, gained
        As in :func:`hold`.
    """
    b = GAMMA * dt
    K1, H1 = first.loss.sum(axis=0), first.supply.sum(axis=0)
    one = 1 / (1 + b * K1)
    two = 1 / (1 + b * last.loss.sum(axis=0))
    c = (1 - GAMMA) / GAMMA
    keep = two * (1 + c * (one - 1))
    gain = two * (c * one * b * H1 + b * last.supply.sum(axis=0))
    x1 = one * (x + b * H1)
    rates = (1 - GAMMA) * (first.supply - first.loss * x1)
    gained = dt * (rates + GAMMA * (last.supply - last.loss * (keep * x + gain)))
    steep = b * np.maximum(K1, last.loss.sum(axis=0)) > POSITIVE
    if steep.any():
        wide = _exponential(last, x, dt, *between())
        keep, gain, gained = (
            np.where(steep, new, old) for new, old in zip(wide, (keep, gain, gained), strict=True)
        )
    return keep, gain, gained


def _exponential(
    last: Coefficients, x: Array, dt: Array, begin: Coefficients, points: list[Coefficients]
) -> tuple[Array, Array, Array]:
    """Step in theta; the supply over loss and the part of each contact are linear and constant in theta."""
    tiny = np.finfo(float).tiny
    part = dt * sum(
        (w * c.loss for w, c in zip(GAUSS_WEIGHTS, points, strict=True)), np.zeros(last.loss.shape)
    )
    theta = np.maximum(part.sum(axis=0), tiny)
    at0 = begin.supply / np.maximum(begin.loss.sum(axis=0), tiny)
    at1 = last.supply / np.maximum(last.loss.sum(axis=0), tiny)
    decay = np.exp(-theta)
    mean = phi1(theta)
    gain = at0.sum(axis=0) * (mean - decay) + at1.sum(axis=0) * (1 - mean)
    pushed = theta * (at0 + at1) / 2
    # the integral of x over theta follows from the balance, so that the contacts sum to the change
    integral = pushed.sum(axis=0) - (decay * x + gain - x)
    return decay, gain, pushed - part / theta * integral
