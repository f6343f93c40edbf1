"""Dust as a user writes it: a plane sheet, a shell, a foreground screen, or dust all around the source."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Annotated, Any, ClassVar, Literal

from pydantic import BeforeValidator, Field, ValidationError
from pydantic_core import InitErrorDetails

from planner.campaign.base import Record, assumed, raise_faults, unknown, unknown_error
from planner.campaign.laws import AnyLaw, PositiveLaw
from planner.errors import nearest

MixName = Literal["milky_way", "lmc"]
MIX_NAMES = ("milky_way", "lmc")
# Filters for which a mix has no scattering values, because that row of its table was not read.
UNREAD_FILTERS: Mapping[str, tuple[str, ...]] = {"milky_way": (), "lmc": ("B",)}


class OwnGrains(Record):
    """Scattering values of the user's own, the same in every filter."""

    albedo: float = Field(gt=0, le=1)
    g: float = Field(gt=-1, lt=1)


def _grains(value: Any) -> Any:
    if isinstance(value, Record):
        return value
    if isinstance(value, Mapping):
        return OwnGrains.model_validate(value)
    if not isinstance(value, str):
        names = ", ".join(MIX_NAMES)
        raise ValueError(f"got {value!r}, needs a name ({names}) or values such as {{albedo: 0.6, g: 0.55}}")
    if value not in MIX_NAMES:
        raise unknown_error(value, MIX_NAMES, "grains")
    return value


AnyGrains = Annotated[MixName | OwnGrains, BeforeValidator(_grains)]
_GRAINS = "average Milky Way dust, R_V = 3.1 (Draine 2003)"


class Tilt(Record):
    """Sheet tilt: two slopes (east, north) dz/dx; ``slope_sigma`` is the width of each about its mean."""

    slope_sigma: float = Field(gt=0, le=3)
    slope_east: float = 0.0
    slope_north: float = 0.0


class SheetDust(Record):
    """A plane dust sheet near the source; negative depths lie behind the source, depth 0 beside it."""

    shape: Literal["sheet"]
    depth_pc: AnyLaw
    tilt: Tilt = assumed(Tilt(slope_sigma=0.3), "sheets of unknown tilt: slope 0 ± 0.3 (17 deg), common practice")
    thickness_pc: float = assumed(0.5, "thin filament, common practice; no source", gt=0)
    grains: AnyGrains = assumed("milky_way", _GRAINS)
    drift: float = assumed(
        0.10,
        "depth changes by 10 % (1 sigma) per e-fold of delay: no sheet is exactly plane; our choice",
        ge=0,
    )


class ShellDust(Record):
    """A spherical shell around the source: its ring grows, stands still at the radius of the shell, and shrinks."""

    shape: Literal["shell"]
    radius_pc: PositiveLaw
    thickness_pc: float = assumed(0.1, "thin shell, common practice; no source", gt=0)
    grains: AnyGrains = assumed("milky_way", _GRAINS)
    drift: float = assumed(
        0.05,
        "shell radius changes by 5 % (1 sigma) per e-fold of delay: no shell is exactly round; our choice",
        ge=0,
    )


class ScreenDust(Record):
    """A cloud between observer and source, far from both; ``thickness_pc`` is along the line of sight."""

    shape: Literal["screen"]
    distance_pc: PositiveLaw
    source_at_infinity: bool = False
    thickness_pc: float = assumed(10.0, "a cloud 10 pc deep, common practice; no source", gt=0)
    grains: AnyGrains = assumed("milky_way", _GRAINS)
    drift: float = assumed(
        0.01,
        "dust distance changes by 1 % (1 sigma) per e-fold of delay: a cloud has no plane face; our choice",
        ge=0,
    )


class FilledDust(Record):
    """Dust all around the source: no ring in total light, but a ring of highest polarisation where light is
    scattered by 90 degrees. Only a setup with a polarimeter measures it."""

    shape: Literal["filled"]
    grains: AnyGrains = assumed("milky_way", _GRAINS)
    p_max: float = assumed(0.3, "polarised share of light scattered by 90 degrees; from memory", gt=0, le=1)
    peak_sigma_deg: float = assumed(
        3.0, "polarisation of real dust peaks within a few degrees of 90; from memory", gt=0, le=30
    )

    thickness_pc: ClassVar[None] = None


Dust = SheetDust | ShellDust | ScreenDust | FilledDust
SHAPES: Mapping[str, type[Record]] = {
    "sheet": SheetDust, "shell": ShellDust, "screen": ScreenDust, "filled": FilledDust,
}  # fmt: skip


def _dust(data: Any) -> Any:
    """Read dust as the one shape that it names, so that an error speaks of that shape only."""
    if isinstance(data, Record):
        return data
    if not isinstance(data, Mapping):
        return SheetDust.model_validate(data)  # says that a mapping is needed
    if "shape" not in data:
        keys = sorted({key for record in SHAPES.values() for key in record.permitted_keys()})
        close = [str(key) for key in data if key not in keys and nearest(str(key), keys) == "shape"]
        if close:
            raise_faults("dust", [unknown((close[0],), close[0], keys, "key", "unknown_key")])
        missing = InitErrorDetails(type="missing", loc=("shape",), input=data)
        raise ValidationError.from_exception_data("dust", [missing])
    name = data["shape"]
    if name not in SHAPES:
        raise_faults("dust", [unknown(("shape",), str(name), SHAPES, "shape")])
    return SHAPES[name].model_validate(data)


AnyDust = Annotated[Dust, BeforeValidator(_dust)]
