"""Which warnings a scenario calls for.

The rules are the rows of ``data/hazards.csv``: a rule speaks when every column that is filled in is met
by what the choice is made of. Nothing here judges a lot or a material; every text hands the reader on
to the safety data sheets, the local codes and the people licensed for the work.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from typing import Final

from purity.database import Library, Record
from purity.scenario import Atmosphere, Choice, Lot, Material, Package, Pumped, Scenario, Sealed

GENERAL: Final = (
    "These figures are an estimate for ranking choices and planning trials, not a release of material: "
    "confirm the lot by analysis. The cautions below are the usual ones and not complete. The safety data "
    "sheets, the rules of the site, local codes and licensed practice come first."
)

#: Content from which an element counts, kg/kg: 0.1 % by mass, the cut-off above which a mixture is
#: classed by a carcinogenic ingredient in the Globally Harmonized System (UN GHS, table 3.6.1).
COUNTS_FROM: Final = 1.0e-3
#: Mole fraction from which a gas, and mass fraction from which a compound of a wall, counts.
GAS_FROM: Final = 1.0e-3
PHASE_FROM: Final = 1.0e-2
#: Pressure below which a vessel is a vacuum whatever it is filled with, Pa (rough vacuum begins here
#: in the words of the trade; common practice, no source).
VACUUM_BELOW: Final = 1.0e3
#: Mole fraction of oxygen below which air does not keep people alert and above which things burn
#: faster: 19.5 % and 23.5 % (limits of a hazardous atmosphere, US 29 CFR 1910.146).
THIN, RICH = 0.195, 0.235
#: Mole fraction of oxygen from which a gas is oxidising to a container.
OXIDISING_FROM: Final = 1.0e-3

Features = Mapping[str, frozenset[str]]
_COLUMNS: Final = ("hosts", "elements", "gases", "materials", "processes")
#: Contacts that are as hot as the metal; a mould or a water-cooled wall is not.
_HOT_ROLES: Final = ("wall", "support", "wrap")


def cautions(scenario: Scenario, library: Library) -> tuple[str, ...]:
    """Return the warnings of a whole scenario, the general one first, each once.

    Parameters
    ----------
    scenario : Scenario
    library : Library
        Its table of hazards holds the rules.

    Returns
    -------
    tuple of str
        In the order of the rules.
    """
    choices = [choice for step in scenario.steps for choice in step.choices]
    said = [_called(choice, scenario.lot, library) for choice in choices]
    rules = range(len(library.rows("hazards")))
    return (GENERAL, *dict.fromkeys(texts[rule] for rule in rules for texts in said if rule in texts))


def for_choice(choice: Choice, lot: Lot, library: Library) -> tuple[str, ...]:
    """Return the warnings that one choice calls for, without the general one.

    Parameters
    ----------
    choice : Choice
    lot : Lot
    library : Library

    Returns
    -------
    tuple of str
    """
    return tuple(dict.fromkeys(_called(choice, lot, library).values()))


def features(choice: Choice, lot: Lot, library: Library) -> Features:
    """Return what a choice is made of, in the words that the rules use.

    Returns
    -------
    mapping of str to frozenset of str
        For each column of the rules: hosts, elements, gases, materials, processes.
    """
    materials = _materials(choice, library)
    return {
        "hosts": frozenset({lot.host}),
        "elements": frozenset(_elements(choice, lot, library)),
        "gases": frozenset(_gases(choice)),
        "materials": frozenset({*_material_words(choice, materials), *_by_limit(choice, materials)}),
        "processes": frozenset({choice.process, *((choice.stirring,) if choice.stirring else ())}),
    }


def _called(choice: Choice, lot: Lot, library: Library) -> dict[int, str]:
    """Return the texts of the rules that a choice calls for, by the place of the rule in the table."""
    seen = features(choice, lot, library)
    hottest = _hottest(choice)
    bodies = _by_limit(choice, _materials(choice, library))
    return {
        place: _text(rule, bodies)
        for place, rule in enumerate(library.rows("hazards"))
        if _speaks(rule, seen, hottest)
    }


def _text(rule: Record, bodies: Mapping[str, list[str]]) -> str:
    """Return caution and advice; a rule on service limits names the bodies first."""
    named = dict.fromkeys(bodies.get(rule.words["materials"], ()))
    start = f"{', '.join(named)}: " if named else ""
    return f"{start}{rule.words['caution']} {rule.words['consult']}"


def _hottest(choice: Choice) -> float:
    return max((given.high for _, given in choice.profile), default=0.0)


def _speaks(rule: Record, seen: Features, hottest: float) -> bool:
    if hottest < rule.fields.get("T_min_K", 0.0):
        return False
    return all(_met(rule.words[column], seen[column]) for column in _COLUMNS)


def _met(cell: str, words: frozenset[str]) -> bool:
    """Say whether one of the alternatives of a cell is met; names joined by `` + `` must all be there."""
    return not cell or any(set(name.split(" + ")) <= words for name in cell.split("|"))


def _elements(choice: Choice, lot: Lot, library: Library) -> Iterable[str]:
    yield lot.host
    for element, certified in lot.certificate.items():
        if certified.given.high >= COUNTS_FROM:
            yield element
    last = choice.furnace.last_charge if choice.furnace else None
    if last:
        words = {word for found in re.findall(r"\b[A-Za-z]+\b", last) for word in (found, found.casefold())}
        for row in library.rows("elements"):
            if {row.words["element"], row.words["name"].casefold()} & words:
                yield row.words["element"]


def _atmospheres(choice: Choice) -> list[Atmosphere]:
    return [c.body for c in choice.contacts if c.role == "gas" and isinstance(c.body, Atmosphere)]


def _is_vacuum(gas: Atmosphere) -> bool:
    return isinstance(gas.supply, Pumped) or gas.pressure.high < VACUUM_BELOW


def _share(gas: Atmosphere, species: str) -> float:
    return gas.fractions[species].high if species in gas.fractions else 0.0


def _gases(choice: Choice) -> Iterable[str]:
    for gas in _atmospheres(choice):
        if isinstance(gas.supply, Sealed):
            yield "sealed"
        if _is_vacuum(gas):
            yield "vacuum"
            continue
        yield from (name for name in gas.fractions if _share(gas, name) >= GAS_FROM)
        oxygen = _share(gas, "O2")
        if oxygen < THIN:
            yield "without oxygen"
        if oxygen > RICH:
            yield "rich in oxygen"


def _materials(choice: Choice, library: Library) -> list[tuple[str, Material]]:
    """Return every solid of a choice with its role, the hot zone included."""
    found = [(str(c.role), c.body) for c in choice.contacts if isinstance(c.body, Material)]
    zone = choice.furnace.hot_zone if choice.furnace else None
    if zone:
        material = library.material(zone)
        if isinstance(material, Material):
            found.append(("hot zone", material))
    return found


def _material_words(choice: Choice, materials: list[tuple[str, Material]]) -> Iterable[str]:
    for _, material in materials:
        yield from (formula for formula, share in material.phases.items() if share >= PHASE_FROM)
        yield material.name
        yield material.origin.partition(":")[2]
    for contact in choice.contacts:
        if isinstance(contact.body, Package):
            yield from (contact.body.name, contact.body.barrier)


def _by_limit(choice: Choice, materials: list[tuple[str, Material]]) -> dict[str, list[str]]:
    """Return the bodies whose service temperature is passed or unknown, by the word of the rules."""
    condition = _condition(choice)
    found: dict[str, list[str]] = {}
    for role, material in materials:
        limit = material.service.get(condition)
        if role not in _HOT_ROLES or (limit is not None and _hottest(choice) <= limit):
            continue
        word = "no service limit known" if limit is None else "above its service limit"
        found.setdefault(word, []).append(material.name)
    return found


def _condition(choice: Choice) -> str:
    """Return the column of service temperatures that applies: vacuum, oxidising or inert."""
    gases = _atmospheres(choice)
    if any(_is_vacuum(gas) for gas in gases):
        return "vacuum"
    if any(_share(gas, "O2") >= OXIDISING_FROM for gas in gases):
        return "oxidising"
    return "inert"


__all__ = ["GENERAL", "cautions", "features", "for_choice"]
