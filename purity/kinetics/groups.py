"""Which impurities hang together in a step, and how a contact looks to some of them.

A compound M_a O_b of a wall follows where it cannot change the bath's oxygen by more than LIGHT: it takes
its ceiling from the oxygen that the bath has without it, x_M* = (K a / x_O^b)^(1/a), and gives its own
oxygen to the ledger after. That keeps the coupled problem as small as its gases, and is right to first
order in what it adds. Where it weighs more it stays in the coupled bath.
"""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping, Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from purity.constants import DILUTE
from purity.kinetics.exposure import Carrier, Curve, Exposure, Skin, activity_at, at, ln_at

Array = NDArray[np.float64]
Index = NDArray[np.int64]

#: Share of a content below which what a wall compound adds to it does not act back on the bath.
LIGHT = 0.1
#: Share of every content below which an inventory is left out.
SPARE = 1e-3


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
    """Return the exposure as some of the elements see it: only carriers that hold no others."""
    exchange = Curve(exposure.exchange.T, exposure.exchange.ln[index])
    members = set(index.tolist())
    own = [c for c in exposure.carriers if c.nu.any() and set(np.flatnonzero(c.nu).tolist()) <= members]
    carriers = tuple(replace(carrier, nu=carrier.nu[index]) for carrier in own)
    films = tuple(replace(film, nu=film.nu[index]) for film in exposure.films if film.nu[index].any())
    return replace(exposure, exchange=exchange, carriers=carriers, skins=(), films=films)


def may_follow(carrier: Carrier) -> bool:
    """Return whether a carrier is a solid compound of several impurities, main or trace."""
    return carrier.conductance is None and _count(carrier) > 1


def _count(carrier: Carrier) -> int:
    return int(np.count_nonzero(carrier.nu))


def follower(carrier: Carrier, leaders: Collection[int]) -> int | None:
    """Return the one element of a compound that nothing else in the coupled bath holds.

    Parameters
    ----------
    carrier : Carrier
    leaders : collection of int
        Elements that the other carriers tie together.

    Returns
    -------
    int or None
        None where the compound has to stay in the coupled bath.
    """
    if not may_follow(carrier):
        return None
    own = [int(i) for i in np.flatnonzero(carrier.nu) if int(i) not in leaders]
    return own[0] if len(own) == 1 else None


def heavy(
    carrier: Carrier, element: int, exposure: Exposure, rho_per_mol: Array, x: Array, time: Array
) -> NDArray[np.bool_]:
    """Return the draws in which a wall compound could change its other elements by more than LIGHT.

    Parameters
    ----------
    carrier : Carrier
        Without inventory; one with an inventory is bounded by it and never heavy.
    element : int
        Its following element.
    exposure : Exposure
        The contact it sits in.
    rho_per_mol : (N,) array
        Molar density of the host over its amount, 1/m3.
    x : (I, N) array
        Lowest contents of the leaders.
    time : (N,) array
        s.

    Returns
    -------
    (N,) bool array
    """
    n = x.shape[-1]
    if carrier.inventory is not None:
        return np.zeros(n, dtype=bool)
    others = [int(j) for j in np.flatnonzero(carrier.nu) if int(j) != element]
    top = follow(carrier, element, x, np.zeros(n)).ln_k.ln.max(axis=0)
    rate = np.exp(exposure.exchange.ln[element].max(axis=0)) * exposure.area * rho_per_mol * time
    gained = np.exp(top) * np.minimum(1.0, rate)
    moved = [carrier.nu[j] / carrier.nu[element] * gained > LIGHT * x[j] for j in others]
    return np.asarray(np.any(np.stack(np.broadcast_arrays(*moved)), axis=0))


def follow(carrier: Carrier, element: int, x: Array, least: Array) -> Carrier:
    """Return a trace as its own element sees it, the others held at given contents.

    Parameters
    ----------
    carrier : Carrier
    element : int
    x : (I, N) array
        Contents of the bath at which the ceiling is taken: the lowest of the step, where the ceiling of
        the trace is highest.
    least : (N,) array
        Content of the element below which the trace is no sink: a trace gives and does not take.

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
    ln_ceiling = np.maximum(ln_ceiling, np.log(np.maximum(least, 1e-30)))
    nu = np.zeros_like(carrier.nu)
    nu[element] = 1.0
    inventory = None if carrier.inventory is None else carrier.inventory * own
    curve = Curve(carrier.ln_k.T, ln_ceiling)
    return replace(carrier, nu=nu, ln_k=curve, activity=np.ones(1), inventory=inventory)


def turnover(
    carrier: Carrier, area: Array, amount: Array, x: Array, held: Array, time: Array, T: Array
) -> Array:
    """Return the share of each content that a gas could bring or carry off in a time.

    Parameters
    ----------
    carrier : Carrier
        With a conductance.
    area, amount, time, T : (N,) arrays
        m2, mol of host, s, K.
    x, held : (I, N) arrays
        Dissolved and whole contents.

    Returns
    -------
    (I,) array
        Middle of the draws.
    """
    if carrier.conductance is None:
        return np.where(carrier.nu > 0, np.inf, 0.0)
    ln_a = carrier.nu @ np.log(np.maximum(x, 1e-30)) - ln_at(carrier.ln_k, T)
    reach = np.exp(np.minimum(ln_a, 600.0)) + activity_at(carrier, T)
    rate = at(carrier.conductance, T) * reach * area * time / amount
    share = carrier.nu[:, np.newaxis] * rate / np.maximum(held, 1e-30)
    return np.asarray(np.median(share, axis=-1))


def idle(shares: Mapping[str, Array], least: float, floor: float) -> set[str]:
    """Return the gases that move less of every element than a share of what another gas moves of it.

    Parameters
    ----------
    shares : mapping of gas to (I,) array
        From :func:`turnover`.
    least : float
        Share of what the busiest gas moves.
    floor : float
        Share of a content that counts as idle in any case.
    """
    most = np.max(np.stack(list(shares.values())), axis=0) if shares else np.zeros(0)
    return {name for name, share in shares.items() if np.all(share < np.maximum(least * most, floor))}


def spare(carrier: Carrier, amount: Array, held: Array) -> bool:
    """Return whether all that a contact holds is next to nothing beside what the metal holds (SPARE)."""
    if carrier.inventory is None or not np.any(carrier.inventory > 0):
        return False
    share = carrier.nu[:, np.newaxis] * carrier.inventory / (amount * np.maximum(held, 1e-30))
    return bool(np.median(share, axis=-1).max() < SPARE)


def ties(carrier: Carrier) -> bool:
    """Return whether a carrier is a gas that ties several elements together."""
    return carrier.conductance is not None and _count(carrier) > 1
