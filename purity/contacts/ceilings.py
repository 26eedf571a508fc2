"""Ceilings: the content at which a contact and the metal stop exchanging, the other contents as they are."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from purity.contacts.setting import Exposed, Setting
from purity.kinetics.exposure import Carrier, Curve, at, ln_at

Array = NDArray[np.float64]

#: Bounds of ln content between which a ceiling is looked for: 1e-40 up to pure.
LOW, HIGH = -92.0, 7.0
#: Halvings of that interval: to 1e-10 in ln.
HALVINGS = 40


def ceiling(exposed: Exposed, setting: Setting, x: Array, T: Array, element: int) -> Array | None:
    """Return ln of the content of one element at which a contact gives no more, (N,).

    A wall is at equilibrium with its compound; a gas at the content at which what its carriers bring
    equals what they carry off; a trace at the content that its whole inventory would make, if lower.

    Parameters
    ----------
    exposed : Exposed
    setting : Setting
    x : (I, N) array
        Contents of the metal, mol per mol of host.
    T : (N,) array
        K.
    element : int

    Returns
    -------
    (N,) array or None
        None where the contact holds none of the element.
    """
    mine = [c for c in exposed.exposure.carriers if c.nu[element] > 0]
    ln_x = np.log(np.maximum(x, 1e-30))
    giving = [c for c in mine if _gives(c)]
    if not giving:
        return None
    held = [c for c in giving if c.conductance is None]
    ends = [_saturation(c, ln_x, T, element) for c in held if c.inventory is None]
    ends += [_store(c, setting, ln_x, x, T, element) for c in held if c.inventory is not None]
    open_side = [c for c in mine if c.conductance is not None]
    if any(_gives(c) for c in open_side):
        ends.append(_balance(open_side, ln_x, T, element))
    n = x.shape[-1]
    return np.asarray(np.max(np.stack([np.broadcast_to(e, (n,)) for e in ends]), axis=0))


def counted(exposed: Exposed, element: int) -> list[Carrier]:
    """Return the carriers that the ceiling of an element against a contact hangs on."""
    mine = [c for c in exposed.exposure.carriers if c.nu[element] > 0]
    held = [c for c in mine if c.conductance is None and _gives(c)]
    open_side = [c for c in mine if c.conductance is not None]
    return [*held, *(open_side if any(_gives(c) for c in open_side) else ())]


def _gives(carrier: Carrier) -> bool:
    activity = carrier.activity
    some = bool(np.any(np.asarray(activity.ln if isinstance(activity, Curve) else activity) != 0.0))
    empty = carrier.inventory is not None and not np.any(carrier.inventory > 0)
    return some and not empty


def _activity(carrier: Carrier, T: Array) -> Array:
    activity = carrier.activity
    return at(activity, T) if isinstance(activity, Curve) else activity


def _rest(carrier: Carrier, ln_x: Array, T: Array, element: int) -> Array:
    """Ln of a_s without the element's own part."""
    others = carrier.nu.copy()
    others[element] = 0.0
    return np.asarray(others @ ln_x - ln_at(carrier.ln_k, T))


def _saturation(carrier: Carrier, ln_x: Array, T: Array, element: int) -> Array:
    rest = _rest(carrier, ln_x, T, element)
    return np.asarray((np.log(np.maximum(_activity(carrier, T), 1e-300)) - rest) / carrier.nu[element])


def _store(carrier: Carrier, setting: Setting, ln_x: Array, x: Array, T: Array, element: int) -> Array:
    assert carrier.inventory is not None
    whole = x[element] + carrier.nu[element] * carrier.inventory / setting.amount
    return np.asarray(np.minimum(_saturation(carrier, ln_x, T, element), np.log(np.maximum(whole, 1e-30))))


def _balance(carriers: list[Carrier], ln_x: Array, T: Array, element: int) -> Array:
    terms = []
    for carrier in carriers:
        assert carrier.conductance is not None
        nu = carrier.nu[element]
        g = nu * at(carrier.conductance, T)
        activity = _activity(carrier, T)
        if carrier.inventory is not None and not np.any(carrier.inventory > 0):
            activity = np.zeros(1)
        terms.append((nu, g, activity, _rest(carrier, ln_x, T, element)))
    low, high = np.full(ln_x.shape[-1], LOW), np.full(ln_x.shape[-1], HIGH)
    for _ in range(HALVINGS):
        middle = 0.5 * (low + high)
        net = sum(g * (a - np.exp(np.minimum(nu * middle + rest, 600.0))) for nu, g, a, rest in terms)
        low, high = np.where(net > 0, middle, low), np.where(net > 0, high, middle)
    return np.asarray(0.5 * (low + high))
