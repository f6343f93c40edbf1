"""Speeds and scales at cosmological distance, and the factor 1 + z.

Values were read on the page of the arXiv number, circular or abstract named beside them unless marked; authors'
names, years and journal pages beside those are from memory.
"""

from __future__ import annotations

import subprocess
import sys

import numpy as np
import pytest
from astropy.cosmology import FlatLambdaCDM, LambdaCDM

from planner.errors import DomainError
from planner.physics import expansion
from planner.units import C_PC_PER_DAY, RAD_MAS, YEAR_DAYS

# H0 = 100, q0 = 0.5 of old papers: matter only, no Lambda (speeds then carry 1/h)
OLD = LambdaCDM(H0=100.0, Om0=1.0, Ode0=0.0)
SEVENTY_ONE = FlatLambdaCDM(H0=71.0, Om0=0.27)


@pytest.mark.parametrize(
    ("redshift", "motion", "too_low", "too_high"),
    [(0.595, 0.26, 3.218, 8.186), (1.037, 0.65, 9.056, 37.58)],
)
def test_neither_angular_diameter_nor_luminosity_distance_is_used(redshift, motion, too_low, too_high):
    """3C 345 C8 and CTA 102: what the wrong distances would give (closed form)."""
    got = expansion.speed_c(motion, redshift, OLD)
    assert got / (1.0 + redshift) == pytest.approx(too_low, rel=1e-3)
    assert got * (1.0 + redshift) == pytest.approx(too_high, rel=1e-3)


@pytest.mark.parametrize(
    ("redshift", "motion", "printed", "error", "exact"),
    [
        (0.595, 0.26, 5.1, 0.1, 5.132),  # 3C 345 C8, 22 GHz (arXiv astro-ph/9901204)
        (0.595, 0.29, 5.7, 0.1, 5.724),  # same, C7
        (1.037, 0.65, 18.0, 0.5, 18.447),  # CTA 102 at 932 MHz, abstract "Superluminal motion in CTA 102"
        (0.033, 2.4, 3.7, 0.1, 3.664),  # 3C 120, 4-arcsec knot (ASP paper 6872); redshift from memory
    ],
)
def test_published_speeds_of_old_cosmology(redshift, motion, printed, error, exact):
    got = expansion.speed_c(motion, redshift, OLD)
    assert got == pytest.approx(printed, abs=error)
    assert got == pytest.approx(exact, rel=0.005)
    # Mattig's closed form for q0 = 1/2: D_M = 2c/H0 (1 - 1/sqrt(1 + z))
    distance_pc = 2.0 * 299_792.458 / 100.0 * (1.0 - 1.0 / np.sqrt(1.0 + redshift)) * 1e6
    assert got == pytest.approx(motion / RAD_MAS * distance_pc / (C_PC_PER_DAY * YEAR_DAYS), rel=1e-9)


def test_factor_of_one_plus_redshift_is_not_left_out():
    """3C 454.3: an abstract (VLBI for Gravity Probe B III) prints 1.0, 0.8 and 5 c: the factor 1.859 is missing.

    H0 71, Omega_m 0.27 reproduce those numbers without the factor.
    """
    right = expansion.speed_c([0.039, 0.030, 0.2], 0.859, SEVENTY_ONE)
    np.testing.assert_allclose(right, [1.821, 1.401, 9.339], rtol=0.005)
    wrong = np.array([0.980, 0.754, 5.023])
    assert np.all(np.abs(right / wrong - 1.0) > 0.8)
    np.testing.assert_allclose(right / 1.859, wrong, rtol=0.001)


def test_scale_of_cta_102():
    """Fromm et al. 2015 (A&A 576, A43): 1 mas = 8.11 pc, D_L 6.9 Gpc; cosmology from memory."""
    got = expansion.pc_per_mas(1.037, SEVENTY_ONE)
    assert got == pytest.approx(8.112, rel=0.002)
    assert got == pytest.approx(8.11, abs=0.005)
    luminosity_mpc = got * RAD_MAS * 2.037**2 / 1e6
    assert luminosity_mpc == pytest.approx(6943.0, rel=0.002)
    assert round(luminosity_mpc / 1e3, 1) == 6.9


@pytest.mark.parametrize(
    ("redshift", "speed"),
    [(0.033, 2.188), (0.0686, 4.516), (0.158, 10.200), (0.361, 22.229), (0.536, 31.614), (1.037, 53.895)],
)
def test_speed_of_one_mas_a_year(redshift, speed):
    """Computed once with H0 71, Omega_m 0.27 to three decimals: regression against the cosmology library."""
    assert expansion.speed_c(1.0, redshift, SEVENTY_ONE) == pytest.approx(speed, abs=1e-3)


def test_one_mas_a_year_at_one_gpc():
    """15.812507 c at 1 Gpc transverse comoving distance (closed form)."""
    distance_gpc = SEVENTY_ONE.comoving_transverse_distance(0.4).to_value("Gpc")
    assert expansion.speed_c(1.0, 0.4, SEVENTY_ONE) / distance_gpc == pytest.approx(15.812507, rel=1e-7)


def test_speed_and_motion_invert_each_other():
    z = np.array([0.01, 0.4, 3.0])
    for cosmology in (OLD, SEVENTY_ONE, LambdaCDM(H0=70.0, Om0=0.2, Ode0=0.0)):
        motion = expansion.proper_motion_mas_yr(7.0, z, cosmology)
        np.testing.assert_allclose(expansion.speed_c(motion, z, cosmology), 7.0, rtol=1e-14)


def test_nearby_source_moves_as_without_cosmology():
    """At z -> 0 the speed is mu times c z/H0 (Hubble's law, to order z)."""
    z = 1e-5
    got = expansion.speed_c(1.0, z, SEVENTY_ONE)
    hubble_pc = 299_792.458 * z / 71.0 * 1e6
    assert got == pytest.approx(hubble_pc / RAD_MAS / (C_PC_PER_DAY * YEAR_DAYS), rel=2e-5)


def test_durations_are_shorter_at_the_source():
    """25 yr observed for 3C 279 are 16.3 yr at the source (A&A paper on its double jet, 2019); z from memory."""
    got = expansion.source_frame_days(25.0, 0.536)
    assert got == pytest.approx(16.276, rel=1e-3)
    assert round(float(got), 1) == 16.3


def test_shapes_and_nan():
    assert np.ndim(expansion.speed_c(1.0, 0.4, SEVENTY_ONE)) == 0
    assert expansion.speed_c(np.ones((5, 1)), [0.1, 0.2, 0.1], SEVENTY_ONE).shape == (5, 3)
    row = expansion.speed_c(1.0, [0.1, 0.2, 0.1], SEVENTY_ONE)
    assert row[0] == row[2]
    assert row[0] == pytest.approx(expansion.speed_c(1.0, 0.1, SEVENTY_ONE), rel=1e-12)
    assert expansion.speed_c([], 0.4, SEVENTY_ONE).shape == (0,)
    assert expansion.pc_per_mas([], SEVENTY_ONE).shape == (0,)
    assert np.isnan(expansion.speed_c(1.0, np.nan, SEVENTY_ONE))


@pytest.mark.parametrize(
    ("call", "text"),
    [
        (lambda: expansion.speed_c(1, 0, OLD), "redshift: got 0.0, needs a finite number above 0"),
        (lambda: expansion.proper_motion_mas_yr(1, -0.1, OLD), "redshift: got -0.1"),
        (lambda: expansion.pc_per_mas(0, OLD), "redshift: got 0.0"),
        (lambda: expansion.source_frame_days(1, -1), "redshift: got -1.0, needs a finite number at least 0"),
        (lambda: expansion.speed_c(np.inf, 1, OLD), "proper_motion_mas_yr: got inf"),
    ],
)
def test_error_names_argument_value_and_limit(call, text):
    with pytest.raises(DomainError, match=text):
        call()


def test_physics_loads_without_astropy_scipy_or_a_solver():
    code = (
        "import sys\n"
        "from planner.physics import dust, echo, echo_width, expansion, flux, jet, jet_paths\n"
        "heavy = {'astropy', 'scipy', 'pandas', 'matplotlib', 'ortools', 'highspy', 'pydantic'} & set(sys.modules)\n"
        "print(*sorted(heavy))\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert (done.returncode, done.stdout.strip()) == (0, ""), done.stderr
