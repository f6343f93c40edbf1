"""Goals: what is wanted of a feature, and how well."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Annotated, Any

from pydantic import BeforeValidator, Field, ValidationInfo, field_validator
from pydantic_core import InitErrorDetails

from planner.campaign.base import Record, assumed, fault, raise_faults, unknown, unknown_error
from planner.campaign.quantities import QUANTITIES, Kind, Quantity, Tolerance, in_unit_of, read_tolerance
from planner.errors import nearest


class LearnGoal(Record):
    """A quantity wanted to a precision (one standard deviation, half the 16-84 % width).

    ``to`` is kept in percent or in the quantity's own unit, whatever unit was written. ``at_ghz`` asks for the
    crossing of the core as seen at another frequency.
    """

    learn: str
    to: Annotated[Tolerance, BeforeValidator(read_tolerance)]
    at_ghz: float | None = Field(default=None, gt=0)
    odds: float = assumed(0.8, "a goal counts as reached when its simulated odds are 80 % or more", gt=0, lt=1)
    weight: float | None = Field(default=None, gt=0)

    @property
    def words(self) -> str:
        """The goal in the user's words."""
        at = "" if self.at_ghz is None else f" at {self.at_ghz:g} GHz"
        return f"{self.learn}{at} to {self.to}"

    @field_validator("learn")
    @classmethod
    def _known(cls, value: str) -> str:
        if value not in QUANTITIES:
            raise unknown_error(value, QUANTITIES, "quantity")
        return value

    @field_validator("to")
    @classmethod
    def _unit(cls, value: Tolerance, info: ValidationInfo) -> Tolerance:
        name = info.data.get("learn")
        return in_unit_of(value, QUANTITIES[name]) if name else value

    @field_validator("at_ghz")
    @classmethod
    def _frequency(cls, value: float | None, info: ValidationInfo) -> float | None:
        if value is not None and info.data.get("learn") not in ("core_crossing", None):
            raise ValueError(f"got {value:g}, but only core_crossing depends on a frequency; leave at_ghz out")
        return value


class LooksGoal(Record):
    """A number of usable epochs wanted."""

    looks: int = Field(gt=0)
    odds: float = assumed(0.8, "a goal counts as reached when its simulated odds are 80 % or more", gt=0, lt=1)
    weight: float | None = Field(default=None, gt=0)


def choose(data: Any, kinds: Mapping[str, type[Record]], what: str) -> Any:
    """Read a mapping as the one record whose first key it has, so that an error speaks of that kind only."""
    if isinstance(data, Record):
        return data
    names = ", ".join(kinds)
    if not isinstance(data, Mapping):
        shown = "nothing" if data is None else repr(data)
        raise ValueError(f"got {shown}; a {what} is a mapping with one of the keys: {names}")
    present = [key for key in kinds if key in data]
    if len(present) == 1:
        return kinds[present[0]].model_validate(data)
    if present:
        raise ValueError(f"has {' and '.join(present)}; a {what} has exactly one of the keys: {names}")
    # Nothing fits: blame the key that looks most like a misspelt one.
    close = [key for key in data if nearest(str(key), kinds)]
    if close:
        raise_faults(what, [unknown((str(close[0]),), str(close[0]), kinds, f"kind of {what}", "unknown_key")])
    raise ValueError(f"has none of the keys that say what kind of {what} it is: {names}")


GOALS: Mapping[str, type[Record]] = {"learn": LearnGoal, "looks": LooksGoal}


def _goal(data: Any) -> Any:
    return choose(data, GOALS, "goal")


Goal = Annotated[LearnGoal | LooksGoal, BeforeValidator(_goal)]


def goal_faults(kind: Kind, goals: tuple[Any, ...], feature: Record) -> Iterator[InitErrorDetails]:
    """Find goals that do not belong to this kind of feature, or ask percent of what may be 0 or less."""
    for i, goal in enumerate(goals):
        if not isinstance(goal, LearnGoal):
            continue
        quantity = QUANTITIES[goal.learn]
        if kind not in quantity.features:
            mine = [q.name for q in QUANTITIES.values() if kind in q.features]
            owners = " or a ".join(quantity.features)
            article = "an" if kind == "arclet" else "a"
            text = f"{goal.learn!r} belongs to a {owners}, not to {article} {kind}"
            yield fault(("goals", i, "learn"), text, goal.learn, allowed=", ".join(mine))
        elif quantity.shapes and kind == "ring" and feature.dust.shape not in quantity.shapes:  # type: ignore[attr-defined]
            yield _wrong_shape(i, quantity, feature.dust.shape)  # type: ignore[attr-defined]
        elif goal.to.unit == "%" and quantity.positive_with and not _positive(feature, quantity.positive_with):
            path = ".".join(quantity.positive_with)
            text = (
                f"got {str(goal.to)!r}, but the prior of {path} allows 0 and below, "
                "where percent means nothing; "
                f"write it in {quantity.unit}, or give {path} a prior above 0 such as lognormal"
            )
            yield fault(("goals", i, "to"), text, str(goal.to))


def _wrong_shape(i: int, quantity: Quantity, shape: str) -> InitErrorDetails:
    """Say that rings of this shape of dust do not have a quantity, and which they have."""
    mine = [q.name for q in QUANTITIES.values() if "ring" in q.features and shape in (q.shapes or (shape,))]
    text = f"{quantity.name!r} belongs to dust of shape {' or '.join(quantity.shapes)}, not to a {shape}"
    return fault(("goals", i, "learn"), text, quantity.name, allowed=", ".join(mine))


def _positive(feature: Record, path: tuple[str, ...]) -> bool:
    value: Any = feature
    for key in path:
        value = getattr(value, key)
    return bool(value.positive)
