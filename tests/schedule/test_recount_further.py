"""The recount of optional limits, telescope calendars and spacecraft: kept limits pass, broken ones are named."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import numpy as np
import pandas as pd
import pytest
from test_recount import WIDE, breaches, campaign_of, closed_form_altitude, good_rows, look, only

from planner.campaign.records import Busy, Campaign, Nights, SetupRef, SpacecraftSite
from planner.records import PLAN_COLUMNS
from planner.schedule.recount import recount
from planner.schedule.recount_further import parallactic, pickering_airmass
from planner.sky.airmass import kasten_young, refraction_arcmin
from planner.units import mjd_of_date, mjd_of_iso

START, END = "2027-03-05T04:00:00Z", "2027-03-05T05:00:00Z"  # look 1: Sallow, 12 h -20 deg, over 70 W 30 S


def hour_angle(iso: str) -> float:
    """Mean sidereal time with a J2000 position: good to half a degree."""
    return (280.46062 + 360.98564737 * (mjd_of_iso(iso) - 51544.5) - 70.0 - 180.0 + 180.0) % 360.0 - 180.0


def alone(**camera: Any) -> tuple[str, ...]:
    """Breaches of look 1 alone when its camera has further limits."""
    return breaches(good_rows()[:1], campaign_of(camera=camera, file={"fixed_looks": []}))


def test_hour_angle_limits() -> None:
    a, b = hour_angle(START), hour_angle(END)
    assert alone(hour_angle_deg=[a - 1, b + 1]) == ()
    only(
        alone(hour_angle_deg=[a + 1, b + 1]), r"look 1 .*: hour angle -?\d+\.\d\d deg at 2027-03-05T04:00:00Z, allowed"
    )
    only(alone(hour_angle_deg=[a - 1, b - 1]), r"hour angle .* at 2027-03-05T05:00:00Z")
    assert alone(hour_angle_deg=[a - 1 + 360, b + 1 + 360]) == ()  # the same range, written a turn later


def test_declination_limits() -> None:
    assert alone(declination_deg=[-30, 0]) == ()
    only(alone(declination_deg=[-19, 40]), r"declination -20\.15 deg .*southernmost is -19")  # precession: -0.15 deg
    only(alone(declination_deg=[-80, -21]), r"declination -20\.15 deg .*northernmost is -21")


def test_airmass_limits() -> None:
    lowest = min(closed_form_altitude(180.0, -20.0, mjd_of_iso(t), -70.0, -30.0) for t in (START, END))
    largest = 1 / math.sin(math.radians(lowest))
    assert alone(largest_airmass=largest * 1.03) == ()
    only(alone(largest_airmass=largest * 0.97), r"airmass \d\.\d+ at 2027-03-05T04:00:00Z, largest allowed is")
    only(alone(airmass=[largest * 1.03, 3.0]), r"airmass .*, smallest allowed is")


def test_the_recounts_airmass_is_another_authors_and_agrees() -> None:
    h = np.linspace(10.0, 90.0, 200)
    theirs = kasten_young(h + refraction_arcmin(h) / 60)
    assert pickering_airmass(h) == pytest.approx(theirs, rel=0.002)
    # Pickering at 30 deg apparent: 1.9932 (formula); true 30 is 0.03 deg higher
    assert pickering_airmass(np.array([30.0 - 1.75 / 60])) == pytest.approx([1.9932], abs=2e-4)


def test_blind_spot_at_the_zenith() -> None:
    highest = max(
        closed_form_altitude(180.0, -20.0, mjd_of_iso(START) + x / 24, -70.0, -30.0) for x in np.linspace(0, 1, 13)
    )
    assert alone(zenith_blind_deg=90 - highest - 1.0) == ()
    only(alone(zenith_blind_deg=90 - highest + 1.0), r"zenith distance \d+\.\d\d deg .*blind spot is")


def test_parallactic_angle_limits() -> None:
    # by hand from the closed hour angle: the target is north of the zenith, the angle near +-180 at transit
    h = np.array([hour_angle(START), hour_angle(END)])
    q = parallactic(h, np.array([-20.15, -20.15]), -30.0)
    spread = np.sort(q % 360)
    assert alone(parallactic_deg=[float(spread[0]) - 4, float(spread[1]) + 4]) == ()
    only(alone(parallactic_deg=[float(spread[0]) + 4, float(spread[1]) + 4]), r"parallactic angle -?\d+\.\d\d deg at")


def test_parallactic_angle_of_the_textbook_triangle() -> None:
    """On the equator a star of declination 0 rises straight up: the pole is 90 deg to its north, the zenith above."""
    assert parallactic(np.array([30.0]), np.array([0.0]), 1e-9) == pytest.approx([90.0])
    assert parallactic(np.array([-30.0]), np.array([0.0]), 1e-9) == pytest.approx([-90.0])
    assert parallactic(np.array([0.0]), np.array([-20.0]), 30.0) == pytest.approx([0.0])  # pole and zenith in line
    assert np.abs(parallactic(np.array([0.0]), np.array([-20.0]), -30.0)) == pytest.approx([180.0])


def test_moon_limits() -> None:
    # full Moon on 2027-03-22: up all night; first quarter 03-15 sets near midnight
    rows = [look(1, "Sallow", WIDE, "2027-03-21T04:00:00Z", 1.0, 2400.0)]

    def run(**camera: Any) -> tuple[str, ...]:
        return breaches(
            rows, campaign_of(camera=camera | {"moon_no_closer_deg": 20}, file={"fixed_looks": [], **ANY_SKY})
        )

    assert run() == ()
    only(run(moon_at_most_lit=0.5), r"Moon up and lit 0\.9\d, moon_at_most_lit 0\.5")
    only(run(moon_below_deg=0.0), r"Moon altitude \d\d\.\d\d deg .*highest Moon is 0")
    assert alone(moon_at_most_lit=0.0) == ()  # at new Moon it is below the horizon
    assert alone(moon_below_deg=0.0) == ()


ANY_SKY = {
    "allocations": [
        {"setup": WIDE, "programme": "echoes", "hours": 3},
        {"setup": "brack-ridge/fast-camera", "programme": "echoes", "hours": 3},
        {"setup": "cairn-array/43ghz", "programme": "knots", "hours": 9},
    ]
}


def test_sun_limit_by_filter() -> None:
    """24:00 UTC at 70 W in March: the Sun is some 18 deg down at 00:20."""
    rows = [look(1, "Marl", WIDE, "2027-03-06T00:05:00Z", 0.5, 600.0)]
    rows[0]["target"] = "Sallow"
    base = {"lowest_altitude_deg": 5, "sun_no_closer_deg": 20}

    def run(**camera: Any) -> tuple[str, ...]:
        return breaches(rows, campaign_of(camera=base | camera, file={"fixed_looks": []}))

    only(run(), r"Sun altitude -1\d\.\d\d deg .*highest Sun is -18")
    assert run(sun_below_by_filter_deg={"R": -10}) == ()
    only(run(sun_below_by_filter_deg={"B": -10}), "highest Sun is -18")  # the camera's filter is R


def test_template_match() -> None:
    ring = {
        "ring": "Sallow ring", "dust": {"shape": "sheet", "depth_pc": 24},
        "brightness": {"extinction_mag": {"lognormal": {"median": 0.1, "sigma_fraction": 0.5}}},
    }  # fmt: skip
    at = {"setup": WIDE, "filter": "R", "on": "2026-03-05", "minutes": 60}

    def run(rule: dict[str, float], **template: Any) -> tuple[str, ...]:
        sallow = {"features": [ring | {"templates": [at | template]}]}
        campaign = campaign_of(camera={"match_template": rule}, sallow=sallow, file={"fixed_looks": []})
        return breaches(good_rows()[:1], campaign)

    # a year before, to the day: the same hour angle within a degree
    same, early = {"start_utc": "2026-03-05T04:00:00Z"}, {"start_utc": "2026-03-05T01:30:00Z"}
    assert run({"airmass_within": 0.1, "parallactic_within_deg": 25}, **same) == ()
    only(run({"airmass_within": 0.1}, **early), r"template match: airmass \d\.\d+ at .*, smallest allowed is")
    only(run({"parallactic_within_deg": 10}, **early), r"template match: parallactic angle")
    assert run({"airmass_within": 0.1}, **early, filter="B") == ()  # no template of this filter


def test_night_class_counts_the_moon_while_it_is_down() -> None:
    """2027-03-18, four days before full Moon: down at the end of the night, and the whole night is bright."""
    rows = [look(1, "Sallow", WIDE, "2027-03-18T08:10:00Z", 0.5, 1200.0)]
    granted = [a | ({"sky": "dark"} if a["setup"] == WIDE else {}) for a in ANY_SKY["allocations"]]
    dark = {"fixed_looks": [], "allocations": granted}
    assert breaches(rows, campaign_of(file=dark)) == ()
    only(
        breaches(rows, campaign_of(file=dark, site={"sky_classes": {"by": "night"}})),
        "looks in grey or bright sky|looks in bright sky",
    )


# ------------------------------------------------------------------ the calendar


def with_calendar(**fields: Any) -> Campaign:
    campaign = campaign_of(file={"fixed_looks": []})
    return replace(campaign, setups=tuple(replace(s, **fields) if s.name == WIDE else s for s in campaign.setups))


def test_busy_nights_and_times() -> None:
    rows = good_rows()[:1]
    night = Busy.model_validate({"from": "2027-03-04", "to": "2027-03-04", "why": "guests"})
    only(breaches(rows, with_calendar(busy=(night,))), r"look 1 .*taken by others 2027-03-04 to 2027-03-04 \(guests\)")
    part = Busy.model_validate({"start_utc": "2027-03-05T04:55:00Z", "end_utc": "2027-03-05T08:00:00Z"})
    only(breaches(rows, with_calendar(busy=(part,))), r"taken by others 2027-03-05T04:55:00Z to 2027-03-05T08:00:00Z")
    after = Busy.model_validate({"start_utc": END, "end_utc": "2027-03-05T08:00:00Z"})
    assert breaches(rows, with_calendar(busy=(after,))) == ()


def test_a_setup_that_is_not_mounted() -> None:
    rows = good_rows()[:1]
    on = Nights.model_validate({"from": "2027-03-04", "to": "2027-03-06"})
    late = Nights.model_validate({"from": "2027-03-05", "to": "2027-03-06"})
    assert breaches(rows, with_calendar(mounted=(on,))) == ()
    only(breaches(rows, with_calendar(mounted=(late,))), r"brack-ridge/wide-camera is not mounted on that night")


# ------------------------------------------------------------------ spacecraft


def space_campaign(low: float, high: float) -> Campaign:
    campaign = campaign_of(file={"fixed_looks": []})
    site = SpacecraftSite.model_validate(
        {
            "spacecraft": "Lark", "invented": True, "sun_angle_deg": [low, high],
            "setups": {"cam": {"aperture_m": 0.9, "image_fwhm_arcsec": 0.2, "acquisition_min": 5, "readout_s": 20}},
        }
    )  # fmt: skip
    setup = SetupRef("lark/cam", "lark", site, "lark", site.setups["cam"])
    allocation = campaign.file.allocations[0].model_copy(update={"setup": "lark/cam"})
    file = campaign.file.model_copy(update={"allocations": (*campaign.file.allocations, allocation)})
    return replace(campaign, file=file, sites={**campaign.sites, "lark": site}, setups=(*campaign.setups, setup))


def test_sun_angle_of_a_spacecraft() -> None:
    """2027-03-05: the Sun at 23.0 h -6.2 deg, the target at 12 h -20 deg (circular orbit): some 151 deg apart."""
    sun = np.radians(360.0 / 365.2422 * (mjd_of_date("2027-03-05") - mjd_of_date("2027-03-20")) - 0.4)  # longitude
    x, y, z = np.cos(sun), np.sin(sun) * np.cos(np.radians(23.44)), np.sin(sun) * np.sin(np.radians(23.44))
    d = np.radians(-20.0)
    angle = float(np.degrees(np.arccos(-np.cos(d) * x + np.sin(d) * z + 0.0 * y)))
    row = look(1, "Sallow", "lark/cam", "2027-03-05T04:00:00Z", 1.0, 2400.0, night="2027-03-05")
    table = pd.DataFrame([row], columns=list(PLAN_COLUMNS))
    good = recount(space_campaign(angle - 2, angle + 2), table)
    assert good.breaches == ()
    assert any("Sun angle of spacecraft looks" in c for c in good.checks)
    only(
        recount(space_campaign(angle + 2, 175), table).breaches,
        r"look 1 .*: Sun angle \d+\.\d\d deg .*smallest allowed",
    )
    only(recount(space_campaign(85, angle - 2), table).breaches, r"Sun angle .*largest allowed is")
    wrong = recount(space_campaign(angle - 2, angle + 2), table.assign(night="2027-03-04"))
    only(wrong.breaches, "belongs to the night of 2027-03-05")
