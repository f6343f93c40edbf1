"""One error model of a look: what is measurable in each draw, how well, and what stands in the way.

The covariance of a look is R' diag(sigma^2) R with a constant rotation R (along the axes of an array's beam; the
identity for ring sectors). Errors are independent from look to look given the parameters: everything shared in time
(plate scale, centring, core wander) is a coordinate of the belief.
Shapes: B draws, T moments, F features, M observables.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from planner.campaign.records import CameraSetup, Receiver, SetupRef
from planner.instruments import interferometer
from planner.prediction.arclets import ArcletModel
from planner.prediction.knots import KnotModel, PairModel
from planner.prediction.look_knots import View, scattered_mas, see_spot, spot_errors
from planner.prediction.look_rings import CameraSky, arclet_errors, ring_errors
from planner.prediction.model import TargetModel
from planner.prediction.rings import RingModel
from planner.records import Bools, Floats, Track
from planner.units import YEAR_DAYS, date_of_mjd


@dataclass(frozen=True)
class Hindrance:
    """Why one feature is not measurable: share of the draws and moments that it stops, (B, T)."""

    feature: str
    reason: str
    mask: Bools


@dataclass(frozen=True)
class LookErrors:
    """Error model of looks at a target with one setup."""

    rotation: Floats  # (M, M)
    sigma: Floats  # (B, T, M) along the rotated axes, inf where nothing is measured; (B, T, 0) if not asked for
    measurable: Bools  # (B, T, F)
    snr: Floats  # (B, T, F), 0 where it does not exist
    blocked: tuple[Hindrance, ...]

    def whiten(self, derivatives: Floats) -> Floats:
        """C^-1/2 J, (B, T, M, P); rows of what is not measured are zero."""
        rows = np.einsum("mn,btnp->btmp", self.rotation, np.nan_to_num(derivatives))
        return rows / self.sigma[..., None]


def camera_errors(
    model: TargetModel, theta: Floats, mjd: Floats, setup: CameraSetup, sky: CameraSky, seconds: Floats,
    name: str = "", *, with_sigma: bool = True,
) -> LookErrors:  # fmt: skip
    """Error model of camera looks at every echo in the field; jets are not measured by cameras.

    ``name``: of the setup, to find its templates.
    """
    sigma, measurable, snr, blocked, axes = [], [], [], [], []
    for feature in model.features:
        shape = (len(theta), len(mjd))
        axes.append(feature.axes() if isinstance(feature, ArcletModel) else np.eye(len(feature.observables)))
        if not isinstance(feature, RingModel | ArcletModel):
            sigma.append(np.full((*shape, len(feature.observables) if with_sigma else 0), np.inf))
            measurable.append(np.zeros(shape, bool))
            snr.append(np.zeros(shape))
            blocked.append(Hindrance(feature.name, "a camera does not resolve it", np.ones(shape, bool)))
            continue
        if isinstance(feature, RingModel):
            one = ring_errors(model, feature, theta, mjd, setup, sky, seconds, name, with_sigma=with_sigma)
        else:
            one = arclet_errors(model, feature, theta, mjd, setup, sky, seconds, name)
        sigma.append(one[0] if with_sigma else np.zeros((*shape, 0)))
        measurable.append(one[1])
        snr.append(one[2])
        blocked += [Hindrance(feature.name, reason, mask) for reason, mask in one[3].items()]
    from scipy.linalg import block_diag

    return LookErrors(
        np.asarray(block_diag(*axes)), np.concatenate(sigma, axis=-1), np.stack(measurable, -1), np.stack(snr, -1),
        tuple(blocked),
    )  # fmt: skip


def noise_jy(track: Track, mjd: Floats) -> Floats | float:
    """Image noise of a look at each moment: (T,) where the months differ."""
    if not track.noise_by_month_jy:
        return track.noise_jy
    return np.array([track.noise_by_month_jy[date_of_mjd(moment).month - 1] for moment in mjd], dtype=float)


def array_errors(
    model: TargetModel, theta: Floats, mjd: Floats, receiver: Receiver, track: Track, setup: str | None = None,
    *, with_sigma: bool = True,
) -> LookErrors:  # fmt: skip
    """Error model of array looks at every knot in the field; rings are not measured by arrays.

    Position errors along the beam's axes (beam / 2 S/N, size, floor), variance raised where the knot blends with
    the core or with another knot, nothing inside half a beam of either.
    """
    sigma, measurable, snr, blocked, axes = [], [], [], [], []
    noise_mjy = 1e3 * interferometer.effective_noise_jy(
        noise_jy(track, mjd), receiver.core_mjy / 1e3, receiver.dynamic_range
    )
    view = View(receiver, track, noise_mjy, scattered_mas(model.target.scatter_mas, receiver.ghz))
    pa = np.radians(track.beam_pa_deg)
    beam_axes = np.array([[np.sin(pa), np.cos(pa)], [np.cos(pa), -np.sin(pa)]])  # major, minor, on (east, north)
    spots = {
        feature.name: [
            see_spot(
                feature.name,
                label,
                state,
                feature.record.size_mas,
                feature.record.grows,
                view,
                moved_mas(feature, theta, track),
            )
            for label, state in zip(feature.spots, feature.spot_states(theta, mjd, receiver.ghz, setup), strict=True)
        ]
        for feature in model.features
        if isinstance(feature, KnotModel | PairModel)
    }
    every = [spot for some in spots.values() for spot in some]
    for feature in model.features:
        shape = (len(theta), len(mjd))
        if not isinstance(feature, KnotModel | PairModel):
            sigma.append(np.full((*shape, len(feature.observables) if with_sigma else 0), np.inf))
            measurable.append(np.zeros(shape, bool))
            snr.append(np.zeros(shape))
            blocked.append(Hindrance(feature.name, "an array does not see it", np.ones(shape, bool)))
            axes.append(np.eye(len(feature.observables)))
            continue
        own = spots[feature.name]
        seen = own if with_sigma else own[:1]  # a pair is measurable when its approaching knot is
        each = [spot_errors(spot, [o for o in every if o is not spot], view, with_sigma=with_sigma) for spot in seen]
        sigma.append(np.concatenate([e[0] for e in each], axis=-1))
        measurable.append(each[0][1])
        snr.append(each[0][2])
        blocked += [Hindrance(feature.name, reason, mask) for reason, mask in each[0][3].items()]
        axes += [beam_axes] * len(own)
    from scipy.linalg import block_diag

    return LookErrors(
        np.asarray(block_diag(*axes)), np.concatenate(sigma, axis=-1), np.stack(measurable, -1), np.stack(snr, -1),
        tuple(blocked),
    )  # fmt: skip


def moved_mas(feature: KnotModel | PairModel, theta: Floats, track: Track) -> Floats | float:
    """How far a knot moves within one look, (B, 1); a pair's approaching knot stands for both. 0 if it stands still."""
    if feature.stationary:
        return 0.0
    return np.asarray(feature.speed_mas_yr(theta))[:, None] / YEAR_DAYS * (track.look_hours / 24.0)


def look_errors(
    model: TargetModel,
    theta: Floats,
    mjd: Floats,
    setup: SetupRef,
    *,
    sky: CameraSky | None = None,
    seconds: Floats | None = None,
    track: Track | None = None,
    with_sigma: bool = True,
) -> LookErrors:
    """Error covariance and measurability of looks with a setup: the only error model there is.

    Without ``with_sigma`` only measurability is found: ``sigma`` is (B, T, 0).
    """
    if setup.receiver is not None:
        assert track is not None
        return array_errors(model, theta, mjd, setup.receiver, track, setup.name, with_sigma=with_sigma)
    assert setup.camera is not None
    assert sky is not None
    assert seconds is not None
    return camera_errors(model, theta, mjd, setup.camera, sky, seconds, setup.name, with_sigma=with_sigma)
