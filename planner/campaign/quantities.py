"""What a goal may ask to learn: one table of quantities, their units and what they belong to."""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Literal

from planner.units import LY_PC, YEAR_DAYS

Kind = Literal["ring", "arclet", "knot", "pair"]


@dataclass(frozen=True, slots=True)
class Tolerance:
    """One standard deviation that is wanted; ``unit`` is '%' (of the value, by its logarithm) or a unit."""

    value: float
    unit: str

    def __str__(self) -> str:
        return f"{self.value:g} {self.unit}".strip()


@dataclass(frozen=True, slots=True)
class Quantity:
    """A quantity that can be learned.

    ``unit`` is the one unit used inside ("" for a pure number); ``positive`` says that every possible value
    is above 0, so that percent means something; ``positive_with`` is the key path, inside the feature, of a
    prior that must be positive too for that. ``shapes``: the shapes of dust whose rings have it (none: all).
    """

    name: str
    features: tuple[Kind, ...]
    unit: str
    positive: bool
    words: str
    positive_with: tuple[str, ...] = ()
    shapes: tuple[str, ...] = ()


def _table(*rows: Quantity) -> dict[str, Quantity]:
    return {row.name: row for row in rows}


_SHEET = ("dust", "depth_pc")  # a sheet may lie behind the source: its depth is then below 0

QUANTITIES: Mapping[str, Quantity] = _table(
    Quantity("depth_over_distance2", ("ring",), "1/pc", True, "sheet depth over distance squared", _SHEET, ("sheet",)),
    Quantity("depth_pc", ("ring",), "pc", True, "sheet depth before the source", _SHEET, ("sheet",)),
    Quantity("distance_pc", ("ring", "arclet"), "pc", True, "distance of the source", (), ("sheet", "shell", "filled")),
    Quantity("slope_east", ("ring",), "", False, "slope of the sheet toward east", (), ("sheet",)),
    Quantity("slope_north", ("ring",), "", False, "slope of the sheet toward north", (), ("sheet",)),
    # A tilt is never below 0 but may be 0, where a fraction of it means nothing.
    Quantity("tilt_deg", ("ring",), "deg", False, "tilt of the sheet against the sky", (), ("sheet",)),
    Quantity("shell_radius_pc", ("ring",), "pc", True, "radius of the shell", (), ("shell",)),
    Quantity("dust_distance_pc", ("ring",), "pc", True, "distance of the dust from the observer", (), ("screen",)),
    Quantity("source_distance_pc", ("ring",), "pc", True, "distance of the source behind a screen", (), ("screen",)),
    Quantity("age_yr", ("arclet",), "yr", True, "age of the outburst when the arclet was seen"),
    Quantity("source_direction_deg", ("arclet",), "deg", False, "position angle of the source as seen from the arclet"),
    Quantity("apparent_speed_c", ("knot",), "c", True, "apparent speed in units of the speed of light"),
    Quantity("speed_mas_yr", ("knot",), "mas/yr", True, "angular speed"),
    Quantity("pa_deg", ("knot", "pair"), "deg", False, "position angle of the motion"),
    Quantity("core_crossing", ("knot",), "d", False, "date on which the knot crossed the core"),
    Quantity("min_lorentz_factor", ("knot",), "", True, "smallest Lorentz factor that allows the speed"),
    Quantity("largest_angle_deg", ("knot",), "deg", True, "largest angle to the line of sight that allows the speed"),
    Quantity("doppler_factor", ("knot",), "", True, "Doppler factor"),
    Quantity("lorentz_factor", ("knot",), "", True, "Lorentz factor"),
    Quantity("separation_mas", ("knot",), "mas", True, "mean separation of a stationary feature"),
    Quantity("period_days", ("knot",), "d", True, "observed period of the nozzle"),
    Quantity("half_angle_deg", ("knot",), "deg", True, "half angle of the nozzle's cone"),
    Quantity("inclination_deg", ("knot",), "deg", True, "angle between the nozzle's axis and the line of sight"),
    # Above 0 because the approaching knot is the faster one; ``PairMotion`` sees to that.
    Quantity("beta_cos", ("pair",), "", True, "true speed times cosine of the angle to the line of sight"),
    Quantity("approaching_mas_d", ("pair",), "mas/d", True, "angular speed of the approaching knot"),
    Quantity("receding_mas_d", ("pair",), "mas/d", True, "angular speed of the receding knot"),
    Quantity("ejection", ("knot", "pair"), "d", False, "date of the ejection"),
    Quantity("largest_distance_kpc", ("pair",), "kpc", True, "largest distance that the two speeds allow"),
    Quantity("angle_deg", ("knot", "pair"), "deg", True, "angle between motion and line of sight"),
    Quantity("beta", ("knot", "pair"), "", True, "true speed in units of the speed of light"),
)

# How many of the unit used inside one written unit is. Lengths by way of pc, rates by way of mas/yr.
_LENGTHS_PC = {"pc": 1.0, "kpc": 1e3, "Mpc": 1e6, "ly": LY_PC}
_ANGLES_DEG = {"deg": 1.0, "degree": 1.0, "degrees": 1.0, "arcmin": 1 / 60, "rad": 180 / math.pi}
_TIMES_D = {
    "d": 1.0,
    "day": 1.0,
    "days": 1.0,
    "h": 1 / 24,
    "hours": 1 / 24,
    "yr": YEAR_DAYS,
    "years": YEAR_DAYS,
}
_RATES_MAS_YR = {
    "mas/yr": 1.0, "uas/yr": 1e-3, "arcsec/yr": 1e3, "mas/d": YEAR_DAYS, "mas/day": YEAR_DAYS,
}  # fmt: skip
UNITS: Mapping[str, Mapping[str, float]] = {
    "": {"": 1.0},
    "c": {"c": 1.0},
    "d": _TIMES_D,
    "yr": {unit: size / YEAR_DAYS for unit, size in _TIMES_D.items()},
    "mas": {"mas": 1.0, "uas": 1e-3, "arcsec": 1e3},
    "deg": _ANGLES_DEG,
    "pc": _LENGTHS_PC,
    "kpc": {unit: size / 1e3 for unit, size in _LENGTHS_PC.items()},
    "1/pc": {f"1/{unit}": 1 / size for unit, size in _LENGTHS_PC.items()},
    "mas/yr": _RATES_MAS_YR,
    "mas/d": {unit: size / YEAR_DAYS for unit, size in _RATES_MAS_YR.items()},
}
_PERCENT = ("%", "percent", "pct")


def read_tolerance(data: Any) -> Tolerance:
    """Turn ``'2 %'``, ``'45 d'`` or a bare number into a tolerance (its unit is not looked at)."""
    if isinstance(data, Tolerance):
        return data
    text = str(data) if isinstance(data, (int, float)) and not isinstance(data, bool) else data
    number = r"(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?"
    found = isinstance(text, str) and re.fullmatch(rf"\s*({number})(?:\s*([%A-Za-z].*?)|\s+(\d?/\w+))?\s*", text)
    if not found or not 0 < float(found[1]) < math.inf:
        raise ValueError(f"got {data!r}; write one standard deviation above 0 with its unit, e.g. '2 %' or '45 d'")
    unit = (found[2] or found[3] or "").replace(" ", "")
    return Tolerance(float(found[1]), "%" if unit in _PERCENT else unit)


def in_unit_of(tolerance: Tolerance, quantity: Quantity) -> Tolerance:
    """Return the tolerance in percent or in the quantity's own unit.

    Raises ValueError for percent of a quantity that may be 0 or less, and for a unit of another kind.
    """
    sizes = UNITS[quantity.unit]
    own = f"'{tolerance.value:g} {quantity.unit}'".replace(" '", "'")
    if tolerance.unit == "%":
        if not quantity.positive:
            raise ValueError(
                f"got {str(tolerance)!r}, but {quantity.name} may be 0 or below, where percent means "
                "nothing; "
                f"write one standard deviation in {quantity.unit or 'plain numbers'}, e.g. {own}"
            )
        return tolerance
    if tolerance.unit not in sizes:
        allowed = ", ".join(u or "no unit" for u in sizes) + (", %" if quantity.positive else "")
        got = f"unit {tolerance.unit!r}" if tolerance.unit else "no unit"
        raise ValueError(f"got {got} in {str(tolerance)!r}; {quantity.name} takes one of: {allowed}; e.g. {own}")
    return Tolerance(tolerance.value * sizes[tolerance.unit], quantity.unit)
