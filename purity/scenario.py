"""What the user said, as plain dataclasses in SI.

A notebook builds these directly; :mod:`purity.scenario_file` builds them from a TOML file. Nothing
here reads a file, looks up a table or computes physics.
"""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass, field, fields, is_dataclass
from hashlib import blake2b
from math import sqrt
from typing import Any, Literal

Law = Literal["exact", "normal", "lognormal", "uniform", "below"]
Process = Literal["melt", "cast", "heat", "clean", "touch", "store"]
Role = Literal[
    "wall",
    "gas",
    "support",
    "wrap",
    "mould",
    "charge",
    "package",
    "dust",
    "handling",
    "clean",
    "heel",
    "neighbour",
]
Shape = Literal["slab", "cylinder", "sphere", "wire", "granules", "area"]


@dataclass(frozen=True, slots=True)
class Given:
    """One input in SI, exact or uncertain.

    Parameters
    ----------
    key : str
        Name path made of names, never of positions: ``melt/magnesia under vacuum/pressure``. It is
        also the key of the random stream, so renaming a choice moves only the draws of its inputs.
    law : {"exact", "normal", "lognormal", "uniform", "below"}
        ``below`` is a content under its detection limit: 0 to `high`.
    low, high : float
        5 % and 95 % points for normal and lognormal, the ends for uniform and below, equal for exact.
    assumed : bool
        True for a default of ours; reports mark it with a dagger.
    """

    key: str
    law: Law
    low: float
    high: float
    assumed: bool = False

    @property
    def median(self) -> float:
        """Middle of the law, in the unit of the value."""
        if self.law == "lognormal":
            return sqrt(self.low * self.high)
        return 0.5 * (self.low + self.high)


def exact(key: str, value: float, *, assumed: bool = False) -> Given:
    """Return an input that is known exactly."""
    return Given(key, "exact", value, value, assumed)


@dataclass(frozen=True, slots=True)
class Certified:
    """Content of one element as certified, mass fraction (kg/kg)."""

    given: Given
    method: str | None = None
    detection_limit: float | None = None


@dataclass(frozen=True, slots=True)
class Form:
    """Shape of the metal. `area` and `volume` are those of the whole lot.

    Parameters
    ----------
    shape : str
        slab, cylinder, sphere, wire, granules, or area (only an area is known).
    half_thickness : float
        Half thickness, or radius, of a piece, m.
    area : float
        Total surface of all pieces, m2.
    volume : float
        Total volume of all pieces, m3.
    grain : float or None
        Grain size, m.
    count : float
        Number of pieces.
    """

    shape: Shape
    half_thickness: float
    area: float
    volume: float
    grain: float | None = None
    count: float = 1.0


@dataclass(frozen=True, slots=True)
class Charge:
    """What goes into the furnace, with the surface it carries into the melt."""

    piece: Form
    surface: str
    days_in_air: Given
    name: str = "charge surface"


@dataclass(frozen=True, slots=True)
class Lot:
    """The batch: host, mass (kg), certificate and limits (mass fractions)."""

    host: str
    mass: Given
    certificate: Mapping[str, Certified]
    limits: Mapping[str, float]
    groups: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    charge: Charge | None = None
    metals_limit: float | None = None


@dataclass(frozen=True, slots=True)
class Furnace:
    """Vessel from which the gas load of a step is made.

    Parameters
    ----------
    volume : Given or None
        m3.
    leak : Given or None
        Air leak, Pa m3/s.
    pump : Given or None
        Pumping speed at the vessel, m3/s.
    outgassing : Given or None
        Total gas given off by walls and hot zone, Pa m3/s.
    hot_zone : str or None
        graphite, molybdenum, tungsten, ceramic muffle, quartz tube or steel retort.
    last_charge : str or None
        What was heated before.
    purges : int or None
        Pump-and-fill cycles before the step.
    exhaust : mapping or None
        Mole fractions measured in the off-gas with gas flowing; wins over what would be inferred.
    """

    volume: Given | None = None
    leak: Given | None = None
    pump: Given | None = None
    outgassing: Given | None = None
    hot_zone: str | None = None
    last_charge: str | None = None
    purges: int | None = None
    exhaust: Mapping[str, Given] | None = None


@dataclass(frozen=True, slots=True)
class Material:
    """A solid that touches the metal; inline and tabulated materials are the same class.

    Parameters
    ----------
    name : str
    phases : mapping
        Mass fraction of each compound.
    traces : mapping
        Mass fraction (kg/kg) of each trace compound.
    leach_depth : Given or None
        Depth from which traces are taken, m.
    open_porosity : Given or None
        Volume fraction.
    service : mapping
        Highest service temperature (K) by atmosphere: oxidising, inert, vacuum.
    origin : str
        ``containers:magnesia`` or ``your file, line 31``.
    """

    name: str
    phases: Mapping[str, float]
    traces: Mapping[str, Given] = field(default_factory=dict)
    leach_depth: Given | None = None
    open_porosity: Given | None = None
    service: Mapping[str, float] = field(default_factory=dict)
    origin: str = ""


@dataclass(frozen=True, slots=True)
class Flowing:
    """Gas flowing through the vessel, m3/s at 0 degC and 101 325 Pa."""

    flow: Given


@dataclass(frozen=True, slots=True)
class Sealed:
    """Gas shut in with the metal, m3."""

    volume: Given


@dataclass(frozen=True, slots=True)
class Pumped:
    """Vessel under its pump; speed and gas load are the furnace's."""


@dataclass(frozen=True, slots=True)
class Still:
    """So much gas that the metal does not change it (a room)."""


Supply = Flowing | Sealed | Pumped | Still


@dataclass(frozen=True, slots=True)
class Atmosphere:
    """A gas: mole fractions, total pressure (Pa) and how it is renewed."""

    name: str
    fractions: Mapping[str, Given]
    pressure: Given
    supply: Supply
    origin: str = ""
    humidity: Given | None = None


@dataclass(frozen=True, slots=True)
class Package:
    """A bag, box or cabinet between the stored metal and the room.

    Parameters
    ----------
    name : str
    barrier : str
        Row of the package table.
    thickness : Given or None
        Film thickness, m; None where the table gives the rate of the finished wall.
    area : Given
        m2.
    head_space : Given
        m3.
    fill : Atmosphere
        Gas shut in when the package is closed.
    outside : Atmosphere
        The room.
    desiccant : Given or None
        Mass of desiccant, kg.
    desiccant_kind : str or None
    """

    name: str
    barrier: str
    thickness: Given | None
    area: Given
    head_space: Given
    fill: Atmosphere
    outside: Atmosphere
    desiccant: Given | None = None
    desiccant_kind: str | None = None
    origin: str = ""


@dataclass(frozen=True, slots=True)
class Dust:
    """Particles that settle on the metal: mass per area and day, and what they are made of."""

    name: str
    rate: Given
    contents: Mapping[str, Given]
    origin: str = ""


@dataclass(frozen=True, slots=True)
class Residue:
    """What a touch, a rinse or a cut leaves: kg of each element per m2."""

    name: str
    amounts: Mapping[str, Given]
    origin: str = ""


Body = Material | Atmosphere | Package | Dust | Residue | Charge


@dataclass(frozen=True, slots=True)
class Contact:
    """One thing the metal touches during a step.

    `name` tells two contacts of one role apart ("wall", "fused silica sheath"); `inputs` holds what
    only that role needs.
    """

    role: Role
    body: Body
    area: Given
    name: str
    inputs: Mapping[str, Given] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Choice:
    """One way of doing a step, already complete.

    Parameters
    ----------
    name : str
    process : str
    profile : tuple of (Given, Given)
        Time (s) and temperature (K), linear in between.
    form : Form or None
        None for a bath.
    stirring : {"quiescent", "induction", "bubbled"} or None
    furnace : Furnace or None
    vent : mapping
        Vent temperature and gas, where a furnace is opened.
    removal : mapping
        Share of suspended compounds taken out, by compound ("skim").
    contacts : tuple of Contact
    notes : tuple of str
        What was assumed when the choice was completed, in words.
    """

    name: str
    process: Process
    profile: tuple[tuple[Given, Given], ...]
    form: Form | None
    stirring: str | None
    furnace: Furnace | None
    contacts: tuple[Contact, ...]
    vent: Mapping[str, Given] = field(default_factory=dict)
    removal: Mapping[str, Given] = field(default_factory=dict)
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Step:
    """A process step and the choices open at it."""

    name: str
    process: Process
    choices: tuple[Choice, ...]


@dataclass(frozen=True, slots=True)
class Scenario:
    """Everything the user said; its hash is made from the resolved contents, not from file bytes."""

    title: str
    lot: Lot
    steps: tuple[Step, ...]
    risk: float = 0.05
    prefer: tuple[str, ...] = ()
    exclude: tuple[str, ...] = ()
    warnings: tuple[str, ...] = ()


#: Fields that say where a value was read or what was said about it, not what it is.
_TOLD = frozenset({"origin", "notes", "warnings"})


def resolved(thing: object) -> Any:
    """Return plain values (mappings, lists, text, numbers) of a scenario or of a part of it.

    Where a value was read and what was noted about it are left out, so that two files that say the
    same resolve to the same.

    Raises
    ------
    TypeError
        For something that is no part of a scenario.
    """
    if is_dataclass(thing) and not isinstance(thing, type):
        named = {f.name: resolved(getattr(thing, f.name)) for f in fields(thing) if f.name not in _TOLD}
        return {"kind": type(thing).__name__, **named}
    if isinstance(thing, Mapping):
        return {str(key): resolved(value) for key, value in thing.items()}
    if isinstance(thing, (tuple, list)):
        return [resolved(value) for value in thing]
    if thing is None or isinstance(thing, (str, bool, int, float)):
        return thing
    raise TypeError(f"{type(thing).__name__} is no part of a scenario")


def scenario_hash(scenario: Scenario) -> str:
    """blake2b (128 bit) of the canonical JSON of the resolved scenario: sorted keys, shortest numbers."""
    text = json.dumps(resolved(scenario), sort_keys=True, separators=(",", ":"), allow_nan=False)
    return blake2b(text.encode(), digest_size=16).hexdigest()
