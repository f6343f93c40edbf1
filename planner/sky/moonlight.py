"""Brightness of the sky with moonlight.

V band: Krisciunas & Schaefer (1991, PASP 103, 1033), accurate to 8-23 %. Their opposition brightening within
7 degrees of full Moon (up to 35 % of the Moon's part) is left out.
Other filters: their V brightness of the scattered moonlight is carried over with the colours of sunlight scattered
in proportion to 1 / wavelength, and added to the dark sky of that filter. The power -1 (between -4 of clean air
and about 0 of haze; the Moon itself is redder than the Sun) is the one that reproduces the pair of Patat
(2003, A&A 400, 1183): where the Moon brightens B by 3 mag it brightens I by 1.2 mag.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from planner.errors import UnknownName
from planner.records import Floats
from planner.sky.airmass import scattering

# Sunlight, filter minus V in mag (B, V, R, I: Vega system, Ramirez et al. 2012; g, r, i: AB), from memory:
# 0.65, 0.25, 0, -0.17, -0.35, -0.29, -0.70; less 2.5 log10(550 nm / wavelength) for scattering as 1 / wavelength
# (440, 480, 550, 620, 640, 760, 790 nm; from memory)
MOONLIGHT_MINUS_V = {"B": 0.41, "g": 0.10, "V": 0.0, "r": -0.04, "R": -0.18, "i": 0.06, "I": -0.31}
NEAREST_DEG = 0.25  # the Moon's own radius: closer than this the formula means nothing


def nanolambert(mag_arcsec2: ArrayLike) -> Floats:
    """Brightness in nanoLambert of a V surface brightness, B = 34.08 exp(20.7233 - 0.92104 V) (their eq. 1)."""
    return 34.08 * np.exp(20.7233 - 0.92104 * np.asarray(mag_arcsec2, dtype=float))


def mag_arcsec2(nanolamberts: ArrayLike) -> Floats:
    """V surface brightness of a brightness in nanoLambert; inf for 0."""
    with np.errstate(divide="ignore"):
        return (20.7233 - np.log(np.asarray(nanolamberts, dtype=float) / 34.08)) / 0.92104


def moon_nanolambert(
    phase_angle_deg: ArrayLike,
    separation_deg: ArrayLike,
    moon_altitude_deg: ArrayLike,
    altitude_deg: ArrayLike,
    extinction_v_mag: float,
) -> Floats:
    """Scattered moonlight in V (nanoLambert) at a point of the sky; 0 while the Moon is below the horizon.

    Arguments broadcast. Phase angle: 0 full, 180 new. Their equations 3, 15, 20, 21, with the aureole
    6.2e7 / rho^2 in place of the Mie term within 10 degrees of the Moon.
    """
    alpha = np.abs(np.asarray(phase_angle_deg, dtype=float))
    rho = np.maximum(np.asarray(separation_deg, dtype=float), NEAREST_DEG)
    moon_up = np.asarray(moon_altitude_deg, dtype=float)
    source = 10.0 ** (-0.4 * (3.84 + 0.026 * alpha + 4e-9 * alpha**4))
    rayleigh = 10.0**5.36 * (1.06 + np.cos(np.radians(rho)) ** 2)
    mie = np.where(rho >= 10.0, 10.0 ** (6.15 - rho / 40.0), 6.2e7 / rho**2)
    to_moon = 10.0 ** (-0.4 * extinction_v_mag * scattering(np.maximum(moon_up, 0.0)))
    to_star = 1.0 - 10.0 ** (-0.4 * extinction_v_mag * scattering(altitude_deg))
    return np.where(moon_up > 0.0, (rayleigh + mie) * source * to_moon * to_star, 0.0)


def dark_sky_mag_arcsec2(zenith_mag_arcsec2: ArrayLike, altitude_deg: ArrayLike, extinction_mag: float) -> Floats:
    """Moonless sky at an altitude: zenith brightness x 10^(-0.4 k (X - 1)) X (their eq. 2)."""
    x = scattering(altitude_deg)
    return np.asarray(zenith_mag_arcsec2, dtype=float) + extinction_mag * (x - 1.0) - 2.5 * np.log10(x)


def sky_mag_arcsec2(
    filter_name: str,
    zenith_mag_arcsec2: float,
    extinction_mag: float,
    extinction_v_mag: float,
    altitude_deg: ArrayLike,
    moon_altitude_deg: ArrayLike,
    moon_separation_deg: ArrayLike,
    moon_phase_angle_deg: ArrayLike,
) -> Floats:
    """Sky brightness (mag/arcsec2) in a filter at a point of the sky, moonlight included; arguments broadcast.

    ``zenith_mag_arcsec2`` and ``extinction_mag`` belong to the filter, ``extinction_v_mag`` to V.
    Raises UnknownName for a filter without a moonlight colour.
    """
    if filter_name not in MOONLIGHT_MINUS_V:
        raise UnknownName(filter_name, MOONLIGHT_MINUS_V, what="filter")
    dark = dark_sky_mag_arcsec2(zenith_mag_arcsec2, altitude_deg, extinction_mag)
    moon_v = mag_arcsec2(
        moon_nanolambert(moon_phase_angle_deg, moon_separation_deg, moon_altitude_deg, altitude_deg, extinction_v_mag)
    )
    moon = moon_v + MOONLIGHT_MINUS_V[filter_name]
    return -2.5 * np.log10(10.0 ** (-0.4 * dark) + 10.0 ** (-0.4 * moon))
