"""Result -> JSON and CSV text, the machine-readable tables."""

from __future__ import annotations

import csv
import json
from collections.abc import Mapping, Sequence
from io import StringIO
from typing import Any

from purity.result import DIGITS, Result, to_dict, to_rows

#: A cell that starts with one of these may be run as a formula by a spreadsheet.
FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r")


def as_json(result: Result) -> str:
    """Return a run in the promised JSON shape, indented, ended by a line feed."""
    return plain_json(to_dict(result))


def plain_json(value: object) -> str:
    """Return mappings, sequences, numbers and words as JSON text; numbers have 9 significant digits."""
    return json.dumps(_rounded(value), indent=1, ensure_ascii=False, allow_nan=False) + "\n"


def _rounded(value: object) -> object:
    if isinstance(value, float):
        return float(f"{value:.{DIGITS}g}")
    if isinstance(value, Mapping):
        return {name: _rounded(inner) for name, inner in value.items()}
    return [_rounded(inner) for inner in value] if isinstance(value, list | tuple) else value


def as_csv(result: Result) -> str:
    """Return one CSV row per step, choice and impurity, safe to open in a spreadsheet."""
    return table_csv(to_rows(result))


def table_csv(rows: Sequence[Mapping[str, Any]]) -> str:
    """Return rows of equal keys as CSV with a header line.

    Numbers are written in full, unknown is an empty cell, line breaks in words become blanks, and words
    that a spreadsheet could take for a formula get a leading apostrophe.
    """
    out = StringIO()
    writer = csv.writer(out, lineterminator="\n")
    if rows:
        writer.writerow(rows[0].keys())
    writer.writerows([_cell(value) for value in row.values()] for row in rows)
    return out.getvalue()


def _cell(value: object) -> object:
    if value is None:
        return ""
    if not isinstance(value, str):
        return value
    line = " ".join(value.split()) if any(mark < " " for mark in value) else value
    return f"'{line}" if line.startswith(FORMULA_STARTS) else line
