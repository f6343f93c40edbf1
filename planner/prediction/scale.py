"""From apparent speed to motion on the sky: cosmology, or the distance of a source in our Galaxy."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from planner.campaign.records import Cosmology, NamedCosmology, Target
from planner.physics import expansion
from planner.prediction.coordinates import Number
from planner.records import Floats
from planner.units import C_AU_PER_DAY, YEAR_DAYS


@lru_cache(maxsize=64)  # building one costs astropy 60 ms
def astropy_cosmology(numbers: Cosmology | NamedCosmology) -> object:
    """Return the astropy cosmology of a name, or of numbers (flat unless omega_lambda is given)."""
    if isinstance(numbers, NamedCosmology):
        import astropy.cosmology

        return getattr(astropy.cosmology, numbers.name)
    from astropy.cosmology import FlatLambdaCDM, LambdaCDM

    if numbers.omega_lambda is None:
        return FlatLambdaCDM(H0=numbers.h0_km_s_mpc, Om0=numbers.omega_matter)
    return LambdaCDM(H0=numbers.h0_km_s_mpc, Om0=numbers.omega_matter, Ode0=numbers.omega_lambda)


@lru_cache(maxsize=256)
def _mas_yr_per_c(redshift: float, numbers: Cosmology | NamedCosmology) -> float:
    return float(expansion.proper_motion_mas_yr(1.0, redshift, astropy_cosmology(numbers)))


@dataclass(frozen=True)
class Scale:
    """Motion on the sky of one unit of apparent speed: by redshift (known), else by distance (a coordinate)."""

    distance: Number | None  # pc
    constant: float  # mas/yr per c, nan when the distance decides

    def mas_yr_per_c(self, theta: Floats) -> Floats:
        """Motion of apparent speed c, (..., 1): 1 mas at 1 kpc is 1 au."""
        if self.distance is None:
            return np.full((*theta.shape[:-1], 1), self.constant)
        return C_AU_PER_DAY * YEAR_DAYS * 1e3 / self.distance.value(theta)

    @property
    def depends(self) -> tuple[int, ...]:
        """Coordinates that it depends on."""
        return () if self.distance is None or self.distance.index is None else (self.distance.index,)


def build_scale(target: Target, distance: Number | None) -> Scale:
    """Return the scale of a target; its redshift, if it has one, decides."""
    if target.redshift is None:
        return Scale(distance, float("nan"))
    return Scale(None, _mas_yr_per_c(target.redshift, target.cosmology))
