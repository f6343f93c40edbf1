"""Constants, each with its source, and the conversions every room shares."""

from __future__ import annotations

import datetime as dt
import math

LIGHT_M_S = 299_792_458.0  # m/s, exact (SI definition of the metre, 1983)
DAY_S = 86_400.0  # s, exact
AU_M = 149_597_870_700.0  # m, exact (IAU 2012 Resolution B2)
PC_AU = 648_000.0 / math.pi  # au per parsec, exact (IAU 2015 Resolution B2)
PC_M = PC_AU * AU_M  # m
YEAR_DAYS = 365.25  # d, Julian year, exact (IAU)
C_PC_PER_DAY = LIGHT_M_S * DAY_S / PC_M  # 8.3942887e-4 pc/d, from the three above
C_AU_PER_DAY = LIGHT_M_S * DAY_S / AU_M  # 173.144633 au/d
RAD_ARCSEC = 648_000.0 / math.pi  # arcsec per radian
RAD_MAS = RAD_ARCSEC * 1e3  # mas per radian
SR_ARCSEC2 = RAD_ARCSEC**2  # arcsec2 per steradian, 4.254517e10
LY_PC = LIGHT_M_S * YEAR_DAYS * DAY_S / PC_M  # pc per light year (Julian), 0.3066014
MAG_PER_TAU = 2.5 / math.log(10.0)  # 1.0857362 mag per unit optical depth
FWHM_PER_SIGMA = 2.0 * math.sqrt(2.0 * math.log(2.0))  # 2.3548 for a Gaussian

_MJD_EPOCH = dt.date(1858, 11, 17)  # MJD 0 begins at 0h UTC of this date


def mjd_of_date(day: dt.date | str) -> float:
    """Return the MJD (UTC) at 0h of a civil date given as ``datetime.date`` or ISO text."""
    if isinstance(day, str):
        day = dt.date.fromisoformat(day)
    return float((dt.date(day.year, day.month, day.day) - _MJD_EPOCH).days)


def date_of_mjd(mjd: float) -> dt.date:
    """Return the UTC date that contains an MJD."""
    return _MJD_EPOCH + dt.timedelta(days=math.floor(mjd))


def iso_of_mjd(mjd: float) -> str:
    """Return ISO text to the second, e.g. ``2027-03-09T04:12:30Z``, of an MJD in UTC.

    Leap seconds are not resolved inside the day that holds one (a second in a plan does not matter).
    """
    seconds = round(mjd * DAY_S)
    moment = dt.datetime(1858, 11, 17) + dt.timedelta(seconds=seconds)
    return moment.isoformat() + "Z"


def mjd_of_iso(text: str) -> float:
    """Return the MJD of ISO text such as ``2027-03-09T04:12:30Z`` (UTC; other offsets are converted)."""
    moment = dt.datetime.fromisoformat(text)
    if moment.tzinfo is not None:
        moment = moment.astimezone(dt.UTC).replace(tzinfo=None)
    return (moment - dt.datetime(1858, 11, 17)) / dt.timedelta(days=1)
