"""What an array gives for a target in one look: from stations to beam and noise."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from planner.campaign.array_setups import companions
from planner.campaign.records import ArraySite, Receiver, SetupRef, Target
from planner.instruments import interferometer
from planner.records import Bools, Floats, Ints, Track
from planner.sky.stations import STEP_HOURS, StationTrack, UvPoints, station_track, uv_wavelengths


def track_of(target: Target, setup: SetupRef, share: float | None = None, at: Track | None = None) -> Track:
    """Return the best look of an array at a target: hours, stations, beam and image noise.

    ``at``: a look of another band that this one is recorded with, which then sets the time.

    ``share``: one of the receiver's modes, its longest when left out. Every baseline counts with the chance that both
    its stations take part and with the sensitivity that the air leaves it at each moment; months of different opacity
    have noises of their own and share one beam, that of their mean. A member of an interleaved stint has the scans
    that are its own.
    The declination of ICRS is used as that of date: precession moves it by at most 0.2 degrees until 2060, which
    shifts the beam by less than the 1 % that its (u, v) sampling is good to.
    """
    site, receiver = setup.site, setup.receiver
    assert isinstance(site, ArraySite)
    assert receiver is not None
    assert setup.receiver_name is not None
    hours = receiver.look_hours * (receiver.mode_shares[-1] if share is None else share)
    track = station_track(site, setup.receiver_name, target.position.dec_deg, hours)
    if at is not None:
        track = replace(track, look_start_hours=at.start_from_transit_hours, look_hours=at.look_hours)
    if track.look_hours <= 0 or track.most_stations < 2:
        nan = float("nan")
        return Track(0.0, 0.0, nan, 0, nan, nan, nan, nan)
    steps = own_scans(track.in_look, receiver)
    points = uv_wavelengths(track, steps)
    months = [receiver.zenith_opacity(m) for m in range(1, 13)] if receiver.opacity_by_month else []
    opacity = float(np.mean(months)) if months else receiver.zenith_opacity(1)
    seen = points.weights > 0
    kept = kept_share(track, points, steps, receiver, opacity)[seen]
    beam = interferometer.beam_from_uv(
        points.u_wavelengths[seen], points.v_wavelengths[seen], points.weights[seen] * kept
    )
    return Track(
        hours_up=track.stretch_hours,
        look_hours=track.look_hours,
        start_from_transit_hours=track.look_start_hours,
        stations=track.most_stations,
        beam_major_mas=float(beam.major_mas),
        beam_minor_mas=float(beam.minor_mas),
        beam_pa_deg=float(np.nan_to_num(beam.pa_deg)),
        noise_jy=_noise_jy(track, points, steps, receiver, opacity),
        chance_stations=enough_chance(track.up[:, track.in_look], track.reliability, site.least_stations),
        noise_by_month_jy=tuple(_noise_jy(track, points, steps, receiver, tau) for tau in months),
    )


def beams_beside(target: Target, setup: SetupRef, track: Track) -> dict[str, float]:
    """Geometric mean beam (mas) of every other band that a look with a setup records, by the name of its setup."""
    found = {}
    for band in companions(setup):
        beside = track_of(target, band, at=track)
        if beside.look_hours > 0:
            found[band.name] = float(np.sqrt(beside.beam_major_mas * beside.beam_minor_mas))
    return found


def own_scans(steps: Ints, receiver: Receiver) -> Ints:
    """Steps of a look that belong to one member: all of them, or every n-th scan of an interleaved stint.

    The first scan is the first member's; a later member's beam differs by less than a scan's turn of the Earth.
    """
    if receiver.interleaved_with == 1:
        return steps
    scan_steps = max(1, round(receiver.scan_min / (STEP_HOURS * 60.0)))  # whole steps, so that all scans are alike
    return steps[np.arange(len(steps)) // scan_steps % receiver.interleaved_with == 0]


def kept_share(track: StationTrack, points: UvPoints, steps: Ints, receiver: Receiver, opacity: float) -> Floats:
    """Share of each baseline's weight that air and reliability leave, (B, L)."""
    factor = interferometer.sefd_factor(track.elevation_deg[:, steps], opacity, receiver.system_k)
    gain = track.reliability[:, None] / np.where(track.up[:, steps], factor, 1.0)
    return np.asarray(gain[points.first] * gain[points.second])


def _noise_jy(track: StationTrack, points: UvPoints, steps: Ints, receiver: Receiver, opacity: float) -> float:
    """Image noise: each baseline counts its seconds, less what air and reliability take."""
    share = np.where(points.weights > 0, kept_share(track, points, steps, receiver, opacity), 0.0)
    # a stint's scans are counted in steps: their time is exactly the member's share of the look
    of_steps = len(track.in_look) / receiver.interleaved_with / max(len(steps), 1)
    seconds = share.sum(axis=1) * STEP_HOURS * 3600.0 * receiver.on_source * of_steps
    return float(
        interferometer.image_noise_by_baseline_jy(
            track.sefd_jy, receiver.efficiency, receiver.bandwidth_mhz * 1e6, seconds, receiver.polarisations
        )
    )


def enough_chance(up: Bools, reliability: Sequence[float] | Floats, least: int) -> float:
    """Expected share of a look in which at least ``least`` of the stations that see the target take part.

    ``up``: (S, L). At each moment the chance is exact: the number taking part is a sum of independent stations, whose
    law is the convolution of theirs.
    """
    columns, counts = np.unique(np.asarray(up, dtype=bool), axis=1, return_counts=True)
    total = 0.0
    for column, count in zip(columns.T, counts, strict=True):
        law = np.ones(1)
        for chance in np.asarray(reliability, dtype=float)[column]:
            law = np.convolve(law, [1.0 - chance, chance])
        total += float(count) * float(law[least:].sum())
    return min(1.0, total / float(counts.sum()))
