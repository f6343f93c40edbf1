"""The kernel against full transformations, published cases and closed forms."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.errors import DomainError
from planner.sky import clock, directions

SITES = [  # longitude, latitude, height: six latitudes
    (-70.4, -24.6, 2600.0),
    (20.8, -33.9, 1760.0),
    (-155.5, 19.8, 4200.0),
    (6.6, 52.9, 20.0),
    (18.9, 69.6, 100.0),
    (149.1, -31.3, 1165.0),
]
# 2005, 2020, 2026-12-01, 2027, 2030 and 2035
EPOCHS = [53371.0, 58849.0, 61375.0, 61620.0, 62502.0, 64328.0]


def astropy_altaz(ra: Any, dec: Any, mjd: Any, place: tuple[float, float, float]) -> tuple[Any, Any]:
    with clock.offline_astropy():
        import astropy.units as u
        from astropy.coordinates import AltAz, EarthLocation, SkyCoord
        from astropy.time import Time

        lon, lat, height = place
        frame = AltAz(
            obstime=Time(np.atleast_1d(mjd), format="mjd", scale="utc")[None, :],
            location=EarthLocation.from_geodetic(lon * u.deg, lat * u.deg, height * u.m),
        )
        seen = SkyCoord(np.atleast_1d(ra) * u.deg, np.atleast_1d(dec) * u.deg)[:, None].transform_to(frame)
        return seen.alt.deg, seen.az.deg


@pytest.mark.parametrize("epoch", EPOCHS)
def test_kernel_agrees_with_full_transformation_at_six_sites(epoch: float) -> None:
    # 0.1 arcsec: polar motion past the end of the table (0.05) and deflection near the Sun; the bar is 1 arcsec
    rng = np.random.default_rng(7)
    ra, dec = rng.uniform(0, 360, 25), np.degrees(np.arcsin(rng.uniform(-1, 1, 25)))
    mjd = epoch + np.sort(rng.uniform(0, 3, 30))
    for place in SITES:
        alt, az = astropy_altaz(ra, dec, mjd, place)
        got_alt, got_az = directions.altaz_deg(ra, dec, mjd, *place)
        across = ((az - got_az + 180) % 360 - 180) * np.cos(np.radians(alt))
        assert np.abs(directions.altitude_deg(ra, dec, mjd, *place) - alt).max() * 3600 < 0.1
        assert np.abs(got_alt - alt).max() * 3600 < 0.1
        assert np.abs(across).max() * 3600 < 0.1


def test_known_star_position_of_two_libraries() -> None:
    # (187.278, +2.052) from lon -70.4 lat -24.6 2600 m, 2010-03-01 09:30: 39.9212, 295.6540 by astropy and by
    # skyfield with DE421; 2 arcsec: the last digit given and their own difference
    alt, az = directions.altaz_deg(187.278, 2.052, 55256 + 9.5 / 24, -70.4, -24.6, 2600.0)
    assert alt[0, 0] == pytest.approx(39.9212, abs=2 / 3600)
    assert az[0, 0] == pytest.approx(295.6540, abs=2 / 3600)


def test_kernel_agrees_with_the_astrometry_routine_of_erfa() -> None:
    # place and date of the library's own test vector; its printed results (with refraction) first
    import erfa

    args = (2456384.5, 0.969254051, 0.1550675, -0.527800806, -1.2345856, 2738.0, 2.47230737e-7, 1.82640464e-6)
    az, zd, ha, *_ = erfa.atco13(2.71, 0.174, 1e-5, 5e-6, 0.1, 55.0, *args, 731.0, 12.8, 0.59, 0.55)
    assert (az, zd, ha) == pytest.approx((0.09251774485485516, 1.407661405256499, -0.09265154431529725), abs=1e-12)
    az, zd, *_ = erfa.atco13(2.71, 0.174, 0.0, 0.0, 0.0, 0.0, *args, 0.0, 12.8, 0.59, 0.55)
    place = (np.degrees(-0.527800806), np.degrees(-1.2345856), 2738.0)
    alt, azimuth = directions.altaz_deg(
        np.degrees(2.71), np.degrees(0.174), 2456384.5 - 2400000.5 + 0.969254051, *place
    )
    # 0.5 arcsec: UT1 and pole of the vector (2013) are rounded predictions, not those of the final table
    assert alt[0, 0] == pytest.approx(90 - np.degrees(zd), abs=0.5 / 3600)
    assert azimuth[0, 0] == pytest.approx(np.degrees(az), abs=0.5 / 3600)


def test_meeus_example_13b_from_coordinates_of_date() -> None:
    # Venus, 77d03'56"W 38d55'17"N, 1987-04-10 19:21 UT, RA 23h09m16.641s Dec -6d43'11.61" of date:
    # H 64.3521, azimuth 68.034 from south, altitude 15.125 (Meeus, through an open-source port)
    import erfa

    mjd = 46895 + 19.35 / 24 - float(clock.ut1_minus_utc(46895.8)) / 86400
    ra = np.radians((23 + 9 / 60 + 16.641 / 3600) * 15) + erfa.eo06a(2400000.5, float(clock.tt_mjd(mjd)))
    dec = np.radians(-(6 + 43 / 60 + 11.61 / 3600))
    star = np.array([np.cos(dec) * np.cos(ra), np.cos(dec) * np.sin(ra), np.sin(dec)])
    frame = directions.site_frame(mjd, -(77 + 3 / 60 + 56 / 3600), 38 + 55 / 60 + 17 / 3600, 0.0)
    up, east, north = (float((star @ v)[0]) for v in (frame.zenith, frame.east, frame.north))
    assert np.degrees(np.arcsin(up)) == pytest.approx(15.125, abs=0.001)
    assert np.degrees(np.arctan2(east, north)) % 360 == pytest.approx(248.034, abs=0.001)
    angle = float(clock.earth_rotation_angle(mjd)) - np.radians(77 + 3 / 60 + 56 / 3600) - ra
    assert np.degrees(angle) % 360 == pytest.approx(64.3521, abs=0.001)


def test_order_and_grouping_of_times_do_not_matter() -> None:
    rng = np.random.default_rng(3)
    mjd = rng.uniform(61400, 61410, 200)
    ra, dec = rng.uniform(0, 360, 5), rng.uniform(-80, 80, 5)
    together = directions.altitude_deg(ra, dec, mjd, *SITES[0])
    alone = np.concatenate([directions.altitude_deg(ra, dec, t, *SITES[0]) for t in mjd[:20]], axis=1)
    assert np.abs(together[:, :20] - alone).max() < 1e-9
    assert np.abs(together[:, np.argsort(mjd)] - directions.altitude_deg(ra, dec, np.sort(mjd), *SITES[0])).max() < 1e-9


def test_cutting_a_day_into_blocks_changes_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    mjd = np.linspace(61400.2, 61401.4, 500)
    whole = directions.altitude_deg([10.0, 200.0], [5.0, -60.0], mjd, *SITES[0])
    monkeypatch.setattr(directions, "BLOCK_CELLS", 64)
    assert np.abs(directions.altitude_deg([10.0, 200.0], [5.0, -60.0], mjd, *SITES[0]) - whole).max() < 1e-9


@pytest.mark.parametrize(
    ("ra", "mjd", "shape"),
    [(10.0, 61400.0, (1, 1)), ([10.0, 20.0], [61400.0] * 3, (2, 3)), ([], [61400.0], (0, 1)), ([1.0], [], (1, 0))],
)
def test_shapes_are_targets_by_times(ra: Any, mjd: Any, shape: tuple[int, int]) -> None:
    dec = np.zeros(np.shape(ra))
    assert directions.altitude_deg(ra, dec, mjd, *SITES[0]).shape == shape
    assert directions.sin_altitude(ra, dec, mjd, *SITES[0]).shape == shape
    assert directions.azimuth_deg(ra, dec, mjd, *SITES[0]).shape == shape
    assert directions.hour_angle_deg(ra, dec, mjd, -70.4).shape == shape
    assert directions.parallactic_angle_deg(ra, dec, mjd, -70.4, -24.6).shape == shape


@settings(max_examples=40, deadline=None)
@given(st.floats(0, 359.99), st.floats(-89, 89), st.floats(50000, 64000), st.floats(-180, 180), st.floats(-85, 85))
def test_altitude_azimuth_and_hour_angle_solve_the_same_triangle(
    ra: float, dec: float, mjd: float, lon: float, lat: float
) -> None:
    # sin a = sin phi sin d + cos phi cos d cos H with d of date; 0.5 arcsec in the sine: polar motion
    h = np.radians(directions.hour_angle_deg(ra, dec, mjd, lon)[0, 0])
    d = np.arcsin(directions.star_directions(ra, dec, mjd)[0, 0, 2])
    phi = np.radians(lat)
    expected = np.sin(phi) * np.sin(d) + np.cos(phi) * np.cos(d) * np.cos(h)
    # daily linear interpolation and the pole: 0.7 arcsec = 3.4e-6 rad
    assert directions.sin_altitude(ra, dec, mjd, lon, lat, 0.0)[0, 0] == pytest.approx(expected, abs=4e-6)


def test_parallactic_angle_is_zero_on_the_meridian_and_positive_in_the_west() -> None:
    lon, lat = 10.0, 50.0
    mjd = 61400 + np.linspace(0, 1, 2000)
    h = directions.hour_angle_deg(30.0, 20.0, mjd, lon)[0]
    q = directions.parallactic_angle_deg(30.0, 20.0, mjd, lon, lat)[0]
    assert abs(q[np.argmin(np.abs(h))]) < 0.3  # within half a step (0.09 deg of hour angle) of transit
    assert (q[(h > 5) & (h < 175)] > 0).all()
    assert (q[(h > -175) & (h < -5)] < 0).all()


def test_parallactic_angle_points_from_the_pole_to_the_zenith() -> None:
    # plain twin with vectors: bearing of the zenith minus bearing of the pole at the star
    mjd = np.linspace(61400, 61401, 24)
    place = SITES[2]
    star = directions.star_directions(80.0, -30.0, mjd)[:, 0]
    zenith = directions.site_frame(mjd, *place).zenith.T
    pole = np.array([0.0, 0.0, 1.0])
    east = np.cross(pole, star)
    east /= np.linalg.norm(east, axis=1, keepdims=True)
    north = np.cross(star, east)
    bearing = np.degrees(np.arctan2((zenith * east).sum(1), (zenith * north).sum(1)))
    q = directions.parallactic_angle_deg(80.0, -30.0, mjd, place[0], place[1])[0]
    # west is positive: the zenith lies east of north at the star when the star is west of the meridian
    difference = (q - bearing + 180) % 360 - 180
    assert np.abs(difference).max() < 0.01  # polar motion, near the zenith at worst


def test_proper_motion_moves_a_star_along_and_across() -> None:
    # 1000 mas/yr for 27 years from 2000.0 is 27 arcsec
    mjd = 51544.5 + 27 * 365.25
    ra, dec = directions.moved_position(100.0, 60.0, 1000.0, 0.0, 2000.0, mjd)
    assert (ra - 100.0) * np.cos(np.radians(60.0)) * 3600 == pytest.approx(27.0, abs=0.01)
    assert dec == pytest.approx(60.0, abs=1e-5)
    ra, dec = directions.moved_position(100.0, 60.0, 0.0, -1000.0, 2000.0, mjd)
    assert (dec - 60.0) * 3600 == pytest.approx(-27.0, abs=0.001)
    assert directions.moved_position(100.0, 60.0, 5.0, 5.0, 2010.0, 51544.5 + 10 * 365.25) == pytest.approx((100, 60))


@pytest.mark.parametrize(
    ("change", "text"),
    [
        ({"dec_deg": 91.0}, "dec_deg: got 91.0, needs degrees, -90 to 90"),
        ({"ra_deg": float("nan")}, "ra_deg: got nan, needs a finite number"),
        ({"latitude_deg": -90.5}, "latitude_deg: got -90.5"),
        ({"longitude_deg": float("inf")}, "longitude_deg: got inf"),
        ({"height_m": 1e6}, "height_m: got 1000000.0"),
        ({"mjd_utc": 2461375.5}, "mjd_utc: got 2461375.5, needs MJD"),
    ],
)
def test_values_outside_their_range_are_named(change: dict[str, float], text: str) -> None:
    good = {
        "ra_deg": 10.0,
        "dec_deg": 20.0,
        "mjd_utc": 61400.0,
        "longitude_deg": 0.0,
        "latitude_deg": 50.0,
        "height_m": 0.0,
    }
    with pytest.raises(DomainError, match=text):
        directions.altitude_deg(**{**good, **change})


def test_a_site_at_the_pole_works() -> None:
    # at the pole the altitude of a star is its declination of date, to the pole's own motion (0.6 arcsec)
    mjd = np.linspace(61400, 61401, 10)
    d = np.degrees(np.arcsin(directions.star_directions(50.0, 40.0, mjd)[:, 0, 2]))
    assert np.abs(directions.altitude_deg(50.0, 40.0, mjd, 0.0, 90.0, 0.0)[0] - d).max() * 3600 < 0.7
