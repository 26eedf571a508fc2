"""JSON and CSV of a run."""

from __future__ import annotations

import csv
import json
from dataclasses import replace
from io import StringIO

import pytest
from hypothesis import given
from hypothesis import strategies as st

from purity.report.export import FORMULA_STARTS, as_csv, as_json, table_csv
from purity.result import Result, to_dict, to_rows


def test_json_is_the_dict_in_one_text(made_up: Result) -> None:
    text = as_json(made_up)
    assert json.loads(text) == to_dict(made_up)
    assert text.endswith("}\n")
    assert "NaN" not in text


def test_csv_holds_every_row(made_up: Result) -> None:
    read = list(csv.DictReader(StringIO(as_csv(made_up))))
    rows = to_rows(made_up)
    assert [row["impurity"] for row in read] == [row["impurity"] for row in rows]
    assert [float(row["limit_ppm"]) for row in read] == [row["limit_ppm"] for row in rows]
    assert read[5]["end_ppm_high"] == ""


@given(st.sampled_from(FORMULA_STARTS), st.text())
def test_no_word_can_run_as_a_formula(start: str, rest: str) -> None:
    rows = list(csv.reader(StringIO(table_csv([{"a": start + rest, "b": 1}]), newline="")))
    assert len(rows) == 2
    assert not rows[1][0].startswith(FORMULA_STARTS)


@pytest.mark.parametrize("number", [-0.5, -3])
def test_negative_numbers_stay_numbers(number: float) -> None:
    assert table_csv([{"a": number}]) == f"a\n{number}\n"


def test_a_hostile_choice_name_is_made_harmless(made_up: Result) -> None:
    step = made_up.steps[0]
    odd = replace(step.choices[0], name='=HYPERLINK("x")')
    run = replace(made_up, steps=(replace(step, choices=(odd,)),))
    assert all(row["choice"].startswith("'=") for row in csv.DictReader(StringIO(as_csv(run))))
