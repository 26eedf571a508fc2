"""Oxygen in copper from the library against the assessed diagram and handbooks."""

from __future__ import annotations

from math import exp, log, sqrt

import pytest
from scipy.optimize import brentq

from purity.composition import fraction_from_mass, mass_from_fraction
from purity.constants import ATM
from purity.database import Found, Library, Record, ln_value, load

M_CU, M_O = 63.546e-3, 15.999e-3
#: Copper, cuprous oxide and liquid: 1066 degC, log10 p(O2/bar) = -5.63 (ASM Cu-O diagram, summary page).
T_EUTECTIC, P_EUTECTIC = 1339.0, 10**-5.63 * 1e5


@pytest.fixture(scope="module")
def library() -> Library:
    return load()


def sieverts(library: Library, phase: str, source: str) -> Record:
    return next(r for r in library.rivals(f"sieverts:Cu/{phase}/O") if r.source == source)


def percent(x: float) -> float:
    """Mass % of oxygen at a mole fraction."""
    return float(mass_from_fraction([x], [M_O], M_CU)[0]) * 100.0


# ASM Cu-O diagram (summary page): liquid of the eutectic 1.7 at.% O; handbook figure 0.43 mass %
def test_eutectic_in_mass_percent() -> None:
    assert percent(0.017) == pytest.approx(0.434, rel=0.003)


# ASM Metals Handbook, copper (from memory): 0.39 mass % is 1.53 at.%
def test_handbook_eutectic_in_atom_percent() -> None:
    assert float(fraction_from_mass([0.0039], [M_O], M_CU)[0]) == pytest.approx(0.0153, rel=0.005)


# ASM Cu-O diagram: 0.015 at.% in the solid at the eutectic temperature; handbooks 38 mass ppm
def test_largest_solubility_in_the_solid(library: Library) -> None:
    points = library.rows("solubility", host="Cu", phase="fcc", solute="O")
    assert max(r.fields["limit_ppm_mass"] for r in points) == pytest.approx(38.0, rel=0.02)


# Same point from the Sieverts constant and the oxygen pressure of the eutectic: within the spreads of both
def test_solid_at_the_eutectic_from_its_oxygen_pressure(library: Library) -> None:
    for source in ("MAGFRISK14", "NARULA83"):
        ppm = exp(float(ln_value(sieverts(library, "fcc", source), T_EUTECTIC))) * sqrt(P_EUTECTIC / ATM)
        assert log(ppm / 38.0) == pytest.approx(0.0, abs=0.5)


# Published 0.412 mass % +- 6 %, the middle of the two eutectic compositions 0.39 and 0.434, with
# log f = -0.158 [%O] (G. K. Sigworth, J. F. Elliott 1974; H. Sano, H. Sakao 1955; from memory)
def test_liquid_at_the_eutectic_from_the_older_free_energy(library: Library) -> None:
    henry = (
        exp(float(ln_value(sieverts(library, "liquid", "SE74CU"), T_EUTECTIC)))
        * 1e-4
        * sqrt(P_EUTECTIC / ATM)
    )
    content = brentq(lambda c: c * 10 ** (-0.158 * c) - henry, 0.0, 1.0)
    assert content == pytest.approx(0.412, rel=0.06)


# The assessed constant with the first-order interaction of the library against the 1.7 at.% of the diagram
def test_liquid_at_the_eutectic_from_the_record_in_use(library: Library) -> None:
    found = library.find("sieverts", host="Cu", phase="liquid", solute="O")
    own = library.rows("interaction", host="Cu", phase="liquid", solute="O", by="O")[0].fields["epsilon"]
    assert isinstance(found, Found)
    w = exp(float(ln_value(found.record, T_EUTECTIC))) * 1e-6 * sqrt(P_EUTECTIC / ATM)
    henry = float(fraction_from_mass([w], [M_O], M_CU)[0])
    x = brentq(lambda x: x * exp(own * x) - henry, 0.0, 0.05)
    assert percent(x) == pytest.approx(0.434, rel=0.10)


# ASM Cu-O diagram: 0.015 at.% in the solid beside 1.7 at.% in the liquid, 0.0088; one sigma of the two
# constants together is 0.32 in ln
def test_segregation_of_oxygen_at_the_melting_point(library: Library) -> None:
    constants = {
        phase: library.find("sieverts", host="Cu", phase=phase, solute="O") for phase in ("fcc", "liquid")
    }
    ln_k = {
        phase: float(ln_value(f.record, T_EUTECTIC)) for phase, f in constants.items() if isinstance(f, Found)
    }
    assert ln_k["fcc"] - ln_k["liquid"] == pytest.approx(log(0.0088), abs=0.5)
