"""Units of permeation, and what goes through a film of a size that packaging tables print."""

from __future__ import annotations

import pytest

from purity.constants import P0
from purity.database import load
from purity.kinetics.transfer import permeation_conductance
from purity.quantities import express, frost_point_pressure, number

WATER = 18.015e-3  # kg/mol
DAY = 86400.0


@pytest.mark.parametrize(
    ("unit", "nanograms"),
    # ng/(s m2 Pa): en.wikipedia.org/wiki/Perm_(unit)
    [("perm", 57.2135), ("metric perm", 86.8127)],
)
def test_perms_in_mass(unit: str, nanograms: float) -> None:
    assert number(f"1 {unit}", "permeance") * WATER * 1e12 == pytest.approx(nanograms, rel=1e-4)


def test_one_perm_in_the_other() -> None:
    # 0.659045: en.wikipedia.org/wiki/Perm_(unit)
    assert express(number("1 perm", "permeance"), "metric perm") == pytest.approx(0.659045, rel=1e-4)


def test_barrer_and_gas_permeation_unit() -> None:
    # 3.35e-16 mol m/(m2 s Pa) and 3.35e-10 mol/(m2 s Pa): handwiki.org/wiki/Barrer, after S. A. Stern,
    # J. Polym. Sci. A-2 6 (1968) 1933.
    assert number("1 barrer", "permeability") == pytest.approx(3.35e-16, rel=0.003)
    assert number("1 GPU", "permeance") == pytest.approx(3.35e-10, rel=0.003)


def test_water_rate_per_hundred_square_inches() -> None:
    # 15.5 g/(m2 d) in 1 g/(100 in2 d): reporting units of ASTM F1249 and E96; from memory.
    rate = number("1 g/(100in2 d)", "mass rate per area")
    assert rate * DAY * 1e3 == pytest.approx(15.5, rel=2e-4)


def test_water_through_one_perm_under_the_usual_test() -> None:
    # 29.1 g/(m2 d) at 37.8 degC and 90 % relative humidity: 57.2135 ng/(s m2 Pa) times 0.9 times 6.55 kPa.
    driving = 0.9 * frost_point_pressure(310.95)
    assert number("1 perm", "permeance") * driving * WATER * 1e3 * DAY == pytest.approx(29.1, rel=0.005)


@pytest.mark.parametrize(
    ("barrier", "low", "high"),
    # cm3(STP) mil/(100 in2 d atm) of oxygen at 25 degC: Biosystems Engineering, food package engineering,
    # table 11.2 (LDPE, HDPE, PET).
    [("polyethylene", 300.0, 600.0), ("high-density polyethylene", 100.0, 250.0), ("polyester", 3.0, 6.0)],
)
def test_oxygen_through_films_as_printed(barrier: str, low: float, high: float) -> None:
    record = next(r for r in load().rows("packages", barrier=barrier, gas="O2"))
    held = express(record.fields["permeability_mol_per_m_s_Pa"], "cm3 mil/(100in2 d atm)")
    assert low < held < high


@pytest.mark.parametrize(
    ("barrier", "low", "high"),
    # g mil/(100 in2 d) of water at 38 degC, 90 % relative humidity: the same table.
    [("polyethylene", 1.0, 2.0), ("high-density polyethylene", 0.3, 0.6), ("polyester", 1.0, 2.0)],
)
def test_water_through_films_as_printed(barrier: str, low: float, high: float) -> None:
    record = next(r for r in load().rows("packages", barrier=barrier, gas="H2O"))
    mil = permeation_conductance(record.fields["permeability_mol_per_m_s_Pa"], 25.4e-6)
    rate = float(mil) * 0.9 * frost_point_pressure(311.15) / P0 * WATER
    assert low < express(rate, "g/(100in2 d)") < high
