"""Sites: places with telescopes, and arrays of antennas."""

from __future__ import annotations

from collections.abc import Mapping
from difflib import get_close_matches
from typing import Any, Literal

from pydantic import Field, field_validator, model_validator
from pydantic_core import PydanticCustomError

from planner.campaign.base import (
    FileRecord,
    Filter,
    Name,
    Record,
    assumed,
    fault,
    raise_faults,
    unknown,
)
from planner.campaign.calendars import BusyEntries, MountedNights, Shutdown
from planner.campaign.exposure import Exposure
from planner.campaign.presets import CAMERAS, preset_values
from planner.campaign.site_parts import Horizon, Months, SetupName
from planner.campaign.sky_limits import SkyLimits


class SkyClasses(Record):
    """What the site calls dark, grey and bright: illuminated fraction of the Moon.

    ``by: moment``: as it is in the middle of the window, dark while the Moon is down. ``by: night``: one class for
    the whole night, from the illuminated fraction at the middle of the night, be the Moon up or down.
    """

    by: Literal["moment", "night"] = "moment"

    dark_below: float = assumed(0.25, "illuminated fraction, common practice; no source", ge=0, le=1)
    grey_below: float = assumed(0.65, "illuminated fraction, common practice; no source", ge=0, le=1)

    @model_validator(mode="after")
    def _order(self) -> SkyClasses:
        if self.grey_below < self.dark_below:
            raise ValueError(f"grey_below {self.grey_below:g} must not be under dark_below {self.dark_below:g}")
        return self


class CameraSetup(SkyLimits, Exposure):
    """One way of using an optical telescope: a camera with its filters and limits.

    ``camera`` may name a preset, which fills the fields that are left out.
    """

    camera: str | None = None
    aperture_m: float = Field(gt=0)
    obstruction: float = assumed(0.15, "share of the aperture's area that is blocked; common practice", ge=0, lt=1)
    throughput: float = assumed(0.30, "sky to electrons, telescope, filter and detector; common practice", gt=0, le=1)
    pixel_arcsec: float = assumed(0.4, "common practice", gt=0)
    read_noise_e: float = assumed(5.0, "common practice", ge=0)
    dark_e_s: float = assumed(0.002, "cooled CCD; common practice", ge=0)
    field_arcmin: float = assumed(10.0, "side of the field; common practice", gt=0)
    filter: Filter = assumed("R", "a broad red filter")
    longest_exposure_s: float = assumed(300.0, "single frame; common practice", gt=0)
    readout_s: float = assumed(20.0, "common practice", ge=0)
    acquisition_min: float = assumed(5.0, "slew and acquire; common practice", ge=0)
    shortest_look_min: float = assumed(10.0, "shutter-open minutes of the shortest useful look", gt=0)
    longest_look_min: float = assumed(120.0, "shutter-open minutes of the longest look", gt=0)
    snr_wanted: float = assumed(15.0, "summed S/N of a feature that sets the minutes of a look", gt=0)
    snr_detect: float = assumed(5.0, "below this summed S/N a feature is not measured; common practice", gt=0)
    lowest_altitude_deg: float = assumed(30.0, "airmass 2; common practice", ge=0, lt=90)
    sun_below_deg: float = assumed(-18.0, "astronomical night", le=0, ge=-30)
    image_fwhm_arcsec: float | None = Field(default=None, gt=0)  # in space, where no seeing sets it
    moon_no_closer_deg: float = assumed(30.0, "common practice", ge=0, le=180)
    sun_no_closer_deg: float = assumed(45.0, "Sun keep-out; the site's own rule comes first", ge=20, le=180)
    subtraction_floor: float = assumed(
        0.003,
        "correlated residual of the sky subtraction, share of the sky; caps the S/N whatever the time",
        ge=0,
    )
    difference_imaging: bool = assumed(True, "the sky's noise counts twice (image and template)")
    polarimeter: bool = False
    glare_mag_arcsec2_at_1arcsec: float = assumed(
        5.0,
        "mag/arcsec2 of the image wings at 1 arcsec, below the star's magnitude, in 1 arcsec seeing; from memory",
    )
    glare_slope: float = assumed(3.0, "wings fall as radius to this power; from memory", gt=2, le=4)
    glare_allowed: float = assumed(3.0, "wing light allowed, as a multiple of the ring's brightness; our choice", gt=0)

    @classmethod
    def preset(cls, data: Mapping[str, Any]) -> Mapping[str, Any]:
        """What the named camera fills."""
        return preset_values("camera", data.get("camera"), CAMERAS)

    @model_validator(mode="after")
    def _looks(self) -> CameraSetup:
        if self.shortest_look_min > self.longest_look_min:
            raise ValueError(
                f"shortest_look_min {self.shortest_look_min:g} must not be above "
                f"longest_look_min {self.longest_look_min:g}"
            )
        return self

    @property
    def sun_limit_deg(self) -> float:
        """Highest altitude of the Sun with the setup's filter."""
        return self.sun_below_by_filter_deg.get(self.filter, self.sun_below_deg)


class Telescope(Record):
    """A thing that does one job at a time.

    ``busy``: what others have: dates of nights, {from, to, why}, or {start_utc, end_utc, why}. ``busy_file``: an
    iCalendar file with more of them, beside the site file; it is read with the site file. ``mounted``: for a setup
    that is not always on the telescope, the nights [from, to] on which it is.
    """

    shutdowns: tuple[Shutdown, ...] = ()
    busy: BusyEntries = ()
    busy_file: str | None = None
    mounted: dict[SetupName, MountedNights] = Field(default_factory=dict)
    setups: dict[SetupName, CameraSetup] = Field(min_length=1)

    @model_validator(mode="after")
    def _known(self) -> Telescope:
        faults = [
            unknown(("mounted", name), name, self.setups, "setup") for name in self.mounted if name not in self.setups
        ]
        raise_faults("Telescope", faults)
        return self


class Site(FileRecord):
    """A place with optical telescopes."""

    site: Name
    invented: bool = False
    longitude_deg: float = Field(ge=-180, le=360)
    latitude_deg: float = Field(ge=-90, le=90)
    height_m: float = Field(ge=-500, le=9000)
    time_zone: str
    horizon: Horizon = ()
    months: Months
    sky_mag_arcsec2: dict[Filter, float] = assumed(
        {"B": 22.6, "g": 22.1, "V": 21.6, "r": 21.1, "R": 20.9, "i": 20.1, "I": 19.7},
        "dark zenith sky at a very good site, U B V R I from Patat 2003 (abstract); g, r, i interpolated",
    )
    extinction_mag: dict[Filter, float] = assumed(
        {"B": 0.22, "g": 0.18, "V": 0.13, "r": 0.09, "R": 0.08, "i": 0.05, "I": 0.04},
        "mag per airmass at a good mountain site; from memory",
    )
    sky_classes: SkyClasses = Field(default_factory=SkyClasses)
    telescopes: dict[SetupName, Telescope] = Field(min_length=1)

    @field_validator("time_zone")
    @classmethod
    def _zone(cls, value: str) -> str:
        from zoneinfo import available_timezones

        zones = available_timezones()
        if value not in zones:
            near = get_close_matches(value, zones, n=3, cutoff=0.6)
            allowed = f"an IANA name such as {', '.join(near) or 'UTC'}"
            raise PydanticCustomError("fault", "{text}", {"text": f"unknown time zone {value!r}", "allowed": allowed})
        return value

    @model_validator(mode="after")
    def _one_name(self) -> Site:
        owner: dict[str, str] = {}
        for telescope, record in self.telescopes.items():
            for setup in record.setups:
                if owner.setdefault(setup, telescope) != telescope:
                    text = f"telescope {owner[setup]!r} has a setup {setup!r} too; at a site names are unique"
                    raise_faults("Site", [fault(("telescopes", telescope, "setups", setup), text, setup)])
        return self

    @property
    def name(self) -> str:
        """The site's name."""
        return self.site
