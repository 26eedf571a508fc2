"""A reduced remelt of copper in an invented works: three walls under argon, then two ways to store."""

from __future__ import annotations

from pathlib import Path

from purity.assess import assess
from purity.database import Library
from purity.draws import Draws
from purity.result import Line, Result
from purity.scenario import Scenario
from purity.scenario_file import read

#: One small block: enough for bits, too few for bands.
FEW = Draws(seed=1, blocks=1, block=32)

LOT = """
title = "Copper remelt, reduced"
[lot]
host = "Cu"
mass = "25 kg"
[lot.certificate]
Ag = 1.2
Fe = 0.30
Mg = "<0.02"
Si = "<0.05"
Al = "<0.05"
S  = 0.8
O  = { value = 2.0, method = "inert gas fusion", detection = 0.5 }
H  = 0.1
C  = 1.0
[lot.limits]
Ag = 5.0
Fe = 1.0
Mg = 0.2
Si = 0.5
Al = 0.5
Y  = 0.2
S  = 2.0
O  = 5.0
H  = 0.5
C  = 5.0
metals = 10.0
"Fe+Ag" = 2.0
[lot.charge]
form = { shape = "slab", thickness = "25 mm", width = "100 mm", length = "200 mm" }
surface = "etched"
days_in_air = 3
[furnace]
volume = "120 L"
leak = "5e-4 mbar L/s"
outgassing = "2e-3 mbar L/s x/ 3"
hot_zone = "graphite"
purges = 3
"""

MELT = """
[[step]]
name = "melt"
process = "melt"
temperature = "1180 +- 10 degC"
duration = "40 min"
wall_area = "1020 cm2"
free_surface = "175 cm2"
stirring = "induction"
immersed = []
atmosphere = "argon N5.0"
flow = "4 L/min"
"""

WALLS = {
    "graphite": 'container = "isostatic graphite, purified"',
    "alumina": 'container = "alumina 99.7"',
    "magnesia": 'container = "magnesia"',
}

STORE = """
[[step]]
name = "store"
process = "store"
temperature = "22 degC"
duration = "180 d"
form = { shape = "cylinder", diameter = "150 mm", height = "12 mm" }
atmosphere = "clean-room air"
[[step.choice]]
name = "open shelf"
[[step.choice]]
name = "bag"
package = { barrier = "polyethylene", thickness = "100 um", area = "0.6 m2", head_space = "2 L", fill = \
"clean-room air", desiccant = "400 g", desiccant_kind = "silica gel" }
"""


def toml(walls: dict[str, str] = WALLS, *, lot: str = LOT, store: str = STORE) -> str:
    """Return the scenario file with the given melt choices in their order; without any, the lot is stored."""
    choices = "".join(f'[[step.choice]]\nname = "{name}"\n{wall}\n' for name, wall in walls.items())
    return lot + (MELT + choices if walls else "") + store


def written(folder: Path, text: str, library: Library) -> Scenario:
    """Write a scenario file and read it back."""
    path = folder / "remelt.toml"
    path.write_text(text, encoding="utf-8")
    return read(path, library)


def run(folder: Path, text: str, library: Library, route: tuple[str, ...] | None = None) -> Result:
    """Assess a scenario file with few draws."""
    return assess(written(folder, text, library), library, FEW, route=route)


def lines(result: Result) -> dict[tuple[str, str, str], Line]:
    """Return the lines of a result by step, choice and impurity."""
    return {
        (step.name, choice.name, line.impurity): line
        for step in result.steps
        for choice in step.choices
        for line in choice.lines
    }
