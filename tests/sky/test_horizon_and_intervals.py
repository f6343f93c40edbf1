"""Horizon by azimuth, and intervals from samples."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.sky import intervals as iv
from planner.sky.horizon import horizon_deg


def test_horizon_is_linear_between_points_and_closes_through_north() -> None:
    points = [(90.0, 10.0), (270.0, 30.0)]
    got = horizon_deg(points, [90.0, 180.0, 270.0, 0.0, 315.0, 45.0])
    assert got.tolist() == pytest.approx([10.0, 20.0, 30.0, 20.0, 25.0, 15.0])


def test_no_points_is_no_horizon() -> None:
    assert horizon_deg((), np.zeros((2, 3))).tolist() == [[-90.0] * 3] * 2
    assert float(horizon_deg([(10.0, 5.0)], 200.0)) == 5.0


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 2**31))
def test_intervals_of_two_limits_match_a_fine_grid(seed: int) -> None:
    """A plain twin: both limits looked at 500 times a step."""
    rng = np.random.default_rng(seed)
    count, n = 60, 3
    t = np.arange(count)
    fine = np.linspace(0, count - 1, (count - 1) * 500 + 1)
    periods, phases, level = rng.uniform(15, 60, n), rng.uniform(0, 6.28, n), rng.uniform(-0.8, 0.8)
    shared = rng.uniform(20, 50)
    first = iv.limit("a", lambda s: s - level, np.sin(2 * np.pi * t / periods[:, None] + phases[:, None]))
    second = iv.limit("b", lambda s: 0.3 - s, np.cos(2 * np.pi * t / shared)[None, :])
    row, start, end = iv.allowed_intervals([first, second], n, count)
    for r in range(n):
        ok = (np.sin(2 * np.pi * fine / periods[r] + phases[r]) > level) & (np.cos(2 * np.pi * fine / shared) < 0.3)
        mine = np.zeros(fine.size, dtype=bool)
        for a, b in zip(start[row == r], end[row == r], strict=True):
            mine |= (fine >= a) & (fine <= b)
        # a gap or piece shorter than one step may be missed; elsewhere the edges agree to 0.01 step (the cubic)
        edges = np.flatnonzero(np.diff(ok.astype(int)) != 0)
        if edges.size > 1 and np.diff(edges).min() < 500:
            continue
        near = np.zeros(fine.size, dtype=bool)
        for e in edges:
            near[max(0, e - 10) : e + 11] = True
        assert (mine == ok)[~near].all()


def test_everything_allowed_and_nothing_allowed() -> None:
    yes = iv.limit("yes", lambda s: s, np.ones((2, 10)))
    no = iv.limit("no", lambda s: s, -np.ones((1, 10)))
    row, start, end = iv.allowed_intervals([yes], 2, 10)
    assert (row.tolist(), start.tolist(), end.tolist()) == ([0, 1], [0.0, 0.0], [9.0, 9.0])
    assert iv.allowed_intervals([yes, no], 2, 10)[0].size == 0


def test_a_pass_between_two_samples_is_found_by_its_extremum() -> None:
    # 1 - 0.1 (x - 4.5)^2 above 0.98 for |x - 4.5| < sqrt(0.2) = 0.4472: no sample (4, 5) reaches it
    f = 1 - 0.1 * (np.arange(10, dtype=np.float64) - 4.5) ** 2
    row, start, end = iv.hidden_extrema(f[None, :], np.full((1, 10), 0.98), passes=True)
    assert row.tolist() == [0]
    assert (start[0], end[0]) == pytest.approx((4.5 - 0.2**0.5, 4.5 + 0.2**0.5))
    assert iv.hidden_extrema(f[None, :], np.full((1, 10), 1.01), passes=True)[0].size == 0
    dips = iv.hidden_extrema(-f[None, :], np.full((1, 10), -0.98), passes=False)
    assert (dips[1][0], dips[2][0]) == pytest.approx((start[0], end[0]))


def test_a_short_pass_is_added_only_where_the_other_limits_hold() -> None:
    empty = (np.zeros(0, dtype=np.int64), np.zeros(0), np.zeros(0))
    extra = (np.array([0, 1]), np.array([4.1, 4.1]), np.array([4.9, 4.9]))
    other = np.ones((2, 10))
    other[1, 5] = -1.0
    row, start, end = iv.add_passes(empty, extra, [iv.limit("other", lambda s: s, other)])
    assert (row.tolist(), start.tolist(), end.tolist()) == ([0], [4.1], [4.9])


def test_dips_cut_one_interval_into_pieces() -> None:
    found = (np.array([0, 1]), np.array([0.0, 0.0]), np.array([10.0, 10.0]))
    dips = (np.array([0, 0]), np.array([2.2, 6.2]), np.array([2.6, 6.6]))
    row, start, end = iv.remove_dips(found, dips)
    assert row.tolist() == [0, 0, 0, 1]
    assert start.tolist() == [0.0, 2.6, 6.6, 0.0]
    assert end.tolist() == [2.2, 6.2, 10.0, 10.0]


@settings(max_examples=60, deadline=None)
@given(
    st.lists(st.tuples(st.integers(0, 50), st.integers(1, 30)), max_size=8),
    st.lists(st.integers(0, 60), max_size=10, unique=True),
)
def test_splitting_keeps_the_time_and_no_piece_holds_a_cut(spans: list[tuple[int, int]], cut_list: list[int]) -> None:
    start = np.array([a for a, _ in spans], dtype=float)
    end = np.array([a + b for a, b in spans], dtype=float)
    cuts = np.sort(np.array(cut_list, dtype=float))
    row, a, b = iv.split(np.arange(start.size), start, end, cuts)
    assert (b > a).all()
    for r in range(start.size):
        assert (b - a)[row == r].sum() == pytest.approx(end[r] - start[r])
    for cut in cuts:
        assert not ((a < cut) & (cut < b)).any()


def test_midpoints_average_the_margins_of_both_ends() -> None:
    assert iv.midpoint_ok(np.array([[1.0, -0.5, -2.0, 2.5]])).tolist() == [[True, False, True]]
