"""Gibbs energies of substances, solutes and saturations: laws, ranges, spreads."""

from __future__ import annotations

from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from purity.constants import R
from purity.database import Found, Gap, Library, load, outside
from purity.draws import Draws
from purity.driving_force.pure import piece
from purity.driving_force.substances import (
    Energy,
    atoms,
    element_energy,
    formation,
    gibbs_energy,
    host_energy,
    ln_dissolution,
    ln_gamma,
    measured_ceiling,
    molar_mass,
    solute,
    solute_record,
    stable,
    substances,
    vapour,
)

NOMINAL = Draws.nominal()
DRAWS = Draws(seed=3, blocks=4)
ELEMENTS = st.sampled_from(["H", "C", "O", "Al", "Fe", "Nb", "Si", "Y"])
COUNTS = st.dictionaries(ELEMENTS, st.integers(1, 40), min_size=1, max_size=4)


@cache
def shared() -> Library:
    return load()


@pytest.fixture(scope="module")
def library() -> Library:
    return shared()


def energy(made: Energy | Gap) -> Energy:
    assert isinstance(made, Energy), made
    return made


@pytest.mark.parametrize(
    ("formula", "counts"),
    [
        ("Fe0.947O", {"Fe": 0.947, "O": 1.0}),
        ("Ca(OH)2", {"Ca": 1.0, "O": 2.0, "H": 2.0}),
        ("Al6Si2O13", {"Al": 6.0, "Si": 2.0, "O": 13.0}),
        ("CO", {"C": 1.0, "O": 1.0}),
        ("Co", {"Co": 1.0}),
        ("(Mg(OH)2)3H", {"Mg": 3.0, "O": 6.0, "H": 7.0}),
    ],
)
def test_atoms(formula: str, counts: dict[str, float]) -> None:
    assert atoms(formula) == counts


@pytest.mark.parametrize("text", ["", "al2O3", "Al2O3 ", "Al(OH", "OH)2", "SiO₂", "2MgO", "(2)Mg"])
def test_what_is_no_formula_is_refused(text: str) -> None:
    with pytest.raises(ValueError, match="is not a chemical formula"):
        atoms(text)


@given(COUNTS)
@settings(deadline=None)
def test_atoms_reads_what_is_written(counts: dict[str, int]) -> None:
    text = "".join(f"{e}{n}" if n > 1 else e for e, n in counts.items())
    assert atoms(text) == counts
    assert atoms(f"({text})2") == {e: 2 * n for e, n in counts.items()}


def test_every_row_is_a_substance_with_a_heat_capacity(library: Library) -> None:
    """Cp > 0 and S growing with T in every range, and every formula can be read."""
    for (formula, _), rows in substances(library).items():
        assert atoms(formula)
        for row in rows:
            T = np.linspace(row.T_min, row.T_max, 60)
            a, b, c, d = (row.fields[name] for name in list(row.fields)[2:6])
            Cp = a + b * T + c / T**2 + d * T**2
            assert Cp.min() > 0.0, row.quantity
            assert np.all(np.diff(piece(row, T), 2) < 1e-3), row.quantity


def test_pieces_of_one_curve_join(library: Library) -> None:
    for (formula, state), rows in substances(library).items():
        for left in rows:
            for right in rows:
                same = (
                    left.source == right.source
                    and left.words["label"].split(" ")[0] == (right.words["label"].split(" ")[0])
                )
                if left.T_max == right.T_min and same and left.words["label"][0].isdigit():
                    T = left.T_max
                    gap = abs(float(piece(left, T) - piece(right, T)))
                    # 60 J: both fits, and transitions that the table rounds to its grid
                    assert (
                        gap < 60 + left.fields["fit_error_J_per_mol"] + right.fields["fit_error_J_per_mol"]
                    ), (
                        formula,
                        state,
                        T,
                        gap,
                    )


def test_shapes(library: Library) -> None:
    n = DRAWS.n
    assert energy(gibbs_energy(library, "Al2O3", "solid", 1500.0, DRAWS)).value.shape == (n,)
    assert energy(gibbs_energy(library, "Al2O3", "solid", np.full(n, 1500.0), DRAWS)).value.shape == (n,)
    column = np.array([[900.0], [1500.0]])
    assert energy(gibbs_energy(library, "Al2O3", "solid", column, DRAWS)).value.shape == (2, n)
    grid = np.full((2, n), 1500.0)
    for made in (
        gibbs_energy(library, "Al2O3", "solid", grid, DRAWS),
        solute(library, "Cu", "liquid", "Al", grid, DRAWS),
        ln_dissolution(library, "Cu", "liquid", "Al2O3", "solid", grid, DRAWS),
        vapour(library, "Cu", grid, DRAWS),
    ):
        assert energy(made).value.shape == (2, n)
        assert energy(made).outside.shape == (2, n)
    assert energy(gibbs_energy(library, "Al2O3", "solid", 1500.0, NOMINAL)).value.shape == (1,)


def test_draw_columns_are_those_of_single_temperatures(library: Library) -> None:
    T = np.linspace(600, 2200, DRAWS.n)
    whole = energy(solute(library, "Cu", "liquid", "O", T, DRAWS)).value
    for j in (0, 300, DRAWS.n - 1):
        assert whole[j] == pytest.approx(
            energy(solute(library, "Cu", "liquid", "O", float(T[j]), DRAWS)).value[j]
        )


def test_the_stable_polymorph_is_taken(library: Library) -> None:
    T = np.array([[1000.0], [1300.0], [1700.0]])
    lowest = energy(gibbs_energy(library, "Fe", "solid", T, NOMINAL))
    labels = {found.record.words["label"].split(" ")[0] for found in lowest.found}
    assert labels == {"alpha-delta", "gamma"}
    for row in substances(library)["Fe", "solid"]:
        inside = ~outside(row, T)
        assert np.all(lowest.value[inside] <= piece(row, T[inside]) + 1e-9)


def test_pieces_share_their_spread_and_others_do_not(library: Library) -> None:
    low, high = (energy(gibbs_energy(library, "Cu", "liquid", T, DRAWS)).value for T in (600.0, 1400.0))
    assert np.corrcoef(low, high)[0, 1] == pytest.approx(1.0)
    solid = energy(gibbs_energy(library, "Cu", "solid", 1400.0, DRAWS)).value
    assert abs(np.corrcoef(solid, high)[0, 1]) < 0.15
    spread = substances(library)["Cu", "liquid"][0].spread
    assert high.std() == pytest.approx(spread, rel=0.03)


def test_a_record_in_both_sides_of_a_reaction_cancels(library: Library) -> None:
    """Cu dissolved in Cu: the host's record drops out of its own saturation."""
    made = energy(ln_dissolution(library, "Cu", "liquid", "Cu", "liquid", 1473.0, DRAWS))
    assert np.all(made.value == 0.0)


def test_outside_every_row_the_nearest_goes_on_wider_and_marked(library: Library) -> None:
    top = max(row.T_max for row in substances(library)["NiO", "solid"])
    inside, beyond = (
        energy(gibbs_energy(library, "NiO", "solid", T, DRAWS)) for T in (top - 1.0, top + 300.0)
    )
    assert not inside.outside.any()
    assert beyond.outside.all()
    assert beyond.value.std() > 2 * inside.value.std()
    assert np.isfinite(beyond.value).all()


@given(st.floats(150.0, 4500.0))
@settings(deadline=None, max_examples=40)
def test_energies_are_finite_and_fall_with_temperature(T: float) -> None:
    library = shared()
    for formula, state in (("Cu", "liquid"), ("Al2O3", "solid"), ("CO", "gas"), ("Y2O3", "solid")):
        pair = energy(gibbs_energy(library, formula, state, np.array([[T], [T + 5.0]]), NOMINAL)).value
        assert np.isfinite(pair).all()
        assert pair[1, 0] < pair[0, 0] + 60.0


def test_unknown_substances_are_gaps_that_name_what_there_is(library: Library) -> None:
    gap = gibbs_energy(library, "Cu2O", "gas", 1000.0, NOMINAL)
    assert isinstance(gap, Gap)
    assert "Cu2O/solid" in gap.nearest
    assert isinstance(ln_dissolution(library, "Cu", "liquid", "Xx2O", "solid", 1000.0, NOMINAL), Gap)
    assert isinstance(solute(library, "Xx", "liquid", "O", 1000.0, NOMINAL), Gap)


def test_a_solute_is_its_reference_and_its_activity_coefficient(library: Library) -> None:
    for element, state in (("Ag", "liquid"), ("Fe", "liquid"), ("C", "solid")):
        record = solute_record(library, "Cu", "liquid", element)
        assert isinstance(record, Found)
        pure = energy(gibbs_energy(library, element, state, 1473.0, DRAWS)).value
        whole = energy(solute(library, "Cu", "liquid", element, 1473.0, DRAWS)).value
        assert whole - pure == pytest.approx(R * 1473.0 * ln_gamma(record, 1473.0, DRAWS), rel=1e-9, abs=1e-6)


def test_a_gas_at_one_atmosphere_dissolves_to_its_sieverts_content(library: Library) -> None:
    """Every record of the table comes back from the energies, whatever the gas."""
    for record in library.rows("sieverts"):
        host, phase, element = (record.words[name] for name in ("host", "phase", "solute"))
        if (host, "liquid") not in substances(library) or isinstance(
            library.find("activity", host=host, phase=phase, solute=element), Found
        ):
            continue
        T = 0.5 * (record.T_min + record.T_max)
        made = energy(ln_dissolution(library, host, phase, f"{element}2", "gas", T, NOMINAL))
        mass, host_mass = molar_mass(library, element), molar_mass(library, host)
        assert isinstance(mass, float)
        assert isinstance(host_mass, float)
        ln_ppm = made.value[0] / 2 + np.log(1e6 * mass / host_mass) + 0.5 * np.log(1.01325)
        written = np.log(10) * (record.fields["log10_A_K"] / T + record.fields["log10_B"])
        assert ln_ppm == pytest.approx(written, abs=1e-9)


def test_atoms_of_the_host_in_a_compound_count_with_its_activity(library: Library) -> None:
    whole = energy(ln_dissolution(library, "Cu", "liquid", "Cu2O", "solid", 1300.0, DRAWS))
    half = energy(ln_dissolution(library, "Cu", "liquid", "Cu2O", "solid", 1300.0, DRAWS, 0.5))
    assert half.value - whole.value == pytest.approx(2 * np.log(2.0))


@given(st.floats(1370.0, 1900.0))
@settings(deadline=None, max_examples=20)
def test_a_displacement_is_the_difference_of_two_dissolutions(T: float) -> None:
    """3 SiO2 + 4 Al = 2 Al2O3 + 3 Si through copper or through iron: the metal drops out."""
    library = shared()
    pure = 0.0
    for formula, state, nu in (("Al2O3", "solid", 2), ("Si", "liquid", 3), ("SiO2", "solid", -3)):
        pure += nu * float(energy(gibbs_energy(library, formula, state, T, NOMINAL)).value[0])
    pure -= 4 * float(energy(gibbs_energy(library, "Al", "liquid", T, NOMINAL)).value[0])
    for host in ("Cu", "Fe"):
        ln = 3 * energy(ln_dissolution(library, host, "liquid", "SiO2", "solid", T, NOMINAL)).value[0]
        ln -= 2 * energy(ln_dissolution(library, host, "liquid", "Al2O3", "solid", T, NOMINAL)).value[0]
        ln += 4 * energy(ln_dissolution(library, host, "liquid", "Al", "liquid", T, NOMINAL)).value[0]
        ln -= 3 * energy(ln_dissolution(library, host, "liquid", "Si", "liquid", T, NOMINAL)).value[0]
        assert ln == pytest.approx(-pure / (R * T), rel=1e-8)


def test_elements_stand_condensed_or_as_molecules(library: Library) -> None:
    assert energy(element_energy(library, "O", 1000.0, NOMINAL)).value == pytest.approx(
        energy(gibbs_energy(library, "O2", "gas", 1000.0, NOMINAL)).value / 2
    )
    assert np.all(energy(formation(library, "Cu", "solid", 1000.0, NOMINAL)).value == 0.0)
    assert energy(stable(library, "Al", 1200.0, NOMINAL)).found[0].record.words["state"] == "liquid"
    assert energy(stable(library, "Al", 800.0, NOMINAL)).found[0].record.words["state"] == "solid"
    assert (
        energy(host_energy(library, "Cu", "fcc", 1000.0, NOMINAL)).found[0].record.words["state"] == "solid"
    )


def test_a_measured_saturation_replaces_an_estimate_and_carries_its_own_spread(library: Library) -> None:
    """Tungsten in tin is estimated; a measurement of the table is met at its temperature."""
    rows = [r for r in library.rows("solubility") if r.words["with"] == r.words["solute"]]
    met = 0
    for row in rows:
        host, phase, element = (row.words[name] for name in ("host", "phase", "solute"))
        T = row.fields["T_K"]
        measured = measured_ceiling(library, host, phase, element, element, T, NOMINAL)
        if isinstance(measured, Gap) or not measured.wins.all() or measured.median.max() > np.log(0.02):
            continue
        met += 1
        made = energy(ln_dissolution(library, host, phase, element, "solid", T, NOMINAL))
        assert made.value == pytest.approx(measured.median, abs=1e-9)
        assert made.found[0].record.table == "solubility"
        drawn = energy(ln_dissolution(library, host, phase, element, "solid", T, DRAWS))
        assert drawn.value.std() == pytest.approx(row.spread, rel=0.1)
    assert met >= 3


def test_what_agrees_is_left_alone(library: Library) -> None:
    measured = measured_ceiling(library, "Si", "liquid", "C", "SiC", 1723.0, DRAWS)
    assert not isinstance(measured, Gap)
    assert not measured.conflict.any()
    made = energy(ln_dissolution(library, "Si", "liquid", "SiC", "solid", 1723.0, DRAWS))
    assert all(found.record.table != "solubility" for found in made.found)
    assert isinstance(measured_ceiling(library, "Cu", "liquid", "Al", "Al2O3", 1473.0, DRAWS), Gap)


def test_where_nothing_can_be_computed_the_measurement_stands_without_conflict(library: Library) -> None:
    measured = measured_ceiling(library, "Cu", "fcc", "C", "C", 1273.0, DRAWS)
    assert not isinstance(measured, Gap)
    assert not measured.conflict.any()
    assert measured.wins.all()
    made = energy(ln_dissolution(library, "Cu", "fcc", "C", "solid", 1273.0, DRAWS))
    assert made.found[0].record.table == "solubility"


def test_a_user_row_takes_over_with_the_same_stream(library: Library) -> None:
    rows = library.tables["gibbs"]
    own = tuple(
        replace(r, fields={**r.fields, "H298_J_per_mol": r.fields["H298_J_per_mol"] - 1000.0}, yours=True)
        if r.words["formula"] == "MgO" and r.words["state"] == "solid"
        else r
        for r in rows
    )
    changed = replace(library, tables={**library.tables, "gibbs": own})
    before, after = (energy(gibbs_energy(lib, "MgO", "solid", 1500.0, DRAWS)) for lib in (library, changed))
    assert after.value == pytest.approx(before.value - 1000.0)
    assert after.found[0].how == "yours"
