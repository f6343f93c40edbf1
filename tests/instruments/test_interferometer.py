"""Noise, beam and position error of an array."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.errors import DomainError
from planner.instruments import interferometer as radio
from planner.units import RAD_MAS

# ------------------------------------------------------------------ noise


def test_image_noise_of_ten_equal_stations():
    # SEFD 500, 0.7, N 10, 128 MHz, 1 h, one polarisation: 110.916 uJy from SEFD/(eta sqrt(n_pol N(N-1) dnu
    # t)), the form printed in an observatory's guide (opened by the reference's author). Six digits computed
    # by hand.
    noise = radio.image_noise_jy(np.full(10, 500.0), 0.7, 128e6, 3600.0, 1)
    assert noise == pytest.approx(110.916e-6, rel=1e-5)


def test_image_noise_for_stokes_i_over_eight_hours():
    # SEFD 500, 0.8, N 10, 256 MHz, 2 polarisations, 8 h: 17.156 uJy, same form.
    noise = radio.image_noise_jy(np.full(10, 500.0), 0.8, 256e6, 8 * 3600.0, 2)
    assert noise == pytest.approx(17.156e-6, rel=1e-4)


def test_one_large_dish_lowers_the_noise_more_than_twice():
    # 41.414 uJy, gain 2.678: pair sum computed by another hand (regression).
    with_dish = radio.image_noise_jy(np.append(np.full(10, 500.0), 18.0), 0.7, 128e6, 3600.0, 1)
    assert with_dish == pytest.approx(41.414e-6, rel=1e-4)


def test_two_large_apertures_lower_the_noise_four_to_five_times():
    # Published for 22 GHz: a factor of 4 to 5 (an array's status summary); SEFDs from memory, so 4 to 5.1.
    small = radio.image_noise_jy(np.full(10, 550.0), 0.7, 128e6, 3600.0, 2)
    for large in ([30.0, 25.0], [25.0, 20.0]):
        gain = small / radio.image_noise_jy(np.append(np.full(10, 550.0), large), 0.7, 128e6, 3600.0, 2)
        assert 4.0 < gain < 5.1


def test_baseline_noise():
    # 500 Jy, 0.7, 32 MHz, 120 s: 8.1506 mJy, computed by hand from the radiometer equation.
    assert radio.baseline_noise_jy(500.0, 500.0, 0.7, 32e6, 120.0) == pytest.approx(8.1506e-3, rel=1e-4)


def test_two_stations_image_as_one_baseline():
    pair = radio.image_noise_jy([300.0, 700.0], 0.7, 64e6, 60.0, 1)
    assert pair == pytest.approx(radio.baseline_noise_jy(300.0, 700.0, 0.7, 64e6, 60.0), rel=1e-12)


SEFDS = st.lists(st.floats(10.0, 5000.0), min_size=2, max_size=12)


def plain_noise(sefd, efficiency, bandwidth_hz, seconds, polarisations):
    """Sum over pairs, one at a time."""
    total = 0.0
    for j in range(len(sefd)):
        for i in range(j):
            total += 2 * polarisations * bandwidth_hz * seconds / (sefd[i] * sefd[j])
    return 1 / (efficiency * math.sqrt(total))


@settings(max_examples=60, deadline=None)
@given(sefd=SEFDS, seconds=st.floats(1.0, 1e5))
def test_image_noise_equals_the_plain_sum_over_pairs(sefd, seconds):
    expected = plain_noise(sefd, 0.7, 1e8, seconds, 2)
    assert radio.image_noise_jy(sefd, 0.7, 1e8, seconds, 2) == pytest.approx(expected, rel=1e-12)


@settings(max_examples=40, deadline=None)
@given(sefd=st.floats(10.0, 5000.0), stations=st.integers(2, 30))
def test_equal_stations_reduce_to_the_short_form(sefd, stations):
    short = sefd / (0.7 * math.sqrt(2 * stations * (stations - 1) * 1e8 * 600.0))
    assert radio.image_noise_jy(np.full(stations, sefd), 0.7, 1e8, 600.0, 2) == pytest.approx(short, rel=1e-12)


@settings(max_examples=40, deadline=None)
@given(sefd=SEFDS, more=st.floats(10.0, 1e6))
def test_adding_a_station_never_raises_the_noise(sefd, more):
    before = radio.image_noise_jy(sefd, 0.7, 1e8, 600.0, 2)
    assert radio.image_noise_jy([*sefd, more], 0.7, 1e8, 600.0, 2) < before
    assert radio.image_noise_jy([*sefd, np.inf], 0.7, 1e8, 600.0, 2) == pytest.approx(before, rel=1e-12)


@settings(max_examples=40, deadline=None)
@given(sefd=SEFDS, seconds=st.floats(1.0, 1e5))
def test_equal_times_on_all_baselines_give_the_common_noise(sefd, seconds):
    each = np.full(len(sefd) * (len(sefd) - 1) // 2, seconds)
    by_baseline = radio.image_noise_by_baseline_jy(sefd, 0.7, 1e8, each, 2)
    assert by_baseline == pytest.approx(radio.image_noise_jy(sefd, 0.7, 1e8, seconds, 2), rel=1e-12)


def test_a_station_that_is_up_half_the_time_counts_half():
    """Weights of baselines are common time over the product of SEFDs, written out for three stations."""
    up = np.array([[1, 1, 1, 1], [1, 1, 1, 1], [0, 0, 1, 1]], dtype=bool)
    seconds = radio.common_seconds(up, 100.0)
    assert seconds.tolist() == [400.0, 200.0, 200.0]
    noise = radio.image_noise_by_baseline_jy([100.0, 200.0, 400.0], 0.7, 1e8, seconds, 1)
    total = 2e8 * (400 / 2e4 + 200 / 4e4 + 200 / 8e4)
    assert noise == pytest.approx(1 / (0.7 * math.sqrt(total)), rel=1e-12)


def test_noise_broadcasts_over_looks_and_stations_are_the_last_axis():
    sefd = np.stack([np.full(5, 300.0), np.array([300.0, 300.0, 300.0, np.inf, np.inf])])
    noise = radio.image_noise_jy(sefd, 0.7, 1e8, np.array([[60.0], [240.0], [0.0]]), 2)
    assert noise.shape == (3, 2)
    assert noise[0] / noise[1] == pytest.approx([2.0, 2.0], rel=1e-12)
    assert noise[0, 1] / noise[0, 0] == pytest.approx(math.sqrt(20 / 6), rel=1e-12)
    assert np.all(np.isinf(noise[2]))


def test_noise_without_a_second_station():
    assert np.isinf(radio.image_noise_jy([300.0, np.inf], 0.7, 1e8, 60.0, 2))
    with pytest.raises(DomainError, match=r"sefd_jy: got shape \(1,\), needs one value for each"):
        radio.image_noise_jy([300.0], 0.7, 1e8, 60.0, 2)
    with pytest.raises(DomainError, match=r"efficiency: got 0.0, needs a value above 0"):
        radio.image_noise_jy([300.0, 300.0], 0.0, 1e8, 60.0, 2)
    with pytest.raises(DomainError, match=r"seconds_of_baseline: .* needs 3 baselines"):
        radio.image_noise_by_baseline_jy([300.0] * 3, 0.7, 1e8, [1.0, 1.0], 2)


def test_core_limits_the_noise_in_quadrature():
    # 3-4-5: thermal 3 mJy, core 4 Jy at 1000:1
    assert radio.effective_noise_jy(3e-3, 4.0, 1000.0) == pytest.approx(5e-3, rel=1e-12)


# ------------------------------------------------------------------ beam


@pytest.mark.parametrize(
    ("ghz", "beam", "tolerance"),
    [
        # Resolution rule 2063 lambda_cm / B_km with 8611 km, and the beams printed in the array's observing
        # status summary (opened by the reference's author): 0.468 at 15.35 GHz to 0.001, 0.85 at 8.4 to 0.01.
        (15.35, 0.468, 0.001), (43.1, 0.167, 0.001), (8.4, 0.85, 0.01), (5.0, 1.4, 0.05), (1.4, 5.0, 0.15),
    ],
)  # fmt: skip
def test_resolution_of_the_longest_baseline(ghz, beam, tolerance):
    assert radio.resolution_mas(ghz, 8611.0) == pytest.approx(beam, abs=tolerance)


def test_resolution_rule_has_the_published_coefficient():
    """2063 x wavelength in cm over baseline in km, at 1 cm (29.979 GHz) and 1 km."""
    assert radio.resolution_mas(29.9792458, 1.0) == pytest.approx(2063, abs=0.5)


def test_ring_of_samples():
    # Moments of a ring of radius R: FWHM 0.5301/R, the product of two rounded numbers (0.3748 x sqrt 2); the
    # closed form sqrt(2 ln 2)/pi x sqrt 2 is 0.53002. Hence 1e-3.
    angle = np.arange(360) * 2 * np.pi / 360
    beam = radio.beam_from_uv(7e8 * np.sin(angle), 7e8 * np.cos(angle))
    assert beam.major_mas == pytest.approx(0.5301 / 7e8 * RAD_MAS, rel=1e-3)
    assert beam.minor_mas == pytest.approx(beam.major_mas, rel=1e-9)


def points_with_moments(uu: float, uv: float, vv: float) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Gauss-Hermite samples of a Gaussian (u,v) distribution: its moments are exact."""
    node, weight = np.polynomial.hermite_e.hermegauss(40)
    root = np.linalg.cholesky(np.array([[uu, uv], [uv, vv]]))
    a, b = np.meshgrid(node, node)
    return root[0, 0] * a, root[1, 0] * a + root[1, 1] * b, np.outer(weight, weight)


def test_gaussian_samples():
    # moments (4, 1.2, 1): 0.4925 x 0.1782 rad, PA -19.33 (closed form, printed to four digits)
    u, v, w = points_with_moments(4.0, 1.2, 1.0)
    beam = radio.beam_from_uv(u, v, w)
    assert beam.major_mas / RAD_MAS == pytest.approx(0.4925, abs=1e-4)
    assert beam.minor_mas / RAD_MAS == pytest.approx(0.1782, abs=1e-4)
    assert beam.pa_deg == pytest.approx(-19.33, abs=0.01)


def test_dirty_beam_of_gaussian_samples_falls_to_one_half_at_half_the_fwhm():
    """Independent of the moments: the beam is summed from its samples along the stated axes."""
    u, v, w = points_with_moments(4.0, 1.2, 1.0)
    beam = radio.beam_from_uv(u, v, w)
    for fwhm, pa in ((beam.major_mas, beam.pa_deg), (beam.minor_mas, beam.pa_deg + 90)):
        east, north = (0.5 * fwhm / RAD_MAS * f(math.radians(pa)) for f in (math.sin, math.cos))
        response = (w * np.cos(2 * np.pi * (u * east + v * north))).sum() / w.sum()
        assert response == pytest.approx(0.5, abs=1e-6)


@settings(max_examples=60, deadline=None)
@given(turn=st.floats(-180.0, 180.0), seed=st.integers(0, 1000))
def test_beam_turns_with_the_samples(turn, seed):
    rng = np.random.default_rng(seed)
    u, v = rng.normal(0, 5e7, 50), rng.normal(0, 2e7, 50)
    a = math.radians(turn)
    before = radio.beam_from_uv(u, v)
    after = radio.beam_from_uv(u * math.cos(a) + v * math.sin(a), -u * math.sin(a) + v * math.cos(a))
    assert after.major_mas == pytest.approx(before.major_mas, rel=1e-9)
    assert after.minor_mas == pytest.approx(before.minor_mas, rel=1e-9)
    assert -90.0 < after.pa_deg <= 90.0
    turned = (after.pa_deg - before.pa_deg - turn + 90.0) % 180.0 - 90.0
    assert turned == pytest.approx(0.0, abs=1e-6)


def test_samples_far_apart_north_make_a_beam_narrow_in_north():
    beam = radio.beam_from_uv([1e7, -1e7, 0.0, 0.0], [0.0, 0.0, 9e7, -9e7])
    assert abs(beam.pa_deg) == pytest.approx(90.0)
    assert beam.major_mas / beam.minor_mas == pytest.approx(9.0, rel=1e-9)


def test_a_single_direction_of_samples_leaves_the_other_axis_without_limit():
    beam = radio.beam_from_uv([1e7, -1e7], [0.0, 0.0])
    assert math.isinf(beam.major_mas)
    assert beam.minor_mas > 0
    with pytest.raises(DomainError, match=r"weights: got 0.0, needs at least one \(u,v\) sample"):
        radio.beam_from_uv([1e7, -1e7], [0.0, 0.0], [0.0, 0.0])


def test_cut_and_projection():
    # 1.3 x 0.6 PA 0, jet PA 45: cut 0.77043, projection 1.01242; 0.34 x 0.14 PA -10, jet -115: 0.14406,
    # 0.16134. Closed forms printed to five digits.
    assert radio.cut_fwhm(1.3, 0.6, 0.0, 45.0) == pytest.approx(0.77043, abs=1e-5)
    assert radio.projected_fwhm(1.3, 0.6, 0.0, 45.0) == pytest.approx(1.01242, abs=1e-5)
    assert radio.cut_fwhm(0.34, 0.14, -10.0, -115.0) == pytest.approx(0.14406, abs=1e-5)
    assert radio.projected_fwhm(0.34, 0.14, -10.0, -115.0) == pytest.approx(0.16134, abs=1e-5)


@settings(max_examples=60, deadline=None)
@given(minor=st.floats(0.05, 1.0), ratio=st.floats(1.0, 10.0), beam=st.floats(-90, 90), jet=st.floats(-180, 180))
def test_cut_lies_between_the_axes_and_never_above_the_projection(minor, ratio, beam, jet):
    cut = radio.cut_fwhm(minor * ratio, minor, beam, jet)
    assert minor * (1 - 1e-12) <= cut <= radio.projected_fwhm(minor * ratio, minor, beam, jet) * (1 + 1e-12)
    assert cut <= minor * ratio * (1 + 1e-12)


# ------------------------------------------------------------------ size, position, blending


def test_smallest_size_in_beams():
    # Lobanov 2005 in natural weighting, five digits computed from the formula (which five public codes
    # share).
    ratios = np.array([5.0, 10.0, 20.0, 50.0, 100.0])
    expected = [0.44377, 0.30493, 0.21276, 0.13353, 0.09418]
    assert radio.smallest_size(1.0, ratios) == pytest.approx(expected, abs=1e-5)
    assert radio.smallest_size(1.0, 10.0, "uniform") == pytest.approx(0.60987, abs=1e-5)


def test_nothing_is_resolved_at_a_ratio_of_one():
    assert np.isinf(radio.smallest_size(1.0, np.array([1.0, 0.5]))).all()


def test_position_error_adds_beam_size_and_floor_in_quadrature():
    # by hand: 1/(2 x 10) = 0.05, 0.4/(2 x 20) = 0.01, floor 0.1
    found = radio.position_error(1.0, 10.0, 0.4, 0.1, knot_snr=20.0)
    assert found == pytest.approx(math.sqrt(0.05**2 + 0.01**2 + 0.1**2), rel=1e-12)
    assert radio.position_error(1.0, 10.0, 0.0, 0.0) == pytest.approx(0.05, rel=1e-12)


def test_position_error_reaches_its_floor_and_is_without_limit_without_signal():
    found = radio.position_error(0.3, np.array([0.0, 1e9]), 0.0, 0.1)
    assert np.isinf(found[0])
    assert found[1] == pytest.approx(0.03, rel=1e-9)


def test_blending_is_none_beyond_one_and_a_half_beams_and_total_inside_half_a_beam():
    found = radio.blending_factor(np.array([3.0, 1.5, 1.0, 0.75, 0.5, 0.2, np.inf, np.nan]))
    # 1/(1.0 - 0.5) = 2, 1/(0.75 - 0.5) = 4: by hand
    assert found[:4] == pytest.approx([1.0, 1.0, 2.0, 4.0], rel=1e-12)
    assert np.isinf(found[4:6]).all()
    assert found[6] == 1.0
    assert np.isnan(found[7])


def test_blending_has_no_jump_and_never_falls_towards_the_neighbour():
    apart = np.linspace(0.51, 2.0, 3000)
    factor = radio.blending_factor(apart)
    assert np.all(np.diff(factor) <= 0)
    assert radio.blending_factor(1.5 - 1e-9) == pytest.approx(1.0, abs=1e-8)


@pytest.mark.parametrize("shape", [(), (0,), (4,)])
def test_shapes_follow_the_input(shape):
    x = np.full(shape, 2.0)
    for found in (
        radio.blending_factor(x), radio.smallest_size(x, 10.0), radio.position_error(x, 10.0, 0.0, 0.1),
        radio.cut_fwhm(x, 1.0, 0.0, 30.0), radio.effective_noise_jy(x, 1.0, 1000.0), radio.resolution_mas(x,
        100.0),
    ):  # fmt: skip
        assert np.shape(found) == shape


@given(
    east=st.floats(-10, 10), north=st.floats(-10, 10), major=st.floats(0.1, 5), share=st.floats(0.1, 1),
    pa=st.floats(-90, 90),
)  # fmt: skip
@settings(max_examples=40, deadline=None)
def test_a_separation_in_beams_is_its_length_over_the_cut_in_its_own_direction(
    east: float, north: float, major: float, share: float, pa: float
) -> None:
    length = np.hypot(east, north)
    cut = radio.cut_fwhm(major, share * major, pa, np.degrees(np.arctan2(east, north)))
    found = radio.separation_in_beams(east, north, major, share * major, pa)
    assert found == pytest.approx(length / cut, rel=1e-9, abs=1e-12)
