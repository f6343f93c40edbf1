"""Paths, precession, ejection dates, core shift and sampling of knots.

Values were read on the page of the arXiv number, circular or abstract named beside them unless marked; authors'
names, years and journal pages beside those are from memory.
"""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.errors import DomainError
from planner.physics import jet
from planner.physics import jet_paths as paths
from planner.units import YEAR_DAYS

few = settings(max_examples=50, deadline=None)

# ------------------------------------------------------------------ straight and accelerated


def test_ballistic_knot_moves_along_its_position_angle():
    path = paths.ballistic(61_000.0 + np.array([0.0, YEAR_DAYS, 2 * YEAR_DAYS]), 61_000.0, 0.3, -62.0)
    np.testing.assert_allclose(path.separation_mas, [0.0, 0.3, 0.6], rtol=1e-12, atol=1e-15)
    np.testing.assert_allclose(path.pa_deg[1:], 298.0, rtol=1e-12)
    assert path.east_mas[1] == pytest.approx(-0.3 * np.sin(np.deg2rad(62.0)), rel=1e-12)
    assert path.north_mas[1] == pytest.approx(0.3 * np.cos(np.deg2rad(62.0)), rel=1e-12)


def test_knot_is_nowhere_before_it_leaves_the_core():
    path = paths.accelerated([60_999.0, 61_000.0, 61_001.0], 61_000.0, 0.3, 10.0, 0.1, 0.1)
    assert np.isnan(path.separation_mas).tolist() == [True, False, False]
    assert np.isnan(path.east_mas).tolist() == [True, False, False]


@few
@given(st.floats(0.0, 10.0), st.floats(0.01, 2.0), st.floats(0.0, 360.0), st.floats(-0.3, 0.3), st.floats(-0.3, 0.3))
def test_accelerated_path_has_the_stated_velocity_on_the_stated_date(years, speed, pa, along, across):
    t0, ref = 61_000.0, 61_000.0 + 300.0

    def at(t):
        p = paths.accelerated(t, t0, speed, pa, along, across, ref)
        return np.array([p.east_mas, p.north_mas])

    np.testing.assert_allclose(at(t0), 0.0, atol=1e-13)
    h = 20.0  # central difference of a parabola is exact
    velocity = (at(ref + h) - at(ref - h)) / (2 * h / YEAR_DAYS)
    phi = np.deg2rad(pa)
    np.testing.assert_allclose(velocity, [speed * np.sin(phi), speed * np.cos(phi)], atol=1e-9)
    bend = (at(ref + h) - 2 * at(ref) + at(ref - h)) / (h / YEAR_DAYS) ** 2
    got = paths.along_and_across(*velocity, *bend)
    np.testing.assert_allclose(got, [along, across], atol=1e-8)
    t = t0 + years * YEAR_DAYS
    p = paths.accelerated(t, t0, speed, pa, along, across, ref)
    assert p.separation_mas == pytest.approx(np.hypot(p.along_mas, p.across_mas), rel=1e-12)


def test_acceleration_to_zero_is_ballistic():
    t = 61_000.0 + np.linspace(0.0, 800.0, 9)
    straight = paths.ballistic(t, 61_000.0, 0.4, 33.0)
    for a in (1e-3, 1e-6, 1e-9):
        bent = paths.accelerated(t, 61_000.0, 0.4, 33.0, a, a, 61_400.0)
        off = np.hypot(bent.east_mas - straight.east_mas, bent.north_mas - straight.north_mas)
        assert off.max() <= a * 4.0
        assert off.max() > 0.0


def test_speed_stated_at_the_crossing_gives_the_plain_parabola():
    years = np.array([0.5, 1.0, 3.0])
    path = paths.accelerated(61_000.0 + years * YEAR_DAYS, 61_000.0, 0.4, 0.0, 0.05)
    np.testing.assert_allclose(path.north_mas, 0.4 * years + 0.05 * years**2 / 2.0, rtol=1e-11)


def test_survey_split_of_an_acceleration():
    """mu = (0.3, 0.4), a = (0.02, -0.01): 0.004 along, -0.022 across, velocity at 36.8699 deg (closed form)."""
    along, across = paths.along_and_across(0.3, 0.4, 0.02, -0.01)
    assert along == pytest.approx(0.004, rel=1e-12)
    assert across == pytest.approx(-0.022, rel=1e-12)
    assert np.rad2deg(np.arctan2(0.3, 0.4)) == pytest.approx(36.8699, abs=1e-4)
    assert paths.source_rate_per_yr(along, 0.5, 0.5) == pytest.approx(0.012, rel=1e-12)
    assert np.isnan(paths.along_and_across(0.0, 0.0, 1.0, 0.0)[0])


def test_positive_across_turns_toward_smaller_position_angle():
    path = paths.accelerated(61_365.25, 61_000.0, 0.4, 90.0, 0.0, 0.05)
    assert path.across_mas > 0.0
    assert path.pa_deg < 90.0


# ------------------------------------------------------------------ helix and precession


@pytest.mark.parametrize(
    ("phase", "along", "across"),
    [(0.0, 2.56028, 1.55201), (90.0, 3.22072, 0.0), (180.0, 2.56028, -1.55201), (270.0, 1.41254, 0.0)],
)
def test_helix_of_ten_degrees(phase, along, across):
    """Closed form for beta_z 0.95, beta_t 0.10, f = phase in (-b_t sin f, b_t cos f, b_z)."""
    got = paths.helix_speed_c(0.95, 0.10, 10.0, phase)
    assert got[0] == pytest.approx(along, abs=1e-5)
    assert got[1] == pytest.approx(across, abs=1e-5)


@pytest.mark.parametrize("phase", [20.0, 140.0, 250.0])
def test_helix_speed_from_arrival_times(phase):
    """Independent: place the knot on the cylinder, look at arrival times and sky places, no formula."""
    bz, bt, theta, turn = 0.9, 0.2, np.deg2rad(25.0), 1.0  # radius = bt/turn with c = 1
    f0 = np.deg2rad(phase)

    def at(t):
        place = np.array([bt * np.cos(f0 + turn * t), bt * np.sin(f0 + turn * t), bz * t])
        toward = place @ [np.sin(theta), 0.0, np.cos(theta)]
        sky = np.array([place @ [-np.cos(theta), 0.0, np.sin(theta)], place[1]])
        return t - toward, sky

    (early, one), (late, two) = at(-1e-5), at(1e-5)
    np.testing.assert_allclose((two - one) / (late - early), paths.helix_speed_c(bz, bt, 25.0, phase), rtol=1e-7)


def test_helix_without_turn_is_a_straight_knot():
    along, across = paths.helix_speed_c(0.95, 0.0, 10.0, 123.0)
    assert along == pytest.approx(jet.apparent_speed_c(0.95, 10.0), rel=1e-13)
    assert across == 0.0


def test_precession_of_ss_433():
    """0.26 c, half angle 20, inclination 79 deg, 5 kpc (Niell et al., IAU Symposium 1984 abstract page).

    Angles, redshifts and motions are closed forms to the printed digits.
    """
    phase = [0.0, 90.0, 180.0, 270.0]
    got = paths.precessing(0.26, 79.0, 20.0, phase)
    np.testing.assert_allclose(got.angle_deg, [59.0, 79.671, 99.0, 79.671], atol=5e-4)
    np.testing.assert_allclose(got.pa_offset_deg, [0.0, 20.344, 0.0, -20.344], atol=5e-4)
    np.testing.assert_allclose(got.redshift, [-0.10306, -0.01266, 0.07774, -0.01266], atol=6e-6)
    np.testing.assert_allclose(got.opposite_redshift, [0.17430, 0.08390, -0.00651, 0.08390], atol=6e-6)
    fast, slow = got.motions_mas_d(5.0)
    np.testing.assert_allclose(fast, [8.9108, 9.2907, 8.5451, 9.2907], atol=6e-5)
    np.testing.assert_allclose(slow, [6.8061, 8.4631, 9.2697, 8.4631], atol=6e-5)
    mean = (got.redshift + got.opposite_redshift) / 2.0
    np.testing.assert_allclose(mean, 0.035616, atol=6e-7)  # gamma - 1 at every phase


def test_widest_swing_of_ss_433():
    assert paths.widest_swing_deg(79.0, 20.0) == pytest.approx(20.3908, abs=5e-5)  # closed form
    swing = paths.precessing(0.26, 79.0, 20.0, np.linspace(0.0, 180.0, 18_001)).pa_offset_deg
    assert swing.max() == pytest.approx(20.3908, abs=5e-5)
    assert np.argmax(swing) / 100.0 == pytest.approx(85.943, abs=0.02)
    assert np.isnan(paths.widest_swing_deg(10.0, 20.0))  # we look into the cone


def test_lines_of_ss_433_cross_where_the_jet_lies_in_the_sky_plane():
    got = paths.precessing(0.26, 79.0, 20.0, 122.280)
    assert got.redshift == pytest.approx(got.opposite_redshift, abs=1e-6)
    assert got.angle_deg == pytest.approx(90.0, abs=1e-3)
    # beyond that phase the jet called approaching recedes
    assert paths.precessing(0.26, 79.0, 20.0, 180.0).angle_deg > 90.0


def test_sense_mirrors_the_position_angle_only():
    one, two = paths.precessing(0.26, 79.0, 20.0, 50.0), paths.precessing(0.26, 79.0, 20.0, 50.0, sense=-1)
    assert two.pa_offset_deg == -one.pa_offset_deg
    assert two.redshift == one.redshift
    straight = paths.precessing(0.26, 79.0, 0.0, 50.0)
    assert straight.motion_c == pytest.approx(jet.apparent_speed_c(0.26, 79.0), rel=1e-13)
    assert straight.opposite_motion_c == pytest.approx(jet.receding_speed_c(0.26, 79.0), rel=1e-13)


# ------------------------------------------------------------------ ejection date

EPOCHS = np.array([105.0, 110.0, 115.0, 120.0, 125.0])


def test_ejection_date_and_its_error():
    """Closed form: 17.6 mas/d, 5 mas errors: t0 100.000, sigma 0.297957 d, speed error 0.316228 mas/d."""
    got = paths.ejection_fit(EPOCHS, 17.6 * (EPOCHS - 100.0), 5.0)
    assert got.crossing_mjd == pytest.approx(100.0, abs=1e-9)
    assert got.speed_mas_d == pytest.approx(17.6, rel=1e-12)
    assert got.speed_sigma_mas_d == pytest.approx(0.316228, rel=1e-5)
    assert got.crossing_sigma_days == pytest.approx(0.297957, rel=1e-5)
    assert got.mean_mjd == pytest.approx(115.0, rel=1e-14)


def test_error_without_covariance_would_be_nine_times_too_large():
    got = paths.ejection_fit(EPOCHS, 17.6 * (EPOCHS - 100.0), 5.0)
    intercept_sigma = np.hypot(got.mean_sigma_mas, got.mean_mjd * got.speed_sigma_mas_d)
    wrong = np.hypot(intercept_sigma / 17.6, 17.6 * 100.0 * got.speed_sigma_mas_d / 17.6**2)
    assert wrong == pytest.approx(2.741, rel=0.01)
    assert wrong / got.crossing_sigma_days > 9.0


def test_error_of_the_ejection_date_agrees_with_random_data():
    rng = np.random.default_rng(433)
    data = 17.6 * (EPOCHS - 100.0) + 5.0 * rng.standard_normal((20_000, 5))
    got = paths.ejection_fit(EPOCHS, data, 5.0)
    # 20,000 draws: 0.5 % noise; the ratio adds a little beyond first order
    assert np.std(got.crossing_mjd) == pytest.approx(0.297957, rel=0.02)
    assert got.crossing_sigma_days.shape == (20_000,)
    pull = (got.crossing_mjd - 100.0) / got.crossing_sigma_days
    assert np.std(pull) == pytest.approx(1.0, rel=0.02)


def test_weighted_fit_agrees_with_the_normal_equations():
    t = np.array([61_010.0, 61_031.0, 61_077.0, 61_120.0])
    r = np.array([0.11, 0.20, 0.33, 0.52])
    s = np.array([0.02, 0.05, 0.03, 0.01])
    got = paths.ejection_fit(t, r, s)
    design = np.stack([np.ones(4), t - 61_000.0], axis=1) / s[:, None]
    cov = np.linalg.inv(design.T @ design)
    level, speed = cov @ design.T @ (r / s)
    assert got.speed_mas_d == pytest.approx(speed, rel=1e-9)
    assert got.crossing_mjd - 61_000.0 == pytest.approx(-level / speed, rel=1e-6)
    grad = np.array([-1.0 / speed, level / speed**2])
    assert got.crossing_sigma_days == pytest.approx(np.sqrt(grad @ cov @ grad), rel=1e-8)


def test_monthly_epochs_of_a_blazar_knot():
    """0.25 mas/yr, 0.03 mas, 12 monthly epochs from 0.3 yr: speed 0.0301 mas/yr, date 35.7 d (closed form)."""
    t = (0.3 + np.arange(12) / 12.0) * YEAR_DAYS
    got = paths.ejection_fit(t, 0.25 * t / YEAR_DAYS, 0.03)
    assert got.speed_sigma_mas_d * YEAR_DAYS == pytest.approx(0.0301, abs=5e-5)
    assert got.crossing_sigma_days == pytest.approx(35.7, abs=0.05)


def test_knot_at_rest_has_no_ejection_date():
    got = paths.ejection_fit([1.0, 2.0], [0.5, 0.5], 0.1)
    assert np.isnan(got.crossing_mjd)
    assert got.speed_mas_d == 0.0


# ------------------------------------------------------------------ sampling and core shift


@pytest.mark.parametrize(("epochs", "factor"), [(2, 1.41421), (3, 1.41421), (5, 1.26491), (10, 0.99087)])
def test_speed_error_factor(epochs, factor):
    assert paths.speed_error_factor(epochs) == pytest.approx(factor, abs=6e-6)  # closed form
    t = np.linspace(0.0, 1.0, epochs)
    got = paths.ejection_fit(t, t, 1.0).speed_sigma_mas_d
    assert got == pytest.approx(factor, abs=6e-6)


def test_span_that_makes_a_speed_significant():
    span = paths.span_for_speed_days(5.0, 17.6, 5)
    t = np.linspace(0.0, span, 5)
    got = paths.ejection_fit(t, 17.6 * (t + 3.0), 5.0)
    assert got.speed_mas_d / got.speed_sigma_mas_d == pytest.approx(5.0, rel=1e-12)


def test_useful_spacing_and_where_it_is_empty():
    low, high = paths.useful_spacing_days(0.03, 0.25, 0.25 / YEAR_DAYS)
    assert low == pytest.approx(0.24 * YEAR_DAYS, rel=1e-12)
    assert high == pytest.approx(YEAR_DAYS / 2.0, rel=1e-12)
    low, high = paths.useful_spacing_days([0.03, 0.1], 0.25, 0.25 / YEAR_DAYS)
    assert np.isnan(low).tolist() == np.isnan(high).tolist() == [False, True]


def test_core_shift_predicted_from_one_pair_of_bands():
    """Sokolovsky et al. 2011 (arXiv 1103.6032): medians 1.21 mas (1.4-15.4 GHz) and 0.24 mas (5.0-15.4)."""
    shift = paths.shift_from_pair_mas_ghz(1.21, 1.4, 15.4)
    assert shift == pytest.approx(1.863, abs=5e-4)
    predicted = paths.core_shift_mas(shift, 5.0, 15.4)
    assert predicted == pytest.approx(0.2517, abs=1e-4)  # closed form
    assert predicted == pytest.approx(0.24, rel=0.08)  # medians of rounded values
    for low, high, expected in ((5.0, 8.4, 0.151), (8.4, 15.4, 0.101), (15.4, 43.0, 0.078), (22.0, 43.0, 0.041)):
        assert paths.core_shift_mas(shift, low, high) == pytest.approx(expected, abs=6e-4)


def test_ejection_dates_of_two_bands_differ_by_the_core_shift():
    days = paths.core_shift_mas(1.863, 15.4, 43.0) / 0.25 * YEAR_DAYS
    assert days == pytest.approx(113.0, abs=1.0)  # closed form
    assert paths.core_offset_mas(1.863, 1.0, 2.0) == pytest.approx(1.863, rel=1e-15)
    assert paths.core_offset_mas(1.0, 4.0, 2.0) == pytest.approx(0.5, rel=1e-15)


# ------------------------------------------------------------------ arguments


@pytest.mark.parametrize(
    ("call", "text"),
    [
        (lambda: paths.ballistic(1, 0, -1, 0), "speed_mas_yr: got -1.0, needs a finite number at least 0"),
        (lambda: paths.helix_speed_c(0.9, 0.9, 10, 0), r"hypot\(beta_axis, beta_turn\): got 1.27"),
        (lambda: paths.precessing(0.5, 10, 95, 0), "half_angle_deg: got 95.0, needs .* at most 90"),
        (lambda: paths.precessing(0.5, 10, 5, 0, sense=0), r"sense: got 0, needs \+1 or -1"),
        (lambda: paths.widest_swing_deg(0, 10), "inclination_deg: got 0.0"),
        (lambda: paths.ejection_fit([1.0], [1.0], 1.0), "mjd: .*at least 2 different dates"),
        (lambda: paths.ejection_fit([1.0, 1.0], [1.0, 2.0], 1.0), "mjd: .*at least 2 different dates"),
        (lambda: paths.ejection_fit([1.0, 2.0], [1.0, 2.0], 0.0), "sigma_mas: got 0.0, needs .* above 0"),
        (lambda: paths.speed_error_factor(1), "epochs: got 1, needs at least 2"),
        (lambda: paths.useful_spacing_days(0, 1, 1), "sigma_mas: got 0.0"),
        (lambda: paths.core_offset_mas(1, 0), "ghz: got 0.0"),
        (lambda: paths.shift_from_pair_mas_ghz(1, 5, 5), "core shift between low_ghz and high_ghz: got 0.0"),
        (lambda: paths.source_rate_per_yr(1, 0), "speed_mas_yr: got 0.0"),
        (lambda: paths.precessing(0.5, 10, 5, 0).motions_mas_d(0), "distance_kpc: got 0.0"),
    ],
)
def test_error_names_argument_value_and_limit(call, text):
    with pytest.raises(DomainError, match=text):
        call()


@pytest.mark.parametrize(
    "call",
    [
        lambda t: paths.ballistic(t, 0.0, 1.0, 30.0).pa_deg,
        lambda t: paths.accelerated(t, 0.0, 1.0, 30.0, 0.1, 0.1, 50.0).east_mas,
        lambda t: paths.along_and_across(t, 1.0, 1.0, 1.0)[0],
        lambda t: paths.source_rate_per_yr(t, 1.0),
        lambda t: paths.helix_speed_c(0.9, 0.1, 10.0, t)[0],
        lambda t: paths.precessing(0.26, 79.0, 20.0, t).redshift,
        lambda t: paths.widest_swing_deg(t, 10.0),
        lambda t: paths.span_for_speed_days(t, 1.0, 5),
        lambda t: paths.useful_spacing_days(0.1, t, 1.0)[1],
        lambda t: paths.core_shift_mas(1.0, 5.0, t),
    ],
)
def test_scalars_vectors_and_empty_arrays_broadcast(call):
    assert np.ndim(call(30.0)) == 0
    assert call(np.array([30.0, 60.0]))[1] == call(60.0)
    assert call([]).shape == (0,)
    assert np.isnan(call(np.nan))
