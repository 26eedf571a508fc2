"""Diffusion in solids against published values and worked examples.

Origin of the figures: "documentation" are worked examples that print seven digits, in the documentation of
the open library polykin (pages of its diffusion functions, after Crank, The Mathematics of Diffusion, 2nd ed.
1975, pages named below); Callister is W. D. Callister, Materials Science and Engineering: an Introduction,
chapter 5, inputs as in the open companion FOSSEE Scilab-TBC-Uploads 539/CH5. "Memory" marks a textbook value
recalled.
"""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import brentq

from purity.kinetics.arrhenius import hart, rate
from purity.kinetics.laplace import (
    half_space,
    half_space_content,
    half_space_surface,
    impedance,
    time_to,
    uptake,
)
from purity.kinetics.march import Surface, march
from purity.kinetics.modes import basis, profile
from purity.kinetics.schedule import geometric
from purity.kinetics.transfer import membrane_flux, time_lag

HOUR = 3600.0


def steps(Fo: float, n: int = 64) -> np.ndarray:
    return np.diff(geometric(n, 0.005))[:, None] * Fo


@pytest.mark.parametrize(
    ("shape", "Fo", "Bi", "expected", "tolerance"),
    [
        ("slab", 1e-10 * 100 / 4e-8, np.inf, 0.5622335, 1e-7),  # documentation, Crank p. 48
        (
            "slab",
            1e-11 * 500 / 4e-8,
            np.inf,
            0.398928,
            6e-7,
        ),  # documentation, Crank p. 48; six digits printed
        ("sphere", 0.25, np.inf, 0.9484369, 1e-7),  # documentation, Crank p. 91
        ("sphere", 0.1, np.inf, 0.7704787, 1e-7),  # documentation, Crank p. 91
        ("slab", 0.125, 20.0, 0.3528862, 1e-7),  # documentation, Crank p. 60
        ("sphere", 0.1, 10.0, 0.6539883, 1e-6),  # documentation, Crank p. 96; its series is cut at 2e-7
    ],
)
def test_uptake_printed_after_crank(
    shape: str, Fo: float, Bi: float, expected: float, tolerance: float
) -> None:
    assert uptake(shape, Fo, Bi, nodes=20)[0] == pytest.approx(expected, abs=tolerance)


@pytest.mark.parametrize(
    ("shape", "expected"),
    [("slab", 0.3145542), ("sphere", 0.8304935)],  # documentation, Crank p. 47 and p. 91; Fo 0.25
)
def test_centre_content_printed_after_crank(shape: str, expected: float) -> None:
    run = march(basis(shape), steps(0.25), Surface(1e8, 1.0))
    assert profile(basis(shape), run.y, np.array([1.0]))[0, 0] == pytest.approx(expected, abs=3e-4)


@pytest.mark.parametrize(
    ("shape", "over_square", "expected", "tolerance"),
    [
        ("slab", 4.0, 0.0492, 5e-5),  # D t / l^2, l the full thickness: Crank section 10.6; memory
        ("cylinder", 1.0, 0.0631, 6e-5),  # Crank chapter 5, figure 5.7; memory
        ("sphere", 1.0, 0.0305, 6e-5),  # Crank chapter 6; memory
    ],
)
def test_half_times(shape: str, over_square: float, expected: float, tolerance: float) -> None:
    assert time_to(shape, 0.5, np.inf)[0] / over_square == pytest.approx(expected, abs=tolerance)


@pytest.mark.parametrize(
    ("shape", "Bi", "zeta"),
    [
        # First roots of the one-term tables (Incropera and DeWitt, table 5.1; Cengel, table 4-2); memory.
        ("slab", 0.1, 0.3111),
        ("slab", 1.0, 0.8603),
        ("slab", 10.0, 1.4289),
        ("slab", 100.0, 1.5552),
        ("cylinder", 0.1, 0.4417),
        ("cylinder", 1.0, 1.2558),
        ("cylinder", 10.0, 2.1795),
        ("sphere", 0.1, 0.5423),
        ("sphere", 1.0, 1.5708),
        ("sphere", 10.0, 2.8363),
        ("sphere", 100.0, 3.1102),
    ],
)
def test_first_roots_of_the_one_term_tables(shape: str, Bi: float, zeta: float) -> None:
    def pole(beta: float) -> float:
        return float(1.0 / Bi + impedance(shape, np.array([-(beta**2) + 0j]))[0].real)

    assert brentq(pole, zeta - 2e-3, zeta + 2e-3) == pytest.approx(zeta, abs=1.6e-4)


@pytest.mark.parametrize(
    ("shape", "Bi", "zeta", "C1"),
    [("slab", 1.0, 0.8603, 1.1191), ("cylinder", 2.0, 1.5995, 1.3384), ("sphere", 5.0, 2.5704, 1.7870)],
)
def test_one_term_centre_content(shape: str, Bi: float, zeta: float, C1: float) -> None:
    """Same tables: (c* - centre)/(c* - start) = C1 exp(-zeta^2 Fo) at Fo 0.6; memory."""
    run = march(basis(shape), steps(0.6), Surface(Bi, 1.0))
    centre = profile(basis(shape), run.y, np.array([1.0]))[0, 0]
    assert 1 - centre == pytest.approx(C1 * np.exp(-(zeta**2) * 0.6), rel=3e-3)


def time_to_depth(D: float, depth: float, share: float) -> float:
    """Half-space with its surface at the ceiling."""

    def over(time: float) -> float:
        return float(half_space_content(depth / (2 * np.sqrt(D * time)))) - share

    return float(brentq(over, 1e2, 1e6, rtol=1e-6))


def test_carburising_time() -> None:
    """Callister example 5.2: 0.25 to 0.80 mass % C at 0.5 mm under 1.20 %, 1.6e-11 m2/s: 7.1 h."""
    time = time_to_depth(1.6e-11, 0.5e-3, (0.80 - 0.25) / (1.20 - 0.25))
    assert time / HOUR == pytest.approx(7.1, rel=0.01)


@pytest.mark.parametrize(("celsius", "hours"), [(900, 29.6), (950, 15.9), (1000, 9.0), (1050, 5.3)])
def test_carburising_schedule(celsius: int, hours: float) -> None:
    """Callister design example 5.1: 0.20 to 0.60 mass % C at 0.75 mm under 1.00 %, 2.3e-5, 148 kJ/mol.

    The book works with R = 8.31 and z = 0.4747 read off its table, which makes it 1.5 % longer.
    """
    D = float(rate(2.3e-5, 148e3, celsius + 273.0))
    assert time_to_depth(D, 0.75e-3, 0.5) / HOUR == pytest.approx(hours, rel=0.02)


def test_equal_diffusion_at_two_temperatures() -> None:
    """Callister example 5.3: Cu in Al, 10 h at 600 degC as 110.4 h at 500 degC (5.3e-13, 4.8e-14 m2/s)."""
    R = 1e-3
    first = uptake("slab", 5.3e-13 * 10 * HOUR / R**2, np.inf)[0]
    assert time_to("slab", first, np.inf)[0] * R**2 / 4.8e-14 / HOUR == pytest.approx(110.4, rel=1e-3)


def test_arrhenius_diffusivity() -> None:
    """Callister example 5.4: Mg in Al at 550 degC, D0 1.2e-4, Q 131 kJ/mol: 5.8e-13 m2/s."""
    assert rate(1.2e-4, 131e3, 823.0) == pytest.approx(5.8e-13, rel=0.01)


def test_steady_flux_of_carbon_through_iron() -> None:
    """Callister example 5.1: 1.2 and 0.8 kg/m3, 5 mm apart, 3e-11 m2/s: 2.4e-9 kg/(m2 s)."""
    assert membrane_flux(3e-11, 1.2, 0.8, 5e-3) == pytest.approx(2.4e-9, rel=1e-3)


def test_hydrogen_through_palladium() -> None:
    """Callister, chapter 5 problem: 6 mm, 0.25 m2, 1.7e-8 m2/s, 2.0 and 0.4 kg/m3: 4.1e-3 kg/h; memory."""
    assert membrane_flux(1.7e-8, 2.0, 0.4, 6e-3) * 0.25 * HOUR == pytest.approx(4.1e-3, rel=0.01)


@pytest.mark.parametrize(("z", "erf"), [(0.1, 0.1125), (0.5, 0.5205), (1.0, 0.8427), (2.0, 0.9953)])
def test_profile_of_a_half_space_is_the_error_function(z: float, erf: float) -> None:
    """1 - erf(z) at x = 2 z sqrt(Dt): table of a lecture, University at Buffalo, four digits."""
    assert 1 - half_space_content(z) == pytest.approx(erf, abs=1e-4)
    R = 6.0 * np.sqrt(1e-6)
    run = march(basis("slab"), steps(1e-6 / R**2, 160), Surface(1e8, 1.0))
    assert 1 - profile(basis("slab"), run.y, np.array([2 * z * 1e-3 / R]))[0, 0] == pytest.approx(
        erf, abs=1e-3
    )


def test_time_lag_of_a_membrane() -> None:
    """L^2 / 6 D (Daynes 1920; Crank eq. 4.26; memory)."""
    assert time_lag(1.0, 1.0) == pytest.approx(0.1666667, abs=1e-7)


def test_uptake_of_a_half_space() -> None:
    """2 sqrt(D t / pi) = 1.1284 (Crank eq. 3.15; memory)."""
    assert uptake("half-space", 1.0, np.inf)[0] == pytest.approx(1.1284, abs=1e-4)
    assert half_space(1e4)[0] / 1e4 == pytest.approx(1.1284, abs=2e-4)


def test_surface_of_a_half_space_behind_a_resistance() -> None:
    """1 - exp(z^2) erfc z at z = 1: 1 - 0.4276 (Crank eq. 3.35 and its table; memory)."""
    assert half_space_surface(1.0) == pytest.approx(0.5724, abs=1e-4)


def test_grain_boundaries() -> None:
    """Db/Dl 1e6, 0.5 nm wide, grains of 50 um: 11 (Porter and Easterling, section 2.7; memory)."""
    assert hart(1.0, 1e6, 0.5e-9, 50e-6) == pytest.approx(11.0, abs=1e-9)
