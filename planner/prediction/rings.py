"""A sheet ring inside the observation model: sector radii, width and brightness of each draw and night.

The observable is the radius about the source in sectors of position angle (a whole ring is all sectors), so that an
arc, a displaced centre and a whole circle are one case. Array shapes: theta (..., P), mjd (T,), results (..., T) or
(..., T, S) with S sectors.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from planner.campaign.records import Ring, Target
from planner.physics import dust, echo, echo_width
from planner.prediction.coordinates import Layout, Number, standard
from planner.records import Bools, Floats
from planner.units import mjd_of_date

SECTOR_DEG = 45.0  # one radius per sector of this size: finer sectors share the seeing disc and teach the same
NO_ANCHOR_MAG = 1.0  # absolute surface brightness from an extinction is good to about 1 mag (design; check values)


@dataclass(frozen=True)
class SetupNuisance:
    """Coordinates of one camera setup, shared by all rings of a target: scale error and centre offset."""

    scale: int
    centre_east: int
    centre_north: int


@dataclass(frozen=True)
class RingState:
    """What a ring looks like, (..., T)."""

    exists: Bools
    radius_arcsec: Floats  # of the circle
    mean_radius_arcsec: Floats  # about the source, mean over the sectors that shine
    width_arcsec: Floats  # FWHM before the image's own blur
    mag_arcsec2: Floats  # thin resolved sheet, in the anchor's filter


@dataclass(frozen=True)
class RingModel:
    """One ring of a target."""

    record: Ring
    target: Target
    depth: Number
    distance: Number
    slope_east: Number
    slope_north: Number
    drift: Number
    clock: Number
    brightness: Number
    extinction: Number | None
    delay_reference_days: float
    pa_deg: Floats  # (S,) middles of the sectors
    sector_deg: float
    span_deg: float
    setups: Mapping[str, SetupNuisance]

    kind = "ring"

    @property
    def name(self) -> str:
        """The feature's name."""
        return self.record.name

    @property
    def observables(self) -> tuple[str, ...]:
        """Names of the measured quantities, in order."""
        return tuple(f"radius at PA {pa:.0f}" for pa in self.pa_deg)

    def depends(self, setup: str | None) -> tuple[int, ...]:
        """Coordinates that move this feature's observables with a setup."""
        numbers = (self.depth, self.distance, self.slope_east, self.slope_north, self.drift, self.clock)
        found = [n.index for n in numbers if n.index is not None]
        if setup is not None and setup in self.setups:
            s = self.setups[setup]
            found += [s.scale, s.centre_east, s.centre_north]
        return tuple(found)

    # -------------------------------------------------------------- geometry

    def delay_days(self, theta: Floats, mjd: Floats) -> Floats:
        """Delay since the peak of the outburst, (..., T)."""
        assert self.target.outburst is not None
        return mjd - mjd_of_date(self.target.outburst.peak.date) - self.clock.value(theta)

    def depth_pc(self, theta: Floats, delay_days: Floats) -> Floats:
        """Depth with its slow drift: ln depth = ln depth_ref + drift n ln(delay / delay_ref), (..., T)."""
        stretch = np.log(np.maximum(delay_days, 1e-3) / self.delay_reference_days)
        return self.depth.value(theta) * np.exp(self.record.dust.drift * self.drift.value(theta) * stretch)

    def circle(self, theta: Floats, mjd: Floats) -> tuple[Floats, Floats, Floats]:
        """Radius and centre (east, north) in arcsec, each (..., T); nan where there is no ring."""
        delay = self.delay_days(theta, mjd)
        return echo.sheet_circle(
            delay,
            self.depth_pc(theta, delay),
            self.distance.value(theta),
            self.slope_east.value(theta),
            self.slope_north.value(theta),
        )

    def observe(self, theta: Floats, mjd: Floats, setup: str | None = None) -> Floats:
        """Sector radii in arcsec as a setup records them, (..., T, S); nan where there is no ring there.

        With a setup, its scale error and centre offset are applied; without one the sky itself is returned.
        """
        radius, east, north = self.circle(theta, mjd)
        value = echo.radius_at_pa_arcsec((radius[..., None], east[..., None], north[..., None]), self.pa_deg)
        if setup is not None and setup in self.setups:
            s = self.setups[setup]
            pa = np.radians(self.pa_deg)
            shift = theta[..., s.centre_east, None] * np.sin(pa) + theta[..., s.centre_north, None] * np.cos(pa)
            value = value * (1.0 + theta[..., s.scale, None, None]) + shift[..., None, :]
        return value

    # -------------------------------------------------------------- light

    def state(self, theta: Floats, mjd: Floats) -> RingState:
        """Radius, width and brightness in each draw and night."""
        assert self.target.outburst is not None
        radius, east, north = self.circle(theta, mjd)
        delay = self.delay_days(theta, mjd)
        depth = self.depth_pc(theta, delay)
        sectors = echo.radius_at_pa_arcsec((radius[..., None], east[..., None], north[..., None]), self.pa_deg)
        seen = np.isfinite(sectors)
        count = seen.sum(axis=-1)
        mean = np.where(count > 0, np.where(seen, sectors, 0.0).sum(axis=-1) / np.maximum(count, 1), np.nan)
        exists = np.isfinite(radius) & (2 * count >= len(self.pa_deg))
        return RingState(exists, radius, mean, self._width(theta, delay, radius), self._mag(theta, delay, depth))

    def _width(self, theta: Floats, delay: Floats, radius: Floats) -> Floats:
        """FWHM from the length of the outburst and the thickness of the sheet, in quadrature."""
        assert self.target.outburst is not None
        where = (radius, delay, self.distance.value(theta))
        return np.hypot(
            echo_width.outburst_width_arcsec(self.target.outburst.lasting_days, *where),
            echo_width.dust_width_arcsec(self.record.dust.thickness_pc, *where),
        )

    def _thin_sheet_mag(self, theta: Floats, delay: Floats, depth: Floats, filter_name: str) -> Floats:
        assert self.target.outburst is not None
        albedo, g = dust.grains(self.record.dust.grains, filter_name)
        extinction = self.extinction.value(theta) if self.extinction is not None else 0.1
        return dust.ring_mag_arcsec2(
            self.target.outburst.peak_mag[filter_name],  # type: ignore[index]
            extinction, albedo, g, depth, delay, self.distance.value(theta),
        )  # fmt: skip

    @property
    def light_filter(self) -> str:
        """The filter the brightness is anchored in."""
        assert self.target.outburst is not None
        seen = self.record.brightness.seen
        return (
            seen.filter
            if seen
            else ("V" if "V" in self.target.outburst.peak_mag else min(self.target.outburst.peak_mag))
        )

    def _mag(self, theta: Floats, delay: Floats, depth: Floats) -> Floats:
        """Surface brightness in the anchor's filter: anchored on what was seen, changed as the dust model says."""
        seen = self.record.brightness.seen
        offset = self.brightness.value(theta)
        now = self._thin_sheet_mag(theta, delay, depth, self.light_filter)
        if seen is None:
            return now + offset
        then_delay = self.delay_days(theta, np.array([mjd_of_date(seen.on) + 0.5]))
        then = self._thin_sheet_mag(theta, then_delay, self.depth_pc(theta, then_delay), seen.filter)
        return seen.mag_arcsec2 + now - then + offset

    def colour_mag(self, filter_name: str) -> float:
        """What to add to the anchor's magnitude for another filter: outburst colour and the dust's scattering.

        Uses the outburst's own peak colours; where the other filter has no peak magnitude the colour is taken as 0,
        which ``assumptions`` of the forecast states.
        """
        assert self.target.outburst is not None
        peak = self.target.outburst.peak_mag
        home = self.light_filter
        colour = peak[filter_name] - peak[home] if filter_name in peak else 0.0  # type: ignore[index]
        albedo, _ = dust.grains(self.record.dust.grains, filter_name)
        albedo_home, _ = dust.grains(self.record.dust.grains, home)
        return float(colour - 2.5 * np.log10(albedo / albedo_home))


def build_ring(
    record: Ring,
    target: Target,
    layout: Layout,
    *,
    distance: Number,
    clock: Number,
    setups: Mapping[str, SetupNuisance],
    middle_mjd: float,
) -> RingModel:
    """Add a ring's coordinates to a target's layout and return its model."""
    assert target.outburst is not None
    sheet, light = record.dust, record.brightness
    tilt_why = "sheet tilt as two slopes"
    east = layout.add(standard(f"{record.name}/slope_east", "", sheet.tilt.slope_sigma, mean=sheet.tilt.slope_east,
                               why=tilt_why, nuisance=False))  # fmt: skip
    north = layout.add(standard(f"{record.name}/slope_north", "", sheet.tilt.slope_sigma, mean=sheet.tilt.slope_north,
                                why=tilt_why, nuisance=False))  # fmt: skip
    depth = layout.add_law(f"{record.name}/depth_pc", "pc", sheet.depth_pc)
    drift = layout.add(standard(f"{record.name}/depth drift", "", 1.0, why=f"{sheet.drift:g} per e-fold of delay"))
    sigma = light.seen.sigma if light.seen else NO_ANCHOR_MAG
    offset = layout.add(
        standard(f"{record.name}/brightness offset", "mag", sigma, why="as seen" if light.seen else "absolute scale")
    )
    extinction = None
    if light.extinction_mag is not None:
        extinction = layout.add_law(f"{record.name}/extinction_mag", "mag", light.extinction_mag)
    pa_deg, sector = sectors(light.seen.pa_deg if light.seen else None)
    return RingModel(
        record=record, target=target, depth=depth, distance=distance,
        slope_east=Number(east[0], False, 0.0), slope_north=Number(north[0], False, 0.0),
        drift=Number(drift[0], False, 0.0), clock=clock, brightness=Number(offset[0], False, 0.0),
        extinction=extinction,
        delay_reference_days=max(1.0, middle_mjd - mjd_of_date(target.outburst.peak.date)),
        pa_deg=pa_deg, sector_deg=sector, span_deg=sector * len(pa_deg), setups=setups,
    )  # fmt: skip


def sectors(pa_range_deg: tuple[float, float] | None) -> tuple[Floats, float]:
    """Middles (S,) and size of the sectors that shine: all round, or an arc from one position angle to another."""
    low, high = (0.0, 360.0) if pa_range_deg is None else pa_range_deg
    span = (high - low) % 360.0 or 360.0
    count = max(1, round(span / SECTOR_DEG))
    size = float(span / count)
    return np.asarray((low + size * (np.arange(count) + 0.5)) % 360.0, dtype=np.float64), size
