"""A target: a source on the sky with its rings, knots and pairs of knots."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field, model_validator
from pydantic_core import InitErrorDetails

from planner.campaign.arclets import Arclet
from planner.campaign.base import FileRecord, Filter, Name, Record, assumed, fault, raise_faults, unknown_error
from planner.campaign.echo_faults import echo_faults
from planner.campaign.echoes import Magnitude, Outburst, Ring, Template
from planner.campaign.goals import choose
from planner.campaign.jet_motion import StationaryMotion
from planner.campaign.jets import Knot, Pair, Scattering, jet_faults
from planner.campaign.laws import Lognormal, PositiveLaw
from planner.campaign.places import Position

FEATURES: Mapping[str, type[Record]] = {"ring": Ring, "arclet": Arclet, "knot": Knot, "pair": Pair}


def _feature(data: Any) -> Any:
    return choose(data, FEATURES, "feature")


Feature = Ring | Arclet | Knot | Pair
AnyFeature = Annotated[Feature, BeforeValidator(_feature)]

# ------------------------------------------------------------------ the target


class Cosmology(Record):
    """Flat or curved Lambda-CDM numbers."""

    h0_km_s_mpc: float = assumed(70.0, "round value between published ones", gt=0)
    omega_matter: float = assumed(0.3, "round value near published ones", ge=0)
    omega_lambda: float | None = Field(default=None, ge=0)


# The realisations that astropy ships under a name; tests/campaign compares with its list.
COSMOLOGIES = ("Planck13", "Planck15", "Planck18", "WMAP1", "WMAP3", "WMAP5", "WMAP7", "WMAP9")


class NamedCosmology(Record):
    """A published set of numbers, by its name."""

    name: str


def _cosmology(data: Any) -> Any:
    if isinstance(data, str):
        if data not in COSMOLOGIES:
            raise unknown_error(data, COSMOLOGIES, "cosmology")
        return NamedCosmology(name=data)
    return data if isinstance(data, NamedCosmology | Cosmology) else Cosmology.model_validate(data)


AnyCosmology = Annotated[NamedCosmology | Cosmology, BeforeValidator(_cosmology)]


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
    core_shift_mas_ghz: PositiveLaw = assumed(
        # 1.86 mas GHz gives the median shifts of 20 sources, 1.21 mas from 1.4 to 15.4 GHz and 0.24 mas from 5.0
        Lognormal(median_value=1.86, sigma_fraction=0.7),
        "core lies at this / GHz from the jet's base: medians of 20 sources (arXiv:1103.6032), a factor 2 wide",
    )
    flux_scale_fraction: float = assumed(0.07, "flux scale of a receiver, common to its epochs: 5-10 %", gt=0)


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
    cosmology: AnyCosmology = Field(default_factory=Cosmology)
    scatter_mas: Scattering | None = None
    crowding: float = Field(default=1.0, ge=1)  # on the background's variance, times the setup's own
    features: tuple[AnyFeature, ...] = Field(min_length=1)
    templates: tuple[Template, ...] = ()
    spacing: Spacing = assumed(Spacing(), "looks at least half a day apart, no largest gap")
    nuisances: Nuisances = Field(default_factory=Nuisances)

    @model_validator(mode="after")
    def _whole(self) -> Target:
        faults = [f for i, feature in enumerate(self.features) for f in self._feature_faults(i, feature)]
        raise_faults("Target", [*self._twin_faults(), *faults, *echo_faults(self), *jet_faults(self.features)])
        return self

    @property
    def name(self) -> str:
        """The target's name."""
        return self.target

    @property
    def _no_scale(self) -> bool:
        return self.redshift is None and self.distance_pc is None

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
        if isinstance(feature, Pair) and self.distance_pc is None:
            yield fault(here, f"pair {feature.name!r} needs the target's distance_pc", feature.name)
        elif isinstance(feature, Knot) and self._no_scale and not isinstance(feature.motion, StationaryMotion):
            yield fault(here, f"knot {feature.name!r} needs the target's redshift or distance_pc", feature.name)


def feature_kind(feature: Feature) -> Literal["ring", "arclet", "knot", "pair"]:
    """The word by which a feature's kind is called, which is also its first key."""
    if isinstance(feature, Ring):
        return "ring"
    return "arclet" if isinstance(feature, Arclet) else "knot" if isinstance(feature, Knot) else "pair"
