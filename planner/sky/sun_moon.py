"""The Sun and the Moon: places, phase, separations, and when they cross an altitude.

Geocentric vectors (km, CIRS) are taken at the retarded moment t - r/c, with the true distance r of that
moment: for an Earth-relative vector light time and annual aberration together are just that. (A fixed light time
would leave 1.9 arcsec for the Moon.) They are interpolated with six-point Lagrange polynomials (Sun every 2 d,
Moon every 6 h: errors 1.4 and 0.5 mas); the site's vector is then subtracted and diurnal aberration added.
Sources: ERFA ``epv00`` and ``moon98`` (Meeus 1998 after ELP-2000), good to 0.1 and 6 arcsec.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from planner.errors import DomainError
from planner.records import Bools, Floats, Ints, lock
from planner.sky.clock import checked_mjd, tt_mjd
from planner.sky.directions import SiteFrame, checked_site, site_frame
from planner.units import AU_M, C_AU_PER_DAY, DAY_S

AU_KM = AU_M / 1e3
Body = Literal["sun", "moon"]
NODE_DAYS: dict[Body, float] = {"sun": 2.0, "moon": 0.25}
MOON_RADIUS_KM = 1737.4  # km, mean radius (IAU Working Group on Cartographic Coordinates 2015)
SUN_RADIUS_KM = 695_700.0  # km, nominal (IAU 2015 Resolution B3)
HORIZON_REFRACTION_DEG = 34.0 / 60.0  # refraction at the horizon in the usual definition of rise and set
SUNRISE_ALTITUDE_DEG = -50.0 / 60.0  # 34' refraction + 16' radius, the usual definition of sunrise and sunset
SEARCH_STEP_DAYS = 10.0 / 1440.0  # grid of the search for crossings


# ------------------------------------------------------------------ vectors


def direct_vectors_km(body: Body, mjd_utc: ArrayLike) -> Floats:
    """Geocentric apparent vectors (T, 3) in km, CIRS, evaluated directly (slow, exact twin of the interpolation)."""
    import erfa

    tt = tt_mjd(np.atleast_1d(mjd_utc))
    jd = 2_400_000.5
    if body == "sun":
        first = -erfa.epv00(jd, tt)[0]["p"]
        delay = np.linalg.norm(first, axis=-1) / C_AU_PER_DAY
        vector = -erfa.epv00(jd, tt - delay)[0]["p"]
    else:
        first = erfa.moon98(jd, tt)["p"]
        delay = np.linalg.norm(first, axis=-1) / C_AU_PER_DAY
        vector = erfa.moon98(jd, tt - delay)["p"]
    turn = erfa.c2i00b(jd, tt)  # 0.8 mas from the full model, eight times faster
    return np.einsum("tij,tj->ti", turn, vector) * AU_KM


def vectors_km(body: Body, mjd_utc: ArrayLike) -> Floats:
    """Geocentric apparent vectors (T, 3) in km, CIRS, by six-point Lagrange interpolation."""
    mjd = np.atleast_1d(checked_mjd(mjd_utc))
    if mjd.size == 0:
        return np.zeros((0, 3))
    step = NODE_DAYS[body]
    scaled = mjd / step
    base = np.floor(scaled).astype(np.int64)
    needed = np.unique(np.unique(base)[:, None] + np.arange(-2, 4)[None, :])
    nodes = np.ascontiguousarray(direct_vectors_km(body, needed * step).T)
    first = np.searchsorted(needed, base - 2)
    weights = _lagrange6(scaled - base)
    out = weights[0] * nodes[:, first]
    for k in range(1, 6):
        out += weights[k] * nodes[:, first + k]
    return out.T


def _lagrange6(x: Floats) -> Floats:
    """Weights (6, T) of samples at -2..3 for a point at x in [0, 1): products of the other distances."""
    away = x[None, :] - np.arange(-2.0, 4.0)[:, None]
    before, after = np.ones_like(away), np.ones_like(away)
    for k in range(1, 6):
        np.multiply(before[k - 1], away[k - 1], out=before[k])
        np.multiply(after[6 - k], away[6 - k], out=after[5 - k])
    return before * after / np.array([-120.0, 24.0, -12.0, 12.0, -24.0, 120.0])[:, None]


@dataclass(frozen=True)
class Topocentric:
    """A body as a site sees it at T times."""

    unit: Floats  # (3, T) direction in CIRS, diurnal aberration included
    distance_km: Floats  # (T,)
    sin_altitude: Floats  # (T,)
    azimuth_deg: Floats  # (T,)

    def __post_init__(self) -> None:
        lock(self)

    @property
    def altitude_deg(self) -> Floats:
        """Geometric altitude in degrees, (T,)."""
        return np.degrees(np.arcsin(np.clip(self.sin_altitude, -1.0, 1.0)))


def seen_from(body: Body, mjd_utc: ArrayLike, frame: SiteFrame) -> Topocentric:
    """Return the body seen from a site whose ``frame`` was made for the same times."""
    vector = vectors_km(body, mjd_utc).T - frame.place_km
    distance = np.sqrt((vector**2).sum(axis=0))
    unit = vector / distance + frame.aberration * frame.east
    unit /= np.sqrt((unit**2).sum(axis=0))
    east, north = (unit * frame.east).sum(axis=0), (unit * frame.north).sum(axis=0)
    return Topocentric(unit, distance, (unit * frame.zenith).sum(axis=0), np.degrees(np.arctan2(east, north)) % 360.0)


def altaz_deg(
    body: Body, mjd_utc: ArrayLike, longitude_deg: float, latitude_deg: float, height_m: float
) -> tuple[Floats, Floats]:
    """Topocentric geometric altitude and azimuth of the Sun's or Moon's centre, degrees, (T,) each."""
    mjd = np.atleast_1d(checked_mjd(mjd_utc))
    seen = seen_from(body, mjd, site_frame(mjd, longitude_deg, latitude_deg, height_m))
    return seen.altitude_deg, seen.azimuth_deg


# ------------------------------------------------------------------ phase and separation


def moon_phase_angle_deg(mjd_utc: ArrayLike) -> Floats:
    """Angle Sun-Moon-Earth in degrees (0 full, 180 new), shape of ``mjd_utc``, seen from the Earth's centre.

    tan i = R sin psi / (r - R cos psi) with psi the elongation, R the Sun's and r the Moon's distance
    (Meeus, Astronomical Algorithms, chapter 48).
    """
    mjd = checked_mjd(mjd_utc)
    sun, moon = vectors_km("sun", mjd.ravel()), vectors_km("moon", mjd.ravel())
    big, small = np.linalg.norm(sun, axis=1), np.linalg.norm(moon, axis=1)
    cos_psi = (sun * moon).sum(axis=1) / (big * small)
    sin_psi = np.linalg.norm(np.cross(sun, moon), axis=1) / (big * small)
    return np.degrees(np.arctan2(big * sin_psi, small - big * cos_psi)).reshape(mjd.shape)


def moon_illumination(mjd_utc: ArrayLike) -> Floats:
    """Illuminated fraction of the Moon's disc, 0 to 1, shape of ``mjd_utc``: (1 + cos i) / 2."""
    return 0.5 * (1.0 + np.cos(np.radians(moon_phase_angle_deg(mjd_utc))))


def separation_deg(first: Floats, second: Floats) -> Floats:
    """Angle in degrees between unit vectors (..., 3); accurate at any size (atan2 of cross and dot product)."""
    cross = np.linalg.norm(np.cross(first, second), axis=-1)
    return np.degrees(np.arctan2(cross, (first * second).sum(axis=-1)))


# ------------------------------------------------------------------ crossings


def crossings(
    height: Callable[[Floats], Floats], mjd_from: float, mjd_to: float, step_days: float
) -> tuple[Floats, Bools]:
    """Times at which a smooth function of time passes zero, and whether it rises there.

    Sign changes on a grid; where three samples of one sign hold an extremum nearer to zero, the extremum itself
    is looked at, so that passes shorter than the step are found; then safeguarded secant steps on the function
    itself (to 1 ms). A touch that does not cross gives nothing.
    """
    count = max(2, int(np.ceil((mjd_to - mjd_from) / step_days)) + 1)
    t = np.linspace(mjd_from, mjd_to, count)
    f = height(t)
    t, f = _with_extrema(height, t, f)
    up = f > 0.0
    at = np.flatnonzero(up[1:] != up[:-1])
    if at.size == 0:
        return np.zeros(0), np.zeros(0, dtype=bool)
    return bracketed_roots(height, t[at], t[at + 1], f[at], f[at + 1]), up[at + 1]


def _with_extrema(height: Callable[[Floats], Floats], t: Floats, f: Floats) -> tuple[Floats, Floats]:
    """Add a sample at each extremum that may lie on the other side of zero from its neighbours."""
    if t.size < 3:
        return t, f
    a, b, c = f[:-2], f[1:-1], f[2:]
    same = ((a > 0) == (b > 0)) & ((b > 0) == (c > 0))
    near = (np.abs(b) <= np.abs(a)) & (np.abs(b) <= np.abs(c)) & (a - 2 * b + c != 0.0)
    k = np.flatnonzero(same & near)
    if k.size == 0:
        return t, f
    bend = a[k] - 2.0 * b[k] + c[k]
    where = t[k + 1] - 0.5 * (t[1] - t[0]) * (c[k] - a[k]) / bend
    all_t = np.concatenate([t, where])
    order = np.argsort(all_t, kind="stable")
    return all_t[order], np.concatenate([f, height(where)])[order]


def bracketed_roots(
    height: Callable[[Floats], Floats], left: Floats, right: Floats, f_left: Floats, f_right: Floats
) -> Floats:
    """Roots (E,) in brackets (E,) whose ends have opposite signs: Illinois false position, all together."""
    a, b, fa, fb = left.copy(), right.copy(), f_left.copy(), f_right.copy()
    root = 0.5 * (a + b)
    for _ in range(12):
        slope = np.where(fb != fa, fb - fa, 1.0)
        root = np.clip(b - fb * (b - a) / slope, np.minimum(a, b), np.maximum(a, b))
        f = height(root)
        other = (f > 0) != (fb > 0)
        # the end that stays has its value halved, so that both ends move in
        a, fa = np.where(other, b, a), np.where(other, fb, 0.5 * fa)
        done = bool((np.abs(root - b) < 1e-3 / DAY_S).all())
        b, fb = root, f
        if done:
            break
    return root


def body_crossings(
    body: Body,
    mjd_from: float,
    mjd_to: float,
    altitude_deg: float,
    longitude_deg: float,
    latitude_deg: float,
    height_m: float,
    *,
    upper_limb: bool = False,
) -> tuple[Floats, Bools]:
    """Times (E,) MJD UTC at which the body's centre (or upper limb) passes a geometric altitude, and ``rising``.

    Good to 0.01 s for the arithmetic; the ephemerides and UT1 allow about 1 s.
    """
    first, last = float(checked_mjd(mjd_from, "mjd_from")), float(checked_mjd(mjd_to, "mjd_to"))
    if last < first:
        raise DomainError("mjd_to", last, f"a date not before mjd_from ({first})")
    if not -90.0 <= altitude_deg <= 90.0:
        raise DomainError("altitude_deg", altitude_deg, "degrees, -90 to 90")
    checked_site(longitude_deg, latitude_deg, height_m)
    limit = np.sin(np.radians(altitude_deg))
    radius = MOON_RADIUS_KM if body == "moon" else SUN_RADIUS_KM

    def height(t: Floats) -> Floats:
        seen = seen_from(body, t, site_frame(t, longitude_deg, latitude_deg, height_m))
        if not upper_limb:
            return seen.sin_altitude - limit
        return np.radians(seen.altitude_deg - altitude_deg) + np.arcsin(radius / seen.distance_km)

    return crossings(height, first, last, SEARCH_STEP_DAYS)


def sun_crossings(
    mjd_from: float,
    mjd_to: float,
    altitude_deg: float,
    longitude_deg: float,
    latitude_deg: float,
    height_m: float,
) -> tuple[Floats, Bools]:
    """Times (E,) MJD UTC at which the Sun's centre passes a geometric altitude, and (E,) True where it rises.

    Sunrise and sunset: altitude -50' (``SUNRISE_ALTITUDE_DEG``); twilights -6, -12, -18. No crossing (polar day
    or night) gives empty arrays. Raises DomainError for dates outside 1900-2100 or reversed.
    """
    return body_crossings("sun", mjd_from, mjd_to, altitude_deg, longitude_deg, latitude_deg, height_m)


def moon_crossings(
    mjd_from: float,
    mjd_to: float,
    altitude_deg: float,
    longitude_deg: float,
    latitude_deg: float,
    height_m: float,
) -> tuple[Floats, Bools]:
    """Times (E,) MJD UTC at which the Moon's centre (topocentric) passes a geometric altitude, and ``rising``."""
    return body_crossings("moon", mjd_from, mjd_to, altitude_deg, longitude_deg, latitude_deg, height_m)


def moon_rise_set(
    mjd_from: float, mjd_to: float, longitude_deg: float, latitude_deg: float, height_m: float
) -> tuple[Floats, Bools]:
    """Moonrise and moonset as almanacs give them: upper limb on the horizon with 34' of refraction."""
    return body_crossings(
        "moon",
        mjd_from,
        mjd_to,
        -HORIZON_REFRACTION_DEG,
        longitude_deg,
        latitude_deg,
        height_m,
        upper_limb=True,
    )


def up_at(times: Floats, rising: Bools, up_before: bool, mjd: Floats) -> Bools:
    """State of a body at times (T,) from its crossings: True while up."""
    index: Ints = np.searchsorted(times, mjd, side="right")
    states = np.concatenate([[up_before], rising])
    return states[index]
