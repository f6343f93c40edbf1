"""Radial profiles against the widths they summarise, against closed forms, and against a plain double loop."""

from __future__ import annotations

import numpy as np
import pytest

from planner.errors import DomainError
from planner.physics import echo
from planner.physics import echo_width as width
from planner.physics.echo_profile import profile_width_arcsec, radial_profile
from planner.physics.light_curve import course, plateaus
from planner.units import C_PC_PER_DAY, FWHM_PER_SIGMA, RAD_ARCSEC, YEAR_DAYS

D = 1e4


def _gauss(fwhm_days: float):
    days = np.linspace(-4 * fwhm_days, 4 * fwhm_days, 801)
    return course(days, np.exp(-0.5 * (days / fwhm_days * FWHM_PER_SIGMA) ** 2))


def _grid(radius: float, half: float, count: int = 1201) -> np.ndarray:
    return np.linspace(radius - half, radius + half, count)


@pytest.mark.parametrize("slope", [0.0, 0.6, -0.6])
@pytest.mark.parametrize(("tau", "dz", "fwhm"), [(20.0, 0.05, 0.0), (5.0, 6.0, 0.0), (15.0, 2.0, 3.0)])
def test_profile_and_quadrature_agree_for_smooth_narrow_rings(slope, tau, dz, fwhm):
    """All three pieces Gaussian and the width a twentieth of the radius: second-order terms are a few per cent."""
    rho = echo.radius_at_pa_arcsec(echo.sheet_circle(YEAR_DAYS, 100.0, D, slope, 0.0), 90.0)
    light = _gauss(tau)
    grid = _grid(float(rho), 25.0)
    found = radial_profile(
        grid, YEAR_DAYS, 100.0, D, light, thickness_pc=dz, radial_slope=slope, image_fwhm_arcsec=fwhm
    )
    expected = width.total_width_arcsec(
        width.outburst_width_arcsec(tau, rho, YEAR_DAYS, D, slope),
        width.dust_width_arcsec(dz, rho, YEAR_DAYS, D, slope),
        fwhm,
    )
    assert profile_width_arcsec(grid, found) == pytest.approx(float(expected), rel=0.03)
    assert grid[np.argmax(found)] == pytest.approx(float(rho), abs=0.05 * float(expected))


def test_a_thin_sheet_and_no_blur_show_the_light_curve_reversed():
    """Outside is early: the profile is the light curve read backwards, stretched by the ring's speed."""
    light = course([-10.0, 0.0, 30.0], [0.0, 1.0, 0.0])
    rho = float(echo.sheet_ring(YEAR_DAYS, 100.0, D).radius_arcsec)
    grid = _grid(rho, 12.0, 2401)
    found = radial_profile(grid, YEAR_DAYS, 100.0, D, light, thickness_pc=1e-4)
    for age in (-8.0, -5.0, 5.0, 15.0, 25.0):  # light sent then is seen at the radius of that delay; dust 1 % nearer
        there = float(echo.sheet_ring(YEAR_DAYS - age, 100.0, D).radius_arcsec)
        assert np.interp(there, grid, found) == pytest.approx(float(light.at(age)), abs=5e-3)
    assert np.interp(rho, grid, found) == pytest.approx(1.0, abs=0.01)


def test_two_pulses_make_two_rings_which_quadrature_cannot_know():
    light = plateaus([0.0, 120.0], [0.5, 0.5], [10.0, 10.0])
    rho = float(echo.sheet_ring(YEAR_DAYS, 100.0, D).radius_arcsec)
    inner = float(echo.sheet_ring(YEAR_DAYS - 120.0, 100.0, D).radius_arcsec)
    grid = _grid(140.0, 40.0)
    found = radial_profile(grid, YEAR_DAYS, 100.0, D, light, thickness_pc=0.05)
    assert profile_width_arcsec(grid, found) == pytest.approx(rho - inner, abs=3.0)
    assert np.interp((rho + inner) / 2, grid, found) < 1e-3
    assert found.max() == pytest.approx(1.0, abs=0.02)


def test_thick_dust_is_fainter_than_thin_by_the_lit_share_of_its_depth():
    """Gaussian light and dust: peak / thin peak = L / hypot(L, dz) with the lit layer L = r tau/t (convolution)."""
    light, dz = _gauss(10.0), 8.0
    ct = C_PC_PER_DAY * YEAR_DAYS
    lit = (100.0 + ct) * 10.0 / YEAR_DAYS
    grid = _grid(161.6, 60.0)
    found = radial_profile(grid, YEAR_DAYS, 100.0, D, light, thickness_pc=dz)
    assert found.max() == pytest.approx(lit / np.hypot(lit, dz), rel=0.01)


def test_profile_equals_the_plain_double_loop():
    light, slope, dz = course([-20.0, 0.0, 50.0], [0.0, 1.0, 0.0]), 0.3, 3.0
    grid = np.linspace(120.0, 200.0, 41)
    found = radial_profile(grid, YEAR_DAYS, 60.0, D, light, thickness_pc=dz, radial_slope=slope)
    ct = C_PC_PER_DAY * YEAR_DAYS
    home = np.hypot(np.sqrt(ct * (2 * 60.0 + ct)), 60.0)
    for theta, value in zip(grid, found, strict=True):
        rho, total, area = theta * D / RAD_ARCSEC, 0.0, 0.0
        for u in np.linspace(-2.0, 2.0, 4001):
            z = 60.0 + slope * rho + u * dz
            r = np.hypot(rho, z)
            weight = np.exp(-0.5 * (u * FWHM_PER_SIGMA) ** 2)
            total += weight * float(light.at((ct - (r - z)) / C_PC_PER_DAY)) * (home / r) ** 2
            area += weight
        assert value == pytest.approx(total / area, abs=2e-3)


def test_blur_keeps_the_light_and_widens_the_ring():
    light = _gauss(5.0)
    grid = _grid(161.6, 40.0)
    sharp = radial_profile(grid, YEAR_DAYS, 100.0, D, light, thickness_pc=0.1)
    soft = radial_profile(grid, YEAR_DAYS, 100.0, D, light, thickness_pc=0.1, image_fwhm_arcsec=4.0)
    assert soft.sum() == pytest.approx(sharp.sum(), rel=1e-6)
    expected = np.hypot(profile_width_arcsec(grid, sharp), 4.0)
    assert profile_width_arcsec(grid, soft) == pytest.approx(expected, rel=0.01)


def test_a_ring_that_is_not_there_has_no_width():
    grid = np.linspace(0.0, 10.0, 101)
    found = radial_profile(grid, 10.0, -5.0, D, _gauss(5.0), thickness_pc=0.1)
    assert np.all(found == 0.0)
    assert np.isnan(profile_width_arcsec(grid, found))


def test_radii_must_be_evenly_spaced():
    with pytest.raises(DomainError, match="radius_arcsec: got 3, needs three or more evenly spaced, rising radii"):
        radial_profile([0.0, 1.0, 3.0], 10.0, 5.0, D, _gauss(5.0), thickness_pc=0.1)
