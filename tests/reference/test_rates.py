"""Rates of arrival, settling and freezing against published figures."""

from __future__ import annotations

import numpy as np
import pytest

from purity.constants import N_AVOGADRO
from purity.kinetics.casting import chvorinov_time, partition, scheil
from purity.kinetics.particles import class_limit, settling_velocity, slip
from purity.kinetics.transfer import (
    gas_diffusivity,
    impingement,
    mean_free_path,
    mean_speed,
    monolayer_time,
    stirred_surface,
)

TORR = 101325.0 / 760.0
PER_CM2 = N_AVOGADRO * 1e-4


@pytest.mark.parametrize(("torr", "expected"), [(0.1, 3.8e19), (760.0, 2.9e23)])
def test_impingement_of_nitrogen(torr: float, expected: float) -> None:
    """Kinetic theory example (N2, 300 K), enigmatic-consulting.com, CVD fundamentals; two digits printed."""
    assert impingement(torr * TORR, 0.028, 300.0) * PER_CM2 == pytest.approx(expected, rel=0.02)


@pytest.mark.parametrize(
    ("M", "expected"),
    [(28.014, 3.83e14), (31.998, 3.59e14), (18.015, 4.78e14), (39.95, 3.21e14)],
)
def test_impingement_at_a_millionth_of_a_torr(M: float, expected: float) -> None:
    """3.51e22 p/sqrt(M T) at 300 K (O'Hanlon, A User's Guide to Vacuum Technology); memory."""
    assert impingement(1e-6 * TORR, M * 1e-3, 300.0) * PER_CM2 == pytest.approx(expected, rel=3e-3)


@pytest.mark.parametrize(
    ("p", "T", "M", "expected"),
    [(1.0, 298.15, 0.0280134, 0.0478732), (1e-3, 1500.0, 0.0319988, 1.997e-5)],
)
def test_impingement_in_moles(p: float, T: float, M: float, expected: float) -> None:
    """P/sqrt(2 pi M R T) with the 2018 constants, worked by hand."""
    assert impingement(p, M, T) == pytest.approx(expected, rel=2e-4)


def test_monolayer_time() -> None:
    """2.6 s at 1e-6 torr of N2, 300 K, 1e15 sites/cm2 (O'Hanlon); memory."""
    assert monolayer_time(1e-6 * TORR, 0.028014, 300.0, 1e19 / N_AVOGADRO) == pytest.approx(2.6, rel=0.01)


def test_mean_speed_and_free_path() -> None:
    """N2 at 300 K: 47,000 cm/s; 3.7 A: 500 um at 0.1 torr, 70 nm at 760 torr (same example)."""
    assert mean_speed(0.028, 300.0) == pytest.approx(470.0, rel=0.02)
    assert mean_free_path(0.1 * TORR, 300.0, 3.7e-10) == pytest.approx(500e-6, rel=0.04)
    assert mean_free_path(760 * TORR, 300.0, 3.7e-10) == pytest.approx(70e-9, rel=0.05)


@pytest.mark.parametrize(
    ("T", "expected"), [(373.15, 2.85e-5), (473.15, 4.30e-5), (573.15, 6.00e-5), (673.15, 7.93e-5)]
)
def test_diffusivity_of_oxygen_in_argon(T: float, expected: float) -> None:
    """CRC Handbook, diffusion of gases, O2-Ar at 101.325 kPa, from its 1.87e-5 m2/s at 293.15 K."""
    assert gas_diffusivity(1.87e-5, T, 101325.0, T_ref=293.15) == pytest.approx(expected, rel=0.025)


@pytest.mark.parametrize(
    ("micrometre", "expected"),
    [(0.01, 22.2), (0.05, 4.95), (0.1, 2.85), (0.5, 1.326), (1.0, 1.164), (10.0, 1.016), (100.0, 1.0016)],
)
def test_slip_factor(micrometre: float, expected: float) -> None:
    """Seinfeld and Pandis 2006, table 9.3, as reproduced at rstudio-pubs 441898."""
    assert slip(micrometre * 1e-6) == pytest.approx(expected, rel=0.01)


def test_settling_in_air() -> None:
    """1158.594 cm/h for 10 um of unit density, 1.72e-4 P, g 980.7, slip 1.016 (same page, their eq. 9.42)."""
    v = settling_velocity(1e-5, 1000.0, viscosity=1.72e-5, gravity=9.807)
    assert v * 3600 * 100 == pytest.approx(1158.594, rel=1e-3)


@pytest.mark.parametrize(("micrometre", "expected"), [(1.0, 3.5e-5), (10.0, 3.06e-3)])
def test_settling_table(micrometre: float, expected: float) -> None:
    """Hinds, Aerosol Technology, unit density in air of 20 degC; memory."""
    assert settling_velocity(micrometre * 1e-6, 1000.0) == pytest.approx(expected, rel=0.02)


@pytest.mark.parametrize(
    ("iso_class", "micrometre", "limit"),
    [
        (1, 0.1, 10),
        (3, 0.3, 102),
        (4, 0.5, 352),
        (5, 0.5, 3520),
        (5, 1.0, 832),
        (6, 5.0, 293),
        (7, 0.5, 352_000),
        (8, 1.0, 832_000),
        (9, 5.0, 293_000),
    ],
)
def test_clean_room_classes(iso_class: int, micrometre: float, limit: int) -> None:
    """ISO 14644-1:2015, table 1 (as reproduced at cleanroom.net), three figures printed."""
    assert class_limit(iso_class, micrometre * 1e-6) == pytest.approx(limit, rel=5e-3)


def test_surface_of_an_induction_melt() -> None:
    """Machlin's rigid flow: 1.6e-4 m/s for D 5e-9 m2/s, 0.1 m/s, radius 5 cm; formula from memory."""
    assert stirred_surface(5e-9, 0.1, 0.05) == pytest.approx(1.596e-4, rel=1e-3)


def test_effective_partition() -> None:
    """Burton, Prim and Slichter 1953: at v d/D = ln 9 k 0.1 becomes 0.5; worked by hand."""
    assert partition(0.1, np.log(9.0) * 1e-8 / 1e-3, 1e-3, 1e-8) == pytest.approx(0.5, rel=1e-12)


def test_normal_freezing() -> None:
    """Scheil: k 0.3, half frozen, solid at 0.3 * 0.5^-0.7 = 0.4874 of the mean; worked by hand."""
    assert scheil(0.3, 0.5) == pytest.approx(0.4874, abs=1e-4)


def test_chvorinov() -> None:
    """Sand casting, 2.0 min/cm2: a cube of 10 cm (V/A 1.667 cm) freezes in 5.6 min; worked by hand."""
    assert chvorinov_time(120.0 / 1e-4, 1e-3, 6e-2) / 60 == pytest.approx(5.56, abs=0.01)
