"""The choice of species of a contact, and that it can be solved."""

from __future__ import annotations

import numpy as np
import pytest

from purity.database import Library, load
from purity.draws import Draws
from purity.driving_force.equilibrium import Outcome, equilibrium
from purity.driving_force.species import Selection, gibbs, select
from purity.driving_force.substances import Energy, atoms, ln_dissolution, substances

DRAWS = Draws(seed=5, blocks=1)


@pytest.fixture(scope="module")
def library() -> Library:
    return load()


def inputs(selection: Selection, charge: dict[str, float]) -> tuple[np.ndarray, np.ndarray]:
    formulas = [
        [round(atoms(formula).get(element, 0)) for element in selection.system.elements] for formula in charge
    ]
    return np.array(formulas), np.tile(np.array(list(charge.values()))[:, None], (1, DRAWS.n))


def test_metal_wall_products_and_gas_enter_with_reasons(library: Library) -> None:
    chosen = select(library, "Cu", "liquid", ["Al", "C"], ["Al2O3"], ["H2O", "N2"])
    why = {one.name: one.why for one in chosen.species}
    assert chosen.species[0].name == chosen.system.species[0] == "Cu"
    assert {"Al in Cu", "O in Cu", "C in Cu", "H in Cu"} <= set(why)
    assert why["Al2O3"] == "of the wall"
    assert why["H2O(g)"] == "of the atmosphere"  # liquid water is on record too
    assert {"CO", "Al2O", "Cu2O", "CuAlO2", "C", "Al4C3", "Cu(g)"} <= set(why)
    assert all(why.values())
    assert len(set(chosen.system.species)) == len(chosen.system.species)
    assert "Si in Cu" not in why
    assert not any("Mg" in name for name in why)


def test_the_system_counts_the_atoms_of_its_names(library: Library) -> None:
    chosen = select(library, "Nb", "bcc", ["O", "N"], ["Y2O3"], ["H2O"])
    system = chosen.system
    for one, row in zip(chosen.species, system.formula, strict=True):
        counted = {e: float(n) for e, n in zip(system.elements, row, strict=True) if n}
        assert counted == atoms(one.formula)
    assert system.phases[system.host] == "metal"
    metal = [one.name for one, p in zip(chosen.species, system.phase, strict=True) if p == system.host]
    assert metal[0] == "Nb"
    assert all(name.endswith(" in Nb") for name in metal[1:])
    gas = [
        one.state for one, p in zip(chosen.species, system.phase, strict=True) if system.phases[p] == "gas"
    ]
    assert set(gas) == {"gas"}


def test_a_polymorph_is_not_a_species_of_its_own(library: Library) -> None:
    chosen = select(library, "Si", "liquid", ["O"], ["SiO2"])
    assert sum(one.formula == "SiO2" and one.state == "solid" for one in chosen.species) == 1
    assert len(substances(library)["SiO2", "solid"]) > 2


def test_what_is_excluded_or_not_in_whole_atoms_stays_out(library: Library) -> None:
    chosen = select(library, "Fe", "liquid", ["O", "C"], exclude=["Fe3C", "CO2"], gas_phase=True)
    names = set(chosen.system.species)
    assert not names & {"Fe3C", "CO2", "Fe0.947O"}
    assert "FeO" in names
    assert any("Fe0.947O" in gap.quantity for gap in chosen.gaps)
    assert "gas" not in select(library, "Fe", "liquid", ["O"], gas_phase=False).system.phases


def test_what_has_no_record_is_a_gap(library: Library) -> None:
    chosen = select(library, "In", "liquid", ["N"], ["Unobtainium".replace("Unobtainium", "Al5N7")])
    quantities = {gap.quantity for gap in chosen.gaps}
    assert "gibbs:Al5N7/solid" in quantities
    assert any(quantity.endswith("In/liquid/N") for quantity in quantities)


def test_energies_are_those_of_the_records(library: Library) -> None:
    chosen = select(library, "Cu", "liquid", ["O"], ["Al2O3"])
    g = gibbs(chosen, library, 1473.0, DRAWS)
    assert g.shape == (len(chosen.species), DRAWS.n)
    row = {name: g[i] for i, name in enumerate(chosen.system.species)}
    product = ln_dissolution(library, "Cu", "liquid", "Al2O3", "solid", 1473.0, DRAWS)
    assert isinstance(product, Energy)
    assert row["Al2O3"] - 2 * row["Al in Cu"] - 3 * row["O in Cu"] == pytest.approx(product.value)


CONTACTS = [
    ("Cu", "liquid", 1473.0, ["Al2O3"], {"Cu": 1.0, "Al2O3": 0.1, "O2": 1e-6}),
    ("Cu", "liquid", 1473.0, ["C"], {"Cu": 1.0, "C": 0.5, "O2": 1e-6}),
    ("Nb", "bcc", 1673.0, ["Y2O3"], {"Nb": 1.0, "Y2O3": 0.1, "O2": 1e-4}),
    ("Si", "liquid", 1723.0, ["SiO2", "Si3N4"], {"Si": 1.0, "SiO2": 0.1, "Si3N4": 0.1}),
    ("In", "liquid", 473.0, ["SiO2"], {"In": 1.0, "SiO2": 0.1, "O2": 1e-8}),
]


@pytest.mark.parametrize(("host", "phase", "T", "solids", "charge"), CONTACTS)
def test_a_selection_can_be_solved_and_keeps_the_solubility_product(
    library: Library, host: str, phase: str, T: float, solids: list[str], charge: dict[str, float]
) -> None:
    chosen = select(library, host, phase, ["O"], solids)
    formulas, amounts = inputs(chosen, charge)
    answer = equilibrium(
        chosen.system,
        gibbs(chosen, library, T, DRAWS),
        amounts,
        inputs=formulas,
        gas_volume=np.full(DRAWS.n, 1e-6),
    )
    solved = answer.state == Outcome.SOLVED
    assert solved.mean() > 0.9
    where = {name: i for i, name in enumerate(chosen.system.species)}
    for formula in solids:
        there = solved & answer.present[chosen.system.phases.index(formula)]
        if not there.any() or formula == "C":
            continue
        product = ln_dissolution(library, host, phase, formula, "solid", T, DRAWS)
        assert isinstance(product, Energy)
        total = sum(
            n * answer.ln_activity[where[f"{e} in {host}" if e != host else host]]
            for e, n in atoms(formula).items()
        )
        assert np.asarray(total)[there] == pytest.approx(product.value[there], abs=0.05)
