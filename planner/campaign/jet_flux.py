"""How bright a knot is, and how it fades."""

from __future__ import annotations

from typing import Literal

from pydantic import ConfigDict, Field, model_validator

from planner.campaign.base import Record, SightingDay, assumed


class PowerLaw(Record):
    """Flux falling as (distance from the core, or age) ^ -index."""

    index: float = Field(gt=0, le=10)
    with_: Literal["distance", "age"] = Field(alias="with")
    model_config = ConfigDict(populate_by_name=True)


class Adiabatic(Record):
    """A blob of electrons N(E) ~ E^-electron_index that expands evenly with its age.

    Transparent, it fades as age^(-2 p). With ``peak_ghz``, the peak of its spectrum on the date of the flux, it
    first rises where it is still opaque; the spectrum is then the blob's own.
    """

    electron_index: float = Field(gt=1, le=5)
    peak_ghz: float | None = Field(default=None, gt=0)


class Fades(Record):
    """How a knot fades from the date its flux was measured: exactly one of the laws."""

    exponential_days: float | None = Field(default=None, gt=0)
    power_law: PowerLaw | None = None
    adiabatic: Adiabatic | None = None

    @model_validator(mode="after")
    def _one(self) -> Fades:
        laws = ("exponential_days", "power_law", "adiabatic")
        given = [law for law in laws if getattr(self, law) is not None]
        if len(given) != 1:
            has = f"has {' and '.join(given)}" if given else "says no law"
            raise ValueError(f"{has}; give exactly one of: {', '.join(laws)}")
        return self

    @property
    def needs_age(self) -> bool:
        """True when the law counts from the ejection."""
        return self.adiabatic is not None or (self.power_law is not None and self.power_law.with_ == "age")


class KnotFlux(Record):
    """Flux density of a knot on a date, its fading and spectrum (S ~ nu^spectral_index).

    ``rest_mjy`` instead of ``mjy``: the flux without Doppler boosting (Doppler factor 1), for motions that know the
    true speed and angle.
    """

    mjy: float | None = Field(default=None, gt=0)
    rest_mjy: float | None = Field(default=None, gt=0)
    on: SightingDay
    ghz: float = Field(gt=0)
    fades: Fades
    spectral_index: float = assumed(-0.7, "optically thin synchrotron (S ~ nu^-0.7), common practice", ge=-10, le=10)
    sigma_fraction: float = assumed(0.2, "flux and fading forecast good to 20 %, our choice", gt=0)

    @model_validator(mode="after")
    def _one(self) -> KnotFlux:
        if (self.mjy is None) == (self.rest_mjy is None):
            has = "both mjy and rest_mjy" if self.mjy else "neither mjy nor rest_mjy"
            raise ValueError(f"has {has}; give mjy as observed, or rest_mjy as without boosting")
        return self

    @property
    def slope(self) -> float:
        """Spectral index: as stated, else that of the electrons of an adiabatic blob, else the default."""
        if self.fades.adiabatic is not None and "spectral_index" not in self.model_fields_set:
            return (1.0 - self.fades.adiabatic.electron_index) / 2.0  # thin synchrotron
        return self.spectral_index

    @property
    def start_mjy(self) -> float:
        """The stated flux, whichever kind it is."""
        value = self.mjy if self.mjy is not None else self.rest_mjy
        assert value is not None
        return value


class PairFlux(KnotFlux):
    """Flux density of the approaching knot; the receding one is fainter by ``receding_ratio``.

    Without it the ratio follows from the two speeds: boosting, and the receding knot being seen younger.
    """

    receding_ratio: float | None = Field(default=None, gt=0, le=1)
