"""Impingement on a surface, particles in air and the particle limits of clean rooms."""

from __future__ import annotations

import numpy as np
import pytest

from purity.constants import N_AVOGADRO
from purity.kinetics.particles import class_limit, settling_velocity, slip
from purity.kinetics.transfer import impingement, mean_free_path, mean_speed, monolayer_time

TORR = 101325.0 / 760.0
N2 = 28.0e-3

# Kinetic theory example, N2 at 300 K, collision diameter 3.7 angstrom, as printed at
# www.enigmatic-consulting.com/semiconductor_processing/CVD_Fundamentals (table of one example).


def per_cm2(flux: float) -> float:
    """mol m-2 s-1 to molecules cm-2 s-1."""
    return float(flux) * N_AVOGADRO * 1e-4


@pytest.mark.parametrize(("torr", "printed"), [(0.1, 3.8e19), (760.0, 2.9e23)])
def test_impingement_of_nitrogen(torr: float, printed: float) -> None:
    assert per_cm2(impingement(torr * TORR, N2, 300.0)) == pytest.approx(printed, rel=0.02)


@pytest.mark.parametrize(
    ("M", "printed"),
    # J. F. O'Hanlon, A User's Guide to Vacuum Technology, Z = 3.513e22 p/sqrt(M T) at 1e-6 torr, 300 K
    # (N2, O2, H2O, Ar); from memory.
    [(28.014e-3, 3.83e14), (31.998e-3, 3.59e14), (18.015e-3, 4.78e14), (39.95e-3, 3.21e14)],
)
def test_impingement_at_a_millionth_of_a_torr(M: float, printed: float) -> None:
    assert per_cm2(impingement(1e-6 * TORR, M, 300.0)) == pytest.approx(printed, rel=0.003)


def test_speed_and_free_path_of_nitrogen() -> None:
    assert float(mean_speed(N2, 300.0)) == pytest.approx(470.0, rel=0.02)  # printed 47 000 cm/s
    assert float(mean_free_path(0.1 * TORR, 300.0, 3.7e-10)) == pytest.approx(500e-6, rel=0.04)
    assert float(mean_free_path(760 * TORR, 300.0, 3.7e-10)) == pytest.approx(70e-9, rel=0.05)


def test_free_path_of_air_times_pressure() -> None:
    # 0.0068 mbar cm at 20 degC: leakdetection-technology.com, what is the mean free path.
    product = float(mean_free_path(1.0, 293.15, 3.7e-10))  # m Pa; 1 mbar cm = 1 Pa m
    assert product == pytest.approx(0.0068, rel=0.04)


def test_a_monolayer_in_two_and_a_half_seconds() -> None:
    # 1e15 sites per cm2, N2 at 1e-6 torr and 300 K, sticking 1: 2.6 s (O'Hanlon; 1 langmuir), from memory.
    sites = 1e19 / N_AVOGADRO
    assert float(monolayer_time(1e-6 * TORR, 28.014e-3, 300.0, sites)) == pytest.approx(2.6, rel=0.01)


#: ISO 14644-1:2015, table 1, as reproduced at cleanroom.net/faqs: class, size in um, particles per m3.
ISO_14644_1 = [
    (1, 0.1, 10), (2, 0.1, 100), (2, 0.2, 24), (2, 0.3, 10), (3, 0.1, 1000), (3, 0.2, 237), (3, 0.3, 102),
    (3, 0.5, 35), (4, 0.1, 10000), (4, 0.2, 2370), (4, 0.3, 1020), (4, 0.5, 352), (4, 1.0, 83),
    (5, 0.1, 100000), (5, 0.2, 23700), (5, 0.3, 10200), (5, 0.5, 3520), (5, 1.0, 832), (6, 0.1, 1000000),
    (6, 0.2, 237000), (6, 0.3, 102000), (6, 0.5, 35200), (6, 1.0, 8320), (6, 5.0, 293), (7, 0.5, 352000),
    (7, 1.0, 83200), (7, 5.0, 2930), (8, 0.5, 3520000), (8, 1.0, 832000), (8, 5.0, 29300),
    (9, 0.5, 35200000), (9, 1.0, 8320000), (9, 5.0, 293000),
]  # fmt: skip


@pytest.mark.parametrize(("iso_class", "um", "printed"), ISO_14644_1)
def test_particle_limit_of_a_class(iso_class: int, um: float, printed: int) -> None:
    """The table gives three figures, whole numbers below 100."""
    exact = float(class_limit(iso_class, um * 1e-6))
    step = 1.0 if exact < 100 else 10.0 ** (np.floor(np.log10(exact)) - 2)
    assert abs(exact - printed) <= 0.51 * step


#: Seinfeld and Pandis, Atmospheric Chemistry and Physics (2006), table 9.3: diameter in um, slip factor.
SLIP = [
    (0.001, 216.0), (0.002, 108.0), (0.005, 43.6), (0.01, 22.2), (0.02, 11.4), (0.05, 4.95), (0.1, 2.85),
    (0.2, 1.865), (0.5, 1.326), (1.0, 1.164), (2.0, 1.082), (5.0, 1.032), (10.0, 1.016), (20.0, 1.008),
    (50.0, 1.003), (100.0, 1.0016),
]  # fmt: skip


@pytest.mark.parametrize(("um", "printed"), SLIP)
def test_slip_of_small_particles(um: float, printed: float) -> None:
    assert float(slip(um * 1e-6)) == pytest.approx(printed, rel=0.005)


def test_slip_of_a_particle_of_one_micrometre() -> None:
    # 1.15 at a free path of 0.066 um: University of Florida aerosol course, section 6c.
    assert float(slip(1e-6, 0.066e-6)) == pytest.approx(1.15, rel=0.015)


def test_settling_of_unit_density_spheres() -> None:
    # 1158.594 cm/h for 10 um, viscosity 1.72e-4 g/(cm s), Cc 1.016, g 980.7 cm/s2: worked solution of
    # Seinfeld and Pandis eq. 9.42 (rpubs 441898).
    fall = float(settling_velocity(10e-6, 1000.0, viscosity=1.72e-5))
    assert fall * 100 * 3600 == pytest.approx(1158.594, rel=0.001)


@pytest.mark.parametrize(("um", "printed"), [(1.0, 3.5e-5), (10.0, 3.06e-3)])
def test_settling_in_air(um: float, printed: float) -> None:
    # W. C. Hinds, Aerosol Technology, table of settling velocities, 20 degC; from memory.
    assert float(settling_velocity(um * 1e-6, 1000.0, viscosity=1.81e-5)) == pytest.approx(printed, rel=0.02)
