"""Chance and bands against statistical tables and a general library."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from purity.draws import Draws, normal
from purity.uncertainty import band, chance_of, difference

#: t_{0.975} by degrees of freedom: NIST/SEMATECH e-Handbook of Statistical Methods, section 1.3.6.7.2
#: (printed to three places), from memory.
STUDENT = {1: 12.706, 3: 3.182, 7: 2.365, 15: 2.131}


@pytest.mark.parametrize("freedom, t", STUDENT.items())
def test_the_half_width_is_student_t_times_the_standard_error(freedom: int, t: float) -> None:
    means = np.arange(freedom + 1.0)
    values = np.repeat(means, 4)
    _, error = difference(values, np.zeros_like(values), freedom + 1)
    assert error == pytest.approx(t * stats.sem(means), rel=0.0005 / t)


@pytest.mark.parametrize("n", [256, 2048, 10240])
def test_nothing_seen_in_n_draws_is_the_rule_of_three(n: int) -> None:
    """Hanley and Lippman-Hand, J. Am. Med. Assoc. 249 (1983) 1743: at most 3/n with 95 % confidence."""
    _, error = chance_of(np.zeros(n, dtype=bool), n // 256)
    assert error == pytest.approx(3 / n)
    assert error == pytest.approx(stats.beta.ppf(0.95, 1, n), rel=0.01)


def test_a_band_of_stratified_draws_is_that_of_the_law() -> None:
    """5 %, 50 % and 95 % points of a lognormal law from scipy.stats."""
    found = band(np.exp(0.7 * normal(Draws(seed=4, blocks=8), "x")[0]))
    law = stats.lognorm(0.7)
    for value, share in ((found.low, 0.05), (found.median, 0.5), (found.high, 0.95)):
        assert value == pytest.approx(law.ppf(share), rel=0.01)
