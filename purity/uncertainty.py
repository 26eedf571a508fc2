"""From draws to words of chance: bands, chances with their sampling error, differences, drivers.

Only this room looks at the draw axis. The blocks of a run are its replicates: an estimate comes from
the pooled draws, its error from the spread of the blocks, half width t_{0.975, R-1} s / sqrt(R).

References
----------
A. B. Owen, Monte Carlo theory, methods and examples (2013), ch. 10 (replicates of stratified samples).
J. A. Hanley, A. Lippman-Hand, J. Am. Med. Assoc. 249 (1983) 1743 (nothing seen in n: at most 3/n).
A. Saltelli et al., Global Sensitivity Analysis: The Primer (2008), ch. 1 (regression coefficients).
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from purity.result import Band

Array = NDArray[np.float64]

#: Points of a band.
POINTS = (0.05, 0.5, 0.95)


@dataclass(frozen=True, slots=True)
class Drivers:
    """What the spread of an output comes from.

    Parameters
    ----------
    shares : mapping of str to float
        Share of the variance of ln output that each input explains, largest first.
    errors : mapping of str to float
        95 % half width of each share.
    explained : float
        Sum of the shares: below about 0.7 the output is far from a product of powers of its inputs
        and the shares are a rough guide.
    """

    shares: Mapping[str, float]
    errors: Mapping[str, float]
    explained: float


def band(values: Array) -> Band:
    """Return the 5 %, 50 % and 95 % points of one quantity.

    Parameters
    ----------
    values : (N,) array

    Returns
    -------
    Band
        In the unit of `values`.

    Raises
    ------
    ValueError
        If a value is not finite.
    """
    low, median, high = bands(np.atleast_1d(values))
    return Band(float(low), float(median), float(high))


def bands(values: Array) -> Array:
    """Return the 5 %, 50 % and 95 % points over the last axis.

    Parameters
    ----------
    values : (..., N) array

    Returns
    -------
    (3, ...) array
    """
    return np.asarray(np.quantile(values, POINTS, axis=-1))


def chance(values: Array, limit: float, blocks: int) -> tuple[float, float]:
    """Return the chance of passing a limit and its sampling error.

    Parameters
    ----------
    values : (N,) array
        Contents, any unit.
    limit : float
        In the same unit; a content equal to it is within it.
    blocks : int
        Number of blocks that `values` is made of, in order.

    Returns
    -------
    chance, error : float
        Share of draws above the limit; 95 % half width, never below 3/N.
    """
    return chance_of(np.asarray(values) > limit, blocks)


def chance_of(event: NDArray[np.bool_], blocks: int) -> tuple[float, float]:
    """Return the chance of an event and its sampling error.

    Parameters
    ----------
    event : (N,) bool array
    blocks : int

    Returns
    -------
    chance, error : float
        As in :func:`chance`.
    """
    values = np.asarray(event, dtype=float)
    shares = _replicates(values, blocks, lambda part: part.mean(axis=-1))
    return float(values.mean()), max(_half_width(shares), _least(values, blocks))


def difference(a: Array, b: Array, blocks: int) -> tuple[float, float]:
    """Return the mean difference of two quantities on shared draws and its sampling error.

    Parameters
    ----------
    a, b : (N,) arrays
        Draw j of one belongs to draw j of the other (bool counts as 0 and 1).
    blocks : int

    Returns
    -------
    difference, error : float
        Of a - b; the error is 0 only if a - b is the same in every block.
    """
    apart = np.asarray(a, dtype=float) - np.asarray(b, dtype=float)
    return float(np.mean(apart)), _half_width(_replicates(apart, blocks, lambda part: part.mean(axis=-1)))


def median_difference(a: Array, b: Array, blocks: int) -> tuple[float, float]:
    """Return the difference of two medians on shared draws and its sampling error.

    Parameters
    ----------
    a, b : (N,) arrays
    blocks : int

    Returns
    -------
    difference, error : float
        Of median a - median b.
    """
    medians = [
        _replicates(np.asarray(v, dtype=float), blocks, lambda p: np.median(p, axis=-1)) for v in (a, b)
    ]
    return float(np.median(a) - np.median(b)), _half_width(medians[0] - medians[1])


def _replicates(values: Array, blocks: int, estimate: Callable[[Array], Array]) -> Array:
    if blocks < 1 or len(values) % blocks:
        return np.atleast_1d(estimate(values))
    return estimate(values.reshape(blocks, -1))


def _half_width(replicates: Array) -> float:
    from scipy.special import stdtrit

    count = len(replicates)
    if count < 2:
        return 0.0
    return float(stdtrit(count - 1, 0.975) * replicates.std(ddof=1) / np.sqrt(count))


def _least(values: Array, blocks: int) -> float:
    """Error that a count cannot be below: 3/N, or the binomial one where there are no replicates."""
    n = len(values)
    alone = 1.96 * float(np.std(values)) / n**0.5 if blocks < 2 else 0.0
    return max(3 / n, alone) if n > 1 else 1.0


def drivers(inputs: Mapping[str, Array], output: Array) -> Drivers:
    """Say which inputs the spread of an output hangs on.

    Squared standardised regression coefficients of ln output (of the output itself where it is not
    positive throughout) on independent inputs, less the square of their standard error. With more inputs
    than a quarter of the draws, squared correlations take their place.

    Parameters
    ----------
    inputs : mapping of str to (N,) array
        Standard normal or uniform variables, independent of each other; constant ones get share 0.
    output : (N,) array

    Returns
    -------
    Drivers

    References
    ----------
    A. Saltelli et al., Global Sensitivity Analysis: The Primer (2008), ch. 1.
    """
    names = [name for name, z in inputs.items() if np.size(z) > 1 and np.ptp(z) > 0]
    y = np.log(output) if np.all(output > 0) else np.asarray(output, dtype=float)
    total = float(np.var(y))
    if not names or total <= 1e-24 * max(1.0, float(np.mean(y)) ** 2):
        return Drivers(dict.fromkeys(inputs, 0.0), dict.fromkeys(inputs, 0.0), 0.0)
    z = np.stack([(inputs[name] - np.mean(inputs[name])) / np.std(inputs[name]) for name in names])
    slope, error = _slopes(z, (y - y.mean()) / total**0.5)
    share = np.maximum(slope**2 - error**2, 0.0)
    width = 1.96 * (2 * np.abs(slope) * error + error**2)
    order = np.argsort(-share, kind="stable")
    quiet = [name for name in inputs if name not in set(names)]
    return Drivers(
        {names[j]: float(share[j]) for j in order} | dict.fromkeys(quiet, 0.0),
        {names[j]: float(width[j]) for j in order} | dict.fromkeys(quiet, 0.0),
        float(share.sum()),
    )


def _slopes(z: Array, y: Array) -> tuple[Array, Array]:
    """Standardised slopes (P,) and their standard errors from inputs (P, N) and output (N,)."""
    count, n = z.shape
    if count > n / 4:
        slope = z @ y / n
        return slope, np.asarray(np.sqrt(np.maximum(1 - slope**2, 0.0) / max(n - 2, 1)))
    slope = np.asarray(np.linalg.lstsq(z.T, y, rcond=None)[0])
    left = y - slope @ z
    variance = float(left @ left) / max(n - count - 1, 1)
    return np.asarray(slope), np.asarray(np.sqrt(variance * np.diag(np.linalg.pinv(z @ z.T))))


def assumed_share(found: Drivers, assumed: Collection[str]) -> float:
    """Return the part of the explained spread that comes from assumed, not given, inputs (0 to 1)."""
    total = sum(found.shares.values())
    return sum(share for name, share in found.shares.items() if name in assumed) / total if total else 0.0
