"""Bridges to astropy and astroplan: places, positions, observers, targets, and further limits made with astroplan.

Everything works without a network. Positions keep their proper motion, which both libraries then apply.
"""

from __future__ import annotations

import warnings
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from planner.campaign.records import ArraySite, Site, SpacecraftSite, Station, Target
from planner.errors import InputError
from planner.records import Floats
from planner.sky.clock import offline_astropy
from planner.sky.directions import J2000_MJD
from planner.units import YEAR_DAYS

if TYPE_CHECKING:
    from astroplan import FixedTarget, Observer
    from astropy.coordinates import EarthLocation, SkyCoord

EXTRA_STEP_MINUTES = 15
CELLS_A_SECOND = 2e5  # what the heavier of astroplan's limits reach on one core (measured); for the warning


class ExtraLimitsWarning(UserWarning):
    """Limits made with another library are slow, and coarse in time."""


def earth_location(site: Site | Station) -> EarthLocation:
    """Return the place of a site or of one antenna (WGS84) as astropy has it.

    Raises InputError for arrays (take one of their stations) and spacecraft.
    """
    if isinstance(site, ArraySite | SpacecraftSite):
        what = "an array: take one of its stations" if isinstance(site, ArraySite) else "a spacecraft: it has none"
        raise InputError(f"{site.name!r} is no single place on the ground but {what}", value=site.name)
    with offline_astropy():
        from astropy import units
        from astropy.coordinates import EarthLocation

        return EarthLocation.from_geodetic(
            site.longitude_deg * units.deg, site.latitude_deg * units.deg, site.height_m * units.m
        )


def observer(site: Site | Station) -> Observer:
    """Return a site as an observer for astroplan, with its name and time zone."""
    where = earth_location(site)
    with offline_astropy():
        from astroplan import Observer

        if isinstance(site, Site):
            return Observer(where, name=site.name, timezone=site.time_zone)
        return Observer(where, name=site.station)


def sky_coord(target: Target, mjd_utc: float | None = None) -> SkyCoord:
    """Return the position of a target (ICRS) as astropy has it, at its own epoch, or moved to ``mjd_utc``.

    Without ``mjd_utc`` proper motion and epoch are inside, so that ``apply_space_motion`` works.
    """
    with offline_astropy():
        from astropy import units
        from astropy.coordinates import SkyCoord
        from astropy.time import Time

        p = target.position
        ra, dec = p.ra_deg * units.deg, p.dec_deg * units.deg
        if mjd_utc is None and (p.pm_ra_mas_yr or p.pm_dec_mas_yr):
            epoch = Time(J2000_MJD + (p.epoch - 2000.0) * YEAR_DAYS, format="mjd", scale="tt")
            motion = units.mas / units.yr
            return SkyCoord(
                ra, dec, pm_ra_cosdec=p.pm_ra_mas_yr * motion, pm_dec=p.pm_dec_mas_yr * motion, obstime=epoch
            )
        if mjd_utc is None:
            return SkyCoord(ra, dec)
        from planner.sky.directions import moved_position

        moved = moved_position(p.ra_deg, p.dec_deg, p.pm_ra_mas_yr, p.pm_dec_mas_yr, p.epoch, mjd_utc)
        return SkyCoord(moved[0] * units.deg, moved[1] * units.deg)


def fixed_target(target: Target, mjd_utc: float | None = None) -> FixedTarget:
    """Return a target for astroplan, with its name; ``mjd_utc``: as in :func:`sky_coord`."""
    where = sky_coord(target, mjd_utc)
    with offline_astropy():
        from astroplan import FixedTarget

        return FixedTarget(where, name=target.name)


# ------------------------------------------------------------------ further limits


def extra_margin(
    site: Site, targets: Sequence[Target], grid_mjd: Floats, constraints: Sequence[Any], step: int
) -> Floats:
    """Margin (targets, times) of limits made with astroplan: above 0 where all hold.

    ``constraints``: called as ``c(observer, targets, times=..., grid_times_targets=True)``, each giving (targets,
    times) of bool, or of scores where 0 forbids. They are asked at every ``step``-th time of the grid (whose last
    one is among them); between two of these that differ the margin passes 0 in the middle.
    Raises InputError when an answer has another shape.
    """
    coarse = grid_mjd[::step]
    middle = float(grid_mjd[grid_mjd.size // 2])
    ok = np.ones((len(targets), coarse.size), dtype=bool)
    who = observer(site)
    stars = [fixed_target(t, middle) for t in targets]
    with offline_astropy():
        from astropy.time import Time

        times = Time(coarse, format="mjd", scale="utc")
        with warnings.catch_warnings():
            # Raised by astropy whenever astroplan measures a separation from the Moon; the effect is below 1 arcsec.
            warnings.filterwarnings("ignore", message=".*transforming other coordinates from.*")
            for number, constraint in enumerate(constraints):
                answer = np.asarray(constraint(who, stars, times=times, grid_times_targets=True))
                if answer.shape != ok.shape:
                    raise InputError(
                        f"extra constraint {number + 1} ({type(constraint).__name__}) answers with shape "
                        f"{answer.shape}, needs (targets, times) = {ok.shape}"
                    )
                ok &= answer > 0
    at = np.arange(grid_mjd.size) / step
    left = np.minimum(at.astype(np.int64), coarse.size - 2)
    share = at - left
    sign = np.where(ok, 1.0, -1.0)
    return sign[:, left] * (1.0 - share) + sign[:, left + 1] * share


def warn_of_cost(setup: str, targets: int, times: int, constraints: int) -> None:
    """Say once a setup what further limits cost."""
    seconds = targets * times * constraints / CELLS_A_SECOND
    warnings.warn(
        f"{setup}: {constraints} extra constraint(s) are asked for {targets} targets x {times} times, every "
        f"{EXTRA_STEP_MINUTES} minutes: about {max(1.0, seconds):.0f} s, and edges good to {EXTRA_STEP_MINUTES / 2:g} "
        "minutes only",
        ExtraLimitsWarning,
        stacklevel=4,
    )
