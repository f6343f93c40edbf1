"""Windows of a spacecraft: the angle to the Sun alone."""

from __future__ import annotations

import datetime as dt
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.campaign.records import SpacecraftSite
from planner.records import LIMITS
from planner.sky import clock
from planner.sky.directions import StarField
from planner.sky.spacecraft import spacecraft_rows, sun_angle_windows
from planner.sky.sun_moon import vectors_km
from planner.sky.windows import find_windows
from planner.units import mjd_of_date

OBLIQUITY = np.radians(23.4393)  # deg, J2000.0 (IAU 2006: 84381.406 arcsec)
START = mjd_of_date("2027-01-01")


def craft(low: float = 70.0, high: float = 110.0, **changes: Any) -> SpacecraftSite:
    return SpacecraftSite.model_validate(
        {
            "spacecraft": "Lark", "invented": True, "sun_angle_deg": [low, high],
            "setups": {"cam": {"aperture_m": 0.9, "image_fwhm_arcsec": 0.2}},
        } | changes
    )  # fmt: skip


def equatorial(longitude_deg: float, latitude_deg: float) -> tuple[float, float]:
    """Ecliptic to equatorial, degrees (textbook rotation about the equinox)."""
    lon, lat = np.radians([longitude_deg, latitude_deg])
    x, y, z = np.cos(lat) * np.cos(lon), np.cos(lat) * np.sin(lon), np.sin(lat)
    y, z = y * np.cos(OBLIQUITY) - z * np.sin(OBLIQUITY), y * np.sin(OBLIQUITY) + z * np.cos(OBLIQUITY)
    return float(np.degrees(np.arctan2(y, x)) % 360), float(np.degrees(np.arcsin(z)))


def windows_of(ra: float, dec: float, low: float, high: float, days: float = 365.25) -> tuple[np.ndarray, np.ndarray]:
    field = StarField(ra, dec, np.arange(START, START + days + 3))
    return sun_angle_windows(field, 0, START, START + days, (low, high))


def circular_days(beta_deg: float, low: float, high: float) -> float:
    """Days a year on a circular orbit: cos(elongation) = cos(beta) cos(lambda - lambda_sun)."""
    a, b = (np.arccos(np.clip(np.cos(np.radians(e)) / np.cos(np.radians(beta_deg)), -1, 1)) for e in (low, high))
    return float(365.25 / np.pi * (b - a))


# Days a year of the real Earth's orbit, and edges a year, for ecliptic longitude 100 deg; computed by another
# program (prototype, not shipped), and the circular formula beside it. Tolerance 0.3 d: the year of the season.
YEARS = [
    (0.0, 70.0, 110.0, 81.2, 4),
    (30.0, 70.0, 110.0, 94.5, 4),
    (60.0, 70.0, 110.0, 175.2, 4),
    (80.0, 70.0, 110.0, 365.25, 0),
    (0.0, 50.0, 180.0, 261.0, 2),
    (45.0, 50.0, 180.0, 313.5, 2),
    (0.0, 85.0, 135.0, 100.2, 4),
    (30.0, 85.0, 135.0, 121.2, 4),
    (90.0, 85.0, 135.0, 365.25, 0),
]


@pytest.mark.parametrize(("beta", "low", "high", "days", "edges"), YEARS)
def test_days_and_edges_of_a_year(beta: float, low: float, high: float, days: float, edges: int) -> None:
    start, end = windows_of(*equatorial(100.0, beta), low, high)
    assert (end - start).sum() == pytest.approx(days, abs=0.5)
    assert (end - start).sum() == pytest.approx(circular_days(beta, low, high), abs=4.0)  # the orbit is no circle
    inner = [t for t in [*start, *end] if START + 0.01 < t < START + 365.24]
    assert len(inner) == edges


def test_both_windows_run_together_when_the_largest_angle_is_never_passed() -> None:
    """At ecliptic latitude 60 the angle stays within 60 to 120: [70, 125] has one window a year, two edges."""
    start, end = windows_of(*equatorial(100.0, 60.0), 70.0, 125.0)
    inner = [t for t in [*start, *end] if START + 0.01 < t < START + 365.24]
    assert len(inner) == 2
    assert (end - start).sum() == pytest.approx(circular_days(60.0, 70.0, 125.0), abs=4.0)


def test_a_range_that_is_never_reached_gives_nothing() -> None:
    start, end = windows_of(*equatorial(100.0, 80.0), 20.0, 60.0)
    assert start.size == end.size == 0


@pytest.mark.parametrize(
    ("ra", "dec", "low", "high"), [(110.0, -3.0, 70, 110), (40.0, 60.0, 82.5, 120), (200.0, 5, 50, 180)]
)
def test_edges_agree_with_astropy_to_seconds(ra: float, dec: float, low: float, high: float) -> None:
    start, end = windows_of(ra, dec, low, high)
    edges = np.array([t for t in [*start, *end] if START + 0.01 < t < START + 365.24])
    with clock.offline_astropy():
        import astropy.units as u
        from astropy.coordinates import SkyCoord, get_sun
        from astropy.time import Time

        sun = get_sun(Time(edges, format="mjd"))
        angle = SkyCoord(ra * u.deg, dec * u.deg).transform_to(sun.frame).separation(sun).deg
    off = np.minimum(np.abs(angle - low), np.abs(angle - high))
    assert edges.size >= 2
    assert off.max() * 3600 < 1.0  # arcsec: 24 s of the Sun's motion of 1 deg a day; both know it to 0.1 arcsec


@settings(max_examples=12, deadline=None)
@given(st.floats(0, 360), st.floats(-89, 89), st.floats(20, 100), st.floats(5, 60))
def test_windows_are_where_samples_are_inside(ra: float, dec: float, low: float, width: float) -> None:
    high = min(180.0, low + width)
    start, end = windows_of(ra, dec, low, high, 370.0)
    t = START + np.arange(0.25, 370.0, 0.5)
    field = StarField(ra, dec, t)
    sun = vectors_km("sun", t)
    cosine = (field.pairs(np.zeros(t.size, dtype=np.int64), t) * sun).sum(axis=1) / np.linalg.norm(sun, axis=1)
    angle = np.degrees(np.arccos(cosine))
    inside = ((start[None, :] <= t[:, None]) & (t[:, None] <= end[None, :])).any(axis=1)
    clear = np.minimum(np.abs(angle - low), np.abs(angle - high)) > 1e-4
    assert (inside == ((angle > low) & (angle < high)))[clear].all()
    assert (start[1:] > end[:-1]).all()


def test_a_night_is_a_utc_date_and_hours_add_up(invented: SimpleNamespace) -> None:
    dates = [dt.date(2027, 3, 1) + dt.timedelta(days=i) for i in range(120)]
    ra, dec = equatorial(70.0, 10.0)
    field = StarField(ra, dec, mjd_of_date(dates[0]) + np.arange(0.0, 123.0))
    rows = spacecraft_rows(dates, field, 0, craft())
    assert rows.lost_hours + rows.left_hours == pytest.approx(np.full(120, 24.0))
    assert 0 < rows.night.size < 120
    day = np.array([mjd_of_date(dates[n]) for n in rows.night])
    assert (rows.start_mjd >= day - 1e-9).all()
    assert (rows.end_mjd <= day + 1 + 1e-9).all()
    assert ((rows.sun_separation_deg > 70) & (rows.sun_separation_deg < 110)).all()
    assert ((rows.end_mjd - rows.start_mjd) * 24).sum() == pytest.approx(rows.left_hours.sum())


def test_a_campaigns_windows_hold_the_spacecraft(invented: SimpleNamespace) -> None:
    ra, dec = equatorial(70.0, 10.0)
    camp = invented.campaign(
        {"lark": craft()}, [invented.target("T", ra, dec)], "2027-02-01", "2027-05-31", [("lark/cam", "all")]
    )
    found = find_windows(camp)
    assert found.target.size > 20
    assert np.isnan(found.airmass).all()
    assert np.isnan(found.moon_separation_deg).all()
    assert set(found.sky_class.tolist()) == {0}
    assert found.sky_mag_arcsec2 == pytest.approx(np.full(found.target.size, 22.6))  # R, the record's default
    total = found.ledger.lost_hours.sum() + found.ledger.left_hours.sum()
    assert total == pytest.approx(120 * 24.0)
    assert found.ledger.lost_hours[..., LIMITS.index("Sun angle")].sum() == pytest.approx(found.ledger.lost_hours.sum())


@pytest.mark.parametrize(
    ("changes", "text"),
    [
        ({"sun_angle_deg": [110, 70]}, r"sun_angle_deg\s.*needs \[smallest, largest\] in degrees"),
        ({"setups": {"cam": {"aperture_m": 1}}}, "image_fwhm_arcsec\\s.*in space no seeing sets the width"),
        (
            {"setups": {"cam": {"aperture_m": 1, "image_fwhm_arcsec": 0.2, "sun_below_deg": -12}}},
            "sun_below_deg\\s.*means nothing for a spacecraft",
        ),
        (
            {
                "setups": {"cam": {"aperture_m": 1, "image_fwhm_arcsec": 0.2, "filter": "B"}},
                "sky_mag_arcsec2": {"V": 22.0},
            },
            "no value for filter B; add it",
        ),
    ],
)
def test_faults_of_a_spacecraft_are_told(changes: dict[str, Any], text: str) -> None:
    with pytest.raises(ValueError, match=text):
        craft(**changes)
