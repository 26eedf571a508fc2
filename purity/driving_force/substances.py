"""Gibbs energies of the host and of what is dissolved in it, and what a compound saturates it with.

Pure substances are in :mod:`purity.driving_force.pure`; their names can be had here too.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from math import log

import numpy as np
from numpy.typing import ArrayLike, NDArray

from purity.constants import ATM, DILUTE, P0, R
from purity.database import Found, Gap, Library, Record, ln_value, outside, parameters
from purity.draws import Draws, normal
from purity.driving_force import estimate
from purity.driving_force.pure import (
    Energy,
    atoms,
    combine,
    element_energy,
    formation,
    found,
    gibbs_energy,
    stable,
    substances,
    vapour,
)

__all__ = [
    "Energy",
    "Measured",
    "atoms",
    "combine",
    "element_energy",
    "formation",
    "found",
    "gibbs_energy",
    "host_energy",
    "ln_dissolution",
    "ln_gamma",
    "measured_ceiling",
    "molar_mass",
    "reconcile",
    "solute",
    "solute_record",
    "stable",
    "substances",
    "vapour",
]

Array = NDArray[np.float64]

#: State of the pure solute that a record of activity refers to.
REFERENCES: Mapping[str, str] = {"l": "liquid", "s": "solid", "gr": "solid"}
#: Standard deviations by which a measured saturation may differ from a computed one before it replaces it.
CONFLICT = 2.0
#: Draws with which the spread of a computed saturation is judged: the same in every run.
SCATTER = Draws(seed=1, blocks=1)
#: Uncertainty of d ln x / d(1/T) with which a saturation is carried from the temperature of a measurement, K.
SLOPE = 2000.0


@dataclass(frozen=True, slots=True)
class Measured:
    """Measured saturation of a host with a phase, beside the one that the Gibbs energies give.

    Parameters
    ----------
    ln_x : (K, N) or (N,) array
        ln of the content (mole per mole of host) at saturation.
    median : array
        Its median.
    sigma : array
        One standard deviation of ln x that comes from the measurement and its distance in temperature.
    deviation : array
        Measured less computed ln x at the median, carried to T; 0 where nothing could be computed.
    conflict : bool array
        The two differ by more than two standard deviations at the nearest measurement.
    wins : bool array
        The measurement is to be used: on conflict, and in the place of an estimate.
    found : Found
        The nearest record with the others of its quantity.
    """

    ln_x: Array
    median: Array
    sigma: Array
    deviation: Array
    conflict: NDArray[np.bool_]
    wins: NDArray[np.bool_]
    found: Found


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
    :mod:`purity.driving_force.estimate`, marked so. A measured dilute saturation with the pure solid,
    at which its activity is 1, takes the place of an estimate and of what it contradicts by two sigma.

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
    computed = _solute(library, host, phase, element, T, draws)
    measured = measured_ceiling(library, host, phase, element, element, T, draws)
    if isinstance(measured, Gap):
        return computed
    wins = measured.wins & (measured.median <= log(DILUTE))
    pure = gibbs_energy(library, element, "solid", T, draws)
    if isinstance(pure, Gap) or not wins.any() or (isinstance(computed, Gap) and not wins.all()):
        return computed
    value = pure.value - R * np.asarray(T, dtype=float) * measured.ln_x
    if isinstance(computed, Gap):
        return Energy(value, (measured.found, *pure.found), pure.outside)
    return Energy(
        np.where(wins, value, computed.value),
        (measured.found, *combine([(1.0, pure), (1.0, computed)]).found),
        np.where(wins, pure.outside, computed.outside),
    )


def _solute(
    library: Library, host: str, phase: str, element: str, T: ArrayLike, draws: Draws
) -> Energy | Gap:
    """As :func:`solute`, without a look at measured saturations."""
    if element == host:
        return host_energy(library, host, phase, T, draws)
    record = solute_record(library, host, phase, element)
    if isinstance(record, Gap):
        return record
    if record.record.table == "sieverts":
        return _from_gas(library, host, element, record, T, draws)
    return _from_activity(library, element, record, T, draws)


def solute_record(library: Library, host: str, phase: str, element: str) -> Found | Gap:
    """Return the record of an element in a host: activity, else Sieverts constant, else an estimate."""
    key = {"host": host, "phase": phase, "solute": element}
    for table in ("activity", "sieverts"):
        record = library.find(table, **key)
        if isinstance(record, Found):
            return record
    return estimate.activity(library, host, phase, element)


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
    have the given activity; a product below K is undersaturated. Where the saturation of the host with
    the compound has been measured and differs by more than two standard deviations, the measurement is
    used (see :func:`reconcile`), as it is where nothing can be computed.

    Returns
    -------
    Energy or Gap
        Without dimension.
    """
    computed = _ln_computed(library, host, phase, formula, state, T, draws)
    chosen = computed if state != "solid" else reconcile(library, host, phase, formula, T, draws, computed)
    if isinstance(chosen, Gap):
        return chosen
    shift = atoms(formula).get(host, 0.0) * np.log(activity_of_host)
    return Energy(chosen.value - shift, chosen.found, chosen.outside)


def _ln_computed(
    library: Library,
    host: str,
    phase: str,
    formula: str,
    state: str,
    T: ArrayLike,
    draws: Draws,
    dissolve: Callable[..., Energy | Gap] = solute,
) -> Energy | Gap:
    substance = gibbs_energy(library, formula, state, T, draws)
    if isinstance(substance, Gap):
        return substance
    parts: list[tuple[float, Energy]] = [(1.0, substance)]
    for element, count in atoms(formula).items():
        dissolved = dissolve(library, host, phase, element, T, draws)
        if isinstance(dissolved, Gap):
            return dissolved
        parts.append((-count, dissolved))
    total = combine(parts)
    return Energy(total.value / (R * np.asarray(T, dtype=float)), total.found, total.outside)


def measured_ceiling(
    library: Library, host: str, phase: str, element: str, with_: str, T: ArrayLike, draws: Draws
) -> Measured | Gap:
    """Return the measured content of a host saturated with a phase, carried over temperature.

    Between and beyond the measured points the shape of the computed saturation is kept, and its distance
    from the points is interpolated in 1/T; where nothing can be computed, ln x itself is.

    Parameters
    ----------
    library : Library
    host, phase, element : str
    with_ : str
        Formula of the saturating phase; `C` for graphite.
    T : array_like
        K.
    draws : Draws

    Returns
    -------
    Measured or Gap
    """
    points = _points(library, host, phase, element, with_)
    host_mass, mass = molar_mass(library, host), molar_mass(library, element)
    if not points:
        return Gap(f"solubility:{host}/{phase}/{element}/{with_}", "no measured saturation")
    if isinstance(host_mass, Gap):
        return host_mass
    if isinstance(mass, Gap):
        return mass
    t = np.asarray(T, dtype=float)
    at = np.array([record.fields["T_K"] for record in points])
    share = np.array([record.fields["limit_ppm_mass"] for record in points]) * 1e-6
    spread = np.array([record.spread for record in points])
    published = np.log(share / (1.0 - share) * host_mass / mass)
    base, own, scatter = _own(library, host, phase, element, with_, t, at)
    off = published - own
    known = np.ndim(base) > 0
    doubt = known & (np.abs(off) > CONFLICT * np.hypot(scatter, spread))
    bound = np.array(["upper bound" in record.words["note"] for record in points])
    nearest = np.abs(1.0 / t[..., np.newaxis] - 1.0 / at).argmin(axis=-1)
    sigma = np.hypot(spread[nearest], SLOPE * np.abs(1.0 / t - 1.0 / at[nearest]))
    deviation = np.interp(1.0 / t, 1.0 / at[::-1], off[::-1])
    value = base + deviation + sigma * normal(draws, points[0].quantity)[0]
    conflict = np.broadcast_to((doubt & ~(bound & (off > 0)))[nearest], value.shape)
    record = solute_record(library, host, phase, element)
    estimated = isinstance(record, Gap) or record.record.origin == "estimate"
    return Measured(
        value,
        np.broadcast_to(base + deviation, value.shape),
        np.broadcast_to(sigma, value.shape),
        np.broadcast_to(deviation if known else np.zeros(()), value.shape),
        conflict,
        conflict | (estimated or not known),
        found(library, points[int(np.ravel(nearest)[0])]),
    )


def _points(library: Library, host: str, phase: str, element: str, with_: str) -> tuple[Record, ...]:
    """Best record at each temperature, by temperature."""
    best: dict[float, Record] = {}
    for record in library.rivals(f"solubility:{host}/{phase}/{element}/{with_}"):
        best.setdefault(record.fields["T_K"], record)
    return tuple(best[T] for T in sorted(best))


def _own(
    library: Library, host: str, phase: str, element: str, formula: str, t: Array, at: Array
) -> tuple[Array, Array, Array]:
    """Computed ln x at t, at the measured temperatures, and its spread there; zeros where there is none."""
    counts = atoms(formula)
    nothing = np.zeros(()), np.zeros(at.shape), np.zeros(at.shape)
    if set(counts) - {host} != {element}:
        return nothing
    dissolve = _solute if formula == element else solute

    def computed(T: Array, draws: Draws) -> Energy | Gap:
        return _ln_computed(library, host, phase, formula, "solid", T, draws, dissolve)

    here, there = computed(t, Draws.nominal()), computed(at[:, np.newaxis], Draws.nominal())
    scatter = computed(at[:, np.newaxis], SCATTER)
    if isinstance(here, Gap) or isinstance(there, Gap) or isinstance(scatter, Gap):
        return nothing
    count = counts[element]
    return here.value / count, there.value[:, 0] / count, np.std(scatter.value, axis=-1) / count


def reconcile(
    library: Library,
    host: str,
    phase: str,
    formula: str,
    T: ArrayLike,
    draws: Draws,
    computed: Energy | Gap,
) -> Energy | Gap:
    """Put a measured saturation in the place of a computed ln K that is an estimate or two sigma off.

    Parameters
    ----------
    library : Library
    host, phase, formula : str
    T : array_like
        K.
    draws : Draws
    computed : Energy or Gap
        ln K as :func:`ln_dissolution` has it, host at activity 1.

    Returns
    -------
    Energy or Gap
        `computed` where there is no measurement or no conflict; else with the measurement named first.
    """
    counts = atoms(formula)
    solutes = [element for element in counts if element != host]
    if len(solutes) != 1:
        return computed
    measured = measured_ceiling(library, host, phase, solutes[0], formula, T, draws)
    if isinstance(measured, Gap):
        return computed
    value = counts[solutes[0]] * measured.ln_x
    if isinstance(computed, Gap):
        return Energy(value, (measured.found,), measured.sigma > 2.0 * measured.found.record.spread)
    if not measured.wins.any():
        return computed
    return Energy(
        np.where(measured.wins, value, computed.value),
        (measured.found, *computed.found),
        np.broadcast_to(computed.outside, value.shape),
    )
