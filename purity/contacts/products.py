"""Compounds that can form in a melt although no wall is made of them, and the skins they make."""

from __future__ import annotations

from collections.abc import Collection, Iterator, Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from purity.constants import DILUTE
from purity.contacts.setting import Setting, dissolution, stoichiometry
from purity.database import Found, Gap
from purity.draws import Draws
from purity.driving_force.pure import atoms
from purity.kinetics.exposure import Carrier, Curve, Skin, ln_at

Array = NDArray[np.float64]

#: ln of nominal saturation, at the highest contents of all draws, below which no draw is looked at.
REACH = 15.0


def watched(setting: Setting) -> dict[str, tuple[Array, float]]:
    """Return nu (I,) and the lowest nominal ln K of each compound that could form in the melt."""
    if not setting.liquid:
        return {}
    seen: dict[str, tuple[Array, float]] = {}
    for formula in _compounds(setting):
        nu = stoichiometry(setting, formula)
        if nu is None or not nu.any():
            continue
        energy = dissolution(setting, formula, "solid", Draws.nominal())
        if not isinstance(energy, Gap):
            seen[formula] = (nu, float(energy.value.min()))
    return seen


def host_compounds(setting: Setting) -> dict[str, tuple[Skin, tuple[Found, ...]]]:
    """Return, for each impurity of a solid, the compound with the host that saturates first."""
    first: dict[int, tuple[float, str]] = {}
    for formula, i, count in _with_host(setting):
        energy = dissolution(setting, formula, "solid", Draws.nominal())
        if not isinstance(energy, Gap):
            top = float(energy.value.max()) / count
            first[i] = min(first.get(i, (np.inf, "")), (top, formula))
    return {formula: skin(setting, formula) for _, formula in first.values()}


def capped(setting: Setting, made: tuple[Carrier, tuple[Found, ...]]) -> tuple[Carrier, tuple[Found, ...]]:
    """Hold a wall compound to what its face can carry once the compounds with the host lie there.

    Where every element of the compound forms one with the host (AlN and AlB2 on boron nitride under
    aluminium) while the metal is still dilute, these cover the face, and the product of contents there
    ends at their saturation.

    Parameters
    ----------
    setting : Setting
    made : (Carrier, records)
        Of a wall under a melt, before.

    Returns
    -------
    (Carrier, records)
        The same where no such set of compounds is lower.
    """
    own, found = made
    held = np.flatnonzero(own.nu)
    if not setting.liquid or len(held) < 2:
        return made
    covers = [(formula, i, count) for formula, i, count in _with_host(setting) if i in held]
    if len({i for _, i, _ in covers}) < len(held):
        return made
    least: dict[int, Array] = {}
    used: tuple[Found, ...] = ()
    for formula, i, count in covers:
        energy = dissolution(setting, formula, "solid")
        if not isinstance(energy, Gap):
            ln_x = energy.value / count
            least[i] = np.minimum(least[i], ln_x) if i in least else ln_x
            used += energy.found
    if len(least) < len(held):
        return made
    covered = np.all([least[int(i)] < np.log(DILUTE) for i in held], axis=0)
    top = np.where(covered, np.sum([own.nu[i] * least[int(i)] for i in held], axis=0), np.inf)
    if not np.any(top < own.ln_k.ln):
        return made
    return replace(own, ln_k=Curve(own.ln_k.T, np.minimum(own.ln_k.ln, top))), (*found, *used)


def _with_host(setting: Setting) -> Iterator[tuple[str, int, float]]:
    """Yield each compound of the host and one impurity, with that impurity and its atoms."""
    for formula in _compounds(setting):
        nu = stoichiometry(setting, formula)
        if nu is not None and np.count_nonzero(nu) == 1 and setting.host in atoms(formula):
            i = int(np.flatnonzero(nu)[0])
            yield formula, i, float(nu[i])


def _compounds(setting: Setting) -> list[str]:
    rows = setting.library.tables.get("gibbs", ())
    solids = {record.words["formula"] for record in rows if record.words["state"] == "solid"}
    return sorted(solids - set(setting.exclude))


def within_reach(seen: Mapping[str, tuple[Array, float]], x: Array, known: Collection[str]) -> list[str]:
    """Return the compounds whose saturation the spread of their records could make up for.

    Parameters
    ----------
    seen : mapping
        From :func:`watched`.
    x : (I, N) array
        Dissolved contents.
    known : collection of str
        Compounds that are followed already.
    """
    highest = np.log(np.maximum(x.max(axis=-1), 1e-30))
    return [f for f, (nu, ln_k) in seen.items() if f not in known and float(nu @ highest) - ln_k > -REACH]


def supported(seen: Mapping[str, tuple[Array, float]], x: Array) -> Array:
    """Return contents that the metal can hold dissolved beside its own others, nominally, (I, N).

    A compound of two elements beyond its saturation takes down the one that it has less to spare of.
    """
    held = np.log(np.maximum(x, 1e-30))
    for nu, ln_k in seen.values():
        members = np.flatnonzero(nu)
        if len(members) != 2:
            continue
        least = members[
            int(np.argmin(np.median(held[members] - np.log(nu[members])[:, np.newaxis], axis=-1)))
        ]
        other = members[0] + members[1] - least
        room = (ln_k - nu[other] * held[other]) / nu[least]
        held[least] = np.minimum(held[least], np.maximum(room, np.log(1e-30)))
    return np.exp(held)


def skin(setting: Setting, formula: str) -> tuple[Skin, tuple[Found, ...]]:
    """Return the skin of a compound, draw by draw, and its records."""
    energy, nu = dissolution(setting, formula, "solid"), stoichiometry(setting, formula)
    if isinstance(energy, Gap) or nu is None:
        raise LookupError(f"no Gibbs energy of {formula} in {setting.host}")
    return Skin(formula, nu, Curve(setting.T, energy.value)), energy.found


def follower_skin(
    setting: Setting,
    seen: Mapping[str, tuple[Array, float]],
    element: int,
    leaders: Collection[int],
    x: Array,
) -> tuple[Skin, tuple[Found, ...]] | None:
    """Return the compound that caps an element, the others as they are, as a skin of that element alone.

    Parameters
    ----------
    setting : Setting
    seen : mapping
        From :func:`watched`.
    element : int
    leaders : collection of int
        Elements whose contents are given.
    x : (I, N) array
        Dissolved contents of the leaders, most of `element`.

    Returns
    -------
    (Skin, records) or None
        None where nothing comes near saturation. The name is that of the compound that caps in the middle
        of the draws; each draw has the lowest cap.
    """
    middle = np.median(np.log(np.maximum(x, 1e-30)), axis=-1)
    caps: dict[str, float] = {}
    for formula, (nu, ln_k) in seen.items():
        others = set(np.flatnonzero(nu).tolist()) - {element}
        if nu[element] > 0 and others <= set(leaders):
            rest = sum(nu[j] * middle[j] for j in others)
            caps[formula] = float((ln_k - rest) / nu[element])
    reach = float(np.log(np.maximum(x[element].max(), 1e-30))) + REACH
    near = [f for f, cap in caps.items() if cap < min(reach, min(caps.values()) + REACH / 2)]
    if not near:
        return None
    curves: list[Array] = []
    records: list[Found] = []
    for formula in near:
        own, found = skin(setting, formula)
        rest_nu = np.where(np.arange(len(own.nu)) == element, 0.0, own.nu)
        curves.append((own.ln_k.ln - rest_nu @ np.log(np.maximum(x, 1e-30))) / own.nu[element])
        records.extend(found)
    lowest = np.min(np.stack(np.broadcast_arrays(*curves)), axis=0)
    if np.all(lowest > np.log(np.maximum(x[element], 1e-30))):
        return None
    nu = np.zeros(len(setting.impurities))
    nu[element] = 1.0
    return Skin(min(near, key=lambda f: caps[f]), nu, Curve(setting.T, lowest)), tuple(records)


def saturation(skin: Skin, x: Array, T: Array) -> Array:
    """Return ln of the saturation of a compound, (N,), at contents (I, N) and temperatures (N,)."""
    return np.asarray(skin.nu @ np.log(np.maximum(x, 1e-30)) - ln_at(skin.ln_k, T))
