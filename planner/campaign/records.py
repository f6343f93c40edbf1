"""What the user wrote, as frozen validated records.

Every field that has a default carries, in ``assumed``, where the default (and its width) comes from;
``lightlag check`` lists the fields that were left out.
"""

from __future__ import annotations

import datetime as dt
import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Annotated, Any, Literal

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field, field_validator, model_validator


from planner.campaign.laws import AnyLaw, PositiveLaw
from planner.errors import Place


def assumed(default: Any, why: str, **limits: Any) -> Any:
    """Declare a field that may be left out: its default and where that default comes from."""
    return Field(default=default, json_schema_extra={"assumed": why}, **limits)


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


class Record(BaseModel):
    """Base of all records read from YAML: frozen, unknown keys refused, NaN refused."""

    model_config = ConfigDict(frozen=True, extra="forbid", allow_inf_nan=False, str_strip_whitespace=True)


class FileRecord(Record):
    """A record that is one file; ``source`` is set by the reader."""

    source: Source = Field(default_factory=Source, exclude=True, repr=False)


# ------------------------------------------------------------------ positions and times


def _angle(value: Any, *, hours: bool) -> Any:
    """Degrees from a number or from sexagesimal text (hours for right ascension)."""
    if isinstance(value, str):
        found = re.fullmatch(r"\s*([+-]?)(\d{1,3})[:h d](\d{1,2})[:m ](\d{1,2}(?:\.\d*)?)s?\s*", value)
        if not found:
            shape = "hh:mm:ss.ss" if hours else "±dd:mm:ss.s"
            raise ValueError(f"got {value!r}; write {shape} in quotes, or a number in degrees")
        sign, whole, minutes, seconds = found.groups()
        if int(minutes) >= 60 or float(seconds) >= 60:
            raise ValueError(f"got {value!r}; minutes and seconds must be below 60")
        size = int(whole) + int(minutes) / 60 + float(seconds) / 3600
        return (-size if sign == "-" else size) * (15.0 if hours else 1.0)
    return value


class Position(Record):
    """ICRS position; proper motion optional (mas/yr, ``pm_ra_mas_yr`` includes cos dec), for ``epoch``."""

    ra_deg: float = Field(alias="ra", ge=0, lt=360)
    dec_deg: float = Field(alias="dec", ge=-90, le=90)
    pm_ra_mas_yr: float = 0.0
    pm_dec_mas_yr: float = 0.0
    epoch: float = 2000.0

    @field_validator("ra_deg", mode="before")
    @classmethod
    def _ra(cls, value: Any) -> Any:
        return _angle(value, hours=True)

    @field_validator("dec_deg", mode="before")
    @classmethod
    def _dec(cls, value: Any) -> Any:
        return _angle(value, hours=False)


class Moment(Record):
    """A date with a width in days."""

    date: dt.date
    sigma_days: float = Field(ge=0)


class CoreCrossing(Moment):
    """The date a knot crossed the core as seen at one frequency."""

    at_ghz: float = Field(gt=0)


Filter = Literal["B", "g", "V", "r", "R", "i", "I"]

# ------------------------------------------------------------------ echoes


class Outburst(Record):
    """The outburst whose light is scattered. The echo clock runs from its peak."""

    peak: Moment
    lasting_days: float = Field(gt=0)
    peak_mag: dict[Filter, float]


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
        0.10, "depth changes by 10 % (1 sigma) per e-fold of delay: no sheet is exactly plane; our choice", ge=0
    )


class SeenRing(Record):
    """What was seen: the surface brightness that anchors every later one."""

    mag_arcsec2: float
    sigma: float = Field(gt=0)
    filter: Filter
    on: dt.date
    pa_deg: tuple[float, float] | None = None
    seeing_arcsec: float = assumed(1.0, "typical ground seeing at the sighting", gt=0)


class RingBrightness(Record):
    """How bright the ring is: anchored on what was ``seen``, or from an extinction with its honest width."""

    seen: SeenRing | None = None
    extinction_mag: PositiveLaw | None = None

    @model_validator(mode="after")
    def _one(self) -> RingBrightness:
        if (self.seen is None) == (self.extinction_mag is None):
            raise ValueError("give exactly one of: seen, extinction_mag")
        return self


# ------------------------------------------------------------------ goals


@dataclass(frozen=True, slots=True)
class Tolerance:
    """One standard deviation that is wanted; ``unit`` is '%' (of the value, by its logarithm) or a unit."""

    value: float
    unit: str

    def __str__(self) -> str:
        return f"{self.value:g} {self.unit}".strip()


def _tolerance(data: Any) -> Any:
    if isinstance(data, Tolerance):
        return data
    if isinstance(data, (int, float)) and not isinstance(data, bool):
        data = str(data)
    found = re.fullmatch(r"\s*([0-9.]+(?:[eE][-+]?\d+)?)\s*([%A-Za-z/0-9_]*)\s*", str(data))
    if not found or float(found.group(1)) <= 0:
        raise ValueError(f"got {data!r}; write one standard deviation above 0 with its unit, e.g. '2 %' or '45 d'")
    return Tolerance(float(found.group(1)), found.group(2))


class LearnGoal(Record):
    """A quantity wanted to a precision (one standard deviation, half the 16-84 % width)."""

    learn: str
    to: Annotated[Tolerance, BeforeValidator(_tolerance)]
    odds: float = assumed(0.8, "a goal counts as reached when its simulated odds are 80 % or more", gt=0, lt=1)
    weight: float | None = Field(default=None, gt=0)


class LooksGoal(Record):
    """A number of usable epochs wanted."""

    looks: int = Field(gt=0)
    odds: float = assumed(0.8, "a goal counts as reached when its simulated odds are 80 % or more", gt=0, lt=1)
    weight: float | None = Field(default=None, gt=0)


Goal = LearnGoal | LooksGoal

# ------------------------------------------------------------------ features


class Ring(Record):
    """A light-echo ring (or the arc of it that shines)."""

    ring: str
    dust: SheetDust
    brightness: RingBrightness
    goals: tuple[Goal, ...] = ()

    @property
    def name(self) -> str:
        """The feature's name."""
        return self.ring


class Fades(Record):
    """How a knot fades after the date its flux was measured."""

    exponential_days: float = Field(gt=0)


class KnotFlux(Record):
    """Flux density of a knot on a date, its fading and spectrum (S ~ nu^spectral_index)."""

    mjy: float = Field(gt=0)
    on: dt.date
    ghz: float = Field(gt=0)
    fades: Fades
    spectral_index: float = assumed(-0.7, "optically thin synchrotron (S ~ nu^-0.7), common practice")
    sigma_fraction: float = assumed(0.2, "flux forecast good to 20 %: calibration 5-10 % and fading, our choice", gt=0)


class KnotMotion(Record):
    """Motion of a knot: speed and position angle at ``on`` (mid-season if left out)."""

    core_crossing: CoreCrossing
    speed_mas_yr: PositiveLaw
    pa_deg: AnyLaw
    acceleration_fraction_yr: float = assumed(
        0.15, "acceleration along and across, of the speed per year (0.1-0.2); most features accelerate", ge=0
    )


class Neighbours(Record):
    """Distance to the next knots, for the safe spacing of epochs."""

    spacing_mas: float = Field(gt=0)


class Knot(Record):
    """A jet knot leaving a core."""

    knot: str
    motion: KnotMotion
    flux: KnotFlux
    size_mas: float = assumed(0.05, "compact knot; no source", ge=0)
    neighbours: Neighbours | None = None
    goals: tuple[Goal, ...] = ()

    @property
    def name(self) -> str:
        """The feature's name."""
        return self.knot


class PairMotion(Record):
    """Two knots thrown out at one moment in opposite directions."""

    ejection: Moment
    approaching_mas_d: PositiveLaw
    receding_mas_d: PositiveLaw
    pa_deg: AnyLaw
    acceleration_fraction_yr: float = assumed(
        0.15, "acceleration along and across, of the speed per year (0.1-0.2); most features accelerate", ge=0
    )


class PairFlux(KnotFlux):
    """Flux density of the approaching knot; the receding one is fainter by ``receding_ratio``."""

    receding_ratio: float = assumed(0.2, "receding knot at 1/5 of the flux; state it when known", gt=0, le=1)


class Pair(Record):
    """A two-sided pair of knots; ``pa_deg`` is the side of the approaching one."""

    pair: str
    motion: PairMotion
    flux: PairFlux
    size_mas: float = assumed(1.0, "compact ejecta, scatter-broadened; no source", ge=0)
    goals: tuple[Goal, ...] = ()

    @property
    def name(self) -> str:
        """The feature's name."""
        return self.pair


Feature = Ring | Knot | Pair


class Cosmology(Record):
    """Flat or curved Lambda-CDM numbers."""

    h0_km_s_mpc: float = assumed(70.0, "round value between published ones", gt=0)
    omega_matter: float = assumed(0.3, "round value near published ones", ge=0)
    omega_lambda: float | None = Field(default=None, ge=0)


class Spacing(Record):
    """Smallest and largest time between looks at a target."""

    at_least_days: float = Field(default=0.5, ge=0)
    at_most_days: float | None = Field(default=None, gt=0)

    @model_validator(mode="after")
    def _order(self) -> Spacing:
        if self.at_most_days is not None and self.at_most_days <= self.at_least_days:
            raise ValueError(
                f"at_most_days {self.at_most_days:g} must be above at_least_days {self.at_least_days:g}"
            )
        return self


class Nuisances(Record):
    """Widths of what no one asks for but every error contains."""

    plate_scale_sigma: float = assumed(3e-4, "relative plate scale of a setup; our choice", gt=0)
    centre_sigma_arcsec: float = assumed(0.03, "centring on the source, per setup and axis; our choice", gt=0)
    core_wander_beam: float = assumed(
        0.07, "core position of an epoch, common to all knots, per 30 days: 0.05-0.1 of a beam; common practice", gt=0
    )


class Target(FileRecord):
    """A source on the sky with its features."""

    target: str
    invented: bool = False
    note: str = ""
    position: Position
    source_now_mag: dict[Filter, float] = Field(default_factory=dict)
    outburst: Outburst | None = None
    distance_pc: PositiveLaw | None = None
    redshift: float | None = Field(default=None, gt=0, lt=20)
    cosmology: Cosmology = Field(default_factory=Cosmology)
    features: tuple[Feature, ...] = Field(min_length=1)
    spacing: Spacing = assumed(Spacing(), "looks at least half a day apart, no largest gap")
    nuisances: Nuisances = Field(default_factory=Nuisances)

    @property
    def name(self) -> str:
        """The target's name."""
        return self.target


# ------------------------------------------------------------------ sites

Twelve = tuple[float, float, float, float, float, float, float, float, float, float, float, float]


class Seeing(Record):
    """Zenith seeing (FWHM at 500 nm): lognormal."""

    median: float = Field(gt=0)
    sigma_ln: float = Field(gt=0)


class Months(Record):
    """Weather by month (January first): share of clear nights, and the one-night correlation."""

    clear: Twelve
    persistence: float = assumed(0.3, "one-night correlation of clear nights; common practice", ge=0, lt=1)
    seeing_arcsec: Seeing = assumed(Seeing(median=1.0, sigma_ln=0.3), "ordinary good site; common practice")

    @field_validator("clear")
    @classmethod
    def _share(cls, value: Twelve) -> Twelve:
        for month, share in enumerate(value, start=1):
            if not 0 < share <= 1:
                raise ValueError(f"month {month}: got {share:g}, needs a share above 0 and at most 1")
        return value


class SkyClasses(Record):
    """What the site calls dark, grey and bright: illuminated fraction of the Moon while it is up."""

    dark_below: float = assumed(0.25, "illuminated fraction, common practice; no source", ge=0, le=1)
    grey_below: float = assumed(0.65, "illuminated fraction, common practice; no source", ge=0, le=1)


class Shutdown(Record):
    """Nights (inclusive) on which a telescope does not work."""

    first: dt.date = Field(alias="from")
    last: dt.date = Field(alias="to")
    why: str = ""

    @model_validator(mode="after")
    def _order(self) -> Shutdown:
        if self.last < self.first:
            raise ValueError(f"to {self.last} is before from {self.first}")
        return self


class CameraSetup(Record):
    """One way of using an optical telescope: a camera with its filters and limits."""

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
        0.003, "correlated residual of the sky subtraction, share of the sky; caps the S/N whatever the time", ge=0
    )
    difference_imaging: bool = assumed(True, "the sky's noise counts twice (image and template)")
    glare_mag_arcsec2_at_1arcsec: float = assumed(
        5.0, "mag/arcsec2 of the image wings at 1 arcsec below the star's magnitude, at 1 arcsec seeing; from memory"
    )
    glare_slope: float = assumed(3.0, "wings fall as radius to this power; from memory", gt=2, le=4)
    glare_allowed: float = assumed(3.0, "wing light allowed, as a multiple of the ring's brightness; our choice", gt=0)

    @model_validator(mode="after")
    def _looks(self) -> CameraSetup:
        if self.shortest_look_min > self.longest_look_min:
            raise ValueError("shortest_look_min must not be above longest_look_min")
        return self


class Telescope(Record):
    """A thing that does one job at a time."""

    shutdowns: tuple[Shutdown, ...] = ()
    setups: dict[str, CameraSetup] = Field(min_length=1)


class Site(FileRecord):
    """A place with optical telescopes."""

    site: str
    invented: bool = False
    longitude_deg: float = Field(ge=-180, le=360)
    latitude_deg: float = Field(ge=-90, le=90)
    height_m: float = Field(ge=-500, le=9000)
    time_zone: str
    horizon: tuple[tuple[float, float], ...] = ()
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
    telescopes: dict[str, Telescope] = Field(min_length=1)

    @property
    def name(self) -> str:
        """The site's name."""
        return self.site


class Station(Record):
    """One antenna of an array."""

    station: str
    longitude_deg: float = Field(ge=-180, le=360)
    latitude_deg: float = Field(ge=-90, le=90)
    height_m: float = Field(ge=-500, le=9000)
    lowest_elevation_deg: float = assumed(15.0, "millimetre practice 10-20 deg", ge=0, lt=90)
    horizon: tuple[tuple[float, float], ...] = ()
    sefd_jy: dict[str, float]


class Receiver(Record):
    """A band of an array, and how a look with it is taken."""

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


class ArraySite(FileRecord):
    """Antennas on many places that observe as one."""

    array: str
    invented: bool = False
    stations: tuple[Station, ...] = Field(min_length=2)
    least_stations: int = Field(ge=2)
    receivers: dict[str, Receiver] = Field(min_length=1)
    months: Months

    @model_validator(mode="after")
    def _enough(self) -> ArraySite:
        if self.least_stations > len(self.stations):
            raise ValueError(f"least_stations {self.least_stations} is above the {len(self.stations)} stations listed")
        for station in self.stations:
            for band in station.sefd_jy:
                if band not in self.receivers:
                    raise ValueError(f"station {station.station!r}: sefd_jy names unknown receiver {band!r}")
        return self

    @property
    def name(self) -> str:
        """The array's name."""
        return self.array


AnySite = Site | ArraySite

# ------------------------------------------------------------------ campaign


class Season(Record):
    """First and last evening date of the campaign (both included)."""

    first: dt.date = Field(alias="from")
    last: dt.date = Field(alias="to")

    @model_validator(mode="after")
    def _order(self) -> Season:
        if self.last < self.first:
            raise ValueError(f"to {self.last} is before from {self.first}; swap them")
        return self


class Programme(Record):
    """A set of target files with weights."""

    name: str
    targets: tuple[str, ...] = Field(min_length=1)
    weights: dict[str, float] = Field(default_factory=dict)


SkyWord = Literal["dark", "grey", "any"]


class Allocation(Record):
    """Hours granted on a setup to a programme, for a class of sky (``grey`` includes dark)."""

    setup: str
    programme: str
    hours: float = Field(gt=0)
    sky: SkyWord = "any"

    @property
    def site_slug(self) -> str:
        """The part of ``setup`` before the slash."""
        return self.setup.split("/", 1)[0]


class FixedLook(Record):
    """A look that is already promised to a telescope."""

    target: str
    setup: str
    start_utc: dt.datetime
    minutes: float = Field(gt=0)


class CampaignFile(FileRecord):
    """``campaign.yaml`` itself."""

    campaign: str
    invented: bool = False
    note: str = ""
    season: Season
    seed: int = Field(ge=0)
    programmes: tuple[Programme, ...] = Field(min_length=1)
    allocations: tuple[Allocation, ...] = Field(min_length=1)
    fixed_looks: tuple[FixedLook, ...] = ()


@dataclass(frozen=True, slots=True)
class SetupRef:
    """A setup with all that belongs to it, found by its full name ``site/setup``."""

    name: str
    site_slug: str
    site: AnySite
    telescope: str  # "site/telescope"; an array is its own telescope
    camera: CameraSetup | None = None
    receiver: Receiver | None = None
    receiver_name: str | None = None
    shutdowns: tuple[Shutdown, ...] = ()

    @property
    def is_array(self) -> bool:
        """True for a receiver of an array, False for a camera."""
        return self.receiver is not None


@dataclass(frozen=True, slots=True)
class Campaign:
    """A whole campaign: the file, its targets and the sites it uses, cross-checked."""

    folder: str
    file: CampaignFile
    targets: tuple[Target, ...]
    sites: Mapping[str, AnySite]  # by slug (file stem)
    setups: tuple[SetupRef, ...]  # those with an allocation, in order of first mention

    @property
    def name(self) -> str:
        """The campaign's name."""
        return self.file.campaign

    def target(self, name: str) -> Target:
        """Return a target by name."""
        return next(t for t in self.targets if t.name == name)

    def setup(self, name: str) -> SetupRef:
        """Return a setup by its full name ``site/setup``."""
        return next(s for s in self.setups if s.name == name)

    def programme_of(self, target: Target) -> Programme:
        """Return the programme that a target belongs to (each target has exactly one)."""
        stem = target.source.path.rsplit("/", 1)[-1]
        return next(p for p in self.file.programmes if stem in {name.rsplit("/", 1)[-1] for name in p.targets})

    def weight_of(self, target: Target) -> float:
        """Return the weight of a target in its programme (1 unless stated)."""
        return self.programme_of(target).weights.get(target.name, 1.0)

    @property
    def nights(self) -> tuple[dt.date, ...]:
        """Every evening date of the season."""
        season = self.file.season
        return tuple(season.first + dt.timedelta(days=i) for i in range((season.last - season.first).days + 1))


