"""The tables of what metal touches: their rules, and a few numbers that anyone in the trade would check."""

from __future__ import annotations

from collections import defaultdict
from math import exp, log, log1p, sqrt

import numpy as np
import pytest

from purity.constants import ATM
from purity.database import Gap, Library, Record, load, verify
from purity.kinetics.films import LAWS
from purity.quantities import frost_point_pressure
from purity.scenario import Atmosphere, Material

OURS = (
    "containers", "traces", "wall_values", "wetting", "attack", "atmospheres", "surfaces", "films",
    "packages", "desiccants", "sticking", "gas_transport", "transfer", "priors", "hazards",
    "sources_surroundings",
)  # fmt: skip
DAY, YEAR = 86400.0, 3.156e7


@pytest.fixture(scope="module")
def library() -> Library:
    return load()


def one(library: Library, table: str, **key: str) -> Record:
    rows = library.rows(table, **key)
    assert len(rows) == 1, (table, key)
    return rows[0]


def test_every_row_keeps_the_rules() -> None:
    released = "differs from the file"
    faults = [f for f in verify() if f.key.partition(".csv")[0] in OURS and released not in f.text]
    assert not faults


def test_no_recalled_row_says_that_it_was_looked_up(library: Library) -> None:
    unseen = {key for key, source in library.sources.items() if source["origin"] in {"memory", "not opened"}}
    assert {"memory", "practice"} <= unseen
    for table in OURS[:-1]:
        for record in library.tables[table]:
            assert record.origin != "looked-up" or record.source not in unseen, record.quantity


# Walls


def test_every_body_can_be_used(library: Library) -> None:
    for name in library.names("containers", "material"):
        body = library.material(name)
        assert isinstance(body, Material)
        assert body.leach_depth is not None, name
        assert one(library, "wall_values", material=name, property="density").fields["value_SI"] > 1000, name
        assert body.open_porosity is not None or name in {
            "water-cooled copper", "steel mould", "cast-iron mould", "calcium zirconate", "platinum",
            "magnesia 99.99", "magnesia, arc fused", "silicon carbide, reaction bonded", "glassy carbon",
            "sapphire",
        }, name  # fmt: skip
        if name != "water-cooled copper":  # its face is as cold as its water
            assert set(body.service) & {"inert", "vacuum", "oxidising"}, name


def test_compounds_and_traces_make_up_the_body(library: Library) -> None:
    for name in library.names("containers", "material"):
        body = library.material(name)
        assert isinstance(body, Material)
        traces = sum(given.median for given in body.traces.values())
        assert sum(body.phases.values()) + traces == pytest.approx(1.0, abs=0.02), name
        assert not set(body.phases) & set(body.traces), name


def test_compounds_of_walls_have_gibbs_energies(library: Library) -> None:
    known = {r.words["formula"] for r in library.rows("gibbs") if r.words["state"] != "gas"}
    assert set(library.names("containers", "formula")) <= known
    assert set(library.names("traces", "formula")) <= known | {"Dy2O3"}


@pytest.mark.parametrize("table", ["containers", "atmospheres", "packages"])
def test_no_name_means_two_things(library: Library, table: str) -> None:
    column = {"containers": "material", "atmospheres": "atmosphere", "packages": "barrier"}[table]
    meant: defaultdict[str, set[str]] = defaultdict(set)
    for record in library.rows(table):
        for name in (record.words[column], *record.words["aliases"].split("|")):
            if name:
                meant[name.casefold()].add(record.words[column])
    assert not {name: found for name, found in meant.items() if len(found) > 1}


@pytest.mark.parametrize(
    "name",
    [
        "isostatic graphite, purified", "magnesia", "fused silica sheath", "alumina 99.7", "alumina",
        "yttria", "graphite", "molybdenum", "tungsten", "ceramic muffle", "quartz tube", "steel retort",
        "pyrolytic boron nitride", "water-cooled copper", "steel mould", "alumina 99.9", "tantalum foil",
        "calcia",
    ],
)  # fmt: skip
def test_names_as_a_plant_says_them(library: Library, name: str) -> None:
    assert not isinstance(library.material(name), Gap)


@pytest.mark.parametrize(
    ("formula", "element", "ppm"),
    # ug of the element in g of a natural fused-quartz tube, glow-discharge list: totalquartzworks.com.
    [
        ("Al2O3", "Al", 11.0),
        ("TiO2", "Ti", 3.4),
        ("Na2O", "Na", 0.29),
        ("B2O3", "B", 1.1),
        ("Li2O", "Li", 0.16),
    ],
)
def test_traces_are_compounds(library: Library, formula: str, element: str, ppm: float) -> None:
    atoms = {"Al2O3": (2, 3), "TiO2": (1, 2), "Na2O": (2, 1), "B2O3": (2, 3), "Li2O": (2, 1)}[formula]
    mass = one(library, "elements", element=element).fields["molar_mass_g_per_mol"]
    share = atoms[0] * mass / (atoms[0] * mass + atoms[1] * 15.999)
    held = one(library, "traces", material="fused silica", formula=formula).fields["content_ppm_mass"]
    assert held * share == pytest.approx(ppm, rel=0.01)


@pytest.mark.parametrize(
    ("host", "formula", "degrees"),
    # Contact angles that do not wet (above 90 degrees), looked up; sources beside the rows.
    [("Cu", "Al2O3", 125), ("Cu", "Y2O3", 130), ("Ag", "C", 127), ("Au", "Al2O3", 134), ("Al", "Al2O3", 109)],
)
def test_walls_that_are_not_wetted(library: Library, host: str, formula: str, degrees: int) -> None:
    record = one(library, "wetting", host=host, formula=formula)
    assert f"{degrees} deg" in record.words["wets"]
    assert 1e-4 <= record.fields["factor"] <= 1e-1
    assert exp(1.645 * record.spread) > 5  # a judgement, and wide


def test_reactive_metals_wet_their_walls(library: Library) -> None:
    for host in ("Ti", "Zr", "Nd", "Y", "Mg"):
        assert not library.rows("wetting", host=host)


def test_carbon_is_dissolved_fastest_by_iron(library: Library) -> None:
    rates = {r.words["host"]: r.fields["rate_m_per_s"] for r in library.rows("attack", formula="C")}
    assert rates["Fe"] > rates["Co"] > rates["Ni"] > rates["Ti"]


# Gases


def test_fractions_of_a_gas_sum_to_one(library: Library) -> None:
    for name in library.names("atmospheres", "atmosphere"):
        total = sum(r.fields["fraction_ppm_mol"] for r in library.rows("atmospheres", atmosphere=name))
        assert total == pytest.approx(1e6, rel=2e-4), name


@pytest.mark.parametrize("gas", ["argon", "helium"])
def test_better_grades_hold_less(library: Library, gas: str) -> None:
    grades = [library.atmosphere(f"{gas} {grade}") for grade in ("N4.6", "N5.0", "N6.0")]
    for species in ("O2", "H2O", "N2", "CO"):
        held = [g.fractions[species].median for g in grades if isinstance(g, Atmosphere)]
        assert len(held) == 3
        assert held[0] > held[1] > held[2]


def test_argon_of_five_nines(library: Library) -> None:
    # O2 2, N2 5, H2O 3 ppm by volume: list for argon 99.999 %, raitec.ir.
    gas = library.atmosphere("argon N5.0")
    assert isinstance(gas, Atmosphere)
    for species, ppm in (("O2", 2.0), ("N2", 5.0), ("H2O", 3.0)):
        assert gas.fractions[species].median * 1e6 == pytest.approx(ppm)
    impurities = sum(g.median for name, g in gas.fractions.items() if name != "Ar")
    assert impurities < 1.2e-5  # five nines, within the usual way of adding limits up


def test_water_in_room_air(library: Library) -> None:
    """45 % relative humidity at 22 degC."""
    gas = library.atmosphere("clean-room air")
    assert isinstance(gas, Atmosphere)
    expected = 0.45 * frost_point_pressure(295.15) / ATM
    assert gas.fractions["H2O"].median == pytest.approx(expected, rel=0.01)
    # dry air 20.946 % O2 (composition of the atmosphere, NOAA), diluted by the water
    assert gas.fractions["O2"].median == pytest.approx(0.20946 * (1 - expected), rel=0.005)


def test_the_loads_of_a_vacuum(library: Library) -> None:
    """Water leads in an unbaked vessel, hydrogen in a baked one (vacuum practice)."""

    def first(name: str) -> str:
        rows = library.rows("atmospheres", atmosphere=name)
        return max(rows, key=lambda r: r.fields["fraction_ppm_mol"]).words["species"]

    assert first("outgassing") == "H2O"
    assert first("outgassing, baked") == "H2"


@pytest.mark.parametrize(
    ("gas", "medium", "T", "measured"),
    # m2/s at 1 atm: CRC Handbook, diffusion in gases (after Marrero and Mason 1972).
    [
        ("O2", "argon", 293.15, 1.87e-5), ("O2", "argon", 673.15, 7.93e-5), ("N2", "argon", 473.15, 4.39e-5),
        ("H2", "argon", 293.15, 7.94e-5), ("CO", "argon", 573.15, 6.15e-5), ("CO2", "argon", 373.15, 2.35e-5),
        ("H2O", "air", 293.15, 2.42e-5), ("H2O", "air", 473.15, 6.38e-5),
    ],
)  # fmt: skip
def test_diffusivity_of_gases(library: Library, gas: str, medium: str, T: float, measured: float) -> None:
    fields = one(library, "gas_transport", gas=gas, **{"in": medium}).fields
    held = fields["D_m2_per_s"] * (T / fields["T_ref_K"]) ** fields["exponent"]
    assert held == pytest.approx(measured, rel=0.05)


def test_predicted_diffusivity_near_a_measured_one(library: Library) -> None:
    """Water in argon is predicted; in air, which is alike, it was measured."""
    argon = one(library, "gas_transport", gas="H2O", **{"in": "argon"}).fields["D_m2_per_s"]
    air = one(library, "gas_transport", gas="H2O", **{"in": "air"}).fields["D_m2_per_s"]
    assert argon == pytest.approx(air, rel=0.15)


def test_every_gas_of_an_atmosphere_has_a_diffusivity(library: Library) -> None:
    known = set(library.names("gas_transport", "gas"))
    assert set(library.names("atmospheres", "species")) - {"Ar", "He"} <= known


def test_exchange_is_given_for_every_stirring(library: Library) -> None:
    for place in ("wall", "free surface"):
        k = {r.words["stirring"]: r.fields["k_m_per_s"] for r in library.rows("transfer", place=place)}
        assert {"quiescent", "induction", "bubbled"} <= set(k)
        assert k["quiescent"] < k["induction"]


# Films and surfaces


def thickness(record: Record, t: float, T: float = 295.0) -> float:
    """Thickness in nm after t seconds, by the law that the head of the table gives."""
    p1, p2, p3 = (record.fields.get(name, 0.0) for name in ("p1", "p2", "p3"))
    rate = p1 * exp(-record.fields.get("Q_kJ_per_mol", 0.0) * 1e3 / (8.314462618 * T))
    laws = {
        "limiting": lambda: p1,
        "logarithmic": lambda: p1 * log1p(p2 * t),
        "inverse-logarithmic": lambda: 1.0 / (p1 - p2 * log(t / p3)),
        "parabolic": lambda: sqrt(rate * t),
        "linear-parabolic": lambda: 0.5 * p1 / p2 * (sqrt(1.0 + 4.0 * p2**2 * t / p1) - 1.0),
    }
    return 1e9 * laws[record.words["law"]]()


def test_every_film_follows_a_known_law(library: Library) -> None:
    for record in library.tables["films"]:
        T = 0.5 * (record.T_min + record.T_max)
        day, month = thickness(record, DAY, T), thickness(record, 30 * DAY, T)
        assert 0.0 < day <= month * (1 + 1e-12), record.quantity
        assert day < 1e4 or record.T_min > 500, record.quantity
        assert record.fields["density_kg_per_m3"] > 2000


def test_the_head_of_the_table_says_what_is_computed(library: Library) -> None:
    for record in library.tables["films"]:
        if "Q_kJ_per_mol" in record.fields:
            continue
        given = [record.fields[name] for name in ("p1", "p2", "p3") if name in record.fields]
        parameters = tuple(np.array([value]) for value in given)
        for t in (3600.0, DAY, YEAR):
            grown = LAWS[record.words["law"]](np.zeros(1), parameters, np.array([t]))
            assert grown[0] * 1e9 == pytest.approx(thickness(record, t), rel=1e-4), record.quantity


def test_copper_in_a_room(library: Library) -> None:
    """2 to 5 nm of oxide after days, about 10 nm after years (common practice, no source)."""
    record = one(library, "films", host="Cu", film="oxide", environment="indoor air")
    assert 2.0 < thickness(record, 1 * DAY) < thickness(record, 10 * DAY) < 6.0
    assert thickness(record, 5 * YEAR) == pytest.approx(10.0, rel=0.25)


@pytest.mark.parametrize(("days", "nm"), [(1.0, 3.3), (100.0, 6.2), (1000.0, 10.8)])
def test_copper_near_the_measured_law(library: Library, days: float, nm: float) -> None:
    """1/x = 0.3 - 0.03 ln(t/d) per nm for a 400 nm film: Appl. Surf. Sci. 2020, W3013602875, abstract."""
    record = one(library, "films", host="Cu", film="oxide", environment="indoor air")
    assert thickness(record, days * DAY) == pytest.approx(nm, rel=0.2)


def test_scale_on_hot_copper(library: Library) -> None:
    """Wagner's rational rate constant 6.6e-9 eq/(cm s) at 1000 degC gives 7e-8 g2/(cm4 s); from memory."""
    record = one(library, "films", host="Cu", film="oxide", environment="hot air")
    oxygen = thickness(record, 1.0, 1273.15) * 1e-9 * record.fields["density_kg_per_m3"] * 15.999 / 143.09
    kp = (oxygen * 0.1) ** 2  # kg/m2 to g/cm2, after one second
    assert kp == pytest.approx(7e-8, rel=0.5)


def test_silver_in_a_room(library: Library) -> None:
    # 28 nm in 182 days in the room of a museum: phys. stat. sol. (c) 5 (2008) 1215, abstract.
    record = one(library, "films", host="Ag", film="sulphide", environment="indoor air")
    assert thickness(record, 182 * DAY) == pytest.approx(28.0, rel=0.1)


@pytest.mark.parametrize(
    ("host", "low", "high"),
    # nm on polished metal after days in a room: Nb (Halbritter; XPS 2022), Ti 2.6 after a day, Al 2 to 4.
    [("Nb", 2.0, 3.5), ("Ti", 2.3, 4.5), ("Al", 2.0, 4.0), ("Ni", 0.6, 1.5), ("Si", 0.4, 0.9)],
)
def test_films_in_a_room(library: Library, host: str, low: float, high: float) -> None:
    record = one(library, "films", host=host, film="oxide", environment="indoor air")
    assert low <= thickness(record, 5 * DAY) <= high


def test_a_clean_face_carries_less(library: Library) -> None:
    def held(surface: str, species: str) -> float:
        return one(library, "surfaces", host="*", surface=surface, species=species).fields["amount_mg_per_m2"]

    for species in ("C", "H2O", "S"):
        assert held("etched", species) < held("as received", species) < held("worked", species)
    assert held("etched", "H2O") == pytest.approx(2 * 0.3)  # two layers of 1e19 molecules per m2


# Packages


def test_barriers_in_the_order_of_the_trade(library: Library) -> None:
    """Glass, steel, foil, metallised film, 100 um of polyester, then of polyethylene: what each lets in."""

    def lets_in(barrier: str, gas: str) -> float:
        fields = one(library, "packages", barrier=barrier, gas=gas).fields
        film = fields.get("permeability_mol_per_m_s_Pa", 0.0) / 1e-4
        return fields.get("permeance_mol_per_m2_s_Pa", film)

    order = [
        "glass ampoule",
        "aluminium laminate",
        "metallised laminate",
        "polyester",
        "polyethylene",
        "paper",
    ]
    oxygen = [lets_in(barrier, "O2") for barrier in order]
    assert oxygen == sorted(oxygen)
    water = [lets_in(barrier, "H2O") for barrier in (*order[:3], "polyethylene", "paper")]
    assert water == sorted(water)


def test_one_of_two_ways_to_pass_a_wall(library: Library) -> None:
    for record in library.rows("packages"):
        given = {"permeability_mol_per_m_s_Pa", "permeance_mol_per_m2_s_Pa"} & set(record.fields)
        assert len(given) == 1, record.quantity


def test_desiccants_hold_what_their_units_must(library: Library) -> None:
    # One unit takes 3 g of water at 20 % relative humidity, 25 degC; silica gel 26 g (MIL-D-3464).
    silica = one(library, "desiccants", desiccant="silica gel").fields
    assert silica["capacity_kg_per_kg"] * 26.0 == pytest.approx(3.0, rel=0.01)
    assert silica["floor_Pa"] == pytest.approx(0.20 * frost_point_pressure(298.15), rel=0.01)
    assert one(library, "desiccants", desiccant="molecular sieve").fields["floor_Pa"] < 1.0
