"""Knots through an array: errors of their positions along the axes of the beam, and what hides them.

Shapes: B draws, T moments.
"""

from __future__ import annotations

import numpy as np

from planner.campaign.records import Receiver
from planner.instruments import interferometer
from planner.prediction.knots import SpotState
from planner.records import Bools, Floats, Track


def spot_errors(
    spot: SpotState, size_mas: float, receiver: Receiver, track: Track, noise_mjy: float
) -> tuple[Floats, Bools, Floats, dict[str, Bools]]:
    """Errors (B, T, 2) along the beam's major and minor axes, measurable (B, T), S/N (B, T), and what stops it.

    Errors are inf where the knot is not measured; each draw and moment has at most one reason, the first that applies.
    """
    with np.errstate(invalid="ignore"):
        cut = interferometer.cut_fwhm(
            track.beam_major_mas, track.beam_minor_mas, track.beam_pa_deg, np.nan_to_num(spot.pa_deg)
        )
        beams = np.nan_to_num(spot.separation_mas) / cut
        # a knot larger than the beam spreads its flux over several beams: its peak is what counts
        peak = np.nan_to_num(spot.flux_mjy) / (
            1.0 + (size_mas / np.sqrt(track.beam_major_mas * track.beam_minor_mas)) ** 2
        )
        snr = peak / noise_mjy
        masks = {
            "not yet ejected": ~spot.exists,
            "inside half a beam of the core": beams <= 0.5,
            "too faint": snr < receiver.snr_detect,
        }
    stopped = np.zeros(snr.shape, bool)
    reasons = {}
    for reason, mask in masks.items():
        reasons[reason] = mask & ~stopped
        stopped = stopped | mask
    blend = np.sqrt(interferometer.blending_factor(np.where(stopped, 2.0, beams)))
    safe = np.maximum(snr, 1e-9)
    floor = receiver.position_floor_beam
    sigma = np.stack(
        [
            np.where(stopped, np.inf, interferometer.position_error(beam, safe, size_mas, floor) * blend)
            for beam in (track.beam_major_mas, track.beam_minor_mas)
        ],
        axis=-1,
    )
    return sigma, ~stopped, snr, reasons
