"""purity: impurity pickup of high-purity metal, from driving force and rates to a ranked risk table.

Public names are loaded when they are first used; importing the package loads nothing heavy.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

__version__ = "0.1.0"

#: Public name -> room that holds it.
_ROOMS = {
    "Draws": "draws",
    "Library": "database",
    "PurityError": "errors",
    "Result": "result",
    "Scenario": "scenario",
    "ScenarioError": "errors",
    "load": "database",
    "read": "scenario_file",
    "render": "report.terminal",
    "to_dict": "result",
    "to_frame": "result",
    "to_rows": "result",
}

__all__ = [*_ROOMS, "__version__"]

if TYPE_CHECKING:
    from purity.database import Library as Library
    from purity.database import load as load
    from purity.draws import Draws as Draws
    from purity.errors import PurityError as PurityError
    from purity.errors import ScenarioError as ScenarioError
    from purity.report.terminal import render as render
    from purity.result import Result as Result
    from purity.result import to_dict as to_dict
    from purity.result import to_frame as to_frame
    from purity.result import to_rows as to_rows
    from purity.scenario import Scenario as Scenario
    from purity.scenario_file import read as read


def __getattr__(name: str) -> Any:
    if name not in _ROOMS:
        raise AttributeError(f"module 'purity' has no attribute {name!r}")
    return getattr(import_module(f"purity.{_ROOMS[name]}"), name)


def __dir__() -> list[str]:
    return sorted({*globals(), *_ROOMS})
