"""Figures: what must be on them, the same bytes twice, and a clear word without the library."""

from __future__ import annotations

import sys
from dataclasses import asdict
from pathlib import Path
from typing import Any

import pytest

from purity.affinity import affinity
from purity.cli import app
from purity.database import load
from purity.report import figures


@pytest.fixture(scope="module")
def facts() -> dict[str, Any]:
    found = affinity(load(), "Cu", "Al", 1453.15, against=["alumina 99.7"])
    return asdict(found)


def test_the_same_bytes_twice_with_units_and_names_on_them(facts: dict[str, Any]) -> None:
    once, again = (figures.affinity(facts, "svg") for _ in range(2))
    assert once == again
    assert b"<svg" in once
    assert figures.affinity(facts, "png").startswith(b"\x89PNG")


def test_every_mark_inside_the_axes_has_its_name(
    facts: dict[str, Any], monkeypatch: pytest.MonkeyPatch
) -> None:
    from matplotlib.axes import Axes

    said: list[str] = []
    text = Axes.text
    monkeypatch.setattr(Axes, "text", lambda self, x, y, s, **k: said.append(s) or text(self, x, y, s, **k))
    figures.affinity(facts, "svg")
    inside = [row for row in facts["saturations"] if 0.01 <= row["ppm"]["median"] <= 1000.0]
    for row in inside:
        assert any(row["formula"] in words for words in said)


def test_without_matplotlib_the_way_out_is_told(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setitem(sys.modules, "matplotlib", None)
    target = tmp_path / "al.svg"
    with pytest.raises(SystemExit) as ended:
        app(
            ["affinity", "Cu", "Al", "-T", "1180 degC", "--against", "alumina 99.7", "--figure", str(target)],
            standalone_mode=False,
        )
    assert ended.value.code == 2
    assert "purity[figures]" in capsys.readouterr().err
    assert not target.exists()
