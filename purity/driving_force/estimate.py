"""Estimate of an activity coefficient where no record exists: the interface model of alloys.

Metal in metal only: the table holds no H, C, N, O, P or S, for which the model says nothing.

References
----------
A. R. Miedema, F. R. de Boer, R. Boom, J. W. F. Dorleijn, Model predictions for the enthalpy of formation
of transition metal alloys, Calphad 1 (1977) 341.
F. R. de Boer, R. Boom, W. C. M. Mattens, A. R. Miedema, A. K. Niessen, Cohesion in Metals (1988).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from purity.constants import R
from purity.database import Found, Gap, Library, Record

Array = NDArray[np.float64]

#: P of the model by how many of the two are transition metals, kJ V^-2 cm^-2 (d.u.)^(1/3).
P_PAIR = (10.7, 12.35, 14.2)
#: Q/P, V^2 (d.u.)^(-2/3).
Q_PER_P = 9.4
#: Share of the hybridisation term R/P that is left in a liquid; in a solid the full term puts silver in lead
#: farther from its measured solubility, so that the liquid's is used there too.
LIQUID_R = 0.73
#: Temperature at which the excess Gibbs energy of a solution with heat of solution dH vanishes, K
#: (best of four tried on 306 pairs of liquid metals).
T_IDEAL = 6000.0
#: sigma(ln gamma) = SPREAD[0] + SPREAD[1] |ln gamma|: 70 % of the same pairs lie inside one sigma.
SPREAD = (0.8, 0.25)
#: Added for a solid host, whose elastic and structural terms the model leaves out: with it 12 measured
#: terminal solubilities lie 1.2 sigma (root mean square) from the estimate.
SPREAD_SOLID = 2.5


def _row(library: Library, element: str) -> Record | None:
    found = library.find("miedema", element=element)
    return found.record if isinstance(found, Found) else None


def _interface(a: Record, b: Record) -> float:
    """Return the interface enthalpy of A in contact with B per V^(2/3) of A, kJ/cm2."""
    metals = (a.words["kind"] == "transition") + (b.words["kind"] == "transition")
    hybrid = a.fields["R_over_P"] * b.fields["R_over_P"] if metals == 1 else 0.0
    dphi = a.fields["phi_V"] - b.fields["phi_V"]
    dn = a.fields["n_ws_third"] - b.fields["n_ws_third"]
    drive = -(dphi**2) + Q_PER_P * dn**2 - LIQUID_R * hybrid
    return 2.0 * P_PAIR[metals] * drive / (1 / a.fields["n_ws_third"] + 1 / b.fields["n_ws_third"])


def _surface(a: Record, b: Record, around: float) -> float:
    """V^(2/3) of A, cm2, when a share `around` of its surface touches B."""
    dphi = a.fields["phi_V"] - b.fields["phi_V"]
    return a.fields["V_two_thirds_cm2"] * (1.0 + a.fields["a"] * around * dphi)


def heat_of_solution(library: Library, solute: str, host: str) -> float | Gap:
    """Return the heat of solution of one metal at infinite dilution in another.

    Parameters
    ----------
    library : Library
    solute, host : str
        Elements.

    Returns
    -------
    float or Gap
        J per mole of solute.
    """
    a, b = _row(library, solute), _row(library, host)
    if a is None or b is None:
        missing = solute if a is None else host
        return Gap(f"miedema:{missing}", f"the interface model has no parameters of {missing}")
    return 1e3 * _surface(a, b, 1.0) * _interface(a, b)


def heat_of_mixing(library: Library, a: str, b: str, x: float) -> float | Gap:
    """Return the heat of mixing of a disordered liquid, J per mole of atoms.

    Parameters
    ----------
    library : Library
    a, b : str
        Elements.
    x : float
        Mole fraction of `b`.
    """
    first, second = _row(library, a), _row(library, b)
    if first is None or second is None:
        missing = a if first is None else b
        return Gap(f"miedema:{missing}", f"the interface model has no parameters of {missing}")
    area_a = first.fields["V_two_thirds_cm2"]
    area_b = second.fields["V_two_thirds_cm2"]
    share_b = x
    for _ in range(30):
        share_b = x * area_b / ((1.0 - x) * area_a + x * area_b)
        area_a, area_b = _surface(first, second, share_b), _surface(second, first, 1.0 - share_b)
    return 1e3 * (1.0 - x) * share_b * area_a * _interface(first, second)


def activity(library: Library, host: str, phase: str, element: str) -> Found | Gap:
    """Estimate the activity coefficient of a metal at infinite dilution in another.

    ln gamma = dH / RT (1 - T / 6000 K), which has the form A/T + B of the measured records.

    Parameters
    ----------
    library : Library
    host, phase, element : str

    Returns
    -------
    Found or Gap
        A record of the table ``activity``, marked as estimate, referred to the pure liquid (liquid host)
        or solid (solid host). Its spread is that at 1500 K; :func:`ln_gamma` has it at every temperature.
    """
    liquid = phase == "liquid"
    heat = heat_of_solution(library, element, host)
    quantity = f"activity:{host}/{phase}/{element}"
    if isinstance(heat, Gap):
        return Gap(quantity, f"no record, and no estimate: {heat.reason}", heat.nearest)
    slope, constant = heat / R, -heat / (R * T_IDEAL)
    words = {"host": host, "phase": phase, "solute": element, "reference": "l" if liquid else "s"}
    record = Record(
        table="activity",
        quantity=quantity,
        fields={"A_K": slope, "B": constant},
        words={**words, "note": "interface model with ln gamma = dH/RT (1 - T/6000 K)"},
        spread=float(_spread(np.asarray(slope / 1500.0 + constant), liquid)),
        T_min=200.0,
        T_max=4000.0,
        source=_source(library, element),
        where="parameters of the interface model",
        origin="estimate",
        quality="D",
        rank=1,
        line=0,
    )
    return Found(record, (), "estimate")


def _source(library: Library, element: str) -> str:
    row = _row(library, element)
    return row.source if row else ""


def _spread(ln: Array, liquid: bool) -> Array:
    return np.asarray(SPREAD[0] + SPREAD[1] * np.abs(ln) + (0.0 if liquid else SPREAD_SOLID))


def ln_gamma(estimate: Found, T: ArrayLike, z: ArrayLike = 0.0) -> Array:
    """Return ln gamma of an estimate at a temperature, per draw.

    Parameters
    ----------
    estimate : Found
        From :func:`activity`.
    T : array_like
        K; () , (N,), (K, 1) or (K, N).
    z : (N,) array_like
        Standard normal.
    """
    fields = estimate.record.fields
    ln = fields["A_K"] / np.asarray(T, dtype=float) + fields["B"]
    return np.asarray(ln + _spread(ln, estimate.record.words["phase"] == "liquid") * np.asarray(z))
