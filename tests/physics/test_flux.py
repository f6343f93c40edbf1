"""Fading, spectra, boosting and flux ratios of knots.

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

few = settings(max_examples=40, deadline=None)


def test_exponential_fading_reaches_its_limit_after_three_efolds():
    assert flux.exponential_days_above(100.0, 5.0, 10.0) == pytest.approx(29.957, abs=5e-4)  # 10 ln 20
    assert flux.exponential_mjy(100.0, 10.0 * np.log(20.0), 10.0) == pytest.approx(5.0, rel=1e-14)
    assert flux.exponential_mjy(100.0, -10.0, 10.0) == pytest.approx(100.0 * np.e, rel=1e-14)
    assert flux.exponential_days_above(5.0, 100.0, 10.0) < 0.0


@few
@given(st.floats(0.1, 1e3), st.floats(0.0, 500.0), st.floats(1.0, 1e3))
def test_fading_falls_and_composes(start, days, efold):
    one = flux.exponential_mjy(start, days, efold)
    assert one <= start
    assert flux.exponential_mjy(one, days, efold) == pytest.approx(
        flux.exponential_mjy(start, 2 * days, efold), rel=1e-12
    )
    assert flux.power_law_mjy(start, 1.0 + days, 1.3) <= start


def test_power_law_and_spectrum():
    assert flux.power_law_mjy(8.0, 4.0, 1.5) == pytest.approx(1.0, rel=1e-15)
    assert flux.at_frequency_mjy(100.0, 10.0, 40.0, -0.5) == pytest.approx(50.0, rel=1e-15)
    assert flux.at_frequency_mjy(flux.at_frequency_mjy(3.0, 5.0, 22.0, -0.7), 22.0, 5.0, -0.7) == pytest.approx(
        3.0, rel=1e-14
    )


def test_boosting_of_blob_and_jet_differ_by_one_power():
    assert flux.boosting(10.0, -0.7) == pytest.approx(10.0**3.7, rel=1e-14)
    assert flux.boosting(10.0, -0.7, flux.STEADY_JET) == pytest.approx(10.0**2.7, rel=1e-14)
    # a pair of blobs at equal age: ratio of boosts of both sides
    both = flux.boosting(jet.doppler_factor(0.9, [60.0, 120.0]), -0.6)
    assert both[0] / both[1] == pytest.approx(flux.ratio_equal_separation(0.45, -0.6), rel=1e-12)


def test_flux_ratio_of_a_pair():
    """Closed form: R = 7/3 (beta cos 0.4): R^2.7 = 9.852, R^3.7 = 22.989."""
    assert flux.ratio_equal_separation(0.4, -0.7, flux.STEADY_JET) == pytest.approx(9.852, abs=5e-4)
    assert flux.ratio_equal_separation(0.4, -0.7, flux.SINGLE_BLOB) == pytest.approx(22.989, abs=5e-4)


def test_flux_ratio_limit_of_cygnus_x_3():
    """Mioduszewski et al. 2001 (arXiv astro-ph/0102018): ratio >= 330 means >= 0.81 c.

    Spectral index -0.6 from memory; the exponent 2 of a continuous jet gives the printed number.
    """
    assert flux.beta_cos_of_ratio(330.0, -0.6, flux.STEADY_JET) == pytest.approx(0.8059, rel=1e-3)
    assert flux.beta_cos_of_ratio(330.0, -0.6, flux.STEADY_JET) == pytest.approx(0.81, abs=0.01)
    # a single blob would give 0.667: not the printed number
    assert flux.beta_cos_of_ratio(330.0, -0.6, flux.SINGLE_BLOB) == pytest.approx(0.667, abs=5e-4)


@few
@given(st.floats(-0.99, 0.99), st.floats(-1.5, 0.5))
def test_ratio_and_its_inverse(beta_cos, index):
    ratio = flux.ratio_equal_separation(beta_cos, index)
    assert flux.beta_cos_of_ratio(ratio, index) == pytest.approx(beta_cos, rel=1e-9, abs=1e-14)


def test_ratio_at_equal_time_by_looking_at_both_knots():
    """Independent: intrinsic fading age^-n; in one image the ages are t/(1 -+ b cos)."""
    beta, angle, n, index = 0.8, 50.0, 1.7, -0.7
    cosine = beta * np.cos(np.deg2rad(angle))
    seen = [
        (1.0 / (1.0 - sign * cosine)) ** -n * flux.boosting(jet.doppler_factor(beta, a), index)
        for sign, a in ((1.0, angle), (-1.0, 180.0 - angle))
    ]
    assert flux.ratio_equal_time(cosine, index, n) == pytest.approx(seen[0] / seen[1], rel=1e-12)
    assert flux.ratio_equal_time(cosine, index, n) < flux.ratio_equal_separation(cosine, index)
    assert flux.ratio_equal_time(cosine, index, 0.0) == flux.ratio_equal_separation(cosine, index)


# ------------------------------------------------------------------ adiabatic blob


def test_adiabatic_exponents():
    """Electron index 2.5: 5, 2.4615, 1.28125, 0.40625 (exponents from memory)."""
    got = flux.adiabatic_exponents(2.5)
    assert got.thin_flux_by_radius == 5.0
    assert got.peak_frequency_by_radius == pytest.approx(2.4615, abs=5e-5)
    assert got.peak_flux_by_frequency == pytest.approx(1.28125, rel=1e-14)
    assert got.peak_date_by_frequency == pytest.approx(0.40625, rel=1e-14)


@pytest.mark.parametrize("p", [1.5, 2.0, 2.5, 3.0])
def test_blob_model_has_those_exponents(p):
    """The exponents, measured on the spectrum of the model itself by a fine grid."""
    law = flux.adiabatic_exponents(p)
    nu = np.geomspace(1e-3, 1e3, 400_001)

    def peak(size):
        spectrum = flux.adiabatic_mjy(1.0, nu, size, p)
        k = np.argmax(spectrum)
        return nu[k], spectrum[k]

    (nu1, s1), (nu2, s2) = peak(1.0), peak(3.0)
    assert nu1 == pytest.approx(1.0, rel=4e-3)  # the top is flat: frequency to 0.4 %
    assert s1 == pytest.approx(1.0, rel=1e-8)
    assert np.log(nu2 / nu1) / np.log(3.0) == pytest.approx(-law.peak_frequency_by_radius, abs=4e-3)
    expected = -law.peak_frequency_by_radius * law.peak_flux_by_frequency
    assert np.log(s2 / s1) / np.log(3.0) == pytest.approx(expected, abs=1e-6)
    # far above the peak: transparent
    thin = flux.adiabatic_mjy(1.0, 1e6, [1.0, 2.0], p)
    assert np.log2(thin[0] / thin[1]) == pytest.approx(law.thin_flux_by_radius, abs=1e-6)
    # far below: opaque, rising with the surface times the root of the field's fall: radius^3
    thick = flux.adiabatic_mjy(1.0, 1e-4, [1.0, 2.0], p)
    assert np.log2(thick[1] / thick[0]) == pytest.approx(3.0, abs=1e-6)


# ------------------------------------------------------------------ arguments


@pytest.mark.parametrize(
    ("call", "text"),
    [
        (lambda: flux.exponential_mjy(-1, 1, 1), "start_mjy: got -1.0, needs a finite number at least 0"),
        (lambda: flux.exponential_mjy(1, 1, 0), "efold_days: got 0.0, needs a finite number above 0"),
        (lambda: flux.exponential_days_above(1, 0, 1), "limit_mjy: got 0.0"),
        (lambda: flux.power_law_mjy(1, 0, 1), "ratio: got 0.0"),
        (lambda: flux.at_frequency_mjy(1, 0, 1, 1), "from_ghz: got 0.0"),
        (lambda: flux.boosting(0, 1), "doppler: got 0.0"),
        (lambda: flux.ratio_equal_separation(1, 0), "beta_cos: got 1.0, needs .* above -1 and below 1"),
        (lambda: flux.ratio_equal_time(-1, 0, 1), "beta_cos: got -1.0"),
        (lambda: flux.beta_cos_of_ratio(0, 0), "ratio: got 0.0"),
        (lambda: flux.beta_cos_of_ratio(2, 3.0), "exponent - spectral_index: got 0.0"),
        (lambda: flux.adiabatic_exponents(1), "electron_index: got 1.0, needs a finite number above 1"),
        (lambda: flux.adiabatic_mjy(1, 1, 0, 2), "radius_ratio: got 0.0"),
    ],
)
def test_error_names_argument_value_and_limit(call, text):
    with pytest.raises(DomainError, match=text):
        call()


@pytest.mark.parametrize(
    "call",
    [
        lambda x: flux.exponential_mjy(x, 1.0, 1.0),
        lambda x: flux.exponential_days_above(x, 1.0, 1.0),
        lambda x: flux.power_law_mjy(1.0, x, 1.0),
        lambda x: flux.at_frequency_mjy(1.0, 1.0, x, -0.7),
        lambda x: flux.boosting(x, -0.7),
        lambda x: flux.ratio_equal_separation(x / 100.0, -0.7),
        lambda x: flux.ratio_equal_time(x / 100.0, -0.7, 1.0),
        lambda x: flux.beta_cos_of_ratio(x, -0.7),
        lambda x: flux.adiabatic_mjy(1.0, x, 1.0, 2.5),
        lambda x: flux.adiabatic_exponents(x).peak_date_by_frequency,
    ],
)
def test_scalars_vectors_and_empty_arrays_broadcast(call):
    one = np.array([30.0, 60.0])
    assert np.ndim(call(np.float64(30.0))) == 0
    assert call(one)[1] == pytest.approx(call(np.float64(60.0)), rel=1e-15)
    assert call(np.array([])).shape == (0,)
    assert np.isnan(call(np.float64(np.nan)))
