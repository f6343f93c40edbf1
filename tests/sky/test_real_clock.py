"""The next ten nights, by the clock of the machine: what works for dates of the past must work today as well."""

from __future__ import annotations

import contextlib
import datetime as dt
import warnings
from collections.abc import Callable
from types import SimpleNamespace

import numpy as np

from planner.sky import clock
from planner.sky.windows import find_windows

STARS = [("A", 15.0 * h, -20.0) for h in range(0, 24, 4)]


def test_windows_of_the_next_ten_nights_agree_with_astropy_and_need_no_network(
    invented: SimpleNamespace, socket_guard: Callable[[], contextlib.AbstractContextManager[list[str]]]
) -> None:
    today = dt.datetime.now(dt.UTC).date()
    targets = [invented.target(f"{name}{i}", ra, dec) for i, (name, ra, dec) in enumerate(STARS)]
    last = today + dt.timedelta(days=9)
    camp = invented.campaign({"ridge": invented.site()}, targets, today.isoformat(), last.isoformat())
    with socket_guard() as asked, warnings.catch_warnings():
        warnings.simplefilter("ignore", clock.EarthOrientationWarning)  # an old installation says so, rightly
        found = find_windows(camp)
        assert found.minutes.sum() > 600  # 24 h of right ascension: something is always up at night
        ends = np.concatenate([found.start_mjd + 2 / 86400, found.end_mjd - 2 / 86400])
        ra = np.array([STARS[t][1] for t in np.concatenate([found.target, found.target])])
        with clock.offline_astropy():
            import astropy.units as u
            from astropy.coordinates import AltAz, EarthLocation, SkyCoord, get_sun
            from astropy.time import Time

            place = EarthLocation.from_geodetic(-70.4 * u.deg, -24.6 * u.deg, 2600 * u.m)
            frame = AltAz(obstime=Time(ends, format="mjd"), location=place)
            star = SkyCoord(ra * u.deg, -20.0 * u.deg).transform_to(frame).alt.deg
            sun = get_sun(Time(ends, format="mjd")).transform_to(frame).alt.deg
    assert asked == []
    assert star.min() > 30.0 - 1e-3
    assert sun.max() < -18.0 + 1e-3
