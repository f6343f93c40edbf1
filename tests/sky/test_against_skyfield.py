"""Stars, Sun and Moon against skyfield with the ephemeris DE421: other code, another ephemeris.

skyfield is given our UT1-UTC, so that only the positions are compared (its own built-in table is 0.2-0.3 s off for
2027, 3-5 arcsec). Tolerances: stars 0.5 arcsec (polar motion, which skyfield leaves out by default, is up to 0.4),
Sun 0.5 arcsec, Moon 7 arcsec (the series behind ERFA's moon98 is good to some 6 arcsec against DE421).
"""

from __future__ import annotations

import warnings
from typing import Any

import numpy as np
import pytest

from planner.sky.clock import tt_minus_utc_s, ut1_minus_utc
from planner.sky.directions import altaz_deg
from planner.sky.sun_moon import altaz_deg as body_altaz
from planner.sky.sun_moon import moon_illumination
from planner.units import mjd_of_iso

pytest.importorskip("skyfield", reason="a test dependency")
pytest.importorskip("de421", reason="a test dependency")

SITES = {
    "south": (-70.4, -24.6, 2600.0),
    "north": (-107.9, 30.9, 2430.0),
    "low": (6.6, 52.9, 20.0),
    "equator": (36.9, -0.4, 1900.0),
}
STARS = [(187.278, 2.052), (10.0, -70.0), (83.866, -69.27), (279.23, 38.78), (101.3, -16.7), (350.0, 60.0)]
DATES = [
    "2000-06-15T03:00:00Z",
    "2010-03-01T09:30:00Z",
    "2020-09-20T17:45:00Z",
    "2026-12-01T05:00:00Z",
    "2027-08-10T12:00:00Z",
    "2030-05-05T21:00:00Z",
    "2035-06-01T02:24:00Z",
]


@pytest.fixture(scope="module")
def solar_system() -> dict[int, Any]:
    """Earth, Sun and Moon of DE421 as skyfield objects: the package holds Chebyshev tables, not an SPK file."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # an old package: its import is not ours to judge
        import de421
        from jplephem.ephem import Ephemeris
        from skyfield.vectorlib import VectorFunction

    tables = Ephemeris(de421)
    day, au_km = 86_400.0, 149_597_870.700
    share = 1.0 / (1.0 + tables.EMRAT)  # of the Moon's vector by which the Earth stands off the barycentre

    def position(name: str, tdb: Any) -> tuple[np.ndarray, np.ndarray]:
        with np.errstate(all="ignore"):
            p, v = tables.position_and_velocity(name, np.atleast_1d(tdb))
        return p, v / day

    class Body(VectorFunction):
        center = 0

        def __init__(self, target: int) -> None:
            self.target = target
            self.ephemeris: Any = None

        def _at(self, t: Any) -> tuple[np.ndarray, np.ndarray, None, None]:
            tdb = t.whole + t.tdb_fraction
            if self.target == 10:
                p, v = position("sun", tdb)
            else:
                p, v = position("earthmoon", tdb)
                moon_p, moon_v = position("moon", tdb)
                near = -share if self.target == 399 else 1.0 - share
                p, v = p + near * moon_p, v + near * moon_v
            p, v = p / au_km, v * day / au_km
            if np.ndim(tdb) == 0:
                p, v = p[:, 0], v[:, 0]
            return p, v, None, None

    class Planet(Body):
        """Jupiter and Saturn, which bend light a little in skyfield's apparent places."""

        def _at(self, t: Any) -> tuple[np.ndarray, np.ndarray, None, None]:
            tdb = t.whole + t.tdb_fraction
            p, v = position({599: "jupiter", 699: "saturn"}[self.target], tdb)
            p, v = p / au_km, v * day / au_km
            return (p[:, 0], v[:, 0], None, None) if np.ndim(tdb) == 0 else (p, v, None, None)

    bodies: dict[Any, Any] = {n: Body(n) for n in (10, 399, 301)}
    bodies |= {n: Planet(n) for n in (599, 699)}
    names = {"sun": 10, "earth": 399, "moon": 301, "jupiter": 599, "saturn": 699}
    names |= {"jupiter barycenter": 599, "saturn barycenter": 699, "jupiter_barycenter": 599}
    bodies |= {name: bodies[number] for name, number in names.items()}
    bodies |= {5: bodies[599], 6: bodies[699]}
    for number in (10, 399, 301, 599, 699):
        bodies[number].ephemeris = bodies
    return bodies


def moment(iso: str) -> Any:
    """A skyfield time with our TT-UT1."""
    from skyfield.timelib import Timescale

    mjd = mjd_of_iso(iso)
    tt_ut1 = float(tt_minus_utc_s(mjd) - ut1_minus_utc(mjd))
    base = np.array([mjd - 1e5, mjd + 1e5]) + 2_400_000.5
    from skyfield.api import load

    leap = load.timescale(builtin=True)
    scale = Timescale((base, np.array([tt_ut1, tt_ut1])), leap.leap_dates, leap.leap_offsets - 10)
    return scale.tt_jd(2_400_000.5 + mjd + float(tt_minus_utc_s(mjd)) / 86_400.0)


def place(solar_system: dict[int, Any], site: str) -> Any:
    from skyfield.api import wgs84

    lon, lat, height = SITES[site]
    return solar_system[399] + wgs84.latlon(lat, lon, elevation_m=height)


def apart_arcsec(alt1: float, az1: float, alt2: float, az2: float) -> float:
    return float(np.hypot(alt1 - alt2, ((az1 - az2 + 180) % 360 - 180) * np.cos(np.radians(alt1))) * 3600)


@pytest.mark.parametrize("iso", DATES)
@pytest.mark.parametrize("site", list(SITES))
def test_stars(iso: str, site: str, solar_system: dict[int, Any]) -> None:
    from skyfield.api import Star

    mjd = mjd_of_iso(iso)
    ra, dec = np.array(STARS).T
    alt, az = altaz_deg(ra, dec, mjd, *SITES[site])
    here = place(solar_system, site).at(moment(iso))
    for i, (a, d) in enumerate(STARS):
        seen = here.observe(Star(ra_hours=a / 15.0, dec_degrees=d)).apparent().altaz()
        off = apart_arcsec(alt[i, 0], az[i, 0], seen[0].degrees, seen[1].degrees)
        assert off < (0.8 if abs(alt[i, 0]) > 85 else 0.6)


@pytest.mark.parametrize("iso", DATES)
@pytest.mark.parametrize(("body", "number", "arcsec"), [("sun", 10, 0.6), ("moon", 301, 7.0)])
def test_sun_and_moon(iso: str, body: Any, number: int, arcsec: float, solar_system: dict[int, Any]) -> None:
    mjd = mjd_of_iso(iso)
    for site in SITES:
        alt, az = body_altaz(body, mjd, *SITES[site])
        seen = place(solar_system, site).at(moment(iso)).observe(solar_system[number]).apparent().altaz()
        assert apart_arcsec(float(alt[0]), float(az[0]), seen[0].degrees, seen[1].degrees) < arcsec


# (date, fraction) of DE421's Moon, with skyfield's almanac; 1e-4 is 6 arcsec of elongation at half Moon and more
@pytest.mark.parametrize(("iso", "lit"), [("2026-12-01T05:00:00Z", 0.50653), ("2027-01-20T05:00:00Z", None)])
def test_share_of_the_moon_that_is_lit(iso: str, lit: float | None, solar_system: dict[int, Any]) -> None:
    t = moment(iso)
    earth = solar_system[399].at(t)
    sun, moon = (earth.observe(solar_system[n]).apparent().position.km for n in (10, 301))
    to_sun, to_earth = sun - moon, -moon
    cosine = to_sun @ to_earth / np.linalg.norm(to_sun) / np.linalg.norm(to_earth)
    ours = float(moon_illumination(mjd_of_iso(iso)))
    assert ours == pytest.approx(0.5 * (1 + cosine), abs=1e-4)
    if lit is not None:
        assert ours == pytest.approx(lit, abs=1e-4)
