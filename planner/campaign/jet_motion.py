"""How a knot moves: one record for each kind of trajectory, chosen by the key that only it has.

Each kind names the quantities that a goal may ask of it.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Annotated, Any, ClassVar, Literal

from pydantic import AfterValidator, BeforeValidator, Field, model_validator

from planner.campaign.base import Name, Record, SightingDay, assumed, fault, raise_faults, unknown
from planner.campaign.laws import AnyLaw, Law, PositiveLaw
from planner.campaign.places import CoreCrossing, Moment
from planner.errors import nearest

_FAR = 1e-9  # share beyond which a law's tails are not looked at: prior draws never go further

# ------------------------------------------------------------------ numbers with physical limits


def _turn(law: Law) -> Law:
    if not -360 <= law.median() <= 360:
        raise ValueError(f"got a position angle about {law.median():g}, needs one from -360 to 360")
    return law


def _inside(law: Law, low: float, high: float, what: str) -> Law:
    least, most = float(law.quantile(_FAR)), float(law.quantile(1.0 - _FAR))
    if not low < least <= most < high:
        limits = f"above {low:g}" + (f" and below {high:g}" if math.isfinite(high) else "")
        raise ValueError(f"got {what} of {law.words()}, needs every value {limits}; cut the law with truncated_normal")
    return law


def _slower_than_light(law: Law) -> Law:
    return _inside(law, 0.0, 1.0, "a speed")


def _fast(law: Law) -> Law:
    return _inside(law, 1.0, 1e6, "a Lorentz factor")


def _to_the_line_of_sight(law: Law) -> Law:
    return _inside(law, 0.0, 180.0, "an angle")


def _cone(law: Law) -> Law:
    if law.fixed and law.median() == 0.0:
        return law  # a nozzle that does not swing
    return _inside(law, 0.0, 90.0, "a half angle")


TurnLaw = Annotated[AnyLaw, AfterValidator(_turn)]
BetaLaw = Annotated[AnyLaw, AfterValidator(_slower_than_light)]
LorentzLaw = Annotated[AnyLaw, AfterValidator(_fast)]
SightAngleLaw = Annotated[AnyLaw, AfterValidator(_to_the_line_of_sight)]
ConeLaw = Annotated[AnyLaw, AfterValidator(_cone)]

# ------------------------------------------------------------------ the kinds

_MOVING = ("apparent_speed_c", "speed_mas_yr", "pa_deg", "min_lorentz_factor", "largest_angle_deg")
_TRUE_SPEED = ("beta", "angle_deg", "doppler_factor", "lorentz_factor")


class JetMotion(Record):
    """What the motions of knots and of pairs share."""

    quantities: ClassVar[tuple[str, ...]] = ()
    words: ClassVar[str] = "a motion"


class BendingMotion(JetMotion):
    """A motion that may speed up, slow down and turn."""

    pa_deg: TurnLaw
    acceleration_fraction_yr: float = assumed(
        0.15, "acceleration along and across, of the speed per year (0.1-0.2); most features accelerate", ge=0
    )


class KnotMotion(BendingMotion):
    """A knot from its core crossing: apparent speed and position angle at mid-season.

    ``beta`` may be stated beside the apparent speed: the angles to the line of sight then follow (two of them).
    """

    quantities = (*_MOVING, "core_crossing")
    words = "from a core crossing, with an apparent speed"
    core_crossing: CoreCrossing
    speed_mas_yr: PositiveLaw
    beta: BetaLaw | None = None


class Passage(Record):
    """Where a knot is on a date, as offsets from the core seen at ``at_ghz`` (the flux's frequency if left out)."""

    on: SightingDay
    east_mas: AnyLaw
    north_mas: AnyLaw
    at_ghz: float | None = Field(default=None, gt=0)


class LinearMotion(BendingMotion):
    """A knot that passes a point with a velocity of its own direction; no core crossing is assumed.

    Speed, position angle of the velocity and accelerations are those on the date of the passage.
    """

    quantities = _MOVING
    words = "past a point, with no core crossing assumed"
    passes: Passage
    speed_mas_yr: PositiveLaw


class Intrinsic(Record):
    """True speed, as beta or as Lorentz factor, and the angle to the line of sight."""

    beta: BetaLaw | None = None
    lorentz_factor: LorentzLaw | None = None
    angle_deg: SightAngleLaw

    @model_validator(mode="after")
    def _one(self) -> Intrinsic:
        if (self.beta is None) == (self.lorentz_factor is None):
            both = "both beta and lorentz_factor" if self.beta else "neither beta nor lorentz_factor"
            raise ValueError(f"has {both}; give one of them: it states the true speed")
        return self


class IntrinsicMotion(BendingMotion):
    """A knot from its core crossing, by its true speed and angle; the apparent speed follows."""

    quantities = (*_MOVING, *_TRUE_SPEED, "core_crossing")
    words = "from a core crossing, with true speed and angle"
    core_crossing: CoreCrossing
    intrinsic: Intrinsic


class Nozzle(Record):
    """A nozzle that turns on a cone. ``phase_deg`` is that of ``phase_on``, 0 where a knot flies closest to us.

    ``period_days`` is as observed (1 + z times that at the source); ``axis_pa_deg`` is the position angle of the
    cone's axis; ``sense`` is the spin: 1 makes the position angle grow after phase 0.
    """

    period_days: PositiveLaw
    half_angle_deg: ConeLaw
    inclination_deg: SightAngleLaw
    axis_pa_deg: TurnLaw
    phase_deg: AnyLaw
    phase_on: SightingDay
    sense: Literal[1, -1] = assumed(1, "spin of the nozzle: position angle grows after phase 0; a guess if not stated")
    beta: BetaLaw


def _nozzle(data: Any) -> Any:
    if isinstance(data, (str, Nozzle)):
        return data
    if not isinstance(data, Mapping):
        raise ValueError(f"got {data!r}, needs a mapping of the nozzle's numbers, or the name of a knot that has them")
    return Nozzle.model_validate(data)


class NozzleMotion(JetMotion):
    """A knot that flies straight on in the direction its nozzle had on the date of ejection.

    ``nozzle``: its numbers, or the name of another knot thrown out by the same one.
    """

    quantities = (*_MOVING, *_TRUE_SPEED, "ejection", "period_days", "half_angle_deg", "inclination_deg")
    words = "from a precessing nozzle"
    nozzle: Annotated[Nozzle | Name, BeforeValidator(_nozzle)]
    ejection: Moment


class Stationary(Record):
    """Mean place of a feature that does not move, from the core seen at ``at_ghz`` (the flux's if left out)."""

    separation_mas: PositiveLaw
    pa_deg: TurnLaw
    at_ghz: float | None = Field(default=None, gt=0)
    jitter_mas: float = assumed(
        0.03, "scatter of a standing feature about its mean, per axis and 30 days, as knots pass it; our choice", gt=0
    )


class StationaryMotion(JetMotion):
    """A feature that stays where it is, apart from a jitter of its own."""

    quantities = ("separation_mas", "pa_deg")
    words = "stationary"
    stationary: Stationary


class CounterMotion(JetMotion):
    """The knot opposite to a named one of the same target: it shares true speed, angle and ejection."""

    quantities = ("apparent_speed_c", "speed_mas_yr", "pa_deg", "doppler_factor")
    words = "opposite to a named knot"
    side: Literal["receding"]
    of: Name


AnyMotion = KnotMotion | LinearMotion | IntrinsicMotion | NozzleMotion | StationaryMotion | CounterMotion
_BY_KEY: Mapping[str, type[JetMotion]] = {
    "passes": LinearMotion,
    "intrinsic": IntrinsicMotion,
    "nozzle": NozzleMotion,
    "stationary": StationaryMotion,
    "side": CounterMotion,
}


def read_motion(data: Any) -> Any:
    """Read a motion as the one kind whose own key it has, so that an error speaks of that kind only."""
    if isinstance(data, JetMotion):
        return data
    if not isinstance(data, Mapping):
        shown = "nothing" if data is None else repr(data)
        raise ValueError(f"got {shown}, needs a mapping such as core_crossing, speed_mas_yr and pa_deg")
    present = [key for key in _BY_KEY if key in data]
    if len(present) > 1:
        raise ValueError(f"has {' and '.join(present)}; a motion is of one kind and has at most one of these keys")
    if present:
        return _BY_KEY[present[0]].model_validate(data)
    if "core_crossing" not in data and "speed_mas_yr" not in data:
        own = KnotMotion.permitted_keys()
        for key in data:
            if key not in own and nearest(str(key), [*_BY_KEY, *own]) in _BY_KEY:
                raise_faults("motion", [unknown((str(key),), str(key), [*_BY_KEY, *own], "key", "unknown_key")])
    return KnotMotion.model_validate(data)


Motion = Annotated[AnyMotion, BeforeValidator(read_motion)]


class PairMotion(BendingMotion):
    """Two knots thrown out at one moment in opposite directions; ``pa_deg`` is the approaching side."""

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
