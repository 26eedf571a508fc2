"""From draws to lines: what a report says of one impurity and one choice."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from purity.constants import GAS_FORMERS, R
from purity.contacts.ceilings import ceiling
from purity.contacts.setting import Exposed
from purity.database import Found, outside
from purity.followers import total
from purity.kinetics.advance import HELD_BACK_BY
from purity.passing import Passed
from purity.result import Band, Block, ContactLine, Line
from purity.risk import margin, spent, word
from purity.scenario import Lot
from purity.uncertainty import band, chance

Array = NDArray[np.float64]

#: What is said of a sum in which the certificate does not name every member.
UNCERTIFIED_MEMBERS = "members without a certificate count with what they gain"
#: Mass fraction to mass ppm.
PPM = 1e6


@dataclass(frozen=True, slots=True)
class Column:
    """One impurity of one choice as draws, mass ppm.

    Parameters
    ----------
    element : str
    start, end : (N,) arrays
        Whole contents.
    limit : float or None
    certified : bool
    """

    element: str
    start: Array
    end: Array
    limit: float | None
    certified: bool


def to_ppm(passed: Passed) -> Array:
    """Return mass ppm per unit of content (mol per mol of host) of each impurity, (I, 1)."""
    masses = passed.setting.molar_mass
    host = masses[passed.setting.host]
    return np.array([[masses[element] / host * PPM] for element in passed.impurities])


def columns(passed: Passed, lot: Lot) -> dict[str, Column]:
    """Return the draws of every impurity."""
    scale = to_ppm(passed)
    start, end = total(passed.before) * scale, total(passed.after) * scale
    return {
        element: Column(
            element,
            start[i],
            end[i],
            lot.limits[element] * PPM if element in lot.limits else None,
            element in lot.certificate,
        )
        for i, element in enumerate(passed.impurities)
    }


def counts(lot: Lot) -> tuple[str, ...]:
    """Return the elements that a choice must be assessed for: certified or limited ones."""
    grouped = {element for members in lot.groups.values() for element in members}
    return tuple(sorted({*lot.certificate, *lot.limits, *grouped} - set(lot.groups)))


def line(passed: Passed, column: Column, lot: Lot, blocks: int) -> Line:
    """Return the line of one impurity.

    Parameters
    ----------
    passed : Passed
    column : Column
    lot : Lot
    blocks : int
        Replicates in the draws.

    Returns
    -------
    Line
        An element without a certificate has no start and no end, only its pickup.
    """
    element = column.element
    i = passed.impurities.index(element)
    gap = _gap(passed, element)
    known = column.certified and gap is None
    start, end = band(column.start), band(column.end)
    scale = to_ppm(passed)[i, 0]
    over = chance(column.end, column.limit, blocks) if known and column.limit is not None else None
    limit = column.limit
    ceilings = _ceilings(passed, i)
    best = _deciding_ceiling(passed, i, ceilings)
    certified = lot.certificate.get(element)
    records = passed.records.get(element, ())
    return Line(
        impurity=element,
        block=block(element),
        start=start if column.certified else None,
        end=end if known else None,
        dissolved=band(passed.after.x[i] * scale) if known else None,
        pickup=band(column.end - column.start) if gap is None else None,
        limit=limit,
        margin=margin(end.high, limit) if known and limit is not None else None,
        worst=_worst(passed, i, scale) if known else None,
        detection=None
        if certified is None or certified.detection_limit is None
        else certified.detection_limit * PPM,
        spent=spent(start.median, end.median, limit) if known and limit is not None else None,
        word=word(start.median, end.median, limit) if known and limit is not None else None,
        chance_over=None if over is None else over[0],
        chance_error=None if over is None else over[1],
        ceiling=None if best is None else band(np.exp(best) * scale),
        driving_force=None if best is None else _driving_force(passed, i, best),
        held_back_by=_held_back_by(passed, i),
        shares={
            name: float(s) for name, s in zip(HELD_BACK_BY, passed.shares[:, i], strict=True) if abs(s) > 1e-3
        },
        contacts=_contact_lines(passed, i, column, scale, ceilings),
        forms=_forms(passed, element),
        records=tuple(sorted(found.record.quantity for found in records)),
        quality=worst_class(records),
        extrapolated=any(_extrapolated(found, passed) for found in passed.own.get(element, ())),
        gap=gap or (None if column.certified else "not certified: the end is not known"),
        series=_series(passed, element, scale),
        start_method=None if certified is None else certified.method,
    )


def worst_class(records: Iterable[Found]) -> str | None:
    """Return the worst class among records; what was taken for want of a record is an estimate, D."""
    return max(("D" if f.how == "estimate" else f.record.quality for f in records), default=None)


def _worst(passed: Passed, i: int, scale: float) -> float | None:
    """95 % point of the content at the worst position: what is dissolved parts, the suspended stays."""
    factor = passed.worst.get(passed.impurities[i])
    if factor is None:
        return None
    return band((total(passed.after)[i] + (factor - 1.0) * passed.after.x[i]) * scale).high


def block(element: str) -> Block:
    """Return the block of the table in which an element stands."""
    return "gas formers" if element in GAS_FORMERS else "metals"


def _forms(passed: Passed, element: str) -> tuple[str, ...]:
    """Compounds that hold the element in the melt, and those that stand at a wall at rest."""
    at_walls = [f for one in passed.parcels.values() if element in one.ln_ceiling for f in one.forms]
    return tuple(dict.fromkeys((*passed.formed.get(element, ()), *at_walls)))


def _gap(passed: Passed, element: str) -> str | None:
    found = passed.gaps.get(element, ())
    return f"no data: {found[0].quantity} ({found[0].reason})" if found else None


def _ceilings(passed: Passed, i: int) -> list[Array | None]:
    """Ln of the ceiling against each contact; of a wall the certified one, where it has an answer.

    Traces and inventories of the same contact may hold more; the higher of the two stands.
    """
    x, element = total(passed.after), passed.impurities[i]
    found: list[Array | None] = []
    for c, one in enumerate(passed.exposed):
        own = ceiling(one, passed.setting, x, passed.hot, i)
        rest = passed.parcels[c].ln_ceiling.get(element) if c in passed.parcels else None
        certified = rest is not None and len(rest) > 0 and not _traced(one, i)
        found.append(rest if certified and own is not None else own)
    return found


def _traced(one: Exposed, i: int) -> bool:
    return any(
        c.nu[i] > 0 and c.inventory is not None and np.any(c.inventory > 0) for c in one.exposure.carriers
    )


def _deciding_ceiling(passed: Passed, i: int, ceilings: Sequence[Array | None]) -> Array | None:
    """Ceiling of the contact that moves the element most."""
    moved = [abs(float(np.median(passed.ledger[c, i]))) for c in range(len(ceilings))]
    held = [c for c, value in enumerate(ceilings) if value is not None]
    return ceilings[max(held, key=lambda c: moved[c])] if held else None


def _driving_force(passed: Passed, i: int, ln_ceiling: Array) -> float:
    """Median of R T (ln ceiling - ln start), J per mole of impurity."""
    ln_start = np.log(np.maximum(total(passed.before)[i], 1e-30))
    T = float(np.median(passed.hot))
    return R * T * float(np.median(ln_ceiling) - np.median(ln_start))


def _held_back_by(passed: Passed, i: int) -> str | None:
    shares = passed.shares[:, i]
    return HELD_BACK_BY[int(np.argmax(shares))] if np.any(shares > 0) else None


def _contact_lines(
    passed: Passed, i: int, column: Column, scale: float, ceilings: Sequence[Array | None]
) -> tuple[ContactLine, ...]:
    """Ledger of the draw whose pickup is the median, so that the contacts sum to a pickup; bands over all."""
    pickup = column.end - column.start
    middle = int(np.argsort(pickup, kind="stable")[(len(pickup) - 1) // 2])
    rows = []
    for c, name in enumerate(passed.contacts):
        gained = passed.ledger[c, i] * scale
        if not np.any(gained != 0.0):
            continue
        own = band(gained)
        ends = ceilings[c]
        rows.append(
            ContactLine(
                name,
                Band(own.low, float(gained[middle]), own.high),
                None if ends is None else band(np.exp(ends) * scale),
            )
        )
    return tuple(rows)


def _extrapolated(found: Found, passed: Passed) -> bool:
    return bool(np.any(outside(found.record, np.median(passed.hot))))


def _series(passed: Passed, element: str, scale: float) -> tuple[tuple[float, Band], ...] | None:
    if element not in passed.series:
        return None
    times, contents = passed.series[element]
    t = np.median(times, axis=-1) if np.ndim(times) == 2 else times
    return tuple((float(when), band(row * scale)) for when, row in zip(t, contents, strict=True))


def from_nothing(column: Column) -> Column:
    """Return an uncertified element as the least it can hold: what it gains, from a start of zero."""
    return replace(column, start=np.zeros_like(column.start), end=np.maximum(column.end - column.start, 0.0))


def group_columns(found: Mapping[str, Column], lot: Lot) -> list[Column]:
    """Return sums with a limit of their own: groups, and all metals together (C N O H S left out).

    A member without a certificate counts with what it gains.
    """
    sums = dict(lot.groups)
    limits = {name: lot.limits[name] for name in sums if name in lot.limits}
    if lot.metals_limit is not None:
        sums["metals"] = tuple(e for e in found if block(e) == "metals")
        limits["metals"] = lot.metals_limit
    rows = []
    for name, members in sums.items():
        present = [c if c.certified else from_nothing(c) for c in (found[e] for e in members if e in found)]
        if name not in limits or not present:
            continue
        start = np.sum([c.start for c in present], axis=0)
        end = np.sum([c.end for c in present], axis=0)
        rows.append(Column(name, start, end, limits[name] * PPM, all(c.certified for c in present)))
    return rows


def group_line(passed: Passed, column: Column, lot: Lot, blocks: int) -> Line:
    """Return the line of a sum with a limit of its own."""
    members = lot.groups.get(column.element) or [e for e in passed.impurities if block(e) == "metals"]
    found = {f.record.quantity: f for e in members for f in passed.records.get(e, ())}
    missing = next((text for e in members if (text := _gap(passed, e))), None)
    start, end = band(column.start), band(column.end)
    limit = column.limit
    if limit is None:
        raise TypeError(f"the sum {column.element} has no limit")
    over, error = chance(column.end, limit, blocks)
    return Line(
        impurity=column.element,
        block="metals",
        start=start,
        end=end,
        dissolved=None,
        pickup=band(column.end - column.start),
        limit=limit,
        margin=margin(end.high, limit),
        worst=None,
        detection=None,
        spent=spent(start.median, end.median, limit),
        word=word(start.median, end.median, limit),
        chance_over=over,
        chance_error=error,
        ceiling=None,
        driving_force=None,
        held_back_by=None,
        shares={},
        contacts=(),
        forms=(),
        records=tuple(sorted(found)),
        quality=worst_class(found.values()),
        extrapolated=any(_extrapolated(one, passed) for e in members for one in passed.own.get(e, ())),
        gap=missing or (None if column.certified else UNCERTIFIED_MEMBERS),
    )
