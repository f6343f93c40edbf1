"""Yes or no for every target and time at once: altitude, night and Moon, without an arcsine."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from planner.records import Bools
from planner.sky.clock import checked_mjd
from planner.sky.directions import StarField, site_frame
from planner.sky.sun_moon import seen_from


def observable_mask(
    ra_deg: ArrayLike,
    dec_deg: ArrayLike,
    mjd_utc: ArrayLike,
    longitude_deg: float,
    latitude_deg: float,
    height_m: float,
    *,
    lowest_altitude_deg: float,
    sun_below_deg: float,
    moon_no_closer_deg: float,
) -> Bools:
    """True where a star is high enough, the Sun low enough and the Moon far enough: (N, T).

    Stars: ICRS, (N,); times (T,). Altitudes are geometric; the Moon counts as seen from the site, up or down.
    Limits are compared as sines and cosines, so nothing is inverted. Memory: one byte a cell, and one night's
    block. Raises DomainError as ``planner.sky.directions.altitude_deg`` does.
    """
    mjd = np.atleast_1d(checked_mjd(mjd_utc))
    place = (longitude_deg, latitude_deg, height_m)
    sun = seen_from("sun", mjd, site_frame(mjd, *place))
    dark = np.flatnonzero(sun.sin_altitude <= np.sin(np.radians(sun_below_deg)))
    field = StarField(ra_deg, dec_deg, mjd)
    out = np.zeros((len(field), mjd.size), dtype=np.bool_)
    now = mjd[dark]  # daytime is settled: the rest of the work is for the nights only
    frame = site_frame(now, *place)
    moon = seen_from("moon", now, frame).unit
    low, near = np.sin(np.radians(lowest_altitude_deg)), np.cos(np.radians(moon_no_closer_deg))
    for part, star6, share in field.blocks(now):
        zenith, moon_here = frame.zenith[:, part], moon[:, part]
        ok = (star6 @ np.concatenate([zenith, zenith * share])) >= low
        ok &= (star6 @ np.concatenate([moon_here, moon_here * share])) <= near
        out[:, dark[part]] = ok
    return out
