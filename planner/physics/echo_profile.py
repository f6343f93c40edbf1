"""Radial brightness profile of a ring on a sheet: the light curve laid out on the sky, blurred by dust and image.

I(rho) = integral of n(z) Phi F(t - (r - z)/c) (R/r)^2 dz along each line of sight, with the dust density n of a
sheet of finite thickness and the light curve F: the single-scattering integral, derived from c t = r - z. Its
second-moment summary are the widths of ``echo_width``, added in quadrature.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from planner.errors import DomainError
from planner.physics._numbers import Floats, checked, plain
from planner.physics.light_curve import Course
from planner.units import C_PC_PER_DAY, FWHM_PER_SIGMA, RAD_ARCSEC

NODES = 161  # nodes through the dust: a Gaussian sampled 40 times per FWHM, error of its area below 1e-6
REACH_FWHM = 2.0  # dust is followed this many FWHM to either side: 2e-5 of a Gaussian lies beyond


def radial_profile(
    radius_arcsec: ArrayLike,
    delay_days: float,
    depth_pc: float,
    distance_pc: float,
    light: Course,
    *,
    thickness_pc: float,
    radial_slope: float = 0.0,
    image_fwhm_arcsec: float = 0.0,
) -> Floats:
    """Surface brightness at each radius over that of a thin sheet at the peak of the light, (R,).

    radius_arcsec: (R,), evenly spaced, from 0 or above. depth_pc: of the sheet's middle on the axis; radial_slope:
    rise of depth with radius along this position angle; thickness_pc: FWHM of the (Gaussian) dust along the line
    of sight, above 0. delay_days: since the peak, in the frame of the source. The phase function is taken as
    constant across the ring. The image's blur is applied along the radius: right while it is small beside the
    radius. Raises DomainError.
    """
    theta = checked("radius_arcsec", radius_arcsec, at_least=0.0)
    ct = C_PC_PER_DAY * float(checked("delay_days", delay_days, above=0.0))
    scale = float(checked("distance_pc", distance_pc, above=0.0)) / RAD_ARCSEC
    z0, slope = float(checked("depth_pc", depth_pc)), float(checked("radial_slope", radial_slope))
    dz = float(checked("thickness_pc", thickness_pc, above=0.0))
    fwhm = float(checked("image_fwhm_arcsec", image_fwhm_arcsec, at_least=0.0))
    step = np.diff(theta)
    if theta.ndim != 1 or theta.size < 3 or not np.allclose(step, step[0], rtol=1e-6) or step[0] <= 0.0:
        raise DomainError("radius_arcsec", theta.size, "three or more evenly spaced, rising radii")
    u = np.linspace(-REACH_FWHM, REACH_FWHM, NODES)
    weight = np.exp(-0.5 * (u * FWHM_PER_SIGMA) ** 2)
    weight /= weight.sum()
    rho = (theta * scale)[:, None]
    z = z0 + slope * rho + u * dz  # (R, nodes)
    r = np.hypot(rho, z)
    # r - z without a difference of near equals
    late = np.where(z > 0.0, rho**2 / np.where(z > 0.0, r + z, 1.0), r - z)
    home = float(np.hypot(np.sqrt(max(ct * (2.0 * z0 + ct), 0.0)), z0)) or ct
    with np.errstate(divide="ignore", invalid="ignore"):
        dilution = np.where(r > 0.0, (home / r) ** 2, 0.0)
    flux = _seen_flux(light, (ct - late) / C_PC_PER_DAY, np.abs(np.gradient(late, axis=1)) / C_PC_PER_DAY)
    profile = np.sum(weight * flux * dilution, axis=1)
    return plain(_blurred(profile, float(step[0]), fwhm))


def _seen_flux(light: Course, days: Floats, cell_days: Floats) -> Floats:
    """Flux averaged over each cell of dust: a light curve with steps must not be sampled by points alone."""
    step, low, high = np.diff(light.days), light.flux[:-1], light.flux[1:]
    total = np.concatenate([[0.0], np.cumsum(step * (low + high) / 2.0)])
    half = np.maximum(cell_days / 2.0, 1e-9)

    def fluence(t: Floats) -> Floats:
        at = np.clip(t, light.days[0], light.days[-1])
        i = np.clip(np.searchsorted(light.days, at, side="right") - 1, 0, len(step) - 1)
        into = at - light.days[i]
        return total[i] + into * low[i] + into**2 * (high[i] - low[i]) / (2.0 * step[i])

    return np.asarray((fluence(days + half) - fluence(days - half)) / (2.0 * half))


def _blurred(profile: Floats, step: float, fwhm: float) -> Floats:
    if fwhm <= 0.0:
        return profile
    sigma = fwhm / FWHM_PER_SIGMA / step
    half = int(np.ceil(5.0 * sigma))
    kernel = np.exp(-0.5 * (np.arange(-half, half + 1) / max(sigma, 1e-9)) ** 2)
    kernel /= kernel.sum()
    padded = np.concatenate([profile[half:0:-1], profile]) if half < len(profile) else profile
    whole = np.convolve(padded, kernel, mode="full")
    first = half + (half if half < len(profile) else 0)
    return np.asarray(whole[first : first + len(profile)])


def profile_width_arcsec(radius_arcsec: ArrayLike, profile: ArrayLike) -> float:
    """Width between the outermost points at half of the highest brightness; nan for a profile without light.

    radius_arcsec, profile: (R,) as of ``radial_profile``. Straight between the points.
    """
    theta, light = np.asarray(radius_arcsec, dtype=np.float64), np.asarray(profile, dtype=np.float64)
    top = float(light.max(initial=0.0))
    if not top > 0.0:
        return float("nan")
    level = top / 2.0
    above = np.flatnonzero(light >= level)
    first, last = int(above[0]), int(above[-1])
    low, high = theta[first], theta[last]
    if first > 0:
        low -= (light[first] - level) / (light[first] - light[first - 1]) * (theta[first] - theta[first - 1])
    if last < len(theta) - 1:
        high += (light[last] - level) / (light[last] - light[last + 1]) * (theta[last + 1] - theta[last])
    return float(high - low)
