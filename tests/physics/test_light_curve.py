"""The course of an outburst: closed forms of plateaus, triangles and their sums."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.errors import DomainError
from planner.physics.light_curve import course, magnitudes, plateaus


def test_a_plateau_is_as_long_as_it_lasts_and_even_about_its_middle():
    one = plateaus(0.0, 1.0, 60.0)
    assert one.equivalent_days == pytest.approx(60.0, rel=1e-7)
    assert one.half_days == pytest.approx(60.0, rel=1e-7)
    assert (one.begin, one.ridge, one.mean, one.end) == pytest.approx((-30.0, 0.0, 0.0, 30.0), abs=1e-6)


def test_a_triangle_has_the_closed_form_mean_width_and_edges():
    """Rise in 10 d, fall in 30 d: area 20, centroid (a + b + c)/3 = 20/3 from the peak, half width 20."""
    one = course([-10.0, 0.0, 30.0], [0.0, 5.0, 0.0])
    assert one.equivalent_days == pytest.approx(20.0, rel=1e-12)
    assert one.mean == pytest.approx(20.0 / 3.0, rel=1e-12)
    assert one.half_days == pytest.approx(20.0, rel=1e-12)
    assert (one.begin, one.end) == pytest.approx((-9.0, 27.0), rel=1e-12)  # a tenth of the peak
    assert (one.rise_days, one.fall_days) == pytest.approx((9.0, 27.0), rel=1e-12)


def test_pulses_share_the_fluence_and_the_brightest_makes_the_ridge():
    """0.3 of the light in 30 d (height 0.01), 0.7 in 140 d (0.005): peak the first, mean 0.7 x 200 = 140 d."""
    one = plateaus([0.0, 200.0], [0.3, 0.7], [30.0, 140.0])
    assert one.ridge == pytest.approx(0.0, abs=1e-6)
    assert one.mean == pytest.approx(140.0, rel=1e-7)
    assert one.equivalent_days == pytest.approx(1.0 / 0.01, rel=1e-7)
    assert (one.begin, one.end) == pytest.approx((-15.0, 270.0), abs=1e-5)


@given(shift=st.floats(-500, 500), scale=st.floats(0.1, 10), seed=st.integers(0, 2**31))
@settings(max_examples=40, deadline=None)
def test_a_later_and_slower_outburst_has_later_and_slower_phases(shift, scale, seed):
    rng = np.random.default_rng(seed)
    days, flux = np.sort(rng.uniform(0, 100, 9)) + np.arange(9), rng.uniform(0, 1, 9)
    a, b = course(days, flux), course(days * scale + shift, 3.0 * flux)
    assert b.equivalent_days == pytest.approx(a.equivalent_days * scale, rel=1e-9)
    for phase in ("begin", "end", "ridge", "mean"):
        assert getattr(b, phase) == pytest.approx(getattr(a, phase) * scale + shift, abs=1e-6)
    assert a.begin <= a.ridge <= a.end
    assert a.begin - 100 < a.mean < a.end + 100


def test_magnitudes_are_turned_into_flux():
    one = magnitudes([0.0, 1.0, 2.0], [12.5, 10.0, 12.5])
    assert one.flux == pytest.approx([0.1, 1.0, 0.1])  # definition: 2.5 mag are a factor of ten
    assert one.at([-1.0, 0.5, 3.0]) == pytest.approx([0.0, 0.55, 0.0])


@pytest.mark.parametrize(
    ("days", "flux", "message"),
    [
        ([0.0, 0.0], [1.0, 1.0], "days: got 2, needs two or more rising days"),
        ([0.0], [1.0], "days: got 1, needs two or more"),
        ([0.0, 1.0], [0.0, 0.0], "flux: got 0.0, needs a curve with some light"),
        ([0.0, 1.0], [-1.0, 0.0], "flux: got -1.0, needs a finite number at least 0"),
    ],
)
def test_what_is_no_light_curve_is_refused(days, flux, message):
    with pytest.raises(DomainError, match=message):
        course(days, flux)
