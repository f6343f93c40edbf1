"""Arrays: antennas on many places that observe as one."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Mapping
from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field, field_validator, model_validator
from pydantic_core import InitErrorDetails

from planner.campaign.base import FileRecord, Name, PlanDay, Record, assumed, fault, raise_faults, unknown
from planner.campaign.presets import RECEIVERS, preset_values
from planner.campaign.site_parts import Horizon, ModeShares, Months, NotNegative, SetupName, of_month, twelve


class Station(Record):
    """One antenna of an array.

    ``reliability``: chance that it takes part in a look. ``hour_angle_deg``: [from, to] of its mount, west positive;
    a range over the lower meridian is written past 180.
    """

    station: Name
    longitude_deg: float = Field(ge=-180, le=360)
    latitude_deg: float = Field(ge=-90, le=90)
    height_m: float = Field(ge=-500, le=9000)
    lowest_elevation_deg: float = assumed(15.0, "millimetre practice 10-20 deg", ge=0, lt=90)
    hour_angle_deg: tuple[float, float] | None = None
    horizon: Horizon = ()
    reliability: float = assumed(0.95, "chance to take part in a look, weather apart; common practice", gt=0, le=1)
    sefd_jy: dict[str, Annotated[float, Field(gt=0)]] = Field(min_length=1)

    @field_validator("hour_angle_deg")
    @classmethod
    def _range(cls, value: tuple[float, float] | None) -> tuple[float, float] | None:
        if value is not None and not (-360.0 <= value[0] < value[1] <= 360.0):
            raise ValueError(f"got [{value[0]:g}, {value[1]:g}], needs [from, to] with from below to, -360 to 360 deg")
        return value


class Receiver(Record):
    """A band of an array, and how a look with it is taken.

    ``receiver_class`` may name a preset, which fills the fields that are left out. ``opacity``: of the zenith, one
    number or twelve (January first); it raises the SEFD toward the horizon. ``interleaved_with``: members that share
    one stretch of ``look_hours`` by scans of ``scan_min`` in turn: each has the whole stretch's (u, v) tracks and its
    share of the time, and is charged that share. ``sessions``: UTC dates on which the array observes in this band;
    left out, it may be any. ``mode_shares``: lengths in which a look is offered, as multiples of ``look_hours``.
    ``simultaneous``: other bands of the array that a look in this one records at the same time.
    """

    receiver_class: str | None = None
    ghz: float = Field(gt=0)
    bandwidth_mhz: float = Field(gt=0)
    polarisations: Literal[1, 2] = 2
    efficiency: float = assumed(0.7, "two-bit sampling", gt=0, le=1)
    look_hours: float = Field(gt=0, le=24)
    on_source: float = assumed(0.7, "share of a look spent on the target; the rest goes to calibrators", gt=0, le=1)
    opacity: NotNegative | tuple[NotNegative, ...] = assumed(0.05, "of the zenith at a dry site; from memory")
    system_k: float = assumed(80.0, "system temperature at the zenith that the SEFD stands for; from memory", gt=0)
    dynamic_range: float = assumed(1000.0, "snapshot imaging 500-2000; common practice", gt=0)
    core_mjy: float = assumed(1000.0, "core flux that sets the dynamic-range noise", ge=0)
    position_floor_beam: float = assumed(0.05, "floor of a position, share of the beam (0.05-0.2)", ge=0)
    snr_detect: float = assumed(5.0, "below this S/N a knot is not measured; common practice", gt=0)
    sun_no_closer_deg: float = assumed(10.0, "solar wind spoils phases; the array's own rule comes first", ge=0, le=180)
    interleaved_with: int = Field(default=1, ge=1, le=100)
    scan_min: float = assumed(5.0, "minutes of one scan of an interleaved member; common practice", gt=0, le=60)
    sessions: tuple[PlanDay, ...] | None = None
    mode_shares: ModeShares = (1.0,)
    simultaneous: tuple[SetupName, ...] = ()

    @classmethod
    def preset(cls, data: Mapping[str, Any]) -> Mapping[str, Any]:
        """What the named class of receiver fills."""
        return preset_values("receiver_class", data.get("receiver_class"), RECEIVERS)

    @field_validator("opacity", mode="before")
    @classmethod
    def _months(cls, value: Any) -> Any:
        return twelve(value, "zenith opacities") if isinstance(value, (list, tuple)) else value

    @model_validator(mode="after")
    def _longest(self) -> Receiver:
        if self.look_hours * self.mode_shares[-1] > 24.0:
            text = f"look_hours {self.look_hours:g} times {self.mode_shares[-1]:g} is more than 24 h"
            raise_faults("Receiver", [fault(("mode_shares",), text, self.mode_shares[-1])])
        return self

    def zenith_opacity(self, month: int) -> float:
        """Zenith opacity in a month (1 to 12)."""
        return of_month(self.opacity, month)

    @property
    def opacity_by_month(self) -> bool:
        """True when the months differ."""
        return isinstance(self.opacity, tuple) and len(set(self.opacity)) > 1


class Subarray(Record):
    """Some stations of an array, used by themselves as "array/band@name"."""

    stations: tuple[Name, ...] = Field(min_length=2)
    least_stations: int | None = Field(default=None, ge=2)


def _subarray(value: Any) -> Any:
    """A bare list names the stations."""
    return {"stations": value} if isinstance(value, (list, tuple)) else value


class ArraySite(FileRecord):
    """Antennas on many places that observe as one."""

    array: Name
    invented: bool = False
    stations: tuple[Station, ...] = Field(min_length=2)
    least_stations: int = Field(ge=2)
    receivers: dict[SetupName, Receiver] = Field(min_length=1)
    subarrays: dict[SetupName, Annotated[Subarray, BeforeValidator(_subarray)]] = Field(default_factory=dict)
    months: Months

    @model_validator(mode="after")
    def _whole(self) -> ArraySite:
        faults = []
        if self.least_stations > len(self.stations):
            text = f"got {self.least_stations}, above the {len(self.stations)} stations listed"
            faults.append(fault(("least_stations",), text, self.least_stations))
        for i, station in enumerate(self.stations):
            faults += [
                unknown(("stations", i, "sefd_jy", band), band, self.receivers, "receiver")
                for band in station.sefd_jy
                if band not in self.receivers
            ]
        for name, count in Counter(station.station for station in self.stations).items():
            if count > 1:
                faults.append(fault(("stations",), f"station {name!r} is listed {count} times", name))
        raise_faults("ArraySite", [*faults, *self._subarray_faults(), *self._band_faults()])
        return self

    def _subarray_faults(self) -> Iterator[InitErrorDetails]:
        known = [station.station for station in self.stations]
        for name, part in self.subarrays.items():
            here = ("subarrays", name, "stations")
            for i, station in enumerate(part.stations):
                if station not in known:
                    yield unknown((*here, i), station, known, "station")
                elif station in part.stations[:i]:
                    yield fault((*here, i), f"station {station!r} is listed twice in subarray {name!r}", station)
            if part.least_stations is not None and part.least_stations > len(part.stations):
                text = f"got {part.least_stations}, above the {len(part.stations)} stations of subarray {name!r}"
                yield fault(("subarrays", name, "least_stations"), text, part.least_stations)

    def _band_faults(self) -> Iterator[InitErrorDetails]:
        for name, receiver in self.receivers.items():
            for i, band in enumerate(receiver.simultaneous):
                here = ("receivers", name, "simultaneous", i)
                if band not in self.receivers:
                    yield unknown(here, band, self.receivers, "receiver")
                elif band == name or band in receiver.simultaneous[:i]:
                    yield fault(here, f"{band!r} is listed twice, or is this very receiver", band)

    def part(self, name: str) -> ArraySite:
        """The array as its subarray ``name`` sees it.

        Enough stations: its own ``least_stations``, else the array's, else (when it has fewer) all of its stations.
        """
        part = self.subarrays[name]
        stations = tuple(s for s in self.stations if s.station in part.stations)
        least = part.least_stations or min(self.least_stations, len(stations))
        return self.model_copy(update={"stations": stations, "least_stations": least})

    @property
    def name(self) -> str:
        """The array's name."""
        return self.array
