"""What a number in a table can be: bounds so narrow that a slip of a unit shows.

Bounds are wider than nearly everything measured and narrow enough that a factor of 1000 leaves them
for most rows. Where the column alone cannot tell, the value that the law gives at the ends of the
range is held against the bounds of its kind. A row that lies outside and is meant so says
``[unusual]`` in its note.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from purity.tables import Record

Bounds = tuple[float, float]

#: Columns that hold one sign: low <= value <= high.
PLAIN: Mapping[str, Mapping[str, Bounds]] = {
    "elements": {"molar_mass_g_per_mol": (1.0, 300.0)},
    "hosts": {
        "density_kg_per_m3": (400.0, 23000.0),
        "density_slope_kg_per_m3_K": (0.01, 4.0),
        "T_ref_K": (200.0, 4000.0),
        "viscosity_A_ln_Pa_s": (-12.0, -5.0),
        "viscosity_B_K": (200.0, 16000.0),
        "viscosity_spread_ln": (0.01, 0.7),
    },
    "transitions": {"T_K": (10.0, 7000.0), "dH_J_per_mol": (0.0, 1e6)},
    "gibbs": {"S298_J_per_mol_K": (-600.0, 1500.0), "fit_error_J_per_mol": (0.0, 2000.0)},
    "diffusion": {"D0_m2_per_s": (1e-16, 1e4), "Q_kJ_per_mol": (1.0, 800.0)},
    "interaction": {"T_K": (200.0, 4000.0)},
    "solubility": {"T_K": (200.0, 4000.0), "limit_ppm_mass": (1e-5, 1e6)},
    "containers": {"mass_fraction": (1e-3, 1.0)},
    "traces": {"content_ppm_mass": (1e-4, 5e4)},
    "wetting": {"T_gate_K": (250.0, 4000.0), "factor": (1e-5, 1.0)},
    "attack": {"rate_m_per_s": (1e-13, 1e-3), "T_K": (250.0, 4000.0)},
    "atmospheres": {"fraction_ppm_mol": (0.0, 1e6)},
    "sticking": {"probability": (1e-12, 1.0)},
}
#: Columns of either sign: 0, or low <= |value| <= high.
SIZE: Mapping[str, Mapping[str, Bounds]] = {
    "gibbs": {"H298_J_per_mol": (5.0, 2e7)},
    "activity": {"A_K": (10.0, 1e5), "B": (1e-4, 50.0)},
    "sieverts": {"log10_A_K": (10.0, 4e4), "log10_B": (1e-4, 12.0)},
    "interaction": {"epsilon": (0.01, 1000.0)},
}
#: Values of the column `value_SI` by what the row names.
PROPERTY: Mapping[str, Bounds] = {
    "leach_depth": (1e-8, 5e-3),
    "open_porosity": (0.0, 0.6),
    "service_oxidising": (400.0, 3500.0),
    "service_inert": (400.0, 3600.0),
    "service_vacuum": (400.0, 3600.0),
}


def out_of_bounds(record: Record) -> Iterator[str]:
    """Yield what is out of bounds in a row, in words.

    Parameters
    ----------
    record : Record
    """
    if "[unusual]" in record.words["note"]:
        return
    for name, value in record.fields.items():
        low, high = PLAIN.get(record.table, {}).get(name, (-float("inf"), float("inf")))
        if name == "value_SI":
            low, high = PROPERTY.get(record.words["property"], (0.0, 1e4))
        if not low <= value <= high:
            yield f"{name} is {value:g}, outside {low:g} to {high:g}: check its unit"
        low, high = SIZE.get(record.table, {}).get(name, (0.0, float("inf")))
        if value and not low <= abs(value) <= high:
            yield f"{name} is {value:g}, its size outside {low:g} to {high:g}: check its unit"
