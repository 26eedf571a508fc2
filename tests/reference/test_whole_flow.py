"""One melt from the scenario file to the table, done again without the package's tables or kinetics.

25 kg of copper, 20 min at 1180 degC in an alumina crucible under flowing argon with a measured oxygen content
and dew point, no traces in the wall, nothing on the charge, nothing immersed. The test writes down the same
published laws and lets scipy integrate them.

Formation Gibbs energies are read from the NIST-JANAF tables (package ``janaf``). Activities, Sieverts
constants, diffusivities and transfer coefficients are literals, with their sources beside them; those
marked "estimate" or "from memory" are what the package assumes where nothing was found, so the comparison
checks how the numbers are used and not whether they are right. The vapour pressure of ice is that of
Murphy and Koop, Q. J. R. Meteorol. Soc. 131 (2005) 1539, eq. 7.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from purity.assess import assess
from purity.database import load
from purity.draws import Draws
from purity.scenario_file import read_string

pytest.importorskip("janaf")

Array = NDArray[np.float64]

R, ATM, BAR = 8.314462618, 101325.0, 1e5
T = 1180.0 + 273.15
TIME = 1200.0
ELEMENTS = ("O", "H", "C", "Al")
MASS = {"O": 15.999e-3, "H": 1.008e-3, "C": 12.011e-3, "Al": 26.9815384e-3, "Cu": 63.546e-3}

#: Copper at 1453 K, kg/m3: Assael et al., J. Phys. Chem. Ref. Data 39 (2010) 033105.
DENSITY = 7997.0 - 0.819 * (T - 1357.77)
#: mol per mol of copper at 1 atm: Magnusson and Frisk, CuHOSP assessment (2014).
X_O = np.exp((58834.0 - 24.56 * T) / (R * T))
X_H = np.exp(-(50093.0 + 30.64 * T) / (R * T))
#: Graphite reference: Oden and Gokcen (1992), 237000 - 48.61 T J/mol. Liquid aluminium: COST 507 (1999).
LN_GAMMA_C = (237000.0 - 48.61 * T) / (R * T)
LN_GAMMA_AL = -12069.1 / T + 1.8209
#: Diffusivities, m2/s. O: Oberg et al. 1973; H: Yang and Lee; C and Al: estimate for liquid metals.
D = {
    "O": 6.9e-7 * np.exp(-53974.0 / (R * T)),
    "H": 5.028e-6 * np.exp(-11000.0 / (R * T)),
    "C": 1.2e-8 * np.exp(-10000.0 / (R * T)),
    "Al": 1.2e-8 * np.exp(-10000.0 / (R * T)),
}
#: k = k_ref (D / 5e-9)^0.667, m/s. Free surface: Hino et al. 1994 (Zn from stirred iron); wall: from memory.
SURFACE = {e: 3.2e-4 * (d / 5e-9) ** 0.667 for e, d in D.items()}
#: Copper does not wet alumina below about 1600 K: 0.3 % of the wall exchanges (estimate).
WALL = {e: 0.003 * 1e-4 * (d / 5e-9) ** 0.667 for e, d in D.items()}
#: D in argon at 298.15 K and 1 atm, m2/s, its exponent (CRC Handbook; H2O and CH4: Fuller et al. 1966),
#: and the share of molecules that react on liquid copper (from memory).
GASES = {
    "O2": (1.928e-5, 1.737, 0.3, 31.998e-3),
    "H2O": (2.536e-5, 1.75, 0.1, 18.015e-3),
    "H2": (8.21e-5, 1.783, 0.05, 2.016e-3),
    "CO": (1.957e-5, 1.752, 0.01, 28.010e-3),
    "CO2": (1.541e-5, 1.849, 0.01, 44.009e-3),
    "CH4": (2.117e-5, 1.75, 0.001, 16.043e-3),
}
ATOMS = {
    "O2": {"O": 2},
    "H2O": {"H": 2, "O": 1},
    "H2": {"H": 2},
    "CO": {"C": 1, "O": 1},
    "CO2": {"C": 1, "O": 2},
    "CH4": {"C": 1, "H": 4},
    "Al2O3": {"Al": 2, "O": 3},
}
#: NIST-JANAF tables of the compounds.
TABLES = {"H2O": "H-064", "CO": "C-093", "CO2": "C-095", "CH4": "C-067", "Al2O3": "Al-096"}
AREA, WETTED = 0.0175, 0.1020
MOLES, RHO = 25.0 / MASS["Cu"], DENSITY / MASS["Cu"]
START_PPM = {"O": 0.1, "H": 0.1, "C": 0.15, "Al": 0.001}

SCENARIO = """
title = "One melt"
risk = 0.05

[lot]
host = "Cu"
mass = "25 kg"
certificate = { O = 0.1, H = 0.1, C = 0.15, Al = 0.001 }
limits = { O = 5.0, H = 0.5, C = 5.0, Al = 0.5 }

[lot.charge]
form = { shape = "slab", thickness = "25 mm", width = "100 mm", length = "200 mm" }
surface = "etched"
days_in_air = 0

[furnace]
exhaust = { O2 = "3 ppm", dew_point = "-58 degC" }

[[step]]
name = "melt"
process = "melt"
temperature = "1180 degC"
duration = "20 min"
wall_area = "1020 cm2"
free_surface = "175 cm2"
stirring = "induction"
immersed = []
atmosphere = { Ar = "rest", CO = "0.5 ppm" }
flow = "4 L/min"
container = { name = "our alumina", phases = { Al2O3 = 1.0 } }
"""


def formation(table: str) -> float:
    """Formation Gibbs energy over RT at T, between the tabulated temperatures."""
    from janaf import Table

    frame = Table(table).df.select("T(K)", "delta-f G").drop_nulls()
    at, G = (np.array(frame[name].to_list(), dtype=float) for name in frame.columns)
    order = np.argsort(at)
    return float(np.interp(T, at[order], G[order])) * 1000.0 / (R * T)


def ln_constants() -> dict[str, float]:
    """Ln of prod x^nu beside a unit of each gas at 1 bar, or alumina, from elements and their solution."""
    per_bar = 0.5 * np.log(BAR / ATM)
    dissolved = {
        "O": np.log(X_O) + per_bar,
        "H": np.log(X_H) + per_bar,
        "C": -LN_GAMMA_C,
        "Al": -LN_GAMMA_AL,
    }
    return {
        name: (formation(TABLES[name]) if name in TABLES else 0.0)
        + sum(n * dissolved[e] for e, n in counts.items())
        for name, counts in ATOMS.items()
    }


def conductances() -> dict[str, float]:
    """Stream, gas film and sticking in series, mol m-2 s-1 at 1 bar."""
    stream = 4e-3 / 60.0 * ATM / (R * 273.15) * BAR / ATM / AREA
    found = {}
    for gas, (d, exponent, sticks, molar) in GASES.items():
        film = 0.2 * (d * (T / 298.15) ** exponent / 4e-4) ** 0.667 * BAR / (R * T)
        arrives = sticks * BAR / np.sqrt(2.0 * np.pi * molar * R * T)
        found[gas] = 1.0 / (1.0 / stream + 1.0 / film + 1.0 / arrives)
    return found


def pressures() -> dict[str, float]:
    """Partial pressures in bar; water from its frost point."""
    ice = 273.15 - 58.0
    water = np.exp(9.550426 - 5723.265 / ice + 3.53068 * np.log(ice) - 0.00728332 * ice)
    return {
        "O2": 3e-6 * ATM / BAR,
        "H2O": water / BAR,
        "H2": 0.0,
        "CO": 0.5e-6 * ATM / BAR,
        "CO2": 0,
        "CH4": 0,
    }


def free_surface(x: Array, ln_k: dict[str, float]) -> Array:
    """Moles of O, H and C that enter the melt per s, from the balance at the surface by Newton's method."""
    g, a = conductances(), pressures()
    nu = np.array([[ATOMS[gas].get(e, 0) for e in ELEMENTS[:3]] for gas in GASES], dtype=float)
    G, A, K = (np.array([v[gas] for gas in GASES]) for v in (g, a, ln_k))
    k = RHO * np.array([SURFACE[e] for e in ELEMENTS[:3]])
    y = np.log(x[:3])
    for _ in range(200):
        back = np.exp(nu @ y - K)
        off = nu.T @ (G * (A - back)) - k * (np.exp(y) - x[:3])
        slope = -(nu.T * (G * back)) @ nu - np.diag(k * np.exp(y))
        move = -np.linalg.solve(slope, off)
        y = y + np.clip(move, -2.0, 2.0)
        if np.abs(move).max() < 1e-12:
            break
    return AREA * k * (np.exp(y) - x[:3])


def wall(x: Array, ln_k: float) -> float:
    """Moles of Al2O3 that dissolve per s: the surface of the wall holds alumina at activity 1."""
    k_O, k_Al = RHO * WALL["O"], RHO * WALL["Al"]
    low = -min(k_O * x[0] / 3.0, k_Al * x[3] / 2.0) * (1.0 - 1e-12)

    def off(r: float) -> float:
        return 2.0 * np.log(x[3] + 2.0 * r / k_Al) + 3.0 * np.log(x[0] + 3.0 * r / k_O) - ln_k

    return WETTED * float(brentq(off, low, 1.0, xtol=1e-30, rtol=1e-12))


def dissolved(total: Array, ln_k: float) -> Array:
    """What stays in solution where alumina would be beyond saturation in the melt itself."""
    if 2.0 * np.log(total[3]) + 3.0 * np.log(total[0]) <= ln_k:
        return total
    most = min(total[3] / 2.0, total[0] / 3.0) * (1.0 - 1e-14)
    held = brentq(
        lambda s: 2.0 * np.log(total[3] - 2.0 * s) + 3.0 * np.log(total[0] - 3.0 * s) - ln_k, 0.0, most
    )
    return total - float(held) * np.array([3.0, 0.0, 0.0, 2.0])


def test_one_melt_from_file_to_table_against_an_independent_integration() -> None:
    ln_k = ln_constants()

    def rate(_: float, total: Array) -> Array:
        x = dissolved(np.maximum(total, 1e-18), ln_k["Al2O3"])
        gas, units = free_surface(x, ln_k), wall(x, ln_k["Al2O3"])
        return np.array([gas[0] + 3.0 * units, gas[1], gas[2], 2.0 * units]) / MOLES

    start = np.array([START_PPM[e] * 1e-6 * MASS["Cu"] / MASS[e] for e in ELEMENTS])
    done = solve_ivp(rate, (0.0, TIME), start, method="LSODA", rtol=1e-6, atol=1e-15)
    assert done.success
    expected = dict(zip(ELEMENTS, done.y[:, -1], strict=True))

    library = load()
    scenario = read_string(SCENARIO, library)
    step = scenario.steps[0]
    bare = replace(step.choices[0], contacts=tuple(c for c in step.choices[0].contacts if c.role != "charge"))
    scenario = replace(scenario, steps=(replace(step, choices=(bare,)),))
    lines = {
        line.impurity: line for line in assess(scenario, library, Draws.nominal()).steps[0].choices[0].lines
    }
    for element in ELEMENTS:
        end = lines[element].end
        assert end is not None
        ppm = expected[element] * 1e6 * MASS[element] / MASS["Cu"]
        moved = abs(ppm / START_PPM[element] - 1.0)
        assert moved > 0.1, f"{element} did not move: the comparison would say nothing"
        assert end.median == pytest.approx(ppm, rel=0.01), element
