"""Solutes that follow a bath: closed forms, balances, and the full bath on the same case."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from purity.kinetics.bath import Case, integrate
from purity.kinetics.exposure import Carrier, Curve, Exposure
from purity.kinetics.following import Channel, Followed, follow_along, shares
from purity.kinetics.schedule import Schedule, hold

Array = NDArray[np.float64]
T = 1500.0
ENDLESS = 300.0


def flat(value: float) -> Curve:
    return Curve(np.array([T]), np.full((1, 1, 1), value))


def channel(metal: float, ceiling: float, side: float | None = None, inventory: float = np.inf) -> Channel:
    """Rates in 1/s."""
    return Channel(
        flat(np.log(metal)),
        flat(ENDLESS if side is None else np.log(side)),
        flat(np.log(ceiling) if ceiling > 0 else -ENDLESS),
        np.full((1, 1), inventory),
    )


def run(start: float, *channels: Channel, cap: float | None = None, seconds: float = 1000.0) -> Followed:
    top = flat(ENDLESS if cap is None else np.log(cap))
    return follow_along(np.full((1, 1), start), channels, top, hold(T, seconds), nodes=16, history=True)


def test_one_contact_follows_its_exponential() -> None:
    done = run(1e-7, channel(2e-3, 5e-6))
    assert done.total[0, 0] == pytest.approx(5e-6 + (1e-7 - 5e-6) * np.exp(-2.0), rel=1e-12)


def test_resistances_of_metal_and_contact_stand_in_series() -> None:
    done = run(1e-6, channel(2e-3, 0.0, side=2e-3))
    assert done.total[0, 0] == pytest.approx(1e-6 * np.exp(-1.0), rel=1e-12)
    assert done.metal_share[0, 0, 0] == pytest.approx(0.5, rel=1e-12)


def test_two_contacts_share_one_bath() -> None:
    """The rest is the mean of the ceilings weighed by the rates."""
    done = run(0.0, channel(2e-3, 4e-6), channel(1e-3, 1e-6), seconds=1e6)
    assert done.total[0, 0] == pytest.approx(3e-6, rel=1e-9)


def test_an_inventory_ends_and_is_not_passed() -> None:
    done = run(0.0, channel(1e-3, 1e-3, inventory=2e-7), seconds=1e5)
    assert done.ledger[0, 0, 0] == pytest.approx(2e-7, rel=1e-12)
    assert done.total[0, 0] == pytest.approx(2e-7, rel=1e-12)
    assert done.used[0, 0, 0] == pytest.approx(1.0)


def test_beyond_its_cap_a_content_grows_at_the_rate_of_the_cap() -> None:
    done = run(2e-6, channel(1e-3, 1e-5), cap=1e-6)
    assert done.x[0, 0] == pytest.approx(1e-6, rel=1e-12)
    assert done.total[0, 0] == pytest.approx(2e-6 + 1e-3 * (1e-5 - 1e-6) * 1000.0, rel=1e-12)


def test_what_nothing_touches_stays_but_for_its_cap() -> None:
    done = run(2e-6, cap=1e-6)
    assert done.total[0, 0] == 2e-6
    assert done.x[0, 0] == pytest.approx(1e-6, rel=1e-12)
    assert done.ledger.shape == (0, 1, 1)


def test_the_channel_that_moves_most_says_what_holds_back() -> None:
    done = run(0.0, channel(1e-2, 4e-6), channel(1e-9, 1e-6), seconds=1e5)
    which, ceiling, inventory, metal = shares(done)
    assert which[0] == 0
    assert ceiling[0] == pytest.approx(1.0, abs=1e-3)
    assert inventory[0] == 0.0
    assert metal[0] == pytest.approx(0.0, abs=1e-3)


rate = st.floats(1e-7, 1e-1)
content = st.floats(1e-12, 1e-3)


@settings(max_examples=60)
@given(
    content, st.lists(st.tuples(rate, content, content), min_size=1, max_size=4), content, st.floats(1.0, 1e6)
)
def test_ledgers_sum_to_the_change_and_no_wall_gives_more_than_it_holds(
    start: float, contacts: list[tuple[float, float, float]], cap: float, seconds: float
) -> None:
    done = run(
        start, *(channel(k, top, inventory=held) for k, top, held in contacts), cap=cap, seconds=seconds
    )
    gained = done.ledger.sum(axis=0)[0, 0]
    assert done.total[0, 0] - start == pytest.approx(gained, rel=1e-9, abs=1e-12 * start)
    assert done.total[0, 0] >= 0
    assert done.x[0, 0] <= cap * (1 + 1e-12)
    for c, (_, _, held) in enumerate(contacts):
        assert done.ledger[c, 0, 0] <= held * (1 + 1e-12)
    assert done.history is not None
    assert done.history[0, -1, 0] == pytest.approx(done.total[0, 0], rel=1e-9)


@pytest.mark.parametrize(("ceiling", "side"), [(1e-5, None), (1e-5, 1e-3), (1e-6, None)])
def test_it_agrees_with_the_bath_on_one_element(ceiling: float, side: float | None) -> None:
    """A ramp and a hold, 1 %: host 1e5 mol/m3, 4e-4 m2/mol."""
    cold, hot = np.array([1400.0]), np.array([1500.0])
    knots = np.concatenate([cold, hot])
    k = Curve(knots, np.log(np.array([[[2e-5], [4e-5]]])))
    top = np.log(np.array([[0.5 * ceiling], [ceiling]]))
    schedule = Schedule(np.array([0.0, 900.0, 2700.0]), np.array([1400.0, 1500.0, 1500.0]))
    g = None if side is None else Curve(knots, np.log(np.full((2, 1), side)) + top - np.log(4e-4))
    carrier = Carrier("unit", np.ones(1), Curve(knots, top), np.ones(1), g)
    case = Case(
        np.full((1, 1), 1e-7),
        np.array([1e5]),
        np.ones(1),
        schedule,
        (Exposure("c", np.array([4e-4]), k, (carrier,)),),
    )
    follower = Channel(
        Curve(knots, k.ln + np.log(4e-4 * 1e5)),
        Curve(knots, np.full((1, 2, 1), ENDLESS if side is None else np.log(side))),
        Curve(knots, top[np.newaxis]),
        np.full((1, 1), np.inf),
    )
    done = follow_along(
        np.full((1, 1), 1e-7), [follower], Curve(knots, np.full((1, 2, 1), ENDLESS)), schedule, nodes=16
    )
    assert done.total[0, 0] == pytest.approx(integrate(case, nodes=32).total[0, 0], rel=0.01)
