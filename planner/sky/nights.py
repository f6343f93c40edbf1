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

from planner.errors import InputError
from planner.records import Floats, Ints, lock
from planner.sky.clock import checked_mjd
from planner.sky.sun_moon import SEARCH_STEP_DAYS, altaz_deg, body_crossings
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
    moment = dt.datetime(1858, 11, 17, tzinfo=dt.UTC) + dt.timedelta(days=mjd)
    return moment.astimezone(zone).date()


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
