"""Spacecraft that observe from near the Earth: bound by the angle to the Sun, not by weather, night or air."""

from __future__ import annotations

from typing import Any

from pydantic import Field, model_validator

from planner.campaign.arrays import ArraySite
from planner.campaign.base import FileRecord, Filter, Name, assumed, fault, raise_faults
from planner.campaign.site_parts import Months, Seeing, SetupName
from planner.campaign.sites import CameraSetup, Site

# Fields of a camera that mean nothing above the atmosphere, or that sun_angle_deg stands for.
GROUND_ONLY = (
    "lowest_altitude_deg", "sun_below_deg", "sun_below_by_filter_deg", "sun_no_closer_deg", "moon_no_closer_deg",
    "largest_airmass", "airmass", "zenith_blind_deg", "hour_angle_deg", "declination_deg", "parallactic_deg",
    "moon_below_deg", "moon_at_most_lit", "match_template",
)  # fmt: skip


class SpacecraftSite(FileRecord):
    """A spacecraft near the Earth (in orbit, or at the Sun-Earth L2 point, which adds up to 0.3 deg).

    ``sun_angle_deg``: smallest and largest angle between the target and the Sun. Occultations by the Earth in a low
    orbit are not modelled: put their share into the minutes granted. A night is a UTC date.
    """

    spacecraft: Name
    invented: bool = False
    sun_angle_deg: tuple[float, float]
    sky_mag_arcsec2: dict[Filter, float] = assumed(
        {"B": 23.5, "g": 23.2, "V": 22.9, "r": 22.7, "R": 22.6, "i": 22.5, "I": 22.2},
        "zodiacal light at middle ecliptic latitudes; from memory",
    )
    setups: dict[SetupName, CameraSetup] = Field(min_length=1)

    @model_validator(mode="after")
    def _whole(self) -> SpacecraftSite:
        raise_faults("SpacecraftSite", [*self._angles(), *self._cameras()])
        return self

    def _angles(self) -> list[Any]:
        low, high = self.sun_angle_deg
        if 0.0 <= low < high <= 180.0:
            return []
        text = f"got [{low:g}, {high:g}], needs [smallest, largest] in degrees, 0 to 180"
        return [fault(("sun_angle_deg",), text, self.sun_angle_deg)]

    def _cameras(self) -> list[Any]:
        found = []
        for name, camera in self.setups.items():
            keys = ("setups", name)
            if camera.image_fwhm_arcsec is None:
                text = "is missing: in space no seeing sets the width of an image"
                found.append(fault((*keys, "image_fwhm_arcsec"), text, None))
            if camera.filter not in self.sky_mag_arcsec2:
                text = f"sky_mag_arcsec2 has no value for filter {camera.filter}; add it"
                found.append(fault((*keys, "filter"), text, camera.filter, allowed=", ".join(self.sky_mag_arcsec2)))
            found += [
                fault((*keys, field), "means nothing for a spacecraft; leave it out (sun_angle_deg is its limit)", name)
                for field in GROUND_ONLY
                if field in camera.model_fields_set
            ]
        return found

    @property
    def name(self) -> str:
        """The spacecraft's name."""
        return self.spacecraft

    @property
    def months(self) -> Months:
        """Weather as sites have it: always clear."""
        return Months(clear=(1.0,) * 12, persistence=0.0, seeing_arcsec=Seeing(median=1.0, sigma_ln=0.01))

    @property
    def extinction_mag(self) -> dict[str, float]:
        """No air, no extinction."""
        return dict.fromkeys(self.sky_mag_arcsec2, 0.0)


AnySite = Site | ArraySite | SpacecraftSite
