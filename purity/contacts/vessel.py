"""What the vessel does to the gas on its way: hot zone as a getter, and air that purging left.

A hot zone meets the gas before the metal does. It takes the oxygen of O2, H2O and CO2 and lets hydrogen
and carbon monoxide go; graphite sends the oxygen on as CO, a metal zone binds it. The share taken is
1 - exp(-n) with n meetings of a molecule with the zone, uncertain in n. A measured exhaust already holds
what the zone did, so nothing is taken from it.
"""

from __future__ import annotations

import re
from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from purity.constants import ATM, P0, R
from purity.contacts.setting import T_ROOM, Setting, spread_factor
from purity.database import Found, Gap
from purity.draws import Draws
from purity.driving_force.pure import atoms, vapour
from purity.scenario import Furnace, Given

Array = NDArray[np.float64]

#: Gases whose oxygen a hot zone takes.
OXIDISING = ("O2", "H2O", "CO2")
#: Share of the gas in a vessel that one pump-and-fill cycle leaves, 90 % band: pumped down to between 0.1
#: and 10 mbar with a vacuum pump at the vessel, to between 1 and 100 mbar without (common practice, no
#: source).
LEFT_PUMPED, LEFT = (1e-4, 1e-2), (1e-3, 1e-1)
#: Vapour pressure from which a metal of the last charge is told, Pa (common practice, no source).
VOLATILE = 1.0


def outgassing(setting: Setting, furnace: Furnace) -> str:
    """Return the row set that says what the walls and the hot zone of a furnace give off."""
    found = _zone(setting, furnace)
    return "outgassing" if found is None else found.record.words["outgassing"]


def gettered(
    setting: Setting, furnace: Furnace, gas: Mapping[str, Array]
) -> tuple[dict[str, Array], tuple[Found, ...]]:
    """Return gas after it has met the hot zone of a furnace.

    Parameters
    ----------
    setting : Setting
    furnace : Furnace
    gas : mapping of species to (N,) array
        Flows or pressures, any unit in proportion to amount.

    Returns
    -------
    (mapping, records)
        Carbon of CO2 leaves as CO, hydrogen of water as H2; the oxygen taken leaves as the zone says.
    """
    found = _zone(setting, furnace)
    out = dict(gas)
    if found is None or not _takes(setting, found):
        return out, ()
    fields = found.record.fields
    meetings = -np.log1p(-fields["getter_share"]) * spread_factor(setting, found.record)
    share = -np.expm1(-meetings)
    taken = np.zeros(1)
    for name in OXIDISING:
        if name not in gas:
            continue
        turned = share * gas[name]
        out[name] = gas[name] - turned
        counts = atoms(name)
        out_oxygen = counts["O"] - counts.get("C", 0.0)
        taken = taken + out_oxygen * turned
        if "H" in counts:
            out["H2"] = out.get("H2", np.zeros(1)) + turned * counts["H"] / 2.0
        if "C" in counts:
            out["CO"] = out.get("CO", np.zeros(1)) + turned
    leaves_as = found.record.words["leaves_as"]
    if leaves_as:
        out[leaves_as] = out.get(leaves_as, np.zeros(1)) + taken / atoms(leaves_as)["O"]
    return out, (found,)


def vapours(setting: Setting, furnace: Furnace) -> tuple[str, ...]:
    """Return what the hot zone and the last charge send out, as warnings: no record says how much lands."""
    return (*_from_zone(setting, furnace), *condensates(setting, furnace))


def condensates(setting: Setting, furnace: Furnace) -> tuple[str, ...]:
    """Return warnings of metals of the last charge that evaporate again at the hottest point."""
    said = {word.casefold() for word in re.findall(r"[A-Za-z]+", furnace.last_charge or "")}
    symbols = set(re.findall(r"\b[A-Z][a-z]?\b", furnace.last_charge or ""))
    hottest = max(given.median for _, given in setting.choice.profile)
    texts = []
    for row in setting.library.rows("elements"):
        element, name = row.words["element"], row.words["name"]
        if element == setting.host or not (element in symbols or name.casefold() in said):
            continue
        pressure = vapour(setting.library, element, hottest, Draws.nominal())
        if not isinstance(pressure, Gap) and float(np.exp(pressure.value.ravel()[0])) * P0 > VOLATILE:
            texts.append(
                f"the furnace last held {name}: what condensed in it evaporates again onto the metal; "
                "no record says how much, so none is counted: bake the furnace out empty first"
            )
    return tuple(texts)


def _from_zone(setting: Setting, furnace: Furnace) -> tuple[str, ...]:
    found = _zone(setting, furnace)
    if found is None or not found.record.words["vapours"]:
        return ()
    what, zone = found.record.words["vapours"], found.record.words["zone"]
    return (f"{zone} hot zone: {what} may land on the metal; no record says how much, so none is counted",)


def air_left(setting: Setting, furnace: Furnace) -> tuple[Array, tuple[Given, ...], tuple[str, ...]]:
    """Return the share of the gas in the vessel that is still air after purging.

    Returns
    -------
    (share (N,), inputs, notes)
        The share is 0 with a note where nobody says how often the vessel was purged.
    """
    if furnace.purges is None:
        note = "air left in the vessel at the start is not counted: give purges" if furnace.volume else ""
        return np.zeros(1), (), (note,) if note else ()
    low, high = LEFT_PUMPED if furnace.pump is not None else LEFT
    cycles = furnace.purges
    if cycles == 0:
        return np.ones(1), (), ()
    where = furnace.volume.key.rpartition("/")[0] if furnace.volume else "furnace"
    left = Given(f"{where}/air left", "lognormal", low**cycles, high**cycles, True)
    return setting.sample(left), (left,), ()


def swept(left: Array, flow: Array, volume: Array, time: Array) -> Array:
    """Return the mean share of air in the outflow while a vessel is swept, (N,).

    A stirred vessel of `volume` (mol) swept by `flow` (mol/s) from a share `left` gives off
    left V (1 - exp(-F t / V)) in the time t, so the mean over the step is that over F t.
    """
    turns = flow * time / volume
    return np.asarray(left * -np.expm1(-turns) / np.maximum(turns, 1e-300))


def vessel_moles(setting: Setting, furnace: Furnace) -> Array | None:
    """Return mol of gas in a cold vessel at one atmosphere, (N,)."""
    if furnace.volume is None:
        return None
    return np.asarray(ATM * setting.sample(furnace.volume) / (R * T_ROOM))


def _zone(setting: Setting, furnace: Furnace) -> Found | None:
    found = setting.library.find("hot_zones", zone=furnace.hot_zone or "none")
    return found if isinstance(found, Found) else None


def _takes(setting: Setting, found: Found) -> bool:
    """Whether the zone, at least as hot as the metal, is hot enough at the hottest point."""
    fields = found.record.fields
    hottest = max(given.median for _, given in setting.choice.profile)
    return fields["getter_share"] > 0 and hottest >= fields["T_from_K"]


__all__ = ["air_left", "condensates", "gettered", "outgassing", "swept", "vapours", "vessel_moles"]
