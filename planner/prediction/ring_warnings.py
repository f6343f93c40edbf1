"""Assumptions of the echo models that fail in the median draw at mid-season, each with its number."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from planner.campaign.records import SetupRef, Site
from planner.prediction.arclets import ArcletModel
from planner.prediction.conditions import fwhm_arcsec
from planner.prediction.look_rings import apart_days
from planner.prediction.ring_profiles import breaks_quadrature
from planner.prediction.ring_shapes import FilledShape, ScreenShape, SheetShape, ShellShape
from planner.prediction.rings import RingModel
from planner.records import Floats

PARABOLOID_LIMIT = 0.02  # depth/distance above which the paraboloid's radius is off by 1 % (z / 2D)
NEAR_SOURCE = 0.9  # share of the way to the source beyond which a screen's small widths stand for a sheet's
LIMB = 0.2  # |cosine| of the scattering angle on a shell under which its ring is no thin circle any more
FILLED_SHARE = 0.1  # outburst over delay above which the ring of highest polarisation is smeared by its length
WIDE_FIELD_ARCSEC = 1800.0  # an arclet farther than this from its source has windows of its own; our choice


def ring_warnings(ring: RingModel, theta: Floats, middle: Floats, setups: Sequence[SetupRef]) -> list[str]:
    """Warnings of one ring; ``middle`` (1,): MJD of mid-season."""
    delay = ring.delay_days(theta, middle)
    own = _of_shape(ring, theta, delay, setups)
    if not isinstance(ring.shape, FilledShape):
        own += _of_width(ring, theta, middle, setups)
    cameras = [s.camera for s in setups if s.camera is not None]
    loose = sorted({c.filter for c in cameras if not ring.knows_colour(c.filter)})
    late = abs(ring.light.ridge)
    if ring.outburst.curve is not None and late > max(3.0 * ring.outburst.peak.sigma_days, 0.5):
        own.append(
            f"the light curve is brightest {ring.light.ridge:+.1f} d from the stated peak, more than its width of "
            f"{ring.outburst.peak.sigma_days:g} d allows: delays count from the stated date"
        )
    if loose:
        own.append(
            f"no colour is known for {', '.join(loose)}: the ring is taken to be as bright there as in "
            f"{ring.light_filter}; add peak_mag, or colours to what was seen"
        )
    return [f"{ring.name}: {text}" for text in own]


def _of_shape(ring: RingModel, theta: Floats, delay: Floats, setups: Sequence[SetupRef]) -> list[str]:
    shape = ring.shape
    if isinstance(shape, SheetShape):
        share = _median(np.abs(shape.depth_pc(theta, delay)) / shape.distance.value(theta))
        if share > PARABOLOID_LIMIT:
            return [
                f"depth is {100 * share:.1f} % of the distance; the paraboloid's radius is {50 * share:.1f} % small "
                "there: use dust of shape screen"
            ]
    elif isinstance(shape, ShellShape):
        cosine = _median(np.abs(np.cos(np.radians(shape.scatter(theta, delay).angle_deg))))
        thick = _median(shape.record.thickness_pc / shape.radius_pc(theta, delay))
        if cosine < LIMB:
            return [
                f"the light meets the shell at its limb (scattering by {np.degrees(np.arccos(cosine)):.0f} deg or its "
                f"mirror, path {_median(shape.scatter(theta, delay).slant):.1f} times the thickness): the ring hardly "
                "moves and its width is that of the shell"
            ]
        if thick > 0.3:
            return [f"the shell is {thick:.2f} of its radius thick: its ring is a disc with a rim, no thin circle"]
    elif isinstance(shape, ScreenShape) and shape.distance is not None:
        share = _median(shape.dust_distance_pc(theta, delay) / shape.distance.value(theta))
        if share > NEAR_SOURCE:
            return [
                f"the screen is {100 * share:.0f} % of the way to the source: its radius is exact, but a cloud so near "
                "is better given as a sheet, which may be tilted"
            ]
    elif isinstance(shape, FilledShape):
        return _of_filled(ring, delay, setups)
    return []


def _of_filled(ring: RingModel, delay: Floats, setups: Sequence[SetupRef]) -> list[str]:
    found = []
    if not any(s.camera is not None and s.camera.polarimeter for s in setups):
        found.append("no setup has a polarimeter: true, so nothing measures its ring of highest polarisation")
    smear = _median(ring.lasting_days / np.where(delay > 0, delay, np.nan))
    if smear > FILLED_SHARE:
        found.append(
            f"the outburst lasted {100 * smear:.0f} % of the delay: the ring of highest polarisation is smeared by that"
        )
    return found


def _of_width(ring: RingModel, theta: Floats, middle: Floats, setups: Sequence[SetupRef]) -> list[str]:
    found = []
    state = ring.state(theta, middle)
    sites = [s.site for s in setups if isinstance(s.site, Site)]
    blur = [float(fwhm_arcsec(site, np.ones(1))[0]) for site in sites]
    blur += [s.camera.image_fwhm_arcsec for s in setups if s.camera is not None and s.camera.image_fwhm_arcsec]
    width = _median(state.width_arcsec)
    if blur and width < min(blur):
        found.append(
            f"the ring is {width:.2f} arcsec wide, less than the best median image of {min(blur):.2f} arcsec: "
            "not resolved in width, its surface brightness is diluted"
        )
    why = breaks_quadrature(ring, float(middle[0]))
    if why:
        found.append(f"{why}: its width and peak come from the whole profile instead of widths in quadrature")
    seen = ring.shape.scatter(theta, ring.delay_days(theta, middle))
    assert ring.shape.record.thickness_pc is not None
    thick = _median(ring.shape.record.thickness_pc * seen.slant / (seen.lit_pc * ring.lasting_days))
    if thick > 1:
        found.append(
            f"the {ring.shape.kind} is {thick:.1f} times thicker than the layer lit at one moment: its surface "
            "brightness is that of thick dust, and follows the stated thickness"
        )
    if blur:
        found += _of_template(ring, theta, middle, min(blur), setups)
    return found


def _of_template(ring: RingModel, theta: Floats, middle: Floats, blur: float, setups: Sequence[SetupRef]) -> list[str]:
    different = [s for s in setups if s.camera is not None and s.camera.difference_imaging]
    apart = _median(apart_days(ring, theta, middle, np.array([blur])))
    gap = ring.target.spacing.at_least_days
    if ring.record.direct or not different or not apart > gap:
        return []
    if ring.record.templates or ring.target.templates:
        return []
    when = f"{apart:.0f} d" if np.isfinite(apart) else "no time at all while it stands still"
    return [
        f"two looks come apart in a difference image only after {when}, longer than the {gap:g} d allowed between "
        "looks: each needs an older template (one of equal depth is assumed; list templates, or say direct: true)"
    ]


def arclet_warnings(arclet: ArcletModel, theta: Floats, middle: Floats, setups: Sequence[SetupRef]) -> list[str]:
    """Warnings of one arclet."""
    found = []
    radius = arclet.record.position.radius_arcsec.median()
    if radius > WIDE_FIELD_ARCSEC:
        found.append(
            f"it lies {radius / 3600.0:.2f} deg from its supposed source, for whose position the windows are reckoned"
        )
    rho, ct, slope = arclet.surface(theta)
    tangent = float(np.mean(np.abs(rho - slope * ct) < 0.3 * rho))
    if tangent > 0.05:
        found.append(
            f"in {100 * tangent:.0f} % of draws its dust lies nearly along the light surface, where it moves without "
            "limit: narrow the slope's law"
        )
    home = arclet.record.seen.filter
    wrong = sorted({s.camera.filter for s in setups if s.camera is not None and s.camera.filter != home})
    if wrong:
        found.append(f"no colour is known for {', '.join(wrong)}: it is taken to be as bright there as in {home}")
    return [f"{arclet.name}: {text}" for text in found]


def _median(values: Floats) -> float:
    """Median over the draws that have a value; nan if none has."""
    some = values[np.isfinite(values) | np.isinf(values)]
    return float(np.median(some)) if some.size else float("nan")
