"""Camera: signal-to-noise of rings and stars, the time they need, and the glare of the source.

All functions broadcast over numpy arrays. Rates are electrons per second; a measured sky brightness is what
reaches the telescope and is not dimmed again by extinction.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray

from planner.campaign.records import CameraSetup
from planner.errors import DomainError
from planner.instruments.bands import photons_e_s

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

APERTURE_RADIUS_FWHM = 0.673  # best radius for a Gaussian image on a sky-limited frame; common practice
SEEING_AIRMASS_POWER = 0.6  # seeing grows as airmass^(3/5) (Kolmogorov turbulence); common practice
LEAST_GLARE_FWHM = 2.0  # a ring closer than this to its source is not resolved from it; common practice
FRAME_SLACK = 1e-9  # a look of 600.0000001 s at 300 s a frame is two frames, not three
MOST_FRAMES = 1e9  # longer than any look; keeps the count an integer for sources without hope


def snr(
    source_e_s: ArrayLike,
    sky_e_s_pix: ArrayLike,
    seconds: ArrayLike,
    pixels: ArrayLike,
    *,
    dark_e_s: ArrayLike = 0.0,
    read_noise_e: ArrayLike = 0.0,
    frames: ArrayLike = 1,
    background_pixels: ArrayLike = math.inf,
    floor: ArrayLike = 0.0,
    sky_counts: ArrayLike = 1.0,
    template_s: ArrayLike = math.inf,
    template_frames: ArrayLike = 1,
    crowding: ArrayLike = 1.0,
) -> Floats:
    """Summed signal-to-noise ratio of a source spread over ``pixels``.

    S/N = S t / sqrt(S t + k n (1 + n/n_b) ((B + D) t + m R^2) + (floor n B t)^2), the usual CCD equation.
    ``source_e_s``: whole source in the aperture; ``sky_e_s_pix``, ``dark_e_s``: per pixel; ``read_noise_e``:
    per pixel and frame; ``frames``: m; ``background_pixels``: n_b, pixels from which the sky was taken.
    ``floor``: residual of the sky subtraction that is common to all pixels, share of the sky: it caps the
    S/N. ``sky_counts``: k = 2 for the difference of two images of equal depth (background noise counts
    twice). ``template_s`` and ``template_frames``: a template of the same sky, scaled to this image and subtracted,
    adds its own noise: t/template_s of the background's growth, and its read noise. ``crowding``: factor on the
    variance of the background, the template's included. All broadcast together.
    Returns the ratio, 0 at zero time. Raises DomainError for negative input.
    """
    named = {
        "source_e_s": source_e_s, "sky_e_s_pix": sky_e_s_pix, "seconds": seconds, "pixels": pixels,
        "dark_e_s": dark_e_s, "read_noise_e": read_noise_e, "frames": frames, "floor": floor,
    }  # fmt: skip
    s, b, t, n, dark, read, m, eps = (_not_negative(name, value) for name, value in named.items())
    crowd = _not_negative("crowding", crowding)
    slope, still = _background(b, n, dark, read, m, background_pixels, crowd * np.asarray(sky_counts, float))
    template = crowd * _template(b, n, dark, read, template_frames, background_pixels, template_s)
    variance = (s + slope) * t + still * (t > 0) + ((eps * n * b) ** 2 + template) * t**2
    signal = np.asarray(s * t + 0.0 * variance)
    ratio = np.divide(signal, np.sqrt(variance), out=np.zeros_like(signal), where=variance != 0)
    return np.asarray(ratio)[()]


def seconds_for_snr(
    wanted: ArrayLike,
    source_e_s: ArrayLike,
    sky_e_s_pix: ArrayLike,
    pixels: ArrayLike,
    *,
    dark_e_s: ArrayLike = 0.0,
    read_noise_e: ArrayLike = 0.0,
    frames: ArrayLike = 1,
    background_pixels: ArrayLike = math.inf,
    floor: ArrayLike = 0.0,
    sky_counts: ArrayLike = 1.0,
    template_s: ArrayLike = math.inf,
    template_frames: ArrayLike = 1,
    crowding: ArrayLike = 1.0,
) -> Floats:
    """Seconds after which ``snr`` reaches ``wanted`` with a given number of frames: its inverse, closed form.

    Positive root of (S^2 - q^2 (F^2 + V)) t^2 - q^2 (S + K) t - q^2 M = 0, with F = floor n B, K the slope of the
    background variance, M its constant part, V what the template adds. nan where the floor (or the template, or a
    source without light) keeps the ratio below ``wanted`` for ever: more time will not help.
    """
    named = {
        "wanted": wanted, "source_e_s": source_e_s, "sky_e_s_pix": sky_e_s_pix, "pixels": pixels,
        "dark_e_s": dark_e_s, "read_noise_e": read_noise_e, "frames": frames, "floor": floor,
    }  # fmt: skip
    q, s, b, n, dark, read, m, eps = (_not_negative(name, value) for name, value in named.items())
    crowd = _not_negative("crowding", crowding)
    slope, still = _background(b, n, dark, read, m, background_pixels, crowd * np.asarray(sky_counts, float))
    template = crowd * _template(b, n, dark, read, template_frames, background_pixels, template_s)
    square = np.asarray(s**2 - q**2 * ((eps * n * b) ** 2 + template) + 0.0 * (slope + still))
    reachable = square > 0
    square = np.where(reachable, square, 1.0)
    linear = q**2 * (s + slope)
    root = (linear + np.sqrt(linear**2 + 4.0 * square * q**2 * still)) / (2.0 * square)
    return np.where(reachable, root, np.nan)[()]


def frames_for(setup: CameraSetup, seconds: ArrayLike) -> Ints:
    """Return the number of frames that ``seconds`` of open shutter take: 0 for none and nan, at most 10^9."""
    share = np.nan_to_num(_not_negative("seconds", seconds), nan=0.0) / setup.longest_exposure_s
    return np.ceil(np.minimum(share, MOST_FRAMES) - FRAME_SLACK).astype(np.int64)[()]


def look_minutes(setup: CameraSetup, seconds: ArrayLike) -> Floats:
    """Minutes of telescope for ``seconds`` of open shutter: overheads, exposures, one readout a frame.

    Overheads of a look: acquisition, one change of filter, calibration.
    """
    t = np.asarray(seconds, dtype=float)
    return np.asarray(overhead_min(setup) + (t + frames_for(setup, t) * setup.readout_s) / 60.0)[()]


def overhead_min(setup: CameraSetup) -> float:
    """Minutes of a look in which the shutter is closed whatever its length: readouts come on top."""
    return setup.acquisition_min + setup.calibration_min + setup.filter_change_s / 60.0


def image_fwhm_arcsec(seeing_arcsec: ArrayLike, airmass: ArrayLike) -> Floats:
    """Return the image FWHM at an airmass from the zenith seeing: seeing x airmass^0.6 (common practice)."""
    return np.asarray(np.asarray(seeing_arcsec, float) * np.asarray(airmass, float) ** SEEING_AIRMASS_POWER)[()]


def gaussian_aperture(fwhm_arcsec: ArrayLike, pixel_arcsec: ArrayLike) -> tuple[float, Floats]:
    """Best aperture of a Gaussian image: (share of the light inside, pixels inside).

    Radius 0.673 FWHM holds 1 - 2^(-4 x 0.673^2) = 0.715 of the light.
    """
    share = 1.0 - 2.0 ** (-4.0 * APERTURE_RADIUS_FWHM**2)
    radius = APERTURE_RADIUS_FWHM * _positive("fwhm_arcsec", fwhm_arcsec) / _positive("pixel_arcsec", pixel_arcsec)
    return share, np.asarray(math.pi * radius**2)[()]


def ring_snr(
    setup: CameraSetup,
    filter_name: str,
    mag_arcsec2: ArrayLike,
    area_arcsec2: ArrayLike,
    sky_mag_arcsec2: ArrayLike,
    airmass: ArrayLike,
    extinction_mag_airmass: ArrayLike,
    seconds: ArrayLike,
    *,
    rate_factor: ArrayLike = 1.0,
    sky_counts: ArrayLike | None = None,
    template_s: ArrayLike = math.inf,
    crowding: ArrayLike = 1.0,
) -> Floats:
    """Summed S/N of a ring or arc of mean brightness ``mag_arcsec2`` over ``area_arcsec2``.

    Difference imaging and the subtraction floor come from ``setup``; ``rate_factor`` scales all light, so
    that an observatory's own calculator can override our photon count. ``sky_counts`` overrides the setup's
    own count of the background's noise; ``template_s``, ``crowding``: see ``snr``. Returns the broadcast shape of
    all arrays.
    """
    source, sky, pixels = _ring_rates(
        setup,
        filter_name,
        mag_arcsec2,
        area_arcsec2,
        sky_mag_arcsec2,
        airmass,
        extinction_mag_airmass,
        rate_factor,
    )
    return _setup_snr(setup, source, sky, pixels, seconds, sky_counts, template_s, crowding)


def ring_seconds(
    setup: CameraSetup,
    filter_name: str,
    mag_arcsec2: ArrayLike,
    area_arcsec2: ArrayLike,
    sky_mag_arcsec2: ArrayLike,
    airmass: ArrayLike,
    extinction_mag_airmass: ArrayLike,
    wanted_snr: ArrayLike,
    *,
    rate_factor: ArrayLike = 1.0,
    sky_counts: ArrayLike | None = None,
    template_s: ArrayLike = math.inf,
    crowding: ArrayLike = 1.0,
) -> Floats:
    """Open-shutter seconds that bring a ring to ``wanted_snr``; nan where the floor forbids it for ever."""
    source, sky, pixels = _ring_rates(
        setup,
        filter_name,
        mag_arcsec2,
        area_arcsec2,
        sky_mag_arcsec2,
        airmass,
        extinction_mag_airmass,
        rate_factor,
    )
    return _setup_seconds(setup, source, sky, pixels, wanted_snr, sky_counts, template_s, crowding)


def point_snr(
    setup: CameraSetup,
    filter_name: str,
    mag: ArrayLike,
    fwhm_arcsec: ArrayLike,
    sky_mag_arcsec2: ArrayLike,
    airmass: ArrayLike,
    extinction_mag_airmass: ArrayLike,
    seconds: ArrayLike,
    *,
    rate_factor: ArrayLike = 1.0,
) -> Floats:
    """S/N of a star in the best Gaussian aperture; same conventions as ``ring_snr``."""
    source, sky, pixels = _point_rates(
        setup, filter_name, mag, fwhm_arcsec, sky_mag_arcsec2, airmass, extinction_mag_airmass, rate_factor
    )
    return _setup_snr(setup, source, sky, pixels, seconds)


def point_seconds(
    setup: CameraSetup,
    filter_name: str,
    mag: ArrayLike,
    fwhm_arcsec: ArrayLike,
    sky_mag_arcsec2: ArrayLike,
    airmass: ArrayLike,
    extinction_mag_airmass: ArrayLike,
    wanted_snr: ArrayLike,
    *,
    rate_factor: ArrayLike = 1.0,
) -> Floats:
    """Open-shutter seconds that bring a star to ``wanted_snr``; nan where the floor forbids it for ever."""
    source, sky, pixels = _point_rates(
        setup, filter_name, mag, fwhm_arcsec, sky_mag_arcsec2, airmass, extinction_mag_airmass, rate_factor
    )
    return _setup_seconds(setup, source, sky, pixels, wanted_snr)


def glare_radius_arcsec(
    setup: CameraSetup, source_mag: ArrayLike, ring_mag_arcsec2: ArrayLike, fwhm_arcsec: ArrayLike
) -> Floats:
    """Radius inside which the wings of the source's image drown a ring of brightness ``ring_mag_arcsec2``.

    The wings stretch with the seeing at constant total light: brightness at radius r is
    source_mag + glare_mag_arcsec2_at_1arcsec + 5 log10(fwhm) + 2.5 slope log10(r / fwhm) mag/arcsec2. The
    radius is where that equals ``glare_allowed`` times the ring's light, and never less than 2 FWHM, which is
    also the answer for an absent source (``source_mag`` inf). Broadcast; a ring without light (inf) beside a
    source gives inf.
    """
    fwhm = _positive("fwhm_arcsec", fwhm_arcsec)
    mag, ring = np.broadcast_arrays(np.asarray(source_mag, float), np.asarray(ring_mag_arcsec2, float))
    absent = np.isposinf(mag)
    needed = ring - 2.5 * math.log10(setup.glare_allowed) - np.where(absent, 0.0, mag)
    below = needed - setup.glare_mag_arcsec2_at_1arcsec - 5.0 * np.log10(fwhm)
    radius = fwhm * 10.0 ** (below / (2.5 * setup.glare_slope))
    return np.maximum(np.where(absent, 0.0, radius), LEAST_GLARE_FWHM * fwhm)[()]


# ------------------------------------------------------------------ private


def _not_negative(name: str, value: ArrayLike) -> Floats:
    array = np.asarray(value, dtype=float)
    if np.any(array < 0):
        raise DomainError(name, float(np.nanmin(array)), "a value of 0 or more")
    return array


def _positive(name: str, value: ArrayLike) -> Floats:
    array = np.asarray(value, dtype=float)
    if np.any(array <= 0):
        raise DomainError(name, float(np.nanmin(array)), "a value above 0")
    return array


def _background(
    sky: Floats,
    pixels: Floats,
    dark: Floats,
    read: Floats,
    frames: Floats,
    background_pixels: ArrayLike,
    sky_counts: ArrayLike,
) -> tuple[Floats, Floats]:
    """Variance of the background: (growth per second, constant part), both in e^2 over the whole aperture."""
    n_b = _positive("background_pixels", background_pixels)
    weight = _not_negative("sky_counts", sky_counts) * pixels * (1.0 + pixels / n_b)
    return weight * (sky + dark), weight * frames * read**2


def _template(
    sky: Floats,
    pixels: Floats,
    dark: Floats,
    read: Floats,
    frames: ArrayLike,
    background_pixels: ArrayLike,
    seconds: ArrayLike,
) -> Floats:
    """Variance that a template adds over the whole aperture, in e^2 per squared second of the image."""
    t, m = _positive("template_s", seconds), _not_negative("template_frames", frames)
    slope, still = _background(sky, pixels, dark, read, m, background_pixels, 1.0)
    return slope / t + still / t**2


def _ring_rates(
    setup: CameraSetup,
    filter_name: str,
    mag_arcsec2: ArrayLike,
    area_arcsec2: ArrayLike,
    sky_mag_arcsec2: ArrayLike,
    airmass: ArrayLike,
    extinction_mag_airmass: ArrayLike,
    rate_factor: ArrayLike,
) -> tuple[Floats, Floats, Floats]:
    """Source e/s in all, sky e/s/pixel, pixels."""
    area, factor = _not_negative("area_arcsec2", area_arcsec2), _positive("rate_factor", rate_factor)
    dimmed = np.asarray(mag_arcsec2, float) + np.asarray(extinction_mag_airmass, float) * np.asarray(airmass, float)
    source = factor * photons_e_s(setup, filter_name, dimmed) * area
    sky = factor * photons_e_s(setup, filter_name, sky_mag_arcsec2) * setup.pixel_arcsec**2
    return source, sky, area / setup.pixel_arcsec**2


def _point_rates(
    setup: CameraSetup,
    filter_name: str,
    mag: ArrayLike,
    fwhm_arcsec: ArrayLike,
    sky_mag_arcsec2: ArrayLike,
    airmass: ArrayLike,
    extinction_mag_airmass: ArrayLike,
    rate_factor: ArrayLike,
) -> tuple[Floats, Floats, Floats]:
    """Source e/s in the aperture, sky e/s/pixel, pixels."""
    factor = _positive("rate_factor", rate_factor)
    share, pixels = gaussian_aperture(fwhm_arcsec, setup.pixel_arcsec)
    dimmed = np.asarray(mag, float) + np.asarray(extinction_mag_airmass, float) * np.asarray(airmass, float)
    sky = factor * photons_e_s(setup, filter_name, sky_mag_arcsec2) * setup.pixel_arcsec**2
    return factor * share * photons_e_s(setup, filter_name, dimmed), sky, pixels


def _noise_of(
    setup: CameraSetup, sky_counts: ArrayLike | None, template_s: ArrayLike, crowding: ArrayLike
) -> dict[str, ArrayLike]:
    own = 2.0 if setup.difference_imaging else 1.0
    return {
        "dark_e_s": setup.dark_e_s,
        "read_noise_e": setup.read_noise_e,
        "floor": setup.subtraction_floor,
        "sky_counts": own if sky_counts is None else sky_counts,
        "template_s": template_s,
        "crowding": crowding,
        "template_frames": np.maximum(frames_for(setup, np.where(np.isinf(template_s), 0.0, template_s)), 1),
    }


def _setup_snr(
    setup: CameraSetup, source: Floats, sky: Floats, pixels: Floats, seconds: ArrayLike,
    sky_counts: ArrayLike | None = None, template_s: ArrayLike = math.inf, crowding: ArrayLike = 1.0,
) -> Floats:  # fmt: skip
    noise = _noise_of(setup, sky_counts, template_s, crowding)
    return snr(source, sky, seconds, pixels, frames=frames_for(setup, seconds), **noise)


def _setup_seconds(
    setup: CameraSetup, source: Floats, sky: Floats, pixels: Floats, wanted: ArrayLike,
    sky_counts: ArrayLike | None = None, template_s: ArrayLike = math.inf, crowding: ArrayLike = 1.0,
) -> Floats:  # fmt: skip
    """Least time whose own number of frames reaches ``wanted``.

    Start with one frame and give each answer the frames it needs until nothing changes. The time grows at
    most as the square root of the frames, so the steps shrink by half or more and the first fixed point is
    the least one.
    """
    noise = _noise_of(setup, sky_counts, template_s, crowding)
    frames = np.ones((), dtype=np.int64)
    while True:
        seconds = seconds_for_snr(wanted, source, sky, pixels, frames=frames, **noise)
        needed = np.maximum(frames_for(setup, seconds), 1)
        if np.all(needed <= frames):
            return seconds
        frames = np.maximum(needed, frames)
