"""Airmass and refraction."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from planner.records import Floats


def plane_parallel(altitude_deg: ArrayLike) -> Floats:
    """1 / sin(altitude); inf at the horizon, nan below it. Same shape as the altitude (degrees)."""
    h = np.asarray(altitude_deg, dtype=float)
    with np.errstate(divide="ignore"):
        return np.where(h < 0.0, np.nan, 1.0 / np.sin(np.radians(np.clip(h, 0.0, None))))


def kasten_young(altitude_deg: ArrayLike) -> Floats:
    """Airmass of Kasten & Young (1989, Applied Optics 28, 4735); altitude in degrees (apparent), nan below 0.

    1 / (sin h + 0.50572 (h + 6.07995)^-1.6364), h in degrees inside the bracket.
    """
    h = np.asarray(altitude_deg, dtype=float)
    up = np.clip(h, 0.0, 90.0)
    return np.where(h < 0.0, np.nan, 1.0 / (np.sin(np.radians(up)) + 0.50572 * (up + 6.07995) ** -1.6364))


def pickering(altitude_deg: ArrayLike) -> Floats:
    """Airmass of Pickering (2002, DIO 12, 3): 1 / sin(h + 244 / (165 + 47 h^1.1)), apparent h, nan below 0."""
    h = np.asarray(altitude_deg, dtype=float)
    up = np.clip(h, 0.0, 90.0)
    return np.where(h < 0.0, np.nan, 1.0 / np.sin(np.radians(up + 244.0 / (165.0 + 47.0 * up**1.1))))


def hardie(altitude_deg: ArrayLike) -> Floats:
    """Airmass of Hardie (1962, Astronomical Techniques, 178): a cubic in sec z - 1.

    Good to 1 % up to airmass 10; nan below 5 degrees, where the cubic bends down.
    """
    h = np.asarray(altitude_deg, dtype=float)
    s = 1.0 / np.sin(np.radians(np.clip(h, 5.0, 90.0))) - 1.0
    return np.where(h < 5.0, np.nan, 1.0 + s - 0.0018167 * s - 0.002875 * s**2 - 0.0008083 * s**3)


def rozenberg(sin_altitude: ArrayLike) -> Floats:
    """Airmass of Rozenberg (1966, Twilight, 160) from the SINE of the altitude; nan below the horizon."""
    s = np.asarray(sin_altitude, dtype=float)
    up = np.clip(s, 0.0, 1.0)
    return np.where(s < 0.0, np.nan, 1.0 / (up + 0.025 * np.exp(-11.0 * up)))


def altitude_of_airmass_deg(airmass: ArrayLike) -> Floats:
    """Geometric altitude (degrees, at least 0) at which the refracted Kasten & Young airmass has a value; any shape.

    Bisection to 1e-9 degrees; 90 for values that only the zenith could have.
    """
    wanted = np.asarray(airmass, dtype=float)
    low, high = np.zeros_like(wanted), np.full_like(wanted, 90.0)
    for _ in range(38):
        middle = 0.5 * (low + high)
        above = kasten_young(middle + refraction_arcmin(middle) / 60.0) < wanted
        low, high = np.where(above, low, middle), np.where(above, middle, high)
    return 0.5 * (low + high)


def scattering(altitude_deg: ArrayLike) -> Floats:
    """Airmass for light scattered in the air, (1 - 0.96 sin^2 z)^-0.5 (Krisciunas & Schaefer 1991, eq. 3)."""
    cos_h = np.cos(np.radians(np.asarray(altitude_deg, dtype=float)))
    return (1.0 - 0.96 * cos_h**2) ** -0.5


def refraction_arcmin(
    true_altitude_deg: ArrayLike, pressure_hpa: float = 1010.0, temperature_c: float = 10.0
) -> Floats:
    """Refraction (arcmin) from the TRUE altitude in degrees: Saemundsson (1986, Sky & Telescope 72, 70).

    1.02 / tan(h + 10.3 / (h + 5.11)) + 0.0019279, scaled by P/1010 x 283/(273 + T); for h above -1 degree
    (below it the value at -1 is returned).
    """
    h = np.clip(np.asarray(true_altitude_deg, dtype=float), -1.0, 90.0)
    scale = pressure_hpa / 1010.0 * 283.0 / (273.0 + temperature_c)
    return scale * (1.02 / np.tan(np.radians(h + 10.3 / (h + 5.11))) + 0.0019279)


def refraction_from_apparent_arcmin(
    apparent_altitude_deg: ArrayLike, pressure_hpa: float = 1010.0, temperature_c: float = 10.0
) -> Floats:
    """Refraction (arcmin) from the APPARENT altitude in degrees: Bennett (1982, Journal of Navigation 35, 255).

    1 / tan(h + 7.31 / (h + 4.4)) + 0.0013515 (the constant, from memory, makes it zero at the zenith).
    """
    h = np.clip(np.asarray(apparent_altitude_deg, dtype=float), -1.0, 90.0)
    scale = pressure_hpa / 1010.0 * 283.0 / (273.0 + temperature_c)
    return scale * (1.0 / np.tan(np.radians(h + 7.31 / (h + 4.4))) + 0.0013515)
