"""Figures and words of the tables."""

from __future__ import annotations

import re
from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from purity.kinetics.advance import HELD_BACK_BY
from purity.report import words
from purity.result import Band, Result


@pytest.mark.parametrize(
    "ppm, text",
    [
        (0.0, "0"),
        (1.0, "1.0"),
        (99.6, "100"),
        (123456.0, "120000"),
        (0.34, "0.34"),
        (0.0996, "0.10"),
        (0.0994, "99 ppb"),
        (0.012, "12 ppb"),
        (-0.003, "-3.0 ppb"),
        (2.5e-6, "0.0025 ppb"),
        (1e-9, "~0"),
        (-1e-9, "~0"),
    ],
)
def test_contents_have_two_figures_and_ppb_below_a_tenth(ppm: float, text: str) -> None:
    assert words.content(ppm) == text


@given(st.floats(1e-6, 1e5))
def test_rounding_a_content_keeps_it_within_five_percent(ppm: float) -> None:
    text = words.content(ppm)
    value = float(text.removesuffix(" ppb")) * (1e-3 if text.endswith("ppb") else 1.0)
    assert value == pytest.approx(ppm, rel=0.05)


@pytest.mark.parametrize("ppm, text", [(1.25, "1.25"), (5.0, "5"), (0.05, "50 ppb"), (None, "")])
def test_limits_are_printed_as_given(ppm: float | None, text: str) -> None:
    assert words.limit(ppm) == text


@pytest.mark.parametrize(
    "value, error, text",
    [
        (0.02, 0.004, "1 in 50"),
        (0.0, 3 / 2048, "< 1 in 680"),
        (0.0005, 0.0005, "< 1 in 1000"),
        (0.001, 0.003, "< 1 in 250"),
        (0.14, 0.01, "1 in 7"),
        (0.31, 0.01, "3 in 10"),
        (0.96, 0.01, "> 9 in 10"),
        (1.0, 0.0015, "> 9 in 10"),
        (1.0, 1.0, "unknown"),
        (None, None, "unknown"),
    ],
)
def test_chances_read_as_odds(value: float | None, error: float | None, text: str) -> None:
    assert words.chance(value, error) == text


@given(st.floats(0, 1), st.floats(1e-4, 0.5))
def test_a_chance_is_never_finer_than_its_error(value: float, error: float) -> None:
    text = words.chance(value, error)
    if found := re.fullmatch(r"< 1 in (\d+)", text):
        assert 1 / int(found[1]) >= min(error, value + error) * (1 - 1e-9)
    if found := re.fullmatch(r"1 in (\d+)", text):
        assert 1 / int(found[1]) > 0.9 * error


@pytest.mark.parametrize(
    "spent, word, text",
    [
        (-0.1, "gives off", "[<.....]"),
        (0.01, "ample", "[#.....]"),
        (0.5, "tight", "[###...]"),
        (0.99, "tight", "[#####.]"),
        (1.2, "over", "[######>"),
        (None, "closed", "[xxxxxx]"),
        (None, None, ""),
    ],
)
def test_bars_read_without_colour(spent: float | None, word: str | None, text: str) -> None:
    assert words.bar(spent, word) == text  # type: ignore[arg-type]


def test_every_limit_has_a_shop_word() -> None:
    assert set(words.HELD_BACK_BY) == set(HELD_BACK_BY)


def test_the_contact_that_does_most_is_named(made_up: Result) -> None:
    oxygen, carbon, hydrogen, *_ = made_up.steps[0].choices[0].lines
    assert words.limits_it(oxygen) == "furnace leak: what arrives"
    assert words.limits_it(carbon) == "graphite: saturated"
    assert words.limits_it(hydrogen) == "argon: gas film"


def test_below_detection_reads_across(made_up: Result) -> None:
    aluminium = next(line for line in made_up.steps[0].choices[0].lines if line.impurity == "Al")
    assert " ".join(words.ends(aluminium, wide=True)) == "< DL (3.0 ppb predicted)"
    assert words.start(aluminium, method=False) == "< 50 ppb"
    above = replace(aluminium, end=Band(0.01, 0.03, 0.06))
    assert words.ends(above, wide=True) == ("60 ppb", "30 ppb")


def test_a_method_stands_by_its_number(made_up: Result) -> None:
    oxygen = made_up.steps[0].choices[0].lines[0]
    assert words.start(oxygen, method=True) == "2.0 (inert gas fusion)"
