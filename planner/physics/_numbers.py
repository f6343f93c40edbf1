"""What every formula here does first (check its numbers) and the trigonometry of degrees."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from planner.errors import DomainError

Floats = NDArray[np.float64]


def checked(
    name: str,
    value: ArrayLike,
    *,
    above: float | None = None,
    at_least: float | None = None,
    below: float | None = None,
    at_most: float | None = None,
) -> Floats:
    """Return ``value`` as float64 array, or raise DomainError naming the first number out of bounds.

    nan passes (it means "no ring" or "unknown" and comes out as nan); infinities never do.
    """
    array = np.asarray(value, dtype=np.float64)
    bad = np.isinf(array)
    if above is not None:
        bad = bad | (array <= above)
    if at_least is not None:
        bad = bad | (array < at_least)
    if below is not None:
        bad = bad | (array >= below)
    if at_most is not None:
        bad = bad | (array > at_most)
    if bad.any():
        raise DomainError(name, float(array[bad].flat[0]), _limit(above, at_least, below, at_most))
    return array


def _limit(above: float | None, at_least: float | None, below: float | None, at_most: float | None) -> str:
    words = [
        f"{word} {bound:g}"
        for word, bound in (("above", above), ("at least", at_least), ("below", below), ("at most", at_most))
        if bound is not None
    ]
    return "a finite number" + (" " + " and ".join(words) if words else "")


def plain(value: Any) -> Floats:
    """Turn an array without axes into a number; leave others alone."""
    return np.asarray(value, dtype=np.float64)[()]


def sin_deg(angle_deg: Floats) -> Floats:
    """Sine of an angle in 0..180 deg, exactly 0 at both ends (deg2rad(180) is not pi)."""
    return np.sin(np.deg2rad(np.where(angle_deg > 90.0, 180.0 - angle_deg, angle_deg)))


def cos_deg(angle_deg: Floats) -> Floats:
    """Cosine of an angle in 0..180 deg, exactly 0 at 90 deg."""
    return np.where(
        np.abs(angle_deg - 90.0) < 45.0,
        np.sin(np.deg2rad(90.0 - angle_deg)),
        np.cos(np.deg2rad(angle_deg)),
    )


def half_angle_squares(angle_deg: Floats) -> tuple[Floats, Floats]:
    """Return sin^2 and cos^2 of half an angle: small angles keep all their digits (1 - cos does not)."""
    half = np.deg2rad(angle_deg) / 2.0
    return np.sin(half) ** 2, sin_deg(90.0 - np.minimum(angle_deg, 180.0) / 2.0) ** 2
