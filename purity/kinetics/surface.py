"""What the contacts do at the surface of a piece in one implicit stage.

The equations are those of a stirred bath whose exchange is stretched by the reach of the interior; here, too,
fluxes of the carriers that are not linear are what Newton solves for.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from purity.kinetics import flux_newton
from purity.kinetics.exposure import FLOOR, Array
from purity.kinetics.pieces import Flags, Index, Laws, Piece, laws
from purity.kinetics.stage import Bath, Coefficients, Stage, contents, lay_out


def stretched(of: Coefficients, stretch: Array) -> Coefficients:
    """Coefficients with the reach of the interior (I, N) put on every area."""
    weight = of.weight * stretch
    weight[0] = 1.0
    return replace(of, supply=of.supply * stretch, loss=of.loss * stretch, weight=weight)


@dataclass(slots=True)
class Surface:
    """The non-linear rows at the surface, where their solver stands, and what is left of inventories."""

    bath: Bath
    laws: Laws
    blocks: tuple[flux_newton.Block, ...]
    points: tuple[flux_newton.Point, ...]
    left: Array
    solved: Flags
    tied: Index

    def most(self, length: Array) -> Array:
        """Largest flux that empties each inventory within a step, mol m-2 s-1."""
        area = self.bath.area[self.bath.place - 1]
        return np.asarray(self.left / np.maximum(area * length, 1e-300))


@dataclass(frozen=True, slots=True)
class Action:
    """What the contacts do in a stage.

    Parameters
    ----------
    gain : (S, I, N) array
        Rate by contact, 1/s.
    x : (L, I, N) array
        Content below the surface, then at each contact.
    flux : (C, N) array
        Of the non-linear rows, mol m-2 s-1.
    points : tuple of Point
    solved : (N,) bool array
    """

    gain: Array
    x: Array
    flux: Array
    points: tuple[flux_newton.Point, ...]
    solved: Flags

    def where(self, draws: Flags, other: Action) -> Action:
        """Take the other where `draws`."""
        if not draws.any():
            return self
        points = tuple(point.copy() for point in self.points)
        for point, better in zip(points, other.points, strict=True):
            point.put(draws, better.take(draws))
        return Action(
            np.where(draws, other.gain, self.gain),
            np.where(draws, other.x, self.x),
            np.where(draws, other.flux, self.flux),
            points,
            np.where(draws, other.solved, self.solved),
        )


def act(contact: Surface, of: Coefficients, H: Array, stretch: Array, span: Array, most: Array) -> Action:
    """Solve one stage at the surface.

    Parameters
    ----------
    contact : Surface
    of : Coefficients
    H : (I, N) array
        Surface content without flux.
    stretch : (I, N) array
        Reach of the interior.
    span : (N,) array
        s.
    most : (C, N) array
        Largest flux of each row.
    """
    law = stretched(of, stretch)
    beta = 1.0 / (1.0 + span * law.loss.sum(axis=0))
    rest = H.copy()
    rest[contact.tied] = np.maximum(rest[contact.tied], FLOOR)
    below = beta * (rest + span * law.supply.sum(axis=0))
    at_stage = Stage(law, span, beta, law.phi * below + law.rest)
    flux: Array = np.zeros(most.shape)
    solved, points = np.ones(H.shape[1], dtype=bool), []
    before = contact.points or tuple(flux_newton.start(block, of, rest) for block in contact.blocks)
    for block, point in zip(contact.blocks, before, strict=True):
        system = flux_newton.equations(contact.bath, block, at_stage, most)
        settled, done = flux_newton.solve(block, system, point)
        flux[block.rows] = settled.flux
        points.append(settled)
        solved &= done
    x, gain, _ = contents(contact.bath, at_stage, flux)
    return Action(gain / stretch, x, flux, tuple(points), solved)


def surface(piece: Piece) -> Surface:
    """Lay out the carriers of a piece."""
    count, draws = piece.x0.shape
    bath = lay_out(piece.exposures, piece.density, piece.amount, count, draws)
    # Every impurity lies in the same piece: none is set apart as passive.
    nu = np.array([row.nu for row in bath.rows], dtype=float).reshape(len(bath.rows), count)
    bath = replace(bath, reactive=np.arange(count), passive=np.arange(0), nu=nu)
    left: Array = np.full((len(bath.rows), draws), np.inf)
    for c, row in enumerate(bath.rows):
        if row.inventory is not None:
            left[c] = row.inventory
    tied = np.flatnonzero((nu > 0).any(axis=0))
    return Surface(bath, laws(bath), flux_newton.blocks(bath), (), left, np.ones(draws, dtype=bool), tied)
