"""Knots through an array: errors of their positions along the axes of the beam, and what hides them.

A knot is blurred by its own size, which grows with its separation, and by scattering on the way; it blends with the
core and with the other knots of its target. Shapes: B draws, T moments.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from planner.campaign.records import Receiver, Scattering
from planner.instruments import interferometer
from planner.prediction.knots import SpotState
from planner.records import Bools, Floats, Track


def scattered_mas(scattering: Scattering | None, ghz: float) -> float:
    """Size of a scattered point at a frequency: falls as frequency^-2 (thin plasma screen; from memory)."""
    return 0.0 if scattering is None else scattering.mas * (scattering.at_ghz / ghz) ** 2


@dataclass(frozen=True)
class View:
    """What an array sees of one target: beam, noise and blur."""

    receiver: Receiver
    track: Track
    noise_mjy: Floats | float  # (T,) where the months differ
    scatter_mas: float

    def beams(self, offset_mas: Floats) -> Floats:
        """Length of offsets (..., 2) in resolution elements: the beam in their direction, scattering in quadrature."""
        t = self.track
        east, north = offset_mas[..., 0], offset_mas[..., 1]
        beams = interferometer.separation_in_beams(east, north, t.beam_major_mas, t.beam_minor_mas, t.beam_pa_deg)
        if self.scatter_mas == 0.0:
            return np.asarray(beams)
        length = np.hypot(east, north)
        with np.errstate(invalid="ignore", divide="ignore"):
            cut = length / beams
        return np.where(length > 0.0, length / np.hypot(cut, self.scatter_mas), 0.0)


@dataclass(frozen=True)
class Spot:
    """One knot as an array sees it, (B, T) each."""

    feature: str
    name: str  # as people call it
    state: SpotState
    size_mas: Floats  # own size and scattering in quadrature
    beams: Floats  # offset from the core in beams along its direction
    snr: Floats  # of the peak; 0 where it does not exist


def see_spot(
    feature: str,
    label: str,
    state: SpotState,
    size_mas: float,
    grows: float,
    view: View,
    moved_mas: Floats | float = 0.0,
) -> Spot:
    """Blur one knot and find its S/N and its separation in beams.

    ``moved_mas``: how far it moves within the look, (B, 1): the image is drawn out by that, its peak falls by
    b / hypot(b, moved) with b the mean beam, and its centre is known as that of a knot so much longer.
    """
    own = size_mas + grows * np.nan_to_num(state.separation_mas) if grows else np.full((), size_mas)
    size2 = own * own + view.scatter_mas**2
    beam2 = view.track.beam_major_mas * view.track.beam_minor_mas
    # a knot larger than the beam spreads its flux over several beams: its peak is what counts
    drawn2 = np.asarray(moved_mas) ** 2
    spread = (1.0 + size2 / beam2) * np.sqrt(1.0 + drawn2 / beam2)
    snr = np.where(state.exists, state.light_mjy / (view.noise_mjy * spread), 0.0)
    name = f"{feature} ({label})" if label else feature
    return Spot(feature, name, state, np.sqrt(size2 + drawn2), view.beams(state.offset_mas), snr)


def beams_between(one: Spot, other: Spot, view: View) -> Floats:
    """Distance of two knots in beams along their connection, (B, T); inf where the other one is too faint to see."""
    beams = view.beams(one.state.offset_mas - other.state.offset_mas)
    return np.where(other.snr >= view.receiver.snr_detect, beams, np.inf)


def spot_errors(
    spot: Spot, others: Sequence[Spot], view: View, *, with_sigma: bool = True
) -> tuple[Floats, Bools, Floats, dict[str, Bools]]:
    """Errors (B, T, 2) along the beam's major and minor axes, measurable (B, T), S/N (B, T), and what stops it.

    Errors are inf where the knot is not measured; each draw and moment has at most one reason, the first that applies.
    Without ``with_sigma`` the errors are left out: (B, T, 0).
    """
    limit = interferometer.UNRESOLVED_BEAMS
    between = [(other, beams_between(spot, other, view)) for other in others]
    masks = {
        "not yet ejected": ~spot.state.exists,
        "inside half a beam of the core": spot.beams <= limit,
        "too faint": spot.snr < view.receiver.snr_detect,
        **{f"within half a beam of {other.name}": beams <= limit for other, beams in between},
    }
    stopped = np.zeros(spot.snr.shape, bool)
    reasons = {}
    for reason, mask in masks.items():
        reasons[reason] = mask & ~stopped
        stopped = stopped | mask
    if not with_sigma:
        return np.zeros((*stopped.shape, 0)), ~stopped, spot.snr, reasons
    variance = interferometer.blending_factor(np.where(stopped, 2.0, spot.beams))
    for _, beams in between:
        variance = variance * interferometer.blending_factor(np.where(stopped, 2.0, beams))
    blend, safe = np.sqrt(variance), np.maximum(spot.snr, 1e-9)
    floor = view.receiver.position_floor_beam
    sigma = np.stack(
        [
            np.where(stopped, np.inf, interferometer.position_error(beam, safe, spot.size_mas, floor) * blend)
            for beam in (view.track.beam_major_mas, view.track.beam_minor_mas)
        ],
        axis=-1,
    )
    return sigma, ~stopped, spot.snr, reasons
