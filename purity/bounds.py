"""What a number in a table can be: bounds so narrow that a slip of a unit shows.

Bounds are a little wider than what is measured, and narrow enough that a factor of 1000 leaves them
for most numbers. Where a column alone cannot tell, the value that the law of the table gives is held
against the usual values of its kind. A row that lies outside and is meant so says ``[unusual]`` in
its note; the hashes of the released tables guard what bounds cannot see.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator, Mapping
from itertools import pairwise
from math import exp, hypot, inf, log, log10

from purity.constants import R
from purity.tables import TABLES, Record, ln_value

Bounds = tuple[float, float]

#: Tag of a note: outside the bounds and meant so.
UNUSUAL = "[unusual]"
#: low <= value <= high.
PLAIN: Mapping[str, Mapping[str, Bounds]] = {
    "elements": {"molar_mass_g_per_mol": (1.0, 300.0)},
    "hosts": {
        "density_kg_per_m3": (400.0, 23000.0),
        "density_slope_kg_per_m3_K": (0.02, 4.0),
        "T_ref_K": (200.0, 4000.0),
        "viscosity_A_ln_Pa_s": (-12.0, -5.0),
        "viscosity_B_K": (200.0, 16000.0),
        "viscosity_spread_ln": (0.005, 0.7),
    },
    "transitions": {"T_K": (10.0, 7000.0), "dH_J_per_mol": (0.0, 1e6)},
    "gibbs": {"S298_J_per_mol_K": (-600.0, 1500.0), "fit_error_J_per_mol": (0.0, 500.0)},
    "diffusion": {"D0_m2_per_s": (1e-10, 100.0), "Q_kJ_per_mol": (1.0, 800.0)},
    "interaction": {"T_K": (200.0, 4000.0)},
    "solubility": {"T_K": (200.0, 4000.0), "limit_ppm_mass": (0.05, 5e5)},
    "containers": {"mass_fraction": (5e-3, 1.0)},
    "traces": {"content_ppm_mass": (5e-3, 1e5)},
    "wetting": {"factor": (2e-4, 1.0), "wets_from_O_ppm": (10.0, 5e4)},
    "attack": {"rate_m_per_s": (1e-11, 1e-4), "T_K": (250.0, 4000.0)},
    "atmospheres": {"fraction_ppm_mol": (0.0, 1e6)},
    "surfaces": {"amount_mg_per_m2": (1e-3, 1e3)},
    "packages": {
        "permeability_mol_per_m_s_Pa": (1e-19, 1e-12),
        "permeance_mol_per_m2_s_Pa": (1e-22, 1e-6),
        "T_K": (250.0, 400.0),
    },
    "desiccants": {"capacity_kg_per_kg": (0.01, 1.0), "floor_Pa": (1e-4, 1e3)},
    "sticking": {"probability": (1e-8, 1.0)},
    "gas_transport": {"D_m2_per_s": (1e-6, 1e-3), "T_ref_K": (200.0, 2000.0), "exponent": (1.4, 2.1)},
    "transfer": {"exponent": (0.1, 1.0)},
    "partition": {"k0": (1e-9, 20.0)},
    "moulds": {
        "effusivity_J_per_m2_K_s05": (300.0, 6e4),
        "interface_W_per_m2_K": (50.0, 3e4),
        "water_kg_per_m2": (1e-7, 1.0),
    },
    "films": {"Q_kJ_per_mol": (20.0, 400.0), "density_kg_per_m3": (1000.0, 15000.0)},
    "miedema": {
        "phi_V": (1.0, 8.0),
        "n_ws_third": (0.3, 3.0),
        "V_two_thirds_cm2": (1.0, 30.0),
        "a": (0.01, 0.3),
        "R_over_P": (0.0, 5.0),
    },
    "hot_zones": {"getter_share": (0.0, 1.0)},
    "hazards": {"T_min_K": (0.0, 4000.0)},
    "priors": {"low_ppm": (1e-4, 10.0), "high_ppm": (0.1, 1000.0)},
}
#: 0, or low <= |value| <= high.
SIZE: Mapping[str, Mapping[str, Bounds]] = {
    "gibbs": {"H298_J_per_mol": (5.0, 2e7)},
    "activity": {"A_K": (15.0, 5e4), "B": (1e-4, 12.0)},
    "sieverts": {"log10_A_K": (400.0, 4e4), "log10_B": (0.1, 12.0)},
    "interaction": {"epsilon": (0.1, 1000.0)},
    "wetting": {"T_gate_K": (250.0, 4000.0)},
}
#: Column that names the kind of a row, and bounds of a column by kind.
KIND: Mapping[str, str] = {
    "wall_values": "property",
    "films": "law",
    "sieverts": "solute",
    "transfer": "place",
}
BY_KIND: Mapping[tuple[str, str, str], Bounds] = {
    ("wall_values", "leach_depth", "value_SI"): (5e-8, 5e-3),
    ("wall_values", "open_porosity", "value_SI"): (1e-5, 0.6),
    ("wall_values", "density", "value_SI"): (500.0, 23000.0),
    ("wall_values", "service_oxidising", "value_SI"): (400.0, 3500.0),
    ("wall_values", "service_inert", "value_SI"): (400.0, 3600.0),
    ("wall_values", "service_vacuum", "value_SI"): (400.0, 3600.0),
    ("transfer", "wall", "k_m_per_s"): (2e-6, 2e-3),
    ("transfer", "free surface", "k_m_per_s"): (2e-6, 2e-3),
    ("transfer", "gas film", "k_m_per_s"): (5e-3, 5.0),
    ("transfer", "wall", "D_ref_m2_per_s"): (1e-10, 1e-7),
    ("transfer", "free surface", "D_ref_m2_per_s"): (1e-10, 1e-7),
    ("transfer", "gas film", "D_ref_m2_per_s"): (1e-5, 1e-2),
    ("films", "limiting", "p1"): (1e-10, 1e-7),
    ("films", "logarithmic", "p1"): (5e-11, 2e-8),
    ("sieverts", "H", "log10_B"): (0.3, 3.6),
    ("sieverts", "N", "log10_B"): (-1.6, 4.5),
    ("sieverts", "O", "log10_B"): (-1.6, 4.5),
    ("sieverts", "S", "log10_B"): (2.4, 4.8),
    ("sieverts", "P", "log10_B"): (1.5, 4.2),
}
#: log10 of D (m2/s) at the melting point of the host, by phase ("" any other lattice) and solute
#: ("" any other).
DIFFUSION: Mapping[str, Mapping[str, Bounds]] = {
    "liquid": {"H": (-7.4, -5.2), "": (-10.3, -7.4)},
    "diamond": {"H": (-8.6, -6.4), **dict.fromkeys("CNOB", (-14.7, -12.3)), "": (-16.0, -13.0)},
    "bcc": {"H": (-8.6, -6.4), **dict.fromkeys("CNOB", (-10.6, -7.6)), "": (-12.8, -9.1)},
    "": {"H": (-8.6, -6.4), **dict.fromkeys("CNOB", (-10.6, -7.6)), "": (-13.9, -9.9)},
}
#: ln gamma anywhere in its range.
LN_GAMMA: Bounds = (-42.0, 26.0)
#: Entropy of a transition, J/(mol K), by its kind (Richards, Trouton).
TRANSITION: Mapping[str, Bounds] = {
    "melting": (4.5, 32.0),
    "boiling": (70.0, 150.0),
    "solid transition": (0.3, 8.0),
}
#: Per atom: heat capacity and entropy, J/(mol K), and enthalpy, J/mol, in the middle of the range.
PER_ATOM: Mapping[str, Bounds] = {"Cp": (5.0, 130.0), "S": (2.0, 260.0), "H": (-7.5e5, 9.5e5)}
#: Viscosity at the melting point, Pa s.
VISCOSITY: Bounds = (2e-4, 2e-2)


def out_of_bounds(record: Record, melting: Mapping[str, float]) -> Iterator[str]:
    """Yield what is out of bounds in a row, in words.

    Parameters
    ----------
    record : Record
    melting : mapping of str to float
        Melting point of each element, K.
    """
    if UNUSUAL in record.words["note"]:
        return
    table = record.table
    kind = record.words.get(KIND.get(table, ""), "")
    for name, value in record.fields.items():
        low, high = PLAIN.get(table, {}).get(name, (-inf, inf))
        low, high = BY_KIND.get((table, kind, name), (low, high))
        if not low <= value <= high:
            yield f"{name} is {value:g}, outside {low:g} to {high:g}: check its unit"
        low, high = SIZE.get(table, {}).get(name, (0.0, inf))
        if value and not low <= abs(value) <= high:
            yield f"{name} is {value:g}, its size outside {low:g} to {high:g}: check its unit"
    if all(value > 0 for name, value in record.fields.items() if name in ("D0_m2_per_s", "T_K")):
        for what, value, (low, high) in _values(record, melting):
            if not low <= value <= high:
                yield f"{what} is {value:.3g}, outside {low:g} to {high:g}: check the units of the row"


def _values(record: Record, melting: Mapping[str, float]) -> Iterator[tuple[str, float, Bounds]]:
    """Yield what a row says, its value, and the bounds of its kind."""
    table, fields, words = record.table, record.fields, record.words
    if table == "diffusion" and words["host"] in melting:
        T = melting[words["host"]]
        bounds = DIFFUSION.get(words["phase"], DIFFUSION[""])
        value = log10(fields["D0_m2_per_s"]) - fields["Q_kJ_per_mol"] * 1e3 / (R * T * log(10.0))
        yield "log10 of D at the melting point", value, bounds.get(words["solute"], bounds[""])
    elif table == "activity":
        for T in (record.T_min, record.T_max):
            yield f"ln gamma at {T:g} K", fields["A_K"] / T + fields["B"], LN_GAMMA
    elif table == "transitions" and words["kind"] in TRANSITION and "dH_J_per_mol" in fields:
        yield "dH/T", fields["dH_J_per_mol"] / fields["T_K"], TRANSITION[words["kind"]]
    elif table == "gibbs":
        yield from _per_atom(record)
    elif table == "hosts" and "viscosity_A_ln_Pa_s" in fields and record.T_min > 0:
        exponent = fields["viscosity_A_ln_Pa_s"] + fields["viscosity_B_K"] / record.T_min
        yield "viscosity", exp(min(exponent, 50.0)), VISCOSITY


def _per_atom(record: Record) -> Iterator[tuple[str, float, Bounds]]:
    # a count without brackets is near enough: Ca(OH)2 comes out as 3 atoms
    counts = re.findall(r"[A-Z][a-z]?(\d*\.?\d*)", record.words["formula"])
    atoms = sum(float(count or 1.0) for count in counts) or 1.0
    a, b, c, d = (record.fields[name] for name in TABLES["gibbs"].numbers[2:6])
    T0, T = 298.15, 0.5 * (record.T_min + record.T_max)
    S = record.fields["S298_J_per_mol_K"] + a * log(T / T0) + b * (T - T0) + d / 2 * (T**2 - T0**2)
    S -= c / 2 * (T**-2 - T0**-2)
    H = record.fields["H298_J_per_mol"] + a * (T - T0) + b / 2 * (T**2 - T0**2) + d / 3 * (T**3 - T0**3)
    H -= c * (1 / T - 1 / T0)
    at = f"per atom at {T:g} K"
    yield f"Cp {at}", (a + b * T + c / T**2 + d * T**2) / atoms, PER_ATOM["Cp"]
    yield f"entropy {at}", S / atoms, PER_ATOM["S"]
    yield f"enthalpy {at}", H / atoms, PER_ATOM["H"]


def too_far_apart(records: Iterable[Record]) -> Iterator[tuple[Record, str]]:
    """Yield records of one quantity that no spread and no heat of solution brings together.

    Points of a solubility may differ by three combined sigma, a factor of 20 and a slope of 25 000 K;
    rivals with a law over temperature, compared between their ranges, by the same without the slope.

    Parameters
    ----------
    records : iterable of Record
        All of one quantity.
    """
    usual = [r for r in records if UNUSUAL not in r.words["note"]]
    usual.sort(key=lambda r: r.fields.get("T_K", 0.0))
    for one, other in pairwise(usual):
        if one.words.get("reference") != other.words.get("reference"):
            continue
        T1, T2 = _place(one, other), _place(other, one)
        apart = abs(_ln(one, T1) - _ln(other, T2))
        if apart > log(20.0) + 3.0 * hypot(one.spread, other.spread) + 25000.0 * abs(1 / T1 - 1 / T2):
            yield (
                other,
                f"lies a factor {exp(min(apart, 50.0)):.2g} from line {one.line}: one of the two is wrong",
            )


def _place(record: Record, other: Record) -> float:
    if "T_K" in record.fields:
        return record.fields["T_K"]
    return 0.5 * (max(record.T_min, other.T_min) + min(record.T_max, other.T_max))


def _ln(record: Record, T: float) -> float:
    if "limit_ppm_mass" in record.fields:
        return log(record.fields["limit_ppm_mass"])
    return float(ln_value(record, T))
