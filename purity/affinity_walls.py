"""The content of an impurity at which a metal and each contact of the tables are at rest."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from purity.composition import fraction_from_mass, mass_from_fraction, mass_from_ratio
from purity.constants import P0, R
from purity.database import Gap, Library
from purity.draws import Draws
from purity.driving_force.equilibrium import Equilibrium, Outcome, equilibrium
from purity.driving_force.species import Selection, gibbs, select
from purity.driving_force.substances import atoms, gibbs_energy, molar_mass, solute
from purity.errors import IllPosedError
from purity.result import Band
from purity.scenario import Atmosphere, Material
from purity.uncertainty import band

Array = NDArray[np.float64]

#: Content at which driving forces from contacts are given, mass ppm.
REFERENCE = 1.0
#: mol of a wall compound and of a trace of the wall for one mol of metal.
EXCESS, SHARE = 10.0, 0.01
#: mol of every other element, so that none is absent; more where the solver needs it to certify its answer.
LEAST = (1e-25, 1e-12, 1e-6)
#: ln of the saturation below which a compound is left out of the draws.
FAR = -40.0
#: Share of the draws without a ceiling in the dilute range above which a contact is said to have none.
MOST = 0.5
UNSOLVED: Mapping[Outcome, str] = {
    Outcome.HOST_CONSUMED: "no ceiling: the metal is used up by it",
    Outcome.OUTSIDE_DILUTE: "no ceiling in the dilute range: the metal attacks it",
    Outcome.REFUSED: "the equilibrium of this contact could not be certified",
}


@dataclass(frozen=True, slots=True)
class FromContact:
    """What one contact holds ready.

    Parameters
    ----------
    contact : str
    kind : str
        wall, trace of the wall, or gas.
    ceiling : Band or None
        Mass ppm at equilibrium.
    driving_force : Band or None
        Into the metal at 1 mass ppm, J per mole of impurity.
    forms : tuple of str
        Compounds that appear on the way.
    gap : str or None
        Why there is no ceiling.
    """

    contact: str
    kind: str
    ceiling: Band | None
    driving_force: Band | None
    forms: tuple[str, ...]
    gap: str | None


@dataclass(frozen=True, slots=True)
class Case:
    """One impurity in one metal at one temperature, with the draws to be made."""

    library: Library
    host: str
    phase: str
    impurity: str
    T: float
    draws: Draws

    def masses(self) -> tuple[Array, float]:
        """Return the molar masses of the impurity (1,) and of the host, kg/mol."""
        mass, host = (molar_mass(self.library, e) for e in (self.impurity, self.host))
        assert isinstance(mass, float)
        assert isinstance(host, float)
        return np.array([mass]), host

    def ppm(self, ratio: Array) -> Array:
        """Return mass ppm from moles per mole of host."""
        mass, host = self.masses()
        return np.asarray(1e6 * mass_from_ratio(ratio[np.newaxis], mass, host)[0])

    def fraction(self, ppm: float) -> float:
        """Return the mole fraction at a content in mass ppm."""
        mass, host = self.masses()
        return float(fraction_from_mass(np.array([ppm * 1e-6]), mass, host)[0])


def from_contacts(
    case: Case, against: Iterable[str | Material] | None, gas: Atmosphere | None
) -> tuple[FromContact, ...]:
    """Return one row for each kind of contact, the highest ceiling first.

    Walls of the same compounds are named together. A trace of a wall is taken up only where the wall itself
    holds none of the impurity.

    Parameters
    ----------
    case : Case
    against : iterable of str or Material, optional
        Every wall of the tables where left out.
    gas : Atmosphere or None
        Sets the potentials of oxygen, nitrogen and hydrogen.

    Returns
    -------
    tuple of FromContact
    """
    names = case.library.names("containers", "material") if against is None else tuple(against)
    rows = [] if gas is None else _from_gas(case, gas)
    walls: dict[tuple[tuple[str, ...], str], list[str]] = {}
    for name in names:
        body = case.library.material(name) if isinstance(name, str) else name
        if isinstance(body, Gap):
            rows.append(FromContact(str(name), "wall", None, None, (), body.reason))
            continue
        for key in _holding(case, body):
            walls.setdefault(key, []).append(body.name)
    for (phases, trace), called in walls.items():
        title = ", ".join(called) + (f": {trace}" if trace else "")
        rows.append(_from_wall(case, title, list(phases), trace, gas))
    return tuple(sorted(rows, key=lambda row: -(row.ceiling.median if row.ceiling else -1.0)))


def _holding(case: Case, body: Material) -> list[tuple[tuple[str, ...], str]]:
    """Compounds of a wall that holds the impurity; else those of the wall with each trace that does."""
    phases = tuple(sorted(f for f in body.phases if set(atoms(f)) != {case.host}))
    if any(case.impurity in atoms(f) for f in phases):
        return [(phases, "")]
    return [(phases, f) for f in sorted(body.traces) if case.impurity in atoms(f)]


def _from_gas(case: Case, gas: Atmosphere) -> list[FromContact]:
    levels = _levels(case, gas, {case.impurity})
    made = solute(case.library, case.host, case.phase, case.impurity, case.T, case.draws)
    if case.impurity not in levels or isinstance(made, Gap):
        return []
    return [_row(case, gas.name, "gas", levels[case.impurity] - made.value / (R * case.T), ())]


def _levels(case: Case, gas: Atmosphere, elements: set[str]) -> dict[str, Array]:
    """Potential over RT of the elements that a gas holds: from X2, oxygen else from H2O and H2."""
    bars = {name: given.median * gas.pressure.median / P0 for name, given in gas.fractions.items()}

    def level(name: str) -> Array | None:
        made = gibbs_energy(case.library, name, "gas", case.T, case.draws)
        if isinstance(made, Gap) or bars.get(name, 0.0) <= 0.0:
            return None
        return made.value / (R * case.T) + float(np.log(bars[name]))

    levels = {e: 0.5 * mu for e in elements if (mu := level(f"{e}2")) is not None}
    water, hydrogen = level("H2O"), level("H2")
    if "O" in elements and "O" not in levels and water is not None and hydrogen is not None:
        levels["O"] = water - hydrogen
    return levels


def _from_wall(case: Case, title: str, phases: list[str], trace: str, gas: Atmosphere | None) -> FromContact:
    kind = "trace of the wall" if trace else "wall"
    given = [*phases, trace] if trace else phases
    chosen = select(case.library, case.host, case.phase, [case.impurity], given)
    system = chosen.system
    needed = {f"{case.impurity} in {case.host}", *given}
    if not needed <= set(system.species):
        missing = "; ".join(gap.reason for gap in chosen.gaps if gap.reason)
        return FromContact(title, kind, None, None, (), missing or "no record of it in this metal")
    levels = _levels(case, gas, set(system.elements) - {case.impurity}) if gas else {}
    amounts = {case.host: 1.0} | {f: SHARE if f == trace else EXCESS for f in given}
    try:
        made = _solve(case, chosen, given, amounts, levels)
    except IllPosedError as error:
        return FromContact(title, kind, None, None, (), str(error))
    if isinstance(made, str):
        return FromContact(title, kind, None, None, (), made)
    chosen, answer = made
    system, solved = chosen.system, answer.state == Outcome.SOLVED
    if solved.mean() < 1.0 - MOST:
        return FromContact(title, kind, None, None, (), UNSOLVED[Outcome.OUTSIDE_DILUTE])
    ln_x = answer.ln_activity[system.species.index(f"{case.impurity} in {case.host}"), solved]
    if trace and np.median(ln_x) > np.log(0.9 * SHARE):
        return FromContact(title, kind, None, None, (), "nothing holds it: all of it can dissolve")
    often = answer.present[:, solved].mean(axis=-1)
    forms = tuple(
        phase
        for phase, share in zip(system.phases, often, strict=True)
        if share >= MOST and phase != "metal" and phase not in given
    )
    return _row(case, title, kind, ln_x, forms)


def _solve(
    case: Case,
    chosen: Selection,
    given: list[str],
    amounts: dict[str, float],
    levels: Mapping[str, Array],
) -> tuple[Selection, Equilibrium] | str:
    """Bring wall and metal to rest under 1 bar, so that a gas forms where bubbles could.

    What lies far from forming at the medians is left out of the draws. A reason where the medians have no
    ceiling.
    """
    middle = {e: np.median(mu, keepdims=True) for e, mu in levels.items()}
    for least in LEAST:
        whole = dict.fromkeys(chosen.system.elements, least) | amounts
        first = _rest(case, chosen, Draws.nominal(), whole, middle)
        if first.state[0] != Outcome.REFUSED:
            break
    if (state := Outcome(int(first.state[0]))) != Outcome.SOLVED:
        return UNSOLVED[state]
    far = [
        one.name
        for one, ln_a in zip(chosen.species, first.ln_activity[:, 0], strict=True)
        if ln_a < FAR and one.state not in ("host", "dissolved") and one.formula not in given
    ]
    fewer = select(case.library, case.host, case.phase, [case.impurity], given, exclude=far)
    return fewer, _rest(case, fewer, case.draws, whole, levels)


def _rest(
    case: Case, chosen: Selection, draws: Draws, amounts: dict[str, float], levels: Mapping[str, Array]
) -> Equilibrium:
    system = chosen.system
    formula = [[round(atoms(f).get(e, 0.0)) for e in system.elements] for f in amounts]
    mol = np.array(list(amounts.values()))[:, np.newaxis]
    return equilibrium(
        system,
        gibbs(chosen, case.library, case.T, draws),
        np.broadcast_to(mol, (len(mol), draws.n)),
        held=levels,
        inputs=np.array(formula, dtype=np.int64),
    )


def _row(case: Case, name: str, kind: str, ln_x: Array, forms: tuple[str, ...]) -> FromContact:
    mass, host = case.masses()
    fraction = np.exp(np.minimum(ln_x, np.log(0.999)))
    ppm = np.asarray(1e6 * mass_from_fraction(fraction[np.newaxis], mass, host)[0])
    force = R * case.T * (ln_x - np.log(case.fraction(REFERENCE)))
    return FromContact(name, kind, band(ppm), band(force), forms, None)
