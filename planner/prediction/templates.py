"""Templates of difference images: which one a look uses, its noise, and where a ring still overlaps its own image.

Shapes: B draws, T moments.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from planner.campaign.records import Arclet, CameraSetup, Ring, Target, Template
from planner.physics import echo_width
from planner.records import Bools, Floats
from planner.units import mjd_of_date

SELF_DIFFERENCE = 2.0  # polarised light: both Stokes parameters share the time, so each has half of it


@dataclass(frozen=True)
class Subtraction:
    """How the background counts in a look: arguments of the camera's functions, and what is overlapped."""

    sky_counts: float
    template_s: Floats  # (B, T) or (); inf without a listed template
    overlapped: Bools  # (B, T): every listed template still holds part of the ring

    @property
    def noise(self) -> dict[str, Any]:
        """Keyword arguments of ``camera.ring_snr`` and ``camera.ring_seconds``."""
        return {"sky_counts": self.sky_counts, "template_s": self.template_s}


def listed(record: Ring | Arclet, target: Target, setup_name: str, setup: CameraSetup) -> tuple[Template, ...]:
    """Templates of the feature and of its target that fit a setup."""
    every = (*record.templates, *target.templates)
    return tuple(t for t in every if t.setup == setup_name and t.filter == setup.filter)


def separation_days(
    lasting_days: float, equivalent_days: float, width_arcsec: Floats, fwhm_arcsec: Floats, motion_arcsec_day: Floats
) -> Floats:
    """Days until an echo leaves its own image in a difference, (B, T); inf where it stands still, nan without one.

    ``lasting_days``: from the first to the last light of the outburst; ``equivalent_days``: its part of the echo's
    ``width_arcsec``, which is taken out again to find the part of the dust.
    """
    rate = np.abs(motion_arcsec_day)
    moving = rate > 0.0
    safe = np.where(moving, rate, 1.0)
    dust = np.sqrt(np.maximum(width_arcsec**2 - (equivalent_days * safe) ** 2, 0.0))
    days = echo_width.separation_days(lasting_days, dust, fwhm_arcsec, safe)
    return np.where(np.isnan(rate), np.nan, np.where(moving, days, np.inf))


def subtraction(
    record: Ring | Arclet, target: Target, setup_name: str, setup: CameraSetup, mjd: Floats, apart_days: Floats
) -> Subtraction:
    """Return how a look subtracts its background; ``apart_days`` (B, T) as of ``separation_days``.

    Direct imaging: once. Difference imaging without a listed template: one of equal depth is assumed, whatever its
    date. With templates: the deepest of those old (or young) enough that the echo has left its own image.
    """
    nothing = np.zeros(apart_days.shape, dtype=bool)
    if record.direct or not setup.difference_imaging:
        return Subtraction(1.0, np.asarray(np.inf), nothing)
    fitting = listed(record, target, setup_name, setup)
    if not fitting:
        return Subtraction(2.0, np.asarray(np.inf), nothing)
    best = np.zeros(apart_days.shape)
    for template in fitting:
        gap = np.abs(mjd - mjd_of_date(template.on) - 0.5)
        with np.errstate(invalid="ignore"):
            free = gap >= np.where(np.isnan(apart_days), 0.0, apart_days)
        best = np.where(free, np.maximum(best, template.minutes * 60.0), best)
    overlapped = best == 0.0
    deepest = max(template.minutes for template in fitting) * 60.0
    return Subtraction(1.0, np.where(overlapped, deepest, best), overlapped)
