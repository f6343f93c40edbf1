"""The observation model of one target: the only place where parameters become observables.

``observe`` is called by the forecast, by the planner's information and by any likelihood; ``derivatives`` is its
numerical derivative. Shapes: theta (..., P), mjd (T,), observables (..., T, M), derivatives (..., T, M, P).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from planner.campaign.array_setups import companions
from planner.campaign.records import Arclet, Campaign, Knot, Pair, Ring, SetupRef, Target
from planner.errors import InputError
from planner.prediction.arclets import ArcletModel, build_arclet
from planner.prediction.build_jets import build_jets
from planner.prediction.coordinates import (
    JointPrior,
    Layout,
    Number,
    named_seed,
    prior_belief,
    prior_covariance,
    standard,
)
from planner.prediction.knots import KnotModel, PairModel, Wander
from planner.prediction.rings import RingModel, SetupNuisance, build_ring
from planner.records import Belief, Floats, Ints
from planner.units import mjd_of_date

FeatureModel = RingModel | ArcletModel | KnotModel | PairModel

# Central differences with this share of the prior width: truncation about 1e-8 of the derivative for curves that
# bend over a prior width, rounding about 1e-12 / 1e-4; tests/prediction compares with Richardson extrapolation.
STEP = 1e-4


@dataclass(frozen=True)
class TargetModel:
    """A target's features and the coordinates they share."""

    target: Target
    blocks: tuple[JointPrior, ...]
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
            if isinstance(feature, KnotModel | PairModel):
                for felt in feature.felt(mjd, setup):
                    self._felt_derivatives(out, feature, theta, mjd, setup, felt)
            parts.append(out)
        return np.concatenate(parts, axis=-2)

    def _felt_derivatives(
        self, out: Floats, feature: FeatureModel, theta: Floats, mjd: Floats, setup: str | None, felt: Ints
    ) -> None:
        """Derivatives by coordinates of which each moment feels one, ``felt`` (T,): all are moved at once."""
        if not len(mjd):
            return
        step = STEP * self.sigma[felt[0]]
        shift = np.zeros(self.size)
        shift[np.unique(felt)] = step
        high, low = feature.observe(theta + shift, mjd, setup), feature.observe(theta - shift, mjd, setup)
        slope = np.moveaxis((high - low) / (2 * step), -2, 0)  # (T, ..., M): numpy puts indexed axes first
        out[..., np.arange(len(mjd)), :, felt] = slope

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
    features = _echoes(target, layout, distance, [s for s in setups if not s.is_array], middle)
    wander = None
    if any(isinstance(f, Knot | Pair) for f in target.features):
        bands = [band for s in campaign.setups for band in (s, *companions(s))]
        ghz = {s.name: s.receiver.ghz for s in bands if s.receiver is not None}
        jets, wander = build_jets(target, layout, distance, beams_mas, ghz, first, last)
        features += jets
    sigma = np.sqrt(np.concatenate([np.diag(b.moments()[1]) for b in layout.blocks]))
    order = {record.name: i for i, record in enumerate(target.features)}
    features.sort(key=lambda f: order[f.name])
    return TargetModel(target, tuple(layout.blocks), tuple(features), wander, distance, sigma, middle)


def _echoes(
    target: Target, layout: Layout, distance: Number | None, cameras: list[SetupRef], middle: float
) -> list[FeatureModel]:
    """Rings and arclets, with what they share: the outburst's clock, and scale and centring of each camera."""
    records = [f for f in target.features if isinstance(f, Ring | Arclet)]
    rings = [f for f in records if isinstance(f, Ring)]
    if not records:
        return []
    clock = Number(None, False, 0.0)
    if rings:
        if target.outburst is None:
            raise InputError("a ring needs an outburst", place=target.source.place(), field="features")
        sigma_days = target.outburst.peak.sigma_days
        if sigma_days > 0:
            block = standard("outburst clock", "d", sigma_days, why="width of the date of the peak")
            clock = Number(layout.add(block)[0], False, 0.0)
    setups = _setup_nuisances(target, layout, cameras, scales=bool(rings))
    filters = {s.name: s.camera.filter for s in cameras if s.camera is not None}
    found: list[FeatureModel] = []
    for record in records:
        if isinstance(record, Ring):
            found.append(build_ring(record, target, layout, distance=distance, clock=clock, setups=setups,
                                    middle_mjd=middle, filters=filters))  # fmt: skip
        else:
            assert distance is not None
            centres = {name: (s.centre_east, s.centre_north) for name, s in setups.items()}
            found.append(build_arclet(record, target, layout, distance=distance, centres=centres))
    return found


def _setup_nuisances(
    target: Target, layout: Layout, cameras: list[SetupRef], *, scales: bool
) -> dict[str, SetupNuisance]:
    """Scale error and centre offset of each camera; arclets alone have no use for the scale (-1)."""
    nuisance, setups = target.nuisances, {}
    for setup in cameras:
        scale = -1
        if scales:
            block = standard(f"{setup.name}/plate scale", "", nuisance.plate_scale_sigma, why="setup's plate scale")
            (scale,) = layout.add(block)
        axes = [
            layout.add(standard(f"{setup.name}/centre {axis}", "arcsec", nuisance.centre_sigma_arcsec, why="centring"))[
                0
            ]
            for axis in ("east", "north")
        ]
        setups[setup.name] = SetupNuisance(scale, axes[0], axes[1])
    return setups
