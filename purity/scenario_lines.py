"""The text of a scenario file: TOML with the line of every key.

``tomllib`` does not tell where a value stood, so the text is scanned once more for headers and keys. A
value inside an inline table or an array has the line on which it starts.
"""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Final

from purity.errors import Fault, ScenarioError

#: Where a value stands: keys of tables and positions in arrays.
Place = tuple[str | int, ...]

_BARE: Final = r"[A-Za-z0-9_-]+"
_QUOTED: Final = r"\"(?:[^\"\\]|\\.)*\"|'[^']*'"
_KEY: Final = rf"(?:{_BARE}|{_QUOTED})"
_PATH: Final = re.compile(rf"\s*({_KEY}(?:\s*\.\s*{_KEY})*)\s*")
_TOKEN: Final = re.compile(
    r'"""(?:[^\\]|\\.)*?"""|\'\'\'.*?\'\'\'|"(?:[^"\\\n]|\\.)*"|\'[^\'\n]*\'|#[^\n]*|\n|[\[\]{},=]|'
    r"\d{4}-\d\d-\d\d \d\d:[^\s\[\]{},=\"'#]+|"
    r"[^\s\[\]{},=\"'#]+",
    re.DOTALL,
)


def _keys(path: str) -> tuple[str, ...]:
    parts = re.findall(_KEY, path)
    return tuple(next(iter(tomllib.loads(f"{part} = 0"))) for part in parts)


@dataclass(slots=True)
class Lines:
    """Line of every key of a file."""

    at: dict[Place, int] = field(default_factory=dict)

    def line(self, place: Place) -> int:
        """Line of a value; of the table it belongs to where it is missing, 1 at the top."""
        for end in range(len(place), 0, -1):
            if place[:end] in self.at:
                return self.at[place[:end]]
        return 1


class _Scanner:
    """Walks over the tokens of valid TOML and notes where keys stand."""

    def __init__(self, text: str) -> None:
        self.text = text
        self.lines = Lines()
        self.counts: dict[Place, int] = {}
        self.tokens = self._tokens()
        self.token, self.line = "", 1

    def _tokens(self) -> Iterator[tuple[str, int]]:
        line = 1
        for match in _TOKEN.finditer(self.text):
            token = match[0]
            if not token.startswith("#"):
                yield token, line
            line += token.count("\n")

    def step(self) -> bool:
        self.token, self.line = next(self.tokens, ("", self.line))
        return bool(self.token)

    def note(self, place: Place) -> None:
        for end in range(1, len(place) + 1):
            self.lines.at.setdefault(place[:end], self.line)

    def header(self) -> Place:
        """Read ``[a.b]`` or ``[[a.b]]`` after its first bracket; return the place it opens."""
        line, brackets, path = self.line, 1, ""
        while self.step() and self.token != "\n":
            brackets += self.token == "["
            path += "" if self.token in "[]" else self.token
        place = self.absolute(_keys(path), new=brackets == 2)
        self.line = line
        self.note(place)
        return place

    def absolute(self, keys: Sequence[str], *, new: bool) -> Place:
        """Put the position of the last element after every array of tables on the way."""
        place: Place = ()
        for depth, key in enumerate(keys):
            place = (*place, key)
            if new and depth == len(keys) - 1:
                self.counts[place] = self.counts.get(place, -1) + 1
            if place in self.counts:
                place = (*place, self.counts[place])
        return place

    def value(self, place: Place) -> None:
        """Read one value whose first token is the current one."""
        if self.token == "[":
            self.array(place)
        elif self.token == "{":
            self.table(place)

    def skip_lines(self) -> None:
        while self.token == "\n" and self.step():
            pass

    def array(self, place: Place) -> None:
        index = 0
        self.step()
        while True:
            self.skip_lines()
            if self.token in ("]", ""):
                return
            if self.token == ",":
                index += 1
            else:
                self.note((*place, index))
                self.value((*place, index))
            self.step()

    def table(self, place: Place) -> None:
        self.step()
        while True:
            self.skip_lines()
            if self.token in ("}", ""):
                return
            if self.token != ",":
                self.pair(place)
            self.step()

    def pair(self, place: Place) -> None:
        """Read ``key = value`` from its first token."""
        line, path = self.line, ""
        while self.token not in ("=", ""):
            path += self.token
            self.step()
        inner: Place = (*place, *_keys(path))
        after, self.line = self.line, line
        self.note(inner)
        self.line = after
        self.step()
        self.value(inner)

    def scan(self) -> Lines:
        table: Place = ()
        while self.step():
            if self.token == "[":
                table = self.header()
            elif self.token != "\n":
                self.pair(table)
        return self.lines


def line_map(text: str) -> Lines:
    """Return the line of every key of valid TOML text."""
    return _Scanner(text).scan()


def _decode(path: str, raw: bytes) -> str:
    try:
        return raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = raw.count(b"\n", 0, error.start) + 1
        raise ScenarioError(
            path, [Fault(line, "text", f"byte 0x{raw[error.start]:02x} is not UTF-8; save the file as UTF-8")]
        ) from None


def parse_text(path: str, raw: bytes) -> tuple[dict[str, Any], Lines]:
    """Read TOML bytes.

    Parameters
    ----------
    path : str
        Name of the file in messages.
    raw : bytes

    Returns
    -------
    data : dict
    lines : Lines

    Raises
    ------
    ScenarioError
        Not UTF-8, not TOML, or nested beyond reason.
    """
    text = _decode(path, raw).replace("\r\n", "\n")
    try:
        data = tomllib.loads(text)
    except RecursionError:
        raise ScenarioError(path, [Fault(1, "text", "brackets are nested too deeply")]) from None
    except ValueError as error:
        match = re.search(r"\(at line (\d+), column (\d+)\)|\(at end of document\)", str(error))
        line = int(match[1]) if match and match[1] else text.count("\n") + 1 if match else 1
        what = str(error).split(" (at")[0]
        if "digits" in what:
            what = "a number has too many digits"
        hint = "; text must stand in quotes" if "Invalid value" in what else ""
        raise ScenarioError(path, [Fault(line, "text", f"not valid TOML: {what}{hint}")]) from None
    try:
        return data, line_map(text)
    except RecursionError:
        raise ScenarioError(path, [Fault(1, "text", "brackets are nested too deeply")]) from None


def read_text(path: Path) -> tuple[dict[str, Any], Lines]:
    """Read a TOML file; see :func:`parse_text`."""
    try:
        raw = path.read_bytes()
    except OSError as error:
        reason = error.strerror or "it cannot be opened"
        raise ScenarioError(str(path), [Fault(1, "file", f"cannot be read: {reason}")]) from None
    return parse_text(str(path), raw)


def named(data: object, place: Iterable[str | int]) -> str:
    """Return a place as a name path: positions become the names of the steps and choices they hold."""
    parts: list[str] = []
    here: object = data
    for key in place:
        try:
            here = here[key]  # type: ignore[index]
        except (KeyError, IndexError, TypeError):
            here = None
        if isinstance(key, int):
            name = here.get("name") if isinstance(here, dict) else None
            parts.append(name if isinstance(name, str) and name.strip() else str(key + 1))
        elif key != "choice":
            parts.append(key)
    return ".".join(parts) or "file"
