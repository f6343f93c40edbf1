"""Rings through a camera: how bright and wide they come out, minutes of a look, errors of the sector radii.

Shapes: B draws, T moments, S sectors.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from planner.campaign.records import CameraSetup
from planner.instruments import camera
from planner.prediction.arclets import ArcletModel
from planner.prediction.conditions import CameraSky
from planner.prediction.model import TargetModel
from planner.prediction.ring_profiles import profile_factors
from planner.prediction.ring_shapes import FilledShape
from planner.prediction.rings import RingModel, RingState
from planner.prediction.templates import SELF_DIFFERENCE, Subtraction, separation_days, subtraction
from planner.records import Bools, Floats
from planner.units import FWHM_PER_SIGMA, mjd_of_date

TEXTURE = 0.05  # a ring's ridge follows the dust's own texture: share of its width, per sector; our choice
FAINT_SHARE = 0.84  # minutes are set by this quantile of the draws (design: stated quantile)
CAP_SHARE = 0.8  # where the subtraction floor caps the S/N, ask for this share of the cap and no more


def crowding_of(model: TargetModel, setup: CameraSetup) -> float:
    """Factor on the background's variance: the target's field times what the setup makes of any field."""
    return model.target.crowding * setup.crowding


def source_mag(model: TargetModel, filter_name: str) -> float:
    """Present magnitude of the source: in the filter, else its brightest known one, else none (no glare)."""
    known = model.target.source_now_mag
    if filter_name in known:
        return known[filter_name]
    return min(known.values()) if known else np.inf


@dataclass(frozen=True)
class EchoView:
    """A ring or an arclet through a camera, (B, T) each."""

    exists: Bools
    radius_arcsec: Floats  # from the source
    width_arcsec: Floats  # image blur included
    size_arcsec: Floats  # side of the field that holds it
    mag_arcsec2: Floats  # in the setup's filter, diluted by the blur
    area_arcsec2: Floats  # of all that shines


def ring_view(
    ring: RingModel, theta: Floats, mjd: Floats, setup: CameraSetup, sky: CameraSky, state: RingState | None = None
) -> EchoView:
    """Blur a ring with the image and express it in the setup's filter."""
    state = ring.state(theta, mjd) if state is None else state
    broad, fainter = profile_factors(ring, mjd, sky.typical_fwhm_arcsec)
    width = np.hypot(state.width_arcsec, sky.fwhm_arcsec) * broad
    mag = state.mag_arcsec2 + ring.colour_mag(setup.filter)
    if not isinstance(ring.shape, FilledShape):  # the polarised bump is far wider than any image
        mag = mag + _dilution(state.width_arcsec, np.asarray(sky.fwhm_arcsec)) + fainter
        seen = ring.record.brightness.seen
        if seen is not None:  # the anchor was itself seen through a seeing disc: only the change counts
            on = np.array([mjd_of_date(seen.on) + 0.5])
            seeing = np.array([seen.seeing_arcsec])
            _, then = profile_factors(ring, on, seeing)
            mag = mag - _dilution(ring.width_then(theta, on), seeing) - then
    area = np.radians(ring.span_deg) * state.mean_radius_arcsec * width
    return EchoView(
        state.exists, state.mean_radius_arcsec, width, 2 * state.mean_radius_arcsec + width, mag, area
    )  # fmt: skip


def _dilution(width_arcsec: Floats, fwhm_arcsec: Floats) -> Floats:
    """Magnitudes by which an image fades the ridge of a ring of this width; 0 where there is no ring."""
    width = np.maximum(width_arcsec, 1e-9)
    return np.asarray(np.nan_to_num(2.5 * np.log10(np.hypot(width, fwhm_arcsec) / width)))


def arclet_view(arclet: ArcletModel, theta: Floats, mjd: Floats, setup: CameraSetup, sky: CameraSky) -> EchoView:
    """Blur an arclet with the image; its colour is not known, so the setup's filter shows it as bright as any."""
    record = arclet.record
    radius = arclet.radius_arcsec(theta, mjd)
    exists = np.isfinite(radius)
    width = np.broadcast_to(np.hypot(record.width_arcsec, sky.fwhm_arcsec), radius.shape)
    length = np.hypot(record.length_arcsec, sky.fwhm_arcsec)
    mag = record.seen.mag_arcsec2 + arclet.brightness.value(theta) + 2.5 * np.log10(width / record.width_arcsec)
    area = np.broadcast_to(width * length, radius.shape)
    return EchoView(exists, radius, width, np.broadcast_to(length, radius.shape), mag, area)


def echo_view(
    feature: RingModel | ArcletModel, theta: Floats, mjd: Floats, setup: CameraSetup, sky: CameraSky
) -> EchoView:
    """A ring or an arclet through a camera."""
    if isinstance(feature, ArcletModel):
        return arclet_view(feature, theta, mjd, setup, sky)
    return ring_view(feature, theta, mjd, setup, sky)


def apart_days(feature: RingModel | ArcletModel, theta: Floats, mjd: Floats, fwhm: Floats) -> Floats:
    """Days until the echo leaves its own image in a difference, observed days, (B, T)."""
    if isinstance(feature, ArcletModel):
        width = np.full((len(theta), len(mjd)), feature.record.width_arcsec)
        return separation_days(0.0, 0.0, width, fwhm, feature.motion_arcsec_day(theta, mjd))
    light, width = feature.light, feature.width_then(theta, mjd)
    growth = feature.growth_arcsec_day(theta, mjd)
    return separation_days(light.end - light.begin, light.equivalent_days, width, fwhm, growth)


def subtraction_of(
    model: TargetModel, feature: RingModel | ArcletModel, theta: Floats, mjd: Floats, setup: CameraSetup,
    sky: CameraSky, name: str,
) -> Subtraction:  # fmt: skip
    """How a look with the setup called ``name`` subtracts its background."""
    shape = (len(theta), len(mjd))
    if isinstance(feature, RingModel) and isinstance(feature.shape, FilledShape):
        return Subtraction(SELF_DIFFERENCE, np.asarray(np.inf), np.zeros(shape, dtype=bool))
    apart = np.zeros(shape)
    if feature.record.templates or model.target.templates:
        apart = apart_days(feature, theta, mjd, sky.fwhm_arcsec)
    return subtraction(feature.record, model.target, name, setup, mjd, apart)


def measures(feature: RingModel | ArcletModel, setup: CameraSetup) -> bool:
    """False for polarised light with a setup that has no polarimeter."""
    return setup.polarimeter or not (isinstance(feature, RingModel) and isinstance(feature.shape, FilledShape))


def camera_seconds(
    model: TargetModel, theta: Floats, mjd: Floats, setup: CameraSetup, sky: CameraSky, name: str = ""
) -> Floats:
    """Shutter-open seconds of a look at each moment, (T,).

    Each echo that exists asks for the setup's S/N at the faint quantile of the draws (or for a share of the cap that
    the subtraction floor or the template sets); the longest request counts, within the setup's shortest and longest
    look. ``name``: of the setup, to find its templates.
    """
    also = sky.light | {"crowding": crowding_of(model, setup)}
    shortest, longest = setup.shortest_look_min * 60.0, setup.longest_look_min * 60.0
    need = np.full(len(mjd), shortest)
    for feature in model.features:
        if not isinstance(feature, RingModel | ArcletModel) or not measures(feature, setup):
            continue
        view = echo_view(feature, theta, mjd, setup, sky)
        noise = subtraction_of(model, feature, theta, mjd, setup, sky, name).noise | also
        light = (setup, setup.filter, view.mag_arcsec2, view.area_arcsec2, sky.sky_mag_arcsec2, sky.airmass)
        cap = camera.ring_snr(*light, sky.extinction_mag, 1e9, **noise)
        goal = np.minimum(setup.snr_wanted, CAP_SHARE * cap)
        seconds = camera.ring_seconds(*light, sky.extinction_mag, goal, **noise)
        seconds = np.where(view.exists & np.isfinite(seconds), seconds, np.nan)
        any_there = np.isfinite(seconds).any(axis=0)
        filled = np.where(any_there, seconds, shortest)
        quantile = np.nanquantile(np.where(any_there, filled, shortest), FAINT_SHARE, axis=0)
        need = np.maximum(need, np.minimum(quantile, longest))
    return np.clip(need, shortest, longest)


Errors = tuple[Floats, Bools, Floats, dict[str, Bools]]


def ring_errors(
    model: TargetModel, ring: RingModel, theta: Floats, mjd: Floats, setup: CameraSetup, sky: CameraSky,
    seconds: Floats, name: str = "", *, with_sigma: bool = True,
) -> Errors:  # fmt: skip
    """Errors (B, T, S) of the sector radii, measurable (B, T), summed S/N (B, T), and what stops a measurement.

    Errors are inf where nothing is measured; each draw and moment has at most one reason, the first that applies.
    """
    view = ring_view(ring, theta, mjd, setup, sky)
    pieces = len(ring.pa_deg) if with_sigma else 1
    snr, each_snr, stopped, reasons = _stops(model, ring, view, theta, mjd, setup, sky, seconds, name, pieces)
    if not with_sigma:
        return np.zeros((*snr.shape, 0)), ~stopped, snr, reasons
    each = view.width_arcsec * np.hypot(1.0 / (FWHM_PER_SIGMA * np.maximum(each_snr, 1e-9)), TEXTURE)
    there = np.isfinite(ring.observe(theta, mjd))
    sigma = np.where(there & ~stopped[..., None], each[..., None], np.inf)
    return sigma, ~stopped, snr, reasons


def arclet_errors(
    model: TargetModel, arclet: ArcletModel, theta: Floats, mjd: Floats, setup: CameraSetup, sky: CameraSky,
    seconds: Floats, name: str = "",
) -> Errors:  # fmt: skip
    """Errors (B, T, 2) along and across the prior's direction of motion; the rest as of ``ring_errors``.

    Across the motion the arclet's length stands for its width.
    """
    view = arclet_view(arclet, theta, mjd, setup, sky)
    snr, _, stopped, reasons = _stops(model, arclet, view, theta, mjd, setup, sky, seconds, name, 1)
    share = np.hypot(1.0 / (FWHM_PER_SIGMA * np.maximum(snr, 1e-9)), TEXTURE)
    sigma = np.stack([view.width_arcsec * share, view.size_arcsec * share], axis=-1)
    return np.where(stopped[..., None], np.inf, sigma), ~stopped, snr, reasons


def _stops(
    model: TargetModel, feature: RingModel | ArcletModel, view: EchoView, theta: Floats, mjd: Floats,
    setup: CameraSetup, sky: CameraSky, seconds: Floats, name: str, pieces: int,
) -> tuple[Floats, Floats, Bools, dict[str, Bools]]:  # fmt: skip
    """S/N in all and per piece, what is stopped (B, T) and why."""
    how = subtraction_of(model, feature, theta, mjd, setup, sky, name)
    noise = how.noise | sky.light | {"crowding": crowding_of(model, setup)}
    light = (setup, setup.filter, view.mag_arcsec2)
    rest = (sky.sky_mag_arcsec2, sky.airmass, sky.extinction_mag, seconds)
    with np.errstate(invalid="ignore"):
        snr = np.nan_to_num(camera.ring_snr(*light, view.area_arcsec2, *rest, **noise))
        each_snr = snr
        if pieces > 1:
            each_snr = np.nan_to_num(camera.ring_snr(*light, view.area_arcsec2 / pieces, *rest, **noise))
        glare = camera.glare_radius_arcsec(setup, source_mag(model, setup.filter), view.mag_arcsec2, sky.fwhm_arcsec)
        snr = np.where(view.exists, snr, 0.0)
        masks = {
            "it has not appeared": ~view.exists,
            "it needs a polarimeter": np.full(snr.shape, not measures(feature, setup)),
            "inside the glare of the source": view.radius_arcsec - view.width_arcsec / 2 < glare,
            "larger than the field": view.size_arcsec > setup.field_arcmin * 60.0,
            "not yet separated from its template": how.overlapped,
            "too faint": snr < setup.snr_detect,
        }
    stopped = np.zeros(snr.shape, bool)
    reasons = {}
    for reason, mask in masks.items():  # in this order: the first one that stops it is the reason
        reasons[reason] = mask & ~stopped
        stopped = stopped | mask
    return snr, each_snr, stopped, reasons
