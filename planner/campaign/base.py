"""The base of every record read from YAML, and the faults it reports.

A fault knows where it stands (the path of keys inside the file), so that the reader can add file and line.
"""

from __future__ import annotations

import datetime as dt
import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from functools import cache
from typing import Annotated, Any, Literal, TypeVar, get_args

from pydantic import (
    AfterValidator,
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    ModelWrapValidatorHandler,
    ValidationError,
    model_validator,
)
from pydantic.json_schema import SkipJsonSchema
from pydantic_core import InitErrorDetails, PydanticCustomError

from planner.errors import Place, nearest

Keys = tuple[str | int, ...]
FAULTS = ("fault", "unknown_name", "unknown_key")  # our own kinds of pydantic error


def assumed(default: Any, why: str, **limits: Any) -> Any:
    """Declare a field that may be left out: its default and where that default comes from."""
    return Field(default=default, json_schema_extra={"assumed": why}, **limits)


# ------------------------------------------------------------------ faults


def fault(keys: Keys, text: str, value: Any = None, *, allowed: str | None = None) -> InitErrorDetails:
    """Describe something wrong at ``keys`` inside the record that is being checked."""
    kind = PydanticCustomError("fault", "{text}", {"text": text, "allowed": allowed})
    return InitErrorDetails(type=kind, loc=keys, input=value)


def unknown(keys: Keys, name: str, permitted: Iterable[str], what: str, kind: str = "unknown_name") -> InitErrorDetails:
    """Describe a name that is not among the permitted ones."""
    return InitErrorDetails(type=unknown_error(name, permitted, what, kind), loc=keys, input=name)


def unknown_error(name: str, permitted: Iterable[str], what: str, kind: str = "unknown_name") -> PydanticCustomError:
    """The same as an exception that a validator of one field can raise."""
    names = sorted(permitted)
    near = nearest(name, names)
    text = f"unknown {what} {name!r}" + (f"; did you mean {near!r}?" if near else "")
    text += f" (allowed: {', '.join(names)})"
    context = {"text": text, "name": name, "permitted": names, "what": what}
    return PydanticCustomError(kind, "{text}", context)


def raise_faults(title: str, faults: Iterable[InitErrorDetails]) -> None:
    """Raise one pydantic ``ValidationError`` with all faults, if there are any."""
    found = list(faults)
    if found:
        raise ValidationError.from_exception_data(title, found)


def moved(error: ValidationError, prefix: Keys, drop: int = 0) -> list[InitErrorDetails]:
    """The faults of ``error`` with their keys put under ``prefix``, the first ``drop`` keys left out."""
    return [_again(e, prefix + tuple(e["loc"])[drop:]) for e in error.errors(include_url=False)]


def _again(error: Any, keys: Keys) -> InitErrorDetails:
    """Make a fault that can be raised again from one that was caught."""
    kind: Any = error["type"]
    context = error.get("ctx", {})
    if kind in FAULTS:
        kind = PydanticCustomError(kind, "{text}", context)
    return InitErrorDetails(type=kind, loc=keys, input=error["input"], ctx=context)


# ------------------------------------------------------------------ records


@dataclass(frozen=True, slots=True)
class Source:
    """The file a record was read from, with the line of each field (key: path of field names and indices)."""

    path: str = "(made in Python)"
    lines: Mapping[tuple[str | int, ...], int] = field(default_factory=dict)

    def place(self, *keys: str | int) -> Place:
        """Return the place of a field, or of the nearest enclosing one that has a line."""
        for end in range(len(keys), -1, -1):
            if keys[:end] in self.lines:
                return Place(self.path, self.lines[keys[:end]])
        return Place(self.path)


Self = TypeVar("Self", bound="Record")


class Record(BaseModel):
    """Base of all records read from YAML: frozen; unknown keys, NaN, true for a number are refused."""

    model_config = ConfigDict(frozen=True, extra="forbid", allow_inf_nan=False, str_strip_whitespace=True)

    @classmethod
    def preset(cls, data: Mapping[str, Any]) -> Mapping[str, Any]:
        """Values that a named preset gives; only those of fields that ``data`` leaves out are taken."""
        return {}

    @classmethod
    def permitted_keys(cls) -> list[str]:
        """The keys a user may write."""
        return [f.alias or name for name, f in cls.model_fields.items() if name != "source"]

    @model_validator(mode="wrap")
    @classmethod
    def _clear_faults(cls, data: Any, handler: ModelWrapValidatorHandler[Self]) -> Self:
        filled: dict[str, Any] = {}
        if isinstance(data, Mapping):
            raise_faults(cls.__name__, _truths(cls, data))
            filled = {key: value for key, value in cls.preset(data).items() if key not in data}
            data = {**data, **filled}
        try:
            record = handler(data)
        except ValidationError as error:
            raise _named(cls, error) from None
        # What a preset gave counts as left out: it belongs on the list of what is assumed.
        record.model_fields_set.difference_update(filled)
        return record


class FileRecord(Record):
    """A record that is one file; ``source`` is set by the reader."""

    source: SkipJsonSchema[Source] = Field(default_factory=Source, exclude=True, repr=False)


def _named(cls: type[Record], error: ValidationError) -> ValidationError:
    """Give an unknown key of this very record the list of permitted ones."""
    details = []
    for e in error.errors(include_url=False):
        keys = tuple(e["loc"])
        if e["type"] == "extra_forbidden" and len(keys) == 1:
            details.append(unknown(keys, str(keys[0]), cls.permitted_keys(), "key", "unknown_key"))
        else:
            details.append(_again(e, keys))
    return ValidationError.from_exception_data(cls.__name__, details)


@cache
def _numeric_keys(cls: type[Record]) -> frozenset[str]:
    """Fields that hold numbers and nothing that could be true or false."""
    found = set()
    for name, f in cls.model_fields.items():
        kinds = _leaves(f.annotation)
        if kinds & {float, int} and bool not in kinds:
            found.add(f.alias or name)
    return frozenset(found)


def _leaves(annotation: Any) -> set[Any]:
    parts = get_args(annotation)
    return {annotation} if not parts else set().union(*(_leaves(part) for part in parts))


def _truths(cls: type[Record], data: Mapping[str, Any]) -> list[InitErrorDetails]:
    """Find true or false where a number belongs (it would count as 1 or 0)."""
    faults: list[InitErrorDetails] = []
    for key in data.keys() & _numeric_keys(cls):
        value = data[key]
        inner: list[tuple[Keys, Any]] = [((key,), value)]
        if isinstance(value, Mapping):
            inner = [((key, k), v) for k, v in value.items()]
        elif isinstance(value, (list, tuple)):
            inner = [((key, k), v) for k, v in enumerate(value)]
        faults += [fault(k, f"got {str(v).lower()}, needs a number", v) for k, v in inner if isinstance(v, bool)]
    return faults


# ------------------------------------------------------------------ words and days

Name = Annotated[str, Field(min_length=1, max_length=200)]
Filter = Literal["B", "g", "V", "r", "R", "i", "I"]


def _day(value: Any) -> Any:
    """A civil date from ISO text. A bare number is refused: it would be read as seconds since 1970."""
    if isinstance(value, dt.date) and not isinstance(value, dt.datetime):
        return value
    if isinstance(value, str) and re.fullmatch(r"\s*\d{4}-\d{2}-\d{2}\s*", value):
        try:
            return dt.date.fromisoformat(value.strip())
        except ValueError:
            raise ValueError(f"got {value.strip()!r}, which is no day of the calendar; write year-month-day") from None
    raise ValueError(f"got {value!r}; write a date as year-month-day, e.g. 2027-03-09")


def _years(first: int, last: int) -> AfterValidator:
    def check(day: dt.date) -> dt.date:
        if not first <= day.year <= last:
            raise ValueError(f"got {day}, needs a year from {first} to {last}")
        return day

    return AfterValidator(check)


Day = Annotated[dt.date, BeforeValidator(_day), _years(1000, 2200)]  # echoes of outbursts centuries old are seen
SightingDay = Annotated[dt.date, BeforeValidator(_day), _years(1839, 2200)]  # since there are photographs
PlanDay = Annotated[dt.date, BeforeValidator(_day), _years(1973, 2100)]  # since UTC has leap seconds


def _moment(value: Any) -> Any:
    """A moment in UTC from ISO text with a time of day; text without an offset is UTC."""
    if isinstance(value, str) and re.match(r"\s*\d{4}-\d{2}-\d{2}[T ]\d{2}:\d{2}", value):
        try:
            value = dt.datetime.fromisoformat(value.strip())
        except ValueError as error:
            raise ValueError(f"got {value.strip()!r}: {error}; write e.g. 2027-03-09T04:12:00Z") from None
    if isinstance(value, dt.datetime):
        return value.replace(tzinfo=dt.UTC) if value.tzinfo is None else value.astimezone(dt.UTC)
    raise ValueError(f"got {value!r}; write date and time in UTC, e.g. 2027-03-09T04:12:00Z")


UtcMoment = Annotated[dt.datetime, BeforeValidator(_moment)]
