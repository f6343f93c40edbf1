"""Parts that sites with telescopes and arrays of antennas have in common: weather, horizon, names of setups."""

from __future__ import annotations

import itertools
from typing import Annotated, Any

from pydantic import AfterValidator, Field, field_validator, model_validator

from planner.campaign.base import Record, assumed, fault, raise_faults

Share = Annotated[float, Field(gt=0, le=1)]
Twelve = tuple[Share, Share, Share, Share, Share, Share, Share, Share, Share, Share, Share, Share]
Positive = Annotated[float, Field(gt=0)]
NotNegative = Annotated[float, Field(ge=0)]
Part = Annotated[float, Field(ge=0, lt=1)]

# A setup is called "site/setup", so neither part may hold a slash; nothing else is needed but to be readable.
SetupName = Annotated[str, Field(pattern=r"^[A-Za-z0-9][A-Za-z0-9._+-]*$")]


def twelve(value: Any, what: str) -> Any:
    """Refuse anything but a list of twelve, January first."""
    if not isinstance(value, (list, tuple)) or len(value) != 12:
        got = f"{len(value)} values" if isinstance(value, (list, tuple)) else repr(value)
        raise ValueError(f"got {got}, needs a list of 12 {what}, January first")
    return value


def of_month(value: float | tuple[float, ...], month: int) -> float:
    """Return the value of a month (1 to 12) of one number for the year, or of twelve."""
    return float(value[month - 1]) if isinstance(value, tuple) else float(value)


class Seeing(Record):
    """Zenith seeing (FWHM at 500 nm): lognormal, with one median or twelve (January first)."""

    median: Positive | tuple[Positive, ...]
    sigma_ln: float = assumed(0.3, "spread of the seeing from night to night; common practice", gt=0)

    @field_validator("median", mode="before")
    @classmethod
    def _months(cls, value: Any) -> Any:
        return twelve(value, "medians") if isinstance(value, (list, tuple)) else value

    def median_arcsec(self, month: int | None = None) -> float:
        """Median of a month (1 to 12); None: of the year (geometric mean of the months)."""
        if month is not None:
            return of_month(self.median, month)
        months = self.median if isinstance(self.median, tuple) else (self.median,)
        if len(months) == 1:
            return float(months[0])
        product = 1.0
        for value in months:
            product *= value
        return float(product ** (1.0 / len(months)))


class Months(Record):
    """Weather by month (January first): shares of clear nights and of nights with thin cloud, and their persistence.

    ``weather_with``: slug of a neighbouring site that has the same weather: their nights are clear together as far
    as their shares agree. ``thin_cloud_mag``: light lost on a night of thin cloud.
    """

    clear: Twelve
    thin_cloud: tuple[Part, ...] = assumed((0.0,) * 12, "no night counts as one of thin cloud unless stated")
    thin_cloud_mag: float = assumed(0.3, "light lost through thin cloud; common practice", ge=0)
    persistence: float = assumed(0.3, "one-night correlation of clear nights; common practice", ge=0, lt=1)
    seeing_arcsec: Seeing = assumed(Seeing(median=1.0, sigma_ln=0.3), "ordinary good site; common practice")
    weather_with: str | None = None

    @field_validator("clear", mode="before")
    @classmethod
    def _twelve(cls, value: Any) -> Any:
        return twelve(value, "shares of clear nights")

    @field_validator("thin_cloud", mode="before")
    @classmethod
    def _twelve_thin(cls, value: Any) -> Any:
        return twelve(value, "shares of nights with thin cloud")

    @field_validator("seeing_arcsec", mode="before")
    @classmethod
    def _medians(cls, value: Any) -> Any:
        """Twelve numbers alone are the medians."""
        return {"median": value} if isinstance(value, (list, tuple)) else value

    @model_validator(mode="after")
    def _sums(self) -> Months:
        raise_faults("Months", [
            fault(("thin_cloud", i), f"clear {clear:g} and thin_cloud {thin:g} make more than 1 in month {i + 1}", thin)
            for i, (clear, thin) in enumerate(zip(self.clear, self.thin_cloud, strict=True))
            if clear + thin > 1.0 + 1e-9
        ])  # fmt: skip
        return self

    def good(self, needs: str) -> tuple[float, ...]:
        """Shares of the nights that serve a setup which ``needs`` them "clear" or at least "thin"; 12 of them."""
        if needs == "clear":
            return self.clear
        return tuple(min(1.0, c + t) for c, t in zip(self.clear, self.thin_cloud, strict=True))

    def cloud_mag(self, needs: str, month: int) -> float:
        """Light lost to cloud, averaged over the nights of a month that serve; 0 for setups that need clear sky."""
        thin = self.thin_cloud[month - 1]
        return 0.0 if needs == "clear" else self.thin_cloud_mag * thin / (self.clear[month - 1] + thin)


def _horizon(points: Any) -> Any:
    """Points of a horizon: azimuth rising from 0 to below 360, altitude within 0 to 90."""
    last = -1.0
    for azimuth, altitude in points:
        if not 0 <= azimuth < 360 or not 0 <= altitude < 90:
            raise ValueError(
                f"got [{azimuth:g}, {altitude:g}], needs azimuth from 0 to below 360 and altitude from 0 to below 90"
            )
        if azimuth <= last:
            raise ValueError(f"azimuth {azimuth:g} follows {last:g}; list the points by rising azimuth")
        last = azimuth
    return points


Horizon = Annotated[tuple[tuple[float, float], ...], AfterValidator(_horizon)]


def mode_shares(value: tuple[float, ...]) -> tuple[float, ...]:
    """Check the lengths in which a look is offered: rising, each once."""
    if any(b <= a for a, b in itertools.pairwise(value)):
        raise ValueError(f"got {', '.join(f'{v:g}' for v in value)}; list each share once, rising")
    return value


# More than four lengths would only slow the solver: neighbouring ones differ by less than the errors of a forecast.
ModeShares = Annotated[
    tuple[Annotated[float, Field(ge=0.1, le=10)], ...], Field(min_length=1, max_length=4), AfterValidator(mode_shares)
]
