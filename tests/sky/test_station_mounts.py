"""Stations whose mounts turn through part of the sky only, and arrays that observe on stated dates."""

from __future__ import annotations

import datetime as dt
from types import SimpleNamespace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.campaign.records import Station
from planner.records import LIMITS
from planner.sky import stations
from planner.sky.windows import find_windows

PLACE = {"station": "A", "longitude_deg": -110.0, "latitude_deg": 34.0, "height_m": 0, "sefd_jy": {"q": 1.0}}
GHA = np.arange(0.0, 24.0, 0.01)


def up(dec: float, **change: object) -> np.ndarray:
    return stations.station_up(Station.model_validate(PLACE | {"lowest_elevation_deg": 0.0} | change), dec, GHA)


@settings(max_examples=30, deadline=None)
@given(st.floats(-180.0, 170.0), st.floats(1.0, 180.0), st.floats(60.0, 89.0))
def test_a_circumpolar_target_is_up_for_exactly_the_mounts_range(low: float, width: float, dec: float) -> None:
    seen = up(dec, hour_angle_deg=[low, low + width])
    hour_angle = (15.0 * GHA - 110.0) % 360.0
    inside = np.zeros(GHA.size, dtype=bool)
    for turn in (-720.0, -360.0, 0.0, 360.0):  # plain twin: some whole number of turns brings it into the range
        inside |= (hour_angle + turn >= low) & (hour_angle + turn <= low + width)
    assert np.count_nonzero(seen != inside) <= 2  # edges of the range, to round-off
    assert seen.sum() * 0.01 == pytest.approx(width / 15.0, abs=0.02)


def test_hour_angles_and_elevation_bind_together() -> None:
    # up for 2 x 5.2857 h at dec 2.05 above 10 deg (closed form at latitude 34.3010); west only: half of it
    whole = up(2.05, lowest_elevation_deg=10.0, latitude_deg=34.3010)
    west = up(2.05, lowest_elevation_deg=10.0, latitude_deg=34.3010, hour_angle_deg=[0, 180])
    assert whole.sum() * 0.01 == pytest.approx(2 * 5.2857, abs=0.02)
    assert west.sum() * 0.01 == pytest.approx(5.2857, abs=0.02)
    assert not np.any(west & ~whole)


@pytest.mark.parametrize("wrong", [[30, 30], [40, 10], [-400, 0]])
def test_a_range_runs_from_low_to_high(wrong: list[float]) -> None:
    with pytest.raises(ValueError, match=r"got \[.*\], needs \[from, to\] with from below to, -360 to 360 deg"):
        Station.model_validate(PLACE | {"hour_angle_deg": wrong})


def test_sessions_leave_their_dates_and_no_other(invented: SimpleNamespace) -> None:
    receiver = {"ghz": 43.0, "bandwidth_mhz": 256, "look_hours": 4.0, "sun_no_closer_deg": 0}
    free = invented.array(receivers={"q": receiver})
    days = ["2027-03-02", "2027-03-05", "2027-05-01"]  # the last one lies outside the season
    bound = invented.array(receivers={"q": receiver | {"sessions": days}})
    found = {}
    for name, site in (("free", free), ("bound", bound)):
        campaign = invented.campaign(
            {"dishes": site}, [invented.target("A", 150.0, 20.0)], "2027-03-01", "2027-03-10", (("dishes/q", "all"),)
        )
        found[name] = find_windows(campaign)
    free_nights = [found["free"].nights[n] for n in found["free"].night]
    bound_nights = [found["bound"].nights[n] for n in found["bound"].night]
    assert free_nights == [(dt.date(2027, 3, 1) + dt.timedelta(days=i)).isoformat() for i in range(10)]
    assert bound_nights == days[:2]
    ledger = found["bound"].ledger
    assert ledger.lost_hours[0, 0, 0, LIMITS.index("not mounted")] == pytest.approx(8 * 24.0)
    assert ledger.lost_hours.sum() + ledger.left_hours.sum() == pytest.approx(240.0)
    rows = found["free"].night[np.isin(found["free"].night, [1, 4])]
    assert found["bound"].start_mjd == pytest.approx(found["free"].start_mjd[rows], abs=1e-9)


def test_an_array_that_never_sees_the_target_still_counts_its_missing_sessions(invented: SimpleNamespace) -> None:
    receiver = {"ghz": 43.0, "bandwidth_mhz": 256, "look_hours": 4.0, "sessions": ["2027-03-02"]}
    campaign = invented.campaign(
        {"dishes": invented.array(receivers={"q": receiver})}, [invented.target("A", 150.0, -85.0)], "2027-03-01",
        "2027-03-10", (("dishes/q", "all"),),
    )  # fmt: skip
    ledger = find_windows(campaign).ledger
    assert ledger.lost_hours[0, 0, 0, LIMITS.index("not mounted")] == pytest.approx(9 * 24.0)
    assert ledger.lost_hours[0, 0, 0, LIMITS.index("altitude")] == pytest.approx(24.0)
