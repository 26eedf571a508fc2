"""Storage: films that grow on stored pieces, adsorbed water, and the room they stand in."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from purity.constants import P0, R
from purity.contacts.setting import Exposed, Setting, carrier_of, flat, for_all, spread_factor
from purity.database import Found, Gap, Record
from purity.driving_force.pure import atoms, formation, gibbs_energy
from purity.kinetics.exposure import Curve, Exposure, Film
from purity.kinetics.films import thickness
from purity.scenario import Atmosphere, Contact

Array = NDArray[np.float64]

#: Oxygen fraction below which a gas grows no film of its own accord.
INERT = 0.01
#: Row of the film table for what grows in a package without its own source.
PACKED = "dry inert"
#: Relative humidity below which air counts as dry, and above which as humid.
DRY, HUMID = 0.2, 0.6
#: Relative humidity at which the table of surfaces gives the adsorbed water.
REFERENCE_HUMIDITY = 0.45


def store(contact: Contact, setting: Setting) -> Exposed:
    """Return how a room acts on stored metal: films of its air, and the water that its air leaves.

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
    pressure = setting.sample(atmosphere.pressure)
    water = _fraction(atmosphere, setting, "H2O") * pressure
    oxygen = float(np.median(_fraction(atmosphere, setting, "O2")))
    humidity = relative_humidity(setting, water)
    environment = environment_of(oxygen, float(np.median(humidity)))
    inputs = (contact.area, atmosphere.pressure, *atmosphere.fractions.values())
    return stored(contact, setting, environment, humidity, {}, inputs)


def stored(
    contact: Contact,
    setting: Setting,
    environment: str,
    humidity: Array,
    supply: dict[str, Array],
    inputs: tuple,  # type: ignore[type-arg]
    records: tuple[Found, ...] = (),
    notes: tuple[str, ...] = (),
) -> Exposed:
    """Return films of an environment and adsorbed water, bounded by what a package lets in.

    Parameters
    ----------
    contact : Contact
    setting : Setting
    environment : str
        Column of the film table.
    humidity : (N,) array
        Relative humidity around the pieces.
    supply : mapping of gas to (N,) array
        mol that reach the pieces in the step; a gas that is not named is without limit. Any supply means
        a package: no sulphur reaches the pieces, for what permeates at parts per billion is nothing.
    inputs, records, notes
        What stands behind the humidity and the supply.
    """
    form = setting.choice.form
    area = setting.sample(contact.area) if form is None else np.array([form.area])
    films = storage_films(setting, environment)
    if supply:
        films = [
            *(f for f in films if _oxide(f[0])),
            *(f for f in storage_films(setting, PACKED) if not _oxide(f[0])),
        ]
    gaps: dict[str, tuple[Gap, ...]] = {}
    if not films:
        gap = Gap(f"films:{setting.host}/oxide/{environment}", "no film record for this metal in this gas")
        gaps["O"] = (gap,)
    wet = any(water_feeds(setting, found.record) for film, found in films if _oxide(film))
    feeding = [gas for gas in supply if gas != "H2O" or wet]
    carriers = tuple(carrier_of(setting, gas, supply[gas]) for gas in feeding)
    gain, water = _adsorbed(setting, area, humidity, supply.get("H2O"))
    by_element: dict[str, tuple[Found, ...]] = {}
    for element in setting.impurities:
        own = [found for film, found in films if film.nu[setting.impurities.index(element)]]
        damp = (*water, *_water(setting)) if element in ("H", "O") else ()
        by_element[element] = (*own, *records, *damp) if own or damp else ()
    names = {c.name: records for c in carriers}
    rate = Curve(setting.T[:1], np.zeros((len(setting.impurities), 1, 1)))
    exposure = Exposure(contact.name, area, rate, carriers, (), tuple(film for film, _ in films))
    return Exposed(exposure, gain, names, by_element, inputs, gaps, notes)


def _oxide(film: Film) -> bool:
    return film.name == "oxide"


def water_feeds(setting: Setting, record: Record) -> bool:
    """Return whether the metal takes the oxygen of water to make this film, by their Gibbs energies."""
    formula = record.words["formula"]
    count = atoms(formula).get("O", 0.0) if formula != "*" else 0.0
    T = float(setting.T[0])
    film = formation(setting.library, formula, "solid", T, setting.draws.nominal()) if count else None
    water = formation(setting.library, "H2O", "gas", T, setting.draws.nominal())
    if film is None or isinstance(film, Gap) or isinstance(water, Gap):
        return True
    return float(film.value.ravel()[0]) / count < float(water.value.ravel()[0])


def environment_of(oxygen: float, humidity: float) -> str:
    """Return the row of the film table for a gas with this oxygen fraction and relative humidity."""
    if oxygen < INERT:
        return "dry inert"
    if humidity < DRY:
        return "dry air"
    return "humid air" if humidity > HUMID else "indoor air"


def storage_films(setting: Setting, environment: str) -> list[tuple[Film, Found]]:
    """Return the films that grow on the host in an environment, with their records."""
    rows: dict[str, Record] = {}
    for where in _like(environment):
        for record in setting.library.rows("films", host=setting.host, environment=where):
            rows.setdefault(record.words["film"], record)
    films = []
    for record in rows.values():
        film = _film(setting, record)
        if film is not None:
            films.append((film, Found(record)))
    return films


def grown(film: Film, seconds: Array, T: float) -> Array:
    """Return the thickness that a film reaches from bare metal, m, (N,)."""
    return thickness(film, np.zeros(1), seconds, T)


def relative_humidity(setting: Setting, water: Array) -> Array:
    """Return p(H2O) over the pressure of liquid water at the step's temperature, (N,), at most 1."""
    T = np.array([float(setting.T[0])])
    liquid = gibbs_energy(setting.library, "H2O", "liquid", T, setting.draws.nominal())
    gas = gibbs_energy(setting.library, "H2O", "gas", T, setting.draws.nominal())
    if isinstance(liquid, Gap) or isinstance(gas, Gap):
        return np.ones_like(water)
    saturated = float(P0 * np.exp((liquid.value - gas.value) / (R * T)).ravel()[0])
    return np.asarray(np.minimum(1.0, water / saturated))


def water_gaps(setting: Setting) -> dict[str, tuple[Gap, ...]]:
    """Return what is missing to say how much water stands on stored metal."""
    made = [gibbs_energy(setting.library, "H2O", state, 298.15, setting.draws) for state in ("liquid", "gas")]
    gaps = [one for one in made if isinstance(one, Gap)]
    row = setting.library.find("surfaces", host="*", surface="etched", species="H2O")
    gaps += [row] if isinstance(row, Gap) else []
    return for_all(("H", "O"), tuple(gaps))


def _water(setting: Setting) -> tuple[Found, ...]:
    """Records of the pressure over liquid water."""
    T = float(setting.T[0])
    made = [gibbs_energy(setting.library, "H2O", state, T, setting.draws) for state in ("liquid", "gas")]
    return tuple(f for one in made if not isinstance(one, Gap) for f in one.found)


def _like(environment: str) -> tuple[str, ...]:
    """Environments whose rows stand in for one that has none, nearest first."""
    stand_in = {"dry air": ("indoor air",), "humid air": ("indoor air",), "dry inert": ()}
    return (environment, *stand_in.get(environment, ()))


def _film(setting: Setting, record: Record) -> Film | None:
    formula = record.words["formula"]
    if formula == "*" or not set(atoms(formula)) <= {*setting.impurities, setting.host}:
        return None
    molar = 0.0
    for element, count in atoms(formula).items():
        molar += setting.molar_mass[element] * count
    per_volume = record.fields["density_kg_per_m3"] / molar
    counts = atoms(formula)
    nu = np.array([per_volume * counts.get(element, 0.0) for element in setting.impurities])
    factor = spread_factor(setting, record)
    parameters = []
    for name in ("p1", "p2", "p3"):
        value = record.fields.get(name)
        if value is not None:
            parameters.append(value)
    scale = _scaled(record.words["law"], parameters, factor)
    return Film(record.words["film"], nu, record.words["law"], tuple(flat(setting, value) for value in scale))


def _scaled(law: str, parameters: list[float], factor: Array) -> list[Array | float]:
    """Put the spread of a film on its thickness: on p1, squared for parabolic, 1/p1 and 1/p2 for inverse."""
    p = list(parameters)
    if law == "inverse-logarithmic":
        return [p[0] / factor, p[1] / factor, *p[2:]]
    if law == "parabolic":
        return [p[0] * factor**2, *p[1:]]
    if law == "linear-parabolic":
        return [p[0] * factor, p[1] * factor, *p[2:]]
    return [p[0] * factor, *p[1:]]


def _fraction(atmosphere: Atmosphere, setting: Setting, gas: str) -> Array:
    given = atmosphere.fractions.get(gas)
    return np.zeros(1) if given is None else setting.sample(given)


def _adsorbed(
    setting: Setting, area: Array, humidity: Array, most: Array | None
) -> tuple[Array, tuple[Found, ...]]:
    """Content of H and O from the water on the surface, in proportion to the humidity, (I, N)."""
    found = setting.library.find("surfaces", host="*", surface="etched", species="H2O")
    zero = np.zeros((len(setting.impurities), setting.draws.n))
    if isinstance(found, Gap):
        return zero, ()
    per_area = found.record.fields["amount_mg_per_m2"] * 1e-6 * spread_factor(setting, found.record)
    mol = per_area * area * humidity / REFERENCE_HUMIDITY
    mol = mol / sum(setting.molar_mass[e] * n for e, n in atoms("H2O").items())
    if most is not None:
        mol = np.minimum(mol, most)
    counts = atoms("H2O")
    gain = np.stack(
        [
            np.broadcast_to(mol * counts.get(e, 0.0) / setting.amount, (setting.draws.n,))
            for e in setting.impurities
        ]
    )
    return gain, (found,)
