"""One choice of a small copper melt or a stored disc, as the setting that every contact gets."""

from __future__ import annotations

from collections.abc import Callable

import pytest

from purity.assess import followed, molar_masses
from purity.contacts.setting import Setting
from purity.database import Library, load
from purity.draws import Draws
from purity.passing import make_setting
from purity.scenario_file import read_string

HEAD = """
title = "One step"
risk = 0.05

[lot]
host = "Cu"
mass = "25 kg"
certificate = { O = 2.0, H = 0.1, C = 0.15, Al = 0.02, Ni = 0.01, Zn = 0.1 }
limits = { O = 5.0, H = 0.5, C = 5.0, Al = 0.5, Ni = 0.5, Zn = 0.5 }
"""
MELT = """
[lot.charge]
form = { shape = "slab", thickness = "25 mm", width = "100 mm", length = "200 mm" }
surface = "etched"
days_in_air = 3

[furnace]
%s

[[step]]
name = "melt"
process = "melt"
temperature = "1180 degC"
duration = "40 min"
wall_area = "1000 cm2"
free_surface = "200 cm2"
stirring = "induction"
immersed = []
%s
container = %s
"""
STORE = """
[[step]]
name = "store"
process = "store"
temperature = "22 degC"
duration = "%s"
form = { shape = "cylinder", diameter = "150 mm", height = "12 mm" }
atmosphere = "%s"
"""
ALUMINA = (
    '{ name = "our alumina", phases = { Al2O3 = 1.0 }, traces = { NiO = "100 ppm" }, leach_depth = "20 um" }'
)

Make = Callable[..., Setting]


@pytest.fixture(scope="session")
def library() -> Library:
    return load()


def _setting(library: Library, text: str) -> Setting:
    scenario = read_string(HEAD + text, library)
    impurities = followed(scenario)
    masses = molar_masses(library, (scenario.lot.host, *impurities))
    choice = scenario.steps[0].choices[0]
    return make_setting(scenario.lot, choice, impurities, masses, library, Draws.nominal())[0]


@pytest.fixture
def melt(library: Library) -> Make:
    def make(
        container: str = ALUMINA,
        gas: str = 'atmosphere = { Ar = "rest", O2 = "2 ppm" }\nflow = "4 L/min"',
        furnace: str = "",
    ) -> Setting:
        return _setting(library, MELT % (furnace, gas, container))

    return make


@pytest.fixture
def stored(library: Library) -> Make:
    def make(time: str = "30 d", air: str = "clean-room air") -> Setting:
        return _setting(library, STORE % (time, air))

    return make
