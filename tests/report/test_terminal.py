"""The printed table: whole texts at fixed widths, and what must hold at any width.

The golden files are the table as it was last looked at. After a wanted change run with
PURITY_UPDATE_GOLDEN=1 (the run fails once) and read the difference before it is committed.
"""

from __future__ import annotations

import os
import re
from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from purity.report.terminal import render, worst_first
from purity.result import Result

GOLDEN = Path(__file__).parent


@pytest.mark.parametrize("width, detail", [(80, False), (120, False), (80, True), (120, True)])
def test_the_table_is_the_one_that_was_looked_at(made_up: Result, width: int, detail: bool) -> None:
    path = GOLDEN / f"golden_{width}{'_detail' if detail else ''}.txt"
    text = render(made_up, width=width, detail=detail)
    if os.environ.get("PURITY_UPDATE_GOLDEN"):
        path.write_text(text, encoding="utf-8")
        pytest.fail(f"{path.name} was rewritten: read the difference")
    assert text == path.read_text(encoding="utf-8")


@pytest.mark.parametrize("width", [80, 93, 110, 200])
def test_lines_fit_and_nothing_is_cut(made_up: Result, width: int) -> None:
    text = render(made_up, width=width, detail=True)
    assert max(map(len, text.splitlines())) <= width
    assert "…" not in text
    words = set(re.findall(r"[\w\[\]]+", text))
    for step in made_up.steps:
        for choice in step.choices:
            assert set(re.findall(r"[\w\[\]]+", choice.name)) <= words


@given(width=st.integers(80, 160))
@settings(suppress_health_check=[HealthCheck.function_scoped_fixture], max_examples=20)
def test_a_number_stays_with_its_unit_on_one_line(made_up: Result, width: int) -> None:
    text = render(made_up, width=width, detail=True)
    assert not re.search(r"\d\n\s*(ppb|%|um|kJ/mol|degC)", text)
    assert not re.search(r"\b1 in\n", text)


def test_names_in_brackets_survive(made_up: Result) -> None:
    assert "[old pump]" in render(made_up, width=120)


def test_plain_text_has_no_control_codes_and_colour_adds_no_words(made_up: Result) -> None:
    plain = render(made_up, width=120)
    colored = render(made_up, width=120, color=True)
    assert "\x1b" not in plain
    assert "\x1b[31m" in colored
    stripped = "\n".join(line.rstrip() for line in re.sub(r"\x1b\[[0-9;]*m", "", colored).splitlines()) + "\n"
    assert stripped == plain


@pytest.mark.parametrize("name", ["NO_COLOR", "FORCE_COLOR", "COLUMNS"])
def test_the_text_does_not_depend_on_the_environment(
    made_up: Result, monkeypatch: pytest.MonkeyPatch, name: str
) -> None:
    before = render(made_up)
    monkeypatch.setenv(name, "43")
    assert render(made_up) == before


def test_more_than_half_assumed_is_headed_indicative(made_up: Result) -> None:
    text = render(made_up)
    assert "indicative: measure melt/graphite under argon/wetting, furnace/leak first" in text
    step = made_up.steps[0]
    sure = replace(step.choices[0], assumed_share=0.5)
    assert "indicative" not in render(replace(made_up, steps=(replace(step, choices=(sure,)),)))


def test_what_is_not_ranked_stands_apart_with_its_reason(made_up: Result) -> None:
    text = " ".join(render(made_up, width=120).split())
    assert "not ranked: magnesia under vacuum, 9 of 10 assessed, no data for Se (no diffusion record" in text
    assert "attacked: steel pot, 0 of 10 assessed" in text
    assert "tied: graphite under argon = graphite in vacuum [old pump]" in text


def test_a_step_without_a_ranked_choice_still_shows_what_is_known(made_up: Result) -> None:
    step = replace(made_up.steps[0], choices=made_up.steps[0].choices[3:])
    text = render(replace(made_up, steps=(step,), routes=()))
    assert "No choice could be ranked." in text
    assert "magnesia under vacuum: not ranked, 9 of 10 assessed" in text


def test_the_worst_element_stands_first(made_up: Result) -> None:
    lines = worst_first(made_up.steps[0].choices[0].lines)
    assert [line.impurity for line in lines][:2] == ["Si", "O"]


def test_without_detail_one_choice_is_spelled_out(made_up: Result) -> None:
    assert render(made_up).count("assessed\n") == 2
    assert render(made_up, detail=True).count("assessed\n") == 6


def test_what_nobody_asked_for_is_one_line_without_detail(made_up: Result) -> None:
    step = made_up.steps[0]
    silicon = next(line for line in step.choices[0].lines if line.impurity == "Si")
    boron = replace(silicon, impurity="B", limit=None)
    quiet = replace(boron, impurity="V", pickup=replace(boron.pickup, low=0.0, median=0.0, high=1e-7))
    choice = replace(step.choices[0], lines=(*step.choices[0].lines, boron, quiet))
    run = replace(made_up, steps=(replace(step, choices=(choice,)),), routes=())
    brief = render(run, width=120)
    assert "neither certified nor limited, upper 95 % of the pickup: B +0.12\n" in brief
    assert not re.search(r"^B ", brief, re.MULTILINE)
    full = render(run, width=120, detail=True)
    assert re.search(r"^B .*no limit", full, re.MULTILINE)
    assert re.search(r"^V .*~0 .*no limit", full, re.MULTILINE)


def test_a_caution_of_the_whole_run_is_said_once(made_up: Result) -> None:
    step = made_up.steps[0]
    choice = replace(step.choices[0], warnings=(*made_up.cautions, "mind the sheath"))
    text = " ".join(render(replace(made_up, steps=(replace(step, choices=(choice,)),)), width=120).split())
    assert text.count(made_up.cautions[0]) == 1
    assert "warning: mind the sheath" in text


def test_a_reason_shared_by_lines_is_said_once(made_up: Result) -> None:
    step = made_up.steps[0]
    lines = tuple(replace(line, gap="members count with their gain") for line in step.choices[0].lines[:2])
    run = replace(made_up, steps=(replace(step, choices=(replace(step.choices[0], lines=lines),)),))
    assert "O, C: members count with their gain\n" in render(run, width=120)


def test_a_run_without_cautions_still_says_what_it_is(made_up: Result) -> None:
    text = " ".join(render(replace(made_up, cautions=())).split())
    assert "not a release: analysis decides" in text


def test_an_attacked_choice_gives_no_numbers(made_up: Result) -> None:
    step = made_up.steps[0]
    pot = replace(step.choices[4], lines=step.choices[0].lines)
    run = replace(made_up, steps=(replace(step, choices=(pot,)),), routes=())
    for detail in (False, True):
        text = render(run, detail=detail)
        assert "attacked: steel pot" in text
        assert "end 95 %" not in text
        assert "driving force" not in text
