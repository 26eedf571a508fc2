"""The library of records: tables with a source for every row, and a user's own tables over them.

Every table is a CSV file in ``purity/data`` (or in a user's folder); :mod:`purity.tables` has their
form and their rules. A library is immutable and passed as an argument; there is none at module level.

Rank of rivals: rank 1 is used. Where several sources give one quantity the order is that of a row
that a comparison of sources prefers, then looked-up before derived or computed, memory and estimate,
then the narrower spread at the usual process temperature (0.75 of the melting point of a solid host,
100 K above it for a melt; a range far from it widens the spread). ``prefer`` names sources that go
before all ranks.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from difflib import get_close_matches
from functools import lru_cache
from hashlib import blake2b
from pathlib import Path
from typing import Literal

from purity.constants import ATM
from purity.errors import DataError, Fault, OutOfRangeError
from purity.scenario import Atmosphere, Given, Material, Still, exact
from purity.table_files import DATA, check, file_hashes, lay_over, read_folder, verify
from purity.tables import (
    TABLES,
    Record,
    Table,
    ln_value,
    outside,
    parameters,
    quantity_name,
    spread_at,
)

__all__ = [
    "DATA",
    "TABLES",
    "Found",
    "Gap",
    "Library",
    "Record",
    "Table",
    "check",
    "file_hashes",
    "ln_value",
    "load",
    "outside",
    "parameters",
    "phase_at",
    "spread_at",
    "verify",
]

How = Literal["measured", "estimate", "yours"]

#: Half width of a 90 % band in standard deviations, the 95 % point of the standard normal law.
_Z95 = 1.6448536269514722


@dataclass(frozen=True, slots=True)
class Found:
    """A record, its rivals, and how it was come by.

    `how` is ``estimate`` only where there was no row and one was made on the spot; a row that a table
    holds may itself be an estimate (origin, quality D).
    """

    record: Record
    rivals: tuple[Record, ...] = ()
    how: How = "measured"


@dataclass(frozen=True, slots=True)
class Gap:
    """Something that matters and that no table holds: a value, never None, never an exception."""

    quantity: str
    reason: str
    nearest: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Library:
    """All tables with a user's own laid over them. Immutable; passed as an argument.

    Parameters
    ----------
    tables : mapping of str to tuple of Record
        Best first among the rivals of one quantity.
    sources : mapping
        By key: citation, address, origin.
    data_hash : str
        blake2b of every table in use, the user's own included.
    prefer : tuple of str
        Sources that go before all ranks.
    withdrawn : frozenset of str
        Quantities that a user's own tables take out and put nothing in place of.
    """

    tables: Mapping[str, tuple[Record, ...]]
    sources: Mapping[str, Mapping[str, str]]
    data_hash: str
    prefer: tuple[str, ...] = ()
    withdrawn: frozenset[str] = frozenset()
    _index: Mapping[str, tuple[Record, ...]] = field(default_factory=dict, repr=False, compare=False)

    def find(self, table: str, **key: str) -> Found | Gap:
        """Return the best record of a quantity, or the gap.

        Parameters
        ----------
        table : str
        **key : str
            All key columns of the table.

        Returns
        -------
        Found or Gap
            A curve given point by point (solubility) comes as a record and its rivals.

        Raises
        ------
        TypeError
            For a table or a key column that does not exist: a fault of the caller.
        """
        spec = _spec(table)
        if set(key) != set(spec.key):
            raise TypeError(f"{table} is looked up by {', '.join(spec.key)}; given: {', '.join(key)}")
        quantity = quantity_name(table, [key[column] for column in spec.key])
        records = self._index.get(quantity, ())
        if records:
            return Found(records[0], records[1:], "yours" if records[0].yours else "measured")
        known = tuple(name for name in dict.fromkeys(r.quantity for r in self.tables.get(table, ())))
        return Gap(quantity, f"no record in the table {table}", _nearest(quantity, known))

    def rows(self, table: str, **key: str) -> tuple[Record, ...]:
        """Return the best record of each quantity whose key columns have the given values.

        Parameters
        ----------
        table : str
        **key : str
            Any of the key columns; the others are free. In tables with a column ``T_K`` every
            temperature has its own best record.
        """
        spec = _spec(table)
        if not set(key) <= set(spec.key):
            raise TypeError(f"{table} is looked up by {', '.join(spec.key)}; given: {', '.join(key)}")
        best: dict[tuple[str, float | None], Record] = {}
        for record in self.tables.get(table, ()):
            if all(record.words[column] == value for column, value in key.items()):
                best.setdefault((record.quantity, record.fields.get("T_K")), record)
        return tuple(best.values())

    def rivals(self, quantity: str) -> tuple[Record, ...]:
        """Return every record of a quantity, the one in use first."""
        return self._index.get(quantity, ())

    def names(self, table: str, column: str) -> tuple[str, ...]:
        """Return the different words in a column of a table, sorted."""
        _spec(table)
        return tuple(sorted({r.words.get(column, "") for r in self.tables.get(table, ())} - {""}))

    def material(self, name: str) -> Material | Gap:
        """Return a container, mould, tray or wrap by its key, title or alias (any case).

        Contents, depth and porosity are inputs keyed by the quantity of their record
        (``traces:magnesia/SiO2``), so that one wall used twice is drawn once.
        """
        found = _named(self, "containers", "material", name)
        if isinstance(found, Gap):
            return found
        phases = self.rows("containers", material=found)
        values = {r.words["property"]: r for r in self.rows("wall_values", material=found)}
        service = {
            name.removeprefix("service_"): r.fields["value_SI"]
            for name, r in values.items()
            if name.startswith("service_")
        }
        return Material(
            name=next((r.words["title"] for r in phases if r.words["title"]), found),
            phases={r.words["formula"]: r.fields["mass_fraction"] for r in phases},
            traces={
                r.words["formula"]: _given(r, r.fields["content_ppm_mass"] * 1e-6)
                for r in self.rows("traces", material=found)
            },
            leach_depth=_optional(values, "leach_depth"),
            open_porosity=_optional(values, "open_porosity"),
            service=service,
            origin=_origin("containers", found, phases),
        )

    def atmosphere(self, name: str) -> Atmosphere | Gap:
        """Return a gas by its key, title or alias (any case), at 101 325 Pa in a room.

        Only the mole fractions come from the table (keys ``atmospheres:<name>/<species>``): replace
        `pressure` (marked as assumed) and `supply` by what the furnace does.
        """
        found = _named(self, "atmospheres", "atmosphere", name)
        if isinstance(found, Gap):
            return found
        species = self.rows("atmospheres", atmosphere=found)
        return Atmosphere(
            name=next((r.words["title"] for r in species if r.words["title"]), found),
            fractions={r.words["species"]: _given(r, r.fields["fraction_ppm_mol"] * 1e-6) for r in species},
            pressure=exact(f"atmospheres:{found}/pressure", ATM, assumed=True),
            supply=Still(),
            origin=_origin("atmospheres", found, species),
        )


def load(overlay: Path | str | None = None, prefer: tuple[str, ...] = ()) -> Library:
    """Read the tables of the package and a user's folder over them.

    Parameters
    ----------
    overlay : path, optional
        Folder with tables of the same names and columns, and ``sources.csv``. Its rows replace all
        records of the quantities they name (marked ``yours``, same random stream); a row whose
        ``rank`` is 0 removes the quantity and needs no other columns than its key.
    prefer : tuple of str, optional
        Source keys that go before all ranks, or ``quantity=source`` for one quantity.

    Returns
    -------
    Library
        A table that has no file is empty.

    Raises
    ------
    DataError
        With every fault of the user's tables, by file and line.
    """
    tables, sources, faults = read_folder(DATA)
    if faults:
        raise DataError(str(DATA), faults)
    digest = blake2b("".join(f"{n}{h}" for n, h in file_hashes(DATA).items()).encode(), digest_size=16)
    withdrawn: frozenset[str] = frozenset()
    if overlay is not None:
        folder = Path(overlay)
        faults = check(folder)
        if faults:
            raise DataError(str(folder), faults)
        own, own_sources, _ = read_folder(folder, yours=True)
        put = {record.quantity for rows in own.values() for record in rows if record.rank > 0}
        withdrawn = frozenset(r.quantity for rows in own.values() for r in rows if r.rank == 0) - put
        tables = {name: lay_over(tables.get(name, ()), own.get(name, ())) for name in TABLES}
        sources = {**sources, **own_sources}
        digest.update("".join(f"{n}{h}" for n, h in file_hashes(folder).items()).encode())
    return _library(tables, sources, digest.hexdigest(), prefer, withdrawn)


def _library(
    tables: Mapping[str, Iterable[Record]],
    sources: Mapping[str, Mapping[str, str]],
    data_hash: str,
    prefer: tuple[str, ...],
    withdrawn: frozenset[str] = frozenset(),
) -> Library:
    chosen = _preferences(tables, sources, prefer)
    ordered: dict[str, tuple[Record, ...]] = {}
    index: dict[str, list[Record]] = {}
    for name in TABLES:
        ordered[name] = tuple(
            sorted(
                tables.get(name, ()),
                key=lambda r: (not _preferred(r, chosen), r.rank),
            )
        )
        for record in ordered[name]:
            index.setdefault(record.quantity, []).append(record)
    rivals = {name: tuple(rows) for name, rows in index.items()}
    return Library(ordered, sources, data_hash, prefer, withdrawn, rivals)


def _preferred(record: Record, chosen: set[str]) -> bool:
    keys = record.source.split(";")
    return any(key in chosen or f"{record.quantity}={key}" in chosen for key in keys)


def _preferences(
    tables: Mapping[str, Iterable[Record]], sources: Mapping[str, Mapping[str, str]], prefer: tuple[str, ...]
) -> set[str]:
    quantities = {record.quantity for rows in tables.values() for record in rows}
    faults = []
    for entry in prefer:
        quantity, _, source = entry.rpartition("=")
        if source not in sources:
            near = ", ".join(get_close_matches(source, sources, 3)) or "none"
            faults.append(Fault(0, entry, f"no source has the key {source!r}; nearest: {near}"))
        if quantity and quantity not in quantities:
            near = ", ".join(_nearest(quantity, tuple(sorted(quantities)))) or "none"
            faults.append(Fault(0, entry, f"no table holds {quantity!r}; nearest: {near}"))
    if faults:
        raise DataError("prefer", faults)
    return set(prefer)


def _spec(table: str) -> Table:
    if table not in TABLES:
        near = ", ".join(get_close_matches(table, TABLES, 3)) or ", ".join(TABLES)
        raise TypeError(f"there is no table {table!r}; nearest: {near}")
    return TABLES[table]


@lru_cache(maxsize=4096)
def _nearest(name: str, known: tuple[str, ...]) -> tuple[str, ...]:
    """Return up to three known names close to one, out of those whose first word begins like its own."""
    place = name.find(":") + 1
    begin = name[place : place + 2].casefold()
    like = [other for other in known if other[place : place + 2].casefold() == begin]
    head = name.split("/", 1)[0]
    same = [other for other in like if other.split("/", 1)[0] == head]
    return tuple(get_close_matches(name, same or like, 3, 0.6))


def _named(library: Library, table: str, column: str, name: str) -> str | Gap:
    wanted = name.strip().casefold()
    words: dict[str, str] = {}
    for record in library.tables.get(table, ()):
        key = record.words[column]
        for word in (key, record.words["title"], *record.words["aliases"].split("|")):
            words.setdefault(word.strip().casefold(), key)
    if wanted and wanted in words:
        return words[wanted]
    near = get_close_matches(wanted, [word for word in words if word], 3, 0.5)
    return Gap(f"{table}:{name}", f"no {column} of this name in the table {table}", tuple(near))


def _origin(table: str, name: str, rows: Iterable[Record]) -> str:
    own = [r for r in rows if r.yours]
    return f"your {table}.csv, line {own[0].line}" if own else f"{table}:{name}"


def _given(record: Record, value: float) -> Given:
    if record.spread <= 1.0 or value <= 0.0:
        return exact(record.quantity, value)
    width = record.spread**_Z95
    return Given(record.quantity, "lognormal", value / width, value * width)


def _optional(values: Mapping[str, Record], name: str) -> Given | None:
    return _given(values[name], values[name].fields["value_SI"]) if name in values else None


def phase_at(library: Library, host: str, T: float) -> str:
    """Return the phase of a host at a temperature (K): a lattice name, or ``liquid``.

    Raises
    ------
    OutOfRangeError
        Where no row of the table of hosts holds the temperature.
    """
    rows = [r for r in library.tables.get("hosts", ()) if r.words["host"] == host]
    for record in sorted(rows, key=lambda r: r.T_min):
        if record.T_min <= T < record.T_max:
            return record.words["phase"]
    known = ", ".join(f"{r.words['phase']} {r.T_min:g} to {r.T_max:g} K" for r in rows)
    raise OutOfRangeError(f"no phase of {host} is tabulated at {T:g} K; known: {known or 'none'}")
