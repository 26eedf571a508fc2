"""What a solid piece lies on or is wrapped in: diffusion out of the spots that truly touch.

A compound or metal under the piece holds the metal's surface at its ceiling over the touching area only;
what enters is that of a half-space, A 2 x_s sqrt(D t / pi) (Crank 1975, eq. 3.13 ff.), and no more than
fills the piece to the ceiling. Elements of one compound keep its ratio to the one that moves slowest.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from purity.contacts.setting import Exposed, Setting, diffusivity, dissolution
from purity.database import Found, Gap
from purity.driving_force.pure import atoms
from purity.kinetics.arrhenius import curve_integral
from purity.kinetics.exposure import Curve, Exposure
from purity.kinetics.schedule import Schedule, segments
from purity.scenario import Contact, Given, Material

Array = NDArray[np.float64]

#: Share of its area in which a foil touches what it wraps, 90 % band (common practice, no source).
TOUCH = (0.02 / 3.0, 0.02 * 3.0)


def support(contact: Contact, setting: Setting) -> Exposed:
    """Return what a solid takes from what it touches.

    Parameters
    ----------
    contact : Contact
        With a :class:`Material` as its body and the touching area as its area.
    setting : Setting

    Returns
    -------
    Exposed
        With `gain` set and no carriers.
    """
    material = contact.body
    assert isinstance(material, Material)
    touch = _touching(contact)
    area = setting.sample(contact.area) * (1.0 if touch is None else setting.sample(touch))
    gain = np.zeros((len(setting.impurities), setting.draws.n))
    records: dict[str, tuple[Found, ...]] = {}
    gaps: dict[str, tuple[Gap, ...]] = {}
    for formula in material.phases:
        counts = {e: n for e, n in atoms(formula).items() if e != setting.host}
        if not counts or not set(counts) <= set(setting.impurities):
            continue
        energy = dissolution(setting, formula, "solid")
        depths = {element: _depth(setting, element) for element in counts}
        missing = [d for d in (energy, *depths.values()) if isinstance(d, Gap)]
        if isinstance(energy, Gap) or missing:
            for element in counts:
                gaps[element] = (*gaps.get(element, ()), *missing)
            continue
        total = sum(counts.values())
        top = np.minimum(1.0, np.exp(energy.value.max(axis=0) / total))
        units = np.full(setting.draws.n, np.inf)
        for element, count in counts.items():
            depth = depths[element]
            assert not isinstance(depth, Gap)
            entered = np.minimum(area * depth[0] * setting.molar_density / setting.amount, 1.0) * top
            units = np.minimum(units, entered / count)
        for element, count in counts.items():
            depth = depths[element]
            assert not isinstance(depth, Gap)
            gain[setting.impurities.index(element)] += count * units
            records[element] = (*records.get(element, ()), *energy.found, depth[1])
    rate = Curve(setting.T[:1], np.zeros((len(setting.impurities), 1, 1)))
    exposure = Exposure(contact.name, area, rate, ())
    return Exposed(exposure, gain, {}, records, (contact.area, *(() if touch is None else (touch,))), gaps)


def _touching(contact: Contact) -> Given | None:
    """Share of a wrapped surface that truly touches: assumed; the area of a support is that already."""
    return (
        Given(f"{contact.area.key}/touching", "lognormal", *TOUCH, True) if contact.role == "wrap" else None
    )


def _depth(setting: Setting, element: str) -> tuple[Array, Found] | Gap:
    """Return 2 sqrt(int D dt / pi), m, over the whole step, (N,)."""
    found = diffusivity(setting, element)
    if isinstance(found, Gap):
        return found
    curve = Curve(setting.T, found[0])
    profile = setting.choice.profile
    time = np.stack(np.broadcast_arrays(*(setting.sample(t) for t, _ in profile)))
    T = np.stack(np.broadcast_arrays(*(setting.sample(temperature) for _, temperature in profile)))
    parts = [curve_integral(curve, s.T1, s.T2, s.duration) for s in segments(Schedule(time, T))]
    return np.asarray(2.0 * np.sqrt(sum(parts, np.zeros(1)) / np.pi)), found[1]
