"""The house keeps its shape: which room may import which, and what the top level holds."""

from __future__ import annotations

import ast
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]
PACKAGE = ROOT / "purity"

NUMBERS = {"errors", "constants"}
KINETICS_BASE = {"kinetics.exposure", "kinetics.arrhenius", "kinetics.schedule", "kinetics.transfer"}
BATH = {f"kinetics.{n}" for n in ("stage", "flux_newton", "arrow", "passive")}
DRIVING_FORCE = {
    f"driving_force.{n}"
    for n in (
        *("solution", "pure", "substances", "species", "estimate"),
        *("equilibrium", "sensitivity", "nonideal"),
    )
}
EQUILIBRIUM = {f"driving_force.{n}" for n in ("components", "interior", "pivots", "newton", "problem")}
CONTACTS = {"contacts", "contacts.*"}
BELOW_CONTACTS = NUMBERS | {"scenario", "database", "draws", "composition"}
BELOW_ASSESS = (
    BELOW_CONTACTS
    | DRIVING_FORCE
    | CONTACTS
    | {"kinetics.*", "quantities", "result", "uncertainty", "risk", "cautions"}
)

SCENARIO_FILE = NUMBERS | {"scenario", "database", "quantities", "scenario_lines"}

#: room -> rooms of ours it may import. A name with ".*" stands for every room inside.
ALLOWED: dict[str, set[str]] = {
    "errors": set(),
    "kinetics": set(),
    "driving_force": set(),
    "constants": set(),
    "units": NUMBERS,
    "quantities": NUMBERS | {"scenario", "units"},
    "composition": NUMBERS,
    "scenario": {"errors"},
    "tables": NUMBERS,
    "bounds": NUMBERS | {"tables"},
    "table_files": NUMBERS | {"tables", "bounds"},
    "database": NUMBERS | {"quantities", "scenario", "tables", "table_files"},
    "catalogue": NUMBERS | {"database"},
    "draws": {"scenario"},
    "kinetics.exposure": NUMBERS,
    "kinetics.arrhenius": NUMBERS | {"kinetics.exposure"},
    "kinetics.schedule": NUMBERS | {"kinetics.exposure", "kinetics.arrhenius"},
    "kinetics.transfer": NUMBERS,
    "kinetics.groups": NUMBERS | {"kinetics.exposure"},
    "kinetics.following": NUMBERS | {"kinetics.exposure", "kinetics.schedule"},
    "kinetics.particles": NUMBERS,
    "kinetics.casting": NUMBERS,
    "kinetics.laplace": NUMBERS,
    "kinetics.modes": NUMBERS | {"kinetics.laplace"},
    "kinetics.march": NUMBERS | {"kinetics.modes"},
    "kinetics.pieces": NUMBERS | KINETICS_BASE | {"kinetics.laplace", "kinetics.modes", "kinetics.stage"},
    "kinetics.surface": NUMBERS
    | KINETICS_BASE
    | {"kinetics.stage", "kinetics.flux_newton", "kinetics.pieces"},
    "kinetics.passage": NUMBERS
    | KINETICS_BASE
    | {"kinetics.laplace", "kinetics.modes", "kinetics.stage", "kinetics.pieces", "kinetics.surface"},
    "kinetics.stage": NUMBERS | KINETICS_BASE,
    "kinetics.flux_newton": NUMBERS | KINETICS_BASE | {"kinetics.stage"},
    "kinetics.arrow": NUMBERS | KINETICS_BASE | {"kinetics.stage", "kinetics.flux_newton"},
    "kinetics.passive": NUMBERS | KINETICS_BASE | {"kinetics.stage"},
    "kinetics.sdirk": NUMBERS | KINETICS_BASE | BATH,
    "kinetics.control": NUMBERS | KINETICS_BASE | {"kinetics.modes", "kinetics.pieces", "kinetics.passage"},
    "kinetics.bath": NUMBERS | KINETICS_BASE | BATH | {"kinetics.sdirk", "scenario"},
    "kinetics.refine": NUMBERS | KINETICS_BASE | BATH | {"kinetics.bath"},
    "kinetics.elasticity": NUMBERS | KINETICS_BASE | BATH | {"kinetics.bath"},
    "kinetics.body": NUMBERS
    | KINETICS_BASE
    | {"scenario", "kinetics.pieces", "kinetics.passage", "kinetics.control"},
    "kinetics.films": NUMBERS | KINETICS_BASE | {"scenario"},
    "kinetics.advance": NUMBERS | {"scenario", "kinetics.*"},
    "driving_force.solution": NUMBERS,
    "driving_force.components": NUMBERS,
    "driving_force.interior": NUMBERS | {"driving_force.components"},
    "driving_force.pivots": NUMBERS | {"driving_force.components"},
    "driving_force.newton": NUMBERS | {f"driving_force.{n}" for n in ("components", "interior", "pivots")},
    "driving_force.problem": NUMBERS | {"driving_force.components"},
    "driving_force.equilibrium": NUMBERS | EQUILIBRIUM,
    "driving_force.sensitivity": NUMBERS | EQUILIBRIUM | {"driving_force.equilibrium"},
    "driving_force.nonideal": NUMBERS
    | EQUILIBRIUM
    | {"driving_force.equilibrium", "driving_force.sensitivity"},
    "driving_force.pure": NUMBERS | {"database", "draws"},
    "driving_force.substances": NUMBERS
    | {"database", "draws", "driving_force.solution", "driving_force.pure", "driving_force.estimate"},
    "driving_force.estimate": NUMBERS
    | {"database", "draws", "driving_force.solution", "driving_force.equilibrium"},
    "driving_force.species": NUMBERS | {"database", "draws"} | (DRIVING_FORCE - {"driving_force.species"}),
    "contacts.*": BELOW_CONTACTS
    | DRIVING_FORCE
    | CONTACTS
    | {"kinetics.exposure", "kinetics.transfer", "kinetics.films", "kinetics.arrhenius"}
    | {"kinetics.schedule", "kinetics.particles", "kinetics.casting"},
    "contacts": BELOW_CONTACTS | DRIVING_FORCE | CONTACTS | {"kinetics.exposure"},
    "result": {"errors"},
    "uncertainty": {"result"},
    "risk": {"result", "uncertainty"},
    "cautions": {"scenario", "database"},
    "followers": BELOW_ASSESS,
    "moving": BELOW_ASSESS | {"followers"},
    "finishing": BELOW_ASSESS | {"followers"},
    "starting": BELOW_ASSESS,
    "provenance": BELOW_ASSESS | {"followers"},
    "passing": BELOW_ASSESS | {"followers", "moving", "finishing", "provenance"},
    "lines": BELOW_ASSESS | {"followers", "passing"},
    # the package itself, for its version
    "assess": BELOW_ASSESS | {"", "catalogue", "followers", "passing", "lines", "starting"},
    "routes": BELOW_ASSESS | {"assess"},
    "window": BELOW_ASSESS | {"assess"},
    "levers": BELOW_ASSESS | {"assess"},
    "survey": BELOW_ASSESS | {"assess"},
    "affinity_walls": BELOW_ASSESS,
    "affinity": BELOW_ASSESS | {"affinity_walls"},
    "new": BELOW_ASSESS | {"assess"},
    "scenario_lines": {"errors"},
    "scenario_schema": NUMBERS | {"scenario", "quantities"},
    "scenario_check": {"scenario_lines", "scenario_schema"},
    "scenario_names": SCENARIO_FILE | {"composition", "scenario_schema"},
    "scenario_forms": SCENARIO_FILE | {"scenario_schema", "scenario_names"},
    "scenario_keys": SCENARIO_FILE | {"scenario_schema", "scenario_names"},
    "scenario_gases": SCENARIO_FILE
    | {"scenario_schema", "scenario_names", "scenario_forms", "scenario_keys"},
    "scenario_contacts": SCENARIO_FILE | {"scenario_schema", "scenario_names", "scenario_keys"},
    "scenario_choices": SCENARIO_FILE
    | {f"scenario_{n}" for n in ("schema", "check", "names", "forms", "keys", "gases", "contacts")},
    "scenario_file": SCENARIO_FILE
    | {f"scenario_{n}" for n in ("schema", "check", "names", "forms", "choices")},
    "report.*": {"result", "report.*"},
    "report": {"result", "report.*"},
}
FREE = {"", "__main__", "cli"}


def room(path: Path) -> str:
    parts = path.relative_to(PACKAGE).with_suffix("").parts
    return ".".join(parts[:-1] if parts[-1] == "__init__" else parts)


def imported_rooms(path: Path) -> set[str]:
    """Rooms of ours that a file imports anywhere in it, inside functions too."""
    found: set[str] = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names if alias.name.split(".")[0] == "purity"}
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path}: relative import at line {node.lineno}"
            if node.module and node.module.split(".")[0] == "purity":
                for alias in node.names:
                    inner = PACKAGE.joinpath(*node.module.split(".")[1:], alias.name)
                    is_room = inner.with_suffix(".py").exists() or (inner / "__init__.py").exists()
                    found.add(f"{node.module}.{alias.name}" if is_room else node.module)
    return {name.removeprefix("purity").lstrip(".") for name in found}


def matches(name: str, patterns: set[str]) -> bool:
    return name in patterns or any(p.endswith(".*") and name.startswith(p[:-1]) for p in patterns)


ROOMS = sorted(PACKAGE.rglob("*.py"))


@pytest.mark.parametrize("path", ROOMS, ids=[room(p) or "__init__" for p in ROOMS])
def test_imports_run_downward(path: Path) -> None:
    name = room(path)
    if name in FREE or (path.name == "__init__.py" and not path.read_text(encoding="utf-8").strip()):
        return
    key = name if name in ALLOWED else f"{name.rsplit('.', 1)[0]}.*"
    assert key in ALLOWED, f"room {name!r} has no place in the table of allowed imports"
    wrong = {other for other in imported_rooms(path) if other != name and not matches(other, ALLOWED[key])}
    assert not wrong, f"{name} may not import {sorted(wrong)}"


def test_kinetics_and_results_know_no_chemistry() -> None:
    """A branch on a substance in the rate centre would be data in code."""
    for path in (PACKAGE / "kinetics").glob("*.py"):
        names = {
            node.value
            for node in ast.walk(ast.parse(path.read_text(encoding="utf-8")))
            if isinstance(node, ast.Compare)
            for node in [*ast.walk(node)]
            if isinstance(node, ast.Constant) and isinstance(node.value, str)
        }
        assert not names & {"Cu", "Al", "Nb", "Ti", "O", "H", "C", "Al2O3", "graphite", "alumina"}, path.name


def test_top_level_is_the_design_card() -> None:
    allowed = {"README.md", "DEVELOPERS.md", "pyproject.toml", "LICENSE", "purity", "tests", "scenarios"}
    seen = {path.name for path in ROOT.iterdir() if not path.name.startswith(".")}
    assert allowed <= seen
    assert seen - allowed <= {"build", "dist"}
