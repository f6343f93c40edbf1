"""Light echoes that were really measured, against the formulas.

IAUC = IAU Circular. Depths, dates, radii and distances are as printed there; what is from memory says so.
The clock of SN 1987A starts at optical maximum, 1987 May 20 (the month is in ESO press release 8802, 1988;
the day is from memory).
Values were read on the page of the arXiv number, circular or abstract named beside them unless marked; authors'
names, years and journal pages beside those are from memory.
"""

from __future__ import annotations

import numpy as np
import pytest

from planner.physics import echo, echo_width, jet
from planner.units import C_PC_PER_DAY, LY_PC, RAD_ARCSEC, YEAR_DAYS, mjd_of_date

MONTH_DAYS = YEAR_DAYS / 12.0
MAXIMUM = mjd_of_date("1987-05-20")
EXPLOSION = mjd_of_date("1987-02-23")  # from memory
LMC_PC = 50_000.0


def days(date: str) -> float:
    return mjd_of_date(date) - MAXIMUM


@pytest.mark.parametrize(
    ("date", "inner", "outer"),
    [
        ("1988-02-13", 32.0, 51.0),  # ESO press release 8802 (1988)
        ("1988-03-19", 33.0, 54.0),  # IAUC 4567
        ("1989-01-24", 46.0, 78.0),  # IAUC 4733
    ],
)
def test_two_sheets_before_sn_1987a_give_all_three_epochs(date, inner, outer):
    """One depth each (406 and 1110 ly, fitted) reproduces both rings at all epochs, printed to whole arcsec."""
    assert echo.sheet_ring(days(date), 406 * LY_PC, LMC_PC).radius_arcsec == pytest.approx(inner, abs=1.2)
    assert echo.sheet_ring(days(date), 1110 * LY_PC, LMC_PC).radius_arcsec == pytest.approx(outer, abs=0.8)


def test_growth_of_both_rings_of_sn_1987a_in_march_1988():
    """IAUC 4561: radii 32 and 47 arcsec, predicted growth 1.6 and 2.4 arcsec a month (printed to 0.1)."""
    t = days("1988-03-05")
    depth = echo.depth_from_radius_pc([32.0, 47.0], t, LMC_PC)
    speed = echo.sheet_ring(t, depth, LMC_PC).speed_c
    rate = speed * C_PC_PER_DAY * MONTH_DAYS / LMC_PC * RAD_ARCSEC
    np.testing.assert_allclose(rate, [1.6, 2.4], rtol=0.06)


def test_depth_of_the_inner_sheet_needs_the_clock_of_maximum():
    """Crotts 1988 (ApJ 333, L51) prints about 400 ly for the ring of IAUC 4561 (32 arcsec, 1988 March 4)."""
    date = mjd_of_date("1988-03-04")
    right = echo.depth_from_radius_pc(32.0, date - MAXIMUM, LMC_PC) / LY_PC
    wrong = echo.depth_from_radius_pc(32.0, date - EXPLOSION, LMC_PC) / LY_PC
    assert right == pytest.approx(400.0, rel=0.03)
    assert wrong != pytest.approx(400.0, rel=0.03)
    assert wrong == pytest.approx(310.0, rel=0.01)  # what the wrong clock gives


@pytest.mark.parametrize(
    ("radius", "printed"),
    [
        (8.2, 4.4),  # Bond et al. 1990 (ApJ 354, L49, abstract)
        (9.5, 5.9),  # IAUC 4733
    ],
)
def test_third_ring_of_sn_1987a_prints_distance_from_the_star_not_depth(radius, printed):
    """1989 Jan 24, D 52 kpc: the printed number is z + ct although one text says "in front of"."""
    t = days("1989-01-24")
    z = echo.depth_from_radius_pc(radius, t, 52_000.0)
    assert z + C_PC_PER_DAY * t == pytest.approx(printed, rel=0.02)
    assert z != pytest.approx(printed, rel=0.05)


def test_third_ring_of_sn_1987a_at_four_epochs():
    """IAUC 4741: 7.97 +- 0.12 (1988 Oct 6), 8.40 +- 0.08 (Dec 15), thin sheet predicts 8.7 for Jan 24 - Feb 5."""
    z = echo.depth_from_radius_pc(8.40, days("1988-12-15"), 52_000.0)
    for date, printed in (("1988-10-06", 7.97), ("1989-01-24", 8.7), ("1989-02-05", 8.7)):
        assert echo.sheet_ring(days(date), z, 52_000.0).radius_arcsec == pytest.approx(printed, abs=0.15)


def test_far_sheet_of_sn_1987a_in_1993():
    """Xu et al. 1993 (BAAS 25, abstract): 238 arcsec on 1993 May 1 from 3140 ly; their D is not printed."""
    ring = echo.sheet_ring(days("1993-05-01"), 3140 * LY_PC, 51_400.0)
    assert ring.radius_arcsec == pytest.approx(238.0, rel=0.005)


def test_width_of_the_rings_of_sn_1987a():
    """IAUC 4567: typical thickness 5-10 arcsec; outburst of 80-107 d (width of the light curve, from memory)."""
    t = days("1988-03-19")
    widths = [echo_width.outburst_width_arcsec(tau, radius, t, LMC_PC) for radius in (33.0, 54.0) for tau in (80, 107)]
    np.testing.assert_allclose(widths, [4.4, 5.8, 7.1, 9.5], atol=0.06)  # computed to 0.1 with the same formula
    assert min(widths) > 5.0 * 0.8
    assert max(widths) < 10.0 * 1.2


@pytest.mark.parametrize(("radius", "printed"), [(0.05, 27.0), (0.125, 170.0)])
def test_dust_of_sn_2006x(radius, printed):
    """Wang et al. 2008 (arXiv 0711.2570): 27-170 pc from the supernova at 15.2 Mpc after about 300 d."""
    z = echo.depth_from_radius_pc(radius, 300.0, 15.2e6)
    assert z + C_PC_PER_DAY * 300.0 == pytest.approx(printed, rel=0.02)


def test_nova_persei_1901_moved_faster_than_light():
    """A. Clerke (Popular History, 4th ed.): 90 arcsec in 48 d; 433.6 pc from the parallax 2.3063 mas.

    Setting the speed to c gave 300 ly to a history of that decade (G. Forbes).
    """
    assert jet.transverse_speed_c(90e3 / 48.0, 0.4336) == pytest.approx(4.70, rel=0.01)
    assert echo.plane_of_sky_distance_pc(48.0, 90.0) / LY_PC == pytest.approx(300.0, rel=0.01)


def test_infrared_echoes_of_cas_a():
    """Krause et al. 2005 (Science 308, 1604): 10-20 arcsec a year at 3.4 kpc, about the speed of light."""
    speed = jet.transverse_speed_c(np.array([10e3, 20e3]) / YEAR_DAYS, 3.4)
    np.testing.assert_allclose(speed, [0.54, 1.08], rtol=0.02)


def test_echo_beside_t_pyxidis():
    """Sokoloski et al. 2013 (arXiv 1305.5245): ring of 5 arcsec, 4.8 kpc; delay in the sky plane, closed form."""
    assert echo.delay_at_radius_days(5.0, 0.0, 4800.0) == pytest.approx(138.6, rel=1e-3)
    assert echo.plane_of_sky_distance_pc(138.6, 5.0) == pytest.approx(4800.0, rel=1e-3)


def test_phase_lags_around_rs_puppis():
    """Period 41.4389 d, angles as Feast 2008 (arXiv 0804.0092), 1910 pc from Kervella et al. 2014.

    Cycles computed from c t = r - z; tolerance of the printed digits.
    """
    lag = echo.phase_lag_cycles(20.0, 41.4389, 1910.0, [-60.0, -30.0, 0.0, 30.0, 60.0])
    np.testing.assert_allclose(lag, [1.4266, 3.0739, 5.3241, 9.2216, 19.8698], rtol=1e-4)
    spacing = 20.0 / lag[2]
    assert spacing == pytest.approx(3.7565, rel=1e-4)
    # their angle is positive AWAY from us, our depth toward us: dust behind lags more
    for behind, cycles in ((-30.0, lag[1]), (30.0, lag[3])):
        rho_pc = 20.0 / RAD_ARCSEC * 1910.0
        depth = -rho_pc * np.tan(np.deg2rad(behind))
        delay = echo.delay_at_radius_days(20.0, depth, 1910.0)
        assert delay / 41.4389 == pytest.approx(cycles, rel=1e-12)


def test_rings_of_grb_031203():
    """Layers 880 and 1390 pc (Vaughan et al. 2004), first data 22,081 s after the burst; about a thousand c."""
    ring = echo.screen_ring(22_081.0 / 86_400.0, [880.0, 1390.0])
    np.testing.assert_allclose(ring.radius_arcsec, [144.0, 114.6], rtol=1e-3)  # computed, radii not in print
    np.testing.assert_allclose(ring.speed_c, [1432.0, 1800.0], rtol=1e-3)
    assert np.all((ring.speed_c > 500.0) & (ring.speed_c < 2000.0))  # printed: about a thousand
    # speed at the dust; taking the distance of the galaxy instead would give a hundred thousand times more
    np.testing.assert_allclose(
        ring.speed_c,
        ring.radius_arcsec / RAD_ARCSEC * [880.0, 1390.0] / (2.0 * C_PC_PER_DAY * 22_081.0 / 86_400.0),
        rtol=1e-6,
    )


def test_rings_of_grb_160623a():
    """Pintore et al. 2017 (arXiv 1708.08835): six layers, rings growing between about 2 and 9 arcmin at 2 d."""
    layers = np.array([528.1, 679.2, 789.0, 952.0, 1539.0, 5079.0])
    radius = echo.screen_ring(2.0, layers).radius_arcsec / 60.0
    np.testing.assert_allclose(radius, [8.67, 7.64, 7.09, 6.46, 5.08, 2.80], atol=0.006)
    assert radius.min() > 2.0
    assert radius.max() < 9.0


def test_rings_of_v404_cygni_need_the_source_at_its_real_distance():
    """Vasilopoulos & Petropoulou 2016: five layers; pattern a third of the Moon (10 arcmin ACROSS) at 3.9 d.

    D 2.39 kpc from memory.
    """
    layers = np.array([1180.0, 1500.0, 1630.0, 2050.0, 2120.0])
    radius = echo.screen_ring(3.9, layers, 2390.0).radius_arcsec / 60.0
    np.testing.assert_allclose(radius, [5.76, 4.38, 3.89, 2.32, 2.03], atol=0.006)
    assert 2.0 * radius.max() == pytest.approx(10.0, rel=0.2)
    assert radius.max() != pytest.approx(10.0, rel=0.2)  # taking the diameter for the radius fails
    later = echo.screen_ring(4.0 * 3.9, layers, 2390.0).radius_arcsec / 60.0
    np.testing.assert_allclose(later, 2.0 * radius, rtol=1e-5)  # all grow as the root of time
    # the paraboloid is useless here: 243 instead of 346 arcsec
    wrong = echo.sheet_ring(3.9, 2390.0 - 1180.0, 2390.0).radius_arcsec
    assert wrong == pytest.approx(243.0, abs=0.5)
    assert radius[0] * 60.0 == pytest.approx(346.0, abs=0.5)


@pytest.mark.parametrize("t", [1.0, 12.5, 100.0])
def test_ring_ratios_of_1e_1547_stay_fixed(t):
    """Tiengo et al. 2010 (arXiv 0911.3064): D 3.91 kpc, layers 2.2, 2.6, 3.4 kpc; ratios computed."""
    radius = echo.screen_ring(t, [2200.0, 2600.0, 3400.0], 3910.0).radius_arcsec
    np.testing.assert_allclose(radius / radius[2], [2.276, 1.833, 1.0], rtol=1e-3)


def test_upper_limit_on_the_dust_of_grb_061019():
    """GCN Circular 5737: at least 100 arcsec within 17 ks, hence dust nearer than 1405 pc (computed)."""
    assert echo.dust_distance_pc(100.0, 17_000.0 / 86_400.0) == pytest.approx(1405.0, rel=1e-3)
    assert echo.screen_ring(17_000.0 / 86_400.0, 1400.0).radius_arcsec > 100.0


def test_finite_distance_widens_the_far_sheets_of_sn_1987a():
    """theta(exact)/theta(paraboloid) = 1 + z/(2D): +0.12, +0.34, +1.06 % for 400, 1100, 3400 ly (computed)."""
    for depth_ly, percent in ((400.0, 0.12), (1100.0, 0.34), (3400.0, 1.06)):
        exact = echo.near_sheet_ring(304.0, depth_ly * LY_PC, LMC_PC).radius_arcsec
        flat = echo.sheet_ring(304.0, depth_ly * LY_PC, LMC_PC).radius_arcsec
        assert (exact / flat - 1.0) * 100.0 == pytest.approx(percent, abs=0.006)
