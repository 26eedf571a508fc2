"""Text with a unit is read as written or refused with a cure; nothing is guessed."""

from __future__ import annotations

import math

import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from purity.errors import OutOfRangeError, UnitError
from purity.quantities import (
    express,
    frost_point_fraction,
    frost_point_pressure,
    moles_of_normal_volume,
    number,
    parse,
    rounded,
    show,
    show_content,
)
from purity.scenario import Given
from purity.units import DIMENSIONS

UNITS = [(name, unit) for name, dim in DIMENSIONS.items() for unit in dim.units if unit != "1"]
BOUNDED = {"share", "gas fraction", "mass share", "content", "mole content", "humidity"}


@pytest.mark.parametrize(
    "text, dimension, expected",
    [
        ("1180 degC", "temperature", ("exact", 1453.15, 1453.15)),
        ("1180 °C", "temperature", ("exact", 1453.15, 1453.15)),
        ("300 K", "temperature", ("exact", 300.0, 300.0)),
        ("−58 degC", "dew point", ("exact", 215.15, 215.15)),
        ("2 h 30 min", "time", ("exact", 9000.0, 9000.0)),
        ("1 d 12 h", "time", ("exact", 129600.0, 129600.0)),
        ("1 h 5.5 s", "time", ("exact", 3605.5, 3605.5)),
        ("45 min to 2 h", "time", ("uniform", 2700.0, 7200.0)),
        ("2 to 10 ppm", "content", ("uniform", 2e-6, 1e-5)),
        ("2 ppm to 10 ppm", "content", ("uniform", 2e-6, 1e-5)),
        ("3 ppm x/ 2", "content", ("lognormal", 1.5e-6, 6e-6)),
        ("3 ppm ×/ 2", "content", ("lognormal", 1.5e-6, 6e-6)),
        ("1180 +- 10 degC", "temperature", ("normal", 1443.15, 1463.15)),
        ("1180 degC ± 10 degC", "temperature", ("normal", 1443.15, 1463.15)),
        ("1180 degC +- 10", "temperature", ("normal", 1443.15, 1463.15)),
        ("-20 to -10 degC", "temperature", ("uniform", 253.15, 263.15)),
        ("<0.05 ppm", "content", ("below", 0.0, 5e-8)),
        ("<0.05", "content", ("below", 0.0, 5e-8)),
        ("5 L/min", "gas flow", ("exact", 5e-3 / 60, 5e-3 / 60)),
        ("20 µm", "length", ("exact", 20e-6, 20e-6)),
        ("175 cm²", "area", ("exact", 0.0175, 0.0175)),
        ("5e-4 mbar L/s", "leak", ("exact", 5e-5, 5e-5)),
        (" 25kg ", "mass", ("exact", 25.0, 25.0)),
        (".5 kg", "mass", ("exact", 0.5, 0.5)),
        (25, "mass", ("exact", 25.0, 25.0)),
        (1.5, "content", ("exact", 1.5e-6, 1.5e-6)),
    ],
)
def test_reads_what_is_written(text: str | float, dimension: str, expected: tuple[str, float, float]) -> None:
    got = parse(text, dimension, "a key")
    assert (got.key, got.law, got.assumed) == ("a key", expected[0], False)
    assert (got.low, got.high) == pytest.approx(expected[1:], rel=1e-12)


@pytest.mark.parametrize(
    "text, dimension, cure",
    [
        ("1,5 mm", "length", "decimal comma"),
        ("1200 C", "temperature", "write degC"),
        ("1 000 kg", "mass", "write 1000"),
        ("1 2 kg", "mass", "one number"),
        ("5 mm", "temperature", "'mm' measures a length; units for a temperature: degC, K"),
        ("5 ppmw", "content", "nearest: ppm"),
        ("5 mbar l/s", "leak", "nearest: mbar L/s"),
        ("10 at%", "content", "measures a content by mole"),
        ("5 kG", "mass", "nearest: kg"),
        ("", "mass", "a number and a unit are wanted"),
        ("about 5 kg", "mass", "a number and a unit are wanted"),
        (">5 ppm", "content", "a number and a unit are wanted"),
        ("nan", "mass", "finite"),
        ("-inf kg", "mass", "finite"),
        ("1e999 kg", "mass", "too large"),
        (float("nan"), "mass", "finite"),
        (10**400, "mass", "too large"),
        (True, "mass", "a mass is wanted"),
        (None, "mass", "a mass is wanted"),
        ("-5 kg", "mass", "below zero"),
        ("-300 degC", "temperature", "absolute zero"),
        ("120 %", "share", "exceed 1"),
        ("2 h 90 min", "time", "write one unit only"),
        ("30 min 2 h", "time", "no unit 'min 2 h'"),
        ("2 min 2 min", "time", "no unit 'min 2 min'"),
        ("10 to 2 ppm", "content", "smaller one"),
        ("1 to 2 to 3 ppm", "content", "one range"),
        ("5 ppm +- 20 %", "content", "want one unit"),
        ("5 ppm +- -1 ppm", "content", "half width"),
        ("1 +- 0.9 ppm", "content", "below zero"),
        ("2 ppm x/ 0.5", "content", "above 1"),
        ("2 ppm x/ 2 ppm", "content", "no unit"),
        ("20 degC x/ 2", "temperature", "no offset"),
        ("0 ppm x/ 2", "content", "above zero"),
        ("<0 ppm", "content", "above zero"),
        ("<5 kg", "mass", "cannot be 'below'"),
        ("<2 to 5 ppm", "content", "a number and a unit are wanted"),
    ],
)
def test_refuses_with_a_cure(text: str | float, dimension: str, cure: str) -> None:
    with pytest.raises(UnitError) as error:
        parse(text, dimension, "key")
    assert cure in str(error.value)
    assert repr(text) in str(error.value)


def test_a_bare_number_takes_the_documented_unit() -> None:
    assert parse(3, "time", "k", unit="d").low == 3 * 86400
    assert parse("3", "time", "k").low == 180
    assert parse("2 to 3", "time", "k", unit="d").high == 3 * 86400


def test_a_number_has_no_range() -> None:
    assert number("3 mm", "length") == pytest.approx(3e-3)
    with pytest.raises(UnitError, match="without a range"):
        number("3 to 4 mm", "length")


@pytest.mark.parametrize("dimension", DIMENSIONS)
def test_bare_unit_is_legal(dimension: str) -> None:
    assert DIMENSIONS[dimension].bare in DIMENSIONS[dimension].units


@given(st.sampled_from(UNITS), st.floats(1e-6, 1e6))
def test_round_trip(unit: tuple[str, str], value: float) -> None:
    dimension, name = unit
    dim = DIMENSIONS[dimension]
    assume(dimension not in BOUNDED or value * dim.units[name] <= 1)
    si = number(f"{value!r} {name}", dimension)
    assert express(si, name, dimension) == pytest.approx(value, rel=1e-12, abs=1e-9 if dim.offsets else 0)


@given(st.sampled_from(UNITS), st.floats(1e-3, 0.5), st.floats(1.01, 20))
def test_a_factor_keeps_its_median(unit: tuple[str, str], value: float, factor: float) -> None:
    dimension, name = unit
    dim = DIMENSIONS[dimension]
    assume(not dim.offsets and (dimension not in BOUNDED or value * factor * dim.units[name] <= 1))
    got = parse(f"{value!r} {name} x/ {factor!r}", dimension, "k")
    assert got.median == pytest.approx(number(f"{value!r} {name}", dimension), rel=1e-12)
    assert got.high / got.low == pytest.approx(factor**2, rel=1e-12)


@given(st.text(max_size=30), st.sampled_from(list(DIMENSIONS)))
def test_any_text_is_read_or_refused(text: str, dimension: str) -> None:
    try:
        got = parse(text, dimension, "k")
    except UnitError:
        return
    assert math.isfinite(got.low)
    assert got.low <= got.high < math.inf


def test_express_refuses_an_unknown_unit() -> None:
    assert express(0.1, "mbar L/s") == pytest.approx(1.0)
    with pytest.raises(UnitError, match="furlong"):
        express(1.0, "furlong")
    with pytest.raises(UnitError, match="for a mass"):
        express(1.0, "mm", "mass")


@pytest.mark.parametrize(
    "value, digits, text",
    [
        (0.0, 2, "0"),
        (178.4, 2, "180"),
        (0.0994, 2, "0.099"),
        (0.0999, 2, "0.10"),
        (1.26e-5, 2, "1.3e-05"),
        (123456.0, 3, "1.23e+05"),
        (-3.14159, 3, "-3.14"),
    ],
)
def test_rounded(value: float, digits: int, text: str) -> None:
    assert rounded(value, digits) == text


@given(st.floats(1e-30, 1e30), st.integers(1, 9))
def test_rounding_stays_within_half_a_digit(value: float, digits: int) -> None:
    assert float(rounded(value, digits)) == pytest.approx(value, rel=0.5 * 10.0 ** (1 - digits) * (1 + 1e-9))


def test_show() -> None:
    assert show(1453.15, "degC", 4) == "1180 degC"
    assert show_content(2.04e-6) == "2.0 ppm"
    assert show_content(3.1e-9) == "3.1 ppb"
    assert show_content(0.0) == "0 ppm"


@given(st.floats(51.0, 646.0))
def test_vapour_pressure_rises(T: float) -> None:
    assert frost_point_pressure(T + 0.5) > frost_point_pressure(T)


def test_vapour_pressure_is_continuous_at_the_triple_point() -> None:
    ice, water = frost_point_pressure(273.16), frost_point_pressure(273.160001)
    assert water == pytest.approx(ice, rel=1e-4)


@pytest.mark.parametrize("T", [49.0, 700.0, math.nan])
def test_no_vapour_pressure_outside_the_range(T: float) -> None:
    with pytest.raises(OutOfRangeError):
        frost_point_pressure(T)


def test_a_band_of_dew_points_becomes_a_band_of_water() -> None:
    got = frost_point_fraction(parse("-58 +- 2 degC", "dew point", "k"))
    assert got.law == "lognormal"
    assert got.low < frost_point_pressure(215.15) / 101325 < got.high
    assert got.median == pytest.approx(frost_point_pressure(215.15) / 101325, rel=0.01)
    assert frost_point_fraction(parse("-60 to -50 degC", "dew point", "k")).law == "uniform"
    with pytest.raises(OutOfRangeError, match="boiling point"):
        frost_point_fraction(Given("k", "exact", 400.0, 400.0))


def test_moles_of_a_normal_litre() -> None:
    # 22.41396954 L/mol at 0 degC and 101 325 Pa: CODATA 2018 molar volume of an ideal gas
    assert moles_of_normal_volume(22.41396954e-3) == pytest.approx(1.0, rel=1e-9)
