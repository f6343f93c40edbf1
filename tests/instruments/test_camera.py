"""Signal-to-noise, its inverse, overheads and glare."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.campaign.records import CameraSetup
from planner.errors import DomainError
from planner.instruments import camera
from planner.instruments.bands import zero_point_mag


def setup_of(**change: object) -> CameraSetup:
    fields: dict[str, object] = {
        "aperture_m": 1.8, "throughput": 0.3, "pixel_arcsec": 0.4, "read_noise_e": 5.0, "dark_e_s": 0.002,
        "longest_exposure_s": 300.0, "readout_s": 20.0, "acquisition_min": 5.0, "subtraction_floor": 0.0,
        "difference_imaging": False, "glare_mag_arcsec2_at_1arcsec": 5.0, "glare_slope": 3.0, "glare_allowed":
        3.0,
    }  # fmt: skip
    return CameraSetup.model_validate(fields | change)


def factor_for_zero_point(setup: CameraSetup, filter_name: str, zero_point: float) -> float:
    """Scale of all rates that gives the setup a stated zero point."""
    return 10.0 ** (0.4 * (zero_point - zero_point_mag(setup, filter_name)))


# ------------------------------------------------------------------ published


def test_published_ccd_example():
    # 600 and 1200 counts/s at 1.2 e/count, 1000 s, 50 pixels, R 5, dark 2: noise 8534 e, S/N 84 (V. Dhillon,
    # Sheffield lecture problems; opened by the reference's author). Printed without decimals, hence 0.5.
    source, sky = 600 * 1.2, 1200 * 1.2
    ratio = camera.snr(source, sky, 1000.0, 50, dark_e_s=2.0, read_noise_e=5.0)
    assert ratio == pytest.approx(84.37, abs=0.5)
    assert source * 1000.0 / ratio == pytest.approx(8534, abs=1.0)


def test_published_sky_limited_example():
    # Source 1/s, sky 2/s, S/N 30, no other noise: t = 30^2 (1 + 2) = 2700 s, closed form (same page).
    assert camera.seconds_for_snr(30.0, 1.0, 2.0, 1.0) == pytest.approx(2700.0, rel=1e-12)


@pytest.mark.parametrize(
    ("mag", "times"),
    [
        (23.0, {0.3: 211, 0.5: 76, 1: 19, 2: 5, 4: 1}),
        (24.0, {0.3: 1235, 0.5: 445, 1: 111, 2: 28, 4: 7}),
        (25.0, {0.3: 7550, 0.5: 2720, 1: 680, 2: 170, 4: 42}),
    ],
)
def test_photon_limited_times_of_faint_arcs_are_as_computed_elsewhere(mag, times):
    # Plausibility: computed by another hand for S/N 5 in V in a two-image difference, 10 arcsec2, sky 21.6,
    # throughput 0.30, 15 % obstruction. 5 % for other band constants, and half a second of rounding.
    for aperture, seconds in times.items():
        setup = setup_of(aperture_m=aperture, read_noise_e=0.0, dark_e_s=0.0, difference_imaging=True)
        found = camera.ring_seconds(setup, "V", mag, 10.0, 21.6, 0.0, 0.0, 5.0)
        assert found == pytest.approx(seconds, rel=0.05, abs=0.55)


def test_moonlight_of_two_magnitudes_costs_a_factor_between_five_and_six_at_mag_23():
    # 5.7 by the same computation.
    setup = setup_of(aperture_m=0.5, read_noise_e=0.0, dark_e_s=0.0, difference_imaging=True)
    dark, moon = camera.ring_seconds(setup, "V", 23.0, 10.0, np.array([21.6, 19.6]), 0.0, 0.0, 5.0)
    assert moon / dark == pytest.approx(5.7, abs=0.06)


# ------------------------------------------------------------------ regression (own computed values)


def test_regression_star_of_mag_21_5():
    # Computed once from the same equation: zero point 25, FWHM 1", sky 21.3, k 0.12, X 1.5, one frame.
    setup = setup_of(longest_exposure_s=3600.0)
    factor = factor_for_zero_point(setup, "V", 25.0)
    args = (setup, "V", 21.5, 1.0, 21.3, 1.5, 0.12)
    found = camera.point_snr(*args, np.array([60.0, 300.0, 600.0, 1800.0]), rate_factor=factor)
    assert found == pytest.approx([14.98, 34.33, 48.71, 84.54], abs=0.02)
    assert camera.point_seconds(*args, 20.0, rate_factor=factor) == pytest.approx(104.2, abs=0.1)


def test_regression_ring_of_mag_25_5():
    # Computed once: radius 30", width 3", a quarter of the circle: 141.4 arcsec2; same camera, one frame.
    setup = setup_of(longest_exposure_s=3600.0)
    factor = factor_for_zero_point(setup, "V", 25.0)
    area = 2 * math.pi * 30 * 3 * 0.25
    args = (setup, "V", 25.5, area)
    found = camera.ring_snr(*args, 21.3, 1.5, 0.12, np.array([300.0, 1800.0, 3600.0]), rate_factor=factor)
    assert found == pytest.approx([19.69, 48.56, 68.73], abs=0.02)
    sky = np.array([21.3, 20.5, 19.0, 18.0])
    seconds = camera.ring_seconds(*args, sky, 1.5, 0.12, 10.0, rate_factor=factor)
    assert seconds == pytest.approx([80.9, 160, 624, 1563], rel=0.005)


def test_regression_twelve_reads_cost_more_time_than_one():
    source, sky = 75.572, 4.832
    one, twelve = camera.seconds_for_snr(
        10.0, source, sky, 883.6, dark_e_s=0.002, read_noise_e=5.0, frames=np.array([1, 12])
    )
    assert one == pytest.approx(80.9, abs=0.5)
    assert twelve == pytest.approx(116.1, abs=0.5)


def test_floor_caps_the_summed_ratio_at_the_share_of_the_sky():
    # (s/B)/eps: 17.7 at 0.1 % and 5.9 at 0.3 % for 0.0855 e/s/pixel on 4.832: closed form.
    source, sky, pixels = 75.572, 4.832, 883.6
    for floor, cap in ((0.001, 17.7), (0.003, 5.9)):
        assert camera.snr(source, sky, 1e9, pixels, floor=floor) == pytest.approx(cap, abs=0.05)
        assert np.isnan(camera.seconds_for_snr(cap + 0.1, source, sky, pixels, floor=floor))
        assert np.isfinite(camera.seconds_for_snr(cap - 0.1, source, sky, pixels, floor=floor))


# ------------------------------------------------------------------ against a simulation and a plain twin


@pytest.mark.parametrize("images", [1, 2])
def test_noise_equals_the_scatter_of_simulated_images(images):
    """The equation's variance is that of Poisson counts, read noise and a sky taken from few pixels."""
    rng = np.random.default_rng(20270201)
    trials, s, b, d, t, n, n_b, read, frames = 20_000, 3.0, 5.0, 0.5, 40.0, 12, 30, 6.0, 4

    def background():
        inside = rng.poisson(n * (b + d) * t, trials) + rng.normal(0, read * math.sqrt(n * frames), trials)
        beside = rng.poisson(n_b * (b + d) * t, trials) + rng.normal(0, read * math.sqrt(n_b * frames), trials)
        return inside - beside * n / n_b

    flux = rng.poisson(s * t, trials) + background()
    if images == 2:
        flux = flux - background()
    ratio = camera.snr(
        s, b, t, n, dark_e_s=d, read_noise_e=read, frames=frames, background_pixels=n_b, sky_counts=images
    )
    # The scatter of 20,000 trials is known to 1/sqrt(2 x 20,000) = 0.5 %; four of that.
    assert np.std(flux) == pytest.approx(s * t / ratio, rel=0.02)


def plain_seconds(
    setup: CameraSetup, source: float, sky: float, pixels: float, wanted: float, most: int
) -> float | None:
    """Try one frame, two frames, ... until the time fits into them; None if ``most`` are not enough."""
    for frames in range(1, most + 1):
        t = camera.seconds_for_snr(
            wanted, source, sky, pixels,
            dark_e_s=setup.dark_e_s, read_noise_e=setup.read_noise_e, frames=frames,
            floor=setup.subtraction_floor, sky_counts=2.0 if setup.difference_imaging else 1.0,
        )  # fmt: skip
        if not t > frames * setup.longest_exposure_s * (1 + 1e-9):
            return float(t)
    return None


@settings(max_examples=40, deadline=None)
@given(
    mag=st.floats(20.0, 26.0),
    area=st.floats(1.0, 500.0),
    wanted=st.floats(1.0, 40.0),
    longest=st.floats(5.0, 600.0),
    read=st.floats(0.0, 40.0),
    difference=st.booleans(),
)
def test_ring_seconds_is_the_first_number_of_frames_that_is_enough(mag, area, wanted, longest, read, difference):
    setup = setup_of(longest_exposure_s=longest, read_noise_e=read, difference_imaging=difference)
    args = (setup, "R", mag, area, 20.9, 1.3, 0.08)
    found = camera.ring_seconds(*args, wanted)
    plain = plain_seconds(setup, *(float(x) for x in camera._ring_rates(*args, 1.0)), wanted, most=200)
    if plain is None:
        assert found > 200 * longest
    else:
        assert found == pytest.approx(plain, rel=1e-9)
    assert camera.ring_snr(*args, found) == pytest.approx(wanted, rel=1e-6)


# ------------------------------------------------------------------ properties

RATES = {
    "source": st.floats(1e-3, 1e4),
    "sky": st.floats(1e-3, 1e3),
    "pixels": st.floats(1.0, 1e4),
    "read": st.floats(0.0, 20.0),
    "floor": st.sampled_from([0.0, 0.001, 0.01]),
    "counts": st.sampled_from([1.0, 2.0]),
}


@settings(max_examples=100, deadline=None)
@given(seconds=st.floats(0.1, 1e5), **RATES)
def test_seconds_for_snr_undoes_snr(seconds, source, sky, pixels, read, floor, counts):
    noise = {"dark_e_s": 0.01, "read_noise_e": read, "frames": 3, "floor": floor, "sky_counts": counts}
    ratio = camera.snr(source, sky, seconds, pixels, **noise)
    back = camera.seconds_for_snr(ratio, source, sky, pixels, **noise)
    # Close to the cap the time depends on the ratio without bound: ask only away from it.
    if floor == 0 or ratio < 0.99 * source / (floor * pixels * sky):
        assert back == pytest.approx(seconds, rel=1e-6)


@settings(max_examples=60, deadline=None)
@given(**RATES)
def test_snr_grows_with_time_and_stays_below_the_cap(source, sky, pixels, read, floor, counts):
    times = np.geomspace(0.1, 1e7, 60)
    ratio = camera.snr(source, sky, times, pixels, read_noise_e=read, floor=floor, sky_counts=counts)
    assert np.all(np.diff(ratio) > 0)
    if floor > 0:
        assert ratio[-1] < source / (floor * pixels * sky)


def test_difference_imaging_counts_the_background_twice():
    # Sky-limited: noise grows by sqrt(2). The source is 1e-4 of the sky here, hence 1e-3.
    plain, twice = (
        camera.ring_snr(setup_of(difference_imaging=d), "V", 30.0, 100.0, 20.0, 1.0, 0.1, 600.0) for d in (False, True)
    )
    assert plain / twice == pytest.approx(math.sqrt(2), rel=1e-3)


def test_extinction_dims_the_source_and_not_the_measured_sky():
    """0.2 mag at two air masses scale a sky-limited ratio by 10^(-0.16)."""
    setup = setup_of()
    none, some = camera.ring_snr(setup, "V", 28.0, 100.0, 19.0, 2.0, np.array([0.0, 0.2]), 600.0)
    assert some / none == pytest.approx(10 ** (-0.4 * 0.4), rel=1e-3)


def test_rate_factor_acts_as_throughput():
    single, double = setup_of(throughput=0.2), setup_of(throughput=0.4)
    args = ("V", 24.0, 50.0, 21.6, 1.2, 0.13)
    scaled = camera.ring_seconds(single, *args, 8.0, rate_factor=2.0)
    assert scaled == pytest.approx(camera.ring_seconds(double, *args, 8.0), rel=1e-12)


def test_floor_of_the_setup_makes_a_faint_ring_unreachable():
    args = ("V", np.array([22.0, 27.5]), 100.0, 21.6, 1.0, 0.1, 15.0)
    bright, faint = camera.ring_seconds(setup_of(subtraction_floor=0.003), *args)
    assert np.isfinite(bright)
    assert np.isnan(faint)
    assert np.isfinite(camera.ring_seconds(setup_of(subtraction_floor=0.0), *args)[1])


def test_hopeless_source_gives_a_huge_time_or_nan_and_no_overflow():
    found = camera.ring_seconds(setup_of(), "V", np.array([60.0, np.inf]), 100.0, 21.6, 1.0, 0.1, 15.0)
    assert found[0] > 1e12
    assert np.isnan(found[1])


def test_arrays_broadcast_and_empty_arrays_stay_empty():
    setup = setup_of()
    found = camera.ring_seconds(
        setup, "V", np.full((4, 1), 24.0), 10.0, np.full(3, 21.0), 1.2, 0.1, np.full((2, 1, 1), 5.0)
    )
    assert found.shape == (2, 4, 3)
    assert camera.ring_snr(setup, "V", 24.0, 10.0, np.empty(0), 1.2, 0.1, 60.0).shape == (0,)
    assert np.ndim(camera.ring_snr(setup, "V", 24.0, 10.0, 21.0, 1.2, 0.1, 60.0)) == 0


def test_no_time_gives_no_signal():
    assert camera.snr(1.0, 1.0, 0.0, 10.0, read_noise_e=5.0) == 0.0
    assert camera.ring_snr(setup_of(), "V", 24.0, 10.0, 21.0, 1.2, 0.1, 0.0) == 0.0


@pytest.mark.parametrize(
    ("change", "text"),
    [
        ({"seconds": -1.0}, r"seconds: got -1.0, needs a value of 0 or more"),
        ({"sky_e_s_pix": -2.0}, r"sky_e_s_pix: got -2.0, needs a value of 0 or more"),
        ({"background_pixels": 0.0}, r"background_pixels: got 0.0, needs a value above 0"),
    ],
)
def test_impossible_input_is_refused_by_name(change, text):
    given_args = {"source_e_s": 1.0, "sky_e_s_pix": 1.0, "seconds": 1.0, "pixels": 1.0} | change
    with pytest.raises(DomainError, match=text):
        camera.snr(**given_args)


# ------------------------------------------------------------------ image, frames, overheads


def test_gaussian_aperture_holds_the_light_of_a_numerical_gaussian():
    # 0.715 and 8.89 pixels at 1" FWHM and 0.4" pixels; checked by summing a fine Gaussian image.
    share, pixels = camera.gaussian_aperture(1.0, 0.4)
    x, y = np.meshgrid(*[np.linspace(-4, 4, 1601)] * 2)
    r2 = x**2 + y**2
    light = 2.0 ** (-4 * r2)
    # The grid step of 0.005" leaves about 1e-4 at the edge of the aperture.
    assert share == pytest.approx(light[r2 <= 0.673**2].sum() / light.sum(), abs=5e-4)
    assert pixels == pytest.approx(8.89, abs=0.005)


def test_aperture_radius_is_the_best_one_on_a_sky_limited_frame():
    def merit(r):
        return (1 - 2.0 ** (-4 * r**2)) / r

    radii = np.linspace(0.3, 1.2, 901)
    assert radii[np.argmax(merit(radii))] == pytest.approx(camera.APERTURE_RADIUS_FWHM, abs=0.002)


def test_seeing_grows_with_airmass_to_three_fifths():
    # 2^0.6 = 1.5157, closed form
    assert camera.image_fwhm_arcsec(0.9, np.array([1.0, 2.0])) == pytest.approx([0.9, 0.9 * 1.5157], rel=1e-4)


def test_frames_are_counted_up_and_a_hair_over_is_not_a_frame():
    times = np.array([0.0, 1.0, 300.0, 300.0 * (1 + 1e-12), 301.0, 900.0, np.nan])
    assert camera.frames_for(setup_of(), times).tolist() == [0, 1, 1, 1, 2, 3, 0]


def test_look_minutes_count_acquisition_and_one_readout_a_frame():
    # 5 min + 601 s + 3 x 20 s
    assert camera.look_minutes(setup_of(), 601.0) == pytest.approx(5 + (601 + 60) / 60, rel=1e-12)
    assert np.isnan(camera.look_minutes(setup_of(), np.nan))


# ------------------------------------------------------------------ glare


def test_glare_radius_is_where_the_wings_equal_the_allowed_light():
    """By hand: 16 + 5 + 7.5 log10 r = 25 at r = 10^(4/7.5), with the allowance of one ring brightness."""
    setup = setup_of(glare_allowed=1.0)
    assert camera.glare_radius_arcsec(setup, 16.0, 25.0, 1.0) == pytest.approx(10 ** (4 / 7.5), rel=1e-12)


def test_allowing_more_wing_light_brings_the_radius_in_by_the_slope():
    # wings fall as r^-3: eight times the light is allowed at half the radius
    one, eight = (camera.glare_radius_arcsec(setup_of(glare_allowed=a), 10.0, 25.0, 1.0) for a in (1.0, 8.0))
    assert eight == pytest.approx(one / 2, rel=1e-12)


def test_wings_keep_their_light_when_the_seeing_stretches_them():
    """Profile i(r/f)/f^2 with i ~ x^-3: at a fixed radius the light grows as f, so the radius as f^(1/3)."""
    radii = camera.glare_radius_arcsec(setup_of(), 8.0, 25.0, np.array([1.0, 2.0]))
    assert radii[1] / radii[0] == pytest.approx(2 ** (1 / 3), rel=1e-12)


def test_glare_radius_is_two_fwhm_for_a_faint_or_absent_source():
    radii = camera.glare_radius_arcsec(setup_of(), np.array([28.0, np.inf, np.inf]), np.array([25, 25, np.inf]), 0.8)
    assert radii == pytest.approx([1.6, 1.6, 1.6], rel=1e-12)


def test_glare_radius_broadcasts():
    shape = camera.glare_radius_arcsec(setup_of(), np.full((3, 1), 12.0), np.full(4, 25.0), np.full((2, 1, 1), 1.0))
    assert shape.shape == (2, 3, 4)


def test_glare_refuses_an_image_without_width():
    with pytest.raises(DomainError, match=r"fwhm_arcsec: got 0.0, needs a value above 0"):
        camera.glare_radius_arcsec(setup_of(), 12.0, 25.0, 0.0)


def test_a_template_of_equal_depth_counts_the_background_twice() -> None:
    """Sky, dark and read noise of the template: the same as sky_counts 2 when time and frames are the same."""
    base = {"source_e_s": 3.0, "sky_e_s_pix": 20.0, "pixels": 50.0, "dark_e_s": 0.5, "read_noise_e": 6.0, "frames": 4}
    twice = camera.snr(seconds=900.0, sky_counts=2.0, **base)
    assert camera.snr(seconds=900.0, template_s=900.0, template_frames=4, **base) == pytest.approx(twice, rel=1e-12)


def test_a_template_adds_one_plus_t_over_its_time_of_the_sky() -> None:
    """Sky alone: variance n B t (1 + t/T), closed form."""
    found = camera.snr(1.0, 30.0, 600.0, 100.0, template_s=[150.0, 600.0, 6000.0])
    expected = 600.0 / np.sqrt(600.0 + 100.0 * 30.0 * 600.0 * (1.0 + 600.0 / np.array([150.0, 600.0, 6000.0])))
    assert found == pytest.approx(expected, rel=1e-12)


def test_seconds_with_a_template_are_the_inverse_of_the_ratio_and_nan_where_it_is_too_shallow() -> None:
    light = {"source_e_s": 20.0, "sky_e_s_pix": 30.0, "pixels": 100.0, "read_noise_e": 5.0}
    template = {"template_s": np.array([300.0, 3000.0]), "template_frames": np.array([1, 10])}
    ceiling = camera.snr(seconds=1e12, **light, **template)
    seconds = camera.seconds_for_snr(0.7 * ceiling, **light, **template)
    assert camera.snr(seconds=seconds, **light, **template) == pytest.approx(0.7 * ceiling, rel=1e-9)
    assert np.isnan(camera.seconds_for_snr(1.01 * ceiling, **light, **template)).all()
