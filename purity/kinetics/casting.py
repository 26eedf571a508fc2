"""Freezing: how long a shell takes, and how impurities are spread by it."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Number = Array | float


def chvorinov_time(constant: Number, volume: Number, area: Number, exponent: float = 2.0) -> Array:
    """Time (s) to freeze: constant times (volume over cooled area)^n (Chvorinov 1940).

    Parameters
    ----------
    constant : array
        Mould constant, s m^-n.
    volume, area : array
        m3, m2.
    """
    return np.asarray(constant * (np.asarray(volume, dtype=float) / area) ** exponent)


def chvorinov_constant(
    *,
    mould_conductivity: Number,
    mould_density: Number,
    mould_heat_capacity: Number,
    metal_density: Number,
    latent_heat: Number,
    heat_capacity: Number,
    superheat: Number,
    T_melting: Number,
    T_mould: Number,
) -> Array:
    """Mould constant (s/m2) of an insulating, thick mould.

    (pi/4) (rho L' / (Tm - T0))^2 / (k rho c of the mould) with L' = latent heat + c superheat
    (Flemings 1974, chapter 1). For a metal mould measure it: the interface rules there.
    """
    heat = metal_density * (np.asarray(latent_heat) + np.asarray(heat_capacity) * superheat)
    effusivity_squared = np.asarray(mould_conductivity) * mould_density * mould_heat_capacity
    drive = np.asarray(T_melting, dtype=float) - T_mould
    return np.asarray(np.pi / 4.0 * (heat / drive) ** 2 / effusivity_squared)


def partition(k: Number, velocity: Number, layer: Number, D: Number) -> Array:
    """Effective partition coefficient of a moving front: k / (k + (1-k) e^(-v d/D)).

    Burton, Prim and Slichter 1953.

    Parameters
    ----------
    k : array
        Equilibrium partition coefficient, solid over liquid.
    velocity : array
        Of the front, m/s.
    layer : array
        Thickness of the layer at rest in front of it, m.
    D : array
        Diffusivity in the melt, m2/s.
    """
    k = np.asarray(k, dtype=float)
    return np.asarray(k / (k + (1.0 - k) * np.exp(-np.asarray(velocity) * layer / np.asarray(D))))


def scheil(k: Number, frozen: Number) -> Array:
    """Content of the solid at a frozen fraction over the mean: k (1-f)^(k-1).

    Scheil 1942; Gulliver 1913; Pfann 1952 calls it normal freezing.
    """
    k = np.asarray(k, dtype=float)
    return np.asarray(k * (1.0 - np.asarray(frozen, dtype=float)) ** (k - 1.0))


def scheil_mean(k: Number, start: Number, end: Number) -> Array:
    """Mean content of the part frozen between two fractions over the mean of the whole.

    Parameters
    ----------
    k : array
    start, end : array
        Frozen fractions, 0 <= start < end <= 1.
    """
    k, start, end = (np.asarray(v, dtype=float) for v in (k, start, end))
    return np.asarray(((1.0 - start) ** k - (1.0 - end) ** k) / (end - start))


def worst_position(k: Number, crop: Number = 0.0) -> Array:
    """Highest content in a casting over its mean, after the last `crop` of it is cut off.

    First part frozen for k > 1; for k < 1 the last part kept. With nothing cut off the law has no end,
    so the last part is taken as a hundredth of the casting and averaged.
    """
    k, crop = np.asarray(k, dtype=float), np.asarray(crop, dtype=float)
    edge = 1.0 - crop
    last = scheil_mean(k, np.minimum(edge, 1.0) - 0.01, edge)
    return np.maximum(last, scheil(k, 0.0))


def enrichment(lost: Number, alpha: Number) -> Array:
    """Content left over content before, when a share of the metal evaporates: (1-f)^(alpha-1).

    Rayleigh 1902; alpha is the ratio in which the vapour holds the impurity, to the melt.
    """
    return np.asarray((1.0 - np.asarray(lost, dtype=float)) ** (np.asarray(alpha, dtype=float) - 1.0))
