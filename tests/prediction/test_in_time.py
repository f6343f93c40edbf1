"""What makes a forecast fast changes nothing that it says: time by polynomials, states found once, no errors formed."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner import flow
from planner.campaign.records import Campaign
from planner.prediction.curves import locked, share_state, target_forecast
from planner.prediction.in_time import over_nights, points_and_weights
from planner.prediction.look import look_errors
from planner.prediction.model import TargetModel
from planner.prediction.once import once, remembering
from planner.prediction.rings import RingModel
from planner.records import Floats, Track
from planner.schedule.slots import setup_targets

NIGHTS = 61400.0 + np.arange(183.0)


@given(degree=st.integers(0, 11), seed=st.integers(0, 2**31))
@settings(max_examples=25, deadline=None)
def test_twelve_points_give_every_polynomial_up_to_degree_eleven_exactly(degree: int, seed: int) -> None:
    nodes, weights = points_and_weights(NIGHTS)
    coefficients = np.random.default_rng(seed).normal(size=degree + 1)

    def f(mjd: Floats) -> Floats:
        return np.polynomial.chebyshev.chebval((mjd - 61491.0) / 91.0, coefficients)

    assert f(nodes) @ weights == pytest.approx(f(NIGHTS), abs=1e-11 * np.abs(coefficients).sum())
    assert weights.sum(axis=0) == pytest.approx(np.ones(183), abs=1e-12)


def test_draws_that_are_not_smooth_are_computed_plainly() -> None:
    """One draw has a kink, one ends, the others bend evenly: all come out as computed night by night."""
    calls: list[tuple[int, int]] = []

    def compute(theta: Floats, mjd: Floats) -> tuple[Floats, ...]:
        calls.append((len(theta), len(mjd)))
        t = (mjd - 61400.0) / 183.0
        value = np.exp(theta[:, :1] * t)
        value = np.where(theta[:, :1] == 2.0, np.abs(t - 0.4), value)
        return np.where((theta[:, :1] == 3.0) & (t > 0.7), np.nan, value), 2.0 * value

    theta = np.array([[0.1], [2.0], [0.5], [3.0], [-1.0]])
    found = over_nights(compute, theta, NIGHTS)
    assert calls == [(5, 16), (2, 183)]
    for fast, plain in zip(found, compute(theta, NIGHTS), strict=True):
        assert fast == pytest.approx(plain, abs=1e-9, nan_ok=True)


@pytest.mark.parametrize("name", ["Sallow", "Brindle"])
def test_a_rings_state_over_the_season_is_that_of_every_night(
    demo_campaign: Campaign, models: Mapping[str, TargetModel], name: str
) -> None:
    model = models[name]
    nights = locked(flow.night_middles(demo_campaign))
    theta = model.belief(64, 1, "test").draws
    for ring in model.features:
        assert isinstance(ring, RingModel)
        plain, growth = ring.state(theta, nights), ring.growth_arcsec_day(theta, nights)
        with remembering():
            share_state(ring, theta, nights)
            fast = ring.state(theta, nights)
            assert ring.width_then(theta, nights) is fast.width_arcsec
            assert ring.growth_arcsec_day(theta, nights) == pytest.approx(growth, rel=1e-4, abs=1e-9)
        assert fast is not plain
        assert np.array_equal(fast.exists, plain.exists)
        for field in ("radius_arcsec", "mean_radius_arcsec", "width_arcsec", "mag_arcsec2"):
            values = np.where(plain.exists, getattr(plain, field), 0.0)
            assert np.where(plain.exists, getattr(fast, field), 0.0) == pytest.approx(values, rel=1e-5, abs=1e-5), field


def test_a_result_is_found_once_for_read_only_arrays_and_forgotten_afterwards() -> None:
    class Thing:
        calls = 0

        @once
        def value(self, theta: Floats, mjd: Floats, word: str = "") -> Floats:
            self.calls += 1
            return theta + mjd

    thing, theta, mjd = Thing(), np.zeros(2), locked(np.ones(2))
    read_only = locked(theta)
    with remembering():
        thing.value(theta, mjd)
        thing.value(theta, mjd)
        assert thing.calls == 2  # these draws could be changed in between
        first = thing.value(read_only, mjd)
        assert thing.value(read_only, mjd) is first
        assert thing.value(read_only, mjd, "other") is not first
        assert Thing().value(read_only, mjd) is not first
        assert thing.calls == 4
    assert thing.value(read_only, mjd) is not first


@pytest.mark.parametrize(("name", "setup"), [("Tern", "cairn-array/43ghz"), ("Vetch", "cairn-array/22ghz")])
def test_what_is_measurable_is_the_same_with_and_without_errors(
    demo_campaign: Campaign, models: Mapping[str, TargetModel], tracks: Mapping[str, Track], name: str, setup: str
) -> None:
    model, ref = models[name], demo_campaign.setup(setup)
    theta = model.belief(64, 1, "test").draws
    whole, bare = (
        look_errors(model, theta, NIGHTS, ref, track=tracks[setup], with_sigma=sigma) for sigma in (True, False)
    )
    assert np.array_equal(whole.measurable, bare.measurable)
    assert np.array_equal(whole.snr, bare.snr)
    assert bare.sigma.shape == (64, 183, 0)
    assert np.array_equal(np.isfinite(whole.sigma[..., 0]), whole.measurable[..., 0])


def test_threads_forecast_what_one_target_at_a_time_does(demo_campaign: Campaign) -> None:
    ready = flow.prepare(demo_campaign)
    together = flow._forecast(demo_campaign, ready, lambda stage, share: None)
    nights = flow.night_middles(demo_campaign)
    for target in demo_campaign.targets:
        alone = target_forecast(
            ready.models[target.name],
            ready.beliefs[target.name],
            nights,
            setup_targets(demo_campaign, target),
            ready.tracks,
        )
        for one, other in zip(together.target(target.name).bands, alone.bands, strict=True):
            assert np.array_equal(one.quantiles, other.quantiles, equal_nan=True)
        for mine, theirs in zip(together.target(target.name).measurable, alone.measurable, strict=True):
            assert np.array_equal(mine.chance, theirs.chance)
