"""Commands: streams, exit status, files, words for the person who typed them."""

from __future__ import annotations

import csv
import json
import os
import subprocess
import sys
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from types import ModuleType, SimpleNamespace

import pytest

from purity import cli
from purity.errors import DataError, Fault, IllPosedError, OutOfRangeError, ScenarioError
from purity.result import Result

Run = Callable[..., tuple[int, str, str]]


def choices(*names: str) -> tuple[SimpleNamespace, ...]:
    return tuple(SimpleNamespace(name=name) for name in names)


SCENARIO = SimpleNamespace(
    prefer=(),
    steps=(
        SimpleNamespace(name="melt", choices=choices("graphite", "graphite, in vacuum", "magnesia")),
        SimpleNamespace(name="pour", choices=choices("cold mould", "warm mould")),
    ),
)


@pytest.fixture
def run(made_up: Result, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> Run:
    """Run a command on a made-up result; `assess` and `read` may be replaced."""

    def call(
        *words: str, assess: Callable[..., Result] | None = None, read: Callable[..., object] | None = None
    ) -> tuple[int, str, str]:
        for name, verb, does in (
            ("purity.assess", "assess", assess or (lambda *_, **__: made_up)),
            ("purity.scenario_file", "read", read or (lambda *_: SCENARIO)),
        ):
            module = ModuleType(name)
            setattr(module, verb, does)
            monkeypatch.setitem(sys.modules, name, module)
        monkeypatch.setattr("purity.database.load", lambda *_: SimpleNamespace())
        monkeypatch.setattr(sys, "argv", ["purity", *words])
        monkeypatch.delenv("COLUMNS", raising=False)
        with pytest.raises(SystemExit) as left:
            cli.main()
        out, err = capsys.readouterr()
        return int(left.value.code or 0), out, err

    return call


def test_the_table_goes_to_stdout_alone(run: Run) -> None:
    status, out, err = run("rank", "lot.toml")
    assert (status, err) == (0, "")
    assert out.startswith("Copper remelt for blanks, Lindhavn works\n")
    assert max(map(len, out.splitlines())) <= 80


def test_columns_widens_a_piped_table(run: Run, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(cli, "_width", lambda: 120)
    assert max(map(len, run("rank", "lot.toml")[1].splitlines())) > 80


def test_json_is_all_of_stdout(run: Run) -> None:
    status, out, _ = run("rank", "lot.toml", "--json")
    assert status == 0
    assert json.loads(out)["schema"] == 1


def test_draws_are_rounded_up_and_said(run: Run, made_up: Result) -> None:
    seen = []
    status, _, err = run(
        "rank", "x", "--draws", "1000", "--seed", "7", assess=lambda *a, **_: seen.append(a) or made_up
    )
    assert status == 0
    assert (seen[0][2].n, seen[0][2].seed) == (1024, 7)
    assert err == "draws: 1000 rounded up to 1024, a multiple of 256\n"
    assert run("rank", "x", "--draws", "1024")[2] == ""


def test_a_csv_is_written_whole_and_kept(run: Run, tmp_path: Path) -> None:
    path = tmp_path / "lot.csv"
    assert run("rank", "x", "--csv", str(path))[0] == 0
    with path.open(newline="") as file:
        assert next(csv.DictReader(file))["impurity"] == "O"
    path.write_text("mine")
    status, out, err = run("rank", "x", "--csv", str(path))
    assert (status, out) == (2, "")
    assert "exists" in err
    assert path.read_text() == "mine"
    assert run("rank", "x", "--csv", str(path), "--force")[0] == 0
    assert path.read_text() != "mine"
    assert [found.name for found in tmp_path.iterdir()] == ["lot.csv"]


def test_a_failed_run_leaves_no_file(run: Run, tmp_path: Path) -> None:
    def fail(*_: object, **__: object) -> Result:
        raise IllPosedError("the wall holds no host")

    status, out, err = run("rank", "x", "--csv", str(tmp_path / "lot.csv"), assess=fail)
    assert (status, out, err) == (1, "", "the wall holds no host\n")
    assert not list(tmp_path.iterdir())


def test_a_half_written_file_is_taken_away(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def full(*_: object) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(Path, "replace", full)
    with pytest.raises(OSError, match="No space"):
        cli._save(tmp_path / "lot.csv", "text")
    assert not list(tmp_path.iterdir())


@pytest.mark.parametrize(
    "error, status",
    [
        (ScenarioError("lot.toml", [Fault(3, "lot.mass", "25 kgs: a mass is wanted")]), 2),
        (DataError("own", [Fault(3, "a", "b")]), 2),
        (OutOfRangeError("too hot"), 2),
        (IllPosedError("no answer"), 1),
        (FileNotFoundError(2, "No such file or directory", "lot.toml"), 2),
        (ZeroDivisionError("float division by zero"), 1),
    ],
)
def test_errors_are_text_with_a_status(
    run: Run, monkeypatch: pytest.MonkeyPatch, error: Exception, status: int
) -> None:
    def fail(*_: object, **__: object) -> Result:
        raise error

    monkeypatch.delenv("PURITY_DEBUG", raising=False)
    found, out, err = run("rank", "lot.toml", read=fail)
    assert (found, out) == (status, "")
    assert "Traceback" not in err
    assert err.count("\n") == 1


def test_an_unexpected_error_says_how_to_see_more(run: Run, monkeypatch: pytest.MonkeyPatch) -> None:
    def fail(*_: object, **__: object) -> Result:
        raise ZeroDivisionError("float division by zero")

    monkeypatch.delenv("PURITY_DEBUG", raising=False)
    assert "PURITY_DEBUG=1" in run("rank", "lot.toml", assess=fail)[2]
    monkeypatch.setenv("PURITY_DEBUG", "1")
    monkeypatch.setattr(sys, "argv", ["purity", "rank", "lot.toml"])
    with pytest.raises(ZeroDivisionError):
        cli.main()


def test_strict_leaves_with_three_where_no_choice_holds(run: Run, made_up: Result) -> None:
    status, out, err = run("rank", "x", "--strict")
    assert status == 3
    assert out.startswith("Copper remelt")
    assert err == "no choice within the accepted risk in: melt\n"
    bold = replace(made_up, scenario=replace(made_up.scenario, risk=0.1))
    assert run("rank", "x", "--strict", assess=lambda *_, **__: bold)[0] == 0
    assert run("rank", "x")[0] == 0


@pytest.mark.parametrize(
    "text, route",
    [
        ("graphite, cold mould", ("graphite", "cold mould")),
        ("graphite, in vacuum,warm mould", ("graphite, in vacuum", "warm mould")),
        (" magnesia ,  cold mould ", ("magnesia", "cold mould")),
    ],
)
def test_a_route_names_one_choice_for_every_step(
    run: Run, made_up: Result, text: str, route: tuple[str, ...]
) -> None:
    seen = []
    assert run("rank", "x", "--route", text, assess=lambda *_, **more: seen.append(more) or made_up)[0] == 0
    assert [more["route"] for more in seen] == [route]


@pytest.mark.parametrize(
    "text, said",
    [
        ("graphit, cold mould", "step 'melt' has no choice 'graphit'; nearest: graphite"),
        ("magnesia", "step 'pour' has no choice ''"),
        ("magnesia, cold mould, more", "'more' is left over"),
        ("magnesiastone, cold mould", "step 'melt' has no choice 'magnesiastone'; nearest: magnesia"),
    ],
)
def test_a_wrong_route_is_refused_with_the_nearest_names(run: Run, text: str, said: str) -> None:
    status, out, err = run("rank", "x", "--route", text)
    assert (status, out) == (2, "")
    assert said in err


def test_what_the_stream_cannot_hold_is_spelled_otherwise(run: Run, monkeypatch: pytest.MonkeyPatch) -> None:
    class Narrow:
        encoding = "ascii"
        text = ""

        def write(self, text: str) -> None:
            text.encode("ascii")
            self.text += text

        def flush(self) -> None:
            pass

    out = Narrow()
    cli._write(out, "graphite † 20 µm, Ω")  # type: ignore[arg-type]
    assert out.text == "graphite + 20 um, ?"


def python(*words: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, *words],
        capture_output=True,
        text=True,
        env={**os.environ, "COLUMNS": "80"},
        timeout=120,
        check=False,
    )


def purity(*words: str) -> subprocess.CompletedProcess[str]:
    return python("-m", "purity", *words)


@pytest.mark.parametrize("words", [("--help",), ("-h",), ("rank", "--help"), ("data", "-h"), ("--version",)])
def test_help_loads_nothing_heavy(words: tuple[str, ...]) -> None:
    code = (
        "import sys; from purity.cli import app\n"
        f"try: app({list(words)!r})\n"
        "except SystemExit as left: assert not left.code\n"
        "heavy = {'numpy', 'scipy', 'pandas', 'rich'} & set(sys.modules)\n"
        "assert not heavy, heavy"
    )
    done = python("-c", code)
    assert done.returncode == 0, done.stderr
    assert done.stdout


def test_importing_the_package_loads_nothing_heavy() -> None:
    code = "import sys, purity; assert not {'numpy', 'typer'} & set(sys.modules), 'heavy'"
    assert python("-c", code).returncode == 0


def test_a_misspelt_command_is_told_the_nearest() -> None:
    done = purity("rnak")
    assert done.returncode == 2
    assert "rank" in done.stderr
    assert "Traceback" not in done.stderr


def test_a_closed_pipe_is_quiet() -> None:
    script = f"{sys.executable} -m purity data sources | head -n 1"
    done = subprocess.run(script, shell=True, capture_output=True, text=True, timeout=120, check=False)
    assert done.stdout.count("\n") == 1
    assert done.stderr == ""


def test_sources_are_listed_with_their_keys() -> None:
    done = purity("data", "sources")
    assert done.returncode == 0
    assert done.stdout.splitlines()[0].split() == ["key", "source"]


def test_records_are_shown_with_value_range_and_source() -> None:
    done = purity("data", "show", "Cu", "O", "-T", "1180 degC")
    assert done.returncode == 0, done.stderr
    assert "sieverts:Cu/liquid/O" in done.stdout
    assert "one sigma" in done.stdout
    plain = purity("data", "show", "Cu", "O")
    assert "one sigma" not in plain.stdout


@pytest.mark.parametrize(
    "words, said",
    [
        (("data", "show", "Cuu", "O"), "nearest: Cu"),
        (("data", "show", "Cu", "Xx"), "no record on 'Xx' in Cu"),
        (("data", "show", "Cu", "O", "-T", "1180"), ""),
        (("data", "coverage", "Unobtainium"), "no host"),
        (("data", "check", "no/such/folder"), "is not a folder"),
    ],
)
def test_wrong_questions_to_the_tables_leave_with_two(words: tuple[str, ...], said: str) -> None:
    done = purity(*words)
    if not said:
        assert done.returncode == 0
        return
    assert (done.returncode, done.stdout) == (2, "")
    assert said in done.stderr
    assert "Traceback" not in done.stderr


def test_coverage_counts_hosts_and_elements() -> None:
    assert "Cu" in purity("data", "coverage").stdout
    of_copper = purity("data", "coverage", "Cu").stdout.splitlines()
    assert of_copper[0].split()[:2] == ["element", "phase"]
    assert "…" not in "".join(of_copper)
    assert any(line.split()[:1] == ["O"] for line in of_copper)


def test_own_tables_are_checked_before_they_are_used(tmp_path: Path) -> None:
    (tmp_path / "diffusion.csv").write_text("host,phase\nCu,liquid\n", encoding="utf-8")
    done = purity("data", "check", str(tmp_path))
    assert done.returncode == 2
    assert "diffusion.csv" in done.stderr
    used = purity("data", "sources", "--data", str(tmp_path))
    assert used.returncode == 2
    assert "Traceback" not in used.stderr


def test_affinity_is_told_as_table_and_as_json() -> None:
    words = ("affinity", "Cu", "O", "-T", "1180 degC", "--against", "magnesia", "--atmosphere", "argon N5.0")
    done = purity(*words)
    assert done.returncode == 0, done.stderr
    assert done.stdout.startswith("O in liquid Cu at 1180 degC (1453 K)\n")
    assert "magnesia crucible" in done.stdout
    assert max(map(len, done.stdout.splitlines()[4:])) <= 80
    facts = json.loads(purity(*words, "--json").stdout)
    assert (facts["host"], facts["impurity"], facts["phase"]) == ("Cu", "O", "liquid")
    assert facts["ln_gamma"]["low"] < facts["ln_gamma"]["median"] < facts["ln_gamma"]["high"]


@pytest.mark.parametrize(
    "words, said",
    [
        (("Cu", "Xx", "-T", "1180 degC"), "Xx"),
        (("Cuu", "Fe", "-T", "1180 degC"), "nearest: Cu"),
        (("Cu", "Fe", "-T", "1180 degF"), "degC"),
        (("Cu", "Fe", "-T", "9000 degC"), "no phase of Cu"),
        (("Cu", "Fe", "-T", "1180 degC", "--atmosphere", "argn"), "argn"),
    ],
)
def test_a_wrong_question_of_affinity_is_bad_input(words: tuple[str, ...], said: str) -> None:
    done = purity("affinity", *words)
    assert (done.returncode, done.stdout) == (2, "")
    assert said in done.stderr
    assert "Traceback" not in done.stderr
