"""A table of a scenario file held against its model.

Text that stands for a table (``container = "magnesia"``) is turned into one before the models see it,
so that no key is of two kinds.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from difflib import get_close_matches
from typing import Any, Final, get_args

from pydantic import BaseModel, ValidationError

from purity.scenario_lines import Place
from purity.scenario_schema import Form

_REFS: Final = ("furnace", "container", "material", "atmosphere", "fill", "outside", "gas")
_LISTS: Final = ("immersed", "support", "wrap", "handling", "neighbour")
_PARTS: Final = ("immersed", "support", "wrap")
_GASES: Final = ("atmosphere", "exhaust", "fill", "outside", "gas")


def _gas(table: dict[str, Any]) -> dict[str, Any]:
    """Move the species of an inline gas into one place; those that fill up to 1 into another."""
    own = {key: value for key, value in table.items() if key in ("ref", "name", "dew_point")}
    species = {key: value for key, value in table.items() if key not in own}
    fractions = {key: value for key, value in species.items() if value != "rest"}
    if fractions or not own:
        own["fractions"] = fractions
    rest = [key for key, value in species.items() if value == "rest"]
    return own | ({"rest": rest} if rest else {})


def normal(table: Mapping[str, Any]) -> dict[str, Any]:
    """Turn the short forms of a table into the long ones; the short ones are text for a table."""
    out: dict[str, Any] = {}
    for key, value in table.items():
        if key in _LISTS:
            items = value if isinstance(value, list) else [value]
            value = [_part(key, item) for item in items if item != "none"]
        elif key in _REFS and isinstance(value, str):
            value = {"ref": value}
        elif key == "certificate" and isinstance(value, dict):
            value = {k: v if isinstance(v, dict) else {"value": v} for k, v in value.items()}
        elif key in _GASES and isinstance(value, dict):
            value = _gas(value)
        elif isinstance(value, dict):
            value = normal(value)
        out[key] = value
    return out


def _part(key: str, item: Any) -> Any:
    """One of several things that touch: its material may stand beside its area."""
    if isinstance(item, str) and key != "handling":
        item = {"material": item}
    if not isinstance(item, dict):
        return item
    item = normal(item)
    if key in _PARTS and isinstance(item.get("material"), dict):
        item = {**item.pop("material"), **item}
    return item


def _explain(error: Any, model: type[BaseModel]) -> str:
    """Say in plain words what a model did not take."""
    kind, context = error["type"], error.get("ctx") or {}
    if kind == "quantity":
        return str(context["why"])
    if kind == "extra_forbidden":
        known = _keys_at(model, error["loc"][:-1])
        near = get_close_matches(str(error["loc"][-1]), known, 3, 0.5)
        return f"unknown key; {'nearest: ' + ', '.join(near) if near else 'known: ' + ', '.join(known)}"
    if kind == "literal_error":
        return f"{error['input']!r} is not known; write one of {context['expected']}"
    wanted = {
        "string_type": "text in quotes is wanted",
        "bool_type": "true or false is wanted",
        "list_type": "a list is wanted: [ ... ]",
        "dict_type": "a table is wanted: { ... }",
        "model_type": "a table is wanted: { ... }",
    }
    if kind == "model_type" and error["loc"][-1] in _REFS:
        return f"{error['input']!r}: a name in quotes or a table is wanted"
    return f"{error['input']!r}: {wanted.get(kind, error['msg'])}"


def _keys_at(model: type[BaseModel], place: Place) -> list[str]:
    """Keys of the model at a place inside a model."""
    for key in place:
        field = model.model_fields.get(str(key))
        found = _inner(field.annotation) if field else None
        model = found or model
    return sorted(set(model.model_fields) - {"ref", "fractions", "rest"})


def _inner(annotation: Any) -> type[BaseModel] | None:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    return next((found for part in get_args(annotation) if (found := _inner(part))), None)


def _without(table: dict[str, Any], place: Place) -> None:
    """Remove the value at a place; the whole list where it stands in one."""
    first = next((i for i, key in enumerate(place) if isinstance(key, int)), len(place))
    *path, last = place[:first]
    here: Any = table
    for key in path:
        here = here.get(key, {})
    if here.pop(last, here) is here:
        table.pop(str(place[0]), None)


def validate(
    model: type[Form], table: Mapping[str, Any], found: Callable[[Place, str], None]
) -> dict[str, Any]:
    """Check a table against its model, tell every fault, and return what is left when they are out.

    Parameters
    ----------
    model : type
    table : mapping
        As read from the file.
    found : callable
        Takes the place of a fault inside the table and its text.

    Returns
    -------
    dict
        Values of the keys that were given and are sound.
    """
    rest = normal(table)
    while True:
        try:
            checked = model.model_validate(rest)
        except ValidationError as error:
            for fault in error.errors(include_url=False):
                place = tuple(key for key in fault["loc"] if key != "[key]")
                found(place, _explain(fault, model))
                _without(rest, place)
        else:
            return {key: getattr(checked, key) for key in checked.model_fields_set}
