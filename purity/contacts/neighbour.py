"""Hot parts that evaporate onto the metal: heaters, shields, screws.

Each metal of the part leaves its surface at the rate of Hertz and Knudsen, p = X p0 at its own temperature
for the whole step, with the gas film in series where there is gas; a share of the vapour lands. The part
is taken as an ideal solution of its metals (Raoult), each of the whole part: a surface that runs out of a
trace makes this the most that can come. Compounds have no record of what they give off: the elements of one
that the part is made of are left unassessed, one that it holds as a trace is told.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from purity.contacts.brought import brought
from purity.contacts.gas import gas_conductance, gas_load
from purity.contacts.setting import Exposed, Setting
from purity.database import Found, Gap
from purity.driving_force.pure import atoms, vapour
from purity.kinetics.exposure import at
from purity.scenario import Atmosphere, Contact, Given, Material

Array = NDArray[np.float64]


def neighbour(contact: Contact, setting: Setting) -> Exposed:
    """Return what a hot part sends onto the metal.

    Parameters
    ----------
    contact : Contact
        With a :class:`Material` as its body, the part's own area, and its temperature and view.
    setting : Setting

    Returns
    -------
    Exposed
        With `gain` set and no carriers.
    """
    body = contact.body
    assert isinstance(body, Material)
    T, view = setting.sample(contact.inputs["temperature"]), setting.sample(contact.inputs["view"])
    area = setting.sample(contact.area)
    amounts: dict[str, Array] = {}
    records: dict[str, tuple[Found, ...]] = {}
    gaps: dict[str, tuple[Gap, ...]] = {}
    inputs: list[Given] = [contact.area, *contact.inputs.values()]
    for element, (share, given) in metals(body, setting).items():
        if element not in setting.impurities:
            continue
        found = evaporation(setting, element, T)
        if isinstance(found, Gap):
            gaps[element] = (found,)
            continue
        amounts[element] = share * found[0] * area * view * setting.duration
        records[element] = found[1]
        inputs += [given] if given is not None else []
    for formula in (f for f in body.phases if sum(atoms(f).values()) > 1):
        gap = Gap(f"vapour:{formula}", "no record of what this compound gives off when hot")
        for element in set(atoms(formula)) & set(setting.impurities):
            gaps[element] = (*gaps.get(element, ()), gap)
    bound = [f for f in body.traces if sum(atoms(f).values()) > 1]
    notes = (f"vapour of {', '.join(bound)} in {contact.name} is not counted",) if bound else ()
    made = brought(contact, setting, amounts, records, tuple(inputs))
    return replace(made, gaps=gaps, notes=notes)


def metals(body: Material, setting: Setting) -> dict[str, tuple[Array, Given | None]]:
    """Return the mole share of each metal of a part, (N,), with the input it stems from."""
    moles: dict[str, Array] = {}
    givens: dict[str, Given | None] = {}
    single = {f: np.full(1, share) for f, share in body.phases.items()}
    for formula, mass in single.items():
        moles[formula] = mass / _molar_mass(setting, formula)
    for formula, given in body.traces.items():
        moles.setdefault(formula, setting.sample(given) / _molar_mass(setting, formula))
        givens.setdefault(formula, given)
    total = sum(moles.values(), np.zeros(1))
    return {
        formula: (mol / total, givens.get(formula))
        for formula, mol in moles.items()
        if list(atoms(formula).values()) == [1.0]
    }


def evaporation(setting: Setting, element: str, T: Array) -> tuple[Array, tuple[Found, ...]] | Gap:
    """Return the rate at which a pure metal evaporates, mol m-2 s-1, (N,), and its records."""
    pressure = vapour(setting.library, element, T, setting.draws)
    if isinstance(pressure, Gap):
        return pressure
    gas = next((c for c in setting.choice.contacts if isinstance(c.body, Atmosphere)), None)
    if gas is None:
        return Gap(f"vapour:{element}", "what gas surrounds the part is not known")
    assert isinstance(gas.body, Atmosphere)
    load = replace(gas_load(gas.body, setting, setting.sample(gas.area)), supply=None)
    knots = np.unique([float(T.min()), float(T.max())])
    conductance, found = gas_conductance(replace(setting, T=knots), element, load)
    activity = np.exp(np.minimum(pressure.value, 30.0))
    return np.asarray(at(conductance, T) * activity), (*pressure.found, *found)


def _molar_mass(setting: Setting, formula: str) -> float:
    rows = setting.library.rows("elements")
    mass = {row.words["element"]: row.fields["molar_mass_g_per_mol"] / 1000.0 for row in rows}
    return sum(mass[element] * count for element, count in atoms(formula).items())


__all__ = ["evaporation", "metals", "neighbour"]
