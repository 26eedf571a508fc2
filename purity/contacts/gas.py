"""Furnace gas and room air: what the gas brings, what it carries off, and how fast.

Each gas crosses as a carrier of its own, in as well as out, so that several sources of one element
add their fluxes and never their ceilings. The supply (feed gas, leak, outgassing, pump) stands in
series with the gas film and the sticking of molecules at the surface; the share that the charge
takes from a pumped vessel follows from that series and needs no rule of its own.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from purity.constants import ATM, GAS_FORMERS, P0, V_NORMAL, R
from purity.contacts.setting import (
    T_ROOM,
    Exposed,
    Setting,
    carrier,
    curve,
    exchange,
    series,
    spread_factor,
    stoichiometry,
    vapour_speed,
)
from purity.contacts.vessel import air_left, gettered, outgassing, swept, vapours, vessel_moles
from purity.contacts.wrap import gaps as gaps_of_foil
from purity.contacts.wrap import wrapped, wraps
from purity.database import Found, Gap, Record
from purity.driving_force.pure import atoms, gibbs_energy
from purity.kinetics.exposure import Carrier, Curve, Exposure
from purity.scenario import Atmosphere, Contact, Flowing, Furnace, Given, Pumped, Sealed

Array = NDArray[np.float64]

#: What the table of gas transport calls the gas that others diffuse through.
MEDIA = {"Ar": "argon", "N2": "nitrogen", "He": "helium", "H2": "hydrogen", "air": "air"}
#: Row set of the gas that a leak lets in.
LEAK = "air"
#: Factor by which a gauge reading may miss the local partial pressure, 90 % band.
GAUGE = 10.0


@dataclass(frozen=True, slots=True)
class Load:
    """Gas that reaches the metal.

    Parameters
    ----------
    activity : mapping of gas to (N,) array
        Partial pressure over P0 far from the metal.
    supply : (N,) array or None
        mol m-2 s-1 per unit activity that the vessel can renew; None: without limit.
    inventory : mapping of gas to (N,) array
        mol shut in with the metal.
    pressure : (N,) array
        Total, Pa.
    records : tuple of Found
    inputs : tuple of Given
    notes : tuple of str
    main : str
        Gas through which the others diffuse.
    flowing : bool
    area : (N,) array
        Surface of the metal that the gas meets, m2.
    """

    activity: Mapping[str, Array]
    supply: Array | None
    inventory: Mapping[str, Array]
    pressure: Array
    records: tuple[Found, ...]
    inputs: tuple[Given, ...]
    notes: tuple[str, ...]
    main: str = "Ar"
    flowing: bool = False
    area: Array = field(default_factory=lambda: np.ones(1))


def gas(contact: Contact, setting: Setting) -> Exposed:
    """Return how an atmosphere acts on a free surface, evaporation included.

    Parameters
    ----------
    contact : Contact
        With an :class:`Atmosphere` as its body.
    setting : Setting

    Returns
    -------
    Exposed
    """
    atmosphere = contact.body
    assert isinstance(atmosphere, Atmosphere)
    area = setting.sample(contact.area)
    load = replace(gas_load(atmosphere, setting, area), area=area)
    carriers: list[Carrier] = []
    records: dict[str, tuple[Found, ...]] = {}
    gaps: dict[str, tuple[Gap, ...]] = {}
    for name in gases(setting):
        conductance, found = gas_conductance(setting, name, load)
        made = carrier(
            setting,
            name,
            "gas",
            activity=load.activity.get(name, np.zeros(1)),
            conductance=conductance,
            inventory=load.inventory.get(name),
            limit="supply" if load.inventory else "gas film",
        )
        if isinstance(made, Gap):
            if name in load.activity:
                for element in set(atoms(name)) & set(setting.impurities):
                    gaps[element] = (*gaps.get(element, ()), made)
            continue
        carriers.append(made[0])
        records[name] = (*made[1], *found, *load.records)
    for leaving, behind in _evaporation(setting, load):
        carriers.append(leaving)
        records[leaving.name] = behind
    rate, element_records = exchange(setting, "free surface")
    exposure = Exposure(contact.name, area, rate, tuple(carriers))
    inputs = (contact.area, *load.inputs, *gaps_of_foil(setting).values())
    return Exposed(exposure, None, records, element_records, inputs, gaps, load.notes)


def gases(setting: Setting) -> tuple[str, ...]:
    """Return the gases that can cross here: those with a transport row whose atoms are all followed."""
    names = set(setting.library.names("gas_transport", "gas")) - {"*"}
    return tuple(
        name
        for name in sorted(names)
        if sum(atoms(name).values()) > 1 and (nu := stoichiometry(setting, name)) is not None and nu.any()
    )


def gas_load(atmosphere: Atmosphere, setting: Setting, area: Array) -> Load:
    """Return what reaches the metal, by how the gas is renewed.

    A measured exhaust wins over feed gas, leak and outgassing while gas flows; a pumped vessel is
    fed by its leak (air) and its outgassing; a gauge pressure alone is read as the local pressure,
    within a factor of ten either way.
    """
    furnace = setting.choice.furnace or Furnace()
    pressure = setting.sample(atmosphere.pressure)
    fractions = {name: setting.sample(given) for name, given in atmosphere.fractions.items()}
    inputs: tuple[Given, ...] = (atmosphere.pressure, *atmosphere.fractions.values())
    match atmosphere.supply:
        case Flowing(flow):
            return _flowing(setting, furnace, fractions, flow, pressure, area, inputs)
        case Sealed(volume):
            return _sealed(setting, furnace, fractions, volume, pressure, inputs)
        case Pumped():
            return _pumped(setting, furnace, atmosphere, fractions, pressure, area, inputs)
        case _:
            activity = {name: x * pressure / P0 for name, x in fractions.items()}
            return Load(activity, None, {}, pressure, (), inputs, (), _main(fractions))


def _sealed(
    setting: Setting,
    furnace: Furnace,
    fractions: Mapping[str, Array],
    volume: Given,
    pressure: Array,
    inputs: tuple[Given, ...],
) -> Load:
    """Return gas shut in with the metal: what was filled in, what purging left, after the hot zone."""
    mol = pressure * setting.sample(volume) / (R * T_ROOM)
    left, used, notes = air_left(setting, furnace)
    rows = setting.library.rows("atmospheres", atmosphere=LEAK) if np.any(left > 0) else ()
    air = {row.words["species"]: left * composition(setting, row) for row in rows}
    held = {n: fractions.get(n, np.zeros(1)) + air.get(n, np.zeros(1)) for n in {*fractions, *air}}
    held, zone = gettered(setting, furnace, held)
    return Load(
        {name: x * pressure / P0 for name, x in held.items()},
        None,
        {name: x * mol for name, x in held.items()},
        pressure,
        (*(Found(row) for row in rows), *zone),
        (*inputs, volume, *used),
        (*notes, *vapours(setting, furnace)),
        _main(fractions),
    )


def _sources(
    setting: Setting, furnace: Furnace
) -> tuple[dict[str, Array], tuple[Found, ...], tuple[Given, ...]]:
    """Return gas that enters a vessel besides its feed, Pa m3/s by species, with records and inputs."""
    entering: dict[str, Array] = {}
    records: tuple[Found, ...] = ()
    inputs: tuple[Given, ...] = ()
    for rate, made_of in ((furnace.leak, LEAK), (furnace.outgassing, outgassing(setting, furnace))):
        if rate is None:
            continue
        inputs = (*inputs, rate)
        throughput = setting.sample(rate)
        rows = setting.library.rows("atmospheres", atmosphere=made_of)
        shares = {row.words["species"]: composition(setting, row) for row in rows}
        found: tuple[Found, ...] = ()
        if made_of == LEAK:
            shares, found = gettered(setting, furnace, shares)
        for name, share in shares.items():
            entering[name] = entering.get(name, np.zeros(1)) + throughput * share
        records = (*records, *(Found(row) for row in rows), *found)
    return entering, records, inputs


def composition(setting: Setting, record: Record) -> Array:
    """Return the mole fraction that a row of the table of atmospheres stands for, (N,)."""
    return record.fields["fraction_ppm_mol"] * 1e-6 * spread_factor(setting, record)


def _flowing(
    setting: Setting,
    furnace: Furnace,
    fractions: Mapping[str, Array],
    flow: Given,
    pressure: Array,
    area: Array,
    inputs: tuple[Given, ...],
) -> Load:
    feed = setting.sample(flow) / V_NORMAL
    entering, records, used = _sources(setting, furnace)
    extra = {name: rate / (R * T_ROOM) for name, rate in entering.items()}
    total = feed + sum(extra.values(), np.zeros(1))
    supply = total * P0 / (pressure * area)
    inputs = (*inputs, flow, *used)
    main = _main(fractions)

    def mixed(fed: Mapping[str, Array]) -> dict[str, Array]:
        names = {*fed, *extra}
        moles = {n: fed.get(n, np.zeros(1)) * feed + extra.get(n, np.zeros(1)) for n in names}
        return {name: mol / total * pressure / P0 for name, mol in moles.items()}

    if furnace.exhaust:
        measured = {name: setting.sample(given) * pressure / P0 for name, given in furnace.exhaust.items()}
        inputs = (*inputs, *furnace.exhaust.values())
        return Load(
            {**mixed(fractions), **measured},
            supply,
            {},
            pressure,
            records,
            inputs,
            vapours(setting, furnace),
            main,
            True,
        )
    fed, zone = gettered(setting, furnace, fractions)
    notes: tuple[str, ...] = vapours(setting, furnace)
    if not entering:
        notes = (*notes, "line and furnace assumed perfect: no leak, outgassing or exhaust given")
    fed, air, left, said = _with_air(setting, furnace, fed, total)
    return Load(
        mixed(fed),
        supply,
        {},
        pressure,
        (*records, *zone, *air),
        (*inputs, *left),
        (*notes, *said),
        main,
        True,
    )


def _with_air(
    setting: Setting, furnace: Furnace, fed: Mapping[str, Array], flow: Array
) -> tuple[dict[str, Array], tuple[Found, ...], tuple[Given, ...], tuple[str, ...]]:
    """Add the air that purging left in the vessel, averaged over its sweeping, to the feed gas."""
    moles = vessel_moles(setting, furnace)
    left, inputs, notes = air_left(setting, furnace)
    if moles is None or not np.any(left > 0):
        return dict(fed), (), inputs, notes
    rows = setting.library.rows("atmospheres", atmosphere=LEAK)
    air, zone = gettered(setting, furnace, {r.words["species"]: composition(setting, r) for r in rows})
    share = swept(left, flow, moles, setting.duration)
    mixed = {name: fed.get(name, np.zeros(1)) + share * air.get(name, np.zeros(1)) for name in {*fed, *air}}
    return mixed, (*(Found(row) for row in rows), *zone), inputs, notes


def _main(fractions: Mapping[str, Array]) -> str:
    """Gas that is most of a mixture; air where oxygen comes with the nitrogen."""
    main = max(fractions, key=lambda name: float(np.median(fractions[name])), default="Ar")
    oxygen = float(np.median(fractions.get("O2", np.zeros(1))))
    return "air" if main == "N2" and oxygen > 0.1 else main


def _pumped(
    setting: Setting,
    furnace: Furnace,
    atmosphere: Atmosphere,
    fractions: Mapping[str, Array],
    pressure: Array,
    area: Array,
    inputs: tuple[Given, ...],
) -> Load:
    entering, records, used = _sources(setting, furnace)
    if furnace.pump is not None and entering:
        speed = setting.sample(furnace.pump)
        activity = {name: rate / (speed * P0) for name, rate in entering.items()}
        reached = sum(activity.values(), np.zeros(1)) * P0
        supply = speed * P0 / (R * T_ROOM * area)
        notes = vapours(setting, furnace)
        return Load(activity, supply, {}, reached, records, (*used, furnace.pump), notes)
    gauge = Given(f"{atmosphere.pressure.key}/gauge", "lognormal", 1.0 / GAUGE, GAUGE, True)
    local = pressure * setting.sample(gauge)
    residual = fractions
    if not residual:
        rows = setting.library.rows("atmospheres", atmosphere=outgassing(setting, furnace))
        residual = {r.words["species"]: composition(setting, r) for r in rows}
        records = tuple(Found(r) for r in rows)
    activity = {name: x * local / P0 for name, x in residual.items()}
    notes = (
        "gauge read as local partial pressure: give leak, outgassing and pump to narrow this",
        *vapours(setting, furnace),
    )
    return Load(activity, None, {}, local, records, (*inputs, gauge), notes)


def gas_conductance(setting: Setting, name: str, load: Load) -> tuple[Curve, tuple[Found, ...]]:
    """Return supply, gas film and sticking in series, mol m-2 s-1 per unit activity, (K, N).

    The film passes k P0/(R T), k scaled with the diffusivity at the total pressure; molecules stick at
    the rate of Hertz and Knudsen. A measured exhaust is what the stream carries past the metal, so the
    metal cannot take more of it than the stream brings.
    """
    T = setting.T[:, np.newaxis]
    parts: list[Array | None] = []
    records: list[Found] = []
    transport, film = _transport(setting, name, load.main), _film(setting, load)
    if transport is not None and film is not None:
        record, rate = transport.record, film.record
        D = record.fields["D_m2_per_s"] * (T / record.fields["T_ref_K"]) ** record.fields["exponent"]
        D = D * ATM / np.maximum(load.pressure, 1e-9) * spread_factor(setting, record)
        k = rate.fields["k_m_per_s"] * (D / rate.fields["D_ref_m2_per_s"]) ** rate.fields["exponent"]
        parts.append(k * spread_factor(setting, rate) * P0 / (R * T))
        records += [transport, film]
    alpha, sticking = _sticking(setting, name)
    molar_mass = sum(_mass(setting, element) * count for element, count in atoms(name).items())
    flight = P0 * vapour_speed(T, molar_mass)
    records.extend(sticking)
    metal = series(*parts, alpha * flight)
    if not wraps(setting):
        return curve(setting, np.log(series(load.supply, metal))), tuple(records)
    free = series(*parts, flight)
    inward, foil = wrapped(setting, name, load.area, load.supply, free, metal)
    return curve(setting, np.log(inward)), (*records, *foil)


def _film(setting: Setting, load: Load) -> Found | None:
    found = setting.library.find(
        "transfer", place="gas film", stirring="flowing" if load.flowing else "still"
    )
    return found if isinstance(found, Found) else None


def _transport(setting: Setting, name: str, main: str) -> Found | None:
    here = MEDIA.get(main, "argon")
    for gas, medium in ((name, here), (name, "argon"), ("*", here), ("*", "argon")):
        found = setting.library.find("gas_transport", gas=gas, **{"in": medium})
        if isinstance(found, Found):
            return found if gas == name else Found(found.record, found.rivals, "estimate")
    return None


def _sticking(setting: Setting, name: str) -> tuple[Array, tuple[Found, ...]]:
    """Return the share of impinging molecules that react, (N,); 1 where no record exists."""
    state = "liquid" if setting.liquid else "hot"
    monatomic = sum(atoms(name).values()) == 1
    for host, gas, kind in ((setting.host, name, state), ("*", name, state), ("*", "*", "vapour")):
        if (gas == "*") != monatomic and gas == "*":
            continue
        found = setting.library.find("sticking", host=host, gas=gas, state=kind)
        if isinstance(found, Found):
            value = found.record.fields["probability"] * spread_factor(setting, found.record)
            return np.minimum(1.0, value), (found,)
    return np.ones(1), ()


def _mass(setting: Setting, element: str) -> float:
    known = setting.molar_mass.get(element)
    if known is not None:
        return known
    row = setting.library.find("elements", element=element)
    assert isinstance(row, Found), element
    return row.record.fields["molar_mass_g_per_mol"] / 1000.0


def _evaporation(setting: Setting, load: Load) -> list[tuple[Carrier, tuple[Found, ...]]]:
    """Return evaporation of each impurity as its atoms: activity 0 far away, gas film and free flight."""
    rows = []
    for element in setting.impurities:
        if element in GAS_FORMERS:
            continue
        conductance, found = gas_conductance(setting, element, load)
        made = carrier(
            setting,
            element,
            "gas",
            name=f"evaporation of {element}",
            activity=np.zeros(1),
            conductance=conductance,
            limit="gas film",
        )
        if not isinstance(made, Gap):
            rows.append((made[0], (*made[1], *found, *load.records)))
    return rows


def host_evaporation(contact: Contact, setting: Setting) -> tuple[Array, tuple[Found, ...]] | Gap:
    """Return the rate at which the host itself evaporates, mol/s at the knots, (K, N), and its records.

    Hertz-Knudsen with the gas film in series, from the vapour pressure of the pure host.
    """
    atmosphere = contact.body
    assert isinstance(atmosphere, Atmosphere)
    T = setting.T[:, np.newaxis]
    state = "liquid" if setting.liquid else "solid"
    condensed = gibbs_energy(setting.library, setting.host, state, T, setting.draws)
    vapour = gibbs_energy(setting.library, setting.host, "gas", T, setting.draws)
    if isinstance(condensed, Gap):
        return condensed
    if isinstance(vapour, Gap):
        return vapour
    area = setting.sample(contact.area)
    load = replace(gas_load(atmosphere, setting, area), area=area)
    conductance, found = gas_conductance(setting, setting.host, load)
    activity = np.exp((condensed.value - vapour.value) / (R * T))
    return np.asarray(np.exp(conductance.ln) * activity * area), (
        *condensed.found,
        *vapour.found,
        *found,
        *load.records,
    )


__all__ = ["Load", "composition", "gas", "gas_conductance", "gas_load", "gases", "host_evaporation"]
