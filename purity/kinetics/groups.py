"""Which impurities hang together in a step, and how a contact looks to some of them."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from purity.kinetics.exposure import Carrier, Curve, Exposure, Skin

Array = NDArray[np.float64]
Index = NDArray[np.int64]


def tied(exposures: Sequence[Exposure], skins: Iterable[Skin], count: int) -> list[Index]:
    """Group elements that some carrier or skin ties together.

    Parameters
    ----------
    exposures : sequence of Exposure
    skins : iterable of Skin
    count : int
        Number of elements.

    Returns
    -------
    list of int arrays
        Indices, each element in one group; groups without any carrier are left out.
    """
    parent = list(range(count))
    touched: set[int] = set()

    def root(i: int) -> int:
        while parent[i] != i:
            i = parent[i]
        return i

    units: list[Carrier | Skin] = [c for e in exposures for c in e.carriers]
    for unit in [*units, *skins]:
        members = np.flatnonzero(unit.nu).tolist()
        touched |= set(members)
        for other in members[1:]:
            parent[root(other)] = root(members[0])
    touched |= {int(i) for e in exposures for film in e.films for i in np.flatnonzero(film.nu)}
    groups: dict[int, list[int]] = {}
    for i in sorted(touched):
        groups.setdefault(root(i), []).append(i)
    return [np.array(members) for members in groups.values()]


def restrict(exposure: Exposure, index: Index) -> Exposure:
    """Return the exposure as some of the elements see it."""
    exchange = Curve(exposure.exchange.T, exposure.exchange.ln[index])
    carriers = tuple(
        replace(carrier, nu=carrier.nu[index]) for carrier in exposure.carriers if carrier.nu[index].any()
    )
    films = tuple(replace(film, nu=film.nu[index]) for film in exposure.films if film.nu[index].any())
    return replace(exposure, exchange=exchange, carriers=carriers, skins=(), films=films)
