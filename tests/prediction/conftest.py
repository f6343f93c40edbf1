"""Observation models of the demo's invented targets, with an invented beam in place of the array's own."""

from __future__ import annotations

from collections.abc import Mapping

import pytest

from planner.campaign.records import Campaign
from planner.prediction.model import TargetModel, build_model
from planner.records import Track

BEAMS_MAS = {"cairn-array/43ghz": 0.2, "cairn-array/22ghz": 0.4}


@pytest.fixture(scope="session")
def tracks() -> Mapping[str, Track]:
    return {name: Track(6.0, 3.0, 0.0, 8, beam * 1.5, beam / 1.5, -5.0, 0.0006) for name, beam in BEAMS_MAS.items()}


@pytest.fixture(scope="session")
def models(demo_campaign: Campaign) -> Mapping[str, TargetModel]:
    return {t.name: build_model(demo_campaign, t, BEAMS_MAS) for t in demo_campaign.targets}
