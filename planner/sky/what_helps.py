"""Where a target has little time: which single limit, which other place, which other months would give hours.

Each "what if" is a new count of hours on a coarse grid (every half hour of every fourth night), good to about 5 % or
2 hours, whichever is more. The Sun's keep-out is never offered: it protects the telescope.
"""

from __future__ import annotations

import calendar as months_calendar
import datetime as dt
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from planner.campaign.records import AnySite, ArraySite, CameraSetup, Campaign, SetupRef, Site, SpacecraftSite, Target
from planner.records import Floats, Windows
from planner.sky import intervals as iv
from planner.sky.calendar import calendar_of
from planner.sky.directions import StarField, moved_position
from planner.sky.limits import SkyGrid, template_match
from planner.sky.nights import noon_of
from planner.sky.spacecraft import sun_angle_windows
from planner.sky.stations import station_track
from planner.units import iso_of_mjd, mjd_of_date

LITTLE_HOURS_A_NIGHT = 1.0  # mean over the season, nights without any counted: below it hints are given; our choice
WORTH_HOURS = 5.0  # a hint must bring this much over the season, and half as much again; our choice
STEP_HOURS, NIGHT_STEP = 0.5, 4
TWILIGHT_DEG = -12.0  # red filters are used from nautical twilight on (common practice; no source)
LOWEST_OFFERED_DEG = 20.0  # airmass 2.9


@dataclass(frozen=True)
class Hint:
    """What would help one target with one setup, in one or two sentences."""

    target: str
    setup: str
    hours: float  # left in the season
    text: str


def what_would_help(campaign: Campaign, windows: Windows, profiles: Sequence[AnySite] = ()) -> tuple[Hint, ...]:
    """Say what would help every target with a setup that leaves it little time in the season.

    ``profiles``: places that may be offered besides the campaign's own. Nothing is said of pairs that the ledger
    does not hold, or that have time enough.
    """
    ledger = windows.ledger
    found = []
    for i, name in enumerate(ledger.targets):
        for j, setup in enumerate(ledger.setups):
            left = float(ledger.left_hours[i, j].sum())
            asked = left > 0.0 or ledger.lost_hours[i, j].any()
            if not asked or left >= LITTLE_HOURS_A_NIGHT * len(windows.nights):
                continue
            text = _text(campaign, campaign.target(name), campaign.setup(setup), left, profiles)
            found.append(Hint(name, setup, left, text))
    return tuple(found)


def _text(campaign: Campaign, target: Target, setup: SetupRef, left: float, profiles: Sequence[AnySite]) -> str:
    nights = len(campaign.nights)
    start = f"{left:.0f} h in the season ({left / nights:.1f} h a night)"
    if isinstance(setup.site, ArraySite):
        ideas = list(_array_ideas(target, setup))
    elif isinstance(setup.site, SpacecraftSite):
        ideas = list(_spacecraft_ideas(campaign, target, setup.site))
    else:
        ideas = list(_ground_ideas(campaign, target, setup, profiles))
    if not ideas:
        return f"{start}. No single limit, no known place and no other month gives much more."
    return f"{start}: {'; '.join(ideas)}."


# ------------------------------------------------------------------ telescopes on the ground


@dataclass(frozen=True)
class _Question:
    """Hours of one target on a coarse grid of evenings; ``scale``: nights that one evening of the grid stands for."""

    target: Target
    evenings: tuple[dt.date, ...]
    scale: float

    def hours(self, setup: SetupRef, *, closed: bool = True) -> Floats:
        """Hours by evening (E,), the calendar counted if ``closed``."""
        site = setup.site
        assert isinstance(site, Site)
        assert setup.camera is not None
        noons = np.array([noon_of(day, site.longitude_deg, site.time_zone) for day in self.evenings])
        grid = (noons[:, None] + (np.arange(0.5, 24.0 / STEP_HOURS) * STEP_HOURS / 24.0)[None, :]).ravel()
        p = self.target.position
        middle = float(grid.mean())
        ra, dec = moved_position(p.ra_deg, p.dec_deg, p.pm_ra_mas_yr, p.pm_dec_mas_yr, p.epoch, middle)
        star = np.array([ra]), np.array([dec])
        match = template_match(setup, [self.target], *star, middle)
        ok = _all_hold(SkyGrid(site, grid, *star).limits(setup.camera, slice(0, 1), match))
        if closed:
            calendar = calendar_of(setup, self.evenings)
            ok &= ~calendar.is_busy(grid) & np.repeat(calendar.open, grid.size // noons.size)
        return ok.reshape(noons.size, -1).sum(axis=1) * STEP_HOURS

    def total(self, setup: SetupRef, *, closed: bool = True) -> float:
        """Hours of the season."""
        return float(self.hours(setup, closed=closed).sum() * self.scale)


def _all_hold(limits: Sequence[iv.Limit]) -> np.ndarray:
    ok = np.ones(limits[0].values.shape[-1], dtype=bool)
    for item in limits:
        ok &= item.values[0] > 0.0
    return ok


def _ground_ideas(campaign: Campaign, target: Target, setup: SetupRef, profiles: Sequence[AnySite]) -> Iterator[str]:
    evenings = campaign.nights[::NIGHT_STEP]
    question = _Question(target, evenings, len(campaign.nights) / len(evenings))
    now = question.total(setup)
    enough = max(now + WORTH_HOURS, 1.5 * now)
    gains = [(question.total(replace(setup, camera=camera)), words) for words, camera in _relaxed(setup.camera)]
    gains.append((question.total(setup, closed=False), "the nights on which the telescope is closed to it"))
    for hours, words in sorted(gains, reverse=True)[:2]:
        if hours >= enough:
            yield f"{words} would give {hours:.0f} h"
    places = [
        (question.total(_at(setup, site), closed=False), site.name)
        for site in _others(setup, [*campaign.sites.values(), *profiles])
    ]
    best = max(places, default=(0.0, ""))
    if best[0] >= enough:
        yield f"the same camera at {best[1]} would have {best[0]:.0f} h"
    yield from _better_months(campaign, target, setup, now)


def _relaxed(camera: CameraSetup | None) -> Iterator[tuple[str, CameraSetup]]:
    """One limit at a time, made milder or left out."""
    assert camera is not None
    if camera.sun_limit_deg < TWILIGHT_DEG:
        fields = {"sun_below_deg": TWILIGHT_DEG, "sun_below_by_filter_deg": {}}
        yield f"sun_below_deg {TWILIGHT_DEG:g} instead of {camera.sun_limit_deg:g}", camera.model_copy(update=fields)
    if camera.lowest_altitude_deg > LOWEST_OFFERED_DEG:
        words = f"lowest_altitude_deg {LOWEST_OFFERED_DEG:g} instead of {camera.lowest_altitude_deg:g}"
        yield words, camera.model_copy(update={"lowest_altitude_deg": LOWEST_OFFERED_DEG})
    if camera.moon_no_closer_deg > 10.0:
        half = camera.moon_no_closer_deg / 2
        words = f"moon_no_closer_deg {half:g} instead of {camera.moon_no_closer_deg:g}"
        yield words, camera.model_copy(update={"moon_no_closer_deg": half})
    for name in (
        "largest_airmass", "airmass", "zenith_blind_deg", "hour_angle_deg", "declination_deg", "parallactic_deg",
        "moon_below_deg", "moon_at_most_lit", "match_template",
    ):  # fmt: skip
        if getattr(camera, name) is not None:
            yield f"{name} left out", camera.model_copy(update={name: None})


def _at(setup: SetupRef, site: Site) -> SetupRef:
    """The same camera at another place, free every night, without its template."""
    assert setup.camera is not None
    camera = setup.camera.model_copy(update={"match_template": None})
    return replace(setup, site=site, camera=camera, shutdowns=(), busy=(), mounted=None)


def _others(setup: SetupRef, sites: Sequence[AnySite]) -> list[Site]:
    """Places on the ground other than the setup's own, each once."""
    names = {setup.site.name}
    found = []
    for site in sites:
        if isinstance(site, Site) and site.name not in names:
            names.add(site.name)
            found.append(site)
    return found


def _better_months(campaign: Campaign, target: Target, setup: SetupRef, now: float) -> Iterator[str]:
    """Months of the year from the season's start in which the site gives at least twice the season's hours a night."""
    first = campaign.nights[0]
    evenings = tuple(first + dt.timedelta(days=7 * k) for k in range(52))
    by_night = _Question(target, evenings, 7.0).hours(setup, closed=False)
    month = np.array([day.month for day in evenings])
    mean = np.array([by_night[month == m].mean() for m in range(1, 13)])
    least = max(LITTLE_HOURS_A_NIGHT, 2.0 * now / len(campaign.nights), 0.5 * mean.max())
    good = [m for m in range(1, 13) if mean[m - 1] >= least]
    if good:
        yield f"its best months there are {_month_words(good)} (up to {mean.max():.1f} h a night)"
    elif mean.max() < LITTLE_HOURS_A_NIGHT:
        assert isinstance(setup.site, Site)
        highest = 90.0 - abs(setup.site.latitude_deg - target.position.dec_deg)
        low = setup.camera.lowest_altitude_deg if setup.camera else 0.0
        if highest < 0.0:
            yield "there it never rises"
        elif highest < low + 5.0:
            yield f"there it stands at most {highest:.0f} deg high, in any month"
        else:
            yield "no month gives it an hour a night there"


def _month_words(numbers: Sequence[int]) -> str:
    """Runs of months, over the turn of the year as well: "November to January, May"."""
    runs: list[list[int]] = []
    for m in numbers:
        if runs and m == runs[-1][-1] + 1:
            runs[-1].append(m)
        else:
            runs.append([m])
    if len(runs) > 1 and runs[0][0] == 1 and runs[-1][-1] == 12:
        runs[0] = runs.pop() + runs[0]
    names = months_calendar.month_name
    if len(numbers) == 12:
        return "all twelve"
    return ", ".join(f"{names[r[0]]} to {names[r[-1]]}" if len(r) > 1 else names[r[0]] for r in runs)


# ------------------------------------------------------------------ arrays and spacecraft


def _array_ideas(target: Target, setup: SetupRef) -> Iterator[str]:
    """Fewer stations; or say that the Sun is in the way."""
    site, receiver = setup.site, setup.receiver_name
    assert isinstance(site, ArraySite)
    assert receiver is not None
    track = station_track(site, receiver, target.position.dec_deg)
    if track.stretch_hours <= 0.0:
        yield f"at most {int(track.n_up.max())} of the {site.least_stations} stations wanted see it together"
    for least in range(site.least_stations - 1, 1, -1):
        fewer = station_track(site.model_copy(update={"least_stations": least}), receiver, target.position.dec_deg)
        if fewer.stretch_hours >= max(1.0, 1.5 * track.stretch_hours):
            yield f"least_stations {least} would give {fewer.stretch_hours:.1f} h a day"
            return


def _spacecraft_ideas(campaign: Campaign, target: Target, site: SpacecraftSite) -> Iterator[str]:
    """When the angle to the Sun allows it, over a year."""
    start = mjd_of_date(campaign.nights[0])
    p = target.position
    field = StarField(p.ra_deg, p.dec_deg, np.arange(start, start + 370.0))
    first, last = sun_angle_windows(field, 0, start, start + 366.0, site.sun_angle_deg)
    spans = [f"{iso_of_mjd(a)[:10]} to {iso_of_mjd(b)[:10]}" for a, b in zip(first, last, strict=True)]
    if spans:
        yield (
            f"its angle to the Sun is inside {site.sun_angle_deg[0]:g} to {site.sun_angle_deg[1]:g} deg "
            + " and ".join(spans)
        )
    else:
        yield "its angle to the Sun is never inside the limits"
