"""How a contact acts on the metal, in numbers only.

A contact acts through carriers, the units that cross its surface, each with its stoichiometry nu.
The contact side is linear in activity, the metal side linear in content::

    r = g (a - a_s),   a_s = exp(sum_i nu_i ln x_s,i - ln K)
    sum over carriers of nu_i r = rho k_i (x_s,i - x_i)

with conductance g (mol m-2 s-1 per unit activity; None: no resistance on the contact side, a_s = a),
exchange k (m/s, metal side), host molar density rho (mol/m3) and contents x (mol per mol of host).
With nu = 1 this is two resistances in series; with nu = 2 it is the two-film law with Sieverts
equilibrium of Amano, Ito and Sakao (1976).

Arrays carry the draws on their last axis, of length N, or 1 where all draws are alike.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Curve:
    """A positive quantity over temperature: linear in ln y against 1/T between knots.

    Parameters
    ----------
    T : (K,) array
        Rising knots, K; placed at phase changes too.
    ln : (..., K, N) array
        Logarithm of the quantity at the knots; leading axes are free (impurities).
    """

    T: Array
    ln: Array


@dataclass(frozen=True, slots=True)
class Carrier:
    """A unit that crosses the surface.

    Parameters
    ----------
    name : str
        ``Al2O3``, ``H2O``, ``evaporation of Zn``.
    nu : (I,) array
        Atoms of each impurity in one unit.
    ln_k : Curve
        ln K of: unit at activity 1 = its atoms dissolved, contents as mole fractions (K, N).
    activity : (N,) array or Curve
        Activity on the far side of the contact.
    conductance : Curve or None
        mol m-2 s-1 per unit activity; None: infinite.
    inventory : (N,) array or None
        The most that the contact holds, mol of units; None: no end.
    limit : str
        What the contact-side resistance is called when it holds the pickup back (closed list of
        reports: gas film, surface, supply, permeation, wetting).
    """

    name: str
    nu: Array
    ln_k: Curve
    activity: Array | Curve
    conductance: Curve | None = None
    inventory: Array | None = None
    limit: str = "gas film"


@dataclass(frozen=True, slots=True)
class Skin:
    """A compound that forms in or on the metal once sum nu ln x reaches ln K, and dissolves again."""

    name: str
    nu: Array
    ln_k: Curve


@dataclass(frozen=True, slots=True)
class Film:
    """A film that grows on a stored piece.

    Parameters
    ----------
    name : str
        Formula or name of the film.
    nu : (I,) array
        mol of each impurity bound per m2 and per metre of film.
    law : str
        limiting, logarithmic, parabolic, linear-parabolic, inverse-logarithmic.
    parameters : tuple of Curve
        In the order of the law, SI.
    """

    name: str
    nu: Array
    law: str
    parameters: tuple[Curve, ...]


@dataclass(frozen=True, slots=True)
class Exposure:
    """One contact: area (m2), metal-side exchange (m/s, per impurity), carriers, skins and films."""

    contact: str
    area: Array
    exchange: Curve
    carriers: tuple[Carrier, ...]
    skins: tuple[Skin, ...] = ()
    films: tuple[Film, ...] = ()


def at(curve: Curve, T: Array | float) -> Array:
    """Evaluate a curve.

    Parameters
    ----------
    curve : Curve
        ``ln`` of shape (..., K, N).
    T : float or (N,) array
        Temperature, K; outside the knots the last segment is continued.

    Returns
    -------
    (..., N) array
        The quantity, exp of the interpolated logarithm.
    """
    return np.asarray(np.exp(ln_at(curve, T)))


def ln_at(curve: Curve, T: Array | float) -> Array:
    """Evaluate the logarithm of a curve: same arguments and shape as :func:`at`."""
    knots = curve.T
    T = np.asarray(T, dtype=float)
    if len(knots) == 1:
        shape = np.broadcast_shapes(curve.ln[..., 0, :].shape, T.shape)
        return np.broadcast_to(curve.ln[..., 0, :], shape)
    left = np.clip(np.searchsorted(knots, T, side="right") - 1, 0, len(knots) - 2)
    T0, T1 = knots[left], knots[left + 1]
    weight = (1 / T - 1 / T0) / (1 / T1 - 1 / T0)
    if T.ndim == 0:
        low, high = curve.ln[..., int(left), :], curve.ln[..., int(left) + 1, :]
    else:
        draws = np.arange(T.shape[-1]) if curve.ln.shape[-1] > 1 else np.zeros(T.shape[-1], dtype=int)
        low, high = curve.ln[..., left, draws], curve.ln[..., left + 1, draws]
    return np.asarray((1 - weight) * low + weight * high)
