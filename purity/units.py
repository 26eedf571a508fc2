"""The closed table of units: about twenty dimensions, each unit as a factor to SI.

Sources: SI Brochure (9th ed., 2019); NIST SP 811 (2008) for inch, Torr, grain and calorie; ISO 80000-4
for the millimetre of mercury; S. A. Stern, J. Polym. Sci. A-2 6 (1968) 1933 for the barrer.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Final

from purity.constants import ATM, V_NORMAL, ZERO_CELSIUS

_DAY: Final = 86400.0
_INCH: Final = 0.0254
_TORR: Final = ATM / 760.0
#: Conventional millimetre of mercury, Pa (ISO 80000-4: 13 595.1 kg/m3 and standard gravity).
_MMHG: Final = 133.322387415
_INHG: Final = 25.4 * _MMHG
_GRAIN: Final = 64.79891e-6
#: Molar mass of water, kg/mol (IUPAC 2021), for vapour permeances that count mass.
_WATER: Final = 18.015e-3
#: Moles of an ideal gas in 1 cm3 at 0 degC and 101 325 Pa.
_CM3: Final = 1e-6 / V_NORMAL


@dataclass(frozen=True, slots=True)
class Dimension:
    """A kind of quantity: its units as factors to SI.

    Parameters
    ----------
    article : str
        How an error names it ("a temperature").
    bare : str
        Unit of a number that stands alone.
    units : mapping of str to float
        SI value of one unit.
    floor : float
        Smallest SI value allowed; -inf where negative values have a meaning.
    below : bool
        Whether "<0.05" may be written.
    offsets : mapping of str to float
        SI value of the zero of an affine unit.
    """

    article: str
    bare: str
    units: Mapping[str, float]
    floor: float = 0.0
    below: bool = False
    offsets: Mapping[str, float] | None = None

    def offset(self, unit: str) -> float:
        """SI value of the zero of a unit."""
        return (self.offsets or {}).get(unit, 0.0)


_TEMPERATURE: Final = {"degC": 1.0, "K": 1.0}
_KELVIN_OFFSET: Final = {"degC": ZERO_CELSIUS}

#: Every dimension with its units.
DIMENSIONS: Final[Mapping[str, Dimension]] = {
    "temperature": Dimension("a temperature", "degC", _TEMPERATURE, offsets=_KELVIN_OFFSET),
    "dew point": Dimension("a dew or frost point", "degC", _TEMPERATURE, offsets=_KELVIN_OFFSET),
    "time": Dimension("a time", "min", {"s": 1.0, "min": 60.0, "h": 3600.0, "d": _DAY, "week": 7 * _DAY}),
    "length": Dimension(
        "a length",
        "mm",
        {"m": 1.0, "cm": 1e-2, "mm": 1e-3, "um": 1e-6, "nm": 1e-9, "in": _INCH, "mil": 1e-3 * _INCH},
    ),
    "area": Dimension("an area", "cm2", {"m2": 1.0, "dm2": 1e-2, "cm2": 1e-4, "mm2": 1e-6}),
    "volume": Dimension("a volume", "L", {"m3": 1.0, "L": 1e-3, "mL": 1e-6, "cm3": 1e-6}),
    "mass": Dimension("a mass", "kg", {"t": 1e3, "kg": 1.0, "g": 1e-3, "mg": 1e-6, "ug": 1e-9}),
    "pressure": Dimension(
        "a pressure",
        "Pa",
        {
            "Pa": 1.0,
            "hPa": 1e2,
            "kPa": 1e3,
            "MPa": 1e6,
            "bar": 1e5,
            "mbar": 1e2,
            "atm": ATM,
            "Torr": _TORR,
            "mTorr": 1e-3 * _TORR,
        },
    ),
    "molar energy": Dimension(
        "a molar energy",
        "kJ/mol",
        {"J/mol": 1.0, "kJ/mol": 1e3, "cal/mol": 4.184, "kcal/mol": 4184.0},
        floor=float("-inf"),
    ),
    "content": Dimension(
        "a content by mass",
        "ppm",
        {"ppm": 1e-6, "ppb": 1e-9, "mg/kg": 1e-6, "ug/g": 1e-6, "ug/kg": 1e-9, "%": 1e-2, "mass%": 1e-2},
        below=True,
    ),
    "mole content": Dimension(
        "a content by mole",
        "ppm(mol)",
        {"ppm(mol)": 1e-6, "ppb(mol)": 1e-9, "at%": 1e-2, "mol%": 1e-2},
        below=True,
    ),
    "gas fraction": Dimension(
        "a fraction by volume",
        "1",
        {"1": 1.0, "%": 1e-2, "vol%": 1e-2, "ppm": 1e-6, "ppb": 1e-9, "ppm(mol)": 1e-6, "ppb(mol)": 1e-9},
        below=True,
    ),
    "share": Dimension("a share", "1", {"1": 1.0, "%": 1e-2}),
    "mass share": Dimension(
        "a share by mass", "1", {"1": 1.0, "%": 1e-2, "mass%": 1e-2, "ppm": 1e-6, "ppb": 1e-9}, below=True
    ),
    "humidity": Dimension("a relative humidity", "%RH", {"%RH": 1e-2, "% RH": 1e-2, "%": 1e-2}),
    "gas flow": Dimension(
        "a gas flow (normal volume)",
        "L/min",
        {
            "L/min": 1e-3 / 60,
            "L/h": 1e-3 / 3600,
            "L/s": 1e-3,
            "mL/min": 1e-6 / 60,
            "cm3/min": 1e-6 / 60,
            "m3/h": 1.0 / 3600,
            "m3/s": 1.0,
        },
    ),
    "leak": Dimension(
        "a leak or outgassing rate",
        "mbar L/s",
        {
            "Pa m3/s": 1.0,
            "Pa L/s": 1e-3,
            "mbar L/s": 0.1,
            "Torr L/s": 1e-3 * _TORR,
            "atm cm3/s": 1e-6 * ATM,
        },
        below=True,
    ),
    "leak-up": Dimension(
        "a pressure rise",
        "Pa/h",
        {
            "Pa/s": 1.0,
            "Pa/min": 1.0 / 60,
            "Pa/h": 1.0 / 3600,
            "mbar/min": 1e2 / 60,
            "mbar/h": 1e2 / 3600,
            "mTorr/min": 1e-3 * _TORR / 60,
        },
        below=True,
    ),
    "pumping speed": Dimension(
        "a pumping speed", "L/s", {"m3/s": 1.0, "m3/h": 1.0 / 3600, "L/s": 1e-3, "L/min": 1e-3 / 60}
    ),
    "velocity": Dimension(
        "a velocity",
        "mm/min",
        {"m/s": 1.0, "mm/s": 1e-3, "mm/min": 1e-3 / 60, "mm/h": 1e-3 / 3600, "um/h": 1e-6 / 3600},
    ),
    "permeability": Dimension(
        "a permeability",
        "barrer",
        {
            "mol/(m s Pa)": 1.0,
            "barrer": 1e-10 * _CM3 * 1e-2 / (1e-4 * 10 * _MMHG),
            "cm3 mm/(m2 d atm)": _CM3 * 1e-3 / (_DAY * ATM),
            "cm3 mil/(100in2 d atm)": _CM3 * 1e-3 * _INCH / (100 * _INCH**2 * _DAY * ATM),
        },
    ),
    "permeance": Dimension(
        "a permeance",
        "cm3/(m2 d atm)",
        {
            "mol/(m2 s Pa)": 1.0,
            "GPU": 1e-6 * _CM3 / (1e-4 * 10 * _MMHG),
            "cm3/(m2 d atm)": _CM3 / (_DAY * ATM),
            "perm": _GRAIN / (3600 * 0.3048**2 * _INHG) / _WATER,
            "metric perm": 1e-3 / (_DAY * _MMHG) / _WATER,
        },
    ),
    "mass rate per area": Dimension(
        "a mass rate per area",
        "mg/(m2 d)",
        {
            "kg/(m2 s)": 1.0,
            "g/(m2 d)": 1e-3 / _DAY,
            "mg/(m2 d)": 1e-6 / _DAY,
            "ug/(m2 d)": 1e-9 / _DAY,
            "ug/(cm2 d)": 1e-5 / _DAY,
            "g/(100in2 d)": 1e-3 / (100 * _INCH**2 * _DAY),
        },
        below=True,
    ),
    "mass per area": Dimension(
        "a mass per area",
        "mg/m2",
        {
            "kg/m2": 1.0,
            "g/m2": 1e-3,
            "mg/m2": 1e-6,
            "ug/m2": 1e-9,
            "mg/cm2": 1e-2,
            "ug/cm2": 1e-5,
            "ng/cm2": 1e-8,
        },
        below=True,
    ),
}
