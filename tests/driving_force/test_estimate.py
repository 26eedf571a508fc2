"""The interface model against published heats of mixing, and what it says of its own doubt."""

from __future__ import annotations

import numpy as np
import pytest

from purity.database import Found, Gap, Library, load
from purity.driving_force.estimate import activity, heat_of_mixing, heat_of_solution, ln_gamma


@pytest.fixture(scope="module")
def library() -> Library:
    return load()


# A. Takeuchi & A. Inoue, Mater. Trans. 46 (2005) 2817: heats of mixing of equiatomic liquids, kJ per mole of
# atoms, rounded to 1 (as distributed in an open data file). Pairs with Si or Ge are left out: the table adds
# half of their transformation to the metallic state, which a solute referred to its liquid does not need.
TAKEUCHI = [
    ("Cu", "Zr", -23),
    ("Ni", "Zr", -49),
    ("Al", "Ni", -22),
    ("Al", "Fe", -11),
    ("Cu", "Fe", 13),
    ("Cu", "Ni", 4),
    ("Ag", "Cu", 2),
    ("Al", "Ti", -30),
    ("Fe", "Ti", -17),
    ("Ni", "Ti", -35),
    ("Cu", "Ti", -9),
    ("Nb", "Zr", 4),
    ("Fe", "Cr", -1),
    ("Ni", "Nb", -30),
    ("Pb", "Sn", 2),
    ("Al", "Zn", 1),
    ("Ag", "Fe", 28),
    ("Mo", "Cu", 19),
    ("W", "Cu", 22),
    ("Cu", "Co", 6),
    ("In", "Sn", 0),
]


@pytest.mark.parametrize(("a", "b", "published"), TAKEUCHI)
def test_heat_of_mixing_of_the_published_table(library: Library, a: str, b: str, published: float) -> None:
    heat = heat_of_mixing(library, a, b, 0.5)
    assert isinstance(heat, float)
    assert heat / 1000 == pytest.approx(published, abs=1.0)


@pytest.mark.parametrize(("a", "b"), [("Cu", "Zr"), ("Al", "Ni"), ("Ag", "Fe")])
def test_heat_of_mixing_is_the_same_from_both_sides_and_starts_with_the_heat_of_solution(
    library: Library, a: str, b: str
) -> None:
    for x in (0.1, 0.5, 0.8):
        assert heat_of_mixing(library, a, b, x) == pytest.approx(
            heat_of_mixing(library, b, a, 1 - x), rel=1e-6
        )
    trace = heat_of_mixing(library, a, b, 1e-7)
    assert isinstance(trace, float)
    assert trace / 1e-7 == pytest.approx(heat_of_solution(library, b, a), rel=1e-4)


def test_no_estimate_of_gas_formers_and_metalloids(library: Library) -> None:
    for element in ("H", "C", "N", "O", "P", "S"):
        gap = activity(library, "Cu", "liquid", element)
        assert isinstance(gap, Gap)
        assert element in gap.reason


def test_an_estimate_says_that_it_is_one_and_widens_with_its_size(library: Library) -> None:
    weak, strong = (activity(library, "Cu", "liquid", element) for element in ("Ni", "Y"))
    assert isinstance(weak, Found)
    assert isinstance(strong, Found)
    for found in (weak, strong):
        assert (found.how, found.record.origin, found.record.quality) == ("estimate", "estimate", "D")
    T = np.array([1400.0])
    middle, high = (ln_gamma(strong, T, z)[0] for z in (0.0, 1.0))
    assert high - middle == pytest.approx(0.8 + 0.25 * abs(middle))
    solid = activity(library, "Cu", "fcc", "Y")
    assert isinstance(solid, Found)
    assert solid.record.words["reference"] == "s"
    assert solid.record.spread > strong.record.spread


def test_the_stated_spread_covers_measured_coefficients(library: Library) -> None:
    """Looked-up activities in liquids: two thirds inside one sigma, nine tenths inside two."""
    ratios = []
    for record in library.rows("activity", phase="liquid"):
        host, element = record.words["host"], record.words["solute"]
        found = activity(library, host, "liquid", element)
        if record.origin != "looked-up" or record.words["reference"] != "l" or isinstance(found, Gap):
            continue
        T = 0.5 * (record.T_min + record.T_max)
        measured = record.fields["A_K"] / T + record.fields["B"]
        low, high = ln_gamma(found, np.array([T]), 0.0)[0], ln_gamma(found, np.array([T]), 1.0)[0]
        ratios.append(abs(measured - low) / (high - low))
    inside = np.array(ratios)
    assert len(inside) > 80
    assert (inside < 1).mean() > 0.60
    assert (inside < 2).mean() > 0.85
