"""A target: a source on the sky with its rings, knots and pairs of knots."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field, model_validator
from pydantic_core import InitErrorDetails

from planner.campaign.base import FileRecord, Filter, Name, Record, assumed, fault, raise_faults
from planner.campaign.echoes import Magnitude, Outburst, Ring
from planner.campaign.goals import choose
from planner.campaign.jets import Knot, Pair
from planner.campaign.laws import PositiveLaw
from planner.campaign.places import Position

FEATURES: Mapping[str, type[Record]] = {"ring": Ring, "knot": Knot, "pair": Pair}


def _feature(data: Any) -> Any:
    return choose(data, FEATURES, "feature")


Feature = Ring | Knot | Pair
AnyFeature = Annotated[Feature, BeforeValidator(_feature)]

# ------------------------------------------------------------------ the target


class Cosmology(Record):
    """Flat or curved Lambda-CDM numbers."""

    h0_km_s_mpc: float = assumed(70.0, "round value between published ones", gt=0)
    omega_matter: float = assumed(0.3, "round value near published ones", ge=0)
    omega_lambda: float | None = Field(default=None, ge=0)


class Spacing(Record):
    """Smallest and largest time between looks at a target, counted from night to night (dates)."""

    at_least_days: float = Field(default=0.5, ge=0)
    at_most_days: float | None = Field(default=None, gt=0)

    @model_validator(mode="after")
    def _order(self) -> Spacing:
        if self.at_most_days is not None and self.at_most_days <= self.at_least_days:
            raise ValueError(f"at_most_days {self.at_most_days:g} must be above at_least_days {self.at_least_days:g}")
        return self


class Nuisances(Record):
    """Widths of what no one asks for but every error contains."""

    plate_scale_sigma: float = assumed(3e-4, "relative plate scale of a setup; our choice", gt=0)
    centre_sigma_arcsec: float = assumed(0.03, "centring on the source, per setup and axis; our choice", gt=0)
    core_wander_beam: float = assumed(
        0.07,
        "core position of an epoch, common to all knots, per 30 days: 0.05-0.1 of a beam; common practice",
        gt=0,
    )


class Target(FileRecord):
    """A source on the sky with its features."""

    target: Name
    invented: bool = False
    note: str = ""
    position: Position
    source_now_mag: dict[Filter, Magnitude] = Field(default_factory=dict)
    outburst: Outburst | None = None
    distance_pc: PositiveLaw | None = None
    redshift: float | None = Field(default=None, gt=0, lt=20)
    cosmology: Cosmology = Field(default_factory=Cosmology)
    features: tuple[AnyFeature, ...] = Field(min_length=1)
    spacing: Spacing = assumed(Spacing(), "looks at least half a day apart, no largest gap")
    nuisances: Nuisances = Field(default_factory=Nuisances)

    @model_validator(mode="after")
    def _whole(self) -> Target:
        faults = [f for i, feature in enumerate(self.features) for f in self._feature_faults(i, feature)]
        raise_faults("Target", [*self._twin_faults(), *faults])
        return self

    @property
    def name(self) -> str:
        """The target's name."""
        return self.target

    def _twin_faults(self) -> Iterator[InitErrorDetails]:
        first: dict[str, int] = {}
        for i, feature in enumerate(self.features):
            kind = feature_kind(feature)
            if first.setdefault(feature.name, i) != i:
                earlier = first[feature.name]
                text = f"{feature.name!r} is already the name of features[{earlier}]; names are unique"
                yield fault(("features", i, kind), text, feature.name)

    def _feature_faults(self, i: int, feature: Feature) -> Iterator[InitErrorDetails]:
        """What a feature needs of its target, and does not find."""
        kind = feature_kind(feature)
        here = ("features", i, kind)
        if isinstance(feature, Ring):
            yield from self._ring_faults(here, feature)
        elif isinstance(feature, Pair) and self.distance_pc is None:
            yield fault(here, f"pair {feature.name!r} needs the target's distance_pc", feature.name)
        elif isinstance(feature, Knot) and self.redshift is None and self.distance_pc is None:
            yield fault(here, f"knot {feature.name!r} needs the target's redshift or distance_pc", feature.name)

    def _ring_faults(self, here: tuple[str | int, ...], ring: Ring) -> Iterator[InitErrorDetails]:
        if self.distance_pc is None:
            yield fault(here, f"ring {ring.name!r} needs the target's distance_pc", ring.name)
        if self.outburst is None:
            yield fault(
                here,
                f"ring {ring.name!r} needs the target's outburst (peak, lasting_days, peak_mag)",
                ring.name,
            )
            return
        seen, peak = ring.brightness.seen, self.outburst.peak.date
        if seen is None:
            return
        place = (*here[:2], "brightness", "seen")
        if seen.on <= peak:
            text = f"got {seen.on}, but the outburst peaked on {peak}: no ring is seen before it"
            yield fault((*place, "on"), text, seen.on)
        if seen.filter not in self.outburst.peak_mag:
            text = (
                f"filter {seen.filter!r} without a magnitude: ring {ring.name!r} was seen in it, so "
                f"outburst.peak_mag needs a value for {seen.filter!r}"
            )
            allowed = ", ".join(sorted(self.outburst.peak_mag))
            yield fault((*place, "filter"), text, seen.filter, allowed=f"filters with a peak magnitude: {allowed}")


def feature_kind(feature: Feature) -> Literal["ring", "knot", "pair"]:
    """The word by which a feature's kind is called, which is also its first key."""
    return "ring" if isinstance(feature, Ring) else "knot" if isinstance(feature, Knot) else "pair"
