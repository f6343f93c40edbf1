"""Widths of rings and the time after which two epochs separate."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.errors import DomainError
from planner.physics import echo
from planner.physics import echo_width as width
from planner.units import C_PC_PER_DAY, RAD_ARCSEC, YEAR_DAYS

few = settings(max_examples=40, deadline=None)


def test_widths_of_the_100_pc_sheet():
    ring = echo.sheet_ring(YEAR_DAYS, 100.0, 1e4)
    outburst = width.outburst_width_arcsec(30.0, ring.radius_arcsec, YEAR_DAYS, 1e4)
    dust = width.dust_width_arcsec(2.0, ring.radius_arcsec, YEAR_DAYS, 1e4)
    assert outburst == pytest.approx(6.648522, rel=1e-6)  # closed form, printed digits
    assert dust == pytest.approx(1.613967, rel=1e-6)
    assert width.total_width_arcsec(outburst, dust, 1.0) == pytest.approx(6.914314, rel=1e-6)
    apart = width.separation_days(30.0, dust, 1.0, 80.94576 / YEAR_DAYS)
    assert apart == pytest.approx(31.199, rel=1e-4)


def test_widths_on_both_sides_of_a_sheet_tilted_by_60_deg():
    slope = np.tan(np.deg2rad(60.0))
    ring = echo.sheet_ring(YEAR_DAYS, 100.0, 1e4, 60.0, 90.0)
    near, far = echo.radius_at_pa_arcsec(ring, [90.0, 270.0])
    for radius, m, speed, expected in ((near, slope, 14.61942, 7.593822), (far, -slope, 11.15532, 5.79445)):
        v = echo.sheet_local_speed_c(radius * 1e4 / RAD_ARCSEC, YEAR_DAYS, m)
        assert v == pytest.approx(speed, rel=1e-6)  # closed form, printed digits
        got = width.outburst_width_arcsec(30.0, radius, YEAR_DAYS, 1e4, m)
        assert got == pytest.approx(expected, rel=1e-5)


@few
@given(st.floats(10.0, 1e4), st.floats(0.1, 300.0), st.floats(-1.5, 1.5))
def test_outburst_width_is_the_distance_between_the_circles_of_both_ends(t, z0, slope):
    """Independent: the same light at delays t +- tau/2, both radii along the slope, for a short outburst."""
    tau = 1e-3 * t
    first, last = (
        echo.radius_at_pa_arcsec(echo.sheet_circle(t + s * tau / 2.0, z0, 1e4, slope, 0.0), 90.0) for s in (1.0, -1.0)
    )
    radius = echo.radius_at_pa_arcsec(echo.sheet_circle(t, z0, 1e4, slope, 0.0), 90.0)
    got = width.outburst_width_arcsec(tau, radius, t, 1e4, slope)
    assert got == pytest.approx(abs(first - last), rel=1e-5)


@few
@given(st.floats(10.0, 1e4), st.floats(0.1, 300.0), st.floats(-1.5, 1.5))
def test_dust_width_is_the_distance_between_the_circles_of_both_faces(t, z0, slope):
    dz = 1e-3 * z0
    outer, inner = (
        echo.radius_at_pa_arcsec(echo.sheet_circle(t, z0 + s * dz / 2.0, 1e4, slope, 0.0), 90.0) for s in (1, -1)
    )
    radius = echo.radius_at_pa_arcsec(echo.sheet_circle(t, z0, 1e4, slope, 0.0), 90.0)
    got = width.dust_width_arcsec(dz, radius, t, 1e4, slope)
    assert got == pytest.approx(abs(outer - inner), rel=1e-5)


@pytest.mark.parametrize("t", [100.0, 900.0, 2000.0])
def test_shell_widths_are_differences_of_shell_rings(t):
    tau, da = 1e-3 * t, 1e-4
    by_time = [echo.shell_ring(t + s * tau / 2, 1.0, 1e4).radius_arcsec for s in (1, -1)]
    by_size = [echo.shell_ring(t, 1.0 + s * da / 2, 1e4).radius_arcsec for s in (1, -1)]
    got = width.shell_outburst_width_arcsec(tau, t, 1.0, 1e4)
    assert got == pytest.approx(abs(by_time[0] - by_time[1]), rel=1e-5)
    assert width.shell_dust_width_arcsec(da, t, 1.0, 1e4) == pytest.approx(by_size[0] - by_size[1], rel=1e-5)


def test_screen_widths_are_differences_of_screen_rings():
    ring = echo.screen_ring(10.0, 1180.0, 2390.0)
    by_time = [echo.screen_ring(10.0 + s, 1180.0, 2390.0).radius_arcsec for s in (0.05, -0.05)]
    by_size = [echo.screen_ring(10.0, 1180.0 + s, 2390.0).radius_arcsec for s in (0.5, -0.5)]
    got = width.screen_outburst_width_arcsec(0.1, ring.radius_arcsec, 10.0)
    assert got == pytest.approx(by_time[0] - by_time[1], rel=2e-5)
    got = width.screen_dust_width_arcsec(1.0, ring.radius_arcsec, 1180.0, 2390.0)
    assert got == pytest.approx(by_size[1] - by_size[0], rel=2e-5)
    far = width.screen_dust_width_arcsec(1.0, ring.radius_arcsec, 1180.0)
    assert far == pytest.approx(got * (2390.0 - 1180.0) / 2390.0, rel=1e-12)


def test_thin_sheet_in_good_seeing_separates_after_the_outburst_length():
    assert width.separation_days(30.0, 0.0, 0.0, 0.2) == 30.0
    assert width.separation_days(30.0, 0.0, 1.0, -0.2) == width.separation_days(30.0, 0.0, 1.0, 0.2)


def test_dust_along_the_light_surface_is_lit_at_once():
    rho = 2.0
    ct = C_PC_PER_DAY * 100.0
    got = width.outburst_width_arcsec(10.0, rho / 1e4 * RAD_ARCSEC, 100.0, 1e4, rho / ct)
    assert got > 1e10  # slope equal to rho/ct: infinite, up to rounding of rho/ct


def test_no_ring_no_width():
    assert np.isnan(width.outburst_width_arcsec(10.0, 3.0, 0.0, 1e4))
    assert np.isnan(width.dust_width_arcsec(1.0, 3.0, -1.0, 1e4))
    assert np.isnan(width.shell_dust_width_arcsec(0.1, 3000.0, 1.0, 1e4))
    assert np.isnan(width.shell_outburst_width_arcsec(10.0, -1.0, 1.0, 1e4))
    assert np.isnan(width.screen_outburst_width_arcsec(1.0, 3.0, 0.0))


@pytest.mark.parametrize(
    ("call", "text"),
    [
        (lambda: width.outburst_width_arcsec(-1, 1, 1, 1), "duration_days: got -1.0, needs .* at least 0"),
        (lambda: width.dust_width_arcsec(-1, 1, 1, 1), "thickness_pc: got -1.0"),
        (lambda: width.dust_width_arcsec(1, 1, 1, 0), "distance_pc: got 0.0, needs .* above 0"),
        (lambda: width.shell_dust_width_arcsec(1, 1, 0, 1), "shell_radius_pc: got 0.0"),
        (lambda: width.screen_dust_width_arcsec(1, 1, 2, 1), "source_distance_pc - dust_distance_pc: got -1.0"),
        (lambda: width.total_width_arcsec(1, -2), r"width 2 \(arcsec\): got -2.0"),
        (lambda: width.separation_days(1, 1, 1, 0), r"abs\(motion_arcsec_day\): got 0.0"),
    ],
)
def test_error_names_argument_value_and_limit(call, text):
    with pytest.raises(DomainError, match=text):
        call()


@pytest.mark.parametrize(
    "call",
    [
        lambda t: width.outburst_width_arcsec(30.0, 3.0, t, 1e4, 0.1),
        lambda t: width.dust_width_arcsec(1.0, 3.0, t, 1e4),
        lambda t: width.shell_outburst_width_arcsec(30.0, t, 1.0, 1e4),
        lambda t: width.shell_dust_width_arcsec(0.1, t, 1.0, 1e4),
        lambda t: width.screen_outburst_width_arcsec(1.0, 3.0, t),
        lambda t: width.screen_dust_width_arcsec(1.0, 3.0, t),
        lambda t: width.total_width_arcsec(t, 1.0),
        lambda t: width.separation_days(t, 1.0, 1.0, 0.1),
    ],
)
def test_scalars_vectors_and_empty_arrays_broadcast(call):
    assert np.ndim(call(30.0)) == 0
    assert call(np.array([30.0, 60.0]))[1] == call(60.0)
    assert call([]).shape == (0,)
