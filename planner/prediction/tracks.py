"""What an array gives for a target in one look: from stations to beam and noise."""

from __future__ import annotations

import numpy as np

from planner.campaign.records import ArraySite, SetupRef, Target
from planner.instruments import interferometer
from planner.records import Track
from planner.sky.stations import STEP_HOURS, station_track, uv_wavelengths


def track_of(target: Target, setup: SetupRef) -> Track:
    """Return the best look of an array at a target: hours, stations, beam and image noise.

    The declination of ICRS is used as that of date: precession moves it by at most 0.2 degrees until 2060, which
    shifts the beam by less than the 1 % that its (u, v) sampling is good to.
    """
    site, receiver = setup.site, setup.receiver
    assert isinstance(site, ArraySite)
    assert receiver is not None
    assert setup.receiver_name is not None
    track = station_track(site, setup.receiver_name, target.position.dec_deg)
    if track.look_hours <= 0:
        nan = float("nan")
        return Track(0.0, 0.0, nan, 0, nan, nan, nan, nan)
    points = uv_wavelengths(track)
    beam = interferometer.beam_from_uv(*points.flat())
    seconds = (points.weights > 0).sum(axis=1) * STEP_HOURS * 3600.0 * receiver.on_source
    noise = interferometer.image_noise_by_baseline_jy(
        track.sefd_jy, receiver.efficiency, receiver.bandwidth_mhz * 1e6, seconds, receiver.polarisations
    )
    return Track(
        hours_up=track.stretch_hours,
        look_hours=track.look_hours,
        start_from_transit_hours=track.look_start_hours,
        stations=track.most_stations,
        beam_major_mas=float(beam.major_mas),
        beam_minor_mas=float(beam.minor_mas),
        beam_pa_deg=float(np.nan_to_num(beam.pa_deg)),
        noise_jy=float(noise),
    )
