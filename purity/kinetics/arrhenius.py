"""Rates over temperature: the Arrhenius law, its exact integrals over ramps, and its spread."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from purity.constants import R
from purity.kinetics.exposure import Curve, at

Array = NDArray[np.float64]

#: Below this step of temperature (K) a ramp is a hold at its middle.
FLAT: float = 1e-3


def rate(D0: Array | float, Q: Array | float, T: Array | float) -> Array:
    """Arrhenius law.

    Parameters
    ----------
    D0 : array
        Prefactor, in the unit of the rate.
    Q : array
        Activation energy, J/mol.
    T : array
        K.

    Returns
    -------
    array
        D0 exp(-Q / R T).
    """
    return np.asarray(D0 * np.exp(-np.asarray(Q) / (R * np.asarray(T))))


def ramp_integral(
    D0: Array | float,
    Q: Array | float,
    T1: Array | float,
    T2: Array | float,
    duration: Array | float,
) -> Array:
    """Time integral of an Arrhenius rate over a linear ramp, exact.

    dt/dT times the primitive T E2(Q/RT) of exp(-Q/RT) (Abramowitz and Stegun 5.1.4, 5.1.26).

    Parameters
    ----------
    D0, Q : array
        Prefactor and activation energy (J/mol, not negative).
    T1, T2 : array
        Temperatures at the ends, K.
    duration : array
        s.

    Returns
    -------
    array
        Unit of D0 times s.
    """
    from scipy.special import expn

    D0, Q, T1, T2, duration = np.broadcast_arrays(
        *(np.asarray(v, dtype=float) for v in (D0, Q, T1, T2, duration))
    )
    step = T2 - T1
    flat = np.abs(step) < FLAT
    middle = np.exp(-Q / (R * 0.5 * (T1 + T2)))
    primitive = T2 * expn(2, Q / (R * T2)) - T1 * expn(2, Q / (R * T1))
    mean = np.where(flat, middle, primitive / np.where(flat, 1.0, step))
    return np.asarray(D0 * duration * mean)


def curve_integral(
    curve: Curve, T1: Array | float, T2: Array | float, duration: Array | float, points: int = 4
) -> Array:
    """Time integral of a curve over a linear ramp or a hold, by Gauss and Legendre.

    Parameters
    ----------
    curve : Curve
        ``ln`` of shape (..., K, N).
    T1, T2 : float or (N,) array
        Temperatures at the ends, K.
    duration : float or (N,) array
        s.
    points : int
        Nodes of the rule; 4 leave 4e-7 at 300 kJ/mol over an eighth of 300 to 1200 K.

    Returns
    -------
    (..., N) array
    """
    nodes, weights = np.polynomial.legendre.leggauss(points)
    T1, T2 = np.asarray(T1, dtype=float), np.asarray(T2, dtype=float)
    total: Array = np.zeros(1)
    for node, weight in zip(nodes, weights, strict=True):
        total = total + 0.5 * weight * at(curve, T1 + 0.5 * (1.0 + node) * (T2 - T1))
    return np.asarray(total * duration)


def reference_temperature(T_min: float, T_max: float) -> float:
    """Temperature (K) at which a fitted rate and its activation energy are nearly independent.

    The harmonic middle of the range in which the line was measured.
    """
    return 2.0 / (1.0 / T_min + 1.0 / T_max)


def ln_rate(
    ln_ref: Array | float,
    Q: Array | float,
    T: Array | float,
    *,
    T_ref: float,
    spread: Array | float = 0.0,
    spread_Q: Array | float = 0.0,
    z: Array | None = None,
) -> Array:
    """Logarithm of a rate, with its prefactor and activation energy varied together.

    The value at `T_ref` and Q are independent, hence the prefactor follows Q.

    Parameters
    ----------
    ln_ref : array
        ln of the rate at `T_ref`.
    Q, spread_Q : array
        Activation energy and its standard deviation, J/mol.
    T : array
        K.
    T_ref : float
        K, see :func:`reference_temperature`.
    spread : array
        Standard deviation of ln rate at `T_ref`.
    z : (2, N) array or None
        Standard normal numbers for the rate at `T_ref` and for Q; None: the best value.

    Returns
    -------
    array
    """
    shift = (1.0 / np.asarray(T, dtype=float) - 1.0 / T_ref) / R
    if z is None:
        return np.asarray(ln_ref - np.asarray(Q) * shift)
    return np.asarray(ln_ref + np.asarray(spread) * z[0] - (Q + np.asarray(spread_Q) * z[1]) * shift)


def ln_rate_spread(
    T: Array | float, *, T_ref: float, spread: Array | float, spread_Q: Array | float
) -> Array:
    """Standard deviation of :func:`ln_rate` at T."""
    shift = (1.0 / np.asarray(T, dtype=float) - 1.0 / T_ref) / R
    return np.hypot(spread, np.asarray(spread_Q) * shift)


def hart(
    D_lattice: Array | float, D_boundary: Array | float, width: Array | float, grain: Array | float
) -> Array:
    """Diffusivity of a polycrystal: D + D_boundary width/grain (Hart 1957).

    Only below about 0.7 of the melting point, while the diffusion length exceeds the grain, and not for
    fast interstitials. For equiaxed grains Hart's boundary share is nearer 3 width/grain.

    Parameters
    ----------
    D_lattice, D_boundary : array
        m2/s.
    width, grain : array
        m.
    """
    return np.asarray(D_lattice + np.asarray(D_boundary) * width / np.asarray(grain))
