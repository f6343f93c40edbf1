"""What arrays alone must keep: their sessions, the mounts of their stations, and one job a station at a time."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from planner.campaign.records import ArraySite, Station
from planner.schedule.recount_rows import ANGLE_DEG, SECONDS, Row, Tally
from planner.schedule.recount_sky import hour_angle_and_declination
from planner.units import DAY_S, iso_of_mjd

Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]


def sessions(rows: Sequence[Row], tally: Tally) -> None:
    """A receiver with sessions observes on their dates only."""
    bound = [row for row in rows if row.setup.receiver is not None and row.setup.receiver.sessions is not None]
    for row in bound:
        assert row.setup.receiver is not None
        dates = row.setup.receiver.sessions or ()
        if row.night not in dates:
            near = min(dates, key=lambda day: abs((day - row.night).days), default=None)
            hint = f"; the nearest session is on {near}" if near else "; it has no session at all"
            tally.breaches.append(f"{row}: {row.setup.name} has no session on {row.night}{hint}")
    if bound:
        tally.checks.append(f"looks bound to sessions: {len(bound)}")


def inside_mount(station: Station, positions: Sequence[Any], mjd: Floats) -> Bools:
    """True while a target is within the hour angles of a station's mount, (T,)."""
    if station.hour_angle_deg is None:
        return np.ones(mjd.size, dtype=bool)
    angle, _ = hour_angle_and_declination(positions, mjd, station.longitude_deg, station.latitude_deg, station.height_m)
    low, high = station.hour_angle_deg
    return np.asarray((angle - low + ANGLE_DEG) % 360.0 <= high - low + 2.0 * ANGLE_DEG)


def shared_stations(rows: Sequence[Row], tally: Tally) -> None:
    """No station is in two looks at once, whatever subarrays they belong to."""
    arrays: dict[str, list[Row]] = {}
    for row in rows:
        if isinstance(row.setup.site, ArraySite) and "@" in row.setup.name:
            arrays.setdefault(row.setup.site_slug, [])
    for row in rows:
        if row.setup.site_slug in arrays:
            arrays[row.setup.site_slug].append(row)
    for slug, looks in sorted(arrays.items()):
        looks.sort(key=lambda r: (r.start, r.end))
        for i, early in enumerate(looks):
            for late in looks[i + 1 :]:
                if (early.end - late.start) * DAY_S <= SECONDS:
                    break
                both = sorted(_stations(early) & _stations(late))
                if both and early.setup.telescope != late.setup.telescope:  # else it is an overlap already told
                    tally.breaches.append(
                        f"{late} starts {iso_of_mjd(late.start)}, but {early} keeps {', '.join(both)} until "
                        f"{iso_of_mjd(early.end)}"
                    )
        tally.checks.append(f"{slug}: looks of its subarrays checked for shared stations: {len(looks)}")


def _stations(row: Row) -> set[str]:
    """Stations that a look holds: all of its (sub)array, also those without the receiver."""
    assert isinstance(row.setup.site, ArraySite)
    return {station.station for station in row.setup.site.stations}
