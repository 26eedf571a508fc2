"""A solid piece carried step by step under its contacts.

In a stage the content below the surface is what the interior left there plus a reach times the flux
(modes), so the surface sees the piece as a contact sees a bath whose exchange is stretched by that reach:
the same equations, per impurity. Diffusivity, exchange and conductances enter a step by their mean over it,
equilibrium constants and activities at the two stages: what a gas can supply and what a schedule adds to
Fo are then exact, and a piece that follows its ceiling ends on the last one.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from purity.kinetics import modes
from purity.kinetics.exposure import Array, Carrier, Curve, Exposure, activity_at, ln_at, select
from purity.kinetics.schedule import Schedule, fractions, segments
from purity.kinetics.stage import HELD, Bath, Coefficients

Flags = NDArray[np.bool_]
Index = NDArray[np.int64]

#: Steps of a hold and of a ramp, first step of a hold; the second line where a history is asked for.
STEPS: tuple[int, int, float] = (16, 24, 0.03)
STEPS_HISTORY: tuple[int, int, float] = (24, 24, 1e-3)
#: Affected layer in units of sqrt(integral D dt): images of the far side stay below 2e-6.
LAYER = 5.0
#: Fo below which a curved piece is a layer.
FLAT_FO = 1e-6
#: Smallest ln D (m2/s): an impurity without a record stays at the surface.
LEAST_LN_D = np.log(1e-40)
#: Largest Bi of one contact, beyond which the surface follows it within 1e-8.
MOST_BI = 1e8
LN_MOST = 600.0
#: Largest resistance of a contact side, m2 s/mol: beyond it nothing passes.
MOST_RESISTANCE = 1e100
#: Limit by which a skin written as a carrier is known.
SKIN = "skin"
_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(3)
GAUSS = tuple(zip((1.0 + _NODES) / 2.0, _WEIGHTS / 2.0, strict=True))


@dataclass(frozen=True, slots=True)
class Step:
    """A step in time: length (s) and the temperatures at its ends, () or (N,); segment it belongs to."""

    length: Array
    T1: Array
    T2: Array
    part: int

    @property
    def hold(self) -> bool:
        """One temperature."""
        return bool(np.all(self.T1 == self.T2))


@dataclass(frozen=True, slots=True)
class Piece:
    """What is carried: N draws of a piece.

    Parameters
    ----------
    shape : {"slab", "cylinder", "sphere"}
    R : (N,) array
        Half thickness or radius, m.
    x0 : (I, N) array
        Mean contents.
    profile : (I, M, N) array or None
    density, amount : (N,) arrays
        mol/m3; mol of host in the lot.
    diffusivity : Curve
    exposures : tuple of Exposure
        Skins already written as carriers, see :func:`with_skins`.
    """

    shape: str
    R: Array
    x0: Array
    profile: Array | None
    density: Array
    amount: Array
    diffusivity: Curve
    exposures: tuple[Exposure, ...]


def steps(schedule: Schedule, counts: tuple[int, int, float]) -> tuple[Step, ...]:
    """Steps of a schedule: holds with growing, ramps with equal lengths."""
    hold, ramp, first = counts
    found = []
    parts = segments(schedule)
    if not parts:
        return (Step(np.zeros(1), np.asarray(schedule.T[0]), np.asarray(schedule.T[0]), 0),)
    for part, segment in enumerate(parts):
        edges = fractions(segment, hold=hold, ramp=ramp, first=first)
        T = [segment.T1 + (segment.T2 - segment.T1) * edge for edge in edges]
        T = [segment.T1] * len(edges) if segment.hold else T
        for k, share in enumerate(np.diff(edges)):
            found.append(Step(segment.duration * share, T[k], T[k + 1], part))
    return tuple(found)


def with_skins(
    exposures: Sequence[Exposure], bound: Array | None = None, amount: Array | float = 1.0
) -> tuple[tuple[Exposure, ...], Array | None]:
    """Write skins as carriers, whose inventory they fill by what they take off the surface.

    Exchange is kept within what an exponential can hold.

    Parameters
    ----------
    exposures : sequence of Exposure
    bound : (I, N) array or None
        Already bound at the surface, mol per mol of host; given to the skins in their order.
    amount : array
        mol of host.

    Returns
    -------
    exposures : tuple of Exposure
    left : (I, N) array or None
        Bound in nothing that is named here.
    """
    written = []
    for exposure in exposures:
        skins = []
        for skin in (s for s in exposure.skins if s.nu.any()):
            units, nu = np.zeros(1), skin.nu[:, None]
            if bound is not None:
                parts = np.where(nu > 0, bound / np.where(nu > 0, nu, 1.0), np.inf)
                units = np.min(parts, axis=0) * amount
                bound = np.maximum(bound - nu * units / amount, 0.0)
            skins.append(Carrier(skin.name, skin.nu, skin.ln_k, np.ones(1), None, units, limit=SKIN))
        exchange = Curve(exposure.exchange.T, _bounded(exposure.exchange.ln))
        carriers = exposure.carriers + tuple(skins)
        written.append(replace(exposure, exchange=exchange, carriers=carriers, skins=()))
    return tuple(written), bound


def take(piece: Piece, draws: Index) -> Piece:
    """Some draws of a piece, as often as given."""
    ln = piece.diffusivity.ln
    curve = piece.diffusivity if ln.shape[-1] == 1 else Curve(piece.diffusivity.T, ln[..., draws])
    return Piece(
        piece.shape,
        piece.R[draws],
        piece.x0[:, draws],
        None if piece.profile is None else piece.profile[..., draws],
        piece.density[draws],
        piece.amount[draws],
        curve,
        tuple(select(exposure, draws) for exposure in piece.exposures),
    )


def take_steps(course: Sequence[Step], draws: Index) -> tuple[Step, ...]:
    """The same draws of the steps."""

    def pick(value: Array) -> Array:
        value = np.asarray(value)
        return value if value.ndim == 0 or value.shape[-1] == 1 else value[draws]

    return tuple(Step(pick(s.length), pick(s.T1), pick(s.T2), s.part) for s in course)


def spread(piece: Piece, step: Step) -> Array:
    """Integral of D dt over a step, m2, (I, N)."""
    total: Array = np.zeros(1)
    for place, weight in ((0.5, 1.0),) if step.hold else GAUSS:
        T = step.T1 + place * (step.T2 - step.T1)
        total = total + weight * np.exp(np.maximum(ln_at(piece.diffusivity, T), LEAST_LN_D))
    return np.asarray(np.broadcast_to(total * step.length, piece.x0.shape))


@dataclass(frozen=True, slots=True)
class Bundle:
    """Curves that are read together: groups of the same knots, and where each curve belongs."""

    groups: tuple[tuple[Index, Curve], ...]
    shape: tuple[int, int]


def bundle(curves: Sequence[Curve], draws: int) -> Bundle:
    """Put curves (K, N) with the same knots together."""
    knots: dict[bytes, list[int]] = {}
    for c, curve in enumerate(curves):
        knots.setdefault(np.asarray(curve.T, dtype=float).tobytes(), []).append(c)
    groups = []
    for members in knots.values():
        wide = max(curves[c].ln.shape[-1] for c in members)
        T = curves[members[0]].T
        ln = np.stack([np.broadcast_to(curves[c].ln, (len(T), wide)) for c in members])
        groups.append((np.array(members, dtype=np.int64), Curve(T, _bounded(ln))))
    return Bundle(tuple(groups), (len(curves), draws))


def read(curves: Bundle, T: Array | float) -> Array:
    """Logarithms of the curves of a bundle, (C, N), kept within what an exponential can hold."""
    ln: Array = np.empty(curves.shape)
    for members, curve in curves.groups:
        ln[members] = ln_at(curve, T)
    return _bounded(ln)


def _bounded(ln: Array) -> Array:
    return np.minimum(np.maximum(ln, -LN_MOST), LN_MOST)


@dataclass(frozen=True, slots=True)
class Laws:
    """The curves of a bath, put together.

    Parameters
    ----------
    bath : Bath
    linear_k, linear_g, row_k, row_g : Bundle
        ln K and ln conductance of linear carriers and rows; 0 stands for no resistance.
    held, open_rows : bool arrays
        Linear carriers without resistance on the contact side; rows without one.
    """

    bath: Bath
    linear_k: Bundle
    linear_g: Bundle
    held: Flags
    row_k: Bundle
    row_g: Bundle
    open_rows: Flags


def laws(bath: Bath) -> Laws:
    """Put the curves of a bath together."""
    flat = Curve(np.ones(1), np.zeros((1, 1)))
    linear, n = [carrier for _, _, carrier in bath.linear], bath.draws
    return Laws(
        bath,
        bundle([c.ln_k for c in linear], n),
        bundle([c.conductance or flat for c in linear], n),
        np.array([c.conductance is None for c in linear], dtype=bool),
        bundle([c.ln_k for c in bath.rows], n),
        bundle([c.conductance or flat for c in bath.rows], n),
        np.array([c.conductance is None for c in bath.rows], dtype=bool),
    )


@dataclass(frozen=True, slots=True)
class Rates:
    """Means over a step: exchange (S, I, N), conductances of linear carriers, resistances of rows (C, N)."""

    m: Array
    linear: Array
    resistance: Array


def rates(of: Laws, step: Step, most: Array) -> Rates:
    """Exchange and conductances, averaged over a step.

    Parameters
    ----------
    of : Laws
    step : Step
    most : (I, N) array
        Largest exchange, mol m-2 s-1.
    """
    bath = of.bath
    m: Array = np.zeros((len(bath.exposures), len(bath.reactive), bath.draws))
    linear, rows = np.zeros(of.linear_g.shape), np.zeros(of.row_g.shape)
    for place, weight in ((0.5, 1.0),) if step.hold else GAUSS:
        T = step.T1 + place * (step.T2 - step.T1)
        for s, exposure in enumerate(bath.exposures):
            m[s] += weight * np.exp(_bounded(ln_at(exposure.exchange, T)))
        linear += weight * np.exp(read(of.linear_g, T))
        rows += weight * np.exp(read(of.row_g, T))
    resistance = np.where(of.open_rows[:, None], 0.0, np.minimum(1.0 / rows, MOST_RESISTANCE))
    return Rates(np.minimum(m * bath.density, most), linear, resistance)


def coefficients(of: Laws, mean: Rates, T: Array | float) -> Coefficients:
    """Coefficients of a stage at a temperature, for the piece as if it were a bath."""
    bath, K = of.bath, np.exp(read(of.linear_k, T))
    gk, h = np.zeros_like(mean.m), np.zeros_like(mean.m)
    for c, (s, i, carrier) in enumerate(bath.linear):
        g = HELD * mean.m[s, i] * K[c] if of.held[c] else mean.linear[c]
        gk[s, i] += g / K[c]
        h[s, i] += g * activity_at(carrier, T)
    inverse = 1.0 / (mean.m + gk)
    phi = mean.m * inverse
    weight = bath.reach[:, None] * phi
    activity = np.zeros_like(mean.resistance)
    for c, row in enumerate(bath.rows):
        activity[c] = activity_at(row, T)
    one = np.ones((1, *mean.m.shape[1:]))
    return Coefficients(
        np.concatenate([one, phi]),
        np.concatenate([0.0 * one, inverse]),
        np.concatenate([0.0 * one, h * inverse]),
        weight * h,
        weight * gk,
        np.concatenate([one, weight]),
        read(of.row_k, T),
        activity,
        mean.resistance,
    )


def layer_share(piece: Piece, total: Array) -> Array:
    """Thickness to solve on over half thickness, (I, N), from integral D dt (m2).

    Powers of 1/sqrt(2), so that few matrices carry the layers over to the piece.
    """
    if piece.profile is not None:
        return np.ones(total.shape)
    Fo = total / piece.R**2
    steps_down = np.floor(-2.0 * np.log2(np.minimum(1.0, LAYER * np.sqrt(Fo))))
    thin = np.ones(total.shape, dtype=bool) if piece.shape == "slab" else Fo < FLAT_FO
    return np.where(thin, 2.0 ** (-0.5 * steps_down), 1.0)


@dataclass(frozen=True, slots=True)
class Interior:
    """The modes of every row, and how the piece is seen through them.

    Parameters
    ----------
    modes : Basis
        Of the piece, or of the layer where it is one.
    share : (I, N) array
        Thickness solved on over half thickness.
    factor : (I, N) array
        Rise of the mean content of what is solved on, over that of the piece, and over g.
    """

    modes: modes.Basis
    share: Array
    factor: Array


def interior(piece: Piece, count: int, share: Array) -> Interior:
    """Choose the modes; share of shape (I, N)."""
    whole, layer = modes.basis(piece.shape, count), modes.basis("slab", count)
    flat = share.reshape(1, -1)
    if whole.shape != layer.shape and np.any(share < 1.0):
        thin = flat < 1.0
        mixed = replace(
            whole,
            rate=np.where(thin, layer.rate[:, None], whole.rate[:, None]),
            surface=np.where(thin, layer.surface[:, None], whole.surface[:, None]),
        )
        return Interior(mixed, share, 1.0 / (whole.g * share))
    return Interior(whole, share, 1.0 / (whole.g * share))
