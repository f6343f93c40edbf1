"""Time scales and earth orientation, offline.

The kernel reads UT1-UTC, polar motion and leap seconds straight from the tables that ship with astropy's data
package (IERS finals2000A and Leap_Second.dat): no global state is touched and nothing ever tries the network.
Code that calls astropy's own transformations does so inside :func:`offline_astropy`.

Past the end of the table UT1-UTC is held at its last value and polar motion at its mean over the table.
The array functions of this room then go on without a word; whoever starts a whole job calls
:func:`warn_beyond_tables` once.
"""

from __future__ import annotations

import datetime as dt
import re
import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path

import numpy as np
from numpy.typing import ArrayLike

from planner.errors import DomainError
from planner.records import Floats, lock
from planner.units import DAY_S, iso_of_mjd, mjd_of_date

TT_MINUS_TAI_S = 32.184  # s, exact (IAU 1991 Recommendation IV)
FIRST_MJD, LAST_MJD = 15_020.0, 88_069.0  # 1900-01-01, 2100-01-01: the Earth's orbit in ERFA epv00 ends there
UT1_LIMIT_S = 0.9  # s: leap seconds keep |UT1-UTC| below this (ITU-R TF.460)
SIDEREAL_S_ARCSEC = 15.041  # arcsec of hour angle per second of time
ROTATIONS_PER_UT1_DAY = 1.00273781191135448  # Earth rotation angle, IAU 2000 Resolution B1.8


class EarthOrientationWarning(UserWarning):
    """Dates pass the end of the earth-orientation or leap-second table."""


@dataclass(frozen=True)
class EarthOrientation:
    """Daily earth orientation and leap seconds, as read from the installed tables."""

    mjd: Floats  # (D,) UTC, 0h
    ut1_minus_tai_s: Floats  # (D,) continuous through leap seconds
    pole_x_arcsec: Floats  # (D,)
    pole_y_arcsec: Floats  # (D,)
    predicted_from_mjd: float
    leap_mjd: Floats  # (L,) first day of each value of TAI-UTC
    leap_tai_minus_utc_s: Floats  # (L,)
    leap_expires_mjd: float

    def __post_init__(self) -> None:
        lock(self)

    @property
    def last_mjd(self) -> float:
        """Last day of the earth-orientation table."""
        return float(self.mjd[-1])

    @property
    def drift_s_yr(self) -> float:
        """Change of UT1-UTC per year over the last year of the table."""
        return float(self.ut1_minus_tai_s[-1] - self.ut1_minus_tai_s[-366])


@lru_cache(maxsize=1)
def earth_orientation() -> EarthOrientation:
    """Read the installed tables (once a process, 0.1 s).

    Column positions: readme of finals2000A (IERS Rapid Service). Bulletin B values are used where there
    are some, Bulletin A values (observed, then predicted) after them, as astropy does.
    """
    import astropy_iers_data as data  # type: ignore[import-untyped]

    leap_mjd, leap_s, expires = _read_leap_seconds(Path(data.IERS_LEAP_SECOND_FILE))
    rows, predicted = [], []
    for line in Path(data.IERS_A_FILE).read_text().splitlines():
        if not line[58:68].strip():
            continue  # the file goes on with empty days
        bulletin_b = line[134:165]
        if bulletin_b.strip():
            pole_x, pole_y, ut1 = line[134:144], line[144:154], line[154:165]
        else:
            pole_x, pole_y, ut1 = line[18:27], line[37:46], line[58:68]
        rows.append((float(line[7:15]), float(ut1), float(pole_x), float(pole_y)))
        predicted.append(line[57] == "P")
    mjd, ut1_utc, pole_x_all, pole_y_all = np.array(rows).T
    return EarthOrientation(
        mjd=mjd.copy(),
        ut1_minus_tai_s=ut1_utc - _tai_minus_utc(mjd, leap_mjd, leap_s),
        pole_x_arcsec=pole_x_all.copy(),
        pole_y_arcsec=pole_y_all.copy(),
        predicted_from_mjd=float(mjd[int(np.argmax(predicted))]) if any(predicted) else float(mjd[-1]),
        leap_mjd=leap_mjd,
        leap_tai_minus_utc_s=leap_s,
        leap_expires_mjd=expires,
    )


def _read_leap_seconds(path: Path) -> tuple[Floats, Floats, float]:
    """Read ``Leap_Second.dat``: days, TAI-UTC, and the MJD on which the file expires."""
    text = path.read_text()
    rows = [line.split() for line in text.splitlines() if line.strip() and not line.startswith("#")]
    found = re.search(r"expires on (\d+ \w+ \d{4})", text)
    expires = dt.datetime.strptime(found.group(1), "%d %B %Y").date() if found else dt.date(1972, 1, 1)
    return (
        np.array([float(row[0]) for row in rows]),
        np.array([float(row[-1]) for row in rows]),
        mjd_of_date(expires),
    )


def _tai_minus_utc(mjd: Floats, leap_mjd: Floats, leap_s: Floats) -> Floats:
    return leap_s[np.clip(np.searchsorted(leap_mjd, mjd, side="right") - 1, 0, None)]


def checked_mjd(mjd_utc: ArrayLike, name: str = "mjd_utc") -> Floats:
    """Return dates as a float array; raise DomainError for nan and for dates outside 1900-2100."""
    mjd = np.asarray(mjd_utc, dtype=float)
    bad = ~((mjd >= FIRST_MJD) & (mjd <= LAST_MJD))
    if bad.any():
        raise DomainError(
            name, float(np.atleast_1d(mjd)[np.atleast_1d(bad)][0]), f"MJD {FIRST_MJD:g} to {LAST_MJD:g} (1900-2100)"
        )
    return mjd


def tt_minus_utc_s(mjd_utc: ArrayLike) -> Floats:
    """TT-UTC in seconds, same shape as ``mjd_utc`` (before 1972 the value of 1972 is used)."""
    table = earth_orientation()
    return TT_MINUS_TAI_S + _tai_minus_utc(np.asarray(mjd_utc, float), table.leap_mjd, table.leap_tai_minus_utc_s)


def tt_mjd(mjd_utc: ArrayLike) -> Floats:
    """MJD in terrestrial time."""
    return np.asarray(mjd_utc, dtype=float) + tt_minus_utc_s(mjd_utc) / DAY_S


def ut1_minus_utc(mjd_utc: ArrayLike) -> Floats:
    """UT1-UTC in seconds, same shape as ``mjd_utc``; held at the ends of the table outside it.

    Linear between days in UT1-TAI, which has no steps. (The daily tides left out by the table are below 0.1 ms.)
    """
    mjd, table = np.asarray(mjd_utc, dtype=float), earth_orientation()
    ut1_tai = np.interp(mjd, table.mjd, table.ut1_minus_tai_s)
    return ut1_tai + _tai_minus_utc(mjd, table.leap_mjd, table.leap_tai_minus_utc_s)


def polar_motion_arcsec(mjd_utc: ArrayLike) -> tuple[Floats, Floats]:
    """Coordinates (x, y) of the pole in arcsec, each of the shape of ``mjd_utc``; outside the table its mean."""
    mjd, table = np.asarray(mjd_utc, dtype=float), earth_orientation()
    mean_x, mean_y = float(table.pole_x_arcsec.mean()), float(table.pole_y_arcsec.mean())
    x = np.interp(mjd, table.mjd, table.pole_x_arcsec, left=mean_x, right=mean_x)
    y = np.interp(mjd, table.mjd, table.pole_y_arcsec, left=mean_y, right=mean_y)
    return x, y


def earth_rotation_angle(mjd_utc: ArrayLike) -> Floats:
    """Earth rotation angle in radians, in [0, 2 pi), same shape as ``mjd_utc``.

    Source: IAU 2000 Resolution B1.8 (Capitaine et al. 2000), as in ERFA ``era00``.
    """
    import erfa

    mjd = np.asarray(mjd_utc, dtype=float)
    return np.asarray(erfa.era00(2_400_000.5, mjd + ut1_minus_utc(mjd) / DAY_S))


# ------------------------------------------------------------------ the end of the tables


def beyond_tables(last_mjd_utc: float) -> str | None:
    """Say what is uncertain when work reaches ``last_mjd_utc``; None while both tables cover it."""
    table = earth_orientation()
    parts = []
    if last_mjd_utc > table.last_mjd:
        years = (last_mjd_utc - table.last_mjd) / 365.25
        drift = min(abs(table.drift_s_yr) * years + 0.02, 2 * UT1_LIMIT_S)
        parts.append(
            f"the earth-orientation table ends on {iso_of_mjd(table.last_mjd)[:10]}: UT1-UTC is held at "
            f"{float(ut1_minus_utc(table.last_mjd)):.3f} s, which may be wrong by about {drift:.2f} s at the end "
            f"({drift * SIDEREAL_S_ARCSEC:.1f} arcsec of hour angle, {drift:.2f} s in rise and set times)"
        )
    if last_mjd_utc > table.leap_expires_mjd:
        parts.append(
            f"the leap-second table is valid to {iso_of_mjd(table.leap_expires_mjd)[:10]}: a leap second "
            "announced later shifts times by 1 s"
        )
    if not parts:
        return None
    return (
        f"dates to {iso_of_mjd(last_mjd_utc)[:10]} pass the tables in use: {'; '.join(parts)}. "
        "Work goes on; update the package astropy-iers-data for newer tables"
    )


def warn_beyond_tables(last_mjd_utc: float, stacklevel: int = 2) -> None:
    """Give one ``EarthOrientationWarning`` with the size of the effect if dates pass the end of a table."""
    text = beyond_tables(last_mjd_utc)
    if text:
        warnings.warn(text, EarthOrientationWarning, stacklevel=stacklevel + 1)


# ------------------------------------------------------------------ astropy without a network


@contextmanager
def offline_astropy() -> Iterator[None]:
    """Make astropy's transformations work offline for every date, today's and future ones, inside the block.

    astropy refuses dates after the start of the predictions once its bundled table is 30 days old, and tries
    hosts when tables expire. Inside the block nothing is downloaded, the age limit is off, and the warnings that
    :func:`warn_beyond_tables` replaces are silent. Settings return to what they were on leaving.
    """
    from astropy.utils import data, iers

    with (
        warnings.catch_warnings(),
        iers.conf.set_temp("auto_download", False),
        iers.conf.set_temp("auto_max_age", None),
        data.conf.set_temp("allow_internet", False),
    ):
        warnings.filterwarnings("ignore", message=r".*dubious year.*")
        warnings.filterwarnings("ignore", message=r".*Tried to get polar motions.*")
        warnings.filterwarnings("ignore", message=r".*leap-second file is expired.*")
        import astropy.time  # noqa: F401  its first import reads the leap seconds, so it must come in here

        yield
