"""Smooth functions of time from a few well-chosen moments.

An observable of one draw bends slowly over a season. It is computed at the Chebyshev points of the season, where the
polynomial through them is within a factor log(points) of the best possible one (Trefethen, Approximation Theory and
Approximation Practice, 2013), and read off at every night by one matrix product. Each draw is checked at other moments;
a draw that fails, or has no value somewhere, is computed plainly at all nights.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from planner.records import Floats

POINTS = 12
CHECKS = 4  # further moments, between the points
TOLERANCE = 1e-5  # of a value (or of 1 for values below it): far below what a band or a chance can show


def points_and_weights(mjd: Floats, points: int = POINTS) -> tuple[Floats, Floats]:
    """Chebyshev points (K,) over the span of ``mjd`` (T,), and the matrix (K, T) that reads a polynomial off there.

    Barycentric Lagrange formula for Chebyshev points of the second kind (Berrut & Trefethen 2004).
    """
    middle, half = 0.5 * (mjd.max() + mjd.min()), 0.5 * (mjd.max() - mjd.min())
    k = np.arange(points)
    nodes = middle - half * np.cos(np.pi * k / (points - 1))
    sign = np.where(k % 2 == 0, 1.0, -1.0)
    sign[[0, -1]] *= 0.5
    gap = mjd[None, :] - nodes[:, None]
    on = np.isclose(gap, 0.0, atol=1e-9 * max(half, 1.0))
    share = sign[:, None] / np.where(on, 1.0, gap)
    weights = share / share.sum(axis=0)
    hit = on.any(axis=0)
    weights[:, hit] = on[:, hit].astype(float)
    return nodes, weights


def over_nights(
    compute: Callable[[Floats, Floats], tuple[Floats, ...]], theta: Floats, mjd: Floats
) -> tuple[Floats, ...]:
    """Return ``compute(theta, mjd)``, each (N, T), from a few moments where it is smooth.

    ``compute`` returns arrays (N, T'), nan where a draw has no value; it is called with other moments, and with some
    of the draws again at all of ``mjd``.
    """
    if len(mjd) <= 2 * (POINTS + CHECKS):
        return compute(theta, mjd)
    nodes, weights = points_and_weights(mjd)
    between = 0.5 * (nodes[1:] + nodes[:-1])
    checks = between[np.linspace(0, len(between) - 1, CHECKS).astype(int)]
    _, at_checks = points_and_weights(np.concatenate([mjd[[0]], checks, mjd[[-1]]]))
    at = compute(theta, np.concatenate([nodes, checks]))
    good = np.ones(len(theta), bool)
    for values in at:
        with np.errstate(invalid="ignore"):
            miss = np.abs(read_off(values, at_checks[:, 1:-1]) - values[:, POINTS:])
            good &= (miss <= TOLERANCE * np.maximum(np.abs(values[:, POINTS:]), 1.0)).all(axis=1)  # nan fails
    found = tuple(read_off(values, weights) for values in at)
    if not good.all():
        plain = compute(theta[~good], mjd)
        for whole, rows in zip(found, plain, strict=True):
            whole[~good] = rows
    return found


def read_off(values: Floats, weights: Floats) -> Floats:
    """Values (N, K...) at the points turned into values (N, T) elsewhere.

    Plain loops: for so few points the threads of a matrix library cost more than they save, and they would change the
    order of the sums from machine to machine.
    """
    return np.einsum("nk,kt->nt", values[:, :POINTS], weights, optimize=False)
