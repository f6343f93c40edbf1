"""Shapes of dust inside the observation model: where each shows a ring, how wide, and how much light it scatters.

A shape turns coordinates and geometric delays into circles on the sky. The geometric delay is in the frame of the
source for dust around the source (observed delay over 1 + redshift) and as observed for a screen in front.
Array shapes: theta (..., P), delay (..., T), results (..., T).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from planner.campaign.records import FilledDust, ScreenDust, SheetDust, ShellDust
from planner.physics import dust as dust_physics
from planner.physics import echo, echo_width
from planner.prediction.coordinates import Number
from planner.records import Floats
from planner.units import C_PC_PER_DAY, SR_ARCSEC2

# Half maximum of sin^2/(1 + cos^2) is where cos^2 = 1/3, at radii tan(half of 125.3 deg) and its inverse times ct:
# 1.9319 - 0.5176.
POLARISED_WIDTH = 1.4142


@dataclass(frozen=True)
class Scatter:
    """What the dust on the ring does with the light, (..., T); nan where there is none.

    ``spread``: squared ratio of the source's distance to the dust's distance from it (the source's light falls on
    dust that much nearer). ``reach_pc``: length that divides the light of a whole ring. ``lit_pc``: depth, along
    the line of sight, lit at one moment by a day of outburst. ``slant``: path through the dust over its thickness.
    """

    angle_deg: Floats
    spread: Floats
    reach_pc: Floats
    lit_pc: Floats
    slant: Floats


Circle = tuple[Floats, Floats, Floats]  # radius, centre east, centre north in arcsec


def _drift(value: Floats, drift: float, coordinate: Floats, delay: Floats, reference_days: float) -> Floats:
    """A length that changes slowly with delay: ln x = ln x_ref + drift n ln(delay / delay_ref)."""
    return value * np.exp(drift * coordinate * _stretch(delay, reference_days))


def _stretch(delay: Floats, reference_days: float) -> Floats:
    return np.asarray(np.log(np.maximum(delay, 1e-3) / reference_days))


@dataclass(frozen=True)
class SheetShape:
    """A plane sheet: depth may be negative (behind the source) or about 0 (beside it)."""

    record: SheetDust
    distance: Number
    depth: Number
    slope_east: Number
    slope_north: Number
    drift: Number
    reference_days: float

    kind = "sheet"
    in_host = True

    @property
    def numbers(self) -> tuple[Number, ...]:
        """Coordinates that move its ring."""
        return (self.depth, self.distance, self.slope_east, self.slope_north, self.drift)

    def depth_pc(self, theta: Floats, delay: Floats) -> Floats:
        """Depth with its slow drift; where the depth may be 0 the drift adds its share of depth and light path."""
        depth, n = self.depth.value(theta), self.drift.value(theta)
        if self.depth.log:
            return _drift(depth, self.record.drift, n, delay, self.reference_days)
        path = np.abs(depth) + C_PC_PER_DAY * np.maximum(delay, 0.0)
        return depth + self.record.drift * n * _stretch(delay, self.reference_days) * path

    def circle(self, theta: Floats, delay: Floats) -> Circle:
        """Radius and centre in arcsec; nan where there is no ring."""
        depth, distance = self.depth_pc(theta, delay), self.distance.value(theta)
        return echo.sheet_circle(delay, depth, distance, self.slope_east.value(theta), self.slope_north.value(theta))

    def radial_slope(self, theta: Floats, pa_deg: Floats) -> Floats:
        """Rise of depth with radius toward each position angle, (..., 1, S)."""
        pa = np.radians(pa_deg)
        east, north = self.slope_east.value(theta)[..., None], self.slope_north.value(theta)[..., None]
        return east * np.sin(pa) + north * np.cos(pa)

    def width(self, theta: Floats, delay: Floats, sectors: Floats, pa_deg: Floats, lasting_days: float) -> Floats:
        """FWHM in arcsec before the image's blur, mean over the sectors that shine; sectors (..., T, S)."""
        slope = self.radial_slope(theta, pa_deg)
        where = (np.maximum(sectors, 0.0), delay[..., None], self.distance.value(theta)[..., None], slope)
        each = np.hypot(
            echo_width.outburst_width_arcsec(lasting_days, *where),
            echo_width.dust_width_arcsec(self.record.thickness_pc, *where),
        )
        seen = np.isfinite(each) & np.isfinite(sectors)
        count = seen.sum(axis=-1)
        return np.where(count > 0, np.where(seen, each, 0.0).sum(axis=-1) / np.maximum(count, 1), np.nan)

    def scatter(self, theta: Floats, delay: Floats) -> Scatter:
        """Scattering at the untilted sheet of the same depth."""
        z0, ct = self.depth_pc(theta, delay), C_PC_PER_DAY * delay
        lit = (ct > 0.0) & (2.0 * z0 + ct >= 0.0) & (z0 + ct > 0.0)
        with np.errstate(divide="ignore", invalid="ignore"):
            r = np.where(lit, z0 + ct, np.nan)
            angle = np.where(lit, 2.0 * np.degrees(np.arctan2(np.sqrt(ct), np.sqrt(2.0 * z0 + ct))), np.nan)
            return Scatter(angle, (self.distance.value(theta) / r) ** 2, r, r / delay, np.ones_like(r))


@dataclass(frozen=True)
class ShellShape:
    """A spherical shell about the source: the ring grows, stands still, shrinks and ends."""

    record: ShellDust
    distance: Number
    radius: Number
    drift: Number
    reference_days: float

    kind = "shell"
    in_host = True

    @property
    def numbers(self) -> tuple[Number, ...]:
        """Coordinates that move its ring."""
        return (self.radius, self.distance, self.drift)

    def radius_pc(self, theta: Floats, delay: Floats) -> Floats:
        """Radius of the shell where the light meets it, with its slow drift."""
        value = self.radius.value(theta)
        return _drift(value, self.record.drift, self.drift.value(theta), delay, self.reference_days)

    def circle(self, theta: Floats, delay: Floats) -> Circle:
        """Radius and centre in arcsec; nan before the outburst and after the shell's last light."""
        ring = echo.shell_ring(delay, self.radius_pc(theta, delay), self.distance.value(theta))
        return ring.radius_arcsec, ring.centre_east_arcsec, ring.centre_north_arcsec

    def width(self, theta: Floats, delay: Floats, sectors: Floats, pa_deg: Floats, lasting_days: float) -> Floats:
        """FWHM in arcsec before the image's blur, the same toward all sides."""
        where = (delay, self.radius_pc(theta, delay), self.distance.value(theta))
        with np.errstate(invalid="ignore", divide="ignore"):
            return np.hypot(
                echo_width.shell_outburst_width_arcsec(lasting_days, *where),
                echo_width.shell_dust_width_arcsec(self.record.thickness_pc, *where),
            )

    def scatter(self, theta: Floats, delay: Floats) -> Scatter:
        """Scattering on the shell; the path through it grows toward the limb up to half a chord, sqrt(a da)."""
        a, ct = self.radius_pc(theta, delay), C_PC_PER_DAY * delay
        with np.errstate(divide="ignore", invalid="ignore"):
            cosine = np.where((ct > 0.0) & (ct < 2.0 * a), 1.0 - ct / a, np.nan)
            slant = 1.0 / np.sqrt(cosine**2 + self.record.thickness_pc / a)
            angle = np.degrees(np.arccos(cosine))
            spread = (self.distance.value(theta) / a) ** 2
            return Scatter(angle, spread + 0.0 * cosine, a + 0.0 * cosine, a / delay, slant)


@dataclass(frozen=True)
class ScreenShape:
    """A foreground cloud, by the exact ellipsoid; ``distance`` is None for a source at infinity."""

    record: ScreenDust
    distance: Number | None
    dust_distance: Number
    drift: Number
    reference_days: float

    kind = "screen"
    in_host = False

    @property
    def numbers(self) -> tuple[Number, ...]:
        """Coordinates that move its ring."""
        both = (self.dust_distance, self.drift)
        return both if self.distance is None else (*both, self.distance)

    def dust_distance_pc(self, theta: Floats, delay: Floats) -> Floats:
        """Distance of the dust from the observer, with its slow drift."""
        value = self.dust_distance.value(theta)
        return _drift(value, self.record.drift, self.drift.value(theta), delay, self.reference_days)

    def _source_pc(self, theta: Floats) -> Floats | None:
        return None if self.distance is None else self.distance.value(theta)

    def circle(self, theta: Floats, delay: Floats) -> Circle:
        """Radius and centre in arcsec; nan where there is no ring."""
        ring = echo.screen_ring(delay, self.dust_distance_pc(theta, delay), self._source_pc(theta))
        return ring.radius_arcsec, ring.centre_east_arcsec, ring.centre_north_arcsec

    def width(self, theta: Floats, delay: Floats, sectors: Floats, pa_deg: Floats, lasting_days: float) -> Floats:
        """FWHM in arcsec before the image's blur; small angles, dust in front of the source (else nan)."""
        radius, _, _ = self.circle(theta, delay)
        d, source = self.dust_distance_pc(theta, delay), self._source_pc(theta)
        if source is not None:
            d = np.where(d < source, d, np.nan)
        with np.errstate(invalid="ignore"):
            return np.hypot(
                echo_width.screen_outburst_width_arcsec(lasting_days, radius, delay),
                echo_width.screen_dust_width_arcsec(self.record.thickness_pc, radius, d, source),
            )

    def scatter(self, theta: Floats, delay: Floats) -> Scatter:
        """Scattering on the screen: dust that is far from the source gets its light as thin as we do."""
        d, source = self.dust_distance_pc(theta, delay), self._source_pc(theta)
        angle = echo.screen_ring(delay, d, source).scattering_deg
        with np.errstate(divide="ignore", invalid="ignore"):
            if source is None:
                spread, reach = np.ones_like(d), d
            else:
                r = np.where(source - d + C_PC_PER_DAY * delay > 0.0, source - d + C_PC_PER_DAY * delay, np.nan)
                spread, reach = (source / r) ** 2, d * r / source
            gone = 0.0 * angle
            lit = np.where(delay > 0.0, reach / delay, np.nan)
            return Scatter(angle, spread + gone, reach + gone, lit + gone, 1.0 + gone)


@dataclass(frozen=True)
class FilledShape:
    """Dust all around the source: the ring of highest polarisation, where light is scattered by 90 degrees.

    Real dust polarises most a few degrees off 90: ``peak`` is that difference, in units of its stated width.
    """

    record: FilledDust
    distance: Number
    peak: Number

    kind = "filled"
    in_host = True

    @property
    def numbers(self) -> tuple[Number, ...]:
        """Coordinates that move its ring."""
        return (self.distance, self.peak)

    def circle(self, theta: Floats, delay: Floats) -> Circle:
        """Radius ct/(D tan(half the peak's angle)) and centre in arcsec; nan before the outburst."""
        half = np.radians(45.0 + 0.5 * self.record.peak_sigma_deg * self.peak.value(theta))
        radius = dust_physics.polarised_radius_arcsec(delay, self.distance.value(theta)) / np.tan(half)
        return radius, 0.0 * radius, 0.0 * radius

    def width(self, theta: Floats, delay: Floats, sectors: Floats, pa_deg: Floats, lasting_days: float) -> Floats:
        """Full width at half of the polarisation's maximum: it does not depend on the outburst."""
        return POLARISED_WIDTH * self.circle(theta, delay)[0]

    def scatter(self, theta: Floats, delay: Floats) -> Scatter:
        """Scattering by 90 degrees at r = ct; the lit path is r tau/t = c tau."""
        ct = np.where(delay > 0.0, C_PC_PER_DAY * delay, np.nan)
        spread = (self.distance.value(theta) / ct) ** 2
        gone = 0.0 * spread
        return Scatter(90.0 + gone, spread, ct + gone, C_PC_PER_DAY + gone, 1.0 + gone)


Shape = SheetShape | ShellShape | ScreenShape | FilledShape


def surface_mag(
    shape: Shape, seen: Scatter, peak_mag: float, lasting_days: float, extinction: Floats, albedo: float, g: float
) -> Floats:
    """Surface brightness of the ridge in mag/arcsec2, (..., T), single scattering, nan where no light is.

    ``extinction``: magnitudes of the dust as crossed straight on (filled dust: per parsec). Between the thin
    sheet (all its depth lit at once: I = tau_s Phi F D^2/r^2) and the thick medium (only L = r tau/t of its depth
    dz is lit) the depth that counts is dz L/hypot(dz, L): exact when light curve and dust are both Gaussian.
    """
    lit = seen.lit_pc * lasting_days
    if shape.record.thickness_pc is None:
        crossed = lit * extinction
    else:
        depth = shape.record.thickness_pc * seen.slant
        crossed = extinction * seen.slant * lit / np.hypot(lit, depth)
    angle = np.where(np.isfinite(seen.angle_deg), seen.angle_deg, 0.0)
    phase = dust_physics.phase_function(angle, g) + 0.0 * seen.angle_deg
    share = albedo * crossed / dust_physics.MAG_PER_TAU * phase * seen.spread / SR_ARCSEC2
    if isinstance(shape, FilledShape):
        share = share * shape.record.p_max
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(peak_mag - 2.5 * np.log10(share))
