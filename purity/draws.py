"""Keyed random streams: every record and input has its own, so that nothing else moves them.

For each (seed, key, parameter, block) the 128-bit blake2b hash of that text is the key of a Philox
generator. Its 512 raw words give 256 strata in random order with a random place in each::

    u = (stable argsort(first half) + ((second half >> 11) + 1/2) 2^-53) / 256,   z = ndtri(u)

Blocks are the replicates behind every sampling error. More blocks keep the earlier ones.

References
----------
J. K. Salmon et al., Parallel random numbers: as easy as 1, 2, 3, SC11 (2011) (Philox).
M. D. McKay, R. J. Beckman, W. J. Conover, Technometrics 21 (1979) 239 (stratified sampling).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from hashlib import blake2b

import numpy as np
from numpy.typing import NDArray

from purity.scenario import Given

Array = NDArray[np.float64]

#: Half width of a 90 % band in standard deviations, ndtri(0.95).
Z95 = 1.6448536269514722


@dataclass(frozen=True, slots=True)
class Draws:
    """Seed and size of a run.

    Parameters
    ----------
    seed : int
    blocks : int
        Number of blocks; 0 is the nominal run: one draw, every z at 0.
    block : int
        Draws in a block.
    """

    seed: int = 1
    blocks: int = 8
    block: int = 256

    @property
    def n(self) -> int:
        """Number of draws."""
        return self.blocks * self.block if self.blocks else 1

    @staticmethod
    def nominal() -> Draws:
        """One draw in which every input and record has its median."""
        return Draws(0, 0)


@lru_cache(maxsize=4096)
def _uniform(seed: int, key: str, parameter: int, block: int, size: int) -> Array:
    digest = blake2b(f"{seed}\x1f{key}\x1f{parameter}\x1f{block}".encode(), digest_size=16).digest()
    raw = np.random.Philox(key=int.from_bytes(digest, "little")).random_raw(2 * size)
    place = np.empty(size)
    place[:] = np.argsort(raw[:size], kind="stable")
    u = (place + ((raw[size:] >> np.uint64(11)).astype(float) + 0.5) * 2.0**-53) / size
    u.flags.writeable = False
    return u


def uniform(draws: Draws, key: str, parameter: int = 0) -> Array:
    """Draw a stratified uniform variable.

    Parameters
    ----------
    draws : Draws
    key : str
        Quantity of a record or key of an input; a rival record of one quantity keeps its draws.
    parameter : int
        Position among the parameters of the record's law.

    Returns
    -------
    (N,) array
        In (0, 1); 0.5 in the nominal run.
    """
    if not draws.blocks:
        return np.array([0.5])
    return np.concatenate(
        [_uniform(draws.seed, key, parameter, block, draws.block) for block in range(draws.blocks)]
    )


def normal(draws: Draws, key: str, size: int = 1) -> Array:
    """Draw independent standard normal variables.

    Parameters
    ----------
    draws : Draws
    key : str
    size : int
        Number of parameters.

    Returns
    -------
    (size, N) array
    """
    from scipy.special import ndtri

    return np.stack([np.asarray(ndtri(uniform(draws, key, parameter))) for parameter in range(size)])


def pick(draws: Draws, key: str, weights: Sequence[float]) -> NDArray[np.int64]:
    """Choose among rivals with the given weights.

    Returns
    -------
    (N,) int array
        Index into `weights`; the heaviest, first among equals, in the nominal run.
    """
    shares = np.asarray(weights, dtype=float)
    if not draws.blocks:
        return np.array([int(np.argmax(shares))])
    return np.searchsorted(np.cumsum(shares / shares.sum())[:-1], uniform(draws, key), side="right").astype(
        np.int64
    )


def sample(draws: Draws, given: Given) -> Array:
    """Draw one input.

    Parameters
    ----------
    draws : Draws
    given : Given

    Returns
    -------
    (N,) array, or (1,) where the input is exact
        In the unit of the input.
    """
    if given.law == "exact" or not draws.blocks:
        return np.array([given.median])
    if given.law == "uniform":
        return np.asarray(given.low + (given.high - given.low) * uniform(draws, given.key))
    if given.law == "below":
        return np.asarray(given.high * uniform(draws, given.key))
    z = normal(draws, given.key)[0]
    if given.law == "normal":
        return np.asarray(given.median + z * (given.high - given.low) / (2 * Z95))
    return np.asarray(given.median * np.exp(z * np.log(given.high / given.low) / (2 * Z95)))
