"""Frost points against a printed table."""

from __future__ import annotations

import pytest

from purity.constants import ATM, R
from purity.quantities import frost_point_fraction, frost_point_pressure, parse

#: Dew-point table at 101.3 kPa, zonglen.com/en/4/2/1169539 (2023): frost point in degC, ppm by volume.
TABLE = [
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
]


@pytest.mark.parametrize(("degC", "ppm"), TABLE)
def test_frost_point_in_ppm(degC: float, ppm: float) -> None:
    assert frost_point_pressure(degC + 273.15) / ATM * 1e6 == pytest.approx(ppm, rel=0.003)


def test_frost_point_as_it_is_written_in_a_scenario() -> None:
    given = frost_point_fraction(parse("-60 degC", "dew point", "furnace/exhaust/dew point"))
    assert given.median * 1e6 == pytest.approx(10.68, rel=0.003)  # same table


def test_water_in_a_cubic_metre() -> None:
    # 0.09491 g/m3 at 20 degC for a frost point of -40 degC: same table.
    pressure = frost_point_pressure(233.15)
    assert pressure * 18.015 / (R * 293.15) == pytest.approx(0.09491, rel=0.003)


@pytest.mark.parametrize(
    ("degC", "pascal"),
    # Saturation pressure of liquid water: CRC Handbook of Chemistry and Physics, vapour pressure of water
    # from 0 to 370 degC; from memory.
    [(20.0, 2339.3), (25.0, 3169.9), (38.0, 6632.8), (100.0, 101420.0)],
)
def test_dew_point_over_water(degC: float, pascal: float) -> None:
    assert frost_point_pressure(degC + 273.15) == pytest.approx(pascal, rel=0.001)
