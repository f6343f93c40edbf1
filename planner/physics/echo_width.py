"""How thick a ring looks, and when two epochs of it come apart in a difference image.

The outburst lasted a while, the dust has thickness, the image has a finite resolution: each widens the ring.
Rest et al. 2011 (abstract) name these ingredients; the formulas are derived from c t = r - z. On a growing
ring the outer edge shows the rise of the light curve and the inner edge its decline; on a shrinking shell
ring the other way round.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from planner.physics._numbers import Floats, checked, plain
from planner.units import C_PC_PER_DAY, RAD_ARCSEC


def outburst_width_arcsec(
    duration_days: ArrayLike,
    radius_arcsec: ArrayLike,
    delay_days: ArrayLike,
    distance_pc: ArrayLike,
    radial_slope: ArrayLike = 0.0,
) -> Floats:
    """Width that the length of the outburst gives: c tau r/(rho - m ct), at the distance of the source.

    duration_days: tau, at least 0. radius_arcsec: about the source, at least 0. radial_slope: m, rise of
    depth with projected radius there (plane of slope s along direction phi: s cos phi). nan for delays at or
    below 0; infinite where dust lies along the light surface. Broadcasts. Raises DomainError.
    """
    tau = C_PC_PER_DAY * checked("duration_days", duration_days, at_least=0.0)
    rho, ct, slope, scale = _common(radius_arcsec, delay_days, distance_pc, radial_slope)
    with np.errstate(divide="ignore", invalid="ignore"):
        r = (rho**2 + ct**2) / (2.0 * ct)
        return plain(np.where(ct > 0.0, tau * r / np.abs(rho - slope * ct) * scale, np.nan))


def dust_width_arcsec(
    thickness_pc: ArrayLike,
    radius_arcsec: ArrayLike,
    delay_days: ArrayLike,
    distance_pc: ArrayLike,
    radial_slope: ArrayLike = 0.0,
) -> Floats:
    """Width that the thickness of the sheet gives: ct dz/(rho - m ct), at the distance of the source.

    thickness_pc: ALONG THE LINE OF SIGHT, at least 0; for a sheet of normal thickness w tilted by i it is
    w / cos i. Other arguments, nan and errors as for ``outburst_width_arcsec``.
    """
    dz = checked("thickness_pc", thickness_pc, at_least=0.0)
    rho, ct, slope, scale = _common(radius_arcsec, delay_days, distance_pc, radial_slope)
    with np.errstate(divide="ignore", invalid="ignore"):
        return plain(np.where(ct > 0.0, ct * dz / np.abs(rho - slope * ct) * scale, np.nan))


def shell_outburst_width_arcsec(
    duration_days: ArrayLike, delay_days: ArrayLike, shell_radius_pc: ArrayLike, distance_pc: ArrayLike
) -> Floats:
    """Width of a shell's ring from the length of the outburst: c tau abs(a - ct)/rho.

    duration_days at least 0, shell_radius_pc and distance_pc above 0; nan where the shell has no ring.
    Broadcasts. Raises DomainError.
    """
    tau = C_PC_PER_DAY * checked("duration_days", duration_days, at_least=0.0)
    rho, ct, a, scale = _shell(delay_days, shell_radius_pc, distance_pc)
    with np.errstate(divide="ignore", invalid="ignore"):
        return plain(tau * np.abs(a - ct) / rho * scale)


def shell_dust_width_arcsec(
    thickness_pc: ArrayLike, delay_days: ArrayLike, shell_radius_pc: ArrayLike, distance_pc: ArrayLike
) -> Floats:
    """Width of a shell's ring from the shell's thickness: ct da/rho. Limits as for the outburst's width."""
    da = checked("thickness_pc", thickness_pc, at_least=0.0)
    rho, ct, _, scale = _shell(delay_days, shell_radius_pc, distance_pc)
    with np.errstate(divide="ignore", invalid="ignore"):
        return plain(ct * da / rho * scale)


def screen_outburst_width_arcsec(duration_days: ArrayLike, radius_arcsec: ArrayLike, delay_days: ArrayLike) -> Floats:
    """Width of a ring on far foreground dust from the length of the outburst: theta tau/(2 t), small angles.

    duration_days, radius_arcsec: at least 0; nan for delays at or below 0. Broadcasts. Raises DomainError.
    """
    tau = checked("duration_days", duration_days, at_least=0.0)
    theta = checked("radius_arcsec", radius_arcsec, at_least=0.0)
    t = checked("delay_days", delay_days)
    with np.errstate(divide="ignore", invalid="ignore"):
        return plain(np.where(t > 0.0, theta * tau / (2.0 * t), np.nan))


def screen_dust_width_arcsec(
    thickness_pc: ArrayLike,
    radius_arcsec: ArrayLike,
    dust_distance_pc: ArrayLike,
    source_distance_pc: ArrayLike | None = None,
) -> Floats:
    """Width of a ring on far foreground dust from that dust's extent along the ray, small angles.

    theta (dd/2d)/(1 - d/D); thickness_pc and radius_arcsec at least 0, dust_distance_pc above 0 and below
    source_distance_pc (None: at infinity). Broadcasts. Raises DomainError.
    """
    dd = checked("thickness_pc", thickness_pc, at_least=0.0)
    theta = checked("radius_arcsec", radius_arcsec, at_least=0.0)
    d = checked("dust_distance_pc", dust_distance_pc, above=0.0)
    width = theta * dd / (2.0 * d)
    if source_distance_pc is None:
        return plain(width)
    big = checked("source_distance_pc", source_distance_pc, above=0.0)
    gap = checked("source_distance_pc - dust_distance_pc", big - d, above=0.0)
    return plain(width * (big / gap))


def total_width_arcsec(*widths_arcsec: ArrayLike) -> Floats:
    """FWHM of a ring from its widths (outburst, dust, image): added in quadrature, as if all were Gaussian.

    Each at least 0; broadcasts. Raises DomainError.
    """
    total: Floats = np.zeros(())
    for number, width in enumerate(widths_arcsec, start=1):
        total = np.hypot(total, checked(f"width {number} (arcsec)", width, at_least=0.0))
    return plain(total)


def separation_days(
    duration_days: ArrayLike,
    dust_width_arcsec: ArrayLike,
    image_fwhm_arcsec: ArrayLike,
    motion_arcsec_day: ArrayLike,
) -> Floats:
    """Days between two epochs after which bright and dark ring of their difference no longer overlap.

    sqrt(tau^2 + (dust width/rate)^2 + (FWHM/rate)^2). For an untilted sheet dust width/rate = t dz/r.
    duration, dust width and image FWHM at least 0; motion: growth of the radius, not 0 (its sign does not
    matter). Broadcasts. Raises DomainError.
    """
    tau = checked("duration_days", duration_days, at_least=0.0)
    dust = checked("dust_width_arcsec", dust_width_arcsec, at_least=0.0)
    image = checked("image_fwhm_arcsec", image_fwhm_arcsec, at_least=0.0)
    with np.errstate(invalid="ignore"):
        rate = checked("abs(motion_arcsec_day)", np.abs(np.asarray(motion_arcsec_day, dtype=np.float64)), above=0.0)
    return plain(np.sqrt(tau**2 + (dust / rate) ** 2 + (image / rate) ** 2))


def _common(
    radius_arcsec: ArrayLike, delay_days: ArrayLike, distance_pc: ArrayLike, radial_slope: ArrayLike
) -> tuple[Floats, Floats, Floats, Floats]:
    scale = RAD_ARCSEC / checked("distance_pc", distance_pc, above=0.0)
    rho = checked("radius_arcsec", radius_arcsec, at_least=0.0) / scale
    return rho, C_PC_PER_DAY * checked("delay_days", delay_days), checked("radial_slope", radial_slope), scale


def _shell(
    delay_days: ArrayLike, shell_radius_pc: ArrayLike, distance_pc: ArrayLike
) -> tuple[Floats, Floats, Floats, Floats]:
    a = checked("shell_radius_pc", shell_radius_pc, above=0.0)
    ct = C_PC_PER_DAY * checked("delay_days", delay_days)
    with np.errstate(invalid="ignore"):
        rho = np.sqrt(ct) * np.sqrt(2.0 * a - ct)
    return rho, ct, a, RAD_ARCSEC / checked("distance_pc", distance_pc, above=0.0)
