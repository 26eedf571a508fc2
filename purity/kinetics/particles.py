"""Dust in still air: slip, settling, and the particle limits of clean-room classes."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from purity.constants import GRAVITY

Array = NDArray[np.float64]
Number = Array | float

#: Mean free path of air at 20 degC and 1 atm, m (Seinfeld and Pandis 2006, table 9.3: 298 K).
AIR_FREE_PATH: float = 6.51e-8
#: Viscosity of air at 20 degC, Pa s.
AIR_VISCOSITY: float = 1.81e-5


def slip(diameter: Number, free_path: Number = AIR_FREE_PATH) -> Array:
    """Cunningham factor by which a small particle falls faster than Stokes' law says.

    1 + Kn (1.257 + 0.4 exp(-1.1/Kn)), Kn = 2 lambda/d (Allen and Raabe form, as printed in
    Seinfeld and Pandis 2006, eq. 9.34).

    Parameters
    ----------
    diameter, free_path : array
        m.
    """
    knudsen = 2.0 * free_path / np.asarray(diameter, dtype=float)
    return np.asarray(1.0 + knudsen * (1.257 + 0.4 * np.exp(-1.1 / knudsen)))


def settling_velocity(
    diameter: Number,
    density: Number,
    *,
    viscosity: Number = AIR_VISCOSITY,
    fluid_density: Number = 0.0,
    free_path: Number | None = AIR_FREE_PATH,
    gravity: float = GRAVITY,
) -> Array:
    """Velocity (m/s) at which a sphere falls (rises: negative) in a fluid at rest, Stokes' law.

    Holds while the Reynolds number is below about 0.5.

    Parameters
    ----------
    diameter : array
        m.
    density, fluid_density : array
        kg/m3.
    viscosity : array
        Pa s.
    free_path : array or None
        m; None: no slip (liquids).
    """
    diameter = np.asarray(diameter, dtype=float)
    factor = slip(diameter, free_path) if free_path is not None else 1.0
    return np.asarray(
        (density - np.asarray(fluid_density)) * gravity * diameter**2 * factor / (18.0 * viscosity)
    )


def class_limit(iso_class: Number, diameter: Number) -> Array:
    """Most particles of a size and larger in a cubic metre of air of a class (ISO 14644-1).

    10^N (0.1 um / D)^2.08, before the rounding of the standard's table; sizes 0.1 to 5 um.

    Parameters
    ----------
    iso_class : array
        1 to 9.
    diameter : array
        m.
    """
    return np.asarray(10.0 ** np.asarray(iso_class, dtype=float) * (1e-7 / np.asarray(diameter)) ** 2.08)
