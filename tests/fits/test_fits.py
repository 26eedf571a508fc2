"""The rows of the Gibbs table that rest on open tables are those that the fit gives today."""

from __future__ import annotations

import importlib.util
import sys
from pathlib import Path
from types import ModuleType

import pytest

pytest.importorskip("janaf")
pytest.importorskip("cantera")

HERE = Path(__file__).resolve().parent
NUMBERS = slice(4, 14)


@pytest.fixture(scope="module")
def fit_gibbs() -> ModuleType:
    spec = importlib.util.spec_from_file_location("fit_gibbs", HERE / "fit_gibbs.py")
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    sys.modules["fit_gibbs"] = module
    spec.loader.exec_module(module)
    return module


@pytest.mark.parametrize(
    "table", ["janaf:Cu-003", "janaf:Al-096", "janaf:Nb-016", "janaf:C-093", "nasa:Mo3O9"]
)
def test_a_refit_gives_the_rows_of_the_table(fit_gibbs: ModuleType, table: str) -> None:
    choice = next(c for c in fit_gibbs.choices() if c["table"] == table)
    kept = {(r["formula"], r["state"], r["label"]): r for r in fit_gibbs.read()}
    fitted = fit_gibbs.fit(choice)
    assert fitted
    for row in fitted:
        old = kept[row["formula"], row["state"], row["label"]]
        for name in fit_gibbs.COLUMNS[NUMBERS]:
            assert float(row[name]) == pytest.approx(float(old[name]), rel=1e-5, abs=1e-9), name
        assert {k: row[k] for k in ("source", "where", "origin")} == {
            k: old[k] for k in ("source", "where", "origin")
        }


def test_every_chosen_table_has_rows_and_no_fit_is_worse_than_300_joules(fit_gibbs: ModuleType) -> None:
    rows = fit_gibbs.read()
    there = {(r["formula"], r["state"]) for r in rows}
    assert {(c["formula"], c["state"]) for c in fit_gibbs.choices()} <= there
    assert max(float(r["fit_error_J_per_mol"]) for r in rows) <= 300
    # At least 200 substances (a formula in one state), of every kind that a contact can make.
    assert len(there) >= 200
    assert {r["class"] for r in rows} >= {
        "element",
        "gas",
        "oxide",
        "carbide",
        "nitride",
        "sulfide",
        "hydride",
    }
