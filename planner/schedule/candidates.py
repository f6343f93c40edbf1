"""Candidate looks: one batch for each target, setup and mode, before they become slots.

A mode is a length of the look. Several modes of one night are alternatives: the spacing rule takes at most one.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from planner.campaign.array_setups import companions
from planner.campaign.records import SetupRef, Target
from planner.errors import PlanningError
from planner.instruments import camera
from planner.prediction.conditions import CameraSky, conditions, with_seeing
from planner.prediction.look import LookErrors, look_errors
from planner.prediction.look_rings import camera_seconds
from planner.prediction.model import TargetModel
from planner.prediction.tracks import track_of
from planner.records import Bools, Floats, Ints, Mode, Track, Windows
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
    beside: tuple[tuple[SetupRef, Track], ...] = ()  # other bands that the look records

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
    """Candidates of every mode of a setup on windows ``rows``, shortest mode first."""
    if setup.receiver is not None:
        return [_of_array(model.target, setup, windows, rows, share) for share in setup.receiver.mode_shares]
    own = setup.camera
    assert own is not None
    mjd, sky, nights = windows.best_mjd[rows], camera_sky(setup, windows, rows), windows.night[rows]
    shaken = with_seeing(sky, setup, nights, len(theta))
    need = camera_seconds(model, theta, mjd, own, shaken, setup.name)
    found: list[Batch] = []
    for share in own.mode_shares:
        seconds = np.clip(need * share, own.shortest_look_min * 60.0, own.longest_look_min * 60.0)
        seconds = np.ceil(seconds / 60.0) * 60.0
        minutes = np.ceil(camera.look_minutes(own, seconds))
        start, end = windows.start_mjd[rows], windows.end_mjd[rows]
        found.append(Batch(setup, rows, nights, mjd, seconds, minutes, start, end, sky, None, share))
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
        start, end, None, track, share, bands_beside(target, setup, track),
    )  # fmt: skip


def bands_beside(target: Target, setup: SetupRef, track: Track) -> tuple[tuple[SetupRef, Track], ...]:
    """Other bands of a look, each with its own stations' track over the very hours of the look."""
    if track.look_hours <= 0:
        return ()
    found = [(band, track_of(target, band, at=track)) for band in companions(setup)]
    return tuple((band, beside) for band, beside in found if beside.look_hours > 0)


def errors_of(model: TargetModel, theta: Floats, batch: Batch) -> LookErrors:
    """Error model of a batch at draws ``theta``; each draw and night has a seeing of its own."""
    sky = batch.sky
    if sky is not None:
        sky = with_seeing(sky, batch.setup, batch.nights, len(theta))
    return look_errors(model, theta, batch.mjd, batch.setup, sky=sky, seconds=batch.seconds, track=batch.track)


@dataclass(frozen=True)
class Taught:
    """What looks teach: T looks, B draws, F features, M rows a band."""

    errors: LookErrors  # of the setup's own band
    rows: Floats  # (B, T, bands x M, P) whitened derivatives
    measurable: Bools  # (B, T, F) in any band


def taught(model: TargetModel, theta: Floats, batch: Batch) -> Taught:
    """Whitened derivatives of a batch: those of every band it records, one below the other.

    Bands are independent given the parameters: what they share (the core's wander and shift) is among these.
    """
    errors = errors_of(model, theta, batch)
    rows = [errors.whiten(model.derivatives(theta, batch.mjd, batch.setup.name))]
    seen = errors.measurable
    for setup, track in batch.beside:
        other = look_errors(model, theta, batch.mjd, setup, track=track)
        rows.append(other.whiten(model.derivatives(theta, batch.mjd, setup.name)))
        seen = seen | other.measurable
    return Taught(errors, np.concatenate(rows, axis=2), seen)


def in_any_band(model: TargetModel, theta: Floats, batch: Batch, errors: LookErrors) -> Bools:
    """What is measurable in the band of ``errors`` or in another one that the looks record, (B, T, F)."""
    seen = errors.measurable
    for setup, track in batch.beside:
        seen = seen | look_errors(model, theta, batch.mjd, setup, track=track).measurable
    return seen


def one_a_night(batch: Batch) -> Ints:
    """Positions of the interval to use on each night: long enough, then the fewest minutes, then the earliest."""
    fits = (batch.latest_mjd - batch.earliest_mjd) * 1440.0 >= batch.minutes - 1e-6
    best: dict[int, int] = {}
    for i in np.flatnonzero(fits):
        night = int(batch.nights[i])
        if night not in best or batch.minutes[i] < batch.minutes[best[night]] - 1e-9:
            best[night] = int(i)
    return np.array(sorted(best.values()), dtype=np.int64)


def offers(modes: Sequence[Batch]) -> list[Batch]:
    """One look a night of each mode; a longer mode that comes out no longer than a shorter one is left out."""
    found: list[Batch] = []
    longest: dict[int, float] = {}
    for mode in modes:
        batch = mode.at(one_a_night(mode))
        nights, seconds = batch.nights.tolist(), batch.seconds.tolist()
        new = [i for i, (n, s) in enumerate(zip(nights, seconds, strict=True)) if s > longest.get(n, 0.0) + 0.5]
        longest |= {nights[i]: seconds[i] for i in new}
        if new:
            found.append(batch.at(np.array(new, dtype=np.int64)))
    return found


def mode_of(setup: SetupRef, seconds: float, minutes: float, share: float = 1.0) -> Mode:
    """Describe how a look is taken."""
    word = SHARE_WORDS.get(share, f"x{share:g}")
    word = f" ({word})" if word else ""
    if setup.receiver is not None:
        bands = [s.receiver.ghz for s in (setup, *companions(setup)) if s.receiver is not None]
        band, members = f"{'+'.join(f'{ghz:g}' for ghz in bands)} GHz", setup.receiver.interleaved_with
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


def lasting(target: Target, batch: Batch, minutes: float) -> Batch:
    """One look of the nearest mode, made to last as long as a fixed look does."""
    setup = batch.setup
    if setup.receiver is None:
        return replace(batch, seconds=np.array([shutter_seconds(setup, minutes)]), minutes=np.array([minutes]))
    receiver, members = setup.receiver, setup.receiver.interleaved_with
    share = minutes * members / 60.0 / receiver.look_hours
    if abs(share - batch.share) > 0.01 * batch.share:  # none of the modes: beam and noise of its own length
        track = track_of(target, setup, share)
        batch = replace(batch, track=track, share=share, beside=bands_beside(target, setup, track))
    seconds = np.array([minutes * 60.0 * receiver.on_source])
    return replace(batch, seconds=seconds, minutes=np.array([minutes]))


def shutter_seconds(setup: SetupRef, minutes: float) -> float:
    """Open shutter inside the minutes of a fixed look."""
    own = setup.camera
    assert own is not None
    open_s = (minutes - camera.overhead_min(own)) * 60.0
    if open_s <= own.readout_s:
        raise PlanningError(f"a fixed look of {minutes:g} minutes is shorter than its overheads; lengthen it")
    frames = math.ceil(open_s / (own.longest_exposure_s + own.readout_s))
    return open_s - frames * own.readout_s
