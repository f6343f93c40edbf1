"""Where the sum of widths in quadrature is not good enough, the profile itself: width and peak of the blurred ring.

Criterion: the ring is on a sheet, and either the light curve is no plain hump (its span above half the peak differs
from fluence over peak by more than a quarter), or the ring is more than half as wide as its radius. Then the ratio
of the profile's width and peak to those of the quadrature is worked out at the prior's mean on fixed dates and laid
over all draws. Toward tilted sides the quadrature's own local widths stay.
"""

from __future__ import annotations

import numpy as np

from planner.physics.echo_profile import profile_width_arcsec, radial_profile
from planner.prediction.ring_shapes import SheetShape
from planner.prediction.rings import RingModel
from planner.records import Floats
from planner.units import C_PC_PER_DAY

HUMP = 0.25  # relative difference of the light curve's two widths; our choice (tests: below it a few per cent)
WIDE = 0.5  # width over radius; our choice
STEP_DAYS = 30.0  # profiles are worked out on dates this far apart, the same for every caller
STEP_FWHM = 1.5  # and for image widths this factor apart; between them the factors are interpolated
POINTS = 1501  # radii of one profile: at least 12 across the narrowest ring that matters


def breaks_quadrature(ring: RingModel, mjd: float) -> str:
    """Say why the widths of a ring may not be added in quadrature at a moment; "" when they may."""
    if not isinstance(ring.shape, SheetShape):
        return ""
    if _many_humps(ring):
        return "the light curve is no plain hump"
    wide = float(_width_over_radius(ring, np.array([mjd]))[0])
    return f"the ring is {wide:.1f} times as wide as its radius" if wide > WIDE else ""


def _many_humps(ring: RingModel) -> bool:
    return abs(ring.light.half_days / ring.light.equivalent_days - 1.0) > HUMP


def _width_over_radius(ring: RingModel, mjd: Floats) -> Floats:
    """At the prior's mean, (T,); 0 where there is no ring."""
    state = ring.state(ring.home, mjd)
    with np.errstate(invalid="ignore", divide="ignore"):
        share = state.width_arcsec[0] / state.mean_radius_arcsec[0]
    return np.where(state.exists[0] & np.isfinite(share), share, 0.0)


def profile_factors(ring: RingModel, mjd: Floats, fwhm_arcsec: Floats) -> tuple[Floats, Floats]:
    """Width over the quadrature's (T,), and magnitudes to add to the blurred ridge (T,); 1 and 0 where it holds."""
    plain = np.ones(len(mjd)), np.zeros(len(mjd))
    if not isinstance(ring.shape, SheetShape) or not len(mjd):
        return plain
    date = mjd / STEP_DAYS
    if not _any_broken(ring, np.unique(np.concatenate([np.floor(date), np.floor(date) + 1.0]))):
        return plain
    blur = np.log(np.broadcast_to(fwhm_arcsec, mjd.shape)) / np.log(STEP_FWHM)
    ln_width, mag = np.zeros(len(mjd)), np.zeros(len(mjd))
    for i in (0, 1):
        for j in (0, 1):
            at, of = np.floor(date) + i, np.floor(blur) + j
            weight = (1.0 - np.abs(date - at)) * (1.0 - np.abs(blur - of))
            pairs = np.array([_node(ring, int(a), int(f)) for a, f in zip(at, of, strict=True)])
            ln_width += weight * pairs[:, 0]
            mag += weight * pairs[:, 1]
    return np.exp(ln_width), mag


def _any_broken(ring: RingModel, dates: Floats) -> bool:
    """True if the quadrature breaks on any of the fixed dates; remembers the answer for each."""
    new = np.array([d for d in dates if int(d) not in ring.broken])
    if len(new):
        flags = np.full(len(new), True) if _many_humps(ring) else _width_over_radius(ring, new * STEP_DAYS) > WIDE
        ring.broken.update({int(d): bool(flag) for d, flag in zip(new, flags, strict=True)})
    return any(ring.broken[int(d)] for d in dates)


def _node(ring: RingModel, date: int, blur: int) -> tuple[float, float]:
    """Logarithm of the width's factor and magnitudes at one node; worked out once a ring."""
    key = (date, blur)
    if key not in ring.memo:
        mjd = date * STEP_DAYS
        found = (0.0, 0.0)
        if ring.broken[date]:
            width, mag = _at(ring, ring.home, np.array([mjd]), STEP_FWHM**blur)
            if np.isfinite(width) and np.isfinite(mag):
                found = (float(np.log(width)), mag)
        ring.memo[key] = found
    return ring.memo[key]


def ring_profile(ring: RingModel, theta: Floats, mjd: float, fwhm_arcsec: float) -> tuple[Floats, Floats]:
    """Radii and brightness (over a thin sheet's at the peak of the light) of one draw (1, P) without its tilt.

    Empty arrays where there is no ring.
    """
    shape = ring.shape
    assert isinstance(shape, SheetShape)
    delay = ring.delay_days(theta, np.array([mjd]))
    edges = np.concatenate([[0.0], ring.light.days[[0, -1]] - ring.phase_days()]) * ring.frame
    radii = shape.circle(theta, delay - edges)[0][0]
    if not np.isfinite(radii[0]):
        return np.zeros(0), np.zeros(0)
    margin = 3.0 * float(np.hypot(fwhm_arcsec, np.nan_to_num(ring.width_then(theta, np.array([mjd]))[0, 0])))
    high = float(np.nanmax(radii)) + margin
    low = max(0.0, (float(radii[2]) if np.isfinite(radii[2]) else 0.0) - margin)
    grid = np.linspace(low, high, POINTS)
    depth = float(shape.depth_pc(theta, delay)[0, 0])
    distance = float(shape.distance.value(theta)[0, 0])
    since_peak = float(delay[0, 0]) + ring.phase_days() * ring.frame
    light = ring.light.stretched(ring.frame)
    profile = radial_profile(
        grid, since_peak, depth, distance, light, thickness_pc=shape.record.thickness_pc,
        image_fwhm_arcsec=fwhm_arcsec,
    )  # fmt: skip
    return grid, profile


def _at(ring: RingModel, theta: Floats, mjd: Floats, fwhm: float) -> tuple[float, float]:
    grid, profile = ring_profile(ring, theta, float(mjd[0]), fwhm)
    if not len(grid):
        return np.nan, np.nan
    shape = ring.shape
    assert isinstance(shape, SheetShape)
    plain = float(ring.width_then(theta, mjd)[0, 0])
    blurred = float(np.hypot(plain, fwhm))
    delay = float(ring.delay_days(theta, mjd)[0, 0])
    depth = float(shape.depth_pc(theta, np.array([[delay]]))[0, 0])
    lit = (depth + C_PC_PER_DAY * delay) * ring.lasting_days / delay
    peak = lit / np.hypot(lit, shape.record.thickness_pc) * plain / blurred
    width = profile_width_arcsec(grid, profile)
    return width / blurred, float(-2.5 * np.log10(profile.max() / peak)) if profile.max() > 0 else np.nan
