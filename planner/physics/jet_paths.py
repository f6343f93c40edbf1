"""Paths of jet knots: straight, accelerated, helical, precessing; ejection date, core shift, sampling.

Offsets are east and north of the core; position angles run from north through east. "Along" is along the
stated direction of motion, "across" is positive toward smaller position angle: counter-clockwise in a plot
with east to the right and north up, which looks mirrored on an image with east to the left.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from planner.errors import DomainError
from planner.physics._numbers import Floats, checked, cos_deg, plain, sin_deg
from planner.physics.jet import _angle, _beta, lorentz_factor
from planner.records import lock
from planner.units import C_AU_PER_DAY, YEAR_DAYS


@dataclass(frozen=True)
class KnotPath:
    """Where a knot is; all fields have one shape, nan before it leaves the core."""

    separation_mas: Floats
    pa_deg: Floats  # structural position angle, 0..360
    east_mas: Floats
    north_mas: Floats
    along_mas: Floats
    across_mas: Floats

    def __post_init__(self) -> None:
        lock(self)


def ballistic(mjd: ArrayLike, crossing_mjd: ArrayLike, speed_mas_yr: ArrayLike, pa_deg: ArrayLike) -> KnotPath:
    """Path of a knot that moves straight away from the core at constant speed (at least 0).

    Broadcasts; nan before ``crossing_mjd``. Raises DomainError.
    """
    return accelerated(mjd, crossing_mjd, speed_mas_yr, pa_deg)


def accelerated(
    mjd: ArrayLike,
    crossing_mjd: ArrayLike,
    speed_mas_yr: ArrayLike,
    pa_deg: ArrayLike,
    along_mas_yr2: ArrayLike = 0.0,
    across_mas_yr2: ArrayLike = 0.0,
    speed_mjd: ArrayLike | None = None,
) -> KnotPath:
    """Path of a knot that crosses the core at ``crossing_mjd`` with constant acceleration.

    speed_mas_yr (at least 0) and pa_deg are its velocity on the date ``speed_mjd``, the core crossing if
    None; the accelerations are along and across that velocity. Broadcasts; nan before ``crossing_mjd``.
    Raises DomainError.
    """
    t0 = checked("crossing_mjd", crossing_mjd)
    t = checked("mjd", mjd)
    reference = t0 if speed_mjd is None else checked("speed_mjd", speed_mjd)
    years = (t - t0) / YEAR_DAYS
    years = np.where(years < 0.0, np.nan, years)
    # integral of (time - reference) from the crossing, without squares of large dates
    bend = years * ((t - reference) + (t0 - reference)) / (2.0 * YEAR_DAYS)
    along = checked("speed_mas_yr", speed_mas_yr, at_least=0.0) * years
    along = along + checked("along_mas_yr2", along_mas_yr2) * bend
    across = checked("across_mas_yr2", across_mas_yr2) * bend
    pa = np.deg2rad(checked("pa_deg", pa_deg))
    east = along * np.sin(pa) - across * np.cos(pa)
    north = along * np.cos(pa) + across * np.sin(pa)
    angle = np.rad2deg(np.arctan2(east, north)) % 360.0
    parts = np.broadcast_arrays(np.hypot(east, north), angle, east, north, along, across)
    return KnotPath(*(plain(part) for part in parts))


def along_and_across(
    motion_east: ArrayLike, motion_north: ArrayLike, east: ArrayLike, north: ArrayLike
) -> tuple[Floats, Floats]:
    """Split a vector (an acceleration) along and across the velocity; nan where the velocity is 0.

    Any units; not the split along the position vector that some tables use. Broadcasts. Raises DomainError.
    """
    me, mn = checked("motion_east", motion_east), checked("motion_north", motion_north)
    e, n = checked("east", east), checked("north", north)
    speed = np.hypot(me, mn)
    with np.errstate(divide="ignore", invalid="ignore"):
        return plain((me * e + mn * n) / speed), plain((me * n - mn * e) / speed)


def source_rate_per_yr(along_mas_yr2: ArrayLike, speed_mas_yr: ArrayLike, redshift: ArrayLike = 0.0) -> Floats:
    """Relative change of speed per year AT THE SOURCE: (1 + z) a/mu, as surveys quote it.

    speed_mas_yr above 0; redshift at least 0. Broadcasts. Raises DomainError.
    """
    mu = checked("speed_mas_yr", speed_mas_yr, above=0.0)
    return plain((1.0 + checked("redshift", redshift, at_least=0.0)) * checked("along_mas_yr2", along_mas_yr2) / mu)


# ------------------------------------------------------------------ curved and precessing jets


def helix_speed_c(
    beta_axis: ArrayLike, beta_turn: ArrayLike, angle_deg: ArrayLike, phase_deg: ArrayLike
) -> tuple[Floats, Floats]:
    """Apparent velocity (along the projected axis, across it) of a knot on a cylinder helix, in c.

    beta_axis along the axis and beta_turn around it, each at least 0, together below c; angle_deg of the axis
    to the line of sight, 0 to 180. Velocity in the jet frame (-b_t sin f, b_t cos f, b_z), divided by
    1 - (its part toward us). Broadcasts. Raises DomainError.
    """
    bz = checked("beta_axis", beta_axis, at_least=0.0)
    bt = checked("beta_turn", beta_turn, at_least=0.0)
    checked("hypot(beta_axis, beta_turn)", np.hypot(bz, bt), below=1.0)
    angle = _angle(angle_deg)
    phase = np.deg2rad(checked("phase_deg", phase_deg))
    sine, cosine = sin_deg(angle), cos_deg(angle)
    side = -bt * np.sin(phase)
    lag = 1.0 - (side * sine + bz * cosine)
    # the axis projects on the sky to (-cos, 0, sin) of the inclination
    return plain((bz * sine - side * cosine) / lag), plain(bt * np.cos(phase) / lag)


@dataclass(frozen=True)
class Nozzle:
    """Both knots of a precessing nozzle, by the phase at which they were thrown out."""

    angle_deg: Floats  # of the approaching-side knot to the line of sight (above 90: it recedes)
    pa_offset_deg: Floats  # position angle minus that of the axis
    redshift: Floats  # 1 + this = observed over emitted wavelength
    opposite_redshift: Floats
    motion_c: Floats  # apparent speeds
    opposite_motion_c: Floats

    def __post_init__(self) -> None:
        lock(self)

    def motions_mas_d(self, distance_kpc: ArrayLike) -> tuple[Floats, Floats]:
        """Proper motions (this side, opposite side) at a distance above 0. Raises DomainError."""
        d = checked("distance_kpc", distance_kpc, above=0.0)
        return plain(self.motion_c * C_AU_PER_DAY / d), plain(self.opposite_motion_c * C_AU_PER_DAY / d)


def precessing(
    beta: ArrayLike,
    inclination_deg: ArrayLike,
    half_angle_deg: ArrayLike,
    phase_deg: ArrayLike,
    sense: int = 1,
) -> Nozzle:
    """Knots of a nozzle that turns on a cone; each flies straight on after its ejection.

    inclination_deg: of the cone's axis to the line of sight, 0 to 180; half_angle_deg: of the cone, 0 to 90;
    phase_deg: at ejection, 0 where the knot comes closest to the line of sight; sense: +1 or -1, the spin.
    Broadcasts. Raises DomainError. Kinematic model of Abell & Margon 1979 (from memory).
    """
    if sense not in (1, -1):
        raise DomainError("sense", sense, "+1 or -1")
    b = _beta(beta)
    i = np.deg2rad(checked("inclination_deg", inclination_deg, at_least=0.0, at_most=180.0))
    p = np.deg2rad(checked("half_angle_deg", half_angle_deg, at_least=0.0, at_most=90.0))
    f = np.deg2rad(checked("phase_deg", phase_deg))
    toward = np.cos(p) * np.cos(i) + np.sin(p) * np.sin(i) * np.cos(f)
    along = np.cos(p) * np.sin(i) - np.sin(p) * np.cos(i) * np.cos(f)
    across = np.sin(p) * np.sin(f)
    gamma, sky = np.asarray(lorentz_factor(b)), np.hypot(along, across)
    parts = np.broadcast_arrays(
        np.rad2deg(np.arctan2(sky, toward)),
        sense * np.rad2deg(np.arctan2(across, along)),
        gamma * (1.0 - b * toward) - 1.0,
        gamma * (1.0 + b * toward) - 1.0,
        b * sky / (1.0 - b * toward),
        b * sky / (1.0 + b * toward),
    )
    return Nozzle(*(plain(part) for part in parts))


def widest_swing_deg(inclination_deg: ArrayLike, half_angle_deg: ArrayLike) -> Floats:
    """Largest change of position angle to either side: asin(sin p/sin i).

    inclination above 0 and below 180; nan where the line of sight lies inside the cone (the position angle
    then runs through the whole circle). Broadcasts. Raises DomainError.
    """
    i = checked("inclination_deg", inclination_deg, above=0.0, below=180.0)
    p = checked("half_angle_deg", half_angle_deg, at_least=0.0, at_most=90.0)
    with np.errstate(invalid="ignore"):
        return plain(np.rad2deg(np.arcsin(sin_deg(p) / sin_deg(i))))


# ------------------------------------------------------------------ ejection date


@dataclass(frozen=True)
class Ejection:
    """Straight-line fit of separation against date, and the date of zero separation."""

    crossing_mjd: Floats  # nan where the speed is 0
    crossing_sigma_days: Floats
    speed_mas_d: Floats
    speed_sigma_mas_d: Floats
    mean_mjd: Floats  # weighted mean epoch: there separation and speed are uncorrelated
    mean_mas: Floats
    mean_sigma_mas: Floats

    def __post_init__(self) -> None:
        lock(self)


def ejection_fit(mjd: ArrayLike, separation_mas: ArrayLike, sigma_mas: ArrayLike) -> Ejection:
    """Fit r = r_mean + mu (t - t_mean) to epochs along the last axis; extrapolate to r = 0.

    mjd, separation_mas, sigma_mas (above 0): shapes broadcast to (..., N), N at least 2 different dates.
    The error of the crossing is taken at the weighted mean epoch, where the two errors are independent
    (leaving out the covariance of an intercept far away makes it many times too large). The date is when
    the knot passes the OBSERVED core, which lies elsewhere at another frequency. Raises DomainError.
    """
    t, r, s = np.broadcast_arrays(
        checked("mjd", mjd),
        checked("separation_mas", separation_mas),
        checked("sigma_mas", sigma_mas, above=0.0),
    )
    if t.ndim == 0 or t.shape[-1] < 2 or np.any(np.ptp(t, axis=-1) == 0.0):
        raise DomainError("mjd", np.array2string(t, threshold=5), "at least 2 different dates on the last axis")
    weight = s**-2.0
    total = weight.sum(axis=-1)
    start = t[..., :1]  # dates are large: take them from the first one
    mean = (weight * (t - start)).sum(axis=-1) / total
    lever = (t - start) - mean[..., None]
    level = (weight * r).sum(axis=-1) / total
    spread = (weight * lever**2).sum(axis=-1)
    speed = (weight * lever * (r - level[..., None])).sum(axis=-1) / spread
    level_var, speed_var = 1.0 / total, 1.0 / spread
    with np.errstate(divide="ignore", invalid="ignore"):
        still = np.where(speed == 0.0, np.nan, speed)
        crossing = start[..., 0] + (mean - level / still)
        sigma = np.sqrt(level_var + (level / still) ** 2 * speed_var) / np.abs(still)
    values = (crossing, sigma, speed, np.sqrt(speed_var), start[..., 0] + mean, level, np.sqrt(level_var))
    return Ejection(*(plain(value) for value in values))


def speed_error_factor(epochs: int) -> float:
    """Error of the speed times span over the position error, for N equal evenly spaced epochs (N >= 2).

    sqrt(12 (N - 1)/(N (N + 1))): 1.414 for 2 and 3, 0.991 for 10. Raises DomainError.
    """
    if epochs < 2:
        raise DomainError("epochs", epochs, "at least 2")
    return float(np.sqrt(12.0 * (epochs - 1) / (epochs * (epochs + 1))))


def span_for_speed_days(sigma_mas: ArrayLike, speed_mas_d: ArrayLike, epochs: int, significance: float = 5.0) -> Floats:
    """Shortest span of N even epochs that measures a speed at this significance (5: common practice).

    sigma_mas and speed_mas_d above 0. Broadcasts. Raises DomainError.
    """
    sigma = checked("sigma_mas", sigma_mas, above=0.0)
    speed = checked("speed_mas_d", speed_mas_d, above=0.0)
    return plain(significance * sigma * speed_error_factor(epochs) / speed)


def useful_spacing_days(
    sigma_mas: ArrayLike, knot_spacing_mas: ArrayLike, speed_mas_d: ArrayLike
) -> tuple[Floats, Floats]:
    """Shortest and longest useful time between epochs: motion of 2 sigma, motion of half a knot spacing.

    Beyond the longest a knot can be taken for its neighbour (strobe effect). nan, nan where the range is
    empty: then finer resolution or another frequency is needed. All above 0. Broadcasts. Raises DomainError.
    """
    sigma = checked("sigma_mas", sigma_mas, above=0.0)
    spacing = checked("knot_spacing_mas", knot_spacing_mas, above=0.0)
    speed = checked("speed_mas_d", speed_mas_d, above=0.0)
    low, high = np.broadcast_arrays(2.0 * sigma / speed, spacing / (2.0 * speed))
    empty = low > high
    return plain(np.where(empty, np.nan, low)), plain(np.where(empty, np.nan, high))


# ------------------------------------------------------------------ core shift


def core_offset_mas(shift_mas_ghz: ArrayLike, ghz: ArrayLike, opacity_index: ArrayLike = 1.0) -> Floats:
    """Distance of the observed core from the jet's base: shift / ghz^(1/k).

    shift_mas_ghz: at least 0, in mas GHz^(1/k); ghz and opacity_index k (1 for equipartition) above 0.
    Broadcasts. Raises DomainError.
    """
    shift = checked("shift_mas_ghz", shift_mas_ghz, at_least=0.0)
    nu = checked("ghz", ghz, above=0.0)
    return plain(shift * nu ** (-1.0 / checked("opacity_index", opacity_index, above=0.0)))


def core_shift_mas(
    shift_mas_ghz: ArrayLike, low_ghz: ArrayLike, high_ghz: ArrayLike, opacity_index: ArrayLike = 1.0
) -> Floats:
    """How much farther out the core lies at low_ghz than at high_ghz. Limits as ``core_offset_mas``."""
    low = core_offset_mas(shift_mas_ghz, low_ghz, opacity_index)
    return plain(low - core_offset_mas(shift_mas_ghz, high_ghz, opacity_index))


def shift_from_pair_mas_ghz(
    offset_mas: ArrayLike, low_ghz: ArrayLike, high_ghz: ArrayLike, opacity_index: ArrayLike = 1.0
) -> Floats:
    """Core-shift measure from the core's offset (at least 0) between two frequencies, low below high."""
    offset = checked("offset_mas", offset_mas, at_least=0.0)
    unit = checked(
        "core shift between low_ghz and high_ghz",
        core_shift_mas(1.0, low_ghz, high_ghz, opacity_index),
        above=0.0,
    )
    return plain(offset / unit)
