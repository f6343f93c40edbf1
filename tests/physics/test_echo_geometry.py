"""Rings on sheets, shells and screens: closed-form values, properties, and where no ring is.

Expected values marked "closed form" were worked out from c t = r - z with 1 pc = 3.2615638 ly to the digits
printed; the tolerance is that of the printed digits (1e-6 relative unless stated).
"""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.errors import DomainError
from planner.physics import echo
from planner.units import C_PC_PER_DAY, LY_PC, RAD_ARCSEC, YEAR_DAYS

few = settings(max_examples=60, deadline=None)
delays = st.floats(1.0, 365_250.0)
depths = st.floats(1e-6, 1e6)
distances = st.floats(1e3, 1e9)
slopes = st.floats(-3.0, 3.0)
angles = st.floats(0.0, 360.0)


def close(value, expected, rel=1e-6):
    return pytest.approx(expected, rel=rel) == value


# ------------------------------------------------------------------ closed forms


def test_perpendicular_sheet_at_100_pc_after_a_year():
    ring = echo.sheet_ring(YEAR_DAYS, 100.0, 1e4)
    assert close(ring.radius_arcsec, 161.6441)  # closed form
    assert close(ring.radius_arcsec * 1e4 / RAD_ARCSEC, 7.836727)  # pc
    assert close(ring.speed_c, 12.79955)
    assert close(ring.scattering_deg, 4.480955)
    assert close(ring.speed_c * C_PC_PER_DAY * YEAR_DAYS / 1e4 * RAD_ARCSEC, 80.94576)  # arcsec/yr
    assert ring.centre_east_arcsec == 0.0
    assert ring.centre_north_arcsec == 0.0


def test_radius_gives_back_depth_and_delay():
    radius = echo.sheet_ring(YEAR_DAYS, 100.0, 1e4).radius_arcsec
    assert close(echo.delay_at_radius_days(radius, 100.0, 1e4), YEAR_DAYS, 1e-9)
    assert close(echo.depth_from_radius_pc(radius, YEAR_DAYS, 1e4), 100.0, 1e-9)


def test_sheet_at_finite_distance_from_the_observer():
    ring = echo.near_sheet_ring(YEAR_DAYS, 100.0, 1e4)
    assert close(ring.radius_arcsec, 162.4559)  # closed form
    assert close(np.tan(ring.radius_arcsec / RAD_ARCSEC) * 9900.0, 7.797326)  # pc on the sheet


@pytest.mark.parametrize(
    ("tilt", "depth", "delay_pc", "shift", "radius", "near", "far", "near_speed", "far_speed"),
    [
        # in units of the depth's own parsec at distance RAD_ARCSEC parsec (1 pc = 1 arcsec); closed form
        (45.0, 10.0, 5.0, 5.0, 12.247449, 17.247449, 7.247449, 2.632993, 0.632993),
    ],
)
def test_sheet_tilted_by_45_deg_has_a_far_side_slower_than_light(
    tilt, depth, delay_pc, shift, radius, near, far, near_speed, far_speed
):
    days = delay_pc / C_PC_PER_DAY
    ring = echo.sheet_ring(days, depth, RAD_ARCSEC, tilt, 90.0)
    assert close(ring.centre_east_arcsec, shift)
    assert abs(ring.centre_north_arcsec) < 1e-14
    assert close(ring.radius_arcsec, radius)
    assert close(echo.radius_at_pa_arcsec(ring, 90.0), near)
    assert close(echo.radius_at_pa_arcsec(ring, 270.0), far)
    assert close(echo.sheet_local_speed_c(near, days, 1.0), near_speed)
    assert close(echo.sheet_local_speed_c(far, days, -1.0), far_speed)
    assert close(ring.speed_c, (near_speed + far_speed) / 2.0)


def test_sheet_tilted_by_30_deg():
    ring = echo.sheet_ring(YEAR_DAYS, 100.0, 1e4, 30.0, 0.0)
    assert close(ring.centre_north_arcsec, 3.651225)  # closed form, as are the next five
    assert close(ring.radius_arcsec, 161.6853)
    near, far = echo.radius_at_pa_arcsec(ring, [0.0, 180.0])
    assert close(near, 165.3365)
    assert close(far, 158.0341)
    slope = np.tan(np.pi / 6.0)  # also the speed of the centre in c, 0.5773503
    to_pc = 1e4 / RAD_ARCSEC
    assert close(echo.sheet_local_speed_c(near * to_pc, YEAR_DAYS, slope), 13.38668)
    assert close(echo.sheet_local_speed_c(far * to_pc, YEAR_DAYS, -slope), 12.23198)
    later = echo.sheet_ring(2.0 * YEAR_DAYS, 100.0, 1e4, 30.0, 0.0)
    moved_pc = (later.centre_north_arcsec - ring.centre_north_arcsec) * to_pc
    assert close(moved_pc / (C_PC_PER_DAY * YEAR_DAYS), 0.5773503)
    # scattering is that of the untilted sheet
    assert close(ring.scattering_deg, 4.480955)


def test_shell_of_one_parsec():
    years = np.array([0.5, 1.0, 3.0, 5.0, 6.0])
    ring = echo.shell_ring(years * YEAR_DAYS, 1.0, RAD_ARCSEC)
    # closed form
    np.testing.assert_allclose(ring.radius_arcsec, [0.5320717, 0.7205542, 0.9967791, 0.8461109, 0.5431922], rtol=1e-6)
    np.testing.assert_allclose(ring.speed_c, [1.591326, 0.9623129, 0.08045495, -0.6299493, -1.545693], rtol=1e-6)


def test_shell_ring_slows_through_c_stops_and_vanishes():
    def at(years):
        return echo.shell_ring(years * YEAR_DAYS, 1.0, 1e4)

    assert close(at(0.9552899).speed_c, 1.0)  # closed form: a(1 - 1/sqrt 2)
    assert abs(at(3.2615638).speed_c) < 1e-7  # largest when ct = a
    assert at(3.2615638).radius_arcsec > max(at(3.2).radius_arcsec, at(3.3).radius_arcsec)
    assert at(6.5231).radius_arcsec > 0.0
    assert np.isnan(at(6.5232).radius_arcsec)  # gone after 6.5231276 yr


def test_screen_between_observer_and_source():
    ring = echo.screen_ring(10.0, 1180.0, 2390.0)
    assert close(ring.radius_arcsec, 553.5868, 2e-7)  # closed form; small angles would give 553.5856
    ct = 10.0 * C_PC_PER_DAY
    small = np.sqrt(2.0 * ct * (2390.0 - 1180.0) / (2390.0 * 1180.0)) * RAD_ARCSEC
    assert close(small, 553.5856, 2e-7)
    assert close(ring.scattering_deg, 0.303735, 2e-6)
    # printed with small angles: theta/(2t), d theta/(2ct)
    assert close(ring.radius_arcsec / 20.0, 27.67928, 4e-6)
    assert close(ring.speed_c, 188.637, 1e-5)
    assert close(echo.dust_distance_pc(ring.radius_arcsec, 10.0, 2390.0), 1180.0, 1e-10)
    assert close(echo.source_distance_pc(1180.0, ring.radius_arcsec, 10.0), 2390.0, 1e-9)


def test_screen_before_a_source_far_outside_the_galaxy():
    ring = echo.screen_ring(1.0, 500.0)
    assert close(ring.radius_arcsec, 377.9611)  # closed form
    assert close(ring.speed_c, 545.730, 2e-6)
    assert close(ring.radius_arcsec / 48.0, 7.874189)  # arcsec per hour
    assert close(ring.scattering_deg * 3600.0, ring.radius_arcsec, 1e-12)
    assert close(echo.dust_distance_pc(ring.radius_arcsec, 1.0), 500.0, 1e-10)


def test_dust_behind_the_source_shows_late():
    ring = echo.sheet_ring(YEAR_DAYS, -0.1, 1e4)
    assert close(ring.radius_arcsec * 1e4 / RAD_ARCSEC, 0.1807875)  # closed form
    assert close(ring.scattering_deg, 118.9485)
    assert close(ring.speed_c, 1.142786)
    first = echo.delay_at_radius_days(0.0, -0.1, 1e4)
    assert close(first, 0.6523128 * YEAR_DAYS)
    assert np.isnan(echo.sheet_ring(first * 0.999999, -0.1, 1e4).radius_arcsec)
    assert echo.sheet_ring(first * 1.000001, -0.1, 1e4).radius_arcsec > 0.0


def test_dust_beside_the_source_moves_at_c():
    ring = echo.sheet_ring(np.array([1.0, 1e3, 3e5]), 0.0, 1e4)
    np.testing.assert_allclose(ring.speed_c, 1.0, rtol=1e-15)
    np.testing.assert_allclose(ring.scattering_deg, 90.0, rtol=1e-15)
    rate = ring.radius_arcsec / (np.array([1.0, 1e3, 3e5]) / YEAR_DAYS)
    np.testing.assert_allclose(rate, 6.324108, rtol=1e-6)  # arcsec/yr, closed form


def test_age_from_radius_and_motion():
    # closed form: rho 28.72281 ly, speed 1.218544 c -> 15.00 yr
    rho_pc, beta = 28.72281 * LY_PC, 1.218544
    rate = beta * C_PC_PER_DAY * YEAR_DAYS / 1e4 * RAD_ARCSEC
    age = echo.age_from_motion_days(rho_pc / 1e4 * RAD_ARCSEC, rate, 1e4) / YEAR_DAYS
    assert close(age, 15.0, 1e-5)
    naive = 28.72281 / (2.0 * beta)
    assert naive == pytest.approx(11.79, abs=0.005)  # far-sheet rule: a fifth too short
    assert abs(naive / age - 1.0) > 0.2


# ------------------------------------------------------------------ properties


@few
@given(delays, st.floats(-50.0, 1e4), st.floats(1e5, 1e7), slopes, slopes, angles)
def test_every_point_of_the_circle_lies_on_sheet_and_paraboloid(t, z0, big, me, mn, pa):
    ring = echo.sheet_circle(t, z0, big, me, mn)
    if np.isnan(ring[0]):
        assert 2.0 * z0 + C_PC_PER_DAY * t * (1.0 + me**2 + mn**2) < 0.0
        return
    phi, to_pc = np.deg2rad(pa), big / RAD_ARCSEC
    x = (ring[1] + ring[0] * np.sin(phi)) * to_pc
    y = (ring[2] + ring[0] * np.cos(phi)) * to_pc
    z = z0 + me * x + mn * y
    ct = C_PC_PER_DAY * t
    # r - z = ct  <=>  x^2 + y^2 = ct (2 z + ct), no difference of large numbers on the left
    scale = (abs(x) + abs(y)) ** 2 + ct * (abs(z0) + ct + abs(me * x) + abs(mn * y)) + ct**2
    assert abs(x**2 + y**2 - ct * (2.0 * z + ct)) <= 1e-13 * scale * (1.0 + me**2 + mn**2)


@few
@given(delays, st.floats(1.0, 1e4), st.floats(1.0, 1e4))
def test_screen_ring_lies_on_the_ellipsoid(t, d, big):
    ring = echo.screen_ring(t, d, big)
    ct = C_PC_PER_DAY * t
    if np.isnan(ring.radius_arcsec):
        assert 2.0 * (big - d) + ct < 0.0 or ct > 2.0 * d
        return
    theta = ring.radius_arcsec / RAD_ARCSEC
    r = np.hypot(big - d * np.cos(theta), d * np.sin(theta))
    assert d + r - big == pytest.approx(ct, rel=1e-9, abs=1e-12 * (d + big))


@few
@given(delays, st.floats(-10.0, 1e4), distances, slopes, st.floats(0.0, 360.0), st.floats(0.01, 100.0))
def test_scaling_all_lengths_and_times_changes_no_angle(t, z0, big, slope, pa, k):
    tilt = np.rad2deg(np.arctan(slope))
    one = echo.sheet_ring(t, z0, big, tilt, pa)
    two = echo.sheet_ring(t * k, z0 * k, big * k, tilt, pa)
    for name in ("radius_arcsec", "centre_east_arcsec", "centre_north_arcsec", "speed_c", "scattering_deg"):
        a, b = getattr(one, name), getattr(two, name)
        assert np.isnan(a) == np.isnan(b) or abs(2.0 * z0 + C_PC_PER_DAY * t) < 1e-9 * abs(z0)
        if not np.isnan(a):
            assert a == pytest.approx(b, rel=1e-7, abs=1e-12)


def test_screen_close_to_a_far_source_becomes_a_sheet():
    sheet = echo.sheet_ring(YEAR_DAYS, 100.0, 1e9)
    d = np.hypot(1e9 - 100.0, 7.836727)
    screen = echo.screen_ring(YEAR_DAYS, d, 1e9)
    # the depth is a difference of distances: 1e9 keeps it to 1e-7 pc of 100
    assert close(screen.radius_arcsec, sheet.radius_arcsec, 1e-6)
    assert close(screen.scattering_deg, sheet.scattering_deg, 1e-6)
    near = echo.near_sheet_ring(YEAR_DAYS, 100.0, 1e9)
    for name in ("radius_arcsec", "speed_c", "scattering_deg"):
        assert close(getattr(near, name), getattr(sheet, name), 2e-7)


def test_screen_of_a_source_moving_to_infinity():
    far = echo.screen_ring(5.0, 700.0, 1e14)
    infinite = echo.screen_ring(5.0, 700.0)
    for name in ("radius_arcsec", "speed_c", "scattering_deg"):
        assert close(getattr(far, name), getattr(infinite, name), 1e-10)


def test_tilt_to_zero_is_continuous():
    straight = echo.sheet_ring(300.0, 20.0, 6e3)
    for tilt in (1e-3, 1e-6, 1e-9):
        tilted = echo.sheet_ring(300.0, 20.0, 6e3, tilt, 33.0)
        slope = np.tan(np.deg2rad(tilt))
        assert tilted.radius_arcsec == pytest.approx(straight.radius_arcsec, rel=slope**2 + 1e-15)
        assert np.hypot(tilted.centre_east_arcsec, tilted.centre_north_arcsec) == pytest.approx(
            slope * C_PC_PER_DAY * 300.0 / 6e3 * RAD_ARCSEC, rel=1e-12
        )


@few
@given(delays, depths, distances)
def test_radius_depth_delay_round_trip(t, z0, big):
    ring = echo.sheet_ring(t, z0, big)
    assert echo.delay_at_radius_days(ring.radius_arcsec, z0, big) == pytest.approx(t, rel=1e-13)
    # worst condition number: (rho^2 + ct^2)/(rho^2 - ct^2), which is 1 + ct/z
    worst = 1.0 + C_PC_PER_DAY * t / z0
    got = echo.depth_from_radius_pc(ring.radius_arcsec, t, big)
    assert got == pytest.approx(z0, rel=16.0 * np.finfo(float).eps * worst)


@few
@given(st.floats(1.0, 1e4), st.floats(1e-3, 1e4), distances)
def test_age_of_an_untilted_sheet_is_recovered(t, z0, big):
    ring = echo.sheet_ring(t, z0, big)
    rate = ring.speed_c * C_PC_PER_DAY * YEAR_DAYS / big * RAD_ARCSEC
    b2 = ring.speed_c**2
    # condition by the speed: b^2/(b^2 - 1) at most, through sqrt(b^2 - 1)
    tolerance = max(1e-12, 32.0 * np.finfo(float).eps * b2 / (b2 - 1.0)) if b2 > 1.0 else np.inf
    assert np.isnan(echo.age_from_motion_days(ring.radius_arcsec, 0.999 / ring.speed_c * rate, big))
    if tolerance < 1e-3:
        assert echo.age_from_motion_days(ring.radius_arcsec, rate, big) == pytest.approx(t, rel=tolerance)


@few
@given(delays, depths, distances)
def test_untilted_sheet_is_never_slower_than_light_and_always_grows(t, z0, big):
    now, later = echo.sheet_ring(t, z0, big), echo.sheet_ring(t * 1.01, z0, big)
    assert now.speed_c >= 1.0 - 1e-15
    assert later.radius_arcsec > now.radius_arcsec
    assert later.speed_c <= now.speed_c * (1.0 + 1e-15)
    assert later.scattering_deg > now.scattering_deg
    assert now.speed_c * np.sin(np.deg2rad(now.scattering_deg)) == pytest.approx(1.0, rel=1e-12)


@pytest.mark.parametrize("days", [30.0, 700.0, 2500.0])
def test_speeds_are_the_derivatives_of_the_radii(days):
    step = 1e-4 * days
    for make, big in (
        (lambda t: echo.sheet_ring(t, 3.0, 5e3, 50.0, 10.0), 5e3),
        (lambda t: echo.shell_ring(t, 1.5, 5e3), 5e3),
        (lambda t: echo.screen_ring(t, 800.0, 5e3), 800.0),
        (lambda t: echo.screen_ring(t, 800.0), 800.0),
        (lambda t: echo.near_sheet_ring(t, 300.0, 5e3), None),
    ):
        high, low = make(days + step).radius_arcsec, make(days - step).radius_arcsec
        if big is None:  # radius on the sheet itself
            high, low = np.tan(high / RAD_ARCSEC) * 4700.0, np.tan(low / RAD_ARCSEC) * 4700.0
            rate = (high - low) / (2.0 * step)
        else:
            rate = (high - low) / (2.0 * step) / RAD_ARCSEC * big
        # central difference: relative error step^2/t^2 = 1e-8 times a factor below 1
        assert rate / C_PC_PER_DAY == pytest.approx(make(days).speed_c, rel=3e-8)


@few
@given(delays, st.floats(1e-3, 1e4), distances, slopes, slopes, angles)
def test_radius_in_a_direction_lies_on_the_circle(t, z0, big, me, mn, pa):
    circle = echo.sheet_circle(t, z0, big, me, mn)
    got = echo.radius_at_pa_arcsec(circle, pa)
    assert got > 0.0  # dust in front of the source: the source is inside the circle
    phi = np.deg2rad(pa)
    off = np.hypot(got * np.sin(phi) - circle[1], got * np.cos(phi) - circle[2])
    assert off == pytest.approx(circle[0], rel=1e-10)


def test_direction_that_misses_the_circle_gives_nan_and_the_far_crossing_else():
    circle = (1.0, 3.0, 0.0)  # centre 3 east, source outside
    got = echo.radius_at_pa_arcsec(circle, [90.0, 270.0, 0.0, 80.0])
    assert got[0] == pytest.approx(4.0, rel=1e-15)
    assert np.isnan(got[1])  # the circle is on the other side
    assert np.isnan(got[2])  # passes beside it
    # 10 deg off the centre line: 3 cos 10 + sqrt(1 - (3 sin 10)^2)
    expected = 3.0 * np.cos(np.pi / 18) + np.sqrt(1.0 - (3.0 * np.sin(np.pi / 18)) ** 2)
    assert got[3] == pytest.approx(expected, rel=1e-14)


def test_sheet_circle_is_smooth_in_all_arguments():
    """Central differences at two steps agree to the square of the step: no kink, no branch."""
    point = np.array([400.0, 24.0, 6100.0, 0.0, 0.0])
    for pa in (0.0, 75.0, 200.0):

        def radius(p, pa=pa):
            return echo.radius_at_pa_arcsec(echo.sheet_circle(*p), pa)

        for k, h in enumerate((1.0, 0.05, 10.0, 1e-3, 1e-3)):
            step = np.zeros(5)
            step[k] = h
            one = (radius(point + step) - radius(point - step)) / (2.0 * h)
            two = (radius(point + step / 4) - radius(point - step / 4)) / (h / 2.0)
            assert one == pytest.approx(two, rel=1e-4, abs=1e-7)


def test_tilt_and_slopes_say_the_same():
    ring = echo.sheet_ring(500.0, 12.0, 7e3, 40.0, 120.0)
    slope = np.tan(np.deg2rad(40.0))
    phi = np.deg2rad(120.0)
    circle = echo.sheet_circle(500.0, 12.0, 7e3, slope * np.sin(phi), slope * np.cos(phi))
    assert circle == pytest.approx((ring.radius_arcsec, ring.centre_east_arcsec, ring.centre_north_arcsec), rel=1e-14)
    opposite = echo.sheet_ring(500.0, 12.0, 7e3, -40.0, 300.0)
    assert opposite.centre_east_arcsec == pytest.approx(ring.centre_east_arcsec, rel=1e-12)


# ------------------------------------------------------------------ no ring


@few
@given(st.floats(-1e4, 1e5), st.floats(-50.0, 50.0))
def test_sheet_is_nan_exactly_before_its_first_light(t, z0):
    ct = C_PC_PER_DAY * t
    there = ct >= 0.0 and 2.0 * z0 + ct >= 0.0
    ring = echo.sheet_ring(t, z0, 1e4)
    fields = (ring.radius_arcsec, ring.centre_east_arcsec, ring.speed_c, ring.scattering_deg)
    assert [np.isnan(f) for f in fields] == [not there] * 4
    assert (echo.why_no_ring(t, z0) == "") == there or abs(2.0 * z0 + ct) < 1e-12


@few
@given(st.floats(-1e3, 1e5), st.floats(0.01, 50.0))
def test_shell_is_nan_exactly_outside_its_life(t, a):
    ct = C_PC_PER_DAY * t
    ring = echo.shell_ring(t, a, 1e4)
    assert np.isnan(ring.radius_arcsec) == (not 0.0 <= ct <= 2.0 * a)
    assert np.isnan(ring.speed_c) == np.isnan(ring.radius_arcsec)


def test_screen_beyond_its_reach_is_nan():
    assert np.isnan(echo.screen_ring(100.0, 0.01).radius_arcsec)  # 2 d / c = 23.8 d
    assert np.isnan(echo.screen_ring(10.0, 101.0, 100.0).radius_arcsec)  # behind the source, not lit yet
    assert echo.screen_ring(3000.0, 101.0, 100.0).radius_arcsec > 0.0
    assert np.isnan(echo.screen_ring(-1.0, 500.0).radius_arcsec)


def test_first_moment_is_a_point_of_infinite_speed():
    ring = echo.sheet_ring(0.0, 5.0, 1e4)
    assert (ring.radius_arcsec, ring.speed_c, ring.scattering_deg) == (0.0, np.inf, 0.0)
    assert echo.shell_ring(0.0, 5.0, 1e4).speed_c == np.inf
    assert echo.screen_ring(0.0, 5.0, 1e4).speed_c == np.inf
    beside = echo.sheet_ring(0.0, 0.0, 1e4)
    assert (beside.radius_arcsec, beside.speed_c, beside.scattering_deg) == (0.0, 1.0, 90.0)


def test_inverse_without_root_is_nan():
    assert np.isnan(echo.depth_from_radius_pc(3.0, 0.0, 1e4))
    assert np.isnan(echo.depth_from_radius_pc(3.0, -5.0, 1e4))
    ring = echo.screen_ring(1.0, 500.0)  # source at infinity: any larger ring has no source
    assert np.isnan(echo.source_distance_pc(500.0, ring.radius_arcsec * 1.0001, 1.0))
    assert echo.source_distance_pc(500.0, ring.radius_arcsec * 0.9999, 1.0) > 1e6
    assert np.isnan(echo.age_from_motion_days(3.0, 6.3, 1e4))  # 1 c is 6.324 arcsec/yr
    assert np.isnan(echo.dust_distance_pc(3.0, -1.0))
    assert np.isnan(echo.plane_of_sky_distance_pc(0.0, 3.0))


def test_reason_for_no_ring_names_the_date_of_first_light():
    assert echo.why_no_ring(100.0, -0.1) == (
        "the dust lies 0.1 pc behind the source: its first light comes after 238.26 d"
    )
    assert "12 d before the light of the outburst" in echo.why_no_ring(-12.0, 5.0)
    assert echo.why_no_ring(300.0, -0.1) == ""
    # a tilted sheet is met earlier
    assert echo.why_no_ring(150.0, -0.1, 1.0) == ""
    assert echo.sheet_ring(150.0, -0.1, 1e4, 45.0).radius_arcsec > 0.0
    assert "after 119.13 d" in echo.why_no_ring(100.0, -0.1, 1.0)


# ------------------------------------------------------------------ arguments


@pytest.mark.parametrize(
    ("call", "text"),
    [
        (lambda: echo.sheet_ring(10, 5, -2.5), r"distance_pc: got -2.5, needs a finite number above 0"),
        (lambda: echo.sheet_ring(10, 5, [1.0, 0.0]), r"distance_pc: got 0.0, needs a finite number above 0"),
        (lambda: echo.sheet_ring(np.inf, 5, 10), r"delay_days: got inf, needs a finite number$"),
        (lambda: echo.sheet_ring(10, 5, 10, 90.0), r"tilt_deg: got 90.0, needs .* above -90 and below 90"),
        (lambda: echo.sheet_circle(10, 5, 0.0), r"distance_pc: got 0.0"),
        (lambda: echo.shell_ring(10, -1, 10), r"shell_radius_pc: got -1.0, needs a finite number above 0"),
        (lambda: echo.screen_ring(10, -1), r"dust_distance_pc: got -1.0"),
        (lambda: echo.screen_ring(10, 1, 0), r"source_distance_pc: got 0.0"),
        (lambda: echo.near_sheet_ring(10, 12, 10), r"distance_pc - depth_pc: got -2.0"),
        (lambda: echo.depth_from_radius_pc(-1, 10, 10), r"radius_arcsec: got -1.0, needs .* at least 0"),
        (lambda: echo.delay_at_radius_days(-1, 10, 10), r"radius_arcsec: got -1.0"),
        (lambda: echo.radius_at_pa_arcsec((-1, 0, 0), 0), r"radius_arcsec: got -1.0"),
        (lambda: echo.phase_lag_cycles(1, 1, 1, 90), r"behind_deg: got 90.0"),
        (lambda: echo.age_from_motion_days(1, -1, 1), r"motion_arcsec_yr: got -1.0"),
        (lambda: echo.source_distance_pc(0, 1, 1), r"dust_distance_pc: got 0.0"),
        (lambda: echo.plane_of_sky_distance_pc(1, 0), r"radius_arcsec: got 0.0"),
    ],
)
def test_error_names_argument_value_and_limit(call, text):
    with pytest.raises(DomainError, match=text):
        call()


CALLS = {
    "sheet": lambda t: echo.sheet_ring(t, 5.0, 1e4, 10.0, 20.0).radius_arcsec,
    "circle": lambda t: echo.sheet_circle(t, 5.0, 1e4, 0.1, 0.2)[0],
    "shell": lambda t: echo.shell_ring(t, 5.0, 1e4).scattering_deg,
    "screen": lambda t: echo.screen_ring(t, 5.0, 1e4).centre_east_arcsec,
    "far screen": lambda t: echo.screen_ring(t, 5.0).speed_c,
    "near sheet": lambda t: echo.near_sheet_ring(t, 5.0, 1e4).speed_c,
    "depth": lambda t: echo.depth_from_radius_pc(3.0, t, 1e4),
    "delay": lambda t: echo.delay_at_radius_days(t, 5.0, 1e4),
    "pa": lambda t: echo.radius_at_pa_arcsec(echo.sheet_ring(100.0, 5.0, 1e4, 10.0), t),
    "local": lambda t: echo.sheet_local_speed_c(1.0, t, 0.1),
    "dust distance": lambda t: echo.dust_distance_pc(30.0, t),
    "source distance": lambda t: echo.source_distance_pc(500.0, 30.0, t),
    "age": lambda t: echo.age_from_motion_days(t, 30.0, 1e4),
    "sky plane": lambda t: echo.plane_of_sky_distance_pc(t, 3.0),
    "lag": lambda t: echo.phase_lag_cycles(t, 40.0, 2e3),
}


@pytest.mark.parametrize("name", CALLS)
def test_scalars_vectors_grids_and_empty_arrays_broadcast(name):
    call = CALLS[name]
    times = np.array([30.0, 60.0, 90.0])
    assert np.ndim(call(30.0)) == 0
    vector = call(times)
    assert vector.shape == (3,)
    assert vector[1] == call(60.0)
    assert call([]).shape == (0,)
    assert call(np.stack([times, times])).shape == (2, 3)
    assert np.isnan(call(np.nan))


def test_draws_and_times_make_a_grid_and_records_are_read_only():
    ring = echo.sheet_ring(np.arange(1.0, 8.0), np.ones((5, 1)), np.full((5, 1), 1e4), 3.0)
    assert ring.radius_arcsec.shape == ring.centre_east_arcsec.shape == (5, 7)
    assert ring.scattering_deg.shape == (5, 7)
    with pytest.raises(ValueError, match="read-only"):
        ring.radius_arcsec[0, 0] = 1.0
