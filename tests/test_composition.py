"""Contents by mass, by mole and by volume turn into each other without loss."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from purity.composition import (
    concentration_from_mass,
    fraction_from_mass,
    fraction_from_ratio,
    grade,
    impurity_of_grade,
    mass_from_concentration,
    mass_from_fraction,
    mass_from_ratio,
    metals_total,
    nines,
    ratio_from_fraction,
    ratio_from_mass,
)
from purity.errors import OutOfRangeError

MASSES = np.array([15.999e-3, 55.845e-3, 1.008e-3])
HOST = 63.546e-3
contents = st.lists(st.floats(0, 0.2), min_size=3, max_size=3).map(np.array)
tiny = st.lists(st.floats(1e-30, 1e-3), min_size=3, max_size=3).map(np.array)


@given(contents)
def test_mass_and_ratio_undo_each_other(w: np.ndarray) -> None:
    back = mass_from_ratio(ratio_from_mass(w, MASSES, HOST), MASSES, HOST)
    np.testing.assert_allclose(back, w, rtol=1e-12, atol=1e-300)


@given(contents)
def test_mass_and_fraction_undo_each_other(w: np.ndarray) -> None:
    x = fraction_from_mass(w, MASSES, HOST)
    np.testing.assert_allclose(mass_from_fraction(x, MASSES, HOST), w, rtol=1e-10, atol=1e-300)
    assert x.sum() < 1


@given(tiny)
def test_traces_keep_their_digits(w: np.ndarray) -> None:
    r = ratio_from_mass(w, MASSES, HOST)
    np.testing.assert_allclose(ratio_from_fraction(fraction_from_ratio(r)), r, rtol=1e-12)
    np.testing.assert_allclose(r * (1 - w.sum()) / w, HOST / MASSES, rtol=1e-12)


@given(contents, st.floats(1e3, 2e4))
def test_concentration_undoes_itself(w: np.ndarray, density: float) -> None:
    c = concentration_from_mass(w, MASSES, density)
    np.testing.assert_allclose(mass_from_concentration(c, MASSES, density), w, rtol=1e-12, atol=1e-300)


def test_draws_stay_on_the_last_axis() -> None:
    w = np.array([[1e-6, 2e-6], [3e-6, 4e-6], [0.0, 1e-7]])
    r = ratio_from_mass(w, MASSES, HOST)
    assert r.shape == (3, 2)
    for j in range(2):
        np.testing.assert_allclose(r[:, j], ratio_from_mass(w[:, j], MASSES, HOST), rtol=1e-15)


def test_no_host_left_is_refused() -> None:
    with pytest.raises(OutOfRangeError, match="no host"):
        ratio_from_mass([0.6, 0.4], MASSES[:2], HOST)
    with pytest.raises(OutOfRangeError, match="no host"):
        ratio_from_fraction([1.0])


def test_metals_leave_gas_formers_out() -> None:
    assert metals_total({"Fe": 1e-6, "O": 5e-6, "S": 2e-6, "Ag": 3e-6}) == pytest.approx(4e-6)


@given(st.integers(1, 9), st.integers(0, 8))
def test_a_grade_names_its_own_border(whole: int, tenths: int) -> None:
    text = f"{whole}N{tenths or ''}"
    assert grade(impurity_of_grade(text)) == text


@given(st.floats(1e-9, 1e-2))
def test_a_grade_is_met(impurity: float) -> None:
    assert impurity <= impurity_of_grade(grade(impurity)) * (1 + 1e-9)


@pytest.mark.parametrize("text", ["5", "N5", "5N9", "0N", "5N85", "five nines"])
def test_what_is_no_grade_is_refused(text: str) -> None:
    with pytest.raises(OutOfRangeError, match="no grade"):
        impurity_of_grade(text)


@pytest.mark.parametrize("impurity", [0.0, -1e-6, 2.0])
def test_no_nines_without_an_impurity(impurity: float) -> None:
    with pytest.raises(OutOfRangeError):
        nines(impurity)
    with pytest.raises(OutOfRangeError):
        grade(impurity)
