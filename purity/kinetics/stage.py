"""One implicit stage of a stirred bath, with every linear carrier folded in.

Per contact s and impurity i the linear carriers (one atom, no inventory) collect to
gk = sum g/K and h = sum g a. With m = rho k, b = gamma dt, a_s = area per mol of host, N_s the
fluxes of the other carriers and N_0 what skins take (mol per mol of host)::

    phi = m / (m + gk),   beta = 1 / (1 + b sum_s a_s phi_s gk_s)
    x    = beta [r + b sum_s a_s phi_s (h_s + N_s) + N_0]
    x_s  = (m x + h_s + N_s) / (m + gk)

so that contents are affine in the fluxes, x_l = rest_l + sum_l' G(l, l') N_l', with entries of one sign
and no cancellation. Place 0 is the bath, place s the metal at contact s.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from purity.kinetics.exposure import FLOOR, Array, Carrier, Exposure, activity_at, at, ln_at

Index = NDArray[np.int64]

#: Conductance of a held content, in units of the metal-side rate: exact to 1e-18.
HELD = 1e18
#: Least exchange, m/s, that keeps a contact defined.
LEAST_LN_EXCHANGE = -70.0


@dataclass(frozen=True, slots=True)
class Bath:
    """What does not change while a bath is integrated.

    Parameters
    ----------
    exposures : tuple of Exposure
    density : (1,) or (N,) array
        mol/m3.
    area : (S, N) array
        m2.
    reach : (S, N) array
        Area per mol of host, m2/mol.
    linear : tuple of (contact, impurity, Carrier)
    rows : tuple of Carrier
        The other carriers, then the skins (activity 1, no resistance).
    place : (C,) int array
        Contact of each row, from 1; 0: in the bath.
    skin : (C,) bool array
    reactive, passive : int arrays
        Impurities that some row moves, and the others.
    nu : (C, R) array
        Atoms of each reactive impurity in one unit of each row.
    """

    exposures: tuple[Exposure, ...]
    density: Array
    area: Array
    reach: Array
    linear: tuple[tuple[int, int, Carrier], ...]
    rows: tuple[Carrier, ...]
    place: Index
    skin: NDArray[np.bool_]
    reactive: Index
    passive: Index
    nu: Array

    @property
    def draws(self) -> int:
        """Number of draws."""
        return int(self.area.shape[-1])


@dataclass(frozen=True, slots=True)
class Coefficients:
    """Rates at one temperature: S contacts, L = S + 1 places, I impurities, C rows.

    Parameters
    ----------
    phi, inverse, rest : (L, I, N) arrays
        phi, 1 / (m + gk) and h / (m + gk); 1, 0 and 0 in the bath.
    supply, loss : (S, I, N) arrays
        a_s phi h (1/s) and a_s phi gk (1/s).
    weight : (L, I, N) array
        a_s phi; 1 in the bath.
    ln_k, activity, resistance : (C, N) arrays
        ln K, activity, 1/g (0 without resistance).
    """

    phi: Array
    inverse: Array
    rest: Array
    supply: Array
    loss: Array
    weight: Array
    ln_k: Array
    activity: Array
    resistance: Array

    def take(self, draws: Index | slice) -> Coefficients:
        """Some draws."""
        return Coefficients(*(getattr(self, name)[..., draws] for name in self.__slots__))


@dataclass(frozen=True, slots=True)
class Stage:
    """Contents of one stage as functions of the fluxes.

    Parameters
    ----------
    span : (N,) array
        b = gamma dt, s.
    beta : (I, N) array
        x of the bath over its right side.
    rest : (L, I, N) array
        Contents without the fluxes of the rows.
    """

    coefficients: Coefficients
    span: Array
    beta: Array
    rest: Array

    def take(self, draws: Index) -> Stage:
        """Some draws."""
        return Stage(
            self.coefficients.take(draws), self.span[draws], self.beta[:, draws], self.rest[..., draws]
        )


def is_linear(carrier: Carrier) -> bool:
    """Tell whether a carrier moves one atom of one impurity without end."""
    moved = carrier.nu[carrier.nu != 0]
    return len(moved) == 1 and moved[0] == 1 and carrier.inventory is None


def lay_out(exposures: Sequence[Exposure], density: Array, amount: Array, count: int, draws: int) -> Bath:
    """Sort the carriers of a bath.

    Parameters
    ----------
    exposures : sequence of Exposure
    density : (1,) or (N,) array
        Host, mol/m3.
    amount : (1,) or (N,) array
        Host in the lot, mol.
    count, draws : int
        Numbers of impurities and draws.
    """
    linear, rows, places = [], [], []
    for s, exposure in enumerate(exposures):
        for carrier in exposure.carriers:
            if is_linear(carrier):
                linear.append((s, int(np.flatnonzero(carrier.nu)[0]), carrier))
            elif carrier.nu.any():
                rows.append(carrier)
                places.append(s + 1)
    skins = {skin.name: skin for exposure in exposures for skin in exposure.skins if skin.nu.any()}
    rows += [Carrier(skin.name, skin.nu, skin.ln_k, np.ones(1)) for skin in skins.values()]
    nu = np.array([row.nu for row in rows], dtype=float).reshape(len(rows), count)
    moved = (nu > 0).any(axis=0)
    area = np.array([np.broadcast_to(exposure.area, (draws,)) for exposure in exposures])
    area = area.reshape(len(exposures), draws)
    return Bath(
        tuple(exposures),
        np.atleast_1d(density),
        area,
        area / amount,
        tuple(linear),
        tuple(rows),
        np.array(places + [0] * len(skins), dtype=np.int64),
        np.array([False] * len(places) + [True] * len(skins), dtype=bool),
        np.flatnonzero(moved),
        np.flatnonzero(~moved),
        nu[:, moved],
    )


def coefficients(bath: Bath, T: Array | float) -> tuple[Coefficients, Coefficients]:
    """Evaluate the rates of the reactive and of the passive impurities at T (K, scalar or (N,))."""
    shape = (len(bath.exposures), len(bath.reactive) + len(bath.passive), bath.draws)
    m, gk, h = (np.zeros(shape) for _ in range(3))
    for s, exposure in enumerate(bath.exposures):
        m[s] = np.exp(np.maximum(ln_at(exposure.exchange, T), LEAST_LN_EXCHANGE)) * bath.density
    for s, i, carrier in bath.linear:
        K = np.exp(ln_at(carrier.ln_k, T))
        g = HELD * m[s, i] * K if carrier.conductance is None else at(carrier.conductance, T)
        gk[s, i] += g / K
        h[s, i] += g * activity_at(carrier, T)
    laws = _laws(bath, T)
    none = tuple(law[:0] for law in laws)
    r, p = bath.reactive, bath.passive
    return _fold(bath, m[:, r], gk[:, r], h[:, r], laws), _fold(bath, m[:, p], gk[:, p], h[:, p], none)


def _fold(bath: Bath, m: Array, gk: Array, h: Array, laws: tuple[Array, ...]) -> Coefficients:
    bulk = np.ones((1, *m.shape[1:]))
    inverse = 1 / (m + gk)
    phi = m * inverse
    weight = bath.reach[:, None] * phi
    return Coefficients(
        np.concatenate([bulk, phi]),
        np.concatenate([0 * bulk, inverse]),
        np.concatenate([0 * bulk, h * inverse]),
        weight * h,
        weight * gk,
        np.concatenate([bulk, weight]),
        *laws,
    )


def _laws(bath: Bath, T: Array | float) -> tuple[Array, Array, Array]:
    ln_k, activity, resistance = (np.zeros((len(bath.rows), bath.draws)) for _ in range(3))
    for c, row in enumerate(bath.rows):
        ln_k[c] = ln_at(row.ln_k, T)
        activity[c] = activity_at(row, T)
        if row.conductance is not None:
            resistance[c] = np.exp(np.minimum(-ln_at(row.conductance, T), 500.0))
    return ln_k, activity, resistance


def stage(coefficients: Coefficients, r: Array, span: Array) -> Stage:
    """Set up one implicit stage.

    Parameters
    ----------
    coefficients : Coefficients
    r : (I, N) array
        Right side, total contents.
    span : (N,) array
        b = gamma dt, s.
    """
    c = coefficients
    beta = 1 / (1 + span * c.loss.sum(axis=0))
    bulk = beta * (np.maximum(r, FLOOR) + span * c.supply.sum(axis=0))
    return Stage(c, span, beta, c.phi * bulk + c.rest)


def response(at_stage: Stage, place: Index, impurity: Index, source: Index) -> Array:
    """Return G: the content of `impurity` at `place` per unit of its flux at `source`, (..., N).

    All index arrays have the same shape.
    """
    c = at_stage.coefficients
    spread = np.where((source > 0)[..., None], at_stage.span, 1.0)
    through = c.phi[place, impurity] * at_stage.beta[impurity] * c.weight[source, impurity] * spread
    return np.asarray(through + np.where((place == source)[..., None], c.inverse[place, impurity], 0.0))


def contents(bath: Bath, at_stage: Stage, flux: Array) -> tuple[Array, Array, Array]:
    """Contents and gains that follow from the fluxes of the rows.

    Parameters
    ----------
    bath : Bath
    at_stage : Stage
    flux : (C, N) array
        mol m-2 s-1 of units; of skins, minus what they hold, mol per mol of host.

    Returns
    -------
    x : (L, I, N) array
        In the bath and at every contact.
    gain : (S, I, N) array
        Rate of each contact, mol per mol of host and second.
    held : (I, N) array
        What skins hold, mol per mol of host.
    """
    c = at_stage.coefficients
    push = np.zeros_like(c.phi)
    for row, nu in enumerate(bath.nu):
        for i in np.flatnonzero(nu):
            push[bath.place[row], i] += nu[i] * flux[row]
    pull = c.weight[1:] * push[1:]
    bulk = at_stage.rest[0] + at_stage.beta * (at_stage.span * pull.sum(axis=0) + push[0])
    x = c.phi * bulk + c.rest + c.inverse * push
    gain = c.supply + pull - c.loss * bulk
    return x, gain, -push[0]
