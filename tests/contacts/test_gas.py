"""Furnace gas: what reaches the metal and through which resistances."""

from __future__ import annotations

import numpy as np
import pytest

from purity.contacts.gas import gas, gas_load, gases, host_evaporation
from purity.contacts.setting import vapour_speed
from purity.database import Gap


def the_gas(setting):  # type: ignore[no-untyped-def]
    return next(c for c in setting.choice.contacts if c.role == "gas")


def load_of(setting):  # type: ignore[no-untyped-def]
    contact = the_gas(setting)
    return gas_load(contact.body, setting, setting.sample(contact.area))


def test_a_flowing_gas_keeps_its_fractions_where_nothing_leaks(melt) -> None:  # type: ignore[no-untyped-def]
    load = load_of(melt())
    assert load.activity["O2"][0] == pytest.approx(2e-6 * 101325.0 / 1e5, rel=1e-9)
    assert any("assumed perfect" in note for note in load.notes)


def test_a_leak_into_a_stream_is_diluted_by_it(melt) -> None:  # type: ignore[no-untyped-def]
    """1 Pa L/s of air in 4 L/min (normal): 1e-3/(R 295) over 2.974e-3 mol/s, 20.9 % of it oxygen."""
    tight, leaky = load_of(melt()), load_of(melt(furnace='leak = "1e-2 mbar L/s"'))
    extra = 1e-3 / (8.314462618 * 295.0) / 2.974e-3 * 0.209 * 1.01325
    assert leaky.activity["O2"][0] - tight.activity["O2"][0] == pytest.approx(extra, rel=0.02)


def test_a_measured_exhaust_wins_over_the_feed(melt) -> None:  # type: ignore[no-untyped-def]
    load = load_of(melt(furnace='exhaust = { O2 = "7 ppm" }'))
    assert load.activity["O2"][0] == pytest.approx(7e-6 * 1.01325, rel=1e-6)


def test_a_pumped_vessel_settles_where_the_pump_takes_what_enters(melt) -> None:  # type: ignore[no-untyped-def]
    """p = Q / S; 1e-3 mbar L/s into 100 L/s: 1e-3 Pa."""
    vacuum = 'atmosphere = "vacuum"\npressure = "1e-4 mbar"'
    load = load_of(melt(gas=vacuum, furnace='leak = "1e-3 mbar L/s"\npump = "100 L/s"'))
    assert load.pressure[0] == pytest.approx(1e-3, rel=0.02)


def test_a_gauge_alone_is_read_within_a_factor_and_said_so(melt) -> None:  # type: ignore[no-untyped-def]
    load = load_of(melt(gas='atmosphere = "vacuum"\npressure = "1e-4 mbar"'))
    assert load.pressure[0] == pytest.approx(1e-2, rel=1e-6)
    assert any("gauge" in note for note in load.notes)


def test_no_resistance_is_passed_faster_than_molecules_arrive(melt) -> None:  # type: ignore[no-untyped-def]
    setting = melt(gas='atmosphere = "vacuum"\npressure = "1e-4 mbar"')
    made = gas(the_gas(setting), setting)
    for carrier in made.exposure.carriers:
        if carrier.name == "O2":
            assert carrier.conductance is not None
            arrives = 1e5 * vapour_speed(setting.T, 32e-3)
            assert np.exp(carrier.conductance.ln[:, 0]) == pytest.approx(arrives * 0.3, rel=0.5)
            assert np.all(np.exp(carrier.conductance.ln[:, 0]) <= arrives)


def test_what_is_not_in_the_gas_only_leaves(melt) -> None:  # type: ignore[no-untyped-def]
    setting = melt()
    found = {c.name: c for c in gas(the_gas(setting), setting).exposure.carriers}
    assert found["H2"].activity[0] == 0.0
    assert found["evaporation of Zn"].activity[0] == 0.0
    assert set(gases(setting)) >= {"O2", "H2", "H2O", "CO"}


def test_copper_evaporates_at_its_vapour_pressure_in_vacuum_and_slower_under_argon(melt) -> None:  # type: ignore[no-untyped-def]
    free = melt(gas='atmosphere = "vacuum"\npressure = "1e-4 mbar"')
    rates = []
    for setting in (free, melt()):
        found = host_evaporation(the_gas(setting), setting)
        assert not isinstance(found, Gap)
        rates.append(float(found[0].ravel()[0]))
    assert 0 < rates[1] < 0.05 * rates[0]
