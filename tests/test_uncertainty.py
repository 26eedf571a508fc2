"""Bands, chances with their sampling error, differences on shared draws, drivers."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from purity.draws import Draws, normal
from purity.uncertainty import (
    Drivers,
    assumed_share,
    band,
    bands,
    chance,
    chance_of,
    difference,
    drivers,
    median_difference,
)

DRAWS = Draws(seed=3, blocks=8)


def test_band_of_one_draw_is_that_draw() -> None:
    found = band(np.array([2.5]))
    assert (found.low, found.median, found.high) == (2.5, 2.5, 2.5)


def test_band_refuses_what_is_not_finite() -> None:
    with pytest.raises(ValueError, match="nan"):
        band(np.array([1.0, np.nan, 2.0]))


@given(st.lists(st.floats(-1e6, 1e6), min_size=1, max_size=60))
def test_a_band_is_ordered_and_inside_its_values(values: list[float]) -> None:
    found = band(np.array(values))
    assert min(values) <= found.low <= found.median <= found.high <= max(values)


def test_bands_reduce_the_last_axis_only() -> None:
    values = np.arange(24.0).reshape(2, 3, 4)
    found = bands(values)
    assert found.shape == (3, 2, 3)
    one = band(values[1, 2])
    assert tuple(found[:, 1, 2]) == (one.low, one.median, one.high)


def test_a_content_at_its_limit_is_within_it() -> None:
    assert chance(np.full(512, 5.0), 5.0, 2)[0] == 0.0


@given(st.integers(0, 2048), st.integers(0, 2**32 - 1))
def test_the_sampling_error_is_never_zero(above: int, seed: int) -> None:
    event = np.zeros(2048, dtype=bool)
    event[np.random.default_rng(seed).permutation(2048)[:above]] = True
    found, error = chance_of(event, 8)
    assert found == pytest.approx(above / 2048)
    assert error >= 3 / 2048


def test_one_draw_says_nothing_of_a_chance() -> None:
    assert chance_of(np.array([True]), 1) == (1.0, 1.0)


def test_blocks_that_disagree_widen_the_error() -> None:
    event = np.zeros((8, 256), dtype=bool)
    event[:, :25] = True
    alike = chance_of(event.ravel(), 8)[1]
    event[:4, :50], event[4:] = True, False
    assert chance_of(event.ravel(), 8)[1] > 5 * alike


def test_the_error_covers_the_truth_about_as_often_as_it_says() -> None:
    """P(z1 + z2 > 2) = P(z > sqrt 2) = 0.0786496 (normal table, erfc(1)/2)."""
    inside = 0
    for seed in range(100):
        run = Draws(seed=seed, blocks=8)
        found, error = chance(normal(run, "a")[0] + normal(run, "b")[0], 2.0, 8)
        inside += abs(found - 0.0786496) <= error
    assert inside >= 89


def test_shared_draws_leave_no_noise_in_a_difference() -> None:
    noise = normal(DRAWS, "noise")[0]
    found, error = difference(noise + 0.25, noise, 8)
    assert found == pytest.approx(0.25)
    assert error < 1e-12
    assert median_difference(noise + 0.25, noise, 8) == pytest.approx((0.25, 0.0), abs=1e-12)


@given(st.integers(0, 2**32 - 1))
def test_a_difference_is_antisymmetric(seed: int) -> None:
    a, b = np.random.default_rng(seed).normal(size=(2, 512))
    there, back = difference(a, b, 2), difference(b, a, 2)
    assert there[0] == pytest.approx(-back[0])
    assert there[1] == pytest.approx(back[1])


def test_drivers_of_a_product_of_powers_are_its_exponents_squared() -> None:
    """ln y = 2 z1 + z2 has variance 5: shares 4/5 and 1/5 by construction."""
    z1, z2, idle = normal(DRAWS, "z1")[0], normal(DRAWS, "z2")[0], normal(DRAWS, "idle")[0]
    found = drivers({"idle": idle, "z2": z2, "z1": z1, "exact": np.zeros(1)}, np.exp(2 * z1 + z2))
    assert list(found.shares)[:2] == ["z1", "z2"]
    assert found.shares["z1"] == pytest.approx(0.8, abs=0.02)
    assert found.shares["z2"] == pytest.approx(0.2, abs=0.02)
    assert found.shares["idle"] < 1e-3
    assert found.shares["exact"] == 0.0
    assert found.explained == pytest.approx(1.0, abs=0.03)


def test_an_idle_input_stays_within_its_error() -> None:
    noise = np.random.default_rng(5).normal(size=DRAWS.n)
    z = normal(DRAWS, "z")[0]
    found = drivers({"z": z, "idle": normal(DRAWS, "idle")[0]}, np.exp(z + 2 * noise))
    assert found.shares["z"] == pytest.approx(0.2, abs=found.errors["z"] + 0.01)
    assert found.shares["idle"] <= found.errors["idle"]


def test_more_inputs_than_draws_can_part_still_give_the_largest() -> None:
    inputs = {f"z{j}": normal(Draws(seed=1, blocks=1), f"z{j}")[0] for j in range(100)}
    found = drivers(inputs, np.exp(inputs["z7"]))
    assert next(iter(found.shares)) == "z7"
    assert found.shares["z7"] == pytest.approx(1.0, abs=0.01)


def test_an_output_that_changes_sign_is_taken_as_it_is() -> None:
    z = normal(DRAWS, "z")[0]
    assert drivers({"z": z}, z).shares["z"] == pytest.approx(1.0)


def test_a_constant_output_has_no_drivers() -> None:
    assert drivers({"z": normal(DRAWS, "z")[0]}, np.full(DRAWS.n, 3.0)).explained == 0.0


def test_assumed_share_counts_only_assumed_inputs() -> None:
    found = Drivers({"leak": 0.6, "limit": 0.2}, {"leak": 0.0, "limit": 0.0}, 0.8)
    assert assumed_share(found, {"leak"}) == pytest.approx(0.75)
    assert assumed_share(Drivers({}, {}, 0.0), {"leak"}) == 0.0
