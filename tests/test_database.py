"""The library: finding, ranking, a user's tables over the package's, and values over temperature."""

from __future__ import annotations

import os
import pickle
from dataclasses import FrozenInstanceError, replace
from math import exp, log, sqrt
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from purity.catalogue import bibliography, coverage, show
from purity.constants import ATM, R
from purity.database import (
    Found,
    Gap,
    Library,
    check,
    ln_value,
    load,
    outside,
    parameters,
    phase_at,
    spread_at,
)
from purity.draws import Draws, normal, sample
from purity.errors import DataError, Fault, OutOfRangeError
from purity.scenario import Material, Still
from purity.tables import TABLES, Record, quantity_name

LIBRARY = load()
DIFFUSION = (
    "host,phase,solute,D0_m2_per_s,Q_kJ_per_mol,T_min_K,T_max_K,spread_factor,rank,source,where,origin,note\n"
)
SOURCES = "key,citation,address,origin\nours,our own weld-lab notes 2025,,looked-up\n"


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    (tmp_path / "sources.csv").write_text(SOURCES, encoding="utf-8")
    return tmp_path


def write(folder: Path, rows: str, name: str = "diffusion.csv", head: str = DIFFUSION) -> Path:
    (folder / name).write_text(head + rows, encoding="utf-8")
    return folder


def found(result: Found | Gap) -> Record:
    assert isinstance(result, Found), result
    return result.record


# finding


def test_a_record_is_found_by_its_key_and_knows_where_it_stands() -> None:
    record = found(LIBRARY.find("diffusion", host="Cu", phase="fcc", solute="O"))
    assert record.quantity == "diffusion:Cu/fcc/O"
    assert record.words["solute"] == "O"
    assert record.source in LIBRARY.sources
    text = (Path(__file__).parents[1] / "purity/data/diffusion.csv").read_text(encoding="utf-8")
    assert text.splitlines()[record.line - 1].startswith("Cu,fcc,O,")


def test_what_is_not_known_is_a_gap_with_the_nearest_names() -> None:
    gap = LIBRARY.find("diffusion", host="Cu", phase="fcc", solute="Xe")
    assert isinstance(gap, Gap)
    assert gap.quantity == "diffusion:Cu/fcc/Xe"
    assert gap.nearest
    assert all(name.startswith("diffusion:Cu/fcc/") for name in gap.nearest)


@pytest.mark.parametrize(
    ("table", "key"), [("difusion", {"host": "Cu"}), ("diffusion", {"host": "Cu", "metal": "O"})]
)
def test_a_table_or_column_that_does_not_exist_is_a_fault_of_the_caller(
    table: str, key: dict[str, str]
) -> None:
    with pytest.raises(TypeError, match="diffusion"):
        LIBRARY.find(table, **key)
    with pytest.raises(TypeError, match="diffusion"):
        LIBRARY.rows(table, **key)


def test_rows_gives_one_record_for_each_quantity_and_temperature() -> None:
    rows = LIBRARY.rows("activity", host="Cu", phase="liquid")
    assert len({r.quantity for r in rows}) == len(rows)
    points = LIBRARY.rows("solubility", host="Si", phase="liquid", solute="C")
    assert len({r.fields["T_K"] for r in points}) == len(points) >= 4


def test_rank_one_is_used_and_a_preferred_source_goes_before_all_ranks() -> None:
    best = LIBRARY.find("sieverts", host="Cu", phase="liquid", solute="O")
    assert isinstance(best, Found)
    assert [best.record.rank, *(r.rank for r in best.rivals)] == [1, 2]
    other = best.rivals[0]
    for wish in (other.source, f"{other.quantity}={other.source}"):
        assert found(load(prefer=(wish,)).find("sieverts", host="Cu", phase="liquid", solute="O")) == other


def test_an_unknown_preference_is_refused_with_the_nearest() -> None:
    with pytest.raises(DataError, match="COST507"):
        load(prefer=("COST50",))
    with pytest.raises(DataError, match="no table holds"):
        load(prefer=("diffusion:Cu/fcc/Xe=COST507",))


def test_an_estimate_in_a_table_is_of_class_d() -> None:
    result = LIBRARY.find("activity", host="Ag", phase="liquid", solute="Ca")
    assert isinstance(result, Found)
    assert result.record.origin == "estimate"
    assert result.record.quality == "D"
    assert result.how == "measured"


def test_a_library_does_not_change_and_travels_to_a_worker() -> None:
    with pytest.raises(FrozenInstanceError):
        LIBRARY.data_hash = "x"  # type: ignore[misc]
    again = pickle.loads(pickle.dumps(LIBRARY))
    assert again.data_hash == LIBRARY.data_hash
    assert again.find("elements", element="Cu") == LIBRARY.find("elements", element="Cu")


def test_names() -> None:
    assert "magnesia" in LIBRARY.names("containers", "material")
    assert {"melting", "boiling"} <= set(LIBRARY.names("transitions", "kind"))


# materials and gases


@pytest.mark.parametrize("name", ["magnesia", "MAGNESIA", " Magnesia "])
def test_a_material_goes_by_its_names_in_any_case(name: str) -> None:
    material = LIBRARY.material(name)
    assert isinstance(material, Material)
    assert material.origin == "containers:magnesia"
    assert set(material.phases) == {"MgO"}
    assert 0.9 < sum(material.phases.values()) <= 1.0


def test_every_title_and_alias_leads_to_its_material() -> None:
    for record in LIBRARY.tables["containers"]:
        for word in (record.words["title"], *record.words["aliases"].split("|")):
            if word.strip():
                material = LIBRARY.material(word)
                assert isinstance(material, Material), word
                assert material.origin == f"containers:{record.words['material']}", word


def test_traces_are_inputs_keyed_by_their_record() -> None:
    material = LIBRARY.material("magnesia")
    assert isinstance(material, Material)
    for formula, content in material.traces.items():
        record = found(LIBRARY.find("traces", material="magnesia", formula=formula))
        assert content.key == record.quantity
        assert content.median == pytest.approx(record.fields["content_ppm_mass"] * 1e-6, rel=1e-12)
        sd = np.log(sample(Draws(1, 8), content)).std()
        assert sd == pytest.approx(log(record.spread), rel=0.02)


def test_an_atmosphere_brings_its_gases_and_leaves_the_rest_to_the_furnace() -> None:
    gas = LIBRARY.atmosphere("argon N5.0")
    assert not isinstance(gas, Gap)
    assert sum(f.median for f in gas.fractions.values()) == pytest.approx(1.0, abs=1e-4)
    assert gas.fractions["Ar"].law == "exact"
    assert gas.fractions["O2"].key == "atmospheres:argon N5.0/O2"
    assert gas.pressure.assumed
    assert gas.pressure.median == ATM
    assert isinstance(gas.supply, Still)


def test_unknown_names_are_gaps_with_the_nearest() -> None:
    wall, gas = LIBRARY.material("magnesiaa"), LIBRARY.atmosphere("argon N5")
    assert isinstance(wall, Gap)
    assert "magnesia" in wall.nearest
    assert isinstance(gas, Gap)
    assert gas.nearest
    assert isinstance(LIBRARY.material(""), Gap)


# a user's tables


def test_a_users_row_replaces_all_records_of_its_quantity(folder: Path) -> None:
    write(folder, "Cu,fcc,O,1.2e-6,68,900,1300,1.2,,ours,run 12,looked-up,\n")
    library = load(folder)
    result = library.find("diffusion", host="Cu", phase="fcc", solute="O")
    assert isinstance(result, Found)
    assert result.how == "yours"
    assert result.rivals == ()
    assert result.record.yours
    assert result.record.line == 2
    assert result.record.fields["Q_kJ_per_mol"] == 68
    before = found(LIBRARY.find("diffusion", host="Cu", phase="fcc", solute="O"))
    assert result.record.quantity == before.quantity
    assert np.array_equal(normal(Draws(), result.record.quantity), normal(Draws(), before.quantity))
    assert library.find("diffusion", host="Cu", phase="fcc", solute="Ni") == LIBRARY.find(
        "diffusion", host="Cu", phase="fcc", solute="Ni"
    )
    assert library.data_hash != LIBRARY.data_hash


def test_rank_zero_removes_a_quantity(folder: Path) -> None:
    write(folder, "Cu,fcc,O,,,,,,0,,,,we do not trust it\n")
    assert isinstance(load(folder).find("diffusion", host="Cu", phase="fcc", solute="O"), Gap)


def test_a_users_rivals_keep_their_ranks(folder: Path) -> None:
    rows = (
        "Cu,fcc,Xe,2e-5,200,900,1300,1.2,2,ours,,memory,\nCu,fcc,Xe,1e-5,200,900,1300,1.2,1,ours,,memory,\n"
    )
    result = load(write(folder, rows)).find("diffusion", host="Cu", phase="fcc", solute="Xe")
    assert isinstance(result, Found)
    assert result.record.fields["D0_m2_per_s"] == 1e-5
    assert [r.rank for r in result.rivals] == [2]


def test_a_users_material_is_named_by_file_and_line(folder: Path) -> None:
    head = "material,formula,mass_fraction,title,aliases,rank,source,where,origin,note\n"
    write(folder, "our magnesia,MgO,0.99,,the grey one,,ours,,looked-up,\n", "containers.csv", head)
    material = load(folder).material("The Grey One")
    assert isinstance(material, Material)
    assert material.origin == "your containers.csv, line 2"
    assert material.phases == {"MgO": 0.99}


def test_the_shares_of_a_users_material_add_up(folder: Path) -> None:
    head = "material,formula,mass_fraction,title,aliases,rank,source,where,origin,note\n"
    write(folder, "magnesia,CaO,0.4,,,,ours,,looked-up,\n", "containers.csv", head)
    assert check(folder) == [
        Fault(2, "containers.csv: magnesia", check(folder)[0].text),
    ]
    assert "sums to 1.3" in check(folder)[0].text
    write(
        folder,
        "magnesia,CaO,0.4,,,,ours,,looked-up,\nmagnesia,MgO,0.6,,,,ours,,looked-up,\n",
        "containers.csv",
        head,
    )
    assert check(folder) == []


GOOD = "Cu,fcc,O,1.2e-6,68,900,1300,1.2,,ours,run 12,looked-up,\n"


@pytest.mark.parametrize(
    ("row", "words"),
    [
        (GOOD.replace("1.2e-6", "1.2e-3"), "D at the melting point"),
        (GOOD.replace(",68,", ",68000,"), "Q_kJ_per_mol is 68000"),
        (GOOD.replace("1.2e-6", '"1,2e-6"'), "decimal point"),
        (GOOD.replace("1.2e-6", "nan"), "plain number"),
        (GOOD.replace("1.2e-6", "inf"), "plain number"),
        (GOOD.replace("1.2e-6", "1_2e-6"), "plain number"),
        (GOOD.replace("1.2e-6", ""), "D0_m2_per_s is blank"),
        (GOOD.replace("1.2e-6", "-1.2e-6"), "outside"),
        (GOOD.replace(",1.2,", ",1.0,"), "nothing is known exactly"),
        (GOOD.replace(",1.2,", ",0.5,"), "1 or more"),
        (GOOD.replace("900,1300", "1300,900"), "not a range"),
        (GOOD.replace("ours", "our"), "nearest: ours"),
        (GOOD.replace("looked-up", "guessed"), "is not one of"),
        (GOOD.replace("Cu,fcc", ",fcc"), "host is blank"),
        (GOOD.replace(",1.2,,", ",1.2,-1,"), "rank must be 1 or more"),
        (GOOD + GOOD, "line 2 has the same quantity and rank"),
        (GOOD.replace("run 12", "run 12, day 2"), "put quotes"),
    ],
)
def test_a_wrong_row_is_refused_with_file_and_line(folder: Path, row: str, words: str) -> None:
    write(folder, row)
    faults = check(folder)
    assert any(words in fault.text and fault.line >= 2 and "diffusion.csv" in fault.key for fault in faults)
    with pytest.raises(DataError, match=r"diffusion\.csv"):
        load(folder)


def test_every_fault_comes_at_once(folder: Path) -> None:
    write(folder, GOOD.replace("1.2e-6", "x") + GOOD.replace("68", "y").replace("O", "N"))
    write(folder, "", "diffusivities.csv", "a,b\n")
    with pytest.raises(DataError) as caught:
        load(folder)
    assert {(f.key.split(":")[0], f.line) for f in caught.value.faults} == {
        ("diffusion.csv", 2),
        ("diffusion.csv", 3),
        ("diffusivities.csv", 1),
    }


def test_an_unknown_table_is_refused_with_the_nearest(folder: Path) -> None:
    write(folder, "", "difusion.csv")
    assert check(folder) == [Fault(1, "difusion.csv", check(folder)[0].text)]
    assert "nearest: diffusion" in check(folder)[0].text


def test_columns_are_checked(folder: Path) -> None:
    write(folder, "Cu,fcc,O,1e-6\n", head="host,phase,solute,D0_cm2_per_s\n")
    texts = " ".join(f.text for f in check(folder))
    assert "'Q_kJ_per_mol' is missing" in texts
    assert "'D0_cm2_per_s' is unknown" in texts


def test_text_in_another_encoding_is_refused(folder: Path) -> None:
    (folder / "diffusion.csv").write_bytes((DIFFUSION + GOOD + "é").encode("latin-1"))
    assert "UTF-8" in check(folder)[0].text


def test_a_byte_order_mark_windows_line_ends_and_remarks_are_fine(folder: Path) -> None:
    text = '# our tracer runs, with a "quote\n' + DIFFUSION + GOOD
    (folder / "diffusion.csv").write_bytes(b"\xef\xbb\xbf" + text.replace("\n", "\r\n").encode())
    assert check(folder) == []
    assert found(load(folder).find("diffusion", host="Cu", phase="fcc", solute="O")).line == 3


def test_nothing_is_read_from_outside_the_folder(
    folder: Path, tmp_path_factory: pytest.TempPathFactory
) -> None:
    elsewhere = write(tmp_path_factory.mktemp("elsewhere"), GOOD) / "diffusion.csv"
    os.symlink(elsewhere, folder / "diffusion.csv")
    assert "plain file inside the folder" in check(folder)[0].text
    with pytest.raises(DataError):
        load(folder)


def test_a_folder_that_is_not_there(tmp_path: Path) -> None:
    with pytest.raises(DataError, match="is not a folder"):
        load(tmp_path / "nowhere")


def test_a_users_source_may_not_take_the_key_of_another(folder: Path) -> None:
    (folder / "sources.csv").write_text(SOURCES + "COST507,something else,,memory\n", encoding="utf-8")
    assert check(folder)[0].line == 3
    assert "use another key" in check(folder)[0].text


def test_the_hash_follows_content_not_line_ends(folder: Path) -> None:
    first = load(write(folder, GOOD)).data_hash
    path = folder / "diffusion.csv"
    path.write_bytes(path.read_bytes().replace(b"\n", b"\r\n"))
    assert load(folder).data_hash == first
    assert load(write(folder, GOOD.replace("68", "69"))).data_hash != first


# values over temperature


def made(table: str, fields: dict[str, float], spread: float, T_min: float, T_max: float) -> Record:
    key = TABLES[table].key
    quantity = quantity_name(table, key)
    return Record(table, quantity, fields, {}, spread, T_min, T_max, "s", "", "memory", "C", 1, 1)


LINE = made("diffusion", {"D0_m2_per_s": 2e-5, "Q_kJ_per_mol": 200.0}, 2.0, 900.0, 1500.0)
GAMMA = made("activity", {"A_K": -3000.0, "B": 0.5}, 0.4, 1300.0, 1600.0)
SIEVERTS = made("sieverts", {"log10_A_K": -2600.0, "log10_B": 2.6}, 0.2, 1300.0, 1600.0)
GIBBS = made("gibbs", dict.fromkeys(TABLES["gibbs"].numbers, 1.0), 1500.0, 300.0, 1500.0)


def test_the_laws() -> None:
    assert exp(float(ln_value(LINE, 1125.0))) == pytest.approx(2e-5 * exp(-2e5 / (R * 1125.0)), rel=1e-12)
    assert float(ln_value(GAMMA, 1500.0)) == pytest.approx(-1.5, rel=1e-12)
    assert exp(float(ln_value(SIEVERTS, 1500.0))) == pytest.approx(10 ** (2.6 - 2600 / 1500), rel=1e-12)
    sticking = LIBRARY.tables["sticking"][0]
    assert exp(float(ln_value(sticking, 500.0))) == pytest.approx(sticking.fields["probability"], rel=1e-12)


def test_a_table_without_a_law_says_so() -> None:
    with pytest.raises(TypeError, match="elements"):
        ln_value(found(LIBRARY.find("elements", element="Cu")), 300.0)


@pytest.mark.parametrize("shape", [(), (1,), (5,), (3, 1), (3, 5)])
@pytest.mark.parametrize("record", [LINE, GAMMA, SIEVERTS])
def test_temperature_and_draws_broadcast(record: Record, shape: tuple[int, ...]) -> None:
    z = np.linspace(-2.0, 2.0, 2 * 5).reshape(2, 5)[: parameters(record)]
    T = np.full(shape, 1400.0)
    got = ln_value(record, T, z)
    assert got.shape == np.broadcast_shapes(shape, (5,))
    for j in range(5):
        alone = float(ln_value(record, 1400.0, z[:, j : j + 1])[0])
        assert np.allclose(got[..., j], alone, rtol=1e-14)


def test_d0_and_q_move_together() -> None:
    """In the middle of the range only the level counts; ln D0 and Q carry the correlation of a fit."""
    z = normal(Draws(3, 16), LINE.quantity, 2)
    middle = 1125.0  # harmonic middle of 900 and 1500 K
    assert np.allclose(ln_value(LINE, middle, z) - float(ln_value(LINE, middle)), log(2.0) * z[0])
    slope = ln_value(LINE, 901.0, z) - ln_value(LINE, 1499.0, z)
    q = slope / (1 / 1499.0 - 1 / 901.0) * -R
    intercept = ln_value(LINE, middle, z) + q / (R * middle)
    s_ref, s_q = log(2.0), 0.5 * log(2.0) / (1 / 900 - 1 / 1500) * R
    a = s_q / (R * middle)
    assert np.corrcoef(q, intercept)[0, 1] == pytest.approx(a / sqrt(a * a + s_ref * s_ref), abs=0.01)


@pytest.mark.parametrize("record", [LINE, GAMMA, SIEVERTS])
@given(T=st.floats(250.0, 3500.0))
def test_the_spread_of_draws_is_the_spread_told(record: Record, T: float) -> None:
    z = normal(Draws(5, 4), record.quantity, parameters(record))
    assert ln_value(record, T, z).std() == pytest.approx(float(spread_at(record, T)), rel=0.05)


@given(T=st.floats(250.0, 3500.0), further=st.floats(1.0, 500.0))
def test_spreads_never_shrink_away_from_the_range(T: float, further: float) -> None:
    for record in (LINE, GAMMA, SIEVERTS, GIBBS):
        away = T - further if record.T_min > T else T + further
        if bool(outside(record, T)) and away > 100.0:
            assert float(spread_at(record, away)) >= float(spread_at(record, T))
        elif not bool(outside(record, T)):
            inside = record.spread if record.table != "diffusion" else log(record.spread)
            assert inside <= float(spread_at(record, T)) <= 1.04 * inside


def test_the_slope_rule_outside_the_range() -> None:
    # 2000 K |1/1000 - 1/1300| and R 2000 K (1800/1500 - 1), beside 0.4 and 1500 J/mol
    assert float(spread_at(GAMMA, 1000.0)) == pytest.approx(sqrt(0.4**2 + 0.461538**2), rel=1e-5)
    assert float(spread_at(GIBBS, 1800.0)) == pytest.approx(sqrt(1500.0**2 + 3325.785**2), rel=1e-6)
    assert outside(GAMMA, [1299.0, 1300.0, 1600.0, 1601.0]).tolist() == [True, False, False, True]


def test_a_short_range_does_not_make_a_wild_slope() -> None:
    point = replace(LINE, T_min=1499.0, T_max=1500.0)
    assert float(spread_at(point, 1000.0)) < sqrt(log(2.0) ** 2 + 2 * (2000.0 * (1 / 1000 - 1 / 1500)) ** 2)


# hosts


@pytest.mark.parametrize(
    ("host", "T", "phase"),
    [
        # melting of Cu 1357.77 K (ITS-90), transitions of Fe 1184.8 and 1667.5 K, of Ti 1155 K (SGTE)
        ("Cu", 1357.0, "fcc"),
        ("Cu", 1358.0, "liquid"),
        ("Fe", 1180.0, "bcc"),
        ("Fe", 1200.0, "fcc"),
        ("Fe", 1700.0, "bcc"),
        ("Ti", 1150.0, "hcp"),
        ("Ti", 1160.0, "bcc"),
        ("Nb", 2700.0, "bcc"),
        ("Si", 300.0, "diamond"),
    ],
)
def test_phase_at(host: str, T: float, phase: str) -> None:
    assert phase_at(LIBRARY, host, T) == phase


def test_no_phase_beyond_the_boiling_point_or_of_an_unknown_host() -> None:
    with pytest.raises(OutOfRangeError, match=r"liquid 1357\.77 to 2833.15 K"):
        phase_at(LIBRARY, "Cu", 3000.0)
    with pytest.raises(OutOfRangeError, match="known: none"):
        phase_at(LIBRARY, "Xx", 300.0)


# what the library tells


def test_coverage_names_gaps_as_well_as_records() -> None:
    cells = {(c.element, c.table, c.phase): c for c in coverage(LIBRARY, "Cu")}
    assert cells["O", "sieverts", "liquid"].quality == "A"
    assert cells["O", "sieverts", "liquid"].rivals == 1
    assert (
        cells["Xe", "activity", "liquid"].quality is None if ("Xe", "activity", "liquid") in cells else True
    )
    assert any(c.quality is None for c in cells.values())
    assert not any(c.element == "Cu" for c in cells.values())
    assert {c.element for c in coverage(LIBRARY, "Cu", ("Fe", "Rn"))} == {"Fe", "Rn"}


def test_show_evaluates_with_band_source_and_rivals() -> None:
    shown = {s.quantity: s for s in show(LIBRARY, "Cu", "O", 1473.0)}
    record = found(LIBRARY.find("sieverts", host="Cu", phase="liquid", solute="O"))
    row = shown["sieverts:Cu/liquid/O"]
    assert row.value == pytest.approx(exp(float(ln_value(record, 1473.0))), rel=1e-12)
    assert row.low is not None
    assert row.high is not None
    assert row.value is not None
    assert log(row.high / row.low) == pytest.approx(2 * record.spread, rel=1e-9)
    assert row.citation == LIBRARY.sources[record.source]["citation"]
    assert len(row.rivals) == 1
    assert not row.outside
    far = {s.quantity: s for s in show(LIBRARY, "Cu", "O", 2500.0)}["sieverts:Cu/liquid/O"]
    assert far.outside
    assert any(s.unit == "limit_ppm_mass" and "at 1339 K" in s.quantity for s in shown.values())


def test_bibliography_names_each_source_once() -> None:
    names = ["sieverts:Cu/liquid/O", "sieverts:Cu/liquid/H", "diffusion:Cu/fcc/O", "activity:none"]
    keys = [key for key, _, _ in bibliography(LIBRARY, names)]
    assert keys == ["MAGFRISK14", "narula1983"]


def test_a_missing_table_is_empty() -> None:
    empty = Library({}, {}, "")
    assert isinstance(empty.find("diffusion", host="Cu", phase="fcc", solute="O"), Gap)
    assert empty.rows("diffusion") == ()
