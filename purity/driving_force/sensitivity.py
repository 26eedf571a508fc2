"""How an equilibrium answers to its energies and inputs, inside one assemblage."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from purity.driving_force import newton
from purity.driving_force.equilibrium import Equilibrium, broadcast
from purity.driving_force.problem import Problem, System, reduce

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Sensitivity:
    """Derivatives of ln activity; an absent species answers to its own energy too. NaN in refused draws.

    Parameters
    ----------
    by_g : (S, S, N) array
        d ln a_i / d g_j, hence by temperature, ln gamma and ln pressure.
    by_input : (S, J, N) array
        d ln a_i / d ln (amount of input j).
    """

    by_g: Array
    by_input: Array


def sensitivity(
    system: System,
    solved: Equilibrium,
    g: Array,
    amounts: Array,
    *,
    held: Mapping[str, Array] | None = None,
    gas_volume: Array | None = None,
    inputs: NDArray[np.int64] | None = None,
) -> Sensitivity:
    """Differentiate a solved equilibrium by its energies and inputs (implicit function theorem).

    Parameters
    ----------
    system, g, amounts, held, gas_volume, inputs
        As given to :func:`purity.driving_force.equilibrium.equilibrium`.
    solved : Equilibrium
        Its answer.

    Returns
    -------
    Sensitivity
        Valid as long as the same phases are present.
    """
    g, amounts, levels, room = broadcast(g, amounts, held, gas_volume)
    problem, _ = reduce(system, g, amounts, levels, room, inputs)
    count, draws = len(system.species), g.shape[1]
    by_g: Array = np.repeat(-np.eye(count)[:, :, None], draws, axis=2)
    by_input: Array = np.zeros((count, len(amounts), draws))
    fit = np.flatnonzero(solved.start >= 0)
    some = problem.take(fit)
    point, active = _point(some, solved, fit)
    move_g, move_b = _moves(some, point, active)
    rows = np.ix_(problem.species, problem.species, fit)
    by_g[rows] = move_g
    by_input[np.ix_(problem.species, problem.used, fit)] = move_b
    refused = solved.start < 0
    by_g[:, :, refused], by_input[:, :, refused] = np.nan, np.nan
    return Sensitivity(by_g, by_input)


def _point(some: Problem, solved: Equilibrium, draws: NDArray[np.intp]) -> tuple[newton.Draws, newton.Mask]:
    layout, base = some.layout, some.basis
    lam = base.members @ np.nan_to_num(solved.potentials[some.elements[some.columns]][:, draws], neginf=-1e3)
    n: Array = solved.amounts[some.species][:, draws]
    active = solved.present[some.phases[: len(layout.edges)]][:, draws]
    total = [n[i:j].sum(axis=0) for i, j in layout.edges]
    size: Array = np.array(total).reshape(len(total), n.shape[1])
    data = newton.balances(some.g, some.volume, some.fed, some.weight, base)
    point = newton.evaluate(layout, base, {**data, "lam": lam, "size": size}, active)
    return {**point, "b": data["b"], "fed": some.fed}, active


def _moves(some: Problem, point: newton.Draws, active: newton.Mask) -> tuple[Array, Array]:
    """Change of ln activity with each energy and with the logarithm of each input."""
    layout, base = some.layout, some.basis
    a, n, x, k = base.species, point["n"], point["x"], layout.closed
    species, c = a.shape
    matrix, flow = newton.jacobian(layout, base, point, active)
    index, valid = newton.slots(active)
    own: Array = np.maximum(a, 0.0)[:, :, None] / point["plus"]
    own = (own - np.maximum(-a, 0.0)[:, :, None] / point["minus"]) * n[:, None]
    phase = layout.phase[:k]
    own[:k] -= x[:k, None] * flow[phase]
    right: Array = np.zeros((n.shape[1], matrix.shape[1], species + len(base.inputs)))
    right[:, :c, :species] = own.transpose(2, 1, 0)
    for q in range(len(index)):
        right[:, c + q, :k] = np.where(valid[q] & (phase[:, None] == index[q]), x[:k], 0.0).T
    # A balance loses one sum to the input: the minus sum where the input is positive, else the plus sum.
    side: Array = np.where(point["b"] > 0.0, point["minus"], point["plus"])
    share: Array = (base.inputs / base.divisor)[:, :, None] * point["fed"][:, None] / side
    right[:, :c, species:] = share.transpose(2, 1, 0)
    moved: Array = (a @ newton.solve(matrix, right)[:, :c]).transpose(1, 2, 0)
    moved[np.arange(species), np.arange(species)] -= 1.0
    return moved[:, :species], moved[:, species:]
