"""Exact bases of an equilibrium problem: independent elements, component substances, well-posedness."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from math import lcm

import numpy as np
from numpy.typing import NDArray

from purity.errors import IllPosedError

Array = NDArray[np.float64]
Rows = tuple[tuple[int, ...], ...]


@dataclass(frozen=True, slots=True)
class Layout:
    """Species of one problem, sorted by phase, in a basis of independent elements.

    Parameters
    ----------
    a : (S, C) array
        Atoms of each independent element in each species.
    edges : tuple of (int, int)
        First and last + 1 species of each phase that has an amount of its own.
    phase : (S,) integer array
        Phase of each species; a gas at fixed volume comes last and has number P.
    families : tuple of tuples of int
        Pure phases of proportional composition, of which one at most is stable.
    pure : tuple of two integer arrays
        Phases of one species, and that species.
    low, high : integer arrays
        Lower triangle of a C x C matrix.
    pairs : (C (C + 1) / 2, S) array
        Products of the atoms of each pair of elements.
    closed : int
        Number of species outside the gas at fixed volume.
    mixed : tuple of (int, int, int)
        Phases of several species: number, first and last + 1 species.
    needed : (P,) bool array
        Phases that alone hold some element, so that they are present however little there is of it.
    """

    a: Array
    edges: tuple[tuple[int, int], ...]
    phase: NDArray[np.intp]
    families: tuple[tuple[int, ...], ...]
    pure: tuple[NDArray[np.intp], NDArray[np.intp]]
    low: NDArray[np.intp]
    high: NDArray[np.intp]
    pairs: Array
    closed: int
    mixed: tuple[tuple[int, int, int], ...]
    needed: NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Basis:
    """Species and inputs written in component substances, with exact coefficients.

    Parameters
    ----------
    members : (C, C) array
        Independent elements in each component.
    species : (S, C) array
    inputs : (J, C) array
        Numerators, whole numbers.
    divisor : (C,) array
        Common denominators of `inputs`.
    """

    members: Array
    species: Array
    inputs: Array
    divisor: Array


def independent(rows: Sequence[Sequence[int]]) -> list[int]:
    """Find the first rows that are linearly independent, by rational elimination.

    Parameters
    ----------
    rows : sequence of sequences of int

    Returns
    -------
    list of int
        Their positions.
    """
    kept: list[int] = []
    reduced: list[tuple[int, list[Fraction]]] = []
    for index, row in enumerate(rows):
        left = [Fraction(v) for v in row]
        for pivot, other in reduced:
            if left[pivot]:
                factor = left[pivot]
                left = [v - factor * w for v, w in zip(left, other, strict=True)]
        lead = next((k for k, v in enumerate(left) if v), None)
        if lead is not None:
            reduced.append((lead, [v / left[lead] for v in left]))
            kept.append(index)
    return kept


def _inverse(matrix: Sequence[Sequence[int]]) -> list[list[Fraction]]:
    size = len(matrix)
    work = [
        [Fraction(v) for v in row] + [Fraction(int(i == j)) for j in range(size)]
        for i, row in enumerate(matrix)
    ]
    for col in range(size):
        pivot = next(r for r in range(col, size) if work[r][col])
        work[col], work[pivot] = work[pivot], work[col]
        head = work[col][col]
        work[col] = [v / head for v in work[col]]
        for r in range(size):
            if r != col and work[r][col]:
                factor = work[r][col]
                work[r] = [v - factor * w for v, w in zip(work[r], work[col], strict=True)]
    return [row[size:] for row in work]


def _express(rows: Rows, inverse: list[list[Fraction]]) -> list[list[Fraction]]:
    size = len(inverse)
    return [
        [sum((row[k] * inverse[k][c] for k in range(size) if row[k]), Fraction(0)) for c in range(size)]
        for row in rows
    ]


@lru_cache(maxsize=256)
def basis(species: Rows, inputs: Rows, candidates: Rows) -> Basis:
    """Write species and inputs in the first independent candidates.

    Parameters
    ----------
    species, inputs, candidates : rows of independent elements
        Single elements complete the candidates where they fall short.

    Returns
    -------
    Basis
    """
    size = len(species[0])
    units = tuple(tuple(int(i == j) for j in range(size)) for i in range(size))
    pool = candidates + units
    members = [pool[i] for i in independent(pool)]
    inverse = _inverse(members)
    exact = _express(inputs, inverse)
    divisor = [lcm(*(row[c].denominator for row in exact)) if exact else 1 for c in range(size)]
    whole = [[int(v * divisor[c]) for c, v in enumerate(row)] for row in exact]
    return Basis(
        np.array(members, dtype=float),
        np.array([[float(v) for v in row] for row in _express(species, inverse)]),
        np.array(whole, dtype=float).reshape(len(inputs), size),
        np.array(divisor, dtype=float),
    )


def combine(amounts: Array, coefficients: Array, divisor: Array) -> Array:
    """Sum amounts x whole coefficients / divisor with a compensated sum, so that cancellation stays exact.

    Parameters
    ----------
    amounts : (J, N) array
    coefficients : (J, C) array of whole numbers
    divisor : (C,) array

    Returns
    -------
    (C, N) array

    Notes
    -----
    Error-free product and sum of T. J. Dekker, Numer. Math. 18 (1971) 224.
    """
    total: Array = np.zeros((coefficients.shape[1], amounts.shape[1]))
    carry: Array = np.zeros_like(total)
    for row, factor in zip(amounts, coefficients, strict=True):
        high, low = _product(row[None, :], factor[:, None])
        new: Array = total + high
        back = new - total
        carry += (total - (new - back)) + (high - back) + low
        total = new
    return (total + carry) / divisor[:, None]


def _product(x: Array, k: Array) -> tuple[Array, Array]:
    split = 134217729.0
    big = x * split
    upper = big - (big - x)
    lower = x - upper
    product: Array = x * k
    error: Array = (upper * k - product) + lower * k
    return product, error


@lru_cache(maxsize=256)
def layout(formula: Rows, phase: tuple[int, ...], fixed_volume: bool) -> tuple[Layout, tuple[int, ...], Rows]:
    """Choose independent elements and find phases that compete for the same composition.

    Parameters
    ----------
    formula : (S, E) rows
        Sorted by phase.
    phase : tuple of int
        0 ... P-1, ascending.
    fixed_volume : bool
        True: the last phase is a gas at fixed volume.

    Returns
    -------
    Layout, tuple of int, rows
        The layout, the positions of the independent elements, and the species in them.
    """
    columns = tuple(independent(list(zip(*formula, strict=True))))
    rows = tuple(tuple(row[c] for c in columns) for row in formula)
    numbers = np.array(phase, dtype=np.intp)
    last = max(phase) + (0 if fixed_volume else 1)
    edges = tuple(
        (int(np.searchsorted(numbers, p)), int(np.searchsorted(numbers, p, side="right")))
        for p in range(last)
    )
    groups: dict[tuple[Fraction, ...], list[int]] = {}
    for p, (i, j) in enumerate(edges):
        if j - i == 1:
            atoms = sum(rows[i])
            groups.setdefault(tuple(Fraction(v, atoms) for v in rows[i]), []).append(p)
    families = tuple(tuple(g) for g in groups.values() if len(g) > 1)
    low, high = np.tril_indices(len(columns))
    a = np.array(rows, dtype=float)
    alone = [(p, i) for p, (i, j) in enumerate(edges) if j - i == 1]
    pure = (np.array([p for p, _ in alone], dtype=np.intp), np.array([i for _, i in alone], dtype=np.intp))
    pairs = np.ascontiguousarray((a[:, low] * a[:, high]).T)
    closed = edges[-1][1] if edges else 0
    mixed = tuple((p, i, j) for p, (i, j) in enumerate(edges) if j - i > 1)
    holds = np.array([a[numbers == p].any(axis=0) for p in range(max(phase) + 1)])
    alone_in = (holds[:last] & (holds.sum(axis=0) == 1)).any(axis=1)
    made = Layout(a, edges, numbers, families, pure, low, high, pairs, closed, mixed, alone_in)
    return made, columns, rows


@lru_cache(maxsize=256)
def check_span(
    formula: Rows, inputs: Rows, names: tuple[str, ...], elements: tuple[str, ...]
) -> tuple[int, ...]:
    """Find inputs whose composition no combination of species can have.

    Parameters
    ----------
    formula, inputs : rows
    names : tuple of str
        Of the inputs.
    elements : tuple of str

    Returns
    -------
    tuple of int
        Inputs outside the span of the species.

    Raises
    ------
    IllPosedError
        An input holds an element that is in no species.
    """
    for row, name in zip(inputs, names, strict=True):
        for e, count in enumerate(row):
            if count and not any(species[e] for species in formula):
                raise IllPosedError(
                    f"{name} brings {elements[e]}, which is in no species of this contact: "
                    f"add a solute, a gas or a compound of {elements[e]}."
                )
    rank = len(independent(formula))
    return tuple(j for j, row in enumerate(inputs) if len(independent([*formula, row])) > rank)


def forced_zero(a: Array, total: Array) -> list[int] | None:
    """Find species that cannot have a positive amount under the element balances (linear programme).

    Parameters
    ----------
    a : (S, E) array
    total : (E,) array
        Positive.

    Returns
    -------
    list of int or None
        Empty: the problem is well posed. None: no combination of species meets the balances.
    """
    from scipy.optimize import linprog

    with np.errstate(divide="ignore"):
        largest: Array = np.min(np.where(a > 0, total / np.where(a > 0, a, 1.0), np.inf), axis=1)
    free = np.isfinite(largest)
    scaled: Array = (a[free] * largest[free, None] / total).T
    size = scaled.shape[1]
    bound = [(0.0, None)] * size
    # n_i = t + m_i with m_i >= 0: the largest t tells whether every species can be present at once.
    together: Array = np.column_stack([scaled, scaled.sum(axis=1)])
    cost: Array = np.append(np.zeros(size), -1.0)
    ones: Array = np.ones(len(total))
    best = linprog(cost, A_eq=together, b_eq=ones, bounds=[*bound, (0.0, 1.0)], method="highs")
    if best.status == 2:
        return None
    if best.x is not None and best.x[-1] > 1e-9:
        return []
    zero: list[int] = []
    for i, index in enumerate(np.flatnonzero(free)):
        one: Array = -np.eye(size)[i]
        single = linprog(one, A_eq=scaled, b_eq=ones, bounds=bound, method="highs")
        if single.x is not None and single.x[i] < 1e-9:
            zero.append(int(index))
    return zero
