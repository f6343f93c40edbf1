"""First answers of ``check``: when, how much, and what stays tied."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from planner import flow
from planner.campaign.records import Campaign
from planner.prediction.curves import target_forecast
from planner.prediction.first_answer import answers_of, ties_of
from planner.prediction.model import TargetModel
from planner.records import Forecast, Track


def test_radii_leave_depth_and_distance_tied_and_it_is_said(
    demo_campaign: Campaign, models: Mapping[str, TargetModel]
) -> None:
    nights = flow.night_middles(demo_campaign)
    ties = ties_of(models["Brindle"], nights, ["cairn-south/imager"])
    assert any("distance_pc and Brindle ring/depth_pc stay tied" in t and "depth_over_distance2" in t for t in ties)


def test_a_feature_that_moves_says_how_much_and_from_when(
    demo_campaign: Campaign, models: Mapping[str, TargetModel], tracks: Mapping[str, Track]
) -> None:
    model = models["Tern"]
    nights = flow.night_middles(demo_campaign)
    setups = [s for s in demo_campaign.setups if s.is_array]
    made = target_forecast(
        model, model.belief(256, 1, "test"), nights, setups, {("Tern", n): t for n, t in tracks.items()}
    )
    labels = tuple(d.isoformat() for d in demo_campaign.nights)
    answers = dict(answers_of(made, Forecast("x", labels, nights, (made,))))
    assert answers["Tern K2"].startswith("separation 0.1")
    assert "cairn-array/43ghz: measurable from the start" in answers["Tern K2"]
    assert "in the way: within half a beam of Tern K1" in answers["Tern K2"]  # it follows K1 at 0.15 mas or less


def test_first_and_last_measurable_nights_come_with_the_chance_of_never(
    demo_campaign: Campaign, models: Mapping[str, TargetModel], tracks: Mapping[str, Track]
) -> None:
    model = models["Vetch"]
    nights = flow.night_middles(demo_campaign)
    setups = [s for s in demo_campaign.setups if s.is_array]
    made = target_forecast(
        model, model.belief(256, 1, "test"), nights, setups, {("Vetch", n): t for n, t in tracks.items()}
    )
    fading = next(m for m in made.measurable if m.setup == "cairn-array/22ghz")
    assert np.all(np.diff(fading.chance) <= 1e-12)  # it only fades
    assert nights[0] <= fading.first_mjd[1] < fading.last_mjd[0] < fading.last_mjd[2] < nights[-1]
    assert 0.0 <= fading.never < 0.05
    assert fading.reason == "too faint"
