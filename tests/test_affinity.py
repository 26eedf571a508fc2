"""What `affinity` says, against the records it rests on and published saturations."""

from __future__ import annotations

from dataclasses import asdict
from math import isfinite, log

import numpy as np
import pytest

from purity.affinity import CONTENTS, Affinity, affinity
from purity.constants import R
from purity.database import Gap, Library, load
from purity.draws import Draws
from purity.driving_force.substances import Energy, ln_dissolution
from purity.errors import OutOfRangeError

DRAWS = Draws(seed=2, blocks=1)
WALLS = ("alumina 99.7", "isostatic graphite", "magnesia", "fused silica")


@pytest.fixture(scope="module")
def library() -> Library:
    return load()


@pytest.fixture(scope="module")
def aluminium(library: Library) -> Affinity:
    return affinity(library, "Cu", "Al", 1453.15, against=WALLS, draws=DRAWS)


def numbers(thing: object) -> list[float]:
    if isinstance(thing, dict):
        return [n for value in thing.values() for n in numbers(value)]
    if isinstance(thing, list | tuple):
        return [n for value in thing for n in numbers(value)]
    return [float(thing)] if isinstance(thing, int | float) else []


def test_every_number_is_plain_and_finite(aluminium: Affinity) -> None:
    found = numbers(asdict(aluminium))
    assert len(found) > 60
    assert all(isfinite(n) for n in found)
    assert not any(isinstance(n, np.generic) for n in found)


def test_the_activity_is_that_of_its_record_with_its_rivals(library: Library, aluminium: Affinity) -> None:
    assert aluminium.activity is not None
    assert aluminium.ln_gamma is not None
    record = library.find("activity", host="Cu", phase="liquid", solute="Al")
    assert not isinstance(record, Gap)
    written = record.record.fields["A_K"] / 1453.15 + record.record.fields["B"]
    assert aluminium.activity.ln_gamma == pytest.approx(written)
    assert aluminium.activity.source == record.record.source
    assert aluminium.ln_gamma.low < written < aluminium.ln_gamma.high
    assert {r.source for r in aluminium.rivals} == {r.source for r in record.rivals}


def test_the_first_trace_always_goes_in_and_each_decade_counts_the_same(aluminium: Affinity) -> None:
    """RT ln 10 a decade at high dilution, without limit: no metal refuses the first trace."""
    medians = [row.partial.median for row in aluminium.contents]
    assert [row.ppm for row in aluminium.contents] == list(CONTENTS)
    assert np.diff(medians) == pytest.approx(np.full(len(CONTENTS) - 1, R * 1453.15 * log(10)), rel=2e-3)
    for row in aluminium.contents:
        assert row.driving_force.median == pytest.approx(-row.partial.median)
        assert row.mixing < 0
    assert aluminium.contents[0].mixing > aluminium.contents[-1].mixing


def test_a_metal_that_does_not_dissolve_has_a_ceiling_where_its_force_ends(library: Library) -> None:
    made = affinity(library, "Cu", "C", 1473.15, against=["isostatic graphite"], draws=DRAWS)
    ceiling = made.contacts[0].ceiling
    assert ceiling is not None
    assert made.first == "C"
    assert made.saturations[0].ppm.median == pytest.approx(ceiling.median, rel=0.02)
    # Oden & Gokcen, Metall. Trans. B 23 (1992) 453: 0.88 mass ppm at 1573 K, 6.8 at 1773 K; 0.26 by their
    # line at 1473 K.
    assert 0.1 < ceiling.median < 0.6
    forces = {row.ppm: row.driving_force.median for row in made.contents}
    assert forces[0.01] > 0 > forces[10.0]


def test_saturations_stand_in_order_and_measured_ones_are_shown(library: Library) -> None:
    made = affinity(library, "Cu", "O", 1339.0, phase="liquid", against=["alumina"], draws=DRAWS)
    assert made.first == "Cu2O"
    medians = [s.ppm.median for s in made.saturations]
    assert medians == sorted(medians)
    # Assessed Cu-O diagram (Neumann, Zhong, Chang 1984): 0.43 mass % at the eutectic.
    assert made.saturations[0].measured == pytest.approx(4335, rel=0.01)
    assert made.saturations[0].ppm.median == pytest.approx(4335, rel=0.15)


def test_the_wall_gives_what_its_dissociation_gives(library: Library, aluminium: Affinity) -> None:
    """Al and O from pure alumina stay in the ratio 2 to 3 and meet the solubility product."""
    row = next(c for c in aluminium.contacts if "alumina 99.7" in c.contact)
    assert row.kind == "wall"
    assert row.ceiling is not None
    product = ln_dissolution(library, "Cu", "liquid", "Al2O3", "solid", 1453.15, DRAWS)
    assert isinstance(product, Energy)
    x_al = 2 * np.exp((product.value - 2 * log(2) - 3 * log(3)) / 5)
    ppm = 1e6 * float(np.median(x_al)) * 26.9815 / 63.546
    assert row.ceiling.median == pytest.approx(ppm, rel=0.03)
    assert row.driving_force is not None
    assert row.driving_force.median == pytest.approx(R * 1453.15 * log(row.ceiling.median), abs=60)


def test_traces_count_only_where_the_wall_holds_none(aluminium: Affinity) -> None:
    kinds = {c.contact: c.kind for c in aluminium.contacts}
    assert any(kind == "trace of the wall" for kind in kinds.values())
    assert all(": " in name for name, kind in kinds.items() if kind == "trace of the wall")
    assert not any("alumina" in name and kind != "wall" for name, kind in kinds.items())


def test_an_oxidising_gas_closes_alumina_off(library: Library) -> None:
    made = affinity(library, "Cu", "Al", 1473.15, against=["alumina"], atmosphere="argon N5.0", draws=DRAWS)
    alone = affinity(library, "Cu", "Al", 1473.15, against=["alumina"], draws=DRAWS)
    with_gas, without = made.contacts[0].ceiling, alone.contacts[0].ceiling
    assert with_gas is not None
    assert without is not None
    assert with_gas.median < 1e-2 * without.median
    assert made.atmosphere


def test_a_gas_is_a_contact_of_its_own_element(library: Library) -> None:
    made = affinity(library, "Cu", "O", 1473.15, against=(), atmosphere="argon N5.0", draws=DRAWS)
    assert [c.kind for c in made.contacts] == ["gas"]
    assert made.contacts[0].ceiling is not None
    assert made.contacts[0].ceiling.median > 1


def test_what_the_metal_attacks_has_no_ceiling_and_says_so(library: Library) -> None:
    made = affinity(library, "Al", "Si", 1023.15, against=["fused silica"], draws=DRAWS)
    assert made.contacts[0].ceiling is None
    assert made.contacts[0].gap is not None
    assert "no ceiling" in made.contacts[0].gap


def test_what_is_not_known_is_said(library: Library) -> None:
    made = affinity(library, "In", "N", 473.15, phase="liquid", against=["no such wall"], draws=DRAWS)
    assert made.activity is None
    assert made.ln_gamma is None
    assert made.contents == ()
    assert made.gaps
    assert made.contacts[0].gap is not None
    with pytest.raises(OutOfRangeError, match="Xx"):
        affinity(library, "Cu", "Xx", 1473.15, phase="liquid")
    with pytest.raises(OutOfRangeError, match="nearest"):
        affinity(library, "Cu", "Al", 1473.15, atmosphere="argn N5.0", against=())


def test_a_measured_saturation_is_named_before_the_estimate_it_replaces(library: Library) -> None:
    row = next(
        r
        for r in library.rows("solubility")
        if r.words["with"] == r.words["solute"]
        and not isinstance(
            found := library.find("activity", **{k: r.words[k] for k in ("host", "phase", "solute")}), Gap
        )
        and found.record.origin == "estimate"
        and r.fields["limit_ppm_mass"] < 1000
    )
    host, phase, element = (row.words[k] for k in ("host", "phase", "solute"))
    made = affinity(library, host, element, row.fields["T_K"], phase=phase, against=(), draws=DRAWS)
    assert made.activity is not None
    assert made.ln_gamma is not None
    assert made.activity.source == row.source
    assert made.rivals[0].how in ("estimate", "measured")
    assert made.ln_gamma.median == pytest.approx(made.activity.ln_gamma, abs=0.1)
    first = next(s for s in made.saturations if s.formula == element)
    assert first.measured == pytest.approx(row.fields["limit_ppm_mass"], rel=0.02)


def test_an_estimate_is_marked(library: Library) -> None:
    made = affinity(library, "In", "Cr", 773.15, phase="liquid", against=(), draws=DRAWS)
    assert made.activity is not None
    assert made.activity.quality == "D"
