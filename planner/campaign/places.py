"""Positions on the sky and moments with a width."""

from __future__ import annotations

import re
from typing import Any

from pydantic import Field, field_validator

from planner.campaign.base import Day, Record


def angle_deg(value: Any, *, hours: bool) -> Any:
    """Degrees from a number or from sexagesimal text (hours for right ascension)."""
    if not isinstance(value, str):
        return value
    text = value.replace("\N{MINUS SIGN}", "-")
    found = re.fullmatch(r"\s*([+-]?)(\d{1,3})[:h d](\d{1,2})[:m ](\d{1,2}(?:\.\d*)?)s?\s*", text)
    if not found:
        shape = "hh:mm:ss.ss" if hours else "±dd:mm:ss.s"
        raise ValueError(f"got {value!r}; write {shape} in quotes, or a number in degrees")
    sign, whole, minutes, seconds = found.groups()
    if int(minutes) >= 60 or float(seconds) >= 60:
        raise ValueError(f"got {value!r}; minutes and seconds must be below 60")
    size = int(whole) + int(minutes) / 60 + float(seconds) / 3600
    return (-size if sign == "-" else size) * (15.0 if hours else 1.0)


class Position(Record):
    """ICRS position; proper motion optional (mas/yr, ``pm_ra_mas_yr`` includes cos dec), for ``epoch``."""

    ra_deg: float = Field(alias="ra", ge=0, lt=360)
    dec_deg: float = Field(alias="dec", ge=-90, le=90)
    pm_ra_mas_yr: float = 0.0
    pm_dec_mas_yr: float = 0.0
    epoch: float = Field(default=2000.0, ge=1800, le=2200)

    @field_validator("ra_deg", mode="before")
    @classmethod
    def _ra(cls, value: Any) -> Any:
        return angle_deg(value, hours=True)

    @field_validator("dec_deg", mode="before")
    @classmethod
    def _dec(cls, value: Any) -> Any:
        return angle_deg(value, hours=False)


class Moment(Record):
    """A date with a width in days."""

    date: Day
    sigma_days: float = Field(ge=0)


class CoreCrossing(Moment):
    """The date a knot crossed the core as seen at one frequency."""

    at_ghz: float = Field(gt=0)
