"""One error model of a look: what is measurable in each draw, how well, and what stands in the way.

The covariance of a look is R' diag(sigma^2) R with a constant rotation R (along the axes of an array's beam; the
identity for ring sectors). Errors are independent from look to look given the parameters: everything shared in time
(plate scale, centring, core wander) is a coordinate of the belief. Shapes: B draws, T moments, F features, M observables.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from planner.campaign.records import CameraSetup, Receiver, SetupRef, Site
from planner.instruments import camera, interferometer
from planner.prediction.knots import SpotState
from planner.prediction.model import TargetModel
from planner.prediction.rings import RingModel, RingState
from planner.records import Bools, Floats, Track
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


@dataclass(frozen=True)
class Block:
    """Why one feature is not measurable: share of the draws and moments that it stops, (B, T)."""

    feature: str
    reason: str
    mask: Bools


@dataclass(frozen=True)
class LookErrors:
    """Error model of looks at a target with one setup."""

    rotation: Floats  # (M, M)
    sigma: Floats  # (B, T, M) along the rotated axes, inf where nothing is measured
    measurable: Bools  # (B, T, F)
    snr: Floats  # (B, T, F), 0 where it does not exist
    blocked: tuple[Block, ...]

    def whiten(self, derivatives: Floats) -> Floats:
        """C^-1/2 J, (B, T, M, P); rows of what is not measured are zero."""
        rows = np.einsum("mn,btnp->btmp", self.rotation, np.nan_to_num(derivatives))
        return rows / self.sigma[..., None]


def fwhm_arcsec(site: Site, airmass: Floats) -> Floats:
    """Median image FWHM at each airmass, (T,)."""
    return camera.image_fwhm_arcsec(site.months.seeing_arcsec.median, airmass)


def _source_mag(model: TargetModel, filter_name: str) -> float:
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


def camera_errors(
    model: TargetModel, theta: Floats, mjd: Floats, setup: CameraSetup, sky: CameraSky, seconds: Floats
) -> LookErrors:
    """Error model of camera looks at every ring in the field; jets are not measured by cameras."""
    sigma, measurable, snr, blocked = [], [], [], []
    for feature in model.features:
        shape = (len(theta), len(mjd))
        if not isinstance(feature, RingModel):
            sigma.append(np.full((*shape, len(feature.observables)), np.inf))
            measurable.append(np.zeros(shape, bool))
            snr.append(np.zeros(shape))
            blocked.append(Block(feature.name, "a camera does not resolve it", np.ones(shape, bool)))
            continue
        one = _ring_errors(model, feature, theta, mjd, setup, sky, seconds)
        sigma.append(one[0])
        measurable.append(one[1])
        snr.append(one[2])
        blocked += one[3]
    total = sum(len(f.observables) for f in model.features)
    return LookErrors(
        np.eye(total), np.concatenate(sigma, axis=-1), np.stack(measurable, -1), np.stack(snr, -1), tuple(blocked)
    )


def _ring_errors(
    model: TargetModel, ring: RingModel, theta: Floats, mjd: Floats, setup: CameraSetup, sky: CameraSky, seconds: Floats
) -> tuple[Floats, Bools, Floats, list[Block]]:
    view = ring_view(ring, theta, mjd, setup, sky)
    state, sectors = view.state, len(ring.pa_deg)
    light = (setup, setup.filter, view.mag_arcsec2)
    rest = (sky.sky_mag_arcsec2, sky.airmass, sky.extinction_mag, seconds)
    with np.errstate(invalid="ignore"):
        snr = np.where(state.exists, np.nan_to_num(camera.ring_snr(*light, view.area_arcsec2, *rest)), 0.0)
        snr_sector = np.nan_to_num(camera.ring_snr(*light, view.area_arcsec2 / sectors, *rest))
        glare = camera.glare_radius_arcsec(setup, _source_mag(model, setup.filter), view.mag_arcsec2, sky.fwhm_arcsec)
        masks = {
            "it has not appeared": ~state.exists,
            "inside the glare of the source": state.mean_radius_arcsec - view.width_arcsec / 2 < glare,
            "larger than the field": 2 * state.mean_radius_arcsec + view.width_arcsec > setup.field_arcmin * 60.0,
            "too faint": snr < setup.snr_detect,
        }
    stopped = np.zeros(state.exists.shape, bool)
    blocks = []
    for reason, mask in masks.items():  # in this order: the first one that stops it is the reason
        blocks.append(Block(ring.name, reason, mask & ~stopped))
        stopped = stopped | mask
    each = view.width_arcsec * np.hypot(1.0 / (FWHM_PER_SIGMA * np.maximum(snr_sector, 1e-9)), TEXTURE)
    there = np.isfinite(ring.observe(theta, mjd))
    sigma = np.where(there & ~stopped[..., None], each[..., None], np.inf)
    return sigma, ~stopped, snr, blocks


def array_errors(model: TargetModel, theta: Floats, mjd: Floats, receiver: Receiver, track: Track) -> LookErrors:
    """Error model of array looks at every knot in the field; rings are not measured by arrays.

    Position errors along the beam's axes (beam / 2 S/N, size, floor), variance raised where the knot blends with
    the core, nothing inside half a beam along the direction of the knot.
    """
    sigma, measurable, snr, blocked, axes = [], [], [], [], []
    noise_mjy = 1e3 * float(
        interferometer.effective_noise_jy(track.noise_jy, receiver.core_mjy / 1e3, receiver.dynamic_range)
    )
    pa = np.radians(track.beam_pa_deg)
    beam_axes = np.array([[np.sin(pa), np.cos(pa)], [np.cos(pa), -np.sin(pa)]])  # major, minor, on (east, north)
    for feature in model.features:
        shape = (len(theta), len(mjd))
        if isinstance(feature, RingModel):
            sigma.append(np.full((*shape, len(feature.observables)), np.inf))
            measurable.append(np.zeros(shape, bool))
            snr.append(np.zeros(shape))
            blocked.append(Block(feature.name, "an array does not see it", np.ones(shape, bool)))
            axes.append(np.eye(len(feature.observables)))
            continue
        spots = feature.spot_states(theta, mjd, receiver.ghz)
        size = feature.record.size_mas
        each = [_spot_errors(spot, size, receiver, track, noise_mjy) for spot in spots]
        sigma.append(np.concatenate([e[0] for e in each], axis=-1))
        measurable.append(each[0][1])
        snr.append(each[0][2])
        blocked += [Block(feature.name, reason, mask) for reason, mask in each[0][3].items()]
        axes += [beam_axes] * len(spots)
    from scipy.linalg import block_diag

    return LookErrors(
        np.asarray(block_diag(*axes)), np.concatenate(sigma, axis=-1), np.stack(measurable, -1), np.stack(snr, -1),
        tuple(blocked),
    )  # fmt: skip


def _spot_errors(
    spot: SpotState, size_mas: float, receiver: Receiver, track: Track, noise_mjy: float
) -> tuple[Floats, Bools, Floats, dict[str, Bools]]:
    with np.errstate(invalid="ignore"):
        cut = interferometer.cut_fwhm(
            track.beam_major_mas, track.beam_minor_mas, track.beam_pa_deg, np.nan_to_num(spot.pa_deg)
        )
        beams = np.nan_to_num(spot.separation_mas) / cut
        # a knot larger than the beam spreads its flux over several beams: its peak is what counts
        peak = np.nan_to_num(spot.flux_mjy) / (
            1.0 + (size_mas / np.sqrt(track.beam_major_mas * track.beam_minor_mas)) ** 2
        )
        snr = peak / noise_mjy
        masks = {
            "not yet ejected": ~spot.exists,
            "inside half a beam of the core": beams <= 0.5,
            "too faint": snr < receiver.snr_detect,
        }
    stopped = np.zeros(snr.shape, bool)
    reasons = {}
    for reason, mask in masks.items():
        reasons[reason] = mask & ~stopped
        stopped = stopped | mask
    blend = np.sqrt(interferometer.blending_factor(np.where(stopped, 2.0, beams)))
    safe = np.maximum(snr, 1e-9)
    floor = receiver.position_floor_beam
    sigma = np.stack(
        [
            np.where(stopped, np.inf, interferometer.position_error(beam, safe, size_mas, floor) * blend)
            for beam in (track.beam_major_mas, track.beam_minor_mas)
        ],
        axis=-1,
    )
    return sigma, ~stopped, snr, reasons


def look_errors(
    model: TargetModel,
    theta: Floats,
    mjd: Floats,
    setup: SetupRef,
    *,
    sky: CameraSky | None = None,
    seconds: Floats | None = None,
    track: Track | None = None,
) -> LookErrors:
    """Error covariance and measurability of looks with a setup: the only error model there is."""
    if setup.receiver is not None:
        assert track is not None
        return array_errors(model, theta, mjd, setup.receiver, track)
    assert setup.camera is not None
    assert sky is not None
    assert seconds is not None
    return camera_errors(model, theta, mjd, setup.camera, sky, seconds)
