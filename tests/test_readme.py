"""The README says what happens: its commands, its printed output, its Python.

With PURITY_UPDATE_README=1 the output is written anew (the run fails once: read the difference).
"""

from __future__ import annotations

import os
import re
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]
README = ROOT / "README.md"
TEXT = README.read_text(encoding="utf-8")
START, END = "<!-- output of: purity ", "<!-- end of output -->"


def python(*words: str) -> str:
    env = {k: v for k, v in os.environ.items() if k not in {"COLUMNS", "FORCE_COLOR", "PURITY_DEBUG"}}
    done = subprocess.run(
        [sys.executable, *words],
        cwd=ROOT,
        env={**env, "PYTHONIOENCODING": "utf-8"},
        capture_output=True,
        timeout=900,
        check=False,
    )
    assert done.returncode == 0, done.stderr.decode()
    return done.stdout.decode("utf-8")


def test_the_job_comes_first_then_one_command_each() -> None:
    head, run, test = TEXT.split("```")[0], TEXT.split("```")[1].strip(), TEXT.split("```")[3].strip()
    assert head.split("\n\n")[1].startswith("People who melt")
    assert run.count("\n") == test.count("\n") == 0
    assert run == (
        "python3 -m venv .venv && .venv/bin/pip install -q . && "
        ".venv/bin/purity rank scenarios/copper-remelt.toml"
    )
    assert test.endswith("&& .venv-test/bin/pytest -q")
    assert (ROOT / run.split()[-1]).is_file()


def test_the_printed_output_is_real() -> None:
    before, rest = TEXT.split(START, 1)
    command, rest = rest.split(" -->\n```\n", 1)
    shown, after = rest.split("```\n" + END, 1)
    printed = python("-m", "purity", *command.split())
    if os.environ.get("PURITY_UPDATE_README"):
        README.write_text(f"{before}{START}{command} -->\n```\n{printed}```\n{END}{after}", encoding="utf-8")
        pytest.fail("README.md was rewritten: read the difference")
    assert shown == printed


def test_every_command_named_exists() -> None:
    named = set(re.findall(r"`purity ((?:data )?[a-z]+)", TEXT)) - {"rank"}
    assert named
    for words in ("rank", *sorted(named)):
        assert "Usage" in python("-m", "purity", *words.split(), "--help")


def test_the_python_example_runs() -> None:
    code = TEXT.split("```python\n", 1)[1].split("```", 1)[0]
    assert re.fullmatch(r".+ [01]\.\d+(e-\d+)?\n", python("-c", code))
