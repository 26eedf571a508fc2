"""The library of records: tables with a source for every row, and a user's own tables over them.

Every table is a CSV file in ``purity/data`` (or in a user's folder). All tables carry ``source`` (a key
of ``sources.csv``), ``where`` (page, table, file), ``origin`` (looked-up, memory, derived, computed,
estimate) and ``note``; most carry a temperature range and a spread. Units stand in column names.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Literal

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

How = Literal["measured", "estimate", "yours"]


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
    law : {"arrhenius", "inverse", "constant", ""}
        How :func:`ln_value` reads `numbers`: ln y = ln D0 - Q/RT; ln y = A/T + B; ln y = ln value.
    text : tuple of str
        Further columns that hold words.
    optional : tuple of str
        Number columns that may be blank.
    """

    key: tuple[str, ...]
    numbers: tuple[str, ...]
    spread: str = ""
    ranged: bool = False
    law: str = ""
    text: tuple[str, ...] = ()
    optional: tuple[str, ...] = ()


#: Every table of the library. `rank` (integer, 1 first) orders rival rows of one quantity.
TABLES: Mapping[str, Table] = {
    "elements": Table(("element",), ("molar_mass_g_per_mol",), text=("name",)),
    # solid, liquid: density rho = density - slope (T - T_ref); viscosity ln eta = A + B/T in Pa s
    "hosts": Table(
        ("host", "phase"),
        ("density_kg_per_m3", "density_slope_kg_per_m3_K", "T_ref_K", "viscosity_A_ln_Pa_s", "viscosity_B_K"),
        spread="spread_ln",
        ranged=True,
        optional=("viscosity_A_ln_Pa_s", "viscosity_B_K"),
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
    # ln gamma at infinite dilution = A/T + B; reference l, s, gr: pure liquid, stable solid, graphite
    "activity": Table(
        ("host", "phase", "solute"),
        ("A_K", "B"),
        spread="spread_ln",
        ranged=True,
        law="inverse",
        text=("reference",),
    ),
    # log10 of mass ppm per sqrt(atm) of the diatomic gas (H2, N2, O2, S2, P2) = A/T + B
    "sieverts": Table(("host", "phase", "solute"), ("log10_A_K", "log10_B"), spread="spread_ln", ranged=True),
    "interaction": Table(("host", "phase", "solute", "by"), ("epsilon", "T_K"), spread="spread"),
    "diffusion": Table(
        ("host", "phase", "solute"),
        ("D0_m2_per_s", "Q_kJ_per_mol"),
        spread="spread_factor",
        ranged=True,
        law="arrhenius",
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
    "wetting": Table(("host", "formula"), ("T_gate_K", "factor"), spread="spread_ln", text=("wets",)),
    # rate of wall loss into the melt where no ceiling lies in the dilute range
    "attack": Table(("host", "formula"), ("rate_m_per_s", "T_K"), spread="spread_ln"),
    "atmospheres": Table(
        ("atmosphere", "species"), ("fraction_ppm_mol",), spread="spread_factor", text=("title", "aliases")
    ),
    # adsorbed or bound on the surface of a charge, by preparation
    "surfaces": Table(("host", "surface", "species"), ("amount_mg_per_m2",), spread="spread_factor"),
    # law: limiting, logarithmic, parabolic...; p1..p3 in SI in the order of the law
    "films": Table(
        ("host", "film", "environment"),
        ("p1", "p2", "p3", "Q_kJ_per_mol"),
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
        Text columns.
    spread : float
        One sigma, in the sense of the table's spread column (0 where it has none).
    T_min, T_max : float
        Range of validity, K (0 and infinity where the table has none).
    source, where, origin : str
    quality : str
        Class made from origin and spread: A measured and narrow, B measured, C from memory,
        D estimate or derived without a measurement.
    rank : int
        1 is preferred.
    line : int
        Line of the file.
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


@dataclass(frozen=True, slots=True)
class Found:
    """A record, its rivals, and how it was come by."""

    record: Record
    rivals: tuple[Record, ...] = ()
    how: How = "measured"


@dataclass(frozen=True, slots=True)
class Gap:
    """Something that matters and that no table holds: a value, never None, never an exception."""

    quantity: str
    reason: str
    nearest: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Library:
    """All tables with a user's own laid over them. Immutable; passed as an argument."""

    tables: Mapping[str, tuple[Record, ...]]
    sources: Mapping[str, Mapping[str, str]]
    data_hash: str
    prefer: tuple[str, ...] = ()
    _index: Mapping[str, tuple[Record, ...]] | None = None

    def find(self, table: str, **key: str) -> Found | Gap:
        """Return the best record of a quantity, or the gap.

        Parameters
        ----------
        table : str
        **key : str
            The key columns of the table.
        """
        raise NotImplementedError

    def rows(self, table: str, **key: str) -> tuple[Record, ...]:
        """Return every best record whose key columns have the given values (some may be left out)."""
        raise NotImplementedError


def load(overlay: Path | None = None, prefer: tuple[str, ...] = ()) -> Library:
    """Read the tables of the package and a user's folder over them."""
    raise NotImplementedError
