"""A user's own tables, made from rows of the package: shifted by their spread, or taken out."""

from __future__ import annotations

import csv
from dataclasses import replace
from math import log
from pathlib import Path

from purity.database import TABLES, Library, Record, load
from purity.table_files import columns

#: Column that carries the value of a row, and whether a spread in ln multiplies it or adds to it.
VALUE = {
    "hosts": ("density_kg_per_m3", "times"),
    "gibbs": ("H298_J_per_mol", "plus"),
    "activity": ("B", "plus"),
    "sieverts": ("log10_B", "plus"),
    "diffusion": ("D0_m2_per_s", "times"),
    "solubility": ("limit_ppm_mass", "times"),
    "traces": ("content_ppm_mass", "times"),
    "wall_values": ("value_SI", "times"),
    "wetting": ("factor", "times"),
    "atmospheres": ("fraction_ppm_mol", "times"),
    "surfaces": ("amount_mg_per_m2", "times"),
    "films": ("p1", "times"),
    "packages": ("permeability_mol_per_m_s_Pa", "times"),
    "desiccants": ("capacity_kg_per_kg", "times"),
    "sticking": ("probability", "times"),
    "hot_zones": ("getter_share", "times"),
    "gas_transport": ("D_m2_per_s", "times"),
    "transfer": ("k_m_per_s", "times"),
}


def shifted(record: Record) -> Record:
    """Return a row moved by one standard deviation: down where up would pass a bound."""
    if record.table == "priors":
        fields = {name: 1.5 * value for name, value in record.fields.items()}
        return replace(record, fields=fields)
    name, how = VALUE[record.table]
    if name not in record.fields:
        name = "permeance_mol_per_m2_s_Pa"
    value, spread = record.fields[name], record.spread
    spec = TABLES[record.table]
    factor = spread if spec.spread == "spread_factor" else 1.0 + min(spread, 0.5)
    if record.table == "sieverts":
        spread /= log(10.0)
    if record.table == "hosts":
        factor = 1.0 + record.spread
    if record.table in ("sticking", "wetting", "diffusion", "hot_zones"):
        factor = 1.0 / factor
    if record.table == "atmospheres" and value > 1e4:
        # the species of a gas add up to one, within what the tables allow
        factor = 0.97
    moved = value + spread if how == "plus" else value * factor
    return replace(record, fields={**record.fields, name: moved})


def put(folder: Path, records: list[Record], *, rank: int | None = None) -> Library:
    """Write rows as a user's own table over the package and load both."""
    folder.mkdir(parents=True, exist_ok=True)
    table = records[0].table
    with (folder / f"{table}.csv").open("w", newline="", encoding="utf-8") as file:
        writer = csv.writer(file)
        writer.writerow(columns(table))
        for record in records:
            writer.writerow(_cells(record, rank))
    return load(folder)


def _cells(record: Record, rank: int | None) -> list[str]:
    spec = TABLES[record.table]
    values = {name: record.words[name] for name in (*spec.key, *spec.text, "note")}
    values |= {name: repr(record.fields[name]) for name in spec.numbers if name in record.fields}
    if spec.ranged:
        values |= {"T_min_K": repr(record.T_min), "T_max_K": repr(record.T_max)}
    if spec.spread:
        values[spec.spread] = repr(record.spread)
    values |= {"rank": str(record.rank if rank is None else rank), "source": record.source}
    values |= {"where": record.where, "origin": record.origin}
    return [values.get(name, "") for name in columns(record.table)]


def rows_of(library: Library, quantity: str) -> list[Record]:
    """Return the rows of a quantity that are in use: one, or one at each temperature."""
    best: dict[float | None, Record] = {}
    for record in library.rivals(quantity):
        best.setdefault(record.fields.get("T_K"), record)
    return list(best.values())


def moved_by_one_sigma(library: Library, quantity: str, folder: Path) -> Library:
    """Return the library with every row of a quantity moved by one standard deviation."""
    return put(folder, [shifted(record) for record in rows_of(library, quantity)])


def without(library: Library, quantity: str, folder: Path) -> Library:
    """Return the library without a quantity."""
    return put(folder, rows_of(library, quantity)[:1], rank=0)
