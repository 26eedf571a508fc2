"""Compounds that can form: which are watched, near, and what they leave dissolved."""

from __future__ import annotations

import numpy as np
import pytest

from purity.contacts import products


def contents(setting, **ppm_mol: float):  # type: ignore[no-untyped-def]
    x = np.full((len(setting.impurities), 1), 1e-14)
    for element, value in ppm_mol.items():
        x[setting.impurities.index(element)] = value
    return x


def test_a_melt_watches_the_compounds_of_what_is_followed(melt) -> None:  # type: ignore[no-untyped-def]
    setting = melt()
    seen = products.watched(setting)
    assert {"Al2O3", "Cu2O"} <= set(seen)
    assert "SiO2" not in seen, "silicon is not followed here"


def test_saturation_is_zero_at_the_solubility_product(melt) -> None:  # type: ignore[no-untyped-def]
    setting = melt()
    skin, records = products.skin(setting, "Al2O3")
    oxygen = 1e-6
    aluminium = float(np.exp((skin.ln_k.ln[0, 0] - 3 * np.log(oxygen)) / 2))
    x = contents(setting, Al=aluminium, O=oxygen)
    assert products.saturation(skin, x, setting.T)[0] == pytest.approx(0.0, abs=1e-9)
    assert records


def test_what_is_far_from_saturation_is_not_looked_at(melt) -> None:  # type: ignore[no-untyped-def]
    setting = melt()
    seen = {"Al2O3": products.watched(setting)["Al2O3"]}
    assert products.within_reach(seen, contents(setting, Al=1e-6, O=1e-5), ()) == ["Al2O3"]
    assert products.within_reach(seen, contents(setting, Al=1e-6, O=1e-5), ("Al2O3",)) == []
    assert products.within_reach(seen, contents(setting), ()) == []


def test_a_compound_takes_down_the_element_that_is_scarce(melt) -> None:  # type: ignore[no-untyped-def]
    setting = melt()
    seen = {"Al2O3": products.watched(setting)["Al2O3"]}
    x = contents(setting, Al=1e-7, O=1e-4)
    left = products.supported(seen, x)
    al, o = setting.impurities.index("Al"), setting.impurities.index("O")
    assert left[al, 0] < x[al, 0]
    assert left[o, 0] == pytest.approx(x[o, 0])


def test_a_follower_is_capped_by_its_compound_with_the_leaders_and_not_below(melt) -> None:  # type: ignore[no-untyped-def]
    setting = melt()
    seen = products.watched(setting)
    al, o = setting.impurities.index("Al"), setting.impurities.index("O")
    capped = products.follower_skin(setting, seen, al, {o}, contents(setting, Al=1e-6, O=1e-4))
    assert capped is not None
    assert capped[0].ln_k.ln.max() < np.log(1e-6)
    assert products.follower_skin(setting, seen, al, {o}, contents(setting, Al=1e-14, O=1e-8)) is None
