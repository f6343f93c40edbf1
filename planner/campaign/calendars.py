"""When a telescope works, what is mounted on it, and when it is taken by others."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Annotated, Any

from pydantic import BeforeValidator, Field, model_validator

from planner.campaign.base import PlanDay, Record, UtcMoment


class Nights(Record):
    """Nights from the first to the last, both included."""

    first: PlanDay = Field(alias="from")
    last: PlanDay = Field(alias="to")

    @model_validator(mode="after")
    def _order(self) -> Nights:
        if self.last < self.first:
            raise ValueError(f"to {self.last} is before from {self.first}")
        return self


class Shutdown(Nights):
    """Nights (inclusive) on which a telescope does not work."""

    why: str = ""


class Busy(Record):
    """What belongs to others: nights ``from`` .. ``to`` (both included), or the time ``start_utc`` .. ``end_utc``."""

    first: PlanDay | None = Field(default=None, alias="from")
    last: PlanDay | None = Field(default=None, alias="to")
    start_utc: UtcMoment | None = None
    end_utc: UtcMoment | None = None
    why: str = ""

    @model_validator(mode="after")
    def _one_pair(self) -> Busy:
        nights, moments = (self.first, self.last), (self.start_utc, self.end_utc)
        if not (None not in nights and moments == (None, None)) and not (
            None not in moments and nights == (None, None)
        ):
            raise ValueError("needs a date, or from and to (nights), or start_utc and end_utc (a stretch of time)")
        if self.first and self.last and self.last < self.first:
            raise ValueError(f"to {self.last} is before from {self.first}")
        if self.start_utc and self.end_utc and self.end_utc <= self.start_utc:
            raise ValueError(f"end_utc {self.end_utc:%Y-%m-%dT%H:%MZ} is not after start_utc")
        return self


def _dates(value: Any) -> Any:
    """A bare date among the entries is a night."""
    if not isinstance(value, (list, tuple)):
        return value
    return [v if isinstance(v, (Mapping, Record)) else {"from": v, "to": v} for v in value]


def _pairs(value: Any) -> Any:
    """[from, to] written as a list; a bare date is one night."""
    if not isinstance(value, (list, tuple)):
        return value
    return [
        v
        if isinstance(v, (Mapping, Record))
        else {"from": v[0], "to": v[1]}
        if isinstance(v, (list, tuple)) and len(v) == 2
        else {"from": v, "to": v}
        for v in value
    ]


BusyEntries = Annotated[tuple[Busy, ...], BeforeValidator(_dates)]
MountedNights = Annotated[tuple[Nights, ...], BeforeValidator(_pairs)]
