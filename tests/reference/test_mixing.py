"""Mixing thermodynamics against textbook examples. Sources stand beside each value.

Values of D. R. Gaskell, Introduction to the Thermodynamics of Materials (4th ed.), are quoted from memory of
its answers section; each was recomputed and falls inside the tolerance used.
"""

from __future__ import annotations

import numpy as np
import pytest

from purity.constants import R
from purity.driving_force import solution


def test_ideal_entropy_of_mixing() -> None:
    """R ln 2 for an equimolar mixture. Gaskell, section 9.4 (from memory): 5.763 J/(mol K)."""
    g = solution.mixing(solution.ideal(), 0.5, 0.5, 1.0)
    assert float(-g) == pytest.approx(5.763, abs=5e-4)


def test_ideal_gibbs_energy_of_mixing() -> None:
    """-RT ln 2 at 1000 K (identity): -5763.1 J/mol."""
    assert float(solution.mixing(solution.ideal(), 0.5, 0.5, 1000.0)) == pytest.approx(-5763.1, abs=0.5)


def test_slope_at_one_in_a_million_with_strong_repulsion() -> None:
    """Omega = +50 kJ/mol, 1000 K, x = 1e-6: -64.87 kJ/mol (derived).

    That the curve starts vertically at the pure component: D. A. Porter, K. E. Easterling, Phase
    Transformations in Metals and Alloys, section 1.3.4 (from memory).
    """
    slope = solution.slope(solution.regular(50e3), 1 - 1e-6, 1e-6, 1000.0)
    assert float(slope) == pytest.approx(-64870.0, abs=10.0)


@pytest.mark.parametrize(
    "omega", [-50e3, 0.0, 20e3, 150e3], ids=["negative", "zero", "positive", "strongly positive"]
)
def test_slope_diverges_at_the_pure_end(omega: float) -> None:
    """Common practice, no source: no finite repulsion stops the first trace from dissolving.

    Each decade of dilution lowers the slope by RT ln 10, 19.145 kJ/mol at 1000 K, without end.
    """
    x = 10.0 ** -np.arange(10, 31)
    slope = solution.slope(solution.regular(omega), 1 - x, x, 1000.0)
    assert np.diff(slope) == pytest.approx(-19144.8, abs=0.1)
    assert slope[-1] < -300e3


def test_a_decade_of_dilution() -> None:
    """slope(1e-7) - slope(1e-6) = -RT ln 10 (identity): -19.145 kJ/mol."""
    model = solution.regular(50e3)
    x = np.array([1e-6, 1e-7])
    high, low = solution.slope(model, 1 - x, x, 1000.0)
    assert low - high == pytest.approx(-19145.0, abs=2.0)


def test_critical_temperature_of_a_regular_solution() -> None:
    """Tc = beta / 2R, beta = 5 kJ/mol: 300.7 K.

    scipython.com/blog/the-miscibility-of-a-regular-solution (formula looked up, its R = 8.314).
    """
    model = solution.regular(5000.0)
    assert np.isnan(solution.miscibility_gap(model, 300.7 * 1.001)[0])
    assert np.isfinite(solution.miscibility_gap(model, 300.7 * 0.999)[0])


def test_spinodal_at_three_quarters_of_the_critical_temperature() -> None:
    """x (1 - x) = RT / 2 Omega: 0.25 and 0.75 (derived). Definition: IUPAC Gold Book, spinodal, ST07274."""
    low, high = solution.spinodal(solution.regular(2 * R * 1000.0), 750.0)
    assert (float(low), float(high)) == pytest.approx((0.25, 0.75), abs=1e-9)


def test_binodal_at_omega_three_rt() -> None:
    """0.0707 (derived). The curve for alpha = 3 in Gaskell shows about 0.07 and 0.93 (from memory)."""
    left, right = solution.miscibility_gap(solution.regular(3 * R * 1000.0), 1000.0)
    assert (float(left), float(1 - right)) == pytest.approx((0.0707, 0.9293), abs=1e-4)


def test_oxide_melt_from_the_solid() -> None:
    """1 mol Cr2O3 at 2500 K into a large ideal Al2O3 melt, x = 0.2. Gaskell, problem 9.1 (from memory).

    dS = dS_fus - R ln x = 59.63 J/(mol K), with dS_fus = 107500 J/mol / 2324 K.
    """
    partial = solution.partial(solution.ideal(), 0.8, 0.2, 2500.0)[1]
    assert 107500.0 / 2324.0 - float(partial) / 2500.0 == pytest.approx(59.63, rel=2e-3)


def test_manganese_activity_coefficient_by_transpiration() -> None:
    """1.50 g Mn in 1 mol Ar over Fe-Mn, x = 0.5, 1863 K: gamma = 1.08. Gaskell, problem 9.2 (from memory)."""
    moles = 1.50 / 54.938
    pressure = moles / (1.0 + moles)
    pure = np.exp(-33440.0 / 1863.0 - 3.02 * np.log(1863.0) + 37.68)
    gamma = pressure / pure / 0.5
    assert gamma == pytest.approx(1.08, rel=1e-2)
    # The interaction parameter of the next problem gives the same coefficient.
    of_mn = solution.ln_gamma(solution.regular(4396.0), 0.5, 0.5, 1863.0)[1]
    assert float(np.exp(of_mn)) == pytest.approx(1.08, rel=1e-2)


def test_regular_iron_manganese() -> None:
    """Omega = 4396 J/mol, x_Mn = 0.4, 1863 K: -9370 J/mol. Gaskell, problem 9.3 (from memory).

    The same problem at x_Mn = 0.6: excess partial energies 703 J (Mn) and 1583 J (Fe).
    """
    model = solution.regular(4396.0)
    assert float(solution.mixing(model, 0.6, 0.4, 1863.0)) == pytest.approx(-9370.0, rel=2e-3)
    fe, mn = solution.ln_gamma(model, 0.4, 0.6, 1863.0)
    assert float(mn) * R * 1863.0 == pytest.approx(703.0, abs=1.0)
    assert float(fe) * R * 1863.0 == pytest.approx(1583.0, abs=1.0)


def test_lead_tin() -> None:
    """a_Pb = 0.055 at x_Pb = 0.1, 746 K: Omega = -4578 J/mol; a_Sn = 0.418 at x = 0.5, 773 K.

    Gaskell, problem 9.5 (from memory).
    """
    a_pb = solution.activity(solution.regular(-4578.0), 0.9, 0.1, 746.0)[1]
    assert float(a_pb) == pytest.approx(0.055, rel=1e-3)
    a_sn = solution.activity(solution.regular(-4578.0), 0.5, 0.5, 773.0)[0]
    assert float(a_sn) == pytest.approx(0.418, rel=2e-3)


def test_henrian_tin_in_cadmium() -> None:
    """ln gamma = -840/T + 1.58: heat of solution -840 R; 1 mol Sn in 99 mol Cd (29.5 J/(mol K)): +2.37 K.

    Gaskell, problem 9.8 (from memory).
    """
    up, down = 500.5, 499.5
    high, low = (
        float(solution.ln_gamma(solution.Dilute(-840.0 / t + 1.58), 0.99, 0.01, t)[1]) for t in (up, down)
    )
    heat = R * (high - low) / (1 / up - 1 / down)
    assert -heat / (100 * 29.5) == pytest.approx(2.37, rel=3e-3)


def test_driving_force_from_the_pure_substance_to_one_ppm() -> None:
    """RT ln 1e-6: 34.248 kJ/mol at 298.15 K, 114.87 kJ/mol at 1000 K (identity)."""
    assert float(solution.driving_force(np.log(1e-6), 0.0, 298.15)) == pytest.approx(34248.0, abs=3.0)
    assert float(solution.driving_force(np.log(1e-6), 0.0, 1000.0)) == pytest.approx(114870.0, abs=10.0)
