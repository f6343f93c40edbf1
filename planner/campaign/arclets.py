"""Arclets as a user writes them: pieces of old echoes, seen far from a source whose outburst nobody dated."""

from __future__ import annotations

from pydantic import Field, model_validator

from planner.campaign.base import Filter, Name, Record, SightingDay, assumed, raise_faults
from planner.campaign.echoes import Template
from planner.campaign.goals import Goal, goal_faults
from planner.campaign.laws import AnyLaw, Lognormal, Normal, PositiveLaw
from planner.campaign.outbursts import Magnitude


class ArcletPosition(Record):
    """Where the arclet lies as seen from the supposed source (the target's position)."""

    radius_arcsec: PositiveLaw
    pa_deg: AnyLaw


class SeenArclet(Record):
    """Surface brightness that was seen; over a season it is taken as constant."""

    mag_arcsec2: Magnitude
    sigma: float = Field(gt=0)
    filter: Filter


class Arclet(Record):
    """A piece of an old echo: its place on the sky on a date is known, its source and age are wanted."""

    arclet: Name
    position: ArcletPosition
    on: SightingDay
    seen: SeenArclet
    age_yr: PositiveLaw = assumed(
        Lognormal(median_value=300.0, sigma_fraction=1.0), "age unknown: 110 to 815 yr (1 sigma), our choice"
    )
    slope: AnyLaw = assumed(
        Normal(mean=0.0, sigma=0.5), "dust of unknown inclination, rise of depth along the radius; our choice"
    )
    slope_across_sigma: float = assumed(
        0.5, "dust of unknown inclination, rise of depth across the radius; our choice", gt=0, le=3
    )
    width_arcsec: float = assumed(2.0, "a few arcseconds, as most old echoes; common practice", gt=0)
    length_arcsec: float = assumed(20.0, "tens of arcseconds, as most old echoes; common practice", gt=0)
    templates: tuple[Template, ...] = ()
    direct: bool = False
    goals: tuple[Goal, ...] = ()

    @model_validator(mode="after")
    def _goals(self) -> Arclet:
        raise_faults("Arclet", goal_faults("arclet", self.goals, self))
        return self

    @property
    def name(self) -> str:
        """The feature's name."""
        return self.arclet
