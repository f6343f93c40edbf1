"""How fast and how right the sky is, in one run: kernel, night mask, crossings, five sites, memory.

Against astropy's gridded AltAz transformation (altitude) and the same three limits in astroplan (altitude,
astronomical night, Moon separation), both from RA and Dec. Prints one JSON with ratios, bars, largest differences and
cells that differ. The fast side runs before and after the slow one and its best time counts; peak memory is taken
before the slow side starts. Full size (200 targets x 180 nights of 5 minutes) takes 2 to 4 minutes and 2 GB.

    python tests/benchmarks/sky.py                     # full size
    python tests/benchmarks/sky.py --targets 50 --nights 10
"""

from __future__ import annotations

import argparse
import json
import os
import resource
import sys
import time
import warnings
from collections.abc import Callable
from typing import Any

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")  # thin products: more threads are slower

import numpy as np

from planner.sky import clock
from planner.sky.directions import altitude_deg
from planner.sky.mask import observable_mask
from planner.sky.sun_moon import moon_crossings, sun_crossings

# invented sites: longitude, latitude, height
SITES = (
    (-70.4, -24.6, 2600.0), (-107.9, 30.9, 2430.0), (17.2, -28.9, 1500.0), (121.4, 42.1, 900.0), (-17.9, 28.7, 2350.0),
)  # fmt: skip
PLACE = SITES[0]
LIMITS = {"lowest_altitude_deg": 30.0, "sun_below_deg": -18.0, "moon_no_closer_deg": 30.0}
ALTITUDE_BAR, MASK_BAR, CELLS_BAR, ARCSEC_BAR, SECONDS_BAR = 80, 300, 3, 1.0, 1.0


def best_of(repeats: int, job: Callable[[], Any]) -> tuple[float, Any]:
    """Shortest time in seconds of several runs, and the last result."""
    times, result = [], None
    for _ in range(repeats):
        result = None  # let go of the last one first
        start = time.perf_counter()
        result = job()
        times.append(time.perf_counter() - start)
    return min(times), result


def peak_mb() -> float:
    """Largest memory of this process so far, MB."""
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    return peak / (1e6 if sys.platform == "darwin" else 1e3)


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
        AltitudeConstraint(LIMITS["lowest_altitude_deg"] * u.deg, None),
        AtNightConstraint(max_solar_altitude=LIMITS["sun_below_deg"] * u.deg),
        MoonSeparationConstraint(LIMITS["moon_no_closer_deg"] * u.deg, None),
    ]
    out = np.ones((ra.size, mjd.size), dtype=bool)
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", message=".*transforming other coordinates from.*")
        for rule in rules:
            out &= np.asarray(rule(observer, targets, times=times, grid_times_targets=True))
    return out


def kernel(ra: np.ndarray, dec: np.ndarray, mjd: np.ndarray) -> dict[str, float]:
    """Altitudes and mask of one site, fast and slow."""
    cells = ra.size * mjd.size
    ours_alt, ours_mask = (
        lambda: altitude_deg(ra, dec, mjd, *PLACE),
        lambda: observable_mask(ra, dec, mjd, *PLACE, **LIMITS),
    )
    altitude_deg(ra[:1], dec[:1], mjd[:1], *PLACE)  # the first use loads tables
    before = peak_mb()
    mask_s, mask = best_of(5, ours_mask)
    memory_mask = peak_mb()
    five_s, _ = best_of(3, lambda: [observable_mask(ra, dec, mjd, *site, **LIMITS) for site in SITES])
    alt_s, alt = best_of(5, ours_alt)
    memory_alt = peak_mb()
    astropy_altitude(ra[:1], dec[:1], mjd[:1])
    slow_alt_s, slow = best_of(1, lambda: astropy_altitude(ra, dec, mjd))
    worst = float(np.abs(alt - slow).max() * 3600)
    del alt, slow
    slow_mask_s, slow = best_of(1, lambda: astroplan_mask(ra, dec, mjd))
    alt_s = min(alt_s, best_of(5, ours_alt)[0])
    mask_s = min(mask_s, best_of(5, ours_mask)[0])
    return {
        "altitude_s": alt_s,
        "altitude_cells_per_s": cells / alt_s,
        "altitude_astropy_s": slow_alt_s,
        "altitude_astropy_cells_per_s": cells / slow_alt_s,
        "altitude_ratio": slow_alt_s / alt_s,
        "altitude_worst_arcsec": worst,
        "mask_s": mask_s,
        "mask_cells_per_s": cells / mask_s,
        "mask_astroplan_s": slow_mask_s,
        "mask_ratio": slow_mask_s / mask_s,
        "mask_cells_different": int(np.count_nonzero(mask != slow)),
        "mask_cells_true": int(np.count_nonzero(mask)),
        "mask_five_sites_s": five_s,
        "mask_five_sites_ratio": 5.0 * slow_mask_s / five_s,
        "memory_before_mb": before,
        "memory_peak_mask_mb": memory_mask,
        "memory_peak_altitude_mb": memory_alt,
    }


def crossings(first: float, nights: int) -> dict[str, float]:
    """Rises, sets and twilights of Sun and Moon, and how far astropy's altitude there is from the limit, in seconds."""
    last = first + nights
    altitudes = (-50 / 60, -6.0, -12.0, -18.0)
    seconds, found = best_of(
        3,
        lambda: [
            *(sun_crossings(first, last, h, *PLACE)[0] for h in altitudes),
            moon_crossings(first, last, 0.0, *PLACE)[0],
        ],
    )
    events = sum(t.size for t in found)
    worst = 0.0
    import astropy.units as u
    from astropy.coordinates import AltAz, EarthLocation, get_body
    from astropy.time import Time

    place = EarthLocation.from_geodetic(PLACE[0] * u.deg, PLACE[1] * u.deg, PLACE[2] * u.m)
    for times, height, body in zip(found, (*altitudes, 0.0), ("sun",) * 4 + ("moon",), strict=True):
        pair = Time(np.stack([times, times + 1 / 86_400]), format="mjd")
        alt = get_body(body, pair, place, ephemeris="builtin").transform_to(AltAz(obstime=pair, location=place)).alt.deg
        worst = max(worst, float(np.abs((height - alt[0]) / (alt[1] - alt[0])).max()))
    return {"crossings": events, "crossings_per_s": events / seconds, "crossings_worst_s": worst}


def measure(targets: int, nights: int, first_mjd: float) -> dict[str, Any]:
    """Run everything and return times, ratios, differences and whether each bar is met."""
    rng = np.random.default_rng(20270201)
    ra, dec = rng.uniform(0, 360, targets), np.degrees(np.arcsin(rng.uniform(-1, 1, targets)))
    mjd = first_mjd + np.arange(288 * nights) * 5 / 1440
    with clock.offline_astropy():
        got: dict[str, Any] = {"targets": targets, "times": mjd.size, "cells": targets * mjd.size}
        got |= kernel(ra, dec, mjd) | crossings(first_mjd, nights)
    got["bars"] = {
        f"altitude ratio >= {ALTITUDE_BAR}": got["altitude_ratio"] >= ALTITUDE_BAR,
        f"altitude within {ARCSEC_BAR:g} arcsec": got["altitude_worst_arcsec"] <= ARCSEC_BAR,
        f"mask ratio >= {MASK_BAR}": got["mask_ratio"] >= MASK_BAR,
        f"at most {CELLS_BAR} cells of 10 million differ": got["mask_cells_different"]
        <= CELLS_BAR * max(1.0, got["cells"] / 1e7),
        f"crossings within {SECONDS_BAR:g} s": got["crossings_worst_s"] <= SECONDS_BAR,
    }
    got["load"] = os.getloadavg()[0]
    return got


def main() -> None:
    """Parse, measure, print."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--targets", type=int, default=200)
    parser.add_argument("--nights", type=int, default=180)
    parser.add_argument("--first-mjd", type=float, default=61440.5, help="first time (default 2027-02-04 12h)")
    got = measure(*vars(parser.parse_args()).values())
    rounded = {k: float(f"{v:.6g}") if isinstance(v, float) else v for k, v in got.items()}
    print(json.dumps(rounded, indent=1))


if __name__ == "__main__":
    main()
