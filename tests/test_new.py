"""The scenario to start from is one that can be started."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

from purity.database import load
from purity.new import text
from purity.scenario_file import read_string


def test_the_template_is_a_valid_scenario() -> None:
    scenario = read_string(text(), load())
    assert [choice.name for choice in scenario.steps[0].choices] == [
        "graphite under argon",
        "magnesia under vacuum",
    ]
    assert scenario.lot.groups == {"Fe+Ni": ("Fe", "Ni")}


def test_an_existing_file_is_kept(tmp_path: Path) -> None:
    path = tmp_path / "lot.toml"
    command = [sys.executable, "-m", "purity", "new", str(path)]
    assert subprocess.run(command, capture_output=True, timeout=120, check=False).returncode == 0
    assert path.read_text(encoding="utf-8") == text()
    path.write_text("mine", encoding="utf-8")
    refused = subprocess.run(command, capture_output=True, text=True, timeout=120, check=False)
    assert refused.returncode == 2
    assert "exists" in refused.stderr
    assert path.read_text(encoding="utf-8") == "mine"
    assert (
        subprocess.run([*command, "--force"], capture_output=True, timeout=120, check=False).returncode == 0
    )
    assert path.read_text(encoding="utf-8") == text()
