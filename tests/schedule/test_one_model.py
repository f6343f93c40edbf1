"""Plan, odds and forecast stand on one observation model and one error model: what replaces either changes them all."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from planner import flow
from planner.campaign.records import Campaign
from planner.prediction import look as look_room
from planner.prediction.knots import KnotModel
from planner.prediction.look import LookErrors
from planner.records import Windows, silent
from planner.schedule.promise import Chosen, odds_part


@pytest.fixture(scope="module")
def campaign(demo_campaign: Campaign) -> Campaign:
    """The demo with one target, a month of it."""
    season = demo_campaign.file.season.model_copy(update={"last": demo_campaign.file.season.first.replace(day=28)})
    file = demo_campaign.file.model_copy(update={"season": season})
    return replace(demo_campaign, file=file, targets=(demo_campaign.target("Tern"),))


@pytest.fixture(scope="module")
def ready(campaign: Campaign) -> flow.Prepared:
    return flow.prepare(campaign)


@pytest.fixture(scope="module")
def windows(campaign: Campaign, ready: flow.Prepared) -> Windows:
    return flow._windows(campaign, ready, silent)


def rows_of(campaign: Campaign, ready: flow.Prepared, windows: Windows) -> dict[str, np.ndarray]:
    """Whitened derivatives of the plan's slots and of the same looks in simulated seasons; chances of the forecast."""
    book = flow._book(campaign, ready, windows, silent)
    (part,) = book.problem.targets
    local = np.arange(0, len(part.slots), 5)
    middles = np.array([book.slots[k].best_mjd for k in part.slots[local]])
    model = ready.models[part.name]
    draws = model.belief(8, campaign.file.seed, "odds").draws
    fresh = odds_part(model, book, part, Chosen(local, middles), draws, windows, campaign)
    chance = np.stack([m.chance for m in flow._forecast(campaign, ready, silent).target("Tern").measurable])
    return {"plan": part.rows, "odds": fresh.rows, "chance": chance}


def test_an_observation_model_that_sees_twice_as_much_teaches_twice_as_much_everywhere(
    campaign: Campaign, ready: flow.Prepared, windows: Windows, monkeypatch: pytest.MonkeyPatch
) -> None:
    before = rows_of(campaign, ready, windows)
    real = KnotModel.observe
    monkeypatch.setattr(KnotModel, "observe", lambda self, *args: 2.0 * real(self, *args))
    after = rows_of(campaign, ready, windows)
    for name in ("plan", "odds"):
        assert np.abs(before[name]).max() > 0
        scale = np.abs(before[name]).max()
        assert after[name] == pytest.approx(2.0 * before[name], rel=1e-6, abs=1e-9 * scale), name


def test_an_error_model_that_is_three_times_worse_and_half_blind_is_felt_everywhere(
    campaign: Campaign, ready: flow.Prepared, windows: Windows, monkeypatch: pytest.MonkeyPatch
) -> None:
    before = rows_of(campaign, ready, windows)
    real = look_room.array_errors

    def worse(*args: Any, **more: Any) -> LookErrors:
        errors = real(*args, **more)
        seen = errors.measurable.copy()
        seen[1::2] = False  # every second draw
        return replace(errors, sigma=3.0 * errors.sigma, measurable=seen)

    monkeypatch.setattr(look_room, "array_errors", worse)
    after = rows_of(campaign, ready, windows)
    for name in ("plan", "odds"):
        assert np.abs(before[name]).max() > 0
        assert after[name] == pytest.approx(before[name] / 3.0, rel=1e-9), name
    assert after["chance"].max() <= 0.5 < before["chance"].max()
