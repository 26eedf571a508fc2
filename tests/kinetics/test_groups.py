"""Which elements hang together, and how a compound looks to one of its elements."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from purity.constants import DILUTE
from purity.kinetics import groups
from purity.kinetics.exposure import Carrier, Curve, Exposure, Skin

Array = NDArray[np.float64]
T = np.array([1500.0])


def curve(ln: float) -> Curve:
    return Curve(T, np.array([[ln]]))


def unit(
    *nu: float, ln_k: float = 0.0, a: float = 1.0, g: float | None = None, held: float | None = None
) -> Carrier:
    return Carrier(
        "unit " + "-".join(map(str, nu)),
        np.array(nu),
        curve(ln_k),
        np.array([a]),
        None if g is None else curve(np.log(g)),
        None if held is None else np.array([held]),
    )


def contact(*carriers: Carrier) -> Exposure:
    count = len(carriers[0].nu)
    return Exposure("wall", np.array([0.1]), Curve(T, np.full((count, 1, 1), np.log(1e-4))), carriers)


def as_lists(found: list[NDArray[np.int64]]) -> list[list[int]]:
    return [index.tolist() for index in found]


def test_elements_are_tied_by_carriers_and_skins_and_no_further() -> None:
    exposures = [contact(unit(2, 3, 0, 0, 0)), contact(unit(0, 0, 1, 0, 0))]
    assert as_lists(groups.tied(exposures, (), 5)) == [[0, 1], [2]]
    skin = Skin("skin", np.array([0.0, 1, 0, 1, 0]), curve(0.0))
    assert as_lists(groups.tied(exposures, [skin], 5)) == [[0, 1, 3], [2]]


def test_an_element_that_nothing_touches_is_in_no_group() -> None:
    assert groups.tied([contact(unit(0, 0))], (), 2) == []


def test_a_restricted_contact_keeps_only_what_holds_no_other_element() -> None:
    seen = groups.restrict(contact(unit(2, 3, 0), unit(0, 1, 1), unit(0, 2, 0)), np.array([0, 1]))
    assert [c.nu.tolist() for c in seen.carriers] == [[2, 3], [0, 2]]
    assert seen.exchange.ln.shape == (2, 1, 1)


def test_only_a_solid_of_several_elements_with_one_free_element_follows() -> None:
    assert groups.follower(unit(2, 3), {1}) == 0
    assert groups.follower(unit(2, 3), {0, 1}) is None
    assert groups.follower(unit(2, 3), set()) is None
    assert groups.follower(unit(2, 3, g=1.0), {1}) is None, "a gas"
    assert groups.follower(unit(1, 0), {1}) is None, "one element alone"


@pytest.mark.parametrize("oxygen", [1e-8, 1e-6, 1e-4])
def test_a_followed_compound_has_its_ceiling_at_the_oxygen_of_the_bath(oxygen: float) -> None:
    """x_M = (K / x_O^3)^(1/2) of M2O3, one atom a unit, and the inventory in atoms."""
    x = np.array([[1e-7], [oxygen]])
    seen = groups.follow(unit(2, 3, ln_k=-70.0, held=0.4), 0, x, np.zeros(1))
    expected = -35.0 - 1.5 * np.log(oxygen)
    assert seen.ln_k.ln[0, 0] == pytest.approx(min(expected, np.log(DILUTE)), rel=1e-12)
    assert seen.nu.tolist() == [1.0, 0.0]
    assert seen.inventory is not None
    assert seen.inventory[0] == pytest.approx(0.8)


def test_a_trace_gives_and_does_not_take() -> None:
    seen = groups.follow(unit(1, 1, ln_k=-40.0), 0, np.array([[1e-5], [1e-3]]), np.array([1e-5]))
    assert seen.ln_k.ln[0, 0] == pytest.approx(np.log(1e-5))


def test_a_compound_weighs_where_it_could_move_the_oxygen_that_it_takes_as_given() -> None:
    """It gives K^(1/2) x_O^-3/2 of metal at most; light below a tenth of the oxygen."""
    density, hour = np.array([300.0]), np.array([3600.0])

    def weighs(oxygen: float, **more: float) -> bool:
        carrier = unit(2, 3, ln_k=-70.0, **more)
        x = np.array([[1e-9], [oxygen]])
        return bool(groups.heavy(carrier, 0, contact(carrier), density, x, hour)[0])

    assert weighs(1e-7)
    assert not weighs(1e-4)
    assert not weighs(1e-7, held=1e-3), "an inventory bounds it"


def test_a_busy_gas_is_not_idle_and_one_beside_a_busier_is() -> None:
    shares = {"busy": np.array([1.0, 0.5]), "faint": np.array([1e-3, 1e-3]), "other": np.array([0.0, 0.2])}
    assert groups.idle(shares, 1e-2, 1e-6) == {"faint"}
    assert groups.idle(shares, 1e-2, 0.6) == {"faint", "other"}
    assert groups.idle({}, 1e-2, 1e-2) == set()


def test_turnover_counts_what_a_gas_brings_and_what_it_carries_off() -> None:
    """g (a + a_s) A t nu / (n x), with a_s = x^2 / K."""
    gas = unit(0, 2, ln_k=np.log(1e-10), a=0.03, g=0.2)
    x = np.array([[1e-6], [1e-6]])
    found = groups.turnover(gas, np.array([0.5]), np.array([100.0]), x, x, np.array([60.0]), T)
    assert found[0] == 0.0
    assert found[1] == pytest.approx(2 * 0.2 * (0.03 + 0.01) * 0.5 * 60.0 / 100.0 / 1e-6, rel=1e-9)


def test_a_small_inventory_is_spare_and_none_is_not() -> None:
    amount, held = np.array([100.0]), np.array([[1e-6], [1e-6]])
    assert groups.spare(unit(1, 0, held=1e-8), amount, held)
    assert not groups.spare(unit(1, 0, held=1e-5), amount, held)
    assert not groups.spare(unit(1, 0), amount, held)
    assert not groups.spare(unit(1, 0, held=0.0), amount, held), "a sink"


def test_gases_of_several_elements_tie() -> None:
    assert groups.ties(unit(1, 2, g=1.0))
    assert not groups.ties(unit(0, 2, g=1.0))
    assert not groups.ties(unit(1, 2))
