"""How one impurity stands with one metal: activity, partial energy, what forms first, what contacts allow.

Answers the question before any scenario: equilibrium only, no rates. Plain numbers in a frozen dataclass.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from purity.affinity_walls import Case, FromContact, from_contacts
from purity.constants import DILUTE, R
from purity.database import Found, Gap, Library, ln_value, phase_at
from purity.draws import Draws
from purity.driving_force.solution import Dilute, mixing
from purity.driving_force.substances import (
    REFERENCES,
    Energy,
    atoms,
    element_energy,
    gibbs_energy,
    ln_dissolution,
    ln_gamma,
    measured_ceiling,
    molar_mass,
    solute,
    solute_record,
    substances,
)
from purity.errors import OutOfRangeError
from purity.result import Band
from purity.scenario import Atmosphere, Material
from purity.uncertainty import band

Array = NDArray[np.float64]

#: Contents at which energies are given, mass ppm.
CONTENTS = (0.01, 0.1, 1.0, 10.0, 100.0, 1000.0)
#: What an activity coefficient is referred to.
REFERENCE_WORDS: Mapping[str, str] = {
    "l": "pure liquid",
    "s": "pure solid",
    "gr": "graphite",
    "": "half the molecule at 1 bar",
}


@dataclass(frozen=True, slots=True)
class Source:
    """A record of the activity of the impurity, and what it says at the temperature asked."""

    ln_gamma: float
    sigma: float
    reference: str
    how: str
    quality: str
    source: str
    where: str


@dataclass(frozen=True, slots=True)
class AtContent:
    """Energies at one content.

    Parameters
    ----------
    ppm : float
        Mass ppm.
    partial : Band
        Partial Gibbs energy of the impurity less that of the pure element as it stands at T, J/mol.
    driving_force : Band
        From the pure element into the metal, J per mole of impurity; positive: it goes in.
    mixing : float
        Gibbs energy of mixing, median, J per mole of metal.
    """

    ppm: float
    partial: Band
    driving_force: Band
    mixing: float


@dataclass(frozen=True, slots=True)
class Saturation:
    """Content at which a compound of the impurity and the host, or the pure impurity, forms.

    `measured` is the content that has been measured (mass ppm, carried to T), if any; `conflict` says that
    it lies two standard deviations or more from the computed one, whose place it then takes in `ppm`.
    """

    formula: str
    ppm: Band
    dilute: bool
    measured: float | None
    conflict: bool
    records: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Affinity:
    """One impurity in one metal at one temperature; `first` is what forms at the least content."""

    host: str
    impurity: str
    T: float
    phase: str
    activity: Source | None
    ln_gamma: Band | None
    rivals: tuple[Source, ...]
    extrapolated: bool
    contents: tuple[AtContent, ...]
    saturations: tuple[Saturation, ...]
    first: str | None
    contacts: tuple[FromContact, ...]
    atmosphere: str | None
    gaps: tuple[str, ...]


def affinity(
    library: Library,
    host: str,
    impurity: str,
    T: float,
    phase: str | None = None,
    against: Iterable[str | Material] | None = None,
    atmosphere: str | Atmosphere | None = None,
    draws: Draws | None = None,
) -> Affinity:
    """Say how far an impurity would go into a metal.

    Parameters
    ----------
    library : Library
    host, impurity : str
        Elements.
    T : float
        K.
    phase : str, optional
        Of the host; the stable one at T where left out.
    against : iterable of str or Material, optional
        Walls; every wall of the tables that holds the impurity where left out.
    atmosphere : str or Atmosphere, optional
        Sets the oxygen, nitrogen and hydrogen potential of every contact. Without one the metal keeps what
        the wall's own dissociation gives it.
    draws : Draws, optional
        256 where left out.

    Returns
    -------
    Affinity

    Raises
    ------
    OutOfRangeError
        An element without a molar mass, or a temperature at which no phase of the host is known.
    """
    draws = draws or Draws(blocks=1)
    phase = phase or phase_at(library, host, T)
    for element in (host, impurity):
        if isinstance(molar_mass(library, element), Gap):
            raise OutOfRangeError(f"{element} is no element of the tables")
    gas = library.atmosphere(atmosphere) if isinstance(atmosphere, str) else atmosphere
    if isinstance(gas, Gap):
        near = f"; nearest: {', '.join(gas.nearest)}" if gas.nearest else ""
        raise OutOfRangeError(f"{gas.reason}: {atmosphere!r}{near}")
    case = Case(library, host, phase, impurity, T, draws)
    saturations = _saturations(case)
    made = solute(library, host, phase, impurity, T, draws)
    sources = _sources(case, made)
    return Affinity(
        host=host,
        impurity=impurity,
        T=T,
        phase=phase,
        activity=sources[0] if sources else None,
        ln_gamma=_ln_gamma(case, made),
        rivals=sources[1:],
        extrapolated=isinstance(made, Energy) and bool(made.outside.any()),
        contents=_contents(case),
        saturations=saturations,
        first=saturations[0].formula if saturations else None,
        contacts=from_contacts(case, against, gas),
        atmosphere=gas.name if gas else None,
        gaps=(made.reason,) if isinstance(made, Gap) else (),
    )


def _sources(case: Case, made: Energy | Gap) -> tuple[Source, ...]:
    """Return what the energy of the dissolved impurity rests on, then its rivals."""
    best = solute_record(case.library, case.host, case.phase, case.impurity)
    records = () if isinstance(best, Gap) else (best.record, *best.rivals)
    rows = tuple(_source(case, Found(r, (), best.how)) for r in records if isinstance(best, Found))
    if isinstance(made, Gap) or made.found[0].record.table != "solubility":
        return rows
    record = made.found[0].record
    ln = _over(case, made, gibbs_energy(case.library, case.impurity, "solid", case.T, case.draws))
    words = (made.found[0].how, record.quality, record.source, record.where)
    return (Source(float(np.median(ln)), record.spread, "pure solid, by its saturation", *words), *rows)


def _ln_gamma(case: Case, made: Energy | Gap) -> Band | None:
    """Return ln gamma against the reference of the first source."""
    record = solute_record(case.library, case.host, case.phase, case.impurity)
    if isinstance(made, Gap):
        return None
    state, formula, share = "solid", case.impurity, 1.0
    if made.found[0].record.table == "sieverts":
        state, formula, share = "gas", f"{case.impurity}2", 0.5
    elif made.found[0].record.table == "activity" and isinstance(record, Found):
        state = REFERENCES[record.record.words["reference"]]
    return band(_over(case, made, gibbs_energy(case.library, formula, state, case.T, case.draws), share))


def _over(case: Case, made: Energy, reference: Energy | Gap, share: float = 1.0) -> Array:
    assert isinstance(reference, Energy)
    return np.asarray((made.value - share * reference.value) / (R * case.T))


def _source(case: Case, found: Found) -> Source:
    record = found.record
    if record.table == "sieverts":
        mass, host = case.masses()
        ratio = float(np.exp(ln_value(record, case.T))) * 1e-6 * host / float(mass[0])
        value = -float(np.log(ratio / np.sqrt(1.01325)))
    else:
        value = float(np.ravel(ln_gamma(found, case.T, Draws.nominal()))[0])
    return Source(
        ln_gamma=value,
        sigma=record.spread,
        reference=REFERENCE_WORDS[record.words.get("reference", "")],
        how=found.how,
        quality=record.quality,
        source=record.source,
        where=record.where,
    )


def _contents(case: Case) -> tuple[AtContent, ...]:
    made = solute(case.library, case.host, case.phase, case.impurity, case.T, case.draws)
    pure = element_energy(case.library, case.impurity, case.T, case.draws)
    if isinstance(made, Gap) or isinstance(pure, Gap):
        return ()
    excess = made.value - pure.value
    rows = []
    for ppm in CONTENTS:
        x = case.fraction(ppm)
        partial = excess + R * case.T * np.log(x)
        model = Dilute(float(np.median(excess)) / (R * case.T))
        rows.append(AtContent(ppm, band(partial), band(-partial), float(mixing(model, 1.0 - x, x, case.T))))
    return tuple(rows)


def _saturations(case: Case) -> tuple[Saturation, ...]:
    metal = {"host": case.host, "phase": case.phase}
    measured = case.library.rows("solubility", **metal, solute=case.impurity)
    formulas = {**dict.fromkeys((r.words["with"], "solid") for r in measured), **substances(case.library)}
    rows = []
    for formula, state in formulas:
        counts = _atoms(formula)
        if state == "gas" or not {case.impurity} <= set(counts) <= {case.impurity, case.host}:
            continue
        made = ln_dissolution(case.library, case.host, case.phase, formula, state, case.T, case.draws)
        if isinstance(made, Energy):
            rows.append(_saturation(case, formula, state, made))
    lowest: dict[str, Saturation] = {}
    for row in sorted(rows, key=lambda row: row.ppm.median):
        lowest.setdefault(row.formula, row)
    return tuple(lowest.values())


def _atoms(phase: str) -> dict[str, float]:
    """Count the atoms of a phase; none where its name is no formula."""
    try:
        return atoms(phase)
    except ValueError:
        return {}


def _saturation(case: Case, formula: str, state: str, made: Energy) -> Saturation:
    ratio = np.exp(np.minimum(made.value / atoms(formula)[case.impurity], 40.0))
    measured = measured_ceiling(
        case.library, case.host, case.phase, case.impurity, formula, case.T, Draws.nominal()
    )
    there = state == "solid" and not isinstance(measured, Gap)
    return Saturation(
        formula=formula,
        ppm=band(case.ppm(ratio)),
        dilute=bool(np.median(ratio) <= DILUTE),
        measured=float(case.ppm(np.exp(measured.ln_x))[0])
        if there and not isinstance(measured, Gap)
        else None,
        conflict=there and not isinstance(measured, Gap) and bool(measured.conflict.any()),
        records=tuple(f.record.quantity for f in made.found),
    )
