"""What every contact of one choice has in common, and the parts that contacts are built from."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field
from functools import lru_cache, reduce

import numpy as np
from numpy.typing import NDArray

from purity.constants import R
from purity.database import TABLES, Found, Gap, Library, Record, ln_value
from purity.draws import Draws, normal, sample
from purity.driving_force.pure import Energy, atoms
from purity.driving_force.substances import ln_dissolution
from purity.kinetics.exposure import Carrier, Curve, Exposure
from purity.scenario import Choice, Given, Lot

Array = NDArray[np.float64]

#: Temperature at which leaks, pumps and head spaces are counted, K.
T_ROOM = 295.0


@dataclass(frozen=True, slots=True)
class Setting:
    """The metal, the choice and the draws that all contacts of a choice share.

    Parameters
    ----------
    library : Library
    draws : Draws
    lot : Lot
    choice : Choice
    phase : str
        Phase of the host during the step, a row of the host table.
    impurities : tuple of str
        I elements of the run, in fixed order.
    molar_mass : mapping
        kg/mol of the host and of each impurity.
    T : (K,) array
        Knots of temperature, K, rising.
    duration : (N,) array
        s.
    amount : (N,) array
        mol of host.
    molar_density : (N,) array
        mol/m3.
    exclude : tuple of str
        Compounds that the user keeps from forming.
    """

    library: Library
    draws: Draws
    lot: Lot
    choice: Choice
    phase: str
    impurities: tuple[str, ...]
    molar_mass: Mapping[str, float]
    T: Array
    duration: Array
    amount: Array
    molar_density: Array
    exclude: tuple[str, ...] = ()

    @property
    def host(self) -> str:
        """Element of the host."""
        return self.lot.host

    @property
    def liquid(self) -> bool:
        """True for a melt."""
        return self.phase == "liquid"

    def sample(self, given: Given) -> Array:
        """Draw an input: (N,) or (1,)."""
        return sample(self.draws, given)


@dataclass(frozen=True, slots=True)
class Exposed:
    """A contact, ready for kinetics, with the records and inputs behind it.

    Parameters
    ----------
    exposure : Exposure
    gain : (I, N) array or None
        Content brought at once at the start of the step, mol per mol of host.
    carrier_records : mapping
        Records behind each carrier, by its name.
    element_records : mapping
        Records behind the exchange or the gain of each element.
    inputs : tuple of Given
        Inputs that were drawn.
    gaps : mapping
        What has no record, by the element that it leaves unassessed ("" for none in particular).
    notes : tuple of str
        What was assumed, in words.
    """

    exposure: Exposure
    gain: Array | None = None
    carrier_records: Mapping[str, tuple[Found, ...]] = field(default_factory=dict)
    element_records: Mapping[str, tuple[Found, ...]] = field(default_factory=dict)
    inputs: tuple[Given, ...] = ()
    gaps: Mapping[str, tuple[Gap, ...]] = field(default_factory=dict)
    notes: tuple[str, ...] = ()


Expose = Callable[..., Exposed]


def behind(setting: Setting, *inputs: Given | None) -> tuple[Found, ...]:
    """Return the records of inputs that a table gave: their key is the quantity of a record."""
    rows = [setting.library.rivals(given.key)[:1] for given in inputs if given is not None]
    return tuple(Found(record) for found in rows for record in found)


def withdrawn(setting: Setting, *names: str) -> tuple[Gap, ...]:
    """Return a gap for each quantity of a name, or under it, that a user's own table takes out.

    Parameters
    ----------
    setting : Setting
    *names : str
        A quantity (``wetting:Cu/C``) or the first words of several (``traces:magnesia``).
    """
    gone = sorted(setting.library.withdrawn)
    return tuple(
        Gap(quantity, "withdrawn by your own table")
        for quantity in gone
        if any(quantity == name or quantity.startswith(f"{name}/") for name in names)
    )


def by_element(setting: Setting, gaps: Iterable[Gap]) -> dict[str, tuple[Gap, ...]]:
    """Return gaps by the impurities in the formula that ends their quantity."""
    found: dict[str, tuple[Gap, ...]] = {}
    for gap in gaps:
        for element in atoms(gap.quantity.split(":")[1].split("/")[-1]):
            if element != setting.host:
                found[element] = (*found.get(element, ()), gap)
    return found


def for_all(elements: Iterable[str], gaps: tuple[Gap, ...]) -> dict[str, tuple[Gap, ...]]:
    """Return the same gaps for every element; nothing where there are none."""
    return dict.fromkeys(elements, gaps) if gaps else {}


def together(*found: Mapping[str, tuple[Gap, ...]]) -> dict[str, tuple[Gap, ...]]:
    """Return gaps by element, each once."""
    names = dict.fromkeys(name for one in found for name in one)
    return {name: tuple(dict.fromkeys(g for one in found for g in one.get(name, ()))) for name in names}


def curve(setting: Setting, ln: Array) -> Curve:
    """Return a curve on the knots of the step; `ln` is (..., K, N)."""
    return Curve(setting.T, np.asarray(ln, dtype=float))


def flat(setting: Setting, value: Array | float) -> Curve:
    """Return a curve that does not depend on temperature; `value` is (N,) and positive."""
    ln = np.log(np.atleast_1d(np.asarray(value, dtype=float)))
    return Curve(setting.T[:1], ln[np.newaxis, :])


def stoichiometry(setting: Setting, formula: str) -> Array | None:
    """Return atoms of each impurity in a formula, (I,), or None where an atom is not followed.

    Atoms of the host itself count in ln K at activity 1 and leave no entry here.
    """
    counts = atoms(formula)
    if not set(counts) <= {*setting.impurities, setting.host}:
        return None
    return np.array([float(counts.get(element, 0.0)) for element in setting.impurities])


def carrier(
    setting: Setting,
    formula: str,
    state: str,
    *,
    name: str | None = None,
    activity: Array,
    conductance: Curve | None = None,
    inventory: Array | None = None,
    limit: str = "gas film",
) -> tuple[Carrier, tuple[Found, ...]] | Gap:
    """Make the carrier of a compound or gas that dissolves atom by atom.

    Parameters
    ----------
    formula, state : str
        Row of the Gibbs table.
    activity : (N,) array
        On the far side: 1 for a pure phase, p/P0 for a gas.
    conductance, inventory, limit
        As in :class:`Carrier`.

    Returns
    -------
    (Carrier, records) or Gap
    """
    nu = stoichiometry(setting, formula)
    if nu is None or not nu.any():
        return Gap(f"gibbs:{formula}/{state}", f"{formula} holds an element that is not followed here")
    energy = dissolution(setting, formula, state)
    if isinstance(energy, Gap):
        return energy
    made = Carrier(name or formula, nu, curve(setting, energy.value), activity, conductance, inventory, limit)
    return made, energy.found


class _Same:
    """Key of a cache by identity: a library never changes."""

    __slots__ = ("library",)

    def __init__(self, library: Library) -> None:
        self.library = library

    def __hash__(self) -> int:
        return id(self.library)

    def __eq__(self, other: object) -> bool:
        return isinstance(other, _Same) and other.library is self.library


@lru_cache(maxsize=1024)
def _dissolution(
    same: _Same, host: str, phase: str, formula: str, state: str, knots: tuple[float, ...], draws: Draws
) -> Energy | Gap:
    T = np.array(knots)[:, np.newaxis]
    return ln_dissolution(same.library, host, phase, formula, state, T, draws)


def dissolution(setting: Setting, formula: str, state: str, draws: Draws | None = None) -> Energy | Gap:
    """Return ln K of a compound or gas at the knots of a step, (K, N); see :func:`ln_dissolution`.

    Choices at the same temperatures share the answer.
    """
    return _dissolution(
        _Same(setting.library),
        setting.host,
        setting.phase,
        formula,
        state,
        tuple(setting.T.tolist()),
        setting.draws if draws is None else draws,
    )


def carrier_of(setting: Setting, gas: str, mol: Array) -> Carrier:
    """Return a carrier that is nothing but a supply: so many mol of a gas and no more."""
    nu = stoichiometry(setting, gas)
    assert nu is not None, gas
    return Carrier(gas, nu, flat(setting, 1.0), np.ones(1), None, mol, "permeation")


def diffusivity(setting: Setting, element: str) -> tuple[Array, Found] | Gap:
    """Return ln D (m2/s) at the knots, (K, N): of the pair, else the estimate for its phase."""
    library = setting.library
    found = library.find("diffusion", host=setting.host, phase=setting.phase, solute=element)
    if isinstance(found, Gap):
        general = library.find("diffusion", host="*", phase=setting.phase, solute="*")
        if isinstance(general, Gap):
            return found
        found = Found(general.record, general.rivals, "estimate")
    z = normal(setting.draws, f"diffusion:{setting.host}/{setting.phase}/{element}", 2)
    return ln_value(found.record, setting.T[:, np.newaxis], z), found


def spread_factor(setting: Setting, record: Record) -> Array:
    """Return the multiplicative deviation of a record without a law of its own, (N,)."""
    return np.asarray(np.exp(_ln_sigma(record) * normal(setting.draws, record.quantity)[0]))


def _ln_sigma(record: Record) -> float:
    return float(np.log(record.spread)) if TABLES[record.table].spread == "spread_factor" else record.spread


def series(*conductances: Array | None) -> Array:
    """Add resistances in series; None stands for no resistance.

    Parameters
    ----------
    *conductances : arrays or None
        mol m-2 s-1 per unit activity.

    Returns
    -------
    array
        Broadcast of the inputs.
    """
    parts = [1.0 / np.asarray(part, dtype=float) for part in conductances if part is not None]
    return np.asarray(1.0 / reduce(np.add, parts))


def exchange(
    setting: Setting, place: str, factor: Array | None = None
) -> tuple[Curve, dict[str, tuple[Found, ...]]]:
    """Return the metal-side exchange of every impurity at a wall or free surface.

    A melt takes k = k_ref (D/D_ref)^m of its place and stirring, with one factor of stirring for the
    whole bath (boundary-layer theory: m = 1/2 for surface renewal, 2/3 at a wall). In a solid the
    resistance is the diffusion inside, so the exchange is left without limit.

    Parameters
    ----------
    place : str
        ``wall`` or ``free surface``.
    factor : (K, N) array or None
        Share of the exchange that the contact leaves open (wetting, contact share).

    Returns
    -------
    (Curve (I, K, N) in m/s, records by element)
        Without limit where the table has no row: see :func:`exchange_gaps`.
    """
    if not setting.liquid:
        ln = np.zeros((len(setting.impurities), len(setting.T), 1))
        if factor is not None:
            ln = ln + np.log(factor)
        return curve(setting, ln), {}
    stirring = setting.choice.stirring or "quiescent"
    found = setting.library.find("transfer", place=place, stirring=stirring)
    if isinstance(found, Gap):
        return curve(setting, np.zeros((len(setting.impurities), len(setting.T), 1))), {}
    record = found.record
    z = normal(setting.draws, f"stirring:{stirring}")[0]
    ln_ref = np.log(record.fields["k_m_per_s"]) + record.spread * z
    rows: list[Array] = []
    records: dict[str, tuple[Found, ...]] = {}
    for element in setting.impurities:
        diffusion = diffusivity(setting, element)
        if isinstance(diffusion, Gap):
            rows.append(np.broadcast_to(ln_ref, (len(setting.T), len(ln_ref))))
            records[element] = (found,)
            continue
        ln_d, own = diffusion
        rows.append(ln_ref + record.fields["exponent"] * (ln_d - np.log(record.fields["D_ref_m2_per_s"])))
        records[element] = (found, own)
    ln = np.stack(np.broadcast_arrays(*rows))
    if factor is not None:
        ln = ln + np.log(factor)
    return curve(setting, ln), records


def exchange_gaps(setting: Setting, place: str) -> dict[str, tuple[Gap, ...]]:
    """Return what is missing for :func:`exchange`: without a rate at a place no element is assessed."""
    if not setting.liquid:
        return {}
    stirring = setting.choice.stirring or "quiescent"
    found = setting.library.find("transfer", place=place, stirring=stirring)
    gaps = for_all(setting.impurities, (found,)) if isinstance(found, Gap) else {}
    missing = {e: d for e in setting.impurities if isinstance(d := diffusivity(setting, e), Gap)}
    return together(gaps, {element: (gap,) for element, gap in missing.items()})


def vapour_speed(T: Array | float, molar_mass: float) -> Array:
    """Return 1 / sqrt(2 pi M R T), the Hertz-Knudsen factor, mol m-2 s-1 Pa-1."""
    return np.asarray(1.0 / np.sqrt(2.0 * np.pi * molar_mass * R * np.asarray(T, dtype=float)))


__all__ = [
    "T_ROOM",
    "Energy",
    "Exposed",
    "Setting",
    "carrier",
    "carrier_of",
    "curve",
    "diffusivity",
    "dissolution",
    "exchange",
    "flat",
    "series",
    "spread_factor",
    "stoichiometry",
    "vapour_speed",
]
