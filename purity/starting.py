"""The lot as it enters: molar masses, certified contents, and what is taken where none is certified."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from purity.database import Found, Gap, Library
from purity.draws import Draws, sample
from purity.errors import MissingRecordError
from purity.kinetics.advance import State
from purity.scenario import Given, Lot

__all__ = ["assumed_records", "initial", "molar_masses", "prior"]


def molar_masses(library: Library, elements: Sequence[str]) -> dict[str, float]:
    """Return kg/mol of each element.

    Raises
    ------
    MissingRecordError
        For an element that the table does not hold.
    """
    masses = {}
    for element in elements:
        found = library.find("elements", element=element)
        if isinstance(found, Gap):
            raise MissingRecordError(found.quantity, f"atomic mass of {element}")
        masses[element] = found.record.fields["molar_mass_g_per_mol"] / 1000.0
    return masses


def initial(
    lot: Lot, impurities: Sequence[str], molar_mass: Mapping[str, float], library: Library, draws: Draws
) -> State:
    """Return the lot as certified; an element without a certificate has a stated prior, never zero."""
    rows = []
    for element in impurities:
        certified = lot.certificate.get(element)
        given = prior(library, element) if certified is None else certified.given
        rows.append(sample(draws, given) * molar_mass[lot.host] / molar_mass[element])
    x = np.stack([np.broadcast_to(row, (draws.n,)) for row in rows])
    return State(x, np.zeros_like(x))


def assumed_records(lot: Lot, impurities: Sequence[str], library: Library) -> dict[str, tuple[Found, ...]]:
    """Return the record behind the start of each element that the certificate leaves out."""
    return {e: (_prior(library, e),) for e in impurities if e not in lot.certificate}


def _prior(library: Library, element: str) -> Found:
    found = library.find("priors", kind=f"uncertified {element}")
    if isinstance(found, Gap):
        found = library.find("priors", kind="uncertified metal")
        if isinstance(found, Gap):
            raise MissingRecordError(found.quantity, f"what to take for {element}, which is not certified")
        return Found(found.record, found.rivals, "estimate")
    return found


def prior(library: Library, element: str) -> Given:
    """Return what an uncertified content is taken to be, mass fraction."""
    found = _prior(library, element)
    low, high = found.record.fields["low_ppm"] * 1e-6, found.record.fields["high_ppm"] * 1e-6
    return Given(f"lot/uncertified/{element}", "lognormal", low, high, True)
