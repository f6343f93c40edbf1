"""Light-echo geometry: where a ring is, how fast it grows, and the way back to depth, delay and distance.

Axes: the source is at the origin, z along the line of sight, positive toward the observer (dust in front of
the source has z > 0); r is the distance from source to dust; the delay counts from the arrival of the direct
light of the same phase of the light curve (usually the maximum), in the frame of the source: for dust inside
a host galaxy divide observed days by 1 + redshift, for Galactic dust do not. c t = r - z.

Formulas derived from that equality. Source and observer are the foci of the delay surface, an ellipsoid that
becomes a paraboloid for dust close to a far source (Bond et al. 1999, A&AS 136; Couderc 1939 from memory).

All functions broadcast; a nan that goes in comes out. Delays below 0 (before the outburst) give nan: there is
no ring. A ring of radius 0 exists at the first and last moment, its speed there is infinite.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from planner.physics._numbers import Floats, checked, plain
from planner.records import lock
from planner.units import C_PC_PER_DAY, RAD_ARCSEC, YEAR_DAYS


@dataclass(frozen=True)
class EchoRing:
    """A circle on the sky about (or beside) the source; all fields have one shape, nan where no ring is."""

    radius_arcsec: Floats
    centre_east_arcsec: Floats
    centre_north_arcsec: Floats
    speed_c: Floats  # d radius / d delay times distance, in c; negative while the circle shrinks
    scattering_deg: Floats  # 0 = forward

    def __post_init__(self) -> None:
        lock(self)


# ------------------------------------------------------------------ forward


def sheet_ring(
    delay_days: ArrayLike,
    depth_pc: ArrayLike,
    distance_pc: ArrayLike,
    tilt_deg: ArrayLike = 0.0,
    tilt_pa_deg: ArrayLike = 0.0,
) -> EchoRing:
    """Ring on a plane sheet of dust that is close to the source (depth far below the distance).

    depth_pc: where the sheet crosses the line of sight, positive in front of the source, negative behind.
    distance_pc: of the source, above 0. tilt_deg: between sheet and sky plane, inside -90..90.
    tilt_pa_deg: position angle (north through east) of the side that is nearer the observer; the centre
    of the ring moves that way. Shapes broadcast. ``scattering_deg`` is at the untilted sheet of that depth
    (nan where that one has no ring although the tilted one has).
    Returns EchoRing, nan before the light surface reaches the sheet.
    Raises DomainError. Exact circle of a paraboloid cut by a plane, see module docstring.
    """
    tilt = checked("tilt_deg", tilt_deg, above=-90.0, below=90.0)
    pa = np.deg2rad(checked("tilt_pa_deg", tilt_pa_deg))
    z0 = checked("depth_pc", depth_pc)
    ct = C_PC_PER_DAY * checked("delay_days", delay_days)
    scale = RAD_ARCSEC / checked("distance_pc", distance_pc, above=0.0)
    slope = np.tan(np.deg2rad(tilt))
    rho, east, north = _sheet_circle_pc(ct, z0, slope * np.sin(pa), slope * np.cos(pa))
    stretch = 1.0 + slope**2
    with np.errstate(divide="ignore", invalid="ignore"):
        speed = np.where((z0 == 0.0) & (ct >= 0.0), np.sqrt(stretch), (z0 + ct * stretch) / rho)
        scattering = np.where(z0 == 0.0, 90.0, 2.0 * np.rad2deg(np.arctan2(np.sqrt(ct), np.sqrt(2.0 * z0 + ct))))
    return _ring(rho * scale, east * scale, north * scale, speed, scattering)


def sheet_circle(
    delay_days: ArrayLike,
    depth_pc: ArrayLike,
    distance_pc: ArrayLike,
    slope_east: ArrayLike = 0.0,
    slope_north: ArrayLike = 0.0,
) -> tuple[Floats, Floats, Floats]:
    """Circle of a tilted sheet from its slopes: smooth in every argument, so fit for derivatives.

    slope_east, slope_north: rise of depth per length toward east and north (positive: that side is nearer
    the observer). The centre moves by slope times c t; R^2 = 2 z0 ct + (ct)^2 (1 + slope^2).
    Returns (radius, centre east, centre north) in arcsec, nan where no ring is. Raises DomainError.
    """
    scale = RAD_ARCSEC / checked("distance_pc", distance_pc, above=0.0)
    rho, east, north = _sheet_circle_pc(
        C_PC_PER_DAY * checked("delay_days", delay_days),
        checked("depth_pc", depth_pc),
        checked("slope_east", slope_east),
        checked("slope_north", slope_north),
    )
    return plain(rho * scale), plain(east * scale), plain(north * scale)


def _sheet_circle_pc(ct: Floats, z0: Floats, slope_east: Floats, slope_north: Floats) -> tuple[Floats, Floats, Floats]:
    with np.errstate(invalid="ignore"):
        # sqrt(ct) and not sqrt(ct * ...): a negative delay must give nan even when both factors are negative
        rho = np.sqrt(ct) * np.sqrt(2.0 * z0 + ct * (1.0 + slope_east**2 + slope_north**2))
    # 0 * rho carries the nan of "no ring" into the centre
    return rho, slope_east * ct + 0.0 * rho, slope_north * ct + 0.0 * rho


def shell_ring(delay_days: ArrayLike, shell_radius_pc: ArrayLike, distance_pc: ArrayLike) -> EchoRing:
    """Ring on a thin spherical shell of dust centred on the source.

    shell_radius_pc, distance_pc: above 0. Grows until c t equals the shell radius, then shrinks (negative
    speed) and is gone after twice that time (nan). Shapes broadcast. Raises DomainError.
    """
    a = checked("shell_radius_pc", shell_radius_pc, above=0.0)
    ct = C_PC_PER_DAY * checked("delay_days", delay_days)
    scale = RAD_ARCSEC / checked("distance_pc", distance_pc, above=0.0)
    with np.errstate(divide="ignore", invalid="ignore"):
        near, far = np.sqrt(ct), np.sqrt(2.0 * a - ct)
        rho = near * far
        speed = (a - ct) / rho
        scattering = 2.0 * np.rad2deg(np.arctan2(near, far))
    return _ring(rho * scale, 0.0 * rho, 0.0 * rho, speed, scattering)


def screen_ring(
    delay_days: ArrayLike, dust_distance_pc: ArrayLike, source_distance_pc: ArrayLike | None = None
) -> EchoRing:
    """Ring on dust anywhere between observer and source: the exact ellipsoid.

    dust_distance_pc: from the observer, along the scattered ray, above 0. source_distance_pc: above 0, or
    None for a source at infinity (a burst far outside the Galaxy). Shapes broadcast.
    ``speed_c`` is the speed of the lit patch across the sky at the dust. nan where no ring is (also where
    the delay is longer than a path by way of the dust can be). Raises DomainError.
    """
    d = checked("dust_distance_pc", dust_distance_pc, above=0.0)
    ct = C_PC_PER_DAY * checked("delay_days", delay_days)
    with np.errstate(divide="ignore", invalid="ignore"):
        if source_distance_pc is None:
            half = np.sqrt(ct / (2.0 * d))  # sin of half the radius
            rate = np.ones_like(half)
        else:
            big = checked("source_distance_pc", source_distance_pc, above=0.0)
            half = np.sqrt(ct) * np.sqrt(2.0 * (big - d) + ct) / (2.0 * np.sqrt(d * big))
            rate = ((big - d) + ct) / big
        theta = 2.0 * np.arcsin(half)
        sine = 2.0 * half * np.sqrt((1.0 - half) * (1.0 + half))
        speed = np.where((rate == 0.0) & (half == 0.0), 1.0, rate / sine)
        if source_distance_pc is None:
            scattering = theta
        else:  # the angle at the source; D - d cos(theta) without a difference of near equals
            scattering = theta + np.arctan2(d * sine, (big - d) + 2.0 * d * half**2)
    return _ring(theta * RAD_ARCSEC, 0.0 * theta, 0.0 * theta, speed, np.rad2deg(scattering))


def near_sheet_ring(delay_days: ArrayLike, depth_pc: ArrayLike, distance_pc: ArrayLike) -> EchoRing:
    """Ring on an untilted sheet without taking the source for infinitely far: plane cut with the ellipsoid.

    Arguments as for ``sheet_ring``; depth_pc below the distance. The radius exceeds that of ``sheet_ring`` by
    about depth/(2 distance). nan where no ring is. Raises DomainError.
    """
    z0 = checked("depth_pc", depth_pc)
    ct = C_PC_PER_DAY * checked("delay_days", delay_days)
    big = checked("distance_pc", distance_pc, above=0.0)
    gap = checked("distance_pc - depth_pc", big - z0, above=0.0)
    with np.errstate(divide="ignore", invalid="ignore"):
        # ellipse: half axes (D + ct)/2 and sqrt(ct (2 D + ct))/2, cut at z0
        rho = np.sqrt(ct) * np.sqrt(z0 + ct / 2.0) * np.sqrt((2.0 * big + ct) * (gap + ct / 2.0)) / (big + ct)
        to_source, to_observer = np.hypot(rho, z0), np.hypot(rho, gap)
        # c dt = d rho (rho/r + rho/d) along the plane
        speed = 1.0 / (rho / to_source + rho / to_observer)
        scattering = np.rad2deg(np.arctan2(rho, z0) + np.arctan2(rho, gap))
        theta = np.arctan2(rho, gap)
    return _ring(theta * RAD_ARCSEC, 0.0 * rho, 0.0 * rho, speed, scattering)


def _ring(radius: Floats, east: Floats, north: Floats, speed: Floats, scattering: Floats) -> EchoRing:
    gone = np.isnan(radius)
    speed, scattering = np.where(gone, np.nan, speed), np.where(gone, np.nan, scattering)
    parts = np.broadcast_arrays(radius, east, north, speed, scattering)
    return EchoRing(*(plain(part) for part in parts))


def radius_at_pa_arcsec(ring: EchoRing | tuple[ArrayLike, ArrayLike, ArrayLike], pa_deg: ArrayLike) -> Floats:
    """Distance from the source to a circle in the direction of a position angle (north through east).

    ring: EchoRing, or (radius, centre east, centre north) in arcsec as ``sheet_circle`` returns them.
    nan where the direction misses the circle. When the source lies outside the circle a direction meets it
    twice: the farther crossing is returned. Broadcasts. Raises DomainError for a negative radius.
    """
    if isinstance(ring, EchoRing):
        ring = (ring.radius_arcsec, ring.centre_east_arcsec, ring.centre_north_arcsec)
    radius = checked("radius_arcsec", ring[0], at_least=0.0)
    east, north = checked("centre_east_arcsec", ring[1]), checked("centre_north_arcsec", ring[2])
    pa = np.deg2rad(checked("pa_deg", pa_deg))
    ue, un = np.sin(pa), np.cos(pa)
    along, aside = east * ue + north * un, east * un - north * ue
    with np.errstate(divide="ignore", invalid="ignore"):
        reach = np.sqrt((radius - np.abs(aside)) * (radius + np.abs(aside)))
        centre = np.hypot(east, north)
        # behind the centre the plain sum is a difference of near equals: use the product of both crossings
        backward = (radius - centre) * (radius + centre) / (reach - along)
        found = np.where(along >= 0.0, along + reach, backward)
        return plain(np.where(found >= 0.0, found, np.nan))


def sheet_local_speed_c(radius_pc: ArrayLike, delay_days: ArrayLike, radial_slope: ArrayLike = 0.0) -> Floats:
    """Speed (in c, outward) of the lit point at projected radius ``radius_pc`` on any thin surface of dust.

    radial_slope: rise of depth with projected radius at that point; along direction phi of a plane of slope
    m it is m cos(phi). v/c = r/(rho - slope ct): infinite where the surface touches the light surface.
    radius_pc: at least 0; nan for delays at or below 0. Broadcasts. Raises DomainError.
    """
    rho = checked("radius_pc", radius_pc, at_least=0.0)
    ct = C_PC_PER_DAY * checked("delay_days", delay_days)
    slope = checked("radial_slope", radial_slope)
    with np.errstate(divide="ignore", invalid="ignore"):
        r = (rho**2 + ct**2) / (2.0 * ct)
        return plain(np.where(ct > 0.0, r / (rho - slope * ct), np.nan))


# ------------------------------------------------------------------ inverse


def depth_from_radius_pc(radius_arcsec: ArrayLike, delay_days: ArrayLike, distance_pc: ArrayLike) -> Floats:
    """Depth of an untilted sheet whose ring has this radius: z = (rho^2 - (ct)^2) / (2 ct).

    The distance of that dust from the source is z + ct (printed depths often mean the one for the other).
    radius_arcsec: at least 0; distance_pc: above 0; nan for delays at or below 0. Broadcasts.
    Raises DomainError.
    """
    rho, ct = _rho_and_ct(radius_arcsec, delay_days, distance_pc)
    with np.errstate(divide="ignore", invalid="ignore"):
        return plain(np.where(ct > 0.0, (rho - ct) * ((rho + ct) / (2.0 * ct)), np.nan))


def delay_at_radius_days(radius_arcsec: ArrayLike, depth_pc: ArrayLike, distance_pc: ArrayLike) -> Floats:
    """Delay at which an untilted sheet shows a ring of this radius: ct = sqrt(rho^2 + z^2) - z.

    radius_arcsec: at least 0; depth_pc: negative behind the source; distance_pc: above 0. Broadcasts.
    Always has an answer; radius 0 gives the first moment of the ring. Raises DomainError.
    """
    theta = checked("radius_arcsec", radius_arcsec, at_least=0.0)
    z0 = checked("depth_pc", depth_pc)
    rho = theta * (checked("distance_pc", distance_pc, above=0.0) / RAD_ARCSEC)
    r = np.hypot(rho, z0)
    total = np.abs(z0) + r  # never the difference: far in front it would keep no digit
    ct = np.where(z0 > 0.0, rho * (rho / np.where(total > 0.0, total, 1.0)), total)
    return plain(ct / C_PC_PER_DAY)


def dust_distance_pc(
    radius_arcsec: ArrayLike, delay_days: ArrayLike, source_distance_pc: ArrayLike | None = None
) -> Floats:
    """Distance from the observer of dust that shows a ring of this radius: inverse of ``screen_ring``.

    radius_arcsec: above 0, at most 180 deg; nan for delays at or below 0. Broadcasts. Raises DomainError.
    """
    ct, half2 = _ct_and_half(radius_arcsec, delay_days)
    with np.errstate(divide="ignore", invalid="ignore"):
        if source_distance_pc is None:
            d = ct / (2.0 * half2)
        else:
            big = checked("source_distance_pc", source_distance_pc, above=0.0)
            d = ct * (2.0 * big + ct) / (2.0 * (2.0 * big * half2 + ct))
        return plain(np.where(ct > 0.0, d, np.nan))


def source_distance_pc(dust_distance_pc: ArrayLike, radius_arcsec: ArrayLike, delay_days: ArrayLike) -> Floats:
    """Distance of a source seen through dust of known distance, from one ring radius.

    For small angles 1/D = 1/d - theta^2/(2 ct); here exact. nan where the ring is larger than even a source
    at infinity would give, and for delays at or below 0. Broadcasts. Raises DomainError.
    """
    d = checked("dust_distance_pc", dust_distance_pc, above=0.0)
    ct, half2 = _ct_and_half(radius_arcsec, delay_days)
    with np.errstate(divide="ignore", invalid="ignore"):
        below, above = ct - 2.0 * d * half2, 2.0 * d - ct
        big = ct * above / (2.0 * below)
        return plain(np.where((ct > 0.0) & (below > 0.0) & (above > 0.0), big, np.nan))


def age_from_motion_days(radius_arcsec: ArrayLike, motion_arcsec_yr: ArrayLike, distance_pc: ArrayLike) -> Floats:
    """Delay of an untilted sheet's ring from its radius and growth rate at one epoch.

    t = (rho/c) / (b + sqrt(b^2 - 1)) with b the speed in c; about radius/(2 rate) when b is large, always
    longer than that. nan where b is below 1 (an untilted sheet is never slower than light). Biased when the
    sheet is tilted. radius_arcsec at least 0, the others above 0. Broadcasts. Raises DomainError.
    """
    rho = checked("radius_arcsec", radius_arcsec, at_least=0.0)
    rate = checked("motion_arcsec_yr", motion_arcsec_yr, above=0.0)
    scale = checked("distance_pc", distance_pc, above=0.0) / RAD_ARCSEC
    b = rate * scale / (C_PC_PER_DAY * YEAR_DAYS)
    with np.errstate(invalid="ignore"):
        return plain(rho * scale / (b + np.sqrt((b - 1.0) * (b + 1.0))) / C_PC_PER_DAY)


def plane_of_sky_distance_pc(delay_days: ArrayLike, radius_arcsec: ArrayLike) -> Floats:
    """Distance of the source from a ring of dust beside it (scattering at 90 deg): D = ct/theta.

    Needs proof that the angle is 90 deg, as a ring of highest polarisation gives (Sparks 1994, from memory).
    Both arguments above 0 (nan for delays at or below 0). Broadcasts. Raises DomainError.
    """
    theta = checked("radius_arcsec", radius_arcsec, above=0.0) / RAD_ARCSEC
    ct = C_PC_PER_DAY * checked("delay_days", delay_days)
    return plain(np.where(ct > 0.0, ct / theta, np.nan))


def phase_lag_cycles(
    radius_arcsec: ArrayLike, period_days: ArrayLike, distance_pc: ArrayLike, behind_deg: ArrayLike = 0.0
) -> Floats:
    """Whole cycles plus phase by which dust at this radius lags behind a periodic source.

    behind_deg: angle of the line from source to dust against the sky plane, inside -90..90, positive when the
    dust is FARTHER than the source (the convention of Feast 2008; opposite to the depth of this module).
    period_days, distance_pc: above 0; radius_arcsec at least 0. Broadcasts. Raises DomainError.
    """
    rho = checked("radius_arcsec", radius_arcsec, at_least=0.0) * (
        checked("distance_pc", distance_pc, above=0.0) / RAD_ARCSEC
    )
    period = C_PC_PER_DAY * checked("period_days", period_days, above=0.0)
    behind = np.deg2rad(checked("behind_deg", behind_deg, above=-90.0, below=90.0))
    # (1 + sin a)/cos a = tan(45 deg + a/2): keeps its digits at a near -90 deg
    return plain(rho / period * np.tan(np.pi / 4.0 + behind / 2.0))


def why_no_ring(delay_days: float, depth_pc: float, slope: float = 0.0) -> str:
    """Say why a sheet shows no ring ("" if it shows one): the reason with its number."""
    if delay_days < 0.0:
        return f"{-delay_days:g} d before the light of the outburst arrives"
    first = max(0.0, -2.0 * depth_pc / (1.0 + slope**2)) / C_PC_PER_DAY
    if delay_days < first:
        return f"the dust lies {-depth_pc:g} pc behind the source: its first light comes after {first:.5g} d"
    return ""


def _rho_and_ct(radius_arcsec: ArrayLike, delay_days: ArrayLike, distance_pc: ArrayLike) -> tuple[Floats, Floats]:
    scale = checked("distance_pc", distance_pc, above=0.0) / RAD_ARCSEC
    rho = checked("radius_arcsec", radius_arcsec, at_least=0.0) * scale
    return rho, C_PC_PER_DAY * checked("delay_days", delay_days)


def _ct_and_half(radius_arcsec: ArrayLike, delay_days: ArrayLike) -> tuple[Floats, Floats]:
    theta = checked("radius_arcsec", radius_arcsec, above=0.0, at_most=648_000.0) / RAD_ARCSEC
    return C_PC_PER_DAY * checked("delay_days", delay_days), np.sin(theta / 2.0) ** 2
