"""Solutes that follow a bath: linear contacts, finite inventories and one cap, many solutes at once.

A solute that no gas and no main wall compound ties to others sees contacts of constant coefficients,

    dT/dt = sum_c kappa_c (x*_c - x),   x = min(T, cap),

with T its whole content and `cap` the content at which a compound takes the rest out of solution. Each
time step is exact for constant temperature: exponential below the cap, linear above it; a contact gives no
more than its inventory. Solutes and draws are one array, so the cost does not grow with their number of
calls. Steps are those of the bath; the coefficients are taken in their middle.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from purity.kinetics.exposure import Curve, ln_at
from purity.kinetics.schedule import Schedule, fractions, segments

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Channel:
    """One contact as each of F solutes sees it.

    Parameters
    ----------
    metal : Curve
        ln of a_s rho k, 1/s, the metal side; (F, K, N).
    side : Curve
        ln of a_s nu g / K, 1/s, the contact side; very large where it has no resistance; (F, K, N).
    ceiling : Curve
        ln of the content at which the contact stops; very low for a sink; (F, K, N).
    inventory : (F, N) array
        mol per mol of host; infinite without an end.
    """

    metal: Curve
    side: Curve
    ceiling: Curve
    inventory: Array


@dataclass(frozen=True, slots=True)
class Followed:
    """How the solutes went.

    Parameters
    ----------
    x, total : (F, N) arrays
        Dissolved and whole contents at the end, mol per mol of host.
    ledger : (C, F, N) array
        Gained through each channel.
    times : (K,) or (K, N) array
        s.
    history : (F, K, N) array or None
        Whole contents.
    sated : (C, F, N) array
        Content over ceiling at the end, at most 1; 0 for a sink.
    used : (C, F, N) array
        Share of the inventory taken.
    metal_share : (C, F, N) array
        Share of the metal side in the resistance at the end.
    """

    x: Array
    total: Array
    ledger: Array
    times: Array
    history: Array | None
    sated: Array
    used: Array
    metal_share: Array


def follow_along(
    total: Array,
    channels: Sequence[Channel],
    cap: Curve,
    schedule: Schedule,
    *,
    nodes: int,
    history: bool = False,
) -> Followed:
    """Integrate solutes that do not act on each other.

    Parameters
    ----------
    total : (F, N) array
        Whole contents at the start, mol per mol of host.
    channels : sequence of Channel
    cap : Curve
        ln of the most that stays dissolved, (F, K, N); very large where nothing forms.
    schedule : Schedule
    nodes : int
        Steps a segment.
    history : bool

    Returns
    -------
    Followed
        Ledgers sum to the change of the whole content.
    """
    start = total
    ledger = np.zeros((len(channels), *total.shape))
    size = _stacked([channel.inventory for channel in channels], total.shape)
    rates = _Rates(
        np.zeros_like(ledger), np.zeros_like(ledger), np.zeros_like(ledger), np.full_like(total, np.inf)
    )
    times = [np.asarray(schedule.time[0], dtype=float)]
    record = [total]
    for part in segments(schedule):
        edges = fractions(part, hold=nodes, ramp=nodes)
        for low, high in pairwise(edges):
            if not part.hold or low == 0.0:
                rates = _rates(channels, cap, total.shape, part.T1 + 0.5 * (low + high) * (part.T2 - part.T1))
            left = np.maximum(size - ledger, 0.0)
            gained = _step(total, rates, (high - low) * part.duration, left)
            ledger += gained
            total = total + gained.sum(axis=0)
            times.append(part.start + high * part.duration)
            if history:
                record.append(total)
    total = np.maximum(start + ledger.sum(axis=0), 0.0)
    x = np.minimum(total, rates.cap)
    return Followed(
        x,
        total,
        ledger,
        np.stack(np.broadcast_arrays(*times)),
        np.stack(record, axis=1) if history else None,
        np.clip(x / np.maximum(rates.ceiling, 1e-300), 0.0, 1.0) * (rates.ceiling > 1e-100),
        np.where(np.isfinite(size), ledger / np.maximum(size, 1e-300), 0.0),
        rates.metal_share,
    )


@dataclass(frozen=True, slots=True)
class _Rates:
    kappa: Array
    ceiling: Array
    metal_share: Array
    cap: Array


def _rates(channels: Sequence[Channel], cap: Curve, shape: tuple[int, ...], T: Array) -> _Rates:
    kappa, ceiling, share = [], [], []
    for channel in channels:
        metal, side = np.exp(ln_at(channel.metal, T)), np.exp(ln_at(channel.side, T))
        kappa.append(metal * (side / (metal + side)))
        share.append(side / (metal + side))
        ceiling.append(np.exp(ln_at(channel.ceiling, T)))
    most = np.exp(ln_at(cap, T))
    return _Rates(_stacked(kappa, shape), _stacked(ceiling, shape), _stacked(share, shape), most)


def _stacked(rows: Sequence[Array], shape: tuple[int, ...]) -> Array:
    """One row a channel, (C, F, N); none where nothing touches the metal."""
    return np.stack([np.broadcast_to(row, shape) for row in rows]) if rows else np.zeros((0, *shape))


def _step(total: Array, rates: _Rates, dt: Array, left: Array) -> Array:
    """Gain through each channel in a step, (C, F, N).

    A channel that would give more than it has left gives just that, spread over the step.
    """
    dt = np.asarray(dt)
    open_ended = np.ones_like(left, dtype=bool)
    gained = _free(total, rates, dt, open_ended, left)
    # where one contact runs out the others give more, so that another may run out: no more than each once
    for _ in range(len(left)):
        spent = open_ended & (gained > left)
        if not spent.any():
            break
        open_ended &= ~spent
        gained = _free(total, rates, dt, open_ended, left)
    over = total > rates.cap
    if not over.any():
        return gained
    capped = np.minimum(np.where(open_ended, rates.kappa * (rates.ceiling - rates.cap) * dt, left), left)
    # above the cap less leaves than if all were dissolved, so no content falls below the free course
    short = capped.sum(axis=0) < gained.sum(axis=0)
    return np.where(over & ~short, capped, gained)


def _free(total: Array, rates: _Rates, dt: Array, open_ended: NDArray[np.bool_], left: Array) -> Array:
    """Gain of a content that is all dissolved; channels that are not open-ended give what they have left."""
    kappa = np.where(open_ended, rates.kappa, 0.0)
    supply = np.where(open_ended, 0.0, left / np.maximum(dt, 1e-300)).sum(axis=0)
    whole = kappa.sum(axis=0)
    source = (kappa * rates.ceiling).sum(axis=0) + supply
    rest = source / np.maximum(whole, 1e-300)
    still = whole * dt < 1e-9
    fall = -np.expm1(-whole * dt) / np.maximum(whole, 1e-300)
    # integral of the content over the step; linear where nothing pulls it back
    content = np.where(still, total * dt + 0.5 * source * dt**2, rest * dt + (total - rest) * fall)
    return np.where(open_ended, kappa * (rates.ceiling * dt - content), left)


def shares(followed: Followed) -> tuple[Array, Array, Array, Array]:
    """Return what holds back the channel that moves each solute most.

    Returns
    -------
    channel : (F,) int array
        The channel with the largest middle of its ledger.
    ceiling, inventory, metal : (F,) arrays
        Middle shares of saturation, of exhaustion, and of the metal side in what is left; the contact
        side has the rest.
    """
    moved = np.median(np.abs(followed.ledger), axis=-1)
    channel = np.argmax(moved, axis=0)
    pick = np.arange(moved.shape[1])
    sated = np.median(followed.sated, axis=-1)[channel, pick]
    used = np.clip(np.median(followed.used, axis=-1)[channel, pick], 0.0, 1.0)
    rate = np.clip(1.0 - np.maximum(sated, used), 0.0, 1.0)
    metal = rate * np.median(followed.metal_share, axis=-1)[channel, pick]
    return channel, np.where(sated >= used, sated, 0.0), np.where(used > sated, used, 0.0), metal
