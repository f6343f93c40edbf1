"""Which nights, and which times of them, a telescope has for a setup."""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from planner.campaign.records import SetupRef
from planner.records import Bools, Floats, Ints, lock
from planner.sky.intervals import split
from planner.units import mjd_of_iso


@dataclass(frozen=True)
class Calendar:
    """A setup's calendar over T nights."""

    shut: Bools  # (T,)
    unmounted: Bools  # (T,)
    busy: Bools  # (T,) the whole night belongs to others
    busy_from_mjd: Floats  # (B,) stretches that belong to others, in order, apart from each other
    busy_to_mjd: Floats

    def __post_init__(self) -> None:
        lock(self)

    @property
    def open(self) -> Bools:
        """Nights that are not lost as a whole, (T,)."""
        return ~(self.shut | self.unmounted | self.busy)

    def is_busy(self, mjd: Floats) -> Bools:
        """Whether moments lie in a stretch that belongs to others; same shape."""
        if self.busy_from_mjd.size == 0:
            return np.zeros(mjd.shape, dtype=bool)
        at = np.searchsorted(self.busy_from_mjd, mjd, side="right") - 1
        return (at >= 0) & (mjd < self.busy_to_mjd[np.maximum(at, 0)])

    def free(self, row: Ints, start: Floats, end: Floats) -> tuple[Ints, Floats, Floats]:
        """Intervals (E,) without the stretches that belong to others."""
        cuts = np.unique(np.concatenate([self.busy_from_mjd, self.busy_to_mjd]))
        row, start, end = split(row, start, end, cuts)
        keep = ~self.is_busy(0.5 * (start + end))
        return row[keep], start[keep], end[keep]


def calendar_of(setup: SetupRef, evenings: Sequence[dt.date]) -> Calendar:
    """Calendar of a setup for consecutive evening dates."""

    def inside(spans: Sequence[tuple[dt.date, dt.date]]) -> Bools:
        return np.array([any(a <= day <= b for a, b in spans) for day in evenings], dtype=bool)

    shut = inside([(s.first, s.last) for s in setup.shutdowns])
    on = None if setup.mounted is None else inside([(m.first, m.last) for m in setup.mounted])
    nights = [(b.first, b.last) for b in setup.busy if b.first is not None and b.last is not None]
    times = [
        (mjd_of_iso(b.start_utc.isoformat()), mjd_of_iso(b.end_utc.isoformat()))
        for b in setup.busy
        if b.start_utc is not None and b.end_utc is not None
    ]
    start, end = _joined(sorted(times))
    return Calendar(shut, np.zeros_like(shut) if on is None else ~on, inside(nights), start, end)


def _joined(times: Sequence[tuple[float, float]]) -> tuple[Floats, Floats]:
    """Stretches in order, those that touch joined."""
    found: list[list[float]] = []
    for a, b in times:
        if found and a <= found[-1][1]:
            found[-1][1] = max(found[-1][1], b)
        else:
            found.append([a, b])
    starts, ends = np.array(found, dtype=float).reshape(-1, 2).T
    return starts.copy(), ends.copy()
