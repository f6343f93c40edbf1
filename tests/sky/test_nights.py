"""Names of nights, and the dark part of each."""

from __future__ import annotations

import datetime as dt
from types import SimpleNamespace

import numpy as np
import pytest

from planner.errors import InputError
from planner.sky.nights import noon_of, site_nights
from planner.sky.sun_moon import altaz_deg
from planner.units import mjd_of_iso

MARCH_9 = dt.date(2027, 3, 9)


@pytest.mark.parametrize(
    ("longitude", "zone", "evening_utc"),  # an evening hour that clocks there call 20:00 (or so) on 9 March 2027
    [
        (-70.4, "America/Santiago", "2027-03-09T23:00:00Z"),  # UTC-3
        (149.1, "Australia/Sydney", "2027-03-09T09:00:00Z"),  # UTC+11
        (174.8, "Pacific/Auckland", "2027-03-09T07:00:00Z"),  # UTC+13, beside the date line
        (-157.4, "Pacific/Kiritimati", "2027-03-09T06:00:00Z"),  # UTC+14 at a western longitude
        (-155.5, "Pacific/Honolulu", "2027-03-10T06:00:00Z"),  # UTC-10: the same meridian, a day apart
        (202.6, "Pacific/Kiritimati", "2027-03-09T06:00:00Z"),  # longitude written east of 180
        (-171.8, "Pacific/Apia", "2027-03-09T07:00:00Z"),  # UTC+13, west longitude
        (87.6, "Asia/Shanghai", "2027-03-09T13:00:00Z"),  # clocks two hours ahead of the Sun
        (0.0, "UTC", "2027-03-09T20:00:00Z"),
    ],
)
def test_a_night_is_named_by_the_civil_date_at_its_evening(longitude: float, zone: str, evening_utc: str) -> None:
    noon = noon_of(MARCH_9, longitude, zone)
    evening = mjd_of_iso(evening_utc)
    assert noon + 0.15 < evening < noon + 0.5
    assert site_nights([MARCH_9], longitude, -10.0, 0.0, zone, -18.0).labels == ("2027-03-09",)


def test_noon_is_that_of_the_mean_sun() -> None:
    # closed form: 12 h - longitude/15 in UTC
    assert noon_of(MARCH_9, -90.0, "America/Chicago") == pytest.approx(61473 + 0.75, abs=1e-12)


def test_nights_of_a_year_follow_one_another_through_changes_of_summer_time(invented: SimpleNamespace) -> None:
    days = invented.dates("2027-01-01", 365)
    for zone, longitude in (("America/Santiago", -70.4), ("Europe/Madrid", -17.9), ("Pacific/Auckland", 170.5)):
        noons = np.array([noon_of(day, longitude, zone) for day in days])
        assert (np.diff(noons) == 1.0).all()


def test_dark_stretch_of_a_middle_latitude_night_has_the_sun_at_its_limit_at_both_ends() -> None:
    place = (-70.4, -24.6, 2600.0)
    nights = site_nights([MARCH_9, dt.date(2027, 3, 10)], *place, "America/Santiago", -18.0)
    ((start, end),) = nights.dark("2027-03-09")
    assert altaz_deg("sun", [start, end], *place)[0] == pytest.approx(-18.0, abs=1e-4)  # 1 s of time: 0.004 deg
    assert nights.noon_mjd[0] < start < end < nights.noon_mjd[0] + 1
    assert float(altaz_deg("sun", 0.5 * (start + end), *place)[0][0]) < -18.0
    assert nights.dark_night.tolist() == [0, 1]


def test_polar_day_has_no_dark_stretch_and_polar_night_has_24_hours() -> None:
    place = (15.6, 78.2, 50.0)
    june = site_nights([dt.date(2027, 6, 20), dt.date(2027, 6, 21)], *place, "Arctic/Longyearbyen", -6.0)
    assert june.dark_night.size == 0
    assert june.dark("2027-06-20") == []
    december = site_nights([dt.date(2026, 12, 20), dt.date(2026, 12, 21)], *place, "Arctic/Longyearbyen", -6.0)
    assert (december.dark_end_mjd - december.dark_start_mjd).tolist() == pytest.approx([1.0, 1.0], abs=1e-9)
    assert december.dark("2026-12-21")[0] == pytest.approx((december.noon_mjd[1], december.noon_mjd[1] + 1))


def test_a_night_near_the_pole_may_have_two_dark_stretches() -> None:
    """The Sun clears the limit for minutes about true noon, 13 minutes before mean noon in late November."""
    place = (15.6, 78.2, 50.0)
    day = dt.date(2026, 11, 24)
    noon = noon_of(dt.date(2026, 11, 25), place[0], "Arctic/Longyearbyen")
    near = noon + np.linspace(-0.05, 0.05, 2001)
    top = float(altaz_deg("sun", near, *place)[0].max())
    nights = site_nights([day], *place, "Arctic/Longyearbyen", top - 0.005)
    (a, b), (c, d) = nights.dark("2026-11-24")
    assert a < b < c < d
    assert d == pytest.approx(nights.noon_mjd[0] + 1.0)
    assert 0.02 > c - b > 60 / 86400  # a quarter of an hour of Sun


def test_no_nights_at_all_is_an_empty_record() -> None:
    empty = site_nights([], 0.0, 50.0, 0.0, "UTC", -18.0)
    assert empty.labels == ()
    assert empty.dark_start_mjd.size == 0


def test_unknown_zone_and_skipped_date_are_named() -> None:
    with pytest.raises(InputError, match="unknown time zone 'Mars/Olympus'; write an IANA name"):
        noon_of(MARCH_9, 0.0, "Mars/Olympus")
    # Samoa skipped 30 December 2011 when it changed sides of the date line
    with pytest.raises(InputError, match="the date 2011-12-30 has no evening in time zone Pacific/Apia"):
        noon_of(dt.date(2011, 12, 30), -171.8, "Pacific/Apia")
