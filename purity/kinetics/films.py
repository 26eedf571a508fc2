"""Films that grow on a piece: thickness carried through any chain of stages.

Every law is autonomous, its rate depends on the thickness alone, so a stage starts from the thickness that
the one before left. Parameters, in their order, SI:

=====================  ===========================================  ==========================
limiting               x = p1                                       p1 m
logarithmic            x = p1 ln(1 + p2 t)                          p1 m, p2 1/s
inverse-logarithmic    1/x = p1 - p2 ln(t / p3)                     p1, p2 1/m, p3 s
field-driven           dx/dt = p1 exp(p2 / x)                       p1 m/s, p2 m
parabolic              d(x^2)/dt = p1                               p1 m2/s
linear-parabolic       x^2 / p1 + x / p2 = t                        p1 m2/s, p2 m/s
=====================  ===========================================  ==========================

Laws: Tammann 1920 (parabolic, logarithmic), Deal and Grove 1965 (linear-parabolic), Cabrera and Mott 1949
(field-driven; inverse-logarithmic is its usual short form). The two laws driven by a field end at the
thickness where the exponent is one (1/p2, p2): beyond it they run away, and the film is held there.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from purity.errors import OutOfRangeError
from purity.kinetics.arrhenius import curve_integral
from purity.kinetics.exposure import Curve, Film, at
from purity.kinetics.schedule import Schedule, Segment, fractions, segments

Array = NDArray[np.float64]
Law = Callable[[Array, tuple[Array, ...], Array], Array]

#: Steps of a ramp.
RAMP = 24
#: Levels of the continued fraction of the exponential integral; exact to rounding above 1/2.
LEVELS = 60
PASSES = 30


def limiting(x: Array, parameters: tuple[Array, ...], time: Array) -> Array:
    """A film that is soon complete."""
    return np.where(time > 0, np.maximum(x, parameters[0]), x)


def logarithmic(x: Array, parameters: tuple[Array, ...], time: Array) -> Array:
    """Growth at a rate that falls by e with every p1 of thickness."""
    p1, p2 = parameters
    with np.errstate(divide="ignore"):
        grown = p1 * np.logaddexp(x / p1, np.log(p2 * time))
    return np.where(time > 0, grown, x)


def inverse_logarithmic(x: Array, parameters: tuple[Array, ...], time: Array) -> Array:
    """The short form of field-driven growth, as measurements are usually given."""
    p1, p2, p3 = parameters
    with np.errstate(divide="ignore"):
        ln_age = np.where(x > 0, (p1 - 1.0 / np.where(x > 0, x, 1.0)) / p2, -np.inf)
        ln_age = np.logaddexp(ln_age, np.log(time / p3))
    inverse = np.maximum(p1 - p2 * ln_age, p2)
    return np.where(time > 0, np.maximum(x, 1.0 / np.where(np.isfinite(inverse), inverse, 1.0)), x)


def field_driven(x: Array, parameters: tuple[Array, ...], time: Array) -> Array:
    """Growth driven by a fixed voltage across the film: u t = x E2(p2 / x).

    Stages add in u t; the inverse is Newton's on w = p2 / x.
    """
    u, x1 = parameters
    x, u, x1, time = np.broadcast_arrays(x, u, x1, time)
    safe = np.where(x > 0, x, x1)
    with np.errstate(divide="ignore"):
        before = np.where(x > 0, _ln_passed(x1 / safe, x1), -np.inf)
        goal = np.logaddexp(before, np.log(u * time))
    end = _ln_passed(np.ones_like(x1), x1)
    inside = np.isfinite(goal) & (goal < end)
    aim = np.where(inside, goal, end)
    w = np.maximum(1.0, np.log(x1) - aim)
    for _ in range(PASSES):
        scaled = _scaled_E2(w)
        step = (_ln_passed(w, x1) - aim) * w * scaled
        w = np.maximum(w + step, 1.0)
        if np.max(np.abs(step) / w, initial=0.0) < 1e-14:
            break
    grown = np.where(np.isfinite(goal), x1 / w, 0.0)
    return np.where(time > 0, np.maximum(x, grown), x)


def parabolic(x: Array, parameters: tuple[Array, ...], time: Array) -> Array:
    """Growth by diffusion through the film."""
    return np.sqrt(x**2 + parameters[0] * time)


def linear_parabolic(x: Array, parameters: tuple[Array, ...], time: Array) -> Array:
    """Growth by a reaction and diffusion through the film in series."""
    p1, p2 = parameters
    half = p1 / (2.0 * p2)
    passed = x**2 + 2.0 * half * x + p1 * time
    return np.asarray(passed / np.maximum(half + np.sqrt(half**2 + passed), 1e-300))


LAWS: Mapping[str, Law] = {
    "limiting": limiting,
    "logarithmic": logarithmic,
    "inverse-logarithmic": inverse_logarithmic,
    "field-driven": field_driven,
    "parabolic": parabolic,
    "linear-parabolic": linear_parabolic,
}


def _scaled_E2(w: Array) -> Array:
    """e^w E2(w) for w > 1/2, by its continued fraction (Abramowitz and Stegun 5.1.22)."""
    tail: Array = np.zeros(np.shape(w))
    for k in range(LEVELS, 0, -1):
        tail = k * (k + 1.0) / (w + 2.0 + 2.0 * k - tail)
    return np.asarray(1.0 / (w + 2.0 - tail))


def _ln_passed(w: Array, x1: Array) -> Array:
    """Logarithm of u t at which the film is x1 / w thick."""
    return np.asarray(np.log(x1) - np.log(w) - w + np.log(_scaled_E2(w)))


def grow(law: str, parameters: Sequence[Curve], x0: Array | float, schedule: Schedule) -> Array:
    """Thickness after a schedule.

    Parameters
    ----------
    law : str
        A name of the table above.
    parameters : sequence of Curve
        In the order of the law, SI; ``ln`` of shape (K, N).
    x0 : (N,) array
        Thickness at the start, m.
    schedule : Schedule

    Returns
    -------
    (N,) array
        m.

    Raises
    ------
    OutOfRangeError
        An unknown law.
    """
    if law not in LAWS:
        raise OutOfRangeError(f"film law {law!r} is not one of: {', '.join(LAWS)}")
    x = np.atleast_1d(np.asarray(x0, dtype=float))
    for segment in segments(schedule):
        edges = np.array([0.0, 1.0]) if segment.hold else fractions(segment, ramp=RAMP)
        for start, end in pairwise(edges.tolist()):
            x = _step(law, parameters, x, segment, start, end)
    return x


def _step(
    law: str, parameters: Sequence[Curve], x: Array, segment: Segment, start: float, end: float
) -> Array:
    rise = segment.T2 - segment.T1
    T1, T2 = segment.T1 + start * rise, segment.T1 + end * rise
    time = np.atleast_1d(np.asarray(segment.duration * (end - start), dtype=float))
    if law == "parabolic":
        passed = curve_integral(parameters[0], T1, T2, time)
        return LAWS[law](x, (passed,), np.ones(1))
    middle = np.sqrt(T1 * T2)
    return LAWS[law](x, tuple(np.atleast_1d(at(p, middle)) for p in parameters), time)


def thickness(film: Film, x0: Array | float, seconds: Array | float, T: float) -> Array:
    """Thickness of a film after a time (s) at one temperature (K), from x0 (m)."""
    time = np.atleast_1d(np.asarray(seconds, dtype=float))
    return grow(
        film.law, film.parameters, x0, Schedule(np.stack([0.0 * time, time]), np.full((2, len(time)), T))
    )


def content(film: Film, x: Array, area: Array | float, amount: Array | float) -> Array:
    """What a film holds of each impurity.

    Parameters
    ----------
    film : Film
    x : (N,) array
        Thickness, m.
    area : array
        Of all pieces, m2.
    amount : array
        Host in the lot, mol.

    Returns
    -------
    (I, N) array
        mol per mol of host.
    """
    return np.asarray(film.nu[:, None] * (np.asarray(x) * area / amount))
