"""From pydantic's list of faults to one error that names file, line, field, value and limit."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from typing import Any

from pydantic import ValidationError

from planner.campaign.base import Source
from planner.errors import InputError, UnknownName, nearest

MOST_LISTED = 10

_BOUNDS = {
    "greater_than": ("gt", "above"),
    "greater_than_equal": ("ge", "of at least"),
    "less_than": ("lt", "below"),
    "less_than_equal": ("le", "of at most"),
}
_NEEDS = {
    "model_type": "a mapping of fields",
    "model_attributes_type": "a mapping of fields",
    "dict_type": "a mapping",
    "tuple_type": "a list",
    "list_type": "a list",
    "string_type": "text; put it in quotes",
    "bool_parsing": "true or false",
    "bool_type": "true or false",
    "int_from_float": "a whole number",
    "int_parsing": "a whole number",
    "int_type": "a whole number",
    "int_parsing_size": "a smaller whole number",
    "float_parsing": "a bare number; the unit is the one in the field's name",
    "float_type": "a number",
    "finite_number": "a finite number",
    "string_pattern_mismatch": "a plain name of letters, digits and . _ + -",
}


def field_name(keys: Sequence[str | int]) -> str:
    """Write a path of keys as a user would, e.g. ``features[0].dust.depth_pc``."""
    text = ""
    for key in keys:
        text += f"[{key}]" if isinstance(key, int) else f".{key}" if text else str(key)
    return text


def shown(value: object) -> str:
    """A value in a message: short, on one line."""
    if value is None:
        return "nothing"
    if isinstance(value, Mapping):
        return "a mapping"
    if isinstance(value, (list, tuple)):
        return "a list"
    if isinstance(value, float):
        return f"{value:.10g}"
    text = str(value).lower() if isinstance(value, bool) else repr(value)
    return text if len(text) <= 60 else text[:57] + "..."


def input_error(error: ValidationError, source: Source) -> InputError:
    """Make one InputError of all that is wrong with a file: the first by line, then the others."""
    found = _without_echoes(error.errors(include_url=False))
    return joined([_one(e, source) for e in found])


def joined(errors: Iterable[InputError]) -> InputError:
    """Make one error of many: the first by line, the others listed under it (at most 10)."""
    first, *others = sorted(errors, key=lambda e: (e.place.line or 0) if e.place else 0)
    if others:
        lines = [f"also {other}" for other in others[:MOST_LISTED]]
        if len(others) > MOST_LISTED:
            lines.append(f"and {len(others) - MOST_LISTED} more")
        first.args = ("\n".join([str(first), *lines]),)
    return first


def _keys(error: Any) -> tuple[str | int, ...]:
    keys = tuple(error["loc"])
    return keys[:-1] if keys and keys[-1] == "[key]" else keys


def _without_echoes(errors: Iterable[Any]) -> list[Any]:
    """Leave out what only follows from another fault: the missing key that stands there misspelt."""
    found = list(errors)
    misspelt = {
        (_keys(e)[:-1], nearest(e["ctx"]["name"], e["ctx"]["permitted"])) for e in found if e["type"] == "unknown_key"
    }
    return [
        e
        for e in found
        if not (e["type"] == "missing" and (_keys(e)[:-1], _keys(e)[-1]) in misspelt)
        and not (e["type"] == "too_short" and any(_below(other, e) for other in found))
    ]


def _below(inner: Any, outer: Any) -> bool:
    """True for a fault inside the list that ``outer`` is about: its good entries alone were counted."""
    size = len(_keys(outer))
    return len(_keys(inner)) > size and _keys(inner)[:size] == _keys(outer)


def _one(error: Any, source: Source) -> InputError:
    keys, kind, context = _keys(error), error["type"], error.get("ctx", {})
    where: dict[str, Any] = {"place": source.place(*keys), "field": field_name(keys) or None}
    if kind in ("unknown_name", "unknown_key"):
        return UnknownName(context["name"], context["permitted"], what=context["what"], **where)
    if kind == "literal_error":
        permitted = re.findall(r"'([^']*)'", context["expected"])
        if permitted and isinstance(error["input"], str):
            words = [key for key in keys if isinstance(key, str)]
            what = "filter" if "V" in permitted else words[-1] if words else "word"
            return UnknownName(error["input"], permitted, what=what, **where)
    text, allowed = _words(kind, context, error)
    return InputError(text, value=error["input"], allowed=allowed, **where)


def _words(kind: str, context: Mapping[str, Any], error: Any) -> tuple[str, str | None]:
    """Message and what is allowed, for one fault."""
    got = f"got {shown(error['input'])}"
    if kind == "fault":
        return context["text"], context["allowed"]
    if kind == "missing":
        return "is missing", None
    if kind == "value_error":
        return str(context["error"]), None
    if kind in _BOUNDS:
        name, words = _BOUNDS[kind]
        return f"{got}, needs a value {words} {context[name]:g}", None
    if kind in ("too_short", "too_long"):
        side = "at least" if kind == "too_short" else "at most"
        limit = context["min_length" if kind == "too_short" else "max_length"]
        return f"has {context['actual_length']} entries, needs {side} {limit}", None
    if kind in ("string_too_short", "string_too_long"):
        side = "a longer" if kind == "string_too_short" else "a shorter"
        return f"{got}, needs {side} text", None
    if kind == "literal_error":
        return got, str(context["expected"])
    if kind in _NEEDS:
        return f"{got}, needs {_NEEDS[kind]}", None
    return f"{got}: {error['msg'][:1].lower()}{error['msg'][1:]}", None
