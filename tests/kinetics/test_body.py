"""Solid pieces under contacts: against exact holds, an independent integrator, and balances."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import Phase, given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from purity.errors import OutOfRangeError
from purity.kinetics import control, passage
from purity.kinetics.arrhenius import ramp_integral
from purity.kinetics.body import BodyRun, body
from purity.kinetics.exposure import Carrier, Curve, Exposure, Skin, at
from purity.kinetics.laplace import time_to, uptake
from purity.kinetics.modes import basis, profile
from purity.kinetics.pieces import STEPS, Piece, Step, coefficients, rates, steps, with_skins
from purity.kinetics.schedule import Schedule, T_at, first_crossing, hold
from purity.kinetics.surface import act, surface
from purity.scenario import Form

Array = NDArray[np.float64]
R = 8.314462618
KNOTS = np.array([250.0, 500.0, 800.0, 1200.0, 1800.0])
RHO = 1e5
UP_HOLD_DOWN = Schedule(np.array([0.0, 1800.0, 5400.0, 7200.0]), np.array([500.0, 1200.0, 1200.0, 500.0]))


def curve(value: float | Array, Q: float | Array = 0.0) -> Curve:
    """Arrhenius line through `value` as its prefactor: (K, N)."""
    A, Q = np.atleast_1d(np.log(value)), np.atleast_1d(np.asarray(Q, dtype=float))
    return Curve(KNOTS, A - Q / (R * KNOTS[:, None]))


def stack(*curves: Curve) -> Curve:
    wide = max(c.ln.shape[-1] for c in curves)
    return Curve(KNOTS, np.stack([np.broadcast_to(c.ln, (len(KNOTS), wide)) for c in curves]))


def form(shape: str = "slab", R_: float = 1e-3) -> Form:
    """A piece of one mole at RHO."""
    g = {"slab": 1, "cylinder": 2, "sphere": 3}[shape]
    return Form(shape, R_, area=g / (RHO * R_), volume=1 / RHO)  # type: ignore[arg-type]


def gas(
    nu: Sequence[float],
    K: Curve,
    a: float | Array,
    g: Curve | None,
    inventory: Array | None = None,
    name: str = "g",
) -> Carrier:
    return Carrier(
        name, np.array(nu, dtype=float), K, np.atleast_1d(np.asarray(a, dtype=float)), g, inventory
    )


def contact(
    carriers: Sequence[Carrier], area: float, k: Curve | None = None, skins: Sequence[Skin] = ()
) -> Exposure:
    count = len(carriers[0].nu) if carriers else len(skins[0].nu)
    exchange = k or stack(*[curve(1e3)] * count)
    return Exposure("contact", np.array([area]), exchange, tuple(carriers), tuple(skins))


def run(
    x0: Sequence[float] | Array,
    D: Curve,
    schedule: Schedule,
    exposures: Sequence[Exposure],
    *,
    shape: str = "slab",
    draws: int = 1,
    start: Array | None = None,
    nodes: int | None = None,
    history: bool = False,
) -> BodyRun:
    x = np.asarray(x0, dtype=float)
    x = np.repeat(x[:, None], draws, axis=1) if x.ndim == 1 else x
    one = np.ones(1)
    out = body(x, start, form(shape), RHO * one, one, D, schedule, exposures, nodes=nodes, history=history)
    assert np.isfinite(out.mean).all()
    gained = out.mean + out.film - x
    scale = np.abs(out.ledger).max(initial=0.0) + np.abs(x).max(initial=0.0)
    assert out.ledger.sum(axis=0) == pytest.approx(gained, abs=1e-13 * scale)
    return out


AREA = form().area


# Linear carriers


@pytest.mark.parametrize("shape", ["slab", "cylinder", "sphere"])
def test_hold_is_resistances_in_series_before_diffusion(shape: str) -> None:
    """Contact side g/K and metal side rho k in series make the h of the published solution."""
    K, a, g, k, D, time = 2e-4, 0.3, 1.5e-3, 2e-7, 3e-10, 900.0
    out = run(
        [1e-6],
        stack(curve(D)),
        hold(1000.0, time),
        [contact([gas([1], curve(K), a, curve(g))], form(shape).area, stack(curve(k)))],
        shape=shape,
    )
    h = 1 / (1 / k + RHO * K / g)
    expected = 1e-6 + (K * a - 1e-6) * uptake(shape, D * time / 1e-6, h * 1e-3 / D)[0]
    assert out.mean[0, 0] == pytest.approx(expected, rel=1e-7)
    assert out.error == pytest.approx(1e-7)
    assert out.profile.shape == (1, 25, 1)
    depth = np.array([0.0, 1.0])
    fine = run(
        [1e-6],
        stack(curve(D)),
        hold(1000.0, time),
        [contact([gas([1], curve(K), a, curve(g))], form(shape).area, stack(curve(k)))],
        shape=shape,
        history=True,
        nodes=96,
    )
    assert fine.mean[0, 0] == pytest.approx(expected, rel=1e-4)
    # The exact hold and the implicit steps leave the same profile.
    b = basis(shape)
    got, other = (
        profile(b, o.profile[0, :25] if o.profile.shape[1] == 25 else o.profile[0], depth)
        for o in (out, fine)
    )
    assert got == pytest.approx(other, rel=2e-3)


@pytest.mark.parametrize("shape", ["slab", "cylinder", "sphere"])
@pytest.mark.parametrize("Bi", [1e-3, 1.0, 1e3, 1e6])
def test_one_activation_energy_makes_a_schedule_a_hold(shape: str, Bi: float) -> None:
    """h/D constant: any ramp equals a hold of the same Fo."""
    D0, Q, K = 4e-4, 150e3, 1e-3
    out = run(
        [0.0],
        stack(curve(D0, Q)),
        UP_HOLD_DOWN,
        [contact([gas([1], curve(K), 1.0, None)], form(shape).area, stack(curve(Bi * D0 / 1e-3, Q)))],
        shape=shape,
    )
    path = sum(
        float(ramp_integral(D0, Q, a, b, t))
        for a, b, t in ((500, 1200, 1800), (1200, 1200, 3600), (1200, 500, 1800))
    )
    assert out.mean[0, 0] == pytest.approx(K * uptake(shape, path / 1e-6, Bi)[0], rel=5e-4)


def test_well_stirred_piece_is_a_bath() -> None:
    """x0 = 1, 0.002/s to 5 and 0.001/s to 0 for 600 s: 2.947635927, and the ledger of each contact."""
    walls = [
        contact([gas([1], curve(5.0), 1.0, None)], AREA, stack(curve(2e-6))),
        contact([gas([1], curve(5.0), 0.0, None)], AREA, stack(curve(1e-6))),
    ]
    out = run([1.0], stack(curve(10.0)), hold(1000.0, 600.0), walls)
    assert out.mean[0, 0] == pytest.approx(2.947635927, rel=1e-6)
    K, t = 0.003, 600.0
    rest = 10 / 3
    first = 0.002 * ((5 - rest) * t + (1 - rest) * np.expm1(-K * t) / K)
    assert out.ledger[0, 0, 0] == pytest.approx(first, rel=1e-5)
    turned = run([1.0], stack(curve(10.0)), hold(1000.0, 600.0), walls[::-1])
    assert turned.mean == pytest.approx(out.mean, rel=1e-12)
    assert turned.ledger[::-1] == pytest.approx(out.ledger, rel=1e-9)


def test_areas_add_up() -> None:
    whole = run(
        [1e-7],
        stack(curve(1e-3, 120e3)),
        UP_HOLD_DOWN,
        [contact([gas([1], curve(1e-4), 1, curve(1e-3))], AREA)],
    )
    parts = run(
        [1e-7],
        stack(curve(1e-3, 120e3)),
        UP_HOLD_DOWN,
        [contact([gas([1], curve(1e-4), 1, curve(1e-3))], share * AREA) for share in (0.2, 0.3, 0.5)],
    )
    assert parts.mean == pytest.approx(whole.mean, rel=1e-12)
    assert parts.ledger[:, 0, 0] == pytest.approx(
        (whole.mean[0, 0] - 1e-7) * np.array([0.2, 0.3, 0.5]), rel=1e-8
    )


def test_piece_gives_off_to_a_vacuum() -> None:
    out = run(
        [1e-4], stack(curve(1e-9)), hold(1000.0, 600.0), [contact([gas([1], curve(1.0), 0.0, None)], AREA)]
    )
    assert out.mean[0, 0] == pytest.approx(1e-4 * (1 - uptake("slab", 0.6, np.inf)[0]), rel=1e-6)


def test_supply_without_a_ceiling_is_all_taken() -> None:
    """An equilibrium constant beyond all bounds: what the gas side lets through goes in, ramps and all."""
    exposure = contact([gas([1], curve(1e250), 1e-6, curve(2e-3))], AREA)
    for schedule, time in ((hold(900.0, 3600.0), 3600.0), (UP_HOLD_DOWN, 7200.0)):
        out = run([0.0], stack(curve(1e-2, 150e3)), schedule, [exposure])
        assert out.mean[0, 0] == pytest.approx(2e-9 * time * AREA, rel=1e-9)


def test_impurity_without_a_diffusivity_does_not_enter() -> None:
    D = stack(curve(1e-9), curve(1e-9))
    D.ln[1] = -np.inf
    both = contact([gas([1, 0], curve(1e-3), 1, curve(1)), gas([0, 1], curve(1e-3), 1, curve(1))], AREA)
    out = run([1e-8, 1e-8], D, UP_HOLD_DOWN, [both])
    assert out.mean[0, 0] > 1e-5
    assert out.mean[1, 0] == pytest.approx(1e-8, rel=1e-6)


def test_nothing_touches_the_piece() -> None:
    first = run(
        [0.0], stack(curve(1e-10)), hold(1000.0, 60.0), [contact([gas([1], curve(1e-3), 1, curve(1))], AREA)]
    )
    rest = run(first.mean, stack(curve(1e-10)), hold(1000.0, 1e7), [], start=first.profile)
    assert rest.mean == pytest.approx(first.mean, rel=1e-12)
    even = basis("slab", rest.profile.shape[1])
    assert profile(even, rest.profile[0], np.array([0.0, 1.0])) == pytest.approx(
        np.full((2, 1), first.mean[0, 0]), rel=1e-6
    )


def test_no_time() -> None:
    out = run(
        [3e-6], stack(curve(1e-9)), hold(1000.0, 0.0), [contact([gas([1], curve(1e-3), 1, curve(1))], AREA)]
    )
    assert out.mean[0, 0] == pytest.approx(3e-6, rel=1e-15)


def test_shape_that_is_no_body() -> None:
    with pytest.raises(OutOfRangeError, match="half thickness"):
        body(
            np.zeros((1, 1)),
            None,
            Form("slab", 0.0, area=1.0, volume=1.0),
            np.ones(1),
            np.ones(1),
            stack(curve(1e-9)),
            hold(1000.0, 1.0),
            [],
        )


# Carried between steps


@pytest.mark.parametrize("shape", ["slab", "cylinder", "sphere"])
@pytest.mark.parametrize("D", [1e-9, 1e-13, 1e-16])
def test_halves_of_a_hold_are_the_whole(shape: str, D: float) -> None:
    exposure = [contact([gas([1], curve(1e-3), 1, curve(1e-2))], form(shape).area)]
    whole = run([1e-7], stack(curve(D)), hold(1000.0, 800.0), exposure, shape=shape)
    half = run([1e-7], stack(curve(D)), hold(1000.0, 400.0), exposure, shape=shape)
    end = run(half.mean, stack(curve(D)), hold(1000.0, 400.0), exposure, shape=shape, start=half.profile)
    assert end.mean - 1e-7 == pytest.approx(whole.mean - 1e-7, rel=2e-3)


def test_a_schedule_is_the_chain_of_its_parts() -> None:
    exposure = [contact([gas([1], curve(1e-6, -40e3), 1, curve(1e-3))], AREA)]
    D = stack(curve(1e-5, 120e3))
    whole = run([1e-7], D, UP_HOLD_DOWN, exposure)
    x, start = np.array([[1e-7]]), None
    for a, b in ((0, 2), (1, 3), (2, 4)):
        part = run(x, D, Schedule(UP_HOLD_DOWN.time[a:b], UP_HOLD_DOWN.T[a:b]), exposure, start=start)
        x, start = part.mean, part.profile
    assert x == pytest.approx(whole.mean, rel=1e-2)


def test_history_ends_at_the_mean_and_starts_at_the_start() -> None:
    exposure = [contact([gas([1], curve(1e-3), 1, curve(1e-3))], AREA)]
    out = run([1e-7], stack(curve(1e-4, 120e3)), UP_HOLD_DOWN, exposure, history=True)
    assert out.history is not None
    assert out.times is not None
    assert out.history.shape[1] == out.times.shape[0]
    assert out.history[0, 0, 0] == pytest.approx(1e-7)
    assert out.history[0, -1, 0] == pytest.approx(out.mean[0, 0], rel=1e-12)
    assert np.all(np.diff(out.history[0, :, 0]) >= 0)
    assert out.times.reshape(len(out.times), -1)[-1, 0] == pytest.approx(7200.0)


def test_time_to_a_limit_from_the_history() -> None:
    """The recorded course passes half of the ceiling when the exact hold does."""
    carrier = gas([1], curve(1e-3), 1.0, curve(0.1))
    out = run([0.0], stack(curve(1e-10)), hold(1000.0, 2e4), [contact([carrier], AREA)], history=True)
    assert out.history is not None
    assert out.times is not None
    found = first_crossing(out.times, out.history[0], 0.5e-3)
    Bi = 0.1 / 1e-3 / RHO * 1e-3 / 1e-10
    assert found[0] == pytest.approx(time_to("slab", 0.5, Bi)[0] * 1e-6 / 1e-10, rel=5e-3)


def test_every_draw_has_its_own_schedule() -> None:
    tops = np.array([1000.0, 1100.0, 1200.0])
    time = np.array([0.0, 600.0, 3600.0, 4200.0])
    course = Schedule(
        time[:, None] * np.array([1.0, 1.5, 2.0]),
        np.stack([np.full(3, 400.0), tops, tops, np.full(3, 400.0)]),
    )
    exposure = [contact([gas([1], curve(1e-5, -2e4), 1.0, curve(1e-3))], AREA)]
    D = stack(curve(1e-5, 1.2e5))
    out = run([1e-8], D, course, exposure, draws=3)
    for n in range(3):
        alone = run([1e-8], D, Schedule(course.time[:, n], course.T[:, n]), exposure)
        assert out.mean[0, n] == pytest.approx(alone.mean[0, 0], rel=1e-2)
    assert np.all(np.diff(out.mean[0]) > 0)


@pytest.mark.parametrize(("shape", "as_"), [("wire", "cylinder"), ("granules", "sphere"), ("area", "slab")])
def test_shapes_by_other_names(shape: str, as_: str) -> None:
    exposure = [contact([gas([1], curve(1e-3), 1.0, curve(1e-2))], form(as_).area)]
    one = np.ones(1)
    known = run([0.0], stack(curve(1e-10)), hold(1000.0, 600.0), exposure, shape=as_)
    same = Form(shape, 1e-3, area=form(as_).area, volume=form(as_).volume)  # type: ignore[arg-type]
    out = body(
        np.zeros((1, 1)), None, same, RHO * one, one, stack(curve(1e-10)), hold(1000.0, 600.0), exposure
    )
    assert out.mean == pytest.approx(known.mean, rel=1e-12)


def test_holds_in_a_row_at_one_temperature_are_exact() -> None:
    exposure = [contact([gas([1], curve(1e-3), 1.0, curve(1e-2))], AREA)]
    parts = Schedule(np.array([0.0, 100.0, 700.0]), np.full(3, 1000.0))
    out, whole = (run([0.0], stack(curve(1e-10)), s, exposure) for s in (parts, hold(1000.0, 700.0)))
    assert out.mean == pytest.approx(whole.mean, rel=1e-14)
    assert out.error == whole.error


def test_a_closed_path_lets_nothing_through() -> None:
    closed = Curve(KNOTS, np.full((len(KNOTS), 1), -np.inf))
    for nu in ([1.0], [2.0]):
        out = run(
            [1e-6], stack(curve(1e-9)), UP_HOLD_DOWN, [contact([gas(nu, curve(1e-3), 1.0, closed)], AREA)]
        )
        assert out.mean[0, 0] == pytest.approx(1e-6, rel=1e-12)
        assert not out.flags.any()


# Carriers of several atoms


def test_surface_root_of_a_dissolving_compound() -> None:
    """M2O3, K = 1e-14, metal-side coefficients 1e-5 and 2e-5 m/s; roots with 40 digits."""

    def flux(x: Sequence[float]) -> tuple[float, Array]:
        wall = contact([gas([2, 3], curve(1e-14), 1.0, None)], 1.0, stack(curve(1e-5), curve(2e-5)))
        one = np.ones(1)
        piece = Piece(
            "slab", one, np.array(x)[:, None], None, one, one, stack(curve(1.0), curve(1.0)), (wall,)
        )
        here, step = surface(piece), Step(one, np.array(1000.0), np.array(1000.0), 0)
        law = coefficients(here.laws, rates(here.laws, step, np.full((2, 1), 1e30)), 1000.0)
        answer = act(here, law, piece.x0, np.full((2, 1), 1e-200), one, np.full((1, 1), np.inf))
        assert answer.solved.all()
        return float(answer.flux[0, 0]), answer.x[1, :, 0]

    clean = (1e-14 / ((2 / 1e-5) ** 2 * (3 / 2e-5) ** 3)) ** 0.2
    assert flux([0.0, 0.0])[0] == pytest.approx(clean, rel=1e-9)
    assert clean == pytest.approx(9.417448335e-9, rel=1e-9)
    xi, x = flux([1e-4, 2e-5])
    assert xi == pytest.approx(9.139152472e-9, rel=1e-8)
    assert x == pytest.approx([1.92783e-3, 1.39087e-3], rel=1e-5)
    saturated = [1e-3, (1e-14 / 1e-6) ** (1 / 3)]
    assert flux(saturated)[0] == pytest.approx(0.0, abs=1e-17)
    assert flux([2e-3, saturated[1]])[0] < 0


def test_sieverts_ceiling_of_a_diatomic_gas() -> None:
    """At rest the content is sqrt(K a), whatever the conductance."""
    out = run(
        [1e-9],
        stack(curve(1e-6)),
        hold(1000.0, 1e5),
        [contact([gas([2], curve(1e-5), 1e-4, curve(1e-2))], AREA)],
    )
    assert out.mean[0, 0] == pytest.approx(np.sqrt(1e-9), rel=1e-6)
    assert out.error < 0.01


def test_water_in_and_hydrogen_out_leave_what_the_two_rates_say() -> None:
    """x_H^2 = K_H2 g_w a_w / g_h while oxygen is far from its ceiling."""
    gases = [gas([2, 1], curve(1e6), 1e-6, curve(1.0)), gas([2, 0], curve(1e-2), 0.0, curve(3.0))]
    out = run([1e-9, 1e-7], stack(curve(1e-5), curve(1e-12)), hold(1000.0, 3e4), [contact(gases, AREA)])
    assert out.mean[0, 0] == pytest.approx(np.sqrt(1e-2 * 1e-6 / 3.0), rel=2e-3)
    assert not out.flags.any()


# Against an independent integrator: method of lines and BDF


def lines(
    D: Sequence[Callable[[float], float]],
    flux: Callable[[float, Array, Array], Array],
    x0: Sequence[float],
    schedule: Schedule,
    g: int = 1,
    cells: int = 80,
) -> Array:
    """Mean contents by finite volumes; flux(T, contents of the outer cells, half-cell conductances)."""
    edges = np.concatenate([[0.0], np.geomspace(1e-5, 1.0, cells)]) * 1e-3
    middle, radius = (edges[1:] + edges[:-1]) / 2, (1e-3 - edges) ** (g - 1) / 1e-3 ** (g - 1)
    volume = -np.diff((1e-3 - edges) ** g) / (g * 1e-3 ** (g - 1))
    count = len(x0)

    def slope(t: float, y: Array) -> Array:
        c, T = y.reshape(count, cells), float(T_at(schedule, t))
        d = np.array([law(T) for law in D])
        out = np.zeros((count, cells + 1))
        out[:, 0] = flux(T, c[:, 0], RHO * d / middle[0]) / RHO
        out[:, 1:-1] = -d[:, None] * np.diff(c, axis=1) / np.diff(middle) * radius[1:-1]
        return np.asarray((-np.diff(out, axis=1) / volume).ravel())

    y = np.repeat(np.asarray(x0, dtype=float), cells)
    for a, b in zip(schedule.time[:-1], schedule.time[1:], strict=True):
        y = solve_ivp(slope, (a, b), y, method="BDF", rtol=1e-6, atol=1e-15).y[:, -1]
    return np.asarray((y.reshape(count, cells) * volume).sum(axis=1) / volume.sum())


@pytest.mark.parametrize("seed", range(6))
def test_linear_schedules_against_lines(seed: int) -> None:
    rng = np.random.default_rng(seed)
    shape = ("slab", "cylinder", "sphere")[seed % 3]
    D0, Q = 10 ** rng.uniform(-6, -3), rng.uniform(80e3, 200e3)
    K0, QK = 10 ** rng.uniform(-6, -3), rng.uniform(-20e3, 40e3)
    g0, a, x0 = 10 ** rng.uniform(-4, 0), 10 ** rng.uniform(-2, 0), 10 ** rng.uniform(-8, -5)
    D, K, g = curve(D0, Q), curve(K0, QK), curve(g0)
    out = run([x0], stack(D), UP_HOLD_DOWN, [contact([gas([1], K, a, g)], form(shape).area)], shape=shape)

    def flux(T: float, c: Array, half: Array) -> Array:
        k = 1 / (1 / half + float(at(K, T)[0]) / g0)
        return np.asarray(k * (float(at(K, T)[0]) * a - c))

    exact = lines(
        [lambda T: float(at(D, T)[0])],
        flux,
        [x0],
        UP_HOLD_DOWN,
        {"slab": 1, "cylinder": 2, "sphere": 3}[shape],
    )
    assert out.mean[0, 0] - x0 == pytest.approx(exact[0] - x0, rel=4e-3)
    assert abs(out.mean[0, 0] / exact[0] - 1) < max(2 * out.error, 2e-3)


def wet_gas() -> tuple[list[Curve], list[Curve], list[Carrier], list[float], Schedule]:
    D = [curve(1e-7, 3e4), curve(1e-6, 1.1e5)]
    K = [curve(np.exp(-10.0), -1.0e5), curve(np.exp(-14.0), -3e4), curve(np.exp(-11.0), 2e4)]
    gases = [
        gas([0, 2], K[0], 1e-7, curve(0.1)),
        gas([2, 1], K[1], 1e-6, curve(1.0)),
        gas([2, 0], K[2], 1e-9, curve(3.0)),
    ]
    schedule = Schedule(np.array([0.0, 600.0, 4200.0, 5000.0]), np.array([600.0, 1100.0, 1100.0, 600.0]))
    return D, K, gases, [1e-6, 1e-5], schedule


def test_wet_oxygen_and_hydrogen() -> None:
    """Method of lines below with 160 cells, BDF, rtol 1e-6."""
    D, _, gases, x0, schedule = wet_gas()
    out = run(x0, stack(*D), schedule, [contact(gases, AREA)])
    assert out.mean[:, 0] - x0 == pytest.approx(np.array([5.32556624e-07, 6.08068388e-05]) - x0, rel=1e-3)


@pytest.mark.slow
def test_wet_oxygen_and_hydrogen_against_lines() -> None:
    D, K, gases, x0, schedule = wet_gas()
    out = run(x0, stack(*D), schedule, [contact(gases, AREA)])

    def flux(T: float, c: Array, half: Array) -> Array:
        Ko, Kw, Kh = (float(at(k, T)[0]) for k in K)

        def hydrogen(x: float) -> float:
            q, X = 2 * (x / Kw + 3.0 / Kh), half[0] * c[0] + 2 * (1e-6 + 3e-9)
            return float(2 * X / (half[0] + np.sqrt(half[0] ** 2 + 4 * q * X)))

        def oxygen(ln_x: float) -> float:
            x = np.exp(ln_x)
            return float(half[1] * (x - c[1]) - 0.2 * (1e-7 - x**2 / Ko) - (1e-6 - hydrogen(x) ** 2 * x / Kw))

        x = np.exp(brentq(oxygen, -80.0, 5.0, xtol=1e-13))
        return np.array([half[0] * (hydrogen(x) - c[0]), half[1] * (x - c[1])])

    exact = lines([lambda T, d=d: float(at(d, T)[0]) for d in D], flux, x0, schedule, cells=32)
    assert out.mean[:, 0] - x0 == pytest.approx(exact - x0, rel=1e-2)


# Bounds of what can come


@settings(deadline=None, max_examples=10, phases=(Phase.generate,))
@given(st.floats(-9, -3), st.floats(-13, -7), st.floats(-5, 0))
def test_inventory(lg_stock: float, lg_D: float, lg_g: float) -> None:
    stock = 10.0**lg_stock
    carrier = gas([1], curve(1e-3), 1.0, curve(10.0**lg_g), np.array([stock]))
    out = run([1e-8], stack(curve(10.0**lg_D)), hold(1000.0, 3600.0), [contact([carrier], AREA)])
    endless = run(
        [1e-8],
        stack(curve(10.0**lg_D)),
        hold(1000.0, 3600.0),
        [contact([gas([1], curve(1e-3), 1.0, curve(10.0**lg_g))], AREA)],
    )
    gained = out.mean[0, 0] - 1e-8
    assert gained <= stock * (1 + 1e-9)
    assert gained <= (endless.mean[0, 0] - 1e-8) * (1 + 2e-3)
    assert gained >= min(stock, 0.9 * (endless.mean[0, 0] - 1e-8)) * 0.98


def test_used_up_inventory_is_all_in_the_piece() -> None:
    carrier = gas([2, 1], curve(1e-2), 1e-3, curve(1.0), np.array([2e-9]))
    out = run([1e-9, 1e-9], stack(curve(1e-7), curve(1e-7)), hold(1000.0, 3600.0), [contact([carrier], AREA)])
    assert out.mean[:, 0] == pytest.approx([1e-9 + 4e-9, 1e-9 + 2e-9], rel=1e-9)
    assert dict(zip(out.limits, out.shares[:, 1, 0], strict=True))["inventory"] == 1.0


def test_skin_holds_the_surface_at_saturation_and_dissolves_again() -> None:
    saturated = curve(2e-5, 30e3)
    skin = Skin("MO", np.array([1.0]), saturated)
    gas_side = [gas([1], curve(1.0), 1e-3, curve(1e-2))]
    D = stack(curve(1e-9))
    cold = run([0.0], D, hold(800.0, 3600.0), [contact(gas_side, AREA, skins=[skin])])
    x_s = float(at(saturated, 800.0)[0])
    assert cold.film[0, 0] > 0
    assert cold.mean[0, 0] == pytest.approx(x_s * uptake("slab", 3.6, np.inf)[0], rel=2e-3)
    assert cold.film[0, 0] + cold.mean[0, 0] == pytest.approx(1e-5 * 3600 * AREA, rel=1e-2)
    both = Schedule(np.array([0.0, 3600.0, 3700.0, 2e4]), np.array([800.0, 800.0, 1700.0, 1700.0]))
    vacuum = contact([gas([1], curve(1e-12), 0.0, curve(1e-16))], AREA, skins=[skin])
    warm = run([0.0], D, both, [contact(gas_side, AREA, skins=[skin])])
    assert warm.film[0, 0] + warm.mean[0, 0] > cold.film[0, 0] + cold.mean[0, 0]
    alone = run([1e-7], D, hold(800.0, 10.0), [vacuum])
    assert alone.film[0, 0] == 0.0


def test_film_of_an_earlier_step_dissolves_when_heated() -> None:
    skin = Skin("M2O3", np.array([3.0, 0.0]), curve(1e-9, 60e3))
    touch = contact([], AREA, stack(curve(1e3), curve(1e3)), [skin])
    one, bound = np.ones(1), np.array([[6e-6], [1e-7]])
    D = stack(curve(1e-6, 60e3), curve(1e-6, 60e3))
    heated = Schedule(np.array([0.0, 3600.0, 7200.0]), np.array([500.0, 1300.0, 1300.0]))
    out = body(np.full((2, 1), 1e-8), None, form(), RHO * one, one, D, heated, [touch], bound=bound)
    assert out.film[:, 0] == pytest.approx([0.0, 1e-7], abs=1e-18)
    assert out.mean[:, 0] == pytest.approx([6.01e-6, 1e-8], rel=1e-9)
    assert out.ledger == pytest.approx(np.zeros((1, 2, 1)), abs=1e-18)
    cold = body(
        np.full((2, 1), 1e-8), None, form(), RHO * one, one, D, hold(500.0, 60.0), [touch], bound=bound
    )
    assert cold.film[0, 0] > 5.9e-6


def test_surface_beyond_the_dilute_range_is_told() -> None:
    out = run(
        [0.0], stack(curve(1e-12)), hold(1000.0, 60.0), [contact([gas([1], curve(0.5), 1.0, None)], AREA)]
    )
    assert out.attacked.all()
    small = run(
        [0.0], stack(curve(1e-12)), hold(1000.0, 60.0), [contact([gas([1], curve(1e-3), 1.0, None)], AREA)]
    )
    assert not small.attacked.any()


# Many draws, error, shares


def random_lot(draws: int, seed: int, exothermic: float = 0.0) -> tuple[Array, Curve, list[Exposure]]:
    rng = np.random.default_rng(seed)
    D = stack(*[curve(10 ** rng.uniform(-7, -3, draws), rng.uniform(8e4, 1.8e5, draws)) for _ in range(3)])
    heats = (0.0, 2e4, -exothermic)
    gases = [
        Carrier(
            "g",
            np.eye(3)[i],
            curve(10 ** rng.uniform(-6, -4, draws), np.full(draws, heat)),
            10 ** rng.uniform(-3, 0, draws),
            curve(10 ** rng.uniform(-4, 0, draws)),
        )
        for i, heat in enumerate(heats)
    ]
    return np.full((3, draws), 1e-8), D, [contact(gases, AREA)]


def test_chunks_do_not_change_the_answer(monkeypatch: pytest.MonkeyPatch) -> None:
    x0, D, exposures = random_lot(300, 3)
    whole = run(x0, D, UP_HOLD_DOWN, exposures)
    monkeypatch.setattr(passage, "ROWS", 3 * 70)
    parts = run(x0, D, UP_HOLD_DOWN, exposures)
    assert parts.mean == pytest.approx(whole.mean, rel=1e-12)
    one = run(x0[:, 17:18], Curve(D.T, D.ln[..., 17:18]), UP_HOLD_DOWN, [exposures_of(exposures[0], 17)])
    assert one.mean[:, 0] == pytest.approx(whole.mean[:, 17], rel=2e-3)


def exposures_of(exposure: Exposure, draw: int) -> Exposure:
    from purity.kinetics.exposure import select

    return select(exposure, np.array([draw]))


@pytest.mark.parametrize("exothermic", [0.0, 3e4])
def test_own_error_is_honest(exothermic: float) -> None:
    """What the estimate says of 95 % of the draws holds against a run four times finer, on other draws."""
    x0, D, exposures = random_lot(512, 11, exothermic)
    out = run(x0, D, UP_HOLD_DOWN, exposures)
    fine = run(x0, D, UP_HOLD_DOWN, exposures, nodes=96)
    off = np.abs(out.mean - fine.mean) / np.maximum(np.abs(fine.mean - x0), 1e-3 * fine.mean)
    assert np.quantile(off, 0.95, axis=1).max() < 3 * out.error + 1e-5
    assert out.error < 0.02


def _piece(x0: Array, D: Curve, exposures: Sequence[Exposure]) -> Piece:
    ones = np.ones(x0.shape[1])
    return Piece("slab", 1e-3 * ones, x0, None, RHO * ones, ones, D, with_skins(exposures)[0])


def test_elasticities_to_rates_sum_to_that_to_time() -> None:
    x0, D, exposures = random_lot(32, 5)
    piece, draws = _piece(x0, D, exposures), np.arange(32)
    course = steps(UP_HOLD_DOWN, STEPS)
    names, count, E, _ = control.elasticities(piece, course, False, draws, 41)
    assert names[:count] == ("diffusion", "surface", "gas film")

    def stretched(factor: float) -> Array:
        longer = tuple(Step(s.length * factor, s.T1, s.T2, s.part) for s in course)
        return control.pickup(passage.whole(piece, longer, False, least=41))

    E_t = np.log(stretched(np.exp(1e-3)) / stretched(np.exp(-1e-3))) / 2e-3
    assert E.sum(axis=0) == pytest.approx(E_t, abs=2e-5)


def test_twice_the_time_is_twice_every_rate() -> None:
    x0, D, exposures = random_lot(32, 6)
    piece, ones = _piece(x0, D, exposures), np.full(32, np.log(2.0))
    course = steps(UP_HOLD_DOWN, STEPS)
    longer = tuple(Step(s.length * 2.0, s.T1, s.T2, s.part) for s in course)
    faster = control.nudged(piece, {"diffusion": ones, "surface": ones, "gas film": ones})
    twice = passage.whole(piece, longer, False, least=41).mean
    assert passage.whole(faster, course, False, least=41).mean == pytest.approx(twice, rel=1e-11)


def test_contents_scale_with_what_is_around() -> None:
    """Twice the start and twice every activity make twice the end, for carriers of one atom."""
    x0, D, exposures = random_lot(16, 8)
    piece = _piece(x0, D, exposures)
    more = [
        replace(e, carriers=tuple(replace(c, activity=2.0 * np.asarray(c.activity)) for c in e.carriers))
        for e in exposures
    ]
    course = steps(UP_HOLD_DOWN, STEPS)
    twice = passage.whole(_piece(2.0 * x0, D, more), course, False, least=41).mean
    assert twice == pytest.approx(2.0 * passage.whole(piece, course, False, least=41).mean, rel=1e-11)


@pytest.mark.parametrize("seed", [1, 2])
def test_wild_surfaces(seed: int) -> None:
    """Six gases, an oxide wall, two compounds that form and two inventories, over decades: balances hold."""
    rng, n = np.random.default_rng(seed), 48

    def any_curve(low: float, high: float, Q: float = 0.0) -> Curve:
        return curve(10 ** rng.uniform(low, high, n), rng.uniform(-0.5 * Q, Q, n))

    def any_gas(nu: list[int], low: float, high: float, stocked: bool) -> Carrier:
        K = any_curve(-5.0 * sum(nu) - 1.0, -2.5 * sum(nu), 6e4)
        stock = 10 ** rng.uniform(-8, -4, n) if stocked else None
        return gas(nu, K, 10 ** rng.uniform(low, high, n), any_curve(-3, 1), stock)

    gases = [
        any_gas([0, 2, 0, 0, 0], -9, -4, False),
        any_gas([2, 1, 0, 0, 0], -8, -4, True),
        any_gas([2, 0, 0, 0, 0], -9, -5, False),
        any_gas([0, 1, 1, 0, 0], -9, -5, True),
        any_gas([0, 0, 0, 2, 0], -6, -2, False),
        any_gas([0, 0, 0, 0, 1], -300, -299, False),
    ]
    skins = [
        Skin("MO", np.array([0.0, 1, 0, 0, 0]), any_curve(-5, -3, 5e4)),
        Skin("MN", np.array([0.0, 0, 0, 1, 0]), any_curve(-5, -3, 5e4)),
    ]
    wall = gas([0, 3, 0, 0, 2], any_curve(-26, -12, 6e4), 1.0, None)
    k = stack(*[any_curve(-6, -1) for _ in range(5)])
    D = stack(*[curve(10 ** rng.uniform(-7, -4, n), rng.uniform(4e4, 1.5e5, n)) for _ in range(5)])
    x0 = 10 ** rng.uniform(-8, -4, (5, n))
    out = run(x0, D, UP_HOLD_DOWN, [contact(gases, 0.6 * AREA, k, skins), contact([wall], 0.4 * AREA, k)])
    assert not out.flags.any()
    assert np.all(out.mean > 0)
    assert np.all(out.film >= 0)
    assert out.error < 0.05
    assert gases[3].inventory is not None
    assert np.all(out.ledger[0, 2] <= gases[3].inventory * (1 + 1e-9)), "more carbon than the gas held"


def test_shares_name_what_holds_back() -> None:
    D = stack(curve(1e-12))
    slow_gas = run([0.0], D, hold(1000.0, 60.0), [contact([gas([1], curve(1e-3), 1.0, curve(1e-9))], AREA)])
    assert dict(zip(slow_gas.limits, slow_gas.shares[:, 0, 0], strict=True))["gas film"] == pytest.approx(
        1.0, abs=1e-3
    )
    slow_metal = run([0.0], D, hold(1000.0, 60.0), [contact([gas([1], curve(1e-3), 1.0, None)], AREA)])
    assert dict(zip(slow_metal.limits, slow_metal.shares[:, 0, 0], strict=True))[
        "diffusion"
    ] == pytest.approx(1.0, abs=1e-3)
    full = run(
        [0.0], stack(curve(1e-7)), hold(1000.0, 1e5), [contact([gas([1], curve(1e-3), 1.0, None)], AREA)]
    )
    assert dict(zip(full.limits, full.shares[:, 0, 0], strict=True))["ceiling"] == 1.0


@settings(deadline=None, max_examples=6, phases=(Phase.generate,))
@given(st.integers(0, 10**6), st.floats(1.1, 8.0))
def test_bounds_and_monotony(seed: int, more: float) -> None:
    """Linear carriers of one ceiling on a schedule, 60 draws at a time."""
    rng, n = np.random.default_rng(seed), 60
    D, g, K, x0 = (10 ** rng.uniform(*ends, n) for ends in ((-14, -7), (-5, 1), (-8, -3), (-8, -3)))

    def end(D_: float = 1.0, g_: float = 1.0, K_: float = 1.0, t: float = 1.0) -> Array:
        carrier = gas([1], curve(K * K_), 1.0, curve(g * g_ * K_))
        schedule = Schedule(UP_HOLD_DOWN.time * t, UP_HOLD_DOWN.T)
        piece = _piece(x0[None], stack(curve(D * D_)), [contact([carrier], AREA)])
        return passage.whole(piece, steps(schedule, STEPS), False).mean[0]

    base, slack = end(), 2e-3 * np.abs(K - x0) + 1e-12
    assert np.all(base >= np.minimum(x0, K) - slack)
    assert np.all(base <= np.maximum(x0, K) + slack)
    for other in (end(D_=more), end(g_=more), end(t=more)):
        assert np.all(np.sign(K - x0) * (other - base) >= -slack)
    assert np.all(end(K_=more) >= base - slack)
