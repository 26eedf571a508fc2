"""Vapour pressures from Gibbs energies against the handbook's temperatures."""

from __future__ import annotations

import numpy as np
import pytest

from purity.database import Library, load
from purity.draws import Draws
from purity.driving_force.substances import Energy, gibbs_energy, vapour

NOMINAL = Draws.nominal()


@pytest.fixture(scope="module")
def library() -> Library:
    return load()


# Temperature, K, at which the vapour has the pressure, Pa. Zn: International Zinc Association, property
# sheet; Li, Na, Be: data page after Alcock, Itkin, Horrigan, Can. Metall. Q. 23 (1984) 309; the others from
# memory, CRC Handbook, Vapor Pressure of the Metallic Elements. Last column: factor allowed in the pressure.
PUBLISHED = [
    ("Zn", 1, 610, 1.15),
    ("Zn", 100, 750, 1.15),
    ("Li", 10, 885.4, 1.25),
    ("Na", 10, 617, 1.30),
    ("Be", 10, 1606.5, 1.30),
    ("Cu", 1, 1509, 1.25),
    ("Cu", 10, 1661, 1.25),
    ("Ag", 1, 1283, 1.25),
    ("Ag", 100, 1575, 1.25),
    ("Au", 10, 1814, 1.25),
    ("Al", 1, 1482, 1.30),
    ("Fe", 10, 1890, 1.40),
    ("Ni", 10, 1950, 1.40),
    ("Co", 10, 1960, 1.50),
    ("In", 10, 1325, 1.30),
    ("Sn", 10, 1657, 1.30),
    ("Pb", 10, 1088, 1.30),
    ("Ga", 1, 1310, 1.40),
    ("Ca", 100, 1071, 1.30),
    ("Cd", 1, 530, 1.30),
    ("Mn", 10, 1347, 1.30),
    ("Pd", 1, 1721, 1.30),
    ("Y", 1, 1883, 1.60),
    ("Hg", 100, 393, 1.30),
]


@pytest.mark.parametrize(("element", "pascal", "T", "factor"), PUBLISHED)
def test_pressure_at_the_published_temperature(
    library: Library, element: str, pascal: float, T: float, factor: float
) -> None:
    ln_p = vapour(library, element, T, NOMINAL)
    assert isinstance(ln_p, Energy)
    assert abs(ln_p.value[0] - np.log(pascal / 1e5)) < np.log(factor)


# Normal boiling points, K, CRC Handbook, from memory.
BOILING = [
    ("Cu", 2835, 40),
    ("Ag", 2435, 40),
    ("Au", 3109, 60),
    ("Al", 2792, 40),
    ("Mg", 1363, 15),
    ("Zn", 1180, 10),
]


@pytest.mark.parametrize(("element", "published", "tolerance"), BOILING)
def test_boiling_point(library: Library, element: str, published: float, tolerance: float) -> None:
    T = np.linspace(published - 150, published + 150, 3001)
    ln_p = vapour(library, element, T[:, None], NOMINAL)
    assert isinstance(ln_p, Energy)
    at = T[np.abs(ln_p.value[:, 0] - np.log(1.01325)).argmin()]
    assert at == pytest.approx(published, abs=tolerance)


def test_silica_gives_off_silicon_monoxide_at_the_pressure_of_its_tables(library: Library) -> None:
    # Si + SiO2 = 2 SiO at 1800 K, NIST-JANAF tables: dfG of SiO (O-012) -247.464, of SiO2 (cristobalite,
    # O-035) -590.378 kJ/mol, so that log p = -(2 * -247.464 + 590.378) / (2 * 8.314462618e-3 * 1800 * ln 10).
    T = 1800.0
    G = {}
    for formula, state in (("SiO", "gas"), ("SiO2", "solid"), ("Si", "liquid")):
        energy = gibbs_energy(library, formula, state, T, NOMINAL)
        assert isinstance(energy, Energy)
        G[formula] = float(energy.value[0])
    log_p = -(2 * G["SiO"] - G["SiO2"] - G["Si"]) / (2 * 8.314462618 * T * np.log(10))
    assert log_p == pytest.approx(-1.385, abs=0.01)
