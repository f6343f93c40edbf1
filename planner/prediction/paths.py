"""Trajectories of a single knot: offset from the core on the sky as smooth functions of a target's coordinates.

Shapes: theta (..., P), mjd (T,) or (..., T), offsets (..., T, 2) as east and north in mas, single numbers (..., 1).
Offsets are continued to before the ejection, so that derivatives exist there; ``start_mjd`` says when a knot begins.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np

from planner.physics import jet, jet_paths
from planner.prediction.coordinates import Number
from planner.prediction.core import Wander, bend, curve_years
from planner.prediction.scale import Scale
from planner.records import Floats
from planner.units import YEAR_DAYS


def indices(numbers: Iterable[Number]) -> tuple[int, ...]:
    """Coordinates of the numbers that are not constants."""
    return tuple(n.index for n in numbers if n.index is not None)


def _toward(speed: Floats, pa_deg: Floats) -> Floats:
    """Velocity (..., 2) of a speed (..., 1) at a position angle (..., 1)."""
    pa = np.radians(pa_deg)
    return np.concatenate([speed * np.sin(pa), speed * np.cos(pa)], axis=-1)


@dataclass(frozen=True)
class ApparentPath:
    """From a core crossing: r = v (t - t0) + a ((t - t_ref)^2 - (t0 - t_ref)^2) / 2.

    v is the velocity at the reference date; a = |v| (f_along e_along + f_across e_across) with f per year.
    """

    date_mjd: float
    t0: Number  # days after ``date_mjd``
    velocity: tuple[int, int]  # coordinates: east, north, mas/yr at the reference date
    along: Number
    across: Number
    reference_mjd: float
    home_pa_deg: float  # prior median, about which position angles are unwrapped

    @property
    def depends(self) -> tuple[int, ...]:
        """Coordinates that move the knot."""
        return (*self.velocity, *indices((self.t0, self.along, self.across)))

    def start_mjd(self, theta: Floats) -> Floats:
        """Core crossing, (..., 1)."""
        return self.date_mjd + self.t0.value(theta)

    def velocity_mas_yr(self, theta: Floats) -> Floats:
        """Velocity at the reference date, (..., 2)."""
        return theta[..., list(self.velocity)]

    def offset_mas(self, theta: Floats, mjd: Floats) -> Floats:
        """Offset from the core, (..., T, 2)."""
        t0 = self.start_mjd(theta)
        curve = curve_years(mjd, t0, self.reference_mjd)
        along, across = self.along.value(theta), self.across.value(theta)
        return bend(self.velocity_mas_yr(theta), (mjd - t0) / YEAR_DAYS, curve, along, across)


@dataclass(frozen=True)
class LinearPath:
    """Past a point on a date: r = r_m + v (t - t_m) + a (t - t_m)^2 / 2; there is no core crossing."""

    pass_mjd: float
    east: Number
    north: Number
    velocity: tuple[int, int]
    along: Number
    across: Number
    home_pa_deg: float

    @property
    def depends(self) -> tuple[int, ...]:
        """Coordinates that move the knot."""
        return (*self.velocity, *indices((self.east, self.north, self.along, self.across)))

    def start_mjd(self, theta: Floats) -> None:
        """It is always there."""
        return

    def velocity_mas_yr(self, theta: Floats) -> Floats:
        """Velocity on the date of the passage, (..., 2)."""
        return theta[..., list(self.velocity)]

    def offset_mas(self, theta: Floats, mjd: Floats) -> Floats:
        """Offset from the core, (..., T, 2)."""
        years = (mjd - self.pass_mjd) / YEAR_DAYS
        at = np.concatenate([self.east.value(theta), self.north.value(theta)], axis=-1)[..., None, :]
        along, across = self.along.value(theta), self.across.value(theta)
        return at + bend(self.velocity_mas_yr(theta), years, 0.5 * years**2, along, across)


@dataclass(frozen=True)
class IntrinsicPath:
    """From a core crossing with true speed and angle; ``side`` -1 is the opposite knot of the same ejection.

    The speed is sampled as rapidity artanh(beta), which has no limit to run into.
    """

    date_mjd: float
    t0: Number
    rapidity: Number
    angle: Number  # deg, of the approaching side
    pa: Number
    along: Number
    across: Number
    scale: Scale
    reference_mjd: float
    home_pa_deg: float
    side: int = 1

    @property
    def depends(self) -> tuple[int, ...]:
        """Coordinates that move the knot."""
        own = indices((self.t0, self.rapidity, self.angle, self.pa, self.along, self.across))
        return (*own, *self.scale.depends)

    def start_mjd(self, theta: Floats) -> Floats:
        """Core crossing, (..., 1)."""
        return self.date_mjd + self.t0.value(theta)

    def beta(self, theta: Floats) -> Floats:
        """True speed, (..., 1)."""
        return np.tanh(self.rapidity.value(theta))

    def angle_deg(self, theta: Floats) -> Floats:
        """Angle of this knot to the line of sight, (..., 1)."""
        angle = self.angle.value(theta)
        return angle if self.side == 1 else 180.0 - angle

    def velocity_mas_yr(self, theta: Floats) -> Floats:
        """Velocity at the reference date, (..., 2)."""
        speed = jet.apparent_speed_c(self.beta(theta), self.angle_deg(theta)) * self.scale.mas_yr_per_c(theta)
        return self.side * _toward(speed, self.pa.value(theta))

    def offset_mas(self, theta: Floats, mjd: Floats) -> Floats:
        """Offset from the core, (..., T, 2)."""
        t0 = self.start_mjd(theta)
        curve = curve_years(mjd, t0, self.reference_mjd)
        along, across = self.along.value(theta), self.across.value(theta)
        return bend(self.velocity_mas_yr(theta), (mjd - t0) / YEAR_DAYS, curve, along, across)


@dataclass(frozen=True)
class NozzlePath:
    """Straight on in the direction that a precessing nozzle has on the date of ejection."""

    date_mjd: float
    t0: Number
    period: Number  # days, as observed
    half_angle: Number
    inclination: Number
    axis_pa: Number
    phase: Number  # deg, at ``phase_mjd``
    phase_mjd: float
    sense: int
    rapidity: Number
    scale: Scale
    home_pa_deg: float
    side: int = 1

    @property
    def depends(self) -> tuple[int, ...]:
        """Coordinates that move the knot."""
        own = (self.t0, self.period, self.half_angle, self.inclination, self.axis_pa, self.phase, self.rapidity)
        return (*indices(own), *self.scale.depends)

    def start_mjd(self, theta: Floats) -> Floats:
        """Ejection, (..., 1)."""
        return self.date_mjd + self.t0.value(theta)

    def nozzle(self, theta: Floats) -> jet_paths.Nozzle:
        """Both knots thrown out at the date of ejection, fields (..., 1)."""
        turns = (self.start_mjd(theta) - self.phase_mjd) / self.period.value(theta)
        return jet_paths.precessing(
            self.beta(theta), self.inclination.value(theta), self.half_angle.value(theta),
            self.phase.value(theta) + 360.0 * turns, self.sense,
        )  # fmt: skip

    def beta(self, theta: Floats) -> Floats:
        """True speed, (..., 1)."""
        return np.tanh(self.rapidity.value(theta))

    def angle_deg(self, theta: Floats) -> Floats:
        """Angle of this knot to the line of sight, (..., 1)."""
        angle = np.asarray(self.nozzle(theta).angle_deg)
        return angle if self.side == 1 else 180.0 - angle

    def velocity_mas_yr(self, theta: Floats) -> Floats:
        """Velocity, (..., 2)."""
        both = self.nozzle(theta)
        speed = np.asarray(both.motion_c if self.side == 1 else both.opposite_motion_c)
        pa = self.axis_pa.value(theta) + both.pa_offset_deg
        return self.side * _toward(speed * self.scale.mas_yr_per_c(theta), pa)

    def offset_mas(self, theta: Floats, mjd: Floats) -> Floats:
        """Offset from the core, (..., T, 2)."""
        years = (mjd - self.start_mjd(theta)) / YEAR_DAYS
        return years[..., None] * self.velocity_mas_yr(theta)[..., None, :]


@dataclass(frozen=True)
class StationaryPath:
    """A mean place, and a jitter about it that is new every 30 days."""

    separation: Number
    pa: Number
    jitter: Wander  # mas
    home_pa_deg: float

    @property
    def depends(self) -> tuple[int, ...]:
        """Coordinates that move the feature, its jitter apart."""
        return indices((self.separation, self.pa))

    def start_mjd(self, theta: Floats) -> None:
        """It is always there."""
        return

    def mean_mas(self, theta: Floats) -> Floats:
        """Mean place, (..., 2)."""
        return _toward(self.separation.value(theta), self.pa.value(theta))

    def offset_mas(self, theta: Floats, mjd: Floats) -> Floats:
        """Offset from the core, (..., T, 2)."""
        return self.mean_mas(theta)[..., None, :] + self.jitter.offset(theta, mjd)


Path = ApparentPath | LinearPath | IntrinsicPath | NozzlePath | StationaryPath
