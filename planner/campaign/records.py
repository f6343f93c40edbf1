"""The campaign's records; the records of targets and sites are offered here too.

Every field that has a default carries, in ``assumed``, where the default (and its width) comes from;
``lightlag check`` lists the fields that were left out.
"""

from __future__ import annotations

import datetime as dt
import os
import re
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Annotated, Literal

from pydantic import Field, field_validator, model_validator

from planner.campaign.arclets import Arclet, ArcletPosition, SeenArclet
from planner.campaign.arrays import ArraySite, Receiver, Station, Subarray
from planner.campaign.base import FileRecord, Filter, Name, PlanDay, Record, Source, UtcMoment, assumed
from planner.campaign.calendars import Busy, Nights, Shutdown
from planner.campaign.dust import FilledDust, OwnGrains, ScreenDust, SheetDust, ShellDust, Tilt
from planner.campaign.echoes import Ring, RingBrightness, SeenRing, Template
from planner.campaign.exposure import Anchor
from planner.campaign.goals import Goal, LearnGoal, LooksGoal
from planner.campaign.jet_motion import (
    CounterMotion,
    Intrinsic,
    IntrinsicMotion,
    LinearMotion,
    Nozzle,
    NozzleMotion,
    StationaryMotion,
)
from planner.campaign.jets import (
    Fades,
    Knot,
    KnotFlux,
    KnotMotion,
    Neighbours,
    Pair,
    PairFlux,
    PairMotion,
    Scattering,
)
from planner.campaign.light_curves import LightCurve
from planner.campaign.outbursts import Outburst, Pulse
from planner.campaign.places import CoreCrossing, Moment, Position
from planner.campaign.quantities import Tolerance
from planner.campaign.site_parts import Months, Seeing, Twelve
from planner.campaign.sites import (
    CameraSetup,
    Site,
    SkyClasses,
    Telescope,
)
from planner.campaign.sky_limits import MatchTemplate, SkyLimits
from planner.campaign.spacecraft import AnySite, SpacecraftSite
from planner.campaign.targets import Cosmology, Feature, NamedCosmology, Nuisances, Spacing, Target, feature_kind

__all__ = [
    "Allocation",
    "Anchor",
    "AnySite",
    "Arclet",
    "ArcletPosition",
    "ArraySite",
    "Busy",
    "CameraSetup",
    "Campaign",
    "CampaignFile",
    "CoreCrossing",
    "Cosmology",
    "CounterMotion",
    "Fades",
    "Feature",
    "FileRecord",
    "FilledDust",
    "Filter",
    "FixedLook",
    "Goal",
    "Intrinsic",
    "IntrinsicMotion",
    "Knot",
    "KnotFlux",
    "KnotMotion",
    "LearnGoal",
    "LightCurve",
    "LinearMotion",
    "LooksGoal",
    "MatchTemplate",
    "Moment",
    "Months",
    "NamedCosmology",
    "Neighbours",
    "Nights",
    "Nozzle",
    "NozzleMotion",
    "Nuisances",
    "Outburst",
    "OwnGrains",
    "Pair",
    "PairFlux",
    "PairMotion",
    "Position",
    "Programme",
    "Pulse",
    "Receiver",
    "Record",
    "Ring",
    "RingBrightness",
    "Scattering",
    "ScreenDust",
    "Season",
    "Seeing",
    "SeenArclet",
    "SeenRing",
    "SetupRef",
    "SheetDust",
    "ShellDust",
    "Shutdown",
    "Site",
    "SkyClasses",
    "SkyLimits",
    "SkyWord",
    "Source",
    "SpacecraftSite",
    "Spacing",
    "Station",
    "StationaryMotion",
    "Subarray",
    "Target",
    "Telescope",
    "Template",
    "Tilt",
    "Tolerance",
    "Twelve",
    "assumed",
    "feature_kind",
]


class Season(Record):
    """First and last evening date of the campaign (both included)."""

    first: PlanDay = Field(alias="from")
    last: PlanDay = Field(alias="to")

    @model_validator(mode="after")
    def _order(self) -> Season:
        if self.last < self.first:
            raise ValueError(f"to {self.last} is before from {self.first}; swap them")
        return self


class Programme(Record):
    """A set of target files with weights."""

    name: Name
    targets: tuple[Name, ...] = Field(min_length=1)
    weights: dict[str, Annotated[float, Field(gt=0)]] = Field(default_factory=dict)


SkyWord = Literal["dark", "grey", "any"]


class Allocation(Record):
    """Hours granted on a setup to a programme, for a class of sky (``grey`` includes dark)."""

    setup: str
    programme: str
    hours: float = Field(gt=0)
    sky: SkyWord = "any"

    @field_validator("setup")
    @classmethod
    def _two_parts(cls, value: str) -> str:
        if not re.fullmatch(r"[A-Za-z0-9][\w.+-]*/[A-Za-z0-9][\w.+-]*(@[A-Za-z0-9][\w.+-]*)?", value):
            raise ValueError(f"got {value!r}; write site/setup, e.g. brack-ridge/wide-camera")
        return value

    @property
    def site_slug(self) -> str:
        """The part of ``setup`` before the slash."""
        return self.setup.split("/", 1)[0]


class FixedLook(Record):
    """A look that is already promised to a telescope."""

    target: str
    setup: str
    start_utc: UtcMoment
    minutes: float = Field(gt=0)


class CampaignFile(FileRecord):
    """``campaign.yaml`` itself."""

    campaign: Name
    invented: bool = False
    note: str = ""
    season: Season
    seed: int = Field(ge=0)
    programmes: tuple[Programme, ...] = Field(min_length=1)
    allocations: tuple[Allocation, ...] = Field(min_length=1)
    fixed_looks: tuple[FixedLook, ...] = ()


@dataclass(frozen=True, slots=True)
class SetupRef:
    """A setup with all that belongs to it, found by its full name ``site/setup``."""

    name: str
    site_slug: str
    site: AnySite
    telescope: str  # "site/telescope"; an array is its own telescope
    camera: CameraSetup | None = None
    receiver: Receiver | None = None
    receiver_name: str | None = None
    shutdowns: tuple[Shutdown, ...] = ()
    busy: tuple[Busy, ...] = ()
    mounted: tuple[Nights, ...] | None = None  # None: always

    @property
    def is_array(self) -> bool:
        """True for a receiver of an array, False for a camera."""
        return self.receiver is not None


@dataclass(frozen=True, slots=True)
class Campaign:
    """A whole campaign: the file, its targets and the sites it uses, cross-checked."""

    folder: str
    file: CampaignFile
    targets: tuple[Target, ...]
    sites: Mapping[str, AnySite]  # by slug (file stem)
    setups: tuple[SetupRef, ...]  # those with an allocation, in order of first mention

    @property
    def name(self) -> str:
        """The campaign's name."""
        return self.file.campaign

    def target(self, name: str) -> Target:
        """Return a target by name."""
        return next(t for t in self.targets if t.name == name)

    def setup(self, name: str) -> SetupRef:
        """Return a setup by its full name ``site/setup``."""
        return next(s for s in self.setups if s.name == name)

    def programme_of(self, target: Target) -> Programme:
        """Return the programme that a target belongs to (each target has exactly one)."""
        path = os.path.normpath(target.source.path)
        for programme in self.file.programmes:
            if path in {os.path.normpath(os.path.join(self.folder, name)) for name in programme.targets}:
                return programme
        # A target made in Python, or read from elsewhere: its file's name decides.
        stem = os.path.basename(path)
        return next(p for p in self.file.programmes if stem in {os.path.basename(name) for name in p.targets})

    def weight_of(self, target: Target) -> float:
        """Return the weight of a target in its programme (1 unless stated)."""
        return self.programme_of(target).weights.get(target.name, 1.0)

    @property
    def nights(self) -> tuple[dt.date, ...]:
        """Every evening date of the season."""
        season = self.file.season
        return tuple(season.first + dt.timedelta(days=i) for i in range((season.last - season.first).days + 1))
