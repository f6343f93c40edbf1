"""What the air costs a station: opacity and the warmth of the air."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.errors import DomainError
from planner.instruments.interferometer import AIR_K, sefd_factor


@pytest.mark.parametrize(
    # airmass 1/sin(elevation) to two decimals, worked out by another hand
    ("elevation", "airmass"),
    [(10.0, 5.76), (15.0, 3.86), (20.0, 2.92), (30.0, 2.00)],
)
def test_light_is_lost_along_the_airmass(elevation: float, airmass: float) -> None:
    tau = 0.1
    cold = sefd_factor(elevation, tau, 1e12)  # a receiver so warm that the air's own emission does not matter
    assert 1.0 + np.log(cold) / tau == pytest.approx(airmass, abs=0.005)


def test_low_elevation_costs_a_factor_of_two_and_more_at_22_ghz() -> None:
    # "corrections of factor two or more" at low elevation (MERLIN user guide, not opened here);
    # a wet sky at 22 GHz: tau 0.15, T_sys 60 K
    assert sefd_factor(10.0, 0.15, 60.0) > 2.0


def test_without_opacity_the_factor_is_one_to_the_last_bit() -> None:
    assert np.all(sefd_factor(np.linspace(0.5, 90.0, 200), 0.0, 80.0) == 1.0)
    assert sefd_factor(90.0, 0.3, 80.0) == pytest.approx(1.0, abs=1e-12)


@settings(max_examples=40, deadline=None)
@given(st.floats(5.0, 89.0), st.floats(0.001, 1.0), st.floats(20.0, 500.0))
def test_the_system_is_receiver_and_air_seen_through_the_air(elevation: float, tau: float, system: float) -> None:
    """Plain twin: noise power T_rx + T_air (1 - e^-tau X) over signal e^-tau X, against the same at the zenith."""
    receiver = system - AIR_K * (1 - np.exp(-tau))  # may be below 0 where the air alone would be warmer than told

    def sefd(x: float) -> float:
        return float((receiver + AIR_K * (1 - np.exp(-tau * x))) / np.exp(-tau * x))

    assert sefd_factor(elevation, tau, system) == pytest.approx(
        sefd(1 / np.sin(np.radians(elevation))) / sefd(1.0), rel=1e-9
    )


def test_the_factor_rises_toward_the_horizon_and_has_no_end_there() -> None:
    factor = sefd_factor(np.array([90.0, 45.0, 10.0, 1.0, 0.0, -5.0]), 0.05, 80.0)
    assert np.all(np.diff(factor[:4]) > 0)
    assert np.all(np.isinf(factor[4:]))
    assert sefd_factor(np.zeros((0,)), 0.1, 80.0).shape == (0,)


def test_negative_opacity_is_refused() -> None:
    with pytest.raises(DomainError, match=r"zenith_opacity: got -0\.1, needs a value of 0 or more"):
        sefd_factor(45.0, -0.1, 80.0)
