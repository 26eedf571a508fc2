"""Gibbs energies over temperature: pure substances, the host, and what is dissolved in it.

All energies are molar, J/mol, and refer to the elements at 298.15 K and 1 bar. Each record has its own
standard normal variable, drawn by the name of what it describes, so that the spread of a difference is
that of the records in it and nothing is counted twice.
"""

from __future__ import annotations

import re
from collections import defaultdict
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from functools import lru_cache
from math import log

import numpy as np
from numpy.typing import ArrayLike, NDArray

from purity.constants import ATM, P0, R
from purity.database import TABLES, Found, Gap, Library, Record, ln_value, outside, parameters, spread_at
from purity.draws import Draws, normal
from purity.driving_force import estimate

Array = NDArray[np.float64]

T_REF = 298.15
#: H298, S298, a, b, c, d.
COEFFICIENTS = TABLES["gibbs"].numbers[:6]
#: State of the pure solute that a record of activity refers to.
REFERENCES: Mapping[str, str] = {"l": "liquid", "s": "solid", "gr": "solid"}


@dataclass(frozen=True, slots=True)
class Energy:
    """A Gibbs energy per draw, or a logarithm made of some.

    Parameters
    ----------
    value : (K, N) or (N,) array
        J/mol, or 1 where a function says so.
    found : tuple of Found
        The records it rests on.
    outside : bool array
        Where a record is carried beyond its range; shape of `value`.
    """

    value: Array
    found: tuple[Found, ...]
    outside: NDArray[np.bool_]


@lru_cache(maxsize=4096)
def _counts(formula: str) -> tuple[tuple[str, float], ...]:
    counts: defaultdict[str, float] = defaultdict(float)
    stack: list[defaultdict[str, float]] = [counts]
    end = 0
    for match in re.finditer(r"([A-Z][a-z]?)(\d*\.?\d*)|(\()|\)(\d*\.?\d*)", formula):
        element, number, opening, times = match.groups()
        if match.start() != end:
            break
        end = match.end()
        if element:
            stack[-1][element] += float(number or 1)
        elif opening:
            stack.append(defaultdict(float))
        elif len(stack) > 1:
            inner = stack.pop()
            for name, count in inner.items():
                stack[-1][name] += count * float(times or 1)
    if end != len(formula) or len(stack) != 1 or not counts:
        raise ValueError(f"{formula!r} is not a chemical formula")
    return tuple(counts.items())


def atoms(formula: str) -> dict[str, float]:
    """Count the atoms of a formula: ``Fe0.947O``, ``Ca(OH)2``.

    Raises
    ------
    ValueError
        For text that is no formula.
    """
    return dict(_counts(formula))


class _Same:
    """Key of a cache by identity: tables never change."""

    __slots__ = ("rows",)

    def __init__(self, rows: tuple[Record, ...]) -> None:
        self.rows = rows

    def __hash__(self) -> int:
        return id(self.rows)

    def __eq__(self, other: object) -> bool:
        return isinstance(other, _Same) and other.rows is self.rows


@lru_cache(maxsize=16)
def _by_substance(same: _Same) -> Mapping[tuple[str, str], tuple[Record, ...]]:
    best: dict[str, Record] = {}
    for record in same.rows:
        best.setdefault(record.quantity, record)
    index: defaultdict[tuple[str, str], list[Record]] = defaultdict(list)
    for record in best.values():
        index[record.words["formula"], record.words["state"]].append(record)
    return {key: tuple(records) for key, records in index.items()}


def substances(library: Library) -> Mapping[tuple[str, str], tuple[Record, ...]]:
    """Return the rows of every (formula, state) of the Gibbs table: polymorphs and temperature pieces."""
    return _by_substance(_Same(library.tables.get("gibbs", ())))


def piece(record: Record, T: ArrayLike) -> Array:
    """Return G of one row, Cp = a + bT + c/T^2 + dT^2, J/mol; a continuation outside its range."""
    t = np.asarray(T, dtype=float)
    H, S, a, b, c, d = (record.fields[name] for name in COEFFICIENTS)
    heat = a * (t - T_REF) + b * (t**2 - T_REF**2) / 2 - c * (1 / t - 1 / T_REF) + d * (t**3 - T_REF**3) / 3
    disorder = (
        a * np.log(t / T_REF) + b * (t - T_REF) - c * (t**-2 - T_REF**-2) / 2 + d * (t**2 - T_REF**2) / 2
    )
    return np.asarray(H + heat - t * (S + disorder))


def _beyond(record: Record, t: Array) -> Array:
    return np.maximum(np.maximum(record.T_min / t, t / record.T_max), 1.0)


def gibbs_energy(library: Library, formula: str, state: str, T: ArrayLike, draws: Draws) -> Energy | Gap:
    """Return G of a pure substance: the lowest of its polymorphs that are tabulated at T.

    Parameters
    ----------
    library : Library
    formula : str
    state : {"solid", "liquid", "gas"}
        A gas is at 1 bar.
    T : () , (N,), (K, 1) or (K, N) array_like
        K. Outside every row the nearest is continued with a wider spread.
    draws : Draws

    Returns
    -------
    Energy or Gap
        J per mole of formula; all rows of a substance share one standard normal variable.
    """
    rows = substances(library).get((formula, state), ())
    if not rows:
        other = tuple(f"{f}/{s}" for f, s in substances(library) if f == formula)
        return Gap(f"gibbs:{formula}/{state}", f"no Gibbs energy of {formula} as a {state}", other)
    t = np.asarray(T, dtype=float)
    energies = np.stack([piece(row, t) for row in rows])
    beyond = np.stack([_beyond(row, t) for row in rows])
    nearest = beyond <= beyond.min(axis=0) * (1.0 + 1e-12)
    chosen = np.where(nearest, energies, np.inf).argmin(axis=0)
    spread = np.stack([np.broadcast_to(spread_at(row, t), t.shape) for row in rows])
    z = normal(draws, f"gibbs:{formula}/{state}")[0]
    value = _take(energies, chosen) + _take(spread, chosen) * z
    used = tuple(found(library, rows[i]) for i in np.unique(chosen))
    return Energy(value, used, np.broadcast_to(beyond.min(axis=0) > 1.0, value.shape))


def _take(stack: Array, index: NDArray[np.int64]) -> Array:
    return np.asarray(np.take_along_axis(stack, index[np.newaxis], axis=0)[0])


def found(library: Library, record: Record) -> Found:
    """Return a record with its rivals."""
    rivals = tuple(other for other in library.rivals(record.quantity) if other is not record)
    return Found(record, rivals, "yours" if record.yours else "measured")


def combine(parts: Iterable[tuple[float, Energy]]) -> Energy:
    """Add energies with factors; each record is named once."""
    factors, energies = zip(*parts, strict=True)
    value = sum(f * e.value for f, e in zip(factors, energies, strict=True))
    beyond = np.any(np.stack(np.broadcast_arrays(*(e.outside for e in energies))), axis=0)
    named = {f.record.quantity: f for e in energies for f in e.found}
    return Energy(np.asarray(value, dtype=float), tuple(named.values()), beyond)


def host_energy(library: Library, host: str, phase: str, T: ArrayLike, draws: Draws) -> Energy | Gap:
    """Return G of the pure host, J/mol; a solid one in its most stable lattice."""
    return gibbs_energy(library, host, "liquid" if phase == "liquid" else "solid", T, draws)


def molar_mass(library: Library, element: str) -> float | Gap:
    """Return the molar mass of an element, kg/mol."""
    row = library.find("elements", element=element)
    return row if isinstance(row, Gap) else row.record.fields["molar_mass_g_per_mol"] * 1e-3


def solute(library: Library, host: str, phase: str, element: str, T: ArrayLike, draws: Draws) -> Energy | Gap:
    """Return the Gibbs energy of a dissolved element in its Henrian standard state, x = 1.

    From a record of activity, G of the pure reference + RT ln gamma; from a record of the Sieverts
    constant, half the molecule at 1 bar - RT ln x(1 bar); else the estimate of
    :mod:`purity.driving_force.estimate`, marked so.

    Parameters
    ----------
    library : Library
    host, phase, element : str
    T : array_like
        K.
    draws : Draws

    Returns
    -------
    Energy or Gap
        J/mol: mu = value + RT ln x, x in moles per mole of host.
    """
    if element == host:
        return host_energy(library, host, phase, T, draws)
    key = {"host": host, "phase": phase, "solute": element}
    record = library.find("activity", **key)
    if isinstance(record, Gap):
        gas = library.find("sieverts", **key)
        if isinstance(gas, Found):
            return _from_gas(library, host, element, gas, T, draws)
        record = estimate.activity(library, host, phase, element)
    if isinstance(record, Gap):
        return record
    return _from_activity(library, element, record, T, draws)


def ln_gamma(record: Found, T: ArrayLike, draws: Draws) -> Array:
    """Return ln of the activity coefficient at infinite dilution of a record or estimate of activity."""
    z = normal(draws, record.record.quantity, parameters(record.record))
    if record.how == "estimate":
        return estimate.ln_gamma(record, T, z[0])
    return ln_value(record.record, T, z)


def _from_activity(library: Library, element: str, record: Found, T: ArrayLike, draws: Draws) -> Energy | Gap:
    state = REFERENCES[record.record.words["reference"]]
    pure = gibbs_energy(library, element, state, T, draws)
    if isinstance(pure, Gap):
        return pure
    value = pure.value + R * np.asarray(T, dtype=float) * ln_gamma(record, T, draws)
    beyond = pure.outside | np.broadcast_to(outside(record.record, T), value.shape)
    return Energy(value, (record, *pure.found), beyond)


def _from_gas(
    library: Library, host: str, element: str, record: Found, T: ArrayLike, draws: Draws
) -> Energy | Gap:
    gas = gibbs_energy(library, f"{element}2", "gas", T, draws)
    host_mass, mass = molar_mass(library, host), molar_mass(library, element)
    if isinstance(gas, Gap):
        return gas
    if isinstance(host_mass, Gap):
        return host_mass
    if isinstance(mass, Gap):
        return mass
    ppm = ln_value(record.record, T, normal(draws, record.record.quantity, parameters(record.record)))
    ln_x = ppm + log(1e-6 * host_mass / mass) - 0.5 * log(ATM / P0)
    value = 0.5 * gas.value - R * np.asarray(T, dtype=float) * ln_x
    beyond = gas.outside | np.broadcast_to(outside(record.record, T), value.shape)
    return Energy(value, (record, *gas.found), beyond)


def ln_dissolution(
    library: Library,
    host: str,
    phase: str,
    formula: str,
    state: str,
    T: ArrayLike,
    draws: Draws,
    activity_of_host: ArrayLike = 1.0,
) -> Energy | Gap:
    """Return ln K of a compound, or a gas at 1 bar, that dissolves atom by atom.

    At equilibrium sum nu_i ln x_i = ln K over its atoms other than the host, whose atoms in the compound
    have the given activity; a product below K is undersaturated.

    Returns
    -------
    Energy or Gap
        Without dimension.
    """
    substance = gibbs_energy(library, formula, state, T, draws)
    if isinstance(substance, Gap):
        return substance
    parts: list[tuple[float, Energy]] = [(1.0, substance)]
    counts = atoms(formula)
    for element, count in counts.items():
        dissolved = solute(library, host, phase, element, T, draws)
        if isinstance(dissolved, Gap):
            return dissolved
        parts.append((-count, dissolved))
    total = combine(parts)
    ln_k = total.value / (R * np.asarray(T, dtype=float))
    return Energy(ln_k - counts.get(host, 0.0) * np.log(activity_of_host), total.found, total.outside)


def vapour(library: Library, element: str, T: ArrayLike, draws: Draws) -> Energy | Gap:
    """Return ln of the pressure of the atoms of an element over its stable condensed form, bar.

    Returns
    -------
    Energy or Gap
        ln(p / 1 bar), without dimension.
    """
    gas = gibbs_energy(library, element, "gas", T, draws)
    if isinstance(gas, Gap):
        return gas
    condensed = stable(library, element, T, draws)
    if isinstance(condensed, Gap):
        return condensed
    total = combine([(1.0, condensed), (-1.0, gas)])
    return Energy(total.value / (R * np.asarray(T, dtype=float)), total.found, total.outside)


def stable(library: Library, formula: str, T: ArrayLike, draws: Draws) -> Energy | Gap:
    """Return G of the more stable of the solid and the liquid at T, judged at the medians, J/mol."""
    made = [gibbs_energy(library, formula, state, T, draws) for state in ("solid", "liquid")]
    energies = [e for e in made if isinstance(e, Energy)]
    if not energies:
        return next(e for e in made if isinstance(e, Gap))
    if len(energies) == 1:
        return energies[0]
    solid, liquid = energies
    medians = [gibbs_energy(library, formula, state, T, Draws.nominal()) for state in ("solid", "liquid")]
    first, second = (m.value for m in medians if isinstance(m, Energy))
    melted = np.broadcast_to(second < first, np.broadcast_shapes(solid.value.shape, second.shape))
    used = {
        f.record.quantity: f
        for e, there in ((solid, ~melted), (liquid, melted))
        if there.any()
        for f in e.found
    }
    return Energy(
        np.where(melted, liquid.value, solid.value),
        tuple(used.values()),
        np.where(melted, liquid.outside, solid.outside),
    )
