"""Apparent motion of relativistic jet knots: one knot, and a pair thrown out in opposite directions.

beta is the speed in units of c; angle_deg lies between velocity and the direction TO the observer (0 =
straight at us, 90 = in the sky plane, above 90 = receding). Apparent speeds are projected on the sky, in c.
Formula of the apparent speed: M. H. Cohen (essay on superluminal motion); Urry & Padovani 1995, appendix A.
The other formulas were derived from it. 1 - beta cos(angle) is always formed as (1 - beta) + 2 beta
sin^2(angle/2), which keeps its digits for fast knots at small angles.

All functions broadcast; a nan that goes in comes out; nan exactly where there is no root.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from planner.physics._numbers import Floats, checked, half_angle_squares, plain, sin_deg
from planner.records import lock
from planner.units import C_AU_PER_DAY

_ROUNDING = 4.0 * np.finfo(np.float64).eps  # what two roundings of an argument can take from a double root


def apparent_speed_c(beta: ArrayLike, angle_deg: ArrayLike) -> Floats:
    """Apparent speed of a knot, b sin/(1 - b cos). beta: 0 to below 1; angle 0 to 180. Raises DomainError."""
    b, angle = _beta(beta), _angle(angle_deg)
    return plain(b * sin_deg(angle) / _lag(b, angle))


def receding_speed_c(beta: ArrayLike, angle_deg: ArrayLike) -> Floats:
    """Apparent speed of the opposite knot, b sin/(1 + b cos). Limits as for ``apparent_speed_c``."""
    return apparent_speed_c(beta, 180.0 - _angle(angle_deg))


def doppler_factor(beta: ArrayLike, angle_deg: ArrayLike) -> Floats:
    """Observed over emitted frequency, redshift left out. Limits as for ``apparent_speed_c``."""
    b, angle = _beta(beta), _angle(angle_deg)
    return plain(_inverse_gamma(b) / _lag(b, angle))


def lorentz_factor(beta: ArrayLike) -> Floats:
    """1/sqrt(1 - beta^2). beta: 0 to below 1. Raises DomainError."""
    return plain(1.0 / _inverse_gamma(_beta(beta)))


def speed_of_lorentz_factor(gamma: ArrayLike) -> Floats:
    """Beta of a Lorentz factor (at least 1). Raises DomainError."""
    g = checked("gamma", gamma, at_least=1.0)
    return plain(np.sqrt((g - 1.0) * (g + 1.0)) / g)


def fastest_apparent_c(beta: ArrayLike) -> Floats:
    """Highest apparent speed over all angles: gamma beta, at cos(angle) = beta. Raises DomainError."""
    b = _beta(beta)
    return plain(b / _inverse_gamma(b))


def fastest_angle_deg(beta: ArrayLike) -> Floats:
    """Angle at which the apparent speed of this beta is highest: cos(angle) = beta. Raises DomainError."""
    b = _beta(beta)
    return plain(np.rad2deg(np.arctan2(_inverse_gamma(b), b)))


def least_beta(apparent_c: ArrayLike) -> Floats:
    """Lowest speed that can look this fast. apparent_c at least 0. Raises DomainError."""
    v = _apparent(apparent_c)
    return plain(v / np.hypot(1.0, v))


def least_lorentz_factor(apparent_c: ArrayLike) -> Floats:
    """Lowest Lorentz factor that can look this fast. apparent_c at least 0. Raises DomainError."""
    return plain(np.hypot(1.0, _apparent(apparent_c)))


def least_speed_angle_deg(apparent_c: ArrayLike) -> Floats:
    """Angle at which the lowest speed looks this fast: cot(angle) = apparent. Raises DomainError."""
    return plain(np.rad2deg(np.arctan2(1.0, _apparent(apparent_c))))


def largest_angle_deg(apparent_c: ArrayLike) -> Floats:
    """Angle that no knot of this apparent speed can reach (beta -> 1): twice the one of least speed."""
    return plain(2.0 * np.asarray(least_speed_angle_deg(apparent_c)))


def beta_of_apparent(apparent_c: ArrayLike, angle_deg: ArrayLike) -> Floats:
    """True speed of a knot of known apparent speed (at least 0) and angle (0 to 180).

    nan where only a speed of c or above would do. Broadcasts. Raises DomainError.
    """
    v, angle = _apparent(apparent_c), _angle(angle_deg)
    sin2, _ = half_angle_squares(angle)
    with np.errstate(divide="ignore", invalid="ignore"):
        # v/(sin + v cos) below 1 exactly when sin > v (1 - cos)
        sine = sin_deg(angle)
        beta = v / (sine + v * (1.0 - 2.0 * sin2))
        allowed = (sine > 2.0 * v * sin2) & (beta < 1.0)
        return plain(np.where((v == 0.0) & (sine > 0.0), 0.0, np.where(allowed, beta, np.nan)))


def angles_deg(beta: ArrayLike, apparent_c: ArrayLike) -> tuple[Floats, Floats]:
    """Both angles at which a knot of this speed shows this apparent speed: (smaller, larger), deg.

    beta: 0 to below 1; apparent_c at least 0. nan, nan where apparent_c is above gamma beta
    (``why_no_angle`` says so in words) and where beta is 0. Both equal where the two roots meet.
    Broadcasts. Raises DomainError.
    """
    b, v = _beta(beta), _apparent(apparent_c)
    vq = v * _inverse_gamma(b)
    with np.errstate(divide="ignore", invalid="ignore"):
        short = b - vq
        # a speed computed as gamma beta must find its root: forgive the rounding of one argument
        short = np.where(np.abs(short) <= _ROUNDING * b, 0.0, short)
        upper = np.where(b > 0.0, b + np.sqrt(short) * np.sqrt(b + vq), np.nan)
        # tangents of the half angles; their product is (1 - b)/(1 + b), so neither is a difference
        large = np.arctan2(upper, v * (1.0 + b))
        small = np.arctan2(v * (1.0 - b), upper)
        return plain(2.0 * np.rad2deg(small)), plain(2.0 * np.rad2deg(large))


def why_no_angle(beta: float, apparent_c: float) -> str:
    """Say why no angle gives this apparent speed ("" if one does): the reason with its numbers."""
    b, v = float(_beta(beta)), float(_apparent(apparent_c))
    if b == 0.0:
        return "a knot at rest (beta 0) shows no motion at any angle"
    if not np.isnan(angles_deg(b, v)[0]):
        return ""
    return (
        f"apparent speed {v:.4g} c is above gamma*beta = {float(fastest_apparent_c(b)):.4g} c, the most that "
        f"beta {b:.6g} can show; it needs beta of at least {float(least_beta(v)):.6g}"
    )


def gamma_and_angle(apparent_c: ArrayLike, doppler: ArrayLike) -> tuple[Floats, Floats]:
    """Lorentz factor and angle (deg) from apparent speed (at least 0) and Doppler factor (above 0).

    Every such pair has exactly one solution. Broadcasts. Raises DomainError.
    """
    v, d = _apparent(apparent_c), checked("doppler", doppler, above=0.0)
    gamma = (v * (v / d) + d + 1.0 / d) / 2.0
    angle = np.rad2deg(np.arctan2(2.0 * v, v**2 + (d - 1.0) * (d + 1.0)))
    return plain(gamma), plain(angle)


def speed_slopes(beta: ArrayLike, angle_deg: ArrayLike) -> tuple[Floats, Floats]:
    """Derivatives of the apparent speed by beta, and by angle (c per radian). Limits as there."""
    b, angle = _beta(beta), _angle(angle_deg)
    lag = _lag(b, angle)
    sin2, _ = half_angle_squares(angle)
    return plain(sin_deg(angle) / lag**2), plain(b * ((1.0 - b) - 2.0 * sin2) / lag**2)


def transverse_speed_c(proper_motion_mas_d: ArrayLike, distance_kpc: ArrayLike) -> Floats:
    """Apparent speed in c of a motion at a distance without redshift: 1 mas at 1 kpc is 1 au exactly.

    distance_kpc above 0. Broadcasts. Raises DomainError.
    """
    mu = checked("proper_motion_mas_d", proper_motion_mas_d)
    return plain(mu * checked("distance_kpc", distance_kpc, above=0.0) / C_AU_PER_DAY)


# ------------------------------------------------------------------ a pair


@dataclass(frozen=True)
class TwoSided:
    """Solution of a pair of equal and opposite knots; all fields have one shape."""

    beta: Floats  # nan where the distance is above the largest possible
    angle_deg: Floats  # of the knot called approaching; same nan
    beta_cos: Floats  # beta times cosine, free of the distance: the lowest possible beta
    largest_distance_kpc: Floats  # where beta would be 1

    def __post_init__(self) -> None:
        lock(self)


def two_sided(approaching_mas_d: ArrayLike, receding_mas_d: ArrayLike, distance_kpc: ArrayLike) -> TwoSided:
    """Speed and angle of a pair from both proper motions (away from the core, above 0) and the distance.

    Assumes equal speeds, opposite directions and one moment of ejection; no redshift (for a far source give
    its transverse comoving distance). Where the distance is above ``largest_distance_kpc`` beta would exceed
    1: beta and angle are nan there (``why_no_pair`` says so). Near that limit beta hardly depends on the
    motions while the Lorentz factor diverges: quote only a lower limit for the latter. Broadcasts.
    Raises DomainError. Mirabel & Rodriguez 1994 (from memory) use the same geometry.
    """
    a, r, d = _pair(approaching_mas_d, receding_mas_d, distance_kpc)
    cosine, sine = (a - r) / (a + r), 2.0 * (d / C_AU_PER_DAY) * a * r / (a + r)
    largest = C_AU_PER_DAY / np.sqrt(a * r)
    possible = d <= largest * (1.0 + _ROUNDING)
    beta = np.where(possible, np.minimum(np.hypot(cosine, sine), 1.0), np.nan)
    angle = np.where(possible, np.rad2deg(np.arctan2(sine, cosine)), np.nan)
    parts = np.broadcast_arrays(beta, angle, np.where(np.isnan(d), np.nan, cosine), largest)
    return TwoSided(*(plain(part) for part in parts))


def why_no_pair(approaching_mas_d: float, receding_mas_d: float, distance_kpc: float) -> str:
    """Say why two motions have no common solution at a distance ("" if they have)."""
    found = two_sided(approaching_mas_d, receding_mas_d, distance_kpc)
    if not np.isnan(found.beta):
        return ""
    return (
        f"distance too large: {distance_kpc:g} kpc is above {float(found.largest_distance_kpc):.4g} kpc, "
        f"where beta would be 1; the motions are not of one symmetric pair, or the distance is wrong"
    )


@dataclass(frozen=True)
class TwoSidedErrors:
    """One standard deviation of each field of TwoSided, to first order."""

    beta: Floats
    angle_deg: Floats
    beta_cos: Floats
    largest_distance_kpc: Floats

    def __post_init__(self) -> None:
        lock(self)


def two_sided_errors(
    approaching_mas_d: ArrayLike,
    receding_mas_d: ArrayLike,
    distance_kpc: ArrayLike,
    approaching_sigma: ArrayLike,
    receding_sigma: ArrayLike,
    distance_sigma_kpc: ArrayLike = 0.0,
) -> TwoSidedErrors:
    """Errors of ``two_sided`` from independent errors (at least 0) of the two motions and the distance.

    First order: too kind where a good share of the error reaches beyond the largest distance. nan where
    ``two_sided`` has no solution. Broadcasts. Raises DomainError.
    """
    a, r, d = _pair(approaching_mas_d, receding_mas_d, distance_kpc)
    sa = checked("approaching_sigma", approaching_sigma, at_least=0.0)
    sr = checked("receding_sigma", receding_sigma, at_least=0.0)
    sd = checked("distance_sigma_kpc", distance_sigma_kpc, at_least=0.0)
    total2 = (a + r) ** 2
    cosine, sine = (a - r) / (a + r), 2.0 * (d / C_AU_PER_DAY) * a * r / (a + r)
    scale = 2.0 * d / C_AU_PER_DAY / total2
    # derivatives of (cosine, sine) by each input, times its error
    steps = (
        (2.0 * r / total2 * sa, scale * r**2 * sa),
        (-2.0 * a / total2 * sr, scale * a**2 * sr),
        (np.zeros_like(cosine), sine / d * sd),
    )
    size2 = cosine**2 + sine**2
    exists = np.where(np.isnan(np.asarray(two_sided(a, r, d).beta)), np.nan, 1.0)
    beta = exists * np.sqrt(sum((cosine * c + sine * s) ** 2 for c, s in steps) / size2)
    angle = exists * np.rad2deg(np.sqrt(sum((cosine * s - sine * c) ** 2 for c, s in steps)) / size2)
    cos_error = np.sqrt(sum(c**2 for c, _ in steps))
    largest = C_AU_PER_DAY / np.sqrt(a * r) / 2.0 * np.hypot(sa / a, sr / r)
    parts = np.broadcast_arrays(beta, angle, cos_error, largest)
    return TwoSidedErrors(*(plain(part) for part in parts))


def pair_motions_mas_d(beta: ArrayLike, angle_deg: ArrayLike, distance_kpc: ArrayLike) -> tuple[Floats, Floats]:
    """Proper motions (approaching, receding) of a symmetric pair: inverse of ``two_sided``."""
    d = checked("distance_kpc", distance_kpc, above=0.0)
    scale = C_AU_PER_DAY / d
    return (
        plain(apparent_speed_c(beta, angle_deg) * scale),
        plain(receding_speed_c(beta, angle_deg) * scale),
    )


def distance_from_motion_kpc(proper_motion_mas_d: ArrayLike, beta: ArrayLike, angle_deg: ArrayLike) -> Floats:
    """Distance at which a knot of known speed and angle (above 90: receding) shows this motion (above 0)."""
    mu = checked("proper_motion_mas_d", proper_motion_mas_d, above=0.0)
    return plain(apparent_speed_c(beta, angle_deg) * C_AU_PER_DAY / mu)


def least_beta_of_separation(separation_c: ArrayLike) -> Floats:
    """Lowest beta of a symmetric pair whose two knots part at this speed in c (sum of both, at least 0).

    s/2 up to s = sqrt 2, sqrt(1 - 1/s^2) above. Raises DomainError.
    """
    s = checked("separation_c", separation_c, at_least=0.0)
    with np.errstate(divide="ignore", invalid="ignore"):
        return plain(np.where(s <= np.sqrt(2.0), s / 2.0, np.sqrt((s - 1.0) * (s + 1.0)) / s))


def receding_delay_days(separation_mas: ArrayLike, approaching_mas_d: ArrayLike, receding_mas_d: ArrayLike) -> Floats:
    """Days by which the receding knot reaches a separation from the core after the approaching one.

    separation_mas at least 0; motions above 0; negative if the knot called receding is the faster.
    Broadcasts. Raises DomainError.
    """
    apart = checked("separation_mas", separation_mas, at_least=0.0)
    a = checked("approaching_mas_d", approaching_mas_d, above=0.0)
    r = checked("receding_mas_d", receding_mas_d, above=0.0)
    return plain(apart * ((a - r) / (a * r)))


# ------------------------------------------------------------------ shared


def _pair(approaching: ArrayLike, receding: ArrayLike, distance: ArrayLike) -> tuple[Floats, Floats, Floats]:
    return (
        checked("approaching_mas_d", approaching, above=0.0),
        checked("receding_mas_d", receding, above=0.0),
        checked("distance_kpc", distance, above=0.0),
    )


def _beta(beta: ArrayLike) -> Floats:
    return checked("beta", beta, at_least=0.0, below=1.0)


def _angle(angle_deg: ArrayLike) -> Floats:
    return checked("angle_deg", angle_deg, at_least=0.0, at_most=180.0)


def _apparent(apparent_c: ArrayLike) -> Floats:
    return checked("apparent_c", apparent_c, at_least=0.0)


def _inverse_gamma(b: Floats) -> Floats:
    return np.sqrt((1.0 - b) * (1.0 + b))


def _lag(b: Floats, angle: Floats) -> Floats:
    """1 - b cos(angle): observed over emitted time."""
    sin2, _ = half_angle_squares(angle)
    return (1.0 - b) + 2.0 * b * sin2
