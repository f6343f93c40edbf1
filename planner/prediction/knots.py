"""Knots and two-sided pairs inside the observation model: offsets from the core (east, north) in mas.

Shapes: theta (..., P), mjd (T,), observables (..., T, M) with M = 2 for a knot (east, north) and 4 for a pair
(approaching east, north, receding east, north). The position of the core wanders: one offset (east, north) per
30 days, in units of the beam, common to every knot of an epoch.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from planner.campaign.records import Knot, KnotFlux, Pair, Target
from planner.physics import flux
from planner.prediction.coordinates import Block, Layout, Number, standard
from planner.records import Bools, Floats, Ints
from planner.units import YEAR_DAYS, mjd_of_date

WANDER_DAYS = 30.0  # the core keeps one offset for this long


@dataclass(frozen=True)
class Wander:
    """Core offsets of a target: coordinates of each 30-day bin from the season's start."""

    first_mjd: float
    east: Ints  # (bins,) coordinate indices
    north: Ints

    def bin_of(self, mjd: Floats) -> Ints:
        """Bin of each moment, (T,); moments outside the season fall into the nearest bin."""
        bins = np.floor((mjd - self.first_mjd) / WANDER_DAYS).astype(np.int64)
        return np.clip(bins, 0, len(self.east) - 1)

    def offset(self, theta: Floats, mjd: Floats) -> Floats:
        """Offset of the core in beams, (..., T, 2)."""
        where = self.bin_of(mjd)
        return np.stack([theta[..., self.east[where]], theta[..., self.north[where]]], axis=-1)


def build_wander(layout: Layout, sigma_beam: float, first_mjd: float, last_mjd: float) -> Wander:
    """Add the core's offsets to a layout."""
    bins = int((last_mjd - first_mjd) // WANDER_DAYS) + 1
    why = "core position wanders; 0.05-0.1 of the beam"
    index = [
        [layout.add(standard(f"core wander {axis} {i + 1}", "beam", sigma_beam, why=why))[0] for i in range(bins)]
        for axis in ("east", "north")
    ]
    return Wander(first_mjd, np.array(index[0]), np.array(index[1]))


@dataclass(frozen=True)
class SpotState:
    """One knot of a feature: (..., T)."""

    exists: Bools
    separation_mas: Floats
    pa_deg: Floats
    flux_mjy: Floats


def _flux_mjy(record: KnotFlux, offset: Floats, mjd: Floats, ghz: float | None) -> Floats:
    days = mjd - mjd_of_date(record.on) - 0.5
    value = flux.exponential_mjy(record.mjy, days, record.fades.exponential_days) * np.exp(offset)
    return value if ghz is None else flux.at_frequency_mjy(value, record.ghz, ghz, record.spectral_index)


def _state(offset_mas: Floats, exists: Bools, flux_mjy: Floats) -> SpotState:
    east, north = offset_mas[..., 0], offset_mas[..., 1]
    separation = np.where(exists, np.hypot(east, north), np.nan)
    pa = np.where(exists, np.degrees(np.arctan2(east, north)), np.nan)
    return SpotState(exists, separation, pa, np.where(exists, flux_mjy, np.nan))


@dataclass(frozen=True)
class KnotModel:
    """One knot of an extragalactic (or any) jet.

    r(t) = v (t - t0) + a ((t - t_ref)^2 - (t0 - t_ref)^2) / 2 from the core crossing t0, so that v is the velocity
    at the reference date; a = |v| (f_along e_along + f_across e_across) with f per year.
    """

    record: Knot
    target: Target
    t0: Number  # days after core_crossing.date
    velocity: tuple[int, int]  # east, north, mas/yr at the reference date
    along: Number
    across: Number
    ln_flux: Number
    reference_mjd: float
    wander: Wander
    beams: Mapping[str, float]  # geometric mean beam of each array setup, mas

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

    def depends(self, setup: str | None) -> tuple[int, ...]:
        """Coordinates (core wander apart) that move this feature's observables."""
        numbers = (self.t0, self.along, self.across)
        return (*self.velocity, *(n.index for n in numbers if n.index is not None))

    def crossing_mjd(self, theta: Floats) -> Floats:
        """Core crossing, (..., 1)."""
        return mjd_of_date(self.record.motion.core_crossing.date) + 0.5 + self.t0.value(theta)

    def offset_mas(self, theta: Floats, mjd: Floats) -> Floats:
        """Offset from the core (east, north) on the sky, (..., T, 2), continued below the core for derivatives."""
        t0 = self.crossing_mjd(theta)
        east, north = theta[..., self.velocity[0], None], theta[..., self.velocity[1], None]
        years = (mjd - t0) / YEAR_DAYS
        bend = 0.5 * (((mjd - self.reference_mjd) / YEAR_DAYS) ** 2 - ((t0 - self.reference_mjd) / YEAR_DAYS) ** 2)
        along, across = self.along.value(theta), self.across.value(theta)
        # along = (east, north); across = turned by 90 degrees from north through east
        return np.stack(
            [
                east * years + bend * (along * east + across * north),
                north * years + bend * (along * north - across * east),
            ],
            axis=-1,
        )

    def observe(self, theta: Floats, mjd: Floats, setup: str | None = None) -> Floats:
        """Offset from the observed core in mas, (..., T, 2); with a setup the core's wander is applied."""
        value = self.offset_mas(theta, mjd)
        if setup is None or setup not in self.beams:
            return value
        return value + self.wander.offset(theta, mjd) * self.beams[setup]

    def spot_states(self, theta: Floats, mjd: Floats, ghz: float | None = None) -> tuple[SpotState, ...]:
        """State of the knot at a frequency (the flux's own if None)."""
        exists = mjd > self.crossing_mjd(theta)
        light = _flux_mjy(self.record.flux, self.ln_flux.value(theta), mjd, ghz)
        return (_state(self.offset_mas(theta, mjd), exists, light),)


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
    ln_flux: Number
    wander: Wander
    beams: Mapping[str, float]

    kind = "pair"
    spots = ("approaching", "receding")

    @property
    def name(self) -> str:
        """The feature's name."""
        return self.record.name

    @property
    def observables(self) -> tuple[str, ...]:
        """Names of the measured quantities, in order."""
        return ("approaching east", "approaching north", "receding east", "receding north")

    def depends(self, setup: str | None) -> tuple[int, ...]:
        """Coordinates (core wander apart) that move this feature's observables."""
        numbers = (self.t0, self.approaching, self.receding, self.pa, self.along, self.across)
        return tuple(n.index for n in numbers if n.index is not None)

    def ejection_mjd(self, theta: Floats) -> Floats:
        """Moment of ejection, (..., 1)."""
        return mjd_of_date(self.record.motion.ejection.date) + 0.5 + self.t0.value(theta)

    def offset_mas(self, theta: Floats, mjd: Floats) -> Floats:
        """Offsets from the core, (..., T, 4)."""
        days = mjd - self.ejection_mjd(theta)
        bend = 0.5 * days**2 / YEAR_DAYS
        pa = np.radians(self.pa.value(theta))
        east, north = np.sin(pa), np.cos(pa)
        forward, side = days + bend * self.along.value(theta), bend * self.across.value(theta)
        unit_east, unit_north = forward * east + side * north, forward * north - side * east
        near, far = self.approaching.value(theta), -self.receding.value(theta)
        return np.stack([near * unit_east, near * unit_north, far * unit_east, far * unit_north], axis=-1)

    def observe(self, theta: Floats, mjd: Floats, setup: str | None = None) -> Floats:
        """Offsets from the observed core in mas, (..., T, 4); with a setup the core's wander is applied."""
        value = self.offset_mas(theta, mjd)
        if setup is None or setup not in self.beams:
            return value
        wander = self.wander.offset(theta, mjd) * self.beams[setup]
        return value + np.concatenate([wander, wander], axis=-1)

    def spot_states(self, theta: Floats, mjd: Floats, ghz: float | None = None) -> tuple[SpotState, ...]:
        """States of the approaching and of the receding knot."""
        exists = mjd > self.ejection_mjd(theta)
        offsets = self.offset_mas(theta, mjd)
        light = _flux_mjy(self.record.flux, self.ln_flux.value(theta), mjd, ghz)
        ratio = self.record.flux.receding_ratio
        return _state(offsets[..., :2], exists, light), _state(offsets[..., 2:], exists, light * ratio)


JetModel = KnotModel | PairModel


def build_knot(
    record: Knot, target: Target, layout: Layout, *, wander: Wander, beams: Mapping[str, float], middle_mjd: float
) -> KnotModel:
    """Add a knot's coordinates to a layout and return its model."""
    motion, name = record.motion, record.name
    velocity = layout.add(
        Block(
            (f"{name}/speed_east", f"{name}/speed_north"), ("mas/yr", "mas/yr"),
            (motion.speed_mas_yr, motion.pa_deg), _components, nuisance=False, why="the target's file",
        )
    )  # fmt: skip
    along, across = _acceleration(layout, name, motion.acceleration_fraction_yr)
    return KnotModel(
        record=record, target=target, t0=_clock(layout, f"{name}/core_crossing", motion.core_crossing.sigma_days),
        velocity=(velocity[0], velocity[1]), along=along, across=across,
        ln_flux=_scatter(layout, name, record.flux.sigma_fraction), reference_mjd=middle_mjd,
        wander=wander, beams=beams,
    )  # fmt: skip


def build_pair(
    record: Pair, target: Target, layout: Layout, *, wander: Wander, beams: Mapping[str, float]
) -> PairModel:
    """Add a pair's coordinates to a layout and return its model."""
    motion, name = record.motion, record.name
    along, across = _acceleration(layout, name, motion.acceleration_fraction_yr)
    return PairModel(
        record=record, target=target, t0=_clock(layout, f"{name}/ejection", motion.ejection.sigma_days),
        approaching=layout.add_law(f"{name}/approaching_mas_d", "mas/d", motion.approaching_mas_d),
        receding=layout.add_law(f"{name}/receding_mas_d", "mas/d", motion.receding_mas_d),
        pa=layout.add_law(f"{name}/pa_deg", "deg", motion.pa_deg),
        along=along, across=across, ln_flux=_scatter(layout, name, record.flux.sigma_fraction),
        wander=wander, beams=beams,
    )  # fmt: skip


def _components(values: Floats) -> Floats:
    speed, pa = values[..., 0], np.radians(values[..., 1])
    return np.stack([speed * np.sin(pa), speed * np.cos(pa)], axis=-1)


def _clock(layout: Layout, name: str, sigma_days: float) -> Number:
    if sigma_days <= 0:
        return Number(None, False, 0.0)
    return Number(layout.add(standard(name, "d", sigma_days, why="the target's file", nuisance=False))[0], False, 0.0)


def _acceleration(layout: Layout, name: str, sigma: float) -> tuple[Number, Number]:
    if sigma <= 0:
        return Number(None, False, 0.0), Number(None, False, 0.0)
    why = "most well-sampled features accelerate or turn"
    along, across = (
        Number(layout.add(standard(f"{name}/acceleration {axis}", "1/yr", sigma, why=why))[0], False, 0.0)
        for axis in ("along", "across")
    )
    return along, across


def _scatter(layout: Layout, name: str, sigma_fraction: float) -> Number:
    why = "flux scale and fading"
    return Number(layout.add(standard(f"{name}/ln flux", "", sigma_fraction, why=why))[0], False, 0.0)
