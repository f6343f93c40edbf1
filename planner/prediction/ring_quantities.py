"""Quantities of echoes that a goal may ask for: (model, feature, theta (N, P)) to (N,)."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from planner.prediction.model import FeatureModel, Quantity, TargetModel
from planner.prediction.rings import RingModel
from planner.records import Floats


def _ring(read: Callable[[RingModel, Floats], Floats]) -> Quantity:
    def value(model: TargetModel, feature: FeatureModel, theta: Floats) -> Floats:
        assert isinstance(feature, RingModel)
        return read(feature, theta)

    return value


def _distance(model: TargetModel, feature: FeatureModel, theta: Floats) -> Floats:
    assert model.distance is not None
    return model.distance.value(theta)[..., 0]


RING_QUANTITIES: dict[tuple[str, str], Quantity] = {
    ("ring", "depth_pc"): _ring(lambda f, th: f.depth.value(th)[..., 0]),
    ("ring", "depth_over_distance2"): _ring(lambda f, th: (f.depth.value(th) / f.distance.value(th) ** 2)[..., 0]),
    ("ring", "distance_pc"): _distance,
    ("ring", "slope_east"): _ring(lambda f, th: f.slope_east.value(th)[..., 0]),
    ("ring", "slope_north"): _ring(lambda f, th: f.slope_north.value(th)[..., 0]),
    ("ring", "tilt_deg"): _ring(
        lambda f, th: np.degrees(np.arctan(np.hypot(f.slope_east.value(th), f.slope_north.value(th))))[..., 0]
    ),
}
