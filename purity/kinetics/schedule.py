"""Temperature over time."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from purity.errors import OutOfRangeError

Array = NDArray[np.float64]

#: A segment whose ends differ by less than this (K) is a hold.
HOLD: float = 1e-3


@dataclass(frozen=True, slots=True)
class Schedule:
    """Knots of time (s) and temperature (K), linear in between; shapes (K,) or (K, N)."""

    time: Array
    T: Array


@dataclass(frozen=True, slots=True)
class Segment:
    """A hold or a linear ramp; each value of shape () or (N,).

    Parameters
    ----------
    start, duration : array
        s.
    T1, T2 : array
        Temperatures at the ends, K.
    """

    start: Array
    duration: Array
    T1: Array
    T2: Array

    @property
    def hold(self) -> bool:
        """One temperature in every draw."""
        return bool(np.all(np.abs(self.T2 - self.T1) < HOLD))


def hold(T: Array | float, duration: Array | float) -> Schedule:
    """One temperature (K) for a time (s); scalars or (N,) arrays."""
    T, duration = np.asarray(T, dtype=float), np.asarray(duration, dtype=float)
    time: Array = np.stack([np.zeros_like(duration), duration])
    return Schedule(time, np.stack([T, T]))


def check(schedule: Schedule) -> None:
    """Refuse a schedule that no furnace can follow.

    Raises
    ------
    OutOfRangeError
        Fewer than two knots, time that runs back, or a temperature that is not positive.
    """
    time, T = np.asarray(schedule.time), np.asarray(schedule.T)
    if time.shape[0] < 2 or T.shape[0] != time.shape[0]:
        raise OutOfRangeError("a temperature profile needs at least two points, each with a time")
    if not (np.all(np.isfinite(time)) and np.all(np.isfinite(T))):
        raise OutOfRangeError("a temperature profile holds a value that is not a number")
    if np.any(np.diff(time, axis=0) < 0):
        raise OutOfRangeError("the times of a temperature profile must not run back")
    if np.any(T <= 0):
        raise OutOfRangeError("temperatures of a profile must lie above absolute zero")


def segments(schedule: Schedule) -> tuple[Segment, ...]:
    """Holds and ramps in order; those that last no time in every draw are left out."""
    check(schedule)
    time, T = np.asarray(schedule.time, dtype=float), np.asarray(schedule.T, dtype=float)
    parts = (Segment(time[k], time[k + 1] - time[k], T[k], T[k + 1]) for k in range(time.shape[0] - 1))
    return tuple(part for part in parts if np.any(part.duration > 0))


def duration(schedule: Schedule) -> Array:
    """Length of a schedule, s; shape () or (N,)."""
    return np.asarray(schedule.time[-1] - schedule.time[0])


def T_at(schedule: Schedule, time: Array | float) -> Array:
    """Temperature (K) at a time (s): scalar, or (N,) when the schedule differs between draws.

    Before the first knot and after the last the end temperatures hold.
    """
    time = np.asarray(time, dtype=float)
    if schedule.time.ndim == 1 and schedule.T.ndim == 1:
        return np.asarray(np.interp(time, schedule.time, schedule.T))
    value: Array = np.asarray(schedule.T[0], dtype=float) + 0.0 * time
    for part in segments(schedule):
        length = np.where(part.duration > 0, part.duration, 1.0)
        share = np.clip((time - part.start) / length, 0.0, 1.0)
        share = np.where(part.duration > 0, share, 1.0)
        value = np.where(time >= part.start, part.T1 + share * (part.T2 - part.T1), value)
    return value


def split_at(schedule: Schedule, temperatures: Iterable[float]) -> Schedule:
    """Add knots where the schedule passes given temperatures (phase changes, limits of a record).

    Parameters
    ----------
    schedule : Schedule
    temperatures : iterable of float
        K.

    Returns
    -------
    Schedule
        The same course. A draw that does not pass a temperature gets a segment of no length.
    """
    check(schedule)
    time, T = np.asarray(schedule.time, dtype=float), np.asarray(schedule.T, dtype=float)
    cuts = sorted(set(temperatures))
    times, values = [time[0]], [T[0]]
    for k in range(time.shape[0] - 1):
        rise = T[k + 1] - T[k]
        for rising, falling in zip(cuts, reversed(cuts), strict=True):
            cut: Array = np.where(rise > 0, rising, falling)
            if not np.any((cut - T[k]) * (cut - T[k + 1]) < 0):
                continue
            share = np.clip((cut - T[k]) / np.where(rise == 0, 1.0, rise), 0.0, 1.0)
            times.append(time[k] + share * (time[k + 1] - time[k]))
            inside = (share > 0) & (share < 1)
            values.append(np.where(inside, cut, np.where(share < 1, T[k], T[k + 1])))
        times.append(time[k + 1])
        values.append(T[k + 1])
    return Schedule(_stack(times), _stack(values))


def fractions(segment: Segment, *, hold: int = 16, ramp: int = 24, first: float = 0.03) -> Array:
    """Where the steps of a segment end, as fractions of its time.

    Parameters
    ----------
    segment : Segment
    hold, ramp : int
        Number of steps. Those of a hold grow geometrically; those of a ramp are equal in ln T, so that
        the cold end, where equilibria change fastest, is not passed in one.
    first : float
        First step of a hold as a fraction of it.

    Returns
    -------
    (n + 1,) array
        0 ... 1.
    """
    if segment.hold:
        return geometric(hold, first)
    T1, T2 = float(np.mean(segment.T1)), float(np.mean(segment.T2))
    even = np.linspace(0.0, 1.0, ramp + 1)
    if abs(T2 - T1) < HOLD:
        return even
    return np.asarray(np.expm1(even * np.log(T2 / T1)) / (T2 / T1 - 1.0))


def geometric(n: int, first: float) -> Array:
    """N steps from 0 to 1 that grow by a constant ratio from a first step; equal where none fits."""
    if n < 2 or n > 1000 or first * n >= 1.0:
        return np.linspace(0.0, 1.0, max(n, 1) + 1)
    low, high = 1.0, 1.0
    while _length(high, n) * first < 1.0:
        low, high = high, 2.0 * high
    for _ in range(200):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if _length(middle, n) * first < 1.0 else (low, middle)
    edges = np.concatenate([[0.0], np.cumsum(high ** np.arange(n))])
    return np.asarray(edges / edges[-1])


def _length(ratio: float, n: int) -> float:
    return float(n) if ratio == 1.0 else (ratio**n - 1.0) / (ratio - 1.0)


def _stack(rows: list[Array]) -> Array:
    return np.stack(np.broadcast_arrays(*rows))


def first_crossing(times: Array, contents: Array, limit: Array | float) -> Array:
    """Time at which a content first passes a limit, by a cubic through the recorded points.

    Parameters
    ----------
    times : (K,) or (K, N) array
        s.
    contents : (K, N) array
    limit : (N,) array

    Returns
    -------
    (N,) array
        s; 0 where the start is at or over the limit, inf where it is never passed.
    """
    times = np.broadcast_to(times if times.ndim == 2 else times[:, None], contents.shape)
    limit = np.broadcast_to(limit, contents.shape[1:])
    over = contents >= limit
    k, draws = np.maximum(np.argmax(over, axis=0), 1), np.arange(contents.shape[1])
    slopes = _slopes(times, contents)
    t0, t1, c0, c1 = times[k - 1, draws], times[k, draws], contents[k - 1, draws], contents[k, draws]
    width = t1 - t0
    m0, m1 = slopes[k - 1, draws] * width, slopes[k, draws] * width
    low, high = np.zeros(len(draws)), np.ones(len(draws))
    for _ in range(50):
        s = 0.5 * (low + high)
        value = c0 + s * (m0 + s * (3.0 * (c1 - c0) - 2.0 * m0 - m1 + s * (m0 + m1 - 2.0 * (c1 - c0))))
        low, high = np.where(value < limit, s, low), np.where(value < limit, high, s)
    found = np.where(over.any(axis=0), t0 + high * width, np.inf)
    return np.where(over[0], 0.0, found)


def _slopes(t: Array, c: Array) -> Array:
    """Slopes at the points: of the parabola through three, kept from overshooting."""
    h = np.where(np.diff(t, axis=0) > 0, np.diff(t, axis=0), 1.0)
    secant = np.diff(c, axis=0) / h
    if len(secant) < 2:
        return np.concatenate([secant, secant[-1:]])
    inner = (h[1:] * secant[:-1] + h[:-1] * secant[1:]) / (h[1:] + h[:-1])
    least = np.minimum(np.abs(secant[:-1]), np.abs(secant[1:]))
    same = secant[:-1] * secant[1:] > 0
    inner = np.where(same, np.sign(inner) * np.minimum(np.abs(inner), 3.0 * least), 0.0)
    return np.concatenate([2.0 * secant[:1] - inner[:1], inner, 2.0 * secant[-1:] - inner[-1:]])
