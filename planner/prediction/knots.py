"""Knots and two-sided pairs inside the observation model: offsets from the core (east, north) in mas.

Shapes: theta (..., P), mjd (T,), observables (..., T, M) with M = 2 for a knot (east, north) and 4 for a pair
(approaching east, north, receding east, north).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from planner.campaign.records import Knot, Pair, Target
from planner.prediction.coordinates import Number
from planner.prediction.core import Core, Wander, east_north
from planner.prediction.light import Light
from planner.prediction.once import once
from planner.prediction.paths import IntrinsicPath, NozzlePath, Path, StationaryPath, indices
from planner.records import Bools, Floats, Ints
from planner.units import YEAR_DAYS, mjd_of_date

__all__ = ["JetModel", "KnotModel", "PairModel", "SpotState", "Wander"]


@dataclass(frozen=True)
class SpotState:
    """One knot of a feature: (..., T). Offset and light are continued to before the ejection."""

    exists: Bools
    offset_mas: Floats  # (..., T, 2)
    light_mjy: Floats

    @property
    def separation_mas(self) -> Floats:
        """Distance from the core; nan where the knot does not exist."""
        return np.where(self.exists, np.hypot(self.offset_mas[..., 0], self.offset_mas[..., 1]), np.nan)

    @property
    def pa_deg(self) -> Floats:
        """Position angle from the core; nan where the knot does not exist."""
        angle = np.degrees(np.arctan2(self.offset_mas[..., 0], self.offset_mas[..., 1]))
        return np.where(self.exists, angle, np.nan)

    @property
    def flux_mjy(self) -> Floats:
        """Flux; nan where the knot does not exist."""
        return np.where(self.exists, self.light_mjy, np.nan)


@dataclass(frozen=True)
class KnotModel:
    """One knot: where it goes, how bright it is, and the core it is measured from."""

    record: Knot
    target: Target
    path: Path
    light: Light
    core: Core
    stated_ghz: float  # frequency of the core from which the path is stated

    kind = "knot"
    spots = ("",)

    @property
    def name(self) -> str:
        """The feature's name."""
        return self.record.name

    @property
    def observables(self) -> tuple[str, ...]:
        """Names of the measured quantities, in order."""
        return ("east", "north")

    @property
    def stationary(self) -> bool:
        """True for a feature without a motion."""
        return isinstance(self.path, StationaryPath)

    def depends(self, setup: str | None) -> tuple[int, ...]:
        """Coordinates that move this feature's observables, those of ``felt`` apart."""
        return (*self.path.depends, *self.core.depends(setup, self.stated_ghz))

    def felt(self, mjd: Floats, setup: str | None) -> list[Ints]:
        """Coordinates that are new every 30 days: for each kind the one that each moment feels, (T,)."""
        own = self.path.jitter.felt(mjd) if isinstance(self.path, StationaryPath) else []
        return own + self.core.felt(mjd, setup)

    def crossing_mjd(self, theta: Floats, ghz: float | None = None) -> Floats:
        """Core crossing (or ejection), (..., 1); of the core as seen at another frequency if one is given.

        nan for motions that have no such date.
        """
        start = self.path.start_mjd(theta)
        if start is None:
            return np.full((*theta.shape[:-1], 1), np.nan)
        if ghz is None:
            return start
        farther = self.core.outward_mas(theta, self.stated_ghz, ghz)
        return start + farther / self.speed_mas_yr(theta)[..., None] * YEAR_DAYS

    def velocity_mas_yr(self, theta: Floats) -> Floats:
        """Velocity at the reference date, (..., 2); zero for a stationary feature."""
        if isinstance(self.path, StationaryPath):
            return np.zeros((*theta.shape[:-1], 2))
        return self.path.velocity_mas_yr(theta)

    def speed_mas_yr(self, theta: Floats) -> Floats:
        """Speed at the reference date, (...)."""
        velocity = self.velocity_mas_yr(theta)
        return np.hypot(velocity[..., 0], velocity[..., 1])

    def doppler(self, theta: Floats) -> Floats:
        """Doppler factor, (..., 1); nan for motions that do not know true speed and angle."""
        from planner.physics import jet

        if not isinstance(self.path, IntrinsicPath | NozzlePath):
            return np.full((*theta.shape[:-1], 1), np.nan)
        return np.asarray(jet.doppler_factor(self.path.beta(theta), self.path.angle_deg(theta)))

    @once
    def offset_mas(self, theta: Floats, mjd: Floats) -> Floats:
        """Offset from the core on the sky, (..., T, 2), continued to before the ejection for derivatives."""
        return self.path.offset_mas(theta, mjd)

    def observe(self, theta: Floats, mjd: Floats, setup: str | None = None) -> Floats:
        """Offset from the observed core in mas, (..., T, 2); with a setup its own core, and its wander, are meant."""
        return self.offset_mas(theta, mjd) + self.core.displace(theta, mjd, setup, self.stated_ghz)

    def spot_states(
        self, theta: Floats, mjd: Floats, ghz: float | None = None, setup: str | None = None
    ) -> tuple[SpotState, ...]:
        """State of the knot at a frequency (the flux's own if None), on a setup's flux scale if one is given."""
        start = self.path.start_mjd(theta)
        shape = (*theta.shape[:-1], len(mjd))
        exists = np.ones(shape, bool) if start is None else mjd > start
        flux = self.light.mjy(theta, mjd, ghz) * np.exp(self.core.ln_scale(theta, setup))
        return (SpotState(exists, self.offset_mas(theta, mjd), flux),)


@dataclass(frozen=True)
class PairModel:
    """Two knots thrown out together in opposite directions; rates are those at ejection."""

    record: Pair
    target: Target
    t0: Number
    approaching: Number  # mas/d
    receding: Number
    pa: Number
    along: Number
    across: Number
    light: Light
    core: Core
    stated_ghz: float

    kind = "pair"
    spots = ("approaching", "receding")
    stationary = False

    @property
    def name(self) -> str:
        """The feature's name."""
        return self.record.name

    @property
    def observables(self) -> tuple[str, ...]:
        """Names of the measured quantities, in order."""
        return ("approaching east", "approaching north", "receding east", "receding north")

    def depends(self, setup: str | None) -> tuple[int, ...]:
        """Coordinates that move this feature's observables, those of ``felt`` apart."""
        own = indices((self.t0, self.approaching, self.receding, self.pa, self.along, self.across))
        return (*own, *self.core.depends(setup, self.stated_ghz))

    def felt(self, mjd: Floats, setup: str | None) -> list[Ints]:
        """Coordinates that are new every 30 days: for each kind the one that each moment feels, (T,)."""
        return self.core.felt(mjd, setup)

    def ejection_mjd(self, theta: Floats) -> Floats:
        """Moment of ejection, (..., 1)."""
        return mjd_of_date(self.record.motion.ejection.date) + 0.5 + self.t0.value(theta)

    def beta_cos(self, theta: Floats) -> Floats:
        """True speed times cosine of the angle, free of the distance, (..., 1)."""
        near, far = self.approaching.value(theta), self.receding.value(theta)
        return (near - far) / (near + far)

    def speed_mas_yr(self, theta: Floats) -> Floats:
        """Speed of the approaching knot, (...)."""
        return self.approaching.value(theta)[..., 0] * YEAR_DAYS

    @once
    def offset_mas(self, theta: Floats, mjd: Floats) -> Floats:
        """Offsets from the core, (..., T, 4)."""
        days = mjd - self.ejection_mjd(theta)
        curve = 0.5 * days**2 / YEAR_DAYS
        pa = np.radians(self.pa.value(theta))
        east, north = np.sin(pa), np.cos(pa)
        forward, side = days + curve * self.along.value(theta), curve * self.across.value(theta)
        unit_east, unit_north = forward * east + side * north, forward * north - side * east
        near, far = self.approaching.value(theta), -self.receding.value(theta)
        return east_north(near * unit_east, near * unit_north, far * unit_east, far * unit_north)

    def observe(self, theta: Floats, mjd: Floats, setup: str | None = None) -> Floats:
        """Offsets from the observed core in mas, (..., T, 4); with a setup its own core, and its wander, are meant."""
        value = self.offset_mas(theta, mjd)
        moved = self.core.displace(theta, mjd, setup, self.stated_ghz)
        return value if isinstance(moved, float) else value + np.concatenate([moved, moved], axis=-1)

    def spot_states(
        self, theta: Floats, mjd: Floats, ghz: float | None = None, setup: str | None = None
    ) -> tuple[SpotState, ...]:
        """States of the approaching and of the receding knot."""
        exists = mjd > self.ejection_mjd(theta)
        offsets = self.offset_mas(theta, mjd)
        scale = np.exp(self.core.ln_scale(theta, setup))
        near = self.light.mjy(theta, mjd, ghz)
        ratio = self.record.flux.receding_ratio
        far = near * ratio if ratio is not None else self.light.opposite_mjy(theta, mjd, self.beta_cos(theta), ghz)
        return SpotState(exists, offsets[..., :2], near * scale), SpotState(exists, offsets[..., 2:], far * scale)


JetModel = KnotModel | PairModel


def opposite(path: IntrinsicPath | NozzlePath) -> IntrinsicPath | NozzlePath:
    """The trajectory of the knot thrown out the other way by the same ejection."""
    return replace(path, side=-path.side)
