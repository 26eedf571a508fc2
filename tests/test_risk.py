"""Spent, words, and ranks that chance cannot fool."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from purity.draws import Draws, normal
from purity.result import Result, StateWord
from purity.risk import beyond, load, margin, spent, standings, state, word

BLOCKS = 8
DRAWS = Draws(seed=2, blocks=BLOCKS)
NONE_OVER = np.zeros((1, DRAWS.n), dtype=bool)


def test_spent_is_the_share_of_the_allowance() -> None:
    assert spent(1.0, 1.9, 5.0) == pytest.approx(0.225)
    assert spent(6.0, 6.0, 5.0) is None


@pytest.mark.parametrize(
    "start, end, expected",
    [
        (0.0, 0.0, "gives off"),
        (1.0, 0.5, "gives off"),
        (0.0, 0.49, "ample"),
        (0.0, 0.5, "fair"),
        (0.0, 2.49, "fair"),
        (0.0, 2.5, "tight"),
        (0.0, 5.0, "over"),
        (5.0, 4.0, "closed"),
    ],
)
def test_words_change_where_they_say(start: float, end: float, expected: str) -> None:
    assert word(start, end, 5.0) == expected


def test_margin_is_counted_from_the_upper_content() -> None:
    assert margin(3.4, 5.0) == pytest.approx(1.6)
    assert margin(6.0, 5.0) == pytest.approx(-1.0)


@given(st.floats(0.01, 10), st.floats(0.01, 10), st.integers(0, 1000))
def test_the_median_of_load_is_spent_of_the_medians(start: float, limit: float, seed: int) -> None:
    end = np.random.default_rng(seed).lognormal(size=101)
    found = float(np.median(load(start, end, limit)))
    share = spent(start, float(np.median(end)), limit)
    assert found == pytest.approx(np.median(end) / limit if share is None else share)


@given(st.floats(0.01, 10), st.floats(0.01, 10))
def test_load_is_one_at_the_limit(start: float, limit: float) -> None:
    assert load(start, np.array([limit]), limit)[0] == pytest.approx(1.0)


def test_only_a_whole_assessment_is_ranked() -> None:
    assert state(10, 10, attacked=False) == "ranked"
    assert state(9, 10, attacked=False) == "not ranked"
    assert state(10, 10, attacked=True) == "attacked"


def _over(share: float, key: str = "shared") -> np.ndarray:
    from scipy.special import ndtri

    return normal(DRAWS, key) > ndtri(1 - share)


def _sum(*keys: str) -> np.ndarray:
    return np.sum([normal(DRAWS, key) for key in keys], axis=0)


def test_chance_ranks_before_spent() -> None:
    often, seldom = _over(0.3), _over(0.02)
    low, high = np.full((1, DRAWS.n), 0.1), np.full((1, DRAWS.n), 0.9)
    found = standings(["ranked", "ranked"], [often, seldom], [low, high], BLOCKS)
    assert [one.rank for one in found] == [2, 1]
    assert found[1].chance_over == pytest.approx(0.02, abs=0.002)


def test_equal_chances_are_parted_by_spent() -> None:
    loads = [np.full((1, DRAWS.n), value) for value in (0.4, 0.2)]
    found = standings(["ranked", "ranked"], [NONE_OVER, NONE_OVER], loads, BLOCKS)
    assert [one.rank for one in found] == [2, 1]
    assert not found[0].tied_with


def test_what_sampling_cannot_part_is_tied() -> None:
    """Same law, other draws: the chances differ, but not by more than their error."""
    a, b = _sum("a", "b"), _sum("c", "d")
    far = np.full((1, DRAWS.n), 9.0)
    found = standings(["ranked"] * 3, [a > 2.5, b > 2.5, far > 2.5], [a, b, far], BLOCKS)
    assert found[0].chance_over != found[1].chance_over
    assert [one.rank for one in found] == [1, 1, 3]
    assert found[0].tied_with == (1,)
    assert found[1].tied_with == (0,)
    assert found[2].tied_with == ()


def test_shared_draws_part_what_independent_draws_could_not() -> None:
    z = _sum("a", "b")
    found = standings(["ranked"] * 2, [z > 2.5, z > 2.6], [z, z - 0.1], BLOCKS)
    alone = found[0].chance_error + found[1].chance_error  # type: ignore[operator]
    assert found[0].chance_over - found[1].chance_over < alone  # type: ignore[operator]
    assert [one.rank for one in found] == [2, 1]


def test_the_chance_is_of_any_element_and_the_decider_is_the_likeliest() -> None:
    over = np.concatenate([_over(0.02, "a"), _over(0.10, "b")])
    found = standings(["ranked"], [over], [np.zeros((2, DRAWS.n))], BLOCKS)[0]
    assert found.deciding == 1
    assert found.chance_over == pytest.approx(0.02 + 0.10 - 0.002, abs=0.01)


@pytest.mark.parametrize("word_of", ["not ranked", "attacked"])
def test_unknown_never_wins(word_of: StateWord) -> None:
    loads = [np.full((1, DRAWS.n), value) for value in (0.01, 0.99)]
    found = standings([word_of, "ranked"], [NONE_OVER, _over(0.5)], loads, BLOCKS)
    assert found[0].rank is None
    assert found[1].rank == 1
    assert found[1].tied_with == ()


def test_a_choice_without_any_limit_is_not_ranked() -> None:
    empty = np.zeros((0, DRAWS.n))
    found = standings(["ranked"], [empty.astype(bool)], [empty], BLOCKS)[0]
    assert (found.rank, found.chance_over, found.deciding) == (None, None, None)


@given(st.lists(st.floats(0.0, 1.0), min_size=1, max_size=6), st.integers(0, 100), st.randoms())
def test_ranks_do_not_depend_on_the_order_of_choices(shares: list[float], seed: int, mix: object) -> None:
    z = np.random.default_rng(seed).uniform(size=(1, 512))
    over = [z < share for share in shares]
    loads = [np.full((1, 512), share) for share in shares]
    found = standings(["ranked"] * len(shares), over, loads, 2)
    order = list(range(len(shares)))
    mix.shuffle(order)  # type: ignore[attr-defined]
    mixed = standings(["ranked"] * len(shares), [over[j] for j in order], [loads[j] for j in order], 2)
    assert [found[j].rank for j in order] == [one.rank for one in mixed]
    for one in found:
        assert one.rank is not None
        assert 1 <= one.rank <= len(shares)


def test_steps_without_a_choice_inside_the_risk_are_named(made_up: Result) -> None:
    assert beyond(made_up) == ("melt",)
    bold = replace(made_up, scenario=replace(made_up.scenario, risk=0.09))
    assert beyond(bold) == ()
