"""Every unit against pint, and humidity and permeation against printed values."""

from __future__ import annotations

import warnings

import pytest

from purity.quantities import express, frost_point_pressure, number
from purity.units import DIMENSIONS

with warnings.catch_warnings():
    warnings.simplefilter("ignore")
    import pint

    REGISTRY = pint.UnitRegistry()

#: Names that pint has differently; gas volumes at 0 degC and 101 325 Pa are moles there.
NORMAL_VOLUME = "(101325 Pa / (8.314462618 J/mol/K * 273.15 K))"
WATER = "(18.015 g/mol)"
PINT = {
    "degC": "delta_degC",
    "um": "micrometer",
    "ug": "microgram",
    "in": "inch",
    "mil": "thou",
    "t": "metric_ton",
    "mbar": "millibar",
    "mTorr": "millitorr",
    "Torr": "torr",
    "ppm(mol)": "1e-6",
    "ppb(mol)": "1e-9",
    "ppm": "1e-6",
    "ppb": "1e-9",
    "at%": "0.01",
    "mol%": "0.01",
    "mass%": "0.01",
    "vol%": "0.01",
    "%": "0.01",
    "%RH": "0.01",
    "% RH": "0.01",
    "1": "1",
    "ug/g": "microgram/gram",
    "ug/kg": "microgram/kilogram",
    "cal/mol": "calorie/mol",
    "kcal/mol": "kilocalorie/mol",
    "d": "day",
    "mTorr/min": "millitorr/minute",
    "mbar/min": "millibar/minute",
    "mbar/h": "millibar/hour",
    "Pa/min": "Pa/minute",
    "L/min": "liter/minute",
    "L/h": "liter/hour",
    "L/s": "liter/second",
    "mL/min": "milliliter/minute",
    "cm3/min": "cm**3/minute",
    "m3/h": "m**3/hour",
    "m3/s": "m**3/second",
    "Pa m3/s": "Pa*m**3/s",
    "Pa L/s": "Pa*liter/s",
    "mbar L/s": "millibar*liter/s",
    "Torr L/s": "torr*liter/s",
    "atm cm3/s": "atm*cm**3/s",
    "mm/min": "mm/minute",
    "um/h": "micrometer/hour",
    "mol/(m s Pa)": "mol/(m*s*Pa)",
    "barrer": f"1e-10 * {NORMAL_VOLUME} * cm**3*cm/(cm**2*s*cmHg)",
    "cm3 mm/(m2 d atm)": f"{NORMAL_VOLUME} * cm**3*mm/(m**2*day*atm)",
    "cm3 mil/(100in2 d atm)": f"{NORMAL_VOLUME} * cm**3*thou/(100*inch**2*day*atm)",
    "mol/(m2 s Pa)": "mol/(m**2*s*Pa)",
    "GPU": f"1e-6 * {NORMAL_VOLUME} * cm**3/(cm**2*s*cmHg)",
    "cm3/(m2 d atm)": f"{NORMAL_VOLUME} * cm**3/(m**2*day*atm)",
    "perm": f"grain/(hour*foot**2*inHg) / {WATER}",
    "metric perm": f"gram/(day*m**2*mmHg) / {WATER}",
    "kg/(m2 s)": "kg/(m**2*s)",
    "g/(m2 d)": "gram/(m**2*day)",
    "mg/(m2 d)": "milligram/(m**2*day)",
    "ug/(m2 d)": "microgram/(m**2*day)",
    "ug/(cm2 d)": "microgram/(cm**2*day)",
    "g/(100in2 d)": "gram/(100*inch**2*day)",
    "kg/m2": "kg/m**2",
    "g/m2": "gram/m**2",
    "mg/m2": "milligram/m**2",
    "ug/m2": "microgram/m**2",
    "mg/cm2": "milligram/cm**2",
    "ug/cm2": "microgram/cm**2",
    "ng/cm2": "nanogram/cm**2",
    "m2": "m**2",
    "dm2": "dm**2",
    "cm2": "cm**2",
    "mm2": "mm**2",
    "m3": "m**3",
    "cm3": "cm**3",
    "mL": "milliliter",
    "L": "liter",
    "h": "hour",
    "min": "minute",
}
UNITS = [(name, unit) for name, dim in DIMENSIONS.items() for unit in dim.units]


@pytest.mark.parametrize("dimension, unit", UNITS)
def test_factor_agrees_with_pint(dimension: str, unit: str) -> None:
    si = {"permeability": "mol/(m*s*Pa)", "permeance": "mol/(m**2*s*Pa)"}.get(dimension)
    outside = REGISTRY.Quantity(1, "dimensionless") * REGISTRY.parse_expression(PINT.get(unit, unit))
    value = outside.to(si).magnitude if si else outside.to_base_units().magnitude
    if dimension in ("mass", "content", "mass share", "mass rate per area", "mass per area"):
        value = outside.to_base_units().magnitude
    assert DIMENSIONS[dimension].units[unit] == pytest.approx(value, rel=1e-6)


def test_celsius_agrees_with_pint() -> None:
    for celsius in (-196.0, -58.0, 0.0, 1084.62, 3410.0):
        outside = REGISTRY.Quantity(celsius, "degC").to("K").magnitude
        assert number(f"{celsius} degC", "temperature") == pytest.approx(outside, rel=1e-14)


@pytest.mark.parametrize(
    "celsius, ppm",
    [
        # dew-point table (ppm by volume at 101.3 kPa) of zonglen.com, 2023
        (0.0, 6033.0),
        (-10.0, 2566.0),
        (-20.0, 1019.0),
        (-30.0, 375.3),
        (-40.0, 126.8),
        (-50.0, 38.89),
        (-60.0, 10.68),
        (-70.0, 2.584),
        (-76.0, 1.031),
        (-80.0, 0.541),
        (-90.0, 0.09564),
        (-100.0, 0.01387),
    ],
)
def test_frost_points_in_print(celsius: float, ppm: float) -> None:
    assert 1e6 * frost_point_pressure(celsius + 273.15) / 101325 == pytest.approx(ppm, rel=0.0015)


@pytest.mark.parametrize("T, pascal", [(230.0, 8.94735), (273.16, 611.657)])
def test_sublimation_check_value(T: float, pascal: float) -> None:
    # IAPWS R14-08(2011), table 3: 8.947 35 Pa at 230 K; 611.657 Pa at the triple point is its constant
    assert frost_point_pressure(T) == pytest.approx(pascal, rel=1e-6)


@pytest.mark.parametrize("T, pascal", [(273.1600001, 611.657), (373.1243, 101325.0)])
def test_saturation_check_values(T: float, pascal: float) -> None:
    # IAPWS SR1-86(1992): 611.657 Pa at the triple point, 101 325 Pa at 373.1243 K
    assert frost_point_pressure(T) == pytest.approx(pascal, rel=1e-4)


@pytest.mark.parametrize("T", [120.0, 180.0, 215.15, 250.0, 270.0])
def test_ice_agrees_with_an_open_package(T: float) -> None:
    from chemicals.iapws import iapws11_Psub

    assert frost_point_pressure(T) == pytest.approx(iapws11_Psub(T), rel=1e-9)


@pytest.mark.parametrize("T", [280.0, 295.15, 310.0, 373.15, 500.0])
def test_water_agrees_with_an_open_package(T: float) -> None:
    from chemicals.iapws import iapws92_Psat

    assert frost_point_pressure(T) == pytest.approx(iapws92_Psat(T), rel=1e-9)


@pytest.mark.parametrize(
    "text, dimension, published, rel",
    [
        # "Perm (unit)", en.wikipedia.org: 57.2135 and 86.8127 ng/(s m2 Pa); in mol of water (18.015 g/mol)
        ("1 perm", "permeance", 57.2135e-12 / 18.015e-3, 1e-4),
        ("1 metric perm", "permeance", 86.8127e-12 / 18.015e-3, 1e-4),
        # "Barrer", handwiki.org: 3.35e-16 mol m/(m2 s Pa); GPU 3.35e-10 mol/(m2 s Pa); S. A. Stern (1968)
        ("1 barrer", "permeability", 3.35e-16, 3e-3),
        ("1 GPU", "permeance", 3.35e-10, 3e-3),
        # ASTM F1249 and E96 reporting units (from memory): 1 g/(100 in2 d) is 15.5 g/(m2 d)
        ("1 g/(100in2 d)", "mass rate per area", 15.5e-3 / 86400, 2e-4),
        # 1 cm3 mil/(100 in2 d atm) = 0.3937 cm3 mm/(m2 d atm), and 5.096e-18 mol/(m s Pa): common practice,
        # no source
        ("1 cm3 mil/(100in2 d atm)", "permeability", 0.3937 * 5.096e-18, 2e-4),
    ],
)
def test_permeation_units_in_print(text: str, dimension: str, published: float, rel: float) -> None:
    assert number(text, dimension) == pytest.approx(published, rel=rel)


def test_us_perm_in_metric_perms() -> None:
    # "Perm (unit)", en.wikipedia.org: 0.659045
    ratio = express(number("1 perm", "permeance"), "metric perm")
    assert ratio == pytest.approx(0.659045, rel=1e-4)


def test_leak_units_in_print() -> None:
    # 1 mbar L/s = 0.1 Pa m3/s = 0.75 Torr L/s: common practice, no source
    assert express(number("1 mbar L/s", "leak"), "Torr L/s") == pytest.approx(0.75, rel=1e-3)
