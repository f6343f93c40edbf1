"""What would help where a target has little time: checked by doing what was advised."""

from __future__ import annotations

import re
from dataclasses import replace
from types import SimpleNamespace
from typing import Any

import pytest

from planner.campaign.records import Campaign, SpacecraftSite
from planner.sky.what_helps import Hint, _month_words, what_would_help
from planner.sky.windows import find_windows

NORTH = {"site": "North Hill", "longitude_deg": 15.0, "latitude_deg": 45.0, "time_zone": "Europe/Rome"}


def hints(camp: Campaign, *profiles: Any) -> tuple[Hint, ...]:
    return what_would_help(camp, find_windows(camp), profiles)


def one(invented: SimpleNamespace, ra: float, dec: float, *profiles: Any, **site: Any) -> Hint:
    camp = invented.campaign(
        {"ridge": invented.site(**site)}, [invented.target("T", ra, dec)], "2027-03-01", "2027-04-30"
    )
    (hint,) = hints(camp, *profiles)
    return hint


def hours_in(text: str, words: str) -> float:
    found = re.search(words + r"[^;]*? (\d+) h", text)
    assert found, text
    return float(found[1])


def test_nothing_is_said_where_there_is_time_enough(invented: SimpleNamespace) -> None:
    camp = invented.campaign(
        {"ridge": invented.site()}, [invented.target("T", 180.0, -20.0)], "2027-03-01", "2027-04-30"
    )
    assert hints(camp) == ()


def test_a_limit_that_is_offered_gives_the_hours_promised(invented: SimpleNamespace) -> None:
    """A star that culminates at 36 deg: with 20 deg instead of 36 it is up for hours."""
    hint = one(invented, 180.0, 29.35, camera={"lowest_altitude_deg": 36})
    promised = hours_in(hint.text, "lowest_altitude_deg 20 instead of 36 would give")
    milder = invented.campaign(
        {"ridge": invented.site(camera={"lowest_altitude_deg": 20})}, [invented.target("T", 180.0, 29.35)],
        "2027-03-01", "2027-04-30",
    )  # fmt: skip
    # the coarse grid is good to 5 % or 2 h
    assert find_windows(milder).ledger.left_hours.sum() == pytest.approx(promised, rel=0.05, abs=2.0)
    assert hint.hours < 61


def test_another_place_that_is_offered_gives_the_hours_promised(invented: SimpleNamespace) -> None:
    north = invented.site(**NORTH)
    hint = one(invented, 180.0, 80.0, north)
    promised = hours_in(hint.text, "the same camera at North Hill would have")
    assert "there it never rises" in hint.text
    assert "would give" not in hint.text  # no limit of the setup is in the way
    there = invented.campaign({"ridge": north}, [invented.target("T", 180.0, 80.0)], "2027-03-01", "2027-04-30")
    assert find_windows(there).ledger.left_hours.sum() == pytest.approx(promised, rel=0.05)


def test_other_months_that_are_offered_have_time(invented: SimpleNamespace) -> None:
    """RA 0 h stands beside the Sun in March and culminates at midnight in September."""
    hint = one(invented, 0.0, -20.0)
    found = re.search(r"best months there are (\w+) to (\w+) \(up to (\d+\.\d) h a night\)", hint.text, re.IGNORECASE)
    assert found, hint.text
    assert found[1] in ("June", "July")
    assert found[2] in ("October", "November", "December")
    september = invented.campaign(
        {"ridge": invented.site()}, [invented.target("T", 0.0, -20.0)], "2027-09-01", "2027-09-30"
    )
    with pytest.warns(UserWarning, match="leap-second"):
        left = find_windows(september).ledger.left_hours.sum()
    assert left / 30 == pytest.approx(float(found[3]), rel=0.15)  # the Moon takes a night or two of any one month


def test_nights_taken_by_others_are_offered_back(invented: SimpleNamespace) -> None:
    hint = one(invented, 180.0, -20.0, shutdowns=[{"from": "2027-03-03", "to": "2027-04-28"}])
    assert hours_in(hint.text, "nights on which the telescope is closed to it would give") > 300


def test_optional_limits_are_offered_by_name(invented: SimpleNamespace) -> None:
    hint = one(invented, 180.0, -20.0, camera={"hour_angle_deg": [-70, -60]})
    assert hours_in(hint.text, "hour_angle_deg left out would give") > 200


def test_the_suns_keep_out_is_never_offered(invented: SimpleNamespace) -> None:
    hint = one(invented, 330.0, -13.0, camera={"sun_no_closer_deg": 100, "sun_below_deg": -6})
    assert "sun_no_closer" not in hint.text


def test_an_array_is_told_how_many_stations_would_do(invented: SimpleNamespace) -> None:
    camp = invented.campaign(
        {"net": invented.array()}, [invented.target("T", 180.0, -36.0)], "2027-03-01", "2027-03-20", [("net/q", "all")]
    )
    (hint,) = hints(camp)
    assert re.search(
        r"at most 2 of the 3 stations wanted see it together; least_stations 2 would give \d\.\d h a day", hint.text
    )


def test_a_spacecraft_is_told_its_dates(invented: SimpleNamespace) -> None:
    craft = SpacecraftSite.model_validate(
        {
            "spacecraft": "Lark",
            "sun_angle_deg": [85, 135],
            "setups": {"cam": {"aperture_m": 1, "image_fwhm_arcsec": 0.2}},
        }
    )
    camp = invented.campaign(
        {"lark": craft}, [invented.target("T", 0.0, 0.0)], "2027-03-01", "2027-04-10", [("lark/cam", "all")]
    )
    (hint,) = hints(camp)
    # the Sun passes the equinox on 20 March; 85 to 135 deg from it on 14 June (or so) to 5 August, and in autumn
    assert re.search(r"inside 85 to 135 deg 2027-06-1\d to 2027-08-0\d and 2027-11-0\d to 2027-12-2\d", hint.text), (
        hint.text
    )


def test_months_are_joined_over_the_turn_of_the_year() -> None:
    assert _month_words([1, 2, 5, 11, 12]) == "November to February, May"
    assert _month_words(list(range(1, 13))) == "all twelve"


def test_hints_come_in_the_order_of_the_ledger(invented: SimpleNamespace) -> None:
    targets = [invented.target("A", 0.0, 80.0), invented.target("B", 10.0, 80.0)]
    camp = invented.campaign({"ridge": invented.site()}, targets, "2027-03-01", "2027-03-10")
    assert [h.target for h in hints(camp)] == ["A", "B"]
    assert all(h.setup == "ridge/cam" for h in hints(replace(camp)))
