"""The optional limits of a setup: windows against astropy's angles, moment by moment, and the ledger."""

from __future__ import annotations

from collections.abc import Callable
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest

from planner.campaign.records import CameraSetup, Target
from planner.records import LIMITS, Windows
from planner.sky import clock
from planner.sky.airmass import altitude_of_airmass_deg, kasten_young, pickering, refraction_arcmin
from planner.sky.directions import star_directions
from planner.sky.windows import find_windows

PLACE = (-70.4, -24.6, 2600.0)
SKY = [("North", 40.0, 25.0), ("South", 190.0, -70.0), ("Equator", 110.0, -3.0), ("Zenith", 200.0, -24.8)]
FIRST, LAST = "2027-03-09", "2027-03-28"
BASE = {"lowest_altitude_deg": 15.0, "moon_no_closer_deg": 5.0, "sun_no_closer_deg": 20.0}


class Angles:
    """Everything by astropy at moments (E,) for one star each, in degrees."""

    def __init__(self, which: np.ndarray, mjd: np.ndarray) -> None:
        with clock.offline_astropy():
            import astropy.units as u
            from astropy.coordinates import AltAz, EarthLocation, HADec, SkyCoord, get_body
            from astropy.time import Time

            place = EarthLocation.from_geodetic(PLACE[0] * u.deg, PLACE[1] * u.deg, PLACE[2] * u.m)
            times = Time(mjd, format="mjd")
            frame = AltAz(obstime=times, location=place)
            ra, dec = (np.array([s[k] for s in SKY])[which] for k in (1, 2))
            icrs = SkyCoord(ra * u.deg, dec * u.deg)
            star, turned = icrs.transform_to(frame), icrs.transform_to(HADec(obstime=times, location=place))
            sun, moon = (get_body(b, times, place).transform_to(frame) for b in ("sun", "moon"))
            self.altitude, self.sun_altitude, self.moon_altitude = star.alt.deg, sun.alt.deg, moon.alt.deg
            self.hour_angle, self.dec = (turned.ha.deg + 180) % 360 - 180, turned.dec.deg
            self.sun_apart, self.moon_apart = star.separation(sun).deg, star.separation(moon).deg
            far_sun, far_moon = get_body("sun", times), get_body("moon", times)
            self.lit = _lit(far_sun, far_moon)
        h, d, phi = np.radians(self.hour_angle), np.radians(self.dec), np.radians(PLACE[1])
        # textbook triangle; the kernel uses vectors
        self.parallactic = np.degrees(
            np.arctan2(np.cos(phi) * np.sin(h), np.sin(phi) * np.cos(d) - np.cos(phi) * np.sin(d) * np.cos(h))
        )
        seen = self.altitude + refraction_arcmin(self.altitude) / 60.0
        self.airmass = np.asarray(pickering(seen))  # the limit uses Kasten & Young: they agree to 0.1 %

    def base(self, sun: float = -18.0) -> np.ndarray:
        ok = (self.altitude > 15.0) & (self.sun_altitude < sun) & (self.moon_apart > 5.0) & (self.sun_apart > 20.0)
        return np.asarray(ok)


def _lit(sun: Any, moon: Any) -> np.ndarray:
    s, m = sun.cartesian.xyz.to_value("km"), moon.cartesian.xyz.to_value("km")
    to_sun, to_earth = s - m, -m
    cos = (to_sun * to_earth).sum(axis=0) / np.linalg.norm(to_sun, axis=0) / np.linalg.norm(to_earth, axis=0)
    return np.asarray(0.5 * (1 + cos))


def found_with(invented: SimpleNamespace, camera: dict[str, Any], **more: Any) -> Windows:
    targets = [invented.target(*star) for star in SKY]
    site = invented.site(camera={**BASE, **camera}, **more)
    return find_windows(invented.campaign({"ridge": site}, targets, FIRST, LAST))


def is_inside(windows: Windows, which: np.ndarray, mjd: np.ndarray) -> np.ndarray:
    return np.array(
        [
            ((windows.target == t) & (windows.start_mjd <= m) & (m <= windows.end_mjd)).any()
            for t, m in zip(which, mjd, strict=True)
        ]
    )


RULES: dict[str, tuple[dict[str, Any], Callable[[Angles], np.ndarray], Callable[[Angles], np.ndarray]]] = {
    # camera fields, what must hold, how far from the edge (in the unit of the quantity)
    "airmass": ({"largest_airmass": 1.6}, lambda a: a.airmass < 1.6, lambda a: np.abs(a.airmass - 1.6) / 0.003),
    "zenith blind spot": (
        {"zenith_blind_deg": 4.0},
        lambda a: a.altitude < 86.0,
        lambda a: np.abs(a.altitude - 86.0) / 0.002,
    ),
    "hour angle": (
        {"hour_angle_deg": [-20, 35]},
        lambda a: (a.hour_angle > -20) & (a.hour_angle < 35),
        lambda a: np.minimum(np.abs(a.hour_angle + 20), np.abs(a.hour_angle - 35)) / 0.01,
    ),
    "declination": (
        {"declination_deg": [-30, 10]},
        lambda a: (a.dec > -30) & (a.dec < 10),
        lambda a: np.minimum(np.abs(a.dec + 30), np.abs(a.dec - 10)) / 0.001,
    ),
    "parallactic angle": (
        {"parallactic_deg": [100, 200]},
        lambda a: np.abs((a.parallactic - 150 + 180) % 360 - 180) < 50,
        lambda a: np.abs(np.abs((a.parallactic - 150 + 180) % 360 - 180) - 50) / 0.05,
    ),
    "Moon up": (
        {"moon_below_deg": 10.0},
        lambda a: a.moon_altitude < 10.0,
        lambda a: np.abs(a.moon_altitude - 10.0) / 0.005,
    ),
    "Moon light": (
        {"moon_at_most_lit": 0.4},
        lambda a: (a.lit < 0.4) | (a.moon_altitude < 0.0),
        lambda a: np.minimum(np.abs(a.lit - 0.4) / 1e-4, np.abs(a.moon_altitude) / 0.005),
    ),
}


@pytest.mark.parametrize("name", list(RULES))
def test_windows_hold_exactly_where_astropy_finds_the_limit_kept(name: str, invented: SimpleNamespace) -> None:
    """Random moments; those within the tolerance of an edge (about a second) do not count."""
    camera, rule, edges = RULES[name]
    found = found_with(invented, camera)
    rng = np.random.default_rng(3)
    mjd, which = rng.uniform(61474.0, 61490.0, 3000), rng.integers(0, len(SKY), 3000)
    angles = Angles(which, mjd)
    clear_of_edges = edges(angles) > 1.0
    expected = angles.base() & rule(angles)
    got = is_inside(found, which, mjd)
    assert (got == expected)[clear_of_edges].all()
    assert expected.sum() > 20
    assert (angles.base() & ~rule(angles)).sum() > 10  # the limit forbids something here
    assert found.ledger.lost_hours[..., LIMITS.index(name)].sum() > 1.0
    free = found_with(invented, {})
    assert free.ledger.lost_hours[..., LIMITS.index(name)].sum() == 0.0
    total = found.ledger.lost_hours.sum(axis=3) + found.ledger.left_hours
    assert total == pytest.approx(free.ledger.lost_hours.sum(axis=3) + free.ledger.left_hours)


def test_an_airmass_range_keeps_the_target_off_the_zenith_as_well(invented: SimpleNamespace) -> None:
    found = found_with(invented, {"airmass": [1.2, 1.5]})
    assert found.target.size > 20
    assert found.airmass.max() <= 1.5 + 1e-6
    ends = np.concatenate([found.start_mjd, found.end_mjd])
    angles = Angles(np.concatenate([found.target, found.target]), ends)
    assert angles.airmass.min() > 1.2 * (1 - 2e-3)
    assert angles.airmass.max() < 1.5 * (1 + 2e-3)


@pytest.mark.parametrize("airmass", [1.001, 1.2, 2.0, 3.0, 10.0, 30.0])
def test_the_altitude_of_an_airmass_is_its_inverse(airmass: float) -> None:
    h = altitude_of_airmass_deg(airmass)
    assert kasten_young(h + refraction_arcmin(h) / 60) == pytest.approx(airmass, rel=1e-9)


def test_airmass_2_lies_just_below_30_degrees() -> None:
    # plane-parallel secant: 30.0 deg; Kasten & Young 29.9, and refraction lifts by 0.03 deg more
    assert altitude_of_airmass_deg(2.0) == pytest.approx(29.88, abs=0.02)


def test_a_short_pass_through_the_blind_spot_cuts_the_window(invented: SimpleNamespace) -> None:
    """A star passes 0.05 deg from the zenith, blind spot 0.2 deg: out for less than 2 minutes."""
    dec = PLACE[1]
    for _ in range(3):
        dec += PLACE[1] + 0.05 - float(np.degrees(np.arcsin(star_directions(200.0, dec, 61485.0)[0, 0, 2])))
    site = invented.site(camera={**BASE, "zenith_blind_deg": 0.2})
    star = invented.target("Over", 200.0, dec)
    found = find_windows(invented.campaign({"ridge": site}, [star], "2027-03-09", "2027-03-14"))
    gaps = (found.start_mjd[1:] - found.end_mjd[:-1]) * 1440.0
    short = gaps[(gaps > 0.01) & (gaps < 5.0)]
    # chord of the circle: 2 sqrt(0.2^2 - 0.05^2) deg at 15.04 deg/h x cos(dec); on each of six nights, so that no
    # sample of the grid of 5 minutes falls into most of them
    chord_min = 2 * np.sqrt(0.2**2 - 0.05**2) / (15.041 * np.cos(np.radians(dec))) * 60
    assert short == pytest.approx([chord_min] * 6, rel=0.02)


def test_the_suns_limit_may_depend_on_the_filter(invented: SimpleNamespace) -> None:
    rule = {"sun_below_by_filter_deg": {"R": -12.0, "B": -18.0}}
    red, blue = (found_with(invented, {"filter": f, **rule}) for f in ("R", "B"))
    plain = found_with(invented, {"filter": "R"})
    assert red.minutes.sum() > blue.minutes.sum() + 1000
    assert blue.minutes.sum() == pytest.approx(plain.minutes.sum())
    assert CameraSetup(aperture_m=1, filter="V", **rule).sun_limit_deg == -18.0


def test_sky_class_by_night_is_one_for_the_whole_night(invented: SimpleNamespace) -> None:
    by_night = found_with(invented, {}, sky_classes={"by": "night"})
    for night in np.unique(by_night.night):
        assert len(set(by_night.sky_class[by_night.night == night].tolist())) == 1
    moment = found_with(invented, {})
    down = moment.moon_altitude_deg < -1
    assert set(moment.sky_class[down].tolist()) == {0}
    assert set(by_night.sky_class[down].tolist()) == {0, 1, 2}  # the Moon counts while it is down
    # middle of the night of 2027-03-15 by astropy's Moon: first quarter was on 15 March 2027
    mid = np.array([61480.0 - PLACE[0] / 360.0])
    assert 0.25 < Angles(np.array([0]), mid).lit[0] < 0.65
    quarter = by_night.night == by_night.nights.index("2027-03-14")
    assert set(by_night.sky_class[quarter].tolist()) == {1}


# ------------------------------------------------------------------ templates


def echo(name: str, ra: float, dec: float, **template: Any) -> Target:
    ring = {
        "ring": f"{name} ring",
        "dust": {"shape": "sheet", "depth_pc": {"lognormal": {"median": 24, "sigma_fraction": 0.25}}},
        "brightness": {"extinction_mag": {"lognormal": {"median": 0.1, "sigma_fraction": 0.5}}},
        "templates": [{"setup": "ridge/cam", "filter": "R", "on": "2026-10-12", "minutes": 60, **template}],
    }
    return Target.model_validate(
        {
            "target": name, "invented": True, "position": {"ra": ra, "dec": dec}, "distance_pc": 6000,
            "outburst": {"peak": {"date": "2021-05-20", "sigma_days": 3}, "lasting_days": 60, "peak_mag": {"R": 8.0}},
            "features": [ring], "source": {"path": f"{name}.yaml"},
        }
    )  # fmt: skip


def test_a_template_at_an_unknown_time_stands_for_its_transit(invented: SimpleNamespace) -> None:
    camera = {**BASE, "match_template": {"airmass_within": 0.1, "parallactic_within_deg": 30}}
    targets = [echo("Equator", 110.0, -3.0), invented.target("North", 40.0, 25.0)]
    found = find_windows(invented.campaign({"ridge": invented.site(camera=camera)}, targets, FIRST, LAST))
    mine = found.rows("Equator", "ridge/cam")
    ends = np.concatenate([found.start_mjd[mine], found.end_mjd[mine]])
    angles = Angles(np.full(ends.size, 2), ends)
    at_transit = 1.0 / np.cos(np.radians(angles.dec[0] - PLACE[1]))
    assert angles.airmass.max() < at_transit + 0.1 + 0.003
    assert np.abs((angles.parallactic + 360) % 360 - 180).max() < 30.1  # north of the zenith: the angle is 180
    lost = found.ledger.lost_hours[..., LIMITS.index("template match")]
    assert lost[0].sum() > 10.0
    assert lost[1].sum() == 0.0  # it has no template


def test_a_templates_airmass_is_a_limit_on_both_sides(invented: SimpleNamespace) -> None:
    """Taken at airmass 1.5 or so in the east: no look near the meridian, none near the horizon."""
    east = echo("Equator", 110.0, -3.0, on="2027-01-20", start_utc="2027-01-20T01:00:00Z")
    camera = {**BASE, "match_template": {"airmass_within": 0.1}}
    found = find_windows(invented.campaign({"ridge": invented.site(camera=camera)}, [east], "2027-01-21", "2027-02-05"))
    then = Angles(np.array([2]), np.array([61425.0 + 1.5 / 24])).airmass[0]
    ends = np.concatenate([found.start_mjd, found.end_mjd])
    airmass = Angles(np.full(ends.size, 2), ends).airmass
    assert then > 1.2
    assert airmass.max() == pytest.approx(then + 0.1, abs=0.003)
    assert airmass.min() == pytest.approx(then - 0.1, abs=0.003)


def test_a_template_taken_in_the_east_asks_for_looks_in_the_east(invented: SimpleNamespace) -> None:
    # 2027-01-20 01:00 UTC: RA 110 deg stands at hour angle -40 deg or so over longitude -70
    east = echo("Equator", 110.0, -3.0, on="2027-01-20", start_utc="2027-01-20T01:00:00Z")
    camera = {**BASE, "match_template": {"parallactic_within_deg": 20}}
    found = find_windows(invented.campaign({"ridge": invented.site(camera=camera)}, [east], "2027-01-21", "2027-02-05"))
    then = Angles(np.array([2]), np.array([61425.0 + 1.5 / 24]))  # the middle of its 60 minutes
    angles = Angles(np.full(found.target.size, 2), 0.5 * (found.start_mjd + found.end_mjd))
    assert then.hour_angle[0] < -20
    assert (angles.hour_angle < 0).all()
    assert np.abs(angles.parallactic - then.parallactic[0]).max() < 20.1


@pytest.mark.parametrize(
    ("fields", "text"),
    [
        ({"hour_angle_deg": [30, -30]}, r"needs \[from, to\] with from below to"),
        ({"declination_deg": [-100, 10]}, "needs values from -90 to 90"),
        ({"hour_angle_deg": [-200, 200]}, "spans more than a full turn"),
        ({"airmass": [1.5, 2.0], "largest_airmass": 1.4}, "largest_airmass 1.4 leaves nothing of airmass"),
        ({"match_template": {}}, "has neither airmass_within nor parallactic_within_deg"),
        ({"largest_airmass": 0.9}, "greater than 1"),
    ],
)
def test_limits_that_make_no_sense_are_refused(fields: dict[str, Any], text: str) -> None:
    with pytest.raises(ValueError, match=text):
        CameraSetup(aperture_m=1.0, **fields)
