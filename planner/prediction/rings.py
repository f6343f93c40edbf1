"""A ring inside the observation model: sector radii, width and brightness of each draw and night.

The observable is the radius about the source in sectors of position angle (a whole ring is all sectors), so that an
arc, a displaced centre and a whole circle are one case. Array shapes: theta (..., P), mjd (T,), results (..., T) or
(..., T, S) with S sectors.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from planner.campaign.echo_faults import anchor_filter, source_at_infinity
from planner.campaign.records import FilledDust, Outburst, Ring, ScreenDust, SheetDust, Target
from planner.physics import echo
from planner.physics.dust import GAUSSIAN_AREA
from planner.physics.light_curve import Course
from planner.prediction.coordinates import Layout, Number, standard
from planner.prediction.once import once
from planner.prediction.outburst_light import course_of, grains_of, peak_mag, phase_days
from planner.prediction.ring_shapes import FilledShape, ScreenShape, Shape, SheetShape, ShellShape, surface_mag
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
    mag_arcsec2: Floats  # of the resolved ridge, in the anchor's filter (polarised light for filled dust)


@dataclass(frozen=True)
class RingModel:
    """One ring of a target."""

    record: Ring
    target: Target
    shape: Shape
    clock: Number
    brightness: Number
    extinction: Number | None
    pa_deg: Floats  # (S,) middles of the sectors
    sector_deg: float
    span_deg: float
    light: Course  # of the outburst in the anchor's filter, observed days
    light_filter: str  # the filter the brightness is anchored in
    setups: Mapping[str, SetupNuisance]
    home: Floats  # (1, P') prior mean of the coordinates that it knows of
    filters: Mapping[str, str] = field(default_factory=dict)  # setup -> filter, for the phase of its radius
    # What ``ring_profiles`` found out on fixed dates: where widths may not be added, and by how much they then miss.
    broken: dict[int, bool] = field(default_factory=dict, compare=False, repr=False)
    memo: dict[tuple[int, int], tuple[float, float]] = field(default_factory=dict, compare=False, repr=False)

    kind = "ring"

    @property
    def name(self) -> str:
        """The feature's name."""
        return self.record.name

    @property
    def outburst(self) -> Outburst:
        """The target's outburst."""
        assert self.target.outburst is not None
        return self.target.outburst

    @property
    def observables(self) -> tuple[str, ...]:
        """Names of the measured quantities, in order."""
        return tuple(f"radius at PA {pa:.0f}" for pa in self.pa_deg)

    def depends(self, setup: str | None) -> tuple[int, ...]:
        """Coordinates that move this feature's observables with a setup."""
        found = [n.index for n in (*self.shape.numbers, self.clock) if n.index is not None]
        if setup is not None and setup in self.setups:
            s = self.setups[setup]
            found += [s.scale, s.centre_east, s.centre_north]
        return tuple(found)

    # -------------------------------------------------------------- geometry

    @property
    def frame(self) -> float:
        """Geometric over observed time: 1/(1 + redshift) for dust around the source, 1 for a screen in front."""
        return 1.0 / (1.0 + (self.target.redshift or 0.0)) if self.shape.in_host else 1.0

    @property
    def lasting_days(self) -> float:
        """Equivalent duration of the outburst (fluence over peak), in the time of the geometry."""
        return self.light.equivalent_days * self.frame

    def phase_days(self, setup: str | None = None) -> float:
        """Observed days from the peak to the light that a radius with this setup refers to.

        The polarised ring of filled dust is a place, not a moment: it follows the mean of the light.
        """
        filter_name = self.filters.get(setup, self.light_filter) if setup is not None else self.light_filter
        if isinstance(self.shape, FilledShape):
            return course_of(self.outburst, filter_name).mean
        return phase_days(self.record, self.outburst, filter_name)

    def delay_days(self, theta: Floats, mjd: Floats, setup: str | None = None) -> Floats:
        """Geometric delay of the light that a radius refers to, (..., T)."""
        start = mjd_of_date(self.outburst.peak.date) + self.phase_days(setup)
        return (mjd - start - self.clock.value(theta)) * self.frame

    def circle(self, theta: Floats, mjd: Floats, setup: str | None = None) -> tuple[Floats, Floats, Floats]:
        """Radius and centre (east, north) in arcsec, each (..., T); nan where there is no ring."""
        return self.shape.circle(theta, self.delay_days(theta, mjd, setup))

    def observe(self, theta: Floats, mjd: Floats, setup: str | None = None) -> Floats:
        """Sector radii in arcsec as a setup records them, (..., T, S); nan where there is no ring there.

        With a setup, its scale error and centre offset are applied; without one the sky itself is returned.
        """
        value = self._sectors(self.circle(theta, mjd, setup))
        if setup is not None and setup in self.setups:
            s = self.setups[setup]
            pa = np.radians(self.pa_deg)
            shift = theta[..., s.centre_east, None] * np.sin(pa) + theta[..., s.centre_north, None] * np.cos(pa)
            value = value * (1.0 + theta[..., s.scale, None, None]) + shift[..., None, :]
        return value

    def _sectors(self, circle: tuple[Floats, Floats, Floats]) -> Floats:
        radius, east, north = circle
        return echo.radius_at_pa_arcsec((radius[..., None], east[..., None], north[..., None]), self.pa_deg)

    # -------------------------------------------------------------- light

    @once
    def state(self, theta: Floats, mjd: Floats) -> RingState:
        """Radius, width and brightness in each draw and night."""
        delay, radius, sectors, width = self._lit(theta, mjd)
        seen = np.isfinite(sectors)
        count = seen.sum(axis=-1)
        mean = np.where(count > 0, np.where(seen, sectors, 0.0).sum(axis=-1) / np.maximum(count, 1), np.nan)
        exists = np.isfinite(radius) & (2 * count >= len(self.pa_deg))
        return RingState(exists, radius, mean, width, self._mag(theta, delay))

    @once
    def _lit(self, theta: Floats, mjd: Floats) -> tuple[Floats, Floats, Floats, Floats]:
        """Delay, radius of the circle, sector radii (..., T, S) and FWHM, without a setup."""
        delay = self.delay_days(theta, mjd)
        circle = self.shape.circle(theta, delay)
        sectors = self._sectors(circle)
        width = self.shape.width(theta, delay, sectors, self.pa_deg, self.lasting_days)
        return delay, circle[0], sectors, width

    @once
    def growth_arcsec_day(self, theta: Floats, mjd: Floats) -> Floats:
        """Growth of the circle's radius per observed day, (..., T); negative while it shrinks."""
        step = 0.5  # days: a ring's radius bends over years, or over the delay itself when it is young
        return np.asarray(self.circle(theta, mjd + step)[0] - self.circle(theta, mjd - step)[0]) / (2 * step)

    @once
    def width_then(self, theta: Floats, mjd: Floats) -> Floats:
        """FWHM at other moments, (..., T)."""
        return self._lit(theta, mjd)[3]

    def whole_mag(self, state: RingState) -> Floats:
        """Magnitude of all the light of the ring (of the arc that shines), (..., T), from its ridge and width."""
        area = GAUSSIAN_AREA * np.radians(self.span_deg) * state.mean_radius_arcsec * state.width_arcsec
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.asarray(state.mag_arcsec2 - 2.5 * np.log10(area))

    def _dust_mag(self, theta: Floats, delay: Floats, filter_name: str) -> Floats:
        albedo, g = grains_of(self.record, filter_name)
        extinction = self.extinction.value(theta) if self.extinction is not None else np.asarray(0.1)
        peak = peak_mag(self.outburst, filter_name)
        assert peak is not None
        seen = self.shape.scatter(theta, delay)
        return surface_mag(self.shape, seen, peak, self.lasting_days, extinction, albedo, g)

    def _mag(self, theta: Floats, delay: Floats) -> Floats:
        """Surface brightness in the anchor's filter: anchored on what was seen, changed as the dust model says."""
        seen = self.record.brightness.seen
        offset = self.brightness.value(theta)
        now = self._dust_mag(theta, delay, self.light_filter)
        if seen is None:
            return now + offset
        then_delay = self.delay_days(theta, np.array([mjd_of_date(seen.on) + 0.5]))
        return seen.mag + now - self._dust_mag(theta, then_delay, seen.filter) + offset

    def colour_mag(self, filter_name: str) -> float:
        """What to add to the anchor's magnitude for another filter.

        The colours that were seen come first; else the outburst's own peak colours with the dust's scattering.
        Where the other filter has no peak magnitude either, the colour is taken as 0, which the warnings say.
        """
        home = self.light_filter
        if filter_name == home:
            return 0.0
        seen = self.record.brightness.seen
        known = seen_colour(seen.colours, home, filter_name) if seen else None
        if known is not None:
            return known
        here, there = peak_mag(self.outburst, home), peak_mag(self.outburst, filter_name)
        colour = there - here if here is not None and there is not None else 0.0
        albedo, _ = grains_of(self.record, filter_name)
        albedo_home, _ = grains_of(self.record, home)
        return float(colour - 2.5 * np.log10(albedo / albedo_home))

    def knows_colour(self, filter_name: str) -> bool:
        """True when the brightness in a filter follows from something that was written."""
        seen = self.record.brightness.seen
        if filter_name == self.light_filter or (
            seen and seen_colour(seen.colours, self.light_filter, filter_name) is not None
        ):
            return True
        return peak_mag(self.outburst, filter_name) is not None


def seen_colour(colours: Mapping[str, float], home: str, other: str) -> float | None:
    """Magnitude in ``other`` minus that in ``home`` from colours such as {V-R: 0.3}, by way of others if need be."""
    from planner.campaign.echoes import colour_filters

    known = {home: 0.0}
    for _ in colours:  # each round reaches at least one filter further
        for key, value in colours.items():
            a, b = colour_filters(key)
            if a in known:
                known.setdefault(b, known[a] - value)
            elif b in known:
                known[a] = known[b] + value
    return known.get(other)


# ------------------------------------------------------------------ building


def build_ring(
    record: Ring,
    target: Target,
    layout: Layout,
    *,
    distance: Number | None,
    clock: Number,
    setups: Mapping[str, SetupNuisance],
    middle_mjd: float,
    filters: Mapping[str, str] | None = None,
) -> RingModel:
    """Add a ring's coordinates to a target's layout and return its model."""
    assert target.outburst is not None
    light = record.brightness
    frame = 1.0 if isinstance(record.dust, ScreenDust) else 1.0 / (1.0 + (target.redshift or 0.0))
    reference = max(1.0, (middle_mjd - mjd_of_date(target.outburst.peak.date)) * frame)
    shape = _shape(record, target, layout, distance, reference)
    sigma = light.seen.sigma if light.seen else NO_ANCHOR_MAG
    offset = layout.add(
        standard(f"{record.name}/brightness offset", "mag", sigma, why="as seen" if light.seen else "absolute scale")
    )
    extinction = None
    if light.extinction_mag is not None:
        extinction = layout.add_law(f"{record.name}/extinction_mag", "mag", light.extinction_mag)
    elif light.extinction_mag_pc is not None:
        extinction = layout.add_law(f"{record.name}/extinction_mag_pc", "mag/pc", light.extinction_mag_pc)
    pa_deg, sector = sectors(light.seen.pa_deg if light.seen else None)
    filter_name = anchor_filter(record, target.outburst)
    home = np.concatenate([block.moments()[0] for block in layout.blocks])[None, :]
    return RingModel(
        record=record, target=target, shape=shape, clock=clock, brightness=Number(offset[0], False, 0.0),
        extinction=extinction, pa_deg=pa_deg, sector_deg=sector, span_deg=sector * len(pa_deg),
        light=course_of(target.outburst, filter_name), light_filter=filter_name, setups=setups, home=home,
        filters=dict(filters or {}),
    )  # fmt: skip


def _shape(record: Ring, target: Target, layout: Layout, distance: Number | None, reference: float) -> Shape:
    dust, name = record.dust, record.name

    def unit(what: str, why: str) -> Number:
        return Number(layout.add(standard(f"{name}/{what}", "", 1.0, why=why))[0], False, 0.0)

    if isinstance(dust, ScreenDust):
        source = None if source_at_infinity(record, target) else distance
        where = layout.add_law(f"{name}/dust_distance_pc", "pc", dust.distance_pc)
        drift = unit("distance drift", f"{dust.drift:g} per e-fold of delay")
        return ScreenShape(dust, source, where, drift, reference)
    assert distance is not None
    if isinstance(dust, SheetDust):
        tilt = dust.tilt
        slopes = [
            layout.add(standard(f"{name}/slope_{axis}", "", tilt.slope_sigma, mean=mean, why="sheet tilt as two slopes",
                                nuisance=False))[0]
            for axis, mean in (("east", tilt.slope_east), ("north", tilt.slope_north))
        ]  # fmt: skip
        east, north = (Number(index, False, 0.0) for index in slopes)
        depth = layout.add_law(f"{name}/depth_pc", "pc", dust.depth_pc)
        drift = unit("depth drift", f"{dust.drift:g} per e-fold of delay")
        return SheetShape(dust, distance, depth, east, north, drift, reference)
    if isinstance(dust, FilledDust):
        peak = unit("polarisation peak", f"{dust.peak_sigma_deg:g} deg about 90")
        return FilledShape(dust, distance, peak)
    radius = layout.add_law(f"{name}/shell_radius_pc", "pc", dust.radius_pc)
    return ShellShape(dust, distance, radius, unit("radius drift", f"{dust.drift:g} per e-fold of delay"), reference)


def sectors(pa_range_deg: tuple[float, float] | None) -> tuple[Floats, float]:
    """Middles (S,) and size of the sectors that shine: all round, or an arc from one position angle to another."""
    low, high = (0.0, 360.0) if pa_range_deg is None else pa_range_deg
    span = (high - low) % 360.0 or 360.0
    count = max(1, round(span / SECTOR_DEG))
    size = float(span / count)
    return np.asarray((low + size * (np.arange(count) + 0.5)) % 360.0, dtype=np.float64), size
