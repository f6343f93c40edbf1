"""How much faster the sky kernel is than the general route, measured in one run.

Compares, on the same machine within minutes, (1) the altitude of N targets at T times with astropy's gridded AltAz
transformation, and (2) the mask of three limits (altitude, astronomical night, Moon separation) with the
same three in astroplan, both from RA and Dec. Prints the ratios, the largest difference, the number of cells that
differ, and one line of JSON. The fast side runs before and after the slow one; its best time counts. Full size
(200 x 180 nights of 5 minutes) takes a minute or two and 2 GB.

    python tests/benchmarks/sky_kernel.py                     # full size
    python tests/benchmarks/sky_kernel.py --targets 50 --nights 10
"""

from __future__ import annotations

import argparse
import json
import os
import time
import warnings
from collections.abc import Callable
from typing import Any

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")  # thin products: more threads are slower

import numpy as np

from planner.sky import clock
from planner.sky.directions import altitude_deg
from planner.sky.mask import observable_mask

PLACE = (-70.4, -24.6, 2600.0)  # invented site
LOWEST_DEG, SUN_DEG, MOON_DEG = 30.0, -18.0, 30.0


def best_of(repeats: int, job: Callable[[], Any]) -> tuple[float, Any]:
    """Shortest time in seconds of several runs, and the last result."""
    times, result = [], None
    for _ in range(repeats):
        result = None  # let go of the last one first
        start = time.perf_counter()
        result = job()
        times.append(time.perf_counter() - start)
    return min(times), result


def astropy_altitude(ra: np.ndarray, dec: np.ndarray, mjd: np.ndarray) -> np.ndarray:
    """Altitude (N, T) in degrees by one gridded transformation."""
    import astropy.units as u
    from astropy.coordinates import AltAz, EarthLocation, SkyCoord
    from astropy.time import Time

    place = EarthLocation.from_geodetic(PLACE[0] * u.deg, PLACE[1] * u.deg, PLACE[2] * u.m)
    frame = AltAz(obstime=Time(mjd, format="mjd")[None, :], location=place)
    return np.asarray(SkyCoord(ra * u.deg, dec * u.deg)[:, None].transform_to(frame).alt.deg)


def astroplan_mask(ra: np.ndarray, dec: np.ndarray, mjd: np.ndarray) -> np.ndarray:
    """The three limits (N, T) by astroplan."""
    import astropy.units as u
    from astroplan import AltitudeConstraint, AtNightConstraint, FixedTarget, MoonSeparationConstraint, Observer
    from astropy.coordinates import EarthLocation, SkyCoord
    from astropy.time import Time

    observer = Observer(EarthLocation.from_geodetic(PLACE[0] * u.deg, PLACE[1] * u.deg, PLACE[2] * u.m))
    targets = [FixedTarget(SkyCoord(a * u.deg, d * u.deg)) for a, d in zip(ra, dec, strict=True)]
    times = Time(mjd, format="mjd")
    rules = [
        AltitudeConstraint(LOWEST_DEG * u.deg, None),
        AtNightConstraint(max_solar_altitude=SUN_DEG * u.deg),
        MoonSeparationConstraint(MOON_DEG * u.deg, None),
    ]
    out = np.ones((ra.size, mjd.size), dtype=bool)
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", message=".*transforming other coordinates from.*")
        for rule in rules:
            out &= np.asarray(rule(observer, targets, times=times, grid_times_targets=True))
    return out


def measure(targets: int, nights: int, first_mjd: float) -> dict[str, float]:
    """Run both comparisons and return times, ratios and differences."""
    rng = np.random.default_rng(20270201)
    ra, dec = rng.uniform(0, 360, targets), np.degrees(np.arcsin(rng.uniform(-1, 1, targets)))
    mjd = first_mjd + np.arange(288 * nights) * 5 / 1440
    limits = {"lowest_altitude_deg": LOWEST_DEG, "sun_below_deg": SUN_DEG, "moon_no_closer_deg": MOON_DEG}
    with clock.offline_astropy():
        astropy_altitude(ra[:1], dec[:1], mjd[:1])  # first use loads tables on both sides
        altitude_deg(ra[:1], dec[:1], mjd[:1], *PLACE)
        fast_alt_s, fast_alt = best_of(5, lambda: altitude_deg(ra, dec, mjd, *PLACE))
        slow_alt_s, slow_alt = best_of(1, lambda: astropy_altitude(ra, dec, mjd))
        fast_alt_s = min(fast_alt_s, best_of(5, lambda: altitude_deg(ra, dec, mjd, *PLACE))[0])
        worst = float(np.abs(fast_alt - slow_alt).max() * 3600)
        del fast_alt, slow_alt
        fast_mask_s, fast_mask = best_of(5, lambda: observable_mask(ra, dec, mjd, *PLACE, **limits))
        slow_mask_s, slow_mask = best_of(1, lambda: astroplan_mask(ra, dec, mjd))
        fast_mask_s = min(fast_mask_s, best_of(5, lambda: observable_mask(ra, dec, mjd, *PLACE, **limits))[0])
    return {
        "targets": targets,
        "times": mjd.size,
        "cells": targets * mjd.size,
        "altitude_s": fast_alt_s,
        "altitude_astropy_s": slow_alt_s,
        "altitude_ratio": slow_alt_s / fast_alt_s,
        "altitude_worst_arcsec": worst,
        "mask_s": fast_mask_s,
        "mask_astroplan_s": slow_mask_s,
        "mask_ratio": slow_mask_s / fast_mask_s,
        "mask_cells_different": int(np.count_nonzero(fast_mask != slow_mask)),
        "mask_cells_true": int(np.count_nonzero(fast_mask)),
    }


def main() -> None:
    """Parse, measure, print."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--targets", type=int, default=200)
    parser.add_argument("--nights", type=int, default=180)
    parser.add_argument("--first-mjd", type=float, default=61440.5, help="first time (default 2027-02-04 12h)")
    got = measure(*vars(parser.parse_args()).values())
    print(f"{got['targets']:.0f} targets x {got['times']:.0f} times = {got['cells']:.3g} cells")
    print(
        f"altitude: {got['altitude_s']:.3f} s against astropy {got['altitude_astropy_s']:.2f} s, "
        f"ratio {got['altitude_ratio']:.0f} (bar 80), worst {got['altitude_worst_arcsec']:.3f} arcsec (bar 1)"
    )
    print(
        f"mask, whole job: {got['mask_s']:.3f} s against astroplan {got['mask_astroplan_s']:.2f} s, "
        f"ratio {got['mask_ratio']:.0f} (bar 300), {got['mask_cells_different']:.0f} cells differ (bar 3 of 1e7)"
    )
    print(json.dumps({k: round(v, 6) for k, v in got.items()}))


if __name__ == "__main__":
    main()
