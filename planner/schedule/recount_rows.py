"""What a recount works on: the looks of a plan as its table states them, and the findings."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass, field

from planner.campaign.records import SetupRef, Target

# Tolerances, all for rounding and for the difference between two ways of computing the same thing.
ANGLE_DEG = 0.02  # altitudes and separations
SECONDS = 2.0  # times are written to the second
LIT = 0.03  # Moon's illuminated fraction where a sky class begins: it changes by that much in half a night
STEP_MIN = 5.0  # longest time between two moments at which a look is checked


@dataclass(frozen=True, slots=True)
class Row:
    """One look as the table states it."""

    number: int
    target: Target
    setup: SetupRef
    night: dt.date
    start: float  # MJD
    end: float
    exposure_s: float
    fixed: int | None  # index into the campaign's fixed looks

    @property
    def minutes(self) -> float:
        """Wall minutes."""
        return (self.end - self.start) * 1440.0

    @property
    def middle(self) -> float:
        """MJD of the middle."""
        return 0.5 * (self.start + self.end)

    def __str__(self) -> str:
        return f"look {self.number} ({self.target.name}, {self.setup.name}, {self.night})"


@dataclass(slots=True)
class Tally:
    """Findings while they are gathered, and the sky class of each camera look by its position in the plan."""

    breaches: list[str] = field(default_factory=list)
    checks: list[str] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)
    sky: dict[int, str] = field(default_factory=dict)
