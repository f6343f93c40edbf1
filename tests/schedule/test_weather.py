"""The chain of clear and cloudy nights."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.errors import DomainError
from planner.schedule.weather import chain, nightly_shares, simulate_weather

shares_lists = st.lists(st.floats(0.0, 1.0), min_size=1, max_size=20)


@given(shares_lists, st.floats(0.0, 0.95))
@settings(max_examples=80, deadline=None)
def test_chain_keeps_every_nights_share_exactly(shares: list[float], persistence: float) -> None:
    """p_(n-1) P(clear|clear) + q_(n-1) P(clear|cloudy) = p_n: the share is stationary whatever the correlation."""
    p = np.array(shares)
    after_clear, after_cloudy = chain(p, persistence)
    assert np.all((after_clear >= 0) & (after_clear <= 1) & (after_cloudy >= 0) & (after_cloudy <= 1))
    kept = p[:-1] * after_clear[1:] + (1 - p[:-1]) * after_cloudy[1:]
    assert kept == pytest.approx(p[1:], abs=1e-9)


def test_equal_shares_give_the_two_state_chain() -> None:
    """For p_n = p: P(clear|clear) = p + r q and P(clear|cloudy) = p - r p (closed form)."""
    after_clear, after_cloudy = chain(np.full(4, 0.6), 0.3)
    assert after_clear[1:] == pytest.approx(0.6 + 0.3 * 0.4)
    assert after_cloudy[1:] == pytest.approx(0.6 - 0.3 * 0.6)


def test_simulated_nights_have_the_shares_and_the_one_night_correlation() -> None:
    seasons = 40_000
    shares = np.concatenate((np.full(6, 0.7), np.full(6, 0.4)))
    clear = simulate_weather(shares, 0.35, seasons, np.random.default_rng(1))
    # counting error of a share 0.5/200 = 0.0025 and of a correlation 1/200 = 0.005: four of each
    assert clear.mean(axis=0) == pytest.approx(shares, abs=0.01)
    for n in range(1, 12):
        lag_one = np.corrcoef(clear[:, n - 1], clear[:, n])[0, 1]
        assert lag_one == pytest.approx(0.35, abs=0.02)


def test_correlation_gives_way_where_shares_jump() -> None:
    """From 0.95 clear to 0.1 clear a correlation of 0.9 cannot be; the share is kept all the same."""
    clear = simulate_weather(np.array([0.95, 0.1]), 0.9, 40_000, np.random.default_rng(2))
    assert clear[:, 1].mean() == pytest.approx(0.1, abs=0.006)
    assert np.corrcoef(clear[:, 0], clear[:, 1])[0, 1] < 0.3


def test_always_clear_and_never_clear_sites_are_what_they_say() -> None:
    rng = np.random.default_rng(3)
    assert simulate_weather(np.ones(5), 0.5, 10, rng).all()
    assert not simulate_weather(np.zeros(5), 0.5, 10, rng).any()
    assert simulate_weather(np.empty(0), 0.5, 10, rng).shape == (10, 0)


def test_months_become_nights() -> None:
    months = np.linspace(0.1, 0.65, 12)
    assert nightly_shares(months, np.array([1, 1, 12])) == pytest.approx([0.1, 0.1, 0.65])


def test_impossible_shares_are_refused_with_value_and_limit() -> None:
    with pytest.raises(DomainError, match=r"clear: got 1.2, needs a share from 0 to 1"):
        chain(np.array([0.5, 1.2]), 0.2)
    with pytest.raises(DomainError, match=r"persistence: got 1.0, needs 0 <= persistence < 1"):
        chain(np.array([0.5]), 1.0)
    with pytest.raises(DomainError, match=r"month_shares: got 3 values, needs twelve"):
        nightly_shares([0.5] * 3, np.array([1]))
