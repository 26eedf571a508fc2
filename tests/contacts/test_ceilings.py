"""Ceilings: where a contact gives no more, seen from numbers alone."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest

from purity.contacts.ceilings import ceiling
from purity.contacts.setting import Exposed
from purity.kinetics.exposure import Carrier, Curve, Exposure

T = np.array([1500.0])
X = np.array([[1e-7], [1e-6]])


@dataclass
class Lot:
    """Stands for a setting: a ceiling needs no more than the amount of host."""

    amount: np.ndarray


def unit(nu, ln_k, a=1.0, g=None, held=None):  # type: ignore[no-untyped-def]
    def curve(ln):  # type: ignore[no-untyped-def]
        return Curve(T, np.array([[ln]]))

    conductance = None if g is None else curve(np.log(g))
    inventory = None if held is None else np.array([held])
    return Carrier("unit", np.array(nu, float), curve(ln_k), np.array([a]), conductance, inventory)


def top(*carriers, element=0):  # type: ignore[no-untyped-def]
    rate = Curve(T, np.zeros((2, 1, 1)))
    exposed = Exposed(Exposure("c", np.ones(1), rate, carriers))
    return ceiling(exposed, Lot(np.array([100.0])), X, T, element)  # type: ignore[arg-type]


def test_a_compound_stops_at_its_solubility_product() -> None:
    assert top(unit((2, 3), -60.0))[0] == pytest.approx((-60.0 - 3 * np.log(1e-6)) / 2)


def test_a_gas_of_pairs_stops_at_sieverts() -> None:
    """x = sqrt(K p)."""
    found = top(unit((0, 2), np.log(1e-8), a=1e-4, g=1.0), element=1)
    assert found[0] == pytest.approx(0.5 * np.log(1e-12), abs=1e-8)


def test_water_in_and_hydrogen_out_stop_where_both_balance() -> None:
    """g a = g x^2 / K: x = sqrt(K a), whatever their common conductance."""
    bring = unit((2, 0), 50.0, a=1e-4, g=0.3)
    carry = unit((2, 0), np.log(1e-8), a=0.0, g=0.3)
    assert top(bring, carry)[0] == pytest.approx(0.5 * np.log(1e-12), abs=1e-8)


def test_a_store_stops_at_what_it_holds() -> None:
    """1e-5 mol in 100 mol of host over 1e-7 that is there."""
    assert top(unit((1, 0), 0.0, held=1e-5))[0] == pytest.approx(np.log(2e-7))
    assert top(unit((1, 0), np.log(1.5e-7), held=1e-5))[0] == pytest.approx(np.log(1.5e-7))


def test_what_a_contact_cannot_give_has_no_ceiling() -> None:
    assert top(unit((0, 1), -10.0)) is None
    assert top(unit((1, 0), -10.0, a=0.0, g=1.0)) is None
    assert top(unit((1, 0), -10.0, held=0.0)) is None
