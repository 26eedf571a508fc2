"""Which impurities hang together in a step, and how a contact looks to some of them.

Leached traces follow: a trace compound M_a O_b of a small inventory takes its ceiling from the oxygen
that the bath has without it, x_M* = (K a / x_O^b)^(1/a), and gives its own oxygen to the ledger after.
That keeps the coupled problem as small as its walls and gases. It is right to first order in the
inventory over the bath's own content of the shared element.
"""

from __future__ import annotations

from collections.abc import Collection, Iterable, Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from purity.constants import DILUTE
from purity.kinetics.exposure import Carrier, Curve, Exposure, Skin, activity_at, ln_at

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


def leached(carrier: Carrier) -> bool:
    """Return whether a carrier is a trace compound: several elements and an inventory."""
    return carrier.inventory is not None and bool(np.any(carrier.inventory > 0)) and _count(carrier) > 1


def _count(carrier: Carrier) -> int:
    return int(np.count_nonzero(carrier.nu))


def follower(carrier: Carrier, leaders: Collection[int]) -> int | None:
    """Return the one element of a trace that nothing else in the coupled bath holds.

    Parameters
    ----------
    carrier : Carrier
    leaders : collection of int
        Elements that the other carriers tie together.

    Returns
    -------
    int or None
        None where the trace has to stay in the coupled bath.
    """
    if not leached(carrier):
        return None
    own = [int(i) for i in np.flatnonzero(carrier.nu) if int(i) not in leaders]
    return own[0] if len(own) == 1 else None


def follow(carrier: Carrier, element: int, x: Array) -> Carrier:
    """Return a trace as its own element sees it, the others held at given contents.

    Parameters
    ----------
    carrier : Carrier
    element : int
    x : (I, N) array
        Contents of the bath at which the ceiling is taken: the lowest of the step, where the ceiling of
        the trace is highest.

    Returns
    -------
    Carrier
        One atom of the element a unit, with a ceiling inside the dilute range.
    """
    own = carrier.nu[element]
    others = carrier.nu.copy()
    others[element] = 0.0
    rest = others @ np.log(np.maximum(x, 1e-30))
    ln_a = np.log(np.maximum(np.stack([activity_at(carrier, T) for T in carrier.ln_k.T]), 1e-300))
    ln_ceiling = np.minimum((carrier.ln_k.ln + ln_a - rest) / own, np.log(DILUTE))
    nu = np.zeros_like(carrier.nu)
    nu[element] = 1.0
    inventory = None if carrier.inventory is None else carrier.inventory * own
    curve = Curve(carrier.ln_k.T, ln_ceiling)
    return replace(carrier, nu=nu, ln_k=curve, activity=np.ones(1), inventory=inventory)


def loss(carrier: Carrier, area: Array, amount: Array, x: Array, held: Array, time: Array, T: Array) -> float:
    """Return the largest share of a content that a sink would take in a time, were it to last.

    Parameters
    ----------
    carrier : Carrier
        With a conductance.
    area, amount, time, T : (N,) arrays
        m2, mol of host, s, K.
    x, held : (I, N) arrays
        Dissolved and whole contents.
    """
    if carrier.conductance is None:
        return np.inf
    members = np.flatnonzero(carrier.nu)
    ln_a = carrier.nu @ np.log(np.maximum(x, 1e-30)) - ln_at(carrier.ln_k, T)
    rate = np.exp(np.minimum(ln_at(carrier.conductance, T) + ln_a, 600.0)) * area * time / amount
    share = carrier.nu[members, np.newaxis] * rate / np.maximum(held[members], 1e-30)
    return float(share.max())


def sink(carrier: Carrier) -> bool:
    """Return whether a carrier can only carry off, and ties several elements together."""
    gives = bool(
        np.any(np.asarray(carrier.activity.ln if isinstance(carrier.activity, Curve) else carrier.activity))
    )
    return not gives and _count(carrier) > 1
