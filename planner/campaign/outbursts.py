"""The outburst as a user writes it: when it peaked, and how its light came and went."""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import Field, field_validator, model_validator
from pydantic.json_schema import SkipJsonSchema
from pydantic_core import InitErrorDetails, ValidationError

from planner.campaign.base import Filter, Record, fault, raise_faults, unknown_error
from planner.campaign.light_curves import LightCurve
from planner.campaign.places import Moment
from planner.units import mjd_of_date

Magnitude = Annotated[float, Field(ge=-30, le=40)]  # apparent, from the Sun (-27) to beyond any survey
_SHARES = 0.01  # shares of the pulses may miss 1 by this much: they are typed with two digits


class Pulse(Record):
    """One burst of an outburst: its middle counted from the peak, its share of all light, its length."""

    after_days: float
    share: float = Field(gt=0, le=1)
    lasting_days: float = Field(gt=0)


class Outburst(Record):
    """The outburst whose light is scattered. The echo clock runs from its peak.

    Its course is a plateau of ``lasting_days``, a sum of plateaus (``pulses``), or a ``light_curve`` read from a
    table of magnitudes, which gives the peak magnitudes of its filters too.
    """

    peak: Moment
    lasting_days: float | None = Field(default=None, gt=0)
    peak_mag: dict[Filter, Magnitude] = Field(default_factory=dict)
    pulses: tuple[Pulse, ...] = ()
    light_curve: str | None = None
    curve: SkipJsonSchema[LightCurve | None] = Field(default=None, exclude=True, repr=False)

    @classmethod
    def permitted_keys(cls) -> list[str]:
        """The keys a user may write."""
        return [key for key in super().permitted_keys() if key != "curve"]

    @field_validator("curve", mode="before")
    @classmethod
    def _from_reader(cls, value: Any) -> Any:
        if value is not None and not isinstance(value, LightCurve):
            raise unknown_error("curve", cls.permitted_keys(), "key", "unknown_key")
        return value

    @model_validator(mode="after")
    def _course(self) -> Outburst:
        given = [key for key in ("lasting_days", "pulses", "light_curve") if getattr(self, key)]
        missing: list[str] = [] if given else ["lasting_days"]
        faults = []
        if len(given) > 1:
            text = f"{' and '.join(given)} say the same thing; give one of: lasting_days, pulses, light_curve"
            faults.append(fault((given[1],), text))
        if self.pulses and abs(sum(p.share for p in self.pulses) - 1.0) > _SHARES:
            total = sum(p.share for p in self.pulses)
            faults.append(fault(("pulses",), f"the shares add up to {total:g}, need 1", total))
        if self.light_curve is None and "peak_mag" not in self.model_fields_set:
            missing.append("peak_mag")
        elif self.light_curve is None and not self.peak_mag:
            faults.append(fault(("peak_mag",), "has 0 entries, needs at least 1"))
        gone = [InitErrorDetails(type="missing", loc=(key,), input=None) for key in missing]
        if gone:
            raise ValidationError.from_exception_data("Outburst", [*gone, *faults])
        raise_faults("Outburst", faults)
        return self

    @property
    def filters(self) -> tuple[str, ...]:
        """Filters in which the peak magnitude is known, in alphabetical order."""
        return tuple(sorted({*self.peak_mag, *(self.curve.filters if self.curve else ())}))

    def curve_of(self, filter_name: str) -> tuple[tuple[float, ...], tuple[float, ...]] | None:
        """Days from the peak and magnitudes of a filter's light curve; None if it has none."""
        if self.curve is None or filter_name not in self.curve.rows:
            return None
        times, mags = self.curve.rows[filter_name]
        zero = mjd_of_date(self.peak.date) if self.curve.dated else 0.0
        return tuple(t - zero for t in times), mags
