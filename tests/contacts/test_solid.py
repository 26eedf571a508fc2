"""Supports under a solid: diffusion out of the spots that touch."""

from __future__ import annotations

import numpy as np
import pytest

from purity.assess import followed, molar_masses
from purity.contacts.solid import support
from purity.database import Library
from purity.draws import Draws
from purity.passing import make_setting
from purity.scenario_file import read_string

BAKE = """
title = "One bake"
risk = 0.05

[lot]
host = "Nb"
mass = "25.7 kg"
certificate = { O = 5.0, N = 5.0, C = 3.0 }
limits = { O = 50.0, N = 50.0, C = 10.0 }

[[step]]
name = "bake"
process = "heat"
temperature = "%s degC"
duration = "%s h"
form = { shape = "slab", thickness = "3 mm", width = "250 mm", length = "400 mm", count = 10 }
support = [{ name = "tray", phases = { %s = 1.0 } }]
contact_share = "%s %%"
atmosphere = "vacuum"
pressure = "1e-6 mbar"
vent = { temperature = "60 degC", gas = "argon N5.0" }
"""


def gain(
    library: Library, element: str, T: int = 1000, hours: int = 2, formula: str = "Mo", share: int = 1
) -> float:
    scenario = read_string(BAKE % (T, hours, formula, share), library)
    impurities = followed(scenario)
    masses = molar_masses(library, (scenario.lot.host, *impurities))
    choice = scenario.steps[0].choices[0]
    setting, _ = make_setting(scenario.lot, choice, impurities, masses, library, Draws.nominal())
    made = support(next(c for c in choice.contacts if c.role == "support"), setting)
    assert made.gain is not None
    assert not made.gaps
    return float(made.gain[impurities.index(element), 0])


def test_diffusion_into_a_half_space_grows_with_the_root_of_time(library: Library) -> None:
    """2 c sqrt(D t / pi) (Crank 1975)."""
    once, four = gain(library, "Mo", hours=2), gain(library, "Mo", hours=8)
    assert once > 0
    assert four == pytest.approx(2 * once, rel=1e-6)


def test_twice_the_touching_area_gives_twice(library: Library) -> None:
    assert gain(library, "Mo", share=2) == pytest.approx(2 * gain(library, "Mo", share=1), rel=1e-6)


def test_hotter_gives_more(library: Library) -> None:
    assert np.all(np.diff([gain(library, "Mo", T=T) for T in (800, 1000, 1200)]) > 0)
