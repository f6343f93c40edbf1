"""One knot and a pair of knots: closed forms, published pairs, properties, refusals.

Values were read on the page of the arXiv number, circular or abstract named beside them unless marked; authors'
names, years and journal pages beside those are from memory.
"""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.errors import DomainError
from planner.physics import flux, jet
from planner.units import C_AU_PER_DAY

few = settings(max_examples=60, deadline=None)
betas = st.floats(0.01, 0.9999)
inside = st.floats(0.1, 179.9)


@pytest.mark.parametrize(
    ("beta", "angle", "apparent", "receding", "fastest", "at", "doppler", "doppler_receding"),
    [
        # closed form to the printed digits; the third row is a textbook picture (5 ly in 6 yr, 4 ly toward us,
        # 3 ly sideways, 2 yr between arrivals: Universe, 10th ed., fig. 24-11)
        (0.90, 25.0, 2.063532, 0.209485, 2.064742, 25.841933, 2.364816, 0.240070),
        (0.99, 15.0, 5.858924, 0.130980, 7.017924, 8.109614, 3.225618, 0.072110),
        (5 / 6, np.rad2deg(np.arccos(0.8)), 1.5, 0.3, 1.507557, 33.557310, 1.658312, 0.331662),
        (np.sqrt(0.5), 45.0, 1.0, 1 / 3, 1.0, 45.0, np.sqrt(2.0), 0.471405),
        (0.50, 90.0, 0.5, 0.5, 0.577350, 60.0, 0.866025, 0.866025),
        (0.92, 70.0, 1.261440, 0.657598, 2.347428, 23.073918, 0.571859, 0.298114),
        (0.98, 66.0, 1.488655, 0.640121, 4.924685, 11.478341, 0.330891, 0.142283),
        (0.26, 79.0, 0.268546, 0.243160, 0.269260, 74.929938, 1.016013, 0.919969),
    ],
)
def test_exact_values(beta, angle, apparent, receding, fastest, at, doppler, doppler_receding):
    tight = {"rel": 0.0, "abs": 6e-7}  # half of the last of six decimals, rounded up
    assert jet.apparent_speed_c(beta, angle) == pytest.approx(apparent, **tight)
    assert jet.receding_speed_c(beta, angle) == pytest.approx(receding, **tight)
    assert jet.fastest_apparent_c(beta) == pytest.approx(fastest, **tight)
    assert jet.fastest_angle_deg(beta) == pytest.approx(at, **tight)
    assert jet.doppler_factor(beta, angle) == pytest.approx(doppler, **tight)
    assert jet.doppler_factor(beta, 180.0 - angle) == pytest.approx(doppler_receding, **tight)


def test_textbook_knot_shows_one_and_a_half_c_exactly():
    assert jet.apparent_speed_c(5 / 6, np.rad2deg(np.arccos(0.8))) == pytest.approx(1.5, rel=1e-12)


def test_both_angles_of_a_speed():
    np.testing.assert_allclose(jet.angles_deg(0.99, 5.0), [3.399962, 19.219903], rtol=1e-6)  # closed form
    np.testing.assert_allclose(jet.angles_deg(0.9, 2.0), [20.185681, 32.944421], rtol=1e-6)
    np.testing.assert_allclose(jet.angles_deg(0.9, 2.063532), [25.0, 26.7102], atol=2e-3)
    # the last speed is rounded to 5e-7 where the slope is 0.05 per rad: 1e-5 rad or 6e-4 deg


def test_lorentz_factor_and_angle_from_speed_and_doppler_factor():
    gamma, angle = jet.gamma_and_angle(17.0022, 30.4845)
    assert gamma == pytest.approx(20.0, abs=1e-3)
    assert angle == pytest.approx(1.6, abs=1e-4)


def test_slopes_of_the_apparent_speed():
    by_beta, by_angle = jet.speed_slopes(0.99, 15.0)
    assert by_beta == pytest.approx(135.322, rel=1e-5)  # closed form
    assert by_angle == pytest.approx(-12.4612, rel=1e-5)
    h = 1e-6
    numeric = (jet.apparent_speed_c(0.99 + h, 15.0) - jet.apparent_speed_c(0.99 - h, 15.0)) / (2 * h)
    assert by_beta == pytest.approx(numeric, rel=1e-6)
    deg = np.rad2deg(h)
    numeric = (jet.apparent_speed_c(0.99, 15.0 + deg) - jet.apparent_speed_c(0.99, 15.0 - deg)) / (2 * h)
    assert by_angle == pytest.approx(numeric, rel=1e-6)
    assert jet.speed_slopes(0.9, jet.fastest_angle_deg(0.9))[1] == pytest.approx(0.0, abs=1e-12)


def test_limits_from_a_speed_of_four_c():
    """Mooley et al. 2022 (arXiv 2210.06568): Lorentz factor above 4, 14-28 deg. Input 4.1 c from memory."""
    assert jet.least_lorentz_factor(4.1) == pytest.approx(4.220, abs=5e-4)  # closed form
    assert jet.least_speed_angle_deg(4.1) == pytest.approx(13.707, abs=5e-4)
    assert jet.largest_angle_deg(4.1) == pytest.approx(27.414, abs=1e-3)
    assert jet.least_lorentz_factor(4.1) > 4.0
    assert round(float(jet.least_speed_angle_deg(4.1))) == 14
    assert jet.largest_angle_deg(4.1) == pytest.approx(28.0, abs=1.0)  # printed to the degree
    assert jet.least_lorentz_factor(7.0) == pytest.approx(7.071, abs=1e-3)


def test_bent_jet_of_3c_279():
    """Jorstad et al. 2004 (AJ 127, 3115, abstract): 5 to 17 c as 0.5 turns to 1.6 deg at gamma 20, delta >= 39."""
    beta = jet.speed_of_lorentz_factor(20.0)
    assert jet.lorentz_factor(beta) == pytest.approx(20.0, rel=1e-12)
    assert jet.apparent_speed_c(beta, 1.6) == pytest.approx(17.002, rel=1e-3)
    assert round(float(jet.apparent_speed_c(beta, 1.6))) == 17
    assert jet.doppler_factor(beta, 0.5) == pytest.approx(38.795, rel=1e-3)
    assert jet.doppler_factor(beta, 0.5) == pytest.approx(39.0, rel=0.01)
    # the printed 0.5 deg is an upper limit: 5 c belongs to a smaller angle
    assert jet.angles_deg(beta, 5.0)[0] == pytest.approx(0.3646, abs=1e-4)
    assert jet.apparent_speed_c(beta, 0.5) == pytest.approx(6.763, rel=1e-3)


def test_ejecta_of_gw170817():
    """2.67 mas in 155 d (from memory) at 41 Mpc: 4.1 +- 0.5 c (Mooley et al. 2018, arXiv 1806.09693)."""
    speed = jet.transverse_speed_c(2.67 / 155.0, 41_000.0)
    assert speed == pytest.approx(4.079, rel=0.005)
    assert speed == pytest.approx(4.1, abs=0.1)


# ------------------------------------------------------------------ a pair


@pytest.mark.parametrize(
    ("fast", "slow", "kpc", "cosine", "angle", "beta", "largest", "printed_beta", "printed_angle"),
    [
        # GRO J1655-40: motions, distance, 0.92 c and 85 deg in a review by I. F. Mirabel (NED level 5, 2003)
        (54.0, 45.5, 3.2, 0.08543, 84.653, 0.91674, 3.493, (0.92, 0.01), (85.0, 1.0)),
        # GRS 1915+105, 1994: Rodriguez & Mirabel 1999 (abstract); motions from memory
        (17.6, 9.0, 12.5, 0.32331, 69.393, 0.91859, 13.757, (0.92, 0.01), (70.0, 2.0)),
        # GRS 1915+105, 1997: Fender et al. 1999 (arXiv astro-ph/9812150), D = 11 kpc; motions from memory
        (23.6, 10.0, 11.0, 0.40476, 65.604, 0.97995, 11.271, (0.98, 0.01), (66.0, 1.0)),
        # MAXI J1820+070: Atri et al. 2020 (MNRAS 493, L81), 2.96 kpc, 63 +- 3 deg; motions from memory
        (77.0, 33.0, 2.96, 0.4000, 63.140, 0.88533, 3.435, (0.89, 0.09), (63.0, 3.0)),
    ],
)
def test_published_pairs(fast, slow, kpc, cosine, angle, beta, largest, printed_beta, printed_angle):
    got = jet.two_sided(fast, slow, kpc)
    assert got.beta_cos == pytest.approx(cosine, rel=1e-4)
    assert got.angle_deg == pytest.approx(angle, rel=1e-4)
    assert got.beta == pytest.approx(beta, rel=1e-4)
    assert got.largest_distance_kpc == pytest.approx(largest, rel=1e-3)
    assert got.beta == pytest.approx(printed_beta[0], abs=printed_beta[1])
    assert got.angle_deg == pytest.approx(printed_angle[0], abs=printed_angle[1])


def test_distance_of_gro_j1655_40_from_either_side():
    assert jet.distance_from_motion_kpc(54.0, 0.92, 85.0) == pytest.approx(3.195, abs=1e-3)  # closed form
    assert jet.distance_from_motion_kpc(45.5, 0.92, 95.0) == pytest.approx(3.229, abs=1e-3)


def test_motions_back_from_speed_and_angle():
    fast, slow = jet.pair_motions_mas_d(0.92, 70.0, 12.5)
    assert fast == pytest.approx(17.473, abs=1e-3)  # closed form
    assert slow == pytest.approx(9.109, abs=1e-3)


def test_errors_of_a_pair():
    """17.6 +- 0.4, 9.0 +- 0.1: 0.01133 and 0.174 kpc (closed form)."""
    got = jet.two_sided_errors(17.6, 9.0, 12.5, 0.4, 0.1)
    assert got.beta_cos == pytest.approx(0.01133, abs=5e-6)
    assert got.largest_distance_kpc == pytest.approx(0.174, abs=5e-4)


def test_errors_of_a_pair_agree_with_random_draws_and_with_print():
    """MAXI J1820+070 (Atri et al. 2020): 63 +- 3 deg, 0.89 +- 0.09 from 2.96 +- 0.33 kpc; motions from memory."""
    got = jet.two_sided_errors(77.0, 33.0, 2.96, 1.0, 1.0, 0.33)
    assert got.angle_deg == pytest.approx(3.0, abs=0.25)
    assert got.beta == pytest.approx(0.09, abs=0.015)
    rng = np.random.default_rng(1820)
    # a tenth of the errors: the truth of first order, seen to the noise of 40,000 draws (0.35 %) and curvature
    a, r, d = (m + s * rng.standard_normal(40_000) for m, s in ((77.0, 0.1), (33.0, 0.1), (2.96, 0.033)))
    draws = jet.two_sided(a, r, d)
    small = jet.two_sided_errors(77.0, 33.0, 2.96, 0.1, 0.1, 0.033)
    for name in ("beta", "angle_deg", "beta_cos", "largest_distance_kpc"):
        assert np.std(getattr(draws, name)) == pytest.approx(getattr(small, name), rel=0.015)


def test_pair_beyond_the_largest_distance_has_no_solution_and_says_so():
    far = jet.two_sided(17.6, 9.0, 14.0)
    assert np.isnan(far.beta)
    assert np.isnan(far.angle_deg)
    assert far.largest_distance_kpc == pytest.approx(13.757, abs=1e-3)
    assert far.beta_cos == pytest.approx(0.32331, abs=1e-5)
    assert np.isnan(jet.two_sided_errors(17.6, 9.0, 14.0, 0.4, 0.1).beta)
    text = jet.why_no_pair(17.6, 9.0, 14.0)
    assert "distance too large: 14 kpc is above 13.76 kpc" in text
    assert jet.why_no_pair(17.6, 9.0, 12.5) == ""
    at_limit = jet.two_sided(17.6, 9.0, far.largest_distance_kpc)
    assert at_limit.beta == pytest.approx(1.0, rel=1e-14)


@few
@given(betas, inside, st.floats(0.1, 100.0))
def test_pair_is_recovered_from_its_motions(beta, angle, kpc):
    got = jet.two_sided(*jet.pair_motions_mas_d(beta, angle, kpc), kpc)
    assert got.beta == pytest.approx(beta, rel=1e-12)
    assert got.angle_deg == pytest.approx(angle, rel=1e-9)
    assert got.largest_distance_kpc >= kpc
    assert abs(got.beta_cos) <= got.beta


def test_swapped_sides_turn_the_angle_over():
    one, two = jet.two_sided(54.0, 45.5, 3.2), jet.two_sided(45.5, 54.0, 3.2)
    assert two.angle_deg == pytest.approx(180.0 - one.angle_deg, rel=1e-14)
    assert two.beta == pytest.approx(one.beta, rel=1e-14)


def test_receding_knot_reaches_a_separation_later():
    assert jet.receding_delay_days(300.0, 17.6, 9.0) == pytest.approx(33.333 - 17.045, abs=5e-4)  # closed form
    assert jet.receding_delay_days(300.0, 77.0, 33.0) == pytest.approx(5.195, abs=5e-4)


def test_flux_ratio_of_a_pair_is_the_power_of_the_ratio_of_motions():
    got = jet.two_sided(17.6, 9.0, 12.5)
    assert flux.ratio_equal_separation(got.beta_cos, -0.8, 2.0) == pytest.approx(6.539, abs=1e-3)  # closed form
    assert flux.ratio_equal_separation(got.beta_cos, -0.8, 3.0) == pytest.approx(12.788, abs=1e-3)


def test_least_speed_of_two_parting_lobes():
    """GRO J1655-40: 65 +- 5 mas/d at 3-5 kpc parts at 1.126-1.877 c (closed form)."""
    apart = jet.transverse_speed_c(65.0, np.array([3.0, 5.0]))
    np.testing.assert_allclose(apart, [1.126, 1.877], atol=5e-4)
    least = jet.least_beta_of_separation(apart)
    for s, b in zip(apart, least, strict=True):
        # brute force over angles: the smallest beta with 2 b sin/(1 - b^2 cos^2) = s
        angle = np.deg2rad(np.linspace(0.01, 89.9, 30_000))
        cos2 = np.cos(angle) ** 2
        root = (-np.sin(angle) + np.sqrt(np.sin(angle) ** 2 + s**2 * cos2)) / (s * cos2)
        assert b == pytest.approx(root.min(), rel=2e-6)  # the angle of 90 deg is left out: 89.9 is 1.5e-6 off
    assert jet.least_beta_of_separation(np.sqrt(2.0)) == pytest.approx(np.sqrt(0.5), rel=1e-15)


# ------------------------------------------------------------------ properties and roots


@few
@given(betas, inside)
def test_both_roots_reproduce_the_speed_and_one_is_the_angle(beta, angle):
    speed = jet.apparent_speed_c(beta, angle)
    small, large = jet.angles_deg(beta, speed)
    assert small <= jet.fastest_angle_deg(beta) * (1.0 + 1e-7)
    assert large >= jet.fastest_angle_deg(beta) * (1.0 - 1e-7)
    for root in (small, large):
        assert jet.apparent_speed_c(beta, root) == pytest.approx(speed, rel=1e-10)
    # near the maximum the root is a double one: good to the square root of rounding only
    assert min(abs(small - angle), abs(large - angle)) < 1e-5


@few
@given(st.floats(0.0, 0.99999), st.floats(0.0, 60.0))
def test_roots_are_nan_exactly_above_gamma_beta(beta, speed):
    possible = beta > 0.0 and speed <= jet.fastest_apparent_c(beta)
    small, large = jet.angles_deg(beta, speed)
    if abs(speed - jet.fastest_apparent_c(beta)) > 1e-12 * speed:
        assert np.isnan(small) == np.isnan(large) == (not possible)
        assert (jet.why_no_angle(beta, speed) == "") == possible


@few
@given(betas)
def test_fastest_speed_has_its_double_root(beta):
    small, large = jet.angles_deg(beta, jet.fastest_apparent_c(beta))
    assert small == pytest.approx(jet.fastest_angle_deg(beta), rel=1e-6)
    assert large == pytest.approx(small, rel=1e-6)


def test_reason_for_no_angle_names_the_numbers():
    text = jet.why_no_angle(0.9, 3.0)
    assert "3 c is above gamma*beta = 2.065 c, the most that beta 0.9 can show" in text
    assert "beta of at least 0.948683" in text  # 3/sqrt 10
    assert jet.why_no_angle(0.9, 2.0) == ""
    assert "at rest" in jet.why_no_angle(0.0, 0.0)


def test_motion_along_the_line_of_sight_shows_nothing():
    assert jet.apparent_speed_c(0.99, 0.0) == 0.0
    assert jet.apparent_speed_c(0.99, 180.0) == 0.0
    small, large = jet.angles_deg(0.99, 0.0)
    assert (small, large) == (0.0, 180.0)


@few
@given(betas, inside)
def test_speed_doppler_factor_and_limits_hang_together(beta, angle):
    speed, delta = jet.apparent_speed_c(beta, angle), jet.doppler_factor(beta, angle)
    gamma = jet.lorentz_factor(beta)
    assert speed == pytest.approx(gamma * beta * np.sin(np.deg2rad(angle)) * delta, rel=1e-11)
    back_gamma, back_angle = jet.gamma_and_angle(speed, delta)
    assert back_gamma == pytest.approx(gamma, rel=1e-11)
    assert back_angle == pytest.approx(angle, rel=1e-7)
    assert jet.least_beta(speed) <= beta * (1.0 + 1e-14)
    assert jet.least_lorentz_factor(speed) <= gamma * (1.0 + 1e-12)
    assert jet.largest_angle_deg(speed) > angle * (1.0 - 1e-12)
    assert speed <= jet.fastest_apparent_c(beta) * (1.0 + 1e-12)
    assert jet.beta_of_apparent(speed, angle) == pytest.approx(beta, rel=1e-9)
    # at the angle of least speed, that speed is needed
    assert jet.beta_of_apparent(speed, jet.least_speed_angle_deg(speed)) == pytest.approx(
        jet.least_beta(speed), rel=1e-12
    )


@few
@given(st.floats(0.0, 30.0), st.floats(0.1, 179.9))
def test_no_beta_beyond_the_largest_angle(speed, angle):
    limit = jet.largest_angle_deg(speed)
    if abs(angle - limit) > 1e-9:
        assert np.isnan(jet.beta_of_apparent(speed, angle)) == (angle > limit)


@few
@given(betas, inside)
def test_apparent_speed_rises_with_beta(beta, angle):
    assert jet.apparent_speed_c(min(beta * 1.0001, 0.99999), angle) > jet.apparent_speed_c(beta, angle)


def test_time_order_of_arrival_gives_the_apparent_speed():
    """Independent: two flashes a year apart, light-travel times by distance, no formula."""
    beta, angle, far = 0.9, np.deg2rad(25.0), 1e4
    start = np.array([0.0, 0.0])
    end = beta * np.array([np.sin(angle), np.cos(angle)])
    arrive = [t + np.hypot(p[0], far - p[1]) for t, p in ((0.0, start), (1.0, end))]
    speed = end[0] / (arrive[1] - arrive[0])
    assert jet.apparent_speed_c(beta, 25.0) == pytest.approx(speed, rel=2e-4)  # far is finite: 1e-4


def test_one_mas_per_day_at_one_kpc_is_one_au_per_day():
    assert jet.transverse_speed_c(C_AU_PER_DAY, 1.0) == pytest.approx(1.0, rel=1e-15)
    # GRS 1915+105: 1.5 c at 12 kpc is 21.643 mas/d (Dhawan et al. 2000 give the speed; motion closed form)
    assert jet.transverse_speed_c(21.643, 12.0) == pytest.approx(1.5, rel=1e-4)


# ------------------------------------------------------------------ arguments


@pytest.mark.parametrize(
    ("call", "text"),
    [
        (lambda: jet.apparent_speed_c(1.0, 10), "beta: got 1.0, needs a finite number at least 0 and below 1"),
        (lambda: jet.apparent_speed_c(-0.1, 10), "beta: got -0.1"),
        (lambda: jet.apparent_speed_c(0.5, 200), "angle_deg: got 200.0, needs .* at least 0 and at most 180"),
        (lambda: jet.doppler_factor(0.5, -1), "angle_deg: got -1.0"),
        (lambda: jet.receding_speed_c(0.5, 181), "angle_deg: got 181.0"),
        (lambda: jet.angles_deg(0.5, -1), "apparent_c: got -1.0, needs a finite number at least 0"),
        (lambda: jet.speed_of_lorentz_factor(0.5), "gamma: got 0.5, needs a finite number at least 1"),
        (lambda: jet.gamma_and_angle(1, 0), "doppler: got 0.0"),
        (lambda: jet.two_sided(-1, 1, 1), "approaching_mas_d: got -1.0, needs a finite number above 0"),
        (lambda: jet.two_sided(1, 0, 1), "receding_mas_d: got 0.0"),
        (lambda: jet.two_sided(1, 1, -2), "distance_kpc: got -2.0"),
        (lambda: jet.two_sided_errors(1, 1, 1, -1, 0), "approaching_sigma: got -1.0"),
        (lambda: jet.receding_delay_days(-1, 1, 1), "separation_mas: got -1.0"),
        (lambda: jet.least_beta_of_separation(-1), "separation_c: got -1.0"),
        (lambda: jet.transverse_speed_c(1, 0), "distance_kpc: got 0.0"),
        (lambda: jet.distance_from_motion_kpc(0, 0.5, 10), "proper_motion_mas_d: got 0.0"),
    ],
)
def test_error_names_argument_value_and_limit(call, text):
    with pytest.raises(DomainError, match=text):
        call()


@pytest.mark.parametrize(
    "call",
    [
        lambda a: jet.apparent_speed_c(0.5, a),
        lambda a: jet.receding_speed_c(0.5, a),
        lambda a: jet.doppler_factor(0.5, a),
        lambda a: jet.angles_deg(0.9999, a)[1],
        lambda a: jet.beta_of_apparent(0.5, a),
        lambda a: jet.gamma_and_angle(a, 2.0)[0],
        lambda a: jet.speed_slopes(0.5, a)[0],
        lambda a: jet.least_beta(a),
        lambda a: jet.largest_angle_deg(a),
        lambda a: jet.speed_of_lorentz_factor(a),
        lambda a: jet.two_sided(a, 20.0, 1.0).beta,
        lambda a: jet.two_sided_errors(a, 20.0, 1.0, 0.1, 0.1).angle_deg,
        lambda a: jet.pair_motions_mas_d(0.5, a, 1.0)[1],
        lambda a: jet.transverse_speed_c(a, 1.0),
        lambda a: jet.receding_delay_days(a, 2.0, 1.0),
        lambda a: jet.least_beta_of_separation(a),
    ],
)
def test_scalars_vectors_and_empty_arrays_broadcast(call):
    assert np.ndim(call(30.0)) == 0
    assert call(np.array([30.0, 60.0]))[1] == call(60.0)
    assert call([]).shape == (0,)
    assert np.isnan(call(np.nan))
