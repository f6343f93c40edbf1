"""The error model of a look: measurability inside each draw, and what each draw's look teaches."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pytest

from planner.campaign.records import Campaign, SetupRef
from planner.prediction.curves import quantiles, reference_sky
from planner.prediction.look import LookErrors, look_errors
from planner.prediction.look_rings import camera_seconds
from planner.prediction.model import TargetModel
from planner.records import Track
from planner.units import mjd_of_date

MJD = mjd_of_date("2027-01-04") + np.arange(1.0, 178.0, 22.0)


def _camera(campaign: Campaign, model: TargetModel, name: str, minutes: float, **changes: float) -> LookErrors:
    ref = campaign.setup(name)
    assert ref.camera is not None
    ref = SetupRef(**{**{f: getattr(ref, f) for f in ref.__slots__}, "camera": ref.camera.model_copy(update=changes)})
    sky = reference_sky(model.target, ref, len(MJD))
    theta = model.belief(64, 5, "test").draws
    return look_errors(model, theta, MJD, ref, sky=sky, seconds=np.full(len(MJD), minutes * 60.0))


def test_one_look_measures_every_ring_in_the_field(demo_campaign: Campaign, models: Mapping[str, TargetModel]) -> None:
    errors = _camera(demo_campaign, models["Sallow"], "brack-ridge/wide-camera", 120.0)
    assert errors.measurable.shape == (64, len(MJD), 2)
    assert errors.measurable.mean(axis=(0, 1)).min() > 0.9


def test_measurability_differs_from_draw_to_draw(demo_campaign: Campaign, models: Mapping[str, TargetModel]) -> None:
    errors = _camera(demo_campaign, models["Sallow"], "cairn-south/imager", 60.0)
    share = errors.measurable[:, :, 0].mean(axis=0)  # the outer ring fits the field in some draws only
    assert 0.0 < share.min() < 1.0


def test_what_is_not_measurable_teaches_nothing(demo_campaign: Campaign, models: Mapping[str, TargetModel]) -> None:
    model = models["Sallow"]
    errors = _camera(demo_campaign, model, "brack-ridge/wide-camera", 60.0, field_arcmin=7.0)
    theta = model.belief(64, 5, "test").draws
    rows = errors.whiten(model.derivatives(theta, MJD, "brack-ridge/wide-camera"))
    lost = ~errors.measurable[:, :, 0]
    assert lost.any()
    assert np.all(rows[lost][:, :8] == 0.0)
    assert np.all(np.abs(rows[errors.measurable[:, :, 0]][:, :8]).max(axis=(1, 2)) > 0.0)
    assert {b.reason for b in errors.blocked if b.mask.any() and b.feature == "Sallow outer ring"} == {
        "larger than the field"
    }


def test_more_time_raises_the_snr_but_not_past_the_floor(
    demo_campaign: Campaign, models: Mapping[str, TargetModel]
) -> None:
    model = models["Sallow"]
    short, long, endless = (
        np.median(_camera(demo_campaign, model, "brack-ridge/wide-camera", m).snr[..., 0]) for m in (10.0, 60.0, 1e6)
    )
    assert short < long < endless
    unfloored = np.median(
        _camera(demo_campaign, model, "brack-ridge/wide-camera", 1e6, subtraction_floor=0.0).snr[..., 0]
    )
    assert endless < 0.5 * unfloored


def test_minutes_reach_the_wanted_snr_in_84_of_100_draws(
    demo_campaign: Campaign, models: Mapping[str, TargetModel]
) -> None:
    model, ref = models["Brindle"], demo_campaign.setup("cairn-south/imager")
    assert ref.camera is not None
    camera = ref.camera.model_copy(
        update={"subtraction_floor": 0.0, "shortest_look_min": 0.01, "longest_look_min": 600.0}
    )
    sky = reference_sky(model.target, ref, len(MJD))
    theta = model.belief(512, 5, "test").draws
    seconds = camera_seconds(model, theta, MJD, camera, sky)
    free = SetupRef(**{**{f: getattr(ref, f) for f in ref.__slots__}, "camera": camera})
    snr = look_errors(model, theta, MJD, free, sky=sky, seconds=seconds).snr[..., 0]
    share = (snr >= camera.snr_wanted * (1 - 1e-6)).mean(axis=0)
    assert share == pytest.approx(np.full(len(MJD), 0.84), abs=0.01)  # one draw of 512 either way, and rounding


def test_errors_along_the_beam_axes_become_one_covariance_on_the_sky(
    demo_campaign: Campaign, models: Mapping[str, TargetModel], tracks: Mapping[str, Track]
) -> None:
    """R' diag(sigma^2) R must be longest along the beam's position angle (-5 deg, nearly north)."""
    model, ref = models["Tern"], demo_campaign.setup("cairn-array/43ghz")
    theta = model.belief(16, 5, "test").draws
    errors = look_errors(model, theta, MJD[-1:], ref, track=tracks["cairn-array/43ghz"])
    sigma = errors.sigma[0, 0, :2]
    rotation = errors.rotation[:2, :2]
    covariance = rotation.T @ np.diag(sigma**2) @ rotation
    values, vectors = np.linalg.eigh(covariance)
    pa = np.degrees(np.arctan2(vectors[0, 1], vectors[1, 1]))
    assert (pa + 90) % 180 - 90 == pytest.approx(-5.0, abs=1e-6)
    assert np.sqrt(values[1] / values[0]) == pytest.approx(sigma[0] / sigma[1])


def test_quantiles_skip_draws_without_a_value_as_the_plain_loop_does() -> None:
    rng = np.random.default_rng(2)
    values = rng.normal(size=(101, 7))
    values[rng.random(values.shape) < 0.3] = np.nan
    values[:, 3] = np.nan
    found, share = quantiles(values, (0.05, 0.5, 0.84))
    for t in range(7):
        some = values[np.isfinite(values[:, t]), t]
        assert share[t] == pytest.approx(len(some) / 101)
        expected = np.quantile(some, [0.05, 0.5, 0.84]) if len(some) else np.full(3, np.nan)
        assert found[:, t] == pytest.approx(expected, nan_ok=True)
