"""Coefficients of mass transfer, numbers only: gas to surface, gas film, melt, apertures, walls.

Conductances are in mol m-2 s-1 per unit activity (activity of a gas: partial pressure over P0);
exchange coefficients in m/s. Everything is elementwise and broadcasts.
"""

from __future__ import annotations

from functools import reduce

import numpy as np
from numpy.typing import NDArray

from purity.constants import ATM, GRAVITY, K_BOLTZMANN, P0, R

Array = NDArray[np.float64]
Number = Array | float

#: Exponent of temperature in the diffusivity of gases (Fuller, Schettler and Giddings 1966).
GAS_EXPONENT: float = 1.75


# Gas meets surface


def impingement(p: Number, M: Number, T: Number) -> Array:
    """Hertz and Knudsen: moles that strike a surface, mol m-2 s-1.

    Parameters
    ----------
    p : array
        Partial pressure, Pa.
    M : array
        Molar mass, kg/mol.
    T : array
        Temperature of the gas, K.
    """
    return np.asarray(p / np.sqrt(2.0 * np.pi * np.asarray(M) * R * np.asarray(T)))


def free_molecular(alpha: Number, M: Number, T: Number) -> Array:
    """Conductance of a surface that takes (or gives off) a share alpha of what strikes it.

    Hertz and Knudsen, per unit of activity p/P0: mol m-2 s-1.
    """
    return np.asarray(alpha * impingement(P0, M, T))


def mean_speed(M: Number, T: Number) -> Array:
    """Mean speed of gas molecules, m/s (Maxwell)."""
    return np.sqrt(8.0 * R * np.asarray(T) / (np.pi * np.asarray(M)))


def mean_free_path(p: Number, T: Number, diameter: Number) -> Array:
    """Mean free path (m) of molecules of a collision diameter (m) at a pressure (Pa)."""
    return np.asarray(K_BOLTZMANN * np.asarray(T) / (np.sqrt(2.0) * np.pi * np.square(diameter) * p))


def monolayer_time(p: Number, M: Number, T: Number, sites: Number, sticking: Number = 1.0) -> Array:
    """Time (s) in which a gas covers a surface of so many sites (mol/m2)."""
    return np.asarray(sites / (sticking * impingement(p, M, T)))


# Gas film


def gas_diffusivity(D_ref: Number, T: Number, p: Number, *, T_ref: float, p_ref: float = ATM) -> Array:
    """Diffusivity of a gas, m2/s: T to the 1.75, one over pressure (Fuller and others 1966)."""
    return np.asarray(D_ref * (np.asarray(T) / T_ref) ** GAS_EXPONENT * (p_ref / np.asarray(p)))


def gas_film(Sh: Number, D: Number, length: Number, T_film: Number) -> Array:
    """Conductance of a gas film: Sh D P0 / (L R T), mol m-2 s-1 per unit activity.

    Parameters
    ----------
    Sh : array
        Sherwood number on `length`.
    D : array
        Gas diffusivity at `T_film`, m2/s.
    length : array
        m.
    T_film : array
        K.
    """
    return np.asarray(Sh * np.asarray(D) / length * P0 / (R * np.asarray(T_film)))


def stagnant_film(D: Number, thickness: Number, T_film: Number) -> Array:
    """Conductance of a gas at rest between a surface and a stirred gas."""
    return gas_film(1.0, D, thickness, T_film)


# Sherwood numbers


def plate(Re: Number, Sc: Number, *, transition: float = 5e5) -> Array:
    """Mean Sherwood number of a plate in a stream along it.

    Laminar 0.664 Re^1/2 Sc^1/3 (Pohlhausen 1921) up to the transition; beyond it
    (0.037 Re^0.8 - A) Sc^1/3 with A that joins the two (Incropera and DeWitt, eq. 7.38).
    """
    Re = np.asarray(Re, dtype=float)
    offset = 0.037 * transition**0.8 - 0.664 * transition**0.5
    form = np.where(Re <= transition, 0.664 * np.sqrt(Re), 0.037 * Re**0.8 - offset)
    return np.asarray(form * np.cbrt(Sc))


def sphere(Re: Number, Sc: Number) -> Array:
    """Sherwood number of a sphere in a stream: 2 + 0.6 Re^1/2 Sc^1/3 (Ranz and Marshall 1952)."""
    return np.asarray(2.0 + 0.6 * np.sqrt(Re) * np.cbrt(Sc))


def vertical_wall(Ra: Number, Sc: Number) -> Array:
    """Sherwood number of a vertical wall in natural convection (Churchill and Chu 1975).

    Parameters
    ----------
    Ra : array
        Rayleigh number of mass (or heat), Gr Sc, on the height.
    Sc : array
        Schmidt (or Prandtl) number.
    """
    blend = (1.0 + (0.492 / np.asarray(Sc)) ** (9.0 / 16.0)) ** (8.0 / 27.0)
    return np.asarray((0.825 + 0.387 * np.asarray(Ra) ** (1.0 / 6.0) / blend) ** 2)


def horizontal_face(Ra: Number) -> Array:
    """Sherwood number of a face on its buoyant side, length area over perimeter.

    0.54 Ra^1/4 up to 1e7, 0.15 Ra^1/3 beyond (Lloyd and Moran 1974); never below 1, a layer at rest.
    """
    Ra = np.asarray(Ra, dtype=float)
    return np.maximum(1.0, np.where(Ra <= 1e7, 0.54 * Ra**0.25, 0.15 * np.cbrt(Ra)))


def rotating_disc(D: Number, viscosity: Number, omega: Number) -> Array:
    """Exchange coefficient (m/s) of a rotating disc: 0.62 D^2/3 nu^-1/6 omega^1/2 (Levich 1962)."""
    return np.asarray(0.62 * np.cbrt(D) ** 2 * np.asarray(viscosity) ** (-1.0 / 6.0) * np.sqrt(omega))


def rayleigh(
    beta_delta: Number, length: Number, viscosity: Number, D: Number, *, gravity: float = GRAVITY
) -> Array:
    """Rayleigh number g (relative density difference) L^3 / (nu D)."""
    return np.asarray(gravity * np.abs(beta_delta) * np.asarray(length) ** 3 / (viscosity * np.asarray(D)))


# Melt


def exchange(Sh: Number, D: Number, length: Number) -> Array:
    """Exchange coefficient Sh D / L, m/s."""
    return np.asarray(Sh * np.asarray(D) / length)


def surface_renewal(D: Number, renewals: Number) -> Array:
    """Exchange coefficient of a surface renewed so many times a second: sqrt(D s) (Danckwerts 1951)."""
    return np.sqrt(np.asarray(D) * renewals)


def penetration(D: Number, contact_time: Number) -> Array:
    """Exchange coefficient of a surface that lives for a time (s): 2 sqrt(D/(pi t)) (Higbie 1935)."""
    return np.asarray(2.0 * np.sqrt(np.asarray(D) / (np.pi * np.asarray(contact_time))))


def stirred_surface(D: Number, velocity: Number, radius: Number) -> Array:
    """Exchange coefficient of the free surface of an induction-stirred melt, m/s.

    Rigid flow from the middle to the wall: 2 sqrt(2 D v / (pi r)) (Machlin 1960).

    Parameters
    ----------
    D : array
        Diffusivity in the melt, m2/s.
    velocity : array
        Surface velocity, m/s.
    radius : array
        Of the melt, m.
    """
    return np.asarray(2.0 * np.sqrt(2.0 * np.asarray(D) * velocity / (np.pi * np.asarray(radius))))


def rescale(k: Number, D: Number, D_of_k: Number, exponent: float = 2.0 / 3.0) -> Array:
    """Carry a measured exchange coefficient over to another solute: k (D/D')^n."""
    return np.asarray(k * (np.asarray(D) / np.asarray(D_of_k)) ** exponent)


# Series, apertures, walls, pumps


def in_series(*conductances: Number) -> Array:
    """One over the sum of the resistances; a conductance of zero closes the path."""
    values = [np.asarray(value, dtype=float) for value in conductances]
    with np.errstate(divide="ignore"):
        return np.asarray(1.0 / reduce(np.add, (1.0 / value for value in values)))


def shares_in_series(*conductances: Number) -> Array:
    """Share of each conductance in the whole resistance, stacked first; they sum to 1."""
    resistances = np.stack(np.broadcast_arrays(*(1.0 / np.asarray(v, dtype=float) for v in conductances)))
    return np.asarray(resistances / resistances.sum(axis=0))


def aperture(area: Number, M: Number, T: Number) -> Array:
    """Volume flow (m3/s) through a thin hole in molecular flow: area v / 4 (Knudsen 1909)."""
    return np.asarray(area * mean_speed(M, T) / 4.0)


def tube(diameter: Number, length: Number, M: Number, T: Number) -> Array:
    """Volume flow (m3/s) through a tube in molecular flow: hole and long tube in series (Dushman 1922)."""
    diameter = np.asarray(diameter, dtype=float)
    hole = aperture(np.pi * diameter**2 / 4.0, M, T)
    return np.asarray(hole / (1.0 + 3.0 * np.asarray(length) / (4.0 * diameter)))


def chamber_pressure(load: Number, pumping: Number, uptake: Number = 0.0) -> Array:
    """Steady partial pressure (Pa) of a gas load (Pa m3/s) over pumping speed and uptake (m3/s)."""
    return np.asarray(np.asarray(load) / (np.asarray(pumping) + uptake))


def uptake_share(sticking: Number, area: Number, M: Number, T: Number, pumping: Number) -> Array:
    """Share of a gas load that a sticking surface takes from a pump (m3/s)."""
    taken = sticking * aperture(area, M, T)
    return np.asarray(taken / (taken + pumping))


def pump_down(p_start: Number, volume: Number, pumping: Number, load: Number, time: Number) -> Array:
    """Pressure (Pa) of a chamber (m3) pumped from `p_start` under a constant gas load (Pa m3/s)."""
    rest = chamber_pressure(load, pumping)
    return np.asarray(rest + (np.asarray(p_start) - rest) * np.exp(-np.asarray(pumping) * time / volume))


def membrane_flux(D: Number, content_in: Number, content_out: Number, thickness: Number) -> Array:
    """Steady flux through a wall (Fick's first law), unit of content times m/s."""
    return np.asarray(np.asarray(D) * (np.asarray(content_in) - content_out) / thickness)


def permeation_conductance(permeability: Number, thickness: Number) -> Array:
    """Conductance of a wall, mol m-2 s-1 per unit p/P0; permeability in mol m-1 s-1 Pa-1."""
    return np.asarray(permeability * P0 / np.asarray(thickness))


def time_lag(D: Number, thickness: Number) -> Array:
    """Time (s) before steady permeation through a wall: L^2 / 6 D (Daynes 1920)."""
    return np.asarray(np.square(thickness) / (6.0 * np.asarray(D)))
