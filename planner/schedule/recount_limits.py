"""Whether the looks of a plan keep the limits of the sky: altitude, horizon, Sun, Moon, stations together."""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Callable, Iterable, Mapping, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from planner.campaign.records import ArraySite, Site, SpacecraftSite
from planner.errors import PlanningError
from planner.schedule.recount_arrays import inside_mount
from planner.schedule.recount_further import further_limits
from planner.schedule.recount_rows import ANGLE_DEG, LIT, SECONDS, STEP_MIN, Row, Tally
from planner.schedule.recount_sky import Sight, directions, look_over, moon_lit, sun_distance
from planner.units import iso_of_mjd, mjd_of_date

if TYPE_CHECKING:
    from planner.records import Track

Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]


def _moments(row: Row) -> Floats:
    """Start, middle, end and enough between them (an odd number)."""
    return np.linspace(row.start, row.end, 2 * max(1, math.ceil(row.minutes / 2.0 / STEP_MIN)) + 1)


def _by_site(rows: Sequence[Row], kind: type[Site] | type[ArraySite] | type[SpacecraftSite]) -> Iterable[list[Row]]:
    groups: dict[str, list[Row]] = defaultdict(list)
    for row in rows:
        if isinstance(row.setup.site, kind):
            part = row.setup.name.partition("@")[2]  # a subarray has stations of its own
            groups[f"{row.setup.site_slug}@{part}"].append(row)
    return groups.values()


def horizon_deg(horizon: Sequence[tuple[float, float]], azimuth_deg: Floats) -> Floats:
    """Altitude of a horizon of (azimuth, altitude) points, straight between them and all round; (T,)."""
    if not horizon:
        return np.full(np.shape(azimuth_deg), -90.0)
    azimuth, altitude = np.array(horizon, dtype=float).T
    return np.interp(azimuth_deg, azimuth, altitude, period=360.0)


def cameras(rows: Sequence[Row], tally: Tally) -> None:
    """Altitude, horizon, Sun, Moon of every camera look; fills in the sky classes."""
    lowest: list[tuple[float, str]] = []
    moon: list[tuple[float, str]] = []
    sun: list[tuple[float, str]] = []
    for group in _by_site(rows, Site):
        site = group[0].setup.site
        assert isinstance(site, Site)  # _by_site sorts by it
        moments = [_moments(row) for row in group]
        sight = look_over(
            [row.target.position for row, part in zip(group, moments, strict=True) for _ in part],
            np.concatenate(moments),
            site.longitude_deg,
            site.latitude_deg,
            site.height_m,
        )
        ends = np.cumsum([part.size for part in moments])
        for row, mjd, end in zip(group, moments, ends, strict=True):
            part = slice(end - mjd.size, end)
            _camera_limits(row, site, mjd, sight, part, tally)
            tally.sky[id(row)] = _sky_class(row, site, sight, part)
            lowest.append((float(sight.altitude[part].min()), str(row)))
            moon.append((float(sight.moon_separation[part].min()), str(row)))
            sun.append((float(sight.sun_altitude[part].max()), str(row)))
    if lowest:
        tally.checks.append("lowest altitude of a camera look: {:.2f} deg, {}".format(*min(lowest)))
        tally.checks.append("highest Sun during a camera look: {:.2f} deg, {}".format(*max(sun)))
        tally.checks.append("closest Moon to a camera look: {:.2f} deg, {}".format(*min(moon)))


def _camera_limits(row: Row, site: Site, mjd: Floats, sight: Sight, part: slice, tally: Tally) -> None:
    camera = row.setup.camera
    if camera is None:
        raise PlanningError(f"setup {row.setup.name} of an optical site has no camera")
    floor = horizon_deg(site.horizon, sight.azimuth[part])
    say = _teller(row, mjd, tally)
    say("altitude", sight.altitude[part], camera.lowest_altitude_deg, +1, "lowest altitude")
    say("altitude", sight.altitude[part], floor, +1, "the horizon there")
    say("Sun altitude", sight.sun_altitude[part], camera.sun_limit_deg, -1, "highest Sun")
    say("Sun distance", sight.sun_separation[part], camera.sun_no_closer_deg, +1, "Sun keep-out")
    say("Moon distance", sight.moon_separation[part], camera.moon_no_closer_deg, +1, "closest Moon")
    further_limits(row, site, mjd, sight, part, say, tally)


def _teller(row: Row, mjd: Floats, tally: Tally) -> Callable[..., None]:
    """Return a function that adds a breach with the worst moment, if a value passes its limit (deg)."""

    def say(what: str, values: Floats, limit: Any, sign: int, name: str) -> None:
        margin = sign * (values - np.asarray(limit, dtype=float))
        worst = int(np.argmin(margin))
        if margin[worst] < -ANGLE_DEG:
            bound = float(np.broadcast_to(limit, values.shape)[worst])
            tally.breaches.append(
                f"{row}: {what} {values[worst]:.2f} deg at {iso_of_mjd(mjd[worst])}, {name} is {bound:.2f} deg"
            )

    return say


def _sky_class(row: Row, site: Site, sight: Sight, part: slice) -> str:
    """Darkest class that the Moon allows within tolerance; it counts while it is above the horizon.

    By night: what is lit at local mean midnight counts, wherever the Moon stands.
    """
    if site.sky_classes.by == "night":
        east = math.remainder(site.longitude_deg, 360.0) / 360.0
        midnight = mjd_of_date(row.night) + 1.0 - east
        around = midnight + np.array([-1.0, 0.0, 1.0])  # the night may be named after either date at its middle
        lit = float(moon_lit(around[[int(np.argmin(np.abs(around - row.middle)))]])[0]) - LIT
        return _class_of(lit, site)
    up = sight.moon_altitude[part] > ANGLE_DEG
    if not up.any():
        return "dark"
    return _class_of(float(sight.moon_lit[part][up].max()) - LIT, site)


def _class_of(lit: float, site: Site) -> str:
    if lit < site.sky_classes.dark_below:
        return "dark"
    return "grey" if lit < site.sky_classes.grey_below else "bright"


def arrays(rows: Sequence[Row], tally: Tally, tracks: Mapping[tuple[str, str], Track]) -> None:
    """Enough stations at every moment, and the Sun, for array looks."""
    fewest: list[tuple[int, str]] = []
    for group in _by_site(rows, ArraySite):
        array = group[0].setup.site
        assert isinstance(array, ArraySite)  # _by_site sorts by it
        moments = [_moments(row) for row in group]
        positions = [row.target.position for row, part in zip(group, moments, strict=True) for _ in part]
        mjd = np.concatenate(moments)
        seen, sun = _stations_up(array, positions, mjd), sun_distance(positions, mjd)
        ends = np.cumsum([part.size for part in moments])
        for row, when, end in zip(group, moments, ends, strict=True):
            part = slice(end - when.size, end)
            fewest.append((_array_limits(row, array, when, seen[:, part], sun[part], tally), str(row)))
            track = tracks.get((row.target.name, row.setup.name))
            if track is not None and row.minutes > track.hours_up * 60.0 + SECONDS / 60.0:
                tally.breaches.append(
                    f"{row}: lasts {row.minutes / 60:.2f} h, enough stations are up for {track.hours_up:.2f} h"
                )
    if fewest:
        tally.checks.append("fewest stations up during an array look: {}, {}".format(*min(fewest)))


def spacecraft(rows: Sequence[Row], tally: Tally) -> None:
    """The angle to the Sun of every look with a spacecraft; its sky is dark."""
    widest: list[tuple[float, float]] = []
    for group in _by_site(rows, SpacecraftSite):
        for row in group:
            site = row.setup.site
            assert isinstance(site, SpacecraftSite)  # _by_site sorts by it
            mjd = _moments(row)
            angle = sun_distance([row.target.position] * mjd.size, mjd)
            say = _teller(row, mjd, tally)
            say("Sun angle", angle, site.sun_angle_deg[0], +1, "smallest allowed")
            say("Sun angle", angle, site.sun_angle_deg[1], -1, "largest allowed")
            tally.sky[id(row)] = "dark"
            widest.append((float(angle.min()), float(angle.max())))
    if widest:
        low, high = min(a for a, _ in widest), max(b for _, b in widest)
        tally.checks.append(f"Sun angle of spacecraft looks: {low:.2f} to {high:.2f} deg")


def _stations_up(array: ArraySite, positions: Sequence[Any], mjd: Floats) -> Bools:
    """Whether each station sees the target, (S, T)."""
    seen = np.zeros((len(array.stations), mjd.size), dtype=bool)
    for i, station in enumerate(array.stations):
        altitude, azimuth = directions(positions, mjd, station.longitude_deg, station.latitude_deg, station.height_m)
        lowest = np.maximum(station.lowest_elevation_deg, horizon_deg(station.horizon, azimuth))
        seen[i] = (altitude >= lowest - ANGLE_DEG) & inside_mount(station, positions, mjd)
    return seen


def _array_limits(
    row: Row,
    array: ArraySite,
    mjd: Floats,
    seen: Bools,
    sun: Floats,
    tally: Tally,
) -> int:
    """Check one array look and return the fewest stations (with the receiver) that see it."""
    receiver, name = row.setup.receiver, row.setup.receiver_name
    if receiver is None or name is None:
        raise PlanningError(f"setup {row.setup.name} of an array has no receiver")
    has = np.array([name in station.sefd_jy for station in array.stations])
    count = (seen & has[:, None]).sum(axis=0)
    worst = int(np.argmin(count))
    if count[worst] < array.least_stations:
        tally.breaches.append(
            f"{row}: {count[worst]} stations with receiver {name} see the target at "
            f"{iso_of_mjd(mjd[worst])}, least_stations is {array.least_stations}"
        )
    _teller(row, mjd, tally)("Sun distance", sun, receiver.sun_no_closer_deg, +1, "closest Sun")
    return int(count[worst])
