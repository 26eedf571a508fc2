"""Steps and choices of a scenario file: profile, form, furnace and contacts, complete and in SI."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, replace
from typing import Any, Final

from purity.database import Library, phase_at
from purity.errors import OutOfRangeError
from purity.scenario import Charge, Choice, Contact, Form, Furnace, Given, Pumped, Step, exact
from purity.scenario_check import validate
from purity.scenario_contacts import charged, cleaned, dust, heel, neighbours, supports, touched, walls
from purity.scenario_forms import ROOM, Bath, bath, density, from_area, pieces
from purity.scenario_gases import atmosphere, melt_gas, stored
from purity.scenario_keys import Keys, scaled
from purity.scenario_lines import Place
from purity.scenario_names import Findings, gas, nearest, species
from purity.scenario_schema import PROCESS_KEYS, ChargeTable, FurnaceTable, PieceTable, StepTable

Points = tuple[tuple[Given, Given], ...]
_ALWAYS: Final = frozenset({"name", "process", "temperature", "duration"})
#: Processes in a vessel that makes its own gas load.
_VESSEL: Final = ("melt", "cast", "heat")


@dataclass(frozen=True, slots=True)
class Known:
    """What the steps need to know of the rest of the file; a value is None where it had a fault.

    `charge_said` tells a charge with a fault from one that nobody gave.
    """

    host: str
    mass: Given | None
    charge: Charge | None
    charge_said: bool
    furnace: Furnace | None
    furnaces: Mapping[str, Furnace] = field(default_factory=dict)


def charge_of(
    findings: Findings,
    place: Place,
    table: ChargeTable,
    library: Library,
    host: str,
    mass: Given | None,
    path: str,
) -> Charge | None:
    """Return what goes into the furnace."""
    needs = {
        "form": "size of the pieces: { shape = 'slab', thickness = '25 mm', width = ..., length = ... }",
        "surface": "surface of the pieces: as received, etched, machined or worked",
        "days_in_air": "days since the surface was made",
    }
    for key, text in needs.items():
        if getattr(table, key) is None:
            findings.missing((*place, key), text)
    if table.form is None:
        return None
    form = pieces(findings, (*place, "form"), table.form, mass, density(library, host, ROOM))
    if form is None or table.surface is None or table.days_in_air is None:
        return None
    return Charge(form, table.surface, replace(table.days_in_air, key=f"{path}/days_in_air"))


def furnace_of(findings: Findings, place: Place, table: FurnaceTable, library: Library, path: str) -> Furnace:
    """Return the vessel; a pressure rise becomes a leak with its volume."""

    def given(key: str) -> Given | None:
        value = getattr(table, key)
        return replace(value, key=f"{path}/{key}") if value is not None else None

    leak, rise, volume = given("leak"), given("leak_up"), given("volume")
    if leak is not None and rise is not None:
        findings.add((*place, "leak_up"), "give leak or leak_up, not both")
    elif rise is not None and volume is None:
        findings.missing((*place, "volume"), "volume of the vessel; without it leak_up gives no leak")
    elif rise is not None and volume is not None:
        leak = replace(scaled(rise, volume.median), key=f"{path}/leak")
    exhaust = None
    if table.exhaust is not None:
        exhaust = species(findings, (*place, "exhaust"), table.exhaust, library, f"{path}/exhaust")
        if table.exhaust.ref or table.exhaust.rest:
            findings.add(
                (*place, "exhaust"), "what was measured is wanted: { O2 = '3 ppm', dew_point = '-58 degC' }"
            )
    return Furnace(
        volume=volume,
        leak=leak,
        pump=given("pump"),
        outgassing=given("outgassing"),
        hot_zone=table.hot_zone,
        last_charge=table.last_charge,
        purges=table.purges,
        exhaust=exhaust,
    )


def _profile(keys: Keys) -> Points | None:
    """Temperature over time; one temperature needs a duration."""
    points, duration = keys.get("temperature"), keys.given("duration")
    if points is None and keys.get("process") == "touch":
        T = keys.assume("temperature", ROOM, "handled at 20 degC for 1 min")
        return ((exact(keys.path("time"), 0.0), T), (exact(keys.path("time"), 60.0, assumed=True), T))
    if points is None:
        keys.missing(
            "temperature", 'temperature: "1180 degC" with a duration, or [["0 min", "20 degC"], ...]'
        )
        return None
    path = keys.path("temperature")
    held = points[0][0] is None
    if held and duration is None:
        keys.missing("duration", "duration, such as '45 min' or '180 d'")
        return None
    own = keys.choice if "temperature" in keys.choice else keys.step
    if not held and (duration is not None) and ("duration" in own or "duration" in keys.choice):
        keys.findings.add(
            keys.place("duration"), "the profile of temperature already ends the step; leave duration out"
        )
    if held and duration is not None:
        T = replace(points[0][1], key=path)
        return ((exact(keys.path("duration"), 0.0), T), (duration, T))
    time = keys.path("time")
    return tuple((replace(t, key=time), replace(T, key=path)) for t, T in points)


def _in_phase(keys: Keys, profile: Points, *, liquid: bool) -> None:
    """Check that a melt is liquid and that a piece stays solid at the hottest point."""
    if not keys.host:
        return
    hottest = max(T.median for _, T in profile)
    try:
        phase = phase_at(keys.library, keys.host, hottest)
    except OutOfRangeError as error:
        keys.findings.add(keys.place("temperature"), str(error))
        return
    if liquid and phase != "liquid":
        keys.findings.add(
            keys.place("temperature"),
            f"{keys.host} is solid ({phase}) at the hottest point, {hottest - 273.15:.5g} degC; "
            "a melt must be liquid",
        )
    if not liquid and phase == "liquid":
        keys.findings.add(
            keys.place("temperature"),
            f'{keys.host} is liquid at {hottest - 273.15:.5g} degC; use process "melt" or stay below',
        )


def _solid(keys: Keys, known: Known) -> Form | None:
    """Form of solid pieces."""
    table, area = keys.get("form"), keys.given("area")
    if table is not None and area is not None and ("form" in keys.choice) == ("area" in keys.choice):
        keys.findings.add(keys.place("area"), "give form or area, not both")
    rho = density(keys.library, known.host, ROOM) if known.host else None
    if isinstance(table, PieceTable) and (area is None or "area" not in keys.choice):
        return pieces(keys.findings, keys.place("form"), table, known.mass, rho)
    if area is not None:
        keys.notes.append("only the area is known: thickness is taken as volume over area")
        return from_area(area, known.mass, rho)
    keys.missing("form", "size of the pieces: form = { shape = 'slab', thickness = '3 mm', ... }, or area")
    return None


def _bath(keys: Keys, known: Known, profile: Points | None) -> Bath | None:
    table = keys.get("form")
    if not isinstance(table, PieceTable):
        return None
    if "wall_area" in keys and ("wall_area" in keys.choice) == ("form" in keys.choice):
        keys.findings.add(keys.place("wall_area"), "give wall_area or the form of the bath, not both")
    hottest = max(T.median for _, T in profile) if profile else ROOM
    return bath(
        keys.findings, keys.place("form"), table, known.mass, density(keys.library, known.host, hottest)
    )


def _melt(keys: Keys, known: Known, profile: Points | None) -> tuple[Form | None, list[Contact]]:
    if profile:
        _in_phase(keys, profile, liquid=True)
    surface = _bath(keys, known, profile)
    own_form = "form" in keys.choice and "wall_area" not in keys.choice
    area = None if own_form else keys.given("wall_area")
    if area is None and surface is not None:
        area = exact(keys.path("form"), surface.wall)
    if area is None:
        keys.missing(
            "wall_area",
            "wetted wall area, such as '1020 cm2', or form = { shape = 'cylinder', ... } of the bath",
        )
    charge = known.charge
    if isinstance(table := keys.get("charge"), ChargeTable):
        charge = charge_of(
            keys.findings,
            keys.place("charge"),
            table,
            keys.library,
            known.host,
            known.mass,
            keys.path("charge"),
        )
    elif charge is None and not known.charge_said:
        keys.missing(
            "charge", "what goes into this melt: { form = { ... }, surface = 'etched', days_in_air = 3 }"
        )
    found = atmosphere(keys, ROOM, open_room=False)
    contacts = walls(keys, "wall", area, {}) + melt_gas(keys, found, surface) + charged(charge)
    free = next((c.area for c in contacts if c.role == "gas"), None)
    return None, contacts + heel(keys) + neighbours(keys) + dust(keys, free)


def _cast(keys: Keys, known: Known, profile: Points | None) -> tuple[Form | None, list[Contact]]:
    form = _solid(keys, known)
    area = keys.given("wall_area")
    if area is None and form is not None:
        area = exact(keys.path("form"), form.area)
    inputs = {k: g for k in ("freezing_time", "front_speed", "crop") if (g := keys.given(k)) is not None}
    if (water := keys.given("mould_water")) is not None:
        inputs["water"] = water
    found = atmosphere(keys, ROOM, open_room=False)
    return form, walls(keys, "mould", area, inputs) + melt_gas(keys, found, None)


def _pieces_in_gas(keys: Keys, form: Form | None, T: float, *, open_room: bool) -> list[Contact]:
    return stored(keys, atmosphere(keys, T, open_room=open_room), form)


def _heat(keys: Keys, known: Known, profile: Points | None) -> tuple[Form | None, list[Contact]]:
    if profile:
        _in_phase(keys, profile, liquid=False)
    if "support" not in keys:
        keys.missing(
            "support", 'what the pieces lie on, such as ["molybdenum"]; [] says that nothing touches'
        )
    form = _solid(keys, known)
    surface = exact(keys.path("form"), form.area) if form else None
    contacts = _pieces_in_gas(keys, form, ROOM, open_room=False) + supports(keys, form)
    return form, contacts + neighbours(keys) + dust(keys, surface)


def _rest(keys: Keys, known: Known, profile: Points | None) -> tuple[Form | None, list[Contact]]:
    """Contacts of cleaning, touching and storing: pieces in a room."""
    form, process = _solid(keys, known), keys.get("process")
    surface = exact(keys.path("form"), form.area) if form else None
    contacts: list[Contact] = []
    if process == "clean":
        contacts += cleaned(keys, surface)
    if process == "touch":
        contacts += touched(keys, form)
    if process == "store" or "atmosphere" in keys:
        contacts += _pieces_in_gas(keys, form, profile[0][1].median if profile else ROOM, open_room=True)
    return form, contacts + supports(keys, form) + dust(keys, surface)


_BUILD: Final[Mapping[str, Callable[[Keys, Known, Points | None], tuple[Form | None, list[Contact]]]]] = {
    "melt": _melt,
    "cast": _cast,
    "heat": _heat,
    "clean": _rest,
    "touch": _rest,
    "store": _rest,
}


def _own_furnace(keys: Keys, known: Known, process: str) -> Furnace | None:
    if process not in _VESSEL:
        return None
    table = keys.get("furnace")
    if isinstance(table, FurnaceTable) and table.ref is not None:
        if table.ref not in known.furnaces:
            near = nearest(table.ref, tuple(known.furnaces)) if known.furnaces else "add it as a table"
            keys.findings.add(keys.place("furnace"), f"no [furnaces.{table.ref!r}]; {near}")
        if len(table.model_fields_set) > 1:
            keys.findings.add(keys.place("furnace"), "give the name of a furnace or its values, not both")
        return known.furnaces.get(table.ref)
    if isinstance(table, FurnaceTable):
        return furnace_of(keys.findings, keys.place("furnace"), table, keys.library, keys.path("furnace"))
    if known.furnace is None:
        keys.notes.append("no furnace described: line and furnace are taken as perfect")
    return known.furnace


def _vent(keys: Keys) -> dict[str, Given]:
    """Vent temperature and the fractions of the gas let in."""
    table = keys.get("vent")
    if table is None:
        return {}
    place, path = keys.place("vent"), keys.path("vent")
    out: dict[str, Given] = {}
    if table.temperature is None:
        keys.findings.missing((*place, "temperature"), "temperature at which the furnace is opened")
    else:
        out["temperature"] = replace(table.temperature, key=f"{path}/temperature")
    if table.gas is None:
        keys.findings.missing((*place, "gas"), 'gas that is let in, such as "argon N5.0" or "clean-room air"')
    elif found := gas(keys.findings, (*place, "gas"), table.gas, keys.library, f"{path}/gas"):
        out |= found.fractions
    return out


def choice(keys: Keys, name: str, known: Known) -> Choice | None:
    """Complete one choice, None where it has no process."""
    process = keys.get("process")
    if process is None:
        keys.missing("process", "process: melt, cast, heat, clean, touch or store")
        return None
    for table, place in ((keys.step, keys.at_step), (keys.choice, keys.at_choice)):
        for key in table.keys() - PROCESS_KEYS[process] - _ALWAYS:
            users = ", ".join(p for p, used in PROCESS_KEYS.items() if key in used)
            keys.findings.add((*place, key), f"not used by process {process!r}, only by {users}")
    profile = _profile(keys)
    form, contacts = _BUILD[process](keys, known, profile)
    furnace = _own_furnace(keys, known, process)
    pumped = any(c.role == "gas" and isinstance(getattr(c.body, "supply", None), Pumped) for c in contacts)
    if pumped and furnace is not None and furnace.exhaust is not None:
        furnace = replace(furnace, exhaust=None)
    stirring = keys.get("stirring")
    if process == "melt" and stirring is None:
        keys.notes.append("assumed: quiescent melt")
        stirring = "quiescent"
    removal = {
        k: replace(v, key=f"{keys.path('removal')}/{k}") for k, v in (keys.get("removal") or {}).items()
    }
    return Choice(
        name,
        process,
        profile or (),
        form,
        stirring,
        furnace,
        tuple(contacts),
        _vent(keys),
        removal,
        tuple(dict.fromkeys(keys.notes)),
    )


def _name(findings: Findings, place: Place, value: object, taken: set[str], kind: str) -> str:
    """Check the name of a step or a choice."""
    if not isinstance(value, str) or not value.strip():
        findings.missing((*place, "name"), f"name of the {kind}")
        return str(place[-1])
    if "/" in value:
        findings.add((*place, "name"), "a name may not hold '/', which joins names into paths")
    if value in taken:
        findings.add((*place, "name"), f"another {kind} is called {value!r}; each wants a name of its own")
    taken.add(value)
    return value


def _tables(findings: Findings, place: Place, value: object, header: str) -> list[Mapping[str, Any]]:
    if isinstance(value, list) and all(isinstance(item, dict) for item in value):
        return value
    findings.add(place, f"tables are wanted: {header}")
    return []


def step(
    findings: Findings, index: int, raw: Mapping[str, Any], library: Library, known: Known, taken: set[str]
) -> Step | None:
    """Complete one step with its choices."""
    at: Place = ("step", index)
    table = validate(
        StepTable, {k: v for k, v in raw.items() if k != "choice"}, lambda p, t: findings.add((*at, *p), t)
    )
    name = _name(findings, at, table.get("name"), taken, "step")
    if "process" not in table:
        findings.missing((*at, "process"), "process: melt, cast, heat, clean, touch or store")
    options = _tables(findings, (*at, "choice"), raw.get("choice", []), "[[step.choice]]")
    if not options:
        views = [Keys(findings, library, known.host, table, {}, at, at, name, name)]
    else:
        views = _views(findings, library, known.host, table, at, name, options)
    labels = [view.path_choice.removeprefix(f"{name}/") for view in views]
    made = [choice(view, label, known) for view, label in zip(views, labels, strict=True)]
    _tell_lacking(findings, at, views)
    choices = tuple(one for one in made if one is not None)
    process = table.get("process") or (choices[0].process if choices else None)
    return Step(name, process, choices) if process else None


def _views(
    findings: Findings,
    library: Library,
    host: str,
    table: Mapping[str, Any],
    at: Place,
    name: str,
    options: list[Mapping[str, Any]],
) -> list[Keys]:
    """Return the keys of every choice laid over those of the step."""
    views: list[Keys] = []
    names: set[str] = set()
    for number, option in enumerate(options):
        here: Place = (*at, "choice", number)

        def found(place: Place, text: str, here: Place = here) -> None:
            findings.add((*here, *place), text)

        own = validate(StepTable, option, found)
        label = _name(findings, here, own.get("name"), names, "choice")
        views.append(Keys(findings, library, host, table, own, at, here, name, f"{name}/{label}"))
    return views


def _tell_lacking(findings: Findings, at: Place, views: list[Keys]) -> None:
    """Tell the missing keys: once at the step where every choice lacks one, else at the choice."""
    common = {key for key in views[0].lacking if all(key in view.lacking for view in views)}
    for view in views:
        for key, text in view.lacking.items():
            findings.missing((*(at if key in common else view.at_choice), key), text)
