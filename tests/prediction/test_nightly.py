"""Yes-or-no facts from few nights, against every night judged."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner import flow
from planner.campaign.records import Campaign
from planner.prediction.curves import measurable_nights, reference_sky
from planner.prediction.look import look_errors
from planner.prediction.model import TargetModel
from planner.prediction.nightly import STRIDE, every_night, judged_nights, new_months
from planner.records import Track
from planner.units import mjd_of_date


@given(st.lists(st.tuples(st.integers(0, 99), st.integers(0, 99)), min_size=1, max_size=20))
@settings(max_examples=60, deadline=None)
def test_any_stretch_longer_than_the_stride_is_found_to_the_night(stretches: list[tuple[int, int]]) -> None:
    """A fact that holds from one night to another, and whose stretch and whose absence are longer than the stride."""
    truth = np.zeros((len(stretches), 100, 1), dtype=bool)
    for b, (low, high) in enumerate(stretches):
        low, high = min(low, high), max(low, high)
        truth[b, low : high + 1] = True
    long = [(t.sum() >= STRIDE or not t.any()) for t in truth]
    truth = truth[np.array(long)]
    found = every_night(lambda b, t: truth[np.ix_(b, t)], len(truth), judged_nights(100), 100)
    assert np.array_equal(found, truth)


def test_nights_on_both_sides_of_a_jump_are_judged() -> None:
    nights = mjd_of_date("2027-01-04") + 1.0 + np.arange(60.0)
    assert new_months(nights).tolist() == [28, 56]  # the nights of 2027-02-01 and 2027-03-01
    judged = set(judged_nights(60, [28, 0, 59]).tolist())
    assert {0, 1, 27, 28, 29, 58, 59} <= judged
    assert max(judged) == 59


@pytest.mark.parametrize("name", ["Sallow", "Brindle", "Tern", "Vetch"])
def test_the_forecast_finds_what_judging_every_night_finds(
    demo_campaign: Campaign, models: Mapping[str, TargetModel], tracks: Mapping[str, Track], name: str
) -> None:
    model = models[name]
    theta = model.belief(256, 3, "test").draws
    nights = flow.night_middles(demo_campaign)
    for setup in demo_campaign.setups:
        sky = seconds = None
        if setup.camera is not None:
            sky = reference_sky(model.target, setup, len(nights), nights)
            seconds = np.full(len(nights), setup.camera.longest_look_min * 60.0)
        track = tracks.get(setup.name)
        plain = look_errors(model, theta, nights, setup, sky=sky, seconds=seconds, track=track).measurable
        quick, _ = measurable_nights(model, theta, nights, setup, track)
        assert np.array_equal(quick, plain), setup.name
