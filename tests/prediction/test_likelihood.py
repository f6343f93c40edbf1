"""The likelihood stands on the same observation model and the same error model as everything else."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from invented_jets import APPARENT, STATIONARY, knot

from planner.campaign.records import Campaign
from planner.prediction import look as look_room
from planner.prediction.curves import reference_sky
from planner.prediction.knots import KnotModel
from planner.prediction.likelihood import Measurement, correlated, independent, log_likelihood
from planner.prediction.look import LookErrors, look_errors
from planner.prediction.model import TargetModel
from planner.prediction.rings import RingModel
from planner.records import Track
from planner.units import mjd_of_date

Make = Callable[..., TargetModel]
HIGH, LOW = "cairn-array/43ghz", "cairn-array/22ghz"
MJD = mjd_of_date("2027-03-20")


def plain(residual: np.ndarray, covariance: np.ndarray) -> float:
    from scipy.stats import multivariate_normal

    return float(multivariate_normal(np.zeros(len(residual)), covariance).logpdf(residual))


def far_knots(jet_model: Make) -> TargetModel:
    """Two knots that no draw loses: one moves, one stands far on the other side."""
    away = {"separation_mas": 3.0, "pa_deg": 118}
    moving = {**APPARENT, "core_crossing": {"date": "2024-06-10", "sigma_days": 20, "at_ghz": 43}}
    return jet_model(knot("A", moving, grows=0), knot("S", {**STATIONARY, "stationary": away}, grows=0))


@pytest.mark.parametrize("which", [[0, 1, 2, 3], [0, 1], [2, 3], [0], [1, 2], [0, 1, 3]])
def test_it_is_the_multivariate_normal_of_the_look(
    demo_campaign: Campaign, jet_model: Make, tracks: Mapping[str, Track], which: list[int]
) -> None:
    """Twin: scipy's density, draw by draw, with the covariance multiplied out."""
    model = far_knots(jet_model)
    theta = model.belief(8, 1, "test").draws
    truth = model.belief(1, 2, "truth").draws
    setups = {s.name: s for s in demo_campaign.setups}
    by_target = {(model.target.name, n): t for n, t in tracks.items()}
    looks, expected = [], np.zeros(8)
    for name, mjd in ((HIGH, MJD), (HIGH, MJD + 40), (LOW, MJD + 7)):
        values = np.full(4, np.nan)
        values[which] = model.observe(truth, np.array([mjd]), name)[0, 0, which]
        looks.append(Measurement(name, mjd, values))
        errors = look_errors(model, theta, np.array([mjd]), setups[name], track=tracks[name])
        assert errors.measurable.all()
        for b in range(8):
            covariance = errors.rotation.T @ np.diag(errors.sigma[b, 0] ** 2) @ errors.rotation
            residual = values - model.observe(theta[[b]], np.array([mjd]), name)[0, 0]
            expected[b] += plain(residual[which], covariance[np.ix_(which, which)])
    found = log_likelihood(model, theta, looks, setups, by_target)
    assert found == pytest.approx(expected, rel=1e-9)


@given(st.integers(0, 2**31), st.integers(1, 5))
@settings(max_examples=25, deadline=None)
def test_both_ways_of_computing_agree_with_scipy(seed: int, size: int) -> None:
    rng = np.random.default_rng(seed)
    rotation = np.linalg.qr(rng.normal(size=(size, size)))[0]
    sigma = np.exp(rng.uniform(-1.5, 1.5, size=(3, size)))  # scipy calls much flatter ones singular
    residual = rng.normal(size=(3, size))
    known = np.arange(size)
    expected = [plain(residual[b], rotation.T @ np.diag(sigma[b] ** 2) @ rotation) for b in range(3)]
    assert correlated(residual, rotation, sigma, known) == pytest.approx(expected, rel=1e-6)
    assert independent(residual @ rotation.T, sigma) == pytest.approx(expected, rel=1e-6)


def test_errors_of_very_different_size_lose_no_digits() -> None:
    """1e-9 beside 1e9 at 30 degrees: a plain inverse of the covariance would be noise; closed form in the axes."""
    c, s = np.cos(np.pi / 6), np.sin(np.pi / 6)
    rotation = np.array([[c, s], [-s, c]])
    sigma = np.array([[1e-3, 1e3]])
    axes = np.array([[2e-3, -1e3]])
    expected = -0.5 * (4 + 1) - np.log(2 * np.pi)  # logs of the errors cancel
    assert correlated(axes @ rotation, rotation, sigma, np.arange(2)) == pytest.approx([expected], abs=1e-3)
    assert independent(axes, sigma) == pytest.approx([expected], abs=1e-12)


def test_errors_that_came_with_the_values_replace_the_models(
    demo_campaign: Campaign, jet_model: Make, tracks: Mapping[str, Track]
) -> None:
    model = far_knots(jet_model)
    theta = model.belief(4, 1, "test").draws
    values = model.observe(theta, np.array([MJD]), HIGH)[0, 0]
    sigma = np.array([0.02, 0.03, np.nan, np.nan])
    partly = np.where(np.isnan(sigma), np.nan, values)
    look = Measurement(HIGH, MJD, partly, sigma)
    found = log_likelihood(model, theta, [look], {s.name: s for s in demo_campaign.setups}, {})
    residual = (partly - model.observe(theta, np.array([MJD]), HIGH)[:, 0])[:, :2]
    expected = [plain(residual[b], np.diag(sigma[:2] ** 2)) for b in range(4)]
    assert found == pytest.approx(expected, rel=1e-9)
    with pytest.raises(ValueError, match=r"measurement at MJD 61\d+: each measured value needs an error above 0"):
        Measurement(HIGH, MJD, values, np.array([0.02, 0.0, 1.0, 1.0]))


def test_a_draw_in_which_it_could_not_be_measured_is_impossible(
    demo_campaign: Campaign, jet_model: Make, tracks: Mapping[str, Track]
) -> None:
    near = {**APPARENT, "core_crossing": {"date": "2026-12-10", "sigma_days": 60, "at_ghz": 43}}
    model = jet_model(knot("A", near))
    theta = model.belief(64, 1, "test").draws
    setups = {s.name: s for s in demo_campaign.setups}
    ok = look_errors(model, theta, np.array([MJD]), setups[HIGH], track=tracks[HIGH]).measurable[:, 0, 0]
    assert 0 < ok.sum() < 64
    look = Measurement(HIGH, MJD, np.array([-0.1, 0.05]))
    found = log_likelihood(model, theta, [look], setups, {(model.target.name, HIGH): tracks[HIGH]})
    assert np.array_equal(np.isfinite(found), ok)
    assert log_likelihood(model, theta, [Measurement(HIGH, MJD, np.full(2, np.nan))], setups, {}).tolist() == [0.0] * 64


def test_a_ring_is_weighed_sector_by_sector(demo_campaign: Campaign, models: Mapping[str, TargetModel]) -> None:
    model, ref = models["Brindle"], demo_campaign.setup("cairn-south/imager")
    theta = model.belief(8, 1, "test").draws
    sky = reference_sky(model.target, ref, 1)
    values = model.observe(theta[:1], np.array([MJD]), ref.name)[0, 0]
    look = Measurement(ref.name, MJD, values, sky=sky, seconds=3600.0)
    found = log_likelihood(model, theta, [look], {ref.name: ref}, {})
    errors = look_errors(model, theta, np.array([MJD]), ref, sky=sky, seconds=np.array([3600.0]))
    for b in range(8):
        residual = values - model.observe(theta[[b]], np.array([MJD]), ref.name)[0, 0]
        assert found[b] == pytest.approx(plain(residual, np.diag(errors.sigma[b, 0] ** 2)), rel=1e-9)


# ------------------------------------------------------------------ one model, one error model


@pytest.mark.parametrize("kind", [KnotModel, RingModel])
def test_what_replaces_the_observation_model_changes_derivatives_and_likelihood_alike(
    demo_campaign: Campaign, models: Mapping[str, TargetModel], tracks: Mapping[str, Track], kind: type,
    monkeypatch: pytest.MonkeyPatch,
) -> None:  # fmt: skip
    """Everything observed twice as large: derivatives double, and so do residuals of doubled measurements."""
    name, setup = ("Tern", HIGH) if kind is KnotModel else ("Brindle", "cairn-south/imager")
    model, ref = models[name], demo_campaign.setup(setup)
    theta = model.belief(8, 1, "test").draws
    mjd = np.array([MJD])
    sigma = np.full(sum(len(f.observables) for f in model.features), 0.05)
    values = model.observe(theta[:1], mjd, setup)[0, 0]

    def chance(scale: float) -> np.ndarray:
        look = Measurement(setup, MJD, scale * values, scale * sigma)
        return log_likelihood(model, theta, [look], {setup: ref}, {})

    before, rows = chance(1.0), model.derivatives(theta, mjd, setup)
    real = kind.observe
    monkeypatch.setattr(kind, "observe", lambda self, *args: 2.0 * real(self, *args))
    assert model.derivatives(theta, mjd, setup) == pytest.approx(2.0 * rows, rel=1e-9, nan_ok=True)
    assert chance(2.0) == pytest.approx(before - len(values) * np.log(2.0), rel=1e-9)
    assert not np.allclose(chance(1.0)[1:], before[1:])


def test_what_replaces_the_error_model_changes_the_likelihood(
    demo_campaign: Campaign, jet_model: Make, tracks: Mapping[str, Track], monkeypatch: pytest.MonkeyPatch
) -> None:
    """Errors three times as large: a density without residual falls by ln 3 an observable."""
    model = far_knots(jet_model)
    theta = model.belief(1, 1, "test").draws
    look = Measurement(HIGH, MJD, model.observe(theta, np.array([MJD]), HIGH)[0, 0])
    setups = {s.name: s for s in demo_campaign.setups}
    by_target = {(model.target.name, HIGH): tracks[HIGH]}
    before = log_likelihood(model, theta, [look], setups, by_target)

    real = look_room.array_errors

    def wider(*args: Any, **more: Any) -> LookErrors:
        errors = real(*args, **more)
        return replace(errors, sigma=3.0 * errors.sigma)

    monkeypatch.setattr(look_room, "array_errors", wider)
    assert log_likelihood(model, theta, [look], setups, by_target) == pytest.approx(before - 4 * np.log(3.0), rel=1e-9)
