"""Composition conversions and nines against printed values."""

from __future__ import annotations

import pytest

from purity.composition import (
    concentration_from_mass,
    fraction_from_mass,
    grade,
    impurity_of_grade,
    metals_total,
    nines,
    ratio_from_mass,
)


def test_aluminium_with_3_percent_copper() -> None:
    # W. D. Callister, Materials Science and Engineering, example 4.3: 3 mass % Cu in Al is 1.3 at.% Cu
    # (the answer from memory; masses 63.55 and 26.98 as in the open textbook companion of the same example)
    x = fraction_from_mass([0.03], [63.55], 26.98)[0]
    assert 100 * x == pytest.approx(1.3, abs=0.05)


@pytest.mark.parametrize(
    "host, element, ppm_mol",
    [
        # molar masses: IUPAC (CIAAW) standard atomic weights 2021; the ratios are exact arithmetic on them
        (92.90637, 15.999, 5.807),  # O in Nb
        (26.9815384, 1.008, 26.767),  # H in Al
        (63.546, 32.06, 1.98210),  # S in Cu
    ],
)
def test_one_mass_ppm_in_atomic_ppm(host: float, element: float, ppm_mol: float) -> None:
    assert 1e6 * ratio_from_mass([1e-6], [element], host)[0] == pytest.approx(ppm_mol, rel=2e-5)


def test_fractional_nines() -> None:
    # "Nine (purity)", encycloreader.org, handwiki: 99.97 % has 3.523 nines
    assert nines(3e-4) == pytest.approx(3.523, abs=5e-4)


@pytest.mark.parametrize(
    "text, ppm",
    [
        # convention page on purity, umat.com.tw: metallic impurities below 1, 10, 50, 100, 500, 1000 ppm
        ("6N", 1.0),
        ("5N", 10.0),
        ("4N5", 50.0),
        ("4N", 100.0),
        ("3N5", 500.0),
        ("3N", 1000.0),
        # Indium Corporation, "Explanation of nines regarding metal purity": 5N8 is 99.9998 %
        ("5N8", 2.0),
    ],
)
def test_grades(text: str, ppm: float) -> None:
    assert impurity_of_grade(text) == pytest.approx(ppm * 1e-6, rel=1e-9)
    assert grade(ppm * 1e-6) == text


def test_gas_formers_do_not_count() -> None:
    # the same page: "N/O/H and C/S excluded"; 4 ppm of metals beside 40 ppm of gas formers is better than 5N
    contents = {"Fe": 3e-6, "Ag": 1e-6, "O": 20e-6, "H": 1e-6, "C": 10e-6, "N": 4e-6, "S": 5e-6}
    assert grade(metals_total(contents)) == "5N6"


def test_atoms_in_silicon() -> None:
    # CODATA 2018: lattice parameter of silicon 543.1020511 pm, so 8 / a^3 = 4.99402e28 atoms/m3; density
    # 2329 kg/m3 from memory of the handbooks, which is what limits the tolerance
    mol = concentration_from_mass([1.0], [28.085e-3], 2329.0)[0]
    assert mol * 6.02214076e23 == pytest.approx(4.99402e28, rel=2e-4)
