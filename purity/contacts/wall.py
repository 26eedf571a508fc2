"""Walls: crucible, mould, immersed parts and supports, as dissociating compounds and leached traces.

A wall compound crosses as one carrier with its own stoichiometry, so what dissociation gives stays
tied (Al and O from alumina) and closes itself off as the bath fills. A trace is a phase of its own,
with the activity of its share among the traces of the wall (at most 1) and an inventory: content x
leach depth x density x area. A carbon wall lets CO out, and only out, at its effective pressure.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from purity.constants import ATM, GRAVITY, P0
from purity.contacts.products import capped
from purity.contacts.setting import (
    Exposed,
    Setting,
    behind,
    carrier,
    exchange,
    flat,
    spread_factor,
    stoichiometry,
)
from purity.database import Found, Gap
from purity.draws import normal
from purity.driving_force.pure import atoms
from purity.kinetics.exposure import Carrier, Exposure
from purity.scenario import Atmosphere, Contact, Given, Material

Array = NDArray[np.float64]

#: Conductance of a wall that takes up or lets out a gas at its face, mol m-2 s-1 per unit activity:
#: far above any melt-side rate, finite so that the gas side stays linear.
OPEN = 1.0e3
#: Effective pressure of CO at a carbon wall, Pa: bubbles need the gas above, the metal head and the
#: curvature of the pore; pores that vent hold less. From memory (vacuum melting practice).
CO_VENTED = (200.0, 1500.0)
#: Pressure below which a vacuum is taken to strip the oxide film that keeps a melt from wetting its wall, Pa:
#: from memory (sessile drops of aluminium); the cautious side, for a stripped wall exchanges in full.
STRIPPED = 1e-2


def wall(contact: Contact, setting: Setting) -> Exposed:
    """Return how a solid compound wall acts on the metal.

    Parameters
    ----------
    contact : Contact
        With a :class:`Material` as its body.
    setting : Setting

    Returns
    -------
    Exposed
        Gaps name every compound that could not be given a rate or a ceiling.
    """
    material = contact.body
    assert isinstance(material, Material)
    area = setting.sample(contact.area)
    carriers: list[Carrier] = []
    records: dict[str, tuple[Found, ...]] = {}
    gaps: dict[str, tuple[Gap, ...]] = {}
    inputs: list[Given] = [contact.area]

    def add(
        made: tuple[Carrier, tuple[Found, ...]] | Gap, formula: str, extra: tuple[Found, ...] = ()
    ) -> None:
        if isinstance(made, Gap):
            for element in set(atoms(formula)) - {setting.host}:
                gaps[element] = (*gaps.get(element, ()), made)
            return
        carriers.append(made[0])
        records[made[0].name] = (*made[1], *extra)

    for formula in _phases(material, setting):
        bare = carrier(setting, formula, "solid", activity=np.ones(1), limit="wetting")
        add(bare if isinstance(bare, Gap) else capped(setting, bare), formula)
    if "C" in material.phases and "C" in setting.impurities:
        pressure = _co_pressure(contact, setting)
        inputs.append(pressure)
        made = carrier(
            setting,
            "CO",
            "gas",
            name=f"CO at {contact.name}",
            activity=setting.sample(pressure) / P0,
            conductance=flat(setting, OPEN),
            inventory=np.zeros(1),
            limit="gas film",
        )
        add(made, "CO")
    for formula, activity, inventory, found, used in _traces(contact, material, setting, area):
        inputs.extend(used)
        made = carrier(
            setting,
            formula,
            "solid",
            name=f"{formula} in {contact.name}",
            activity=activity,
            inventory=inventory,
            limit="inventory",
        )
        add(made, formula, found)

    opening, gate = wetting(setting, material)
    rate, element_records = exchange(setting, "wall", opening)
    element_records = {element: (*found, *gate) for element, found in element_records.items()}
    exposure = Exposure(contact.name, area, rate, tuple(carriers))
    return Exposed(exposure, None, records, element_records, tuple(inputs), gaps)


def wetting(setting: Setting, material: Material) -> tuple[Array, tuple[Found, ...]]:
    """Return the share of the exchange that an unwetted wall leaves open, (K, N), and its record.

    Below the gate temperature of the host and the wall's main compound only the points of contact
    exchange; a pair without a record counts as wetted, which is the cautious side. A high vacuum strips
    the film that keeps some metals from wetting, and much oxygen lets a metal wet oxides.
    """
    one = np.ones((len(setting.T), 1))
    if not setting.liquid or not material.phases:
        return one, ()
    main = max(material.phases, key=lambda formula: material.phases[formula])
    found = setting.library.find("wetting", host=setting.host, formula=main)
    if isinstance(found, Gap):
        return one, ()
    record = found.record
    z = normal(setting.draws, record.quantity)[0]
    share = np.minimum(1.0, record.fields["factor"] * np.exp(record.spread * z))
    wets = setting.T[:, np.newaxis] >= record.fields["T_gate_K"]
    if record.words["held_by"] == "film" and _pressure(setting) < STRIPPED:
        wets = np.ones_like(wets)
    oxygen, certified = record.fields.get("wets_from_O_ppm"), setting.lot.certificate.get("O")
    if oxygen is not None and certified is not None:
        wets = wets | (setting.sample(certified.given) >= 1e-6 * oxygen)
    return np.where(wets, 1.0, share), (found,)


def _pressure(setting: Setting) -> float:
    """Pressure above the melt as given, Pa; an atmosphere where no gas is named."""
    gas = next((c.body for c in setting.choice.contacts if c.role == "gas"), None)
    return gas.pressure.median if isinstance(gas, Atmosphere) else ATM


def _phases(material: Material, setting: Setting) -> list[str]:
    return [formula for formula in material.phases if set(atoms(formula)) != {setting.host}]


def _co_pressure(contact: Contact, setting: Setting) -> Given:
    gas = next((c.body for c in setting.choice.contacts if c.role == "gas"), None)
    above = float(getattr(getattr(gas, "pressure", None), "median", 0.0))
    low, high = CO_VENTED
    return Given(
        f"{contact.area.key}/CO pressure", "lognormal", max(low, 0.002 * above), max(high, above), True
    )


def _traces(
    contact: Contact, material: Material, setting: Setting, area: Array
) -> list[tuple[str, Array, Array, tuple[Found, ...], tuple[Given, ...]]]:
    """Return formula, activity (N,), inventory (N,) mol, records and inputs of each trace."""
    if not material.traces:
        return []
    contents = {formula: setting.sample(given) for formula, given in material.traces.items()}
    moles = {formula: content / _molar_mass(setting, formula) for formula, content in contents.items()}
    total = np.sum(np.stack(np.broadcast_arrays(*moles.values())), axis=0)
    depth, depth_found = _wall_value(setting, material, "leach_depth", material.leach_depth)
    density, density_found = _wall_value(setting, material, "density", None)
    # the share of one trace hangs on the contents of all
    found = (*behind(setting, *material.traces.values()), *depth_found, *density_found)
    rows: list[tuple[str, Array, Array, tuple[Found, ...], tuple[Given, ...]]] = []
    for formula, given in material.traces.items():
        if stoichiometry(setting, formula) is None or set(atoms(formula)) == {setting.host}:
            continue
        activity = np.minimum(1.0, moles[formula] / total)
        inventory = moles[formula] * depth * density * area
        rows.append((formula, activity, inventory, found, (given,)))
    return rows


def _wall_value(
    setting: Setting, material: Material, name: str, given: Given | None
) -> tuple[Array, tuple[Found, ...]]:
    found = setting.library.find("wall_values", material=_row_name(material), property=name)
    if isinstance(found, Gap):
        found = setting.library.find("wall_values", material="*", property=name)
    if given is not None:
        return setting.sample(given), () if isinstance(found, Gap) else (found,)
    if isinstance(found, Gap):
        return np.zeros(1), ()
    return found.record.fields["value_SI"] * spread_factor(setting, found.record), (found,)


def _row_name(material: Material) -> str:
    return material.origin.removeprefix("containers:")


def _molar_mass(setting: Setting, formula: str) -> float:
    total = 0.0
    for element, count in atoms(formula).items():
        known = setting.molar_mass.get(element)
        if known is None:
            row = setting.library.find("elements", element=element)
            assert isinstance(row, Found), element
            known = row.record.fields["molar_mass_g_per_mol"] / 1000.0
        total += count * known
    return total


def head(depth: float, density: float) -> float:
    """Return the pressure of a column of metal, Pa: density (kg/m3) x g x depth (m)."""
    return density * GRAVITY * depth
