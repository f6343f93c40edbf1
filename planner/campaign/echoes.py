"""Light echoes as a user writes them: brightness, templates, rings."""

from __future__ import annotations

from typing import Any, Literal

from pydantic import Field, field_validator, model_validator

from planner.campaign.base import Filter, Name, Record, SightingDay, UtcMoment, assumed, fault, raise_faults
from planner.campaign.dust import AnyDust, FilledDust, ScreenDust, SheetDust, ShellDust, Tilt
from planner.campaign.goals import Goal, goal_faults
from planner.campaign.laws import PositiveLaw
from planner.campaign.outbursts import Magnitude, Outburst, Pulse

__all__ = [
    "FilledDust", "Magnitude", "Outburst", "Pulse", "Ring", "RingBrightness", "ScreenDust", "SeenRing", "SheetDust",
    "ShellDust", "Template", "Tilt",
]  # fmt: skip

RadiusOf = Literal["mean", "outer_edge", "ridge"]


class Template(Record):
    """An image of the same field, free of the echo where it is now, that is subtracted from later ones."""

    setup: Name
    filter: Filter
    on: SightingDay
    minutes: float = Field(gt=0)
    start_utc: UtcMoment | None = None  # airmass and parallactic angle are those at transit unless it is given


def colour_filters(key: str) -> tuple[str, str]:
    """Return the two filters of a colour such as ``V-R``. Raises ValueError."""
    from typing import get_args

    parts = tuple(part.strip() for part in key.split("-"))
    if len(parts) != 2 or parts[0] == parts[1] or any(part not in get_args(Filter) for part in parts):
        raise ValueError(
            f"got the colour {key!r}; write two different filters, e.g. V-R (of {', '.join(get_args(Filter))})"
        )
    return parts[0], parts[1]


class SeenRing(Record):
    """What was seen: the surface brightness that anchors every later one.

    ``pa_deg``: the sector that shone, from the first position angle eastward to the second. ``colours``: of the
    ring, e.g. ``{V-R: 0.3}``; without them the outburst's own colours are taken. ``polarised_mag_arcsec2``:
    polarised surface brightness of dust all around the source, where it scatters by 90 degrees.
    """

    mag_arcsec2: Magnitude | None = None
    polarised_mag_arcsec2: Magnitude | None = None
    sigma: float = Field(gt=0)
    filter: Filter
    on: SightingDay
    pa_deg: tuple[float, float] | None = None
    seeing_arcsec: float = assumed(1.0, "typical ground seeing at the sighting", gt=0)
    colours: dict[str, float] = Field(default_factory=dict)

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

    @field_validator("colours")
    @classmethod
    def _colours(cls, value: dict[str, float]) -> dict[str, float]:
        for key in value:
            colour_filters(key)
        return value

    @property
    def mag(self) -> float:
        """The surface brightness that was seen, in total or in polarised light."""
        value = self.polarised_mag_arcsec2 if self.mag_arcsec2 is None else self.mag_arcsec2
        assert value is not None
        return value


class RingBrightness(Record):
    """How bright the ring is: anchored on what was ``seen``, or from an extinction with its honest width.

    ``extinction_mag`` is of the dust along the line of sight (of a shell: from its source outward);
    ``extinction_mag_pc``, per parsec, is for dust all around the source.
    """

    seen: SeenRing | None = None
    extinction_mag: PositiveLaw | None = None
    extinction_mag_pc: PositiveLaw | None = None

    @model_validator(mode="after")
    def _one(self) -> RingBrightness:
        if sum(value is not None for value in (self.seen, self.extinction_mag, self.extinction_mag_pc)) != 1:
            raise ValueError("give exactly one of: seen, extinction_mag")
        return self


class Ring(Record):
    """A light-echo ring (or the arc of it that shines)."""

    ring: Name
    dust: AnyDust
    brightness: RingBrightness
    radius_of: RadiusOf = assumed("ridge", "a measured radius is that of the brightest line, the light of the peak")
    templates: tuple[Template, ...] = ()
    direct: bool = False
    goals: tuple[Goal, ...] = ()

    @model_validator(mode="after")
    def _whole(self) -> Ring:
        raise_faults("Ring", [*self._light_faults(), *goal_faults("ring", self.goals, self)])
        return self

    def _light_faults(self) -> list[Any]:
        """Total light for a ring, polarised light for dust all around the source."""
        light, filled = self.brightness, isinstance(self.dust, FilledDust)
        wanted, other = ("mag_arcsec2", "polarised_mag_arcsec2")[:: -1 if filled else 1]
        why = "dust all around the source shows no ring in total light" if filled else "it is no filled dust"
        if light.seen is not None:
            keys = ("brightness", "seen")
            if getattr(light.seen, other) is not None:
                return [fault((*keys, other), f"{why}: give {wanted}", getattr(light.seen, other))]
            if getattr(light.seen, wanted) is None:
                text = f"{wanted} is missing" + (f": {why}" if filled else "")
                return [fault((*keys, wanted), text)]
            return []
        wanted, other = ("extinction_mag", "extinction_mag_pc")[:: -1 if filled else 1]
        if getattr(light, other) is not None:
            return [fault(("brightness", other), f"needs {wanted} with dust of shape {self.dust.shape!r}")]
        return []

    @property
    def name(self) -> str:
        """The feature's name."""
        return self.ring
