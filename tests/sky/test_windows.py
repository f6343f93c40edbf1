"""Windows of optical setups and of arrays."""

from __future__ import annotations

import datetime as dt
import warnings
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest

from planner.errors import DomainError, InputError
from planner.records import LIMITS, Track, Windows
from planner.sky import clock
from planner.sky.directions import altaz_deg, hour_angle_deg, star_directions
from planner.sky.horizon import horizon_deg
from planner.sky.nights import noon_of
from planner.sky.stations import station_track
from planner.sky.sun_moon import altaz_deg as body_altaz
from planner.sky.sun_moon import moon_crossings
from planner.sky.windows import find_windows
from planner.units import date_of_mjd, mjd_of_date

PLACE = (-70.4, -24.6, 2600.0)
CAM = "ridge/cam"
SKY = [("North", 40.0, 25.0), ("South", 190.0, -70.0), ("Equator", 110.0, -3.0), ("Low", 250.0, 33.0)]


def run(invented: SimpleNamespace, first: str, last: str, stars: Any = SKY, **site: Any) -> Windows:
    targets = [invented.target(*star) for star in stars]
    camp = invented.campaign({"ridge": invented.site(**site)}, targets, first, last)
    return find_windows(camp)


@pytest.fixture(scope="module")
def march(invented: SimpleNamespace) -> Windows:
    return run(invented, "2027-03-09", "2027-03-28")


class Plain:
    """All limits of a camera by astropy, with angles, one call for all times."""

    def __init__(self, ra: np.ndarray, dec: np.ndarray, mjd: np.ndarray) -> None:
        with clock.offline_astropy():
            import astropy.units as u
            from astropy.coordinates import AltAz, EarthLocation, SkyCoord, get_body
            from astropy.time import Time

            place = EarthLocation.from_geodetic(PLACE[0] * u.deg, PLACE[1] * u.deg, PLACE[2] * u.m)
            times = Time(mjd, format="mjd")
            frame = AltAz(obstime=times, location=place)
            star = SkyCoord(ra * u.deg, dec * u.deg).transform_to(frame)
            sun, moon = (get_body(b, times, place).transform_to(frame) for b in ("sun", "moon"))
            self.altitude, self.azimuth = star.alt.deg, star.az.deg
            self.sun_altitude, self.moon_altitude = sun.alt.deg, moon.alt.deg
            a, b, c = (np.stack([p.alt.rad, p.az.rad]) for p in (star, sun, moon))
        self.sun_apart, self.moon_apart = self._apart(a, b), self._apart(a, c)

    @staticmethod
    def _apart(p: np.ndarray, q: np.ndarray) -> np.ndarray:
        cos = np.sin(p[0]) * np.sin(q[0]) + np.cos(p[0]) * np.cos(q[0]) * np.cos(p[1] - q[1])
        return np.asarray(np.degrees(np.arccos(np.clip(cos, -1, 1))))

    def allowed(self, lowest: float = 30.0, sun: float = -18.0, horizon: Any = ()) -> np.ndarray:
        ok = (self.altitude > lowest) & (self.altitude > horizon_deg(horizon, self.azimuth))
        ok &= (self.sun_altitude < sun) & (self.sun_apart > 45.0) & (self.moon_apart > 30.0)
        return np.asarray(ok)


def positions(windows: Windows) -> tuple[np.ndarray, np.ndarray]:
    of = {name: (ra, dec) for name, ra, dec in SKY}
    return tuple(np.array([of[windows.targets[t]] for t in windows.target]).T)


# ------------------------------------------------------------------ edges


def check_edges(windows: Windows, **limits: Any) -> int:
    """A second before and after each edge, astropy finds the limits broken and kept; cuts only at the Moon or noon."""
    ra, dec = positions(windows)
    second = 1.0 / 86400
    cut = 0
    for edge, inside in ((windows.start_mjd, 1.0), (windows.end_mjd, -1.0)):
        within, beyond = Plain(ra, dec, edge + inside * second), Plain(ra, dec, edge - inside * second)
        assert within.allowed(**limits).all()
        still = beyond.allowed(**limits)  # the interval was cut here, not ended: the Moon rises or sets
        assert ((within.moon_altitude > 0) != (beyond.moon_altitude > 0))[still].all()
        cut += int(still.sum())
    return cut


def test_edges_agree_with_astropy_to_a_second(march: Windows) -> None:
    assert march.target.size > 60
    assert check_edges(march) > 10


def test_edges_with_a_horizon_agree_with_astropy_to_a_second(invented: SimpleNamespace) -> None:
    horizon = [(0.0, 38.0), (60.0, 20.0), (120.0, 45.0), (180.0, 33.0), (300.0, 50.0)]
    found = run(invented, "2027-03-09", "2027-03-20", horizon=horizon)
    check_edges(found, horizon=horizon)
    free = run(invented, "2027-03-09", "2027-03-20")
    assert 0 < found.minutes.sum() < free.minutes.sum()


def test_no_window_is_missing(march: Windows) -> None:
    """Random moments of the season are in a window if and only if astropy finds every limit kept."""
    rng = np.random.default_rng(5)
    mjd = rng.uniform(61474.0, 61490.0, 2500)
    which = rng.integers(0, len(SKY), mjd.size)
    ra, dec = np.array([s[1] for s in SKY])[which], np.array([s[2] for s in SKY])[which]
    expected = Plain(ra, dec, mjd).allowed()
    inside = np.array(
        [
            ((march.target == t) & (march.start_mjd <= m) & (m <= march.end_mjd)).any()
            for t, m in zip(which, mjd, strict=True)
        ]
    )
    assert (inside == expected).all()
    assert 100 < expected.sum() < 2000


def test_columns_agree_with_astropy_at_the_best_moment(march: Windows) -> None:
    ra, dec = positions(march)
    plain = Plain(ra, dec, march.best_mjd)
    assert np.abs(march.moon_separation_deg - plain.moon_apart).max() < 1e-3  # 3.6 arcsec; acos near 0 is coarse
    assert np.abs(march.sun_separation_deg - plain.sun_apart).max() < 1e-3
    assert np.abs(march.moon_altitude_deg - plain.moon_altitude).max() < 1e-3
    # sec z is good to 0.4 % above 30 deg (Kasten & Young and refraction included)
    assert march.airmass == pytest.approx(1 / np.sin(np.radians(plain.altitude)), rel=0.004)


def test_best_moment_is_the_highest_of_the_interval(march: Windows) -> None:
    for k in range(0, march.target.size, 7):
        _, ra, dec = SKY[march.target[k]]
        t = np.linspace(march.start_mjd[k], march.end_mjd[k], 300)
        height = altaz_deg(ra, dec, np.append(t, march.best_mjd[k]), *PLACE)[0][0]
        assert march.start_mjd[k] <= march.best_mjd[k] <= march.end_mjd[k]
        assert height[-1] >= height[:-1].max() - 1e-4


def test_passes_shorter_than_the_grid_are_all_found(invented: SimpleNamespace) -> None:
    """A star that culminates a few arcsec above (some nights below) the limit: a search by the second agrees."""
    # apparent declination, so that it culminates near 30 deg north of the zenith
    wanted = PLACE[1] + 60.0 - 0.3 / 3600
    dec = wanted
    for _ in range(3):
        dec += wanted - float(np.degrees(np.arcsin(star_directions(200.0, dec, 61501.0)[0, 0, 2])))
    found = run(invented, "2027-04-01", "2027-04-11", [("Grazing", 200.0, dec)])
    lengths = {}
    for night, label in enumerate(found.nights):
        noon = noon_of(dt.date.fromisoformat(label), PLACE[0], "America/Santiago")
        transit = noon + float(-hour_angle_deg(200.0, dec, noon, PLACE[0])[0, 0] % 360) / 360.9856
        height = altaz_deg(200.0, dec, transit + np.arange(-600, 601) / 86400, *PLACE)[0][0]
        if (seconds := np.count_nonzero(height > 30.0)) > 1:
            lengths[night] = seconds
    assert found.night.tolist() == list(lengths)
    assert found.minutes * 60 == pytest.approx(list(lengths.values()), abs=2)
    assert len(lengths) > 3
    assert max(lengths.values()) < 300
    assert len(lengths) < 11  # nights on which it stays below


def test_dips_shorter_than_the_grid_cut_the_interval(invented: SimpleNamespace) -> None:
    """A circumpolar star that sinks 2 arcsec below the limit at its lower culmination."""
    lowest = 10.0
    wanted = -(90.0 + PLACE[1] + lowest) + 2.0 / 3600
    dec = wanted
    for _ in range(3):
        dec += wanted - float(np.degrees(np.arcsin(star_directions(20.0, dec, 61501.0)[0, 0, 2])))
    star = [("Dipping", 20.0, dec)]
    found = run(invented, "2027-04-03", "2027-04-05", star, camera={"lowest_altitude_deg": lowest})
    cuts = 0
    for k in range(found.target.size - 1):
        gap = (found.start_mjd[k + 1] - found.end_mjd[k]) * 86400
        if 1.0 < gap < 300.0:
            middle = altaz_deg(20.0, dec, found.end_mjd[k] + 0.5 * gap / 86400, *PLACE)[0][0, 0]
            ends = altaz_deg(20.0, dec, [found.end_mjd[k], found.start_mjd[k + 1]], *PLACE)[0][0]
            assert middle < lowest
            assert ends == pytest.approx(lowest, abs=1.0 / 3600)
            cuts += 1
    assert cuts == 3


# ------------------------------------------------------------------ order, splitting, sky class


def test_rows_are_sorted_and_lie_in_their_night(march: Windows) -> None:
    keys = np.stack([march.target, march.setup, march.night, march.start_mjd])
    assert (np.lexsort(keys[::-1]) == np.arange(march.target.size)).all()
    for k in range(march.target.size):
        noon = noon_of(dt.date.fromisoformat(march.nights[march.night[k]]), PLACE[0], "America/Santiago")
        assert noon <= march.start_mjd[k] < march.end_mjd[k] <= noon + 1.0
    for name in march.targets:
        rows = march.rows(name, CAM)
        assert (march.start_mjd[rows][1:] >= march.end_mjd[rows][:-1] - 1e-9).all()


def test_intervals_are_split_at_moonrise_and_moonset(march: Windows) -> None:
    times, _ = moon_crossings(61473.0, 61495.0, 0.0, *PLACE)
    for moment in times:
        assert not ((march.start_mjd < moment - 1e-8) & (moment + 1e-8 < march.end_mjd)).any()
    # and such a moment does end some interval
    assert min(np.abs(march.end_mjd[:, None] - times[None, :]).min(axis=0)) < 1e-8


def test_sky_class_follows_the_moon(march: Windows) -> None:
    middle = 0.5 * (march.start_mjd + march.end_mjd)
    up = body_altaz("moon", middle, *PLACE)[0] > 0
    k = march.moon_illumination
    expected = np.where(~up, 0, np.where(k < 0.25, 0, np.where(k < 0.65, 1, 2)))
    assert (march.sky_class == expected).all()
    assert set(march.sky_class.tolist()) == {0, 1, 2}


def test_thresholds_of_the_sky_classes_are_the_sites_own(invented: SimpleNamespace) -> None:
    never = run(invented, "2027-03-20", "2027-03-24", sky_classes={"dark_below": 1.0, "grey_below": 1.0})
    assert set(never.sky_class.tolist()) == {0}


def test_sky_is_brighter_with_the_moon_up_and_fits_the_filter(march: Windows, invented: SimpleNamespace) -> None:
    dark = march.moon_altitude_deg < 0
    assert march.sky_mag_arcsec2[dark].min() > 20.2  # R 20.9 at the zenith, up to 0.5 mag brighter at 30 deg
    lit = (march.sky_class == 2) & (march.moon_altitude_deg > 10)
    assert march.sky_mag_arcsec2[lit].max() < march.sky_mag_arcsec2[dark].min()
    blue = run(invented, "2027-03-09", "2027-03-28", camera={"filter": "B"})
    assert (blue.sky_mag_arcsec2[dark] - march.sky_mag_arcsec2[dark]).min() > 1.4  # 22.6 against 20.9, less extinction
    full = lit
    loss_blue = np.median(blue.sky_mag_arcsec2[dark]) - np.median(blue.sky_mag_arcsec2[full])
    loss_red = np.median(march.sky_mag_arcsec2[dark]) - np.median(march.sky_mag_arcsec2[full])
    assert loss_blue > loss_red + 0.5


# ------------------------------------------------------------------ ledger


def test_ledger_gives_24_hours_to_every_night(invented: SimpleNamespace) -> None:
    found = run(
        invented, "2027-03-20", "2027-05-10", shutdowns=[{"from": "2027-04-10", "to": "2027-04-17", "why": "mirror"}]
    )
    book = found.ledger
    assert book.months == ("2027-03", "2027-04", "2027-05")
    nights = np.array([12, 30, 10])
    total = book.lost_hours.sum(axis=3) + book.left_hours
    assert total == pytest.approx(np.broadcast_to(24.0 * nights, total.shape), abs=1e-9)
    assert (book.lost_hours >= 0).all()
    shut = book.lost_hours[..., LIMITS.index("shutdown")]
    assert (shut[:, 0, 1] > 8 * 8).all()  # eight April nights of some ten dark hours
    assert (shut[:, 0, [0, 2]] == 0).all()
    closed = {found.nights.index(f"2027-04-{day}") for day in range(10, 18)}
    assert not closed & set(found.night.tolist())
    assert {min(closed) - 1, max(closed) + 1} <= set(found.night.tolist())


def test_ledger_leaves_as_many_hours_as_the_windows_hold(march: Windows) -> None:
    # cells of 5 minutes: each edge is off by at most half of one, and errors of both signs cancel
    for i, name in enumerate(march.targets):
        rows = march.rows(name, CAM)
        slack = 2.5 / 60 * 2 * rows.size
        assert march.ledger.left_hours[i].sum() == pytest.approx(march.minutes[rows].sum() / 60, abs=slack)


def test_hours_go_to_the_first_limit_that_forbids_them(invented: SimpleNamespace) -> None:
    """A plain loop over the middles of the cells, one night."""
    found = run(invented, "2027-03-19", "2027-03-19", [("Equator", 110.0, -3.0)])
    noon = noon_of(dt.date(2027, 3, 19), PLACE[0], "America/Santiago")
    mjd = noon + (np.arange(288) + 0.5) / 288
    plain = Plain(np.full(288, 110.0), np.full(288, -3.0), mjd)
    lost = dict.fromkeys(LIMITS, 0.0)
    left = 0.0
    for j in range(288):
        if plain.sun_altitude[j] >= -18.0:
            lost["daylight and twilight"] += 1 / 12
        elif plain.altitude[j] <= 30.0:
            lost["altitude"] += 1 / 12
        elif plain.sun_apart[j] <= 45.0:
            lost["Sun keep-out"] += 1 / 12
        elif plain.moon_apart[j] <= 30.0:
            lost["Moon distance"] += 1 / 12
        else:
            left += 1 / 12
    assert lost["Moon distance"] == 0.0 or left == 0.0  # the Moon moves 13 deg a day: the whole night or nothing here
    assert found.ledger.lost_hours[0, 0, 0] == pytest.approx(list(lost.values()), abs=1 / 12 + 1e-9)
    assert found.ledger.left_hours[0, 0, 0] == pytest.approx(left, abs=1 / 12 + 1e-9)


def test_the_moons_limit_takes_the_night_it_stands_beside_the_target(invented: SimpleNamespace) -> None:
    # 2027-03-15, MJD 61480: put a target at the Moon
    mjd = 61480.1
    from planner.sky.sun_moon import vectors_km

    x, y, z = vectors_km("moon", mjd)[0]
    ra, dec = float(np.degrees(np.arctan2(y, x)) % 360), float(np.degrees(np.arctan2(z, np.hypot(x, y))))
    found = run(invented, "2027-03-08", "2027-03-22", [("Beside", ra, dec)])
    close = found.nights.index("2027-03-14")
    assert close not in found.night
    assert found.ledger.lost_hours[..., LIMITS.index("Moon distance")].sum() > 3.0
    assert found.moon_separation_deg.min() > 30.0


def test_sun_keep_out_is_charged_where_it_is_the_reason(invented: SimpleNamespace) -> None:
    # a wide keep-out and a shallow twilight: evening objects are lost to the Sun's distance
    loose = {"sun_below_deg": -6.0, "lowest_altitude_deg": 5.0}
    near = run(invented, "2027-03-09", "2027-03-20", camera={**loose, "sun_no_closer_deg": 60.0})
    assert near.ledger.lost_hours[..., LIMITS.index("Sun keep-out")].sum() > 1.0
    assert near.sun_separation_deg.min() > 60.0


# ------------------------------------------------------------------ cases that are no errors


def test_a_target_that_never_rises_has_no_window_and_its_hours_go_to_altitude(invented: SimpleNamespace) -> None:
    found = run(invented, "2027-03-09", "2027-03-11", [("Hidden", 10.0, 88.0)])
    assert found.target.size == 0
    dark = 3 * 24.0 - found.ledger.lost_hours[0, 0, 0, 0]
    assert found.ledger.lost_hours[0, 0, 0, LIMITS.index("altitude")] == pytest.approx(dark)


def test_polar_day_has_no_window_and_polar_night_runs_round_the_clock(invented: SimpleNamespace) -> None:
    place = {"longitude_deg": 15.6, "latitude_deg": 78.2, "height_m": 50, "time_zone": "Arctic/Longyearbyen"}
    pole = [("Pole", 30.0, 85.0)]
    summer = run(invented, "2027-06-18", "2027-06-20", pole, **place)
    assert summer.target.size == 0
    assert summer.ledger.lost_hours[0, 0, 0].tolist() == [72.0] + [0.0] * (len(LIMITS) - 1)
    winter = run(invented, "2026-12-18", "2026-12-20", pole, camera={"sun_below_deg": -6.0}, **place)
    assert winter.minutes.sum() / 60 == pytest.approx(72.0, abs=0.01)
    assert winter.ledger.left_hours.sum() == pytest.approx(72.0)
    assert winter.minutes.max() <= 24 * 60 + 1e-6  # cut at noon


@pytest.mark.parametrize(
    ("longitude", "zone"), [(179.5, "Pacific/Auckland"), (-157.4, "Pacific/Kiritimati"), (-155.5, "Pacific/Honolulu")]
)
def test_nights_beside_the_date_line_carry_the_local_evening_date(
    invented: SimpleNamespace, longitude: float, zone: str
) -> None:
    from zoneinfo import ZoneInfo

    found = run(invented, "2027-03-09", "2027-03-12", longitude_deg=longitude, time_zone=zone, latitude_deg=-20.0)
    assert found.target.size > 4
    for k in range(found.target.size):
        start = dt.datetime(1858, 11, 17, tzinfo=dt.UTC) + dt.timedelta(days=float(found.start_mjd[k]))
        local = start.astimezone(ZoneInfo(zone)) - dt.timedelta(hours=12)  # before noon belongs to yesterday
        assert local.date().isoformat() == found.nights[found.night[k]]


def test_only_pairs_with_an_allocation_have_windows_and_hours(invented: SimpleNamespace) -> None:
    targets = [invented.target("Mine", 40.0, -25.0), invented.target("Other", 190.0, -30.0)]
    two = {"one": {"setups": {"cam": {"aperture_m": 1.0}, "spare": {"aperture_m": 1.0, "filter": "V"}}}}
    camp = invented.campaign(
        {"ridge": invented.site(telescopes=two)},
        targets,
        "2027-03-09",
        "2027-03-12",
        (("ridge/cam", "a"), ("ridge/spare", "b")),
        {"a": ["Mine"], "b": ["Other"]},
    )
    found = find_windows(camp)
    pairs = {(found.targets[t], found.setups[s]) for t, s in zip(found.target, found.setup, strict=True)}
    assert pairs <= {("Mine", "ridge/cam"), ("Other", "ridge/spare")}
    assert ("Other", "ridge/spare") in pairs
    hours = found.ledger.lost_hours.sum(axis=(2, 3)) + found.ledger.left_hours.sum(axis=2)
    assert hours == pytest.approx(np.array([[96.0, 0.0], [0.0, 96.0]]), abs=1e-9)


def test_chunks_of_targets_change_nothing(march: Windows, invented: SimpleNamespace, monkeypatch: Any) -> None:
    from planner.sky import limits

    monkeypatch.setattr(limits, "CHUNK_CELLS", 1)
    again = run(invented, "2027-03-09", "2027-03-28")
    assert (again.target == march.target).all()
    assert np.abs(again.start_mjd - march.start_mjd).max() < 1e-9
    assert (again.ledger.lost_hours == march.ledger.lost_hours).all()


def test_proper_motion_moves_the_windows(invented: SimpleNamespace) -> None:
    """1000 arcsec in 27 years along right ascension: up 67 s later."""
    camp = [
        invented.campaign(
            {"ridge": invented.site()},
            [invented.target("Star", 150.0, 0.0, pm_ra_mas_yr=rate)],
            "2027-04-05",
            "2027-04-06",
        )
        for rate in (0.0, 1000e3 / 27.21)
    ]
    still, moved = (find_windows(c).best_mjd[0] for c in camp)
    assert (moved - still) * 86400 == pytest.approx(1000 / 15.041, abs=0.3)


def test_past_the_tables_there_is_one_warning_and_the_work_goes_on(invented: SimpleNamespace) -> None:
    with warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always")
        found = run(invented, "2031-03-09", "2031-03-12")
    assert [w.category for w in caught] == [clock.EarthOrientationWarning]
    assert "arcsec of hour angle" in str(caught[0].message)
    assert found.target.size > 4


def test_a_season_within_the_tables_gives_no_warning(invented: SimpleNamespace) -> None:
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        run(invented, "2026-11-25", "2026-12-05")  # around today


def test_bad_seasons_and_filters_are_named(invented: SimpleNamespace) -> None:
    with pytest.raises(DomainError, match=r"season: got .*, needs MJD 15020 to 88069"):
        run(invented, "2099-12-30", "2099-12-31")
    with pytest.raises(InputError, match=r"sky_mag_arcsec2: no value for filter R, which ridge/cam uses.*allowed: V"):
        run(invented, "2027-01-01", "2027-01-02", sky_mag_arcsec2={"V": 21.6})


def test_progress_runs_from_0_to_1(invented: SimpleNamespace) -> None:
    said: list[float] = []
    camp = invented.campaign(
        {"ridge": invented.site()}, [invented.target("Star", 150.0, 0.0)], "2027-03-20", "2027-03-20"
    )
    find_windows(camp, progress=lambda stage, share: said.append(share))
    assert said[0] == 0.0
    assert said[-1] == 1.0


# ------------------------------------------------------------------ arrays


def array_run(invented: SimpleNamespace, dec: float, ra: float = 80.0, **kind: Any) -> Windows:
    camp = invented.campaign(
        {"net": invented.array()}, [invented.target("Knot", ra, dec)], "2027-02-01", "2027-03-31", (("net/q", "all"),)
    )
    return find_windows(camp, **kind)


def test_array_has_one_look_a_date_named_by_its_middle(invented: SimpleNamespace) -> None:
    found = array_run(invented, 20.0)
    assert found.nights[0] == "2027-02-01"
    assert found.night.tolist() == list(range(59))
    for k in range(59):
        assert date_of_mjd(float(found.best_mjd[k])).isoformat() == found.nights[k]
    # closed form: a sidereal day is 86164.09 s; once in the season the date has two and the later is left out
    steps = np.diff(found.best_mjd) * 86400
    assert sorted({round(s) for s in steps}) in ([86164], [86164, 2 * 86164])
    assert np.isnan(found.airmass).all()
    assert (found.sky_class == 0).all()


def test_array_look_stands_at_its_hour_angle_and_inside_the_stretch(invented: SimpleNamespace) -> None:
    found = array_run(invented, 50.0)
    track = found.tracks["Knot", "net/q"]
    dec = float(np.degrees(np.arcsin(star_directions(80.0, 50.0, found.best_mjd[:1])[0, 0, 2])))
    stations = station_track(invented.array(), "q", dec)
    middle = track.start_from_transit_hours + 0.5 * track.look_hours
    gha = hour_angle_deg(80.0, 50.0, found.best_mjd, 0.0)[0] / 15.0
    apart = (gha - middle + 12) % 24 - 12
    assert np.abs(apart).max() * 3600 < 0.1  # 0.1 s of hour angle
    hours = found.minutes / 60 * 1.00273781
    assert hours == pytest.approx(min(track.look_hours + 2.0, stations.stretch_hours), abs=0.02)
    for edge, inside in ((found.start_mjd[0], 1 / 60), (found.end_mjd[0], -1 / 60)):
        at = hour_angle_deg(80.0, 50.0, edge, 0.0)[0, 0] / 15.0 + inside
        step = round((at % 24) * 60) % 1440
        assert stations.n_up[step] >= 3


def test_array_slack_stops_where_stations_set(invented: SimpleNamespace) -> None:
    """Three stations see -20 for less than the look and twice the slack: the window is the stretch."""
    found = array_run(invented, -20.0)
    stretch = found.tracks["Knot", "net/q"].hours_up
    look = found.tracks["Knot", "net/q"].look_hours
    assert look + 2.0 > stretch
    assert found.minutes[0] / 60 * 1.00273781 == pytest.approx(stretch, abs=1 / 30)


def test_array_ledger_counts_24_hours_a_date(invented: SimpleNamespace) -> None:
    found = array_run(invented, 20.0)
    book = found.ledger
    total = book.lost_hours.sum(axis=3) + book.left_hours
    assert total[0, 0].tolist() == pytest.approx([28 * 24.0, 31 * 24.0])
    up = found.tracks["Knot", "net/q"].hours_up
    assert book.left_hours[0, 0, 0] == pytest.approx(28 * up)
    assert book.lost_hours[0, 0, 0, LIMITS.index("altitude")] == pytest.approx(28 * (24 - up))


def test_array_loses_the_dates_on_which_the_sun_is_close(invented: SimpleNamespace) -> None:
    # on 2027-03-01 the Sun stands near right ascension 341.9, declination -7.7 (low-precision formulae of the
    # Astronomical Almanac); the receiver keeps 10 deg away, the Sun moves about 1 deg a day: about 20 dates
    found = array_run(invented, -7.7, ra=341.9)
    assert 59 - found.night.size == pytest.approx(20, abs=2)
    assert found.sun_separation_deg.min() >= 10.0
    lost = found.ledger.lost_hours[0, 0, :, LIMITS.index("Sun keep-out")].sum()
    assert lost == pytest.approx((59 - found.night.size) * found.tracks["Knot", "net/q"].hours_up)


def test_array_target_that_is_never_up_together_loses_all_to_altitude(invented: SimpleNamespace) -> None:
    found = array_run(invented, -60.0)
    assert found.target.size == 0
    assert found.tracks["Knot", "net/q"].hours_up == 0.0
    assert found.ledger.lost_hours[0, 0, :, LIMITS.index("altitude")].sum() == pytest.approx(59 * 24.0)


def test_a_track_given_from_outside_is_kept_and_places_the_look(invented: SimpleNamespace) -> None:
    asked: list[tuple[str, str]] = []
    plain = array_run(invented, 50.0).tracks["Knot", "net/q"]

    def track_of(target: Any, setup: Any) -> Track:
        asked.append((target.name, setup.name))
        return Track(plain.hours_up, 2.0, plain.start_from_transit_hours, 3, 0.3, 0.2, 10.0, 1e-4)

    found = array_run(invented, 50.0, track_of=track_of)
    assert asked == [("Knot", "net/q")]
    assert found.tracks["Knot", "net/q"].beam_minor_mas == 0.2
    gha = hour_angle_deg(80.0, 50.0, found.best_mjd, 0.0)[0] / 15.0
    assert np.abs((gha - plain.start_from_transit_hours - 1.0 + 12) % 24 - 12).max() < 1e-4


def test_cameras_and_arrays_stand_side_by_side(invented: SimpleNamespace) -> None:
    camp = invented.campaign(
        {"net": invented.array(), "ridge": invented.site()},
        [invented.target("Both", 150.0, 5.0)],
        "2027-03-09",
        "2027-03-12",
        (("net/q", "all"), ("ridge/cam", "all")),
    )
    found = find_windows(camp)
    assert set(found.setup.tolist()) == {0, 1}
    assert (np.diff(found.setup) >= 0).all()
    assert mjd_of_date(found.nights[0]) == 61473.0
