"""Optical filters: where they are, how wide, and how many electrons a star gives through them."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from planner.campaign.records import CameraSetup
from planner.errors import UnknownName

Floats = NDArray[np.float64]

PLANCK_J_S = 6.626_070_15e-34  # J s, exact (SI, 2019)
JANSKY_W_M2_HZ = 1e-26  # W m-2 Hz-1, exact (definition)
# One jansky is this many photons per second, square metre and unit of d(lambda)/lambda: 1.509e7.
PHOTONS_PER_JY = JANSKY_W_M2_HZ / PLANCK_J_S


@dataclass(frozen=True, slots=True)
class Passband:
    """One filter: centre, width as a share of the centre, flux density of magnitude 0."""

    centre_nm: float
    relative_width: float  # d(lambda)/lambda
    zero_jy: float


# B V R I: Vega magnitudes, centre, width and zero flux of Bessell 1979, from memory. g r i: AB magnitudes, so
# 3631 Jy (Oke & Gunn 1983, from memory); centres and widths of the common survey filters (Fukugita et al.
# 1996), from memory. Good to about 10 %: an observatory's own calculator goes before it (``rate_factor`` of
# the camera functions).
PASSBANDS = {
    "B": Passband(440.0, 0.22, 4260.0),
    "g": Passband(477.0, 0.29, 3631.0),
    "V": Passband(550.0, 0.16, 3640.0),
    "r": Passband(623.0, 0.22, 3631.0),
    "R": Passband(640.0, 0.23, 3080.0),
    "i": Passband(763.0, 0.20, 3631.0),
    "I": Passband(790.0, 0.19, 2550.0),
}


def passband(filter_name: str) -> Passband:
    """Return the passband of a filter; raises UnknownName with the nearest spelling."""
    try:
        return PASSBANDS[filter_name]
    except KeyError:
        raise UnknownName(filter_name, PASSBANDS, what="filter") from None


def collecting_area_m2(setup: CameraSetup) -> float:
    """Return the unblocked area of the aperture in square metres."""
    return math.pi / 4.0 * setup.aperture_m**2 * (1.0 - setup.obstruction)


def photons_e_s(setup: CameraSetup, filter_name: str, mag: ArrayLike) -> Floats:
    """Electrons per second that a star would give without an atmosphere.

    ``mag``: any shape, magnitude in ``filter_name`` (Vega for B V R I, AB for g r i); inf gives 0.
    Returns e/s of the same shape: zero flux x photons per jansky x relative width x area x throughput.
    """
    band = passband(filter_name)
    at_zero = band.zero_jy * PHOTONS_PER_JY * band.relative_width * collecting_area_m2(setup) * setup.throughput
    rate: Floats = at_zero * 10.0 ** (-0.4 * np.asarray(mag, dtype=float))
    return rate


def zero_point_mag(setup: CameraSetup, filter_name: str) -> float:
    """Return the magnitude that gives 1 e/s above the atmosphere."""
    return 2.5 * math.log10(float(photons_e_s(setup, filter_name, 0.0)))
