"""Windows of an array's receiver: one look a sidereal day, named by the UTC date at its middle."""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from planner.campaign.records import Receiver
from planner.records import Floats, Ints, Track, lock
from planner.sky.clock import ROTATIONS_PER_UT1_DAY, earth_rotation_angle
from planner.sky.directions import StarField
from planner.sky.stations import StationTrack
from planner.sky.sun_moon import separation_deg, vectors_km
from planner.units import mjd_of_date

SLACK_HOURS = 1.0  # a look may start this much (sidereal hours) before or after its best start: our choice


@dataclass(frozen=True)
class ArrayRows:
    """Windows of one target with one receiver (W rows, one a date) and its ledger by date."""

    night: Ints
    start_mjd: Floats
    end_mjd: Floats
    middle_mjd: Floats
    sun_separation_deg: Floats
    lost_altitude_hours: Floats  # (dates,)
    lost_sun_hours: Floats  # (dates,)
    lost_session_hours: Floats  # (dates,) those on which the array does not observe in this band
    left_hours: Floats  # (dates,)

    def __post_init__(self) -> None:
        lock(self)


def plain_track(stations: StationTrack) -> Track:
    """Track of the stations alone: beam and noise nan."""
    return Track(
        hours_up=stations.stretch_hours,
        look_hours=stations.look_hours,
        start_from_transit_hours=stations.look_start_hours,
        stations=stations.most_stations,
        beam_major_mas=np.nan,
        beam_minor_mas=np.nan,
        beam_pa_deg=np.nan,
        noise_jy=np.nan,
    )


def array_rows(
    evenings: Sequence[dt.date],
    field: StarField,
    star: int,
    stations: StationTrack,
    track: Track,
    receiver: Receiver,
) -> ArrayRows:
    """Windows of star number ``star`` of a field with a receiver, for consecutive UTC dates.

    ``field`` must cover each date and the day after it.

    A window is the look at its best place in the stretch with enough stations, with ``SLACK_HOURS`` on either side
    as far as the stretch goes. A date on which the Sun is closer than the receiver allows at the middle of the
    look has none, nor has one without a session of this receiver. Each date counts 24 hours; those outside the
    stretch are charged to the altitude.
    """
    dates = np.array([mjd_of_date(day) for day in evenings])
    in_session = np.array([receiver.sessions is None or day in receiver.sessions for day in evenings], dtype=bool)
    where_open = np.where(in_session, 24.0, 0.0)
    up_hours = np.where(in_session, min(24.0, track.hours_up), 0.0)
    if track.look_hours <= 0.0:
        none, zero = np.zeros(0), np.zeros(dates.size)
        return ArrayRows(np.zeros(0, dtype=np.int64), none, none, none, none, where_open, zero, 24.0 - where_open, zero)
    middle_gha = track.start_from_transit_hours + 0.5 * track.look_hours
    middle = _when(dates, field, star, middle_gha)
    sun = vectors_km("sun", middle)
    apart = separation_deg(_pairs(field, star, middle), sun / np.linalg.norm(sun, axis=1, keepdims=True))
    ok = in_session & (apart >= receiver.sun_no_closer_deg)
    before, after = _slack(stations, track)
    day = 1.0 / (24.0 * ROTATIONS_PER_UT1_DAY)  # days in a sidereal hour
    half = 0.5 * track.look_hours
    return ArrayRows(
        night=np.flatnonzero(ok).astype(np.int64),
        start_mjd=(middle - (half + before) * day)[ok],
        end_mjd=(middle + (half + after) * day)[ok],
        middle_mjd=middle[ok],
        sun_separation_deg=apart[ok],
        lost_altitude_hours=where_open - up_hours,
        lost_sun_hours=np.where(ok, 0.0, up_hours),
        lost_session_hours=24.0 - where_open,
        left_hours=np.where(ok, up_hours, 0.0),
    )


def _slack(stations: StationTrack, track: Track) -> tuple[float, float]:
    """Sidereal hours by which the look may start earlier or later and stay inside the stretch."""
    if stations.stretch_hours >= 24.0:
        return SLACK_HOURS, SLACK_HOURS
    room = max(0.0, stations.stretch_hours - track.look_hours)
    before = (track.start_from_transit_hours - stations.stretch_start_hours) % 24.0
    before = before if before <= room + 1e-9 else 0.0
    return min(SLACK_HOURS, before), min(SLACK_HOURS, room - before)


def _pairs(field: StarField, star: int, mjd: Floats) -> Floats:
    return field.pairs(np.full(mjd.size, star), mjd)


def _when(dates: Floats, field: StarField, star: int, gha_hours: float) -> Floats:
    """First moment of each UTC date at which a star has a Greenwich hour angle (two steps: exact to 1 ms)."""
    turn = 2.0 * np.pi
    when = dates.copy()
    for step in range(3):
        x, y, _ = _pairs(field, star, when).T
        gha = earth_rotation_angle(when) - np.arctan2(y, x)
        short = (gha_hours * turn / 24.0 - gha) % turn
        if step:  # near the answer the remainder may be just below a full turn
            short = (short + np.pi) % turn - np.pi
        when = when + short / (turn * ROTATIONS_PER_UT1_DAY)
    return when
