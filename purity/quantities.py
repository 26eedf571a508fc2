"""Text with a unit <-> SI, at the boundary only; inside, everything is SI.

The table is closed and matched exactly: what is not in it is an error that names the nearest legal
units, never a guess. ``ppm`` of a metal is by mass, of a gas by volume; ``ppm(mol)`` is by mole. Gas
flows are normal volumes (0 degC, 101 325 Pa). Text is read in these forms::

    1180 degC   2 h 30 min   2 to 10 ppm   3 ppm x/ 2   1180 +- 10 degC   <0.05 ppm
"""

from __future__ import annotations

import re
from difflib import get_close_matches
from math import exp, floor, isfinite, log10
from typing import Final

from purity.constants import ATM, T_NORMAL, R
from purity.errors import OutOfRangeError, UnitError
from purity.scenario import Given
from purity.units import DIMENSIONS, Dimension

#: Signs that have one plain reading.
_SIGNS: Final = str.maketrans(
    {"−": "-", "µ": "u", "μ": "u", "²": "2", "³": "3", "±": "+-", "×": "x", "\u00a0": " ", "\u202f": " "}
)
_NUMBER: Final = r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?"
_PART: Final = re.compile(rf"({_NUMBER})\s*(.*)", re.DOTALL)
_COMPOUND: Final = re.compile(
    r"(?:(?P<d>\d+)\s*d)?\s*(?:(?P<h>\d+)\s*h)?\s*(?:(?P<min>\d+)\s*min)?\s*(?:(?P<s>\d+(?:\.\d+)?)\s*s)?"
)
#: Largest half width over value of a "+-" whose draws must stay positive: below zero at 5.5 sigma.
_WIDEST: Final = 0.3


def _refuse(text: object, why: str) -> UnitError:
    return UnitError(f"{text!r}: {why}")


def _legal(name: str, unit: str) -> str:
    dim = DIMENSIONS[name]
    units = [key for key in dim.units if key != "1"]
    near = get_close_matches(unit, units, n=2, cutoff=0.4)
    near += [key for key in units if unit and unit.lower() in key.lower() and key not in near]
    if near:
        return f"nearest: {', '.join(near)}; all for {dim.article}: {', '.join(units)}"
    return f"units for {dim.article}: {', '.join(units)}"


def _unit(text: str, unit: str, name: str) -> str:
    """Check a unit against the table of its dimension."""
    dim = DIMENSIONS[name]
    unit = unit.replace("°C", "degC")
    if unit in dim.units:
        return unit
    if unit[:1] == ",":
        raise _refuse(text, "a decimal comma is not read; write a point (1.5)")
    if re.match(r"[\d.]", unit):
        raise _refuse(text, "one number is wanted before the unit; write 1000, not 1 000")
    if unit == "C" and name in ("temperature", "dew point"):
        raise _refuse(text, "'C' is coulomb; write degC")
    for other in DIMENSIONS.values():
        if unit in other.units:
            raise _refuse(text, f"'{unit}' measures {other.article}; {_legal(name, '')}")
    raise _refuse(text, f"no unit '{unit}'; {_legal(name, unit)}")


def _split(text: str, part: str) -> tuple[float, str]:
    match = _PART.fullmatch(part.strip())
    if not match:
        if re.fullmatch(r"[+-]?\s*(nan|inf(inity)?)\b.*", part.strip(), re.IGNORECASE):
            raise _refuse(text, "a finite number is wanted")
        raise _refuse(text, "a number and a unit are wanted, like '5 ppm', '2 to 10 ppm' or '3 ppm x/ 2'")
    value = float(match[1])
    if not isfinite(value):
        raise _refuse(text, "the number is too large")
    return value, match[2].strip()


def _to_si(value: float, unit: str, name: str) -> float:
    dim = DIMENSIONS[name]
    return value * dim.units[unit] + dim.offset(unit)


def _checked(text: object, value: float, name: str) -> float:
    dim = DIMENSIONS[name]
    if not isfinite(value):
        raise _refuse(text, "a finite number is wanted")
    if value < dim.floor:
        lowest = "absolute zero (-273.15 degC)" if dim.offsets else "zero"
        raise _refuse(text, f"{dim.article} cannot lie below {lowest}")
    if name in ("share", "gas fraction", "mass share", "content", "mole content", "humidity") and value > 1:
        raise _refuse(text, f"{dim.article} cannot exceed 1 (100 %)")
    return value


def _compound(text: str) -> float | None:
    """Read '2 h 30 min': falling units, whole numbers, each below one of the unit before it."""
    match = _COMPOUND.fullmatch(text.strip())
    parts = [(unit, float(number)) for unit, number in match.groupdict().items() if number] if match else []
    if len(parts) < 2:
        return None
    for unit, number in parts[1:]:
        if number >= {"h": 24, "min": 60, "s": 60}[unit]:
            raise _refuse(text, f"{number:g} {unit} is more than one unit before it; write one unit only")
    return sum(number * DIMENSIONS["time"].units[unit] for unit, number in parts)


def _one(text: str, part: str, name: str, unit: str = "") -> float:
    """Read one number with its unit, or with `unit` where it has none."""
    if name == "time" and (seconds := _compound(part)) is not None:
        return seconds
    value, own = _split(text, part)
    return _checked(text, _to_si(value, _unit(text, own, name) if own else unit, name), name)


def _range(text: str, left: str, right: str, name: str, bare: str) -> tuple[float, float]:
    unit = _split(text, right)[1]
    unit = _unit(text, unit, name) if unit else bare
    low, high = _one(text, left, name, unit), _one(text, right, name, unit)
    if low >= high:
        raise _refuse(text, "the first number of a range must be the smaller one")
    return low, high


def _half_width(text: str, left: str, right: str, name: str, bare: str) -> tuple[float, float]:
    (value, own), (half, of_half) = _split(text, left), _split(text, right)
    if own and of_half and own != of_half:
        raise _refuse(
            text, "the value and its half width want one unit: write '5 +- 1 ppm' or '5 ppm x/ 1.2'"
        )
    unit = _unit(text, own or of_half, name) if own or of_half else bare
    if half <= 0:
        raise _refuse(text, "the half width after '+-' must be above zero")
    dim = DIMENSIONS[name]
    middle, width = _checked(text, _to_si(value, unit, name), name), half * dim.units[unit]
    if dim.floor == 0 and width > _WIDEST * middle:
        raise _refuse(text, "so wide a band would reach below zero; write a range or a factor ('3 ppm x/ 2')")
    return middle - width, middle + width


def _factor(text: str, left: str, right: str, name: str, bare: str) -> tuple[float, float]:
    factor, unit = _split(text, right)
    if unit:
        raise _refuse(text, "a factor has no unit: write '3 ppm x/ 2'")
    if factor <= 1:
        raise _refuse(text, "the factor after 'x/' must be above 1")
    middle = _one(text, left, name, bare)
    if middle <= 0 or DIMENSIONS[name].offsets:
        raise _refuse(text, f"a factor needs a value above zero and no offset; {_legal(name, '')}")
    return middle / factor, _checked(text, middle * factor, name)


def parse(text: str | float, dimension: str, key: str, *, unit: str | None = None) -> Given:
    """Read one input.

    Parameters
    ----------
    text : str or float
        Number with unit, range, factor or half width, or a bare number.
    dimension : str
        Key of :data:`purity.units.DIMENSIONS`.
    key : str
        Name path that the input keeps.
    unit : str, optional
        Unit of a bare number; the one of the dimension if left out.

    Returns
    -------
    Given
        In SI. "2 to 10" is uniform, "x/ 2" lognormal and "+- 10" normal with their 5 % and 95 % points,
        "<0.05" lies between 0 and that value.

    Raises
    ------
    UnitError
        Says what is wrong, and the legal units.
    """
    bare = unit or DIMENSIONS[dimension].bare
    if isinstance(text, bool) or not isinstance(text, (str, int, float)):
        raise _refuse(text, f"{DIMENSIONS[dimension].article} is wanted, as text with a unit or a number")
    if not isinstance(text, str):
        try:
            value = float(text)
        except OverflowError:
            raise _refuse(text, "the number is too large") from None
        value = _checked(text, _to_si(value, bare, dimension), dimension)
        return Given(key, "exact", value, value)
    clean = text.translate(_SIGNS).strip()
    for sign, law, read in (
        (r"\bto\b", "uniform", _range),
        (r"x/", "lognormal", _factor),
        (r"\+-", "normal", _half_width),
    ):
        parts = re.split(sign, clean)
        if len(parts) == 2:
            low, high = read(text, parts[0], parts[1], dimension, bare)
            return Given(key, law, low, high)  # type: ignore[arg-type]
        if len(parts) > 2:
            raise _refuse(text, "one range, factor or half width is wanted")
    if clean.startswith("<"):
        if not DIMENSIONS[dimension].below:
            raise _refuse(text, f"{DIMENSIONS[dimension].article} cannot be 'below'; give a value or a range")
        high = _one(text, clean[1:], dimension, bare)
        if high <= 0:
            raise _refuse(text, "a detection limit must be above zero")
        return Given(key, "below", 0.0, high)
    value = _one(text, clean, dimension, bare)
    return Given(key, "exact", value, value)


def number(text: str | float, dimension: str, *, unit: str | None = None) -> float:
    """Read one exact number, in SI; a range is refused.

    Raises
    ------
    UnitError
    """
    given = parse(text, dimension, "", unit=unit)
    if given.law != "exact":
        raise _refuse(text, "one number is wanted here, without a range")
    return given.low


def _dimension_of(unit: str) -> tuple[Dimension, str]:
    for dim in DIMENSIONS.values():
        if unit in dim.units:
            return dim, unit
    raise UnitError(f"no unit '{unit}'")


def express(value: float, unit: str, dimension: str | None = None) -> float:
    """Return an SI value in a unit.

    Parameters
    ----------
    value : float
        SI.
    unit : str
    dimension : str, optional
        Needed only where a unit means two things ("L/min" is a normal volume of gas or a pumping speed).
    """
    dim = DIMENSIONS[dimension] if dimension else _dimension_of(unit)[0]
    if unit not in dim.units:
        raise UnitError(f"no unit '{unit}' for {dim.article}")
    return (value - dim.offset(unit)) / dim.units[unit]


def rounded(value: float, digits: int = 2) -> str:
    """Return a number with so many significant digits, plain between 1e-3 and 1e5."""
    if value == 0:
        return "0"
    text = f"{value:.{digits - 1}e}"
    value = float(text)
    if not 1e-3 <= abs(value) < 1e5:
        return text
    return f"{value:.{max(digits - 1 - floor(log10(abs(value))), 0)}f}"


def show(value: float, unit: str, digits: int = 3) -> str:
    """Return an SI value as text in a unit: ``show(1453.15, "degC", 4)`` is '1180 degC'."""
    return f"{rounded(express(value, unit), digits)} {unit}"


def show_content(fraction: float, digits: int = 2) -> str:
    """Return a mass fraction in ppm, in ppb below 0.1 ppm."""
    return show(fraction, "ppb" if 0 < abs(fraction) < 1e-7 else "ppm", digits)


def frost_point_pressure(T: float) -> float:
    """Vapour pressure of water over ice, above 273.16 K over water.

    Parameters
    ----------
    T : float
        Frost or dew point, K, from 50 to 647.

    Returns
    -------
    float
        Pa.

    Raises
    ------
    OutOfRangeError

    References
    ----------
    IAPWS R14-08(2011), Revised release on the pressure along the melting and sublimation curves of
    ordinary water substance, equation 6. IAPWS SR1-86(1992), Saturation properties of ordinary water
    substance, equation 1.
    """
    if not 50.0 <= T < 647.0:
        raise OutOfRangeError(f"a dew or frost point of {T:g} K lies outside 50 to 647 K")
    if T <= 273.16:
        theta = T / 273.16
        terms = (
            (-21.2144006, 0.333333333e-2),
            (27.3203819, 1.20666667),
            (-6.10598130, 1.70333333),
        )
        return 611.657 * exp(sum(a * theta**b for a, b in terms) / theta)
    tau = 1.0 - T / 647.096
    powers = (
        (-7.85951783, 1.0),
        (1.84408259, 1.5),
        (-11.7866497, 3.0),
        (22.6807411, 3.5),
        (-15.9618719, 4.0),
        (1.80122502, 7.5),
    )
    return 22.064e6 * exp(647.096 / T * sum(a * tau**b for a, b in powers))


def frost_point_fraction(given: Given, pressure: float = ATM) -> Given:
    """Turn a frost or dew point into the mole fraction of water.

    Parameters
    ----------
    given : Given
        Frost point, K.
    pressure : float
        Total pressure at which it was measured, Pa.

    Returns
    -------
    Given
        A band in temperature becomes lognormal; the ends of a range stay its ends.
    """
    low, high = (frost_point_pressure(T) / pressure for T in (given.low, given.high))
    if high > 1:
        raise OutOfRangeError("a dew point above the boiling point of water at that pressure")
    return Given(given.key, "lognormal" if given.law == "normal" else given.law, low, high, given.assumed)


def moles_of_normal_volume(volume: float) -> float:
    """Moles in a normal volume (m3 at 0 degC, 101 325 Pa) of ideal gas."""
    return volume * ATM / (R * T_NORMAL)
