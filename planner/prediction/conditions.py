"""Conditions of camera looks: image, airmass, sky, light lost on the way, and how the seeing differs by night.

Shapes: B draws, T moments.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from planner.campaign.records import ArraySite, SetupRef, Site, SpacecraftSite
from planner.instruments import camera
from planner.instruments.calibration import rate_factor
from planner.records import Floats, Ints


@dataclass(frozen=True)
class CameraSky:
    """Conditions of camera looks, (T,) each unless it says otherwise."""

    fwhm_arcsec: Floats  # (T,), or (B, T) where each draw has a seeing of its own
    airmass: Floats
    sky_mag_arcsec2: Floats
    extinction_mag: Floats | float  # per airmass; light lost to thin cloud is in it
    rate_factor: float = 1.0  # on all light: of the setup's anchor

    @property
    def typical_fwhm_arcsec(self) -> Floats:
        """Median image, (T,)."""
        if np.ndim(self.fwhm_arcsec) < 2:
            return self.fwhm_arcsec
        return np.asarray(np.exp(np.log(self.fwhm_arcsec).mean(axis=0)))

    @property
    def light(self) -> dict[str, Any]:
        """Keyword arguments of ``camera.ring_snr`` and ``camera.ring_seconds``."""
        return {"rate_factor": self.rate_factor}

    def at(self, which: Ints) -> CameraSky:
        """The moments ``which``."""
        lost = self.extinction_mag
        return replace(
            self,
            fwhm_arcsec=self.fwhm_arcsec[..., which],
            airmass=self.airmass[which],
            sky_mag_arcsec2=self.sky_mag_arcsec2[which],
            extinction_mag=lost[which] if isinstance(lost, np.ndarray) else lost,
        )


def fwhm_arcsec(site: Site, airmass: Floats, months: Ints | None = None) -> Floats:
    """Median image FWHM at each airmass, (T,); ``months``: 1 to 12, (T,), left out for the median of the year."""
    law = site.months.seeing_arcsec
    if months is None:
        return camera.image_fwhm_arcsec(law.median_arcsec(), airmass)
    return camera.image_fwhm_arcsec(np.array([law.median_arcsec(int(m)) for m in months], dtype=float), airmass)


def conditions(setup: SetupRef, months: Ints, airmass: Floats, sky_mag_arcsec2: Floats) -> CameraSky:
    """Conditions of a setup at moments in ``months`` (1 to 12, (T,)), in the median seeing of each month.

    A setup that works through thin cloud loses the light that the average night it may be used on takes; in space
    the image is the setup's own. Raises InputError where the setup's anchor cannot be met.
    """
    own, site = setup.camera, setup.site
    if own is None or isinstance(site, ArraySite):
        raise ValueError(f"{setup.name} is not a camera")
    if isinstance(site, SpacecraftSite):
        airmass = np.ones(len(airmass))  # no air: it has no extinction either
    airmass = np.nan_to_num(airmass, nan=1.0)  # none in space
    lost: Floats | float = float(site.extinction_mag[own.filter])
    if own.image_fwhm_arcsec is not None:
        image = np.full(len(airmass), own.image_fwhm_arcsec)
    else:
        assert isinstance(site, Site)
        image = fwhm_arcsec(site, airmass, months)
    if own.needs != "clear":
        cloud = np.array([site.months.cloud_mag(own.needs, int(m)) for m in months], dtype=float)
        lost = lost + cloud / airmass
    return CameraSky(image, airmass, sky_mag_arcsec2, lost, rate_factor(setup))


def with_seeing(sky: CameraSky, setup: SetupRef, nights: Ints, draws: int) -> CameraSky:
    """Give each draw and night a seeing of its own: median x exp(sigma z), (B, T).

    On each night the B draws take the B equally likely values of the lognormal law (quantiles (i + 1/2)/B of the
    normal z), shuffled by the night's number: any share of draws is a share of brightness and seeing together, and
    the seeing of one night says nothing of the next. ``nights``: (T,), the same for the same night everywhere.
    """
    if setup.camera is not None and setup.camera.image_fwhm_arcsec is not None:
        return sky
    from scipy.special import ndtri

    sigma = setup.site.months.seeing_arcsec.sigma_ln
    factors = np.exp(sigma * ndtri((np.arange(draws) + 0.5) / draws))
    order = {int(n): np.random.default_rng([draws, int(n)]).permutation(draws) for n in np.unique(nights)}
    spread = np.stack([factors[order[int(n)]] for n in nights], axis=1) if len(nights) else np.ones((draws, 0))
    return replace(sky, fwhm_arcsec=sky.fwhm_arcsec * spread)
