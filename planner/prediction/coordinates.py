"""Coordinates of a belief: well-behaved forms of what the user's prior laws speak of.

A block is a small set of coordinates with a joint prior: one law and its coordinate (the logarithm of a positive
number, else the number itself), or the speed and position angle of a knot turned into two velocity components.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from planner.campaign.laws import Fixed, Law, Normal
from planner.records import Belief, Floats, Parameter

# Coordinates whose law is a fixed number are kept out of the parameter vector: they are constants of the model.
_GRID = 4096  # quantile midpoints for the prior moments of one law; relative error of a variance below 1e-3
_SIDE = 96  # the same per axis for two laws at once


@dataclass(frozen=True)
class JointPrior:
    """Coordinates with a joint prior: ``turn`` maps law values (..., L) to coordinates (..., C)."""

    names: tuple[str, ...]  # C
    units: tuple[str, ...]
    laws: tuple[Law, ...]  # L
    turn: Callable[[Floats], Floats]
    nuisance: bool
    why: str

    def moments(self) -> tuple[Floats, Floats]:
        """Prior mean (C,) and covariance (C, C) of the coordinates, from a grid of quantiles."""
        side = _GRID if len(self.laws) == 1 else _SIDE
        shares = (np.arange(side) + 0.5) / side
        axes = [law.quantile(shares) for law in self.laws]
        values = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, len(axes))
        coordinates = self.turn(values)
        return coordinates.mean(axis=0), np.atleast_2d(np.cov(coordinates, rowvar=False, bias=True))


def single(name: str, unit: str, law: Law, *, nuisance: bool, why: str) -> JointPrior:
    """Return the block of one law: a law of positive numbers is sampled by its logarithm."""
    if law.positive:
        return JointPrior((f"ln {name}",), (f"ln({unit})" if unit else "",), (law,), np.log, nuisance, why)
    return JointPrior((name,), (unit,), (law,), _same, nuisance, why)


def standard(name: str, unit: str, sigma: float, *, mean: float = 0.0, why: str, nuisance: bool = True) -> JointPrior:
    """Return a normal nuisance of a stated width."""
    return single(name, unit, Normal(mean=mean, sigma=sigma), nuisance=nuisance, why=why)


def _same(values: Floats) -> Floats:
    return values


class Layout:
    """Collects blocks while a model is built; hands out the index of each coordinate.

    A fixed law takes no coordinate: its index is None and its value is kept by the caller.
    """

    def __init__(self) -> None:
        self.blocks: list[JointPrior] = []
        self.size = 0

    def add(self, block: JointPrior) -> tuple[int, ...]:
        """Add a block and return the indices of its coordinates."""
        first = self.size
        self.blocks.append(block)
        self.size += len(block.names)
        return tuple(range(first, self.size))

    def add_law(
        self, name: str, unit: str, law: Law, *, why: str = "the target's file", nuisance: bool = False
    ) -> Number:
        """Add one law; a fixed one becomes a constant."""
        if isinstance(law, Fixed):
            return Number(None, law.positive, law.value)
        (index,) = self.add(single(name, unit, law, nuisance=nuisance, why=why))
        return Number(index, law.positive, float("nan"))


@dataclass(frozen=True)
class Number:
    """Where one number lives: a coordinate (its logarithm if ``log``) or a constant."""

    index: int | None
    log: bool
    constant: float

    def value(self, theta: Floats) -> Floats:
        """Value in natural units, theta (..., P) -> (..., 1) so that time can be the last axis."""
        if self.index is None:
            return np.full((*theta.shape[:-1], 1), self.constant)
        coordinate = theta[..., self.index, None]
        return np.exp(coordinate) if self.log else coordinate


def parameters(blocks: Sequence[JointPrior]) -> tuple[Parameter, ...]:
    """Return the description of every coordinate with its prior width."""
    found = []
    for block in blocks:
        _, covariance = block.moments()
        for i, (name, unit) in enumerate(zip(block.names, block.units, strict=True)):
            found.append(Parameter(name, unit, float(np.sqrt(covariance[i, i])), block.nuisance, block.why))
    return tuple(found)


def prior_covariance(blocks: Sequence[JointPrior]) -> Floats:
    """Prior covariance (P, P): blocks are independent of one another."""
    from scipy.linalg import block_diag

    return np.asarray(block_diag(*(block.moments()[1] for block in blocks)), dtype=float)


def prior_draws(blocks: Sequence[JointPrior], count: int, seed: np.random.SeedSequence) -> Floats:
    """Scrambled Sobol draws through the prior laws: (count, P) coordinates.

    Source: Owen (1998) scrambling as implemented in scipy.stats.qmc.
    """
    from scipy.stats import qmc

    dimensions = sum(len(block.laws) for block in blocks)
    sampler = qmc.Sobol(dimensions, scramble=True, rng=np.random.default_rng(seed))
    shares = sampler.random(int(2 ** np.ceil(np.log2(count))))[:count]
    shares = np.clip(shares, 1e-9, 1 - 1e-9)  # the ends of a law without limits are at infinity
    columns, at = [], 0
    for block in blocks:
        values = np.stack([law.quantile(shares[:, at + i]) for i, law in enumerate(block.laws)], axis=-1)
        columns.append(block.turn(values))
        at += len(block.laws)
    return np.concatenate(columns, axis=-1)


def prior_belief(target: str, blocks: Sequence[JointPrior], count: int, seed: np.random.SeedSequence) -> Belief:
    """Return the belief before any epoch."""
    draws = prior_draws(blocks, count, seed)
    weights = np.full(count, 1.0 / count)
    return Belief(target, parameters(blocks), draws, weights, prior_covariance(blocks))


def named_seed(seed: int, *names: str) -> np.random.SeedSequence:
    """Return the stream of one purpose, so that adding a stage leaves all others unchanged."""
    import zlib

    return np.random.SeedSequence([seed, *(zlib.crc32(name.encode()) for name in names)])
