"""Oxygen pressures over metal and oxide against cells, buffers and diagrams."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.optimize import brentq

from purity.constants import R
from purity.database import Library, load
from purity.draws import Draws
from purity.driving_force.substances import Energy, atoms, formation, gibbs_energy

NOMINAL = Draws.nominal()


@pytest.fixture(scope="module")
def library() -> Library:
    return load()


def log_oxygen(library: Library, formula: str, T: float) -> float:
    """log10 of p(O2)/bar over a metal and its oxide."""
    energy = formation(library, formula, "solid", T, NOMINAL)
    assert isinstance(energy, Energy)
    return float(2 * energy.value[0] / atoms(formula)["O"] / (R * T * np.log(10)))


def oneill(a: float, b: float, c: float, d: float, T: float) -> float:
    """log10 of p(O2)/bar from mu(O2) = a + bT + cT ln T + dT^2, J/mol."""
    return (a + b * T + c * T * np.log(T) + d * T**2) / (R * T * np.log(10))


T1000C = 1273.15
# H. St. C. O'Neill & M. I. Pownceby, Contrib. Mineral. Petrol. 114 (1993) 296: zirconia cells (equations in
# the abstract), evaluated at 1000 degC. Myers & Eugster, ibid. 82 (1983) 75 for iron and wustite.
BUFFERS = [
    ("Cu2O", oneill(-347705, 246.096, -12.9053, 0.0, T1000C), 0.05),
    ("CoO", oneill(-492186, 509.322, -53.284, 0.02518, T1000C), 0.06),
    ("NiO", oneill(-478967, 248.514, -9.7961, 0.0, T1000C), 0.05),
    ("Fe0.947O", 6.471 - 26834.7 / T1000C, 0.35),
    ("FeO", 6.471 - 26834.7 / T1000C, 0.35),
]


@pytest.mark.parametrize(("formula", "published", "tolerance"), BUFFERS)
def test_buffers_at_1000_degc(library: Library, formula: str, published: float, tolerance: float) -> None:
    assert log_oxygen(library, formula, T1000C) == pytest.approx(published, abs=tolerance)


# log10 p(O2)/bar from log Kf of the NIST-JANAF tables, 4th ed. (1998), named in the row.
TABLES = [
    ("Al2O3", 1000, -47.409, "Al-096"),
    ("Al2O3", 1500, -27.780, "Al-096"),
    ("Cu2O", 1000, -9.978, "Cu-021"),
    ("Cr2O3", 1500, -17.241, "Cr-014"),
]


@pytest.mark.parametrize(("formula", "T", "published", "table"), TABLES)
def test_pressures_of_the_tables(
    library: Library, formula: str, T: float, published: float, table: str
) -> None:
    assert log_oxygen(library, formula, T) == pytest.approx(published, abs=0.06), table


def cupric(library: Library, T: float) -> float:
    """log10 of p(O2)/bar over CuO and Cu2O: 4 CuO = 2 Cu2O + O2."""
    energies = {}
    for formula, state in (("CuO", "solid"), ("Cu2O", "solid"), ("O2", "gas")):
        energy = gibbs_energy(library, formula, state, T, NOMINAL)
        assert isinstance(energy, Energy)
        energies[formula] = float(energy.value[0])
    change = 2 * energies["Cu2O"] + energies["O2"] - 4 * energies["CuO"]
    return float(-change / (R * T * np.log(10)))


def test_cupric_oxide_decomposes_where_the_diagram_says(library: Library) -> None:
    # Assessed Cu-O diagram, J. P. Neumann, T. Zhong, Y. A. Chang, Bull. Alloy Phase Diagrams 5 (1984) 136:
    # 1304 K in air (0.2095 atm), 1394 K in 1 bar of oxygen; at the eutectic (1339 K) log p = -5.63.
    air = np.log10(0.2095 * 1.01325)
    assert brentq(lambda T: cupric(library, T) - air, 1200, 1500) == pytest.approx(1304, abs=6)
    assert brentq(lambda T: cupric(library, T), 1200, 1500) == pytest.approx(1394, abs=6)
    assert log_oxygen(library, "Cu2O", 1339) == pytest.approx(-5.63, abs=0.1)


def test_haematite_and_magnetite(library: Library) -> None:
    # J. Myers & H. P. Eugster, Contrib. Mineral. Petrol. 82 (1983) 75: log p = 13.480 - 23847.6/T,
    # 1040 to 1270 degC.
    T = 1473.15
    G: dict[str, float] = {}
    for formula, state in (("Fe2O3", "solid"), ("Fe3O4", "solid"), ("O2", "gas")):
        energy = gibbs_energy(library, formula, state, T, NOMINAL)
        assert isinstance(energy, Energy)
        G[formula] = float(energy.value[0])
    log_p = -(4 * G["Fe3O4"] + G["O2"] - 6 * G["Fe2O3"]) / (R * T * np.log(10))
    assert log_p == pytest.approx(13.480 - 23847.6 / T, abs=0.25)


def test_silver_oxide_decomposes_in_oxygen(library: Library) -> None:
    # Textbook value 462 K at 1 atm (Gaskell, Introduction to the Thermodynamics of Materials, ch. 12, from
    # memory).
    decomposes = brentq(lambda t: log_oxygen(library, "Ag2O", t), 350, 500)
    assert decomposes == pytest.approx(462, abs=12)


def test_nobility_runs_in_the_known_order(library: Library) -> None:
    # Order of oxides at 1273 K in every published oxygen-potential diagram (Ellingham 1944; common practice).
    order = ["Cu2O", "NiO", "CoO", "FeO", "ZnO", "Cr2O3", "MnO", "SiO2", "TiO2", "Al2O3", "MgO", "CaO"]
    pressures: NDArray[np.float64] = np.array([log_oxygen(library, formula, T1000C) for formula in order])
    assert np.all(np.diff(pressures) < 0)
