"""Sites: places with telescopes, and arrays of antennas."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from difflib import get_close_matches
from typing import Annotated, Any, Literal

from pydantic import AfterValidator, Field, field_validator, model_validator
from pydantic_core import PydanticCustomError

from planner.campaign.base import (
    FileRecord,
    Filter,
    Name,
    PlanDay,
    Record,
    assumed,
    fault,
    raise_faults,
    unknown,
)
from planner.campaign.presets import CAMERAS, RECEIVERS, preset_values

Share = Annotated[float, Field(gt=0, le=1)]
Twelve = tuple[Share, Share, Share, Share, Share, Share, Share, Share, Share, Share, Share, Share]


class Seeing(Record):
    """Zenith seeing (FWHM at 500 nm): lognormal."""

    median: float = Field(gt=0)
    sigma_ln: float = Field(gt=0)


class Months(Record):
    """Weather by month (January first): share of clear nights, and the one-night correlation."""

    clear: Twelve
    persistence: float = assumed(0.3, "one-night correlation of clear nights; common practice", ge=0, lt=1)
    seeing_arcsec: Seeing = assumed(Seeing(median=1.0, sigma_ln=0.3), "ordinary good site; common practice")

    @field_validator("clear", mode="before")
    @classmethod
    def _twelve(cls, value: Any) -> Any:
        if not isinstance(value, (list, tuple)) or len(value) != 12:
            got = f"{len(value)} values" if isinstance(value, (list, tuple)) else repr(value)
            raise ValueError(f"got {got}, needs a list of 12 shares of clear nights, January first")
        return value


class SkyClasses(Record):
    """What the site calls dark, grey and bright: illuminated fraction of the Moon while it is up."""

    dark_below: float = assumed(0.25, "illuminated fraction, common practice; no source", ge=0, le=1)
    grey_below: float = assumed(0.65, "illuminated fraction, common practice; no source", ge=0, le=1)

    @model_validator(mode="after")
    def _order(self) -> SkyClasses:
        if self.grey_below < self.dark_below:
            raise ValueError(f"grey_below {self.grey_below:g} must not be under dark_below {self.dark_below:g}")
        return self


class Shutdown(Record):
    """Nights (inclusive) on which a telescope does not work."""

    first: PlanDay = Field(alias="from")
    last: PlanDay = Field(alias="to")
    why: str = ""

    @model_validator(mode="after")
    def _order(self) -> Shutdown:
        if self.last < self.first:
            raise ValueError(f"to {self.last} is before from {self.first}")
        return self


class CameraSetup(Record):
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
    moon_no_closer_deg: float = assumed(30.0, "common practice", ge=0, le=180)
    sun_no_closer_deg: float = assumed(45.0, "Sun keep-out; the site's own rule comes first", ge=20, le=180)
    subtraction_floor: float = assumed(
        0.003,
        "correlated residual of the sky subtraction, share of the sky; caps the S/N whatever the time",
        ge=0,
    )
    difference_imaging: bool = assumed(True, "the sky's noise counts twice (image and template)")
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


# A setup is called "site/setup", so neither part may hold a slash; nothing else is needed but to be readable.
SetupName = Annotated[str, Field(pattern=r"^[A-Za-z0-9][A-Za-z0-9._+-]*$")]


def _horizon(points: Any) -> Any:
    """Points of a horizon: azimuth rising from 0 to below 360, altitude within 0 to 90."""
    last = -1.0
    for azimuth, altitude in points:
        if not 0 <= azimuth < 360 or not 0 <= altitude < 90:
            raise ValueError(
                f"got [{azimuth:g}, {altitude:g}], needs azimuth from 0 to below 360 and altitude from 0 to below 90"
            )
        if azimuth <= last:
            raise ValueError(f"azimuth {azimuth:g} follows {last:g}; list the points by rising azimuth")
        last = azimuth
    return points


Horizon = Annotated[tuple[tuple[float, float], ...], AfterValidator(_horizon)]


class Telescope(Record):
    """A thing that does one job at a time."""

    shutdowns: tuple[Shutdown, ...] = ()
    setups: dict[SetupName, CameraSetup] = Field(min_length=1)


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


class Station(Record):
    """One antenna of an array."""

    station: Name
    longitude_deg: float = Field(ge=-180, le=360)
    latitude_deg: float = Field(ge=-90, le=90)
    height_m: float = Field(ge=-500, le=9000)
    lowest_elevation_deg: float = assumed(15.0, "millimetre practice 10-20 deg", ge=0, lt=90)
    horizon: Horizon = ()
    sefd_jy: dict[str, Annotated[float, Field(gt=0)]] = Field(min_length=1)


class Receiver(Record):
    """A band of an array, and how a look with it is taken.

    ``receiver_class`` may name a preset, which fills the fields that are left out.
    """

    receiver_class: str | None = None
    ghz: float = Field(gt=0)
    bandwidth_mhz: float = Field(gt=0)
    polarisations: Literal[1, 2] = 2
    efficiency: float = assumed(0.7, "two-bit sampling", gt=0, le=1)
    look_hours: float = Field(gt=0, le=24)
    on_source: float = assumed(0.7, "share of a look spent on the target; the rest goes to calibrators", gt=0, le=1)
    dynamic_range: float = assumed(1000.0, "snapshot imaging 500-2000; common practice", gt=0)
    core_mjy: float = assumed(1000.0, "core flux that sets the dynamic-range noise", ge=0)
    position_floor_beam: float = assumed(0.05, "floor of a position, share of the beam (0.05-0.2)", ge=0)
    snr_detect: float = assumed(5.0, "below this S/N a knot is not measured; common practice", gt=0)
    sun_no_closer_deg: float = assumed(10.0, "solar wind spoils phases; the array's own rule comes first", ge=0, le=180)

    @classmethod
    def preset(cls, data: Mapping[str, Any]) -> Mapping[str, Any]:
        """What the named class of receiver fills."""
        return preset_values("receiver_class", data.get("receiver_class"), RECEIVERS)


class ArraySite(FileRecord):
    """Antennas on many places that observe as one."""

    array: Name
    invented: bool = False
    stations: tuple[Station, ...] = Field(min_length=2)
    least_stations: int = Field(ge=2)
    receivers: dict[SetupName, Receiver] = Field(min_length=1)
    months: Months

    @model_validator(mode="after")
    def _whole(self) -> ArraySite:
        faults = []
        if self.least_stations > len(self.stations):
            text = f"got {self.least_stations}, above the {len(self.stations)} stations listed"
            faults.append(fault(("least_stations",), text, self.least_stations))
        for i, station in enumerate(self.stations):
            faults += [
                unknown(("stations", i, "sefd_jy", band), band, self.receivers, "receiver")
                for band in station.sefd_jy
                if band not in self.receivers
            ]
        for name, count in Counter(station.station for station in self.stations).items():
            if count > 1:
                faults.append(fault(("stations",), f"station {name!r} is listed {count} times", name))
        raise_faults("ArraySite", faults)
        return self

    @property
    def name(self) -> str:
        """The array's name."""
        return self.array


AnySite = Site | ArraySite
