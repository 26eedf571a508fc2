"""A stirred bath: closed forms, stages solved elsewhere, an independent integrator, balances.

Constants are invented round numbers of the order met in melts (host 1e5 mol/m3, 4e-4 m2 of contact per
mol); values marked "independent integrator" come from LSODA on the same equations, with the surface solved
as a scalar root by a solver that shares no code with the package.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from purity.kinetics import arrow, flux_newton
from purity.kinetics.bath import Case, Path, integrate
from purity.kinetics.elasticity import elasticities, shares
from purity.kinetics.exposure import Carrier, Curve, Exposure, Skin, scale
from purity.kinetics.refine import refined
from purity.kinetics.schedule import Schedule, hold
from purity.kinetics.sdirk import Change, Task, euler
from purity.kinetics.stage import coefficients, lay_out

Array = NDArray[np.float64]
DENSITY, REACH, T = 1e5, 4e-4, 1500.0


def flat(ln: float) -> Curve:
    return Curve(np.array([T]), np.array([[ln]]))


def between(cold: float, hot: float) -> Curve:
    """ln y at 1,400 K and 1,600 K."""
    return Curve(np.array([1400.0, 1600.0]), np.array([[cold], [hot]]))


def unit(nu: tuple[float, ...], ln_k: float | Curve, a: float = 1.0, g: float | None = None, **more: object):
    curve = ln_k if isinstance(ln_k, Curve) else flat(ln_k)
    conductance = None if g is None else flat(np.log(g))
    return Carrier("unit", np.array(nu), curve, np.array([a]), conductance, **more)  # type: ignore[arg-type]


def wall(k: tuple[float, ...], *carriers: Carrier, area: float = 1.0, skins: tuple[Skin, ...] = ()):
    exchange = Curve(np.array([T]), np.log(np.array(k))[:, None, None])
    return Exposure("contact", np.array([REACH * area]), exchange, carriers, skins)


def case(start: tuple[float, ...], seconds: float, *exposures: Exposure) -> Case:
    return Case(
        np.array(start)[:, None], np.array([DENSITY]), np.array([1.0]), hold(T, seconds), tuple(exposures)
    )


def one_step(start: tuple[float, ...], seconds: float, *exposures: Exposure) -> Change:
    """One step of backward Euler."""
    total = np.array(start)[:, None]
    bath = lay_out(exposures, np.array([DENSITY]), np.array([1.0]), *total.shape)
    blocks = flux_newton.blocks(bath)
    rates, _ = coefficients(bath, T)
    total = total[bath.reactive]
    points = [flux_newton.start(block, rates, total) for block in blocks]
    plans = [arrow.plan(block) for block in blocks]
    left = np.full((len(bath.rows), 1), np.inf)
    return euler(Task(bath, blocks, plans, rates, rates, total, np.array([seconds]), left, points, 1e-7))


def balance(path: Path, start: Array) -> float:
    """Largest difference between ledger and change, relative to the largest content of the draw."""
    change = np.abs(path.ledger.sum(axis=0) - (path.total - start)).max(axis=0)
    return float((change / np.maximum(path.total, start).max(axis=0)).max())


@pytest.mark.parametrize(
    ("g", "surface", "flux"),
    [
        (0.01, 1.0666662525e-6, None),
        (1.0, 7.6645284213e-6, 9.9967926319e-6),
        (100.0, 3.1241142758e-4, 4.6711714138e-4),
    ],
)
def test_oxygen_film_is_the_quadratic_of_two_films(g: float, surface: float, flux: float | None) -> None:
    """x_s = 2X/(m + sqrt(m^2 + 8 g X/K)), X = m x + 2 g a: closed form (Amano, Ito, Sakao 1976)."""
    x, a, K, m = 1e-6, 1e-5, np.exp(-4.0), 3.0
    X = m * x + 2 * g * a
    assert 2 * X / (m + np.sqrt(m * m + 8 * g * X / K)) == pytest.approx(surface, rel=1e-9)
    done = one_step((x,), 1e-9, wall((3e-5,), unit((2.0,), -4.0, a, g)))
    assert done.x[1, 0, 0] == pytest.approx(surface, rel=1e-8)
    if flux is not None:
        assert done.flux[0, 0] == pytest.approx(flux, rel=1e-8)


def test_water_in_and_hydrogen_out() -> None:
    """Two carriers share hydrogen at one surface, oxygen held; value from a scalar root."""
    gas = wall((3e-5, 1e10), unit((2.0, 1.0), -14.0, 3e-6, 1.0), unit((2.0, 0.0), -16.0, 0.0, 3.0))
    done = one_step((3e-6, 1e-5), 1e-12, gas)
    assert done.x[1, 0, 0] == pytest.approx(5.0302468832e-7, rel=1e-8)
    assert done.flux[:, 0] == pytest.approx([2.999997e-6, -6.745460e-6], rel=1e-6)


def test_water_leaves_the_hydrogen_that_supply_and_release_allow() -> None:
    """Without melt transfer, x_H = sqrt(K_H2 g_w a_w / g_H2): closed form where water is one-way."""
    gas = wall((1e-12, 1e10), unit((2.0, 1.0), -14.0, 3e-6, 1.0), unit((2.0, 0.0), -16.0, 0.0, 3.0))
    done = one_step((3e-6, 1e-5), 1e-12, gas)
    assert done.x[1, 0, 0] == pytest.approx(3.354626e-7, rel=1e-5)


def test_oxide_wall_in_one_implicit_step() -> None:
    """Surface, bath and flux from a scalar root in the flux."""
    done = one_step((1e-8, 1e-6), 1000.0, wall((3e-5, 5e-5), unit((2.0, 3.0), -60.0)))
    assert done.x[0, :, 0] == pytest.approx([2.712977322e-6, 5.054465983e-6], rel=1e-8)
    assert done.x[1, :, 0] == pytest.approx([4.9654584237e-6, 7.0816989746e-6], rel=1e-8)
    assert done.flux[0, 0] == pytest.approx(3.3787216525e-6, rel=1e-8)


TWO_WALLS = (
    wall((3e-5, 3e-5, 5e-5), unit((2.0, 0.0, 3.0), -60.0)),
    wall((3e-5, 3e-5, 5e-5), unit((0.0, 1.0, 2.0), -36.0), area=0.25),
)
TWO_START = (1e-8, 1e-7, 1e-6)


def test_two_oxide_walls_in_one_implicit_step() -> None:
    done = one_step(TWO_START, 1e4, *TWO_WALLS)
    expected = [3.0511232477e-6, 1.8503266492e-6, 9.0623381699e-6]
    assert done.x[0, :, 0] == pytest.approx(expected, rel=1e-8)


@pytest.mark.parametrize(("nodes", "tolerance"), [(16, 8e-4), (32, 1.8e-4), (512, 3e-6)])
def test_two_oxide_walls_over_an_hour(nodes: int, tolerance: float) -> None:
    """Independent integrator."""
    path = integrate(case(TWO_START, 3600.0, *TWO_WALLS), nodes=nodes)
    assert path.x[:, 0] == pytest.approx([3.42911e-6, 1.69560e-6, 9.31986e-6], rel=tolerance)


def test_two_oxide_walls_at_rest_obey_both_laws() -> None:
    start = np.array(TWO_START)[:, None]
    path = integrate(case(TWO_START, 3e9, *TWO_WALLS))
    assert path.x[:, 0] == pytest.approx([2.9826767165e-6, 2.3441541812e-6, 9.9473234372e-6], rel=1e-8)
    ln = np.log(path.x[:, 0])
    assert 2 * ln[0] + 3 * ln[2] == pytest.approx(-60.0, abs=1e-10)
    assert ln[1] + 2 * ln[2] == pytest.approx(-36.0, abs=1e-10)
    assert balance(path, start) < 1e-12


def test_rest_does_not_depend_on_the_start() -> None:
    """Starts that differ by what the walls could have given end alike."""
    shifted = (TWO_START[0] + 2e-7, TWO_START[1] + 1e-7, TWO_START[2] + 5e-7)
    first = integrate(case(TWO_START, 3e9, *TWO_WALLS)).x
    assert integrate(case(shifted, 3e9, *TWO_WALLS)).x == pytest.approx(first, rel=1e-9)


ALUMINA_GRAPHITE = (
    wall((3e-5, 4e-5, 5e-5), unit((2.0, 0.0, 3.0), -60.0)),
    wall((3e-5, 4e-5, 5e-5), unit((0.0, 1.0, 0.0), -10.0), area=0.2),
    wall((3e-5, 4e-5, 5e-5), unit((0.0, 1.0, 1.0), -18.0, 1e-6, 1.0), area=0.3),
)


def test_oxide_and_graphite_with_carbon_monoxide_leaving() -> None:
    """Independent integrator; ledgers keep the atoms of each unit together."""
    path = integrate(case((1e-8, 1e-6, 1e-5), 3600.0, *ALUMINA_GRAPHITE), nodes=512)
    assert path.x[:, 0] == pytest.approx([5.31899e-6, 2.363323e-5, 4.85978e-6], rel=4e-6)
    oxide, graphite, gas = path.ledger[..., 0]
    assert oxide == pytest.approx([5.30899e-6, 0.0, 7.96349e-6], rel=3e-6)
    assert oxide[0] / 2 == pytest.approx(oxide[2] / 3, rel=1e-12)
    assert graphite == pytest.approx([0.0, 3.573694e-5, 0.0], rel=3e-6)
    assert gas == pytest.approx([0.0, -1.310371e-5, -1.310371e-5], rel=3e-6)
    assert gas[1] == gas[2]


def test_skin_takes_what_exceeds_saturation() -> None:
    """Closed: 2 ln(1e-4 - 2 S) + 3 ln(1e-4 - 3 S) = -55."""
    skin = Skin("M2O3", np.array([2.0, 3.0]), flat(-55.0))
    path = integrate(case((1e-4, 1e-4), 100.0, wall((3e-5, 5e-5), skins=(skin,))))
    assert path.x[:, 0] == pytest.approx([3.9595779096e-5, 9.3936686444e-6], rel=1e-8)
    assert path.skins["M2O3"] == pytest.approx(3.0202110452e-5, rel=1e-8)
    assert path.suspended[:, 0] == pytest.approx([2 * 3.0202110452e-5, 3 * 3.0202110452e-5], rel=1e-8)


def test_skin_dissolves_again() -> None:
    """Cooled below saturation and heated above it (5 ln 1e-4 = -46.05): nothing is left suspended."""
    skin = Skin("M2O3", np.array([2.0, 3.0]), between(-55.0, -46.0))
    shut = wall((3e-5, 5e-5), skins=(skin,))
    course = Schedule(np.array([0.0, 600.0, 1200.0]), np.array([1600.0, 1400.0, 1600.0]))
    path = integrate(replace(case((1e-4, 1e-4), 1.0, shut), schedule=course), history=True)
    assert np.all(path.suspended == 0.0)
    assert path.history == pytest.approx(1e-4, rel=1e-15)
    half = Schedule(course.time[:2], course.T[:2])
    assert integrate(replace(case((1e-4, 1e-4), 1.0, shut), schedule=half)).suspended.min() > 5e-5


@pytest.mark.parametrize(
    ("held", "nodes", "tolerance"), [(8e-6, 16, 9.5e-4), (8e-6, 32, 2.3e-4), (2e-5, 32, 2.3e-4)]
)
def test_inventory_that_lasts_changes_nothing(held: float, nodes: int, tolerance: float) -> None:
    """x = x* + (x0 - x*) e^(-k A t/V): closed form."""
    trace = unit((1.0,), np.log(1e-5), inventory=np.array([held]))
    path = integrate(case((1e-9,), 1000.0, wall((3e-5,), trace)), nodes=nodes)
    assert path.x[0, 0] == pytest.approx(6.9883590751e-6, rel=tolerance)
    assert path.x[0, 0] + path.left[0, 0] == pytest.approx(1e-9 + held, rel=1e-14)


def test_inventory_that_is_used_up() -> None:
    trace = unit((1.0,), np.log(1e-5), inventory=np.array([1e-6]))
    path = integrate(case((1e-9,), 1000.0, wall((3e-5,), trace)))
    assert path.left[0, 0] == 0.0
    assert path.x[0, 0] == pytest.approx(1.001e-6, rel=1e-14)


def test_residue_that_dissolves_at_once_is_all_delivered() -> None:
    """An inventory whose ceiling is far away gives all it holds, and no more."""
    residue = unit((1.0, 1.0), -2.0, inventory=np.array([3e-7]))
    path = integrate(case((0.0, 1e-7), 600.0, wall((3e-5, 3e-5), residue)))
    assert path.left[0, 0] == 0.0
    assert path.x[:, 0] == pytest.approx([3e-7, 4e-7], rel=1e-12)


RAMP = Schedule(np.array([0.0, 1200.0, 3600.0]), np.array([1400.0, 1600.0, 1600.0]))


def spread(draws: int, seed: int = 3) -> Case:
    """Six impurities between an oxide wall, graphite and moist gas; constants vary between draws."""
    rng = np.random.default_rng(seed)

    def curve(cold: float, hot: float, sd: float) -> Curve:
        shift = sd * rng.standard_normal(draws)
        return Curve(np.array([1400.0, 1600.0]), np.array([[cold], [hot]]) + shift)

    def exchange() -> Curve:
        return Curve(np.array([T]), np.log(3e-5) + 0.3 * rng.standard_normal((6, 1, draws)))

    def nu(**atoms: float) -> Array:
        return np.array([atoms.get(name, 0.0) for name in ("Al", "C", "O", "H", "Zn", "Fe")])

    oxide = Carrier("oxide", nu(Al=2, O=3), curve(-66.0, -58.0, 2.0), np.ones(1))
    iron = Carrier("Fe", nu(Fe=1), curve(-13.0, -12.0, 1.0), np.ones(1))
    graphite = Carrier("C", nu(C=1), curve(-10.0, -9.5, 0.3), np.ones(1))
    gas = (
        Carrier("O2", nu(O=2), curve(-14.0, -13.0, 1.0), np.array([1e-6]), curve(-1.0, -1.0, 0.5)),
        Carrier("H2O", nu(H=2, O=1), curve(-14.0, -13.0, 1.0), np.array([3e-6]), curve(-1.0, -1.0, 0.5)),
        Carrier("H2", nu(H=2), curve(-16.0, -15.5, 0.5), np.zeros(1), curve(0.0, 0.0, 0.5)),
        Carrier("CO", nu(C=1, O=1), curve(-18.0, -17.0, 1.0), np.array([1e-6]), curve(-1.0, -1.0, 0.5)),
        Carrier("Zn", nu(Zn=1), curve(2.0, 2.5, 0.5), np.zeros(1), curve(-2.0, -1.5, 0.5)),
    )
    exposures = (
        Exposure("wall", np.array([REACH]), exchange(), (oxide, iron)),
        Exposure("graphite", np.array([REACH / 8]), exchange(), (graphite,)),
        Exposure("gas", np.array([REACH / 3]), exchange(), gas),
    )
    start = np.array([1e-6, 1e-6, 1e-5, 1e-7, 1e-6, 2e-6])[:, None]
    total = start * np.exp(0.3 * rng.standard_normal((6, draws)))
    return Case(total, np.array([DENSITY]), np.array([1.0]), RAMP, exposures)


def test_one_unknown_a_contact_gives_the_same_as_all_fluxes(monkeypatch: pytest.MonkeyPatch) -> None:
    bath = spread(100)
    tied = integrate(bath, nodes=16, tolerance=1e-6)
    layout = lay_out(bath.exposures, bath.density, bath.amount, *bath.total.shape)
    assert any(arrow.plan(block) is not None for block in flux_newton.blocks(layout))
    monkeypatch.setattr(arrow, "plan", lambda block: None)
    general = integrate(bath, nodes=16, tolerance=1e-6)
    assert tied.x == pytest.approx(general.x, rel=1e-9)


def test_draws_do_not_see_each_other() -> None:
    bath = spread(8)
    together = integrate(bath, nodes=16).x
    alone = [integrate(bath.take(np.array([n])), nodes=16).x[:, 0] for n in range(8)]
    assert together == pytest.approx(np.stack(alone, axis=1), rel=1e-12)


def test_linear_bath_is_its_exponential() -> None:
    """dx/dt = sum kappa (c* - x), kappa = k A/V in series with the gas: closed form in a hold."""
    zinc = unit((1.0,), -5.0, 2e-4, 3.0)
    iron = unit((1.0,), np.log(2e-6))
    bath = case((1e-6,), 900.0, wall((3e-5,), zinc), wall((5e-5,), iron, area=0.5))
    path = integrate(bath)
    m = DENSITY * 3e-5
    kappa = np.array([REACH * m * 3.0 * np.exp(5.0) / (m + 3.0 * np.exp(5.0)), 0.5 * REACH * DENSITY * 5e-5])
    ceilings = np.array([2e-4 * np.exp(-5.0), 2e-6])
    K = kappa.sum()
    rest = (kappa * ceilings).sum() / K
    expected = rest + (1e-6 - rest) * np.exp(-K * 900.0)
    assert path.x[0, 0] == pytest.approx(expected, rel=1e-12)
    gained = kappa * ((ceilings - rest) * 900.0 + (1e-6 - rest) * np.expm1(-K * 900.0) / K)
    assert path.ledger[:, 0, 0] == pytest.approx(gained, rel=1e-11)
    assert path.keep is not None
    assert path.gain is not None
    assert path.keep[0, 0] == pytest.approx(np.exp(-K * 900.0), rel=1e-12)
    assert path.keep * 1e-6 + path.gain == pytest.approx(path.x, rel=1e-12)


def test_linear_ramp_stays_an_affine_map() -> None:
    """keep and gain of one start give the end of another."""
    zinc = Carrier("Zn", np.ones(1), between(-8.0, -2.0), np.array([1e-5]), between(-3.0, 9.0))
    bath = replace(case((1e-6,), 1.0, wall((1e-2,), zinc)), schedule=RAMP)
    path = integrate(bath)
    assert path.keep is not None
    assert path.gain is not None
    other = integrate(replace(bath, total=np.array([[7e-5]])))
    assert path.keep * 7e-5 + path.gain == pytest.approx(other.x, rel=1e-12)
    assert balance(other, np.array([[7e-5]])) < 1e-13


def surface(x: Array, nu: Array, m: Array, K: float, a: float, g: float) -> float:
    """Flux of one unit through a surface, as a bracketed scalar root; g infinite for a wall."""
    acts = nu > 0

    def law(R: float) -> float:
        x_s = x[acts] + nu[acts] * R / m[acts]
        return float(np.prod(x_s ** nu[acts]) / K - (a - R / g))

    low = -float(np.min(m[acts] * x[acts] / nu[acts]))
    high = g * a if np.isfinite(g) else float(np.max(m[acts] / nu[acts]))
    return float(brentq(law, low, high, xtol=1e-30, rtol=1e-14))


SYSTEMS = {
    "oxide wall, graphite, CO leaving": (
        ((2.0, 0.0, 3.0), (-66.0, -58.0), 1.0, None, 1.0),
        ((0.0, 1.0, 0.0), (-10.5, -10.0), 1.0, None, 0.2),
        ((0.0, 1.0, 1.0), (-18.5, -17.5), 1e-6, 1.0, 0.3),
    ),
    "silica wall, SiO leaving, vacuum": (
        ((1.0, 0.0, 2.0), (-40.0, -35.0), 1.0, None, 1.0),
        ((1.0, 0.0, 1.0), (-24.0, -21.0), 0.0, 0.05, 0.4),
    ),
    "magnesia wall, oxygen supplied": (
        ((1.0, 0.0, 1.0), (-34.0, -30.0), 1.0, None, 1.0),
        ((0.0, 0.0, 2.0), (-14.0, -12.0), 2e-6, 0.5, 0.3),
    ),
}


@pytest.mark.parametrize("name", SYSTEMS)
def test_against_an_independent_integrator(name: str) -> None:
    """LSODA at rtol 1e-9; each contact has one unit, so that its surface is a scalar root."""
    k = np.array([3e-5, 4e-5, 5e-5])
    start = np.array([1e-7, 1e-6, 1e-5])
    exposures = [
        wall(tuple(k), unit(nu, between(*ln_k), a, g), area=area) for nu, ln_k, a, g, area in SYSTEMS[name]
    ]

    def rates(t: float, x: Array) -> Array:
        temperature = np.interp(t, RAMP.time, RAMP.T)
        part = (1 / temperature - 1 / 1400.0) / (1 / 1600.0 - 1 / 1400.0)
        total = np.zeros(3)
        for nu, (cold, hot), a, g, area in SYSTEMS[name]:
            K = np.exp(cold + part * (hot - cold))
            R = surface(np.maximum(x, 1e-30), np.array(nu), DENSITY * k, K, a, g or np.inf)
            total += REACH * area * np.array(nu) * R
        return total

    x = start
    for begin, end in ((0.0, 1200.0), (1200.0, 3600.0)):
        x = solve_ivp(rates, (begin, end), x, method="LSODA", rtol=1e-9, atol=1e-16).y[:, -1]
    bath = replace(case(tuple(start), 1.0, *exposures), schedule=RAMP)
    assert integrate(bath, nodes=32).x[:, 0] == pytest.approx(x, rel=3e-3)
    assert integrate(bath, nodes=256).x[:, 0] == pytest.approx(x, rel=6e-5)


def test_contents_do_not_depend_on_their_unit() -> None:
    """All contents f times, g f times and ln K + sum nu ln f: the answer is f times (homogeneity)."""
    bath, f = spread(4), 3.7
    scaled = []
    for exposure in bath.exposures:
        carriers = tuple(
            replace(
                c,
                ln_k=Curve(c.ln_k.T, c.ln_k.ln + c.nu.sum() * np.log(f)),
                conductance=c.conductance and Curve(c.conductance.T, c.conductance.ln + np.log(f)),
            )
            for c in exposure.carriers
        )
        scaled.append(replace(exposure, carriers=carriers))
    other = integrate(replace(bath, total=f * bath.total, exposures=tuple(scaled)), tolerance=1e-7)
    assert other.x / f == pytest.approx(integrate(bath, tolerance=1e-7).x, rel=1e-10)


def test_twice_the_time_is_twice_every_rate() -> None:
    bath = spread(4)
    two = np.array([np.log(2.0)])
    names = {c.limit: two for e in bath.exposures for c in e.carriers}
    faster = tuple(scale(e, two, names, np.zeros(1)) for e in bath.exposures)
    longer = Schedule(2 * RAMP.time, RAMP.T)
    slow, fast = integrate(replace(bath, schedule=longer)), integrate(replace(bath, exposures=faster))
    assert slow.x == pytest.approx(fast.x, rel=1e-12)


def test_elasticities_to_the_rates_sum_to_that_to_time() -> None:
    bath, nudge = spread(6), 1e-4
    _, E, moves = elasticities(bath, nodes=16)
    longer, shorter = (
        integrate(replace(bath, schedule=Schedule(RAMP.time * np.exp(s), RAMP.T)), nodes=16, tolerance=1e-6)
        for s in (nudge, -nudge)
    )
    base = integrate(bath, nodes=16, tolerance=1e-6).ledger.sum(axis=0)
    E_t = (longer.ledger.sum(axis=0) - shorter.ledger.sum(axis=0)) / (2 * nudge * base)
    assert moves.all()
    assert E.sum(axis=0) == pytest.approx(E_t, abs=3e-7)


def test_shares_follow_what_is_slow() -> None:
    """Steady transfer through a film and the melt in series: the shares are those of the resistances."""
    m = DENSITY * 3e-5
    zinc = unit((1.0,), 0.0, 0.0, m / 3)
    names, E, moves = elasticities(case((1e-6,), 1.0, wall((3e-5,), zinc)))
    found = dict(zip(("ceiling", *names), shares(names, E, moves)[:, 0, 0], strict=True))
    assert found == pytest.approx({"ceiling": 0.0, "melt transfer": 0.25, "gas film": 0.75}, abs=1e-3)
    names, E, moves = elasticities(case((1e-6,), 1e7, wall((3e-5,), unit((1.0,), np.log(2e-6)))))
    assert shares(names, E, moves)[0, 0, 0] == 1.0
    trace = unit((1.0,), np.log(1e-5), inventory=np.array([1e-6]))
    names, E, moves = elasticities(case((1e-9,), 1e4, wall((3e-5,), trace)))
    assert names[-1] == "inventory"
    assert shares(names, E, moves)[-1, 0, 0] == 1.0


def test_a_stage_with_two_roots() -> None:
    """Units (1,1) and (1,2) at two contacts: two positive roots, each confirmed by a general root finder."""
    nu = np.array([[1.0, 1.0, 0.0, 0.0], [0.0, 0.0, 1.0, 2.0]])
    first = np.array([[10.26865006, 98.10825259], [10.04158194, 98.12468272]])
    second = np.array([[10.0751246, 98.10825259], [10.04158194, 98.15534576]])
    B = np.stack([first[0], second[0] * [1, 2], first[1], second[1] * [1, 2]])[..., None]
    rest = np.array([3.39789e-3, 2.29748997e-5, 3.39789e-3, 2.29748997e-5])[:, None]
    ln_k = np.array([[-23.23673771], [-29.03485836]])
    block = flux_newton.Block(
        np.arange(2),
        np.array([1, 1, 2, 2]),
        np.array([0, 1, 0, 1]),
        nu,
        np.repeat(np.arange(4), 2),
        np.tile(np.arange(2), 4),
        np.zeros(0, dtype=np.int64),
        np.zeros(2, dtype=bool),
        np.zeros(2, dtype=bool),
    )
    none = np.zeros((0, 1))
    stage = flux_newton.Equations(B, rest, ln_k, np.zeros((2, 1)), none, none, np.full((2, 1), np.inf))
    for R in ([-5.79532725e-4, 2.96413275e-5], [-6.47798061e-4, 3.32229328e-5]):
        fluxes = np.array(R)[:, None]
        x = rest + np.einsum("ucn,cn->un", B, fluxes)
        near = flux_newton.Point(np.log(x), none, fluxes, np.zeros((2, 1), dtype=bool))
        root, solved = flux_newton.solve(block, stage, near, 1e-8)
        assert solved.all()
        assert root.flux[:, 0] == pytest.approx(R, rel=1e-6)


def test_a_bath_that_can_have_two_roots_is_known_and_followed() -> None:
    spinel = wall((3e-5, 3e-5), unit((1.0, 2.0), -32.0))
    oxide = wall((3e-5, 3e-5), unit((1.0, 1.0), -24.0))
    both = case((1e-6, 1e-5), 3600.0, spinel, oxide)
    done = refined(both, nodes=32)
    assert done.path.two_roots
    assert done.error < 1e-3
    assert not done.doubtful.any()
    assert not integrate(case((1e-6, 1e-5), 3600.0, spinel, spinel)).two_roots
    assert not integrate(case(TWO_START, 60.0, *TWO_WALLS)).two_roots


def test_counting_stops_where_the_metal_leaves_the_dilute_range() -> None:
    """A supply g a fills the bath at a constant rate, so the crossing of 0.02 has a closed form."""
    gas = wall((1.0,), unit((1.0,), 8.0, 1.0, 1e-2))
    fed = integrate(case((1e-6,), 1e4, gas), nodes=128)
    assert fed.attacked.all()
    assert fed.keep is None
    assert fed.crossed[0] == pytest.approx((0.02 - 1e-6) / (REACH * 1e-2), rel=5e-3)
    assert fed.total[0, 0] == pytest.approx(0.02, rel=5e-3)
    assert balance(fed, np.array([[1e-6]])) < 1e-12


def test_a_surface_beyond_the_dilute_range_is_an_attack() -> None:
    path = integrate(case((1e-6,), 1e5, wall((1e-7,), unit((1.0,), np.log(0.5)))))
    assert path.attacked.all()
    assert path.crossed[0] < 0.03 * 1e5


def test_draws_that_are_not_attacked_go_on() -> None:
    bath = spread(6)
    wild = bath.exposures[0].carriers[1]
    curve = Curve(wild.ln_k.T, wild.ln_k.ln + np.where(np.arange(6) == 2, 12.0, 0.0))
    exposure = replace(bath.exposures[0], carriers=(bath.exposures[0].carriers[0], replace(wild, ln_k=curve)))
    path = integrate(replace(bath, exposures=(exposure, *bath.exposures[1:])), nodes=16)
    assert path.attacked.tolist() == [False, False, True, False, False, False]
    rest = np.flatnonzero(~path.attacked)
    assert path.x[:, rest] == pytest.approx(integrate(bath, nodes=16).x[:, rest], rel=1e-12)
    assert balance(path, bath.total) < 1e-12


def test_nothing_there_at_the_start_is_no_obstacle() -> None:
    bath = spread(5)
    path = integrate(replace(bath, total=np.zeros_like(bath.total)))
    assert path.solved.all()
    assert np.isfinite(path.x).all()
    assert path.x[:4].min() > 0
    assert np.all(path.x[4] == 0.0)
    assert balance(path, np.zeros_like(bath.total)) < 1e-12


def test_a_step_of_no_length_does_nothing() -> None:
    bath = spread(3)
    still = Schedule(np.array([0.0, 0.0]), np.array([1400.0, 1400.0]))
    path = integrate(replace(bath, schedule=still))
    assert np.array_equal(path.x, bath.total)
    assert not path.ledger.any()


def test_each_draw_may_have_its_own_course() -> None:
    bath = spread(3)
    time = RAMP.time[:, None] * np.array([1.0, 0.5, 2.0])
    heat = RAMP.T[:, None] + np.array([0.0, 20.0, -30.0])
    together = integrate(replace(bath, schedule=Schedule(time, heat)), nodes=16).x
    for n in range(3):
        alone = replace(bath.take(np.array([n])), schedule=Schedule(time[:, n], heat[:, n]))
        assert together[:, n] == pytest.approx(integrate(alone, nodes=16).x[:, 0], rel=1e-11)


def test_more_steps_mean_less_error() -> None:
    bath = spread(50)
    best = integrate(bath, nodes=256).x
    rough, fine = (np.abs(integrate(bath, nodes=n).x / best - 1) for n in (16, 32))
    assert np.median(fine) < np.median(rough) / 3
    assert np.quantile(fine, 0.95) < 2e-3
    assert refined(bath, nodes=32).error > 0.3 * np.quantile(fine, 0.95, axis=1).max()


@settings(max_examples=25)
@given(st.integers(0, 10_000), st.floats(-3.0, 3.0), st.floats(0.0, 8.0))
def test_ledgers_sum_to_the_change(seed: int, shift: float, stretch: float) -> None:
    bath = spread(3, seed)
    skin = Skin("oxide", bath.exposures[0].carriers[0].nu, between(-64.0, -56.0 + shift))
    exposures = (replace(bath.exposures[0], skins=(skin,)), *bath.exposures[1:])
    course = Schedule(RAMP.time * np.exp(stretch), RAMP.T)
    path = integrate(replace(bath, exposures=exposures, schedule=course), nodes=8)
    assert path.solved.all()
    assert path.x.min() > 0
    assert path.suspended.min() >= 0
    assert balance(path, bath.total) < 1e-12


def test_a_fast_loss_at_the_start_is_followed() -> None:
    """Carbon and oxygen leave as CO into vacuum within seconds of a long ramp; O - C is kept exactly."""
    fast = wall((1e-3, 1e-3), unit((1.0, 1.0), -32.0, 0.0, 200.0))
    start = (5e-6, 8e-6)
    bath = replace(case(start, 1.0, fast), schedule=RAMP)
    best = integrate(bath, nodes=512).x
    rough = integrate(bath, nodes=16).x
    assert rough[1] - rough[0] == pytest.approx(start[1] - start[0], rel=1e-9)
    assert rough[1] == pytest.approx(best[1], rel=2e-3)


def test_a_large_bath_is_judged_by_some_of_its_draws() -> None:
    bath = spread(1024)
    part = refined(bath, nodes=16)
    every = refined(bath.take(np.arange(0, 1024, 4)), nodes=16)
    assert part.error == pytest.approx(every.error, rel=1e-6)
    assert np.array_equal(part.path.x, integrate(bath, nodes=16).x)


def test_draws_that_are_not_good_enough_are_done_again() -> None:
    """Oxygen carried in by water and out by carbon, faster in some draws than four steps can follow."""
    bath = spread(40)
    quick = np.linspace(2.0, 5.0, 40)
    faster = tuple(scale(e, quick, {"gas film": quick}, np.zeros(1)) for e in bath.exposures)
    bath = replace(bath, exposures=faster)
    rough, best = integrate(bath, nodes=4).x, integrate(bath, nodes=256).x
    done = refined(bath, nodes=4)
    redone = np.abs(done.path.x - rough).max(axis=0) > 0
    assert 0 < redone.mean() < 1
    error, before = (np.abs(x[:, redone] / best[:, redone] - 1).max() for x in (done.path.x, rough))
    assert error < before / 2
    assert np.array_equal(done.path.x[:, ~redone], rough[:, ~redone])
