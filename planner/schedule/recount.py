"""Count a plan again from the campaign alone.

Nothing here knows how the plan was made: the table of looks is read as a stranger would read it, the sky
comes from astropy (``recount_sky``), and every limit comes from the campaign's records. A plan with a breach
is never shown. The tolerances stand in ``recount_rows``.
"""

from __future__ import annotations

import datetime as dt
import itertools
import math
from collections import defaultdict
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any
from zoneinfo import ZoneInfo

from planner.campaign.records import Allocation, ArraySite, Campaign, SetupRef, SpacecraftSite, Target
from planner.errors import PlanningError, RecountError
from planner.schedule import recount_arrays, recount_further, recount_limits, recount_sky
from planner.schedule.recount_rows import SECONDS, Row, Tally
from planner.units import DAY_S, date_of_mjd, iso_of_mjd, mjd_of_iso

if TYPE_CHECKING:
    import pandas as pd

    from planner.records import Track

NEEDED = ("look", "target", "setup", "mode", "night", "start_utc", "end_utc", "exposure_s", "state")
CLASSES = ("dark", "grey", "bright")


@dataclass(frozen=True, slots=True)
class RecountReport:
    """What was counted, and what was found broken."""

    breaches: tuple[str, ...]
    checks: tuple[str, ...]
    notes: tuple[str, ...] = ()  # worth knowing, not a breach

    @property
    def passed(self) -> bool:
        """True when nothing is broken."""
        return not self.breaches

    def insist(self) -> None:
        """Raise RecountError with every breach if there is one."""
        if self.breaches:
            raise RecountError(self.breaches)


def recount(
    campaign: Campaign,
    plan_table: pd.DataFrame,
    *,
    tracks: Mapping[tuple[str, str], Track] | None = None,
) -> RecountReport:
    """Check every limit of a campaign against a plan's table: ``Plan.table()``, or the same read back.

    Looks in state ``void`` are left out. ``tracks``: by (target, setup), to check in addition that no array
    look is longer than the stretch with enough stations that was promised.
    Spacing is counted from night to night (dates). Raises PlanningError when the table lacks a column;
    everything else that is wrong is a breach in the report.
    """
    missing = [name for name in NEEDED if name not in plan_table.columns]
    if missing:
        raise PlanningError(f"the plan's table lacks the column(s) {', '.join(missing)}; needed: {', '.join(NEEDED)}")
    tally = Tally()
    rows = _read(campaign, plan_table, tally)
    _fixed_looks(campaign, rows, tally)
    _nights(campaign, rows, tally)
    recount_limits.cameras(rows, tally)
    recount_limits.arrays(rows, tally, tracks or {})
    recount_limits.spacecraft(rows, tally)
    recount_arrays.sessions(rows, tally)
    recount_arrays.shared_stations(rows, tally)
    for row in rows:
        recount_further.calendar(row, tally)
    _exposures(rows, tally)
    _overlaps(rows, tally)
    _spacings(rows, tally)
    _accounts(campaign, rows, tally)
    _tables_reach(rows, tally)
    return RecountReport(tuple(tally.breaches), tuple(tally.checks), tuple(tally.notes))


# ------------------------------------------------------------------ reading


def _read(campaign: Campaign, table: pd.DataFrame, tally: Tally) -> list[Row]:
    targets = {t.name: t for t in campaign.targets}
    setups = {s.name: s for s in campaign.setups}
    rows: list[Row] = []
    void = 0
    for record in table.to_dict("records"):
        if record["state"] == "void":
            void += 1
            continue
        name = f"look {record['look']}"
        unknown = [
            f"{what} {record[what]!r} is not in the campaign"
            for what, known in (("target", targets), ("setup", setups))
            if record[what] not in known
        ]
        if unknown:
            tally.breaches.append(f"{name}: {' and '.join(unknown)}")
            continue
        row = _row(campaign, record, targets[record["target"]], setups[record["setup"]])
        if isinstance(row, str):
            tally.breaches.append(f"{name}: {row}")
        else:
            rows.append(row)
    seen: set[int] = set()
    for row in rows:
        if row.number in seen:
            tally.breaches.append(f"look {row.number}: the number stands twice in the plan")
        seen.add(row.number)
    tally.checks.append(f"looks counted: {len(rows)}, void looks left out: {void}")
    return rows


def _row(campaign: Campaign, record: Mapping[Any, Any], target: Target, setup: SetupRef) -> Row | str:
    """Return the look, or what is wrong with its numbers."""
    try:
        start, end = mjd_of_iso(str(record["start_utc"])), mjd_of_iso(str(record["end_utc"]))
        night = dt.date.fromisoformat(str(record["night"]))
        number, exposure = int(record["look"]), float(record["exposure_s"])
    except (TypeError, ValueError) as error:
        return f"cannot be read ({error})"
    if not exposure >= 0:
        return f"exposure_s is {exposure:g}, needs a value of 0 or more"
    if not end > start:
        return f"ends at {record['end_utc']}, not after its start {record['start_utc']}"
    fixed = next(
        (
            i
            for i, look in enumerate(campaign.file.fixed_looks)
            if (look.target, look.setup) == (target.name, setup.name)
            and abs(mjd_of_iso(look.start_utc.isoformat()) - start) * DAY_S <= SECONDS
        ),
        None,
    )
    return Row(number, target, setup, night, start, end, exposure, fixed)


def _fixed_looks(campaign: Campaign, rows: Sequence[Row], tally: Tally) -> None:
    """Every fixed look is there once, with its start and its minutes."""
    for i, look in enumerate(campaign.file.fixed_looks):
        found = [row for row in rows if row.fixed == i]
        start = iso_of_mjd(mjd_of_iso(look.start_utc.isoformat()))
        name = f"fixed look of {look.target} with {look.setup} at {start}"
        if len(found) != 1:
            how = "is not in the plan" if not found else f"stands {len(found)} times in the plan"
            tally.breaches.append(f"{name} {how}")
        elif abs(found[0].minutes - look.minutes) * 60.0 > SECONDS:
            tally.breaches.append(
                f"{name}: the plan gives it {found[0].minutes:.2f} min, the campaign {look.minutes:g}"
            )
    there = sum(row.fixed is not None for row in rows)
    tally.checks.append(f"fixed looks: {there} in the plan of {len(campaign.file.fixed_looks)} in the campaign")


# ------------------------------------------------------------------ nights


def _nights(campaign: Campaign, rows: Sequence[Row], tally: Tally) -> None:
    """Night label, season and shutdowns."""
    season = campaign.file.season
    for row in rows:
        right = _nights_of(row)
        if row.night not in right:
            tally.breaches.append(f"{row}: starts {iso_of_mjd(row.start)}, which belongs to the night of {right[0]}")
        if not season.first <= right[0] <= season.last:
            tally.breaches.append(f"{row}: night {right[0]} is outside the season {season.first} to {season.last}")
        for shut in row.setup.shutdowns:
            if any(shut.first <= night <= shut.last for night in {row.night, right[0]}):
                why = f" ({shut.why})" if shut.why else ""
                tally.breaches.append(f"{row}: {row.setup.telescope} is shut {shut.first} to {shut.last}{why}")
    if rows:
        labels = [row.night for row in rows]
        tally.checks.append(
            f"nights: {min(labels)} to {max(labels)}, season {season.first} to {season.last}, "
            f"{len(set(labels))} nights used"
        )


def _nights_of(row: Row) -> tuple[dt.date, ...]:
    """Nights that a look may be named after, the proper one first.

    A camera's is the site's civil date at its evening: before local noon it is still the night of the day
    before. An array's is the UTC date at the middle; a look over midnight may bear either date, since the
    middle of the transit can lie on the other side of it from the middle of the look.
    """
    if isinstance(row.setup.site, ArraySite | SpacecraftSite):
        dates = [date_of_mjd(m) for m in (row.middle, row.start, row.end)]
        return tuple(dict.fromkeys(dates))
    local = _utc(row.start).astimezone(ZoneInfo(row.setup.site.time_zone))
    return (local.date() - dt.timedelta(days=1) if local.hour < 12 else local.date(),)


def _utc(mjd: float) -> dt.datetime:
    return dt.datetime(1858, 11, 17, tzinfo=dt.UTC) + dt.timedelta(days=mjd)


# ------------------------------------------------------------------ minutes


def _exposures(rows: Sequence[Row], tally: Tally) -> None:
    """Open shutter and a camera's overheads fit into the minutes (a fixed look's minutes are its own)."""
    for row in rows:
        overhead = 0.0
        camera = row.setup.camera
        if camera is not None and row.fixed is None:
            frames = math.ceil(row.exposure_s / camera.longest_exposure_s - 1e-6)
            overhead = (camera.acquisition_min + camera.calibration_min) * 60.0 + camera.filter_change_s
            overhead += frames * camera.readout_s
        if row.exposure_s > row.minutes * 60.0 - overhead + SECONDS:
            extra = f" and overheads of {overhead:.0f} s" if overhead else ""
            tally.breaches.append(
                f"{row}: {row.exposure_s:.0f} s of exposure{extra} in a look of {row.minutes * 60:.0f} s"
            )
    tally.checks.append(
        f"telescope time: {sum(row.minutes for row in rows) / 60:.2f} h, "
        f"of it open {sum(row.exposure_s for row in rows) / 3600:.2f} h"
    )


def _overlaps(rows: Sequence[Row], tally: Tally) -> None:
    """A telescope does one job at a time, whatever the setup."""
    busy: dict[str, list[Row]] = defaultdict(list)
    for row in rows:
        busy[row.setup.telescope].append(row)
    for telescope, looks in sorted(busy.items()):
        last: Row | None = None
        for row in sorted(looks, key=lambda r: (r.start, r.end)):
            if last is not None and (last.end - row.start) * DAY_S > SECONDS:
                tally.breaches.append(
                    f"{row} starts {iso_of_mjd(row.start)}, but {last} keeps {telescope} until {iso_of_mjd(last.end)}"
                )
            if last is None or row.end > last.end:
                last = row
    tally.checks.append(f"telescopes checked for overlaps: {len(busy)}")


def _spacings(rows: Sequence[Row], tally: Tally) -> None:
    """Nights between neighbouring looks of one target, from date to date."""
    looks: dict[str, list[Row]] = defaultdict(list)
    for row in rows:
        looks[row.target.name].append(row)
    for name, mine in sorted(looks.items()):
        mine.sort(key=lambda r: (r.night, r.middle))
        spacing = mine[0].target.spacing
        if len(mine) > 1:
            gaps = [_nights_between(a, b) for a, b in itertools.pairwise(mine)]
            tally.checks.append(
                f"{name}: {len(mine)} looks, {min(gaps)} to {max(gaps)} nights apart (at least "
                f"{spacing.at_least_days:g})"
            )
        _too_close(mine, spacing.at_least_days, tally)
        if spacing.at_most_days is not None:
            for a, b in itertools.pairwise(mine):
                if _nights_between(a, b) > spacing.at_most_days:
                    tally.notes.append(
                        f"{name}: {_nights_between(a, b)} nights between {a.night} and {b.night}, more than the "
                        f"{spacing.at_most_days:g} days wanted"
                    )


def _nights_between(a: Row, b: Row) -> int:
    return (b.night - a.night).days


def _too_close(mine: Sequence[Row], at_least_days: float, tally: Tally) -> None:
    """Compare every pair: between two fixed looks, which may be close, a third look may lie."""
    for i, a in enumerate(mine):
        for b in mine[i + 1 :]:
            gap = _nights_between(a, b)
            if gap >= at_least_days:
                break
            if a.fixed is None or b.fixed is None:
                tally.breaches.append(f"{a} and {b} are {gap} nights apart, at_least_days is {at_least_days:g}")


# ------------------------------------------------------------------ accounts


def _accounts(campaign: Campaign, rows: Sequence[Row], tally: Tally) -> None:
    """Hours of each setup and programme, by class of sky, against what was granted."""
    groups: dict[tuple[str, str], list[Row]] = defaultdict(list)
    for row in rows:
        groups[row.setup.name, campaign.programme_of(row.target).name].append(row)
    granted: dict[tuple[str, str], list[Allocation]] = defaultdict(list)
    for allocation in campaign.file.allocations:
        granted[allocation.setup, allocation.programme].append(allocation)
    for key in sorted(groups.keys() | granted.keys()):
        looks, purses = groups.get(key, []), granted.get(key, [])
        name = f"{key[0]} for {key[1]}"
        if not purses:
            numbers = ", ".join(str(row.number) for row in looks)
            tally.breaches.append(f"{name}: no hours are granted, but look(s) {numbers} use it")
            continue
        _account(name, [(row.minutes, tally.sky.get(id(row), "dark")) for row in looks], purses, tally)


def _account(name: str, looks: Sequence[tuple[float, str]], purses: Sequence[Allocation], tally: Tally) -> None:
    """Do the looks of one setup and programme fit into its allocations?

    Classes are nested (dark hours take dark looks, grey ones dark and grey, any all), so the time fits if and
    only if, from each class on towards bright, the looks need no more than the purses that may pay for them
    hold. That splits looks freely; a look that would have to be split between purses is a note.
    """
    used = {word: sum(m for m, c in looks if c == word) for word in CLASSES}
    slack = len(looks) * SECONDS / 60.0
    for first, words in enumerate((("dark", "grey", "any"), ("grey", "any"), ("any",))):
        need = sum(used[word] for word in CLASSES[first:])
        have = 60.0 * sum(p.hours for p in purses if p.sky in words)
        if need > have + slack:
            kind = " or ".join(CLASSES[first:])
            tally.breaches.append(
                f"{name}: looks in {kind} sky take {need / 60:.2f} h, {have / 60:.2f} h are granted for it"
            )
    total = ", ".join(f"{p.hours:g} h {p.sky}" for p in purses)
    spent = ", ".join(f"{used[word] / 60:.2f} h {word}" for word in CLASSES if used[word] > 0) or "nothing"
    tally.checks.append(f"{name}: {spent} of {total}")
    if len(purses) > 1 and not _whole(looks, purses, slack):
        tally.notes.append(f"{name}: no simple assignment keeps each look within one allocation")


def _whole(looks: Sequence[tuple[float, str]], purses: Sequence[Allocation], slack: float) -> bool:
    """Assign whole looks, longest and brightest first, each to the narrowest allocation that has room."""
    order = {"dark": 0, "grey": 1, "any": 2}
    left = [[order[p.sky], 60.0 * p.hours + slack] for p in purses]
    left.sort()
    for minutes, word in sorted(looks, key=lambda k: (-CLASSES.index(k[1]), -k[0])):
        room = [purse for purse in left if purse[0] >= CLASSES.index(word) and purse[1] >= minutes]
        if not room:
            return False
        room[0][1] -= minutes
    return True


def _tables_reach(rows: Sequence[Row], tally: Tally) -> None:
    """Say once if dates lie beyond the earth-orientation table."""
    last = recount_sky.last_orientation_mjd()
    late = [row for row in rows if row.end > last]
    if late:
        tally.notes.append(
            f"{len(late)} look(s) after {iso_of_mjd(last)[:10]}, the end of the earth-orientation table: "
            "hour angles there may be off by up to 17 arcsec"
        )
