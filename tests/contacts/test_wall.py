"""Walls: what they are made of, what they hold, how much of them the metal sees."""

from __future__ import annotations

import numpy as np
import pytest

from purity.contacts.wall import head, wall, wetting
from purity.kinetics.exposure import Carrier


def carriers(setting) -> dict[str, Carrier]:  # type: ignore[no-untyped-def]
    contact = next(c for c in setting.choice.contacts if c.role == "wall")
    return {c.name: c for c in wall(contact, setting).exposure.carriers}


def test_a_main_compound_dissolves_whole_and_without_end(melt) -> None:  # type: ignore[no-untyped-def]
    setting = melt()
    alumina = carriers(setting)["Al2O3"]
    assert dict(zip(setting.impurities, alumina.nu, strict=True)) | {} == {
        e: {"Al": 2.0, "O": 3.0}.get(e, 0.0) for e in setting.impurities
    }
    assert alumina.inventory is None
    assert alumina.conductance is None


def test_a_trace_holds_content_times_depth_times_density_times_area(melt) -> None:  # type: ignore[no-untyped-def]
    """100 ppm of NiO (74.692 g/mol, IUPAC) in 20 um under 0.1 m2 at the density of the general row."""
    setting = melt()
    trace = next(c for name, c in carriers(setting).items() if name.startswith("NiO"))
    row = setting.library.find("wall_values", material="*", property="density")
    density = row.record.fields["value_SI"]
    assert trace.inventory is not None
    assert trace.inventory[0] == pytest.approx(1e-4 / 74.692e-3 * 20e-6 * density * 0.1, rel=1e-3)
    assert trace.activity[0] == pytest.approx(1.0)


def test_carbon_lets_out_carbon_monoxide_and_holds_none(melt) -> None:  # type: ignore[no-untyped-def]
    found = carriers(melt(container='{ name = "our graphite", phases = { C = 1.0 } }'))
    leaving = next(c for name, c in found.items() if name.startswith("CO at"))
    assert leaving.inventory is not None
    assert leaving.inventory[0] == 0.0
    assert leaving.conductance is not None


def test_an_unwetted_wall_exchanges_less_and_an_unknown_pair_is_taken_as_wetted(melt) -> None:  # type: ignore[no-untyped-def]
    for container, open_share in (("Al2O3 = 1.0", False), ("Y2O3 = 1.0", None)):
        setting = melt(container=f'{{ name = "ours", phases = {{ {container} }} }}')
        body = next(c.body for c in setting.choice.contacts if c.role == "wall")
        share, found = wetting(setting, body)
        if open_share is False:
            assert share.max() < 0.1
            assert found
        assert np.all((share > 0) & (share <= 1))
        if not found:
            assert np.all(share == 1.0)


def test_a_wall_of_the_metal_itself_gives_nothing(melt) -> None:  # type: ignore[no-untyped-def]
    assert not carriers(melt(container='{ name = "skull", phases = { Cu = 1.0 } }'))


def test_the_head_of_a_metal_column_is_its_hydrostatic_pressure() -> None:
    """10 cm of copper, 8,000 kg/m3: 7.845 kPa (rho g h)."""
    assert head(0.1, 8000.0) == pytest.approx(7845.32, rel=1e-5)
