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

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

#: Smallest content whose logarithm is taken: less than an atom in a lot of any size.
FLOOR = 1e-30


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


def activity_at(carrier: Carrier, T: Array | float) -> Array:
    """Activity of a carrier on the far side of its contact, shape (N,) or (1,)."""
    activity = carrier.activity
    return (
        at(activity, T) if isinstance(activity, Curve) else np.atleast_1d(np.asarray(activity, dtype=float))
    )


def split(carrier: Carrier, x: Array, T: Array | float) -> tuple[Array, Array]:
    """See a carrier as a linear contact of each impurity, the other contents held.

    Parameters
    ----------
    carrier : Carrier
    x : (I, N) array
        Contents at the surface, mol per mol of host.
    T : float or (N,) array
        Temperature, K.

    Returns
    -------
    ceiling : (I, N) array
        Content in equilibrium with the carrier, (K a / prod_j x_j^nu_j)^(1/nu_i); 0 where nu_i is 0.
    exchange : (I, N) array
        mol m-2 s-1 per unit content: the secant of the contact-side law between x and the ceiling,
        nu_i g (a - a_s) / (x* - x). Infinite where the contact side has no resistance, 0 where nu_i is 0.
    """
    shape = np.broadcast_shapes(x.shape, (len(carrier.nu), np.shape(T)[-1] if np.ndim(T) else 1))
    nu = carrier.nu[:, None]
    ln_x = np.log(np.maximum(x, FLOOR))
    others = np.sum(nu * ln_x, axis=0) - nu * ln_x - ln_at(carrier.ln_k, T)
    activity = activity_at(carrier, T)
    power = np.where(nu > 0, nu, 1.0)
    with np.errstate(divide="ignore"):
        ceiling = np.exp((np.log(activity) - others) / power)
    if carrier.conductance is None:
        slope = np.full(shape, np.inf)
    else:
        slope = nu * at(carrier.conductance, T) * np.exp(others) * _secant(ceiling, x, power)
    acts = np.broadcast_to(nu > 0, shape)
    return np.where(acts, ceiling, 0.0), np.where(acts, slope, 0.0)


def _secant(upper: Array, lower: Array, power: Array) -> Array:
    """Return (u^n - l^n) / (u - l), without cancellation where u and l meet."""
    large = np.maximum(np.maximum(upper, lower), FLOOR)
    ratio = np.minimum(upper, lower) / large
    gap = np.maximum(1 - ratio, 1e-8)
    rise = np.where(ratio > 1 - 1e-8, power, (1 - ratio**power) / gap)
    return np.asarray(large ** (power - 1) * rise)


def width(exposure: Exposure) -> int:
    """Number of draws of an exposure; 1 where all draws are alike."""
    carriers = exposure.carriers
    curves = [exposure.exchange, *(c.ln_k for c in carriers), *(skin.ln_k for skin in exposure.skins)]
    curves += [c.conductance for c in carriers if c.conductance is not None]
    curves += [c.activity for c in carriers if isinstance(c.activity, Curve)]
    curves += [curve for film in exposure.films for curve in film.parameters]
    arrays = [exposure.area, *(c.activity for c in carriers if not isinstance(c.activity, Curve))]
    arrays += [c.inventory for c in carriers if c.inventory is not None]
    return int(max([curve.ln.shape[-1] for curve in curves] + [np.atleast_1d(a).shape[-1] for a in arrays]))


def select(exposure: Exposure, draws: NDArray[np.int64]) -> Exposure:
    """Take some draws of an exposure, in the order and as often as given."""
    return Exposure(
        exposure.contact,
        _draws(exposure.area, draws),
        _curve(exposure.exchange, draws),
        tuple(_carrier(carrier, draws) for carrier in exposure.carriers),
        tuple(Skin(skin.name, skin.nu, _curve(skin.ln_k, draws)) for skin in exposure.skins),
        tuple(
            Film(film.name, film.nu, film.law, tuple(_curve(curve, draws) for curve in film.parameters))
            for film in exposure.films
        ),
    )


def scale(
    exposure: Exposure, exchange: Array, conductance: Mapping[str, Array], inventory: Array
) -> Exposure:
    """Multiply rates and amounts of an exposure.

    Parameters
    ----------
    exposure : Exposure
    exchange : (N,) array
        ln of the factor of every exchange.
    conductance : mapping of str to (N,) array
        ln of the factor of the conductances, by the limit that they stand for.
    inventory : (N,) array
        ln of the factor of every inventory.
    """
    none = np.zeros(1)
    carriers = tuple(
        replace(
            carrier,
            conductance=carrier.conductance
            and Curve(carrier.conductance.T, carrier.conductance.ln + conductance.get(carrier.limit, none)),
            inventory=None if carrier.inventory is None else carrier.inventory * np.exp(inventory),
        )
        for carrier in exposure.carriers
    )
    k = exposure.exchange
    return replace(exposure, exchange=Curve(k.T, k.ln + exchange), carriers=carriers)


def _draws(values: Array, draws: NDArray[np.int64]) -> Array:
    values = np.atleast_1d(values)
    return values if values.shape[-1] == 1 else np.asarray(values[..., draws])


def _curve(curve: Curve, draws: NDArray[np.int64]) -> Curve:
    return Curve(curve.T, _draws(curve.ln, draws))


def _carrier(carrier: Carrier, draws: NDArray[np.int64]) -> Carrier:
    activity = carrier.activity
    return replace(
        carrier,
        ln_k=_curve(carrier.ln_k, draws),
        activity=_curve(activity, draws) if isinstance(activity, Curve) else _draws(activity, draws),
        conductance=carrier.conductance and _curve(carrier.conductance, draws),
        inventory=None if carrier.inventory is None else _draws(carrier.inventory, draws),
    )
