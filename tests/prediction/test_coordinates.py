"""Coordinates of a belief and their prior."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.campaign.laws import Lognormal, Normal, Uniform
from planner.prediction.coordinates import Layout, named_seed, parameters, prior_covariance, prior_draws, single

# A variance from 4096 quantile midpoints misses the far tails: 2e-4 of a normal's width (their share of the variance).
TAIL = 5e-4


def test_positive_laws_are_sampled_by_their_logarithm() -> None:
    block = single("depth_pc", "pc", Lognormal(median=24.0, sigma_fraction=0.25), nuisance=False, why="test")
    assert block.names == ("ln depth_pc",)
    mean, covariance = block.moments()
    assert mean[0] == pytest.approx(np.log(24.0), rel=1e-9)  # closed form: median of a lognormal
    assert np.sqrt(covariance[0, 0]) == pytest.approx(0.25, rel=TAIL)  # closed form: sigma of the logarithm


@given(mean=st.floats(-1e3, 1e3), sigma=st.floats(1e-3, 1e3))
@settings(max_examples=25, deadline=None)
def test_a_normal_law_keeps_its_mean_and_width(mean: float, sigma: float) -> None:
    block = single("x", "", Normal(mean=mean, sigma=sigma), nuisance=True, why="test")
    found_mean, covariance = block.moments()
    assert found_mean[0] == pytest.approx(mean, abs=1e-9 * (abs(mean) + sigma))
    assert np.sqrt(covariance[0, 0]) == pytest.approx(sigma, rel=TAIL)


def test_a_uniform_law_has_the_width_of_its_range_over_root_twelve() -> None:
    block = single("x", "", Uniform(low=-3.0, high=5.0), nuisance=False, why="test")
    assert np.sqrt(block.moments()[1][0, 0]) == pytest.approx(8.0 / np.sqrt(12.0), rel=1e-6)  # closed form


def test_draws_follow_their_laws_and_blocks_are_independent() -> None:
    blocks = [
        single("a", "", Normal(mean=2.0, sigma=3.0), nuisance=False, why="test"),
        single("b", "", Lognormal(median=5.0, sigma_fraction=0.4), nuisance=False, why="test"),
    ]
    draws = prior_draws(blocks, 4096, named_seed(1, "test"))
    # scrambled Sobol: error of a mean of 4096 draws is far below 1/sqrt(4096) = 1.6 % of a width
    assert draws.mean(axis=0) == pytest.approx([2.0, np.log(5.0)], abs=0.01)
    assert np.cov(draws, rowvar=False) == pytest.approx(prior_covariance(blocks), abs=0.1)
    assert [p.sigma for p in parameters(blocks)] == pytest.approx([3.0, 0.4], rel=TAIL)


def test_streams_are_named_so_that_one_purpose_does_not_move_another() -> None:
    blocks = [single("a", "", Normal(mean=0.0, sigma=1.0), nuisance=False, why="test")]
    plan = prior_draws(blocks, 16, named_seed(7, "Sallow", "plan"))
    again = prior_draws(blocks, 16, named_seed(7, "Sallow", "plan"))
    odds = prior_draws(blocks, 16, named_seed(7, "Sallow", "odds"))
    assert np.array_equal(plan, again)
    assert not np.any(plan == odds)


def test_a_fixed_number_takes_no_coordinate() -> None:
    from planner.campaign.laws import Fixed

    layout = Layout()
    number = layout.add_law("distance_pc", "pc", Fixed(value=6100.0))
    assert layout.size == 0
    assert number.value(np.zeros((5, 0))).tolist() == [[6100.0]] * 5
