"""Where target, Sun and Moon stand during a few looks, from astropy itself.

Slow and plain on purpose: it shares nothing with the kernel that found the windows, so that an error there
does not hide itself. Altitudes are geometric (no refraction), positions apparent and topocentric.
"""

from __future__ import annotations

import warnings
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from planner.campaign.records import Position
from planner.units import YEAR_DAYS

Floats = NDArray[np.float64]

MJD_J2000 = 51_544.5  # MJD of the epoch J2000.0, exact (IAU)


@dataclass(frozen=True)
class Sight:
    """Sky over one place at T moments; the target may differ from moment to moment. Degrees, (T,)."""

    altitude: Floats
    azimuth: Floats
    sun_altitude: Floats
    sun_separation: Floats
    moon_altitude: Floats
    moon_separation: Floats
    moon_lit: Floats  # illuminated fraction


def look_over(
    positions: Sequence[Position], mjd: Floats, longitude_deg: float, latitude_deg: float, height_m: float
) -> Sight:
    """Return the sky at each moment for the target of that moment (``positions`` and ``mjd``: T each)."""
    with offline():
        from astropy.coordinates import AltAz, get_body, get_sun

        time, here = _place(mjd, longitude_deg, latitude_deg, height_m)
        frame = AltAz(obstime=time, location=here)
        target = _target(positions, mjd).transform_to(frame)
        sun_far, moon_far = get_sun(time), get_body("moon", time, here, ephemeris="builtin")
        sun, moon = sun_far.transform_to(frame), moon_far.transform_to(frame)
        return Sight(
            altitude=np.asarray(target.alt.deg),
            azimuth=np.asarray(target.az.deg),
            sun_altitude=np.asarray(sun.alt.deg),
            sun_separation=np.asarray(target.separation(sun).deg),
            moon_altitude=np.asarray(moon.alt.deg),
            moon_separation=np.asarray(target.separation(moon).deg),
            moon_lit=_lit(sun_far.cartesian, moon_far.cartesian),
        )


def directions(
    positions: Sequence[Position], mjd: Floats, longitude_deg: float, latitude_deg: float, height_m: float
) -> tuple[Floats, Floats]:
    """Altitude and azimuth of each moment's target from one place, degrees, (T,) each."""
    with offline():
        from astropy.coordinates import AltAz

        time, here = _place(mjd, longitude_deg, latitude_deg, height_m)
        target = _target(positions, mjd).transform_to(AltAz(obstime=time, location=here))
        return np.asarray(target.alt.deg), np.asarray(target.az.deg)


def hour_angle_and_declination(
    positions: Sequence[Position], mjd: Floats, longitude_deg: float, latitude_deg: float, height_m: float
) -> tuple[Floats, Floats]:
    """Local hour angle (-180 to 180) and declination of date of each moment's target, degrees, (T,) each."""
    with offline():
        from astropy.coordinates import HADec

        time, here = _place(mjd, longitude_deg, latitude_deg, height_m)
        seen = _target(positions, mjd).transform_to(HADec(obstime=time, location=here))
        return (np.asarray(seen.ha.deg) + 180.0) % 360.0 - 180.0, np.asarray(seen.dec.deg)


def moon_lit(mjd: Floats) -> Floats:
    """Illuminated fraction of the Moon as seen from the Earth's centre, (T,)."""
    with offline():
        from astropy.coordinates import get_body, get_sun
        from astropy.time import Time

        time = Time(mjd, format="mjd", scale="utc")
        return _lit(get_sun(time).cartesian, get_body("moon", time, ephemeris="builtin").cartesian)


def sun_distance(positions: Sequence[Position], mjd: Floats) -> Floats:
    """Distance of each moment's target from the Sun as seen from the Earth's centre, degrees, (T,)."""
    with offline():
        from astropy.coordinates import get_sun
        from astropy.time import Time

        sun = get_sun(Time(mjd, format="mjd", scale="utc"))
        return np.asarray(_target(positions, mjd).transform_to(sun.frame).separation(sun).deg)


def last_orientation_mjd() -> float:
    """Return the last MJD for which the installed earth-orientation table has a value."""
    with offline():
        from astropy.utils import iers

        return float(iers.IERS_Auto.open()["MJD"][-1].to_value("d"))


@contextmanager
def offline() -> Iterator[None]:
    """Keep astropy off the network and let it work with dates past its tables.

    ``auto_max_age`` None: otherwise any date in the predicted part of the table is refused once the table is
    a month old. The warnings silenced here all say "date beyond the tables", which costs at most 17 arcsec of
    hour angle (|UT1-UTC| stays below 0.9 s, and 1.1 s is 17 arcsec); the recount says it once, with that
    size.
    """
    from astropy.utils import data, iers

    with (
        iers.conf.set_temp("auto_download", False),
        iers.conf.set_temp("auto_max_age", None),
        data.conf.set_temp("allow_internet", False),
        warnings.catch_warnings(),
    ):
        for text in (".*polar motions.*", ".*dubious year.*", ".*leap-second.*expired.*"):
            warnings.filterwarnings("ignore", message=text)
        yield


def _place(mjd: Floats, longitude_deg: float, latitude_deg: float, height_m: float) -> tuple[Any, Any]:
    from astropy import units
    from astropy.coordinates import EarthLocation
    from astropy.time import Time

    here = EarthLocation.from_geodetic(longitude_deg * units.deg, latitude_deg * units.deg, height_m * units.m)
    return Time(mjd, format="mjd", scale="utc"), here


def _target(positions: Sequence[Position], mjd: Floats) -> Any:
    """ICRS coordinates with proper motion carried on in a straight line."""
    from astropy import units
    from astropy.coordinates import SkyCoord

    ra, dec, pm_ra, pm_dec, epoch = np.array(
        [(p.ra_deg, p.dec_deg, p.pm_ra_mas_yr, p.pm_dec_mas_yr, p.epoch) for p in positions], dtype=float
    ).T
    years = 2000.0 + (mjd - MJD_J2000) / YEAR_DAYS - epoch
    dec_now = np.clip(dec + years * pm_dec / 3.6e6, -90.0, 90.0)
    ra_now = ra + years * pm_ra / 3.6e6 / np.maximum(np.cos(np.radians(dec)), 1e-9)
    return SkyCoord(ra=ra_now * units.deg, dec=dec_now * units.deg)


def _lit(sun: Any, moon: Any) -> Floats:
    """Illuminated fraction (1 + cos i)/2 with tan i = R sin psi / (r - R cos psi) (Meeus 1998, ch. 48)."""
    big, small = sun.norm().to_value("km"), moon.norm().to_value("km")
    cosine = np.clip(sun.dot(moon).to_value("km2") / (big * small), -1.0, 1.0)
    phase = np.arctan2(big * np.sqrt(1.0 - cosine**2), small - big * cosine)
    return np.asarray(0.5 * (1.0 + np.cos(phase)))
