"""From a system and its numbers to a well-posed problem: species that count, balances, weights."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from purity.driving_force import components
from purity.errors import IllPosedError

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Name of the phase that a gas volume speaks of.
GAS = "gas"

_LIFT = 60.0
_TRACE = 1e-40


@dataclass(frozen=True, slots=True)
class System:
    """Species of a contact: numbers and names, no energies.

    Parameters
    ----------
    species : tuple of str
        Names, unique: ``Al in Cu``, ``Al2O3``, ``CO``.
    elements : tuple of str
    formula : (S, E) integer array
        Atoms of each element in each species.
    phase : (S,) integer array
        Index into `phases`.
    phases : tuple of str
        The gas, if there is one, is named ``gas``.
    host : int
        Index of the metal phase; its first species is the host.
    """

    species: tuple[str, ...]
    elements: tuple[str, ...]
    formula: NDArray[np.int64]
    phase: NDArray[np.int64]
    phases: tuple[str, ...]
    host: int


@dataclass(frozen=True, slots=True)
class Problem:
    """A system without the elements that are held or absent, and its numbers.

    Parameters
    ----------
    layout : Layout
    rows, inputs : rows
        Species and inputs in independent elements.
    formula : (S, E) array
        Species in all elements that are balanced.
    species, phases, elements, columns : integer arrays
        Positions in the system; `columns` are the independent ones among `elements`.
    absent, used : integer arrays
        Elements that no draw has; inputs that count.
    basis : Basis
        Component substances: the inputs, the largest first.
    missing : (E, N) bool array
        Elements that a draw lacks; it carries a trace of 1e-40 of them.
    g : (S, N) array
        Less the share of held elements; polymorphs of higher energy are lifted.
    fed : (J, N) array
        mol of each input.
    total : (E, N) array
        mol of each element.
    weight : (P, N) array
        Largest amount of each phase, mol.
    volume : (N,) array
    """

    layout: components.Layout
    rows: components.Rows
    inputs: components.Rows
    formula: Array
    species: NDArray[np.intp]
    phases: NDArray[np.intp]
    elements: NDArray[np.intp]
    columns: NDArray[np.intp]
    absent: NDArray[np.intp]
    used: NDArray[np.intp]
    basis: components.Basis
    missing: Mask
    g: Array
    fed: Array
    total: Array
    weight: Array
    volume: Array

    def take(self, draws: NDArray[np.intp]) -> Problem:
        """Return the same problem for some draws."""
        names = ("missing", "g", "fed", "total", "weight", "volume")
        return replace(self, **{name: getattr(self, name)[..., draws] for name in names})


def _rows(matrix: NDArray[np.int64]) -> components.Rows:
    return tuple(tuple(int(v) for v in row) for row in matrix)


def _checked(
    system: System,
    g: Array,
    amounts: Array,
    inputs: NDArray[np.int64],
    held: Mapping[str, Array],
    gas_volume: Array | None,
) -> None:
    names = system.elements if len(inputs) == len(system.elements) else None
    if g.shape[0] != len(system.species) or amounts.shape[0] != len(inputs):
        raise ValueError(
            f"g has {g.shape[0]} rows for {len(system.species)} species, "
            f"amounts {amounts.shape[0]} for {len(inputs)} inputs"
        )
    if not np.isfinite(g).all():
        bad = system.species[int(np.flatnonzero(~np.isfinite(g).all(axis=1))[0])]
        raise IllPosedError(f"the Gibbs energy of {bad} is not a number")
    wrong = ~(np.isfinite(amounts) & (amounts >= 0.0)).all(axis=1)
    if wrong.any():
        j = int(np.flatnonzero(wrong)[0])
        raise IllPosedError(f"the amount of {names[j] if names else f'input {j + 1}'} is not 0 or more")
    if unknown := sorted(set(held) - set(system.elements)):
        raise IllPosedError(f"{unknown[0]} is held but is in no species of this contact")
    if gas_volume is not None and GAS not in system.phases:
        raise IllPosedError(f"a gas volume is given but no phase is named {GAS!r}")


def reduce(
    system: System,
    g: Array,
    amounts: Array,
    held: Mapping[str, Array],
    gas_volume: Array | None,
    inputs: NDArray[np.int64] | None,
) -> tuple[Problem, Array]:
    """Take out held and absent elements, sort species by phase, and check that the problem has an answer.

    Parameters
    ----------
    system, g, amounts, held, gas_volume, inputs
        As for :func:`equilibrium`.

    Returns
    -------
    Problem, (S, N) array
        The problem, and the Gibbs energies of all species less the share of held elements.

    Raises
    ------
    IllPosedError
    """
    formula = system.formula
    given = np.eye(len(system.elements), dtype=np.int64) if inputs is None else np.asarray(inputs)
    _checked(system, g, amounts, given, held, gas_volume)
    is_held = np.array([e in held for e in system.elements])
    present: Mask = ((given.T.astype(float) @ amounts).max(axis=1) > 0.0) & ~is_held
    elements, absent = np.flatnonzero(present), np.flatnonzero(~present & ~is_held)
    used = np.flatnonzero(given[:, elements].any(axis=1) & (amounts.max(axis=1) > 0.0))
    if not len(used):
        raise IllPosedError("nothing is put in: every amount is zero")
    species, volatile = _members(system, elements, absent, gas_volume is not None)
    sub, brings = _rows(formula[np.ix_(species, elements)]), _rows(given[np.ix_(used, elements)])
    solid: Array = np.asarray(sub, dtype=float)
    matrix: Array = np.asarray(brings, dtype=float)
    fed = _floored(matrix, amounts[used])
    _posed(system, species, elements, sub, brings, fed, inputs is None)
    phases, numbers = _renumber(system.phase[species])
    layout, columns, rows = components.layout(sub, numbers, volatile in phases)
    into = tuple(tuple(row[c] for c in columns) for row in brings)
    largest = tuple(into[j] for j in np.argsort(-np.median(fed, axis=1), kind="stable"))
    own, total = _less_held(system, g, held), matrix.T @ fed
    problem = Problem(
        layout=layout,
        rows=rows,
        inputs=into,
        formula=solid,
        species=species,
        phases=phases,
        elements=elements,
        columns=np.array(columns, dtype=np.intp),
        absent=absent,
        used=used,
        basis=components.basis(rows, into, largest),
        missing=matrix.T @ amounts[used] <= 0.0,
        g=_lifted(layout, own[species]),
        fed=fed,
        total=total,
        weight=_largest(layout, solid, total),
        volume=np.zeros(g.shape[1]) if gas_volume is None else gas_volume,
    )
    return problem, own


def _members(
    system: System, elements: NDArray[np.intp], absent: NDArray[np.intp], fixed_volume: bool
) -> tuple[NDArray[np.intp], int]:
    """Species that count, sorted by phase, a gas at fixed volume last; and the number of that gas or -1.

    A phase made of held elements alone has no amount: its saturation is all there is to know.
    """
    volatile = system.phases.index(GAS) if fixed_volume else -1
    keep: Mask = system.formula[:, absent].sum(axis=1) == 0
    bare: Mask = system.formula[:, elements].sum(axis=1) == 0
    for p in range(len(system.phases)):
        members = keep & (system.phase == p)
        if p != volatile and bare[members].all():
            keep &= ~members
    species = np.flatnonzero(keep)
    order = np.lexsort((species, system.phase[species], system.phase[species] == volatile))
    return species[order], volatile


def _less_held(system: System, g: Array, held: Mapping[str, Array]) -> Array:
    own = g.copy()
    for element, value in held.items():
        own -= system.formula[:, [system.elements.index(element)]] * value
    return own


def _renumber(phase: NDArray[np.int64]) -> tuple[NDArray[np.intp], tuple[int, ...]]:
    first = np.flatnonzero(np.append(True, phase[1:] != phase[:-1]))
    numbers = np.cumsum(np.append(False, phase[1:] != phase[:-1]))
    return phase[first].astype(np.intp), tuple(int(v) for v in numbers)


def _floored(brings: Array, amounts: Array) -> Array:
    """Give an element that is missing in some draws a trace that its logarithm can bear."""
    missing: Array = (brings.T @ amounts <= 0.0).astype(float)
    needed = (amounts <= 0.0) & ((brings > 0).astype(float) @ missing > 0.0)
    return np.where(needed, _TRACE * amounts.sum(axis=0), amounts)


def _largest(layout: components.Layout, formula: Array, total: Array) -> Array:
    out: Array = np.empty((len(layout.edges), total.shape[1]))
    for p, (i, j) in enumerate(layout.edges):
        best: Array = np.zeros(total.shape[1])
        for row in formula[i:j]:
            if row.any():
                best = np.maximum(best, (total[row > 0] / row[row > 0, None]).min(axis=0))
        out[p] = best
    return out


def _lifted(layout: components.Layout, g: Array) -> Array:
    """Leave one phase of each composition in play: two of the same energy would have no unique amounts."""
    g = g.copy()
    for family in layout.families:
        at = np.array([layout.edges[p][0] for p in family])
        each: Array = g[at] / layout.a[at].sum(axis=1)[:, None]
        lost = np.arange(len(at))[:, None] != each.argmin(axis=0)
        g[at] += np.where(lost, _LIFT * layout.a[at].sum(axis=1)[:, None], 0.0)
    return g


def _posed(
    system: System,
    species: NDArray[np.intp],
    elements: NDArray[np.intp],
    formula: components.Rows,
    brings: components.Rows,
    fed: Array,
    bare: bool,
) -> None:
    """Refuse inputs that the species cannot hold, or can hold only with some species at exactly zero."""
    symbols, called = [system.elements[e] for e in elements], [system.species[i] for i in species]
    names = symbols if bare else [_written(row, symbols) for row in brings]
    outside = components.check_span(formula, brings, tuple(names), tuple(symbols))
    if outside and not bare:
        raise IllPosedError(
            f"no combination of {', '.join(called)} has the composition of {names[outside[0]]}: "
            "add a species that takes the surplus element."
        )
    single = {tuple(v > 0 for v in row) for row in formula if sum(v > 0 for v in row) == 1}
    if len(single) == len(symbols):
        return
    middle: Array = np.median(fed, axis=1)
    a: Array = np.asarray(formula, dtype=float)
    matrix: Array = np.asarray(brings, dtype=float)
    trials = [matrix.sum(axis=0)] if not bare else []
    for total in [*trials, matrix.T @ np.maximum(middle, 1e-290)]:
        zero = components.forced_zero(a, total)
        if zero == []:
            return
    refuse(zero, called, symbols)


def _written(row: tuple[int, ...], elements: list[str]) -> str:
    return "".join(f"{e}{n if n > 1 else ''}" for e, n in zip(elements, row, strict=True) if n)


def refuse(zero: list[int] | None, species: list[str], elements: list[str]) -> None:
    """Say which species or elements leave a potential without a finite value.

    Parameters
    ----------
    zero : list of int or None
        Species that can only be absent; None: the balances cannot be met at all.
    species, elements : list of str

    Raises
    ------
    IllPosedError
    """
    if zero is None:
        raise IllPosedError(
            f"no combination of {', '.join(species)} meets the balances of {', '.join(elements)}: "
            "add the pure element, a solute or a gas of the one in surplus."
        )
    named = ", ".join(species[i] for i in zero) or "some species"
    raise IllPosedError(
        f"with these amounts {named} can only be exactly zero, so that the potentials of "
        f"{', '.join(elements)} have no finite value: add a solute or an elemental gas."
    )
