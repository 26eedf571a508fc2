"""Certified contact equilibrium: minimum of the Gibbs energy under element balances."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import IntEnum

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


class Outcome(IntEnum):
    """State of one solved draw."""

    SOLVED = 0
    HOST_CONSUMED = 1
    OUTSIDE_DILUTE = 2
    REFUSED = 3


@dataclass(frozen=True, slots=True)
class System:
    """Species of a contact: numbers and names, no energies.

    Parameters
    ----------
    species : tuple of str
        Names, unique: ``Al in Cu``, ``Al2O3``, ``CO``.
    elements : tuple of str
    formula : (S, E) integer array
        Atoms of each element in each species.
    phase : (S,) integer array
        Index into `phases`.
    phases : tuple of str
    host : int
        Index of the metal phase; its first species is the host.
    """

    species: tuple[str, ...]
    elements: tuple[str, ...]
    formula: NDArray[np.int64]
    phase: NDArray[np.int64]
    phases: tuple[str, ...]
    host: int


@dataclass(frozen=True, slots=True)
class Equilibrium:
    """Answer and certificate, one column a draw.

    Parameters
    ----------
    ln_activity : (S, N) array
        Of every species; for an absent phase it measures saturation, never a content.
    amounts : (S, N) array
        mol.
    saturation : (P, N) array
        exp F of each phase: 1 where present, below 1 where absent.
    present : (P, N) bool array
    gap : (N,) array
        Duality gap, RT per mole of atoms.
    residual : (N,) array
        Largest relative error of an element balance.
    rounding : (N,) array
        Estimated rounding error of ln activity.
    state : (N,) int8 array
        :class:`Outcome`.
    start : (N,) int8 array
        Start of the restart chain that converged, from 1.
    """

    ln_activity: Array
    amounts: Array
    saturation: Array
    present: NDArray[np.bool_]
    gap: Array
    residual: Array
    rounding: Array
    state: NDArray[np.int8]
    start: NDArray[np.int8]


def equilibrium(
    system: System,
    g: Array,
    amounts: Array,
    *,
    held: Mapping[str, Array] = field(default_factory=dict),  # type: ignore[assignment]
    gas_volume: Array | None = None,
    inputs: NDArray[np.int64] | None = None,
) -> Equilibrium:
    """Find the stable assemblage of a contact and prove it.

    Parameters
    ----------
    system : System
    g : (S, N) array
        Gibbs energies over RT at unit activity (mole fraction 1, or P0 for a gas at its fixed total
        pressure, already included).
    amounts : (E, N) or (inputs, N) array
        mol of each element, or of each input substance when `inputs` gives their formulas.
    held : mapping of str to (N,) array
        Elements held at a fixed chemical potential over RT by a reservoir.
    gas_volume : (N,) array or None
        P0 V / (R T) of a gas at fixed volume, mol; None: the gas is at fixed total pressure.
    inputs : (inputs, E) integer array or None

    Returns
    -------
    Equilibrium
    """
    raise NotImplementedError
