"""The recount: a good plan passes, and every single fault is found and named."""

from __future__ import annotations

import ast
import datetime as dt
import math
import re
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import planner.schedule.recount as module
from planner.campaign.records import (
    Allocation,
    ArraySite,
    Campaign,
    CampaignFile,
    Position,
    SetupRef,
    Site,
    Source,
    Target,
)
from planner.errors import PlanningError, RecountError
from planner.records import PLAN_COLUMNS, Track
from planner.schedule import recount_sky
from planner.schedule.recount import recount
from planner.schedule.recount_limits import horizon_deg
from planner.schedule.recount_rows import Tally
from planner.units import mjd_of_date, mjd_of_iso

MONTHS = {"clear": [0.7] * 12}
WIDE, FAST, RADIO = "brack-ridge/wide-camera", "brack-ridge/fast-camera", "cairn-array/43ghz"


def camera_of(**change: Any) -> dict[str, Any]:
    fields: dict[str, Any] = {
        "aperture_m": 1.8, "longest_exposure_s": 300, "readout_s": 20, "acquisition_min": 5,
        "lowest_altitude_deg": 30, "sun_below_deg": -18, "moon_no_closer_deg": 30, "sun_no_closer_deg": 45,
    }  # fmt: skip
    return fields | change


def ring(name: str) -> dict[str, Any]:
    dust = {"shape": "sheet", "depth_pc": {"lognormal": {"median": 24, "sigma_fraction": 0.25}}}
    extinction = {"lognormal": {"median": 0.1, "sigma_fraction": 0.5}}
    return {"ring": name, "dust": dust, "brightness": {"extinction_mag": extinction}}


def target_of(name: str, file: str, ra_deg: float, dec_deg: float, **change: Any) -> Target:
    fields = {
        "target": name, "invented": True, "position": {"ra": ra_deg, "dec": dec_deg}, "distance_pc": 6000,
        "outburst": {"peak": {"date": "2021-05-20", "sigma_days": 3}, "lasting_days": 60, "peak_mag": {"R": 8.0}},
        "features": [ring(f"{name} ring")],
    }  # fmt: skip
    return Target.model_validate(fields | change | {"source": Source(path=f"targets/{file}")})


def campaign_of(
    *,
    camera: dict[str, Any] | None = None,
    site: dict[str, Any] | None = None,
    array: dict[str, Any] | None = None,
    receiver: dict[str, Any] | None = None,
    file: dict[str, Any] | None = None,
    sallow: dict[str, Any] | None = None,
    shutdowns: list[dict[str, Any]] | None = None,
) -> Campaign:
    """An invented campaign: one telescope with two cameras in the south, four stations in the north."""
    wide, fast = camera_of(**(camera or {})), camera_of()
    telescope = {"shutdowns": shutdowns or [], "setups": {"wide-camera": wide, "fast-camera": fast}}
    ridge = Site.model_validate(
        {
            "site": "Brack Ridge", "invented": True, "longitude_deg": -70, "latitude_deg": -30, "height_m": 2400,
            "time_zone": "America/Santiago", "months": MONTHS, "telescopes": {"one-eight": telescope},
        } | (site or {})
    )  # fmt: skip
    places = {"A": (-106.0, 34.0), "B": (-112.0, 32.0), "C": (-92.0, 42.0), "D": (-120.0, 48.0)}
    stations = [
        {"station": n, "longitude_deg": lon, "latitude_deg": lat, "height_m": 1500, "sefd_jy": {"43ghz": 1500}}
        for n, (lon, lat) in places.items()
    ]
    cairn = ArraySite.model_validate(
        {
            "array": "Cairn Array", "invented": True, "stations": stations, "least_stations": 4, "months": MONTHS,
            "receivers": {"43ghz": {"ghz": 43, "bandwidth_mhz": 256, "look_hours": 4} | (receiver or {})},
        } | (array or {})
    )  # fmt: skip
    told = CampaignFile.model_validate(
        {
            "campaign": "Invented", "invented": True, "season": {"from": "2027-02-01", "to": "2027-08-01"}, "seed": 1,
            "programmes": [
                {"name": "echoes", "targets": ["sallow.yaml", "marl.yaml"]},
                {"name": "knots", "targets": ["tern.yaml"]},
            ],
            "allocations": [
                {"setup": WIDE, "programme": "echoes", "hours": 3, "sky": "dark"},
                {"setup": FAST, "programme": "echoes", "hours": 3},
                {"setup": RADIO, "programme": "knots", "hours": 9},
            ],
            "fixed_looks": [{"target": "Sallow", "setup": WIDE, "start_utc": "2027-03-10T04:00:00Z", "minutes": 60}],
        } | (file or {})
    )  # fmt: skip
    shut = ridge.telescopes["one-eight"].shutdowns
    cameras = ridge.telescopes["one-eight"].setups
    setups = (
        *(
            SetupRef(name, "brack-ridge", ridge, "brack-ridge/one-eight", cameras[name.split("/")[1]], shutdowns=shut)
            for name in (WIDE, FAST)
        ),
        SetupRef(RADIO, "cairn-array", cairn, "cairn-array", None, cairn.receivers["43ghz"], "43ghz"),
    )
    targets = (
        target_of("Sallow", "sallow.yaml", 180.0, -20.0, **(sallow or {})),
        target_of("Marl", "marl.yaml", 190.0, -35.0),
        target_of("Tern", "tern.yaml", 171.9, 24.1),
    )
    return Campaign(".", told, targets, {"brack-ridge": ridge, "cairn-array": cairn}, setups)


def look(number: int, target: str, setup: str, start: str, hours: float, exposure_s: float, **more: Any) -> dict:
    """One row; the night is that of the evening before a start in the early UTC hours."""
    begin = dt.datetime.fromisoformat(start)
    row = dict.fromkeys(PLAN_COLUMNS, float("nan")) | {
        "look": number, "target": target, "setup": setup, "mode": "R", "exposure_s": exposure_s, "state": "proposed",
        "night": (begin - dt.timedelta(hours=15)).date().isoformat(), "start_utc": start,
        "end_utc": (begin + dt.timedelta(hours=hours)).isoformat().replace("+00:00", "Z"),
    }  # fmt: skip
    return row | more


def good_rows() -> list[dict]:
    """New Moon is on 2027-03-08; a target at 12 h culminates after midnight over a site at 70 W."""
    return [
        look(1, "Sallow", WIDE, "2027-03-05T04:00:00Z", 1.0, 2400.0),
        look(2, "Sallow", WIDE, "2027-03-10T04:00:00Z", 1.0, 2400.0, state="fixed"),
        look(3, "Marl", FAST, "2027-03-10T05:00:00Z", 1.0, 2400.0),
    ]


def radio_row(**change: Any) -> dict:
    return look(4, "Tern", RADIO, "2027-03-10T05:20:00Z", 4.0, 9000.0, night="2027-03-10") | change


def radio_breaches(row: dict, tracks: dict | None = None, **change: Any) -> tuple[str, ...]:
    """Recount of the array's look alone."""
    return breaches([row], campaign_of(file={"fixed_looks": []}, **change), tracks=tracks)


def with_row(number: int, **change: Any) -> list[dict]:
    return [row | change if row["look"] == number else row for row in good_rows()]


def breaches(rows: list[dict], campaign: Campaign | None = None, **how: Any) -> tuple[str, ...]:
    return recount(campaign or campaign_of(), pd.DataFrame(rows, columns=list(PLAN_COLUMNS)), **how).breaches


def only(found: tuple[str, ...], pattern: str) -> None:
    """Every breach found is of this kind, and there is at least one."""
    assert found
    for text in found:
        assert re.search(pattern, text), text


# ------------------------------------------------------------------ a good plan


def test_good_plan_passes_and_says_what_was_counted():
    report = recount(campaign_of(), pd.DataFrame([*good_rows(), radio_row()]))
    assert report.breaches == ()
    assert report.passed
    report.insist()
    text = "\n".join(report.checks)
    assert "looks counted: 4, void looks left out: 0" in text
    assert "fixed looks: 1 in the plan of 1 in the campaign" in text
    assert f"{WIDE} for echoes: 2.00 h dark of 3 h dark" in text
    assert f"{RADIO} for knots: 4.00 h dark of 9 h any" in text
    assert "Sallow: 2 looks, 5 to 5 nights apart (at least 0.5)" in text
    assert re.search(r"lowest altitude of a camera look: \d\d\.\d\d deg, look \d", text)
    assert "fewest stations up during an array look: 4, look 4 (Tern" in text
    assert report.notes == ()


def test_empty_plan_passes_without_fixed_looks():
    report = recount(campaign_of(file={"fixed_looks": []}), pd.DataFrame(columns=list(PLAN_COLUMNS)))
    assert report.breaches == ()
    assert "looks counted: 0, void looks left out: 0" in report.checks


@pytest.mark.parametrize(
    ("season", "start", "night", "ra", "note"),
    [
        # In the predicted part of the earth-orientation table, where astropy's defaults refuse to work.
        ({"from": "2026-12-01", "to": "2026-12-31"}, "2026-12-06T03:00:00Z", "2026-12-05", 90.0, None),
        # Beyond every table: new Moon and total eclipse of the Sun on 2034-03-20.
        ({"from": "2034-03-01", "to": "2034-04-30"}, "2034-03-20T04:00:00Z", "2034-03-19", 180.0, "17 arcsec"),
    ],
)
def test_future_dates_work_offline(season, start, night, ra, note):
    campaign = campaign_of(file={"season": season, "fixed_looks": []}, sallow={"position": {"ra": ra, "dec": -20.0}})
    report = recount(campaign, pd.DataFrame([look(1, "Sallow", WIDE, start, 1.0, 2400.0, night=night)]))
    assert report.breaches == ()
    if note:
        assert note in report.notes[0]


def test_recount_raises_with_every_breach():
    report = recount(campaign_of(), pd.DataFrame(with_row(1, exposure_s=4000.0)))
    with pytest.raises(RecountError, match=r"the plan fails its recount: look 1 \(Sallow.*4000 s of exposure"):
        report.insist()


def test_missing_column_is_named():
    with pytest.raises(PlanningError, match=r"lacks the column\(s\) end_utc; needed: look, target"):
        recount(campaign_of(), pd.DataFrame(good_rows()).drop(columns="end_utc"))


# ------------------------------------------------------------------ reading


@pytest.mark.parametrize(
    ("rows", "pattern"),
    [
        (with_row(1, target="Salow"), r"look 1: target 'Salow' is not in the campaign"),
        (with_row(1, setup="brack-ridge/other"), r"look 1: setup 'brack-ridge/other' is not in the campaign"),
        (with_row(1, start_utc="2027-03-05 at four"), r"look 1: cannot be read"),
        (with_row(1, night=None), r"look 1: cannot be read"),
        (with_row(1, exposure_s=None), r"look 1: exposure_s is nan, needs a value of 0 or more"),
        (with_row(1, exposure_s=-5.0), r"look 1: exposure_s is -5, needs a value of 0 or more"),
        (with_row(1, end_utc="2027-03-05T03:00:00Z"), r"look 1: ends at 2027-03-05T03:00:00Z, not after its start"),
        (with_row(1, look=3), r"look 3: the number stands twice in the plan"),
    ],
)
def test_rows_that_cannot_be_used_are_breaches(rows, pattern):
    only(breaches(rows), pattern)


def test_void_looks_are_left_out():
    rows = [*good_rows(), look(9, "Sallow", WIDE, "2027-03-10T16:00:00Z", 1.0, 99999.0, state="void")]
    assert breaches(rows) == ()


@pytest.mark.parametrize(
    ("rows", "pattern"),
    [
        (good_rows()[:1] + good_rows()[2:], r"fixed look of Sallow with .* at 2027-03-10T04:00:00Z is not in the plan"),
        (
            with_row(2, start_utc="2027-03-10T03:50:00Z", end_utc="2027-03-10T04:50:00Z"),
            r"at 2027-03-10T04:00:00Z is not in the plan",
        ),
        (with_row(2, end_utc="2027-03-10T04:50:00Z"), r"the plan gives it 50.00 min, the campaign 60"),
    ],
)
def test_fixed_looks_stay_as_they_are(rows, pattern):
    only(breaches(rows), pattern)


# ------------------------------------------------------------------ nights


def test_night_is_the_evening_date_at_the_site():
    """04:00 UTC is one o'clock local time of the next day: the night is that of the day before."""
    only(breaches(with_row(1, night="2027-03-05")), r"which belongs to the night of 2027-03-04")


def test_a_start_before_local_midnight_belongs_to_the_same_day():
    # 02:30 UTC is 23:30 of the day before in summer time there (UTC-3)
    rows = with_row(1, start_utc="2027-03-05T02:30:00Z", end_utc="2027-03-05T03:30:00Z")
    assert breaches(rows) == ()


def test_array_night_is_a_utc_date():
    only(radio_breaches(radio_row(night="2027-03-09")), r"belongs to the night of 2027-03-10")


def test_season_counts_the_evening():
    """The first look is at 04:00 UTC on March 5th, the evening of the 4th, a day before this season."""
    season = {"season": {"from": "2027-03-05", "to": "2027-08-01"}}
    only(breaches(good_rows(), campaign_of(file=season)), r"look 1 .*night 2027-03-04 is outside the season")


def test_shutdown_nights():
    shut = campaign_of(shutdowns=[{"from": "2027-03-02", "to": "2027-03-04", "why": "mirror"}])
    only(breaches(good_rows(), shut), r"look 1 .*one-eight is shut 2027-03-02 to 2027-03-04 \(mirror\)")


# ------------------------------------------------------------------ sky


def closed_form_altitude(ra_deg: float, dec_deg: float, mjd: float, lon_deg: float, lat_deg: float) -> float:
    """Mean sidereal time and spherical triangle, J2000 position: good to half a degree thirty years on."""
    sidereal = 280.46062 + 360.98564737 * (mjd - 51544.5) + lon_deg
    h, d, p = (math.radians(x) for x in (sidereal - ra_deg, dec_deg, lat_deg))
    return math.degrees(math.asin(math.sin(p) * math.sin(d) + math.cos(p) * math.cos(d) * math.cos(h)))


def test_low_target_is_a_breach_with_its_altitude():
    rows = with_row(1, start_utc="2027-03-05T00:40:00Z", end_utc="2027-03-05T01:40:00Z")
    found = breaches(rows)
    only(found, r"look 1 .*: altitude \d\d\.\d\d deg at 2027-03-05T00:40:00Z, lowest altitude is 30.00 deg")
    altitude = float(re.search(r"altitude (\d+\.\d+) deg", found[0])[1])
    expected = closed_form_altitude(180.0, -20.0, mjd_of_iso("2027-03-05T00:40:00Z"), -70.0, -30.0)
    assert altitude == pytest.approx(expected, abs=0.5)


def test_a_limit_met_to_two_hundredths_of_a_degree_is_met():
    """The altitude is lowest at one end of the look; the limit is put just inside and just outside."""
    check = next(c for c in recount(campaign_of(), pd.DataFrame(good_rows()[:2])).checks if "lowest altitude" in c)
    lowest = float(re.search(r"look: (\d+\.\d+) deg", check)[1])
    fine = campaign_of(camera={"lowest_altitude_deg": lowest + 0.01})
    assert breaches(good_rows()[:2], fine) == ()
    only(breaches(good_rows()[:2], campaign_of(camera={"lowest_altitude_deg": lowest + 0.04})), "lowest altitude")


def test_horizon_mask_is_a_limit_where_the_target_stands():
    """The target culminates in the north, 80 degrees up: a wall there hides it, one in the south does not."""
    north = [[0, 85], [60, 85], [61, 0], [299, 0], [300, 85]]
    south = [[0, 0], [120, 0], [121, 85], [239, 85], [240, 0]]
    only(breaches(good_rows()[:2], campaign_of(site={"horizon": north})), r"the horizon there is")
    assert breaches(good_rows()[:2], campaign_of(site={"horizon": south})) == ()


def test_a_tower_passed_in_the_middle_of_a_look_is_found():
    """Start and end are clear of it: the moments between count."""
    row = good_rows()[0]
    position = campaign_of().target("Sallow").position
    middle = np.array([mjd_of_iso(row["start_utc"]) + 0.5 / 24])
    azimuth = float(recount_sky.directions([position], middle, -70.0, -30.0, 2400.0)[1][0])
    tower = [[azimuth + d, a] for d, a in ((-3, 0), (-2, 88), (2, 88), (3, 0))]
    campaign = campaign_of(site={"horizon": tower}, file={"fixed_looks": []})
    only(breaches([row], campaign), r"at 2027-03-05T04:(2|3)\d:\d\dZ, the horizon there is 88.00 deg")


def test_horizon_is_straight_between_points_and_closes_round_north():
    found = horizon_deg([(10.0, 30.0), (350.0, 10.0)], np.array([0.0, 10.0, 5.0, 180.0]))
    assert found == pytest.approx([20.0, 30.0, 25.0, 20.0])
    assert horizon_deg([], np.array([0.0])) == pytest.approx([-90.0])


def test_twilight_is_a_breach():
    rows = with_row(1, start_utc="2027-03-05T08:40:00Z", end_utc="2027-03-05T09:20:00Z", exposure_s=1200.0)
    # Sunrise is near 10:20 UTC at 70 W in early March, so the Sun is some 14 degrees down at 09:20.
    only(breaches(rows), r"Sun altitude -1\d\.\d\d deg at 2027-03-05T09:20:00Z, highest Sun is -18.00 deg")


def test_moon_distance_is_a_breach_at_full_moon():
    # Full Moon opposite the Sun on 2027-03-22, at 12 h right ascension
    rows = [*good_rows(), look(9, "Sallow", FAST, "2027-03-23T04:00:00Z", 1.0, 2400.0)]
    only(breaches(rows), r"look 9 .*Moon distance \d+\.\d\d deg .*closest Moon is 30.00 deg")


def test_sun_keep_out_is_a_breach():
    only(breaches(good_rows(), campaign_of(camera={"sun_no_closer_deg": 175})), r"Sun keep-out is 175.00 deg")


def test_too_few_stations_are_a_breach():
    """Two hours before a target at 11.5 h right ascension rises over the western stations."""
    row = radio_row(start_utc="2027-03-10T01:00:00Z", end_utc="2027-03-10T05:00:00Z")
    only(radio_breaches(row), r"look 4 .*: [0-3] stations with receiver 43ghz see the target .*least_stations is 4")


def test_a_station_without_the_receiver_does_not_count():
    plain = campaign_of().sites["cairn-array"].model_dump()
    stations = [dict(s) for s in plain["stations"]]
    stations[0]["sefd_jy"] = {"22ghz": 500}
    receivers = {name: {"ghz": 43, "bandwidth_mhz": 256, "look_hours": 4} for name in ("43ghz", "22ghz")}
    found = radio_breaches(radio_row(), array={"stations": stations, "receivers": receivers})
    only(found, r": 3 stations with receiver 43ghz")


def test_sun_limit_of_an_array_is_a_breach():
    only(radio_breaches(radio_row(), receiver={"sun_no_closer_deg": 179}), r"closest Sun is 179.00 deg")


def test_array_look_longer_than_its_track_is_a_breach():
    track = Track(3.0, 3.0, 0.0, 4, 1.0, 1.0, 0.0, 1e-4)
    found = radio_breaches(radio_row(), {("Tern", RADIO): track})
    only(found, r"look 4 .*: lasts 4.00 h, enough stations are up for 3.00 h")


def test_star_agrees_with_two_libraries():
    # alt 39.9212, az 295.6540 for ICRS (187.278, +2.052), lon -70.4, lat -24.6, 2600 m, 2010-03-01 09:30 UTC: computed
    # with two unrelated libraries, which agree within 2 arcsec.
    here = Position.model_validate({"ra": 187.278, "dec": 2.052})
    mjd = np.array([mjd_of_iso("2010-03-01T09:30:00Z")])
    altitude, azimuth = recount_sky.directions([here], mjd, -70.4, -24.6, 2600.0)
    assert altitude[0] == pytest.approx(39.9212, abs=2 / 3600)
    assert azimuth[0] == pytest.approx(295.6540, abs=2 / 3600)


def test_sun_and_moon_agree_with_two_libraries():
    # lon 6.6, lat 52.9, 20 m, 2020-09-20 17:45 UTC: Moon alt 10.3672, Sun alt -2.1832 (5 and 2 arcsec), lit 0.1548.
    # The fraction was computed from the Earth's centre; seen from the ground the elongation differs by up to the Moon's
    # parallax of a degree, hence 0.5 sin(i) x 1 deg < 0.009.
    here = Position.model_validate({"ra": 0.0, "dec": 90.0})
    sight = recount_sky.look_over([here], np.array([mjd_of_iso("2020-09-20T17:45:00Z")]), 6.6, 52.9, 20.0)
    assert sight.moon_altitude[0] == pytest.approx(10.3672, abs=5 / 3600)
    assert sight.sun_altitude[0] == pytest.approx(-2.1832, abs=2 / 3600)
    assert sight.moon_lit[0] == pytest.approx(0.1548, abs=0.009)


def test_proper_motion_carries_the_target_along():
    """Ten arcsec a year northwards for 27.2 years: 272 arcsec of declination, seen in the meridian."""
    still = Position.model_validate({"ra": 180.0, "dec": -60.0})
    moving = still.model_copy(update={"pm_dec_mas_yr": 10_000.0})
    mjd = mjd_of_date("2027-03-10") + np.arange(0, 1, 1 / 1440)
    high = [recount_sky.directions([p] * mjd.size, mjd, -70.0, -30.0, 0.0)[0].max() for p in (still, moving)]
    # 27.18 years between 2000.0 and the date; the step of a minute blurs the top by less than an arcsec
    assert (high[1] - high[0]) * 3600 == pytest.approx(271.8, abs=1.0)


# ------------------------------------------------------------------ minutes and telescopes


def test_exposure_and_overheads_fit_into_the_look():
    # 3200 s in 11 frames with 300 s to acquire and 11 x 20 s to read: 3720 s in an hour
    only(breaches(with_row(1, exposure_s=3200.0)), r"3200 s of exposure and overheads of 520 s in a look of 3600 s")
    only(radio_breaches(radio_row(exposure_s=14500.0)), r"14500 s of exposure in a look of 14400 s")


def test_two_setups_of_one_telescope_do_not_overlap():
    rows = with_row(3, start_utc="2027-03-10T04:59:50Z")
    only(breaches(rows), r"look 3 .* starts 2027-03-10T04:59:50Z, but look 2 .* keeps brack-ridge/one-eight until")


def test_a_long_look_overlaps_more_than_its_neighbour():
    """A look inside a longer one must not hide the overlap with the next."""
    rows = [
        look(1, "Sallow", FAST, "2027-03-05T04:00:00Z", 2.0, 2400.0),
        look(2, "Marl", WIDE, "2027-03-05T04:10:00Z", 0.5, 600.0),
        look(3, "Marl", WIDE, "2027-03-05T05:30:00Z", 0.5, 600.0),
    ]
    campaign = campaign_of(file={"fixed_looks": []})
    found = [b for b in breaches(rows, campaign) if "keeps" in b]
    assert [re.search(r"look (\d)", b)[1] for b in found] == ["2", "3"]


def test_looks_one_second_apart_by_rounding_do_not_overlap():
    assert breaches(with_row(3, start_utc="2027-03-10T04:59:59Z")) == ()


def test_spacing_is_counted_from_night_to_night():
    campaign = campaign_of(sallow={"spacing": {"at_least_days": 5.5}})
    only(breaches(good_rows(), campaign), r"look 1 .* and look 2 .* are 5 nights apart, at_least_days is 5.5")
    assert breaches(good_rows(), campaign_of(sallow={"spacing": {"at_least_days": 5.0}})) == ()


def test_fixed_looks_may_be_close_but_a_third_look_between_them_may_not():
    starts = ("2027-03-10T04:00:00Z", "2027-03-10T06:00:00Z")
    fixed = [{"target": "Sallow", "setup": WIDE, "start_utc": s, "minutes": 60} for s in starts]
    campaign = campaign_of(file={"fixed_looks": fixed})
    pair = [look(i, "Sallow", WIDE, s, 1.0, 2400.0, state="fixed") for i, s in enumerate(starts, start=1)]
    assert breaches(pair, campaign) == ()
    third = look(3, "Sallow", FAST, "2027-03-10T05:00:00Z", 1.0, 2400.0)
    found = breaches([*pair, third], campaign)
    only(found, r"0 nights apart, at_least_days is 0.5")
    assert len(found) == 2


def test_wide_gap_is_a_note_and_not_a_breach():
    campaign = campaign_of(sallow={"spacing": {"at_least_days": 0.5, "at_most_days": 3.0}})
    report = recount(campaign, pd.DataFrame(good_rows()))
    assert report.breaches == ()
    assert report.notes == ("Sallow: 5 nights between 2027-03-04 and 2027-03-09, more than the 3 days wanted",)


# ------------------------------------------------------------------ accounts


def allocations(*hours: tuple[float, str]) -> dict[str, Any]:
    rest = [
        {"setup": FAST, "programme": "echoes", "hours": 9}, {"setup": RADIO, "programme": "knots", "hours": 9}
    ]  # fmt: skip
    wide = [{"setup": WIDE, "programme": "echoes", "hours": h, "sky": s} for h, s in hours]
    return {"allocations": wide + rest}


def test_hours_beyond_the_grant_are_a_breach():
    found = breaches(good_rows(), campaign_of(file=allocations((1.5, "dark"))))
    only(found, r"wide-camera for echoes: looks in dark or grey or bright sky take 2.00 h, 1.50 h are granted for it")


def test_hours_without_a_grant_are_a_breach():
    found = breaches(good_rows(), campaign_of(file=allocations()))
    only(found, r"wide-camera for echoes: no hours are granted, but look\(s\) 1, 2 use it")


def test_dark_hours_do_not_pay_for_a_bright_look():
    # Four days after full Moon it is still four fifths lit and up after midnight, five hours east of the target.
    rows = [*good_rows(), look(9, "Sallow", WIDE, "2027-03-27T05:00:00Z", 1.0, 2400.0)]
    found = breaches(rows, campaign_of(file=allocations((9, "dark"))))
    only(found, r"looks in (grey or )?bright sky take 1.00 h, 0.00 h are granted")
    assert len(found) == 2
    only(breaches(rows, campaign_of(file=allocations((9, "grey")))), r"looks in bright sky take 1.00 h")
    assert breaches(rows, campaign_of(file=allocations((2, "dark"), (1, "any")))) == ()


def test_grey_hours_pay_for_a_half_moon():
    # Last quarter on 2027-03-30: half lit, up from about local midnight on.
    rows = [*good_rows(), look(9, "Sallow", WIDE, "2027-03-30T06:30:00Z", 1.0, 2400.0)]
    only(breaches(rows, campaign_of(file=allocations((9, "dark")))), r"looks in grey or bright sky take 1.00 h")
    assert breaches(rows, campaign_of(file=allocations((2, "dark"), (1, "grey")))) == ()


def test_thresholds_of_the_sky_classes_are_the_sites():
    rows = [*good_rows(), look(9, "Sallow", WIDE, "2027-03-30T06:30:00Z", 1.0, 2400.0)]
    generous = campaign_of(site={"sky_classes": {"dark_below": 0.7, "grey_below": 0.9}})
    assert breaches(rows, generous) == ()


def test_a_look_that_would_have_to_be_split_is_a_note():
    campaign = campaign_of(file=allocations((1.5, "dark"), (0.5, "any")))
    report = recount(campaign, pd.DataFrame(good_rows()))
    assert report.breaches == ()
    assert report.notes == (f"{WIDE} for echoes: no simple assignment keeps each look within one allocation",)


@settings(max_examples=60, deadline=None)
@given(
    looks=st.lists(st.tuples(st.integers(1, 6), st.sampled_from(["dark", "grey", "bright"])), max_size=5),
    purses=st.lists(st.tuples(st.integers(1, 10), st.sampled_from(["dark", "grey", "any"])), min_size=1, max_size=4),
)
def test_accounts_hold_exactly_when_a_flow_of_hours_exists(looks, purses):
    """Compared with a linear programme that pours each look into the allocations that may pay for it."""
    from scipy.optimize import linprog

    pays = {"dark": {"dark"}, "grey": {"dark", "grey"}, "any": {"dark", "grey", "bright"}}
    edges = [(i, j) for i, (_, word) in enumerate(looks) for j, (_, sky) in enumerate(purses) if word in pays[sky]]
    feasible = not looks
    if edges:
        demand = np.array([[float(e[0] == i) for e in edges] for i in range(len(looks))])
        supply = np.array([[float(e[1] == j) for e in edges] for j in range(len(purses))])
        answer = linprog(
            np.zeros(len(edges)), A_ub=supply, b_ub=[h for h, _ in purses], A_eq=demand, b_eq=[h for h, _ in looks]
        )
        feasible = answer.status == 0
    tally = Tally()
    granted = [Allocation(setup=WIDE, programme="echoes", hours=h, sky=sky) for h, sky in purses]
    module._account("x", [(60.0 * h, word) for h, word in looks], granted, tally)
    assert (not tally.breaches) == feasible


# ------------------------------------------------------------------ independence


def test_recount_shares_no_code_with_what_made_the_plan():
    """Only campaign records, units, errors and numpy, pandas, astropy: read from the syntax trees."""
    allowed = {"planner.campaign.records", "planner.units", "planner.errors", "planner.records", "planner.schedule"}
    files = sorted(Path(module.__file__).parent.glob("recount*.py"))
    assert len(files) >= 2
    for file in files:
        for node in ast.walk(ast.parse(file.read_text())):
            if isinstance(node, ast.ImportFrom):
                names = [node.module or ""]
                if node.module == "planner.schedule":
                    names = [f"planner.schedule.{a.name}" for a in node.names]
            elif isinstance(node, ast.Import):
                names = [a.name for a in node.names]
            else:
                continue
            for name in names:
                ours = name.split(".")[0] != "planner" or name in allowed or "planner.schedule.recount" in name
                assert ours, f"{file.name} imports {name}"
                assert name.split(".")[0] not in {"scipy", "ortools", "highspy", "astroplan"}, name
