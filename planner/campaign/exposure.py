"""How a camera's look is taken and paid for: calibration by an observatory's calculator, overheads, lengths."""

from __future__ import annotations

from typing import Literal

from pydantic import Field, model_validator

from planner.campaign.base import Filter, Record, assumed
from planner.campaign.site_parts import ModeShares


class Anchor(Record):
    """One line of the observatory's own exposure calculator: it goes before our photon count.

    The light is a surface brightness over ``area_arcsec2`` (``mag_arcsec2``) or a star (``mag``) in the seeing given.
    ``subtracted``: the S/N is that of a finished difference image, with the setup's subtraction floor and its
    template; calculators give that of one image.
    """

    minutes: float = Field(gt=0)  # shutter open
    snr: float = Field(gt=0)
    mag_arcsec2: float | None = None
    mag: float | None = None
    filter: Filter | None = None  # the setup's own unless given
    sky: Literal["dark", "grey", "bright"] | None = None
    sky_mag_arcsec2: float | None = None
    airmass: float = assumed(1.2, "what calculators commonly start from; from memory", ge=1, le=10)
    area_arcsec2: float = assumed(1.0, "calculators give the S/N of one square arcsecond; from memory", gt=0)
    seeing_arcsec: float = assumed(1.0, "image of the star, FWHM at the anchor's airmass", gt=0)
    subtracted: bool = assumed(False, "calculators give the S/N of one image without subtraction")

    @model_validator(mode="after")
    def _one_of_each(self) -> Anchor:
        if (self.mag is None) == (self.mag_arcsec2 is None):
            raise ValueError("needs exactly one of mag_arcsec2 (of something extended) and mag (of a star)")
        if (self.sky is None) == (self.sky_mag_arcsec2 is None):
            raise ValueError("needs exactly one of sky (dark, grey or bright) and sky_mag_arcsec2")
        return self


class Exposure(Record):
    """What a look with a camera costs, what sky it needs, and in which lengths it is offered.

    ``crowding``: factor on the variance of the background, for unresolved stars (3 to 10 in crowded fields, from
    memory). ``needs``: a setup that can work through thin cloud says "thin". ``mode_shares``: lengths of a look as
    multiples of the minutes that reach the wanted S/N.
    """

    anchor: Anchor | None = None
    crowding: float = Field(default=1.0, ge=1)
    needs: Literal["clear", "thin"] = "clear"
    filter_change_s: float = assumed(0.0, "one a look, inside the acquisition unless stated", ge=0)
    calibration_min: float = assumed(0.0, "night time of a look's calibration; none unless stated", ge=0)
    mode_shares: ModeShares = (1.0,)
