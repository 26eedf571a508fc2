"""Contents of a metal: by mass, by mole, by volume; nines.

Arrays carry impurities on the first axis; further axes (draws) broadcast. Molar masses are passed in,
kg/mol. Three measures by mole are kept apart: the *ratio*, moles of impurity per mole of host, which
is what a fixed amount of host gains or loses; the *fraction*, of all atoms; and mol/m3.

Nines count metals only: C, N, O, H and S are left out, as the trade does, unless all impurities
are asked for.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from math import floor, log10

import numpy as np
from numpy.typing import ArrayLike, NDArray

from purity.constants import GAS_FORMERS
from purity.errors import OutOfRangeError

Array = NDArray[np.float64]


def _column(molar_mass: ArrayLike, like: Array) -> Array:
    """Molar masses (I,) shaped to stand against contents (I, ...)."""
    mass: Array = np.asarray(molar_mass, dtype=float)
    return mass.reshape(mass.shape + (1,) * (like.ndim - mass.ndim)) if mass.ndim else mass


def ratio_from_mass(w: ArrayLike, molar_mass: ArrayLike, host_molar_mass: float) -> Array:
    """Moles of each impurity per mole of host from mass fractions.

    Parameters
    ----------
    w : (I, ...) array
        Mass fractions, kg per kg of metal; their sum must stay below 1.
    molar_mass : (I,) array
        kg/mol (any unit, the same as the host's).
    host_molar_mass : float

    Returns
    -------
    (I, ...) array

    Raises
    ------
    OutOfRangeError
        When no host is left.
    """
    mass: Array = np.atleast_1d(np.asarray(w, dtype=float))
    host = 1.0 - mass.sum(axis=0)
    if np.any(host <= 0.0):
        raise OutOfRangeError("the contents add up to the whole metal: no host is left")
    ratio: Array = mass / _column(molar_mass, mass) * host_molar_mass / host
    return ratio


def mass_from_ratio(ratio: ArrayLike, molar_mass: ArrayLike, host_molar_mass: float) -> Array:
    """Mass fractions (kg per kg of metal) from moles per mole of host; inverse of :func:`ratio_from_mass`."""
    r: Array = np.atleast_1d(np.asarray(ratio, dtype=float))
    mass: Array = r * _column(molar_mass, r)
    fractions: Array = mass / (host_molar_mass + mass.sum(axis=0))
    return fractions


def fraction_from_ratio(ratio: ArrayLike) -> Array:
    """Mole fractions (of all atoms) from moles per mole of host; the first axis holds all impurities."""
    r: Array = np.atleast_1d(np.asarray(ratio, dtype=float))
    x: Array = r / (1.0 + r.sum(axis=0))
    return x


def ratio_from_fraction(x: ArrayLike) -> Array:
    """Moles per mole of host from mole fractions; inverse of :func:`fraction_from_ratio`."""
    fraction: Array = np.atleast_1d(np.asarray(x, dtype=float))
    host = 1.0 - fraction.sum(axis=0)
    if np.any(host <= 0.0):
        raise OutOfRangeError("the mole fractions add up to 1: no host is left")
    ratio: Array = fraction / host
    return ratio


def fraction_from_mass(w: ArrayLike, molar_mass: ArrayLike, host_molar_mass: float) -> Array:
    """Mole fractions (at% / 100) from mass fractions."""
    return fraction_from_ratio(ratio_from_mass(w, molar_mass, host_molar_mass))


def mass_from_fraction(x: ArrayLike, molar_mass: ArrayLike, host_molar_mass: float) -> Array:
    """Mass fractions from mole fractions (at% / 100)."""
    return mass_from_ratio(ratio_from_fraction(x), molar_mass, host_molar_mass)


def concentration_from_mass(w: ArrayLike, molar_mass: ArrayLike, density: ArrayLike) -> Array:
    """Moles per m3 of metal from mass fractions.

    Parameters
    ----------
    w : (I, ...) array
    molar_mass : (I,) array
        kg/mol.
    density : float or array
        kg/m3 of the metal.
    """
    mass: Array = np.atleast_1d(np.asarray(w, dtype=float))
    c: Array = mass * np.asarray(density, dtype=float) / _column(molar_mass, mass)
    return c


def mass_from_concentration(c: ArrayLike, molar_mass: ArrayLike, density: ArrayLike) -> Array:
    """Mass fractions from moles per m3; inverse of :func:`concentration_from_mass`."""
    moles: Array = np.atleast_1d(np.asarray(c, dtype=float))
    w: Array = moles * _column(molar_mass, moles) / np.asarray(density, dtype=float)
    return w


def metals_total(contents: Mapping[str, float]) -> float:
    """Sum of the contents that count as metals: all but C, N, O, H, S."""
    return sum(value for element, value in contents.items() if element not in GAS_FORMERS)


def nines(impurity: float) -> float:
    """Number of nines of a metal, -log10 of its impurity fraction: 99.97 % has 3.52.

    Parameters
    ----------
    impurity : float
        Total impurity, mass fraction, above 0 and up to 1.
    """
    if not 0.0 < impurity <= 1.0:
        raise OutOfRangeError(f"an impurity total of {impurity:g} has no number of nines")
    return -log10(impurity)


def grade(impurity: float) -> str:
    """Best grade that a total impurity still meets: 2e-6 is '5N8', 1e-5 is '5N'.

    The digit after N follows the nines: 5N8 is 99.9998 %. A total on the border of a grade meets it.
    """
    if not 0.0 < impurity <= 0.1:
        raise OutOfRangeError(f"an impurity total of {impurity:g} has no grade")
    whole = floor(-log10(impurity) + 1e-9)
    # share of the last nine's place that is pure, in tenths: 0.2e-5 leaves 8 tenths
    tenths = floor(10.0 * (1.0 - impurity * 10.0**whole) + 1e-9)
    return f"{whole}N{min(tenths, 8)}" if tenths > 0 else f"{whole}N"


def impurity_of_grade(text: str) -> float:
    """Largest total impurity (mass fraction) of a grade: '5N8' is 2e-6, '4N' is 1e-4."""
    match = re.fullmatch(r"(\d{1,2})N([0-8]?)", text)
    if not match or int(match[1]) < 1:
        raise OutOfRangeError(f"{text!r} is no grade; write 4N, 4N5, 5N8 ...")
    return 10.0 ** -int(match[1]) * (1.0 - int(match[2] or 0) / 10.0)
