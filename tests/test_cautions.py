"""Which warnings a choice calls for, and that none of them releases anything."""

from __future__ import annotations

import re
from dataclasses import replace

import pytest

from purity.cautions import GENERAL, cautions, features, for_choice
from purity.database import Gap, Library, load
from purity.scenario import (
    Atmosphere,
    Certified,
    Choice,
    Contact,
    Flowing,
    Furnace,
    Lot,
    Material,
    Package,
    Pumped,
    Scenario,
    Sealed,
    Step,
    Still,
    Supply,
    exact,
)


@pytest.fixture(scope="module")
def library() -> Library:
    return load()


def lot(host: str, **certificate: float) -> Lot:
    """A lot of an invented works; contents in mass ppm."""
    held = {element: Certified(exact(f"lot/{element}", ppm * 1e-6)) for element, ppm in certificate.items()}
    return Lot(host, exact("lot/mass", 10.0), held, {})


def gas(library: Library, name: str, supply: Supply, pressure: float = 101325.0) -> Contact:
    body = library.atmosphere(name)
    assert isinstance(body, Atmosphere)
    body = replace(body, pressure=exact("pressure", pressure), supply=supply)
    return Contact("gas", body, exact("area", 0.02), "gas")


def wall(library: Library, name: str, role: str = "wall") -> Contact:
    body = library.material(name)
    assert isinstance(body, Material), body
    return Contact(role, body, exact("area", 0.1), name)  # type: ignore[arg-type]


def choice(*contacts: Contact, kelvin: float = 1453.15, process: str = "melt", **more: object) -> Choice:
    profile = ((exact("t0", 0.0), exact("T0", 300.0)), (exact("t1", 3600.0), exact("T1", kelvin)))
    facts: dict[str, object] = {"stirring": None, "furnace": None, "form": None}
    return Choice("a", process, profile, contacts=contacts, **(facts | more))  # type: ignore[arg-type]


FLOW = Flowing(exact("flow", 1e-4))


def said(library: Library, made: Choice, metal: Lot) -> str:
    return "\n".join(for_choice(made, metal, library))


@pytest.mark.parametrize(
    ("host", "container", "atmosphere", "kelvin", "words"),
    [
        ("Cu", "magnesia", "hydrogen N5.0", 1453.0, "makes steam inside the metal"),
        ("Ag", "alumina 99.7", "argon-hydrogen 4 %", 1273.0, "makes steam inside the metal"),
        ("Ti", "yttria", "nitrogen N5.0", 1973.0, "no inert gas for this metal"),
        ("Mg", "steel mould", "nitrogen N5.0", 973.0, "no inert gas for this metal"),
        ("Nd", "tantalum", "nitrogen N5.0", 1373.0, "no inert gas for this metal"),
        ("Al", "fused silica", "argon N5.0", 1000.0, "reduces silica"),
        ("La", "fused silica", "argon N5.0", 1200.0, "reduces silica"),
        ("Fe", "isostatic graphite", "argon N5.0", 1873.0, "cannot be kept out of the lot"),
        ("Ni", "isostatic graphite, purified", "argon N5.0", 1773.0, "cannot be kept out of the lot"),
        ("Cu", "isostatic graphite", "argon N5.0", 1453.0, "carbon monoxide, which kills without smell"),
        ("Ti", "water-cooled copper", "argon N5.0", 2000.0, "cooling water"),
        ("Ga", "steel mould", "argon N5.0", 400.0, "dissolve or embrittle a solid metal"),
        ("Cu", "fused silica", "argon N5.0", 1453.0, "fingerprint"),
        ("Fe", "calcia", "argon N5.0", 1873.0, "swells and heats with water"),
        ("Cd", "alumina 99.7", "argon N5.0", 700.0, "toxic, sensitising or carcinogenic"),
    ],
)
def test_what_must_be_said(
    library: Library, host: str, container: str, atmosphere: str, kelvin: float, words: str
) -> None:
    made = choice(wall(library, container), gas(library, atmosphere, FLOW), kelvin=kelvin)
    assert words in said(library, made, lot(host))


@pytest.mark.parametrize(
    ("host", "container", "kelvin", "words"),
    [
        ("Si", "silicon nitride", 1720.0, "lose nitrogen in vacuum"),
        ("Al", "pyrolytic boron nitride", 1700.0, "lose nitrogen in vacuum"),
        ("Fe", "magnesia", 1900.0, "magnesium vapour and oxygen"),
        ("Zn", "isostatic graphite", 800.0, "condenses on cold walls and pumps"),
        ("Nb", "tungsten", 1500.0, "takes up hydrogen as it cools"),
    ],
)
def test_what_must_be_said_of_a_vacuum(
    library: Library, host: str, container: str, kelvin: float, words: str
) -> None:
    under = gas(library, "vacuum", Pumped(), 0.1)
    hot = choice(wall(library, container), under, kelvin=kelvin)
    assert words in said(library, hot, lot(host))
    flushed = choice(wall(library, container), gas(library, "argon N5.0", FLOW), kelvin=kelvin)
    assert words not in said(library, flushed, lot(host)) or words.startswith("takes up")


def test_every_melt_is_told_to_be_dry(library: Library) -> None:
    made = choice(wall(library, "magnesia"), gas(library, "argon N5.0", FLOW))
    assert "Water under liquid metal flashes to steam" in said(library, made, lot("Cu"))
    assert "push out the oxygen" in said(library, made, lot("Cu"))


def test_a_room_is_no_oxygen_deficient_vessel(library: Library) -> None:
    made = choice(gas(library, "air", Still()), kelvin=295.0, process="store")
    text = said(library, made, lot("Cu"))
    assert "push out the oxygen" not in text
    assert "flashes to steam" not in text


def test_temperature_decides(library: Library) -> None:
    """Below 300 degC no steam forms in copper, below 1400 degC silica and carbon keep apart."""
    container, hydrogen = wall(library, "magnesia"), gas(library, "hydrogen N5.0", FLOW)
    cold, hot = (choice(container, hydrogen, kelvin=T, process="heat") for T in (500.0, 900.0))
    assert "steam inside" not in said(library, cold, lot("Cu"))
    assert "steam inside" in said(library, hot, lot("Cu"))


def test_two_bodies_together(library: Library) -> None:
    magnesia, graphite = wall(library, "magnesia"), wall(library, "isostatic graphite", "support")
    argon = gas(library, "argon N5.0", FLOW)
    words = "reduced to magnesium vapour and carbon monoxide"
    assert words in said(library, choice(magnesia, graphite, argon, kelvin=1800.0), lot("Fe"))
    assert words not in said(library, choice(magnesia, argon, kelvin=1800.0), lot("Fe"))
    zone = choice(magnesia, argon, kelvin=1800.0, furnace=Furnace(hot_zone="graphite"))
    assert words in said(library, zone, lot("Fe"))


@pytest.mark.parametrize(("kelvin", "speaks"), [(1300.0, False), (1500.0, True)])
def test_service_limit(library: Library, kelvin: float, speaks: bool) -> None:
    silica, alumina = wall(library, "fused silica"), wall(library, "alumina 99.7")
    made = choice(silica, alumina, gas(library, "argon N5.0", FLOW), kelvin=kelvin)
    text = said(library, made, lot("Ge"))
    assert ("fused silica from natural quartz, clear: A container is used above" in text) is speaks


def test_service_limit_of_the_gas_that_is_there(library: Library) -> None:
    """Graphite stands 2800 degC in argon and burns in air."""
    graphite = wall(library, "isostatic graphite")
    argon, air = gas(library, "argon N5.0", FLOW), gas(library, "air", FLOW)
    words = "used above the highest temperature"
    assert words not in said(library, choice(graphite, argon), lot("Cu"))
    assert words in said(library, choice(graphite, air), lot("Cu"))
    cold_face = choice(wall(library, "steel mould", "mould"), argon, process="cast")
    assert words not in said(library, cold_face, lot("Cu"))


def test_an_unknown_limit_is_said(library: Library) -> None:
    own = Material("our body", {"Al2O3": 1.0}, origin="your file, line 3")
    made = choice(Contact("wall", own, exact("a", 0.1), "wall"), gas(library, "argon N5.0", FLOW))
    assert "No service temperature is on record" in said(library, made, lot("Cu"))


def test_a_closed_vessel_and_a_package(library: Library) -> None:
    sealed = choice(
        wall(library, "fused silica"), gas(library, "argon N5.0", Sealed(exact("v", 1e-4))), process="heat"
    )
    assert "can burst" in said(library, sealed, lot("Zn"))
    air = gas(library, "air", Still()).body
    assert isinstance(air, Atmosphere)
    box = Package("box 3", "glovebox", None, exact("a", 1.0), exact("v", 0.5), air, air)
    stored = choice(Contact("package", box, exact("a", 0.1), "box"), kelvin=295.0, process="store")
    assert "Gloves tear" in said(library, stored, lot("Cu"))


def test_what_the_furnace_held_counts(library: Library) -> None:
    made = choice(
        wall(library, "alumina 99.7"),
        gas(library, "vacuum", Pumped(), 0.1),
        furnace=Furnace(last_charge="Pb 4N"),
    )
    assert features(made, lot("Cu"), library)["elements"] == {"Cu", "Pb"}
    spoken = replace(made, furnace=Furnace(last_charge="lead, two heats"))
    assert features(spoken, lot("Cu"), library)["elements"] == {"Cu", "Pb"}
    assert "toxic" in said(library, made, lot("Cu"))


def test_a_trace_is_no_hazard_of_its_own(library: Library) -> None:
    made = choice(wall(library, "alumina 99.7"), gas(library, "argon N5.0", FLOW))
    assert "toxic, sensitising" not in said(library, made, lot("Cu", As=1.0, Pb=5.0))
    assert "toxic, sensitising" in said(library, made, lot("Cu", Pb=2000.0))


def test_a_scenario_says_everything_once_and_the_general_word_first(library: Library) -> None:
    first = choice(wall(library, "isostatic graphite"), gas(library, "argon N5.0", FLOW))
    second = choice(wall(library, "fused silica"), gas(library, "argon N5.0", FLOW))
    metal = lot("Cu")
    scenario = Scenario("made up", metal, (Step("melt", "melt", (first, second)),))
    got = cautions(scenario, library)
    assert got[0] == GENERAL
    assert len(got) == len(set(got))
    assert set(got[1:]) == set(for_choice(first, metal, library)) | set(for_choice(second, metal, library))


def test_every_rule_defers_and_none_releases(library: Library) -> None:
    texts = [f"{r.words['caution']} {r.words['consult']}" for r in library.rows("hazards")]
    assert len(texts) > 40
    for text in [*texts, GENERAL]:
        assert not re.search(r"\bsafe\b|\bsafely\b|harmless|no risk", text, re.IGNORECASE), text
    assert all("Consult" in r.words["consult"] for r in library.rows("hazards"))
    assert "not a release of material" in GENERAL
    assert "confirm the lot by analysis" in GENERAL


def _split(cells: tuple[str, ...]) -> set[str]:
    return {name for cell in cells for name in cell.split("|")}


def test_rules_use_words_that_exist(library: Library) -> None:
    """A rule that names a body, gas or process that nothing can produce would never speak."""
    elements = {r.words["element"] for r in library.rows("elements")}
    packages = {*library.names("packages", "barrier"), *_split(library.names("packages", "aliases"))}
    computed = {"above its service limit", "no service limit known"}
    known_gas = {
        "vacuum",
        "sealed",
        "without oxygen",
        "rich in oxygen",
        *library.names("atmospheres", "species"),
    }
    processes = {"melt", "cast", "heat", "clean", "touch", "store", "quiescent", "induction", "bubbled"}
    formulas = {*library.names("containers", "formula"), *elements, "BeO"}
    for rule in library.rows("hazards"):
        cells = {c: [n for n in rule.words[c].split("|") if n] for c in ("hosts", "elements", "gases")}
        assert set(cells["hosts"]) | set(cells["elements"]) <= elements, rule.quantity
        assert set(cells["gases"]) <= known_gas, rule.quantity
        assert {n for n in rule.words["processes"].split("|") if n} <= processes, rule.quantity
        for name in filter(None, re.split(r"\||\s\+\s", rule.words["materials"])):
            known = name in formulas | computed | packages or not isinstance(library.material(name), Gap)
            assert known, f"{rule.quantity}: {name}"
