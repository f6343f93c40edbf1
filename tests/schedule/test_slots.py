"""Slots made of the demo's forecast, windows and instruments, and the problem made of them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from planner import flow
from planner.campaign.records import Campaign, FixedLook
from planner.errors import PlanningError
from planner.prediction.information import gathered, information
from planner.records import Windows, silent
from planner.schedule.problem import LearnPart
from planner.schedule.promise import Chosen, data_share, odds_part
from planner.schedule.slots import SlotBook, largest_gap_days
from planner.units import iso_of_mjd


@pytest.fixture(scope="module")
def ready(demo_campaign: Campaign) -> flow.Prepared:
    return flow.prepare(demo_campaign)


@pytest.fixture(scope="module")
def windows(demo_campaign: Campaign, ready: flow.Prepared) -> Windows:
    return flow._windows(demo_campaign, ready, silent)


@pytest.fixture(scope="module")
def book(demo_campaign: Campaign, ready: flow.Prepared, windows: Windows) -> SlotBook:
    return flow._book(demo_campaign, ready, windows, silent)


def test_a_slot_is_one_target_setup_night_and_account(book: SlotBook) -> None:
    keys = [(s.target, s.setup, s.night, s.allocation) for s in book.slots]
    assert len(keys) == len(set(keys)) > 100


def test_every_slot_fits_its_window_and_numbers_are_in_order(book: SlotBook, windows: Windows) -> None:
    for number, slot in enumerate(book.slots):
        assert slot.number == number
        row = book.window_rows[number]
        assert windows.targets[windows.target[row]] == slot.target
        assert slot.mode.minutes <= (slot.latest_end_mjd - slot.earliest_start_mjd) * 1440.0 + 1e-6
        assert 0.0 < slot.mode.exposure_s < slot.mode.minutes * 60.0 + 1e-6
        assert slot.earliest_start_mjd <= slot.best_mjd <= slot.latest_end_mjd


def test_dark_hours_pay_for_dark_slots_only(demo_campaign: Campaign, book: SlotBook) -> None:
    classes = {word: set() for word in ("dark", "grey", "any")}
    for slot in book.slots:
        classes[demo_campaign.file.allocations[slot.allocation].sky].add(slot.sky_class)
    assert classes["dark"] == {0}
    assert classes["grey"] == {0, 1}
    assert {0, 2} <= classes["any"]


def test_a_slot_carries_every_feature_in_the_field(book: SlotBook) -> None:
    sallow = next(p for p in book.problem.targets if p.name == "Sallow")
    tern = next(p for p in book.problem.targets if p.name == "Tern")
    assert sallow.rows.shape[2] == 8 + 3  # sectors of the whole outer ring and of the inner arc
    assert tern.rows.shape[2] == 2 + 2  # east and north of both knots
    taught = np.abs(sallow.rows).sum(axis=(0, 1, 3)) > 0
    assert taught.all()


def test_coordinates_that_nothing_feels_are_left_out_without_changing_information(
    demo_campaign: Campaign, ready: flow.Prepared, book: SlotBook
) -> None:
    """Marginalising a coordinate that no look touches is exact: compare with the full vector."""
    model = ready.models["Tern"]
    part = next(p for p in book.problem.targets if p.name == "Tern")
    keep = book.columns["Tern"]
    assert len(keep) < model.size
    goal = part.goals[0]
    assert isinstance(goal, LearnPart)
    whole_rows = np.zeros((*part.rows.shape[:3], model.size))
    whole_rows[..., keep] = part.rows
    whole_gradient = np.zeros((len(goal.gradient), model.size))
    whole_gradient[:, keep] = goal.gradient
    prior = np.linalg.inv(model.belief_covariance)
    full = information(gathered(prior, whole_rows[:, :20], part.chance[:20]), whole_gradient)
    kept = information(gathered(part.prior_precision, part.rows[:, :20], part.chance[:20]), goal.gradient)
    assert kept == pytest.approx(full, rel=1e-8)


def test_weights_of_a_target_are_shared_by_its_goals(book: SlotBook) -> None:
    for part, weight in zip(book.problem.targets, (3.0, 2.0, 3.0, 2.0), strict=True):
        assert sum(g.weight for g in part.goals) == pytest.approx(weight)


def test_knots_are_looked_at_often_enough_to_tell_them_apart(ready: flow.Prepared) -> None:
    """mu dt <= s / 2 at the 84 % speed: closed form for a lognormal prior, 0.31 mas/yr +- 20 %, s = 0.25 mas."""
    model = ready.models["Tern"]
    draws = model.belief(4096, 1, "test").draws
    fast = 0.31 * np.exp(0.2 * 0.994458) / 365.25  # 84 % quantile of a normal is 0.994458 sigma
    assert largest_gap_days(model, draws) == pytest.approx(0.25 / (2 * fast), rel=0.01)
    assert largest_gap_days(ready.models["Vetch"], draws[:, :1]) == np.inf


def test_odds_rows_at_the_planning_draws_are_the_planning_rows(
    demo_campaign: Campaign, ready: flow.Prepared, book: SlotBook, windows: Windows
) -> None:
    """One model: what the odds are simulated with is what the plan was made with."""
    for part in book.problem.targets:
        model = ready.models[part.name]
        local = np.arange(0, len(part.slots), 17)
        middles = np.array([book.slots[k].best_mjd for k in part.slots[local]])
        draws = model.belief(flow.PLAN_DRAWS, demo_campaign.file.seed, "plan").draws
        again = odds_part(model, book, part, Chosen(local, middles), draws, windows, demo_campaign)
        assert again.rows == pytest.approx(part.rows[:, local], rel=1e-6, abs=1e-6 * np.abs(part.rows).max())


def test_data_share_is_zero_without_looks_and_near_one_when_looks_say_everything(book: SlotBook) -> None:
    vetch = next(p for p in book.problem.targets if p.name == "Vetch")
    beta_cos = vetch.goals[1]
    assert isinstance(beta_cos, LearnPart)
    assert data_share(vetch, beta_cos, np.array([], dtype=np.int64)) == pytest.approx(0.0, abs=1e-9)
    assert data_share(vetch, beta_cos, np.arange(40)) > 0.99


def _with_fixed(campaign: Campaign, look: dict[str, object]) -> Campaign:
    fixed = FixedLook.model_validate(look)
    return replace(campaign, file=campaign.file.model_copy(update={"fixed_looks": (fixed,)}))


def test_a_fixed_look_becomes_a_slot_at_exactly_its_time(
    demo_campaign: Campaign, ready: flow.Prepared, windows: Windows, book: SlotBook
) -> None:
    slot = next(s for s in book.slots if s.target == "Brindle")
    start = iso_of_mjd(slot.earliest_start_mjd + 0.01)
    campaign = _with_fixed(demo_campaign, {"target": "Brindle", "setup": slot.setup, "start_utc": start, "minutes": 30})
    found = [s for s in flow._book(campaign, ready, windows, silent).slots if s.fixed_look is not None]
    assert len(found) == 1
    assert iso_of_mjd(found[0].earliest_start_mjd) == start
    assert (found[0].latest_end_mjd - found[0].earliest_start_mjd) * 1440 == pytest.approx(30.0, abs=1e-5)


def test_a_fixed_look_outside_every_window_is_refused_with_the_nearest_night(
    demo_campaign: Campaign, ready: flow.Prepared, windows: Windows
) -> None:
    campaign = _with_fixed(
        demo_campaign,
        {"target": "Brindle", "setup": "cairn-south/imager", "start_utc": "2027-03-01T12:00:00Z", "minutes": 30},
    )
    with pytest.raises(
        PlanningError,
        match=r"fixed look 1 \(Brindle .*lies in no window of 30 minutes; the nearest window is on 2027-0",
    ):
        flow._book(campaign, ready, windows, silent)
