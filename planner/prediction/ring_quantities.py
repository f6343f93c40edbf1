"""Quantities of echoes that a goal may ask for: (model, feature, theta (N, P)) to (N,).

A quantity that belongs to one shape of dust is refused for others when the campaign is read.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import TypeVar

import numpy as np

from planner.prediction.arclets import ArcletModel
from planner.prediction.model import FeatureModel, Quantity, TargetModel
from planner.prediction.ring_shapes import ScreenShape, SheetShape, ShellShape
from planner.prediction.rings import RingModel
from planner.records import Floats

S = TypeVar("S", SheetShape, ShellShape, ScreenShape)


def _of(kind: type[S], read: Callable[[S, Floats], Floats]) -> Quantity:
    """A quantity of rings on one shape of dust; ``read`` gives (N, 1)."""

    def value(model: TargetModel, feature: FeatureModel, theta: Floats) -> Floats:
        assert isinstance(feature, RingModel)
        assert isinstance(feature.shape, kind)
        return read(feature.shape, theta)[..., 0]

    return value


def _arclet(read: Callable[[ArcletModel, Floats], Floats]) -> Quantity:
    def value(model: TargetModel, feature: FeatureModel, theta: Floats) -> Floats:
        assert isinstance(feature, ArcletModel)
        return read(feature, theta)[..., 0]

    return value


def _distance(model: TargetModel, feature: FeatureModel, theta: Floats) -> Floats:
    assert model.distance is not None
    return model.distance.value(theta)[..., 0]


def _tilt_deg(sheet: SheetShape, theta: Floats) -> Floats:
    return np.degrees(np.arctan(np.hypot(sheet.slope_east.value(theta), sheet.slope_north.value(theta))))


def _source_direction_deg(arclet: ArcletModel, theta: Floats) -> Floats:
    """Opposite to the arclet's own position angle; the prior's median lies in 0..360, and no belief is cut there."""
    home = arclet.record.position.pa_deg.median() + 180.0
    return arclet.pa.value(theta) + 180.0 - 360.0 * np.floor(home / 360.0)


RING_QUANTITIES: dict[tuple[str, str], Quantity] = {
    ("ring", "depth_pc"): _of(SheetShape, lambda s, th: s.depth.value(th)),
    ("ring", "depth_over_distance2"): _of(SheetShape, lambda s, th: s.depth.value(th) / s.distance.value(th) ** 2),
    ("ring", "distance_pc"): _distance,
    ("ring", "slope_east"): _of(SheetShape, lambda s, th: s.slope_east.value(th)),
    ("ring", "slope_north"): _of(SheetShape, lambda s, th: s.slope_north.value(th)),
    ("ring", "tilt_deg"): _of(SheetShape, _tilt_deg),
    ("ring", "shell_radius_pc"): _of(ShellShape, lambda s, th: s.radius.value(th)),
    ("ring", "dust_distance_pc"): _of(ScreenShape, lambda s, th: s.dust_distance.value(th)),
    ("ring", "source_distance_pc"): _distance,
    ("arclet", "age_yr"): _arclet(lambda f, th: f.age.value(th)),
    ("arclet", "source_direction_deg"): _arclet(_source_direction_deg),
    ("arclet", "distance_pc"): _distance,
}
