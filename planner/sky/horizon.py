"""The horizon of a place: lowest altitude by azimuth."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike

from planner.records import Floats


def horizon_deg(points: Sequence[tuple[float, float]], azimuth_deg: ArrayLike) -> Floats:
    """Altitude (degrees) of the horizon at each azimuth, same shape; -90 everywhere if there are no points.

    ``points``: (azimuth, altitude) in degrees, any order; linear between them, round through north.
    """
    azimuth = np.asarray(azimuth_deg, dtype=float)
    if not points:
        return np.full(azimuth.shape, -90.0)
    at, height = np.array(points, dtype=float).T
    return np.interp(azimuth, at, height, period=360.0)
