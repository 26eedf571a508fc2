"""A piece through any course of diffusivity, surface coefficient and ceiling, without dimensions.

The surface takes J = Bi (ceiling - surface content), bounded from above by what can arrive: a flux cap,
a finite supply, or a closed reservoir whose ceiling falls as it empties (in proportion, or as its square
root, after Sieverts). Bounds hold back uptake only; a closed reservoir receives what leaves the piece.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from purity.kinetics.modes import CARRY, GAMMA, Basis, mean, push, respond, still, uniform

Array = NDArray[np.float64]
TINY = 1e-300


@dataclass(frozen=True, slots=True)
class Surface:
    """What the surface meets; every value a scalar, (N,), or (S, 2, N): by step and stage.

    Parameters
    ----------
    Bi : array
        h R / D.
    ceiling : array
    cap : array or None
        Largest uptake flux, in units of content.
    supply : array or None
        Largest uptake, in units of mean content.
    reservoir : array or None
        What the closed reservoir holds at the start, in units of mean content; its ceiling is `ceiling`
        then.
    sieverts : bool
        The ceiling follows the square root of what is left.
    """

    Bi: Array | float
    ceiling: Array | float
    cap: Array | float | None = None
    supply: Array | float | None = None
    reservoir: Array | float | None = None
    sieverts: bool = False


@dataclass(frozen=True, slots=True)
class Course:
    """Result of a march.

    Parameters
    ----------
    mean : (N,) array
        Mean content.
    y : (M, N) array
        Amplitudes.
    remaining : (N,) array or None
        Supply left.
    history : (S + 1, N) array
        Mean content at the ends of the steps.
    """

    mean: Array
    y: Array
    remaining: Array | None
    history: Array = field(repr=False)


def march(modes: Basis, d: Array, surface: Surface, *, start: Array | float = 0.0) -> Course:
    """Carry a piece through steps.

    Parameters
    ----------
    modes : Basis
    d : (S, N) array
        Fo of each step.
    surface : Surface
    start : (N,) or (M, N) array
        Uniform content, or amplitudes.

    Returns
    -------
    Course
    """
    d = np.atleast_2d(np.asarray(d, dtype=float))
    start = np.asarray(start, dtype=float)
    y = start.copy() if start.ndim == 2 else uniform(modes, np.broadcast_to(start, d.shape[1:]))
    taken: Array = np.zeros(d.shape[1])
    left = None if surface.supply is None else np.broadcast_to(surface.supply, taken.shape).astype(float)
    history = [mean(modes, y)]
    for k in range(len(d)):
        y, gained = _step(modes, y, d[k], surface, k, taken, left)
        taken = taken + gained
        if left is not None:
            left = np.maximum(left - gained, 0.0)
        history.append(mean(modes, y))
    return Course(history[-1], y, left, np.stack(history))


def _step(
    modes: Basis, y: Array, d: Array, surface: Surface, k: int, taken: Array, left: Array | None
) -> tuple[Array, Array]:
    response = respond(modes, d)
    rest, H = still(modes, response, y)
    per_flux = GAMMA * d * modes.g
    most = np.inf if left is None else left / np.maximum(modes.g * d, TINY)
    J1 = _flux(surface, k, 0, H, GAMMA * d * response.reach, per_flux, taken, most)
    y1 = push(modes, response, rest, GAMMA * d * J1)
    right = y + CARRY * (y1 - y)
    rest, H = still(modes, response, right)
    most = np.inf if left is None else (most - (1.0 - GAMMA) * J1) / GAMMA
    so_far = taken + (1.0 - GAMMA) * modes.g * d * J1
    J2 = _flux(surface, k, 1, H, GAMMA * d * response.reach, per_flux, so_far, most)
    return push(modes, response, rest, GAMMA * d * J2), modes.g * d * ((1.0 - GAMMA) * J1 + GAMMA * J2)


def _flux(
    surface: Surface,
    k: int,
    stage: int,
    H: Array,
    G: Array,
    per_flux: Array,
    taken: Array,
    most: Array | float,
) -> Array:
    ceiling, resistance = (
        _at(surface.ceiling, k, stage),
        1.0 / np.maximum(_at(surface.Bi, k, stage), TINY) + G,
    )
    if surface.reservoir is None:
        J = (ceiling - H) / resistance
    elif surface.sieverts:
        J = (ceiling * _root(surface.reservoir, ceiling, resistance, H, per_flux, taken) - H) / resistance
    else:
        A = surface.reservoir
        J = (ceiling * (1.0 - taken / A) - H) / (resistance + ceiling * per_flux / A)
    if surface.cap is not None:
        J = np.minimum(J, _at(surface.cap, k, stage))
    return np.asarray(np.minimum(J, np.maximum(most, 0.0)))


def _root(
    A: Array | float, ceiling: Array, resistance: Array, H: Array, per_flux: Array, taken: Array
) -> Array:
    """Square root of the share left in the reservoir at the end of the stage."""
    a = resistance * A / np.maximum(per_flux, TINY)
    c = np.maximum(a * (1.0 - taken / A) + H, 0.0)
    return np.asarray(2.0 * c / (ceiling + np.sqrt(ceiling**2 + 4.0 * a * c) + TINY))


def _at(value: Array | float, k: int, stage: int) -> Array:
    value = np.asarray(value, dtype=float)
    return np.asarray(value[k, stage]) if value.ndim == 3 else value
