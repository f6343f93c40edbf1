"""The observation model of one target: the only place where parameters become observables.

``observe`` is called by the forecast, by the planner's information and by any likelihood; ``derivatives`` is its
numerical derivative. Shapes: theta (..., P), mjd (T,), observables (..., T, M), derivatives (..., T, M, P).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from planner.campaign.records import Campaign, Knot, Pair, Ring, Target
from planner.errors import InputError
from planner.prediction.coordinates import Block, Layout, Number, named_seed, prior_belief, prior_covariance, standard
from planner.prediction.knots import KnotModel, PairModel, Wander, build_knot, build_pair, build_wander
from planner.prediction.rings import RingModel, SetupNuisance, build_ring
from planner.records import Belief, Floats
from planner.units import mjd_of_date

FeatureModel = RingModel | KnotModel | PairModel

# Central differences with this share of the prior width: truncation about 1e-8 of the derivative for curves that
# bend over a prior width, rounding about 1e-12 / 1e-4; tests/prediction compares with Richardson extrapolation.
STEP = 1e-4


@dataclass(frozen=True)
class TargetModel:
    """A target's features and the coordinates they share."""

    target: Target
    blocks: tuple[Block, ...]
    features: tuple[FeatureModel, ...]
    wander: Wander | None
    distance: Number | None
    sigma: Floats  # (P,) prior widths
    middle_mjd: float

    @property
    def size(self) -> int:
        """Number of coordinates, P."""
        return len(self.sigma)

    @property
    def belief_covariance(self) -> Floats:
        """Prior covariance (P, P) of the coordinates."""
        return prior_covariance(self.blocks)

    def feature(self, name: str) -> FeatureModel:
        """Return a feature by name."""
        return next(f for f in self.features if f.name == name)

    def observe(self, theta: Floats, mjd: Floats, setup: str | None = None) -> Floats:
        """Every observable of every feature, (..., T, M): rings in arcsec, knots in mas; nan where there is none."""
        return np.concatenate([f.observe(theta, mjd, setup) for f in self.features], axis=-1)

    def derivatives(self, theta: Floats, mjd: Floats, setup: str | None = None) -> Floats:
        """Derivatives of ``observe``, (..., T, M, P), by central differences in each coordinate."""
        parts = []
        for feature in self.features:
            width = len(feature.observables)
            out = np.zeros((*theta.shape[:-1], len(mjd), width, self.size))
            for j in feature.depends(setup):
                step = STEP * self.sigma[j]
                shift = np.zeros(self.size)
                shift[j] = step
                high = feature.observe(theta + shift, mjd, setup)
                low = feature.observe(theta - shift, mjd, setup)
                out[..., j] = (high - low) / (2 * step)
            if isinstance(feature, KnotModel | PairModel) and setup is not None and setup in feature.beams:
                self._wander_derivatives(out, feature, mjd, feature.beams[setup])
            parts.append(out)
        return np.concatenate(parts, axis=-2)

    def _wander_derivatives(self, out: Floats, feature: KnotModel | PairModel, mjd: Floats, beam_mas: float) -> None:
        """Exact derivatives by the core's offsets: each moment feels one bin, so differences would be wasted."""
        assert self.wander is not None
        where = self.wander.bin_of(mjd)
        times = np.arange(len(mjd))
        for m, name in enumerate(feature.observables):
            index = self.wander.east if name.endswith("east") else self.wander.north
            out[..., times, m, index[where]] += beam_mas

    def belief(self, count: int, seed: int, purpose: str) -> Belief:
        """Prior belief with ``count`` draws from the stream named ``purpose``."""
        return prior_belief(self.target.name, self.blocks, count, named_seed(seed, self.target.name, purpose))


Quantity = Callable[[TargetModel, FeatureModel, Floats], Floats]  # (model, feature, theta (N, P)) -> (N,)


def build_model(campaign: Campaign, target: Target, beams_mas: Mapping[str, float]) -> TargetModel:
    """Build a target's model.

    ``beams_mas``: geometric mean beam of each array setup that sees the target (from the sky and the stations).
    """
    layout = Layout()
    nights = campaign.nights
    first, last = mjd_of_date(nights[0]), mjd_of_date(nights[-1]) + 1
    middle = 0.5 * (first + last)
    distance = layout.add_law("distance_pc", "pc", target.distance_pc) if target.distance_pc is not None else None
    setups = [s for s in campaign.setups if any(
        a.setup == s.name and a.programme == campaign.programme_of(target).name for a in campaign.file.allocations
    )]  # fmt: skip
    rings = [f for f in target.features if isinstance(f, Ring)]
    features: list[FeatureModel] = []
    if rings:
        cameras = [s.name for s in setups if not s.is_array]
        features += _rings(target, rings, layout, distance, cameras, middle)
    jets = [f for f in target.features if isinstance(f, Knot | Pair)]
    wander = None
    if jets:
        wander = build_wander(layout, target.nuisances.core_wander_beam, first, last)
        for record in jets:
            if isinstance(record, Knot):
                features.append(build_knot(record, target, layout, wander=wander, beams=beams_mas, middle_mjd=middle))
            else:
                features.append(build_pair(record, target, layout, wander=wander, beams=beams_mas))
    sigma = np.sqrt(np.concatenate([np.diag(b.moments()[1]) for b in layout.blocks]))
    order = {record.name: i for i, record in enumerate(target.features)}
    features.sort(key=lambda f: order[f.name])
    return TargetModel(target, tuple(layout.blocks), tuple(features), wander, distance, sigma, middle)


def _rings(
    target: Target, rings: list[Ring], layout: Layout, distance: Number | None, cameras: list[str], middle: float
) -> list[FeatureModel]:
    if target.outburst is None or distance is None:
        raise InputError("a ring needs outburst and distance_pc", place=target.source.place(), field="features")
    sigma_days = target.outburst.peak.sigma_days
    clock = Number(None, False, 0.0)
    if sigma_days > 0:
        clock = Number(
            layout.add(standard("outburst clock", "d", sigma_days, why="width of the date of the peak"))[0], False, 0.0
        )
    nuisance = target.nuisances
    setups = {}
    for name in cameras:
        scale = layout.add(standard(f"{name}/plate scale", "", nuisance.plate_scale_sigma, why="setup's plate scale"))
        axes = [
            layout.add(standard(f"{name}/centre {axis}", "arcsec", nuisance.centre_sigma_arcsec, why="centring"))[0]
            for axis in ("east", "north")
        ]
        setups[name] = SetupNuisance(scale[0], axes[0], axes[1])
    return [
        build_ring(r, target, layout, distance=distance, clock=clock, setups=setups, middle_mjd=middle) for r in rings
    ]
