"""Gibbs energies of pure substances over temperature, as the table of Gibbs energies has them.

All energies are molar, J/mol, and refer to the elements at 298.15 K and 1 bar. Each substance has its own
standard normal variable, drawn by its name, so that the spread of a difference is that of the records in
it and nothing is counted twice.
"""

from __future__ import annotations

import re
from collections import defaultdict
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from purity.constants import R
from purity.database import TABLES, Found, Gap, Library, Record, spread_at
from purity.draws import Draws, normal

Array = NDArray[np.float64]

T_REF = 298.15
#: H298, S298, a, b, c, d.
COEFFICIENTS = TABLES["gibbs"].numbers[:6]


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
        elif len(stack) == 1:
            end = 0
            break
        else:
            for name, count in stack.pop().items():
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


def element_energy(library: Library, element: str, T: ArrayLike, draws: Draws) -> Energy | Gap:
    """Return G of an element as it stands at T and 1 bar: condensed, or half its molecule if that is all."""
    index = substances(library)
    if (element, "solid") in index or (element, "liquid") in index:
        return stable(library, element, T, draws)
    molecule = gibbs_energy(library, f"{element}2", "gas", T, draws)
    if isinstance(molecule, Gap):
        return gibbs_energy(library, element, "gas", T, draws)
    return combine([(0.5, molecule)])


def formation(library: Library, formula: str, state: str, T: ArrayLike, draws: Draws) -> Energy | Gap:
    """Return the Gibbs energy of formation from the elements as they stand at T, J/mol.

    A metal stays condensed above its boiling point, so that no curve bends there.
    """
    compound = gibbs_energy(library, formula, state, T, draws)
    if isinstance(compound, Gap):
        return compound
    parts: list[tuple[float, Energy]] = [(1.0, compound)]
    for element, count in atoms(formula).items():
        energy = element_energy(library, element, T, draws)
        if isinstance(energy, Gap):
            return energy
        parts.append((-count, energy))
    return combine(parts)
