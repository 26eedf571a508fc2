"""What is brought at once: charge surface, films on it, per mole of host."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from purity.contacts.brought import charge


def brought(setting, **changed):  # type: ignore[no-untyped-def]
    contact = next(c for c in setting.choice.contacts if c.role == "charge")
    contact = replace(contact, body=replace(contact.body, **changed))
    return charge(contact, setting)


def test_a_charge_brings_what_covers_it(melt) -> None:  # type: ignore[no-untyped-def]
    made = brought(melt())
    assert made.gain is not None
    assert np.all(made.gain >= 0)
    assert made.exposure.carriers == ()
    i = melt().impurities.index("O")
    assert made.gain[i, 0] > 0


def test_twice_the_surface_brings_twice(melt) -> None:  # type: ignore[no-untyped-def]
    setting = melt()
    piece = next(c for c in setting.choice.contacts if c.role == "charge").body.piece
    once, twice = brought(setting), brought(setting, piece=replace(piece, area=2 * piece.area))
    assert once.gain is not None
    assert twice.gain is not None
    np.testing.assert_allclose(twice.gain, 2 * once.gain, rtol=1e-12)


def test_a_machined_surface_brings_more_carbon_than_an_etched_one(melt) -> None:  # type: ignore[no-untyped-def]
    """Cutting fluid stays behind: common practice, no source."""
    setting = melt()
    c = setting.impurities.index("C")
    etched, machined = brought(setting, surface="etched"), brought(setting, surface="machined")
    assert etched.gain is not None
    assert machined.gain is not None
    assert machined.gain[c, 0] > 5 * etched.gain[c, 0]


def test_etched_carbon_is_amount_times_area_over_the_lot(melt) -> None:  # type: ignore[no-untyped-def]
    """0.5 mg/m2 of carbon (the table of surfaces), 12.011 g/mol, on 25 kg of copper, 63.546 g/mol."""
    setting = melt()
    made = brought(setting)
    area = next(c for c in setting.choice.contacts if c.role == "charge").body.piece.area
    assert made.gain is not None
    expected = 0.5e-6 * area / 12.011e-3 / (25.0 / 63.546e-3)
    assert made.gain[setting.impurities.index("C"), 0] == pytest.approx(expected, rel=1e-4)
