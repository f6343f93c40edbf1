"""YAML text to plain values, with the line of every field; what YAML would let pass in silence is an error.

Numbers, true, false and null are recognised; dates, sexagesimal angles, ``on``, ``off``, ``yes`` and ``no``
stay text (older YAML rules would turn ``06:14:22`` into a number and the key ``on`` into true).
"""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any

import yaml

from planner.campaign.base import Source
from planner.errors import InputError, Place

Keys = tuple[str | int, ...]
MOST_LEVELS = 60  # a target needs about eight
MOST_VALUES = 200_000  # a file that expands to more is a mistake (or repeats itself by aliases)

_TAG = "tag:yaml.org,2002:"
_Base: Any = getattr(yaml, "CSafeLoader", yaml.SafeLoader)  # the compiled reader, where there is one


class _Loader(_Base):
    """A YAML reader that knows numbers, true, false and null only."""

    yaml_implicit_resolvers: dict[str, Any] = {}  # noqa: RUF012 - pyyaml's own way to hold them


_RULES = (
    ("null", r"^(?:~|null|Null|NULL|)$", ["~", "n", "N", ""]),
    ("bool", r"^(?:true|True|TRUE|false|False|FALSE)$", list("tTfF")),
    ("int", r"^[-+]?[0-9]+$", list("-+0123456789")),
    (
        "float",
        r"^(?:[-+]?(?:\.[0-9]+|[0-9]+(?:\.[0-9]*)?)(?:[eE][-+]?[0-9]+)?|[-+]?\.(?:inf|Inf|INF)|\.(?:nan|NaN|NAN))$",
        list("-+0123456789."),
    ),
)
for _name, _pattern, _first in _RULES:
    _Loader.add_implicit_resolver(_TAG + _name, re.compile(_pattern), _first)


def read_yaml(path: Path, shown: str) -> tuple[Any, Source]:
    """Read one file.

    ``shown``: the path as the user wrote it, for messages. Returns the plain value (mappings have text keys)
    and the source with the line of every key and item. Raises InputError naming file and line.
    """
    text = _text(path, shown)
    root = _compose(text, shown)
    if root is None:
        raise InputError("the file is empty", place=Place(shown))
    walk = _Walk(shown)
    return walk.value(root, ()), Source(shown, walk.lines)


def _text(path: Path, shown: str) -> str:
    try:
        data = path.read_bytes()
    except FileNotFoundError:
        raise InputError("there is no such file", place=Place(shown)) from None
    except OSError as error:
        raise InputError(f"cannot be read: {error.strerror}", place=Place(shown)) from None
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        text = f"byte 0x{data[error.start]:02x} is not UTF-8 text; save the file as UTF-8"
        raise InputError(text, place=Place(shown, line)) from None


def _compose(text: str, shown: str) -> Any:
    try:
        return yaml.compose(text, Loader=_Loader)
    except yaml.MarkedYAMLError as error:
        mark = error.problem_mark or error.context_mark
        line = mark.line + 1 if mark else None
        problem = " ".join(part for part in (error.context, error.problem) if part)
        raise InputError(f"not valid YAML: {problem}", place=Place(shown, line)) from None
    except yaml.YAMLError as error:  # a character that may not stand in YAML text
        line = text[: getattr(error, "position", 0)].count("\n") + 1
        raise InputError(f"not valid YAML: {str(error).splitlines()[0]}", place=Place(shown, line)) from None
    except RecursionError:
        raise InputError(f"nested more than {MOST_LEVELS} levels deep", place=Place(shown)) from None


class _Walk:
    """From YAML nodes to plain values, noting lines on the way."""

    def __init__(self, shown: str) -> None:
        self.shown = shown
        self.lines: dict[Keys, int] = {}
        self._open: set[int] = set()

    def value(self, node: Any, keys: Keys) -> Any:
        """Return the plain value of a node that stands at ``keys``."""
        self.lines.setdefault(keys, node.start_mark.line + 1)
        if len(self.lines) > MOST_VALUES:
            raise self._error(node, f"the file holds more than {MOST_VALUES} values")
        if len(keys) > MOST_LEVELS:
            raise self._error(node, f"nested more than {MOST_LEVELS} levels deep")
        if id(node) in self._open:
            raise self._error(node, "an alias refers to a value that contains it")
        self._open.add(id(node))
        try:
            if isinstance(node, yaml.MappingNode):
                return self._mapping(node, keys)
            if isinstance(node, yaml.SequenceNode):
                self._plain_tag(node, "seq")
                return [self.value(item, (*keys, i)) for i, item in enumerate(node.value)]
            return self._scalar(node)
        finally:
            self._open.discard(id(node))

    def _mapping(self, node: Any, keys: Keys) -> dict[str, Any]:
        self._plain_tag(node, "map")
        found: dict[str, Any] = {}
        for key_node, value_node in node.value:
            if not isinstance(key_node, yaml.ScalarNode):
                raise self._error(key_node, "a key must be a word, not a list or a mapping")
            key = key_node.value
            if key in found:
                first = self.lines[(*keys, key)]
                raise self._error(key_node, f"key {key!r} stands twice; the first is on line {first}", key)
            self.lines[(*keys, key)] = key_node.start_mark.line + 1
            found[key] = self.value(value_node, (*keys, key))
        return found

    def _scalar(self, node: Any) -> Any:
        kind, text = str(node.tag).removeprefix(_TAG), node.value
        if kind == "null":
            return None
        if kind == "bool":
            return text.lower() == "true"
        try:
            if kind == "int":
                return int(text)
            if kind == "float":
                return float(text.replace(".inf", "inf").replace(".nan", "nan").replace(".NaN", "nan").lower())
        except ValueError:
            raise self._error(node, f"{text[:40]!r} is not a number that can be used", text) from None
        if kind != "str":
            raise self._error(node, f"the tag {node.tag!r} is not known here; write the plain value", text)
        return text

    def _plain_tag(self, node: Any, kind: str) -> None:
        if node.tag != _TAG + kind:
            raise self._error(node, f"the tag {node.tag!r} is not known here; write the plain value")

    def _error(self, node: Any, text: str, value: object = None) -> InputError:
        return InputError(text, place=Place(self.shown, node.start_mark.line + 1), value=value)
