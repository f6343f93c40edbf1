"""Flux of knots inside the observation model: start value, fading, spectrum, boosting, the receding knot of a pair.

Shapes: theta (..., P), mjd (T,) or (..., T), results (..., T).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from planner.campaign.records import KnotFlux
from planner.physics import flux
from planner.prediction.coordinates import Layout, Number, standard
from planner.records import Floats
from planner.units import mjd_of_date

LEAST_AGE_DAYS = 1.0  # a knot seen on a date was not thrown out after it: draws that say so count as this young


@dataclass(frozen=True)
class Light:
    """Flux of one knot, without the flux scale of the receiver."""

    record: KnotFlux
    ln_flux: Number  # error of the stated flux and of the fading together
    start_mjd: Callable[[Floats], Floats | None]
    separation_mas: Callable[[Floats, Floats], Floats]  # (theta, mjd) -> (..., T)
    doppler: Callable[[Floats], Floats] | None  # (..., 1), for fluxes stated without boosting

    @property
    def on_mjd(self) -> float:
        """Date of the stated flux."""
        return mjd_of_date(self.record.on) + 0.5

    def mjy(self, theta: Floats, mjd: Floats, ghz: float | None = None) -> Floats:
        """Flux at a frequency (that of the stated flux if None), (..., T)."""
        record = self.record
        value = record.start_mjy * np.exp(self.ln_flux.value(theta)) * self._faded(theta, mjd, ghz)
        if record.rest_mjy is not None:
            assert self.doppler is not None
            value = value * flux.boosting(self.doppler(theta), record.slope)
        blob = record.fades.adiabatic
        if ghz is None or (blob is not None and blob.peak_ghz is not None):
            return value
        return value * (ghz / record.ghz) ** record.slope

    def _faded(self, theta: Floats, mjd: Floats, ghz: float | None) -> Floats:
        """Share of the stated flux that is left; for a blob of known peak its spectrum is included."""
        fades = self.record.fades
        if fades.exponential_days is not None:
            return np.exp(-(mjd - self.on_mjd) / fades.exponential_days)
        if fades.power_law is not None and fades.power_law.with_ == "distance":
            then = self.separation_mas(theta, np.array([self.on_mjd]))
            with np.errstate(divide="ignore"):
                return (self.separation_mas(theta, mjd) / then) ** -fades.power_law.index
        age = self._age_ratio(theta, mjd)
        if fades.power_law is not None:
            return age**-fades.power_law.index
        blob = fades.adiabatic
        assert blob is not None
        if blob.peak_ghz is None:
            return age ** -(2.0 * blob.electron_index)
        here, then = (
            flux.adiabatic_mjy(1.0, nu / blob.peak_ghz, ratio, blob.electron_index)
            for nu, ratio in ((ghz or self.record.ghz, age), (self.record.ghz, 1.0))
        )
        return np.asarray(here / then)

    def _age_ratio(self, theta: Floats, mjd: Floats) -> Floats:
        """Age over that on the date of the flux; expansion is even, so this is the ratio of radii too."""
        start = self.start_mjd(theta)
        assert start is not None
        then = np.maximum(self.on_mjd - start, LEAST_AGE_DAYS)
        return np.maximum(mjd - start, 1e-3 * LEAST_AGE_DAYS) / then

    def opposite_mjy(self, theta: Floats, mjd: Floats, beta_cos: Floats, ghz: float | None = None) -> Floats:
        """Flux of the receding knot of a pair at one time, from that of the approaching one, (..., T).

        With R = (1 + b)/(1 - b), b = beta cos(angle) (..., 1): the receding knot is boosted R^-(3 - index) times less,
        and seen R times younger; any fading law is followed back to that age. For (age)^-n this is R^-(3 - index - n).
        """
        start = self.start_mjd(theta)
        assert start is not None
        young = (1.0 + beta_cos) / (1.0 - beta_cos)
        less = flux.ratio_equal_separation(beta_cos, self.record.slope)
        return self.mjy(theta, start + (mjd - start) / young, ghz) / less


def build_ln_flux(layout: Layout, name: str, sigma_fraction: float) -> Number:
    """Add the error of a stated flux and its fading to a layout."""
    why = "stated flux and fading"
    return Number(layout.add(standard(f"{name}/ln flux", "", sigma_fraction, why=why))[0], False, 0.0)
