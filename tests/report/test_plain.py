"""Plain tables of the smaller commands."""

from __future__ import annotations

from purity.report.plain import table


def test_the_last_column_wraps_and_nothing_is_lost() -> None:
    text = table(("key", "source"), [("A1", "one two three [four] " * 6)], width=40)
    assert max(map(len, text.splitlines())) <= 40
    assert text.count("[four]") == 6
    assert text.splitlines()[0].split() == ["key", "source"]


def test_an_empty_table_is_its_titles() -> None:
    assert table(("a", "b"), []).split() == ["a", "b"]
