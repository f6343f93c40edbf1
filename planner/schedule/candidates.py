"""Candidate looks: one batch for each target, setup and mode, before they become slots.

A mode is a length of the look. Several modes of one night are alternatives: the spacing rule takes at most one.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from planner.campaign.records import SetupRef, Target
from planner.errors import PlanningError
from planner.instruments import camera
from planner.prediction.conditions import CameraSky, conditions, with_seeing
from planner.prediction.look import LookErrors, look_errors
from planner.prediction.look_rings import camera_seconds
from planner.prediction.model import TargetModel
from planner.prediction.tracks import track_of
from planner.records import Floats, Ints, Mode, Track, Windows
from planner.sky.array_windows import SLACK_HOURS
from planner.sky.clock import ROTATIONS_PER_UT1_DAY

SIDEREAL_HOUR = 1.0 / (24.0 * ROTATIONS_PER_UT1_DAY)  # days
SHARE_WORDS = {0.5: "half", 1.0: "", 2.0: "double"}


@dataclass(frozen=True)
class Batch:
    """Candidate looks of one target with one setup in one mode: (T,) each."""

    setup: SetupRef
    rows: Ints  # window rows
    nights: Ints
    mjd: Floats
    seconds: Floats
    minutes: Floats
    earliest_mjd: Floats
    latest_mjd: Floats
    sky: CameraSky | None
    track: Track | None = None
    share: float = 1.0

    def at(self, which: Ints) -> Batch:
        """The looks ``which``."""
        return replace(
            self, rows=self.rows[which], nights=self.nights[which], mjd=self.mjd[which], seconds=self.seconds[which],
            minutes=self.minutes[which], earliest_mjd=self.earliest_mjd[which], latest_mjd=self.latest_mjd[which],
            sky=None if self.sky is None else self.sky.at(which),
        )  # fmt: skip


def months_of(windows: Windows, rows: Ints) -> Ints:
    """Month (1 to 12) of the night's label of each window row."""
    return np.array([int(windows.nights[n][5:7]) for n in windows.night[rows]], dtype=np.int64)


def camera_sky(setup: SetupRef, windows: Windows, rows: Ints) -> CameraSky:
    """Conditions at the best moment of each window, in the median seeing of its month."""
    return conditions(setup, months_of(windows, rows), windows.airmass[rows], windows.sky_mag_arcsec2[rows])


def mode_track(target: Target, setup: SetupRef, windows: Windows, share: float) -> Track:
    """What an array gives in one of its modes; windows are made for the longest."""
    assert setup.receiver is not None
    if share == setup.receiver.mode_shares[-1]:
        return windows.tracks[(target.name, setup.name)]
    return track_of(target, setup, share)


def batches(model: TargetModel, setup: SetupRef, windows: Windows, rows: Ints, theta: Floats) -> list[Batch]:
    """Candidates of every mode of a setup on windows ``rows``; what two modes have alike is in the shorter one only."""
    if setup.receiver is not None:
        return [_of_array(model.target, setup, windows, rows, share) for share in setup.receiver.mode_shares]
    own = setup.camera
    assert own is not None
    mjd, sky, nights = windows.best_mjd[rows], camera_sky(setup, windows, rows), windows.night[rows]
    shaken = with_seeing(sky, setup, nights, len(theta))
    need = camera_seconds(model, theta, mjd, own, shaken, setup.name)
    found: list[Batch] = []
    offered = np.zeros(len(rows))
    for share in own.mode_shares:
        seconds = np.clip(need * share, own.shortest_look_min * 60.0, own.longest_look_min * 60.0)
        seconds = np.ceil(seconds / 60.0) * 60.0
        which = np.flatnonzero(seconds > offered)
        minutes = np.ceil(camera.look_minutes(own, seconds))
        start, end = windows.start_mjd[rows], windows.end_mjd[rows]
        batch = Batch(setup, rows, nights, mjd, seconds, minutes, start, end, sky, None, share)
        found.append(batch.at(which))
        offered = np.maximum(offered, seconds)
    return found


def _of_array(target: Target, setup: SetupRef, windows: Windows, rows: Ints, share: float) -> Batch:
    """Array looks: inside the window of the longest mode, around the best place of this one.

    A member of an interleaved stint holds the array for its share of the stint's time and may do so anywhere in the
    stint's window; its tracks are those of the whole stint. That the other members share the very same hours is not
    asked for: the account and the array's time come out right, the beam is that of a stint well filled.
    """
    receiver = setup.receiver
    assert receiver is not None
    track, longest = mode_track(target, setup, windows, share), windows.tracks[(target.name, setup.name)]
    start, end, middle = windows.start_mjd[rows], windows.end_mjd[rows], windows.best_mjd[rows]
    if track is not longest:
        later = track.start_from_transit_hours - longest.start_from_transit_hours
        later += 0.5 * (track.look_hours - longest.look_hours)
        middle = middle + math.remainder(later, 24.0) * SIDEREAL_HOUR
        reach = (0.5 * track.look_hours + SLACK_HOURS) * SIDEREAL_HOUR
        start, end = np.maximum(start, middle - reach), np.minimum(end, middle + reach)
    # a look that fills its whole window is a sidereal length: 0.3 % shorter by the clock
    minutes = np.minimum(track.look_hours * 60.0, np.maximum((end - start) * 1440.0, track.look_hours * 59.8))
    members = receiver.interleaved_with
    seconds = np.full(len(rows), track.look_hours * 3600.0 * receiver.on_source / members)
    return Batch(
        setup, rows, windows.night[rows], middle, np.minimum(seconds, minutes * 60.0 / members), minutes / members,
        start, end, None, track, share,
    )  # fmt: skip


def errors_of(model: TargetModel, theta: Floats, batch: Batch) -> LookErrors:
    """Error model of a batch at draws ``theta``; each draw and night has a seeing of its own."""
    sky = batch.sky
    if sky is not None:
        sky = with_seeing(sky, batch.setup, batch.nights, len(theta))
    return look_errors(model, theta, batch.mjd, batch.setup, sky=sky, seconds=batch.seconds, track=batch.track)


def one_a_night(batch: Batch) -> Ints:
    """Positions of the interval to use on each night: long enough, then the fewest minutes, then the earliest."""
    fits = (batch.latest_mjd - batch.earliest_mjd) * 1440.0 >= batch.minutes - 1e-6
    best: dict[int, int] = {}
    for i in np.flatnonzero(fits):
        night = int(batch.nights[i])
        if night not in best or batch.minutes[i] < batch.minutes[best[night]] - 1e-9:
            best[night] = int(i)
    return np.array(sorted(best.values()), dtype=np.int64)


def mode_of(setup: SetupRef, seconds: float, minutes: float, share: float = 1.0) -> Mode:
    """Describe how a look is taken."""
    word = SHARE_WORDS.get(share, f"x{share:g}")
    word = f" ({word})" if word else ""
    if setup.receiver is not None:
        band, members = f"{setup.receiver.ghz:g} GHz", setup.receiver.interleaved_with
        stint = f" of a {minutes * members / 60.0:.3g} h stint" if members > 1 else ""
        return Mode(f"{band} {minutes / 60.0:.3g} h{stint}{word}", band, seconds, minutes, 1, share)
    assert setup.camera is not None
    frames = int(camera.frames_for(setup.camera, seconds))
    name = f"{setup.camera.filter} {frames}x{seconds / frames:.0f} s{word}"
    return Mode(name, setup.camera.filter, seconds, minutes, frames, share)


def good_share(setup: SetupRef, night: str) -> float:
    """Chance that the weather serves a setup, in the month of a night's label."""
    needs = setup.camera.needs if setup.camera is not None else "clear"
    return float(setup.site.months.good(needs)[int(night[5:7]) - 1])


def shutter_seconds(setup: SetupRef, minutes: float) -> float:
    """Open shutter inside the minutes of a fixed look."""
    own = setup.camera
    assert own is not None
    open_s = (minutes - camera.overhead_min(own)) * 60.0
    if open_s <= own.readout_s:
        raise PlanningError(f"a fixed look of {minutes:g} minutes is shorter than its overheads; lengthen it")
    frames = math.ceil(open_s / (own.longest_exposure_s + own.readout_s))
    return open_s - frames * own.readout_s
