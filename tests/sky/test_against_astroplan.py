"""Mask, twilight, rise and set against astroplan, an independent program over astropy."""

from __future__ import annotations

import warnings
from typing import Any

import numpy as np
import pytest

from planner.sky import clock
from planner.sky.mask import observable_mask
from planner.sky.sun_moon import body_crossings, moon_rise_set, sun_crossings

PLACES = {"south": (-70.4, -24.6, 2600.0), "north": (-107.9, 30.9, 2430.0), "arctic": (25.0, 66.0, 100.0)}


def observer(place: tuple[float, float, float]) -> Any:
    import astropy.units as u
    from astroplan import Observer
    from astropy.coordinates import EarthLocation

    return Observer(EarthLocation.from_geodetic(place[0] * u.deg, place[1] * u.deg, place[2] * u.m))


@pytest.mark.parametrize("name", ["south", "north"])
def test_mask_of_altitude_night_and_moon(name: str) -> None:
    """40 stars x 3 nights of 15 minutes: no cell differs (the full job, 1e7 cells: one cell)."""
    place = PLACES[name]
    rng = np.random.default_rng(2)
    ra, dec = rng.uniform(0, 360, 40), np.degrees(np.arcsin(rng.uniform(-1, 1, 40)))
    mjd = 61480.0 + np.arange(3 * 96) / 96
    ours = observable_mask(ra, dec, mjd, *place, lowest_altitude_deg=30, sun_below_deg=-18, moon_no_closer_deg=30)
    with clock.offline_astropy(), warnings.catch_warnings():
        import astropy.units as u
        from astroplan import AltitudeConstraint, AtNightConstraint, FixedTarget, MoonSeparationConstraint
        from astropy.coordinates import SkyCoord
        from astropy.time import Time

        warnings.filterwarnings("ignore", message=".*transforming other coordinates from.*")
        stars = [FixedTarget(SkyCoord(a * u.deg, d * u.deg)) for a, d in zip(ra, dec, strict=True)]
        theirs = np.ones(ours.shape, dtype=bool)
        for rule in (
            AltitudeConstraint(30 * u.deg, None),
            AtNightConstraint(max_solar_altitude=-18 * u.deg),
            MoonSeparationConstraint(30 * u.deg, None),
        ):
            theirs &= np.asarray(rule(observer(place), stars, times=Time(mjd, format="mjd"), grid_times_targets=True))
    assert (ours == theirs).all()
    assert 300 < ours.sum() < ours.size / 2


@pytest.mark.parametrize("name", list(PLACES))
@pytest.mark.parametrize("altitude", [-6.0, -12.0, -18.0])
def test_twilight(name: str, altitude: float) -> None:
    """astroplan on a fine grid (1000 points) is good to 0.03 s; ours to 0.01 s; both ephemerides are the same."""
    place = PLACES[name]
    start = 61480.7  # 2027-03-15, afternoon UTC
    times, rising = sun_crossings(start, start + 1.0, altitude, *place)
    with clock.offline_astropy():
        import astropy.units as u
        from astropy.time import Time

        who = observer(place)
        for is_rise, call in ((False, who.sun_set_time), (True, who.sun_rise_time)):
            theirs = call(Time(start, format="mjd"), which="next", horizon=altitude * u.deg, n_grid_points=1000).mjd
            assert np.abs(times[rising == is_rise] - theirs).min() * 86400 < 0.1


@pytest.mark.parametrize("name", ["south", "north"])
def test_rise_and_set_of_a_star(name: str) -> None:
    from planner.sky.directions import altitude_deg
    from planner.sky.sun_moon import crossings

    place, (ra, dec) = PLACES[name], (110.0, -3.0)
    start = 61480.7
    times, rising = crossings(lambda t: altitude_deg(ra, dec, t, *place)[0] - 25.0, start, start + 1.0, 1 / 144)
    with clock.offline_astropy():
        import astropy.units as u
        from astroplan import FixedTarget
        from astropy.coordinates import SkyCoord
        from astropy.time import Time

        who, star = observer(place), FixedTarget(SkyCoord(ra * u.deg, dec * u.deg))
        for is_rise, call in ((True, who.target_rise_time), (False, who.target_set_time)):
            theirs = call(Time(start, format="mjd"), star, which="next", horizon=25 * u.deg, n_grid_points=1000).mjd
            assert np.abs(times[rising == is_rise] - theirs).min() * 86400 < 0.2


def test_moonrise_of_the_centre() -> None:
    place = PLACES["south"]
    times, rising = body_crossings("moon", 61480.7, 61481.8, 0.0, *place)
    with clock.offline_astropy():
        from astropy.time import Time

        who = observer(place)
        theirs = who.moon_rise_time(Time(61480.7, format="mjd"), which="next", n_grid_points=1000).mjd
    assert np.abs(times[rising] - theirs).min() * 86400 < 0.5
    # the almanac's moonrise (upper limb, refraction) comes some minutes before the centre's geometric one
    limb, up = moon_rise_set(61480.7, 61481.8, *place)
    earlier = (times[rising][0] - limb[up][0]) * 1440
    assert 1.0 < earlier < 8.0
