"""An arclet inside the observation model: a piece of an old echo whose motion tells age and direction of its source.

Near the arclet the dust is a plane. x points away from the source, y to larger position angles; the surface rises
toward the observer by ``slope`` along x and ``slope_across`` along y. On its reference date the arclet lies at the
radius rho0 and the age A, so that z0 = (rho0^2 - (cA)^2) / (2 cA); later it moves along its own normal.
Array shapes: theta (..., P), mjd (T,), results (..., T), observables (..., T, 2).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from planner.campaign.records import Arclet, Target
from planner.prediction.coordinates import Layout, Number, standard
from planner.records import Floats
from planner.units import C_PC_PER_DAY, RAD_ARCSEC, YEAR_DAYS, mjd_of_date

PLACE_SHARE = 0.25  # the place on the reference date is known to this share of the arclet's width; our choice


@dataclass(frozen=True)
class ArcletModel:
    """One arclet of a target. Observables: east and north of its place on the reference date, in arcsec."""

    record: Arclet
    target: Target
    distance: Number
    radius: Number  # arcsec, from the source, on the reference date
    pa: Number  # deg, from the source
    age: Number  # yr, on the reference date
    slope: Number
    slope_across: Number
    place_east: Number
    place_north: Number
    brightness: Number
    centres: Mapping[str, tuple[int, int]]  # setup -> coordinates of its centring, east and north

    kind = "arclet"
    observables = ("east", "north")

    @property
    def name(self) -> str:
        """The feature's name."""
        return self.record.name

    def depends(self, setup: str | None) -> tuple[int, ...]:
        """Coordinates that move this feature's observables with a setup."""
        numbers = (self.distance, self.radius, self.pa, self.age, self.slope, self.slope_across,
                   self.place_east, self.place_north)  # fmt: skip
        found = [n.index for n in numbers if n.index is not None]
        return tuple(found + list(self.centres.get(setup or "", ())))

    def surface(self, theta: Floats) -> tuple[Floats, Floats, Floats]:
        """Projected radius, light path and slope on the reference date, (..., 1) in pc."""
        rho = self.radius.value(theta) * self.distance.value(theta) / RAD_ARCSEC
        return rho, C_PC_PER_DAY * YEAR_DAYS * self.age.value(theta) * self._frame, self.slope.value(theta)

    @property
    def _frame(self) -> float:
        return 1.0 / (1.0 + (self.target.redshift or 0.0))

    def radius_arcsec(self, theta: Floats, mjd: Floats) -> Floats:
        """Distance from the source along the arclet's position angle, (..., T); nan where no light is there.

        rho = m ct + sqrt((m ct)^2 + (ct)^2 + 2 ct (z0 - m rho0)), on the branch that holds the reference date.
        """
        rho0, ct0, m = self.surface(theta)
        ct = ct0 + C_PC_PER_DAY * (mjd - mjd_of_date(self.record.on) - 0.5) * self._frame
        lifted = (rho0 - ct0) * (rho0 + ct0) / ct0 - 2.0 * m * rho0  # 2 (z0 - m rho0)
        branch = np.where(rho0 >= m * ct0, 1.0, -1.0)
        with np.errstate(invalid="ignore"):
            rho = m * ct + branch * np.sqrt(ct * (ct * (1.0 + m**2) + lifted))
            rho = np.where((ct > 0.0) & (rho > 0.0), rho, np.nan)
        return np.asarray(rho / self.distance.value(theta) * RAD_ARCSEC)

    def turn_rad(self, theta: Floats) -> Floats:
        """Angle from the direction away from the source to that of the motion, toward larger PA, (..., 1)."""
        rho0, ct0, m = self.surface(theta)
        return -np.arctan2(self.slope_across.value(theta) * ct0 * np.sign(rho0 - m * ct0), np.abs(rho0 - m * ct0))

    def moved_arcsec(self, theta: Floats, mjd: Floats) -> Floats:
        """Shift along the motion since the reference date, (..., T)."""
        return (self.radius_arcsec(theta, mjd) - self.radius.value(theta)) * np.cos(self.turn_rad(theta))

    def motion_arcsec_day(self, theta: Floats, mjd: Floats) -> Floats:
        """Speed along the motion, (..., T)."""
        step = 5.0  # days, out of centuries
        return np.asarray(self.moved_arcsec(theta, mjd + step) - self.moved_arcsec(theta, mjd - step)) / (2 * step)

    def observe(self, theta: Floats, mjd: Floats, setup: str | None = None) -> Floats:
        """East and north of the place on the reference date, (..., T, 2); a setup's centring is added.

        Positions are absolute (by the stars of the field), so a setup's plate scale does not enter.
        """
        moved = self.moved_arcsec(theta, mjd)
        direction = np.radians(self.pa.value(theta)) + self.turn_rad(theta)
        east = moved * np.sin(direction) + self.place_east.value(theta)
        north = moved * np.cos(direction) + self.place_north.value(theta)
        if setup is not None and setup in self.centres:
            i, j = self.centres[setup]
            east, north = east + theta[..., i, None], north + theta[..., j, None]
        return np.stack([east, north], axis=-1)

    def axes(self) -> Floats:
        """Rotation (2, 2) from east and north to along and across the radius of the prior's median."""
        pa = np.radians(self.record.position.pa_deg.median())
        return np.array([[np.sin(pa), np.cos(pa)], [np.cos(pa), -np.sin(pa)]])


def build_arclet(
    record: Arclet, target: Target, layout: Layout, *, distance: Number, centres: Mapping[str, tuple[int, int]]
) -> ArcletModel:
    """Add an arclet's coordinates to a target's layout and return its model."""

    def number(what: str, unit: str, sigma: float, why: str) -> Number:
        return Number(layout.add(standard(f"{record.name}/{what}", unit, sigma, why=why))[0], False, 0.0)

    name, place = record.name, PLACE_SHARE * record.width_arcsec
    return ArcletModel(
        record=record,
        target=target,
        distance=distance,
        radius=layout.add_law(f"{name}/radius_arcsec", "arcsec", record.position.radius_arcsec),
        pa=layout.add_law(f"{name}/pa_deg", "deg", record.position.pa_deg),
        age=layout.add_law(f"{name}/age_yr", "yr", record.age_yr),
        slope=layout.add_law(f"{name}/slope", "", record.slope),
        slope_across=number("slope across", "", record.slope_across_sigma, "inclination across the radius"),
        place_east=number("place east", "arcsec", place, "place on the reference date"),
        place_north=number("place north", "arcsec", place, "place on the reference date"),
        brightness=number("brightness offset", "mag", record.seen.sigma, "as seen"),
        centres=centres,
    )
