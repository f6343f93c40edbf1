"""The recount of arrays: sessions, subarrays, mounts of stations; and of the overheads of cameras."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pandas as pd
import pytest
import test_recount as base

from planner.campaign.array_setups import share_stations
from planner.campaign.records import Allocation, ArraySite, Campaign, Position, SetupRef, Station
from planner.schedule.recount import recount
from planner.schedule.recount_arrays import inside_mount

RADIO = base.RADIO


# ------------------------------------------------------------------ sessions


def test_a_look_on_the_date_of_a_session_passes() -> None:
    sessions = {"receiver": {"sessions": ["2027-03-01", "2027-03-10"]}}
    assert base.radio_breaches(base.radio_row(), **sessions) == ()


@pytest.mark.parametrize(
    ("dates", "hint"),
    [(["2027-02-01", "2027-03-12"], "the nearest session is on 2027-03-12"), ([], "no session at all")],
)
def test_a_look_between_sessions_is_a_breach_with_the_nearest_one(dates: list[str], hint: str) -> None:
    found = base.radio_breaches(base.radio_row(), receiver={"sessions": dates})
    base.only(found, rf"look 4 .*: cairn-array/43ghz has no session on 2027-03-10; .*{hint}")


# ------------------------------------------------------------------ subarrays


def split(*names: str, parts: dict[str, Any] | None = None) -> Campaign:
    """The invented array used by its parts (A and B in the south-west, C and D in the north) or as a whole ("")."""
    subarrays = parts or {"low": ["A", "B"], "high": ["C", "D"], "middle": ["B", "C"]}
    campaign = base.campaign_of(array={"subarrays": subarrays, "least_stations": 2}, file={"fixed_looks": []})
    site = campaign.sites["cairn-array"]
    assert isinstance(site, ArraySite)
    setups = [
        SetupRef(
            f"{RADIO}@{name}" if name else RADIO, "cairn-array", site.part(name) if name else site, "cairn-array",
            receiver=site.receivers["43ghz"], receiver_name="43ghz",
        )
        for name in names
    ]  # fmt: skip
    hours = tuple(
        Allocation.model_validate({"setup": setup.name, "programme": "knots", "hours": 20}) for setup in setups
    )
    return replace(
        campaign, setups=share_stations(setups), file=campaign.file.model_copy(update={"allocations": hours})
    )


def told(campaign: Campaign, *names: str) -> tuple[str, ...]:
    """Breaches of looks at the same time, one with each of the setups (the spacing rule is not the matter here)."""
    rows = [base.radio_row(look=i + 1, setup=f"{RADIO}@{n}" if n else RADIO) for i, n in enumerate(names)]
    table = pd.DataFrame(rows)
    return tuple(b for b in recount(campaign, table).breaches if "nights apart" not in b)


def test_parts_without_a_common_station_work_at_the_same_time() -> None:
    campaign = split("low", "high")
    assert len({s.telescope for s in campaign.setups}) == 2
    assert told(campaign, "low", "high") == ()


@pytest.mark.parametrize("names", [("low", "middle"), ("low", ""), ("low", "high", "middle")])
def test_parts_with_a_common_station_do_one_job_at_a_time(names: tuple[str, ...]) -> None:
    campaign = split(*names)
    assert len({s.telescope for s in campaign.setups}) == 1
    base.only(told(campaign, *names), r"look \d .* starts .*, but look \d .* keeps cairn-array")


def test_a_shared_station_is_found_even_where_the_telescopes_names_differ() -> None:
    """The recount does not trust the grouping: it looks at the stations."""
    campaign = split("low", "middle")
    apart = tuple(replace(s, telescope=s.name) for s in campaign.setups)
    base.only(
        told(replace(campaign, setups=apart), "low", "middle"), r"look 2 .*, but look 1 .* keeps B until 2027-03-10T"
    )


def test_a_subarray_is_counted_by_its_own_stations() -> None:
    campaign = split("low", parts={"low": {"stations": ["A", "B", "C"], "least_stations": 3}})
    assert told(campaign, "low") == ()
    site = campaign.setups[0].site
    assert isinstance(site, ArraySite)
    high = [s.model_copy(update={"lowest_elevation_deg": 85.0}) if s.station == "C" else s for s in site.stations]
    low = replace(campaign.setups[0], site=site.model_copy(update={"stations": tuple(high)}))
    base.only(told(replace(campaign, setups=(low,)), "low"), r": 2 stations with receiver 43ghz .*least_stations is 3")


# ------------------------------------------------------------------ mounts


def test_a_look_beyond_a_stations_hour_angles_is_a_breach() -> None:
    # Tern (11.5 h) transits the stations near 106 W some 5 h after the start of the day it is looked at: the look runs
    # from 2 h before to 2 h after; a mount that turns to the west only misses its first half
    stations = base.campaign_of().sites["cairn-array"].model_dump()["stations"]
    bound = [dict(s) for s in stations]
    bound[0]["hour_angle_deg"] = [-90.0, 90.0]
    assert base.radio_breaches(base.radio_row(), array={"stations": bound}) == ()
    bound[0]["hour_angle_deg"] = [0.0, 90.0]
    base.only(
        base.radio_breaches(base.radio_row(), array={"stations": bound}), r": 3 stations with receiver 43ghz see the"
    )


def test_the_recounts_mount_agrees_with_sidereal_time() -> None:
    """Closed form: hour angle = Greenwich mean sidereal time + longitude - right ascension (Meeus 1998, ch. 12)."""
    mjd = 61474.0 + np.arange(0.0, 1.0, 0.003)
    here = {"station": "A", "longitude_deg": -106.0, "latitude_deg": 34.0, "height_m": 0, "sefd_jy": {"q": 1.0}}
    station = Station.model_validate(here | {"hour_angle_deg": [-40.0, 75.0]})
    target = Position.model_validate({"ra": 171.9, "dec": 24.1})
    sidereal = 280.46061837 + 360.98564736629 * (mjd - 51544.5)
    angle = (sidereal - 106.0 - 171.9 + 180.0) % 360.0 - 180.0
    sure = np.minimum(np.abs(angle + 40.0), np.abs(angle - 75.0)) > 0.6  # precession since 2000 moves it by 0.35 deg
    got = inside_mount(station, [target] * mjd.size, mjd)
    assert np.array_equal(got[sure], ((angle > -40.0) & (angle < 75.0))[sure])
    assert np.all(inside_mount(Station.model_validate(here), [target] * 3, mjd[:3]))


# ------------------------------------------------------------------ overheads


def test_filter_and_calibration_count_among_the_overheads() -> None:
    """One hour holds 2400 s in 8 frames: 5 min, 8 x 20 s leave 740 s, of which 12 min and 20 s are all there is."""
    rows = base.with_row(1, exposure_s=2400.0)
    assert base.breaches(rows, base.campaign_of(camera={"calibration_min": 12.0, "filter_change_s": 19.0})) == ()
    base.only(
        base.breaches(rows, base.campaign_of(camera={"calibration_min": 12.0, "filter_change_s": 25.0})),
        r"look 1 .*: 2400 s of exposure and overheads of 1205 s in a look of 3600 s",
    )
