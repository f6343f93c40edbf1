"""Every exception that a user can cause.

LightlagError
├── InputError          a file says something that cannot be used (place, field, value, what is allowed)
│   └── UnknownName     a name that is not there; carries the nearest spelling
├── DomainError         a number outside the domain of a formula (argument, value, limit)
└── PlanningError       the solver or its inputs cannot give a plan
    └── RecountError    a finished plan failed its independent recount; it is never shown as a plan
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from dataclasses import dataclass


class LightlagError(Exception):
    """Root of all errors that a user can cause; the command line turns it into exit code 2."""


@dataclass(frozen=True, slots=True)
class Place:
    """Where in the user's files something stands."""

    path: str
    line: int | None = None

    def __str__(self) -> str:
        return self.path if self.line is None else f"{self.path}:{self.line}"


class InputError(LightlagError):
    """A file holds a value that cannot be used.

    The message gives place, field, value, limit and remedy; the same facts are attributes.
    """

    def __init__(
        self,
        message: str,
        *,
        place: Place | None = None,
        field: str | None = None,
        value: object = None,
        allowed: str | None = None,
    ) -> None:
        self.place, self.field, self.value, self.allowed = place, field, value, allowed
        head = ", ".join(part for part in (str(place) if place else "", field or "") if part)
        text = f"{head}: {message}" if head else message
        if allowed:
            text += f" (allowed: {allowed})"
        super().__init__(text)


class UnknownName(InputError):
    """A name that is not among the permitted ones; the nearest spelling comes first."""

    def __init__(
        self,
        name: str,
        permitted: Iterable[str],
        *,
        what: str = "name",
        place: Place | None = None,
        field: str | None = None,
    ) -> None:
        names = sorted(permitted)
        self.nearest = nearest(name, names)
        hint = f"; did you mean {self.nearest!r}?" if self.nearest else ""
        super().__init__(
            f"unknown {what} {name!r}{hint}",
            place=place,
            field=field,
            value=name,
            allowed=", ".join(names) or "none are defined",
        )


class DomainError(LightlagError):
    """A number outside the domain of a formula."""

    def __init__(self, argument: str, value: object, limit: str) -> None:
        self.argument, self.value, self.limit = argument, value, limit
        super().__init__(f"{argument}: got {value}, needs {limit}")


class PlanningError(LightlagError):
    """The solver or what it was given cannot give a plan."""


class RecountError(PlanningError):
    """A finished plan broke a limit when it was counted again from the campaign alone."""

    def __init__(self, breaches: Iterable[str]) -> None:
        self.breaches = tuple(breaches)
        super().__init__("the plan fails its recount: " + "; ".join(self.breaches))


def nearest(name: str, permitted: Iterable[str]) -> str | None:
    """Return the permitted name closest in spelling to ``name``, or None when nothing is close."""
    found = difflib.get_close_matches(name, list(permitted), n=1, cutoff=0.5)
    return found[0] if found else None
