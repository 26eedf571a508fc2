"""Form of a scenario file: which keys there are and what each may hold.

Every key is optional here, because what must be given depends on the process; :mod:`purity.scenario_file`
asks for it.
"""

from __future__ import annotations

from collections.abc import Mapping
from itertools import pairwise
from typing import Annotated, Any, Final, Literal, NamedTuple, TypeAlias

from pydantic import BaseModel, ConfigDict, PlainValidator
from pydantic_core import PydanticCustomError

from purity.errors import UnitError
from purity.quantities import parse
from purity.scenario import Given, Process, Shape


class Content(NamedTuple):
    """A content as written: by mass, or by mole to be turned into mass when the element is known."""

    given: Given
    by_mole: bool


def _fail(text: str) -> PydanticCustomError:
    return PydanticCustomError("quantity", "{why}", {"why": text})


def _read(value: Any, dimension: str, unit: str | None, *, positive: bool) -> Given:
    try:
        given = parse(value, dimension, "", unit=unit)
    except UnitError as error:
        raise _fail(str(error)) from None
    if positive and given.low <= 0 and given.law != "below":
        raise _fail(f"{value!r}: a value above zero is wanted")
    return given


def _quantity(dimension: str, unit: str | None = None, *, positive: bool = False) -> PlainValidator:
    return PlainValidator(lambda value: _read(value, dimension, unit, positive=positive))


def _exact(dimension: str, unit: str | None = None) -> PlainValidator:
    def read(value: Any) -> float:
        given = _read(value, dimension, unit, positive=True)
        if given.law != "exact":
            raise _fail(f"{value!r}: one number is wanted here, without a range")
        return given.low

    return PlainValidator(read)


def _content(value: Any) -> Content:
    by_mole = isinstance(value, str) and any(mark in value for mark in ("(mol)", "at%", "mol%"))
    return Content(
        _read(value, "mole content" if by_mole else "content", None, positive=False), by_mole=by_mole
    )


def _temperature(value: Any) -> tuple[tuple[Given | None, Given], ...]:
    """Read one temperature, or pairs of time and temperature."""
    if not isinstance(value, list):
        return ((None, _read(value, "temperature", None, positive=True)),)
    if len(value) < 2 or any(not isinstance(pair, list) or len(pair) != 2 for pair in value):
        raise _fail('pairs of time and temperature are wanted, at least two: [["0 min", "20 degC"], ...]')
    pairs = tuple(
        (_read(t, "time", None, positive=False), _read(T, "temperature", None, positive=True))
        for t, T in value
    )
    times = [time.median for time, _ in pairs]
    if times[0] != 0:
        raise _fail("the first time of a profile must be 0 min")
    if any(later <= earlier for earlier, later in pairwise(times)):
        raise _fail("the times of a profile must rise")
    return pairs


def _count(value: Any) -> float:
    if isinstance(value, bool) or not isinstance(value, (int, float)) or not 0 < value < 1e12:
        raise _fail(f"{value!r}: a number of pieces above zero is wanted")
    return float(value)


Temperature: TypeAlias = Annotated[Given, _quantity("temperature", positive=True)]
Profile: TypeAlias = Annotated[tuple[tuple[Given | None, Given], ...], PlainValidator(_temperature)]
Time: TypeAlias = Annotated[Given, _quantity("time", positive=True)]
Days: TypeAlias = Annotated[Given, _quantity("time", "d")]
Length: TypeAlias = Annotated[Given, _quantity("length", positive=True)]
Depth: TypeAlias = Annotated[Given, _quantity("length", "um", positive=True)]
Size: TypeAlias = Annotated[float, _exact("length")]
Grain: TypeAlias = Annotated[float, _exact("length", "um")]
Count: TypeAlias = Annotated[float, PlainValidator(_count)]
Area: TypeAlias = Annotated[Given, _quantity("area", positive=True)]
Volume: TypeAlias = Annotated[Given, _quantity("volume", positive=True)]
Mass: TypeAlias = Annotated[Given, _quantity("mass", positive=True)]
Pressure: TypeAlias = Annotated[Given, _quantity("pressure", positive=True)]
Flow: TypeAlias = Annotated[Given, _quantity("gas flow", positive=True)]
Leak: TypeAlias = Annotated[Given, _quantity("leak")]
LeakUp: TypeAlias = Annotated[Given, _quantity("leak-up")]
Pump: TypeAlias = Annotated[Given, _quantity("pumping speed", positive=True)]
DewPoint: TypeAlias = Annotated[Given, _quantity("dew point", positive=True)]
Humidity: TypeAlias = Annotated[Given, _quantity("humidity")]
GasFraction: TypeAlias = Annotated[Given, _quantity("gas fraction")]
Share: TypeAlias = Annotated[Given, _quantity("share")]
MassShare: TypeAlias = Annotated[Given, _quantity("mass share")]
Velocity: TypeAlias = Annotated[Given, _quantity("velocity", positive=True)]
MassRate: TypeAlias = Annotated[Given, _quantity("mass rate per area")]
MassPerArea: TypeAlias = Annotated[Given, _quantity("mass per area")]
ContentText: TypeAlias = Annotated[Content, PlainValidator(_content)]
Service = Literal["oxidising", "inert", "vacuum"]
Surface = Literal["as received", "etched", "machined", "worked"]
Stirring = Literal["quiescent", "induction", "bubbled"]
HotZone = Literal[
    "none", "graphite", "molybdenum", "tungsten", "ceramic muffle", "quartz tube", "steel retort"
]


class Form(BaseModel):
    """Base of every table: no unknown keys, no conversion between kinds."""

    model_config = ConfigDict(strict=True, extra="forbid", frozen=True, arbitrary_types_allowed=True)


class PieceTable(Form):
    """Shape and size of a piece, or of a bath."""

    shape: Shape | None = None
    thickness: Size | None = None
    width: Size | None = None
    length: Size | None = None
    height: Size | None = None
    diameter: Size | None = None
    grain: Grain | None = None
    count: Count | None = None


class CertifiedTable(Form):
    """One line of the certificate."""

    value: ContentText | None = None
    method: str | None = None
    detection: ContentText | None = None


class ChargeTable(Form):
    """What goes into a melting furnace."""

    form: PieceTable | None = None
    surface: Surface | None = None
    days_in_air: Days | None = None


class LotTable(Form):
    """The batch."""

    host: str | None = None
    mass: Mass | None = None
    certificate: dict[str, CertifiedTable] | None = None
    limits: dict[str, ContentText] | None = None
    charge: ChargeTable | None = None


class GasTable(Form):
    """A gas by name, or by its fractions; `rest` names the species that fills up to 1."""

    ref: str | None = None
    name: str | None = None
    fractions: dict[str, GasFraction] | None = None
    rest: list[str] | None = None
    dew_point: DewPoint | None = None


class FurnaceTable(Form):
    """The vessel, or the name of one of the table of furnaces."""

    ref: str | None = None
    volume: Volume | None = None
    leak: Leak | None = None
    leak_up: LeakUp | None = None
    pump: Pump | None = None
    outgassing: Leak | None = None
    hot_zone: HotZone | None = None
    last_charge: str | None = None
    purges: Annotated[int, PlainValidator(lambda v: _purges(v))] | None = None
    exhaust: GasTable | None = None


def _purges(value: Any) -> int:
    if isinstance(value, bool) or not isinstance(value, int) or not 0 <= value <= 100:
        raise _fail(f"{value!r}: a whole number of pump-and-fill cycles from 0 to 100 is wanted")
    return value


class MaterialTable(Form):
    """A solid by name, or by what it consists of; with a name, the other keys replace the table's."""

    ref: str | None = None
    name: str | None = None
    phases: dict[str, MassShare] | None = None
    traces: dict[str, ContentText] | None = None
    leach_depth: Depth | None = None
    open_porosity: Share | None = None
    service: dict[Service, Temperature] | None = None
    area: Area | None = None


class PackageTable(Form):
    """Bag, box or cabinet."""

    name: str | None = None
    barrier: str | None = None
    thickness: Annotated[Given, _quantity("length", "um", positive=True)] | None = None
    area: Area | None = None
    head_space: Volume | None = None
    fill: GasTable | None = None
    outside: GasTable | None = None
    desiccant: Annotated[Given, _quantity("mass", "g", positive=True)] | None = None
    desiccant_kind: str | None = None


class DustTable(Form):
    """Particles that settle."""

    name: str | None = None
    rate: MassRate | None = None
    contents: dict[str, MassShare] | None = None


class ResidueTable(Form):
    """What a touch leaves on the touched share of the surface."""

    name: str | None = None
    leaves: dict[str, MassPerArea] | None = None
    touched: Share | None = None


class CleanTable(Form):
    """A bath or rinse: takes a layer off, leaves residues."""

    name: str | None = None
    removes: Depth | None = None
    leaves: dict[str, MassPerArea] | None = None


class NeighbourTable(Form):
    """A hot part that evaporates onto the metal."""

    material: MaterialTable | None = None
    area: Area | None = None
    temperature: Temperature | None = None
    view: Share | None = None


class HeelTable(Form):
    """What the crucible keeps of the last charge."""

    mass: Annotated[Given, _quantity("mass", "g", positive=True)] | None = None
    contents: dict[str, ContentText] | None = None


class VentTable(Form):
    """When and into which gas a furnace is opened."""

    temperature: Temperature | None = None
    gas: GasTable | None = None


class PourTable(Form):
    """The stream of a cast."""

    time: Annotated[Given, _quantity("time", "s", positive=True)] | None = None
    area: Area | None = None


class StepTable(Form):
    """Keys of a step; a choice may set any of them."""

    name: str | None = None
    process: Process | None = None
    temperature: Profile | None = None
    duration: Time | None = None
    form: PieceTable | None = None
    area: Area | None = None
    wall_area: Area | None = None
    free_surface: Area | None = None
    stirring: Stirring | None = None
    container: MaterialTable | None = None
    immersed: list[MaterialTable] | None = None
    atmosphere: GasTable | None = None
    pressure: Pressure | None = None
    flow: Flow | None = None
    sealed: Volume | None = None
    still: bool | None = None
    pumped: bool | None = None
    humidity: Humidity | None = None
    furnace: FurnaceTable | None = None
    charge: ChargeTable | None = None
    heel: HeelTable | None = None
    support: list[MaterialTable] | None = None
    contact_share: Share | None = None
    wrap: list[MaterialTable] | None = None
    package: PackageTable | None = None
    dust: DustTable | None = None
    handling: list[ResidueTable] | None = None
    clean: CleanTable | None = None
    neighbour: list[NeighbourTable] | None = None
    vent: VentTable | None = None
    removal: dict[str, Share] | None = None
    pour: PourTable | None = None
    freezing_time: Time | None = None
    front_speed: Velocity | None = None
    crop: Share | None = None
    mould_water: MassPerArea | None = None


class TopTable(Form):
    """Keys outside any table."""

    title: str | None = None
    risk: Share | None = None
    prefer: list[str] | None = None
    exclude: list[str] | None = None


#: Keys that each process reads beside `name`, `process`, `temperature` and `duration`.
_GAS: Final = frozenset({"atmosphere", "pressure", "flow", "sealed", "still", "pumped", "humidity"})
_BATH: Final = frozenset({"form", "wall_area", "free_surface", "stirring", "container", "immersed"})
_SOLID: Final = frozenset({"form", "area", "support", "contact_share", "wrap", "dust"})
PROCESS_KEYS: Final[Mapping[str, frozenset[str]]] = {
    "melt": _GAS | _BATH | {"furnace", "charge", "heel", "dust", "neighbour", "removal"},
    "cast": _GAS
    | {"form", "wall_area", "free_surface", "container", "immersed", "furnace", "removal"}
    | {"pour", "freezing_time", "front_speed", "crop", "mould_water", "vent"},
    "heat": _GAS | _SOLID | {"furnace", "neighbour", "vent"},
    "clean": _SOLID | {"clean"} | _GAS,
    "touch": _SOLID | {"handling"} | _GAS,
    "store": _GAS | _SOLID | {"package"},
}
