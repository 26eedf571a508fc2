"""The tables of the package keep their rules, agree with each other, and show a slip of a unit."""

from __future__ import annotations

import csv
import json
import shutil
from dataclasses import replace
from math import exp, hypot, log
from pathlib import Path

import pytest

from purity.bounds import UNUSUAL, out_of_bounds, too_far_apart
from purity.database import DATA, Library, Record, file_hashes, ln_value, load, spread_at, verify
from purity.table_files import COMPARED, ORIGINS, columns
from purity.tables import TABLES

LIBRARY = load()
MELTING = {r.words["element"]: r.fields["T_K"] for r in LIBRARY.rows("transitions", kind="melting")}
MOLAR_MASS = {r.words["element"]: r.fields["molar_mass_g_per_mol"] for r in LIBRARY.rows("elements")}


def test_every_rule_is_kept_and_the_files_are_as_released() -> None:
    """After a change on purpose: ``python tests/fits/write_hashes.py``."""
    assert [f"{f.key}:{f.line}: {f.text}" for f in verify()] == []


@pytest.mark.parametrize("table", sorted(TABLES))
def test_every_table_has_rows_with_source_origin_and_rank(table: str) -> None:
    rows = LIBRARY.tables[table]
    assert rows
    for record in rows:
        assert record.origin in ORIGINS
        assert set(record.source.split(";")) <= set(LIBRARY.sources)
        assert record.quality in "ABCD"
        assert record.rank >= 1


def test_ranks_of_rivals_count_up_from_one() -> None:
    for table in set(TABLES) - {"hosts"}:
        points: dict[tuple[str, float | None], list[int]] = {}
        for record in LIBRARY.tables[table]:
            points.setdefault((record.quantity, record.fields.get("T_K")), []).append(record.rank)
        wrong = {place: ranks for place, ranks in points.items() if ranks != list(range(1, len(ranks) + 1))}
        assert not wrong, table


def copy(folder: Path, table: str, change: dict[str, str], line: int) -> None:
    """Copy the tables and overwrite cells in one line of one of them."""
    shutil.copytree(DATA, folder, dirs_exist_ok=True)
    path = folder / f"{table}.csv"
    lines = path.read_text(encoding="utf-8").splitlines()
    header = next(csv.reader([text for text in lines if not text.startswith("#")]))
    row = dict(zip(header, next(csv.reader([lines[line - 1]])), strict=True))
    with (folder / "row.txt").open("w", encoding="utf-8", newline="") as out:
        csv.DictWriter(out, header).writerow({**row, **change})
    lines[line - 1] = (folder / "row.txt").read_text(encoding="utf-8").strip()
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")


# one number of each table that is told a thousand times too large or too small
SLIPS = {
    "elements": ("molar_mass_g_per_mol", 1e3),
    "hosts": ("density_kg_per_m3", 1e-3),
    "transitions": ("T_K", 1e-3),
    "gibbs": ("H298_J_per_mol", 1e3),
    "miedema": ("phi_V", 1e3),
    "activity": ("A_K", 1e3),
    "sieverts": ("log10_A_K", 1e-3),
    "interaction": ("T_K", 1e3),
    "diffusion": ("Q_kJ_per_mol", 1e3),
    "solubility": ("T_K", 1e-3),
    "containers": ("mass_fraction", 1e-3),
    "traces": ("content_ppm_mass", 1e3),
    "wall_values": ("value_SI", 1e3),
    "wetting": ("T_gate_K", 1e3),
    "attack": ("T_K", 1e3),
    "atmospheres": ("fraction_ppm_mol", 1e-3),
    "surfaces": ("amount_mg_per_m2", 1e3),
    "films": ("density_kg_per_m3", 1e3),
    "packages": ("T_K", 1e3),
    "desiccants": ("capacity_kg_per_kg", 1e3),
    "sticking": ("probability", 1e3),
    "gas_transport": ("D_m2_per_s", 1e3),
    "transfer": ("k_m_per_s", 1e3),
    "partition": ("k0", 1e3),
    "moulds": ("interface_W_per_m2_K", 1e3),
    "hot_zones": ("getter_share", 1e3),
    "priors": ("high_ppm", 1e3),
    "hazards": ("T_min_K", 1e3),
}


@pytest.mark.parametrize("table", sorted(TABLES))
def test_a_number_a_thousand_times_off_is_caught_in_every_table(table: str, tmp_path: Path) -> None:
    column, factor = SLIPS[table]
    rows = [r for r in LIBRARY.tables[table] if column in r.fields and UNUSUAL not in r.words["note"]]
    record = max(rows, key=lambda r: r.fields[column])
    copy(tmp_path, table, {column: repr(record.fields[column] * factor)}, record.line)
    told = [f for f in verify(tmp_path) if f.key.startswith(f"{table}.csv: ") and f.text]
    assert any(f.line == record.line or "sums to" in f.text for f in told)


# share of rows in which a factor of 1000, up and down, leaves the bounds
SEEN = [
    ("elements", "molar_mass_g_per_mol", 1.0, 1.0),
    ("hosts", "density_kg_per_m3", 1.0, 1.0),
    ("hosts", "viscosity_B_K", 1.0, 1.0),
    ("transitions", "T_K", 1.0, 1.0),
    ("transitions", "dH_J_per_mol", 1.0, 1.0),
    ("gibbs", "H298_J_per_mol", 0.95, 0.0),
    ("gibbs", "S298_J_per_mol_K", 0.95, 0.0),
    ("activity", "A_K", 0.95, 0.85),
    ("activity", "B", 0.95, 0.0),
    ("sieverts", "log10_A_K", 0.95, 0.95),
    ("sieverts", "log10_B", 0.95, 0.95),
    ("diffusion", "D0_m2_per_s", 0.8, 0.8),
    ("diffusion", "Q_kJ_per_mol", 0.85, 0.85),
    ("solubility", "T_K", 0.95, 0.95),
    ("solubility", "limit_ppm_mass", 0.6, 0.4),
]


@pytest.mark.parametrize(("table", "column", "up", "down"), SEEN)
def test_share_of_rows_in_which_a_slip_shows(table: str, column: str, up: float, down: float) -> None:
    rows = [r for r in LIBRARY.tables[table] if r.fields.get(column)]
    for factor, share in ((1e3, up), (1e-3, down)):
        caught = sum(shows(replace(r, fields={**r.fields, column: r.fields[column] * factor})) for r in rows)
        assert caught >= share * len(rows), (factor, caught, len(rows))


def shows(record: Record) -> bool:
    if any(True for _ in out_of_bounds(record, MELTING)):
        return True
    others = [r for r in LIBRARY.rivals(record.quantity) if r.line != record.line]
    return record.table in COMPARED and any(True for _ in too_far_apart([record, *others]))


def test_any_change_of_a_table_is_seen_by_its_hash(tmp_path: Path) -> None:
    shutil.copytree(DATA, tmp_path, dirs_exist_ok=True)
    (tmp_path / "hashes.json").write_text(json.dumps(file_hashes(tmp_path)), encoding="utf-8")
    path = tmp_path / "gibbs.csv"
    path.write_text(path.read_text(encoding="utf-8").replace("900", "901", 1), encoding="utf-8")
    assert [f.key for f in verify(tmp_path) if "released" in f.text] == ["gibbs.csv"]


def test_a_missing_table_and_an_unused_source_are_told(tmp_path: Path) -> None:
    shutil.copytree(DATA, tmp_path, dirs_exist_ok=True)
    (tmp_path / "diffusion.csv").unlink()
    texts = {(f.key, f.text) for f in verify(tmp_path)}
    assert ("diffusion.csv", "is missing") in texts
    assert any("krautheim1979" in key and "no row names" in text for key, text in texts)


def test_columns_of_a_table_stand_in_one_order() -> None:
    assert columns("diffusion") == (
        *("host", "phase", "solute", "D0_m2_per_s", "Q_kJ_per_mol", "T_min_K", "T_max_K", "spread_factor"),
        *("rank", "source", "where", "origin", "note"),
    )


# tables against each other


def phases(library: Library, host: str) -> list[Record]:
    return sorted((r for r in library.tables["hosts"] if r.words["host"] == host), key=lambda r: r.T_min)


HOSTS = LIBRARY.names("hosts", "host")


@pytest.mark.parametrize("host", HOSTS)
def test_phases_of_a_host_follow_each_other_to_its_boiling_point(host: str) -> None:
    rows = phases(LIBRARY, host)
    assert rows[0].T_min == 0.0
    assert [r.T_max for r in rows[:-1]] == [r.T_min for r in rows[1:]]
    assert rows[-1].words["phase"] == "liquid"
    assert rows[-1].T_min == pytest.approx(MELTING[host], rel=1e-5)
    boiling = LIBRARY.rows("transitions", element=host, kind="boiling")[0].fields["T_K"]
    assert rows[-1].T_max == pytest.approx(boiling, rel=1e-5)


def density(record: Record, T: float) -> float:
    f = record.fields
    return f["density_kg_per_m3"] - f["density_slope_kg_per_m3_K"] * (T - f["T_ref_K"])


@pytest.mark.parametrize("host", HOSTS)
def test_densities_join_at_the_transitions(host: str) -> None:
    """Melting changes the density by -11 to +12 %, a change of lattice by less than 3 %."""
    for below, above in zip(phases(LIBRARY, host), phases(LIBRARY, host)[1:], strict=False):
        ratio = density(above, above.T_min) / density(below, above.T_min)
        low, high = (0.89, 1.12) if above.words["phase"] == "liquid" else (0.97, 1.03)
        assert low < ratio < high, (above.words["phase"], ratio)


def test_every_host_and_solute_is_an_element() -> None:
    for table in ("activity", "sieverts", "diffusion", "solubility", "interaction"):
        for record in LIBRARY.tables[table]:
            assert record.words["host"] in {*MOLAR_MASS, "*"}
            assert record.words["solute"] in {*MOLAR_MASS, "*"}


@pytest.mark.parametrize("table", ["activity", "sieverts", "diffusion"])
def test_ranges_reach_into_their_phase(table: str) -> None:
    """Supercooled melts and alloys reach 27 % under the melting point, solids 10 % over it at most."""
    for record in LIBRARY.tables[table]:
        T = MELTING.get(record.words["host"])
        if T is None:
            assert record.words["host"] == "*"
        elif record.words["phase"] == "liquid":
            assert record.T_max > 0.9 * T, record.quantity
            assert record.T_min > 0.73 * T, record.quantity
        else:
            assert record.T_min < T, record.quantity
            assert record.T_max < 1.1 * T, record.quantity


def mole_fraction(record: Record) -> float:
    host, solute = MOLAR_MASS[record.words["host"]], MOLAR_MASS[record.words["solute"]]
    w = record.fields["limit_ppm_mass"] * 1e-6
    return w / solute / (w / solute + (1.0 - w) / host)


def pairs() -> list[tuple[Record, Record]]:
    """Dilute saturation with the pure solute beside the activity coefficient in use."""
    found = []
    for limit in LIBRARY.rows("solubility"):
        key = {name: limit.words[name] for name in ("host", "phase", "solute")}
        for activity in LIBRARY.rows("activity", **key)[:1]:
            pure = limit.words["with"] == limit.words["solute"] and activity.words["reference"] in ("s", "gr")
            if pure and mole_fraction(limit) < 0.02 and limit.source != activity.source:
                found.append((limit, activity))
    return found


@pytest.mark.parametrize(
    ("limit", "activity"), pairs(), ids=[f"{s.quantity} {s.fields['T_K']:g} K" for s, _ in pairs()]
)
def test_activity_coefficients_agree_with_measured_saturation(limit: Record, activity: Record) -> None:
    """x = 1/gamma at saturation with the pure solute, within 2.5 combined sigma."""
    T = limit.fields["T_K"]
    apart = float(ln_value(activity, T)) + log(mole_fraction(limit))
    assert abs(apart) < 2.5 * hypot(float(spread_at(activity, T)), limit.spread)


def test_self_diffusion_of_close_packed_metals_at_the_melting_point() -> None:
    """A. M. Brown, M. F. Ashby, Acta Metall. 28 (1980) 1085 (from memory): 5.5e-13 m2/s in fcc metals."""
    values = []
    for host in ("Cu", "Ag", "Au", "Ni", "Pt", "Al", "Co", "Fe"):
        record = LIBRARY.rows("diffusion", host=host, phase="fcc", solute=host)[0]
        values.append(float(ln_value(record, MELTING[host])))
    assert exp(sum(values) / len(values)) == pytest.approx(5.5e-13, rel=0.5)
    assert max(values) - min(values) < log(100.0)
