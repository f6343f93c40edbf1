"""Sun and Moon: places, phase and crossings against published values."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from planner.errors import DomainError
from planner.sky import clock, directions, sun_moon
from planner.units import mjd_of_iso


def radec_of_date(body: str, mjd: float) -> tuple[float, float]:
    """Geocentric apparent right ascension and declination, equinox of date, degrees."""
    import erfa

    x, y, z = sun_moon.vectors_km(body, mjd)[0]  # type: ignore[arg-type]
    origin = float(erfa.eo06a(2400000.5, float(clock.tt_mjd(mjd))))
    return float(np.degrees(np.arctan2(y, x) - origin) % 360), float(np.degrees(np.arctan2(z, np.hypot(x, y))))


def test_moon_and_sun_of_1980_agree_with_the_horizons_ephemeris() -> None:
    # JPL Horizons, geocentric apparent of date, 1980-03-25 0h UTC (quoted in an open test-suite)
    ra, dec = radec_of_date("moon", 44323.0)
    assert ra == pytest.approx((7 + 32 / 60 + 2.62 / 3600) * 15, abs=5 / 3600)
    assert dec == pytest.approx(18 + 34 / 60 + 5.0 / 3600, abs=5 / 3600)  # 5 arcsec: the Moon's series
    ra, dec = radec_of_date("sun", 44323.0)
    assert ra == pytest.approx((16 / 60 + 31.00 / 3600) * 15, abs=1 / 3600)
    assert dec == pytest.approx(1 + 47 / 60 + 16.9 / 3600, abs=1 / 3600)


def test_topocentric_moon_of_2017_agrees_with_two_ephemerides() -> None:
    # lon -67.787260 lat -22.959748 5186 m, 2017-04-06 0h UTC: DE430 az 15.03267 el 50.30311 (6 arcsec: series);
    # the same built-in ephemeris in astropy: az 15.0323151 el 50.3027193 (0.05 arcsec)
    alt, az = sun_moon.altaz_deg("moon", 57849.0, -67.787260, -22.959748, 5186.0)
    assert alt[0] == pytest.approx(50.30311, abs=6 / 3600)
    assert az[0] == pytest.approx(15.03267, abs=6 / 3600)
    assert alt[0] == pytest.approx(50.3027193, abs=0.05 / 3600)
    assert az[0] == pytest.approx(15.0323151, abs=0.05 / 3600)


def test_topocentric_moon_and_sun_of_2020() -> None:
    # lon 6.6 lat 52.9 20 m, 2020-09-20 17:45: astropy and skyfield with DE421 agree on these
    mjd = mjd_of_iso("2020-09-20T17:45:00Z")
    alt, az = sun_moon.altaz_deg("moon", mjd, 6.6, 52.9, 20.0)
    assert (alt[0], az[0]) == pytest.approx((10.3672, 229.5842), abs=5 / 3600)
    alt, az = sun_moon.altaz_deg("sun", mjd, 6.6, 52.9, 20.0)
    assert (alt[0], az[0]) == pytest.approx((-2.1832, 274.0650), abs=2 / 3600)
    assert float(sun_moon.moon_illumination(mjd)) == pytest.approx(0.1548, abs=0.001)


def test_phase_of_meeus_example_48a() -> None:
    # 1992-04-12 0h TD: i = 69.0756 deg (through an open-source port), k = 0.6786 (from memory)
    mjd = 48724.0 - float(clock.tt_minus_utc_s(48724.0)) / 86400
    assert float(sun_moon.moon_phase_angle_deg(mjd)) == pytest.approx(69.0756, abs=0.005)
    assert float(sun_moon.moon_illumination(mjd)) == pytest.approx(0.6786, abs=1e-4)


@pytest.mark.parametrize(
    ("iso", "fraction"),  # astroplan and DE421 agree on these to 5e-5
    [("2026-12-01T05:00:00Z", 0.50651), ("2027-01-20T00:00:00Z", 0.90610)],
)
def test_illuminated_fraction_of_two_libraries(iso: str, fraction: float) -> None:
    assert float(sun_moon.moon_illumination(mjd_of_iso(iso))) == pytest.approx(fraction, abs=1e-4)


def test_sunrise_and_sunset_of_the_naval_observatory() -> None:
    # 40.8939 N 83.8917 W, 2018-09-12 UT: rise 11:13, set 23:50 (printed to the minute: 40 s)
    times, rising = sun_moon.sun_crossings(58373.0, 58374.0, sun_moon.SUNRISE_ALTITUDE_DEG, -83.8917, 40.8939, 0.0)
    assert rising.tolist() == [True, False]
    assert (times - 58373) * 86400 == pytest.approx([(11 * 60 + 13) * 60, (23 * 60 + 50) * 60], abs=40)


def test_short_moon_pass_at_70_north_is_found() -> None:
    # 70 N 0 E, 2023-02-19 UT: moonrise 11:28, moonset 12:05 (printed to the minute: 60 s)
    times, rising = sun_moon.moon_rise_set(59994.0, 59995.0, 0.0, 70.0, 0.0)
    assert rising.tolist() == [True, False]
    assert (times - 59994) * 1440 == pytest.approx([11 * 60 + 28, 12 * 60 + 5], abs=1)


def test_interpolated_vectors_agree_with_direct_evaluation() -> None:
    # 6-point Lagrange: below 2 mas (Sun, 1.5e8 km: 1.5 km) and 1 mas (Moon, 4e5 km: 2 m)
    mjd = np.random.default_rng(1).uniform(53000, 64000, 400)
    assert np.abs(sun_moon.vectors_km("sun", mjd) - sun_moon.direct_vectors_km("sun", mjd)).max() < 1.5
    assert np.abs(sun_moon.vectors_km("moon", mjd) - sun_moon.direct_vectors_km("moon", mjd)).max() < 0.002


@pytest.mark.parametrize("span", [(53400.0, 61300.0), (61376.0, 61700.0), (62500.0, 64500.0)])
def test_topocentric_places_agree_with_astropy(span: tuple[float, float]) -> None:
    # Moon 0.1 arcsec (pole past the table: 0.05). Sun: median 0.03; astropy bends the Sun's own light by up to
    # 0.5 arcsec now and then, as its direction differs a little from the deflecting body's
    mjd = np.random.default_rng(2).uniform(*span, 60)
    with clock.offline_astropy():
        import astropy.units as u
        from astropy.coordinates import AltAz, EarthLocation, get_body
        from astropy.time import Time

        place = EarthLocation.from_geodetic(18.9 * u.deg, 49.6 * u.deg, 800 * u.m)
        times = Time(mjd, format="mjd")
        seen = {
            b: get_body(b, times, place).transform_to(AltAz(obstime=times, location=place)) for b in ("sun", "moon")
        }
    moon = np.abs(sun_moon.altaz_deg("moon", mjd, 18.9, 49.6, 800.0)[0] - seen["moon"].alt.deg) * 3600
    sun = np.abs(sun_moon.altaz_deg("sun", mjd, 18.9, 49.6, 800.0)[0] - seen["sun"].alt.deg) * 3600
    assert moon.max() < 0.1
    assert np.median(sun) < 0.05
    assert sun.max() < 1.0


@pytest.mark.parametrize("limit", [-50 / 60, -6.0, -12.0, -18.0])
@pytest.mark.parametrize("start", [61375.0, 61700.0])
def test_twilights_agree_with_a_search_by_the_second(limit: float, start: float) -> None:
    """One second before and after each crossing astropy finds the Sun on either side of the limit."""
    place_deg = (-70.4, -24.6, 2600.0)
    times, rising = sun_moon.sun_crossings(start, start + 3, limit, *place_deg)
    assert times.size == 6
    with clock.offline_astropy():
        import astropy.units as u
        from astropy.coordinates import AltAz, EarthLocation, get_body
        from astropy.time import Time

        place = EarthLocation.from_geodetic(place_deg[0] * u.deg, place_deg[1] * u.deg, place_deg[2] * u.m)
        around = Time(times[:, None] + np.array([-1.0, 1.0]) / 86400, format="mjd")
        altitude = get_body("sun", around, place).transform_to(AltAz(obstime=around, location=place)).alt.deg
    assert ((altitude[:, 0] < limit) == rising).all()
    assert ((altitude[:, 1] > limit) == rising).all()


def test_polar_day_and_polar_night_have_no_crossing() -> None:
    for day in (61577.0, 61393.0):  # 2027-06-21, 2026-12-19
        times, rising = sun_moon.sun_crossings(day, day + 5, -0.8333, 25.0, 78.0, 0.0)
        assert times.size == rising.size == 0


def test_rise_transit_set_of_venus_in_meeus_example_15a() -> None:
    # 1988-03-20, 71d05'W 42d20'N, h0 -0.5667: rise 12:25:26, set 02:54:40 UT (through an open-source port); 3 s:
    # the book leaves out the change of delta T and UT1-UTC (0.2 s) and rounds
    import erfa

    ra_table = np.radians(np.array([40.68021, 41.73129, 42.78204]))
    dec_table = np.radians(np.array([18.04761, 18.44092, 18.82742]))
    start = 47240.0

    def height(t: np.ndarray) -> np.ndarray:
        n = t - start + 56.0 / 86400
        ra, dec = (y[1] + 0.5 * n * ((y[2] - y[0]) + n * (y[2] - 2 * y[1] + y[0])) for y in (ra_table, dec_table))
        ra = ra + erfa.eo06a(2400000.5, clock.tt_mjd(t))
        star = np.stack([np.cos(dec) * np.cos(ra), np.cos(dec) * np.sin(ra), np.sin(dec)])
        frame = directions.site_frame(t, -(71 + 5 / 60), 42 + 20 / 60, 0.0)
        return np.asarray((star * frame.zenith).sum(axis=0) - np.sin(np.radians(-0.5667)))

    times, rising = sun_moon.crossings(height, start, start + 1.0, 10 / 1440)
    assert rising.tolist() == [False, True]
    expected = [2 * 3600 + 54 * 60 + 40, 12 * 3600 + 25 * 60 + 26]
    assert (times - start) * 86400 == pytest.approx(expected, abs=3)


@settings(max_examples=60, deadline=None)
@given(st.floats(0.2, 5.0), st.floats(0.0, 6.28), st.floats(-0.999, 0.999))
def test_crossings_of_a_sine_are_all_found(turns: float, phase: float, level: float) -> None:
    """Closed form: sin(w t + p) = c at w t + p = asin c and pi - asin c, plus full turns."""
    w = 2 * np.pi * turns
    times, rising = sun_moon.crossings(lambda t: np.sin(w * t + phase) - level, 0.0, 3.0, 10 / 1440)
    k = np.arange(-2, 20)
    up = (np.arcsin(level) + 2 * np.pi * k - phase) / w
    down = (np.pi - np.arcsin(level) + 2 * np.pi * k - phase) / w
    expected = np.sort(np.concatenate([up, down]))
    assume(np.abs(expected).min() > 1e-6)  # a crossing at the very end belongs to either side
    assume(np.abs(expected - 3.0).min() > 1e-6)
    expected = expected[(expected > 0.0) & (expected < 3.0)]
    assert times.size == expected.size
    assert np.abs(times - expected).max(initial=0.0) * 86400 < 0.01
    assert (np.cos(w * times + phase)[rising] > 0).all()


def test_a_pass_shorter_than_the_step_is_found() -> None:
    # cos(2 pi t) reaches 1 at t = 1; above 1 - 1e-5 for |t - 1| < 7.1e-4 d = 61.5 s, well below the 10 min step
    level = 1 - 1e-5
    times, rising = sun_moon.crossings(lambda t: np.cos(2 * np.pi * t) - level, 0.503, 1.503, 10 / 1440)
    half = np.arccos(level) / (2 * np.pi)
    assert rising.tolist() == [True, False]
    assert times == pytest.approx([1 - half, 1 + half], abs=0.1 / 86400)


def test_days_of_a_sun_angle_window_follow_the_circular_formula() -> None:
    # 70-110 deg from the Sun, per year: 81.2, 175.2 and 365.25 days at ecliptic latitude 0, 60 and 80:
    # 365.25/pi x [acos(cos 110 / cos b) - acos(cos 70 / cos b)], arguments clipped; 0.5 d: the Earth's real orbit
    mjd = 61400 + np.arange(0, 365.25, 0.05)
    sun = sun_moon.vectors_km("sun", mjd)
    sun /= np.linalg.norm(sun, axis=1, keepdims=True)
    tilt = np.radians(23.4362)  # mean obliquity of 2027 (IAU 2006)
    for beta, expected in ((0.0, 81.2), (60.0, 175.2), (80.0, 365.25)):
        b, lam = np.radians(beta), np.radians(100.0)
        x, y, z = np.cos(b) * np.cos(lam), np.cos(b) * np.sin(lam), np.sin(b)
        star = np.array([x, y * np.cos(tilt) - z * np.sin(tilt), y * np.sin(tilt) + z * np.cos(tilt)])
        apart = sun_moon.separation_deg(np.broadcast_to(star, sun.shape), sun)
        assert np.count_nonzero((apart >= 70) & (apart <= 110)) * 0.05 == pytest.approx(expected, abs=0.5)


def test_reversed_dates_and_bad_altitudes_are_named() -> None:
    with pytest.raises(DomainError, match=r"mjd_to: got 61399.0, needs a date not before mjd_from \(61400.0\)"):
        sun_moon.sun_crossings(61400.0, 61399.0, -18.0, 0.0, 50.0, 0.0)
    with pytest.raises(DomainError, match=r"altitude_deg: got -95.0, needs degrees, -90 to 90"):
        sun_moon.sun_crossings(61400.0, 61401.0, -95.0, 0.0, 50.0, 0.0)
    with pytest.raises(DomainError, match=r"latitude_deg: got 95\.0"):
        sun_moon.moon_crossings(61400.0, 61401.0, 0.0, 0.0, 95.0, 0.0)


def test_shapes_of_phase_and_empty_input() -> None:
    assert np.shape(sun_moon.moon_illumination(61400.0)) == ()
    assert sun_moon.moon_illumination(np.full((2, 3), 61400.0)).shape == (2, 3)
    assert sun_moon.moon_illumination(np.zeros(0)).shape == (0,)
    times, rising = sun_moon.sun_crossings(61400.0, 61400.0, -18.0, 0.0, 50.0, 0.0)
    assert times.size == rising.size == 0


def test_state_between_crossings() -> None:
    got = sun_moon.up_at(np.array([1.0, 2.0]), np.array([True, False]), False, np.array([0.5, 1.5, 2.5]))
    assert got.tolist() == [False, True, False]
