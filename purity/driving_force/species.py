"""Which species enter a contact: the one place that decides, with a reason for each."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from purity.constants import R
from purity.database import Found, Gap, Library
from purity.draws import Draws
from purity.driving_force.equilibrium import System
from purity.driving_force.substances import (
    Energy,
    atoms,
    found,
    gibbs_energy,
    ln_dissolution,
    solute,
    substances,
)

Array = NDArray[np.float64]

#: Temperature at which it is seen whether a solute has all its records, K.
T_TRIED = 1000.0


@dataclass(frozen=True, slots=True)
class Species:
    """One species of a contact and why it is there.

    Parameters
    ----------
    name : str
        ``Al in Cu``, ``Al2O3``, ``CaO(l)``, ``CO``, ``Cu(g)``.
    formula : str
    state : str
        host, dissolved, solid, liquid or gas.
    why : str
    """

    name: str
    formula: str
    state: str
    why: str


@dataclass(frozen=True, slots=True)
class Selection:
    """The species of a contact, ready for energies.

    Parameters
    ----------
    host, phase : str
        The metal and its phase.
    system : System
        In the order of `species`.
    species : tuple of Species
    found : tuple of Found
        Every record that may be used; which polymorph is depends on temperature.
    gaps : tuple of Gap
        What was left out for want of a record.
    """

    host: str
    phase: str
    system: System
    species: tuple[Species, ...]
    found: tuple[Found, ...]
    gaps: tuple[Gap, ...]


def select(
    library: Library,
    host: str,
    phase: str,
    elements: Iterable[str],
    solids: Iterable[str] = (),
    gases: Iterable[str] = (),
    exclude: Iterable[str] = (),
    *,
    gas_phase: bool = True,
) -> Selection:
    """Choose the species of a contact between the metal and its surroundings.

    The metal with every element that has a record in it; the compounds of the wall; every compound of the
    tables whose elements are all present, as solid and as liquid (polymorphs are one species, the stable
    one at each temperature); a gas of every molecule that they can make, CO and the volatile products
    among them.

    Parameters
    ----------
    library : Library
    host, phase : str
    elements : iterable of str
        In the metal or wanted in the answer.
    solids : iterable of str
        Formulas of the wall.
    gases : iterable of str
        Formulas of the atmosphere.
    exclude : iterable of str
        Names of species, or formulas for every state, that kinetics keeps from forming.
    gas_phase : bool
        False: no gas touches the metal.

    Returns
    -------
    Selection
    """
    solids, gases, barred = tuple(solids), tuple(gases), set(exclude)
    present = {host, *elements, *(e for f in (*solids, *gases) for e in atoms(f))}
    gaps = [
        Gap(f"gibbs:{f}/{state}", f"no Gibbs energy of {f} as a {state}")
        for named, state in ((solids, "solid"), (gases, "gas"))
        for f in named
        if (f, state) not in substances(library)
    ]
    chosen = [Species(host, host, "host", "the metal")]
    host_state = "liquid" if phase == "liquid" else "solid"
    records = [found(library, row) for row in substances(library).get((host, host_state), ())]
    for element in sorted(present - {host}):
        energy = solute(library, host, phase, element, T_TRIED, Draws.nominal())
        if isinstance(energy, Gap):
            gaps.append(energy)
            continue
        record = energy.found[0]
        if (name := f"{element} in {host}") not in barred:
            chosen.append(Species(name, element, "dissolved", _why(record)))
            records.append(record)
    for formula, state in sorted(substances(library), key=lambda key: (key[1] == "gas", key)):
        counts = atoms(formula)
        if not set(counts) <= present or (state == "gas" and not gas_phase):
            continue
        if state != "gas" and set(counts) == {host}:
            continue
        name = _name(library, formula, state)
        if name in barred or formula in barred:
            continue
        if any(count % 1 for count in counts.values()):
            gaps.append(Gap(f"gibbs:{formula}/{state}", "left out: its formula is not in whole atoms"))
            continue
        chosen.append(Species(name, formula, state, _reason(formula, state, solids, gases)))
        records.extend(found(library, row) for row in substances(library)[formula, state])
    system = _system(host, tuple(chosen))
    return Selection(host, phase, system, tuple(chosen), tuple(records), tuple(gaps))


def _name(library: Library, formula: str, state: str) -> str:
    if state == "liquid":
        return f"{formula}(l)"
    condensed = any((formula, other) in substances(library) for other in ("solid", "liquid"))
    return f"{formula}(g)" if state == "gas" and condensed else formula


def _why(record: Found) -> str:
    kind = {
        "activity": "activity coefficient",
        "sieverts": "Sieverts constant",
        "solubility": "measured saturation",
    }[record.record.table]
    return f"dissolves: {kind} ({record.how}, {record.record.source})"


def _reason(formula: str, state: str, solids: Iterable[str], gases: Iterable[str]) -> str:
    if formula in solids and state != "gas":
        return "of the wall" if state == "solid" else "of the wall, molten"
    if formula in gases and state == "gas":
        return "of the atmosphere"
    return ("could escape: " if state == "gas" else "could form: ") + " and ".join(sorted(atoms(formula)))


def _system(host: str, chosen: tuple[Species, ...]) -> System:
    elements = tuple(sorted({element for one in chosen for element in atoms(one.formula)}))
    phases = ["metal"]
    phase = []
    for one in chosen:
        name = {"host": "metal", "dissolved": "metal", "gas": "gas"}.get(one.state, one.name)
        if name not in phases:
            phases.append(name)
        phase.append(phases.index(name))
    formula = [[round(atoms(one.formula).get(element, 0.0)) for element in elements] for one in chosen]
    return System(
        species=tuple(one.name for one in chosen),
        elements=elements,
        formula=np.array(formula, dtype=np.int64),
        phase=np.array(phase, dtype=np.int64),
        phases=tuple(phases),
        host=0,
    )


def gibbs(selection: Selection, library: Library, T: ArrayLike, draws: Draws) -> Array:
    """Return the energies of a selection over RT, at mole fraction 1 or 1 bar.

    Parameters
    ----------
    selection : Selection
    library : Library
    T : () or (N,) array_like
        K.
    draws : Draws

    Returns
    -------
    (S, N) array
        Without dimension.
    """
    t = np.asarray(T, dtype=float)
    return np.stack(
        np.broadcast_arrays(*(_over_rt(selection, library, s, t, draws) for s in selection.species))
    )


def _over_rt(selection: Selection, library: Library, one: Species, t: Array, draws: Draws) -> Array:
    metal = (library, selection.host, selection.phase)
    if one.state in ("host", "dissolved"):
        return _value(solute(*metal, one.formula, t, draws)) / (R * t)
    if one.state == "solid" and _saturation_measured(selection, library, one.formula):
        # A measured saturation that wins moves the compound, so that both ways to a ceiling give one answer.
        parts = (n * _value(solute(*metal, e, t, draws)) / (R * t) for e, n in atoms(one.formula).items())
        return np.asarray(sum(parts, _value(ln_dissolution(*metal, one.formula, "solid", t, draws))))
    return _value(gibbs_energy(library, one.formula, one.state, t, draws)) / (R * t)


def _saturation_measured(selection: Selection, library: Library, formula: str) -> bool:
    host, phase = selection.host, selection.phase
    solutes = set(atoms(formula)) - {host}
    return len(solutes) == 1 and any(
        library.rivals(f"solubility:{host}/{phase}/{element}/{formula}") for element in solutes - {formula}
    )


def _value(energy: Energy | Gap) -> Array:
    assert isinstance(energy, Energy), energy
    return energy.value
