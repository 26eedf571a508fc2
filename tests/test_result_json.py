"""A real run on the way out: schema, ledgers, streams, files and exit status of the commands."""

from __future__ import annotations

import csv
import json
import sys
from collections.abc import Callable
from pathlib import Path

import jsonschema
import pytest
from works import LOT, WALLS, lines, toml, written

from purity import cli
from purity.assess import assess
from purity.database import Library, load
from purity.draws import Draws
from purity.report.export import as_json
from purity.result import Result

SCHEMA = json.loads((Path(__file__).parent / "result.schema.json").read_text(encoding="utf-8"))
#: An odd number of draws: the median is a draw.
ODD = Draws(seed=1, blocks=1, block=33)
ONE = {"magnesia": WALLS["magnesia"]}

Command = Callable[..., tuple[int, str, str]]


@pytest.fixture(scope="session")
def library() -> Library:
    return load()


@pytest.fixture(scope="session")
def result(library: Library, tmp_path_factory: pytest.TempPathFactory) -> Result:
    scenario = written(tmp_path_factory.mktemp("remelt"), toml(), library)
    return assess(scenario, library, ODD)


@pytest.fixture
def command(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> Command:
    def call(*words: str) -> tuple[int, str, str]:
        monkeypatch.setattr(sys, "argv", ["purity", *words])
        monkeypatch.delenv("COLUMNS", raising=False)
        with pytest.raises(SystemExit) as left:
            cli.main()
        out, err = capsys.readouterr()
        return int(left.value.code or 0), out, err

    return call


def refuse(word: str) -> float:
    raise AssertionError(f"{word} in the result")


def test_a_real_run_keeps_the_schema(result: Result) -> None:
    told = json.loads(as_json(result), parse_constant=refuse)
    jsonschema.validate(told, SCHEMA)
    assert [step["name"] for step in told["steps"]] == ["melt", "store"]
    assert told["steps"][1]["entered_after"] == [told["steps"][0]["choices"][0]["name"]]
    assert len(told["routes"]) == 6


def test_contacts_of_the_median_draw_sum_to_its_pickup(result: Result) -> None:
    tried = 0
    for key, line in lines(result).items():
        if not line.contacts or line.pickup is None:
            continue
        given = sum(contact.pickup.median for contact in line.contacts)
        size = max(abs(contact.pickup.median) for contact in line.contacts)
        held = line.end.median if line.end else 0.0
        assert given == pytest.approx(line.pickup.median, rel=1e-6, abs=1e-9 * (size + held) + 1e-15), key
        tried += 1
    assert tried > 40


def test_sources_are_citations(result: Result, library: Library) -> None:
    citations = {source["citation"] for source in library.sources.values()}
    assert result.sources
    assert set(result.sources) <= citations
    assert not set(result.sources) & set(library.sources)


def test_a_choice_is_whole_only_if_all_is_assessed(result: Result) -> None:
    for step in result.steps:
        for choice in step.choices:
            assert (choice.rank is None) == (choice.state != "ranked")
            assert choice.complete == (choice.assessed[0] == choice.assessed[1])


def test_rank_writes_json_and_csv_and_takes_a_route(command: Command, tmp_path: Path) -> None:
    path, table = tmp_path / "lot.toml", tmp_path / "lot.csv"
    path.write_text(toml(ONE), encoding="utf-8")
    words = ("rank", str(path), "--draws", "256", "--json", "--csv", str(table), "--route", "magnesia, bag")
    status, out, _ = command(*words)
    assert status == 0
    told = json.loads(out, parse_constant=refuse)
    jsonschema.validate(told, SCHEMA)
    with table.open(newline="", encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    assert len(rows) == sum(len(c["impurities"]) for step in told["steps"] for c in step["choices"])
    assert not {"nan", "inf", "-inf"} & {cell.lower() for row in rows for cell in row.values()}


def test_strict_leaves_with_three_where_the_lot_cannot_hold(command: Command, tmp_path: Path) -> None:
    path = tmp_path / "lot.toml"
    tight = LOT.replace("Ag = 5.0", "Ag = 1.0").replace("metals = 10.0", "metals = 1.0")
    path.write_text(toml(ONE, lot=tight, store=""), encoding="utf-8")
    status, out, err = command("rank", str(path), "--draws", "256", "--strict")
    assert status == 3
    assert "magnesia" in out
    assert err.endswith("no choice within the accepted risk in: melt\n")


@pytest.mark.parametrize(
    "old, new, said",
    [
        ('"magnesia"\n', '"magnesa"\n', "nearest: magnesia"),
        ('mass = "25 kg"', 'mass = "25 kgs"', "lot.mass"),
        ('host = "Cu"', 'host = "Cuu"', "Cu"),
    ],
)
def test_bad_input_leaves_with_two_and_names_the_line(
    command: Command, tmp_path: Path, old: str, new: str, said: str
) -> None:
    path = tmp_path / "lot.toml"
    path.write_text(toml(ONE, store="").replace(old, new), encoding="utf-8")
    status, out, err = command("rank", str(path))
    assert (status, out) == (2, "")
    assert said in err
    assert f"{path}:" in err
    assert "Traceback" not in err


def test_a_library_without_what_all_need_leaves_with_two(command: Command, tmp_path: Path) -> None:
    from overlays import without

    path = tmp_path / "lot.toml"
    path.write_text(toml(ONE, store=""), encoding="utf-8")
    without(load(), "priors:uncertified metal", tmp_path / "own")
    status, out, err = command("rank", str(path), "--draws", "256", "--data", str(tmp_path / "own"))
    assert (status, out) == (2, "")
    assert err.startswith("no table holds priors:uncertified metal")
    assert "priors.csv" in err


def test_the_tables_answer(command: Command) -> None:
    status, out, _ = command("data", "show", "Cu", "O")
    assert status == 0
    assert "sieverts:Cu/liquid/O" in out
    status, out, err = command("data", "verify")
    assert status == 0, err


def test_a_history_ends_where_the_run_ends(library: Library, tmp_path: Path) -> None:
    scenario = written(tmp_path, toml(ONE, store=""), library)
    told = lines(assess(scenario, library, ODD, history=True))
    plain = lines(assess(scenario, library, ODD))
    oxygen, without = told["melt", "magnesia", "O"], plain["melt", "magnesia", "O"]
    assert oxygen.series
    assert oxygen.end
    assert without.end
    # other steps in time, so equal within their error only
    assert oxygen.end.median == pytest.approx(without.end.median, rel=1e-2)
    assert oxygen.series[0][0] == 0.0
    assert oxygen.series[-1][0] == pytest.approx(40 * 60.0)
