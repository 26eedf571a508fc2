"""Reading tables from files, and the rules that every row keeps.

A folder of tables holds ``<table>.csv`` and ``sources*.csv``: UTF-8, comma separated, decimal point, a
header line, before it any lines of remarks that begin with ``#``. Nothing is read from outside the
folder, whatever its names and links say.
"""

from __future__ import annotations

import csv
import json
from collections import defaultdict
from collections.abc import Iterable, Iterator, Mapping
from difflib import get_close_matches
from hashlib import blake2b
from math import inf, isfinite, log
from pathlib import Path

from purity.bounds import out_of_bounds, too_far_apart
from purity.errors import Fault
from purity.tables import TABLES, Record, Table, quantity_name

#: Folder of the tables of the package.
DATA = Path(__file__).with_name("data")
#: How a number was come by.
ORIGINS = ("looked-up", "memory", "derived", "computed", "estimate")
#: Tables whose rows of one quantity are held against each other.
COMPARED = ("solubility", "sieverts", "activity")
#: Tables whose rows of one group add up: the group, the column and the sum (10 % may stand in traces).
SUMS: Mapping[str, tuple[str, str, float]] = {
    "containers": ("material", "mass_fraction", 1.0),
    "atmospheres": ("atmosphere", "fraction_ppm_mol", 1e6),
}
#: Columns that a table may do without.
OPTIONAL = ("rank", "note")
SOURCE_COLUMNS = ("key", "citation", "address", "origin")
#: Largest one-sigma spread of a narrow record: 35 %, and 2 kJ/mol.
NARROW_LN, NARROW_J = 0.3, 2000.0

Rows = dict[str, tuple[Record, ...]]
Sources = dict[str, Mapping[str, str]]
Line = tuple[int, dict[str, str]]


def columns(table: str) -> tuple[str, ...]:
    """Return the columns of a table in the order of its file."""
    spec = TABLES[table]
    names = (*spec.key, *spec.text, *spec.numbers)
    if spec.ranged:
        names = (*names, "T_min_K", "T_max_K")
    if spec.spread:
        names = (*names, spec.spread)
    return (*names, "rank", "source", "where", "origin", "note")


def read_folder(folder: Path, *, yours: bool = False) -> tuple[Rows, Sources, list[Fault]]:
    """Read every table and source list of a folder.

    Returns
    -------
    tables : dict of str to tuple of Record
        Only the tables that have a file.
    sources : dict
    faults : list of Fault
        What cannot be read; bounds and references are left to :func:`check` and :func:`verify`.
    """
    tables: Rows = {}
    sources: Sources = {}
    faults: list[Fault] = []
    for path in _csv_files(folder, faults):
        if path.stem.startswith("sources"):
            _read_sources(path, sources, faults)
        elif path.stem in TABLES:
            tables[path.stem] = tuple(_records(path, yours, faults))
        else:
            near = ", ".join(get_close_matches(path.stem, TABLES, 3)) or ", ".join(TABLES)
            faults.append(Fault(1, path.name, f"there is no table {path.stem!r}; nearest: {near}"))
    return tables, sources, faults


def _csv_files(folder: Path, faults: list[Fault]) -> list[Path]:
    if not folder.is_dir():
        faults.append(Fault(0, str(folder), "is not a folder"))
        return []
    root = folder.resolve()
    files = []
    for path in sorted(folder.iterdir()):
        if path.suffix != ".csv":
            continue
        if path.resolve().parent != root or not path.is_file():
            faults.append(Fault(0, path.name, "is not a plain file inside the folder: copy it there"))
        else:
            files.append(path)
    return files


def _lines(path: Path, wanted: tuple[str, ...], faults: list[Fault]) -> Iterator[Line]:
    """Yield line number and row of a CSV file whose header holds the wanted columns."""
    try:
        text = path.read_bytes().decode("utf-8-sig")
    except UnicodeDecodeError as error:
        faults.append(Fault(0, path.name, f"is not UTF-8 text (byte {error.start}): save it as UTF-8"))
        return
    lines = text.splitlines(keepends=True)
    remarks = next((i for i, line in enumerate(lines) if not line.startswith("#")), len(lines))
    reader = csv.reader(lines[remarks:], strict=True)
    try:
        header = [name.strip() for name in next(reader, [])]
        if _header_faults(path.name, header, wanted, remarks + 1, faults):
            return
        for cells in reader:
            if not any(cell.strip() for cell in cells):
                continue
            line = remarks + reader.line_num
            if len(cells) != len(header):
                what = f"has {len(cells)} cells, the header {len(header)}: put quotes around text with commas"
                faults.append(Fault(line, path.name, what))
                continue
            row = dict(zip(header, (cell.strip() for cell in cells), strict=True))
            yield line, {**dict.fromkeys(OPTIONAL, ""), **row}
    except csv.Error as error:
        what = f"is not a table of comma separated values: {error}"
        faults.append(Fault(remarks + reader.line_num, path.name, what))


def _header_faults(
    name: str, header: list[str], wanted: tuple[str, ...], line: int, faults: list[Fault]
) -> bool:
    """Add what is wrong with a header; True where columns are missing."""
    missing = [column for column in wanted if column not in (*header, *OPTIONAL)]
    more = dict.fromkeys(c for c in header if c not in wanted or header.count(c) > 1)
    faults.extend(Fault(line, name, f"column {column!r} is missing") for column in missing)
    known = ", ".join(wanted)
    faults.extend(Fault(line, name, f"column {c!r} is unknown or doubled; known: {known}") for c in more)
    return bool(missing)


def _read_sources(path: Path, sources: Sources, faults: list[Fault]) -> None:
    for line, row in _lines(path, SOURCE_COLUMNS, faults):
        key = row["key"]
        if not key or not row["citation"]:
            faults.append(Fault(line, path.name, "a source needs a key and a citation"))
        elif key in sources:
            faults.append(Fault(line, f"{path.name}: {key}", f"is already in {sources[key]['file']}"))
        else:
            sources[key] = {**row, "file": path.name, "line": str(line)}


def _records(path: Path, yours: bool, faults: list[Fault]) -> Iterator[Record]:
    table = path.stem
    for line, row in _lines(path, columns(table), faults):
        wrong: list[str] = []
        record = _record(table, line, row, yours, wrong)
        name = f"{path.name}: {record.quantity}"
        faults.extend(Fault(line, name, text) for text in wrong)
        if not wrong:
            yield record


def _number(row: Mapping[str, str], name: str, wrong: list[str], default: float | None = None) -> float:
    text = row[name]
    if not text and default is not None:
        return default
    try:
        value = float(text)
    except ValueError:
        value = inf
    if isfinite(value) and "_" not in text:
        return value
    if not text:
        wrong.append(f"{name} is blank")
        return 0.0
    cure = "write a plain number" + (" with a decimal point" if "," in text else "")
    wrong.append(f"{name} is {text!r}: {cure}")
    return 0.0


def _record(table: str, line: int, row: Mapping[str, str], yours: bool, wrong: list[str]) -> Record:
    spec = TABLES[table]
    wrong.extend(f"{name} is blank" for name in spec.key if not row[name] and name != "label")
    rank = int(_number(row, "rank", wrong, 1.0))
    fields: dict[str, float] = {}
    spread, T_min, T_max = 0.0, 0.0, inf
    removes = yours and rank == 0
    if not removes:
        fields = {
            name: _number(row, name, wrong) for name in spec.numbers if row[name] or name not in spec.optional
        }
        if spec.spread:
            spread = _number(row, spec.spread, wrong)
        if spec.ranged:
            T_min, T_max = _number(row, "T_min_K", wrong), _number(row, "T_max_K", wrong)
    return Record(
        table=table,
        quantity=quantity_name(table, [row[name] for name in spec.key]),
        fields=fields,
        words={name: row[name] for name in (*spec.key, *spec.text, "note")},
        spread=spread,
        T_min=T_min,
        T_max=T_max,
        source=row["source"],
        where=row["where"],
        origin=row["origin"],
        quality="" if removes else quality(spec, row["origin"], spread),
        rank=rank,
        line=line,
        yours=yours,
    )


def quality(spec: Table, origin: str, spread: float) -> str:
    """Return the class of a record, A to D (see :class:`purity.tables.Record`)."""
    if origin in ("memory", "estimate"):
        return "C" if origin == "memory" else "D"
    if spec.spread == "spread_factor":
        narrow = spread > 0 and log(spread) <= NARROW_LN
    else:
        narrow = spread <= (NARROW_J if spec.spread == "spread_J_per_mol" else NARROW_LN)
    return "A" if origin == "looked-up" and narrow else "B"


def _row_faults(record: Record, sources: Mapping[str, object], melting: Mapping[str, float]) -> Iterator[str]:
    spec = TABLES[record.table]
    if record.rank == 0 and record.yours:
        return
    if record.rank < 1:
        yield "rank must be 1 or more" + (" (0 removes the quantity)" if record.yours else "")
    if record.origin not in ORIGINS:
        yield f"origin {record.origin!r} is not one of {', '.join(ORIGINS)}"
    for key in record.source.split(";"):
        if key not in sources:
            near = ", ".join(get_close_matches(key, list(sources), 3)) or "none"
            yield f"source {key!r} is in no sources file; nearest: {near}"
    if not record.where and not record.yours and record.origin == "looked-up":
        yield "where is blank: give page, table or file"
    if spec.ranged and not 0.0 <= record.T_min < record.T_max <= 1e4:
        yield f"range {record.T_min:g} to {record.T_max:g} K is not a range of temperatures"
    if spec.spread == "spread_factor" and record.spread < 1.0:
        yield f"spread_factor is {record.spread:g}: a factor is 1 or more"
    if spec.spread and record.spread <= (1.0 if spec.law and spec.spread == "spread_factor" else 0.0):
        yield f"{spec.spread} is {record.spread:g}: nothing is known exactly"
    yield from out_of_bounds(record, melting)


def _faults(tables: Rows, sources: Mapping[str, object], melting: Mapping[str, float]) -> list[Fault]:
    faults: list[Fault] = []
    for table, records in tables.items():
        seen: dict[tuple[str, int, float | None], int] = {}
        quantities: defaultdict[str, list[Record]] = defaultdict(list)
        for record in records:
            name = f"{table}.csv: {record.quantity}"
            faults.extend(Fault(record.line, name, text) for text in _row_faults(record, sources, melting))
            place = (record.quantity, record.rank, record.fields.get("T_K"))
            if place in seen:
                text = f"line {seen[place]} has the same quantity and rank {record.rank}"
                faults.append(Fault(record.line, name, text))
            seen.setdefault(place, record.line)
            quantities[record.quantity].append(record)
        if table in COMPARED:
            apart = [pair for rows in quantities.values() for pair in too_far_apart(rows)]
            faults.extend(Fault(r.line, f"{table}.csv: {r.quantity}", text) for r, text in apart)
    return faults


def _melting(tables: Rows) -> dict[str, float]:
    rows = tables.get("transitions", ())
    melting = (r for r in rows if r.words["kind"] == "melting" and r.rank > 0)
    return {r.words["element"]: r.fields["T_K"] for r in melting}


def check(folder: Path) -> list[Fault]:
    """Check a user's folder of tables, whose rows may also name the sources of the package.

    Parameters
    ----------
    folder : path

    Returns
    -------
    list of Fault
        Each with file and line; empty for a folder that :func:`purity.database.load` takes.
    """
    base, known, _ = read_folder(DATA)
    tables, sources, faults = read_folder(folder, yours=True)
    for key in sorted(set(sources) & set(known)):
        place = f"{sources[key]['file']}: {key}"
        faults.append(Fault(int(sources[key]["line"]), place, "is a source of the package: use another key"))
    faults += _faults(tables, {**known, **sources}, _melting({**base, **tables}))
    for table, (group, _, _) in SUMS.items():
        own = {record.words[group] for record in tables.get(table, ())}
        merged = lay_over(base.get(table, ()), tables.get(table, ()))
        faults += _sum_faults([r for r in merged if r.words[group] in own], table)
    return sorted(faults)


def lay_over(base: Iterable[Record], own: Iterable[Record]) -> tuple[Record, ...]:
    """Return the records of a table with a user's own in place of those they replace or remove."""
    own = tuple(own)
    replaced = {record.quantity for record in own}
    kept = [record for record in base if record.quantity not in replaced]
    return (*kept, *(record for record in own if record.rank > 0))


def verify(folder: Path = DATA) -> list[Fault]:
    """Check the tables of the package: all rules, every table there, sources used, files unchanged."""
    tables, sources, faults = read_folder(folder)
    faults += _faults(tables, sources, _melting(tables))
    faults += [Fault(0, f"{name}.csv", "is missing") for name in TABLES if name not in tables]
    used = {key for records in tables.values() for r in records for key in r.source.split(";")}
    for key in sorted(set(sources) - used):
        place = f"{sources[key]['file']}: {key}"
        faults.append(Fault(int(sources[key]["line"]), place, "no row names this source"))
    for table in SUMS:
        faults += _sum_faults(tables.get(table, ()), table)
    return sorted([*faults, *_hash_faults(folder)])


def _sum_faults(records: Iterable[Record], table: str) -> list[Fault]:
    group, column, total = SUMS[table]
    sums: defaultdict[str, float] = defaultdict(float)
    line: dict[str, int] = {}
    for record in records:
        sums[record.words[group]] += record.fields[column]
        if record.yours or record.words[group] not in line:
            line[record.words[group]] = record.line
    return [
        Fault(line[name], f"{table}.csv: {name}", f"{column} sums to {found:g} in place of {total:g}")
        for name, found in sums.items()
        if not 0.9 <= found / total <= 1.005
    ]


def file_hashes(folder: Path) -> dict[str, str]:
    """Return the blake2b hash of every table of a folder by file name, sorted; line ends do not count."""
    return {
        path.name: blake2b(path.read_bytes().replace(b"\r\n", b"\n"), digest_size=16).hexdigest()
        for path in _csv_files(folder, [])
    }


def _hash_faults(folder: Path) -> list[Fault]:
    """Compare the files with ``hashes.json``, written when the tables were last released."""
    path = folder / "hashes.json"
    if not path.is_file():
        return [Fault(0, path.name, "is missing")]
    kept = json.loads(path.read_text(encoding="utf-8"))
    now = file_hashes(folder)
    return [
        Fault(0, name, "differs from the file that was released" if name in now else "is missing")
        for name in sorted(set(kept) | set(now))
        if kept.get(name) != now.get(name)
    ]
