"""Quantities a goal may ask for, as functions of a target's coordinates.

Each takes (model, feature, theta (N, P)) and returns (N,) in the unit of the goal. ``Wanted.gradient`` is its
derivative, of the logarithm for percent goals.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from planner.campaign.records import LearnGoal
from planner.prediction.jet_quantities import JET_QUANTITIES
from planner.prediction.knots import KnotModel
from planner.prediction.model import STEP, FeatureModel, Quantity, TargetModel
from planner.prediction.ring_quantities import RING_QUANTITIES
from planner.records import Floats

QUANTITIES: dict[tuple[str, str], Quantity] = {**RING_QUANTITIES, **JET_QUANTITIES}


@dataclass(frozen=True)
class Wanted:
    """A learn goal turned into numbers: its value, whether its logarithm counts, and one standard deviation."""

    feature: FeatureModel
    goal: LearnGoal
    of_logarithm: bool
    sigma: float  # in the logarithm (0.02 for 2 %) or in the quantity's unit

    def value(self, model: TargetModel, theta: Floats) -> Floats:
        """Value (N,) of the quantity, or of its logarithm for a percent goal."""
        value = QUANTITIES[(self.feature.kind, self.goal.learn)](model, self.feature, theta)
        if self.goal.at_ghz is not None and isinstance(self.feature, KnotModel):
            value = self.feature.crossing_mjd(theta, self.goal.at_ghz)[..., 0]
        if not self.of_logarithm:
            return value
        with np.errstate(invalid="ignore", divide="ignore"):
            return np.log(value)

    def gradient(self, model: TargetModel, theta: Floats) -> Floats:
        """Derivative (N, P) of ``value`` by central differences."""
        out = np.zeros(theta.shape)
        for j in range(theta.shape[-1]):
            step = STEP * model.sigma[j]
            shift = np.zeros(theta.shape[-1])
            shift[j] = step
            out[..., j] = (self.value(model, theta + shift) - self.value(model, theta - shift)) / (2 * step)
        return out


def wanted(model: TargetModel, feature: FeatureModel, goal: LearnGoal) -> Wanted:
    """Turn a goal as read into numbers; percent goals count the logarithm."""
    percent = goal.to.unit == "%"
    return Wanted(feature, goal, percent, goal.to.value / 100.0 if percent else goal.to.value)
