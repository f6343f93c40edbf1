"""How bright an echo is: single scattering on dust of known albedo and asymmetry.

The phase function is normalised to ONE over the sphere (some papers use 4 pi: 2.75 mag apart). Extinction in
magnitudes is turned into optical depth with 1.0857. Scattering angle 0 is forward. Absolute brightness is
good to about 1 mag when the sheet's extinction is known, 2 mag or worse when only the total is: scale to a
seen epoch as soon as there is one. The surface-brightness formulas were derived for single scattering and
agree in form with Xu et al. 1993 (abstract, BAAS 25).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from planner.errors import UnknownName
from planner.physics._numbers import Floats, checked, half_angle_squares, plain
from planner.units import C_PC_PER_DAY, MAG_PER_TAU, RAD_ARCSEC, SR_ARCSEC2

GAUSSIAN_AREA = np.sqrt(np.pi / (4.0 * np.log(2.0)))  # 1.0645: area of a Gaussian over (peak times FWHM)


@dataclass(frozen=True, slots=True)
class Grains:
    """Scattering by one dust mix in one filter."""

    wavelength_micron: float
    albedo: float
    g: float  # mean cosine of the scattering angle
    extinction_cm2_per_h: float | None = None  # extinction cross-section per hydrogen nucleus; None: not read


# B. T. Draine's tables: 2003 run of the Weingartner & Draine 2001 case A mix, R_V = 3.1, 60 ppm (file
# kext_albedo_WD_MW_3.1A_60_D03), read in a copy.
MILKY_WAY = {
    "B": Grains(0.4405, 0.6529, 0.5654, 6.415e-22),
    "g": Grains(0.4685, 0.6609, 0.5602, 5.968e-22),
    "V": Grains(0.547, 0.6735, 0.5382, 4.896e-22),
    "r": Grains(0.6165, 0.6756, 0.5126, 4.155e-22),
    "R": Grains(0.6492, 0.6745, 0.4995, 3.860e-22),
    "i": Grains(0.748, 0.6651, 0.4592, 3.136e-22),
    "I": Grains(0.802, 0.6576, 0.4381, 2.823e-22),
}
# Same author, Large Magellanic Cloud average (file kext_albedo_WD_LMCavg_20, identified by its name),
# interpolated between table rows; the B row was not read.
LMC = {
    "g": Grains(0.4685, 0.7308, 0.6166),
    "V": Grains(0.547, 0.7623, 0.6070, 1.068e-22),
    "r": Grains(0.6165, 0.7748, 0.5914),
    "R": Grains(0.6492, 0.7770, 0.5824),
    "i": Grains(0.748, 0.7733, 0.5494),
    "I": Grains(0.802, 0.7670, 0.5298),
}
MIXES = {"milky_way": MILKY_WAY, "lmc": LMC}


def grains(name: str, filter: str) -> tuple[float, float]:
    """Return (albedo, g) of a dust mix ("milky_way" or "lmc") in a filter (B g V r R i I; no B for lmc).

    Raises UnknownName with the permitted names.
    """
    row = _row(name, filter)
    return row.albedo, row.g


def hydrogen_column_cm2(extinction_mag: ArrayLike, name: str, filter: str) -> Floats:
    """Hydrogen nuclei per cm2 that go with an extinction (at least 0 mag) of this mix in this filter.

    Raises DomainError, and UnknownName where the cross-section of that filter was not read.
    """
    row = _row(name, filter)
    if row.extinction_cm2_per_h is None:
        known = [f for f, g in MIXES[name].items() if g.extinction_cm2_per_h is not None]
        raise UnknownName(filter, known, what=f"filter with a cross-section for {name} dust")
    a = checked("extinction_mag", extinction_mag, at_least=0.0)
    return plain(a / MAG_PER_TAU / row.extinction_cm2_per_h)


def _row(name: str, filter: str) -> Grains:
    if name not in MIXES:
        raise UnknownName(name, MIXES, what="dust mix")
    if filter not in MIXES[name]:
        raise UnknownName(filter, MIXES[name], what=f"filter of {name} dust")
    return MIXES[name][filter]


def phase_function(scattering_deg: ArrayLike, g: ArrayLike) -> Floats:
    """Henyey-Greenstein phase function, per steradian, 1 over the sphere.

    scattering_deg: 0 (forward) to 180; g: mean cosine, inside -1..1. Broadcasts. Raises DomainError.
    A good approximation only between about 0.4 and 1 micron (Draine 2003, abstract).
    """
    g = checked("g", g, above=-1.0, below=1.0)
    sin2, cos2 = half_angle_squares(checked("scattering_deg", scattering_deg, at_least=0.0, at_most=180.0))
    return plain(_phase(sin2, cos2, g))


def _phase(sin2_half: Floats, cos2_half: Floats, g: Floats) -> Floats:
    # 1 + g^2 - 2 g cos as a sum of two positive parts for either sign of g
    base = np.where(g >= 0.0, (1.0 - g) ** 2 + 4.0 * g * sin2_half, (1.0 + g) ** 2 - 4.0 * g * cos2_half)
    return (1.0 - g) * (1.0 + g) / (4.0 * np.pi * base * np.sqrt(base))


def scattered_fraction(
    extinction_mag: ArrayLike, albedo: ArrayLike, g: ArrayLike, depth_pc: ArrayLike, delay_days: ArrayLike
) -> Floats:
    """Share of the light that a thin sheet scatters toward us, per steradian: tau_s times phase function.

    extinction_mag: of the sheet along the line of sight, above 0; albedo: above 0, at most 1. nan where the
    untilted sheet has no ring. Broadcasts. Raises DomainError.
    """
    depth = checked("extinction_mag", extinction_mag, above=0.0) / MAG_PER_TAU
    albedo = checked("albedo", albedo, above=0.0, at_most=1.0)
    g = checked("g", g, above=-1.0, below=1.0)
    z0, ct = checked("depth_pc", depth_pc), C_PC_PER_DAY * checked("delay_days", delay_days)
    lit = (ct >= 0.0) & (2.0 * z0 + ct >= 0.0) & (z0 + ct > 0.0)
    with np.errstate(divide="ignore", invalid="ignore"):
        r2 = np.where(lit, 2.0 * (z0 + ct), np.nan)
        # cos = z/r, so sin^2 and cos^2 of half the angle are ct/2r and (2z + ct)/2r
        return plain(albedo * depth * _phase(ct / r2, (2.0 * z0 + ct) / r2, g))


def ring_mag_arcsec2(
    peak_mag: ArrayLike,
    extinction_mag: ArrayLike,
    albedo: ArrayLike,
    g: ArrayLike,
    depth_pc: ArrayLike,
    delay_days: ArrayLike,
    distance_pc: ArrayLike,
) -> Floats:
    """Surface brightness at the peak of a resolved ring on a thin untilted sheet.

    I = tau_s Phi F_max (D/r)^2. peak_mag: of the outburst as seen directly, same filter and reddening. Valid
    while the sheet is thinner than r tau/t along the line of sight (``thin_limit_pc``). Limits of the other
    arguments as in ``scattered_fraction``; distance_pc above 0. nan where no ring is. Broadcasts.
    Raises DomainError.
    """
    peak = checked("peak_mag", peak_mag)
    share = np.asarray(scattered_fraction(extinction_mag, albedo, g, depth_pc, delay_days))
    r = np.asarray(depth_pc, dtype=np.float64) + C_PC_PER_DAY * np.asarray(delay_days, dtype=np.float64)
    big = checked("distance_pc", distance_pc, above=0.0)
    with np.errstate(divide="ignore", invalid="ignore"):
        # logarithms one by one: next to the source D/r can overflow
        return plain(peak - 2.5 * np.log10(share / SR_ARCSEC2) - 5.0 * (np.log10(big) - np.log10(r)))


def thin_limit_pc(duration_days: ArrayLike, depth_pc: ArrayLike, delay_days: ArrayLike) -> Floats:
    """Thickness (along the line of sight) up to which a sheet counts as thin: r tau/t.

    duration_days above 0; nan where the untilted sheet has no ring or the delay is 0. Raises DomainError.
    """
    tau = checked("duration_days", duration_days, above=0.0)
    z0, t = checked("depth_pc", depth_pc), checked("delay_days", delay_days)
    ct = C_PC_PER_DAY * t
    with np.errstate(divide="ignore", invalid="ignore"):
        return plain(np.where((t > 0.0) & (2.0 * z0 + ct >= 0.0), (z0 + ct) * tau / t, np.nan))


def whole_ring_mag(
    peak_mag: ArrayLike,
    duration_days: ArrayLike,
    extinction_mag: ArrayLike,
    albedo: ArrayLike,
    g: ArrayLike,
    depth_pc: ArrayLike,
    delay_days: ArrayLike,
) -> Floats:
    """Magnitude of a complete ring: F = 2 pi c tau_s Phi (fluence) / r, fluence = peak flux times duration.

    duration_days: equivalent width of the light curve, above 0. Real rings are patchy: fainter than this.
    Other arguments and nan as for ``ring_mag_arcsec2``. Broadcasts. Raises DomainError.
    """
    peak = checked("peak_mag", peak_mag)
    tau = C_PC_PER_DAY * checked("duration_days", duration_days, above=0.0)
    share = np.asarray(scattered_fraction(extinction_mag, albedo, g, depth_pc, delay_days))
    r = np.asarray(depth_pc, dtype=np.float64) + C_PC_PER_DAY * np.asarray(delay_days, dtype=np.float64)
    with np.errstate(divide="ignore", invalid="ignore"):
        return plain(peak - 2.5 * (np.log10(2.0 * np.pi * tau * share) - np.log10(r)))


def seeing_limited_mag_arcsec2(ring_mag: ArrayLike, radius_arcsec: ArrayLike, width_arcsec: ArrayLike) -> Floats:
    """Peak surface brightness of a complete ring whose light is spread over a Gaussian of this FWHM.

    I = F_ring / (2 pi theta 1.0645 W). For rings narrower than the image is sharp. radius_arcsec and
    width_arcsec above 0. Broadcasts. Raises DomainError.
    """
    mag = checked("ring_mag", ring_mag)
    theta = checked("radius_arcsec", radius_arcsec, above=0.0)
    width = checked("width_arcsec", width_arcsec, above=0.0)
    return plain(mag + 2.5 * np.log10(2.0 * np.pi * theta * GAUSSIAN_AREA * width))


def thick_mag_arcsec2(
    peak_mag: ArrayLike,
    duration_days: ArrayLike,
    extinction_mag_pc: ArrayLike,
    albedo: ArrayLike,
    g: ArrayLike,
    depth_pc: ArrayLike,
    delay_days: ArrayLike,
    distance_pc: ArrayLike,
) -> Floats:
    """Surface brightness of dust far thicker than r tau/t, at the depth that is lit: kappa Phi Fl D^2/(r t).

    The lit path along the line of sight is r tau/t. extinction_mag_pc: magnitudes per parsec, above 0;
    duration_days: equivalent width of the light curve, above 0. Other arguments and nan as for
    ``ring_mag_arcsec2`` (nan also at delay 0). Broadcasts. Raises DomainError.
    """
    per_pc = checked("extinction_mag_pc", extinction_mag_pc, above=0.0)
    path = np.asarray(thin_limit_pc(duration_days, depth_pc, delay_days))
    return ring_mag_arcsec2(
        peak_mag, per_pc * np.where(path > 0.0, path, np.nan), albedo, g, depth_pc, delay_days, distance_pc
    )


def shell_flux_ratio(
    delay_days: ArrayLike, shell_radius_pc: ArrayLike, scattering_depth: ArrayLike, duration_days: ArrayLike
) -> Floats:
    """Flux of a complete thin shell of isotropic grains over the peak flux: tau_s c (duration)/(2a).

    Constant while 0 < ct < 2a, zero outside. scattering_depth (tau_s) at least 0, shell_radius_pc and
    duration_days (equivalent width of the light curve) above 0. Broadcasts. Raises DomainError.
    """
    a = checked("shell_radius_pc", shell_radius_pc, above=0.0)
    tau_s = checked("scattering_depth", scattering_depth, at_least=0.0)
    tau = checked("duration_days", duration_days, above=0.0)
    ct = C_PC_PER_DAY * checked("delay_days", delay_days)
    lit = (ct > 0.0) & (ct < 2.0 * a)
    return plain(np.where(lit | np.isnan(ct), tau_s * C_PC_PER_DAY * tau / (2.0 * a) + 0.0 * ct, 0.0))


def polarisation_share(scattering_deg: ArrayLike) -> Floats:
    """Polarisation over its greatest value at a scattering angle: sin^2/(1 + cos^2), highest at 90 deg.

    scattering_deg: 0 to 180. Real dust may peak a few degrees off (from memory). Raises DomainError.
    """
    sin2, cos2 = half_angle_squares(checked("scattering_deg", scattering_deg, at_least=0.0, at_most=180.0))
    return plain(4.0 * sin2 * cos2 / (1.0 + (cos2 - sin2) ** 2))


def polarised_radius_arcsec(delay_days: ArrayLike, distance_pc: ArrayLike) -> Floats:
    """Radius at which extended dust around the source scatters at 90 deg: ct/D, growing at exactly c.

    distance_pc above 0; nan for delays below 0. Broadcasts. Raises DomainError. Sparks 1994 (from memory).
    """
    ct = C_PC_PER_DAY * checked("delay_days", delay_days)
    scale = RAD_ARCSEC / checked("distance_pc", distance_pc, above=0.0)
    return plain(np.where(ct < 0.0, np.nan, ct) * scale)
