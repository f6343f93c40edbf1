"""Observation models of the demo's invented targets, with an invented beam in place of the array's own."""

from __future__ import annotations

import sys
from collections.abc import Callable, Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from planner.campaign.records import Campaign, Target
from planner.prediction.model import TargetModel, build_model
from planner.records import Track

sys.path.insert(0, str(Path(__file__).parent))  # the invented jets lie beside the tests of this room

LOOK_HOURS = {"cairn-array/43ghz": 3.0, "cairn-array/22ghz": 1.0}
BEAMS_MAS = {"cairn-array/43ghz": 0.2, "cairn-array/22ghz": 0.4}

JetModels = Callable[..., TargetModel]


@pytest.fixture(scope="session")
def tracks() -> Mapping[str, Track]:
    return {
        name: Track(6.0, LOOK_HOURS[name], 0.0, 8, beam * 1.5, beam / 1.5, -5.0, 0.0006)
        for name, beam in BEAMS_MAS.items()
    }


@pytest.fixture(scope="session")
def models(demo_campaign: Campaign) -> Mapping[str, TargetModel]:
    return {t.name: build_model(demo_campaign, t, BEAMS_MAS) for t in demo_campaign.targets}


@pytest.fixture(scope="session")
def jet_model(demo_campaign: Campaign) -> JetModels:
    """Model of an invented target with the given jets, in the season and with the array of the demo."""

    def make(*features: Mapping[str, Any], **target: Any) -> TargetModel:
        facts = {"target": "Fern", "invented": True, "position": {"ra": 172.0, "dec": 24.0}, "features": features}
        if "distance_pc" not in target:
            facts["redshift"] = 0.412
        record = Target.model_validate({**facts, **target})
        # in the place of Tern and its file, so that it belongs to the programme of knots
        tern = demo_campaign.target("Tern")
        record = record.model_copy(update={"source": tern.source})
        others = tuple(record if t is tern else t for t in demo_campaign.targets)
        return build_model(replace(demo_campaign, targets=others), record, BEAMS_MAS)

    return make
