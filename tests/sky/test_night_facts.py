"""Facts of one night: Sun, twilights, Moon, civil times; transits over the stations of an array."""

from __future__ import annotations

import datetime as dt
from types import SimpleNamespace

import numpy as np
import pytest

from planner.sky import clock
from planner.sky.nights import night_facts, site_nights, station_times
from planner.sky.sun_moon import altaz_deg
from planner.units import iso_of_mjd, mjd_of_iso


def test_sunset_and_sunrise_of_published_tables(invented: SimpleNamespace) -> None:
    """US Naval Observatory, 40.8939 N 83.8917 W, 2018-09-12: rise 11:13, set 23:50 UT (to the minute)."""
    ohio = invented.site(longitude_deg=-83.8917, latitude_deg=40.8939, height_m=0, time_zone="America/New_York")
    evening = night_facts(ohio, dt.date(2018, 9, 12))
    morning = night_facts(ohio, dt.date(2018, 9, 11))
    # half a minute of rounding in the table, and some seconds of ours
    assert evening.sunset_mjd == pytest.approx(mjd_of_iso("2018-09-12T23:50:00Z"), abs=40 / 86400)
    assert morning.sunrise_mjd == pytest.approx(mjd_of_iso("2018-09-12T11:13:00Z"), abs=40 / 86400)
    assert evening.civil(evening.sunset_mjd) == "2018-09-12 19:50 EDT"
    assert evening.sun == ""
    assert evening.darkest == "night"


def test_a_moon_that_is_up_for_37_minutes(invented: SimpleNamespace) -> None:
    """US Naval Observatory, 70 N 0 E, 2023-02-19: moonrise 11:28, moonset 12:05 UT."""
    north = invented.site(longitude_deg=0, latitude_deg=70, height_m=0, time_zone="UTC")
    nights = [night_facts(north, dt.date(2023, 2, day)) for day in (18, 19)]  # it stands over noon
    rises = [t for n in nights for t in n.moonrise_mjd]
    sets = [t for n in nights for t in n.moonset_mjd]
    assert min(abs(t - mjd_of_iso("2023-02-19T11:28:00Z")) for t in rises) < 60 / 86400
    assert min(abs(t - mjd_of_iso("2023-02-19T12:05:00Z")) for t in sets) < 60 / 86400


def test_times_of_a_night_are_in_order_and_at_their_altitudes(invented: SimpleNamespace) -> None:
    site = invented.site()
    facts = night_facts(site, dt.date(2027, 3, 14))
    times = [
        facts.noon_mjd, facts.sunset_mjd, facts.civil_dusk_mjd, facts.nautical_dusk_mjd, facts.astronomical_dusk_mjd,
        facts.astronomical_dawn_mjd, facts.nautical_dawn_mjd, facts.civil_dawn_mjd, facts.sunrise_mjd,
        facts.noon_mjd + 1,
    ]  # fmt: skip
    assert times == sorted(times)
    place = (site.longitude_deg, site.latitude_deg, site.height_m)
    heights = altaz_deg("sun", np.array(times[1:-1]), *place)[0]
    assert heights == pytest.approx([-50 / 60, -6, -12, -18, -18, -12, -6, -50 / 60], abs=1e-4)
    assert facts.astronomical_hours == pytest.approx((times[5] - times[4]) * 24)
    dark = site_nights([dt.date(2027, 3, 14)], *place, "America/Santiago", -18.0).dark("2027-03-14")
    assert dark == [pytest.approx((times[4], times[5]))]
    assert facts.label == "2027-03-14"
    # first quarter on 2027-03-15: half lit, sets about midnight
    assert 0.3 < facts.moon_illumination < 0.6
    assert len(facts.moonset_mjd) == 1
    assert facts.civil(facts.sunset_mjd).endswith("-03")  # Chilean summer time


def test_polar_day_night_and_white_nights_are_told(invented: SimpleNamespace) -> None:
    def at(latitude: float, day: str) -> object:
        site = invented.site(longitude_deg=15.6, latitude_deg=latitude, height_m=0, time_zone="Arctic/Longyearbyen")
        return night_facts(site, dt.date.fromisoformat(day))

    summer, winter = at(78.2, "2027-06-20"), at(78.2, "2026-12-20")
    assert (summer.sun, summer.darkest, summer.astronomical_hours) == ("polar day", "day", 0.0)
    assert np.isnan(summer.sunset_mjd)
    assert summer.civil(summer.sunset_mjd) == ""
    assert (winter.sun, winter.darkest) == ("polar night", "night")
    assert winter.astronomical_hours > 12
    assert np.isnan(winter.civil_dusk_mjd)  # it is darker than civil twilight the whole day
    white = at(60.0, "2027-06-20")
    assert (white.sun, white.darkest) == ("", "civil twilight") or white.darkest == "nautical twilight"
    assert np.isnan(white.astronomical_dusk_mjd)
    assert np.isfinite(white.sunset_mjd)


def test_transits_of_an_array_agree_with_astropy(invented: SimpleNamespace) -> None:
    array = invented.array()
    found = station_times(array, 187.278, 2.052, dt.date(2027, 3, 14))
    assert [f.station for f in found] == ["A", "B", "C"]
    with clock.offline_astropy():
        import astropy.units as u
        from astropy.coordinates import AltAz, EarthLocation, HADec, SkyCoord
        from astropy.time import Time

        star = SkyCoord(187.278 * u.deg, 2.052 * u.deg)
        for facts, station in zip(found, array.stations, strict=True):
            place = EarthLocation.from_geodetic(
                station.longitude_deg * u.deg, station.latitude_deg * u.deg, station.height_m * u.m
            )
            when = Time(facts.transit_mjd, format="mjd")
            angle = star.transform_to(HADec(obstime=when, location=place)).ha.wrap_at(180 * u.deg).arcsec
            assert abs(angle) < 5.0  # a third of a second
            ends = Time([facts.rise_mjd, facts.set_mjd], format="mjd")
            height = star.transform_to(AltAz(obstime=ends, location=place)).alt.deg
            assert height == pytest.approx([15.0, 15.0], abs=0.001)
            assert facts.up
            assert iso_of_mjd(facts.transit_mjd)[:10] == "2027-03-14"
    # the eastern station sees it first
    assert found[2].transit_mjd < found[1].transit_mjd < found[0].transit_mjd


def test_a_target_that_never_rises_or_never_sets_over_a_station(invented: SimpleNamespace) -> None:
    south = station_times(invented.array(), 187.0, -80.0, dt.date(2027, 3, 14))[0]
    assert not south.up
    assert np.isnan([south.rise_mjd, south.set_mjd]).all()
    north = station_times(invented.array(), 187.0, 85.0, dt.date(2027, 3, 14))[0]
    assert north.up
    assert np.isnan([north.rise_mjd, north.set_mjd]).all()
