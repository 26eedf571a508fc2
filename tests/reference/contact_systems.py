"""Contacts of a metal with walls and gases, for this solver and for Cantera's.

Energies of pure substances and gases: nasa_condensed.yaml and nasa_gas.yaml as shipped with Cantera 3.2
(B. J. McBride, S. Gordon, M. A. Reno, NASA TM-4513, 1993). Charges and ln gamma of solutes are invented and
stated here: both solvers get the same numbers, so that only the solving is compared.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import cantera as ct
import numpy as np
from numpy.typing import NDArray

from purity.driving_force.equilibrium import System

Array = NDArray[np.float64]

#: Temperature at which Cantera is given the energies; only G/RT matters.
T_GIVEN = 1000.0


@dataclass(frozen=True)
class Contact:
    """T in K, p in atm, host, ln gamma of solutes, solids, gases, charges in mol; `traces` vary freely."""

    T: float
    p: float
    host: str
    solutes: dict[str, float]
    solids: str
    gases: str
    charges: dict[str, float]
    traces: str = "O2"


CONTACTS = {
    "Cu/Al2O3": Contact(
        T=1473.0,
        p=1.0,
        host="Cu(L)",
        solutes={"O": -9.0, "Al": -4.0},
        solids="AL2O3(a) Cu2O(s) CuO(s)",
        gases="Ar O2 O Cu CuO AL ALO AL2O",
        charges={"Cu(L)": 1.0, "AL2O3(a)": 0.3, "Ar": 0.01},
    ),
    "Al/SiO2": Contact(
        T=1073.0,
        p=1.0,
        host="AL(L)",
        solutes={"O": -5.0, "Si": -0.7},
        solids="AL2O3(a) SiO2(hqz) Si(cr)",
        gases="Ar O2 SiO AL AL2O Si ALO",
        charges={"AL(L)": 1.0, "SiO2(hqz)": 0.5, "Ar": 0.01},
    ),
    "Si/SiO2": Contact(
        T=1723.0,
        p=1.0,
        host="Si(L)",
        solutes={"O": -18.0},
        solids="SiO2(L) SiO2(hqz)",
        gases="Ar O2 O SiO SiO2 Si",
        charges={"Si(L)": 1.0, "SiO2(L)": 0.5, "Ar": 0.1},
    ),
    "Ti/CaO": Contact(
        T=1973.0,
        p=1.0,
        host="Ti(L)",
        solutes={"O": -33.0, "Ca": 4.0},
        solids="CaO(s) TiO(b) Ti2O3(b) Ti3O5(b) TiO2(ru) Ca(L)",
        gases="Ar O2 O Ca CaO TiO Ti TiO2",
        charges={"Ti(L)": 1.0, "CaO(s)": 0.3, "Ar": 0.5},
    ),
    "Ti/Al2O3": Contact(
        T=1973.0,
        p=1.0,
        host="Ti(L)",
        solutes={"O": -33.0, "Al": -3.0},
        solids="AL2O3(a) TiO(b) Ti2O3(b) Ti3O5(b) TiO2(ru) AL(L)",
        gases="Ar O2 O AL ALO AL2O TiO Ti",
        charges={"Ti(L)": 1.0, "AL2O3(a)": 0.2, "Ar": 0.1},
    ),
    "Ni/MgO/C, vacuum": Contact(
        T=1773.0,
        p=1e-4,
        host="Ni(L)",
        solutes={"O": -7.0, "Mg": 1.0, "C": -0.4},
        solids="MgO(s) C(gr)",
        gases="CO CO2 Mg MgO Ni O2 O Ar C",
        charges={"Ni(L)": 1.0, "MgO(s)": 0.2, "C(gr)": 0.001, "Ar": 0.001},
    ),
    "Nb/H2O": Contact(
        T=1273.0,
        p=1.0,
        host="Nb(cr)",
        solutes={"O": -36.0, "H": -0.5},
        solids="NbO(s) NbO2(III) Nb2O5(s)",
        gases="H2 H2O H OH O2 O Nb NbO NbO2",
        charges={"Nb(cr)": 1.0, "H2O": 0.001, "H2": 0.01},
    ),
    "Fe/Al2O3/C": Contact(
        T=1873.0,
        p=1.0,
        host="Fe(L)",
        solutes={"O": -14.0, "Al": -3.5, "C": -0.5},
        solids="AL2O3(a) FeO(L) C(gr)",
        gases="Ar CO CO2 O2 O AL AL2O ALO Fe",
        charges={"Fe(L)": 1.0, "AL2O3(a)": 0.1, "C(gr)": 0.01, "Ar": 0.01},
    ),
    "Si/Si3N4/SiO2/C": Contact(
        T=1723.0,
        p=1.0,
        host="Si(L)",
        solutes={"O": -18.0, "N": 4.0, "C": 5.0},
        solids="SiO2(L) Si3N4(a) SiC(b) C(gr)",
        gases="Ar N2 N O2 SiO CO CO2 Si SiO2",
        charges={"Si(L)": 1.0, "SiO2(L)": 0.2, "Si3N4(a)": 0.05, "C(gr)": 0.001, "Ar": 0.05},
    ),
    "Cu/MgO/C": Contact(
        T=1473.0,
        p=1.0,
        host="Cu(L)",
        solutes={"O": -9.0, "Mg": -3.0, "C": 9.0},
        solids="MgO(s) C(gr) Cu2O(s)",
        gases="Ar CO CO2 O2 Mg Cu O",
        charges={"Cu(L)": 1.0, "MgO(s)": 0.2, "C(gr)": 0.02, "Ar": 0.05},
    ),
    "Ni/Al2O3/H2O": Contact(
        T=1773.0,
        p=1.0,
        host="Ni(L)",
        solutes={"O": -7.0, "Al": -9.0, "H": 6.5},
        solids="AL2O3(a)",
        gases="Ar H2 H2O H OH O2 O Ni AL AL2O ALOH",
        charges={"Ni(L)": 1.0, "AL2O3(a)": 0.2, "Ar": 0.05, "H2O": 1e-4},
        traces="O2 H2",
    ),
    "Fe/SiO2/Al": Contact(
        T=1873.0,
        p=1.0,
        host="Fe(L)",
        solutes={"O": -14.0, "Al": -3.5, "Si": -6.0},
        solids="AL2O3(a) SiO2(L) FeO(L)",
        gases="Ar SiO O2 O AL AL2O ALO Si Fe",
        charges={"Fe(L)": 1.0, "SiO2(L)": 0.2, "[Al]": 0.002, "Ar": 0.05},
    ),
}

#: Substance that sets the zero of ln gamma, and its atoms.
REFERENCE = {
    "O": ("gas O2", 2),
    "H": ("gas H2", 2),
    "N": ("gas N2", 2),
    "C": ("C(gr)", 1),
    "Al": ("AL(L)", 1),
    "Si": ("Si(L)", 1),
    "Ca": ("Ca(L)", 1),
    "Mg": ("Mg(L)", 1),
}


@cache
def substances() -> dict[str, ct.Species]:
    gases = {f"gas {s.name}": s for s in ct.Species.list_from_file("nasa_gas.yaml")}
    return gases | {s.name: s for s in ct.Species.list_from_file("nasa_condensed.yaml")}


def energy(name: str, T: Array) -> Array:
    """G over RT. A polynomial is continued outside its range: a smooth function serves any draw."""
    thermo = substances()[name].thermo
    steps, place = np.unique(T, return_inverse=True)
    value = [(thermo.h(t) - t * thermo.s(t)) / (ct.gas_constant * t) for t in steps]
    return np.array(value)[place]


@dataclass(frozen=True)
class Setup:
    """A contact as a system, with its inputs: names, formulas, the species that carries each, mol."""

    contact: Contact
    system: System
    inputs: NDArray[np.int64]
    names: tuple[str, ...]
    carriers: tuple[int, ...]
    charges: Array

    def g(self, T: Array, p: Array) -> Array:
        """Energies over RT at temperatures K and pressures atm."""
        contact, rows = self.contact, []
        for name in self.system.species:
            if name.startswith("["):
                source, atoms = REFERENCE[name[1:-1]]
                rows.append(energy(source, T) / atoms + contact.solutes[name[1:-1]])
            else:
                rows.append(energy(name, T) + (np.log(p) if name.startswith("gas ") else 0.0))
        return np.array(rows)


@cache
def setup(name: str) -> Setup:
    contact, book = CONTACTS[name], substances()
    metal = [contact.host, *(f"[{s}]" for s in contact.solutes)]
    solids = contact.solids.split()
    species = (*metal, *solids, *(f"gas {s}" for s in contact.gases.split()))
    made = [{s[1:-1]: 1} if s.startswith("[") else book[s].composition for s in species]
    elements = tuple(sorted({e for formula in made for e in formula}))
    matrix = np.array([[int(formula.get(e, 0)) for e in elements] for formula in made])
    phase = [0] * len(metal) + [k + 1 for k in range(len(solids))]
    phase += [len(solids) + 1] * (len(species) - len(phase))
    system = System(species, elements, matrix, np.array(phase), ("metal", *solids, "gas"), 0)
    names = (*contact.charges, *contact.traces.split())
    carriers = tuple(species.index(n if n in species else f"gas {n}") for n in names)
    charges = np.array([*contact.charges.values(), *(1e-6 for _ in contact.traces.split())])
    return Setup(contact, system, matrix[list(carriers)], names, carriers, charges)


def nominal(name: str) -> tuple[Array, Array]:
    """Energies and amounts of the contact itself, one draw."""
    made = setup(name)
    return made.g(np.array([made.contact.T]), np.array([made.contact.p])), made.charges[:, None]


def mild(name: str, count: int, seed: int) -> tuple[Array, Array]:
    """Draws of an uncertain contact: energies 1 RT (gases 0.3), pressure and charges within a decade."""
    return _drawn(name, count, seed, (1.0, 0.3), (-1, 1), (-0.5, 0.5), (-10, -4), 0.0)


def wild(name: str, count: int, seed: int) -> tuple[Array, Array]:
    """Draws far harsher than a contact: T +- 150 K, energies 2 RT, pressure and charges over decades."""
    return _drawn(name, count, seed, (2.0, 2.0), (-6, 2), (-4, 2), (-18, -1), 150.0)


def _drawn(
    name: str,
    count: int,
    seed: int,
    sigma: tuple[float, float],
    pressure: tuple[float, float],
    charge: tuple[float, float],
    trace: tuple[float, float],
    heat: float,
) -> tuple[Array, Array]:
    made, rng = setup(name), np.random.default_rng(seed)
    T = made.contact.T + np.round(rng.uniform(-heat, heat, count))
    g = made.g(T, made.contact.p * 10.0 ** rng.uniform(*pressure, count))
    gas = np.array([s.startswith("gas ") for s in made.system.species])
    g += np.where(gas, sigma[1], sigma[0])[:, None] * rng.standard_normal(g.shape)
    amounts = np.repeat(made.charges[:, None], count, axis=1)
    traces = made.contact.traces.split()
    for j, substance in enumerate(made.names):
        if substance in traces:
            empty = rng.random(count) < (0.2 if heat else 0.0)
            amounts[j] = np.where(empty, 0.0, 10.0 ** rng.uniform(*trace, count))
        elif substance != made.contact.host:
            amounts[j] *= 10.0 ** rng.uniform(*charge, count)
    return g, amounts


class Outside:
    """The same contact in Cantera: the metal an ideal condensed phase, energies in constant-cp species."""

    def __init__(self, name: str) -> None:
        self.setup = setup(name)
        text = self._text()
        self.phases = [ct.Solution(yaml=text, name=f"p{p}") for p in range(len(self.setup.system.phases))]
        self.mixture = ct.Mixture([(phase, 1.0) for phase in self.phases])

    def _text(self) -> str:
        system = self.setup.system
        lines = ["phases:"]
        for p, name in enumerate(system.phases):
            model = {"gas": "ideal-gas", "metal": "ideal-condensed"}.get(name, "fixed-stoichiometry")
            members = np.flatnonzero(system.phase == p)
            elements = [e for e, n in zip(system.elements, system.formula[members].T, strict=True) if n.any()]
            basis = ", standard-concentration-basis: unity" if name == "metal" else ""
            held, listed = ", ".join(elements), ", ".join(f"s{i}" for i in members)
            lines.append(
                f"- {{name: p{p}, thermo: {model}, elements: [{held}], species: [{listed}], "
                f"state: {{T: {T_GIVEN}, P: 1 atm}}{basis}}}"
            )
        lines.append("species:")
        for i, row in enumerate(system.formula):
            made = ", ".join(f"{e}: {n}" for e, n in zip(system.elements, row, strict=True) if n)
            volume = ", equation-of-state: {model: constant-volume, molar-volume: 1e-5 m^3/mol}"
            gas = system.phases[system.phase[i]] == "gas"
            lines.append(
                f"- {{name: s{i}, composition: {{{made}}}, thermo: {{model: constant-cp, T0: {T_GIVEN}}}"
                f"{'' if gas else volume}}}"
            )
        return "\n".join(lines)

    def load(self, g: Array) -> None:
        """Give every species its energy over RT."""
        rest = iter(g)
        for phase in self.phases:
            for k in range(phase.n_species):
                species = phase.species(k)
                given = [T_GIVEN, next(rest) * ct.gas_constant * T_GIVEN, 0.0, 0.0]
                low, high = species.thermo.min_temp, species.thermo.max_temp
                species.thermo = ct.ConstantCp(low, high, ct.one_atm, given)
                phase.modify_species(k, species)

    def solve(self, amounts: Array, **options: int) -> Array | None:
        """Amounts of all species by the vcs solver; None where it raises."""
        moles = np.zeros(len(self.setup.system.species))
        np.add.at(moles, list(self.setup.carriers), amounts)
        self.mixture.T, self.mixture.P = T_GIVEN, ct.one_atm
        self.mixture.species_moles = moles
        try:
            self.mixture.equilibrate("TP", solver="vcs", rtol=1e-9, max_steps=1000, **options)
        except ct.CanteraError:
            return None
        return np.array(self.mixture.species_moles)
