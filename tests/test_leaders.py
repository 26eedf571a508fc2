"""The simplified bath (leaders, followers, idle gases) against the full one: nothing left out, all tied.

The copper holds too little aluminium for alumina to form in the melt, so that its wall gives all along.
Energies, rates and inputs are drawn.
"""

from __future__ import annotations

import numpy as np
import pytest

from purity import moving
from purity.assess import followed, initial, molar_masses
from purity.contacts import expose
from purity.database import load
from purity.draws import Draws
from purity.followers import total
from purity.kinetics.exposure import Exposure
from purity.kinetics.groups import may_follow
from purity.passing import make_setting
from purity.scenario_file import read_string

SCENARIO = """
title = "One melt"
risk = 0.05

[lot]
host = "Cu"
mass = "25 kg"
certificate = { O = 0.3, H = 0.1, C = 0.05, Al = 0.0001 }
limits = { O = 5.0, H = 0.5, C = 5.0, Al = 0.5 }

[lot.charge]
form = { shape = "slab", thickness = "25 mm", width = "100 mm", length = "200 mm" }
surface = "etched"
days_in_air = 3

[furnace]
exhaust = { O2 = "3 ppm", dew_point = "-58 degC" }

[[step]]
name = "melt"
process = "melt"
temperature = "1180 degC"
duration = "40 min"
wall_area = "1020 cm2"
free_surface = "175 cm2"
stirring = "induction"
immersed = []
atmosphere = "argon N5.0"
flow = "4 L/min"
container = { name = "our alumina", phases = { Al2O3 = 1.0 } }
"""


def test_the_simplified_bath_agrees_with_the_full_one(monkeypatch: pytest.MonkeyPatch) -> None:
    library, draws = load(), Draws(1, 1)
    scenario = read_string(SCENARIO, library)
    lot, choice = scenario.lot, scenario.steps[0].choices[0]
    impurities = followed(scenario)
    masses = molar_masses(library, (lot.host, *impurities))
    setting, schedule = make_setting(lot, choice, impurities, masses, library, draws)
    exposed = tuple(expose(contact, setting) for contact in choice.contacts)
    entered = initial(lot, impurities, masses, library, draws)

    def ends() -> dict[str, np.ndarray]:
        x = total(entered).copy()
        for part in moving.move(entered, setting, schedule, exposed, False):
            x[part.index] = total(part.pickup.state)
            for c, row in zip(part.rows, part.pickup.ledger[: len(part.rows)], strict=True):
                for _, other, atoms in (s for s in part.shared if s[0] == c):
                    x[other] += atoms * row[0]
        return dict(zip(impurities, x, strict=True))

    simple = ends()

    def all_lead(plan: moving.Plan) -> frozenset[str]:
        return frozenset(c.name for e in plan.exposures for c in e.carriers if may_follow(c))

    def nothing_left_out(whole: tuple[Exposure, ...], *_: object) -> tuple[Exposure, ...]:
        return whole

    monkeypatch.setattr(moving, "_heavy_beside_carbon", all_lead)
    monkeypatch.setattr(moving, "_without_idle", nothing_left_out)
    full = ends()
    for element in (e for e in impurities if e in lot.limits):
        a, b = float(np.median(simple[element])), float(np.median(full[element]))
        assert a == pytest.approx(b, rel=0.03), element
