"""How likely measurements are, from the one observation model and the one error model that plans are made with.

The residuals of a look are normal with the covariance R' diag(sigma^2) R of ``look_errors``; looks are independent
given the parameters, because everything they share (core wander, plate scale, ...) is a coordinate. Shapes: N draws,
M observables of the target.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from planner.campaign.records import SetupRef
from planner.prediction.look import look_errors
from planner.prediction.look_rings import CameraSky
from planner.prediction.model import TargetModel
from planner.records import Floats, Track, lock

LN_2PI = float(np.log(2.0 * np.pi))


@dataclass(frozen=True)
class Measurement:
    """One look as it was measured."""

    setup: str
    mjd: float
    values: Floats  # (M,) in the unit of the observables; nan for what was not measured
    sigma: Floats | None = None  # (M,) errors that came with the values; None: those of the error model
    sky: CameraSky | None = None  # conditions of a camera look (fields (1,)); needed without own errors
    seconds: float | None = None  # shutter-open time of a camera look

    def __post_init__(self) -> None:
        lock(self)
        if self.sigma is not None:
            known = np.isfinite(self.values)
            bad = ~(np.asarray(self.sigma)[known] > 0)
            if self.sigma.shape != self.values.shape or bad.any():
                raise ValueError(f"measurement at MJD {self.mjd:g}: each measured value needs an error above 0")


def log_likelihood(
    model: TargetModel,
    theta: Floats,
    measurements: Sequence[Measurement],
    setups: Mapping[str, SetupRef],
    tracks: Mapping[tuple[str, str], Track],
) -> Floats:
    """Logarithm of the chance density of all measurements in each draw, (N,).

    ``theta``: (N, P); ``setups``: by full name; ``tracks``: by (target, setup), for arrays. -inf in draws where a
    measured value has no counterpart: the feature is not there, or (without own errors) could not be measured.
    """
    total = np.zeros(len(theta))
    for one in measurements:
        total = total + _one_look(model, theta, one, setups[one.setup], tracks.get((model.target.name, one.setup)))
    return total


def _one_look(model: TargetModel, theta: Floats, one: Measurement, setup: SetupRef, track: Track | None) -> Floats:
    mjd = np.array([one.mjd])
    known = np.flatnonzero(np.isfinite(one.values))
    if not len(known):
        return np.zeros(len(theta))
    residual = one.values[known] - model.observe(theta, mjd, one.setup)[:, 0, known]
    if one.sigma is not None:
        return independent(residual, np.broadcast_to(one.sigma[known], residual.shape))
    seconds = None if one.seconds is None else np.array([one.seconds])
    look = look_errors(model, theta, mjd, setup, sky=one.sky, seconds=seconds, track=track)
    sigma = look.sigma[:, 0]
    if _separate(look.rotation, known):
        # what was measured together is a set of whole rotated axes: no matrix is needed
        part = look.rotation[np.ix_(known, known)]
        return independent(residual @ part.T, sigma[:, known])
    return correlated(residual, look.rotation, sigma, known)


def _separate(rotation: Floats, known: np.ndarray) -> bool:
    """True when the measured observables are rotated among themselves only."""
    rest = np.setdiff1d(np.arange(len(rotation)), known)
    return not rotation[np.ix_(known, rest)].any() and not rotation[np.ix_(rest, known)].any()


def independent(residual: Floats, sigma: Floats) -> Floats:
    """Log density of independent normal residuals (N, K) with errors (N, K); -inf where any error is inf or nan."""
    there = np.isfinite(residual) & np.isfinite(sigma)
    pull = np.where(there, residual, 0.0) / np.where(there, sigma, 1.0)
    terms = -0.5 * (pull**2 + LN_2PI) - np.log(np.where(there, sigma, 1.0))
    return np.where(there.all(axis=-1), terms.sum(axis=-1), -np.inf)


def correlated(residual: Floats, rotation: Floats, sigma: Floats, known: np.ndarray) -> Floats:
    """Log density of residuals (N, K) of the observables ``known`` under the covariance R' diag(sigma^2) R.

    By the Cholesky factor of the K x K covariance, never its inverse.
    """
    there = np.isfinite(residual).all(axis=-1)
    turned = rotation[:, known]  # (M, K): only axes that reach a measured value count
    reach = np.abs(turned).max(axis=1) > 0
    there &= np.isfinite(sigma[:, reach]).all(axis=-1)
    found = np.full(len(residual), -np.inf)
    if there.any():
        scaled = sigma[there][:, reach, None] * turned[reach]
        factor = np.linalg.cholesky(scaled.transpose(0, 2, 1) @ scaled)
        pull = np.linalg.solve(factor, residual[there][..., None])[..., 0]
        size = np.log(np.diagonal(factor, axis1=1, axis2=2)).sum(axis=-1)
        found[there] = -0.5 * ((pull**2).sum(axis=-1) + LN_2PI * len(known)) - size
    return found
