"""Errors written for the person at the furnace.

PurityError
├── ScenarioError     a scenario file that cannot be run; holds every fault found
├── DataError         a table that breaks the rules of the library
├── UnitError         a quantity that cannot be read
├── MissingRecordError   a record without which nothing can be computed
├── OutOfRangeError   a value outside the validity of a method (dilute law, film law)
└── IllPosedError     an equilibrium that the given species cannot describe
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass


class PurityError(Exception):
    """Base of every error that a user may see; its text is the whole message."""


class UnitError(PurityError):
    """A quantity whose text, unit or dimension cannot be read."""


class MissingRecordError(PurityError):
    """A record without which nothing can be computed at all.

    Parameters
    ----------
    quantity : str
        What is missing, as the tables name it.
    what : str
        What it is needed for.
    """

    def __init__(self, quantity: str, what: str) -> None:
        self.quantity = quantity
        table = quantity.split(":")[0]
        super().__init__(f"no table holds {quantity} ({what}): put a row for it in your own {table}.csv")


class OutOfRangeError(PurityError):
    """A value outside the range in which a method holds."""


class IllPosedError(PurityError):
    """An equilibrium that has no answer with the species given."""


@dataclass(frozen=True, slots=True, order=True)
class Fault:
    """One thing wrong in a file.

    Parameters
    ----------
    line : int
        Line of the file, from 1.
    key : str
        Name path of the value, for instance ``step.melt.temperature``.
    text : str
        What is wrong and what would be right.
    """

    line: int
    key: str
    text: str


class _FileError(PurityError):
    def __init__(self, path: str, faults: Iterable[Fault]) -> None:
        self.path = path
        self.faults = tuple(sorted(faults))
        super().__init__(
            "\n".join(f"{path}:{fault.line}: {fault.key}: {fault.text}" for fault in self.faults)
        )


class ScenarioError(_FileError):
    """A scenario file that cannot be run: holds all its faults, sorted by line."""


class DataError(_FileError):
    """A table that breaks the rules of the library: holds all its faults, sorted by line."""
