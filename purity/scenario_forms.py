"""Pieces and baths: from the sizes in a scenario file to areas and volumes of the whole lot."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from math import pi
from typing import Final

from purity.database import Found, Library, phase_at
from purity.errors import OutOfRangeError
from purity.scenario import Form, Given
from purity.scenario_lines import Place
from purity.scenario_names import Findings
from purity.scenario_schema import PieceTable

#: Temperature at which pieces are measured, K (20 degC, ISO 1).
ROOM: Final = 293.15
#: Largest difference between the lot's mass and its pieces, and between a melt and its bath.
_PIECES, _BATH = 0.02, 0.05


@dataclass(frozen=True, slots=True)
class Bath:
    """Surfaces of a melt, m2."""

    wall: float
    free: float


def density(library: Library, host: str, T: float) -> float | None:
    """Density of a host at a temperature, kg/m3, None where the table does not hold it."""
    try:
        found = library.find("hosts", host=host, phase=phase_at(library, host, T))
    except OutOfRangeError:
        return None
    if not isinstance(found, Found):
        return None
    row = found.record.fields
    return row["density_kg_per_m3"] - row["density_slope_kg_per_m3_K"] * (T - row["T_ref_K"])


def _slab(t: PieceTable) -> tuple[float, float]:
    a, b, c = t.thickness or 0.0, t.width or 0.0, t.length or 0.0
    return a * b * c, 2 * (a * b + a * c + b * c)


def _round(diameter: float, length: float) -> tuple[float, float]:
    return pi / 4 * diameter**2 * length, pi * diameter * length + pi / 2 * diameter**2


def _sphere(t: PieceTable) -> tuple[float, float]:
    d = t.diameter or 0.0
    return pi / 6 * d**3, pi * d**2


#: Volume and surface of one piece; the sizes it needs; those it may have; which one is the thickness, and
#: surface over volume where the other sizes are left out (edges and ends then count for nothing).
_SHAPES: Final[
    Mapping[
        str,
        tuple[Callable[[PieceTable], tuple[float, float]], tuple[str, ...], tuple[str, ...], str, float],
    ]
] = {
    "slab": (_slab, ("thickness",), ("width", "length"), "thickness", 2.0),
    "cylinder": (
        lambda t: _round(t.diameter or 0.0, t.height or 0.0),
        ("diameter", "height"),
        (),
        "diameter",
        4.0,
    ),
    "wire": (
        lambda t: _round(t.diameter or 0.0, t.length or 0.0),
        ("diameter",),
        ("length",),
        "diameter",
        4.0,
    ),
    "sphere": (_sphere, ("diameter",), (), "diameter", 6.0),
    "granules": (_sphere, ("diameter",), (), "diameter", 6.0),
}


def _sizes(findings: Findings, place: Place, table: PieceTable) -> bool:
    """Check that a piece has the sizes of its shape, and no others."""
    if table.shape is None:
        findings.missing((*place, "shape"), f"shape, one of {', '.join(_SHAPES)}")
        return False
    if table.shape == "area":
        findings.add((*place, "shape"), 'where only the area is known write area = "1.2 m2" instead of form')
        return False
    _, needs, may, _, _ = _SHAPES[table.shape]
    given = table.model_fields_set - {"shape", "grain", "count"}
    for key in sorted(given - set(needs) - set(may)):
        findings.add((*place, key), f"a {table.shape} has {', '.join((*needs, *may))}, no {key}")
    for key in needs:
        if key not in given:
            findings.missing((*place, key), f"{key} of the {table.shape}, a length such as '25 mm'")
    if len(given & set(may)) not in (0, len(may)):
        findings.missing((*place, next(k for k in may if k not in given)), f"{' and '.join(may)} go together")
    return given == set(needs) or given == {*needs, *may}


def pieces(
    findings: Findings, place: Place, table: PieceTable, mass: Given | None, host_density: float | None
) -> Form | None:
    """Return the form of the whole lot from one piece of it.

    Without a count the number of pieces follows from the lot's mass; with one, a mass more than 2 % off
    is a fault that shows the three numbers.
    """
    if not _sizes(findings, place, table) or mass is None or host_density is None or table.shape is None:
        return None
    measure, _, may, thick, over = _SHAPES[table.shape]
    half = 0.5 * float(getattr(table, thick))
    volume = mass.median / host_density
    if may and getattr(table, may[0]) is None:
        return Form(table.shape, half, over * volume / (2 * half), volume, table.grain)
    one, surface = measure(table)
    count = volume / one
    if table.count is not None and abs(table.count * one / volume - 1) > _PIECES:
        weight = table.count * one * host_density
        findings.add(
            (*place, "count"),
            f"{table.count:g} pieces of {one * 1e6:.4g} cm3 weigh {weight:.4g} kg, the lot "
            f"{mass.median:.4g} kg (density {host_density:.5g} kg/m3); {count:.4g} pieces "
            "would make the lot: change count, size or mass, or leave count out",
        )
        return None
    if table.height is not None and table.height < 2 * half:
        # a disc: what comes in through its faces is there first
        return Form("slab", 0.5 * table.height, count * surface, volume, table.grain, count)
    return Form(table.shape, half, count * surface, volume, table.grain, count)


def from_area(area: Given, mass: Given | None, host_density: float | None) -> Form | None:
    """Return a form of which only the area is known; half its thickness is volume over area."""
    if mass is None or host_density is None:
        return None
    volume = mass.median / host_density
    return Form("area", volume / area.median, area.median, volume)


def bath(
    findings: Findings, place: Place, table: PieceTable, mass: Given | None, melt_density: float | None
) -> Bath | None:
    """Return wall and free surface of a melt in an upright round crucible.

    The height may be left out: it follows from the mass. Given, it must hold the lot within 5 %.
    """
    if table.shape != "cylinder":
        if table.shape is not None or table.model_fields_set:
            findings.add(
                (*place, "shape"),
                'the form of a bath is a "cylinder"; for another give wall_area and free_surface',
            )
        return None
    for key in sorted(table.model_fields_set - {"shape", "diameter", "height"}):
        findings.add((*place, key), f"a bath has a diameter and a height, no {key}")
    if table.diameter is None:
        findings.missing((*place, "diameter"), "inner diameter of the crucible, such as '150 mm'")
        return None
    section = pi / 4 * table.diameter**2
    height = table.height
    if mass is not None and melt_density is not None:
        volume = mass.median / melt_density
        if height is None:
            height = volume / section
        elif abs(section * height / volume - 1) > _BATH:
            findings.add(
                (*place, "height"),
                f"a bath of {section * height * 1e3:.4g} L holds {section * height * melt_density:.4g} kg, "
                f"the lot weighs {mass.median:.4g} kg; {volume / section * 1e3:.4g} mm would hold it: "
                "change height or leave it out",
            )
            return None
    return Bath(pi * table.diameter * height + section, section) if height else None
