"""The limits of an optical setup over a grid of times, as margins: above 0 while a limit holds.

Sines, cosines and scalar products are compared, never angles: nothing is inverted. With p the star's direction and
z, e, n the zenith, east and north of the site: sin(altitude) = p.z. With x and y the equatorial axes turned to the
meridian of the site: p.x = cos d cos H and p.y = cos d sin H.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from planner.campaign.records import Arclet, CameraSetup, Ring, SetupRef, Site, Target, Template
from planner.records import Floats, lock
from planner.sky import intervals as iv
from planner.sky.airmass import altitude_of_airmass_deg, kasten_young, refraction_arcmin
from planner.sky.clock import earth_rotation_angle
from planner.sky.directions import SiteFrame, StarField, altaz_deg, parallactic_angle_deg, site_frame, star_directions
from planner.sky.horizon import horizon_deg
from planner.sky.sun_moon import moon_illumination, seen_from
from planner.units import mjd_of_iso

CHUNK_CELLS = 2_000_000  # targets x times held at once: 16 MB an array
STAR_LIMITS = ("altitude", "airmass", "hour angle", "parallactic angle", "template match")  # may hold for minutes only
DIP_LIMITS = ("altitude", "airmass", "zenith blind spot")  # may fail for minutes only


@dataclass(frozen=True)
class Match:
    """How near looks must be to templates, (N,) each: bounds of sin(altitude), middle and half of the angle."""

    sin_low: Floats
    sin_high: Floats
    angle: Floats  # rad
    half: Floats  # rad, pi where there is no limit

    def __post_init__(self) -> None:
        lock(self)


class SkyGrid:
    """Sun, Moon and stars of one site on a grid of times (T,)."""

    def __init__(self, site: Site, grid: Floats, ra_deg: Floats, dec_deg: Floats) -> None:
        """Prepare Sun, Moon and star directions; positions are ICRS at the middle of the season."""
        self.site = site
        self.grid = grid
        self.frame = self._frame(grid)
        self.sun = seen_from("sun", grid, self.frame)
        self.moon = seen_from("moon", grid, self.frame)
        self.field = StarField(ra_deg, dec_deg, grid)

    @property
    def place(self) -> tuple[float, float, float]:
        """Longitude, latitude, height."""
        return self.site.longitude_deg, self.site.latitude_deg, self.site.height_m

    def _frame(self, mjd: Floats) -> SiteFrame:
        return site_frame(mjd, *self.place)

    def chunks(self, count: int) -> Iterator[slice]:
        """Slices of target rows small enough to hold."""
        step = max(1, CHUNK_CELLS // self.grid.size)
        for i in range(0, count, step):
            yield slice(i, min(i + step, count))

    def limits(
        self, camera: CameraSetup, rows: slice, match: Match | None = None, extra: Floats | None = None
    ) -> list[iv.Limit]:
        """Limits of a setup in the order in which hours are charged (those by night or calendar come apart).

        ``match``: for all stars of the field; ``extra``: (rows, T) margin of further limits, for the rows alone.
        """
        up, east, north, sun, moon = self.field.project(
            self.grid, self.frame.zenith, self.frame.east, self.frame.north, self.sun.unit, self.moon.unit, rows=rows
        )
        night = _sin(camera.sun_limit_deg)
        sun_off, moon_off = _cos(camera.sun_no_closer_deg), _cos(camera.moon_no_closer_deg)
        found = [
            iv.limit("daylight and twilight", lambda s: night - s, self.sun.sin_altitude[None, :]),
            self._altitude(camera.lowest_altitude_deg, up, east, north),
            *_airmass(camera, up),
        ]
        if camera.zenith_blind_deg is not None:
            blind = _cos(camera.zenith_blind_deg)
            found.append(iv.limit("zenith blind spot", lambda s: blind - s, up))
        found += self._about_the_pole(camera, rows, up, match)
        found.append(iv.limit("Sun keep-out", lambda c: sun_off - c, sun))
        # the Moon's distance counts while it is down as well: a look must not depend on the minute of moonset
        found.append(iv.limit("Moon distance", lambda c: moon_off - c, moon))
        found += self._moonlight(camera)
        if extra is not None:
            found.append(iv.limit("extra constraints", lambda m: m, extra))
        return found

    def _altitude(self, lowest_deg: float, up: Floats, east: Floats, north: Floats) -> iv.Limit:
        low = _sin(lowest_deg)
        points = self.site.horizon
        if not points or max(height for _, height in points) <= lowest_deg:
            return iv.limit("altitude", lambda s: s - low, up)

        def margin(s: Floats, e: Floats, n: Floats) -> Floats:
            skyline = horizon_deg(points, np.degrees(np.arctan2(e, n)))
            return s - np.maximum(low, np.sin(np.radians(skyline)))

        return iv.limit("altitude", margin, up, east, north)

    def _about_the_pole(self, camera: CameraSetup, rows: slice, up: Floats, match: Match | None) -> list[iv.Limit]:
        """Limits of hour angle, declination and parallactic angle, and of the template."""
        wanted = (camera.hour_angle_deg, camera.declination_deg, camera.parallactic_deg, match)
        if all(item is None for item in wanted):
            return []
        turn = earth_rotation_angle(self.grid) + np.radians(self.site.longitude_deg)
        x, y, zero = np.cos(turn), np.sin(turn), np.zeros_like(turn)
        axes = np.stack([x, y, zero]), np.stack([y, -x, zero]), np.stack([zero, zero, zero + 1.0])
        along, across, pole = self.field.project(self.grid, *axes, rows=rows)
        found = []
        if camera.hour_angle_deg is not None:
            middle, half = _middle(camera.hour_angle_deg)
            found.append(iv.limit("hour angle", _turned(middle, half), along, across))
        if camera.declination_deg is not None:
            low, high = (_sin(x) for x in camera.declination_deg)
            found.append(iv.limit("declination", lambda s: np.minimum(s - low, high - s), pole))
        if camera.parallactic_deg is None and match is None:
            return found
        toward, aside = self._parallactic(along, across, pole)
        if camera.parallactic_deg is not None:
            middle, half = _middle(camera.parallactic_deg)
            found.append(iv.limit("parallactic angle", _turned(middle, half), toward, aside))
        if match is not None:
            per_star = [
                np.broadcast_to(v[rows, None], up.shape)
                for v in (match.sin_low, match.sin_high, match.angle, match.half)
            ]
            found.append(iv.limit("template match", _near_template, up, toward, aside, *per_star))
        return found

    def _parallactic(self, along: Floats, across: Floats, pole: Floats) -> tuple[Floats, Floats]:
        """Cosine and sine of the parallactic angle, each times cos(altitude), (N, T)."""
        phi = np.radians(self.site.latitude_deg)
        cos_d = np.maximum(np.sqrt(np.clip(1.0 - pole**2, 0.0, None)), 1e-12)
        return np.sin(phi) * cos_d - np.cos(phi) * pole * along / cos_d, np.cos(phi) * across / cos_d

    def _moonlight(self, camera: CameraSetup) -> list[iv.Limit]:
        found = []
        height = self.moon.sin_altitude[None, :]
        if camera.moon_below_deg is not None:
            low = _sin(camera.moon_below_deg)
            found.append(iv.limit("Moon up", lambda s: low - s, height))
        if camera.moon_at_most_lit is not None:
            most = camera.moon_at_most_lit + 1e-12  # a share of 1 allows full Moon
            lit = moon_illumination(self.grid)[None, :]
            found.append(iv.limit("Moon light", lambda k, s: np.maximum(most - k, -s), lit, height))
        return found


# ------------------------------------------------------------------ margins


def _sin(angle_deg: float) -> float:
    return float(np.sin(np.radians(angle_deg)))


def _cos(angle_deg: float) -> float:
    return float(np.cos(np.radians(angle_deg)))


def _middle(span_deg: tuple[float, float]) -> tuple[float, float]:
    low, high = np.radians(span_deg)
    return float(0.5 * (low + high)), float(0.5 * (high - low))


def _turned(middle: float, half: float) -> iv.Margin:
    """Margin of an angle given as (r cos, r sin) being within ``half`` of ``middle`` (rad)."""
    c, s, edge = np.cos(middle), np.sin(middle), np.cos(half)
    if half >= np.pi - 1e-12:
        return lambda x, y: np.ones_like(x)
    return lambda x, y: x * c + y * s - edge * np.hypot(x, y)


def _near_template(
    up: Floats, toward: Floats, aside: Floats, low: Floats, high: Floats, angle: Floats, half: Floats
) -> Floats:
    turned = toward * np.cos(angle) + aside * np.sin(angle) - np.cos(half) * np.hypot(toward, aside)
    return np.minimum(np.minimum(up - low, high - up), np.where(half >= np.pi, 1.0, turned))


def _airmass(camera: CameraSetup, up: Floats) -> list[iv.Limit]:
    """Limit of the airmass, as limits of the altitude at which the airmass has its bounds."""
    low, high = sin_of_airmasses(*camera.airmass_range)
    if low <= -1.0 and high > 1.0:
        return []
    return [iv.limit("airmass", lambda s: np.minimum(s - low, high - s), up)]


def sin_of_airmasses(smallest: float, largest: float) -> tuple[float, float]:
    """Bounds of sin(altitude) for bounds of the airmass; -2 and 2 where there is none (inf, and 1 or below)."""
    low = _sin(float(altitude_of_airmass_deg(largest))) if np.isfinite(largest) else -2.0
    return low, _sin(float(altitude_of_airmass_deg(smallest))) if smallest > 1.0 else 2.0


# ------------------------------------------------------------------ templates


def template_match(
    setup: SetupRef, targets: Sequence[Target], ra_deg: Floats, dec_deg: Floats, mjd: float
) -> Match | None:
    """Bounds for looks with a setup that must match its templates; None if the setup does not ask for it.

    ``mjd``: moment for which a transit's altitude is taken, where a template has no ``start_utc``. A target without
    a template of this setup and filter has no bounds.
    """
    camera, site = setup.camera, setup.site
    if camera is None or camera.match_template is None or not isinstance(site, Site):
        return None
    rule = camera.match_template
    low, high = np.full(len(targets), -2.0), np.full(len(targets), 2.0)
    angle, half = np.zeros(len(targets)), np.full(len(targets), np.pi)
    for i, target in enumerate(targets):
        template = template_of(target, setup.name, camera.filter)
        if template is None:
            continue
        altitude, turned = _template_sky(template, site, float(ra_deg[i]), float(dec_deg[i]), mjd)
        if rule.airmass_within is not None:
            x = float(kasten_young(altitude + refraction_arcmin(altitude) / 60.0))
            low[i], high[i] = sin_of_airmasses(x - rule.airmass_within, x + rule.airmass_within)
        if rule.parallactic_within_deg is not None:
            angle[i], half[i] = np.radians(turned), np.radians(rule.parallactic_within_deg)
    return Match(low, high, angle, half)


def template_of(target: Target, setup: str, filter_name: str) -> Template | None:
    """The longest template that a target has with a setup and filter."""
    own = [target.templates, *(f.templates for f in target.features if isinstance(f, Ring | Arclet))]
    found = [t for templates in own for t in templates if (t.setup, t.filter) == (setup, filter_name)]
    return max(found, key=lambda t: t.minutes, default=None)


def _template_sky(template: Template, site: Site, ra: float, dec: float, mjd: float) -> tuple[float, float]:
    """Altitude and parallactic angle (degrees) in the middle of a template, or at transit if its time is unknown."""
    place = (site.longitude_deg, site.latitude_deg, site.height_m)
    if template.start_utc is None:
        of_date = float(np.degrees(np.arcsin(star_directions(ra, dec, mjd)[0, 0, 2])))
        return 90.0 - abs(site.latitude_deg - of_date), 0.0 if site.latitude_deg > of_date else 180.0
    middle = mjd_of_iso(template.start_utc.isoformat()) + template.minutes / 2880.0
    altitude = float(altaz_deg(ra, dec, middle, *place)[0][0, 0])
    return altitude, float(parallactic_angle_deg(ra, dec, middle, *place[:2])[0, 0])
