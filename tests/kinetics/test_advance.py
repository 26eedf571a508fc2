"""One step of a lot: liquid, solid or stored, and what it hands to the next step."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from purity.errors import OutOfRangeError
from purity.kinetics.advance import HELD_BACK_BY, Host, State, advance
from purity.kinetics.bath import Case, integrate
from purity.kinetics.exposure import Carrier, Curve, Exposure, Film, Skin
from purity.kinetics.films import content
from purity.kinetics.schedule import Schedule, hold
from purity.scenario import Form

Array = NDArray[np.float64]
T, DRAWS = 1500.0, 40
LIQUID = Host("liquid", np.array([1e5]), np.array([10.0]))
HOUR = hold(T, 3600.0)


def flat(ln: float | Array) -> Curve:
    return Curve(np.array([T]), np.atleast_1d(ln)[None])


def contact(name: str, *carriers: Carrier, area: float = 4e-3, skins: tuple[Skin, ...] = (), films=()):
    exchange = Curve(np.array([T]), np.full((2, 1, 1), np.log(3e-5)))
    return Exposure(name, np.array([area]), exchange, carriers, skins, films)


SPREAD = np.linspace(-1.0, 1.0, DRAWS)
OXIDE = Carrier("MO", np.ones(2), flat(-25.0 + SPREAD), np.ones(1))
VAPOUR = Carrier(
    "M leaves", np.array([1.0, 0.0]), flat(2.0), np.zeros(1), flat(2.0 + SPREAD), None, "surface"
)
METAL = Carrier("M", np.array([1.0, 0.0]), flat(-12.0), np.ones(1))
START = State(np.array([[1e-6], [1e-5]]), np.zeros((2, 1)))


def total(state: State) -> Array:
    bound = 0.0 if state.surface is None else state.surface
    return np.asarray(state.x + state.suspended + bound)


def test_bath_widens_to_the_draws_of_its_contacts() -> None:
    done = advance(START, LIQUID, None, HOUR, [contact("wall", OXIDE), contact("gas", VAPOUR)])
    assert done.state.x.shape == (2, DRAWS)
    assert done.ledger.shape == (2, 2, DRAWS)
    assert done.shares.shape == (len(HELD_BACK_BY), 2, DRAWS)
    assert done.ledger.sum(axis=0) == pytest.approx(total(done.state) - START.x, rel=1e-9, abs=1e-20)
    assert done.keep is None
    assert not done.flags.any()
    assert not done.attacked.any()
    assert 0 < done.error < 1e-3


def test_bath_is_what_the_integrator_gives() -> None:
    exposures = (contact("wall", OXIDE), contact("gas", VAPOUR))
    start = np.repeat(START.x, DRAWS, axis=1)
    path = integrate(Case(start, LIQUID.molar_density, LIQUID.amount, HOUR, exposures))
    assert np.array_equal(advance(START, LIQUID, None, HOUR, exposures).state.x, path.x)


def test_melting_folds_in_what_was_suspended_and_at_the_surface() -> None:
    before = State(START.x, np.array([[2e-6], [0.0]]), surface=np.array([[0.0], [3e-6]]))
    done = advance(before, LIQUID, None, HOUR, [])
    assert done.state.x[:, 0] == pytest.approx([3e-6, 1.3e-5], rel=1e-12)
    assert done.state.surface is None
    assert not done.shares.any()


def test_linear_bath_comes_with_its_map() -> None:
    done = advance(START, LIQUID, None, HOUR, [contact("wall", METAL), contact("gas", VAPOUR)])
    assert done.keep is not None
    assert done.gain is not None
    assert done.keep * START.x + done.gain == pytest.approx(done.state.x, rel=1e-12)
    assert done.error == 0.0


def test_shares_sum_to_one_where_there_is_a_pickup() -> None:
    done = advance(START, LIQUID, None, HOUR, [contact("gas", VAPOUR)])
    assert done.shares[:, 0].sum(axis=0) == pytest.approx(1.0)
    assert done.shares[HELD_BACK_BY.index("surface"), 0].min() > 0
    assert not done.shares[:, 1].any()


def test_history_ends_where_the_step_does() -> None:
    course = Schedule(np.array([0.0, 600.0, 3600.0]), np.array([1400.0, T, T]))
    done = advance(START, LIQUID, None, course, [contact("wall", OXIDE)], history=True, nodes=16)
    assert done.history is not None
    assert done.times is not None
    assert done.history.shape == (2, 33, DRAWS)
    assert done.times[[0, -1]] == pytest.approx([0.0, 3600.0])
    assert done.history[..., -1, :] == pytest.approx(total(done.state), rel=1e-9)
    assert np.array_equal(done.history[:, 0], np.repeat(START.x, DRAWS, axis=1))


def test_removal_takes_a_share_of_a_skin_and_says_so() -> None:
    skin = Skin("MO", np.ones(2), flat(-27.0))
    shut = contact("cover", skins=(skin,))
    kept = advance(State(np.full((2, 1), 1e-5), np.zeros((2, 1))), LIQUID, None, HOUR, [shut])
    skimmed = advance(
        State(np.full((2, 1), 1e-5), np.zeros((2, 1))),
        LIQUID,
        None,
        HOUR,
        [shut],
        removal={"MO": np.array([0.75]), "other": np.ones(1)},
    )
    assert kept.formed == ("MO",)
    assert kept.state.x[0, 0] == pytest.approx(np.exp(-13.5), rel=1e-9)
    assert skimmed.state.suspended == pytest.approx(kept.state.suspended / 4, rel=1e-9)
    assert skimmed.state.x == pytest.approx(kept.state.x)
    assert skimmed.ledger.shape == (2, 2, 1)
    assert skimmed.ledger.sum(axis=0) == pytest.approx(total(skimmed.state) - 1e-5, rel=1e-12)


SLAB = Form("slab", 1e-3, 1.0, 1e-3)
SOLID = Host("solid", np.array([1e5]), np.array([100.0]), Curve(np.array([T]), np.full((2, 1, 1), -25.0)))
TARNISH = Film("MO", np.array([0.0, 2e4]), "parabolic", (flat(np.log(1e-18)),))


def test_solid_takes_up_by_diffusion() -> None:
    done = advance(START, SOLID, SLAB, HOUR, [contact("gas", METAL, area=1.0)])
    assert done.state.profile is not None
    assert START.x[0, 0] < done.state.x[0].mean() < np.exp(-12.0)
    assert done.state.x[1] == pytest.approx(1e-5)
    assert done.ledger.sum(axis=0) == pytest.approx(total(done.state) - START.x, abs=1e-15)
    assert done.shares[:, 0].sum(axis=0) == pytest.approx(1.0)
    again = advance(done.state, SOLID, SLAB, HOUR, [contact("gas", METAL, area=1.0)])
    assert again.state.x[0].mean() > done.state.x[0].mean()


def test_films_carry_on_from_step_to_step_and_melt_into_the_bath() -> None:
    stored = contact("air", area=2.0, films=(TARNISH,))
    one = advance(START, SOLID, None, HOUR, [stored])
    two = advance(one.state, SOLID, None, HOUR, [stored])
    assert one.state.film is not None
    assert two.state.film is not None
    assert two.state.films == ("MO",)
    assert two.state.film[0, 0] == pytest.approx(np.sqrt(2 * 1e-18 * 3600.0), rel=1e-12)
    assert two.state.surface is not None
    assert two.state.surface == pytest.approx(content(TARNISH, two.state.film[0], 2.0, 100.0), rel=1e-12)
    assert one.shares[HELD_BACK_BY.index("film growth"), 1] == pytest.approx(1.0)
    assert one.ledger.sum(axis=0) == pytest.approx(total(one.state) - START.x, abs=1e-18)
    melted = advance(two.state, LIQUID, None, HOUR, [])
    assert melted.state.x == pytest.approx(total(two.state), rel=1e-12)
    assert melted.state.film is None


def test_solid_needs_a_form() -> None:
    with pytest.raises(OutOfRangeError, match="form"):
        advance(START, SOLID, None, HOUR, [contact("gas", METAL)])


def test_nothing_met_is_nothing_gained() -> None:
    done = advance(START, SOLID, SLAB, HOUR, [])
    assert np.array_equal(done.state.x, START.x)
    assert done.ledger.shape == (0, 2, 1)


def test_first_look_gives_the_same_contents_without_error_and_shares() -> None:
    exposures = [contact("wall", OXIDE), contact("gas", VAPOUR)]
    full = advance(START, LIQUID, None, HOUR, exposures)
    quick = advance(START, LIQUID, None, HOUR, exposures, check=False)
    assert np.array_equal(quick.state.x, full.state.x)
    assert quick.error == 0.0
    assert not quick.shares.any()
