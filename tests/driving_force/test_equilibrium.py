"""Laws that every equilibrium must obey, whatever its energies.

Energies over RT are invented, of the size of copper on alumina at 1473 K and iron on alumina at 1873 K.
"""

from __future__ import annotations

from dataclasses import replace

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from purity.constants import R
from purity.driving_force import solution
from purity.driving_force.equilibrium import Equilibrium, Outcome, System, equilibrium
from purity.driving_force.nonideal import with_activity
from purity.driving_force.sensitivity import sensitivity
from purity.errors import IllPosedError, OutOfRangeError

LAWS = settings(deadline=None, max_examples=25)
SEEDS = st.integers(0, 2**32 - 1)


def made(elements: str, host: int, *phases: tuple[str, dict[str, str]]) -> System:
    """Build a system from formulas written as 'Al2 O3'."""
    names = elements.split()
    species, rows, phase = [], [], []
    for p, (_, members) in enumerate(phases):
        for name, formula in members.items():
            atoms = dict.fromkeys(names, 0)
            for part in formula.split():
                symbol = part.rstrip("0123456789")
                atoms[symbol] += int(part[len(symbol) :] or 1)
            species.append(name)
            rows.append([atoms[e] for e in names])
            phase.append(p)
    return System(
        tuple(species), tuple(names), np.array(rows), np.array(phase), tuple(n for n, _ in phases), host
    )


COPPER = made(
    "Cu O Al Ar",
    0,
    ("metal", {"Cu": "Cu", "[O]": "O", "[Al]": "Al"}),
    ("alumina", {"Al2O3": "Al2 O3"}),
    ("cuprite", {"Cu2O": "Cu2 O"}),
    ("gas", {"Ar": "Ar", "O2": "O2", "Cu(g)": "Cu", "Al(g)": "Al", "Al2O(g)": "Al2 O"}),
)
COPPER_G = np.array([-6.62, -22.86, -10.58, -153.15, -31.98, -20.62, -27.72, 5.55, 5.11, -47.69])
COPPER_IN = np.array([[1, 0, 0, 0], [0, 3, 2, 0], [0, 0, 0, 1], [0, 2, 0, 0]])
COPPER_N = np.array([1.0, 0.3, 0.01, 1e-6])

IRON = made(
    "Fe O Al C Ar",
    0,
    ("metal", {"Fe": "Fe", "[O]": "O", "[Al]": "Al", "[C]": "C"}),
    ("alumina", {"Al2O3": "Al2 O3"}),
    ("iron oxide", {"FeO": "Fe O"}),
    ("graphite", {"C(gr)": "C"}),
    ("gas", {"Ar": "Ar", "CO": "C O", "CO2": "C O2", "O2": "O2", "Al(g)": "Al", "Al2O(g)": "Al2 O"}),
)
IRON_G = np.array(
    [-7.38, -28.27, -10.98, -3.13, -126.77, -31.6, -2.63, -21.12, -34.58, -56.61, -28.53, -1.14, -46.57]
)
IRON_IN = np.array([[1, 0, 0, 0, 0], [0, 3, 2, 0, 0], [0, 0, 0, 1, 0], [0, 0, 0, 0, 1], [0, 2, 0, 0, 0]])
IRON_N = np.array([1.0, 0.1, 0.01, 0.01, 1e-6])

BARE = made("Cu O Al", 0, ("metal", {"Cu": "Cu", "[O]": "O", "[Al]": "Al"}), ("alumina", {"Al2O3": "Al2 O3"}))
BARE_G = np.array([-6.62, -22.86, -10.58, -153.15])
BARE_IN = np.array([[1, 0, 0], [0, 3, 2]])


def scattered(seed: int, count: int, sigma: float = 1.0) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    g = IRON_G[:, None] + sigma * rng.standard_normal((len(IRON_G), count))
    n = IRON_N[:, None] * 10.0 ** rng.uniform(-1, 1, (len(IRON_N), count))
    n[4] = 10.0 ** rng.uniform(-15, -2, count)
    return g, n


def gibbs(system: System, g: np.ndarray, r: Equilibrium) -> np.ndarray:
    total = np.stack([r.amounts[system.phase == p].sum(axis=0) for p in system.phase])
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(r.amounts > 0, r.amounts * (g + np.log(r.amounts / total)), 0.0).sum(axis=0)


def x_of(system: System, r: Equilibrium) -> np.ndarray:
    metal = r.amounts[system.phase == system.host]
    return metal / metal.sum(axis=0)


@LAWS
@given(SEEDS)
def test_every_element_is_balanced_and_the_optimum_is_proved(seed: int) -> None:
    g, n = scattered(seed, 8, 2.0)
    r = equilibrium(IRON, g, n, inputs=IRON_IN)
    assert (r.state != Outcome.REFUSED).all()
    b = IRON_IN.T @ n
    assert np.abs(IRON.formula.T @ r.amounts / b - 1).max() < 1e-9
    ln_saturation = np.log(r.saturation)
    assert (r.amounts >= 0).all()
    assert np.abs(ln_saturation[r.present]).max() < 1e-11
    assert ln_saturation.max() < 1e-9
    assert np.abs(r.gap).max() < 1e-9
    assert r.rounding.max() < 1e-9


def test_an_element_of_1e_15_mol_is_balanced() -> None:
    n = np.array([[1.0], [0.3], [1e-15], [1e-15]])
    r = equilibrium(COPPER, COPPER_G[:, None], n, inputs=COPPER_IN)
    assert r.residual[0] < 1e-9
    argon = COPPER.formula[:, 3] @ r.amounts[:, 0]
    assert argon == pytest.approx(1e-15, rel=1e-9)


@pytest.mark.parametrize("exponent", [-2, -6, -10, -14, -20, -30, -40, -60])
def test_one_compound_dissolves_in_its_own_proportion(exponent: int) -> None:
    """Al2O3 -> 2 Al + 3 O and nothing else: x_Al / x_O = 2 / 3 down to 1e-60."""
    g = BARE_G.copy()
    g[3] = 2 * (g[2] + np.log(2 / 3) + exponent * np.log(10)) + 3 * (g[1] + exponent * np.log(10))
    r = equilibrium(BARE, g[:, None], np.array([[1.0], [0.3]]), inputs=BARE_IN)
    ln = r.ln_activity[:, 0]
    assert np.exp(ln[2] - ln[1]) == pytest.approx(2 / 3, rel=1e-9)
    assert 2 * ln[2] + 3 * ln[1] == pytest.approx(g[3] - 2 * g[2] - 3 * g[1], abs=1e-10)
    if exponent <= -10:
        assert ln[1] == pytest.approx(exponent * np.log(10), abs=1e-9)


def test_substances_keep_the_digits_that_element_totals_lose() -> None:
    """As element totals, oxygen of 1e-20 beside 0.9 mol in alumina is below one unit of rounding."""
    g = BARE_G.copy()
    g[3] = 2 * (g[2] + np.log(2 / 3) - 20 * np.log(10)) + 3 * (g[1] - 20 * np.log(10))
    r = equilibrium(BARE, g[:, None], np.array([[1.0], [0.3]]), inputs=BARE_IN)
    assert r.rounding[0] < 1e-9
    totals = equilibrium(BARE, g[:, None], np.array([[1.0], [3 * 0.3], [2 * 0.3]]))
    exact = r.ln_activity[1, 0]
    assert totals.state[0] == Outcome.REFUSED or abs(totals.ln_activity[1, 0] - exact) > 1.0


def test_a_product_of_stoichiometric_inputs_is_solved_in_its_own_compounds() -> None:
    """Al and O2 that make exactly Al2O3: the excess decides, and 2^-6, 3 x 2^-8 are exact in binary."""
    system = made(
        "Fe O Al", 0, ("metal", {"Fe": "Fe", "[O]": "O", "[Al]": "Al"}), ("alumina", {"Al2O3": "Al2 O3"})
    )
    inputs = np.array([[1, 0, 0], [0, 0, 1], [0, 2, 0]])
    n = np.array([[1.0], [4 * 2.0**-8], [3 * 2.0**-8]])
    for ln_x in (-12, -16, -22, -30):
        g = np.array([-7.4, -28.3, -11.0, 0.0])
        g[3] = 2 * (g[2] + np.log(2 / 3) + ln_x * np.log(10)) + 3 * (g[1] + ln_x * np.log(10))
        r = equilibrium(system, g[:, None], n, inputs=inputs)
        assert r.rounding[0] < 1e-9
        assert r.ln_activity[1, 0] == pytest.approx(ln_x * np.log(10), abs=1e-9)
        assert np.exp(r.ln_activity[2, 0] - r.ln_activity[1, 0]) == pytest.approx(2 / 3, rel=1e-9)


def test_held_oxygen_sets_aluminium_to_the_power_of_minus_three_quarters() -> None:
    """Al2O3 = 2 Al + 3/2 O2 at unit activity of alumina: d ln a_Al / d ln pO2 = -3/4."""
    system = made(
        "Cu O Al", 0, ("metal", {"Cu": "Cu", "[O]": "O", "[Al]": "Al"}), ("alumina", {"Al2O3": "Al2 O3"}),
        ("cuprite", {"Cu2O": "Cu2 O"}),
    )  # fmt: skip
    g = np.append(BARE_G, -31.98)[:, None]
    ln_p = np.linspace(np.log(1e-60), 0.0, 121)
    held = {"O": 0.5 * (ln_p - 27.72)}
    r = equilibrium(system, g, np.array([[1.0], [0.3]]), held=held, inputs=BARE_IN)
    refused = r.state == Outcome.REFUSED
    assert not refused[ln_p < np.log(1e-12)].any()
    al, alumina = r.ln_activity[2], r.present[1]
    good = ~refused
    assert (np.diff(al[good]) <= 1e-12).all()
    saturated = good & alumina
    assert saturated.sum() > 30
    steps = np.diff(al[saturated]) / np.diff(ln_p[saturated])
    assert steps == pytest.approx(-0.75, abs=1e-9)
    assert np.allclose(r.potentials[1][good], held["O"][good], atol=0)


def test_oxygen_of_an_open_furnace_alone_can_pass_saturation() -> None:
    """Oxygen held far above what copper bears leaves no metal: the oxide takes it all."""
    r = equilibrium(
        COPPER,
        COPPER_G[:, None],
        COPPER_N[:, None],
        held={"O": np.array([0.5 * (20.0 + 27.72)])},
        inputs=COPPER_IN,
    )
    assert r.state[0] == Outcome.REFUSED
    assert np.isnan(r.ln_activity).all()
    assert not r.present.any()


@pytest.mark.parametrize(
    ("system", "g", "inputs", "n"),
    [(COPPER, COPPER_G, COPPER_IN, COPPER_N), (IRON, IRON_G, IRON_IN, IRON_N)],
    ids=["copper", "iron"],
)
def test_more_oxygen_never_lowers_its_potential(
    system: System, g: np.ndarray, inputs: np.ndarray, n: np.ndarray
) -> None:
    """A concave dual makes the potential of an element rise with its amount, and that of its partner fall."""
    amounts = np.repeat(n[:, None], 120, axis=1)
    amounts[-1] = np.logspace(-14, np.log10(0.5), 120)
    r = equilibrium(system, g[:, None], amounts, inputs=inputs)
    assert (r.state != Outcome.REFUSED).all()
    assert np.diff(r.potentials[1]).min() > -1e-9
    assert np.diff(r.potentials[2]).max() < 1e-9


@LAWS
@given(SEEDS, st.sampled_from([1e7, 1e-9]))
def test_amounts_only_scale(seed: int, factor: float) -> None:
    g, n = scattered(seed, 4)
    one, many = (equilibrium(IRON, g, k * n, inputs=IRON_IN) for k in (1.0, factor))
    assert np.abs(one.ln_activity - many.ln_activity).max() < 1e-11
    assert gibbs(IRON, g, many) == pytest.approx(factor * gibbs(IRON, g, one), rel=1e-11)


@LAWS
@given(SEEDS)
def test_the_zero_of_every_element_is_free_and_order_is_nothing(seed: int) -> None:
    g, n = scattered(seed, 4)
    rng = np.random.default_rng(seed)
    one = equilibrium(IRON, g, n, inputs=IRON_IN)
    shifted = equilibrium(IRON, g + (IRON.formula @ rng.uniform(-20, 20, 5))[:, None], n, inputs=IRON_IN)
    present = one.amounts > 0
    assert (shifted.amounts > 0).tolist() == present.tolist()
    assert shifted.amounts[present] == pytest.approx(one.amounts[present], rel=2e-11)
    phases, species, fed = rng.permutation(5), rng.permutation(len(g)), rng.permutation(5)
    place = np.argsort(phases)
    mixed = System(
        tuple(IRON.species[i] for i in species), IRON.elements, IRON.formula[species],
        place[IRON.phase[species]], tuple(IRON.phases[p] for p in phases), int(place[0]),
    )  # fmt: skip
    other = equilibrium(mixed, g[species], n[fed], inputs=IRON_IN[fed])
    assert other.ln_activity == pytest.approx(one.ln_activity[species], abs=1e-10)


@LAWS
@given(SEEDS)
def test_the_minimum_is_convex_in_the_amounts(seed: int) -> None:
    g, n = scattered(seed, 8)
    g[:] = g[:, :1]
    low, high, middle = n[:, :4], n[:, 4:], 0.5 * (n[:, :4] + n[:, 4:])
    each = [
        gibbs(IRON, g[:, :4], equilibrium(IRON, g[:, :4], a, inputs=IRON_IN)) for a in (low, high, middle)
    ]
    assert (each[2] <= 0.5 * (each[0] + each[1]) + 1e-9 * np.abs(each[2])).all()


@LAWS
@given(SEEDS, st.integers(4, 12))
def test_a_species_less_never_lowers_the_minimum(seed: int, gone: int) -> None:
    g, n = scattered(seed, 4)
    if IRON.species[gone] == "Ar":
        n[3], keep_argon = 0.0, False
    else:
        keep_argon = True
    keep = np.arange(len(g)) != gone
    left, phase = np.unique(IRON.phase[keep], return_inverse=True)
    fewer = replace(
        IRON, species=tuple(np.array(IRON.species)[keep]), formula=IRON.formula[keep], phase=phase,
        phases=tuple(IRON.phases[p] for p in left),
    )  # fmt: skip
    every = gibbs(IRON, g, equilibrium(IRON, g, n, inputs=IRON_IN))
    some = gibbs(fewer, g[keep], equilibrium(fewer, g[keep], n, inputs=IRON_IN))
    slack = 1e-9 * np.abs(every)
    assert (some >= every - slack).all()
    assert keep_argon or some == pytest.approx(every, rel=1e-12)


def test_the_gas_vanishes_when_the_metal_takes_it_all() -> None:
    n = np.array([[1.0], [0.3], [0.0], [1e-8]])
    r = equilibrium(COPPER, COPPER_G[:, None], n, inputs=COPPER_IN)
    assert r.state[0] == Outcome.SOLVED
    assert not r.present[3, 0]
    assert r.saturation[3, 0] < 1.0
    assert r.ln_activity[5, 0] == -np.inf


def test_a_metal_that_evaporates_is_reported_as_consumed() -> None:
    g = COPPER_G.copy()
    g[5:] += np.log(1e-9)
    r = equilibrium(COPPER, g[:, None], np.array([[1e-3], [0.3], [10.0], [0.0]]), inputs=COPPER_IN)
    assert r.state[0] == Outcome.HOST_CONSUMED
    assert not r.present[0, 0]


def test_a_solute_above_two_percent_is_outside_the_dilute_range() -> None:
    n = np.array([[1.0], [0.3], [0.01], [0.015]])
    g = COPPER_G.copy()
    g[4] += 5.0
    r = equilibrium(COPPER, g[:, None], n, inputs=COPPER_IN)
    x = x_of(COPPER, r)[:, 0]
    assert 0.02 < x[1] < 0.1
    assert r.state[0] == Outcome.OUTSIDE_DILUTE


def test_elements_that_occur_only_together_count_as_one() -> None:
    system = made(
        "Cu Mg O", 0, ("metal", {"Cu": "Cu"}), ("magnesia", {"MgO": "Mg O"}), ("gas", {"MgO(g)": "Mg O"})
    )
    g = np.array([[-6.6], [-60.0], [-20.0]])
    r = equilibrium(system, g, np.array([[1.0], [0.2]]), inputs=np.array([[1, 0, 0], [0, 1, 1]]))
    assert r.state[0] == Outcome.SOLVED
    assert r.amounts[1, 0] == pytest.approx(0.2, rel=1e-12)
    assert r.ln_activity[2, 0] == pytest.approx(-40.0, abs=1e-12)


def test_an_absent_element_takes_its_species_with_it() -> None:
    n = np.repeat(IRON_N[:, None], 3, axis=1)
    n[2] = [0.0, 0.01, 1e-40]
    r = equilibrium(IRON, IRON_G[:, None], n, inputs=IRON_IN)
    assert (r.state != Outcome.REFUSED).all()
    assert r.ln_activity[3, 0] == -np.inf
    assert r.amounts[8, 0] == 0.0
    assert r.potentials[3, 0] == -np.inf
    assert np.isfinite(r.ln_activity[:, 1:]).all()
    assert IRON.formula[:, 3] @ r.amounts[:, 2] == pytest.approx(1e-40, rel=1e-9)
    without = equilibrium(IRON, IRON_G[:, None], n[:, :1], inputs=IRON_IN)
    kept = np.isfinite(without.ln_activity[:, 0])
    assert r.ln_activity[kept, 0] == pytest.approx(without.ln_activity[kept, 0], abs=1e-10)


@pytest.mark.parametrize("difference", [0.0, 2.6e-6, -2.6e-6, 1.0])
def test_of_two_polymorphs_the_lower_one_is_present(difference: float) -> None:
    system = made(
        "Cu O Al", 0, ("metal", {"Cu": "Cu", "[O]": "O", "[Al]": "Al"}), ("alpha", {"Al2O3": "Al2 O3"}),
        ("gamma", {"Al4O6": "Al4 O6"}),
    )  # fmt: skip
    g = np.append(BARE_G, 2 * BARE_G[3] + 2 * difference)
    r = equilibrium(system, g[:, None], np.array([[1.0], [0.3]]), inputs=BARE_IN)
    assert r.state[0] == Outcome.SOLVED
    assert r.present[1:, 0].tolist() == ([True, False] if difference >= 0 else [False, True])
    assert r.amounts[2:, 0] @ [1, 2, 4] == pytest.approx(0.6, rel=1e-12)
    higher = 2 if difference >= 0 else 1
    assert np.log(r.saturation[higher, 0]) == pytest.approx(-abs(difference) * higher, abs=1e-9)


def test_eighteen_compounds_of_two_elements() -> None:
    formulas = {f"c{k}": f"Cu{k % 6 + 1} O{k // 6 + 1}" for k in range(18)}
    system = made(
        "Cu O",
        0,
        ("metal", {"Cu": "Cu", "[O]": "O"}),
        *((k, {k: f}) for k, f in formulas.items()),
        ("gas", {"O2": "O2"}),
    )
    rng = np.random.default_rng(5)
    atoms = system.formula.sum(axis=1)[:, None]
    g = -10.0 * atoms + rng.normal(0, 3, (len(atoms), 200))
    r = equilibrium(system, g, np.array([[1.0], [0.7]]))
    assert (r.state != Outcome.REFUSED).all()
    assert (r.present.sum(axis=0) <= 2).all()


def test_a_neutral_reaction_between_pure_phases_has_one_set_of_potentials() -> None:
    """A + BC = AC + B with no driving force: any split is a minimum, the potentials are not in doubt."""
    system = made(
        "Cu A B C", 0, ("metal", {"Cu": "Cu", "[C]": "C"}), ("A", {"A": "A"}), ("B", {"B": "B"}),
        ("AC", {"AC": "A C"}), ("BC", {"BC": "B C"}),
    )  # fmt: skip
    g = np.array([[-6.0], [-8.0], [-5.0], [-7.0], [-35.0], [-37.0]])
    inputs = np.array([[1, 0, 0, 0], [0, 1, 0, 0], [0, 0, 1, 1]])
    r = equilibrium(system, g, np.array([[1.0], [0.3], [0.4]]), inputs=inputs)
    assert r.state[0] == Outcome.SOLVED
    assert abs(r.gap[0]) < 1e-9
    assert r.ln_activity[2:, 0] == pytest.approx(0.0, abs=1e-6)
    assert r.ln_activity[1, 0] == pytest.approx(-35.0 + 5.0 + 8.0, abs=1e-6)


YTTRIA = made(
    "Cu Al Y N O",
    0,
    ("metal", {"Cu": "Cu", "[Al]": "Al", "[N]": "N", "[O]": "O", "[Y]": "Y"}),
    ("Al2O3", {"Al2O3": "Al2 O3"}),
    ("AlN", {"AlN": "Al N"}),
    ("Y2O3", {"Y2O3": "Y2 O3"}),
    ("Y3Al5O12", {"Y3Al5O12": "Y3 Al5 O12"}),
    ("YAlO3", {"YAlO3": "Y Al O3"}),
    ("YN", {"YN": "Y N"}),
    ("gas", {"N2": "N2", "O2": "O2", "Al(g)": "Al", "Al2O(g)": "Al2 O", "Y(g)": "Y", "YO(g)": "Y O"}),
)
YTTRIA_METAL = [-6.62, -12.94, 1.01, -15.71, -14.34]
YTTRIA_SOLID = [-153.13, -32.31, -179.94, -664.01, -169.36, -33.39]
YTTRIA_GAS = [-25.96, -27.72, 5.1, -47.69, 10.49, -34.73]
YTTRIA_G = np.array([*YTTRIA_METAL, *YTTRIA_SOLID, *YTTRIA_GAS])


@pytest.mark.parametrize("trace", [1e-25, 1e-12, 1e-6])
@pytest.mark.parametrize("walls", [("AlN", "Y2O3"), ("Al2O3", "Y2O3"), ("Al2O3", "YN"), ("AlN", "YN")])
def test_compounds_that_depend_on_each_other_are_exchanged(walls: tuple[str, str], trace: float) -> None:
    """Y2O3, YAlO3, Y3Al5O12 and Al2O3 lie on one line: of the many that form together, two can stay."""
    names = list(YTTRIA.species)
    fed = np.array([*YTTRIA.formula[:5], *(YTTRIA.formula[names.index(w)] for w in walls)])
    n = np.array([1.0, trace, trace, trace, trace, 10.0, 10.0])[:, None]
    rng = np.random.default_rng(1)
    g = YTTRIA_G[:, None] + 0.5 * rng.standard_normal((len(YTTRIA_G), 100))
    r = equilibrium(YTTRIA, g, n, inputs=fed)
    assert (r.state != Outcome.REFUSED).all()
    assert np.abs(r.gap).max() < 1e-9
    assert r.residual.max() < 1e-9
    assert r.rounding[r.state == Outcome.SOLVED].max() < 1e-6
    assert np.log(r.saturation).max() < 1e-9


def test_a_surplus_that_no_present_phase_holds_makes_one() -> None:
    """Oxygen of lime dissolves in titanium and calcium does not: it must leave as a phase of its own."""
    system = made(
        "Ti Ca O",
        0,
        ("metal", {"Ti": "Ti", "[O]": "O"}),
        ("lime", {"CaO": "Ca O"}),
        ("calcium", {"Ca(l)": "Ca"}),
    )
    g = np.array([[-7.0], [-45.0], [-62.0], [-8.0]])
    for surplus in (0.0, 1e-25, 1e-12):
        r = equilibrium(
            system,
            g,
            np.array([[1.0], [10.0], [surplus]]),
            inputs=np.array([[1, 0, 0], [0, 1, 1], [0, 1, 0]]),
        )
        assert r.state[0] == Outcome.SOLVED
        assert r.present[:, 0].all()
        ln_x = -62.0 + 45.0 + 8.0
        assert r.ln_activity[1, 0] == pytest.approx(ln_x, abs=1e-10)
        assert r.amounts[3, 0] == pytest.approx(np.exp(ln_x) / (1 - np.exp(ln_x)) + surplus, rel=1e-9)


def test_a_metal_used_up_by_pure_phases_is_reported_although_a_potential_stays_open() -> None:
    """2 Al + 3 CuO = Al2O3 + 3 Cu to the last atom: no metal and no gas are left to fix the oxygen."""
    system = made(
        "Al Cu O", 0, ("metal", {"Al": "Al", "[Cu]": "Cu"}), ("alumina", {"Al2O3": "Al2 O3"}),
        ("copper", {"Cu(s)": "Cu"}), ("gas", {"O2": "O2", "Al(g)": "Al"}),
    )  # fmt: skip
    g = np.array([[-6.0], [-7.0], [-150.0], [-9.0], [-28.0], [5.0]])
    r = equilibrium(system, g, np.array([[2.0], [3.0]]), inputs=np.array([[1, 0, 0], [0, 1, 1]]))
    assert r.state[0] == Outcome.HOST_CONSUMED
    assert r.amounts[2:4, 0] == pytest.approx([1.0, 3.0], rel=1e-9)


def test_inputs_that_no_species_can_hold_are_refused_by_name() -> None:
    with pytest.raises(IllPosedError, match="brings Ar"):
        equilibrium(
            BARE_AR, BARE_G[:, None], np.array([[1.0], [0.3], [0.1]]), inputs=np.eye(3, 4, 1, dtype=int)
        )
    lone = made("Cu Mg O", 0, ("metal", {"Cu": "Cu"}), ("magnesia", {"MgO": "Mg O"}))
    with pytest.raises(IllPosedError, match="composition of O2"):
        equilibrium(
            lone, np.array([[-6.6], [-60.0]]), np.array([[1.0], [0.1], [0.01]]),
            inputs=np.array([[1, 0, 0], [0, 1, 1], [0, 0, 2]]),
        )  # fmt: skip


BARE_AR = replace(BARE, elements=("Cu", "O", "Al", "Ar"), formula=np.pad(BARE.formula, ((0, 0), (0, 1))))


def test_a_balance_on_the_edge_is_refused_and_names_what_is_forced_to_zero() -> None:
    gases = made("Cu C O", 0, ("metal", {"Cu": "Cu"}), ("gas", {"CO": "C O", "CO2": "C O2"}))
    g = np.array([[-6.6], [-34.6], [-56.6]])
    with pytest.raises(IllPosedError, match="CO2 can only be exactly zero"):
        equilibrium(gases, g, np.array([[1.0], [0.1], [0.1]]))
    with pytest.raises(IllPosedError, match="no combination"):
        equilibrium(gases, g, np.array([[1.0], [0.1], [0.05]]))
    inside = equilibrium(gases, g, np.array([[1.0], [0.1], [0.15]]))
    assert inside.amounts[1:, 0] == pytest.approx([0.05, 0.05], rel=1e-12)
    # The edge met in one draw of many.
    with pytest.raises(IllPosedError, match="CO2"):
        equilibrium(gases, g, np.array([[1.0] * 3, [0.1] * 3, [0.15, 0.15, 0.1]]))


def test_bad_numbers_are_refused() -> None:
    with pytest.raises(IllPosedError, match="Gibbs energy of Al2O3"):
        equilibrium(
            BARE, np.array([[-6.0], [-20.0], [-10.0], [np.nan]]), np.array([[1.0], [0.3]]), inputs=BARE_IN
        )
    with pytest.raises(IllPosedError, match="amount of input 2"):
        equilibrium(BARE, BARE_G[:, None], np.array([[1.0], [-0.3]]), inputs=BARE_IN)
    with pytest.raises(IllPosedError, match="every amount is zero"):
        equilibrium(BARE, BARE_G[:, None], np.array([[0.0], [0.0]]), inputs=BARE_IN)
    with pytest.raises(IllPosedError, match="no phase is named"):
        equilibrium(
            BARE, BARE_G[:, None], np.array([[1.0], [0.3]]), inputs=BARE_IN, gas_volume=np.array([1.0])
        )
    with pytest.raises(IllPosedError, match="N is held"):
        equilibrium(
            BARE, BARE_G[:, None], np.array([[1.0], [0.3]]), inputs=BARE_IN, held={"N": np.array([1.0])}
        )


@pytest.mark.parametrize("ln_v", [-14.0, -5.0, 0.0, 7.0])
def test_a_gas_of_fixed_volume_obeys_the_gas_law(ln_v: float) -> None:
    volume = np.array([np.exp(ln_v)])
    r = equilibrium(COPPER, COPPER_G[:, None], COPPER_N[:, None], inputs=COPPER_IN, gas_volume=volume)
    assert r.state[0] != Outcome.REFUSED
    gas = COPPER.phase == 3
    assert r.amounts[gas, 0] == pytest.approx(volume[0] * np.exp(r.ln_activity[gas, 0]), rel=1e-11)
    assert r.saturation[3, 0] == pytest.approx(r.amounts[gas, 0].sum() / volume[0], rel=1e-11)
    assert np.abs(COPPER.formula.T @ r.amounts[:, 0] / (COPPER_IN.T @ COPPER_N) - 1).max() < 1e-9


def test_a_vessel_may_hold_gas_alone() -> None:
    """H2 + 1/2 O2 = H2O: with ln K = 15 nearly all hydrogen burns, and the pressure falls with the moles."""
    system = made("Cu H O", 0, ("metal", {"Cu": "Cu"}), ("gas", {"H2": "H2", "O2": "O2", "H2O": "H2 O"}))
    g = np.array([[-6.6], [-20.0], [-28.0], [-49.0]])
    n = np.array([[0.0], [2.0], [1.2]])
    r = equilibrium(system, g, n, gas_volume=np.array([3.0]))
    p = np.exp(r.ln_activity[1:, 0])
    assert p[2] / (p[0] * np.sqrt(p[1])) == pytest.approx(np.exp(15.0), rel=1e-12)
    assert 3.0 * (p[0] + p[2]) == pytest.approx(1.0, rel=1e-12)
    assert 3.0 * (2 * p[1] + p[2]) == pytest.approx(1.2, rel=1e-12)
    assert r.state[0] == Outcome.HOST_CONSUMED


def test_a_gas_that_has_nothing_in_it_leaves_the_volume_unused() -> None:
    dry = np.array([[1.0], [0.3], [0.0], [0.0]])
    no_gas = replace(
        COPPER, species=(*COPPER.species[:5], "Ar"), formula=COPPER.formula[:6], phase=COPPER.phase[:6]
    )
    open_room = equilibrium(no_gas, COPPER_G[:6, None], dry, inputs=COPPER_IN, gas_volume=np.array([1.0]))
    alone = equilibrium(no_gas, COPPER_G[:6, None], dry, inputs=COPPER_IN)
    assert open_room.state[0] == Outcome.SOLVED
    assert open_room.amounts == pytest.approx(alone.amounts, rel=1e-12)
    assert not open_room.present[3, 0]


def test_a_fixed_volume_equals_the_fixed_pressure_it_reaches() -> None:
    """The same contact at the total pressure found in the vessel must give the same answer."""
    vessel = equilibrium(
        COPPER, COPPER_G[:, None], COPPER_N[:, None], inputs=COPPER_IN, gas_volume=np.array([0.2])
    )
    g = COPPER_G.copy()
    g[COPPER.phase == 3] += np.log(vessel.saturation[3, 0])
    open_gas = equilibrium(COPPER, g[:, None], COPPER_N[:, None], inputs=COPPER_IN)
    assert open_gas.amounts == pytest.approx(vessel.amounts, rel=1e-9)


def test_a_batch_is_its_draws() -> None:
    g, n = scattered(3, 40, 2.0)
    batch = equilibrium(IRON, g, n, inputs=IRON_IN)
    for k in range(0, 40, 3):
        single = equilibrium(IRON, g[:, [k]], n[:, [k]], inputs=IRON_IN)
        assert single.ln_activity[:, 0] == pytest.approx(batch.ln_activity[:, k], abs=1e-11)


def test_a_nominal_start_changes_nothing() -> None:
    g, n = scattered(4, 60)
    cold = equilibrium(IRON, g, n, inputs=IRON_IN)
    nominal = equilibrium(IRON, IRON_G[:, None], IRON_N[:, None], inputs=IRON_IN)
    warm = equilibrium(IRON, g, n, inputs=IRON_IN, warm=nominal)
    assert warm.ln_activity == pytest.approx(cold.ln_activity, abs=1e-9)
    assert (warm.start == 0).mean() > 0.5


@pytest.mark.parametrize("seed", range(4))
def test_eighty_digits_confirm_the_answer(seed: int) -> None:
    """Newton's method with mpmath in the plain element form, on the assemblage found."""
    g, n = scattered(seed, 1)
    r = equilibrium(IRON, g, n, inputs=IRON_IN)
    with mpmath.workdps(80):
        exact = _refined(IRON, g[:, 0], n[:, 0], IRON_IN, r)
    present = r.amounts[:, 0] > 0
    worst = max(abs(float(e) - u) for e, u, k in zip(exact, r.ln_activity[:, 0], present, strict=True) if k)
    assert worst < 1e-10


def _refined(
    system: System, g: np.ndarray, n: np.ndarray, inputs: np.ndarray, r: Equilibrium
) -> list[mpmath.mpf]:
    mp = mpmath.mpf
    b = [sum(mp(float(a)) * int(k) for a, k in zip(n, col, strict=True)) for col in inputs.T]
    phases = [p for p in range(len(system.phases)) if r.present[p, 0]]
    count = len(b)
    start = [mp(float(v)) for v in r.potentials[:, 0]]
    start += [mpmath.log(float(r.amounts[system.phase == p, 0].sum())) for p in phases]

    def activities(v: list[mpmath.mpf]) -> list[mpmath.mpf]:
        return [
            sum(int(k) * v[e] for e, k in enumerate(row)) - mp(float(gi))
            for row, gi in zip(system.formula, g, strict=True)
        ]

    def residual(*v: mpmath.mpf) -> list[mpmath.mpf]:
        u = activities(list(v))
        moles = [
            mpmath.exp(u[i] + v[count + phases.index(p)]) if p in phases else mp(0)
            for i, p in enumerate(system.phase)
        ]
        sums = [sum(mpmath.exp(u[i]) for i in np.flatnonzero(system.phase == p)) for p in phases]
        flows = [
            sum(int(system.formula[i, e]) * moles[i] for i in range(len(moles))) / b[e] for e in range(count)
        ]
        return [f - 1 for f in flows] + [s - 1 for s in sums]

    root = mpmath.findroot(residual, start, tol=mpmath.mpf(10) ** -100, maxsteps=30, verify=False)
    return activities(list(root))


@pytest.mark.parametrize("volume", [None, 0.3], ids=["pressure", "volume"])
def test_derivatives_are_those_of_the_answer(volume: float | None) -> None:
    room = None if volume is None else np.array([volume])
    g, n = scattered(9, 6)
    r = equilibrium(IRON, g, n, inputs=IRON_IN, gas_volume=room)
    slope = sensitivity(IRON, r, g, n, inputs=IRON_IN, gas_volume=room)
    h = 1e-5
    for j in range(len(g)):
        step = h * (np.arange(len(g)) == j)[:, None]
        up, down = (equilibrium(IRON, g + s * step, n, inputs=IRON_IN, gas_volume=room) for s in (1, -1))
        same = (up.present == down.present).all(axis=0)
        central = (up.ln_activity - down.ln_activity) / (2 * h)
        assert slope.by_g[:, j, same] == pytest.approx(central[:, same], abs=1e-6)
    for j in range(len(n)):
        scale = np.exp(h * (np.arange(len(n)) == j))[:, None]
        up, down = (equilibrium(IRON, g, n * scale**s, inputs=IRON_IN, gas_volume=room) for s in (1, -1))
        same = (up.present == down.present).all(axis=0)
        central = (up.ln_activity - down.ln_activity) / (2 * h)
        assert slope.by_input[:, j, same] == pytest.approx(central[:, same], abs=1e-6)


def test_sensitivity_with_held_elements() -> None:
    held = {"O": np.array([0.5 * (np.log(1e-12) - 27.72)])}
    g = COPPER_G[:, None]
    r = equilibrium(COPPER, g, COPPER_N[:, None], held=held, inputs=COPPER_IN)
    slope = sensitivity(COPPER, r, g, COPPER_N[:, None], held=held, inputs=COPPER_IN)
    assert slope.by_g[2, 2, 0] == pytest.approx(-1.0, abs=1e-12)
    assert slope.by_g[2, 3, 0] == pytest.approx(0.5, abs=1e-6)


def test_a_constant_coefficient_is_found_in_one_round() -> None:
    shift = np.array([[0.0], [1.3], [-2.0], [0.4]])
    g, n = scattered(12, 10)
    direct = equilibrium(IRON, g + np.vstack([shift, np.zeros((9, 1))]), n, inputs=IRON_IN)
    found = with_activity(IRON, g, n, lambda x: shift + 0.0 * x, inputs=IRON_IN)
    assert found.converged.all()
    assert found.rounds.max() == 1
    assert found.equilibrium.ln_activity == pytest.approx(direct.ln_activity, abs=1e-9)
    assert found.stable.all()


def test_a_regular_solution_meets_its_own_law_of_mass_action() -> None:
    """Al2O3 = 2 Al + 3 O where Al interacts with O: the constant holds with the coefficients found."""
    epsilon = np.array([[0.0, 0.0, 0.0], [0.0, -5.0, -20.0], [0.0, -20.0, 5.0]])
    g = BARE_G[:, None] + np.array([[0.0], [0.0], [0.0], [40.0]])
    found = with_activity(
        BARE, g, np.array([[1.0], [0.3]]), lambda x: np.einsum("ij,jn->in", epsilon, x), inputs=BARE_IN
    )
    assert found.converged.all()
    assert found.change[0] <= 1e-10
    assert found.error[0] < 1e-8
    assert found.equilibrium.present[1, 0]
    x = x_of(BARE, found.equilibrium)[:, 0]
    ln_a = np.log(x) + epsilon @ x
    assert x[1] > 1e-3
    assert 2 * ln_a[2] + 3 * ln_a[1] == pytest.approx(g[3, 0] - 2 * g[2, 0] - 3 * g[1, 0], abs=1e-8)
    assert x[2] / x[1] == pytest.approx(2 / 3, rel=1e-9)


@pytest.mark.parametrize("w", [-2.0, 1.5, 3.0, 12.0, 50.0])
def test_a_regular_metal_on_its_own_pure_impurity_holds_the_terminal_solubility(w: float) -> None:
    """Pure B beside a regular solution: ln x + w (1 - x)^2 = 0 in the host-rich metal."""
    pair = made("A B", 0, ("metal", {"A": "A", "[B]": "B"}), ("B", {"B": "B"}))
    g = np.array([[-5.0], [-4.0], [-4.0 - 0.5]])
    model = solution.regular(w * R * 1000.0)

    def coefficients(x: np.ndarray) -> np.ndarray:
        return np.stack(solution.ln_gamma(model, x[0], x[1], 1000.0))

    found = with_activity(pair, g, np.array([[1.0], [20.0]]), coefficients)
    assert found.converged[0]
    x = x_of(pair, found.equilibrium)[1, 0]
    with mpmath.workdps(30):
        exact = mpmath.findroot(lambda u: u + w * (1 - mpmath.exp(u)) ** 2 + 0.5, float(np.log(x)))
    assert np.log(x) == pytest.approx(float(exact), abs=1e-9)
    assert found.stable[0]


def test_a_metal_that_runs_away_ends_where_the_wall_is_gone() -> None:
    """Al and O attract each other so much that alumina has no limit of solubility: all of it dissolves."""
    epsilon = np.array([[0.0, 0.0, 0.0], [0.0, 0.0, -60.0], [0.0, -60.0, 0.0]])
    g = BARE_G[:, None] + np.array([[0.0], [0.0], [0.0], [40.0]])
    found = with_activity(
        BARE, g, np.array([[1.0], [0.3]]), lambda x: np.einsum("ij,jn->in", epsilon, x), inputs=BARE_IN
    )
    assert found.converged[0]
    assert not found.equilibrium.present[1, 0]
    assert x_of(BARE, found.equilibrium)[1, 0] == pytest.approx(0.9 / 2.5, rel=1e-9)


def test_a_metal_inside_its_spinodal_is_called_unstable() -> None:
    """Half and half with omega = 3 RT is between the spinodal limits 0.211 and 0.789."""
    pair = made("A B", 0, ("metal", {"A": "A", "B": "B"}))
    g = np.array([[-5.0], [-5.0]])

    def coefficients(omega: float):  # type: ignore[no-untyped-def]
        return lambda x: omega * (1.0 - x) ** 2

    inside = with_activity(pair, g, np.array([[0.5], [0.5]]), coefficients(3.0))
    outside = with_activity(pair, g, np.array([[0.9], [0.1]]), coefficients(3.0))
    mild = with_activity(pair, g, np.array([[0.5], [0.5]]), coefficients(1.9))
    assert inside.converged[0]
    assert not inside.stable[0]
    assert outside.stable[0]
    assert mild.stable[0]


def test_what_the_coefficients_refuse_passes_through() -> None:
    def narrow(x: np.ndarray) -> np.ndarray:
        raise OutOfRangeError("too high")

    with pytest.raises(OutOfRangeError, match="too high"):
        with_activity(BARE, BARE_G[:, None], np.array([[1.0], [0.3]]), narrow, inputs=BARE_IN)
