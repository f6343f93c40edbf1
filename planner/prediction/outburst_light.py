"""From an outburst as written to the course of its light in each filter, and the phase that a radius refers to."""

from __future__ import annotations

from functools import lru_cache

import numpy as np

from planner.campaign.records import Outburst as OutburstRecord
from planner.campaign.records import OwnGrains, Ring
from planner.physics import dust, light_curve
from planner.physics.light_curve import Course


def course_of(outburst: OutburstRecord, filter_name: str) -> Course:
    """Course of the light in a filter, days counted from the date of the peak as observed.

    A filter without a light curve of its own borrows that of the filter nearest to it in the table's order.
    """
    if outburst.curve is not None:
        found = outburst.curve_of(filter_name) or outburst.curve_of(_nearest_filter(filter_name, outburst))
        assert found is not None
        return light_curve.magnitudes(*found)
    if outburst.pulses:
        return _plateaus(tuple((p.after_days, p.share, p.lasting_days) for p in outburst.pulses))
    assert outburst.lasting_days is not None
    return _plateaus(((0.0, 1.0, outburst.lasting_days),))


@lru_cache(maxsize=256)
def _plateaus(pulses: tuple[tuple[float, float, float], ...]) -> Course:
    return light_curve.plateaus(*np.array(pulses).T)


def _nearest_filter(filter_name: str, outburst: OutburstRecord) -> str:
    assert outburst.curve is not None
    micron = {name: row.wavelength_micron for name, row in dust.MILKY_WAY.items()}
    return min(outburst.curve.filters, key=lambda name: (abs(micron[name] - micron[filter_name]), name))


def peak_mag(outburst: OutburstRecord, filter_name: str) -> float | None:
    """Magnitude at the peak: as written, else the brightest of the light curve; None if neither is known."""
    if filter_name in outburst.peak_mag:
        return outburst.peak_mag[filter_name]
    found = outburst.curve_of(filter_name)
    return min(found[1]) if found else None


def phase_days(ring: Ring, outburst: OutburstRecord, filter_name: str) -> float:
    """When the light that a ring's radius refers to left the source, counted from the peak, in observed days.

    The outer edge of a growing ring shows the beginning of the outburst, the ridge its peak, the mean its
    fluence-weighted mean date. (On a shrinking shell ring the beginning is at the inner edge.)
    """
    light = course_of(outburst, filter_name)
    return {"outer_edge": light.begin, "ridge": light.ridge, "mean": light.mean}[ring.radius_of]


def grains_of(ring: Ring, filter_name: str) -> tuple[float, float]:
    """Albedo and mean cosine of the scattering angle in a filter."""
    grains = ring.dust.grains
    if isinstance(grains, OwnGrains):
        return grains.albedo, grains.g
    return dust.grains(grains, filter_name)
