"""When each target can be observed with each setup, and where the rest of the time went.

Optical setups: intervals in which the Sun is below the setup's limit, the telescope works, has the setup mounted and
is free, the target stands above the setup's lowest altitude and the site's horizon, Sun and Moon are far enough
away, and every further limit of the setup holds. Edges are good to about
1 s. An interval never spans noon, moonrise or moonset (Moon's centre at 0 degrees), so it has one sky class.
Altitudes are geometric (no refraction); the airmass uses the refracted one.

The ledger charges every hour from noon to noon to the first limit, in the order of ``LIMITS``, that forbids it. It
counts middles of 5-minute cells: its sums are exact, each entry is good to a few minutes a night.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, fields
from typing import Any

import numpy as np

from planner.campaign.records import ArraySite, Campaign, SetupRef, Site, SpacecraftSite, Target
from planner.errors import InputError, UnknownName
from planner.records import LIMITS, Floats, Ints, Ledger, Progress, Track, Windows, silent
from planner.sky.array_windows import ArrayRows, array_rows, plain_track
from planner.sky.camera_windows import STEP_MINUTES, Rows, SiteSky
from planner.sky.clock import checked_mjd, warn_beyond_tables
from planner.sky.directions import StarField, moved_position, star_directions
from planner.sky.limits import template_match
from planner.sky.spacecraft import SpacecraftRows, spacecraft_rows
from planner.sky.stations import station_track
from planner.units import mjd_of_date

TrackOf = Callable[[Target, SetupRef], Track]


Extra = Mapping[str, Sequence[Any]]  # setup -> limits made with astroplan


def find_windows(
    campaign: Campaign, *, track_of: TrackOf | None = None, extra: Extra | None = None, progress: Progress = silent
) -> Windows:
    """Find every window of a campaign's targets with the setups on which their programme has an allocation.

    ``track_of(target, setup)`` gives an array's look with its beam and noise; left out, the stations alone place
    the look, and beam and noise are nan. Targets that never rise, polar day and the like are no errors: the
    ledger says where the time went. ``extra``: further limits of optical setups, see
    ``planner.sky.bridges.extra_margin``; slow (a warning says how slow). Gives one
    ``EarthOrientationWarning`` if the season passes the tables.
    Raises DomainError for seasons outside 1900-2100, InputError for an unknown time zone or a missing filter.
    """
    job = _Job(campaign, extra or {})
    checked_mjd(np.array([job.first_mjd, job.last_mjd]), "season")
    warn_beyond_tables(job.last_mjd)
    work = [s for s in campaign.setups if any(job.allowed(t, s) for t in campaign.targets)]
    skies: dict[str, SiteSky] = {}
    for done, setup in enumerate(work):
        progress("windows", done / len(work))
        if setup.is_array:
            _array(job, setup, track_of)
        elif isinstance(setup.site, SpacecraftSite):
            _spacecraft(job, setup, setup.site)
        else:
            _camera(job, setup, skies)
    progress("windows", 1.0)
    return job.finish()


class _Job:
    """Windows and ledger while they are being filled."""

    def __init__(self, campaign: Campaign, extra: Extra) -> None:
        self.campaign, self.extra = campaign, extra
        _check_extra(campaign, extra)
        self.nights = campaign.nights
        self.first_mjd = mjd_of_date(self.nights[0]) - 1.0
        self.last_mjd = mjd_of_date(self.nights[-1]) + 2.0
        self.targets = tuple(t.name for t in campaign.targets)
        self.setups = tuple(s.name for s in campaign.setups)
        self.months = tuple(dict.fromkeys(day.isoformat()[:7] for day in self.nights))
        self.month_of_night = np.array([self.months.index(day.isoformat()[:7]) for day in self.nights])
        shape = (len(self.targets), len(self.setups), len(self.months))
        self.lost, self.left = np.zeros((*shape, len(LIMITS))), np.zeros(shape)
        self.parts: list[_Part] = []
        self.tracks: dict[tuple[str, str], Track] = {}
        middle = 0.5 * (self.first_mjd + self.last_mjd)
        places = [
            moved_position(p.ra_deg, p.dec_deg, p.pm_ra_mas_yr, p.pm_dec_mas_yr, p.epoch, middle)
            for p in (t.position for t in campaign.targets)
        ]
        self.ra_deg, self.dec_deg = np.array(places, dtype=float).reshape(-1, 2).T
        self.middle_mjd = middle
        self._field: StarField | None = None
        self._programmes = {t.name: campaign.programme_of(t).name for t in campaign.targets}

    def daily_field(self) -> StarField:
        """Directions of all targets on every day of the season (made once)."""
        if self._field is None:
            self._field = StarField(self.ra_deg, self.dec_deg, np.arange(self.first_mjd, self.last_mjd + 1.0))
        return self._field

    def allowed(self, target: Target, setup: SetupRef) -> bool:
        """Whether the target's programme has an allocation on the setup."""
        name = self._programmes[target.name]
        return any(a.setup == setup.name and a.programme == name for a in self.campaign.file.allocations)

    def charge(self, target: int, setup: int, limit: str, hours_by_night: Floats) -> None:
        """Add lost hours (nights,) to the ledger."""
        np.add.at(self.lost[target, setup, :, LIMITS.index(limit)], self.month_of_night, hours_by_night)

    def keep(self, target: int, setup: int, hours_by_night: Floats) -> None:
        """Add usable hours (nights,) to the ledger."""
        np.add.at(self.left[target, setup], self.month_of_night, hours_by_night)

    def finish(self) -> Windows:
        """Sort the rows and freeze the record."""
        columns = {f.name: _join(self.parts, f.name) for f in fields(_Part)}
        order = np.lexsort((columns["start_mjd"], columns["night"], columns["setup"], columns["target"]))
        return Windows(
            targets=self.targets,
            setups=self.setups,
            nights=tuple(day.isoformat() for day in self.nights),
            tracks=self.tracks,
            ledger=Ledger(self.targets, self.setups, self.months, LIMITS, self.lost, self.left),
            **{name: values[order] for name, values in columns.items()},
        )


@dataclass(frozen=True)
class _Part:
    """Rows of one setup in the shape of ``Windows``."""

    target: Ints
    setup: Ints
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


_INT_COLUMNS = ("target", "setup", "night", "sky_class")


def _join(parts: Sequence[_Part], name: str) -> np.ndarray:
    kind = np.int64 if name in _INT_COLUMNS else np.float64
    return np.concatenate([np.zeros(0, dtype=kind), *(getattr(part, name) for part in parts)]).astype(kind)


def _camera(job: _Job, setup: SetupRef, skies: dict[str, SiteSky]) -> None:
    """Windows of an optical setup; the sky of a site is prepared once."""
    if not isinstance(setup.site, Site):
        raise ValueError(f"{setup.name}: a camera needs a site with telescopes")
    if setup.site_slug not in skies:
        skies[setup.site_slug] = SiteSky(setup.site, job.nights, job.ra_deg, job.dec_deg)
    number = job.setups.index(setup.name)
    which = np.flatnonzero([job.allowed(t, setup) for t in job.campaign.targets])
    sky = skies[setup.site_slug]
    match = template_match(setup, job.campaign.targets, job.ra_deg, job.dec_deg, job.middle_mjd)
    found = sky.windows(setup, which, match=match, extra=_extra_margin(job, setup, sky, which))
    for target in map(int, which):
        for k, limit in enumerate(LIMITS):
            job.charge(target, number, limit, found.lost_hours[target, :, k])
        job.keep(target, number, found.left_hours[target])
    rows = {f.name: getattr(found.rows, f.name) for f in fields(Rows)}
    job.parts.append(_Part(setup=np.full(found.rows.target.size, number), **rows))


def _check_extra(campaign: Campaign, extra: Extra) -> None:
    """Further limits belong to optical setups on the ground that the campaign has."""
    for name in extra:
        if name not in {s.name for s in campaign.setups}:
            raise UnknownName(name, [s.name for s in campaign.setups], what="setup", field="extra")
        if not isinstance(campaign.setup(name).site, Site):
            raise InputError(
                "extra constraints are asked for optical setups on the ground only", field="extra", value=name
            )


def _extra_margin(job: _Job, setup: SetupRef, sky: SiteSky, which: Ints) -> Floats | None:
    constraints = job.extra.get(setup.name, ())
    if not constraints:
        return None
    from planner.sky.bridges import EXTRA_STEP_MINUTES, extra_margin, warn_of_cost

    step = EXTRA_STEP_MINUTES // STEP_MINUTES
    warn_of_cost(setup.name, which.size, sky.count // step + 1, len(constraints))
    targets = [job.campaign.targets[int(i)] for i in which]
    return extra_margin(sky.site, targets, sky.grid, constraints, step)


def _spacecraft(job: _Job, setup: SetupRef, site: SpacecraftSite) -> None:
    """Windows of a spacecraft's setup."""
    if setup.camera is None:
        raise ValueError(f"{setup.name}: a spacecraft needs a camera")
    number = job.setups.index(setup.name)
    mag = site.sky_mag_arcsec2[setup.camera.filter]
    for i, target in enumerate(job.campaign.targets):
        if not job.allowed(target, setup):
            continue
        rows = spacecraft_rows(job.nights, job.daily_field(), i, site)
        job.charge(i, number, "Sun angle", rows.lost_hours)
        job.keep(i, number, rows.left_hours)
        job.parts.append(_airless_part(i, number, rows, np.full(rows.night.size, mag)))


def _array(job: _Job, setup: SetupRef, track_of: TrackOf | None) -> None:
    """Windows of an array's receiver."""
    if not isinstance(setup.site, ArraySite) or setup.receiver is None or setup.receiver_name is None:
        raise ValueError(f"{setup.name}: a receiver needs an array of stations")
    number = job.setups.index(setup.name)
    longest = setup.receiver.look_hours * setup.receiver.mode_shares[-1]
    field = job.daily_field()
    of_dates = np.degrees(np.arcsin(star_directions(job.ra_deg, job.dec_deg, job.middle_mjd)[0, :, 2]))
    for i, target in enumerate(job.campaign.targets):
        if not job.allowed(target, setup):
            continue
        stations = station_track(setup.site, setup.receiver_name, float(of_dates[i]), longest)
        track = plain_track(stations) if track_of is None else track_of(target, setup)
        job.tracks[target.name, setup.name] = track
        rows = array_rows(job.nights, field, i, stations, track, setup.receiver)
        job.charge(i, number, "not mounted", rows.lost_session_hours)
        job.charge(i, number, "altitude", rows.lost_altitude_hours)
        job.charge(i, number, "Sun keep-out", rows.lost_sun_hours)
        job.keep(i, number, rows.left_hours)
        job.parts.append(_airless_part(i, number, rows, np.full(rows.night.size, np.nan)))


def _airless_part(target: int, setup: int, rows: ArrayRows | SpacecraftRows, sky_mag: Floats) -> _Part:
    """Rows to which air, Moon and twilight mean nothing."""
    size = rows.night.size
    nothing = np.full(size, np.nan)
    return _Part(
        target=np.full(size, target),
        setup=np.full(size, setup),
        night=rows.night,
        start_mjd=rows.start_mjd,
        end_mjd=rows.end_mjd,
        best_mjd=rows.middle_mjd,
        airmass=nothing,
        moon_separation_deg=nothing,
        moon_altitude_deg=nothing,
        moon_illumination=nothing,
        sun_separation_deg=rows.sun_separation_deg,
        sky_class=np.zeros(size, dtype=np.int64),
        sky_mag_arcsec2=sky_mag,
    )
