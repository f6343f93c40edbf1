"""What a belief says of every quantity that a goal could ask for."""

from __future__ import annotations

import numpy as np

from planner.campaign.quantities import QUANTITIES as NAMES
from planner.prediction.knots import KnotModel
from planner.prediction.model import FeatureModel, TargetModel
from planner.prediction.quantities import QUANTITIES
from planner.records import BAND_SHARES, Derived, Floats

DATES = ("core_crossing", "ejection")  # kept as MJD; their tolerance is in days


def derived_of(model: TargetModel, theta: Floats) -> tuple[Derived, ...]:
    """Bands of the quantities of each feature's kind at draws (N, P); those without a value in any draw are left out.

    Quantiles are over the draws in which the quantity exists (a pair farther away than its two speeds allow has no
    true speed); the share of them stands beside.
    """
    found = []
    for feature in model.features:
        for (kind, name), read in QUANTITIES.items():
            if kind != feature.kind or not _has(feature, name):
                continue
            with np.errstate(invalid="ignore", divide="ignore"):
                values = np.asarray(read(model, feature, theta), dtype=float)
            there = values[np.isfinite(values)]
            if not len(there):
                continue
            unit = "MJD" if name in DATES else NAMES[name].unit
            share = len(there) / len(values)
            found.append(Derived(feature.name, name, unit, np.quantile(there, BAND_SHARES), share))
    return tuple(found)


def _has(feature: FeatureModel, name: str) -> bool:
    """True when this ring's shape of dust, or this knot's motion, has the quantity at all."""
    if isinstance(feature, KnotModel):
        return name in feature.record.motion.quantities
    shapes = NAMES[name].shapes
    dust = getattr(feature.record, "dust", None)
    return not shapes or dust is None or dust.shape in shapes
