"""A parcel of the metal against an excess of its wall: the certified answer to where the contact leads.

The parcel keeps what dissociation gives, so that Al and O from alumina stay tied. The answer judges what
kinetics says and names what forms; kinetics does not use it.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from purity.contacts.setting import Setting
from purity.database import Found, outside
from purity.driving_force.equilibrium import Outcome, equilibrium
from purity.driving_force.pure import atoms
from purity.driving_force.species import gibbs, select
from purity.errors import IllPosedError
from purity.scenario import Material

Array = NDArray[np.float64]

#: mol of each wall compound for each mol of host: so much that it is never used up.
EXCESS = 10.0
#: Only every so many of the draws of a large run are asked: a printed band needs no more.
EVERY, ENOUGH = 4, 512
#: Least content of an element in the parcel, mol per mol of host.
LEAST = 1e-25


@dataclass(frozen=True, slots=True)
class Parcel:
    """Where a wall leads.

    Parameters
    ----------
    ln_ceiling : mapping of element to (M,) array
        ln of the content at rest, in the draws that were asked and have an answer.
    forms : tuple of str
        Compounds present at rest in at least half of the draws that the wall is not made of.
    solved : float
        Share of the draws asked with an answer inside the dilute range.
    gap : float
        Largest duality gap of those, RT per mole of atoms.
    species : tuple of str
        What was allowed to form, with the reason for each.
    found : tuple of Found
        Records behind it.
    """

    ln_ceiling: Mapping[str, Array]
    forms: tuple[str, ...]
    solved: float
    gap: float
    species: tuple[str, ...]
    found: tuple[Found, ...] = ()


def parcel(material: Material, setting: Setting, x: Array, T: Array) -> Parcel | None:
    """Let a parcel of the metal come to rest with a wall.

    Parameters
    ----------
    material : Material
    setting : Setting
    x : (I, N) array
        Contents of the metal as it is, mol per mol of host.
    T : (N,) array
        K.

    Returns
    -------
    Parcel or None
        None where the wall's compounds, or their elements in the metal, have no record, or where the
        wall is the metal itself.
    """
    solids = [formula for formula in material.phases if set(atoms(formula)) != {setting.host}]
    elements = sorted({e for formula in solids for e in atoms(formula)} - {setting.host})
    if not solids or not set(elements) <= set(setting.impurities):
        return None
    chosen = select(
        setting.library, setting.host, setting.phase, elements, solids, (), setting.exclude, gas_phase=False
    )
    held = {s.formula for s in chosen.species if s.state in ("host", "dissolved")}
    if chosen.gaps and not set(elements) <= held:
        return None
    system = chosen.system
    inputs = [{setting.host: 1.0}, *(atoms(f) for f in solids), *({e: 1.0} for e in elements)]
    formula = np.array([[round(i.get(e, 0.0)) for e in system.elements] for i in inputs], dtype=np.int64)
    g = gibbs(chosen, setting.library, T, setting.draws)
    step = EVERY if x.shape[-1] >= EVERY * ENOUGH else 1
    g, x = np.broadcast_to(g, (len(g), x.shape[-1]))[:, ::step], x[:, ::step]
    n = x.shape[-1]
    own = [np.maximum(x[setting.impurities.index(e)], LEAST) for e in elements]
    amounts = np.stack([np.ones(n), *(np.full(n, EXCESS) for _ in solids), *own])
    try:
        rest = equilibrium(system, g, amounts, inputs=formula)
    except IllPosedError:
        return None
    solved = rest.state == Outcome.SOLVED
    ceilings = {e: rest.ln_activity[system.species.index(f"{e} in {setting.host}")][solved] for e in elements}
    share = rest.present[:, solved].mean(axis=-1) if solved.any() else np.zeros(len(system.phases))
    forms = tuple(
        name
        for name, often in zip(system.phases, share, strict=True)
        if name != "metal" and often >= 0.5 and name not in solids
    )
    gap = float(rest.gap[solved].max()) if solved.any() else 0.0
    return Parcel(
        ceilings,
        forms,
        float(solved.mean()),
        gap,
        tuple(f"{s.name}: {s.why}" for s in chosen.species),
        _in_use(chosen.found, T),
    )


def _in_use(found: tuple[Found, ...], T: Array) -> tuple[Found, ...]:
    """Leave out rows of a substance for other temperatures, where it has one for these."""
    here = [not np.all(outside(one.record, T)) for one in found]
    names = ["/".join(one.record.quantity.split("/")[:2]) for one in found]
    held = {name for name, inside in zip(names, here, strict=True) if inside}
    return tuple(
        one for one, name, inside in zip(found, names, here, strict=True) if inside or name not in held
    )
