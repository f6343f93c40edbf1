"""Jets as a user writes them: knots leaving a core, and pairs thrown out in opposite directions."""

from __future__ import annotations

from pydantic import Field, field_validator, model_validator

from planner.campaign.base import Name, Record, SightingDay, assumed, fault, raise_faults
from planner.campaign.goals import Goal, goal_faults
from planner.campaign.laws import AnyLaw, Law, PositiveLaw
from planner.campaign.places import CoreCrossing, Moment


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
