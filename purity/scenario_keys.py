"""Keys of a choice laid over those of its step, with the place and the random stream of each."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import Any, Final

from purity.database import Library
from purity.scenario import Given, Material, exact
from purity.scenario_lines import Place
from purity.scenario_names import Findings, material
from purity.scenario_schema import MaterialTable

#: Depth from which traces are taken where nobody says, m: common practice, no source.
_DEPTH: Final = (20e-6 / 3, 20e-6 * 3)


def scaled(share: Given, by: float) -> Given:
    """Return an input times a number; it keeps its stream."""
    return replace(share, low=share.low * by, high=share.high * by)


@dataclass(slots=True)
class Keys:
    """Keys of a choice laid over those of its step, each with its place and the path of its inputs.

    Parameters
    ----------
    findings : Findings
    library : Library
    host : str
    step, choice : mapping
        Sound values of both tables.
    at_step, at_choice : Place
    path_step, path_choice : str
        "melt" and "melt/graphite under argon".
    notes : list of str
        What was assumed.
    lacking : dict
        Missing keys and what they should hold; told once at the step where every choice lacks them.
    """

    findings: Findings
    library: Library
    host: str
    step: Mapping[str, Any]
    choice: Mapping[str, Any]
    at_step: Place
    at_choice: Place
    path_step: str
    path_choice: str
    notes: list[str] = field(default_factory=list)
    lacking: dict[str, str] = field(default_factory=dict)

    def __contains__(self, key: str) -> bool:
        return key in self.choice or key in self.step

    def get(self, key: str) -> Any:
        """Value of a key, None where neither table has it."""
        return self.choice.get(key, self.step.get(key))

    def place(self, key: str) -> Place:
        """Where the value stands; in the choice where it is missing."""
        return (*(self.at_step if key in self.step and key not in self.choice else self.at_choice), key)

    def path(self, key: str) -> str:
        """Key of an input: that of the step where the step gives it, so that choices share its draws."""
        inherited = key in self.step and key not in self.choice
        return f"{self.path_step if inherited else self.path_choice}/{key}"

    def given(self, key: str) -> Given | None:
        """Return an input with its key."""
        value = self.get(key)
        return replace(value, key=self.path(key)) if isinstance(value, Given) else None

    def missing(self, key: str, text: str) -> None:
        """Note a missing key, unless one of the two tables had a faulty one."""
        places = ((*self.at_step, key), (*self.at_choice, key))
        if not any(bad[: len(place)] == place for bad in self.findings.broken for place in places):
            self.lacking[key] = text

    def assume(self, key: str, law: tuple[float, float] | float, why: str) -> Given:
        """Return a default of ours, marked, and note it."""
        self.notes.append(f"assumed: {why}")
        path = f"{self.path_choice}/{key}"
        if isinstance(law, tuple):
            return Given(path, "lognormal", law[0], law[1], True)
        return exact(path, law, assumed=True)

    def body(self, key: str, index: int | None, table: MaterialTable) -> Material | None:
        """Return a material; the depth of its traces is assumed where nobody says."""
        place = self.place(key) if index is None else (*self.place(key), index)
        label = table.name or table.ref or ""
        path = self.path(key) if index is None else f"{self.path(key)}/{label}"
        found = material(self.findings, place, table, self.library, path)
        if found is None or not found.traces or found.leach_depth is not None:
            return found
        depth = self.assume(f"{key}/leach_depth", _DEPTH, f"traces of {found.name} come from 20 um x/ 3")
        return replace(found, leach_depth=replace(depth, key=f"{path}/leach_depth"))
