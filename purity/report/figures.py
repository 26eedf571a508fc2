"""Figures as SVG or PNG bytes: nothing is computed here, only drawn. Needs the extra `figures`."""

from __future__ import annotations

from collections.abc import Mapping
from io import BytesIO
from typing import Any

from purity.report import words

Facts = Mapping[str, Any]

#: Greys and marks that read on a black and white print.
INK, SHADE, RULE = "#1a1a1a", "#c8c8c8", "#6a6a6a"
FORMATS = ("svg", "png")


def affinity(facts: Facts, kind: str) -> bytes:
    """Draw driving force and energy of mixing over content, near the pure end of the metal.

    Parameters
    ----------
    facts : mapping
        Fields of an affinity by name, nested; energies in J/mol, contents in mass ppm, T in K.
    kind : {"svg", "png"}

    Returns
    -------
    bytes
        The same for the same facts.

    Raises
    ------
    ModuleNotFoundError
        Without matplotlib.
    """
    from matplotlib import rc_context
    from matplotlib.figure import Figure

    with rc_context({"svg.hashsalt": "purity", "font.size": 9.0, "axes.edgecolor": INK}):
        figure = Figure(figsize=(7.0, 6.0), layout="constrained")
        force, mixing = figure.subplots(2, 1, sharex=True, height_ratios=(3, 2))
        rows = facts["contents"]
        ppm = [row["ppm"] for row in rows]
        _force(force, rows, ppm, facts)
        mixing.loglog(ppm, [-row["mixing"] for row in rows], color=INK, marker="o", markersize=3)
        mixing.set_ylabel("released on mixing,\nJ per mol of metal")
        mixing.xaxis.set_major_formatter(lambda value, _: f"{value:g}")
        mixing.yaxis.set_major_formatter(lambda value, _: f"{value:g}")
        mixing.set_xlabel(f"{facts['impurity']} in {facts['host']}, ppm by mass")
        title = f"{facts['impurity']} in {facts['phase']} {facts['host']} at {facts['T'] - 273.15:.0f} degC"
        figure.suptitle(title, x=0.02, ha="left", fontweight="bold")
        out = BytesIO()
        figure.savefig(out, format=kind, dpi=150, metadata={"Date": None} if kind == "svg" else None)
    return out.getvalue()


def _force(axes: Any, rows: Any, ppm: list[float], facts: Facts) -> None:
    low = [row["driving_force"]["low"] / 1000 for row in rows]
    high = [row["driving_force"]["high"] / 1000 for row in rows]
    axes.fill_between(ppm, low, high, color=SHADE, linewidth=0)
    axes.semilogx(ppm, [row["driving_force"]["median"] / 1000 for row in rows], color=INK)
    axes.set_ylabel("driving force from the pure\nelement, kJ per mol of impurity")
    axes.annotate("5 to 95 %", (ppm[1], high[1]), xytext=(6, 4), textcoords="offset points", color=RULE)
    marks = [(row["ppm"]["median"], f"{row['formula']} forms", "--") for row in facts["saturations"]]
    marks += [(row["ceiling"]["median"], row["contact"], ":") for row in facts["contacts"] if row["ceiling"]]
    inside = sorted(mark for mark in marks if ppm[0] <= mark[0] <= ppm[-1])
    for position, (at, name, style) in enumerate(inside):
        axes.axvline(at, color=RULE, linestyle=style, linewidth=0.9)
        place = 0.97 - 0.07 * (position % 6)
        axes.text(
            at,
            place,
            f" {name}, {words.content(at)}",
            transform=axes.get_xaxis_transform(),
            va="top",
            fontsize=7.5,
        )
