"""Parcels: the certified rest of a wall agrees with its own solubility product."""

from __future__ import annotations

import numpy as np
import pytest

from purity.contacts.parcel import parcel
from purity.contacts.setting import dissolution
from purity.database import Gap


def rest(setting, oxygen: float):  # type: ignore[no-untyped-def]
    body = next(c.body for c in setting.choice.contacts if c.role == "wall")
    x = np.full((len(setting.impurities), 1), 1e-10)
    x[setting.impurities.index("O")] = oxygen
    return parcel(body, setting, x, setting.T)


@pytest.mark.parametrize("oxygen", [1e-9, 1e-6, 1e-4])
def test_alumina_at_rest_fulfils_its_solubility_product(melt, oxygen: float) -> None:  # type: ignore[no-untyped-def]
    setting = melt()
    found = rest(setting, oxygen)
    assert found is not None
    assert found.solved == 1.0
    assert found.gap < 1e-9
    product = 2 * found.ln_ceiling["Al"][0] + 3 * found.ln_ceiling["O"][0]
    energy = dissolution(setting, "Al2O3", "solid")
    assert not isinstance(energy, Gap)
    assert product == pytest.approx(energy.value[0, 0], abs=1e-6)


def test_more_oxygen_less_aluminium(melt) -> None:  # type: ignore[no-untyped-def]
    setting = melt()
    tops = [rest(setting, o).ln_ceiling["Al"][0] for o in (1e-9, 1e-6, 1e-4)]
    assert tops[0] > tops[1] > tops[2]


def test_a_wall_of_the_host_has_no_parcel(melt) -> None:  # type: ignore[no-untyped-def]
    assert rest(melt(container='{ name = "skull", phases = { Cu = 1.0 } }'), 1e-6) is None
