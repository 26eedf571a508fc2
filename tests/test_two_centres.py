"""The two centres meet: a bath integrated to rest ends where the certified equilibrium says.

Kinetics knows no equilibrium of several phases and equilibrium knows no rates; both start from the same
Gibbs energies. Without evaporation, and under gases in equilibrium among themselves, the content after a
very long time must be that of the minimum of the Gibbs energy. Cases and energies are drawn at random.

A bath counts in moles per mole of host, an ideal-dilute phase in mole fractions of the whole. The two
differ by the sum of the contents; the equilibrium is asked again with its metal's energies moved by
ln(1 + sum x) until they agree, so that the comparison is exact and not only right in the dilute limit.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import pytest
from numpy.typing import NDArray

from purity.constants import DILUTE
from purity.database import Library, load
from purity.draws import Draws
from purity.driving_force.equilibrium import Outcome, equilibrium
from purity.driving_force.pure import atoms, gibbs_energy
from purity.driving_force.species import gibbs, select
from purity.driving_force.substances import ln_dissolution
from purity.kinetics.bath import Case, Path, integrate
from purity.kinetics.exposure import Carrier, Curve, Exposure, Skin
from purity.kinetics.schedule import hold

Array = NDArray[np.float64]
R = 8.314462618

#: Long enough for any of the cases: rest can take a million times the 1,000 s of one element alone.
EVER = 1e16
#: Draws of the energies in each case.
N = 8
#: Middle of the melt range that each host is asked at, K, and half its width.
MELTS = {"Cu": (1480.0, 100.0), "Ni": (1800.0, 60.0), "Fe": (1880.0, 60.0)}


@dataclass(frozen=True, slots=True)
class Meeting:
    """One case: the metal, what it stands in, and its charge, mol per mol of host."""

    host: str
    T: float
    walls: tuple[str, ...]
    elements: tuple[str, ...]
    pressures: Mapping[str, float]
    charge: Array
    draws: Draws
    rates: Array


@pytest.fixture(scope="session")
def library() -> Library:
    return load()


def value(found: object) -> Array:
    energy = found.value  # type: ignore[attr-defined]
    return np.broadcast_to(np.asarray(energy, dtype=float).reshape(-1), (N,))


def nu(formula: str, elements: Sequence[str]) -> Array:
    return np.array([float(atoms(formula).get(e, 0.0)) for e in elements])


def ln_k(library: Library, m: Meeting, formula: str, state: str) -> Curve:
    found = ln_dissolution(library, m.host, "liquid", formula, state, m.T, m.draws)
    return Curve(np.array([m.T]), value(found)[np.newaxis, :])


def forming(library: Library, m: Meeting) -> tuple[str, ...]:
    """Compounds of two elements, and with the host, that can form beside the walls."""
    if m.pressures:
        return ()
    chosen = select(library, m.host, "liquid", m.elements, m.walls, gas_phase=False)
    return tuple(
        s.formula
        for s in chosen.species
        if s.state == "solid"
        and s.formula not in m.walls
        and len(set(atoms(s.formula)) - {m.host}) <= 2
        and any(nu(s.formula, m.elements))
    )


def bath_at_rest(library: Library, m: Meeting, compounds: Sequence[str]) -> Path:
    """Every wall and gas is a contact of its own with rates of its own; compounds are skins."""
    T = np.array([m.T])
    exchange = Curve(T, np.log(m.rates)[:, np.newaxis, np.newaxis])
    exposures = []
    for formula in m.walls:
        carrier = Carrier(formula, nu(formula, m.elements), ln_k(library, m, formula, "solid"), np.ones(1))
        exposures.append(Exposure(formula, np.array([4e-4]), exchange, (carrier,)))
    gases = tuple(
        Carrier(
            gas,
            nu(gas, m.elements),
            ln_k(library, m, gas, "gas"),
            np.array([pressure]),
            Curve(T, np.log(np.array([[10.0 ** (k - 1)]]))),
        )
        for k, (gas, pressure) in enumerate(m.pressures.items())
    )
    if gases:
        exposures.append(Exposure("gas", np.array([1e-4]), exchange, gases))
    skins = tuple(Skin(f, nu(f, m.elements), ln_k(library, m, f, "solid")) for f in compounds)
    first = exposures[0]
    exposures[0] = Exposure(first.contact, first.area, first.exchange, first.carriers, skins)
    start = np.repeat(m.charge[:, np.newaxis], N, axis=1)
    case = Case(start, np.array([1e5]), np.ones(1), hold(m.T, EVER), tuple(exposures))
    return integrate(case, nodes=32)


def potentials(library: Library, m: Meeting) -> dict[str, Array]:
    """Chemical potential over RT of each element that gases or graphite hold."""
    known = [(gas, "gas", np.log(p)) for gas, p in m.pressures.items()]
    known += [("C", "solid", 0.0)] if "C" in m.walls else []
    if not known:
        return {}
    names = sorted({e for formula, _, _ in known for e in atoms(formula)})
    rows = np.array([nu(formula, names) for formula, _, _ in known])
    energies = [
        value(gibbs_energy(library, formula, state, m.T, m.draws)) / (R * m.T) + ln_a
        for formula, state, ln_a in known
    ]
    found = np.linalg.lstsq(rows, np.stack(energies), rcond=None)[0]
    return dict(zip(names, found, strict=True))


def equilibrium_at_rest(
    library: Library, m: Meeting, compounds: Sequence[str]
) -> tuple[Array, Array, NDArray[np.bool_]]:
    """Dissolved and whole contents, mol per mol of host, and whether each draw was certified."""
    walls = [w for w in m.walls if w != "C"]
    every = select(library, m.host, "liquid", m.elements, walls, gas_phase=False)
    allowed = {*walls, *compounds}
    barred = [s.name for s in every.species if s.state in ("solid", "liquid") and s.name not in allowed]
    chosen = select(library, m.host, "liquid", m.elements, walls, exclude=barred, gas_phase=False)
    system, g = chosen.system, gibbs(chosen, library, m.T, m.draws)
    g = np.broadcast_to(g, (len(g), N))
    held = potentials(library, m)
    fed = [{m.host: 1.0}, *(atoms(w) for w in walls), *({e: 1.0} for e in m.elements)]
    inputs = np.array([[round(i.get(e, 0.0)) for e in system.elements] for i in fed], dtype=np.int64)
    amounts = np.concatenate([np.ones(1), np.full(len(walls), 10.0), m.charge])[:, np.newaxis]
    amounts = np.repeat(amounts, N, axis=1)
    rows = [system.species.index(f"{e} in {m.host}") for e in m.elements]
    metal = (system.phase == system.host)[:, np.newaxis]
    shift = np.zeros(N)
    for _ in range(6):
        rest = equilibrium(system, g + metal * shift, amounts, inputs=inputs, held=held)
        x = rest.amounts[rows] / rest.amounts[system.host]
        shift = np.log1p(np.nan_to_num(x).sum(axis=0))
    skins = [system.species.index(f) for f in compounds]
    bound = sum(
        (
            nu(f, m.elements)[:, np.newaxis] * rest.amounts[s] / rest.amounts[system.host]
            for f, s in zip(compounds, skins, strict=True)
        ),
        np.zeros_like(x),
    )
    return x, x + bound, rest.state == Outcome.SOLVED


def compare(library: Library, m: Meeting) -> tuple[int, int]:
    """Hold both answers against each other; return how many draws were compared, and with a skin."""
    compounds = forming(library, m)
    path = bath_at_rest(library, m, compounds)
    x, whole, solved = equilibrium_at_rest(library, m, compounds)
    dilute = solved & (np.nan_to_num(x, nan=1.0).max(axis=0) < 0.5 * DILUTE) & ~path.attacked
    assert path.solved[dilute].all()
    np.testing.assert_allclose(path.x[:, dilute], x[:, dilute], rtol=1e-6)
    np.testing.assert_allclose(path.total[:, dilute], whole[:, dilute], rtol=1e-6)
    return int(dilute.sum()), int(((whole - x).max(axis=0) > 1e-12)[dilute].sum())


#: Wall, and what else the charge holds; some of it takes the oxygen of the wall and forms a compound.
WALLS = (
    ("Al2O3", "Si"),
    ("MgO", "Al"),
    ("SiO2", "Al"),
    ("CaO", "Si"),
    ("Y2O3", "Mg"),
    ("ZrO2", "Mg"),
    ("BeO", "Mn"),
)


def meeting(
    number: int, host: str, walls: tuple[str, ...], elements: set[str], pressures: Mapping[str, float]
) -> Meeting:
    """Draw a temperature, a charge of 1e-9 to 1e-4, rates and energies."""
    rng = np.random.default_rng(number)
    middle, half = MELTS[host]
    names = tuple(sorted(elements))
    charge = 10.0 ** rng.uniform(-9.0, -4.0, len(names))
    rates = 10.0 ** rng.uniform(-5.0, -3.5, len(names))
    T = middle + half * rng.uniform(-1.0, 1.0)
    return Meeting(host, T, walls, names, pressures, charge, Draws(number, 1, N), rates)


def test_an_oxide_wall_ends_at_the_certified_equilibrium(library: Library) -> None:
    compared = [
        compare(library, meeting(k, host, (wall,), {*atoms(wall), other}, {}))
        for k, ((wall, other), host) in enumerate((w, h) for w in WALLS for h in MELTS)
    ]
    assert sum(n > 0 for n, _ in compared) >= 20
    assert sum(skin > 0 for _, skin in compared) >= 3, "no case formed a compound: the skins were not asked"


@pytest.mark.parametrize("second", ["", "Al2O3", "MgO"])
def test_graphite_with_carbon_monoxide_held_at_a_pressure(library: Library, second: str) -> None:
    """Graphite sets carbon, the pressure sets oxygen; an oxide beside it answers to that oxygen."""
    walls = ("C", second) if second else ("C",)
    elements = {"C", "O", *(atoms(second) if second else ())}
    compared, _ = compare(library, meeting(105, "Cu", walls, elements, {"CO": 0.1}))
    assert compared == N


@pytest.mark.parametrize("host", ["Ni", "Fe"])
@pytest.mark.parametrize("wall", ["", "Al2O3", "MgO"])
def test_carbon_and_oxygen_held_by_a_gas(library: Library, host: str, wall: str) -> None:
    """Nickel and iron dissolve too much from graphite; CO and CO2 hold both elements low."""
    elements = {"C", "O", *(atoms(wall) if wall else ())}
    m = meeting(110 + len(wall), host, (wall,) if wall else (), elements, {"CO": 0.1, "CO2": 1e-3})
    compared, _ = compare(library, m)
    assert compared > 0


@pytest.mark.parametrize("host", MELTS)
@pytest.mark.parametrize("wall", ["", "Al2O3", "MgO"])
def test_gases_in_equilibrium_among_themselves(library: Library, host: str, wall: str) -> None:
    """Hydrogen, water and oxygen at one oxygen potential, in the middle of the energies."""
    number = 200 + len(wall)
    elements = {"H", "O", *(atoms(wall) if wall else ())}
    m = meeting(number, host, (wall,) if wall else (), elements, {})
    m = Meeting(m.host, m.T, m.walls, m.elements, {}, m.charge, Draws.nominal(), m.rates)
    oxygen, hydrogen = {"Cu": 1e-12, "Ni": 1e-12, "Fe": 1e-14}[host], 1e-2
    g = {gas: value(gibbs_energy(library, gas, "gas", m.T, m.draws))[0] for gas in ("H2", "H2O", "O2")}
    ln_k = (g["H2"] + 0.5 * g["O2"] - g["H2O"]) / (R * m.T)
    pressures = {"H2": hydrogen, "O2": oxygen, "H2O": float(hydrogen * oxygen**0.5 * np.exp(ln_k))}
    m = Meeting(m.host, m.T, m.walls, m.elements, pressures, m.charge, m.draws, m.rates)
    assert compare(library, m)[0] == N


@pytest.mark.parametrize("host", MELTS)
def test_one_gas_alone(library: Library, host: str) -> None:
    pressures = {"Cu": {"O2": 1e-11}, "Ni": {"N2": 0.2}, "Fe": {"N2": 0.2}}[host]
    elements = {e for gas in pressures for e in atoms(gas)}
    assert compare(library, meeting(300, host, (), elements, pressures))[0] == N
