"""The nights of a site: names, and when the Sun is low enough.

A night runs from noon to noon of local mean solar time (so every night has 24 hours), and is named by the civil
date that the site's clocks show at its evening, taken at 18 h local mean solar time. For sites far from their
zone's meridian, and beside the date line, that is the date people there call the evening.
"""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence
from dataclasses import dataclass
from zoneinfo import ZoneInfo

import numpy as np

from planner.campaign.records import ArraySite, Site, Station
from planner.errors import InputError
from planner.records import Bools, Floats, Ints, lock
from planner.sky.clock import ROTATIONS_PER_UT1_DAY, checked_mjd
from planner.sky.directions import altaz_deg as star_altaz_deg
from planner.sky.directions import hour_angle_deg
from planner.sky.horizon import horizon_deg
from planner.sky.sun_moon import (
    SEARCH_STEP_DAYS,
    SUNRISE_ALTITUDE_DEG,
    altaz_deg,
    body_crossings,
    crossings,
    moon_illumination,
    moon_rise_set,
)
from planner.units import mjd_of_date

EVENING_AFTER_NOON_DAYS = 0.25  # 18 h local mean solar time
SHORTEST_DAYS = SEARCH_STEP_DAYS / 600.0  # 1 s: shorter pieces are rounding at noon


@dataclass(frozen=True)
class Nights:
    """K nights of a site, and the D stretches in them with the Sun below the limit."""

    labels: tuple[str, ...]  # K ISO dates
    noon_mjd: Floats  # (K,) start of each night; it ends one day later
    dark_start_mjd: Floats  # (D,)
    dark_end_mjd: Floats  # (D,)
    dark_night: Ints  # (D,) index of the night; polar day: none; a night may have two stretches near the pole

    def __post_init__(self) -> None:
        lock(self)

    def dark(self, label: str) -> list[tuple[float, float]]:
        """Stretches of one night with the Sun below the limit, (start, end) MJD UTC; empty if there is none."""
        mine = self.dark_night == self.labels.index(label)
        return [(float(a), float(b)) for a, b in zip(self.dark_start_mjd[mine], self.dark_end_mjd[mine], strict=True)]


def noon_of(evening: dt.date, longitude_deg: float, time_zone: str) -> float:
    """MJD (UTC) of the local mean solar noon that begins the night named ``evening`` at a site.

    Raises InputError for an unknown time zone, and for a date that the zone skipped.
    """
    zone = _zone(time_zone)
    east_days = ((longitude_deg + 180.0) % 360.0 - 180.0) / 360.0
    for day in (mjd_of_date(evening) + shift for shift in (0.0, -1.0, 1.0)):
        noon = day + 0.5 - east_days
        if _civil_date(noon + EVENING_AFTER_NOON_DAYS, zone) == evening:
            return noon
    raise InputError(
        f"the date {evening} has no evening in time zone {time_zone} at longitude {longitude_deg:g}; "
        "check that zone and longitude belong together",
        field="time_zone",
        value=time_zone,
    )


def _zone(name: str) -> ZoneInfo:
    try:
        return ZoneInfo(name)
    except (KeyError, ValueError, OSError) as error:
        raise InputError(
            f"unknown time zone {name!r}; write an IANA name",
            field="time_zone",
            value=name,
            allowed="names such as UTC, America/Santiago, Pacific/Auckland",
        ) from error


def _civil_date(mjd: float, zone: ZoneInfo) -> dt.date:
    return _moment(mjd).astimezone(zone).date()


def site_nights(
    evenings: Sequence[dt.date],
    longitude_deg: float,
    latitude_deg: float,
    height_m: float,
    time_zone: str,
    sun_below_deg: float,
) -> Nights:
    """Nights of a site for evening dates in order, with the stretches when the Sun is below ``sun_below_deg``.

    The altitude is geometric, of the Sun's centre. Polar night: the whole 24 hours; polar day: no stretch.
    """
    noons = np.array([noon_of(day, longitude_deg, time_zone) for day in evenings], dtype=float)
    labels = tuple(day.isoformat() for day in evenings)
    if noons.size == 0:
        none = np.zeros(0)
        return Nights(labels, none, none, none, np.zeros(0, dtype=np.int64))
    checked_mjd(np.array([noons.min(), noons.max() + 1.0]), "evenings")
    first, last = float(noons.min()), float(noons.max()) + 1.0
    place = (longitude_deg, latitude_deg, height_m)
    times, rising = body_crossings("sun", first, last, sun_below_deg, *place)
    below_first = bool(altaz_deg("sun", first, *place)[0][0] <= sun_below_deg)
    starts = np.concatenate([[first] if below_first else [], times[~rising]])
    ends = np.concatenate([times[rising], [last] if starts.size > np.count_nonzero(rising) else []])
    return Nights(labels, noons, *_cut(starts, ends, noons))


def _cut(starts: Floats, ends: Floats, noons: Floats) -> tuple[Floats, Floats, Ints]:
    """Cut stretches at the noons, and say which night each piece belongs to."""
    a = np.maximum(starts[None, :], noons[:, None])
    b = np.minimum(ends[None, :], noons[:, None] + 1.0)
    night, piece = np.nonzero(b - a > SHORTEST_DAYS)
    return a[night, piece], b[night, piece], night.astype(np.int64)


# ------------------------------------------------------------------ facts of one night, for people


@dataclass(frozen=True)
class NightFacts:
    """What an observer wants to know of a night. Times are MJD UTC, nan where there is none.

    Sunset and sunrise: upper limb with 34' of refraction; twilights: the Sun's centre at -6, -12, -18 degrees,
    geometric; moonrise and moonset as almanacs give them.
    """

    label: str  # civil date at the evening
    time_zone: str
    noon_mjd: float  # the night's start; it ends a day later
    sunset_mjd: float
    civil_dusk_mjd: float
    nautical_dusk_mjd: float
    astronomical_dusk_mjd: float
    astronomical_dawn_mjd: float
    nautical_dawn_mjd: float
    civil_dawn_mjd: float
    sunrise_mjd: float
    sun: str  # "" for an ordinary night, "polar day", "polar night" (it does not rise)
    darkest: str  # darkest stage the night reaches: day, civil, nautical or astronomical twilight, or night
    moonrise_mjd: tuple[float, ...]
    moonset_mjd: tuple[float, ...]
    moon_up_at_midnight: bool
    moon_illumination: float  # at local mean midnight
    astronomical_hours: float  # Sun below -18 degrees

    def civil(self, mjd: float) -> str:
        """A moment on the site's clocks, e.g. ``2027-03-09 21:04 -03``; empty for nan."""
        if not np.isfinite(mjd):
            return ""
        local = _moment(mjd + 30.0 / 86_400.0).astimezone(_zone(self.time_zone))  # to the nearest minute
        return f"{local:%Y-%m-%d %H:%M} {local:%Z}"


_STAGES = (("civil", -6.0), ("nautical", -12.0), ("astronomical", -18.0))


def night_facts(site: Site, evening: dt.date) -> NightFacts:
    """Sun, twilights and Moon of the night named ``evening`` at a site; polar day and night are no errors.

    Raises InputError for an unknown zone or a date that it skipped, DomainError for dates outside 1900-2100.
    """
    noon = noon_of(evening, site.longitude_deg, site.time_zone)
    place = (site.longitude_deg, site.latitude_deg, site.height_m)
    sunset, sunrise = _down_and_up(*body_crossings("sun", noon, noon + 1.0, SUNRISE_ALTITUDE_DEG, *place))
    stages = {name: _down_and_up(*body_crossings("sun", noon, noon + 1.0, h, *place)) for name, h in _STAGES}
    grid = noon + np.arange(0.0, 1.0 + 1e-9, 1.0 / 288.0)
    height = altaz_deg("sun", grid, *place)[0]
    never = not np.isfinite([sunset, sunrise]).any()
    up, rising = moon_rise_set(noon, noon + 1.0, *place)
    midnight = noon + 0.5
    dark = _hours_below(noon, *body_crossings("sun", noon, noon + 1.0, -18.0, *place), float(height[0]))
    return NightFacts(
        label=evening.isoformat(), time_zone=site.time_zone, noon_mjd=noon, sunset_mjd=sunset, sunrise_mjd=sunrise,
        civil_dusk_mjd=stages["civil"][0], civil_dawn_mjd=stages["civil"][1],
        nautical_dusk_mjd=stages["nautical"][0], nautical_dawn_mjd=stages["nautical"][1],
        astronomical_dusk_mjd=stages["astronomical"][0], astronomical_dawn_mjd=stages["astronomical"][1],
        sun=("polar day" if height[0] > SUNRISE_ALTITUDE_DEG else "polar night") if never else "",
        darkest=_darkest(float(height.min())),
        moonrise_mjd=tuple(map(float, up[rising])), moonset_mjd=tuple(map(float, up[~rising])),
        moon_up_at_midnight=bool(altaz_deg("moon", midnight, *place)[0][0] > 0.0),
        moon_illumination=float(moon_illumination(midnight)),
        astronomical_hours=dark,
    )  # fmt: skip


def _down_and_up(times: Floats, rising: Bools) -> tuple[float, float]:
    """First setting after noon, and the last rising before the next noon; nan where there is none."""
    down, up = times[~rising], times[rising]
    return (float(down[0]) if down.size else np.nan), (float(up[-1]) if up.size else np.nan)


def _darkest(lowest_deg: float) -> str:
    if lowest_deg > SUNRISE_ALTITUDE_DEG:
        return "day"
    for name, height in _STAGES:
        if lowest_deg > height:
            return f"{name} twilight"
    return "night"


def _hours_below(noon: float, times: Floats, rising: Bools, first_deg: float) -> float:
    """Hours of the 24 with the Sun below the altitude of the crossings."""
    edges = np.concatenate([[noon], times, [noon + 1.0]])
    below = np.concatenate([[first_deg < -18.0], ~rising])
    return float(24.0 * np.diff(edges)[below].sum())


def _moment(mjd: float) -> dt.datetime:
    return dt.datetime(1858, 11, 17, tzinfo=dt.UTC) + dt.timedelta(days=mjd)


@dataclass(frozen=True)
class StationTimes:
    """Transit of a target over one station of an array, and when it rises and sets there (MJD UTC).

    Rise and set are the moments before and after this transit at which it passes the station's lowest elevation or
    horizon: nan where it never does; ``up``: above it at transit.
    """

    station: str
    transit_mjd: float
    rise_mjd: float
    set_mjd: float
    up: bool


def station_times(array: ArraySite, ra_deg: float, dec_deg: float, date: dt.date) -> tuple[StationTimes, ...]:
    """First transit on a UTC date over every station of an array, with rise and set; ICRS position of the date."""
    return tuple(_station_times(s, ra_deg, dec_deg, mjd_of_date(date)) for s in array.stations)


def _station_times(station: Station, ra: float, dec: float, day: float) -> StationTimes:
    when = day
    for step in range(3):
        behind = -float(hour_angle_deg(ra, dec, when, station.longitude_deg)[0, 0])
        when += (behind % 360.0 if step == 0 else behind) / (360.0 * ROTATIONS_PER_UT1_DAY)
    place = (station.longitude_deg, station.latitude_deg, station.height_m)

    def margin(t: Floats) -> Floats:
        altitude, azimuth = (x[0] for x in star_altaz_deg(ra, dec, t, *place))
        return altitude - np.maximum(station.lowest_elevation_deg, horizon_deg(station.horizon, azimuth))

    half = 0.5 / ROTATIONS_PER_UT1_DAY
    times, rising = crossings(margin, when - half, when + half, SEARCH_STEP_DAYS)
    before, after = times[rising & (times < when)], times[~rising & (times > when)]
    return StationTimes(
        station.station,
        when,
        float(before[-1]) if before.size else np.nan,
        float(after[0]) if after.size else np.nan,
        bool(margin(np.array([when]))[0] > 0.0),
    )
