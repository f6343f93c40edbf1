"""Jets as a user writes them: knots of a jet, and pairs thrown out in opposite directions."""

from __future__ import annotations

from collections.abc import Iterator

from pydantic import Field, model_validator
from pydantic_core import InitErrorDetails

from planner.campaign.base import Name, Record, assumed, fault, raise_faults
from planner.campaign.goals import Goal, LearnGoal, goal_faults
from planner.campaign.jet_flux import Adiabatic, Fades, KnotFlux, PairFlux, PowerLaw
from planner.campaign.jet_motion import (
    CounterMotion,
    IntrinsicMotion,
    KnotMotion,
    LinearMotion,
    Motion,
    NozzleMotion,
    PairMotion,
    StationaryMotion,
)
from planner.campaign.quantities import QUANTITIES

__all__ = [
    "Adiabatic",
    "Fades",
    "Knot",
    "KnotFlux",
    "KnotMotion",
    "Neighbours",
    "Pair",
    "PairFlux",
    "PairMotion",
    "PowerLaw",
    "Scattering",
    "jet_faults",
]


class Neighbours(Record):
    """Distance to the next knots, for the safe spacing of epochs."""

    spacing_mas: float = Field(gt=0)


class Scattering(Record):
    """Size to which the medium on the way blurs a point at one frequency; it shrinks as frequency^-2."""

    at_ghz: float = Field(gt=0)
    mas: float = Field(gt=0)


class Knot(Record):
    """A jet knot."""

    knot: Name
    motion: Motion
    flux: KnotFlux
    size_mas: float = assumed(0.05, "compact knot; no source", ge=0)
    grows: float = assumed(
        0.1, "the knot's size grows by this much a mas of separation, as in a cone of 0.1 rad; our choice", ge=0, le=2
    )
    neighbours: Neighbours | None = None
    goals: tuple[Goal, ...] = ()

    @model_validator(mode="after")
    def _whole(self) -> Knot:
        faults = [*goal_faults("knot", self.goals, self), *self._motion_faults(), *self._flux_faults()]
        raise_faults("Knot", faults)
        return self

    @property
    def name(self) -> str:
        """The feature's name."""
        return self.knot

    def _motion_faults(self) -> Iterator[InitErrorDetails]:
        """Goals for quantities that this kind of motion does not have."""
        for i, goal in enumerate(self.goals):
            if not isinstance(goal, LearnGoal) or "knot" not in QUANTITIES[goal.learn].features:
                continue
            if goal.learn not in self.motion.quantities:
                text = f"{goal.learn!r} means nothing for this motion ({self.motion.words})"
                yield fault(("goals", i, "learn"), text, goal.learn, allowed=", ".join(self.motion.quantities))

    def _flux_faults(self) -> Iterator[InitErrorDetails]:
        """Fluxes that need a speed or an age which this kind of motion does not know."""
        motion, fades = self.motion, self.flux.fades
        if self.flux.rest_mjy is not None and isinstance(motion, KnotMotion | LinearMotion | StationaryMotion):
            text = (
                f"rest_mjy needs the true speed and the angle, which this motion ({motion.words}) does not know; "
                "write mjy, or state intrinsic or nozzle"
            )
            yield fault(("flux", "rest_mjy"), text, self.flux.rest_mjy)
        if fades.needs_age and isinstance(motion, LinearMotion | StationaryMotion):
            text = (
                f"this fading counts from the ejection, which this motion ({motion.words}) does not have; "
                "use exponential_days"
            )
            yield fault(("flux", "fades"), text, None)
        if fades.power_law is not None and isinstance(motion, StationaryMotion) and not fades.needs_age:
            yield fault(("flux", "fades"), "a stationary feature keeps its distance; use exponential_days", None)


class Pair(Record):
    """A two-sided pair of knots; ``pa_deg`` is the side of the approaching one."""

    pair: Name
    motion: PairMotion
    flux: PairFlux
    size_mas: float = assumed(1.0, "compact ejecta, scatter-broadened; no source", ge=0)
    grows: float = assumed(0.0, "ejecta stay compact unless an expansion is stated; our choice", ge=0, le=2)
    goals: tuple[Goal, ...] = ()

    @model_validator(mode="after")
    def _whole(self) -> Pair:
        faults = list(goal_faults("pair", self.goals, self))
        if self.flux.rest_mjy is not None:
            text = "rest_mjy is for knots of known true speed; a pair's is only found from its two rates: write mjy"
            faults.append(fault(("flux", "rest_mjy"), text, self.flux.rest_mjy))
        raise_faults("Pair", faults)
        return self

    @property
    def name(self) -> str:
        """The feature's name."""
        return self.pair


def jet_faults(features: tuple[Record, ...]) -> Iterator[InitErrorDetails]:
    """Names inside motions that are not those of a fitting knot of the same target; keys from the target down."""
    knots = {f.name: f for f in features if isinstance(f, Knot)}
    for i, knot in enumerate(features):
        if not isinstance(knot, Knot):
            continue
        motion, here = knot.motion, ("features", i, "knot", "motion")
        if isinstance(motion, CounterMotion):
            fitting = [n for n, k in knots.items() if isinstance(k.motion, IntrinsicMotion | NozzleMotion)]
            if motion.of not in fitting:
                yield fault((*here, "of"), _why_no_counter(motion.of, features), motion.of, allowed=_listed(fitting))
        elif isinstance(motion, NozzleMotion) and isinstance(motion.nozzle, str):
            nozzles = {n: k.motion for n, k in knots.items() if isinstance(k.motion, NozzleMotion)}
            fitting = [n for n, m in nozzles.items() if not isinstance(m.nozzle, str)]
            if motion.nozzle not in fitting:
                text = f"got {motion.nozzle!r}, which is no knot of this target that states the numbers of a nozzle"
                yield fault((*here, "nozzle"), text, motion.nozzle, allowed=_listed(fitting))


def _why_no_counter(name: str, features: tuple[Record, ...]) -> str:
    found = next((f for f in features if getattr(f, "name", None) == name), None)
    if found is None:
        return f"got {name!r}, which is no knot of this target"
    if isinstance(found, Pair):
        return f"pair {name!r} holds its receding knot already; a counter-knot belongs to a single knot"
    return f"{name!r} does not state its true speed and angle, which its counter-knot shares; write intrinsic there"


def _listed(names: list[str]) -> str:
    return ", ".join(names) or "no knot here has intrinsic or nozzle numbers"
