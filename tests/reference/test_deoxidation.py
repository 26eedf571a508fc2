"""Solubility products and saturation contents of metals against measured ones.

Each product is log10 K of a compound = its atoms dissolved, mass per cent, infinite dilution, unit activity
of the compound; here from the Gibbs energies, activity coefficients and Sieverts constants of the library.
"""

from __future__ import annotations

import numpy as np
import pytest

from purity.database import Gap, Library, load
from purity.draws import Draws
from purity.driving_force.substances import Energy, atoms, ln_dissolution, molar_mass

NOMINAL = Draws.nominal()


@pytest.fixture(scope="module")
def library() -> Library:
    return load()


def log_product(library: Library, host: str, phase: str, formula: str, state: str, T: float) -> float:
    """log10 of the product in mass per cent."""
    energy = ln_dissolution(library, host, phase, formula, state, T, NOMINAL)
    assert isinstance(energy, Energy)
    total = float(energy.value[0]) / np.log(10)
    host_mass = molar_mass(library, host)
    assert not isinstance(host_mass, Gap)
    for element, count in atoms(formula).items():
        mass = molar_mass(library, element)
        assert not isinstance(mass, Gap)
        total += count * np.log10(100 * mass / host_mass) if element != host else 0.0
    return total


# log10 K = A/T + B of measured products (abstracts of F. Ishii and S. Ban-ya, ISIJ Int. and Tetsu-to-Hagane
# 1991 to 1995), K in mass per cent, and the tolerance in log10 K per atom. Co: at 0.55 % Si.
MEASURED = [
    ("Fe", "SiO2", -30960.0, 11.86, 1873, 0.10),
    ("Ni", "SiO2", -15680.0, 1.83, 1848, 0.20),
    ("Co", "SiO2", -15270.0, 1.81, 1873, 0.30),
    ("Ni", "MgO", -25500.0, 7.78, 1923, 0.50),
]


@pytest.mark.parametrize(("host", "formula", "A", "B", "T", "tolerance"), MEASURED)
def test_measured_products(
    library: Library, host: str, formula: str, A: float, B: float, T: float, tolerance: float
) -> None:
    computed = log_product(library, host, "liquid", formula, "solid", T)
    count = sum(atoms(formula).values())
    assert abs(computed - (A / T + B)) / count < tolerance


# Content, mass ppm, of a metal saturated with a phase. Solid Cu: M. L. Narula, V. B. Tare, W. L. Worrell,
# Metall. Trans. B 14 (1983) 673. Liquid Cu: eutectic of the assessed Cu-O diagram (Neumann, Zhong, Chang
# 1984). Cu2S: Magnusson & Frisk, Calphad 47 (2014) 148. Si: Yanaba et al., Mater. Trans. JIM 38 (1997) 990
# and Dalaker & Tangstad, Mater. Trans. (2009) for C, 50 (2009) 2541 for N; Iguchi & Narushima, ibid. 35
# (1994) 522 for O. In, Ga: Narushima et al., J. Japan Inst. Metals 59 (1995) 37. Ge: Fitzner, Jacob, Alcock,
# Metall. Trans. B 8 (1977) 669. Ta, Mo with O: abstracts of emf studies. Ni, Mo, Ta with C, Sn with O, Al
# with Si, Cu with Cr and Fe: handbook diagrams, from memory. Last column: factor allowed.
SATURATION = [
    ("Cu", "fcc", "O", "Cu2O", 1073, 2.024, 1.3),
    ("Cu", "fcc", "O", "Cu2O", 1273, 28.2, 1.3),
    ("Cu", "liquid", "O", "Cu2O", 1339, 4335, 1.2),
    ("Cu", "fcc", "S", "Cu2S", 1073, 16.8, 1.5),
    ("Si", "liquid", "C", "SiC", 1723, 105.6, 1.2),
    ("Si", "liquid", "C", "SiC", 1687, 65, 1.5),
    ("Si", "liquid", "N", "Si3N4", 1773, 85.1, 1.3),
    ("Si", "liquid", "O", "SiO2", 1693, 40.1, 1.3),
    ("In", "liquid", "O", "In2O3", 1073, 41.59, 1.3),
    ("Ga", "liquid", "O", "Ga2O3", 1123, 12.28, 1.5),
    ("Ge", "liquid", "O", "GeO2", 1233, 216.7, 1.4),
    ("Sn", "liquid", "O", "SnO2", 1073, 80.9, 1.5),
    ("Ta", "bcc", "O", "Ta2O5", 1273, 2480, 1.4),
    ("Mo", "bcc", "O", "MoO2", 1673, 3.345, 1.3),
    ("Mo", "bcc", "C", "Mo2C", 2473, 1390, 1.6),
    ("Ta", "bcc", "C", "Ta2C", 2473, 1010, 1.4),
    ("Ni", "fcc", "C", "C", 1600, 5647, 1.2),
    ("Al", "fcc", "Si", "Si", 850, 15600, 1.1),
    ("Cu", "fcc", "Cr", "Cr", 1350, 7294, 1.3),
    ("Cu", "fcc", "Fe", "Fe", 1367, 40650, 1.6),
]


@pytest.mark.parametrize(("host", "phase", "element", "formula", "T", "published", "factor"), SATURATION)
def test_saturation_with_a_phase(
    library: Library,
    host: str,
    phase: str,
    element: str,
    formula: str,
    T: float,
    published: float,
    factor: float,
) -> None:
    energy = ln_dissolution(library, host, phase, formula, "solid", T, NOMINAL)
    assert isinstance(energy, Energy)
    x = float(np.exp(energy.value[0] / atoms(formula)[element]))
    mass, host_mass = molar_mass(library, element), molar_mass(library, host)
    assert not isinstance(mass, Gap)
    assert not isinstance(host_mass, Gap)
    ppm = 1e6 * x * mass / (host_mass + x * mass)
    assert abs(np.log(ppm / published)) < np.log(factor)


def test_derived_products_of_iron_are_those_of_the_steelmaking_tables(library: Library) -> None:
    # log10 K of Al2O3 = 2 [Al] + 3 [O] in iron at 1873 K: -64000/T + 20.57 = -13.60 (Steelmaking Data
    # Sourcebook, recommended value, from memory); CO(1 atm) = [C] + [O]: -(1160/T + 2.003) = -2.62 (same).
    assert abs(log_product(library, "Fe", "liquid", "Al2O3", "solid", 1873) + 13.60) / 5 < 0.15
    assert abs(log_product(library, "Fe", "liquid", "CO", "gas", 1873) + 2.62) < 0.20


def test_product_of_silica_in_copper_is_not_that_of_nickel_alloys(library: Library) -> None:
    # A product extrapolated from Ni-Cu alloys (Ishii 1991: log10 K = -15680/T + 2.16) describes the total
    # oxygen of the sample and lies decades above that of dissolved oxygen; the library must not follow it.
    computed = log_product(library, "Cu", "liquid", "SiO2", "solid", 1773)
    assert computed < -15680 / 1773 + 2.16 - 3.0


def test_a_measured_saturation_wins_over_what_it_contradicts(library: Library) -> None:
    # Carbon in liquid Al over Al4C3: 1 mass ppm at 973 K, 8 at 1273 K (handbook values, from memory); the
    # Gibbs energies give 0.001 and 2.
    energy = ln_dissolution(library, "Al", "liquid", "Al4C3", "solid", 1273.0, NOMINAL)
    assert isinstance(energy, Energy)
    ppm = 1e6 * float(np.exp(energy.value[0] / 3)) * 12.011 / 26.982
    assert 0.5 < ppm < 40
    wins = ln_dissolution(library, "Al", "liquid", "Al4C3", "solid", 973.0, NOMINAL)
    assert isinstance(wins, Energy)
    assert wins.found[0].record.table == "solubility"
    assert float(np.exp(wins.value[0] / 3)) * 12.011 / 26.982 * 1e6 == pytest.approx(1.0, rel=0.05)
