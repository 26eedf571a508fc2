"""Pickup and release of a solid piece under its contacts.

Fick's second law in a slab, cylinder or sphere, D(T(t)), with the surface law of
:mod:`purity.kinetics.exposure` at its surface: one surface content per impurity, on which every contact
acts with its own area (the flux is spread over the whole surface; a face that is touched apart from the
rest is averaged with it). One hold of a piece of uniform content under linear carriers is exact
(:mod:`purity.kinetics.laplace`); everything else goes through modes and implicit stages
(:mod:`purity.kinetics.passage`). Number of steps is fixed, so the error is known by doubling it.

A compound that would form at the surface caps the content there; what comes beyond it stays as a film and
dissolves again while it lasts. Impurities without a diffusivity (ln D not finite) stay at the surface: they
do not enter. Limits: one phase, contents that do not act on each other inside the piece, no moving front.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from purity.errors import OutOfRangeError
from purity.kinetics import control
from purity.kinetics.exposure import Array, Curve, Exposure
from purity.kinetics.passage import is_hold, whole
from purity.kinetics.pieces import (
    LEAST_LN_D,
    STEPS,
    STEPS_HISTORY,
    Flags,
    Piece,
    Step,
    steps,
    with_skins,
)
from purity.kinetics.schedule import Schedule
from purity.scenario import Form

#: Shapes of a form as bodies. "area" is a slab of the thickness that volume and area give.
SHAPES: dict[str, str] = {
    "slab": "slab",
    "area": "slab",
    "cylinder": "cylinder",
    "wire": "cylinder",
    "sphere": "sphere",
    "granules": "sphere",
}
#: Relative error of the exact hold.
EXACT = 1e-7


@dataclass(frozen=True, slots=True)
class BodyRun:
    """What became of a piece.

    Parameters
    ----------
    mean : (I, N) array
        Mean dissolved contents, mol per mol of host.
    film : (I, N) array
        Held by compounds at the surface, mol per mol of host.
    profile : (I, M, N) array
        Modal amplitudes, for the next step.
    ledger : (C, I, N) array
        Gained through each exposure; sums to the change of mean and film.
    limits : tuple of str
        Names of the rows of `shares`.
    shares : (L, I, N) array
        Shares of what holds the pickup back; evaluated on a sample of the draws and repeated over the rest.
    error : float
        Own estimate of the relative error of the pickup, by refining: 95 % of the draws of the worst
        impurity lie below.
    flags : (N,) bool array
        Draws that were not solved.
    attacked : (N,) bool array
        Draws whose surface left the dilute range.
    history : (I, K, N) array or None
        Contents with film at `times`.
    times : (K,) or (K, N) array or None
        s.
    """

    mean: Array
    film: Array
    profile: Array
    ledger: Array
    limits: tuple[str, ...]
    shares: Array
    error: float
    flags: Flags
    attacked: Flags
    history: Array | None = None
    times: Array | None = None


def body(
    x0: Array,
    profile: Array | None,
    form: Form,
    molar_density: Array,
    amount: Array,
    diffusivity: Curve,
    schedule: Schedule,
    exposures: Sequence[Exposure],
    *,
    bound: Array | None = None,
    nodes: int | None = None,
    history: bool = False,
) -> BodyRun:
    """Carry a piece through a schedule under its contacts.

    Parameters
    ----------
    x0 : (I, N) array
        Mean contents at the start, mol per mol of host.
    profile : (I, M, N) array or None
        Modal amplitudes at the start, as an earlier run gave them; None: uniform.
    form : Form
    molar_density, amount : (N,) or (1,) arrays
        Host, mol/m3; mol in the lot.
    diffusivity : Curve
        m2/s, ``ln`` of shape (I, K, N); not finite: no record.
    schedule : Schedule
    exposures : sequence of Exposure
        Their areas should not add up to more than the surface of the piece.
    bound : (I, N) array or None
        Held at the surface at the start by compounds of the skins of the exposures, mol per mol of host;
        it dissolves where they do. What no skin can hold stays bound.
    nodes : int or None
        Steps of a hold; a ramp takes half as many again.
    history : bool
        Record contents over time.

    Returns
    -------
    BodyRun

    Raises
    ------
    OutOfRangeError
        A shape that is no body, or a thickness that is not positive.
    """
    written, left = with_skins(exposures, bound, amount)
    piece = _piece(x0, profile, form, molar_density, amount, diffusivity, written)
    counts = STEPS_HISTORY if history else STEPS
    counts = counts if nodes is None else (nodes, nodes + nodes // 2, counts[2])
    course = steps(schedule, counts)
    exact = not history and is_hold(piece, course)
    plan = control.Plan(course, 25, EXACT, None) if exact else control.refine(piece, schedule, counts)
    run = plan.run if plan.run is not None and not history else None
    run = run or whole(piece, plan.course, exact, history, plan.modes)
    draws = control.sample(len(run.flags))
    limits, shares = control.shares(piece, course, exact, draws, run.profile.shape[1])
    return BodyRun(
        run.mean,
        run.film if left is None else run.film + left,
        run.profile,
        run.ledger,
        limits,
        shares,
        plan.error,
        run.flags,
        run.attacked,
        run.history,
        np.stack(np.broadcast_arrays(*_times(plan.course))) if history else None,
    )


def _piece(
    x0: Array,
    profile: Array | None,
    form: Form,
    molar_density: Array,
    amount: Array,
    diffusivity: Curve,
    exposures: tuple[Exposure, ...],
) -> Piece:
    if form.shape not in SHAPES:
        raise OutOfRangeError(f"shape {form.shape!r} is no body that impurities diffuse into")
    R = form.volume / form.area if form.shape == "area" else form.half_thickness
    if not R > 0:
        raise OutOfRangeError("the half thickness (or radius) of the pieces must be positive")
    draws = (x0.shape[-1],)
    ln = np.where(np.isfinite(diffusivity.ln), diffusivity.ln, LEAST_LN_D)
    diffusivity = Curve(diffusivity.T, np.maximum(ln, LEAST_LN_D))
    if profile is not None:
        profile = np.broadcast_to(profile, (*profile.shape[:2], *draws))
    density, amount = (np.broadcast_to(np.asarray(v, dtype=float), draws) for v in (molar_density, amount))
    return Piece(
        SHAPES[form.shape],
        np.full(draws, R),
        np.asarray(x0, dtype=float),
        profile,
        density,
        amount,
        diffusivity,
        exposures,
    )


def _times(course: Sequence[Step]) -> list[Array]:
    times: list[Array] = [np.asarray(0.0)]
    for step in course:
        times.append(np.asarray(times[-1] + step.length))
    return times
