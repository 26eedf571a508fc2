"""Binary solutions: Gibbs energy of mixing, partial energies, activity, spinodal and miscibility gap.

Component A is the host, B the impurity. Both mole fractions are passed, so that a content of 1e-30 of either
component keeps all its digits. Every function is elementwise and broadcasts over contents, temperatures and
draws. Energies are J/mol relative to the pure components in the reference state of the model.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray

from purity.constants import R
from purity.errors import OutOfRangeError

Array = NDArray[np.float64]

#: Largest |epsilon x| for which first-order interaction coefficients are used.
WAGNER_LIMIT = 0.3


class Model(Protocol):
    """Excess properties of a solution, J/mol."""

    def excess(self, x_a: Array, x_b: Array, T: Array) -> Array:
        """Return the excess Gibbs energy."""
        ...

    def excess_partial(self, x_a: Array, x_b: Array, T: Array) -> tuple[Array, Array]:
        """Return RT ln gamma of A and of B."""
        ...

    def excess_curvature(self, x_a: Array, x_b: Array, T: Array) -> Array:
        """Return the second derivative of the excess Gibbs energy by x_b."""
        ...


@dataclass(frozen=True, slots=True)
class SubRegular:
    """Sub-regular solution, G_ex = x_a x_b (x_a omega_a + x_b omega_b).

    Parameters
    ----------
    omega_a, omega_b : array
        J/mol: partial excess energy of B at infinite dilution in A, and of A at infinite dilution in B.

    Notes
    -----
    H. K. Hardy, Acta Metallurgica 1 (1953) 202. Equal parameters make the regular solution of
    J. H. Hildebrand, J. Am. Chem. Soc. 51 (1929) 66.
    """

    omega_a: ArrayLike
    omega_b: ArrayLike

    @property
    def omegas(self) -> tuple[Array, Array]:
        """Both parameters as arrays."""
        return np.asarray(self.omega_a, dtype=float), np.asarray(self.omega_b, dtype=float)

    def excess(self, x_a: Array, x_b: Array, T: Array) -> Array:
        """Return the excess Gibbs energy."""
        a, b = self.omegas
        return x_a * x_b * (x_a * a + x_b * b) + 0.0 * T

    def excess_partial(self, x_a: Array, x_b: Array, T: Array) -> tuple[Array, Array]:
        """Return RT ln gamma of A and of B."""
        a, b = self.omegas
        of_a: Array = x_b**2 * (b + 2.0 * x_a * (a - b)) + 0.0 * T
        of_b: Array = x_a**2 * (a + 2.0 * x_b * (b - a)) + 0.0 * T
        return of_a, of_b

    def excess_curvature(self, x_a: Array, x_b: Array, T: Array) -> Array:
        """Return the second derivative of the excess Gibbs energy by x_b."""
        a, b = self.omegas
        return (2.0 * x_b - 4.0 * x_a) * a + (2.0 * x_a - 4.0 * x_b) * b + 0.0 * T


@dataclass(frozen=True, slots=True)
class Dilute:
    """Henrian impurity with a first-order self-interaction, ln gamma_b = ln gamma_inf + epsilon x_b.

    Parameters
    ----------
    ln_gamma_inf : array
        At infinite dilution, against the reference state of the impurity.
    epsilon : array
        Interaction coefficient; refused where |epsilon x_b| passes 0.3.

    Notes
    -----
    C. Wagner, Thermodynamics of Alloys, Addison-Wesley 1952. The host follows from the Gibbs-Duhem equation,
    ln gamma_a = epsilon (x_b + ln x_a).
    """

    ln_gamma_inf: ArrayLike
    epsilon: ArrayLike = 0.0

    def _logs(self, x_b: Array) -> tuple[Array, Array]:
        inf, eps = np.asarray(self.ln_gamma_inf, dtype=float), np.asarray(self.epsilon, dtype=float)
        _within(eps * x_b)
        return eps * _log1m_plus(x_b), inf + eps * x_b

    def excess(self, x_a: Array, x_b: Array, T: Array) -> Array:
        """Return the excess Gibbs energy."""
        of_a, of_b = self._logs(x_b)
        return R * T * (x_a * of_a + x_b * of_b)

    def excess_partial(self, x_a: Array, x_b: Array, T: Array) -> tuple[Array, Array]:
        """Return RT ln gamma of A and of B."""
        of_a, of_b = self._logs(x_b)
        return R * T * of_a, R * T * of_b

    def excess_curvature(self, x_a: Array, x_b: Array, T: Array) -> Array:
        """Return the second derivative of the excess Gibbs energy by x_b."""
        self._logs(x_b)
        rise: Array = R * T * np.asarray(self.epsilon, dtype=float) / x_a
        return rise


def ideal() -> SubRegular:
    """Return the ideal solution."""
    return SubRegular(0.0, 0.0)


def regular(omega: ArrayLike) -> SubRegular:
    """Return the regular solution, G_ex = omega x_a x_b, omega in J/mol."""
    return SubRegular(omega, omega)


def _within(product: Array) -> None:
    largest = float(np.max(np.abs(product), initial=0.0))
    if largest > WAGNER_LIMIT:
        raise OutOfRangeError(
            f"first-order interaction coefficients hold to |epsilon x| = {WAGNER_LIMIT}; "
            f"here it reaches {largest:.2g}: the content is too high for the dilute law."
        )


def _series(d: Array, weights: Callable[[int], float]) -> Array:
    """Sum weights(k) d^k over k >= 2 for small d."""
    total: Array = np.zeros_like(d)
    for k in range(18, 1, -1):
        total = total * d + weights(k)
    return total * d**2


def _log1m_plus(x: Array) -> Array:
    """Evaluate x + ln(1 - x) without cancellation."""
    x = np.asarray(x, dtype=float)
    small = np.abs(x) < 0.05
    with np.errstate(divide="ignore"):
        plain: Array = x + np.log1p(-np.where(small, 0.0, x))
    return np.where(small, _series(np.where(small, x, 0.0), lambda k: -1.0 / k), plain)


def ln_fractions(x_a: ArrayLike, x_b: ArrayLike) -> tuple[Array, Array]:
    """Logarithms of both mole fractions (sum 1), each from whichever of the two holds the digits."""
    a, b = np.asarray(x_a, dtype=float), np.asarray(x_b, dtype=float)
    ln_a: Array = np.where(b < a, np.log1p(-np.minimum(b, 0.5)), np.log(a))
    ln_b: Array = np.where(a < b, np.log1p(-np.minimum(a, 0.5)), np.log(b))
    return ln_a, ln_b


def _arrays(x_a: ArrayLike, x_b: ArrayLike, T: ArrayLike) -> tuple[Array, Array, Array]:
    return np.asarray(x_a, dtype=float), np.asarray(x_b, dtype=float), np.asarray(T, dtype=float)


def mixing(model: Model, x_a: ArrayLike, x_b: ArrayLike, T: ArrayLike) -> Array:
    """Gibbs energy of mixing.

    Parameters
    ----------
    model : Model
    x_a, x_b : array
        Mole fractions of host and impurity, positive, with sum 1.
    T : array
        K.

    Returns
    -------
    array
        J/mol.

    Raises
    ------
    OutOfRangeError
        A dilute model is asked beyond its range.
    """
    a, b, t = _arrays(x_a, x_b, T)
    ln_a, ln_b = ln_fractions(a, b)
    return R * t * (a * ln_a + b * ln_b) + model.excess(a, b, t)


def excess(model: Model, x_a: ArrayLike, x_b: ArrayLike, T: ArrayLike) -> Array:
    """Excess Gibbs energy, J/mol; parameters as for :func:`mixing`."""
    return model.excess(*_arrays(x_a, x_b, T))


def ln_gamma(model: Model, x_a: ArrayLike, x_b: ArrayLike, T: ArrayLike) -> tuple[Array, Array]:
    """Natural logarithms of both activity coefficients; parameters as for :func:`mixing`."""
    a, b, t = _arrays(x_a, x_b, T)
    of_a, of_b = model.excess_partial(a, b, t)
    return of_a / (R * t), of_b / (R * t)


def partial(model: Model, x_a: ArrayLike, x_b: ArrayLike, T: ArrayLike) -> tuple[Array, Array]:
    """Partial Gibbs energies of mixing of host and impurity, J/mol; parameters as for :func:`mixing`."""
    a, b, t = _arrays(x_a, x_b, T)
    ln_a, ln_b = ln_fractions(a, b)
    of_a, of_b = model.excess_partial(a, b, t)
    return R * t * ln_a + of_a, R * t * ln_b + of_b


def activity(model: Model, x_a: ArrayLike, x_b: ArrayLike, T: ArrayLike) -> tuple[Array, Array]:
    """Activities of host and impurity; parameters as for :func:`mixing`."""
    a, b, t = _arrays(x_a, x_b, T)
    gamma_a, gamma_b = ln_gamma(model, a, b, t)
    return a * np.exp(gamma_a), b * np.exp(gamma_b)


def slope(model: Model, x_a: ArrayLike, x_b: ArrayLike, T: ArrayLike) -> Array:
    """First derivative of the Gibbs energy of mixing by x_b, J/mol; parameters as for :func:`mixing`.

    It goes to minus infinity at the pure host for every finite interaction: no metal is free of its first
    trace of impurity.
    """
    of_a, of_b = partial(model, x_a, x_b, T)
    return of_b - of_a


def curvature(model: Model, x_a: ArrayLike, x_b: ArrayLike, T: ArrayLike) -> Array:
    """Second derivative of the Gibbs energy of mixing by x_b, J/mol; parameters as for :func:`mixing`."""
    a, b, t = _arrays(x_a, x_b, T)
    return R * t / (a * b) + model.excess_curvature(a, b, t)


def _bracketed(
    function: Callable[[Array], tuple[Array, Array]], low: Array, high: Array, start: Array, scale: ArrayLike
) -> Array:
    """Root of an increasing function by Newton's method kept inside a shrinking bracket."""
    low, high, at = low.copy(), high.copy(), start.copy()
    for _ in range(120):
        value, rate = function(at)
        low, high = np.where(value < 0.0, at, low), np.where(value > 0.0, at, high)
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            trial: Array = at - value / rate
        inside = (trial > low) & (trial < high)
        new: Array = np.where(inside, trial, 0.5 * (low + high))
        new = np.where(value == 0.0, at, new)
        still = np.abs(new - at) > 4e-16 * np.maximum(np.abs(new), scale)
        at = new
        if not still.any():
            break
    return at


def spinodal(model: SubRegular, T: ArrayLike) -> tuple[Array, Array]:
    """Find the contents between which the solution is unstable.

    Parameters
    ----------
    model : SubRegular
    T : array
        K.

    Returns
    -------
    array, array
        x_b of both limits; NaN where the solution is stable at every content.

    Notes
    -----
    x_a x_b times the curvature is a cubic with one minimum between the pure ends: no or two roots.
    """
    a, b, t = np.broadcast_arrays(*model.omegas, np.asarray(T, dtype=float))
    rt: Array = R * t
    lead, foot = 6.0 * (a - b) / rt, (2.0 * b - 4.0 * a) / rt
    lowest = _lowest(lead, foot)

    def scaled(x: Array) -> tuple[Array, Array]:
        value: Array = 1.0 + x * (1.0 - x) * (lead * x + foot)
        rate: Array = -3.0 * lead * x**2 + 2.0 * (lead - foot) * x + foot
        return value, rate

    def fallen(x: Array) -> tuple[Array, Array]:
        value, rate = scaled(x)
        return -value, -rate

    unstable = scaled(lowest)[0] < 0.0
    left = _bracketed(fallen, np.zeros_like(lowest), lowest, 0.5 * lowest, 0.0)
    right = _bracketed(scaled, lowest, np.ones_like(lowest), 0.5 * (1.0 + lowest), 0.0)
    return np.where(unstable, left, np.nan), np.where(unstable, right, np.nan)


def _lowest(lead: Array, foot: Array) -> Array:
    """Minimum of x (1 - x) (lead x + foot) between 0 and 1; 0.5 where there is none."""
    p, q = lead - foot, np.sqrt((lead - foot) ** 2 + 3.0 * lead * foot)
    # Roots of -3 lead x^2 + 2 p x + foot, the one with a positive second derivative, without cancellation.
    with np.errstate(divide="ignore", invalid="ignore"):
        x: Array = np.where(p > 0.0, -foot / (p + q), (p - q) / (3.0 * lead))
    return np.where((x > 0.0) & (x < 1.0), x, 0.5)


def miscibility_gap(model: SubRegular, T: ArrayLike) -> tuple[Array, Array]:
    """Terminal solubilities, by the common tangent.

    Parameters
    ----------
    model : SubRegular
    T : array
        K.

    Returns
    -------
    array, array
        x_b in the host-rich and x_a in the impurity-rich solution; NaN where the components mix in all
        proportions. Both to about 1e-13 relative, down to 1e-30.

    Notes
    -----
    The slope s of the tangent fixes one content on either stable branch; the difference of the two intercepts
    falls strictly with s, so that the tangent is unique.
    """
    a, b, t = np.broadcast_arrays(*model.omegas, np.asarray(T, dtype=float))
    gap = np.isfinite(spinodal(model, t)[0])
    # Contents that exist nowhere are replaced by harmless ones and taken out at the end.
    a, b = np.where(gap, a, 3.0 * R * t), np.where(gap, b, 3.0 * R * t)
    some, seen_from_b = SubRegular(a, b), SubRegular(b, a)
    first, last = spinodal(some, t)
    top, bottom = slope(some, 1.0 - first, first, t), slope(some, 1.0 - last, last, t)

    def contents(s: Array) -> tuple[Array, Array]:
        return _branch(some, s, np.log(first), t), _branch(seen_from_b, -s, np.log1p(-last), t)

    def difference(s: Array) -> tuple[Array, Array]:
        u, w = contents(s)
        in_host = partial(some, -np.expm1(u), np.exp(u), t)[0]
        beyond = partial(some, np.exp(w), -np.expm1(w), t)[0]
        width: Array = -np.expm1(w) - np.exp(u)
        return in_host - beyond, width

    s = _bracketed(difference, bottom, top, 0.5 * (bottom + top), R * t)
    u, w = contents(s)
    return np.where(gap, np.exp(u), np.nan), np.where(gap, np.exp(w), np.nan)


def _branch(model: SubRegular, s: Array, end: Array, T: Array) -> Array:
    """Find ln x_b at which the slope is s, on the stable branch next to the host."""
    a, b = model.omegas
    floor: Array = np.minimum((s - 4.0 * np.maximum(np.abs(a), np.abs(b))) / (R * T), end) - 1.0

    def surplus(u: Array) -> tuple[Array, Array]:
        x = np.exp(u)
        return slope(model, -np.expm1(u), x, T) - s, curvature(model, -np.expm1(u), x, T) * x

    return _bracketed(surplus, floor, end, np.maximum(end - 1.0, floor), 1.0)


def wagner(ln_gamma_inf: Array, epsilon: Array, x: Array) -> Array:
    """Activity coefficients of several dilute solutes with Wagner's first-order interactions.

    Parameters
    ----------
    ln_gamma_inf : (I, N) array
        At infinite dilution.
    epsilon : (I, I) or (I, I, N) array
        d ln gamma_i / d x_j.
    x : (I, N) array
        Mole fractions.

    Returns
    -------
    (I, N) array
        ln gamma.

    Raises
    ------
    OutOfRangeError
        Any |epsilon x| passes 0.3.
    """
    each: Array = (epsilon if epsilon.ndim == 3 else epsilon[:, :, None]) * x[None]
    _within(each)
    total: Array = ln_gamma_inf + each.sum(axis=1)
    return total


def driving_force(ln_x: ArrayLike, ln_ceiling: ArrayLike, T: ArrayLike) -> Array:
    """Gibbs energy released per mole of impurity that passes from the contact into the metal.

    Parameters
    ----------
    ln_x : array
        ln of the present mole fraction.
    ln_ceiling : array
        ln of the content at equilibrium with the contact.
    T : array
        K.

    Returns
    -------
    array
        J/mol; positive: the impurity goes in.
    """
    x, ceiling, t = _arrays(ln_x, ln_ceiling, T)
    force: Array = R * t * (ceiling - x)
    return force


def release(x0: ArrayLike, x: ArrayLike, ln_ceiling: ArrayLike, T: ArrayLike) -> Array:
    """Gibbs energy released while the content goes from x0 to x, per mole of host.

    Parameters
    ----------
    x0, x : array
        Contents before and after, mol per mol of host; 0 is allowed.
    ln_ceiling : array
        ln of the content at equilibrium with the contact.
    T : array
        K.

    Returns
    -------
    array
        J per mole of host: the integral of the driving force by content.
    """
    a, b, t = _arrays(x0, x, T)
    ceiling = np.asarray(ln_ceiling, dtype=float)
    a, b, t, ceiling = np.broadcast_arrays(a, b, t, ceiling)
    start: Array = np.where(a > 0.0, a, 1.0)
    d: Array = (b - a) / start
    rise: Array = (b - a) * (ceiling - np.log(start)) + start * _curve(d)
    ln_b: Array = np.log(np.where(b > 0.0, b, 1.0))
    whole: Array = b * (1.0 + ceiling - ln_b)
    return R * t * np.where(a > 0.0, rise, whole)


def _curve(d: Array) -> Array:
    """Evaluate d - (1 + d) ln(1 + d) without cancellation."""
    small = np.abs(d) < 0.05
    gone = d <= -1.0
    far: Array = np.where(small | gone, 0.0, d)
    plain: Array = np.where(gone, -1.0, far - (1.0 + far) * np.log1p(far))
    near = _series(np.where(small, d, 0.0), lambda k: (-1.0) ** (k + 1) / (k * (k - 1)))
    return np.where(small, near, plain)
