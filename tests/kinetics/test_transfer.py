"""Coefficients of transfer: limits, limits of the limits, and how they scale."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from purity.kinetics import casting, particles, transfer
from purity.kinetics.transfer import (
    aperture,
    chamber_pressure,
    exchange,
    free_molecular,
    gas_diffusivity,
    gas_film,
    horizontal_face,
    impingement,
    in_series,
    membrane_flux,
    monolayer_time,
    penetration,
    permeation_conductance,
    plate,
    pump_down,
    rayleigh,
    rescale,
    rotating_disc,
    shares_in_series,
    sphere,
    stagnant_film,
    stirred_surface,
    surface_renewal,
    time_lag,
    tube,
    uptake_share,
    vertical_wall,
)

positive = st.floats(1e-6, 1e6)


def test_conductance_of_a_surface_is_impingement_at_one_bar() -> None:
    assert free_molecular(0.3, 0.032, 1500.0) == pytest.approx(0.3 * float(impingement(1e5, 0.032, 1500.0)))


def test_gas_film_of_a_layer_at_rest() -> None:
    """D P0/(L R T): 2e-5 m2/s over 1 cm at 298.15 K, worked by hand."""
    assert stagnant_film(2e-5, 0.01, 298.15) == pytest.approx(
        2e-5 / 0.01 * 1e5 / (8.314462618 * 298.15), rel=1e-12
    )
    assert gas_film(2.0, 2e-5, 0.01, 298.15) == pytest.approx(2 * float(stagnant_film(2e-5, 0.01, 298.15)))


def test_sherwood_numbers_at_rest_and_in_a_stream() -> None:
    assert sphere(0.0, 1000.0) == pytest.approx(2.0)
    assert plate(5e5 * (1 - 1e-12), 1.0) == pytest.approx(float(plate(5e5 * (1 + 1e-12), 1.0)), rel=1e-6)
    assert plate(1e7, 1.0) > 0.664 * np.sqrt(1e7)
    assert vertical_wall(0.0, 1.0) == pytest.approx(0.825**2)
    assert horizontal_face(0.0) == pytest.approx(1.0)


def test_churchill_and_chu_near_its_laminar_form() -> None:
    """0.68 + 0.670 Ra^1/4 / (1 + (0.492/Sc)^(9/16))^(4/9) for Ra < 1e9 (same paper), within 10 %."""
    Ra, Sc = 1e7, 100.0
    laminar = 0.68 + 0.670 * Ra**0.25 / (1 + (0.492 / Sc) ** (9 / 16)) ** (4 / 9)
    assert vertical_wall(Ra, Sc) == pytest.approx(laminar, rel=0.1)


@settings(deadline=None)
@given(positive, positive, positive)
def test_series_is_below_its_parts_and_shares_sum(a: float, b: float, c: float) -> None:
    whole = in_series(a, b, c)
    assert whole <= min(a, b, c) * (1 + 1e-12)
    shares = shares_in_series(a, b, c)
    assert shares.sum() == pytest.approx(1.0)
    assert shares[0] == pytest.approx(float(whole) / a)
    assert in_series(a, 0.0) == 0.0
    assert in_series(a, np.inf) == pytest.approx(a)


def test_how_stirred_melts_scale_with_diffusivity() -> None:
    """Renewed surfaces follow the root of D (Danckwerts, Higbie, Machlin)."""
    for law in (
        lambda D: surface_renewal(D, 2.0),
        lambda D: penetration(D, 0.5),
        lambda D: stirred_surface(D, 0.1, 0.05),
    ):
        assert law(4e-9) == pytest.approx(2 * float(law(1e-9)))
    assert rotating_disc(8e-9, 1e-6, 10.0) == pytest.approx(4 * float(rotating_disc(1e-9, 1e-6, 10.0)))
    assert rescale(1e-4, 8e-9, 1e-9) == pytest.approx(4e-4)
    assert exchange(2.0, 1e-9, 1e-3) == pytest.approx(2e-6)


def test_rayleigh_number_grows_with_the_cube_of_length() -> None:
    assert rayleigh(1e-3, 0.2, 1e-6, 1e-9) == pytest.approx(8 * float(rayleigh(-1e-3, 0.1, 1e-6, 1e-9)))


def test_pump_and_leak() -> None:
    """Surface and pump share a load by their speeds."""
    area, M, T, pump = 0.01, 0.028, 300.0, 0.5
    share = float(uptake_share(0.2, area, M, T, pump))
    p = float(chamber_pressure(1e-5, pump, 0.2 * float(aperture(area, M, T))))
    assert p * pump / 1e-5 == pytest.approx(1 - share)
    assert pump_down(1e5, 0.1, pump, 1e-5, 1e6) == pytest.approx(2e-5)
    assert pump_down(1e5, 0.1, pump, 0.0, 0.2) == pytest.approx(1e5 / np.e)


def test_long_tube_in_molecular_flow() -> None:
    """Long tube pi d^3 v / (12 L) (Knudsen 1909)."""
    v = float(transfer.mean_speed(0.028, 293.0))
    assert tube(0.01, 10.0, 0.028, 293.0) == pytest.approx(np.pi * 1e-6 * v / (12 * 10.0), rel=2e-3)
    assert tube(0.01, 0.0, 0.028, 293.0) == pytest.approx(float(aperture(np.pi * 0.01**2 / 4, 0.028, 293.0)))


def test_permeation_is_ficks_law_per_unit_activity() -> None:
    assert permeation_conductance(1e-12, 5e-5) == pytest.approx(1e-12 * 1e5 / 5e-5)
    assert membrane_flux(1e-9, 2.0, 1.0, 1e-3) == pytest.approx(1e-6)
    assert time_lag(1e-12, 1e-4) == pytest.approx(1e-8 / 6e-12)
    assert monolayer_time(1e-4, 0.028, 300.0, 1.7e-5, 0.5) == pytest.approx(
        2 * float(monolayer_time(1e-4, 0.028, 300.0, 1.7e-5))
    )


def test_gas_diffusivity_over_pressure_and_temperature() -> None:
    assert gas_diffusivity(2e-5, 596.3, 101325.0 / 2, T_ref=298.15) == pytest.approx(2e-5 * 2**1.75 * 2)


@settings(deadline=None)
@given(st.floats(1e-9, 1e-4))
def test_small_particles_slip(d: float) -> None:
    assert particles.slip(d) > 1.0
    assert particles.slip(d) > particles.slip(2 * d)
    assert particles.settling_velocity(2 * d, 1000.0) > particles.settling_velocity(d, 1000.0)


def test_light_particles_rise() -> None:
    assert particles.settling_velocity(1e-5, 3000.0, viscosity=5e-3, fluid_density=7000.0, free_path=None) < 0


@settings(deadline=None)
@given(st.floats(0.01, 5.0), st.floats(0.0, 0.9), st.floats(0.01, 0.1))
def test_segregation_conserves_the_impurity(k: float, start: float, width: float) -> None:
    total = casting.scheil_mean(k, 0.0, 1.0)
    assert total == pytest.approx(1.0)
    part = casting.scheil_mean(k, start, start + width)
    ends = sorted((float(casting.scheil(k, start)), float(casting.scheil(k, start + width))))
    assert ends[0] * (1 - 1e-9) <= part <= ends[1] * (1 + 1e-9)


@settings(deadline=None)
@given(st.floats(0.001, 20.0), st.floats(0.0, 1e-4))
def test_effective_partition_lies_between_its_ends(k: float, velocity: float) -> None:
    k_e = float(casting.partition(k, velocity, 1e-3, 1e-8))
    low, high = sorted((k, 1.0))
    assert low - 1e-12 <= k_e <= high + 1e-12
    assert casting.partition(k, 0.0, 1e-3, 1e-8) == pytest.approx(k)


def test_worst_position_moves_with_the_crop() -> None:
    assert casting.worst_position(0.1, 0.1) < casting.worst_position(0.1, 0.0)
    assert casting.worst_position(2.0) == pytest.approx(2.0)
    assert casting.enrichment(0.1, 0.0) == pytest.approx(1 / 0.9)
    assert casting.enrichment(0.1, 1.0) == pytest.approx(1.0)
