"""Light echoes as a user writes them: outburst, dust, brightness, rings."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Field, field_validator, model_validator

from planner.campaign.base import Filter, Name, Record, SightingDay, assumed, raise_faults
from planner.campaign.goals import Goal, goal_faults
from planner.campaign.laws import AnyLaw, PositiveLaw
from planner.campaign.places import Moment

Magnitude = Annotated[float, Field(ge=-30, le=40)]  # apparent, from the Sun (-27) to beyond any survey


class Outburst(Record):
    """The outburst whose light is scattered. The echo clock runs from its peak."""

    peak: Moment
    lasting_days: float = Field(gt=0)
    peak_mag: dict[Filter, Magnitude] = Field(min_length=1)


class Tilt(Record):
    """Sheet tilt: two slopes (east, north) dz/dx; ``slope_sigma`` is the width of each about its mean."""

    slope_sigma: float = Field(gt=0, le=3)
    slope_east: float = 0.0
    slope_north: float = 0.0


class SheetDust(Record):
    """A plane dust sheet."""

    shape: Literal["sheet"]
    depth_pc: AnyLaw
    tilt: Tilt = assumed(Tilt(slope_sigma=0.3), "sheets of unknown tilt: slope 0 ± 0.3 (17 deg), common practice")
    thickness_pc: float = assumed(0.5, "thin filament, common practice; no source", gt=0)
    grains: Literal["milky_way", "lmc"] = assumed("milky_way", "average Milky Way dust, R_V = 3.1 (Draine 2003)")
    drift: float = assumed(
        0.10,
        "depth changes by 10 % (1 sigma) per e-fold of delay: no sheet is exactly plane; our choice",
        ge=0,
    )


class SeenRing(Record):
    """What was seen: the surface brightness that anchors every later one.

    ``pa_deg``: the sector that shone, from the first position angle eastward to the second.
    """

    mag_arcsec2: Magnitude
    sigma: float = Field(gt=0)
    filter: Filter
    on: SightingDay
    pa_deg: tuple[float, float] | None = None
    seeing_arcsec: float = assumed(1.0, "typical ground seeing at the sighting", gt=0)

    @field_validator("pa_deg", mode="before")
    @classmethod
    def _two(cls, value: Any) -> Any:
        if value is not None and (not isinstance(value, (list, tuple)) or len(value) != 2):
            raise ValueError(f"got {value!r}, needs two position angles, e.g. [20, 75] (north through east)")
        return value

    @field_validator("pa_deg")
    @classmethod
    def _sector(cls, value: tuple[float, float] | None) -> tuple[float, float] | None:
        if value is not None:
            if any(not -360 <= angle <= 360 for angle in value):
                raise ValueError(f"got {list(value)}, needs position angles from -360 to 360")
            if value[0] == value[1]:
                raise ValueError(f"got {list(value)}, an empty sector; leave pa_deg out if the whole ring shone")
        return value


class RingBrightness(Record):
    """How bright the ring is: anchored on what was ``seen``, or from an extinction with its honest width."""

    seen: SeenRing | None = None
    extinction_mag: PositiveLaw | None = None

    @model_validator(mode="after")
    def _one(self) -> RingBrightness:
        if (self.seen is None) == (self.extinction_mag is None):
            raise ValueError("give exactly one of: seen, extinction_mag")
        return self


class Ring(Record):
    """A light-echo ring (or the arc of it that shines)."""

    ring: Name
    dust: SheetDust
    brightness: RingBrightness
    goals: tuple[Goal, ...] = ()

    @model_validator(mode="after")
    def _goals(self) -> Ring:
        raise_faults("Ring", goal_faults("ring", self.goals, self))
        return self

    @property
    def name(self) -> str:
        """The feature's name."""
        return self.ring
