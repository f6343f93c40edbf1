"""Information about one wanted quantity."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.prediction.information import (
    gathered,
    information,
    information_after,
    learned_directions,
    least_direction,
)

ROUND_OFF = 1e-9  # relative; matrices here have condition numbers below 1e6
seeds = st.integers(0, 2**31)


def _matrix(rng: np.random.Generator, size: int, rank: int | None = None) -> np.ndarray:
    rows = rng.normal(size=(size if rank is None else rank, size))
    return rows.T @ rows + (0.05 * np.eye(size) if rank is None else 0.0)


def test_one_parameter_gives_its_precision_over_the_squared_gradient() -> None:
    """sd of c t is |c| sd(t), so I = F / c^2: closed form."""
    assert information(np.array([[4.0]]), np.array([2.0])) == pytest.approx(1.0, rel=1e-14)


def test_straight_line_fit_gives_the_textbook_variances() -> None:
    """y = a + b t at t = -1, 0, 1, unit errors: var a = 1/3, var b = 1/2 (normal equations, closed form)."""
    design = np.array([[1.0, -1.0], [1.0, 0.0], [1.0, 1.0]])
    f = design.T @ design
    assert information(f, np.array([1.0, 0.0])) == pytest.approx(3.0, rel=1e-14)
    assert information(f, np.array([0.0, 1.0])) == pytest.approx(2.0, rel=1e-14)


def test_unmeasured_direction_has_no_information_and_a_tangent_that_says_so() -> None:
    f = np.diag([2.0, 0.0])
    assert information(f, np.array([1.0, 0.0])) == pytest.approx(2.0, rel=1e-12)
    assert information(f, np.array([1.0, 1.0])) == 0.0
    v = least_direction(f, np.array([1.0, 1.0]))
    assert v @ np.array([1.0, 1.0]) == pytest.approx(1.0, rel=1e-12)
    assert v @ f @ v == pytest.approx(0.0, abs=1e-15)


def test_zero_gradient_means_the_quantity_is_known() -> None:
    assert np.isinf(information(np.eye(2), np.zeros(2)))
    assert np.all(least_direction(np.eye(2), np.zeros(2)) == 0.0)


@given(seeds, st.integers(2, 6))
@settings(max_examples=40, deadline=None)
def test_singular_information_agrees_with_the_pseudo_inverse_where_the_gradient_is_measured(
    seed: int, size: int
) -> None:
    rng = np.random.default_rng(seed)
    f = _matrix(rng, size, rank=size - 1)
    c = f @ rng.normal(size=size)  # in the range of F
    expected = 1.0 / (c @ np.linalg.pinv(f, hermitian=True, rcond=1e-10) @ c)
    assert information(f, c) == pytest.approx(expected, rel=1e-5)  # condition numbers reach 1e8 here


@given(seeds, st.integers(1, 6), st.floats(0.0, 1.0))
@settings(max_examples=60, deadline=None)
def test_information_is_concave_and_increasing(seed: int, size: int, share: float) -> None:
    rng = np.random.default_rng(seed)
    one, two, c = _matrix(rng, size), _matrix(rng, size), rng.normal(size=size)
    mixed = information(share * one + (1 - share) * two, c)
    assert mixed >= (share * information(one, c) + (1 - share) * information(two, c)) * (1 - ROUND_OFF)
    assert information(one + two, c) >= information(one, c) * (1 - ROUND_OFF)


@given(seeds, st.integers(1, 6))
@settings(max_examples=60, deadline=None)
def test_tangent_touches_at_its_point_and_lies_above_elsewhere(seed: int, size: int) -> None:
    rng = np.random.default_rng(seed)
    here, there, c = _matrix(rng, size), _matrix(rng, size), rng.normal(size=size)
    v = least_direction(here, c)
    assert c @ v == pytest.approx(1.0, rel=1e-9)
    assert v @ here @ v == pytest.approx(information(here, c), rel=1e-7)
    assert v @ there @ v >= information(there, c) * (1 - ROUND_OFF)


@given(seeds, st.integers(2, 5), st.integers(1, 3))
@settings(max_examples=40, deadline=None)
def test_low_rank_update_equals_adding_each_slot_plainly(seed: int, size: int, observables: int) -> None:
    rng = np.random.default_rng(seed)
    draws, slots = 3, 4
    f = np.array([_matrix(rng, size) for _ in range(draws)])
    rows = rng.normal(size=(draws, slots, observables, size))
    rows[0, 1] = 0.0  # not measurable in one draw
    gradients = rng.normal(size=(2, draws, size))
    fast = information_after(f, gradients, rows)
    for g in range(2):
        for b in range(draws):
            for k in range(slots):
                plain = information(f[b] + rows[b, k].T @ rows[b, k], gradients[g, b])
                assert fast[g, b, k] == pytest.approx(float(plain), rel=1e-8)


def test_low_rank_update_starts_from_a_singular_matrix_too() -> None:
    f = np.zeros((1, 2, 2))
    rows = np.array([[[[1.0, 0.0], [0.0, 0.0]], [[1.0, 0.0], [0.0, 3.0]]]])  # one direction, then both
    after = information_after(f, np.array([[[0.0, 1.0]]]), rows)
    assert after[0, 0].tolist() == pytest.approx([0.0, 9.0], abs=1e-12)


def test_no_candidates_give_an_empty_answer() -> None:
    assert information_after(np.eye(2)[None], np.ones((1, 1, 2)), np.zeros((1, 0, 1, 2))).shape == (1, 1, 0)


def test_gathered_sums_weighted_squares_of_the_rows() -> None:
    rows = np.array([[[[1.0, 2.0]], [[0.0, 1.0]]]])  # one draw, two looks, one observable
    f = gathered(np.eye(2), rows, np.array([0.5, 0.25]))
    expected = np.eye(2) + 0.5 * np.array([[1, 2], [2, 4]]) + 0.25 * np.array([[0, 0], [0, 1]])
    assert f[0] == pytest.approx(expected)


def test_learned_directions_name_what_is_learned_best_and_not_at_all() -> None:
    """Prior sd 1 and 2; data only on the second parameter, 8 times its prior precision: gains 1 and 9."""
    prior = np.diag([1.0, 0.25])
    gains, combinations = learned_directions(prior, prior + np.diag([0.0, 2.0]))
    assert gains == pytest.approx([1.0, 9.0])
    assert abs(combinations[0, 0]) == pytest.approx(1.0)
    assert combinations[1, 0] == pytest.approx(0.0, abs=1e-12)
    assert abs(combinations[1, 1]) == pytest.approx(2.0)  # scaled to e'F_prior e = 1
