"""Temperature over time."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Schedule:
    """Knots of time (s) and temperature (K), linear in between; shapes (K,) or (K, N)."""

    time: Array
    T: Array
