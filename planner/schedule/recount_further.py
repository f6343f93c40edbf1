"""The optional limits of a setup and the calendar of its telescope, counted again from astropy's angles.

Angles are compared here where the windows compare scalar products, and the airmass is that of another author.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

from planner.campaign.records import CameraSetup, Site, Template
from planner.schedule.recount_rows import ANGLE_DEG, LIT, SECONDS, Row, Tally
from planner.schedule.recount_sky import Sight, directions, hour_angle_and_declination
from planner.units import DAY_S, iso_of_mjd, mjd_of_iso

Floats = NDArray[np.float64]
Say = Callable[..., None]

AIRMASS_SHARE = 0.005  # two authors' airmasses agree to 0.1 % below airmass 6 (0.4 % in refraction's part)
TURN_DEG = 0.1  # tolerance of parallactic angles: they run fast near the zenith


def further_limits(row: Row, site: Site, mjd: Floats, sight: Sight, part: slice, say: Say, tally: Tally) -> None:
    """Check the limits that a setup may set beside the usual ones, and the calendar."""
    camera = row.setup.camera
    assert camera is not None  # the caller has looked
    altitude = sight.altitude[part]
    _airmass(row, mjd, altitude, camera.airmass_range, "airmass", tally)
    if camera.zenith_blind_deg is not None:
        say("zenith distance", 90.0 - altitude, camera.zenith_blind_deg, +1, "blind spot")
    if camera.moon_below_deg is not None:
        say("Moon altitude", sight.moon_altitude[part], camera.moon_below_deg, -1, "highest Moon")
    if camera.moon_at_most_lit is not None:
        up = sight.moon_altitude[part] > ANGLE_DEG
        lit = np.where(up, sight.moon_lit[part], 0.0)
        if lit.max() > camera.moon_at_most_lit + LIT / 10:
            tally.breaches.append(f"{row}: Moon up and lit {lit.max():.2f}, moon_at_most_lit {camera.moon_at_most_lit}")
    _about_the_pole(row, site, camera, mjd, say, tally)
    _template(row, site, camera, mjd, altitude, tally)


def calendar(row: Row, tally: Tally) -> None:
    """Whether the setup is mounted and the telescope is not taken by others."""
    setup = row.setup
    if setup.mounted is not None and not any(m.first <= row.night <= m.last for m in setup.mounted):
        tally.breaches.append(f"{row}: {setup.name} is not mounted on that night")
    for busy in setup.busy:
        why = f" ({busy.why})" if busy.why else ""
        if busy.first is not None and busy.last is not None and busy.first <= row.night <= busy.last:
            tally.breaches.append(f"{row}: {setup.telescope} is taken by others {busy.first} to {busy.last}{why}")
        if busy.start_utc is not None and busy.end_utc is not None:
            start, end = (mjd_of_iso(t.isoformat()) for t in (busy.start_utc, busy.end_utc))
            if (min(end, row.end) - max(start, row.start)) * DAY_S > SECONDS:
                tally.breaches.append(
                    f"{row}: {setup.telescope} is taken by others {iso_of_mjd(start)} to {iso_of_mjd(end)}{why}"
                )


def pickering_airmass(altitude_deg: Floats) -> Floats:
    """Airmass of Pickering (2002, DIO 12, 3) after refraction (Saemundsson 1986), from the geometric altitude."""
    h = np.maximum(altitude_deg, 0.0)
    seen = h + 1.02 / np.tan(np.radians(h + 10.3 / (h + 5.11))) / 60.0
    return np.asarray(1.0 / np.sin(np.radians(seen + 244.0 / (165.0 + 47.0 * seen**1.1))))


def _airmass(row: Row, mjd: Floats, altitude: Floats, span: tuple[float, float], what: str, tally: Tally) -> None:
    low, high = span
    airmass = pickering_airmass(altitude)
    for worst, bad, name, limit in (
        (int(np.argmax(airmass)), airmass.max() > high * (1 + AIRMASS_SHARE), "largest", high),
        (int(np.argmin(airmass)), low > 1.0 and airmass.min() < low * (1 - AIRMASS_SHARE), "smallest", low),
    ):
        if bad:
            tally.breaches.append(
                f"{row}: {what} {airmass[worst]:.3f} at {iso_of_mjd(mjd[worst])}, {name} allowed is {limit:.3f}"
            )


def _about_the_pole(row: Row, site: Site, camera: CameraSetup, mjd: Floats, say: Say, tally: Tally) -> None:
    if camera.hour_angle_deg is None and camera.declination_deg is None and camera.parallactic_deg is None:
        return
    place = (site.longitude_deg, site.latitude_deg, site.height_m)
    hour_angle, dec = hour_angle_and_declination([row.target.position] * mjd.size, mjd, *place)
    if camera.hour_angle_deg is not None:
        _turn(row, mjd, hour_angle, camera.hour_angle_deg, "hour angle", ANGLE_DEG, tally)
    if camera.declination_deg is not None:
        say("declination", dec, camera.declination_deg[0], +1, "southernmost")
        say("declination", dec, camera.declination_deg[1], -1, "northernmost")
    if camera.parallactic_deg is not None:
        q = parallactic(hour_angle, dec, site.latitude_deg)
        _turn(row, mjd, q, camera.parallactic_deg, "parallactic angle", TURN_DEG, tally)


def parallactic(hour_angle_deg: Floats, dec_deg: Floats, latitude_deg: float) -> Floats:
    """Parallactic angle in degrees: tan q = sin H / (tan phi cos d - sin d cos H)."""
    h, d, phi = np.radians(hour_angle_deg), np.radians(dec_deg), math.radians(latitude_deg)
    return np.asarray(np.degrees(np.arctan2(np.sin(h), math.tan(phi) * np.cos(d) - np.sin(d) * np.cos(h))))


def _turn(
    row: Row, mjd: Floats, angle: Floats, span: tuple[float, float], what: str, slack: float, tally: Tally
) -> None:
    """Check an angle that comes round against [from, to]."""
    beyond = np.abs((angle - 0.5 * (span[0] + span[1]) + 180.0) % 360.0 - 180.0) - 0.5 * (span[1] - span[0])
    worst = int(np.argmax(beyond))
    if beyond[worst] > slack:
        tally.breaches.append(
            f"{row}: {what} {angle[worst]:.2f} deg at {iso_of_mjd(mjd[worst])}, allowed are {span[0]:g} to {span[1]:g}"
        )


def _template(row: Row, site: Site, camera: CameraSetup, mjd: Floats, altitude: Floats, tally: Tally) -> None:
    rule = camera.match_template
    features: list[Any] = [row.target, *row.target.features]
    known: list[Template] = [
        t
        for owner in features
        for t in getattr(owner, "templates", ())
        if t.setup == row.setup.name and t.filter == camera.filter
    ]
    if rule is None or not known:
        return
    best = max(known, key=lambda t: t.minutes)
    place = (site.longitude_deg, site.latitude_deg, site.height_m)
    where = row.target.position
    if best.start_utc is None:
        _, dec = hour_angle_and_declination([where], np.array([row.middle]), *place)
        then = 90.0 - abs(site.latitude_deg - float(dec[0]))
        turned = 0.0 if site.latitude_deg > dec[0] else 180.0
    else:
        middle = np.array([mjd_of_iso(best.start_utc.isoformat()) + best.minutes / 2880.0])
        then = float(directions([where], middle, *place)[0][0])
        h, dec = hour_angle_and_declination([where], middle, *place)
        turned = float(parallactic(h, dec, site.latitude_deg)[0])
    if rule.airmass_within is not None:
        x, w = float(pickering_airmass(np.array([then]))[0]), rule.airmass_within
        _airmass(row, mjd, altitude, (x - w, x + w), "template match: airmass", tally)
    if rule.parallactic_within_deg is not None:
        h, dec = hour_angle_and_declination([where] * mjd.size, mjd, *place)
        w = rule.parallactic_within_deg
        q = parallactic(h, dec, site.latitude_deg)
        _turn(row, mjd, q, (turned - w, turned + w), "template match: parallactic angle", TURN_DEG, tally)
