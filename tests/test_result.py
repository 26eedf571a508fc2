"""The machine-readable result keeps its promise."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import jsonschema
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from purity.result import Band, Result, to_dict, to_frame, to_rows

SCHEMA = json.loads((Path(__file__).parent / "result.schema.json").read_text(encoding="utf-8"))


def test_a_run_keeps_the_schema(made_up: Result) -> None:
    jsonschema.Draft202012Validator.check_schema(SCHEMA)
    jsonschema.validate(json.loads(json.dumps(to_dict(made_up), allow_nan=False)), SCHEMA)


@pytest.mark.parametrize(
    "path, value",
    [
        (("schema",), 2),
        (("stamp", "draws"), "2048"),
        (("steps", 0, "choices", 0, "state"), "best"),
        (("steps", 0, "choices", 0, "rank"), 0),
        (("steps", 0, "choices", 3, "rank"), 1),
        (("steps", 0, "choices", 0, "impurities", 0, "end_ppm"), {"median": 1.0}),
        (("steps", 0, "choices", 3, "impurities", 1, "gap"), None),
    ],
)
def test_the_schema_refuses_what_breaks_the_promise(
    made_up: Result, path: tuple[str | int, ...], value: object
) -> None:
    run = to_dict(made_up)
    place: object = run
    for key in path[:-1]:
        place = place[key]  # type: ignore[index]
    place[path[-1]] = value  # type: ignore[index]
    with pytest.raises(jsonschema.ValidationError):
        jsonschema.validate(run, SCHEMA)


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_numbers_keep_nine_significant_digits(value: float) -> None:
    band = Band(value, value, value)
    from purity.result import _band

    found = _band(band)
    assert found is not None
    assert found["median"] == pytest.approx(value, rel=5e-9, abs=0)


@pytest.mark.parametrize("value", [float("nan"), float("inf"), float("-inf"), np.float64("nan")])
def test_what_is_not_finite_cannot_enter(made_up: Result, value: float) -> None:
    line = made_up.steps[0].choices[0].lines[0]
    with pytest.raises(ValueError, match=r"Band\.high"):
        Band(0.0, 1.0, value)
    with pytest.raises(ValueError, match=r"Line\.spent"):
        replace(line, spent=value)
    with pytest.raises(ValueError, match=r"ChoiceResult\.attack_um"):
        replace(made_up.steps[0].choices[0], attack_um=value)


def test_numpy_numbers_leave_as_python_numbers(made_up: Result) -> None:
    choice = made_up.steps[0].choices[0]
    odd = replace(choice, rank=np.int64(1), complete=np.bool_(True), chance_over=np.float64(0.5))  # type: ignore[arg-type]
    run = replace(made_up, steps=(replace(made_up.steps[0], choices=(odd,)),))
    found = to_dict(run)["steps"][0]["choices"][0]
    assert type(found["rank"]) is int
    assert type(found["complete"]) is bool
    assert type(found["chance_over"]) is float


def test_rows_are_flat_and_alike(made_up: Result) -> None:
    rows = to_rows(made_up)
    assert len(rows) == sum(len(choice.lines) for step in made_up.steps for choice in step.choices)
    assert len({tuple(row) for row in rows}) == 1
    assert all(
        value is None or isinstance(value, str | int | float | bool) for row in rows for value in row.values()
    )
    oxygen = rows[0]
    assert (oxygen["impurity"], oxygen["end_ppm_high"], oxygen["limit_ppm"]) == ("O", 5.6, 5.0)


def test_a_frame_holds_the_rows(made_up: Result) -> None:
    frame = to_frame(made_up)
    assert list(frame.columns) == list(to_rows(made_up)[0])
    assert frame["impurity"].tolist() == [row["impurity"] for row in to_rows(made_up)]


def test_the_notebook_table_escapes_names(made_up: Result) -> None:
    step = made_up.steps[0]
    choice = replace(step.choices[0], name="<b>pot</b> & lid")
    run = replace(
        made_up,
        scenario=replace(made_up.scenario, title="<script>"),
        steps=(replace(step, choices=(choice,)),),
    )
    html = run._repr_html_()
    assert "<script>" not in html
    assert "&lt;script&gt;" in html
    assert "&lt;b&gt;pot&lt;/b&gt; &amp; lid" in html


def test_the_notebook_table_stops_at_fifty_rows(made_up: Result) -> None:
    step = made_up.steps[0]
    run = replace(made_up, steps=(replace(step, choices=step.choices[:1] * 9),))
    html = run._repr_html_()
    assert html.count("<tr>") == 51
    assert "22 more rows" in html
