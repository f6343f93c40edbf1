"""Windows of a spacecraft: stretches in which the angle to the Sun is inside its limits.

The angle is that between the directions from the Earth's centre (a spacecraft at the Sun-Earth L2 point sees up to
0.3 deg otherwise). A night is a UTC date, and every window lies inside one.
"""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from planner.campaign.records import SpacecraftSite
from planner.records import Floats, Ints, lock
from planner.sky.directions import StarField
from planner.sky.sun_moon import crossings, separation_deg, vectors_km
from planner.units import mjd_of_date

SEARCH_DAYS = 0.5  # the angle changes by up to 1 deg a day; extrema between samples are looked at


@dataclass(frozen=True)
class SpacecraftRows:
    """Windows of one target (W rows) and its ledger by UTC date."""

    night: Ints
    start_mjd: Floats
    end_mjd: Floats
    middle_mjd: Floats
    sun_separation_deg: Floats
    lost_hours: Floats  # (dates,) to the Sun's angle
    left_hours: Floats  # (dates,)

    def __post_init__(self) -> None:
        lock(self)


def sun_angle_windows(
    field: StarField, star: int, first_mjd: float, last_mjd: float, sun_angle_deg: tuple[float, float]
) -> tuple[Floats, Floats]:
    """Stretches (start, end) MJD UTC in which star number ``star`` keeps its angle to the Sun; edges good to 1 s.

    At most two a year for one range: the target is inside it on either side of the Sun; one where they run together
    past the largest angle, or the whole year near the pole of the ecliptic; none where the range is never reached.
    ``field`` must cover the times.
    """
    low, high = np.cos(np.radians(sun_angle_deg))  # cosines: low > high

    def cosine(t: Floats) -> Floats:
        sun = vectors_km("sun", t)
        return (field.pairs(np.full(t.size, star), t) * sun).sum(axis=1) / np.linalg.norm(sun, axis=1)

    def edge_times(limit: float) -> Floats:
        return crossings(lambda t: cosine(t) - limit, first_mjd, last_mjd, SEARCH_DAYS)[0]

    edges = [edge_times(float(low)), edge_times(float(high))]
    cuts = np.unique(np.concatenate([[first_mjd], *edges, [last_mjd]]))
    inside = cosine(0.5 * (cuts[1:] + cuts[:-1]))
    ok = (inside <= low) & (inside >= high)
    # neighbours that both hold meet at a touch of the limit: one stretch
    edge = np.diff(ok.astype(np.int8), prepend=0, append=0)
    return cuts[:-1][edge[:-1] == 1], cuts[1:][edge[1:] == -1]


def spacecraft_rows(dates: Sequence[dt.date], field: StarField, star: int, site: SpacecraftSite) -> SpacecraftRows:
    """Windows of star number ``star`` of a field for consecutive UTC dates; ``field`` covers each and the day after."""
    days = np.array([mjd_of_date(day) for day in dates], dtype=float)
    start, end = sun_angle_windows(field, star, float(days[0]), float(days[-1]) + 1.0, site.sun_angle_deg)
    a = np.maximum(start[None, :], days[:, None])
    b = np.minimum(end[None, :], days[:, None] + 1.0)
    night, piece = np.nonzero(b - a > 1.0 / 86_400.0)  # a second: the accuracy of the edges
    left = 24.0 * np.clip(b - a, 0.0, None).sum(axis=1)
    starts, ends = a[night, piece], b[night, piece]
    middle = 0.5 * (starts + ends)
    sun = vectors_km("sun", middle)
    apart = separation_deg(field.pairs(np.full(middle.size, star), middle), sun)
    return SpacecraftRows(night.astype(np.int64), starts, ends, middle, apart, 24.0 - left, left)
