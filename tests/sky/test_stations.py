"""Arrays: when stations see a target, and the (u, v) points of a look."""

from __future__ import annotations

from types import SimpleNamespace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.campaign.records import ArraySite
from planner.errors import DomainError, UnknownName
from planner.sky import stations
from planner.sky.directions import altaz_deg, hour_angle_deg, star_directions

# A ten-station continental array as published (WGS84 latitude north, longitude west, height m)
TEN = {
    "SC": ("17:45:23.68", "64:35:01.07", 16),
    "HN": ("42:56:00.99", "71:59:11.69", 296),
    "NL": ("41:46:17.13", "91:34:26.88", 222),
    "FD": ("30:38:06.11", "103:56:41.34", 1606),
    "LA": ("35:46:30.45", "106:14:44.15", 1962),
    "PT": ("34:18:03.61", "108:07:09.06", 2365),
    "KP": ("31:57:22.70", "111:36:44.72", 1902),
    "OV": ("37:13:53.95", "118:16:37.37", 1196),
    "BR": ("48:07:52.42", "119:40:59.80", 250),
    "MK": ("19:48:04.97", "155:27:19.81", 3763),
}
# published lengths, km (cut, not rounded)
LENGTHS = {
    ("SC", "MK"): 8611,
    ("SC", "HN"): 2853,
    ("HN", "MK"): 7502,
    ("NL", "BR"): 2300,
    ("FD", "LA"): 608,
    ("LA", "PT"): 236,
    ("PT", "KP"): 417,
    ("OV", "BR"): 1214,
    ("BR", "MK"): 4398,
}


def degrees(text: str) -> float:
    d, m, s = map(float, text.split(":"))
    return d + m / 60 + s / 3600


@pytest.fixture(scope="module")
def ten(invented: SimpleNamespace) -> ArraySite:
    listed = [
        {
            "station": name,
            "longitude_deg": -degrees(west),
            "latitude_deg": degrees(north),
            "height_m": height,
            "lowest_elevation_deg": 10.0,
            "sefd_jy": {"u": 500.0},
        }
        for name, (north, west, height) in TEN.items()
    ]
    receiver = {"ghz": 15.35, "bandwidth_mhz": 256, "look_hours": 6.0}
    site: ArraySite = invented.array(stations=listed, least_stations=8, receivers={"u": receiver})
    return site


def moments_beam(u: np.ndarray, v: np.ndarray, w: np.ndarray) -> tuple[float, float, float]:
    """FWHM (mas) and position angle by second moments: sqrt(2 ln 2) / pi / sqrt(s)."""
    s = np.array([[(w * u * u).sum(), (w * u * v).sum()], [(w * u * v).sum(), (w * v * v).sum()]]) / w.sum()
    small, large = np.linalg.eigvalsh(s)
    angle = np.degrees(0.5 * np.arctan2(2 * s[0, 1], s[1, 1] - s[0, 0])) + 90
    factor = np.sqrt(2 * np.log(2)) / np.pi * np.degrees(1) * 3.6e6
    return factor / np.sqrt(small), factor / np.sqrt(large), (angle + 90) % 180 - 90


@pytest.mark.parametrize("pair", list(LENGTHS))
def test_baselines_have_their_published_lengths(ten: ArraySite, pair: tuple[str, str]) -> None:
    track = stations.station_track(ten, "u", 20.0)
    a, b = (track.place_m[track.stations.index(name)] for name in pair)
    assert np.floor(np.linalg.norm(a - b) / 1e3) == LENGTHS[pair]


def test_longest_baseline_gives_the_published_resolution(ten: ArraySite) -> None:
    # published rule 2063 lambda_cm / B_km mas: 0.468 at 15.35 GHz and 8611 km; lambda / B in mas is 2062.65 of it
    track = stations.station_track(ten, "u", 0.0)
    points = stations.uv_wavelengths(track, np.arange(stations.STEPS))
    k = next(
        i for i in range(45) if {track.stations[points.first[i]], track.stations[points.second[i]]} == {"SC", "MK"}
    )
    length = np.linalg.norm(track.place_m[points.first[k]] - track.place_m[points.second[k]])
    assert 2063 * 29.9792458 / 15.35 / (length / 1e3) / 10 * 10 == pytest.approx(0.468, abs=0.001)
    # at declination 0 the largest |u| of a turning baseline is its equatorial length in wavelengths
    equatorial = np.hypot(*(track.place_m[points.first[k]] - track.place_m[points.second[k]])[:2])
    assert np.abs(points.u_wavelengths[k]).max() == pytest.approx(equatorial / (0.299792458 / 15.35), rel=1e-5)


@pytest.mark.parametrize(
    ("dec", "major", "minor", "pa", "hours"),  # natural beam, elevation above 10 deg, full track, equal weights
    [(-5.79, 1.294, 0.571, -1.6, 7.8), (2.05, 1.221, 0.583, -2.1, 8.7), (38.0, 0.839, 0.651, -6.1, 13.1)],
)
def test_full_tracks_give_the_beams_worked_out_elsewhere(
    ten: ArraySite, dec: float, major: float, minor: float, pa: float, hours: float
) -> None:
    # worked out with separate code (no closed form): 1 % for the beam, 0.1 h for its printed digit
    track = stations.station_track(ten, "u", dec)
    points = stations.uv_wavelengths(track, np.arange(stations.STEPS))
    got = moments_beam(*points.flat())
    assert got[:2] == pytest.approx((major, minor), rel=0.01)
    assert got[2] == pytest.approx(pa, abs=0.3)
    assert np.count_nonzero(track.n_up >= 8) * stations.STEP_HOURS == pytest.approx(hours, abs=0.1)


@pytest.mark.parametrize(
    ("dec", "lat", "hours"),  # closed form, elevation 10 deg
    [(2.05, 34.3010, 5.2857), (-5.79, 34.3010, 4.9142), (38.0, 34.3010, 7.0293), (2.05, 19.8014, 5.3405)],
)
def test_hour_angle_limit(dec: float, lat: float, hours: float) -> None:
    assert float(stations.hour_angle_limit_hours(dec, lat, 10.0)) == pytest.approx(hours, abs=1e-3)


def test_hour_angle_limit_of_circumpolar_and_never_rising_targets() -> None:
    got = stations.hour_angle_limit_hours(np.array([80.0, -80.0]), 60.0, 10.0)
    assert got.tolist() == [12.0, 0.0]


def test_station_up_time_is_twice_the_hour_angle_limit(ten: ArraySite) -> None:
    track = stations.station_track(ten, "u", 2.05)
    for station, up in zip(ten.stations, track.up, strict=True):
        limit = float(stations.hour_angle_limit_hours(2.05, station.latitude_deg, 10.0))
        assert up.sum() * stations.STEP_HOURS == pytest.approx(2 * limit, abs=stations.STEP_HOURS)


def test_station_elevation_and_azimuth_agree_with_the_optical_kernel(ten: ArraySite) -> None:
    # the same sky by two routes; 2 arcsec: polar motion and diurnal aberration
    station = ten.stations[3]
    mjd = np.linspace(61400.0, 61400.9, 7)
    x, y, z = star_directions(80.0, 25.0, mjd)[:, 0].T
    alt, az = altaz_deg(80.0, 25.0, mjd, station.longitude_deg, station.latitude_deg, station.height_m)
    gha = hour_angle_deg(80.0, 25.0, mjd, 0.0)[0] / 15.0
    for i in range(mjd.size):
        dec = float(np.degrees(np.arctan2(z[i], np.hypot(x[i], y[i]))))
        got_alt, got_az = stations.station_elevation_deg(station, dec, gha[i : i + 1])
        assert got_alt[0] == pytest.approx(alt[0, i], abs=2 / 3600)
        assert got_az[0] == pytest.approx(az[0, i], abs=4 / 3600)


def test_uv_of_a_plain_twin_with_rotated_vectors(ten: ArraySite) -> None:
    """u is the baseline on the east vector at the star, v on the north vector."""
    track = stations.station_track(ten, "u", 33.0)
    points = stations.uv_wavelengths(track)
    d = np.radians(33.0)
    for k in (0, 17, 44):
        for j in (0, 50, points.u_wavelengths.shape[1] - 1):
            g = np.radians(15 * track.gha_hours[track.in_look[j]])
            # Greenwich hour angle g: the star stands over longitude -g
            east = np.array([np.sin(g), np.cos(g), 0.0])
            north = np.array([-np.sin(d) * np.cos(g), np.sin(d) * np.sin(g), np.cos(d)])
            b = (track.place_m[points.second[k]] - track.place_m[points.first[k]]) / (0.299792458 / 15.35)
            assert points.u_wavelengths[k, j] == pytest.approx(b @ east, rel=1e-9, abs=1e-3)
            assert points.v_wavelengths[k, j] == pytest.approx(b @ north, rel=1e-9, abs=1e-3)


def test_weights_are_inverse_products_of_the_noise_and_zero_while_a_station_is_down(
    invented: SimpleNamespace,
) -> None:
    track = stations.station_track(invented.array(), "q", 20.0)
    points = stations.uv_wavelengths(track, np.arange(stations.STEPS))
    for k in range(3):
        i, j = points.first[k], points.second[k]
        both = track.up[i] & track.up[j]
        assert points.weights[k][both] == pytest.approx(1 / (track.sefd_jy[i] * track.sefd_jy[j]))
        assert (points.weights[k][~both] == 0).all()
    assert points.flat()[0].size == np.count_nonzero(points.weights)


def test_look_lies_in_the_stretch_where_baselines_are_most(ten: ArraySite) -> None:
    """Plain search over every start inside the stretch finds no better place."""
    track = stations.station_track(ten, "u", -5.79)
    assert track.look_hours == 6.0
    length = round(6.0 / stations.STEP_HOURS)
    first = round(track.stretch_start_hours / stations.STEP_HOURS)
    pairs = track.n_up * (track.n_up - 1) // 2
    scores = [
        pairs[np.arange(s, s + length) % stations.STEPS].sum()
        for s in range(first, first + round(track.stretch_hours / stations.STEP_HOURS) - length + 1)
    ]
    assert pairs[track.in_look].sum() == max(scores)
    assert (track.n_up[track.in_look] >= 8).all()
    assert track.most_stations == track.n_up[track.in_look].max()


def test_a_look_longer_than_the_stretch_is_cut_to_it(ten: ArraySite) -> None:
    track = stations.station_track(ten, "u", -30.0)  # at least 8 stations for 4.0 h
    assert track.stretch_hours == pytest.approx(4.0, abs=0.1)
    assert track.look_hours == track.stretch_hours
    assert track.look_start_hours == track.stretch_start_hours


def test_a_target_that_is_never_up_is_no_error(ten: ArraySite) -> None:
    track = stations.station_track(ten, "u", -75.0)
    assert (track.stretch_hours, track.look_hours, track.most_stations) == (0.0, 0.0, 0)
    assert track.in_look.size == 0
    assert stations.uv_wavelengths(track).u_wavelengths.shape == (45, 0)


def test_a_target_that_is_always_up_has_the_whole_circle(invented: SimpleNamespace) -> None:
    track = stations.station_track(invented.array(), "q", 89.0)
    assert track.stretch_hours == 24.0
    assert track.look_hours == 4.0
    assert track.most_stations == 3


def test_stations_without_the_receiver_do_not_count(invented: SimpleNamespace) -> None:
    site = invented.array()
    listed = [s.model_dump() for s in site.stations]
    listed[1]["sefd_jy"] = {"x": 400.0}
    receivers = {"q": site.receivers["q"].model_dump(), "x": {"ghz": 8.4, "bandwidth_mhz": 128, "look_hours": 2}}
    mixed = invented.array(stations=listed, receivers=receivers, least_stations=2)
    assert stations.station_track(mixed, "q", 20.0).stations == ("A", "C")
    alone = stations.station_track(mixed, "x", 20.0)
    assert alone.stations == ("B",)
    assert alone.stretch_hours == 0.0


def test_a_stations_horizon_hides_the_target_at_its_azimuths(invented: SimpleNamespace) -> None:
    listed = [s.model_dump() for s in invented.array().stations]
    listed[0]["horizon"] = [(0, 0), (89, 0), (90, 60), (270, 60), (271, 0)]  # a wall to the south
    blocked = stations.station_track(invented.array(stations=listed), "q", -10.0)
    free = stations.station_track(invented.array(), "q", -10.0)
    assert not blocked.up[0].any()  # at latitude 34 a target at -10 stays below 46 deg, in the south
    assert free.up[0].any()
    assert (blocked.up[1:] == free.up[1:]).all()


@settings(max_examples=100, deadline=None)
@given(st.lists(st.booleans(), min_size=1, max_size=40))
def test_longest_run_on_a_circle_is_the_longest(bits: list[bool]) -> None:
    ring = np.array(bits)
    start, length = stations.longest_run(ring)
    n = ring.size
    runs = [k for k in range(n + 1) if any(all(ring[(s + i) % n] for i in range(k)) for s in range(n))]
    assert length == max(runs)
    assert all(ring[(start + i) % n] for i in range(length))


def test_unknown_receiver_and_declination_are_named(invented: SimpleNamespace) -> None:
    with pytest.raises(UnknownName, match=r"unknown receiver 'k' \(allowed: q\)"):
        stations.station_track(invented.array(), "k", 0.0)
    with pytest.raises(DomainError, match=r"dec_deg: got 95\.0, needs degrees, -90 to 90"):
        stations.station_track(invented.array(), "q", 95.0)
