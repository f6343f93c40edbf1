"""Directions of stars as a site sees them: the kernel.

Every second day each star gets its direction in the celestial intermediate system (CIRS: precession-nutation, annual
aberration and light deflection inside), which does not depend on the site. Per time, the zenith, east and north
of the site are rotated into the same system by the Earth rotation angle and polar motion. What is asked for is
then a scalar product: sin(altitude) = star . zenith.

Method: IAU 2000/2006 resolutions as implemented in ERFA (``apci13``, ``atciqz``, ``era00``).
Accuracy against a full transformation: 0.03 arcsec more than 10 deg from the Sun (0.1 arcsec at 1 deg).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import ArrayLike

from planner.errors import DomainError
from planner.records import Floats, Ints, lock
from planner.sky.clock import checked_mjd, earth_rotation_angle, polar_motion_arcsec, tt_mjd
from planner.units import LIGHT_M_S, RAD_ARCSEC, RAD_MAS, YEAR_DAYS

EARTH_SPIN_RAD_S = 7.292115e-5  # rad/s, nominal mean angular velocity (IERS Conventions 2010, table 1.2)
J2000_MJD = 51_544.5  # MJD of the epoch J2000.0
NODE_DAYS = 2.0  # between nodes of star directions; linear between them leaves 0.03 arcsec (nutation, 14 days)
BLOCK_CELLS = 30_000  # cells (targets x times) of one product: stays in the cache, so memory is bounded


@dataclass(frozen=True)
class SiteFrame:
    """Unit vectors of a site in CIRS at each time, (3, T) each, and its geocentric place."""

    zenith: Floats
    east: Floats
    north: Floats
    place_km: Floats  # (3, T) geocentric vector of the site
    aberration: float  # speed of the site's rotation in units of light

    def __post_init__(self) -> None:
        lock(self)


def checked_site(longitude_deg: float, latitude_deg: float, height_m: float) -> tuple[float, float, float]:
    """Return a place as floats; raise DomainError naming what is outside its range."""
    lon, lat, height = float(longitude_deg), float(latitude_deg), float(height_m)
    if not -360.0 <= lon <= 360.0:
        raise DomainError("longitude_deg", lon, "degrees east, -360 to 360")
    if not -90.0 <= lat <= 90.0:
        raise DomainError("latitude_deg", lat, "degrees north, -90 to 90")
    if not -12_000.0 <= height <= 100_000.0:
        raise DomainError("height_m", height, "metres above the ellipsoid, -12000 to 100000")
    return lon, lat, height


def checked_stars(ra_deg: ArrayLike, dec_deg: ArrayLike) -> tuple[Floats, Floats]:
    """Return ICRS positions as (N,) arrays; raise DomainError for nan or a declination outside +-90."""
    ra, dec = np.broadcast_arrays(np.atleast_1d(np.asarray(ra_deg, float)), np.asarray(dec_deg, float))
    if not np.isfinite(ra).all():
        raise DomainError("ra_deg", float(ra[~np.isfinite(ra)][0]), "a finite number of degrees")
    bad = ~(np.abs(dec) <= 90.0)
    if bad.any():
        raise DomainError("dec_deg", float(dec[bad][0]), "degrees, -90 to 90")
    return ra.ravel(), dec.ravel()


def site_frame(mjd_utc: ArrayLike, longitude_deg: float, latitude_deg: float, height_m: float) -> SiteFrame:
    """Zenith, east and north of a site (geodetic longitude and latitude, WGS84) in CIRS at times (T,).

    Polar motion is applied to first order (its square is 1e-6 arcsec).
    """
    import erfa

    lon, lat, height = checked_site(longitude_deg, latitude_deg, height_m)
    mjd = np.atleast_1d(checked_mjd(mjd_utc))
    sl, cl = np.sin(np.radians(lon)), np.cos(np.radians(lon))
    sp, cp = np.sin(np.radians(lat)), np.cos(np.radians(lat))
    place = np.asarray(erfa.gd2gc(1, np.radians(lon), np.radians(lat), height)) / 1e3
    fixed = np.array([[cp * cl, cp * sl, sp], [-sl, cl, 0.0], [-sp * cl, -sp * sl, cp], place])
    angle = earth_rotation_angle(mjd)
    cos_angle, sin_angle = np.cos(angle), np.sin(angle)
    pole_x, pole_y = (p / RAD_ARCSEC for p in polar_motion_arcsec(mjd))
    turned = []
    for x, y, z in fixed:
        x1, y1 = x - pole_x * z, y + pole_y * z
        turned.append(
            np.stack([cos_angle * x1 - sin_angle * y1, sin_angle * x1 + cos_angle * y1, z + pole_x * x - pole_y * y])
        )
    speed = EARTH_SPIN_RAD_S * float(np.hypot(place[0], place[1])) * 1e3 / LIGHT_M_S
    return SiteFrame(turned[0], turned[1], turned[2], turned[3], speed)


def star_directions(ra_deg: ArrayLike, dec_deg: ArrayLike, mjd_utc: ArrayLike) -> Floats:
    """CIRS unit vectors, (K, N, 3), of N stars (ICRS) at K epochs, for an observer at the Earth's centre."""
    import erfa

    ra, dec = checked_stars(ra_deg, dec_deg)
    mjd = np.atleast_1d(checked_mjd(mjd_utc))
    if mjd.size == 0 or ra.size == 0:
        return np.zeros((mjd.size, ra.size, 3))
    astrom, _ = erfa.apci13(2_400_000.5, tt_mjd(mjd))
    ri, di = erfa.atciqz(np.radians(ra)[None, :], np.radians(dec)[None, :], np.atleast_1d(astrom)[:, None])
    cos_di = np.cos(di)
    return np.stack([cos_di * np.cos(ri), cos_di * np.sin(ri), np.sin(di)], axis=-1)


class StarField:
    """Directions of N stars for any set of times: nodes every ``NODE_DAYS``, linear between them."""

    def __init__(self, ra_deg: ArrayLike, dec_deg: ArrayLike, mjd_utc: ArrayLike) -> None:
        """Prepare the nodes around the times (T,); other times between the same nodes may be asked for later."""
        self.ra_deg, self.dec_deg = checked_stars(ra_deg, dec_deg)
        first = np.unique(np.floor(np.atleast_1d(checked_mjd(mjd_utc)) / NODE_DAYS))
        self.number = np.unique(np.concatenate([first, first + 1.0]))  # (K,) nodes, counted from MJD 0
        self.nodes = star_directions(self.ra_deg, self.dec_deg, self.number * NODE_DAYS)  # (K, N, 3)

    def __len__(self) -> int:
        return self.ra_deg.size

    def project(self, mjd_utc: Floats, *vectors: Floats, rows: slice = slice(None)) -> list[Floats]:
        """Scalar products of the stars (those of ``rows``) with vectors (3, T) at times (T,): one (N, T) each."""
        count = len(range(*rows.indices(len(self))))
        out = [np.empty((count, mjd_utc.size)) for _ in vectors]
        for part, star6, share in self.blocks(mjd_utc, rows):
            for result, vector in zip(out, vectors, strict=True):
                here = vector[:, part]
                result[:, part] = star6 @ np.concatenate([here, here * share])
        return out

    def blocks(self, mjd_utc: Floats, rows: slice = slice(None)) -> Iterator[tuple[slice | Ints, Floats, Floats]]:
        """Yield (times, (N, 6) position and change to the next node, share of it gone) between nodes, cut to size."""
        count = max(1, len(range(*rows.indices(len(self)))))
        step = max(16, BLOCK_CELLS // count)
        scaled = mjd_utc / NODE_DAYS
        for first, part in _steps(np.floor(scaled)):
            k = int(np.searchsorted(self.number, first))
            now = self.nodes[k, rows]
            star6 = np.concatenate([now, self.nodes[k + 1, rows] - now], axis=1)
            share = scaled[part] - first
            for i in range(0, share.size, step):
                piece = (
                    slice(part.start + i, min(part.start + i + step, part.stop))
                    if isinstance(part, slice)
                    else part[i : i + step]
                )
                yield piece, star6, share[i : i + step]

    def pairs(self, star: Ints, mjd_utc: Floats) -> Floats:
        """Directions (W, 3) of star number ``star[w]`` at time ``mjd_utc[w]``."""
        scaled = mjd_utc / NODE_DAYS
        first = np.floor(scaled)
        k = np.searchsorted(self.number, first)
        now = self.nodes[k, star]
        return now + (scaled - first)[:, None] * (self.nodes[k + 1, star] - now)


def _steps(number: Floats) -> Iterator[tuple[float, slice | Ints]]:
    """Yield each number with the places where it stands: a slice if the numbers are in order, else indices."""
    if number.size == 0:
        return
    ordered = bool((np.diff(number) >= 0).all())
    order = np.arange(number.size) if ordered else np.argsort(number, kind="stable")
    cuts = np.concatenate([[0], np.flatnonzero(np.diff(number[order])) + 1, [number.size]])
    for a, b in pairwise(cuts):
        yield float(number[order[a]]), (slice(int(a), int(b)) if ordered else order[a:b])


# ------------------------------------------------------------------ public functions: (N, T)


def sin_altitude(
    ra_deg: ArrayLike,
    dec_deg: ArrayLike,
    mjd_utc: ArrayLike,
    longitude_deg: float,
    latitude_deg: float,
    height_m: float,
) -> Floats:
    """Sine of the geometric altitude, (N, T); diurnal aberration (below 0.32 arcsec) is left out."""
    mjd = np.atleast_1d(checked_mjd(mjd_utc))
    frame = site_frame(mjd, longitude_deg, latitude_deg, height_m)
    return StarField(ra_deg, dec_deg, mjd).project(mjd, frame.zenith)[0]


def altitude_deg(
    ra_deg: ArrayLike,
    dec_deg: ArrayLike,
    mjd_utc: ArrayLike,
    longitude_deg: float,
    latitude_deg: float,
    height_m: float,
) -> Floats:
    """Geometric altitude (no refraction) in degrees of N stars at T times: shape (N, T).

    ra_deg, dec_deg: ICRS, (N,) or scalar (then N = 1); mjd_utc: (T,) or scalar (then T = 1), any order.
    Longitude is east, latitude geodetic (WGS84). Raises DomainError for nan, a declination or latitude outside
    +-90 and dates outside 1900-2100. Past the end of the earth-orientation table see ``planner.sky.clock``.
    """
    # The rotation of the site moves a star p toward east by 0.32 arcsec x cos(latitude):
    # sin(altitude) = (p . zenith)(1 - aberration p . east), one product with p, its change and its squares.
    mjd = np.atleast_1d(checked_mjd(mjd_utc))
    frame = site_frame(mjd, longitude_deg, latitude_deg, height_m)
    field = StarField(ra_deg, dec_deg, mjd)
    out = np.empty((len(field), mjd.size))
    bend = -frame.aberration * _products(frame.zenith, frame.east)
    for part, star6, share in field.blocks(mjd):
        zenith = frame.zenith[:, part]
        star12 = np.concatenate([star6, _squares(star6[:, :3])], axis=1)
        up = star12 @ np.concatenate([zenith, zenith * share, bend[:, part]])
        np.minimum(up, 1.0, out=up)  # near the zenith the square of the aberration may lead past 1
        np.maximum(up, -1.0, out=up)
        np.arcsin(up, out=up)
        up *= 180.0 / np.pi
        out[:, part] = up
    return out


def _products(first: Floats, second: Floats) -> Floats:
    """Coefficients (6, T) of (p . first)(p . second) in the squares of p; vectors (3, T)."""
    (a, b, c), (d, e, f) = first, second
    return np.stack([a * d, b * e, c * f, a * e + b * d, a * f + c * d, b * f + c * e])


def _squares(p: Floats) -> Floats:
    """xx, yy, zz, xy, xz, yz of vectors (N, 3): (N, 6)."""
    x, y, z = p.T
    return np.stack([x * x, y * y, z * z, x * y, x * z, y * z], axis=1)


def altaz_deg(
    ra_deg: ArrayLike,
    dec_deg: ArrayLike,
    mjd_utc: ArrayLike,
    longitude_deg: float,
    latitude_deg: float,
    height_m: float,
) -> tuple[Floats, Floats]:
    """Geometric altitude and azimuth (north 0, east 90) in degrees, each (N, T); see :func:`altitude_deg`."""
    mjd = np.atleast_1d(checked_mjd(mjd_utc))
    frame = site_frame(mjd, longitude_deg, latitude_deg, height_m)
    up, east, north = StarField(ra_deg, dec_deg, mjd).project(mjd, frame.zenith, frame.east, frame.north)
    shrink = 1.0 - frame.aberration * east
    azimuth = np.degrees(np.arctan2((east + frame.aberration) * shrink, north * shrink)) % 360.0
    return np.degrees(np.arcsin(np.clip(up * shrink, -1.0, 1.0))), azimuth


def azimuth_deg(
    ra_deg: ArrayLike,
    dec_deg: ArrayLike,
    mjd_utc: ArrayLike,
    longitude_deg: float,
    latitude_deg: float,
    height_m: float,
) -> Floats:
    """Azimuth in degrees (north 0, east 90), (N, T); see :func:`altitude_deg`."""
    return altaz_deg(ra_deg, dec_deg, mjd_utc, longitude_deg, latitude_deg, height_m)[1]


def hour_angle_deg(ra_deg: ArrayLike, dec_deg: ArrayLike, mjd_utc: ArrayLike, longitude_deg: float) -> Floats:
    """Local hour angle of date in degrees, in [-180, 180), (N, T): Earth rotation angle + longitude - RA (CIRS)."""
    mjd = np.atleast_1d(checked_mjd(mjd_utc))
    lon = np.radians(checked_site(longitude_deg, 0.0, 0.0)[0])
    angle = earth_rotation_angle(mjd) + lon
    x, y = np.cos(angle), np.sin(angle)
    zero = np.zeros_like(x)
    along, across = StarField(ra_deg, dec_deg, mjd).project(mjd, np.stack([x, y, zero]), np.stack([y, -x, zero]))
    return (np.degrees(np.arctan2(across, along)) + 180.0) % 360.0 - 180.0


def parallactic_angle_deg(
    ra_deg: ArrayLike, dec_deg: ArrayLike, mjd_utc: ArrayLike, longitude_deg: float, latitude_deg: float
) -> Floats:
    """Angle at the star from the pole to the zenith, degrees, positive west of the meridian, (N, T).

    tan q = sin H / (tan phi cos d - sin d cos H) (textbook spherical triangle; d and H of date).
    """
    mjd = np.atleast_1d(checked_mjd(mjd_utc))
    phi = np.radians(checked_site(longitude_deg, latitude_deg, 0.0)[1])
    h = np.radians(hour_angle_deg(ra_deg, dec_deg, mjd, longitude_deg))
    pole = np.tile(np.array([[0.0], [0.0], [1.0]]), mjd.size)
    sin_d = StarField(ra_deg, dec_deg, mjd).project(mjd, pole)[0]
    cos_d = np.sqrt(np.clip(1.0 - sin_d**2, 0.0, None))
    q = np.arctan2(np.cos(phi) * np.sin(h), np.sin(phi) * cos_d - np.cos(phi) * sin_d * np.cos(h))
    return np.degrees(q)


def moved_position(
    ra_deg: float, dec_deg: float, pm_ra_mas_yr: float, pm_dec_mas_yr: float, epoch_year: float, mjd_utc: float
) -> tuple[float, float]:
    """ICRS position (degrees) at ``mjd_utc`` of a star given for ``epoch_year`` with its proper motion.

    ``pm_ra_mas_yr`` includes cos(dec). Great-circle motion; radial motion and parallax are left out.
    """
    years = (float(mjd_utc) - J2000_MJD) / YEAR_DAYS + 2000.0 - epoch_year
    a, d = np.radians(ra_deg), np.radians(dec_deg)
    star = np.array([np.cos(d) * np.cos(a), np.cos(d) * np.sin(a), np.sin(d)])
    east = np.array([-np.sin(a), np.cos(a), 0.0])
    north = np.array([-np.sin(d) * np.cos(a), -np.sin(d) * np.sin(a), np.cos(d)])
    moved = star + years / RAD_MAS * (pm_ra_mas_yr * east + pm_dec_mas_yr * north)
    x, y, z = moved / np.linalg.norm(moved)
    return float(np.degrees(np.arctan2(y, x)) % 360.0), float(np.degrees(np.arcsin(z)))
