"""Limits that a setup may set on where it looks, all of them optional: left out, they forbid nothing."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Annotated, Any

from pydantic import Field, model_validator

from planner.campaign.base import Filter, Record, fault, raise_faults

Range = tuple[float, float]
SunAltitude = Annotated[float, Field(ge=-30, le=0)]


class MatchTemplate(Record):
    """How near a look must be to its template: in airmass, in parallactic angle, or both.

    Residuals of a subtraction grow with the difference in atmospheric dispersion and in the direction of the
    telescope's spikes. The template is the longest one that a target has with the setup's filter.
    """

    airmass_within: float | None = Field(default=None, gt=0)
    parallactic_within_deg: float | None = Field(default=None, gt=0, le=180)

    @model_validator(mode="after")
    def _something(self) -> MatchTemplate:
        if self.airmass_within is None and self.parallactic_within_deg is None:
            raise ValueError("has neither airmass_within nor parallactic_within_deg; write one, or leave it out")
        return self


class SkyLimits(Record):
    """Optional limits of an optical setup.

    ``hour_angle_deg``: west positive, e.g. [-75, 75]; a range over the lower meridian is written past 180, e.g.
    [105, 255]. ``parallactic_deg``: angle at the target from the pole to the zenith, positive west of the meridian.
    ``moon_at_most_lit``: illuminated fraction, counts while the Moon's centre is up.
    """

    sun_below_by_filter_deg: dict[Filter, SunAltitude] = Field(default_factory=dict)
    largest_airmass: float | None = Field(default=None, gt=1, le=38)  # 38 is the horizon
    airmass: Range | None = None
    zenith_blind_deg: float | None = Field(default=None, gt=0, lt=90)
    hour_angle_deg: Range | None = None
    declination_deg: Range | None = None
    parallactic_deg: Range | None = None
    moon_below_deg: float | None = Field(default=None, ge=-90, le=90)
    moon_at_most_lit: float | None = Field(default=None, ge=0, le=1)
    match_template: MatchTemplate | None = None

    @model_validator(mode="after")
    def _ranges(self) -> SkyLimits:
        raise_faults(type(self).__name__, list(_range_faults(self)))
        return self

    @property
    def airmass_range(self) -> Range:
        """Smallest and largest airmass allowed, from ``airmass`` and ``largest_airmass`` together."""
        low, high = self.airmass or (1.0, float("inf"))
        return low, min(high, self.largest_airmass or float("inf"))


_BOUNDS: dict[str, tuple[float, float]] = {
    "airmass": (1.0, 38.0),
    "hour_angle_deg": (-360.0, 360.0),
    "declination_deg": (-90.0, 90.0),
    "parallactic_deg": (-360.0, 360.0),
}


def _range_faults(record: SkyLimits) -> Iterator[Any]:
    for name, (least, most) in _BOUNDS.items():
        value = getattr(record, name)
        if value is None:
            continue
        low, high = value
        if not low < high:
            yield fault((name,), f"got [{low:g}, {high:g}], needs [from, to] with from below to", value)
        elif low < least or high > most:
            text = f"got [{low:g}, {high:g}], needs values from {least:g} to {most:g}"
            yield fault((name,), text, value)
        elif name in ("hour_angle_deg", "parallactic_deg") and high - low > 360.0:
            yield fault((name,), f"got [{low:g}, {high:g}], which spans more than a full turn", value)
    low, high = record.airmass_range
    if low >= high:
        text = f"largest_airmass {high:g} leaves nothing of airmass [{low:g}, ...]"
        yield fault(("largest_airmass",), text, record.largest_airmass)
