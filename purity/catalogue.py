"""What the library holds, told to the reader: coverage of a host, records of a pair, bibliography.

Data for a command to print; nothing here formats or computes more than a record says.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from math import exp

from purity.database import TABLES, Library, Record, ln_value, outside, spread_at


@dataclass(frozen=True, slots=True)
class Cover:
    """What is known of one property of one element in a host.

    Parameters
    ----------
    element, table, phase : str
    quality : str or None
        Class of the record in use, A to D; None is a gap.
    rivals : int
        How many further records there are.
    """

    element: str
    table: str
    phase: str
    quality: str | None
    rivals: int


@dataclass(frozen=True, slots=True)
class Shown:
    """One record as the reader wants it.

    Parameters
    ----------
    quantity : str
    value, low, high : float or None
        At the temperature asked for, and one sigma to either side; None where the table has no value.
    unit : str
    T_min, T_max : float or None
        K.
    outside : bool
        The temperature lies outside that range, and the band is widened for it.
    citation, address, where, origin, quality, note : str
    rivals : tuple of (str, float or None)
        Source key and value of each rival.
    """

    quantity: str
    value: float | None
    low: float | None
    high: float | None
    unit: str
    T_min: float | None
    T_max: float | None
    outside: bool
    citation: str
    address: str
    where: str
    origin: str
    quality: str
    note: str
    rivals: tuple[tuple[str, float | None], ...]


#: Tables of the properties of one element in a host.
PAIRS = ("activity", "sieverts", "diffusion", "solubility")


def coverage(library: Library, host: str, elements: Iterable[str] | None = None) -> tuple[Cover, ...]:
    """Return element by property what is known of impurities in a host, gaps included.

    Parameters
    ----------
    library : Library
    host : str
    elements : iterable of str, optional
        All elements that any host has a record for, where left out.
    """
    rows = [r for table in PAIRS for r in library.rows(table, host=host)]
    phases = {(r.table, r.words["phase"]) for r in rows}
    best: dict[tuple[str, str, str], Record] = {}
    for record in rows:
        best.setdefault((record.words["solute"], record.table, record.words["phase"]), record)
    wanted = elements or sorted({r.words["solute"] for table in PAIRS for r in library.tables[table]})
    return tuple(
        Cover(element, table, phase, found.quality, len(library.rivals(found.quantity)) - 1)
        if (found := best.get((element, table, phase)))
        else Cover(element, table, phase, None, 0)
        for element in wanted
        if element != host
        for table, phase in sorted(phases)
    )


def show(library: Library, host: str, element: str, T: float) -> tuple[Shown, ...]:
    """Return every record in use on one element in a host, evaluated at a temperature (K)."""
    return tuple(
        _shown(library, record, T)
        for table in (*PAIRS, "interaction")
        for record in library.rows(table, host=host, solute=element)
    )


def _value(record: Record, T: float, z: float = 0.0) -> float | None:
    spec = TABLES[record.table]
    if not spec.law:
        return record.fields[next(name for name in spec.numbers if name != "T_K")]
    value = float(ln_value(record, T)) + z * float(spread_at(record, T))
    return value if spec.unit.startswith("ln") else exp(value)


def _shown(library: Library, record: Record, T: float) -> Shown:
    spec = TABLES[record.table]
    at = record.fields.get("T_K", T)
    value = _value(record, at)
    low = high = None
    if spec.law:
        low, high = _value(record, at, -1.0), _value(record, at, 1.0)
    elif value is not None and spec.spread == "spread_ln":
        low, high = value * exp(-record.spread), value * exp(record.spread)
    elif value is not None and spec.spread == "spread":
        low, high = value - record.spread, value + record.spread
    cited = [library.sources[key] for key in record.source.split(";") if key in library.sources]
    return Shown(
        quantity=record.quantity + (f" at {at:g} K" if "T_K" in record.fields else ""),
        value=value,
        low=low,
        high=high,
        unit=spec.unit or spec.numbers[-1 if spec.numbers[0] == "T_K" else 0],
        T_min=record.T_min if spec.ranged else None,
        T_max=record.T_max if spec.ranged else None,
        outside=bool(outside(record, at)),
        citation="; ".join(source["citation"] for source in cited),
        address="; ".join(source["address"] for source in cited if source["address"]),
        where=record.where,
        origin=record.origin,
        quality=record.quality,
        note=record.words["note"],
        rivals=tuple(
            (rival.source, _value(rival, at))
            for rival in library.rivals(record.quantity)
            if rival is not record and rival.fields.get("T_K") == record.fields.get("T_K")
        ),
    )


def bibliography(library: Library, quantities: Iterable[str]) -> tuple[tuple[str, str, str], ...]:
    """Return key, citation and address of the sources behind the records in use, each once."""
    used = [library.rivals(name)[0] for name in quantities if library.rivals(name)]
    keys = dict.fromkeys(key for record in used for key in record.source.split(";"))
    return tuple(
        (key, source["citation"], source["address"])
        for key in keys
        if (source := library.sources.get(key)) is not None
    )
