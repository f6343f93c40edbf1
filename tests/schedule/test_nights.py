"""Sequencing the looks of a telescope's night."""

from __future__ import annotations

from itertools import pairwise, permutations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.schedule import nights, orders
from planner.schedule.nights import (
    Sequencer,
    _by_constraints,
    least_part_minutes,
    overlap_groups,
    sequence,
    violated_windows,
)
from planner.schedule.orders import TooManyOrders, earliest_deadline_order, earliest_order
from planner.schedule.problem import Problem

BASE = 60000.0


def night(
    looks: list[tuple[float, float, float]], telescopes: list[int] | None = None, best: list[float] | None = None
) -> Problem:
    """Looks as (earliest, latest, length), all in minutes after the base."""
    table = np.array(looks, dtype=float).reshape(-1, 3)
    count = table.shape[0]
    return Problem(
        targets=(),
        owner=np.zeros(count, dtype=np.int64),
        allocation=np.zeros(count, dtype=np.int64),
        telescope=np.array(telescopes if telescopes is not None else [0] * count, dtype=np.int64),
        night=np.zeros(count, dtype=np.int64),
        minutes=table[:, 2].copy(),
        charge=table[:, 2].copy(),
        earliest_mjd=BASE + table[:, 0] / 1440,
        latest_mjd=BASE + table[:, 1] / 1440,
        limits=np.array([1e9]),
        best_mjd=None if best is None else BASE + np.array(best) / 1440,
    )


def some_order_works(looks: list[tuple[float, float, float]]) -> bool:
    """Slow twin: every order, each look as early as it can be."""
    for order in permutations(looks):
        clock = -np.inf
        for earliest, latest, length in order:
            clock = max(clock, earliest) + length
            if clock > latest + 1e-9:
                break
        else:
            return True
    return False


look = st.tuples(st.integers(0, 200), st.integers(20, 120), st.integers(0, 150)).map(
    lambda t: (float(t[0]), float(t[0] + t[1] + t[2]), float(t[1]))
)


@given(st.lists(look, min_size=1, max_size=5))
@settings(max_examples=80, deadline=None)
def test_sequencing_finds_an_order_exactly_when_one_exists(looks: list[tuple[float, float, float]]) -> None:
    problem = night(looks)
    starts = sequence(problem, range(len(looks)))
    assert (starts is not None) == some_order_works(looks)
    if starts is not None:
        _keeps_every_limit(problem, starts)


@given(st.lists(look, min_size=2, max_size=4))
@settings(max_examples=15, deadline=None)
def test_constraint_search_agrees_with_the_order_search(looks: list[tuple[float, float, float]]) -> None:
    """The way taken for nights with too many orders finds what the exact search finds (whole minutes)."""
    table = 60.0 * np.array(looks)
    found = _by_constraints(table[:, 0], table[:, 1], table[:, 2], None, None, 60.0)
    assert (found is not None) == (earliest_order(table[:, 0], table[:, 1], table[:, 2]) is not None)


def test_a_season_long_chain_of_overlapping_windows_is_searched_at_once() -> None:
    """60 looks of 3 h, each day's two windows overlapping the next: 2^60 sets, but few that can be reached."""
    looks = [(720.0 * i, 720.0 * i + 1000.0, 180.0) for i in range(60)]
    starts = sequence(night(looks), range(60), comfort=False)
    assert starts is not None
    _keeps_every_limit(night(looks), starts)


def test_a_search_that_grows_too_large_says_so(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(orders, "STATES", 3)
    with pytest.raises(TooManyOrders):
        earliest_order(np.zeros(5), np.full(5, 1000.0), np.full(5, 10.0))
    # only an order against the deadlines works here, so the night falls to CP-SAT, which finds it
    looks = [(0.0, 300.0, 100.0), (10.0, 60.0, 50.0), (0.0, 400.0, 60.0), (0.0, 450.0, 60.0), (0.0, 500.0, 60.0)]
    starts = sequence(night(looks), range(5), comfort=False)
    assert starts is not None
    _keeps_every_limit(night(looks), starts)
    assert earliest_deadline_order(*(60.0 * np.array(looks)).T) is None


def test_a_night_that_nobody_can_decide_is_refused_and_remembered(monkeypatch: pytest.MonkeyPatch) -> None:
    looks = [(0.0, 300.0, 100.0), (10.0, 60.0, 50.0), (0.0, 400.0, 60.0)]
    monkeypatch.setattr(orders, "STATES", 0)
    monkeypatch.setattr(nights, "_SURE_EFFORT", 0.0)
    sequencer = Sequencer(night(looks))
    assert sequencer.fit(range(3)).failing == ((0, 1, 2),)
    assert sequencer.undecided


@given(st.lists(look, min_size=2, max_size=5))
@settings(max_examples=40, deadline=None)
def test_a_failing_set_fails_and_every_smaller_one_fits(looks: list[tuple[float, float, float]]) -> None:
    fit = Sequencer(night(looks)).fit(range(len(looks)))
    for group in fit.failing:
        assert not some_order_works([looks[k] for k in group])
        for left_out in group:
            assert some_order_works([looks[k] for k in group if k != left_out])


@given(st.lists(look, min_size=1, max_size=5))
@settings(max_examples=40, deadline=None)
def test_window_rows_never_cut_a_night_that_fits(looks: list[tuple[float, float, float]]) -> None:
    problem = night(looks)
    if some_order_works(looks):
        every = np.arange(len(looks))
        assert violated_windows(problem, every, np.ones(len(looks)), 0.01) == []


def test_window_row_catches_late_risers_that_minutes_alone_accept() -> None:
    """Three looks of 60 min that only rise 100 min before the end of an 8 h night."""
    problem = night([(380, 480, 60)] * 3 + [(0, 480, 60)])
    rows = violated_windows(problem, np.arange(4), np.ones(4), 0.01)
    assert len(rows) == 1
    assert rows[0].slots.tolist() == [0, 1, 2]
    assert rows[0].part == pytest.approx([60, 60, 60])
    assert rows[0].limit == pytest.approx(100.0, abs=0.01)


def test_least_part_inside_a_window_counts_both_ways_of_leaving_it() -> None:
    """Look of 60 min in [0, 100]; window [30, 70]: started at 0 it keeps 30 inside, ended at 100 it keeps 30."""
    problem = night([(0, 100, 60)])
    part = least_part_minutes(problem, np.array([0]), BASE + 30 / 1440, BASE + 70 / 1440)
    assert part == pytest.approx([30.0], abs=1e-6)


def test_looks_collide_by_time_whatever_the_label_of_their_night() -> None:
    """An array: neighbouring labels, times that overlap and leave room for one only."""
    problem = night([(0, 300, 200), (100, 350, 200)])
    labelled = Problem(**{**vars(problem), "night": np.array([4, 5], dtype=np.int64)})
    assert Sequencer(labelled).fit([0, 1]).failing == ((0, 1),)


def test_telescopes_do_not_share_their_time() -> None:
    problem = night([(0, 100, 80), (0, 100, 80)], telescopes=[0, 1])
    fit = Sequencer(problem).fit([0, 1])
    assert fit.failing == ()
    assert sorted(fit.start_mjd) == [0, 1]


def test_fixed_looks_keep_their_start_and_may_touch() -> None:
    """Three starts with odd seconds, end to start, and one free look that must go after them."""
    problem = night([(10.01, 40.01, 30), (40.01, 75.51, 35.5), (0, 160, 60)])
    starts = sequence(problem, [0, 1, 2])
    assert starts is not None
    assert starts[0] == pytest.approx(BASE + 10.01 / 1440, abs=1e-9)
    assert starts[1] == pytest.approx(BASE + 40.01 / 1440, abs=1e-9)
    assert starts[2] >= BASE + 75.51 / 1440 - 1e-7


def test_looks_stand_at_their_best_moment_when_nothing_is_in_the_way() -> None:
    problem = night([(0, 300, 60), (0, 300, 60)], best=[100.0, 130.0])
    starts = sequence(problem, [0, 1])
    assert starts is not None
    middles = sorted((starts[k] - BASE) * 1440 + 30 for k in (0, 1))
    assert middles[1] - middles[0] >= 60 - 1e-6
    # 30 min too close: the least total displacement of the two middles is 30 min
    assert abs(middles[0] - 100) + abs(middles[1] - 130) == pytest.approx(30.0, abs=0.1)


def test_groups_split_where_nothing_overlaps() -> None:
    early, late = np.array([0.0, 2.0, 1.0, 5.0]), np.array([1.0, 3.0, 2.5, 6.0])
    assert [sorted(g.tolist()) for g in overlap_groups(early, late)] == [[0], [1, 2], [3]]
    assert overlap_groups(np.empty(0), np.empty(0)) == []


def test_no_looks_need_no_time() -> None:
    assert sequence(night([]), []) == {}


def _keeps_every_limit(problem: Problem, starts: dict[int, float]) -> None:
    ends = {k: s + problem.minutes[k] / 1440 for k, s in starts.items()}
    order = sorted(starts, key=lambda k: starts[k])
    for k in order:
        assert starts[k] >= problem.earliest_mjd[k] - 1e-7
        assert ends[k] <= problem.latest_mjd[k] + 1e-7
    for before, after in pairwise(order):
        assert starts[after] >= ends[before] - 1e-6  # 0.1 s; starts are whole seconds
