"""Simulated odds of goals."""

from __future__ import annotations

import numpy as np
import pytest

from planner.errors import DomainError
from planner.prediction.information import information
from planner.schedule.odds import simulate_all_odds, simulate_odds, standard_error
from planner.schedule.problem import CountPart, LearnPart, TargetPart


def one_parameter_target(*, wanted: float, looks: int = 3, draws: int = 50, tell: float = 1.0) -> TargetPart:
    """One parameter, prior precision 1; each look that succeeds adds ``tell`` squared."""
    return TargetPart(
        name="invented",
        prior_precision=np.eye(1),
        goals=(
            LearnPart("learn", 1.0, np.ones((draws, 1)), np.full(draws, wanted)),
            CountPart("looks", 1.0, np.ones((draws, looks)), 2.0),
        ),
        slots=np.arange(looks),
        chance=np.full(looks, 0.5),
        rows=np.full((draws, looks, 1, 1), tell),
        middle_mjd=np.arange(looks, dtype=float),
        at_least_days=0.5,
        at_most_days=np.inf,
        forced=np.zeros(looks, dtype=bool),
    )


def test_odds_are_those_of_the_binomial_law() -> None:
    """Precision 1 + successes; wanted 3 means at least 2 of 3 looks at chance 1/2: 4/8 (closed form)."""
    seasons = 20_000
    clear = np.random.default_rng(1).random((seasons, 3)) < 0.5
    learn, looks = simulate_odds(one_parameter_target(wanted=3.0), clear, np.random.default_rng(2))
    assert learn.odds == pytest.approx(0.5, abs=4 * learn.odds_error)
    assert looks.odds == learn.odds  # the same two looks decide both
    assert looks.mean_count == pytest.approx(1.5, abs=4 * 0.87 / np.sqrt(seasons))
    # the median of 1 + successes lies between 2 (1 look) and 3 (2 looks)
    assert 1 / np.sqrt(3) - 1e-9 <= learn.median_sd <= 1 / np.sqrt(2) + 1e-9
    assert learn.typical == learn.median_sd
    assert looks.typical == looks.mean_count


def test_goal_met_already_counts_as_met_whatever_the_weather() -> None:
    clear = np.zeros((40, 3), dtype=bool)
    learn, looks = simulate_odds(one_parameter_target(wanted=1.0), clear, np.random.default_rng(0))
    assert (learn.odds, looks.odds, looks.mean_count) == (1.0, 0.0, 0.0)


def test_the_truth_of_a_season_is_one_draw() -> None:
    """Rows teach only in a quarter of the draws: with every look clear a quarter of the seasons meet the goal."""
    part = one_parameter_target(wanted=3.0, draws=40)
    rows = part.rows.copy()
    rows[10:] = 0.0
    part = TargetPart(**{**vars(part), "rows": rows})
    learn, _ = simulate_odds(part, np.ones((400, 3), dtype=bool), np.random.default_rng(5))
    assert learn.odds == 0.25  # 400 seasons take each of 40 draws exactly ten times


def test_chunks_change_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    import planner.schedule.odds as module

    clear = np.random.default_rng(1).random((100, 3)) < 0.5
    whole = simulate_odds(one_parameter_target(wanted=3.0), clear, np.random.default_rng(2))
    monkeypatch.setattr(module, "_CHUNK_FLOATS", 10)
    parts = simulate_odds(one_parameter_target(wanted=3.0), clear, np.random.default_rng(2))
    for one, other in zip(parts, whole, strict=True):
        assert (one.odds, one.odds_error) == (other.odds, other.odds_error)
        assert one.typical == pytest.approx(other.typical, rel=1e-12)


def test_only_the_looks_taken_teach_and_targets_keep_their_columns() -> None:
    parts = [one_parameter_target(wanted=2.0), one_parameter_target(wanted=2.0)]
    clear = np.array([[True, False], [True, False]])
    first, second = simulate_all_odds(parts, [np.array([2]), np.array([0])], clear, np.random.default_rng(1))
    assert (first[0].odds, second[0].odds) == (1.0, 0.0)


def test_no_looks_leave_the_prior() -> None:
    learn, looks = simulate_odds(
        one_parameter_target(wanted=2.0), np.zeros((10, 0), bool), np.random.default_rng(1), np.empty(0, dtype=int)
    )
    assert learn.median_sd == pytest.approx(1.0 / np.sqrt(float(information(np.eye(1), np.ones(1)))))
    assert (learn.odds, looks.odds) == (0.0, 0.0)


def test_standard_error_is_near_the_binomial_one_and_never_zero() -> None:
    assert standard_error(500, 1000) == pytest.approx(0.5 / np.sqrt(1000), rel=0.01)
    assert standard_error(1000, 1000) == pytest.approx(1e-3, rel=0.1)  # 1 / seasons, the rule-of-three scale


def test_wrong_shapes_are_refused() -> None:
    part = one_parameter_target(wanted=2.0)
    with pytest.raises(DomainError, match=r"clear: got shape \(5, 2\), needs \(seasons, 3\) for the looks of invented"):
        simulate_odds(part, np.ones((5, 2), bool), np.random.default_rng(1))
    with pytest.raises(DomainError, match="looks of all targets"):
        simulate_all_odds([part], [np.array([0])], np.ones((5, 2), bool), np.random.default_rng(1))
