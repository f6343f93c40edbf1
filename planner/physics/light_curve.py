"""The course of an outburst's light, and what it does to the clock and the width of its echo.

Flux is relative to its peak, times are days from the date that the echo's clock counts from (the peak's).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from planner.errors import DomainError
from planner.physics._numbers import Floats, checked
from planner.records import lock

EDGE_SHARE = 0.1  # an outburst lasts, at its edges, while it is brighter than this share of its peak; our choice
HALF = 0.5
_STEP_DAYS = 1e-6  # a plateau rises and falls within this time: steep, yet a function of time


@dataclass(frozen=True)
class Course:
    """Flux against time, (L,) each, piecewise linear, 0 outside; with its summary in days from the clock's zero."""

    days: Floats
    flux: Floats
    equivalent_days: float  # fluence over peak flux
    half_days: float  # between the first and the last moment above half the peak
    begin: float  # first moment above EDGE_SHARE of the peak
    end: float  # last one
    ridge: float  # the peak
    mean: float  # fluence-weighted

    def __post_init__(self) -> None:
        lock(self)

    @property
    def rise_days(self) -> float:
        """From the beginning to the peak."""
        return self.ridge - self.begin

    @property
    def fall_days(self) -> float:
        """From the peak to the end."""
        return self.end - self.ridge

    def stretched(self, factor: float) -> Course:
        """The same course with all times multiplied by ``factor`` (above 0): another frame's clock."""
        return course(self.days * factor, self.flux)

    def at(self, days: ArrayLike) -> Floats:
        """Flux over peak flux at any times; same shape."""
        return np.interp(np.asarray(days, dtype=np.float64), self.days, self.flux, left=0.0, right=0.0)


def course(days: ArrayLike, flux: ArrayLike) -> Course:
    """Summary of a light curve given as rising days (L,) and fluxes (L,) of any unit, at least 0, L at least 2.

    Exact for the piecewise linear curve through the points. The peak of a level top is its middle.
    Raises DomainError for days that do not rise and for a curve without light.
    """
    t, f = checked("days", days), checked("flux", flux, at_least=0.0)
    if t.size < 2 or t.shape != f.shape or np.any(np.diff(t) <= 0.0):
        raise DomainError("days", t.size, "two or more rising days, one for each flux")
    if not np.any(f > 0.0):
        raise DomainError("flux", 0.0, "a curve with some light in it")
    f = f / f.max()
    step, low, high = np.diff(t), f[:-1], f[1:]
    fluence = float(np.sum(step * (low + high)) / 2.0)
    # first moment of a straight piece: t0 (a+b)/2 h + h^2 (a + 2b)/6
    moment = float(np.sum(t[:-1] * step * (low + high) / 2.0 + step**2 * (low + 2.0 * high) / 6.0))
    top = np.flatnonzero(f >= 1.0 - 1e-12)
    begin, end = _crossings(t, f, EDGE_SHARE)
    rise, fall = _crossings(t, f, HALF)
    return Course(
        t.copy(), f, fluence, fall - rise, begin, end, float(t[top[0]] + t[top[-1]]) / 2.0, moment / fluence
    )  # fmt: skip


def _crossings(t: Floats, f: Floats, level: float) -> tuple[float, float]:
    above = np.flatnonzero(f >= level)
    first, last = int(above[0]), int(above[-1])
    begin, end = t[first], t[last]
    if first > 0:
        begin = t[first - 1] + (level - f[first - 1]) / (f[first] - f[first - 1]) * (t[first] - t[first - 1])
    if last < len(t) - 1:
        end = t[last] + (f[last] - level) / (f[last] - f[last + 1]) * (t[last + 1] - t[last])
    return float(begin), float(end)


def plateaus(middle_days: ArrayLike, share: ArrayLike, lasting_days: ArrayLike) -> Course:
    """Course of an outburst made of plateaus: each has a middle, a share of the fluence, and a length.

    All (K,), share and lasting_days above 0. Overlapping plateaus add up. Raises DomainError.
    """
    middle = np.atleast_1d(checked("middle_days", middle_days))
    part = np.atleast_1d(checked("share", share, above=0.0))
    length = np.atleast_1d(checked("lasting_days", lasting_days, above=0.0))
    edge = np.minimum(_STEP_DAYS, length / 1e3)
    corners = np.stack([middle - length / 2 - edge / 2, middle - length / 2 + edge / 2,
                        middle + length / 2 - edge / 2, middle + length / 2 + edge / 2])  # fmt: skip
    times = np.unique(corners)
    shape = np.array([0.0, 1.0, 1.0, 0.0])
    flux = np.zeros_like(times)
    for k in range(len(middle)):
        flux += part[k] / length[k] * np.interp(times, corners[:, k], shape, left=0.0, right=0.0)
    return course(times, flux)


def magnitudes(days: ArrayLike, mag: ArrayLike) -> Course:
    """Course of a light curve in magnitudes: straight between its points in flux."""
    m = checked("mag", mag)
    return course(days, 10.0 ** (-0.4 * (m - m.min())))
