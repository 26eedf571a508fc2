"""Form of the tables, one row of a table, and what a row says over temperature.

All tables carry ``source`` (a key of a ``sources*.csv``), ``where`` (page, table, file), ``origin``
(looked-up, memory, derived, computed, estimate), ``rank`` (1 where blank) and ``note``; most carry a
temperature range and a spread. Units stand in column names.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from math import log

import numpy as np
from numpy.typing import ArrayLike, NDArray

from purity.constants import R

Array = NDArray[np.float64]

#: Uncertainty of the slope d ln y / d(1/T) with which a record is carried beyond its range, K.
SLOPE_OUTSIDE = 2000.0


@dataclass(frozen=True, slots=True)
class Table:
    """Form of one table.

    Parameters
    ----------
    key : tuple of str
        Columns that name what is measured; together with `name` they make the quantity.
    numbers : tuple of str
        Columns that must hold numbers.
    spread : str
        Column of the one-sigma spread: ``spread_ln`` (in ln), ``spread_factor`` (multiplicative),
        ``spread_J_per_mol``, or "" where the table has none.
    ranged : bool
        Has ``T_min_K`` and ``T_max_K``.
    law : {"arrhenius", "inverse", "log10", "constant", ""}
        How :func:`ln_value` reads `numbers`: ln y = ln D0 - Q/RT; ln y = A/T + B; log10 y = A/T + B;
        ln y = ln value.
    text : tuple of str
        Further columns that hold words.
    optional : tuple of str
        Number columns that may be blank.
    unit : str
        Unit of the value that the law gives.
    """

    key: tuple[str, ...]
    numbers: tuple[str, ...]
    spread: str = ""
    ranged: bool = False
    law: str = ""
    text: tuple[str, ...] = ()
    optional: tuple[str, ...] = ()
    unit: str = ""


#: Every table of the library. `rank` (integer, 1 first) orders rival rows of one quantity.
TABLES: Mapping[str, Table] = {
    "elements": Table(("element",), ("molar_mass_g_per_mol",), text=("name",)),
    # phase: lattice (fcc, bcc, hcp, diamond, tetragonal ...) or liquid, stable over the range; spread_ln is
    # that of the density, viscosity_spread_ln that of the viscosity;
    # rho = density - slope (T - T_ref); ln eta = A + B/T, Pa s
    "hosts": Table(
        ("host", "phase"),
        (
            "density_kg_per_m3",
            "density_slope_kg_per_m3_K",
            "T_ref_K",
            "viscosity_A_ln_Pa_s",
            "viscosity_B_K",
            "viscosity_spread_ln",
        ),
        spread="spread_ln",
        ranged=True,
        optional=("viscosity_A_ln_Pa_s", "viscosity_B_K", "viscosity_spread_ln"),
    ),
    "transitions": Table(
        ("element", "kind", "to_state"),
        ("T_K", "dH_J_per_mol"),
        text=("from_state",),
        optional=("dH_J_per_mol",),
    ),
    # state: solid, liquid, gas; label tells polymorphs and temperature pieces apart
    "gibbs": Table(
        ("formula", "state", "label"),
        (
            "H298_J_per_mol",
            "S298_J_per_mol_K",
            "a_J_per_mol_K",
            "b_J_per_mol_K2",
            "c_J_K_per_mol",
            "d_J_per_mol_K3",
            "fit_error_J_per_mol",
        ),
        spread="spread_J_per_mol",
        ranged=True,
        text=("class",),
    ),
    # interface model of the heat of solution: phi in V, n_ws^(1/3) in (d.u.)^(1/3), V^(2/3) in cm2;
    # kind: transition, non-transition
    "miedema": Table(
        ("element",), ("phi_V", "n_ws_third", "V_two_thirds_cm2", "a", "R_over_P"), text=("kind",)
    ),
    # ln gamma at infinite dilution = A/T + B; reference l, s, gr: pure liquid, stable solid, graphite
    "activity": Table(
        ("host", "phase", "solute"),
        ("A_K", "B"),
        spread="spread_ln",
        ranged=True,
        law="inverse",
        text=("reference",),
        unit="ln gamma",
    ),
    # log10 of mass ppm per sqrt(atm) of the diatomic gas (H2, N2, O2, S2, P2) = A/T + B
    "sieverts": Table(
        ("host", "phase", "solute"),
        ("log10_A_K", "log10_B"),
        spread="spread_ln",
        ranged=True,
        law="log10",
        unit="mass ppm at 1 atm",
    ),
    "interaction": Table(("host", "phase", "solute", "by"), ("epsilon", "T_K"), spread="spread"),
    "diffusion": Table(
        ("host", "phase", "solute"),
        ("D0_m2_per_s", "Q_kJ_per_mol"),
        spread="spread_factor",
        ranged=True,
        law="arrhenius",
        unit="m2/s",
    ),
    # measured content of the metal at saturation with a named phase
    "solubility": Table(("host", "phase", "solute", "with"), ("T_K", "limit_ppm_mass"), spread="spread_ln"),
    # containers: one row a compound; mass fractions sum to 1 within the traces
    "containers": Table(("material", "formula"), ("mass_fraction",), text=("title", "aliases")),
    "traces": Table(("material", "formula"), ("content_ppm_mass",), spread="spread_factor"),
    "wall_values": Table(
        ("material", "property"), ("value_SI",), spread="spread_factor"
    ),  # leach_depth (m), open_porosity (1), service_oxidising, service_inert, service_vacuum (K)
    # gate: metal-side exchange times `factor` below T_gate where the melt does not wet the wall
    "wetting": Table(
        ("host", "formula"),
        ("T_gate_K", "factor", "wets_from_O_ppm"),
        spread="spread_ln",
        text=("wets", "held_by"),
        optional=("wets_from_O_ppm",),
    ),
    # rate of wall loss into the melt where no ceiling lies in the dilute range
    "attack": Table(("host", "formula"), ("rate_m_per_s", "T_K"), spread="spread_ln"),
    "atmospheres": Table(
        ("atmosphere", "species"), ("fraction_ppm_mol",), spread="spread_factor", text=("title", "aliases")
    ),
    # adsorbed or bound on the surface of a charge, by preparation
    "surfaces": Table(("host", "surface", "species"), ("amount_mg_per_m2",), spread="spread_factor"),
    # law: limiting, logarithmic, parabolic...; p1..p3 in SI in the order of the law; density of the film
    "films": Table(
        ("host", "film", "environment"),
        ("p1", "p2", "p3", "Q_kJ_per_mol", "density_kg_per_m3"),
        spread="spread_factor",
        ranged=True,
        text=("law", "formula"),
        optional=("p2", "p3", "Q_kJ_per_mol"),
    ),
    # permeability: mol m m-2 s-1 Pa-1 of a film of given thickness, or permeance mol m-2 s-1 Pa-1 of a wall
    "packages": Table(
        ("barrier", "gas"),
        ("permeability_mol_per_m_s_Pa", "permeance_mol_per_m2_s_Pa", "T_K"),
        spread="spread_factor",
        text=("title", "aliases"),
        optional=("permeability_mol_per_m_s_Pa", "permeance_mol_per_m2_s_Pa"),
    ),
    "desiccants": Table(("desiccant",), ("capacity_kg_per_kg", "floor_Pa"), spread="spread_factor"),
    "sticking": Table(
        ("host", "gas", "state"), ("probability",), spread="spread_ln", ranged=True, law="constant"
    ),
    "gas_transport": Table(("gas", "in"), ("D_m2_per_s", "T_ref_K", "exponent"), spread="spread_ln"),
    # exchange at walls and free surfaces by stirring: k = value (D / D_ref)^exponent
    "transfer": Table(("place", "stirring"), ("k_m_per_s", "D_ref_m2_per_s", "exponent"), spread="spread_ln"),
    # content of the solid over that of the liquid it freezes from, at the melting point of the host
    "partition": Table(
        ("host", "solute"), ("k0",), spread="spread_ln", law="constant", unit="content of solid over liquid"
    ),
    # a mould while it is filled: sqrt(k rho c), heat passed at the face, water on the face
    "moulds": Table(
        ("material",),
        ("effusivity_J_per_m2_K_s05", "interface_W_per_m2_K", "water_kg_per_m2"),
        spread="spread_factor",
    ),
    # what a furnace's hot zone is made of: what it gives off (row set of atmospheres) and takes from the gas
    "hot_zones": Table(
        ("zone",),
        ("getter_share", "T_from_K"),
        spread="spread_ln",
        text=("leaves_as", "vapours", "outgassing"),
    ),
    "priors": Table(("kind",), ("low_ppm", "high_ppm")),
    "hazards": Table(
        ("rule",),
        ("T_min_K",),
        optional=("T_min_K",),
        text=("hosts", "elements", "gases", "materials", "processes", "caution", "consult"),
    ),
}


@dataclass(frozen=True, slots=True)
class Record:
    """One row: what is known of one quantity by one source.

    Parameters
    ----------
    table : str
    quantity : str
        What is measured, not who measured it: ``diffusion:Cu/liquid/O``.
    fields : mapping of str to float
        Number columns, as printed in the table.
    words : mapping of str to str
        Key and text columns, and ``note``.
    spread : float
        One sigma, in the sense of the table's spread column (0 where it has none).
    T_min, T_max : float
        Range of validity, K (0 and infinity where the table has none).
    source : str
        Key of a source, or several with ``;`` between.
    where, origin : str
    quality : str
        Class made from origin and spread: A looked up and narrow (one sigma below 35 % or 2 kJ/mol);
        B looked up, or derived or computed from numbers that were; C from memory; D estimate.
    rank : int
        1 is preferred.
        0 (in a user's table only): the quantity is not to be used.
    line : int
        Line of the file.
    yours : bool
        From a user's table.
    """

    table: str
    quantity: str
    fields: Mapping[str, float]
    words: Mapping[str, str]
    spread: float
    T_min: float
    T_max: float
    source: str
    where: str
    origin: str
    quality: str
    rank: int
    line: int
    yours: bool = False


def quantity_name(table: str, key: Iterable[str]) -> str:
    """Return the name of what is measured, ``diffusion:Cu/liquid/O``; a blank last word is left off."""
    return f"{table}:{'/'.join(key)}".rstrip("/")


def parameters(record: Record) -> int:
    """Return P, the number of standard normal variables that :func:`ln_value` takes."""
    return 2 if TABLES[record.table].law == "arrhenius" else 1


def outside(record: Record, T: ArrayLike) -> NDArray[np.bool_]:
    """Say where a temperature (K) lies outside the range of a record."""
    kelvin = np.asarray(T, dtype=float)
    return np.asarray((kelvin < record.T_min) | (kelvin > record.T_max))


def _beyond(record: Record, T: Array) -> Array:
    """Distance |1/T - 1/T_edge| beyond the range, 1/K; 0 inside."""
    edge = np.clip(T, record.T_min, record.T_max)
    return np.asarray(np.abs(1.0 / T - 1.0 / edge))


def spread_at(record: Record, T: ArrayLike) -> Array:
    """Return one standard deviation of a record at a temperature.

    Inside the range it is the spread of the record (for an Arrhenius line with the share of Q).
    Outside, ln quantities widen by a slope of 2000 K and Gibbs energies by the same slope in G/RT::

        sd^2 = s^2 + (2000 K |1/T - 1/T_edge|)^2        sd^2 = s^2 + (R 2000 K |T/T_edge - 1|)^2

    Parameters
    ----------
    record : Record
    T : array_like
        K.

    Returns
    -------
    array
        In ln units for ``spread_ln`` and ``spread_factor``, J/mol for ``spread_J_per_mol``, in the
        unit of the value for ``spread``.
    """
    kelvin = np.asarray(T, dtype=float)
    spec = TABLES[record.table]
    if spec.spread == "spread_J_per_mol":
        edge = np.clip(kelvin, record.T_min, record.T_max)
        return np.asarray(np.hypot(record.spread, R * SLOPE_OUTSIDE * (kelvin / edge - 1.0)))
    if spec.law == "arrhenius":
        return np.asarray(np.hypot(log(record.spread), _slope_spread(record, kelvin)))
    inside = log(record.spread) if spec.spread == "spread_factor" else record.spread
    if not spec.ranged or spec.spread == "spread":
        return np.full(kelvin.shape, inside)
    return np.asarray(np.hypot(inside, SLOPE_OUTSIDE * _beyond(record, kelvin)))


def _middle(record: Record) -> float:
    return 2.0 / (1.0 / record.T_min + 1.0 / record.T_max)


def _slope_spread(record: Record, T: Array) -> Array:
    """Signed share of Q in the spread of ln D at T: zero at the harmonic middle of the range.

    s_Q = R ln(factor) / (2 |1/T_min - 1/T_max|): both ends then stand 3 % over the stated spread. A
    slope known no better than 2000 K caps it where the range is short.
    """
    tau = 1.0 / T - 1.0 / _middle(record)
    width = abs(1.0 / record.T_min - 1.0 / record.T_max)
    s_q = min(0.5 * log(record.spread) / max(width, 1e-12), SLOPE_OUTSIDE)
    return np.asarray(np.sign(tau) * np.hypot(s_q * tau, SLOPE_OUTSIDE * _beyond(record, T)))


def ln_value(record: Record, T: ArrayLike, z: ArrayLike = 0.0) -> Array:
    """Return ln of a quantity at a temperature, per draw.

    ``arrhenius``: ln D = ln D0 - Q/RT, in which ln D at the harmonic middle of the range and Q are
    independent (so that ln D0 and Q carry the correlation that every fit of a line has); ``inverse``:
    A/T + B; ``log10``: ln 10 (A/T + B); ``constant``: the ln of the number. Outside the range the
    spread widens as in :func:`spread_at`, in one sense on either side.

    Parameters
    ----------
    record : Record
        Of a table with a law.
    T : array_like
        K, shape (), (N,), (K, 1) or (K, N).
    z : (P, N) array_like
        Standard normal variables, P = ``parameters(record)``; a plain 0 is the nominal value.

    Returns
    -------
    array
        Shape of T broadcast with (N,).
    """
    kelvin: Array = np.asarray(T, dtype=float)
    spec = TABLES[record.table]
    normal: Array = np.asarray(z, dtype=float)
    if normal.ndim == 0:
        normal = np.full((2, 1), float(normal)) if kelvin.ndim else np.full(2, float(normal))
    first, second = (record.fields[name] for name in (spec.numbers * 2)[:2])
    if spec.law == "arrhenius":
        line = log(first) - second * 1e3 / (R * kelvin)
        return np.asarray(line + log(record.spread) * normal[0] + _slope_spread(record, kelvin) * normal[1])
    if spec.law == "constant":
        line = np.full(kelvin.shape, log(first))
    elif spec.law in ("inverse", "log10"):
        line = (first / kelvin + second) * (log(10.0) if spec.law == "log10" else 1.0)
    else:
        raise TypeError(f"records of the table {record.table} have no law over temperature")
    return np.asarray(line + spread_at(record, kelvin) * normal[0])
