"""Films that grow, and that stages add up."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_ivp

from purity.errors import OutOfRangeError
from purity.kinetics.exposure import Curve, Film
from purity.kinetics.films import LAWS, content, field_driven, grow, inverse_logarithmic, thickness
from purity.kinetics.schedule import Schedule, hold

R = 8.314462618
BARE = np.zeros(1)


def flat(*values: float) -> tuple[Curve, ...]:
    return tuple(Curve(np.array([300.0]), np.log(np.array([[value]]))) for value in values)


PARAMETERS = {
    "limiting": flat(2e-9),
    "logarithmic": flat(8e-10, 6e-4),
    "inverse-logarithmic": flat(3e8, 3e7, 86400.0),
    "field-driven": flat(1e-18, 3e-8),
    "parabolic": flat(1e-22),
    "linear-parabolic": flat(5e-22, 1.8e-15),
}


@pytest.mark.parametrize("law", LAWS)
def test_two_stages_are_one(law: str) -> None:
    day = 86400.0
    half = grow(law, PARAMETERS[law], 0.0, hold(300.0, 3 * day))
    whole = grow(law, PARAMETERS[law], 0.0, hold(300.0, 10 * day))
    assert grow(law, PARAMETERS[law], half, hold(300.0, 7 * day)) == pytest.approx(whole, rel=1e-12)


@settings(deadline=None, max_examples=40)
@given(st.sampled_from(sorted(LAWS)), st.floats(1.0, 1e9), st.floats(1.0, 10.0), st.floats(0.0, 3e-8))
def test_films_never_shrink_and_stay_finite(law: str, time: float, more: float, x0: float) -> None:
    first = grow(law, PARAMETERS[law], x0, hold(300.0, time))
    later = grow(law, PARAMETERS[law], x0, hold(300.0, time * more))
    assert np.isfinite(later).all()
    assert x0 <= first[0] * (1 + 1e-12)
    assert first[0] <= later[0] * (1 + 1e-12)


def test_parabolic_stack_is_exact() -> None:
    x = BARE
    for k, length in enumerate((10.0, 1e3, 1e5)):
        x = grow("parabolic", flat(1e-20 * (k + 1)), x, hold(300.0, length))
    assert x[0] == pytest.approx(np.sqrt(1e-20 * (10.0 + 2e3 + 3e5)), rel=1e-15)


def test_parabolic_ramp_takes_the_integral_of_its_constant() -> None:
    """Integral of exp(-Q/RT) dt for 150 kJ/mol, 300 to 1200 K in 3600 s, 40 digits: 8.38398152e-5 s."""
    T = np.array([250.0, 2000.0])
    kp = Curve(T, (np.log(1e-6) - 150e3 / (R * T))[:, None])
    x = grow("parabolic", (kp,), 0.0, Schedule(np.array([0.0, 3600.0]), np.array([300.0, 1200.0])))
    assert x[0] ** 2 == pytest.approx(8.38398152e-11, rel=1e-7)


def test_linear_parabolic_without_cancellation() -> None:
    p1, p2, t = 5e-22, 1.8e-15, 1e6
    x = grow("linear-parabolic", flat(p1, p2), 0.0, hold(300.0, t))[0]
    assert x**2 / p1 + x / p2 == pytest.approx(t, rel=1e-14)
    early = grow("linear-parabolic", flat(p1, p2), 0.0, hold(300.0, 1e-6))[0]
    assert early == pytest.approx(p2 * 1e-6, rel=1e-12)


def test_logarithmic_does_not_overflow() -> None:
    x = grow("logarithmic", flat(1e-10, 1e-3), 2e-7, hold(300.0, 1e6))
    assert x[0] == pytest.approx(2e-7, rel=1e-12)


def test_field_driven_growth_against_numbers_of_high_precision() -> None:
    """x1 = 20, u = 1e-6 in one unit of length: inverted E2 integral, then 1e5 s at ten times the rate."""
    o = np.ones(1)
    grown = field_driven(BARE, (1e-6 * o, 20.0 * o), 1.0 * o)
    assert grown[0] == pytest.approx(1.70389883, rel=1e-8)
    assert field_driven(BARE, (1e-6 * o, 20.0 * o), 1e3 * o)[0] == pytest.approx(3.30821943, rel=1e-8)
    first = field_driven(BARE, (1e-6 * o, 20.0 * o), 1e5 * o)
    assert field_driven(first, (1e-5 * o, 20.0 * o), 1e5 * o)[0] == pytest.approx(13.8783954, rel=1e-8)
    x = float(grown[0])
    assert x * float(mpmath.expint(2, 20 / x)) == pytest.approx(1e-6, rel=1e-10)


def test_field_driven_growth_against_an_integrator() -> None:
    run = solve_ivp(
        lambda t, x: 1e-6 * np.exp(20.0 / x), (0.0, 1e5), [3.0], method="LSODA", rtol=1e-10, atol=1e-12
    )
    o = np.ones(1)
    assert field_driven(3.0 * o, (1e-6 * o, 20.0 * o), 1e5 * o)[0] == pytest.approx(run.y[0, -1], rel=1e-7)


def test_field_driven_films_are_held_where_the_law_ends() -> None:
    o = np.ones(1)
    assert field_driven(BARE, (1e-6 * o, 20.0 * o), 1e40 * o)[0] == pytest.approx(20.0)
    assert inverse_logarithmic(BARE, (3e8 * o, 3e7 * o, 86400.0 * o), 1e40 * o)[0] == pytest.approx(1 / 3e7)


def test_inverse_logarithmic_is_what_was_measured() -> None:
    """1/x = 0.3 - 0.03 ln(t / 1 d) per nm: 3.33 nm after a day."""
    x = grow("inverse-logarithmic", PARAMETERS["inverse-logarithmic"], 0.0, hold(300.0, 86400.0))
    assert x[0] == pytest.approx(1 / 0.3e9)


def test_ramp_of_a_logarithmic_film_takes_steps() -> None:
    T = np.array([250.0, 1000.0])
    p2 = Curve(T, (10.0 - 60e3 / (R * T))[:, None])
    ramp = Schedule(np.array([0.0, 3600.0]), np.array([300.0, 500.0]))
    grown = grow("logarithmic", (flat(1e-9)[0], p2), 0.0, ramp)[0]
    exact = solve_ivp(
        lambda t, x: 1e-9 * np.exp(10.0 - 60e3 / (R * (300.0 + t / 18.0)) - x / 1e-9),
        (0.0, 3600.0),
        [0.0],
        rtol=1e-10,
        atol=1e-20,
    ).y[0, -1]
    assert grown == pytest.approx(exact, rel=5e-3)


def test_content_of_a_film() -> None:
    """3 nm of Cu2O (6000 kg/m3, 143.09 g/mol; handbook values from memory) on 0.1 m2 of 1 mol."""
    film = Film("oxide", np.array([0.0, 6000.0 / 0.14309]), "limiting", flat(3e-9))
    x = thickness(film, 0.0, 3600.0, 300.0)
    held = content(film, x, 0.1, 1.0)
    assert held.shape == (2, 1)
    assert held[1, 0] == pytest.approx(3e-9 * 0.1 * 41931.65, rel=1e-4)
    assert held[0, 0] == 0.0


def test_unknown_law() -> None:
    with pytest.raises(OutOfRangeError, match="cubic"):
        grow("cubic", flat(1.0), 0.0, hold(300.0, 1.0))
