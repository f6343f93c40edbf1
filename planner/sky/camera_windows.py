"""Windows of the optical setups of one site: intervals, their columns, and the ledger of lost hours."""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from planner.campaign.records import SetupRef, Site
from planner.errors import InputError
from planner.records import LIMITS, Bools, Floats, Ints, lock
from planner.sky import intervals as iv
from planner.sky.airmass import kasten_young, refraction_arcmin
from planner.sky.calendar import Calendar, calendar_of
from planner.sky.clock import ROTATIONS_PER_UT1_DAY, earth_rotation_angle
from planner.sky.limits import DIP_LIMITS, STAR_LIMITS, Match, SkyGrid
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
SHORTEST_S = 1.0  # pieces shorter than the accuracy of the edges are dropped


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
    lost_hours: Floats  # (targets, nights, limits), limits as in LIMITS
    left_hours: Floats  # (targets, nights)

    def __post_init__(self) -> None:
        lock(self)


class SiteSky(SkyGrid):
    """The sky of one site over consecutive nights, on a grid of 5 minutes from the first noon to the last."""

    def __init__(self, site: Site, evenings: Sequence[dt.date], ra_deg: Floats, dec_deg: Floats) -> None:
        """Prepare grid, Sun, Moon and star directions; positions are ICRS at the middle of the season."""
        self.noons = np.array([noon_of(day, site.longitude_deg, site.time_zone) for day in evenings])
        if (np.abs(np.diff(self.noons) - 1.0) > 1e-6).any():
            raise InputError(
                f"the season's dates are not one after the other at {site.site}; its time zone jumps a date",
                field="season",
            )
        self.evenings = tuple(evenings)
        self.count = CELLS_A_NIGHT * len(evenings) + 1
        super().__init__(site, self.noons[0] + np.arange(self.count) * STEP_DAYS, ra_deg, dec_deg)
        moon_times, _ = moon_crossings(float(self.grid[0]), float(self.grid[-1]), 0.0, *self.place)
        self.cuts = np.sort(np.concatenate([self.noons, moon_times]))

    # -------------------------------------------------------------- one setup

    def windows(
        self, setup: SetupRef, which: Ints, *, match: Match | None = None, extra: Floats | None = None
    ) -> SetupWindows:
        """Windows and ledger of a setup for the targets ``which`` (indices); others get no rows and no hours.

        ``match``: bounds of the templates; ``extra``: (len(which), times of the grid) margin of further limits.
        """
        camera = setup.camera
        if camera is None:
            raise ValueError(f"{setup.name} is not a camera")
        calendar = calendar_of(setup, self.evenings)
        lost = np.zeros((len(self.field), len(self.evenings), len(LIMITS)))
        left = np.zeros((len(self.field), len(self.evenings)))
        parts = []
        wanted = np.zeros(len(self.field), dtype=bool)
        wanted[which] = True
        for rows in self.chunks(len(self.field)):
            if not wanted[rows].any():
                continue
            limits = self.limits(camera, rows, match, self._extra(extra, wanted, rows))
            row, start, end = self._intervals(limits, rows.stop - rows.start)
            keep = wanted[rows][row]
            parts.append((row[keep] + rows.start, start[keep], end[keep]))
            lost[rows], left[rows] = self._ledger(limits, calendar, rows.stop - rows.start)
        lost[~wanted], left[~wanted] = 0.0, 0.0
        row, start, end = (np.concatenate(p) for p in zip(*parts, strict=True)) if parts else _nothing()
        row, start, end = calendar.free(row, start, end)
        keep = (end - start) * DAY_S >= SHORTEST_S
        row, start, end = row[keep], start[keep], end[keep]
        night = np.floor(0.5 * (start + end) - self.noons[0]).astype(np.int64) if row.size else row
        keep = calendar.open[night]
        return SetupWindows(
            self._columns(setup, row[keep].astype(np.int64), night[keep], start[keep], end[keep]), lost, left
        )

    def _extra(self, extra: Floats | None, wanted: Bools, rows: slice) -> Floats | None:
        """Margin of further limits for a chunk of rows; 1 where a row is not asked for."""
        if extra is None:
            return None
        out = np.ones((rows.stop - rows.start, self.count))
        number = np.cumsum(wanted) - 1
        out[wanted[rows]] = extra[number[rows][wanted[rows]]]
        return out

    def _intervals(self, limits: list[iv.Limit], rows: int) -> tuple[Ints, Floats, Floats]:
        """Intervals (row, start, end) in MJD, cut at noon, moonrise and moonset (Moon's centre at 0 deg)."""
        found = iv.allowed_intervals(limits, rows, self.count)
        for item in limits:
            zero = np.zeros_like(item.values)
            if item.name in STAR_LIMITS:
                others = [other for other in limits if other is not item]
                found = iv.add_passes(found, iv.hidden_extrema(item.values, zero, passes=True), others)
            if item.name in DIP_LIMITS:
                found = iv.remove_dips(found, iv.hidden_extrema(item.values, zero, passes=False))
        return iv.split(found[0], self.grid[0] + found[1] * STEP_DAYS, self.grid[0] + found[2] * STEP_DAYS, self.cuts)

    def _ledger(self, limits: list[iv.Limit], calendar: Calendar, rows: int) -> tuple[Floats, Floats]:
        """Hours lost to each limit (rows, nights, limits) and left (rows, nights), by middles of 5-minute cells."""
        nights = len(self.evenings)
        by_name = {item.name: iv.midpoint_ok(item.values) for item in limits}
        taken = calendar.is_busy(self.grid[:-1] + 0.5 * STEP_DAYS).reshape(1, nights, CELLS_A_NIGHT)
        by_night = {
            "shutdown": ~calendar.shut[None, :, None],
            "not mounted": ~calendar.unmounted[None, :, None],
            "busy": ~(taken | calendar.busy[None, :, None]),
        }
        still = np.ones((rows, nights, CELLS_A_NIGHT), dtype=bool)
        lost = np.zeros((rows, nights, len(LIMITS)))
        before = np.full((rows, nights), CELLS_A_NIGHT)
        for k, name in enumerate(LIMITS):
            if name in by_night:
                still &= by_night[name]
            elif name in by_name:
                ok = by_name[name]
                still &= ok.reshape(ok.shape[0], nights, CELLS_A_NIGHT)
            else:
                continue
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
            self._sky_class(lit, night, start, end),
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

    def _sky_class(self, lit: Floats, night: Ints, start: Floats, end: Floats) -> Ints:
        """0 dark, 1 grey, 2 bright: by whether the Moon is up in the middle, and its illuminated fraction.

        By night: by the illuminated fraction at local mean midnight alone.
        """
        rule = self.site.sky_classes
        if rule.by == "night":
            lit = moon_illumination(self.noons[night] + 0.5)
            moon_up = np.ones(lit.shape, dtype=bool)
        else:
            middle = 0.5 * (start + end)
            moon_up = seen_from("moon", middle, self._frame(middle)).sin_altitude > 0.0
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
