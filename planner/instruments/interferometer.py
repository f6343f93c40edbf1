"""Radio arrays: noise, beam, resolution and the error of a knot's position.

Sizes and separations share one unit within a call (mas in this package). Position angles run from north
through east, in degrees; the beam's is that of its major axis.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from planner.errors import DomainError
from planner.units import LIGHT_M_S, RAD_MAS

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

# FWHM of the Gaussian whose curvature at the peak equals that of the dirty beam with (u,v) second moment s:
# sqrt(2 ln 2) / (pi sqrt(s)), closed form.
FWHM_PER_ROOT_MOMENT = math.sqrt(2.0 * math.log(2.0)) / math.pi
BLENDED_BEAMS = 1.5  # separation below which neighbours disturb each other; common practice, no source
AIR_K = 265.0  # mean temperature of the emitting air, 250-280 K; from memory
UNRESOLVED_BEAMS = 0.5  # separation at and below which nothing is learned; common practice, no source


@dataclass(frozen=True, slots=True)
class Beam:
    """An elliptical Gaussian beam, FWHM in mas."""

    major_mas: float
    minor_mas: float
    pa_deg: float


# ------------------------------------------------------------------ noise


def baseline_noise_jy(
    sefd_a_jy: ArrayLike,
    sefd_b_jy: ArrayLike,
    efficiency: ArrayLike,
    bandwidth_hz: ArrayLike,
    seconds: ArrayLike,
) -> Floats:
    """Noise of one baseline and polarisation, Jy: sqrt(SEFD_a SEFD_b) / (efficiency sqrt(2 bandwidth time)).

    Broadcast; inf at zero time. Source: standard radiometer equation (Taylor, Carilli & Perley 1999, from
    memory).
    """
    a, b = _positive("sefd_a_jy", sefd_a_jy), _positive("sefd_b_jy", sefd_b_jy)
    return _noise(2.0 / (a * b), efficiency, bandwidth_hz, seconds, 1)


def image_noise_jy(
    sefd_jy: ArrayLike,
    efficiency: ArrayLike,
    bandwidth_hz: ArrayLike,
    seconds: ArrayLike,
    polarisations: ArrayLike,
) -> Floats:
    """Noise of a naturally weighted image, Jy/beam.

    ``sefd_jy``: (..., S), one per station, S at least 2; a station that is absent has inf. The other
    arguments broadcast against the leading shape. ``polarisations``: 1, or 2 for Stokes I.
    1 / (efficiency sqrt(sum over pairs of 2 n_pol bandwidth time / (SEFD_i SEFD_j))); for S equal stations
    SEFD / (efficiency sqrt(n_pol S (S-1) bandwidth time)). inf where fewer than two stations take part.
    """
    sefd = _stations(sefd_jy)
    gain = 1.0 / sefd
    # Sum over pairs as each station times all before it: only positive terms, no cancellation.
    pairs = (gain[..., 1:] * np.cumsum(gain, axis=-1)[..., :-1]).sum(axis=-1)
    return _noise(2.0 * pairs, efficiency, bandwidth_hz, seconds, polarisations)


def image_noise_by_baseline_jy(
    sefd_jy: ArrayLike,
    efficiency: ArrayLike,
    bandwidth_hz: ArrayLike,
    seconds_of_baseline: ArrayLike,
    polarisations: ArrayLike,
) -> Floats:
    """Image noise when stations are not all up all the time, Jy/beam.

    ``sefd_jy``: (S,). ``seconds_of_baseline``: (..., S (S-1) / 2) in the order of ``station_pairs(S)``, e.g.
    from ``common_seconds``. Other arguments broadcast against the leading shape. inf without any common time.
    """
    sefd = _stations(sefd_jy)
    first, second = station_pairs(sefd.shape[-1])
    seconds = _not_negative("seconds_of_baseline", seconds_of_baseline)
    if seconds.shape[-1:] != (first.size,):
        raise DomainError("seconds_of_baseline", f"last axis {seconds.shape[-1:]}", f"{first.size} baselines")
    weighted = (2.0 * seconds / (sefd[..., first] * sefd[..., second])).sum(axis=-1)
    return _noise(weighted, efficiency, bandwidth_hz, 1.0, polarisations)


def station_pairs(stations: int) -> tuple[Ints, Ints]:
    """Return the two station numbers of every baseline: (0,1), (0,2), ..., (1,2), ..."""
    first, second = np.triu_indices(stations, k=1)
    return first.astype(np.int64), second.astype(np.int64)


def common_seconds(up: ArrayLike, step_s: float) -> Floats:
    """Seconds for which both stations of a baseline see the target.

    ``up``: (S, T) true while a station sees it, in steps of ``step_s``. Returns (S (S-1) / 2,).
    """
    seen = np.asarray(up, dtype=float)
    first, second = station_pairs(seen.shape[0])
    return np.asarray((seen @ seen.T)[first, second] * step_s)


def effective_noise_jy(thermal_jy: ArrayLike, core_jy: ArrayLike, dynamic_range: ArrayLike) -> Floats:
    """Noise of an image whose dynamic range is limited: thermal and core / dynamic range in quadrature."""
    limit = np.asarray(core_jy, float) / _positive("dynamic_range", dynamic_range)
    return np.hypot(np.asarray(thermal_jy, float), limit)[()]


def sefd_factor(elevation_deg: ArrayLike, zenith_opacity: ArrayLike, system_k: ArrayLike) -> Floats:
    """By how much the air raises a station's SEFD above that at the zenith; broadcast, 1 without opacity.

    exp(tau (X - 1)) for the light lost, with the airmass X = 1/sin(elevation), times the rise of the system
    temperature from ``system_k`` at the zenith by the emission of more air: 1 + T_air (e^-tau - e^(-tau X)) / T_sys
    (radiative transfer of one warm layer; T_air from memory). inf at the horizon and below.
    """
    sine = np.sin(np.radians(np.asarray(elevation_deg, dtype=float)))
    tau, system = _not_negative("zenith_opacity", zenith_opacity), _positive("system_k", system_k)
    with np.errstate(divide="ignore", over="ignore", invalid="ignore"):
        airmass = 1.0 / np.where(sine > 0, sine, np.nan)
        lost = np.exp(tau * (airmass - 1.0))
        warmer = 1.0 + AIR_K * (np.exp(-tau) - np.exp(-tau * airmass)) / system
    return np.where(sine > 0, lost * warmer, np.inf)[()]


# ------------------------------------------------------------------ beam


def resolution_mas(ghz: ArrayLike, baseline_km: ArrayLike) -> Floats:
    """Wavelength over baseline in mas (2063 x wavelength in cm / baseline in km)."""
    wavelength_m = LIGHT_M_S / (_positive("ghz", ghz) * 1e9)
    return np.asarray(RAD_MAS * wavelength_m / (_positive("baseline_km", baseline_km) * 1e3))[()]


def beam_from_uv(u: ArrayLike, v: ArrayLike, weights: ArrayLike | None = None) -> Beam:
    """Beam of naturally weighted samples from the second moments of their (u,v) points.

    ``u``, ``v``: same shape, in wavelengths, east and north; ``weights``: broadcast to it, none negative
    (default equal). The Gaussian has the curvature of the dirty beam at its peak; a fit to a full track's
    beam comes out 5-11 % larger. A beam with no extent of samples along one direction has an infinite major
    axis. The position angle is in (-90, 90] and means nothing when the axes agree. Raises DomainError without
    any weight.
    """
    x, y = np.broadcast_arrays(np.asarray(u, float), np.asarray(v, float))
    w = np.broadcast_to(_not_negative("weights", 1.0 if weights is None else weights), x.shape)
    total = float(w.sum())
    if not total > 0:
        raise DomainError("weights", total, "at least one (u,v) sample with a weight above 0")
    uu, vv, uv = (
        float((w * x * x).sum()) / total,
        float((w * y * y).sum()) / total,
        float((w * x * y).sum()) / total,
    )
    middle, half = 0.5 * (uu + vv), math.hypot(0.5 * (uu - vv), uv)
    largest = middle + half
    smallest = max(0.0, (uu * vv - uv * uv) / largest) if largest > 0 else 0.0
    pa = 0.5 * math.degrees(math.atan2(2.0 * uv, vv - uu)) + 90.0
    return Beam(_fwhm_mas(smallest), _fwhm_mas(largest), pa - 180.0 if pa > 90.0 else pa)


def cut_fwhm(major: ArrayLike, minor: ArrayLike, beam_pa_deg: ArrayLike, pa_deg: ArrayLike) -> Floats:
    """FWHM of the beam along a position angle through its centre: the one that resolves; unit of axes."""
    cosine, sine = _between(beam_pa_deg, pa_deg)
    a, b = _positive("major", major), _positive("minor", minor)
    return np.asarray(1.0 / np.hypot(cosine / a, sine / b))[()]


def separation_in_beams(
    east: ArrayLike, north: ArrayLike, major: ArrayLike, minor: ArrayLike, beam_pa_deg: ArrayLike
) -> Floats:
    """Length of an offset over ``cut_fwhm`` in its own direction, without forming the angle; 0 for no offset.

    All lengths in one unit; broadcasts.
    """
    pa = np.radians(np.asarray(beam_pa_deg, float))
    sine, cosine = np.sin(pa), np.cos(pa)
    e, n = np.asarray(east, float), np.asarray(north, float)
    a, b = _positive("major", major), _positive("minor", minor)
    along, across = np.asarray(e * (sine / a)), np.asarray(e * (cosine / b))
    along = along + n * (cosine / a)
    across = across - n * (sine / b)
    return np.sqrt(along * along + across * across)[()]


def projected_fwhm(major: ArrayLike, minor: ArrayLike, beam_pa_deg: ArrayLike, pa_deg: ArrayLike) -> Floats:
    """FWHM along a position angle after the beam is summed across it; never below ``cut_fwhm``."""
    cosine, sine = _between(beam_pa_deg, pa_deg)
    return np.hypot(np.asarray(major, float) * cosine, np.asarray(minor, float) * sine)[()]


# ------------------------------------------------------------------ what can be told of a knot


def smallest_size(beam_fwhm: ArrayLike, snr: ArrayLike, weighting: Literal["natural", "uniform"] = "natural") -> Floats:
    """Smallest size that can be told from a point; unit of ``beam_fwhm``.

    ``beam_fwhm``: sqrt(major x minor), or the cut along one position angle. Returns
    2^(2 - w/2) b sqrt(ln 2 / pi ln(SNR / (SNR - 1))), w = 2 natural, 0 uniform (Lobanov 2005; the formula
    from memory). inf at S/N of 1 and below: nothing is resolved.
    """
    ratio = np.asarray(snr, dtype=float)
    safe = np.where(ratio > 1.0, ratio, 2.0)
    factor = 2.0 if weighting == "natural" else 4.0
    size = factor * np.sqrt(math.log(2.0) / math.pi * -np.log1p(-1.0 / safe))
    return (np.asarray(beam_fwhm, float) * np.where(ratio > 1.0, size, np.inf))[()]


def position_error(
    cut: ArrayLike,
    snr: ArrayLike,
    size: ArrayLike,
    floor_beam: ArrayLike,
    knot_snr: ArrayLike | None = None,
) -> Floats:
    """One standard deviation of a knot's position along the direction of ``cut``; unit of ``cut``.

    sqrt((cut / 2 SNR)^2 + (size / 2 SNR_knot)^2 + (floor_beam cut)^2): Fomalont 1999, from memory, and a
    floor as a share of the beam. ``knot_snr`` is that of the fitted knot if it differs from the peak's. inf
    at S/N 0.
    """
    beam, peak = _positive("cut", cut), _not_negative("snr", snr)
    whole = peak if knot_snr is None else _not_negative("knot_snr", knot_snr)
    with np.errstate(divide="ignore"):
        half_peak, half_whole = 0.5 / peak, 0.5 / whole
    wide = _not_negative("size", size)
    extent = np.where(wide > 0, np.where(wide > 0, wide, 1.0) * half_whole, 0.0)
    return np.sqrt((beam * half_peak) ** 2 + extent**2 + (np.asarray(floor_beam, float) * beam) ** 2)[()]


def blending_factor(separation_in_beams: ArrayLike) -> Floats:
    """By how much blending with a neighbour multiplies the variance of a position.

    1 from 1.5 beams on, 1 / (separation - 0.5) inside (so it joins 1 at 1.5), inf at half a beam and inside:
    no information there. Our choice of shape; the two limits are common practice, no source.
    """
    apart = np.asarray(separation_in_beams, dtype=float)
    inside = apart > UNRESOLVED_BEAMS
    room = np.where(inside, apart - UNRESOLVED_BEAMS, 1.0) / (BLENDED_BEAMS - UNRESOLVED_BEAMS)
    factor = np.where(inside, 1.0 / np.minimum(room, 1.0), np.inf)
    return np.where(np.isnan(apart), np.nan, factor)[()]


# ------------------------------------------------------------------ private


def _positive(name: str, value: ArrayLike) -> Floats:
    array = np.asarray(value, dtype=float)
    if np.any(array <= 0):
        raise DomainError(name, float(np.nanmin(array)), "a value above 0")
    return array


def _not_negative(name: str, value: ArrayLike) -> Floats:
    array = np.asarray(value, dtype=float)
    if np.any(array < 0):
        raise DomainError(name, float(np.nanmin(array)), "a value of 0 or more")
    return array


def _stations(sefd_jy: ArrayLike) -> Floats:
    sefd = _positive("sefd_jy", sefd_jy)
    if sefd.ndim == 0 or sefd.shape[-1] < 2:
        raise DomainError("sefd_jy", f"shape {sefd.shape}", "one value for each of at least 2 stations")
    return sefd


def _noise(
    weight: Floats,
    efficiency: ArrayLike,
    bandwidth_hz: ArrayLike,
    seconds: ArrayLike,
    polarisations: ArrayLike,
) -> Floats:
    """1 / (efficiency sqrt(weight x n_pol x bandwidth x time))."""
    time, width = _not_negative("seconds", seconds), _positive("bandwidth_hz", bandwidth_hz)
    samples = weight * _positive("polarisations", polarisations) * width * time
    with np.errstate(divide="ignore"):
        return np.asarray(1.0 / (_positive("efficiency", efficiency) * np.sqrt(samples)))[()]


def _fwhm_mas(moment: float) -> float:
    return RAD_MAS * FWHM_PER_ROOT_MOMENT / math.sqrt(moment) if moment > 0 else math.inf


def _between(beam_pa_deg: ArrayLike, pa_deg: ArrayLike) -> tuple[Floats, Floats]:
    angle = np.radians(np.asarray(pa_deg, float) - np.asarray(beam_pa_deg, float))
    return np.cos(angle), np.sin(angle)
