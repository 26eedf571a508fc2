"""State of a lot and how a step moves it: chooses bath, body or films, never by the contact."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from numpy import bool_
from numpy.typing import NDArray

from purity.kinetics.exposure import Array, Curve, Exposure
from purity.kinetics.schedule import Schedule
from purity.scenario import Form

#: What can hold a pickup back; reports print shop words for them.
HELD_BACK_BY = (
    "ceiling",
    "melt transfer",
    "gas film",
    "surface",
    "wetting",
    "diffusion",
    "supply",
    "inventory",
    "film growth",
    "permeation",
)


@dataclass(frozen=True, slots=True)
class Host:
    """The metal, in numbers.

    Parameters
    ----------
    phase : {"liquid", "solid"}
    molar_density : (N,) array
        mol/m3.
    amount : (N,) array
        mol of host in the lot.
    diffusivity : Curve or None
        m2/s per impurity, ``ln`` of shape (I, K, N); solids only.
    """

    phase: str
    molar_density: Array
    amount: Array
    diffusivity: Curve | None = None


@dataclass(frozen=True, slots=True)
class State:
    """What the lot is now: contents in mol per mol of host.

    Parameters
    ----------
    x : (I, N) array
        Dissolved, mean over the piece.
    suspended : (I, N) array
        Held in compounds.
    profile : (I, M, N) array or None
        Modal amplitudes of a solid piece; None: uniform.
    film : (F, N) array or None
        Film thickness, m, in the order of the films of the last exposure.
    films : tuple of str
        Names of the films in `film`.
    surface : (I, N) array or None
        Content bound at the surface (films, adsorbed), mol per mol of host; melting folds it into x.
    """

    x: Array
    suspended: Array
    profile: Array | None = None
    film: Array | None = None
    films: tuple[str, ...] = ()
    surface: Array | None = None


@dataclass(frozen=True, slots=True)
class Pickup:
    """What a step did.

    Parameters
    ----------
    state : State
        After the step.
    ledger : (C, I, N) array
        Content gained through each contact, mol per mol of host; sums to the change.
    keep, gain : (I, N) arrays or None
        The affine map x -> keep x + gain where the step is linear in every content.
    shares : (L, I, N) array
        Shares of HELD_BACK_BY, from elasticities.
    error : float
        Own estimate of the largest relative error (n to 2n).
    flags : (N,) bool array
        Draws that were not solved or had two answers.
    attacked : (N,) bool array
        Draws whose metal or surface left the dilute range.
    history : (I, K, N) array or None
        Total contents at the nodes.
    times : (K,) or (K, N) array or None
    formed : tuple of str
        Skins that hold content in at least half of the draws.
    """

    state: State
    ledger: Array
    keep: Array | None
    gain: Array | None
    shares: Array
    error: float
    flags: NDArray[bool_]
    attacked: NDArray[bool_]
    history: Array | None = None
    times: Array | None = None
    formed: tuple[str, ...] = ()


def advance(
    state: State,
    host: Host,
    form: Form | None,
    schedule: Schedule,
    exposures: Sequence[Exposure],
    *,
    history: bool = False,
) -> Pickup:
    """Move a lot through one step.

    Parameters
    ----------
    state : State
    host : Host
    form : Form or None
        None for a bath.
    schedule : Schedule
    exposures : sequence of Exposure
    history : bool
        Record contents at the nodes.

    Returns
    -------
    Pickup
    """
    raise NotImplementedError
