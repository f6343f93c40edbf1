"""The observed core of a jet, from which positions are measured: it wanders, and lies elsewhere at each frequency.

The wander is one offset (east, north) per 30 days, in units of the beam, common to every knot of an epoch. The core
at frequency nu lies Omega / nu from the jet's base along the jet (synchrotron self-absorption with equipartition;
Konigl 1981, from memory): a setup at another frequency than the one a knot's motion is stated for sees the knot
shifted by Omega (1/nu_stated - 1/nu_setup) along the jet.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from planner.campaign.records import CounterMotion, Knot, NozzleMotion, Pair, StationaryMotion
from planner.prediction.coordinates import Layout, Number, standard
from planner.records import Floats, Ints
from planner.units import YEAR_DAYS

WANDER_DAYS = 30.0  # the core, and a stationary feature, keep one offset for this long


@dataclass(frozen=True)
class Wander:
    """Offsets that are new every 30 days: coordinates of each bin from the season's start."""

    first_mjd: float
    east: Ints  # (bins,) coordinate indices
    north: Ints

    def bin_of(self, mjd: Floats) -> Ints:
        """Bin of each moment, (T,); moments outside the season fall into the nearest bin."""
        bins = np.floor((mjd - self.first_mjd) / WANDER_DAYS).astype(np.int64)
        return np.clip(bins, 0, len(self.east) - 1)

    def offset(self, theta: Floats, mjd: Floats) -> Floats:
        """Offset in the unit of the coordinates, (..., T, 2)."""
        where = self.bin_of(mjd)
        return np.stack([theta[..., self.east[where]], theta[..., self.north[where]]], axis=-1)

    def felt(self, mjd: Floats) -> list[Ints]:
        """East and north coordinate that each moment feels, (T,) each."""
        where = self.bin_of(mjd)
        return [self.east[where], self.north[where]]


def build_wander(
    layout: Layout, sigma: float, first_mjd: float, last_mjd: float, *,
    name: str = "core wander", unit: str = "beam", why: str = "core position wanders; 0.05-0.1 of the beam",
) -> Wander:  # fmt: skip
    """Add offsets that are new every 30 days to a layout."""
    bins = int((last_mjd - first_mjd) // WANDER_DAYS) + 1
    index = [
        [layout.add(standard(f"{name} {axis} {i + 1}", unit, sigma, why=why))[0] for i in range(bins)]
        for axis in ("east", "north")
    ]
    return Wander(first_mjd, np.array(index[0]), np.array(index[1]))


@dataclass(frozen=True)
class Core:
    """The observed core of one target."""

    wander: Wander
    shift: Number  # mas GHz
    pa_deg: float  # of the jet, a known number: its error moves the shift by far less than the shift's own width
    beams: Mapping[str, float]  # geometric mean beam of each array setup, mas
    ghz: Mapping[str, float]  # frequency of each array setup
    flux_scale: Mapping[str, int]  # coordinate of the logarithm of each array setup's flux scale

    def depends(self, setup: str | None, stated_ghz: float) -> tuple[int, ...]:
        """Coordinates other than the wander that move positions seen with a setup."""
        same = setup is None or setup not in self.ghz or self.ghz[setup] == stated_ghz
        return () if same or self.shift.index is None else (self.shift.index,)

    def felt(self, mjd: Floats, setup: str | None) -> list[Ints]:
        """Coordinates of the wander that each moment feels with a setup, (T,) each."""
        return self.wander.felt(mjd) if setup is not None and setup in self.beams else []

    def outward_mas(self, theta: Floats, from_ghz: float, to_ghz: float) -> Floats:
        """How much farther out the core lies at one frequency than at another, (..., 1)."""
        return self.shift.value(theta) * (1.0 / to_ghz - 1.0 / from_ghz)

    def displace(self, theta: Floats, mjd: Floats, setup: str | None, stated_ghz: float) -> Floats | float:
        """What to add to an offset from the core at ``stated_ghz`` as a setup sees it, (..., T, 2); 0 for the sky."""
        if setup is None or setup not in self.beams:
            return 0.0
        moved = self.wander.offset(theta, mjd) * self.beams[setup]
        if self.ghz[setup] == stated_ghz:
            return moved
        out = self.outward_mas(theta, stated_ghz, self.ghz[setup])[..., None]
        pa = np.radians(self.pa_deg)
        return moved - out * np.array([np.sin(pa), np.cos(pa)])

    def ln_scale(self, theta: Floats, setup: str | None) -> Floats | float:
        """Logarithm of a setup's flux scale, (..., 1)."""
        if setup is None or setup not in self.flux_scale:
            return 0.0
        index: int = self.flux_scale[setup]
        return theta[..., index, None]


def build_core(
    layout: Layout,
    jets: Sequence[Knot | Pair],
    beams: Mapping[str, float],
    ghz: Mapping[str, float],
    *,
    wander: Wander,
    shift: Number,
    flux_scale_fraction: float,
) -> Core:
    """Add the flux scale of each setup to a layout and return the core."""
    scales = {
        name: layout.add(standard(f"{name}/ln flux scale", "", flux_scale_fraction, why="flux scale of a receiver"))[0]
        for name in sorted(ghz)
    }
    return Core(wander, shift, mean_pa_deg(jets), beams, ghz, scales)


def mean_pa_deg(jets: Sequence[Knot | Pair]) -> float:
    """Mean direction of a jet from the median position angles that its knots state; counter-knots do not count."""
    angles = [pa for jet in jets if (pa := stated_pa_deg(jet)) is not None]
    return float(np.degrees(np.angle(np.exp(1j * np.radians(angles)).sum()))) if angles else 0.0


def stated_pa_deg(jet: Knot | Pair) -> float | None:
    """Median position angle that a knot's motion states."""
    motion = jet.motion
    if isinstance(motion, CounterMotion):
        return None
    if isinstance(motion, StationaryMotion):
        return motion.stationary.pa_deg.median()
    if isinstance(motion, NozzleMotion):
        return None if isinstance(motion.nozzle, str) else motion.nozzle.axis_pa_deg.median()
    return motion.pa_deg.median()


def bend(velocity: Floats, years: Floats, curve: Floats, along: Floats, across: Floats) -> Floats:
    """Offset velocity x years + (along e_along + across e_across) |velocity| x curve, (..., T, 2).

    ``velocity`` (..., 2) east and north; ``years``, ``curve`` (..., T); along and across (..., 1) per year. Across is
    turned by 90 degrees from north through east.
    """
    east, north = velocity[..., 0, None], velocity[..., 1, None]
    return east_north(
        east * years + curve * (along * east + across * north), north * years + curve * (along * north - across * east)
    )


def east_north(*parts: Floats) -> Floats:
    """Arrays (..., T) side by side as (..., T, M); each of them stays contiguous in memory, as later steps read it."""
    return np.moveaxis(np.stack(parts), 0, -1)


def curve_years(mjd: Floats, start_mjd: Floats, reference_mjd: float) -> Floats:
    """Half of (t - reference)^2 - (start - reference)^2 in years squared, without squares of large dates."""
    return 0.5 * (mjd - start_mjd) * ((mjd - reference_mjd) + (start_mjd - reference_mjd)) / YEAR_DAYS**2
