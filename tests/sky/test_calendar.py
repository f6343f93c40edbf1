"""Nights and times that a telescope has for a setup: shutdowns, mounted dates, what others have."""

from __future__ import annotations

import datetime as dt
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.campaign.records import Busy, Nights, SetupRef, Telescope
from planner.records import LIMITS, Windows
from planner.sky.calendar import calendar_of
from planner.sky.windows import find_windows
from planner.units import iso_of_mjd, mjd_of_iso

STAR = [("Equator", 110.0, -3.0)]
SITE = "ridge"


def found_with(
    invented: SimpleNamespace, first: str = "2027-03-09", last: str = "2027-03-14", **telescope: Any
) -> Windows:
    site = invented.site()
    whole = site.telescopes["one"]
    record = Telescope.model_validate({"setups": whole.setups, **telescope})
    site = site.model_copy(update={"telescopes": {"one": record}})
    setup = SetupRef(
        "ridge/cam", SITE, site, "ridge/one", record.setups["cam"],
        shutdowns=record.shutdowns, busy=record.busy, mounted=record.mounted.get("cam"),
    )  # fmt: skip
    camp = invented.campaign({SITE: site}, [invented.target(*s) for s in STAR], first, last)
    from dataclasses import replace

    return find_windows(replace(camp, setups=(setup,)))


def nights_of(windows: Windows) -> list[str]:
    return sorted({windows.nights[n] for n in windows.night})


def lost(windows: Windows, name: str) -> float:
    return float(windows.ledger.lost_hours[..., LIMITS.index(name)].sum())


def test_a_setup_is_used_on_nights_on_which_it_is_mounted_only(invented: SimpleNamespace) -> None:
    found = found_with(invented, mounted={"cam": [["2027-03-10", "2027-03-11"], ["2027-03-14", "2027-03-20"]]})
    assert nights_of(found) == ["2027-03-10", "2027-03-11", "2027-03-14"]
    assert lost(found, "not mounted") > 3 * 8
    never = found_with(invented, mounted={"cam": []})
    assert never.target.size == 0


def test_busy_dates_take_nights_and_busy_times_take_exactly_their_time(invented: SimpleNamespace) -> None:
    free = found_with(invented)
    night = free.night == 3
    start, end = float(free.start_mjd[night].min()), float(free.end_mjd[night].max())
    third = (end - start) / 3
    taken = {"start_utc": iso_of_mjd(start + third), "end_utc": iso_of_mjd(start + 2 * third), "why": "guests"}
    found = found_with(invented, busy=["2027-03-10", taken])
    assert nights_of(found) == ["2027-03-09", "2027-03-11", "2027-03-12", "2027-03-13", "2027-03-14"]
    # 2 s: the moments are written to the second
    assert found.minutes[found.night == 3].sum() == pytest.approx(free.minutes[night].sum() * 2 / 3, abs=2 / 60)
    assert (
        (found.end_mjd <= start + third + 2e-5) | (found.start_mjd >= start + 2 * third - 2e-5) | (found.night != 3)
    ).all()
    whole = free.minutes[free.night == 1].sum() / 60
    # the ledger charges the night's dark hours of the busy night, and the third of the other
    assert lost(found, "busy") > whole + third * 24 * 0.9
    total = found.ledger.lost_hours.sum() + found.ledger.left_hours.sum()
    assert total == pytest.approx(6 * 24.0)


def test_hours_left_fit_the_windows_when_times_are_taken(invented: SimpleNamespace) -> None:
    taken = {"start_utc": "2027-03-12T01:00:00Z", "end_utc": "2027-03-12T02:10:00Z"}
    found = found_with(invented, busy=[taken])
    assert found.ledger.left_hours.sum() == pytest.approx(found.minutes.sum() / 60, abs=0.5)


@settings(max_examples=40, deadline=None)
@given(
    st.lists(st.tuples(st.integers(0, 200), st.integers(1, 50)), max_size=6),
    st.lists(st.tuples(st.integers(0, 240), st.integers(1, 60)), min_size=1, max_size=4),
)
def test_what_is_left_of_intervals_is_the_difference_of_sets(
    taken: list[tuple[int, int]], wanted: list[tuple[int, int]]
) -> None:
    """Against a set of minutes."""
    base = mjd_of_iso("2027-03-09T20:00:00Z")
    moment = dt.datetime(2027, 3, 9, 20, tzinfo=dt.UTC)
    busy = tuple(
        Busy(start_utc=moment + dt.timedelta(minutes=a), end_utc=moment + dt.timedelta(minutes=a + n)) for a, n in taken
    )
    setup = SetupRef("s/c", "s", None, "s/t", busy=busy)  # type: ignore[arg-type]
    calendar = calendar_of(setup, [dt.date(2027, 3, 9)])
    start = base + np.array([a for a, _ in wanted]) / 1440
    end = base + np.array([a + n for a, n in wanted]) / 1440
    row, s, e = calendar.free(np.arange(len(wanted)), start, end)
    for i, (a, n) in enumerate(wanted):
        minutes = set(range(a, a + n)) - {m for b, k in taken for m in range(b, b + k)}
        got = sum((e[row == i] - s[row == i]) * 1440)
        assert got == pytest.approx(len(minutes), abs=1e-4)


def test_mounted_and_busy_are_counted_from_evening_to_evening() -> None:
    setup = SetupRef(
        "s/c", "s", None, "s/t",  # type: ignore[arg-type]
        busy=(Busy.model_validate({"from": "2027-03-10", "to": "2027-03-11"}),),
        mounted=(Nights.model_validate({"from": "2027-03-09", "to": "2027-03-10"}),),
    )  # fmt: skip
    days = [dt.date(2027, 3, 9) + dt.timedelta(days=i) for i in range(4)]
    calendar = calendar_of(setup, days)
    assert calendar.busy.tolist() == [False, True, True, False]
    assert calendar.unmounted.tolist() == [False, False, True, True]
    assert calendar.open.tolist() == [True, False, False, False]


def test_two_setups_of_one_telescope_are_one_machine_in_the_problem(invented: SimpleNamespace) -> None:
    """The campaign's references name the telescope: both setups share it, and so do their slots."""
    site = invented.site()
    record = Telescope.model_validate(
        {"setups": {"cam": {"aperture_m": 1.0}, "wide": {"aperture_m": 1.0, "filter": "B"}}}
    )
    site = site.model_copy(update={"telescopes": {"one": record}})
    camp = invented.campaign(
        {SITE: site},
        [invented.target(*STAR[0])],
        "2027-03-09",
        "2027-03-10",
        [("ridge/cam", "all"), ("ridge/wide", "all")],
    )
    assert {s.telescope for s in camp.setups} == {"ridge/one"}
