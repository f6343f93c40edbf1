"""The yes-or-no mask against a plain twin and against the same limits in astroplan."""

from __future__ import annotations

import warnings

import numpy as np
import pytest

from planner.errors import DomainError
from planner.sky import clock, mask
from planner.sky.directions import altitude_deg, site_frame, star_directions
from planner.sky.sun_moon import altaz_deg, seen_from

PLACE = (-70.4, -24.6, 2600.0)


def stars(count: int) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(11)
    return rng.uniform(0, 360, count), np.degrees(np.arcsin(rng.uniform(-1, 1, count)))


def test_mask_agrees_with_a_plain_loop() -> None:
    """One star and one time at a time, with angles instead of sines."""
    ra, dec = stars(12)
    mjd = 61500.4 + np.linspace(0, 2.0, 60)
    got = mask.observable_mask(
        ra, dec, mjd, *PLACE, lowest_altitude_deg=30.0, sun_below_deg=-12.0, moon_no_closer_deg=40.0
    )
    sun = altaz_deg("sun", mjd, *PLACE)[0]
    for j, t in enumerate(mjd):
        moon = seen_from("moon", np.array([t]), site_frame(t, *PLACE)).unit[:, 0]
        for i in range(ra.size):
            up = float(altitude_deg(ra[i], dec[i], t, *PLACE)[0, 0]) >= 30.0
            apart = np.degrees(np.arccos(star_directions(ra[i], dec[i], t)[0, 0] @ moon))
            assert got[i, j] == (up and sun[j] <= -12.0 and apart >= 40.0)
    assert 0 < got.sum() < got.size


@pytest.mark.parametrize("start", [61377.5, 61750.5])  # next week, and past the end of the table of 2026
def test_mask_agrees_with_astroplan(start: float) -> None:
    # bar: 3 cells of 10 million; here 40 x 864 = 35,000 cells, so none may differ
    ra, dec = stars(40)
    mjd = start + np.arange(864) * 5 / 1440
    with clock.offline_astropy():
        import astropy.units as u
        from astroplan import AltitudeConstraint, AtNightConstraint, FixedTarget, MoonSeparationConstraint, Observer
        from astropy.coordinates import EarthLocation, SkyCoord
        from astropy.time import Time

        # an ICRS target seen from the Earth's surface changes its origin: stated for every Moon separation
        warnings.filterwarnings("ignore", message=".*transforming other coordinates from.*")
        observer = Observer(EarthLocation.from_geodetic(PLACE[0] * u.deg, PLACE[1] * u.deg, PLACE[2] * u.m))
        targets = [FixedTarget(SkyCoord(a * u.deg, d * u.deg)) for a, d in zip(ra, dec, strict=True)]
        rules = [
            AltitudeConstraint(30 * u.deg, None),
            AtNightConstraint.twilight_astronomical(),
            MoonSeparationConstraint(30 * u.deg, None),
        ]
        times = Time(mjd, format="mjd")
        parts = [np.asarray(rule(observer, targets, times=times, grid_times_targets=True)) for rule in rules]
    expected = np.logical_and.reduce([np.broadcast_to(p, (40, 864)) for p in parts])
    got = mask.observable_mask(
        ra, dec, mjd, *PLACE, lowest_altitude_deg=30.0, sun_below_deg=-18.0, moon_no_closer_deg=30.0
    )
    assert np.count_nonzero(got != expected) == 0
    assert 1000 < got.sum() < got.size / 2


def test_shapes_and_errors() -> None:
    limits = {"lowest_altitude_deg": 30.0, "sun_below_deg": -18.0, "moon_no_closer_deg": 30.0}
    assert mask.observable_mask([], [], [61400.0], *PLACE, **limits).shape == (0, 1)
    assert mask.observable_mask(10.0, 10.0, [], *PLACE, **limits).shape == (1, 0)
    assert mask.observable_mask(10.0, 10.0, 61400.0, *PLACE, **limits).shape == (1, 1)
    with pytest.raises(DomainError, match=r"dec_deg: got -99\.0"):
        mask.observable_mask(10.0, -99.0, 61400.0, *PLACE, **limits)
