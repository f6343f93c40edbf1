"""A target: a source on the sky with its rings, knots and pairs of knots."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field, field_validator, model_validator
from pydantic_core import InitErrorDetails

from planner.campaign.base import (
    FileRecord,
    Filter,
    Name,
    Record,
    SightingDay,
    assumed,
    fault,
    raise_faults,
)
from planner.campaign.goals import Goal, choose, goal_faults
from planner.campaign.laws import AnyLaw, Law, PositiveLaw
from planner.campaign.places import CoreCrossing, Moment, Position

# ------------------------------------------------------------------ echoes

Magnitude = Annotated[float, Field(ge=-30, le=40)]  # apparent, from the Sun (-27) to beyond any survey


class Outburst(Record):
    """The outburst whose light is scattered. The echo clock runs from its peak."""

    peak: Moment
    lasting_days: float = Field(gt=0)
    peak_mag: dict[Filter, Magnitude] = Field(min_length=1)


class Tilt(Record):
    """Sheet tilt: two slopes (east, north) dz/dx; ``slope_sigma`` is the width of each about its mean."""

    slope_sigma: float = Field(gt=0, le=3)
    slope_east: float = 0.0
    slope_north: float = 0.0


class SheetDust(Record):
    """A plane dust sheet."""

    shape: Literal["sheet"]
    depth_pc: AnyLaw
    tilt: Tilt = assumed(Tilt(slope_sigma=0.3), "sheets of unknown tilt: slope 0 ± 0.3 (17 deg), common practice")
    thickness_pc: float = assumed(0.5, "thin filament, common practice; no source", gt=0)
    grains: Literal["milky_way", "lmc"] = assumed("milky_way", "average Milky Way dust, R_V = 3.1 (Draine 2003)")
    drift: float = assumed(
        0.10,
        "depth changes by 10 % (1 sigma) per e-fold of delay: no sheet is exactly plane; our choice",
        ge=0,
    )


class SeenRing(Record):
    """What was seen: the surface brightness that anchors every later one.

    ``pa_deg``: the sector that shone, from the first position angle eastward to the second.
    """

    mag_arcsec2: Magnitude
    sigma: float = Field(gt=0)
    filter: Filter
    on: SightingDay
    pa_deg: tuple[float, float] | None = None
    seeing_arcsec: float = assumed(1.0, "typical ground seeing at the sighting", gt=0)

    @field_validator("pa_deg", mode="before")
    @classmethod
    def _two(cls, value: Any) -> Any:
        if value is not None and (not isinstance(value, (list, tuple)) or len(value) != 2):
            raise ValueError(f"got {value!r}, needs two position angles, e.g. [20, 75] (north through east)")
        return value

    @field_validator("pa_deg")
    @classmethod
    def _sector(cls, value: tuple[float, float] | None) -> tuple[float, float] | None:
        if value is not None:
            if any(not -360 <= angle <= 360 for angle in value):
                raise ValueError(f"got {list(value)}, needs position angles from -360 to 360")
            if value[0] == value[1]:
                raise ValueError(f"got {list(value)}, an empty sector; leave pa_deg out if the whole ring shone")
        return value


class RingBrightness(Record):
    """How bright the ring is: anchored on what was ``seen``, or from an extinction with its honest width."""

    seen: SeenRing | None = None
    extinction_mag: PositiveLaw | None = None

    @model_validator(mode="after")
    def _one(self) -> RingBrightness:
        if (self.seen is None) == (self.extinction_mag is None):
            raise ValueError("give exactly one of: seen, extinction_mag")
        return self


class Ring(Record):
    """A light-echo ring (or the arc of it that shines)."""

    ring: Name
    dust: SheetDust
    brightness: RingBrightness
    goals: tuple[Goal, ...] = ()

    @model_validator(mode="after")
    def _goals(self) -> Ring:
        raise_faults("Ring", goal_faults("ring", self.goals, self))
        return self

    @property
    def name(self) -> str:
        """The feature's name."""
        return self.ring


# ------------------------------------------------------------------ jets


class Fades(Record):
    """How a knot fades after the date its flux was measured."""

    exponential_days: float = Field(gt=0)


class KnotFlux(Record):
    """Flux density of a knot on a date, its fading and spectrum (S ~ nu^spectral_index)."""

    mjy: float = Field(gt=0)
    on: SightingDay
    ghz: float = Field(gt=0)
    fades: Fades
    spectral_index: float = assumed(-0.7, "optically thin synchrotron (S ~ nu^-0.7), common practice", ge=-10, le=10)
    sigma_fraction: float = assumed(0.2, "flux forecast good to 20 %: calibration 5-10 % and fading, our choice", gt=0)


def _turn(law: Law) -> Law:
    if not -360 <= law.median() <= 360:
        raise ValueError(f"got a position angle about {law.median():g}, needs one from -360 to 360")
    return law


class _Motion(Record):
    """What the motions of knots and of pairs share."""

    pa_deg: AnyLaw
    acceleration_fraction_yr: float = assumed(
        0.15, "acceleration along and across, of the speed per year (0.1-0.2); most features accelerate", ge=0
    )

    @field_validator("pa_deg")
    @classmethod
    def _angle(cls, value: Law) -> Law:
        return _turn(value)


class KnotMotion(_Motion):
    """Motion of a knot: speed and position angle at ``on`` (mid-season if left out)."""

    core_crossing: CoreCrossing
    speed_mas_yr: PositiveLaw


class Neighbours(Record):
    """Distance to the next knots, for the safe spacing of epochs."""

    spacing_mas: float = Field(gt=0)


class Knot(Record):
    """A jet knot leaving a core."""

    knot: Name
    motion: KnotMotion
    flux: KnotFlux
    size_mas: float = assumed(0.05, "compact knot; no source", ge=0)
    neighbours: Neighbours | None = None
    goals: tuple[Goal, ...] = ()

    @model_validator(mode="after")
    def _goals(self) -> Knot:
        raise_faults("Knot", goal_faults("knot", self.goals, self))
        return self

    @property
    def name(self) -> str:
        """The feature's name."""
        return self.knot


class PairMotion(_Motion):
    """Two knots thrown out at one moment in opposite directions."""

    ejection: Moment
    approaching_mas_d: PositiveLaw
    receding_mas_d: PositiveLaw

    @model_validator(mode="after")
    def _sides(self) -> PairMotion:
        fast, slow = self.approaching_mas_d.median(), self.receding_mas_d.median()
        if fast <= slow:
            text = f"got {fast:g}, needs a median above that of receding_mas_d ({slow:g}); swap them and turn pa_deg"
            raise_faults("PairMotion", [fault(("approaching_mas_d",), text, fast)])
        return self


class PairFlux(KnotFlux):
    """Flux density of the approaching knot; the receding one is fainter by ``receding_ratio``."""

    receding_ratio: float = assumed(0.2, "receding knot at 1/5 of the flux; state it when known", gt=0, le=1)


class Pair(Record):
    """A two-sided pair of knots; ``pa_deg`` is the side of the approaching one."""

    pair: Name
    motion: PairMotion
    flux: PairFlux
    size_mas: float = assumed(1.0, "compact ejecta, scatter-broadened; no source", ge=0)
    goals: tuple[Goal, ...] = ()

    @model_validator(mode="after")
    def _goals(self) -> Pair:
        raise_faults("Pair", goal_faults("pair", self.goals, self))
        return self

    @property
    def name(self) -> str:
        """The feature's name."""
        return self.pair


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
