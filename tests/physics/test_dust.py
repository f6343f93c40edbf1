"""Phase function, surface brightness, polarisation and the dust tables."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.errors import DomainError, UnknownName
from planner.physics import dust, echo
from planner.units import C_PC_PER_DAY, LY_PC, MAG_PER_TAU, SR_ARCSEC2, YEAR_DAYS, mjd_of_date

few = settings(max_examples=40, deadline=None)


@pytest.mark.parametrize("g", [0.0, 0.4381, 0.5382, 0.6, 0.95, -0.5])
def test_phase_function_integrates_to_one_with_mean_cosine_g(g):
    """Gauss-Legendre over the cosine; 400 points are exact to rounding for these g."""
    cosine, weight = np.polynomial.legendre.leggauss(400)
    phi = dust.phase_function(np.rad2deg(np.arccos(cosine)), g)
    assert 2.0 * np.pi * np.sum(weight * phi) == pytest.approx(1.0, abs=1e-9)
    assert 2.0 * np.pi * np.sum(weight * phi * cosine) == pytest.approx(g, abs=1e-9)


@pytest.mark.parametrize(
    ("g", "expected"),
    [
        # closed form to four decimals, at 0, 5, 10, 28, 45, 90, 135, 180 deg
        (0.5382, [0.5740, 0.5578, 0.5138, 0.2861, 0.1471, 0.0386, 0.0192, 0.0155]),
        (0.6065, [0.8256, 0.7900, 0.6975, 0.3111, 0.1381, 0.0314, 0.0152, 0.0121]),
        (0.0, [0.0796] * 8),
    ],
)
def test_phase_function_values(g, expected):
    got = dust.phase_function([0.0, 5.0, 10.0, 28.0, 45.0, 90.0, 135.0, 180.0], g)
    np.testing.assert_allclose(got, expected, atol=5.1e-5)


@few
@given(st.floats(0.0, 180.0), st.floats(-0.99, 0.99))
def test_forward_and_backward_grains_mirror_each_other(angle, g):
    assert dust.phase_function(angle, g) == pytest.approx(dust.phase_function(180.0 - angle, -g), rel=1e-12)


@few
@given(st.floats(0.0, 178.0), st.floats(0.01, 0.98))
def test_phase_function_falls_with_angle_for_forward_grains(angle, g):
    assert dust.phase_function(angle + 1.0, g) < dust.phase_function(angle, g)


def test_tables_hold_the_values_of_draine_2003():
    assert dust.grains("milky_way", "V") == (0.6735, 0.5382)
    assert dust.grains("milky_way", "B") == (0.6529, 0.5654)
    assert dust.grains("milky_way", "I") == (0.6576, 0.4381)
    assert dust.grains("lmc", "V") == (0.7623, 0.6070)
    # N_H/A_V: 1.88e21 (Milky Way) and 8.6e21 (LMC), from the cross-sections, printed digits
    assert dust.hydrogen_column_cm2(1.0, "milky_way", "V") == pytest.approx(1.88e21, rel=0.003)
    assert dust.hydrogen_column_cm2(1.0, "lmc", "V") == pytest.approx(8.6e21, rel=0.006)


def test_every_row_is_physical_and_ordered_by_wavelength():
    for rows in dust.MIXES.values():
        waves = [row.wavelength_micron for row in rows.values()]
        assert waves == sorted(waves)
        assert all(0.0 < row.albedo < 1.0 and 0.0 < row.g < 1.0 for row in rows.values())


def test_unknown_dust_and_filter_name_what_is_permitted():
    with pytest.raises(UnknownName, match=r"dust mix 'milkyway'; did you mean 'milky_way'\?.*lmc, milky_way"):
        dust.grains("milkyway", "V")
    with pytest.raises(UnknownName, match=r"filter of lmc dust 'B'.*allowed: I, R, V, g, i, r"):
        dust.grains("lmc", "B")
    with pytest.raises(UnknownName, match=r"filter with a cross-section for lmc dust 'R'.*allowed: V"):
        dust.hydrogen_column_cm2(1.0, "lmc", "R")


# ------------------------------------------------------------------ brightness

CASE = (12.0, 0.3, 0.6735, 0.5382, 100.0, YEAR_DAYS)


def test_surface_brightness_of_the_100_pc_sheet():
    ring = echo.sheet_ring(YEAR_DAYS, 100.0, 1e6)
    phi = dust.phase_function(ring.scattering_deg, 0.5382)
    assert phi == pytest.approx(0.5609464, rel=1e-6)  # closed form, as all numbers of this test
    share = dust.scattered_fraction(0.3, 0.6735, 0.5382, 100.0, YEAR_DAYS)
    assert share / phi == pytest.approx(0.1860949, rel=1e-6)  # optical depth to scattering
    assert dust.ring_mag_arcsec2(*CASE, 1e6) == pytest.approx(21.0321, abs=1e-4)
    total = dust.whole_ring_mag(12.0, 30.0, *CASE[1:])
    assert total == pytest.approx(21.4585, abs=1e-4)
    assert ring.radius_arcsec == pytest.approx(1.616441, rel=1e-6)
    # ring light spread over its own width (0.0664852 arcsec, rectangular) is the resolved peak again
    even = total + 2.5 * np.log10(2.0 * np.pi * 1.616441 * 0.0664852)
    assert even == pytest.approx(21.0321, abs=1e-3)
    gaussian = dust.seeing_limited_mag_arcsec2(total, 1.616441, 0.0664852)
    assert gaussian - even == pytest.approx(2.5 * np.log10(1.0645), abs=1e-4)


def test_phase_function_norm_of_4_pi_would_be_275_hundredths_of_a_magnitude_off():
    wrong = CASE[0] - 2.5 * np.log10(
        4.0 * np.pi * dust.scattered_fraction(*CASE[1:]) * (1e6 / 100.3066) ** 2 / SR_ARCSEC2
    )
    assert dust.ring_mag_arcsec2(*CASE, 1e6) - wrong == pytest.approx(2.75, abs=0.003)


def test_outer_ring_of_sn_1987a_on_1988_march_19():
    """IAUC 4567: about V 21.5 per arcsec2 in the brighter knots. A_V 0.13 is tuned, V maximum 2.96 from memory."""
    t = mjd_of_date("1988-03-19") - mjd_of_date("1987-05-20")
    albedo, g = dust.grains("lmc", "V")
    mag = dust.ring_mag_arcsec2(2.96, 0.13, albedo, g, 1100 * LY_PC, t, 50_000.0)
    assert mag == pytest.approx(21.5, abs=1.0)  # what the model can promise
    assert mag == pytest.approx(21.49, abs=0.01)  # the same sum done by hand
    milky_way = dust.ring_mag_arcsec2(2.96, 0.13, *dust.grains("milky_way", "V"), 1100 * LY_PC, t, 50_000.0)
    assert milky_way == pytest.approx(22.02, abs=0.01)


def test_far_sheet_hardly_fades():
    """SN 1987A outer sheet from 0.8 to 15 yr: 0.19 mag (computed), scattering 2.2 to 9.4 deg."""
    t = np.array([304.0, 15.0 * YEAR_DAYS])
    mag = dust.ring_mag_arcsec2(2.96, 0.13, *dust.grains("lmc", "V"), 1100 * LY_PC, t, 50_000.0)
    assert mag[1] - mag[0] == pytest.approx(0.19, abs=0.01)
    angle = echo.sheet_ring(t, 1100 * LY_PC, 5e4).scattering_deg
    np.testing.assert_allclose(angle, [2.2, 9.4], atol=0.06)


def test_thin_sheet_brightness_against_a_direct_integral_over_depth():
    """I = Phi (D/r)^2 int kappa F(t - (r - z)/c) dz, Gaussian light curve, sheet of Gaussian profile 1e-3 pc."""
    z0, t, big, tau = 20.0, 800.0, 1e4, 40.0
    rho = echo.sheet_ring(t, z0, big).radius_arcsec / 206264.80625 * big
    z = np.linspace(z0 - 8e-3, z0 + 8e-3, 20_001)
    r = np.hypot(rho, z)
    late = t - rho**2 / (z + r) / C_PC_PER_DAY
    flux = np.exp(-0.5 * (late / (tau / 2.3548)) ** 2)
    kappa = 0.6 * 0.2 / MAG_PER_TAU * np.exp(-0.5 * ((z - z0) / 1e-3) ** 2) / (1e-3 * np.sqrt(2 * np.pi))
    angle = np.rad2deg(2.0 * np.arctan2(rho, z + r))
    inner = dust.phase_function(angle, 0.5) * kappa * flux * (big / r) ** 2
    intensity = np.trapezoid(inner, z)
    got = dust.ring_mag_arcsec2(0.0, 0.2, 0.6, 0.5, z0, t, big)
    # the sheet smears the peak by (1e-3/20)^2, far below 1e-4 mag
    assert got == pytest.approx(-2.5 * np.log10(intensity / SR_ARCSEC2), abs=1e-4)


def test_thick_dust_brightness_against_a_direct_integral_over_depth():
    z0, t, big, tau = 20.0, 800.0, 1e4, 2.0
    rho = echo.sheet_ring(t, z0, big).radius_arcsec / 206264.80625 * big
    z = np.linspace(z0 - 0.4, z0 + 0.4, 40_001)
    r = np.hypot(rho, z)
    late = t - rho**2 / (z + r) / C_PC_PER_DAY
    flux = np.where(np.abs(late) < tau / 2.0, 1.0, 0.0)
    angle = np.rad2deg(2.0 * np.arctan2(rho, z + r))
    kappa = 0.6 * 0.05 / MAG_PER_TAU
    intensity = np.trapezoid(dust.phase_function(angle, 0.5) * kappa * flux * (big / r) ** 2, z)
    got = dust.thick_mag_arcsec2(0.0, tau, 0.05, 0.6, 0.5, z0, t, big)
    # edges of the lit layer fall between samples of 2e-5 pc in 0.05 pc
    assert got == pytest.approx(-2.5 * np.log10(intensity / SR_ARCSEC2), abs=2e-3)


def test_thin_limit_is_where_thin_and_thick_meet():
    path = dust.thin_limit_pc(30.0, 100.0, YEAR_DAYS)
    assert path == pytest.approx(100.3066 * 30.0 / YEAR_DAYS, rel=1e-6)
    thin = dust.ring_mag_arcsec2(12.0, 0.01 * path, 0.6, 0.5, 100.0, YEAR_DAYS, 1e6)
    thick = dust.thick_mag_arcsec2(12.0, 30.0, 0.01, 0.6, 0.5, 100.0, YEAR_DAYS, 1e6)
    assert thin == pytest.approx(thick, rel=1e-13)


def test_isotropic_shell_flux_is_constant_and_carries_all_scattered_light():
    end = 2.0 / C_PC_PER_DAY
    t = (np.arange(1000) + 0.5) / 1000 * end * 1.5
    flux = dust.shell_flux_ratio(t, 1.0, 0.05, 40.0)
    lit = t < end
    assert np.ptp(flux[lit]) == 0.0
    assert np.all(flux[~lit] == 0.0)
    assert flux[0] == pytest.approx(40.0 * 0.05 * C_PC_PER_DAY / 2.0, rel=1e-12)
    integral = flux[lit][0] * end
    assert integral == pytest.approx(0.05 * 40.0, rel=1e-6)  # tau_s times fluence
    assert dust.shell_flux_ratio(-1.0, 1.0, 0.05, 40.0) == 0.0


@few
@given(st.floats(1.0, 1e4), st.floats(0.1, 1e3), st.floats(0.01, 1.0))
def test_brightness_is_monotonic_in_extinction_and_independent_of_distance_scale(t, z0, a):
    mag = dust.ring_mag_arcsec2(10.0, [a, 1.1 * a], 0.6, 0.5, z0, t, 1e4)
    assert mag[1] < mag[0]
    # all lengths and times k times larger: D/r and the angle stay
    other = dust.ring_mag_arcsec2(10.0, a, 0.6, 0.5, 3.0 * z0, 3.0 * t, 3e4)
    assert other == pytest.approx(mag[0], rel=1e-12)


@few
@given(st.floats(-1e3, 1e5), st.floats(-50.0, 50.0).filter(lambda z: z != 0.0))
def test_brightness_is_nan_exactly_where_no_ring_is(t, z0):
    radius = echo.sheet_ring(t, z0, 1e4).radius_arcsec
    assert np.isnan(dust.ring_mag_arcsec2(10.0, 0.1, 0.6, 0.5, z0, t, 1e4)) == np.isnan(radius)
    assert np.isnan(dust.whole_ring_mag(10.0, 30.0, 0.1, 0.6, 0.5, z0, t)) == np.isnan(radius)


# ------------------------------------------------------------------ polarisation


def test_polarisation_peaks_at_90_deg():
    got = dust.polarisation_share([30.0, 60.0, 90.0, 120.0])
    np.testing.assert_allclose(got, [1 / 7, 0.6, 1.0, 0.6], rtol=1e-9)  # closed form
    assert dust.polarisation_share(0.0) == 0.0
    assert dust.polarisation_share(180.0) == 0.0


def test_polarised_ring_grows_at_c_and_gives_the_distance():
    ring = echo.sheet_ring([100.0, 200.0], 0.0, 2e3)
    got = dust.polarised_radius_arcsec([100.0, 200.0], 2e3)
    np.testing.assert_allclose(got, ring.radius_arcsec, rtol=1e-14)
    assert echo.plane_of_sky_distance_pc(200.0, got[1]) == pytest.approx(2e3, rel=1e-14)
    assert np.isnan(dust.polarised_radius_arcsec(-1.0, 2e3))


# ------------------------------------------------------------------ arguments


@pytest.mark.parametrize(
    ("call", "text"),
    [
        (lambda: dust.phase_function(181, 0.5), "scattering_deg: got 181.0, needs .* at least 0 and at most 180"),
        (lambda: dust.phase_function(10, 1.0), "g: got 1.0, needs .* above -1 and below 1"),
        (lambda: dust.ring_mag_arcsec2(10, 0, 0.6, 0.5, 1, 1, 1), "extinction_mag: got 0.0, needs .* above 0"),
        (lambda: dust.ring_mag_arcsec2(10, 1, 1.2, 0.5, 1, 1, 1), "albedo: got 1.2, needs .* at most 1"),
        (lambda: dust.ring_mag_arcsec2(10, 1, 0.6, 0.5, 1, 1, -1), "distance_pc: got -1.0"),
        (lambda: dust.ring_mag_arcsec2(np.inf, 1, 0.6, 0.5, 1, 1, 1), "peak_mag: got inf"),
        (lambda: dust.whole_ring_mag(10, 0, 1, 0.6, 0.5, 1, 1), "duration_days: got 0.0"),
        (lambda: dust.seeing_limited_mag_arcsec2(10, 1, 0), "width_arcsec: got 0.0"),
        (lambda: dust.thick_mag_arcsec2(10, 1, 0, 0.6, 0.5, 1, 1, 1), "extinction_mag_pc: got 0.0"),
        (lambda: dust.shell_flux_ratio(1, 0, 1, 1), "shell_radius_pc: got 0.0"),
        (lambda: dust.polarisation_share(-1), "scattering_deg: got -1.0"),
        (lambda: dust.hydrogen_column_cm2(-1, "lmc", "V"), "extinction_mag: got -1.0"),
    ],
)
def test_error_names_argument_value_and_limit(call, text):
    with pytest.raises(DomainError, match=text):
        call()


@pytest.mark.parametrize(
    "call",
    [
        lambda t: dust.phase_function(t, 0.5),
        lambda t: dust.ring_mag_arcsec2(12.0, 0.3, 0.6, 0.5, 10.0, t, 1e4),
        lambda t: dust.whole_ring_mag(12.0, 30.0, 0.3, 0.6, 0.5, 10.0, t),
        lambda t: dust.thick_mag_arcsec2(12.0, 30.0, 0.3, 0.6, 0.5, 10.0, t, 1e4),
        lambda t: dust.thin_limit_pc(30.0, 10.0, t),
        lambda t: dust.seeing_limited_mag_arcsec2(20.0, t, 1.0),
        lambda t: dust.shell_flux_ratio(t, 1.0, 0.1, 30.0),
        lambda t: dust.polarisation_share(t),
        lambda t: dust.polarised_radius_arcsec(t, 1e3),
        lambda t: dust.hydrogen_column_cm2(t, "lmc", "V"),
    ],
)
def test_scalars_vectors_and_empty_arrays_broadcast(call):
    assert np.ndim(call(30.0)) == 0
    assert call(np.array([30.0, 60.0]))[1] == call(60.0)
    assert call([]).shape == (0,)
    assert np.isnan(call(np.nan))
