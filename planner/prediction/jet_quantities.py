"""Quantities of jets that a goal may ask for: (model, feature, theta (N, P)) to (N,).

nan where the kind of motion does not have the quantity; goals for such a one are refused when the file is read.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from planner.physics import jet
from planner.prediction.knots import KnotModel, PairModel
from planner.prediction.model import FeatureModel, Quantity, TargetModel
from planner.prediction.paths import IntrinsicPath, NozzlePath, StationaryPath
from planner.prediction.scale import astropy_cosmology, build_scale
from planner.records import Floats

__all__ = ["JET_QUANTITIES", "astropy_cosmology"]


def _knot(read: Callable[[TargetModel, KnotModel, Floats], Floats]) -> Quantity:
    def value(model: TargetModel, feature: FeatureModel, theta: Floats) -> Floats:
        assert isinstance(feature, KnotModel)
        return np.asarray(read(model, feature, theta), dtype=float)

    return value


def _pair(read: Callable[[TargetModel, PairModel, Floats], Floats]) -> Quantity:
    def value(model: TargetModel, feature: FeatureModel, theta: Floats) -> Floats:
        assert isinstance(feature, PairModel)
        return np.asarray(read(model, feature, theta), dtype=float)

    return value


# ------------------------------------------------------------------ knots


def _position_angle(feature: KnotModel, theta: Floats) -> Floats:
    """Of the motion (stationary: of the place), within 180 degrees of the prior's median: no wrap cuts a belief."""
    path = feature.path
    toward = path.mean_mas(theta) if isinstance(path, StationaryPath) else path.velocity_mas_yr(theta)
    home = path.home_pa_deg + (180.0 if getattr(path, "side", 1) == -1 else 0.0)
    raw = np.degrees(np.arctan2(toward[..., 0], toward[..., 1]))
    return home + (raw - home + 180.0) % 360.0 - 180.0


def _apparent_c(model: TargetModel, feature: KnotModel, theta: Floats) -> Floats:
    if feature.stationary:
        return np.full(theta.shape[:-1], np.nan)
    return feature.speed_mas_yr(theta) / build_scale(model.target, model.distance).mas_yr_per_c(theta)[..., 0]


def _speed(feature: KnotModel, theta: Floats) -> Floats:
    return np.full(theta.shape[:-1], np.nan) if feature.stationary else feature.speed_mas_yr(theta)


def _true(feature: KnotModel, theta: Floats, read: Callable[[IntrinsicPath | NozzlePath], Floats]) -> Floats:
    """A number of the motions that know true speed and angle."""
    if not isinstance(feature.path, IntrinsicPath | NozzlePath):
        return np.full(theta.shape[:-1], np.nan)
    return read(feature.path)[..., 0]


def _nozzle(feature: KnotModel, theta: Floats, read: Callable[[NozzlePath], Floats]) -> Floats:
    if not isinstance(feature.path, NozzlePath):
        return np.full(theta.shape[:-1], np.nan)
    return read(feature.path)[..., 0]


def _start(feature: KnotModel, theta: Floats, quantity: str) -> Floats:
    if quantity not in feature.record.motion.quantities:
        return np.full(theta.shape[:-1], np.nan)
    return feature.crossing_mjd(theta)[..., 0]


def _separation(feature: KnotModel, theta: Floats) -> Floats:
    if not isinstance(feature.path, StationaryPath):
        return np.full(theta.shape[:-1], np.nan)
    return feature.path.separation.value(theta)[..., 0]


# ------------------------------------------------------------------ pairs


def _rates(feature: PairModel, theta: Floats) -> tuple[Floats, Floats]:
    return feature.approaching.value(theta)[..., 0], feature.receding.value(theta)[..., 0]


def _two_sided(model: TargetModel, feature: PairModel, theta: Floats) -> jet.TwoSided:
    assert model.distance is not None
    near, far = _rates(feature, theta)
    return jet.two_sided(near, far, model.distance.value(theta)[..., 0] / 1e3)


JET_QUANTITIES: dict[tuple[str, str], Quantity] = {
    ("knot", "apparent_speed_c"): _knot(_apparent_c),
    ("knot", "speed_mas_yr"): _knot(lambda m, f, th: _speed(f, th)),
    ("knot", "pa_deg"): _knot(lambda m, f, th: _position_angle(f, th)),
    ("knot", "core_crossing"): _knot(lambda m, f, th: _start(f, th, "core_crossing")),
    ("knot", "ejection"): _knot(lambda m, f, th: _start(f, th, "ejection")),
    ("knot", "min_lorentz_factor"): _knot(lambda m, f, th: jet.least_lorentz_factor(_apparent_c(m, f, th))),
    ("knot", "largest_angle_deg"): _knot(lambda m, f, th: jet.largest_angle_deg(_apparent_c(m, f, th))),
    ("knot", "beta"): _knot(lambda m, f, th: _true(f, th, lambda p: p.beta(th))),
    ("knot", "angle_deg"): _knot(lambda m, f, th: _true(f, th, lambda p: p.angle_deg(th))),
    ("knot", "lorentz_factor"): _knot(lambda m, f, th: _true(f, th, lambda p: np.cosh(p.rapidity.value(th)))),
    ("knot", "doppler_factor"): _knot(lambda m, f, th: f.doppler(th)[..., 0]),
    ("knot", "separation_mas"): _knot(lambda m, f, th: _separation(f, th)),
    ("knot", "period_days"): _knot(lambda m, f, th: _nozzle(f, th, lambda p: p.period.value(th))),
    ("knot", "half_angle_deg"): _knot(lambda m, f, th: _nozzle(f, th, lambda p: p.half_angle.value(th))),
    ("knot", "inclination_deg"): _knot(lambda m, f, th: _nozzle(f, th, lambda p: p.inclination.value(th))),
    ("pair", "beta_cos"): _pair(lambda m, f, th: f.beta_cos(th)[..., 0]),
    ("pair", "approaching_mas_d"): _pair(lambda m, f, th: _rates(f, th)[0]),
    ("pair", "receding_mas_d"): _pair(lambda m, f, th: _rates(f, th)[1]),
    ("pair", "ejection"): _pair(lambda m, f, th: f.ejection_mjd(th)[..., 0]),
    ("pair", "pa_deg"): _pair(lambda m, f, th: f.pa.value(th)[..., 0]),
    ("pair", "largest_distance_kpc"): _pair(lambda m, f, th: jet.two_sided(*_rates(f, th), 1.0).largest_distance_kpc),
    ("pair", "angle_deg"): _pair(lambda m, f, th: _two_sided(m, f, th).angle_deg),
    ("pair", "beta"): _pair(lambda m, f, th: _two_sided(m, f, th).beta),
}
