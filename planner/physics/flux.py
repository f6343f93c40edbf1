"""Brightness of jet knots: fading, spectrum, Doppler boosting, ratio of a pair.

Here S ~ nu^spectral_index (negative for optically thin synchrotron); papers that write S ~ nu^-alpha mean
spectral_index = -alpha. Any flux unit goes in and comes out; names say mjy because files do.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from planner.physics._numbers import Floats, checked, plain
from planner.records import lock

STEADY_JET, SINGLE_BLOB = 2.0, 3.0  # exponent of the Doppler factor besides the spectral index


def exponential_mjy(start_mjy: ArrayLike, days: ArrayLike, efold_days: ArrayLike) -> Floats:
    """Flux ``days`` after it was ``start_mjy`` (at least 0), falling by e in efold_days (above 0).

    Negative days look back. Broadcasts. Raises DomainError.
    """
    start = checked("start_mjy", start_mjy, at_least=0.0)
    efold = checked("efold_days", efold_days, above=0.0)
    return plain(start * np.exp(-checked("days", days) / efold))


def exponential_days_above(start_mjy: ArrayLike, limit_mjy: ArrayLike, efold_days: ArrayLike) -> Floats:
    """Days until an exponential fading reaches a limit: negative if it is below already. All above 0.

    Broadcasts. Raises DomainError.
    """
    start = checked("start_mjy", start_mjy, above=0.0)
    limit = checked("limit_mjy", limit_mjy, above=0.0)
    return plain(checked("efold_days", efold_days, above=0.0) * np.log(start / limit))


def power_law_mjy(start_mjy: ArrayLike, ratio: ArrayLike, index: ArrayLike) -> Floats:
    """Flux falling as (distance or age over that of ``start_mjy``)^-index; ratio above 0.

    An index near 1.3 with distance is from memory. Broadcasts. Raises DomainError.
    """
    start = checked("start_mjy", start_mjy, at_least=0.0)
    return plain(start * checked("ratio", ratio, above=0.0) ** -checked("index", index))


def at_frequency_mjy(flux_mjy: ArrayLike, from_ghz: ArrayLike, to_ghz: ArrayLike, spectral_index: ArrayLike) -> Floats:
    """Flux at another frequency (both above 0): S ~ nu^spectral_index. Broadcasts. Raises DomainError."""
    flux = checked("flux_mjy", flux_mjy, at_least=0.0)
    ratio = checked("to_ghz", to_ghz, above=0.0) / checked("from_ghz", from_ghz, above=0.0)
    return plain(flux * ratio ** checked("spectral_index", spectral_index))


def boosting(doppler: ArrayLike, spectral_index: ArrayLike, exponent: ArrayLike = SINGLE_BLOB) -> Floats:
    """Observed over rest-frame flux at one observed frequency: doppler^(exponent - spectral_index).

    doppler above 0; exponent 2 for a steady jet, 3 for a single blob (mixing them up costs one power).
    Broadcasts. Raises DomainError.
    """
    d = checked("doppler", doppler, above=0.0)
    return plain(d ** (checked("exponent", exponent) - checked("spectral_index", spectral_index)))


# ------------------------------------------------------------------ a pair


def ratio_equal_separation(beta_cos: ArrayLike, spectral_index: ArrayLike, exponent: ArrayLike = SINGLE_BLOB) -> Floats:
    """Approaching over receding flux when both are equally far from the core (equal intrinsic age).

    [(1 + b)/(1 - b)]^(exponent - spectral_index) with b = beta cos(angle), inside -1..1. Broadcasts.
    Raises DomainError.
    """
    power = checked("exponent", exponent) - checked("spectral_index", spectral_index)
    return plain(_age_ratio(beta_cos) ** power)


def ratio_equal_time(
    beta_cos: ArrayLike,
    spectral_index: ArrayLike,
    fading_index: ArrayLike,
    exponent: ArrayLike = SINGLE_BLOB,
) -> Floats:
    """Approaching over receding flux in one image, for knots that fade as (intrinsic age)^-fading_index.

    The receding knot is seen younger, hence brighter: the ratio is smaller than at equal separation (light
    travel makes the simple use of the ratio unsafe; Miller-Jones et al. 2004, abstract). beta_cos inside
    -1..1. Broadcasts. Raises DomainError.
    """
    power = checked("exponent", exponent) - checked("spectral_index", spectral_index)
    return plain(_age_ratio(beta_cos) ** (power - checked("fading_index", fading_index)))


def beta_cos_of_ratio(ratio: ArrayLike, spectral_index: ArrayLike, exponent: ArrayLike = SINGLE_BLOB) -> Floats:
    """Beta cos(angle) from the flux ratio (above 0) at equal separation; a lower limit gives a lower limit.

    exponent - spectral_index must be above 0. Broadcasts. Raises DomainError.
    """
    power = checked(
        "exponent - spectral_index",
        np.asarray(exponent, dtype=np.float64) - np.asarray(spectral_index, dtype=np.float64),
        above=0.0,
    )
    # (q - 1)/(q + 1) with q = ratio^(1/power)
    return plain(np.tanh(np.log(checked("ratio", ratio, above=0.0)) / power / 2.0))


def _age_ratio(beta_cos: ArrayLike) -> Floats:
    b = checked("beta_cos", beta_cos, above=-1.0, below=1.0)
    return (1.0 + b) / (1.0 - b)


# ------------------------------------------------------------------ adiabatic blob


@dataclass(frozen=True)
class AdiabaticExponents:
    """Scaling laws of an expanding blob of relativistic electrons (van der Laan 1966, from memory)."""

    thin_flux_by_radius: Floats  # S ~ R^-this where the blob is transparent
    peak_frequency_by_radius: Floats  # nu_peak ~ R^-this
    peak_flux_by_frequency: Floats  # S_peak ~ nu_peak^this
    peak_date_by_frequency: Floats  # linear expansion: date of the peak ~ nu^-this

    def __post_init__(self) -> None:
        lock(self)


def adiabatic_exponents(electron_index: ArrayLike) -> AdiabaticExponents:
    """Exponents for electrons N(E) ~ E^-electron_index (above 1; thin spectral index (1 - p)/2).

    Raises DomainError.
    """
    p = checked("electron_index", electron_index, above=1.0)
    return AdiabaticExponents(
        plain(2.0 * p),
        plain((4.0 * p + 6.0) / (p + 4.0)),
        plain((7.0 * p + 3.0) / (4.0 * p + 6.0)),
        plain((p + 4.0) / (4.0 * p + 6.0)),
    )


def adiabatic_mjy(
    peak_mjy: ArrayLike,
    ghz_over_peak: ArrayLike,
    radius_ratio: ArrayLike,
    electron_index: ArrayLike,
) -> Floats:
    """Flux of a blob expanded by ``radius_ratio`` (above 0) since its spectrum peaked at ``peak_mjy``.

    ghz_over_peak: frequency over that of the spectral peak at radius ratio 1, above 0. The blob rises while
    opaque at that frequency and fades as radius^(-2p) once transparent. Broadcasts. Raises DomainError.
    van der Laan 1966 (from memory).
    """
    peak = checked("peak_mjy", peak_mjy, at_least=0.0)
    nu = checked("ghz_over_peak", ghz_over_peak, above=0.0)
    size = checked("radius_ratio", radius_ratio, above=0.0)
    p = checked("electron_index", electron_index, above=1.0)
    depth = _peak_depth(p)
    here = depth * nu ** (-(p + 4.0) / 2.0) * size ** -(2.0 * p + 3.0)
    return plain(peak * nu**2.5 * size**3 * np.expm1(-here) / np.expm1(-depth))


def _peak_depth(p: Floats) -> Floats:
    """Optical depth at the peak of the spectrum: the root above 0 of e^x = 1 + (p + 4) x / 5."""
    slope = (p + 4.0) / 5.0
    # starts above the root; the function is convex, so Newton's steps only go down to it
    x = 2.0 * (slope - 1.0)
    for _ in range(60):  # quadratic near the root; linear only for p -> 1, where the root meets 0
        x = x - (np.expm1(x) - slope * x) / (np.exp(x) - slope)
    return x
