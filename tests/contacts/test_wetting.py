"""The wetting gate: shut by the angle or by a film, opened by heat, by a high vacuum, by much oxygen."""

from __future__ import annotations

import numpy as np
import pytest

from purity.assess import followed, molar_masses
from purity.contacts.wall import wetting
from purity.database import Library, load
from purity.draws import Draws
from purity.passing import make_setting
from purity.scenario import Material
from purity.scenario_file import read_string

TEXT = """
title = "gate"
[lot]
host = "{host}"
mass = "2 kg"
certificate = {{ O = {oxygen}, Fe = 1 }}
limits = {{ O = 10000, Fe = 2 }}
[lot.charge]
form = {{ shape = "slab", thickness = "25 mm", width = "50 mm", length = "50 mm" }}
surface = "etched"
days_in_air = 1
[[step]]
name = "melt"
process = "melt"
temperature = "{celsius} degC"
duration = "10 min"
wall_area = "200 cm2"
free_surface = "50 cm2"
immersed = []
container = {{ name = "alumina", phases = {{ Al2O3 = 1 }} }}
{gas}
"""
ARGON = 'atmosphere = "argon N6.0"\nflow = "2 L/min"'
VACUUM = 'atmosphere = "vacuum"\npressure = "1e-5 mbar"'


@pytest.fixture(scope="module")
def library() -> Library:
    return load()


@pytest.mark.parametrize(
    ("host", "celsius", "oxygen", "gas", "open_gate"),
    [
        ("Al", 720, 5, ARGON, False),
        ("Al", 950, 5, ARGON, True),
        # the oxide film of aluminium goes in a high vacuum; the angle of copper stays
        ("Al", 720, 5, VACUUM, True),
        ("Cu", 1150, 5, VACUUM, False),
        # copper on alumina: 125 degrees, 22 where saturated with oxygen (table of wetting)
        ("Cu", 1150, 5, ARGON, False),
        ("Cu", 1150, 4000, ARGON, True),
    ],
)
def test_what_opens_the_gate(
    host: str, celsius: int, oxygen: float, gas: str, open_gate: bool, library: Library
) -> None:
    text = TEXT.format(host=host, celsius=celsius, oxygen=oxygen, gas=gas)
    scenario = read_string(text, library)
    elements = followed(scenario)
    choice = scenario.steps[0].choices[0]
    masses = molar_masses(library, (host, *elements))
    setting, _ = make_setting(scenario.lot, choice, elements, masses, library, Draws(1, 1, 64))
    body = choice.contacts[0].body
    assert isinstance(body, Material)
    share, found = wetting(setting, body)
    assert len(found) == 1
    assert np.all(share == 1.0) if open_gate else np.median(share) < 0.02
