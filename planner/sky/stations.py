"""Arrays of stations: when enough of them see a target, and the (u, v) points of a look.

Everything repeats every sidereal day, so time is the Greenwich hour angle of the target in sidereal hours.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from planner.campaign.records import ArraySite, Station
from planner.errors import DomainError, UnknownName
from planner.records import Bools, Floats, Ints, lock
from planner.sky.horizon import horizon_deg
from planner.units import LIGHT_M_S

STEP_HOURS = 1.0 / 60.0  # grid of the hour angle: one sidereal minute
STEPS = 1440


@dataclass(frozen=True)
class StationTrack:
    """One target over a sidereal day as an array sees it; S stations that have the receiver, T = 1440 steps."""

    stations: tuple[str, ...]  # S names
    sefd_jy: Floats  # (S,)
    place_m: Floats  # (S, 3) geocentric, ITRF
    dec_deg: float
    ghz: float
    gha_hours: Floats  # (T,) Greenwich hour angle, 0 to 24
    up: Bools  # (S, T)
    n_up: Ints  # (T,)
    stretch_start_hours: float  # Greenwich hour angle where the longest stretch with enough stations begins
    stretch_hours: float  # its length; 0 if never enough, 24 if always
    look_start_hours: float  # best start of the look, on the same scale (may pass 24)
    look_hours: float  # asked for, or the stretch if that is shorter
    elevation_deg: Floats  # (S, T)
    reliability: Floats  # (S,) chance to take part

    def __post_init__(self) -> None:
        lock(self)

    @property
    def in_look(self) -> Ints:
        """Grid steps (L,) inside the look, in order of time."""
        first = round(self.look_start_hours / STEP_HOURS)
        return np.arange(first, first + round(self.look_hours / STEP_HOURS)) % STEPS

    @property
    def most_stations(self) -> int:
        """Most stations up together during the look; 0 without one."""
        return int(self.n_up[self.in_look].max()) if self.look_hours > 0 else 0


@dataclass(frozen=True)
class UvPoints:
    """(u, v) of B baselines at L times; a baseline counts only while both stations are up."""

    u_wavelengths: Floats  # (B, L), toward east
    v_wavelengths: Floats  # (B, L), toward north
    weights: Floats  # (B, L) 1 / (SEFD_i SEFD_j), 0 while either station is down
    first: Ints  # (B,) station index
    second: Ints  # (B,)

    def __post_init__(self) -> None:
        lock(self)

    def flat(self) -> tuple[Floats, Floats, Floats]:
        """u, v and weight, (M,) each, of the samples that count."""
        keep = self.weights > 0.0
        return self.u_wavelengths[keep], self.v_wavelengths[keep], self.weights[keep]


def hour_angle_limit_hours(dec_deg: ArrayLike, latitude_deg: ArrayLike, elevation_deg: ArrayLike) -> Floats:
    """Hour angle (sidereal hours) at which a target passes an elevation; 12 if always above it, 0 if never.

    cos H = (sin a - sin phi sin d) / (cos phi cos d). Arguments broadcast.
    """
    d, phi, a = (np.radians(np.asarray(x, dtype=float)) for x in (dec_deg, latitude_deg, elevation_deg))
    top = np.sin(a) - np.sin(phi) * np.sin(d)
    scale = np.maximum(np.cos(phi) * np.cos(d), 1e-15)
    return np.degrees(np.arccos(np.clip(top / scale, -1.0, 1.0))) / 15.0


def station_elevation_deg(station: Station, dec_deg: float, gha_hours: Floats) -> tuple[Floats, Floats]:
    """Elevation and azimuth (degrees, (T,) each) of a target at a station (geodetic latitude)."""
    d, phi = np.radians(dec_deg), np.radians(station.latitude_deg)
    h = np.radians(15.0 * np.asarray(gha_hours, dtype=float) + station.longitude_deg)
    sin_el = np.sin(phi) * np.sin(d) + np.cos(phi) * np.cos(d) * np.cos(h)
    azimuth = np.arctan2(-np.cos(d) * np.sin(h), np.sin(d) * np.cos(phi) - np.cos(d) * np.cos(h) * np.sin(phi))
    return np.degrees(np.arcsin(np.clip(sin_el, -1.0, 1.0))), np.degrees(azimuth) % 360.0


def station_up(station: Station, dec_deg: float, gha_hours: Floats) -> Bools:
    """True while a target is above the station's lowest elevation and horizon and inside its hour angles, (T,)."""
    elevation, azimuth = station_elevation_deg(station, dec_deg, gha_hours)
    up = elevation >= station.lowest_elevation_deg
    if station.hour_angle_deg is not None:
        low, high = station.hour_angle_deg
        here = 15.0 * np.asarray(gha_hours, dtype=float) + station.longitude_deg
        up &= (here - low) % 360.0 <= high - low
    if station.horizon:
        up &= elevation >= horizon_deg(station.horizon, azimuth)
    return up


def station_places_m(stations: tuple[Station, ...]) -> Floats:
    """Geocentric places (S, 3) in metres from geodetic longitude, latitude and height (WGS84)."""
    import erfa

    lon, lat, height = np.array([[s.longitude_deg, s.latitude_deg, s.height_m] for s in stations]).T
    return np.asarray(erfa.gd2gc(1, np.radians(lon), np.radians(lat), height))


def station_track(site: ArraySite, receiver_name: str, dec_deg: float, look_hours: float | None = None) -> StationTrack:
    """Say when an array sees a declination (of date, degrees) with a receiver, and where a look is best placed.

    The look lies inside the longest stretch with at least ``least_stations`` stations that have the receiver
    (on a grid of one sidereal minute) where the number of baselines, summed over the look, is largest; of equal
    places the middle one. ``look_hours`` defaults to the receiver's. Never enough stations: lengths 0, no error.
    Raises UnknownName for the receiver, DomainError for the declination.
    """
    if receiver_name not in site.receivers:
        raise UnknownName(receiver_name, site.receivers, what="receiver", place=site.source.place("receivers"))
    if not -90.0 <= dec_deg <= 90.0:
        raise DomainError("dec_deg", dec_deg, "degrees, -90 to 90")
    receiver = site.receivers[receiver_name]
    wanted = receiver.look_hours if look_hours is None else look_hours
    stations = tuple(s for s in site.stations if receiver_name in s.sefd_jy)
    gha = np.arange(STEPS, dtype=np.float64) * STEP_HOURS
    up = np.zeros((len(stations), STEPS), dtype=np.bool_)
    elevation = np.zeros((len(stations), STEPS))
    for i, station in enumerate(stations):
        up[i] = station_up(station, dec_deg, gha)
        elevation[i] = station_elevation_deg(station, dec_deg, gha)[0]
    n_up = up.sum(axis=0)
    start, steps = longest_run(n_up >= site.least_stations)
    look_steps = min(round(wanted / STEP_HOURS), steps)
    look_start = _best_start(n_up * (n_up - 1) // 2, start, steps, look_steps)
    return StationTrack(
        stations=tuple(s.station for s in stations),
        sefd_jy=np.array([s.sefd_jy[receiver_name] for s in stations], dtype=float),
        place_m=station_places_m(stations) if stations else np.zeros((0, 3)),
        dec_deg=float(dec_deg),
        ghz=receiver.ghz,
        gha_hours=gha,
        up=up,
        n_up=n_up.astype(np.int64),
        stretch_start_hours=start * STEP_HOURS,
        stretch_hours=steps * STEP_HOURS,
        look_start_hours=look_start * STEP_HOURS,
        look_hours=look_steps * STEP_HOURS,
        elevation_deg=elevation,
        reliability=np.array([s.reliability for s in stations], dtype=float),
    )


def longest_run(on_circle: Bools) -> tuple[int, int]:
    """Start and length of the longest run of True on a circle; (0, 0) if there is none, the whole circle if all."""
    size = on_circle.size
    if on_circle.all():
        return 0, size
    if not on_circle.any():
        return 0, 0
    gap = int(np.argmin(on_circle))  # turn the circle so that it begins with a False: no run is cut
    turned = np.concatenate([np.roll(on_circle, -gap), [False]]).astype(np.int8)
    edges = np.diff(turned)
    starts, ends = np.flatnonzero(edges == 1) + 1, np.flatnonzero(edges == -1) + 1
    k = int(np.argmax(ends - starts))
    return (int(starts[k]) + gap) % size, int(ends[k] - starts[k])


def _best_start(baselines: Ints, start: int, steps: int, look_steps: int) -> int:
    """Step at which a look of ``look_steps`` inside the stretch has the most baselines; the middle of equals."""
    if look_steps == 0:
        return start
    along = baselines[np.arange(start, start + steps) % baselines.size]
    if steps == baselines.size:  # up all day: the look may run through the end of the circle
        along = np.concatenate([along, along[: look_steps - 1]])
    total = np.concatenate([[0], np.cumsum(along)])
    score = total[look_steps:] - total[:-look_steps]
    best = np.flatnonzero(score == score.max())
    return start + int(best[np.argmin(np.abs(best - best.mean()))])


def uv_wavelengths(track: StationTrack, steps: Ints | None = None) -> UvPoints:
    """(u, v) of every pair of stations, in wavelengths, at grid ``steps`` (L,) of the track; default: the look.

    u = X sin G + Y cos G; v = -sin d cos G X + sin d sin G Y + cos d Z, with G the Greenwich hour angle and
    (X, Y, Z) the baseline in ITRF (standard interferometry geometry; from memory, checked numerically).
    """
    at = track.in_look if steps is None else np.asarray(steps, dtype=np.int64)
    first, second = np.triu_indices(len(track.stations), k=1)
    wavelength_m = LIGHT_M_S / (track.ghz * 1e9)
    x, y, z = ((track.place_m[second] - track.place_m[first]) / wavelength_m).T[:, :, None]
    g, d = np.radians(15.0 * track.gha_hours[at])[None, :], np.radians(track.dec_deg)
    u = x * np.sin(g) + y * np.cos(g)
    v = np.sin(d) * (y * np.sin(g) - x * np.cos(g)) + np.cos(d) * z
    both = track.up[first][:, at] & track.up[second][:, at]
    weights = both / (track.sefd_jy[first] * track.sefd_jy[second])[:, None]
    return UvPoints(u, v, weights, first.astype(np.int64), second.astype(np.int64))
