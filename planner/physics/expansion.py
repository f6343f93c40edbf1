"""Proper motion and apparent speed at cosmological distance: where the factor 1 + z goes.

The proper motion is per observed time, which runs 1 + z times slower than at the source, so
speed = mu D_A (1 + z) = mu D_M with D_M the transverse comoving distance (stated by M. H. Cohen, essay on
superluminal motion; derived by Chodorowski 2005). Leaving the factor out is a published error.

``cosmology`` is any object with ``comoving_transverse_distance`` and ``angular_diameter_distance`` that
return astropy quantities (an astropy cosmology); this module does not import astropy itself.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from planner.physics._numbers import Floats, checked, plain
from planner.units import C_PC_PER_DAY, RAD_MAS, YEAR_DAYS

C_PC_PER_YEAR = C_PC_PER_DAY * YEAR_DAYS


def speed_c(proper_motion_mas_yr: ArrayLike, redshift: ArrayLike, cosmology: Any) -> Floats:
    """Apparent speed in c of a proper motion (mas per observed year) at a redshift above 0.

    Broadcasts. Raises DomainError (for redshift 0 use ``jet.transverse_speed_c`` with the distance).
    """
    mu = checked("proper_motion_mas_yr", proper_motion_mas_yr)
    return plain(mu / RAD_MAS * _distance_pc(redshift, cosmology, "comoving_transverse_distance") / C_PC_PER_YEAR)


def proper_motion_mas_yr(apparent_c: ArrayLike, redshift: ArrayLike, cosmology: Any) -> Floats:
    """Proper motion (mas per observed year) of an apparent speed in c at a redshift above 0.

    Broadcasts. Raises DomainError.
    """
    speed = checked("apparent_c", apparent_c)
    distance = _distance_pc(redshift, cosmology, "comoving_transverse_distance")
    return plain(speed * C_PC_PER_YEAR / distance * RAD_MAS)


def pc_per_mas(redshift: ArrayLike, cosmology: Any) -> Floats:
    """Projected parsecs per mas at a redshift above 0 (angular-diameter distance). Raises DomainError."""
    return plain(_distance_pc(redshift, cosmology, "angular_diameter_distance") / RAD_MAS)


def source_frame_days(observed_days: ArrayLike, redshift: ArrayLike) -> Floats:
    """Duration at the source of an observed one: divided by 1 + z (at least 1). Raises DomainError."""
    z = checked("redshift", redshift, at_least=0.0)
    return plain(checked("observed_days", observed_days) / (1.0 + z))


def _distance_pc(redshift: ArrayLike, cosmology: Any, method: str) -> Floats:
    z = checked("redshift", redshift, above=0.0)
    # distances cost integrals: one for each different redshift, however many draws share it
    values, where = np.unique(z, return_inverse=True)
    known = np.isfinite(values)
    distances = np.full(values.shape, np.nan)
    if known.any():
        distances[known] = getattr(cosmology, method)(values[known]).to_value("pc")
    return distances[where].reshape(z.shape)
