"""Quantities of jets that a goal may ask for: (model, feature, theta (N, P)) to (N,)."""

from __future__ import annotations

from collections.abc import Callable
from functools import lru_cache

import numpy as np

from planner.campaign.records import Cosmology
from planner.physics import expansion, jet
from planner.prediction.knots import KnotModel, PairModel
from planner.prediction.model import FeatureModel, Quantity, TargetModel
from planner.records import Floats
from planner.units import YEAR_DAYS


def _knot(read: Callable[[TargetModel, KnotModel, Floats], Floats]) -> Quantity:
    def value(model: TargetModel, feature: FeatureModel, theta: Floats) -> Floats:
        assert isinstance(feature, KnotModel)
        return read(model, feature, theta)

    return value


def _pair(read: Callable[[TargetModel, PairModel, Floats], Floats]) -> Quantity:
    def value(model: TargetModel, feature: FeatureModel, theta: Floats) -> Floats:
        assert isinstance(feature, PairModel)
        return read(model, feature, theta)

    return value


def _speed(feature: KnotModel, theta: Floats) -> Floats:
    return np.hypot(theta[..., feature.velocity[0]], theta[..., feature.velocity[1]])


def _position_angle(feature: KnotModel, theta: Floats) -> Floats:
    """Within 180 degrees of the prior's median, so that no belief is cut in two at the wrap."""
    home = feature.record.motion.pa_deg.median()
    raw = np.degrees(np.arctan2(theta[..., feature.velocity[0]], theta[..., feature.velocity[1]]))
    return home + (raw - home + 180.0) % 360.0 - 180.0


def _apparent_c(model: TargetModel, feature: KnotModel, theta: Floats) -> Floats:
    speed = _speed(feature, theta)
    if model.target.redshift is None:
        assert model.distance is not None
        return jet.transverse_speed_c(speed / YEAR_DAYS, model.distance.value(theta)[..., 0] / 1e3)
    return speed * _speed_per_mas_yr(model)


def _speed_per_mas_yr(model: TargetModel) -> float:
    assert model.target.redshift is not None
    return _speed_at(model.target.redshift, model.target.cosmology)


@lru_cache(maxsize=256)
def _speed_at(redshift: float, numbers: Cosmology) -> float:
    return float(expansion.speed_c(1.0, redshift, astropy_cosmology(numbers)))


@lru_cache(maxsize=64)  # building one costs astropy 60 ms
def astropy_cosmology(numbers: Cosmology) -> object:
    """Return the astropy cosmology of a target's numbers (flat unless omega_lambda is given)."""
    from astropy.cosmology import FlatLambdaCDM, LambdaCDM

    if numbers.omega_lambda is None:
        return FlatLambdaCDM(H0=numbers.h0_km_s_mpc, Om0=numbers.omega_matter)
    return LambdaCDM(H0=numbers.h0_km_s_mpc, Om0=numbers.omega_matter, Ode0=numbers.omega_lambda)


def _rates(feature: PairModel, theta: Floats) -> tuple[Floats, Floats]:
    return feature.approaching.value(theta)[..., 0], feature.receding.value(theta)[..., 0]


def _two_sided(model: TargetModel, feature: PairModel, theta: Floats) -> jet.TwoSided:
    assert model.distance is not None
    near, far = _rates(feature, theta)
    return jet.two_sided(near, far, model.distance.value(theta)[..., 0] / 1e3)


def _beta_cos(feature: PairModel, theta: Floats) -> Floats:
    near, far = _rates(feature, theta)
    return (near - far) / (near + far)


JET_QUANTITIES: dict[tuple[str, str], Quantity] = {
    ("knot", "apparent_speed_c"): _knot(_apparent_c),
    ("knot", "speed_mas_yr"): _knot(lambda m, f, th: _speed(f, th)),
    ("knot", "pa_deg"): _knot(lambda m, f, th: _position_angle(f, th)),
    ("knot", "core_crossing"): _knot(lambda m, f, th: f.crossing_mjd(th)[..., 0]),
    ("knot", "min_lorentz_factor"): _knot(lambda m, f, th: jet.least_lorentz_factor(_apparent_c(m, f, th))),
    ("pair", "beta_cos"): _pair(lambda m, f, th: _beta_cos(f, th)),
    ("pair", "approaching_mas_d"): _pair(lambda m, f, th: _rates(f, th)[0]),
    ("pair", "receding_mas_d"): _pair(lambda m, f, th: _rates(f, th)[1]),
    ("pair", "ejection"): _pair(lambda m, f, th: f.ejection_mjd(th)[..., 0]),
    ("pair", "pa_deg"): _pair(lambda m, f, th: f.pa.value(th)[..., 0]),
    ("pair", "largest_distance_kpc"): _pair(
        lambda m, f, th: np.asarray(jet.two_sided(*_rates(f, th), 1.0).largest_distance_kpc)
    ),
    ("pair", "angle_deg"): _pair(lambda m, f, th: np.asarray(_two_sided(m, f, th).angle_deg)),
    ("pair", "beta"): _pair(lambda m, f, th: np.asarray(_two_sided(m, f, th).beta)),
}
