"""What a set of looks is worth: expected information, and realised."""

from __future__ import annotations

from dataclasses import replace
from itertools import product

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from invented_problems import invented_problem

from planner.prediction.information import information
from planner.schedule.problem import CountPart, TargetPart
from planner.schedule.utility import (
    draw_luck,
    expected_utilities,
    realised_utilities,
    utilities_without_looks,
)

seeds = st.integers(0, 10_000)


def _plain_utilities(part: TargetPart, successes: dict[int, float]) -> list[float]:
    """Slow twin: loops over draws and looks; ``successes``: weight of each look."""
    result = []
    for goal in part.goals:
        reached = []
        for b in range(part.rows.shape[0]):
            if isinstance(goal, CountPart):
                reached.append(sum(w * goal.usable[b, k] for k, w in successes.items()) / goal.wanted)
            else:
                f = part.prior_precision + sum(
                    (w * part.rows[b, k].T @ part.rows[b, k] for k, w in successes.items()),
                    np.zeros_like(part.prior_precision),
                )
                reached.append(float(information(f, goal.gradient[b]) / goal.wanted[b]))
        result.append(float(np.mean([min(1.0, r) for r in reached])))
    return result


def _plain_realised(part: TargetPart, chosen: list[int]) -> np.ndarray:
    total = np.zeros(len(part.goals))
    for outcome in product([0, 1], repeat=len(chosen)):
        odds = np.prod([part.chance[k] if o else 1 - part.chance[k] for k, o in zip(chosen, outcome, strict=True)])
        total += odds * np.array(_plain_utilities(part, {k: 1.0 for k, o in zip(chosen, outcome, strict=True) if o}))
    return total


@given(seeds)
@settings(max_examples=20, deadline=None)
def test_expected_utility_equals_the_plain_loops(seed: int) -> None:
    part = invented_problem(seed, nights=5).targets[1]
    chosen = list(range(0, part.slots.size, 2))
    plain = _plain_utilities(part, {k: float(part.chance[k]) for k in chosen})
    assert expected_utilities(part, chosen) == pytest.approx(plain, rel=1e-9)


@given(seeds)
@settings(max_examples=15, deadline=None)
def test_realised_utility_of_few_looks_is_the_exact_sum_and_never_above_the_expected(seed: int) -> None:
    """Jensen: u is concave in F, so E u(F) <= u(E F)."""
    part = invented_problem(seed, nights=4).targets[1]
    chosen = list(range(min(5, part.slots.size)))
    realised = realised_utilities(part, chosen, draw_luck(seed, 1, part.slots.size))
    assert realised == pytest.approx(_plain_realised(part, chosen), rel=1e-9, abs=1e-12)
    assert np.all(realised <= expected_utilities(part, chosen) + 1e-12)


def test_sampled_outcomes_agree_with_the_exact_sum_within_their_counting_error() -> None:
    part = invented_problem(3, nights=12).targets[1]
    goals = tuple(replace(goal, wanted=goal.wanted * 1.8) for goal in part.goals)  # near what nine looks give
    part = replace(part, goals=goals)
    chosen = list(range(9))
    exact = _plain_realised(part, chosen)
    sampled = realised_utilities(part, chosen, draw_luck(3, 1, part.slots.size, outcomes=4096))
    # 4,096 outcomes of a utility whose spread is at most 0.5: error 0.5/64 = 0.008; four of them
    assert sampled == pytest.approx(exact, abs=0.032)
    assert np.any(np.abs(exact - expected_utilities(part, chosen)) > 0.01)  # else this would prove nothing


def test_luck_is_stratified_and_repeats_for_one_seed_and_target() -> None:
    luck = draw_luck(5, 2, 3)
    assert luck.shape == (256, 3)
    assert np.sort(np.floor(luck[:, 1] * 256)).tolist() == list(range(256))
    assert np.array_equal(luck, draw_luck(5, 2, 3))
    assert not np.array_equal(luck, draw_luck(5, 3, 3))


def test_certain_looks_make_realised_and_expected_equal() -> None:
    part = invented_problem(4, nights=12).targets[1]
    sure = replace(part, chance=np.ones(part.slots.size))
    chosen = list(range(10))
    realised = realised_utilities(sure, chosen, draw_luck(0, 0, part.slots.size))
    assert realised == pytest.approx(expected_utilities(sure, chosen), rel=1e-12)


def test_no_looks_leave_what_is_known_already() -> None:
    part = invented_problem(1).targets[0]
    known = 1.0 / np.sum(part.goals[0].gradient ** 2, axis=1) / part.goals[0].wanted  # prior precision is 1
    assert utilities_without_looks(part) == pytest.approx([np.minimum(1.0, known).mean()])
    assert realised_utilities(part, [], draw_luck(0, 0, 0)) == pytest.approx(utilities_without_looks(part))
