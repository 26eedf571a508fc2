"""Baths drawn far beyond any melt: every stage is solved, contents stay positive, ledgers close.

Contents 1e-12 to 1e-2, exchanges over six decades, conductances over six, ln K of standard deviation
4 sqrt(sum nu^2), stages of 1 to 1e6 s.
"""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from purity.kinetics import arrow, flux_newton, stage
from purity.kinetics.bath import Case, integrate, two_roots
from purity.kinetics.exposure import Carrier, Curve, Exposure, Skin
from purity.kinetics.schedule import Schedule
from purity.kinetics.sdirk import Change, Task, euler

Array = NDArray[np.float64]
DRAWS = 500
ELEMENTS = ("Al", "Si", "O", "H", "C", "N")
KNOTS = np.array([1400.0, 1600.0])

ALUMINA = ({"Al": 2, "O": 3}, "wall")
SILICA = ({"Si": 1, "O": 2}, "wall")
MULLITE = ({"Al": 6, "Si": 2, "O": 13}, "wall")
CARBIDE = ({"Al": 4, "C": 3}, "wall")
MONOXIDE = ({"C": 1, "O": 1}, "gas")
GAS = (
    ({"O": 2}, "gas"),
    ({"H": 2, "O": 1}, "gas"),
    ({"H": 2}, "leaves"),
    MONOXIDE,
    ({"N": 2}, "gas"),
    ({"Al": 1}, "leaves"),
)
FAMILIES = {
    "one wall": (((ALUMINA,),), ()),
    "gas": ((GAS,), ()),
    "two walls": (((ALUMINA,), (SILICA,)), ()),
    "three units that share three elements": (((ALUMINA,), (CARBIDE,), (MONOXIDE,)), ()),
    "three walls and gas": (((ALUMINA,), (SILICA,), (MULLITE,), GAS), ()),
    "two walls, gas and two skins": (((ALUMINA,), (SILICA,), GAS), (ALUMINA[0], SILICA[0])),
}


def atoms(nu: dict[str, int]) -> Array:
    return np.array([nu.get(name, 0) for name in ELEMENTS], dtype=float)


def wild(name: str, draws: int, tilt: float = 0.0) -> Case:
    contacts, skins = FAMILIES[name]
    rng = np.random.default_rng(sum(map(ord, name)))

    def ln_k(nu: Array) -> Curve:
        spread = 4 * np.sqrt((nu**2).sum()) * rng.standard_normal(draws)
        base = nu.sum() * np.log(1e-6) + spread
        return Curve(KNOTS, np.stack([base - tilt * nu.sum(), base]))

    def even(low: float, high: float) -> Array:
        return rng.uniform(np.log(low), np.log(high), draws)

    exposures = []
    for number, units in enumerate(contacts):
        carriers = []
        for nu, kind in units:
            activity = {"wall": np.ones(1), "leaves": np.zeros(1)}.get(kind, np.exp(even(1e-9, 1e-3)))
            conductance = None if kind == "wall" else Curve(KNOTS[:1], even(1e-3, 1e3)[None])
            carriers.append(Carrier(str(nu), atoms(nu), ln_k(atoms(nu)), activity, conductance))
        held = [Skin(str(nu), atoms(nu), ln_k(atoms(nu))) for nu in skins] if not number else []
        exchange = Curve(KNOTS[:1], rng.uniform(np.log(1e-7), np.log(1e-1), (6, 1, draws)))
        area = 4e-4 * np.exp(even(0.1, 3.0))
        exposures.append(Exposure(str(number), area, exchange, tuple(carriers), tuple(held)))
    total = np.exp(rng.uniform(np.log(1e-12), np.log(1e-2), (6, draws)))
    course = Schedule(np.array([0.0, 1200.0, 3600.0]), np.array([1400.0, 1600.0, 1600.0]))
    return Case(total, np.array([1e5]), np.ones(1), course, tuple(exposures))


def task(case: Case, seconds: Array) -> Task:
    bath = stage.lay_out(case.exposures, case.density, case.amount, *case.total.shape)
    blocks = flux_newton.blocks(bath)
    rates, _ = stage.coefficients(bath, 1600.0)
    total = case.total[bath.reactive]
    points = [flux_newton.start(block, rates, total) for block in blocks]
    plans = [arrow.plan(block) for block in blocks]
    left = np.full((len(bath.rows), total.shape[-1]), np.inf)
    return Task(bath, blocks, plans, rates, rates, total, seconds, left, points, 1e-6)


def moved(job: Task, rng: np.random.Generator) -> Task:
    """The same stage from points of linearisation e^5 away."""
    points = []
    for block, point in zip(job.blocks, job.points, strict=True):
        y = point.y + 5 * rng.standard_normal(point.y.shape)
        rows = block.rows[block.film]
        p = flux_newton.weigh(block.nu[block.film], y) - job.first.ln_k[rows]
        activity = job.first.activity[rows]
        supplied = np.log(np.where(activity > 0, activity, 1.0))
        p = np.where(activity > 0, np.minimum(p, supplied), p)
        points.append(flux_newton.Point(y, p, point.flux, point.bound))
    return Task(**{name: getattr(job, name) for name in Task.__slots__} | {"points": points})


def worst(change: Change, start: Array) -> Array:
    scale = np.maximum(change.total, start).max(axis=0)
    return np.asarray(np.abs(start + change.gained.sum(axis=0) - change.total).max(axis=0) / scale)


@pytest.mark.parametrize("name", FAMILIES)
def test_every_cold_stage_is_solved(name: str) -> None:
    case = wild(name, DRAWS)
    rng = np.random.default_rng(5)
    job = task(case, np.exp(rng.uniform(0.0, np.log(1e6), DRAWS)))
    done = euler(job)
    assert done.ok.all()
    assert np.isfinite(done.x).all()
    assert worst(done, job.total).max() < 1e-10
    if two_roots(job.bath):
        return
    again = euler(moved(job, rng))
    scale = np.maximum(done.total, job.total).max(axis=0)
    both = done.ok & again.ok
    assert both.mean() > 0.998
    assert (np.abs(done.total - again.total).max(axis=0) / scale)[both].max() < 1e-6


@pytest.mark.parametrize("name", FAMILIES)
def test_every_course_is_solved(name: str) -> None:
    """A ramp and a hold; draws that leave the dilute range stop there, the others reach the end."""
    case = wild(name, DRAWS, tilt=1.0)
    path = integrate(case, nodes=8)
    assert path.solved.all()
    assert np.isfinite(path.x).all()
    assert path.x.min() >= 0
    assert path.suspended.min() >= 0
    change = np.abs(path.ledger.sum(axis=0) - (path.total - case.total)).max(axis=0)
    assert (change / np.maximum(path.total, case.total).max(axis=0)).max() < 1e-12
    assert path.attacked.mean() < 0.5
