"""Gas and melt: published rate laws that the bath must contain as cases.

Sources
-------
K. Amano, K. Ito, H. Sakao, On the rates of nitrogen absorption and desorption in liquid iron,
    Tetsu-to-Hagane 62 (1976) 1179: rate equation of the two-film theory and its orders (abstract).
T. Choh, M. Takada, M. Inouye, Rate of hydrogen absorption in liquid iron and effect of dissolved oxygen,
    Tetsu-to-Hagane 62 (1976) 1309: first order, proportional to the root of the pressure,
    k = (19 +- 1) 10^-2 cm/s at 1600 degC (abstract).
Kinetics of the hydrogen desorption and absorption of molten steel, Tetsu-to-Hagane 62 (1976) 605:
    desorption by the melt's boundary layer, k = 1.04 10^-2 cm/s at 1580 degC (abstract).
W. G. Whitman, Chem. Metall. Eng. 29 (1923) 146: two films in series (citation from memory).
Lord Rayleigh, Phil. Mag. 4 (1902) 521: enrichment of a residue that boils away (citation from memory).
J. Safarian, T. A. Engh, Vacuum evaporation of pure metals, Metall. Mater. Trans. A 44 (2013) 747:
    the Hertz-Knudsen equation.
"""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from numpy.typing import NDArray

from purity.kinetics import arrow, flux_newton
from purity.kinetics.bath import Case, integrate
from purity.kinetics.exposure import Carrier, Curve, Exposure
from purity.kinetics.schedule import hold
from purity.kinetics.sdirk import Task, euler
from purity.kinetics.stage import coefficients, lay_out

Array = NDArray[np.float64]

T = 1873.15  # K, 1600 degC
R = 8.314462618
DENSITY = 7000.0 / 0.055845  # mol/m3 of liquid iron
K_N2 = (0.045e-2 * 55.845 / 14.007) ** 2  # x^2 at 1 atm: 0.045 mass % nitrogen in liquid iron at 1600 degC


def flat(value: float) -> Curve:
    return Curve(np.array([T]), np.log(np.array([[value]])))


def gas(k: float, atoms: float, K: float, activity: float, conductance: float, area: float = 1.0) -> Exposure:
    carrier = Carrier("gas", np.array([atoms]), flat(K), np.array([activity]), flat(conductance))
    return Exposure("gas", np.array([area]), Curve(np.array([T]), np.log([[[k]]])), (carrier,))


def rate(x: float, exposure: Exposure) -> float:
    """Flux of the element into the metal at content x, mol m-2 s-1."""
    total = np.array([[x]])
    bath = lay_out((exposure,), np.array([DENSITY]), np.array([1.0]), 1, 1)
    blocks = flux_newton.blocks(bath)
    rates, _ = coefficients(bath, T)
    points = [flux_newton.start(block, rates, total) for block in blocks]
    plans = [arrow.plan(block) for block in blocks]
    task = Task(
        bath, blocks, plans, rates, rates, total, np.array([1e-12]), np.full((1, 1), np.inf), points, 1e-8
    )
    return float(euler(task).gained.sum() / 1e-12)


def amano(x: float, x_e: float, k_m: float, k_g: float, K_root: float) -> float:
    """-n_N = k_m (n_N - sqrt(alpha n_N + (alpha/2)^2 + n_eN^2) + alpha/2), alpha = k_m R T K_N^2/(2 k_g f^2).

    As printed, f = 1; n in mol/m3, K_N in mol m-3 per root of a pascal.
    """
    alpha = k_m * R * T * K_root**2 / (2 * k_g)
    n, n_e = x * DENSITY, x_e * DENSITY
    return -k_m * (n - np.sqrt(alpha * n + (alpha / 2) ** 2 + n_e**2) + alpha / 2)


@pytest.mark.parametrize("k_g", [1e-4, 1e-2, 0.05, 1.0, 1e3])
@pytest.mark.parametrize(
    ("x", "pressure"), [(1e-6, 1.0), (5e-4, 1.0), (1e-3, 0.0), (2e-3, 0.01), (1e-5, 0.3)]
)
def test_rate_equation_of_nitrogen_in_iron(x: float, pressure: float, k_g: float) -> None:
    k_m, atm = 3e-4, 101325.0
    exposure = gas(k_m, 2.0, K_N2, pressure, k_g * atm / (R * T))
    K_root = np.sqrt(K_N2 / atm) * DENSITY
    expected = amano(x, np.sqrt(K_N2 * pressure), k_m, k_g, K_root)
    assert rate(x, exposure) == pytest.approx(expected, rel=2e-7)


def order(x: float, exposure: Exposure) -> float:
    step = 1e-4
    up, down = rate(x * np.exp(step), exposure), rate(x * np.exp(-step), exposure)
    return float(np.log(up / down) / (2 * step))


def test_nitrogen_leaves_into_argon_between_first_and_second_order() -> None:
    orders = [order(1e-4, gas(3e-4, 2.0, K_N2, 0.0, g)) for g in (1e-6, 3e-3, 0.03, 1e4)]
    assert orders[0] == pytest.approx(2.0, abs=1e-2)
    assert orders[-1] == pytest.approx(1.0, abs=1e-2)
    assert all(1 < one < 2 for one in orders[1:3])
    assert orders == sorted(orders, reverse=True)


def test_nitrogen_enters_from_pure_gas_at_first_order() -> None:
    """No gas boundary layer: ln((x_e - x)/(x_e - x_0)) = -k A t/V."""
    area, k, seconds, start = 1e-3, 3e-4, 40.0, 1e-6
    path = integrate(
        Case(
            np.array([[start]]),
            np.array([DENSITY]),
            np.array([1.0]),
            hold(T, seconds),
            (gas(k, 2.0, K_N2, 1.0, 1e6, area),),
        ),
        nodes=256,
    )
    x_e = np.sqrt(K_N2)
    left = np.log((x_e - path.x[0, 0]) / (x_e - start))
    assert left == pytest.approx(-k * area * DENSITY * seconds, rel=1e-4)


def test_hydrogen_enters_iron_in_proportion_to_the_root_of_the_pressure() -> None:
    K_H2 = (24.3e-6 * 55.845 / 1.008) ** 2  # 24.3 mass ppm at 1 atm, 1600 degC (common figure, from memory)
    fluxes = [rate(1e-9, gas(19e-4, 2.0, K_H2, p, 1e5)) for p in (0.1, 0.4, 0.9)]
    assert fluxes[1] / fluxes[0] == pytest.approx(2.0, rel=1e-4)
    assert fluxes[2] / fluxes[0] == pytest.approx(3.0, rel=1e-4)


def test_hydrogen_leaves_steel_by_the_boundary_layer_of_the_melt() -> None:
    """k = 1.04e-4 m/s: a melt 0.1 m deep loses half in ln 2 * 0.1/k = 666.5 s."""
    K_H2 = (24.3e-6 * 55.845 / 1.008) ** 2
    start = 6e-4
    path = integrate(
        Case(
            np.array([[start]]),
            np.array([DENSITY]),
            np.array([0.1 * DENSITY]),
            hold(T, 666.5),
            (gas(1.04e-4, 2.0, K_H2, 0.0, 1e6),),
        ),
        nodes=128,
    )
    assert path.x[0, 0] / start == pytest.approx(0.5, rel=2e-3)


def test_two_films_in_series() -> None:
    """Whitman: 1/K = 1/k_l + 1/(H k_g), H the gas over the melt concentration at equilibrium."""
    k_l, k_g, H, P = 2e-4, 0.03, 4e-3, 1e5
    # at 1 bar the gas holds P/(R T) mol/m3, and the melt in equilibrium with it 1/H times as much
    exposure = gas(k_l, 1.0, P / (H * R * T * DENSITY), 0.0, k_g * P / (R * T))
    K_overall = 1 / (1 / k_l + 1 / (H * k_g))
    total = 1e-6
    path = integrate(
        Case(
            np.array([[total]]),
            np.array([DENSITY]),
            np.array([DENSITY]),
            hold(T, 2000.0),
            (exposure,),
        )
    )
    assert np.log(total / path.x[0, 0]) / 2000.0 == pytest.approx(K_overall, rel=1e-9)


@pytest.mark.parametrize(
    ("alpha", "f", "left"), [(10.0, 0.1, 0.387420489), (90.0, 0.02, 0.165652), (0.5, 0.19, 1.111111)]
)
def test_residue_that_boils_away(alpha: float, f: float, left: float) -> None:
    """C/C0 = (1 - f)^(alpha - 1): 0.9^9, 0.98^89, 0.81^-0.5.

    alpha is the ratio of the Hertz-Knudsen fluxes of impurity and host, over their contents.
    """
    pressure, molar_mass = 20.0, 0.055845
    J = pressure / np.sqrt(2 * np.pi * molar_mass * R * T)
    vapour = gas(1e3, 1.0, 1.0, 0.0, alpha * J)
    steps = 2000
    lost = np.linspace(0.0, f, steps + 1)
    x = np.array([[1e-6]])
    for before, after in pairwise(lost):
        amount = np.array([1.0 - before])
        seconds = (after - before) / J
        x = integrate(Case(x, np.array([DENSITY]), amount, hold(T, seconds), (vapour,)), nodes=1).x
        x = x * (1.0 - before) / (1.0 - after)
    assert x[0, 0] / 1e-6 == pytest.approx(left, rel=1e-3)
