"""Rings through a camera: how bright and wide they come out, minutes of a look, errors of the sector radii.

Shapes: B draws, T moments, S sectors.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from planner.campaign.records import CameraSetup, Site
from planner.instruments import camera
from planner.prediction.model import TargetModel
from planner.prediction.rings import RingModel, RingState
from planner.records import Bools, Floats
from planner.units import FWHM_PER_SIGMA

TEXTURE = 0.05  # a ring's ridge follows the dust's own texture: share of its width, per sector; our choice
FAINT_SHARE = 0.84  # minutes are set by this quantile of the draws (design: stated quantile)
CAP_SHARE = 0.8  # where the subtraction floor caps the S/N, ask for this share of the cap and no more


@dataclass(frozen=True)
class CameraSky:
    """Conditions of camera looks, (T,) each; ``extinction_mag`` per airmass."""

    fwhm_arcsec: Floats
    airmass: Floats
    sky_mag_arcsec2: Floats
    extinction_mag: float


def fwhm_arcsec(site: Site, airmass: Floats) -> Floats:
    """Median image FWHM at each airmass, (T,)."""
    return camera.image_fwhm_arcsec(site.months.seeing_arcsec.median, airmass)


def source_mag(model: TargetModel, filter_name: str) -> float:
    """Present magnitude of the source: in the filter, else its brightest known one, else none (no glare)."""
    known = model.target.source_now_mag
    if filter_name in known:
        return known[filter_name]
    return min(known.values()) if known else np.inf


@dataclass(frozen=True)
class RingView:
    """A ring through a camera, (B, T) each."""

    state: RingState
    width_arcsec: Floats  # image blur included
    mag_arcsec2: Floats  # in the setup's filter, diluted by the blur
    area_arcsec2: Floats  # of all sectors


def ring_view(ring: RingModel, theta: Floats, mjd: Floats, setup: CameraSetup, sky: CameraSky) -> RingView:
    """Blur a ring with the image and express it in the setup's filter."""
    state = ring.state(theta, mjd)
    width = np.hypot(state.width_arcsec, sky.fwhm_arcsec)
    dilution = 2.5 * np.log10(width / np.maximum(state.width_arcsec, 1e-9))
    seen = ring.record.brightness.seen
    if seen is not None:  # the anchor was itself seen through a seeing disc: only the change counts
        then = np.hypot(state.width_arcsec, seen.seeing_arcsec)
        dilution = dilution - 2.5 * np.log10(then / np.maximum(state.width_arcsec, 1e-9))
    mag = state.mag_arcsec2 + ring.colour_mag(setup.filter) + dilution
    area = np.radians(ring.span_deg) * state.mean_radius_arcsec * width
    return RingView(state, width, mag, area)


def camera_seconds(model: TargetModel, theta: Floats, mjd: Floats, setup: CameraSetup, sky: CameraSky) -> Floats:
    """Shutter-open seconds of a look at each moment, (T,).

    Each ring that exists asks for the setup's S/N at the faint quantile of the draws (or for a share of the cap that
    the subtraction floor sets); the longest request counts, within the setup's shortest and longest look.
    """
    shortest, longest = setup.shortest_look_min * 60.0, setup.longest_look_min * 60.0
    need = np.full(len(mjd), shortest)
    for ring in model.features:
        if not isinstance(ring, RingModel):
            continue
        view = ring_view(ring, theta, mjd, setup, sky)
        light = (setup, setup.filter, view.mag_arcsec2, view.area_arcsec2, sky.sky_mag_arcsec2, sky.airmass)
        cap = camera.ring_snr(*light, sky.extinction_mag, 1e9)
        goal = np.minimum(setup.snr_wanted, CAP_SHARE * cap)
        seconds = camera.ring_seconds(*light, sky.extinction_mag, goal)
        seconds = np.where(view.state.exists & np.isfinite(seconds), seconds, np.nan)
        any_there = np.isfinite(seconds).any(axis=0)
        filled = np.where(any_there, seconds, shortest)
        quantile = np.nanquantile(np.where(any_there, filled, shortest), FAINT_SHARE, axis=0)
        need = np.maximum(need, np.minimum(quantile, longest))
    return np.clip(need, shortest, longest)


def ring_errors(
    model: TargetModel, ring: RingModel, theta: Floats, mjd: Floats, setup: CameraSetup, sky: CameraSky, seconds: Floats
) -> tuple[Floats, Bools, Floats, dict[str, Bools]]:
    """Errors (B, T, S) of the sector radii, measurable (B, T), summed S/N (B, T), and what stops a measurement.

    Errors are inf where nothing is measured; each draw and moment has at most one reason, the first that applies.
    """
    view = ring_view(ring, theta, mjd, setup, sky)
    state, sectors = view.state, len(ring.pa_deg)
    light = (setup, setup.filter, view.mag_arcsec2)
    rest = (sky.sky_mag_arcsec2, sky.airmass, sky.extinction_mag, seconds)
    with np.errstate(invalid="ignore"):
        snr = np.where(state.exists, np.nan_to_num(camera.ring_snr(*light, view.area_arcsec2, *rest)), 0.0)
        snr_sector = np.nan_to_num(camera.ring_snr(*light, view.area_arcsec2 / sectors, *rest))
        glare = camera.glare_radius_arcsec(setup, source_mag(model, setup.filter), view.mag_arcsec2, sky.fwhm_arcsec)
        masks = {
            "it has not appeared": ~state.exists,
            "inside the glare of the source": state.mean_radius_arcsec - view.width_arcsec / 2 < glare,
            "larger than the field": 2 * state.mean_radius_arcsec + view.width_arcsec > setup.field_arcmin * 60.0,
            "too faint": snr < setup.snr_detect,
        }
    stopped = np.zeros(state.exists.shape, bool)
    reasons = {}
    for reason, mask in masks.items():  # in this order: the first one that stops it is the reason
        reasons[reason] = mask & ~stopped
        stopped = stopped | mask
    each = view.width_arcsec * np.hypot(1.0 / (FWHM_PER_SIGMA * np.maximum(snr_sector, 1e-9)), TEXTURE)
    there = np.isfinite(ring.observe(theta, mjd))
    sigma = np.where(there & ~stopped[..., None], each[..., None], np.inf)
    return sigma, ~stopped, snr, reasons
