"""A record moves the lines that list it, and no others; without it no choice looks better."""

from __future__ import annotations

from dataclasses import fields
from pathlib import Path

import pytest
from overlays import moved_by_one_sigma, rows_of, without
from works import WALLS, lines, run, toml

from purity.database import Library, load
from purity.errors import PurityError
from purity.result import Line, Result

#: One record at least of every table that has a spread and that the run hangs on.
MOVED = (
    "activity:Cu/liquid/Mg",
    "atmospheres:argon N5.0/O2",
    "desiccants:silica gel",
    "diffusion:*/liquid/*",
    "films:Cu/oxide/indoor air",
    "gas_transport:H2O/argon",
    "gibbs:Al2O3/solid/alpha",
    "gibbs:H2O/gas",
    "hosts:Cu/fcc",
    "hosts:Cu/liquid",
    "hot_zones:graphite",
    "packages:polyethylene/H2O",
    "priors:uncertified metal",
    "sieverts:Cu/liquid/O",
    "sticking:Cu/H2O/liquid",
    "surfaces:*/etched/C",
    "traces:magnesia/SiO2",
    "transfer:wall/induction",
    "wall_values:alumina 99.7/leach_depth",
    "wetting:Cu/C",
)
TAKEN_OUT = (
    "diffusion:Cu/liquid/O",
    "films:Cu/oxide/indoor air",
    "gas_transport:O2/argon",
    "gibbs:MgO/solid",
    "packages:polyethylene/O2",
    "sieverts:Cu/liquid/O",
    "surfaces:*/etched/O",
    "traces:magnesia/CaO",
    "transfer:free surface/induction",
    "wetting:Cu/MgO",
)
#: What says how sure a line is, not how much it holds.
SAYS = ("records", "quality", "extrapolated")
#: Tables whose rows act in storage alone: a lot that is only stored tells as much.
STORED = ("desiccants", "films", "packages")
MELTED = WALLS, ("magnesia", "bag")
KEPT: tuple[dict[str, str], tuple[str, ...]] = {}, ("bag",)


@pytest.fixture(scope="session")
def library() -> Library:
    return load()


@pytest.fixture(scope="session")
def melted(library: Library, tmp_path_factory: pytest.TempPathFactory) -> Result:
    return run(tmp_path_factory.mktemp("melted"), toml(MELTED[0]), library, MELTED[1])


@pytest.fixture(scope="session")
def kept(library: Library, tmp_path_factory: pytest.TempPathFactory) -> Result:
    return run(tmp_path_factory.mktemp("kept"), toml(KEPT[0]), library, KEPT[1])


@pytest.fixture
def base(request: pytest.FixtureRequest, quantity: str) -> Result:
    """Return the run that a quantity is tried on."""
    name = "kept" if quantity.startswith(STORED) else "melted"
    result: Result = request.getfixturevalue(name)
    return result


def tried(quantity: str, folder: Path, library: Library) -> Result:
    walls, way = KEPT if quantity.startswith(STORED) else MELTED
    return run(folder, toml(walls), library, way)


def numbers(line: Line) -> dict[str, object]:
    return {f.name: getattr(line, f.name) for f in fields(line) if f.name not in SAYS}


def used(result: Result) -> set[str]:
    return {quantity for line in lines(result).values() for quantity in line.records}


@pytest.mark.parametrize("quantity", MOVED)
def test_a_record_moves_the_lines_that_list_it_and_no_others(
    quantity: str, base: Result, library: Library, tmp_path: Path
) -> None:
    other = tried(quantity, tmp_path, moved_by_one_sigma(library, quantity, tmp_path / "own"))
    before, after = lines(base), lines(other)
    listing = {key for found in (before, after) for key, line in found.items() if quantity in line.records}
    assert listing
    moved = {
        key
        for key in {**before, **after}
        if key not in before or key not in after or numbers(before[key]) != numbers(after[key])
    }
    assert moved - listing == set()
    assert moved


def test_every_table_with_a_spread_is_tried(melted: Result) -> None:
    tables = {quantity.split(":")[0] for quantity in used(melted)}
    assert tables - {quantity.split(":")[0] for quantity in MOVED} <= {"solubility", "partition"}


@pytest.mark.parametrize("quantity", TAKEN_OUT)
def test_what_is_taken_out_is_said_and_lifts_nothing(
    quantity: str, base: Result, library: Library, tmp_path: Path
) -> None:
    assert rows_of(library, quantity)
    other = tried(quantity, tmp_path, without(library, quantity, tmp_path / "own"))
    assert f"{quantity}: withdrawn by your own table" in other.gaps
    for before, after in zip(base.steps, other.steps, strict=True):
        relying = {c.name for c in before.choices if any(quantity in line.records for line in c.lines)}
        was = {c.name: c.rank for c in before.choices}
        now = {c.name: c.rank for c in after.choices}
        for one in relying:
            for other_one in set(was) - relying:
                if was[one] is not None and was[other_one] is not None and was[one] > was[other_one]:
                    assert now[one] is None or now[other_one] is None or now[one] >= now[other_one]


@pytest.mark.parametrize(
    "quantity", ["priors:uncertified metal", "hosts:Cu/liquid", "transitions:Cu/melting/liquid"]
)
def test_what_nothing_can_do_without_is_named(quantity: str, library: Library, tmp_path: Path) -> None:
    bare = without(library, quantity, tmp_path / "own")
    with pytest.raises(PurityError, match=f"{quantity}|no phase of Cu"):
        tried(quantity, tmp_path, bare)
