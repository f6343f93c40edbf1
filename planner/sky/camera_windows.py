"""Windows of the optical setups of one site: intervals, their columns, and the ledger of lost hours."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from planner.campaign.records import CameraSetup, SetupRef, Shutdown, Site
from planner.errors import InputError
from planner.records import Bools, Floats, Ints, lock
from planner.sky import intervals as iv
from planner.sky.airmass import kasten_young, refraction_arcmin
from planner.sky.clock import ROTATIONS_PER_UT1_DAY, earth_rotation_angle
from planner.sky.directions import SiteFrame, StarField, site_frame
from planner.sky.horizon import horizon_deg
from planner.sky.moonlight import sky_mag_arcsec2
from planner.sky.nights import noon_of
from planner.sky.sun_moon import (
    Topocentric,
    moon_crossings,
    moon_illumination,
    moon_phase_angle_deg,
    seen_from,
    separation_deg,
)
from planner.units import DAY_S

STEP_MINUTES = 5
CELLS_A_NIGHT = 24 * 60 // STEP_MINUTES
STEP_DAYS = 1.0 / CELLS_A_NIGHT
CHUNK_CELLS = 2_000_000  # targets x times held at once: 16 MB an array
SHORTEST_S = 1.0  # pieces shorter than the accuracy of the edges are dropped
LIMIT_ORDER = ("daylight and twilight", "shutdown", "altitude", "Sun keep-out", "Moon")


@dataclass(frozen=True)
class Rows:
    """Windows of one setup: W rows; times MJD UTC; see ``planner.records.Windows`` for the columns."""

    target: Ints  # index into the positions given
    night: Ints
    start_mjd: Floats
    end_mjd: Floats
    best_mjd: Floats
    airmass: Floats
    moon_separation_deg: Floats
    moon_altitude_deg: Floats
    moon_illumination: Floats
    sun_separation_deg: Floats
    sky_class: Ints
    sky_mag_arcsec2: Floats

    def __post_init__(self) -> None:
        lock(self)


@dataclass(frozen=True)
class SetupWindows:
    """Rows of one setup with its ledger by night."""

    rows: Rows
    lost_hours: Floats  # (targets, nights, limits), limits as in LIMIT_ORDER
    left_hours: Floats  # (targets, nights)

    def __post_init__(self) -> None:
        lock(self)


class SiteSky:
    """The sky of one site over consecutive nights, on a grid of 5 minutes from the first noon to the last."""

    def __init__(self, site: Site, evenings: Sequence[dt.date], ra_deg: Floats, dec_deg: Floats) -> None:
        """Prepare grid, Sun, Moon and star directions; positions are ICRS at the middle of the season."""
        self.site = site
        self.noons = np.array([noon_of(day, site.longitude_deg, site.time_zone) for day in evenings])
        if (np.abs(np.diff(self.noons) - 1.0) > 1e-6).any():
            raise InputError(
                f"the season's dates are not one after the other at {site.site}; its time zone jumps a date",
                field="season",
            )
        self.evenings = tuple(evenings)
        self.count = CELLS_A_NIGHT * len(evenings) + 1
        self.grid = self.noons[0] + np.arange(self.count) * STEP_DAYS
        self.frame = self._frame(self.grid)
        self.sun = seen_from("sun", self.grid, self.frame)
        self.moon = seen_from("moon", self.grid, self.frame)
        self.field = StarField(ra_deg, dec_deg, self.grid)
        place = (site.longitude_deg, site.latitude_deg, site.height_m)
        moon_times, _ = moon_crossings(float(self.grid[0]), float(self.grid[-1]), 0.0, *place)
        self.cuts = np.sort(np.concatenate([self.noons, moon_times]))

    def _frame(self, mjd: Floats) -> SiteFrame:
        return site_frame(mjd, self.site.longitude_deg, self.site.latitude_deg, self.site.height_m)

    def chunks(self, count: int) -> Iterator[slice]:
        """Slices of target rows small enough to hold."""
        step = max(1, CHUNK_CELLS // self.count)
        for i in range(0, count, step):
            yield slice(i, min(i + step, count))

    # -------------------------------------------------------------- limits

    def limits(self, camera: CameraSetup, rows: slice) -> list[iv.Limit]:
        """Limits of a setup in the order in which hours are charged (shutdowns, by night, come apart)."""
        up, east, north, sun, moon = self.field.project(
            self.grid, self.frame.zenith, self.frame.east, self.frame.north, self.sun.unit, self.moon.unit, rows=rows
        )
        night = float(np.sin(np.radians(camera.sun_below_deg)))
        sun_off, moon_off = (
            float(np.cos(np.radians(x))) for x in (camera.sun_no_closer_deg, camera.moon_no_closer_deg)
        )
        return [
            iv.limit("daylight and twilight", lambda s: night - s, self.sun.sin_altitude[None, :]),
            self._altitude_limit(camera.lowest_altitude_deg, up, east, north),
            iv.limit("Sun keep-out", lambda c: sun_off - c, sun),
            # the Moon's limit holds while it is down as well: a look must not depend on the minute of moonset
            iv.limit("Moon", lambda c: moon_off - c, moon),
        ]

    def _altitude_limit(self, lowest_deg: float, up: Floats, east: Floats, north: Floats) -> iv.Limit:
        low = float(np.sin(np.radians(lowest_deg)))
        points = self.site.horizon
        if not points or max(height for _, height in points) <= lowest_deg:
            return iv.limit("altitude", lambda s: s - low, up)

        def margin(s: Floats, e: Floats, n: Floats) -> Floats:
            skyline = horizon_deg(points, np.degrees(np.arctan2(e, n)))
            return s - np.maximum(low, np.sin(np.radians(skyline)))

        return iv.limit("altitude", margin, up, east, north)

    # -------------------------------------------------------------- one setup

    def windows(self, setup: SetupRef, which: Ints) -> SetupWindows:
        """Windows and ledger of a setup for the targets ``which`` (indices); others get no rows and no hours."""
        camera = setup.camera
        if camera is None:
            raise ValueError(f"{setup.name} is not a camera")
        shut = self._shut(setup.shutdowns)
        lost = np.zeros((len(self.field), len(self.evenings), len(LIMIT_ORDER)))
        left = np.zeros((len(self.field), len(self.evenings)))
        parts = []
        wanted = np.zeros(len(self.field), dtype=bool)
        wanted[which] = True
        for rows in self.chunks(len(self.field)):
            if not wanted[rows].any():
                continue
            limits = self.limits(camera, rows)
            row, start, end = self._intervals(limits, rows.stop - rows.start)
            keep = wanted[rows][row]
            parts.append((row[keep] + rows.start, start[keep], end[keep]))
            lost[rows], left[rows] = self._ledger(limits, shut, rows.stop - rows.start)
        lost[~wanted], left[~wanted] = 0.0, 0.0
        row, start, end = (np.concatenate(p) for p in zip(*parts, strict=True)) if parts else _nothing()
        night = np.floor(0.5 * (start + end) - self.noons[0]).astype(np.int64) if row.size else row
        keep = ~shut[night]
        return SetupWindows(
            self._columns(setup, row[keep].astype(np.int64), night[keep], start[keep], end[keep]), lost, left
        )

    def _shut(self, shutdowns: Sequence[Shutdown]) -> Bools:
        return np.array([any(s.first <= day <= s.last for s in shutdowns) for day in self.evenings], dtype=bool)

    def _intervals(self, limits: list[iv.Limit], rows: int) -> tuple[Ints, Floats, Floats]:
        """Intervals (row, start, end) in MJD, cut at noon, moonrise and moonset (Moon's centre at 0 deg)."""
        found = iv.allowed_intervals(limits, rows, self.count)
        altitude = next(item for item in limits if item.name == "altitude")
        others = [item for item in limits if item is not altitude]
        zero = np.zeros_like(altitude.values)
        found = iv.add_passes(found, iv.hidden_extrema(altitude.values, zero, passes=True), others)
        found = iv.remove_dips(found, iv.hidden_extrema(altitude.values, zero, passes=False))
        row, start, end = iv.split(
            found[0], self.grid[0] + found[1] * STEP_DAYS, self.grid[0] + found[2] * STEP_DAYS, self.cuts
        )
        keep = (end - start) * DAY_S >= SHORTEST_S
        return row[keep], start[keep], end[keep]

    def _ledger(self, limits: list[iv.Limit], shut: Bools, rows: int) -> tuple[Floats, Floats]:
        """Hours lost to each limit (rows, nights, limits) and left (rows, nights), by middles of 5-minute cells."""
        nights = len(self.evenings)
        by_name = {item.name: item for item in limits}
        still = np.ones((rows, nights, CELLS_A_NIGHT), dtype=bool)
        lost = np.empty((rows, nights, len(LIMIT_ORDER)))
        before = np.full((rows, nights), CELLS_A_NIGHT)
        for k, name in enumerate(LIMIT_ORDER):
            if name == "shutdown":
                still &= ~shut[None, :, None]
            else:
                ok = iv.midpoint_ok(by_name[name].values)
                still &= ok.reshape(ok.shape[0], nights, CELLS_A_NIGHT)
            after = np.count_nonzero(still, axis=2)
            lost[:, :, k] = (before - after) * (STEP_MINUTES / 60.0)
            before = after
        return lost, before * (STEP_MINUTES / 60.0)

    # -------------------------------------------------------------- columns

    def _columns(self, setup: SetupRef, row: Ints, night: Ints, start: Floats, end: Floats) -> Rows:
        best = self._highest(row, start, end)
        frame = self._frame(best)
        star = self.field.pairs(row, best)
        sun, moon = seen_from("sun", best, frame), seen_from("moon", best, frame)
        altitude = np.degrees(np.arcsin(np.clip((star.T * frame.zenith).sum(axis=0), -1.0, 1.0)))
        separation = separation_deg(star, moon.unit.T)
        lit = moon_illumination(best)
        return Rows(
            row,
            night,
            start,
            end,
            best,
            kasten_young(altitude + refraction_arcmin(altitude) / 60.0),
            separation,
            moon.altitude_deg,
            lit,
            separation_deg(star, sun.unit.T),
            self._sky_class(lit, start, end),
            self._sky_mag(setup, altitude, moon, separation, best),
        )

    def _highest(self, row: Ints, start: Floats, end: Floats) -> Floats:
        """Moment of highest altitude in each interval: the upper transit if it is inside, else the higher end."""
        lon = np.radians(self.site.longitude_deg)
        star = self.field.pairs(row, start)
        hour_angle = earth_rotation_angle(start) + lon - np.arctan2(star[:, 1], star[:, 0])
        transit = start + (-hour_angle % (2.0 * np.pi)) / (2.0 * np.pi * ROTATIONS_PER_UT1_DAY)
        heights = [(self.field.pairs(row, t).T * self._frame(t).zenith).sum(axis=0) for t in (start, end)]
        return np.where(transit <= end, transit, np.where(heights[1] > heights[0], end, start))

    def _sky_class(self, lit: Floats, start: Floats, end: Floats) -> Ints:
        """0 dark, 1 grey, 2 bright: by whether the Moon is up in the middle, and its illuminated fraction."""
        middle = 0.5 * (start + end)
        moon_up = seen_from("moon", middle, self._frame(middle)).sin_altitude > 0.0
        rule = self.site.sky_classes
        by_phase = np.where(lit < rule.dark_below, 0, np.where(lit < rule.grey_below, 1, 2))
        return np.where(moon_up, by_phase, 0).astype(np.int64)

    def _sky_mag(
        self, setup: SetupRef, altitude: Floats, moon: Topocentric, separation: Floats, best: Floats
    ) -> Floats:
        name = setup.camera.filter if setup.camera else "V"
        tables = {"sky_mag_arcsec2": self.site.sky_mag_arcsec2, "extinction_mag": self.site.extinction_mag}
        for table, values in tables.items():
            if name not in values:
                raise InputError(
                    f"no value for filter {name}, which {setup.name} uses; add it",
                    place=self.site.source.place(table),
                    field=table,
                    value=name,
                    allowed=", ".join(values) or "none are given",
                )
        extinction = self.site.extinction_mag[name]
        return sky_mag_arcsec2(
            name,
            self.site.sky_mag_arcsec2[name],
            extinction,
            self.site.extinction_mag.get("V", extinction),
            altitude,
            moon.altitude_deg,
            separation,
            moon_phase_angle_deg(best),
        )


def _nothing() -> tuple[Ints, Floats, Floats]:
    return np.zeros(0, dtype=np.int64), np.zeros(0), np.zeros(0)
