"""Prior laws: what is believed of one number before any epoch."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Annotated, Any, ClassVar

import numpy as np
from numpy.typing import ArrayLike, NDArray
from pydantic import (
    AfterValidator,
    BeforeValidator,
    ConfigDict,
    Field,
    ValidationError,
    WithJsonSchema,
    model_validator,
)

from planner.campaign.base import Record, fault, moved, raise_faults, unknown

Array = NDArray[np.float64]


class Law(Record):
    """One number's prior. In YAML: a bare number (fixed), or e.g. ``{normal: {mean: 3, sigma: 1}}``."""

    name: ClassVar[str] = ""

    def quantile(self, share: ArrayLike) -> Array:
        """Value at each cumulative ``share`` in (0, 1); same shape as ``share``."""
        raise NotImplementedError

    @property
    def support(self) -> tuple[float, float]:
        """Lowest and highest possible value."""
        raise NotImplementedError

    @property
    def positive(self) -> bool:
        """True when every possible value is above 0 (such a number is sampled by its logarithm)."""
        low, _ = self.support
        return low > 0.0 or isinstance(self, Lognormal)

    @property
    def fixed(self) -> bool:
        """True when the number is not uncertain."""
        return isinstance(self, Fixed)

    def widened(self, factor: float) -> Law:
        """Return the same law with its width multiplied by ``factor`` (above 0)."""
        raise NotImplementedError

    def median(self) -> float:
        """Value with equal chance to either side."""
        return float(self.quantile(0.5))

    def words(self) -> str:
        """One short phrase for people."""
        raise NotImplementedError


class Fixed(Law):
    """A number taken as known."""

    name: ClassVar[str] = "fixed"
    value: float

    def quantile(self, share: ArrayLike) -> Array:
        """Value at each cumulative ``share``; same shape."""
        return np.full(np.shape(share), self.value, dtype=float)

    @property
    def support(self) -> tuple[float, float]:
        """Lowest and highest possible value."""
        return self.value, self.value

    def widened(self, factor: float) -> Law:
        """Return the law with its width multiplied by ``factor``."""
        return self

    def words(self) -> str:
        """One short phrase for people."""
        return f"{self.value:g} (fixed)"


class Normal(Law):
    """Normal law."""

    name: ClassVar[str] = "normal"
    mean: float
    sigma: float = Field(gt=0)

    def quantile(self, share: ArrayLike) -> Array:
        """Value at each cumulative ``share``; same shape."""
        from scipy.special import ndtri

        return self.mean + self.sigma * ndtri(np.asarray(share, dtype=float))

    @property
    def support(self) -> tuple[float, float]:
        """Lowest and highest possible value."""
        return -math.inf, math.inf

    def median(self) -> float:
        """The mean itself, known without loading the normal law's inverse."""
        return self.mean

    def widened(self, factor: float) -> Law:
        """Return the law with its width multiplied by ``factor``."""
        return Normal(mean=self.mean, sigma=self.sigma * factor)

    def words(self) -> str:
        """One short phrase for people."""
        return f"{self.mean:g} ± {self.sigma:g}"


class Lognormal(Law):
    """Lognormal law; ``sigma_fraction`` is the standard deviation of the natural logarithm."""

    name: ClassVar[str] = "lognormal"
    # ``median`` in files; the attribute's name leaves the method ``median()`` to all laws alike.
    median_value: float = Field(alias="median", gt=0)
    sigma_fraction: float = Field(gt=0)
    model_config = ConfigDict(populate_by_name=True)

    def quantile(self, share: ArrayLike) -> Array:
        """Value at each cumulative ``share``; same shape."""
        from scipy.special import ndtri

        return self.median_value * np.exp(self.sigma_fraction * ndtri(np.asarray(share, dtype=float)))

    @property
    def support(self) -> tuple[float, float]:
        """Lowest and highest possible value."""
        return 0.0, math.inf

    def median(self) -> float:
        """The stated median itself."""
        return self.median_value

    def widened(self, factor: float) -> Law:
        """Return the law with its width multiplied by ``factor``."""
        return Lognormal(median_value=self.median_value, sigma_fraction=self.sigma_fraction * factor)

    def words(self) -> str:
        """One short phrase for people."""
        return f"{self.median_value:g} ± {100 * self.sigma_fraction:.3g} % (lognormal)"


class Uniform(Law):
    """Equal chance between two limits."""

    name: ClassVar[str] = "uniform"
    low: float
    high: float

    @model_validator(mode="after")
    def _order(self) -> Uniform:
        if not self.low < self.high:
            raise ValueError(f"low {self.low:g} must be below high {self.high:g}")
        return self

    def quantile(self, share: ArrayLike) -> Array:
        """Value at each cumulative ``share``; same shape."""
        return self.low + (self.high - self.low) * np.asarray(share, dtype=float)

    @property
    def support(self) -> tuple[float, float]:
        """Lowest and highest possible value."""
        return self.low, self.high

    def widened(self, factor: float) -> Law:
        """Widen about the middle; a law above 0 stays above 0 by widening its logarithm."""
        if self.low > 0:
            middle = math.sqrt(self.low * self.high)
            half = 0.5 * math.log(self.high / self.low) * factor
            return Uniform(low=middle * math.exp(-half), high=middle * math.exp(half))
        middle, half = 0.5 * (self.low + self.high), 0.5 * (self.high - self.low) * factor
        return Uniform(low=middle - half, high=middle + half)

    def words(self) -> str:
        """One short phrase for people."""
        return f"{self.low:g} to {self.high:g}"


class TruncatedNormal(Law):
    """Normal law cut off outside [low, high]."""

    name: ClassVar[str] = "truncated_normal"
    mean: float = Field(allow_inf_nan=False)
    sigma: float = Field(gt=0, allow_inf_nan=False)
    low: float = -math.inf
    high: float = math.inf
    model_config = ConfigDict(allow_inf_nan=True)

    @model_validator(mode="after")
    def _order(self) -> TruncatedNormal:
        if math.isnan(self.low) or math.isnan(self.high) or not self.low < self.high:
            raise ValueError(f"low {self.low:g} must be below high {self.high:g}")
        if self._mass() < 1e-9:
            raise ValueError("the limits leave nothing of the law: mean and sigma put all of it outside [low, high]")
        return self

    def _ends(self) -> tuple[float, float]:
        from scipy.special import ndtr

        a, b = (self.low - self.mean) / self.sigma, (self.high - self.mean) / self.sigma
        return float(ndtr(a)), float(ndtr(b))

    def _mass(self) -> float:
        a, b = self._ends()
        return b - a

    def quantile(self, share: ArrayLike) -> Array:
        """Value at each cumulative ``share``; same shape."""
        from scipy.special import ndtri

        a, b = self._ends()
        value = self.mean + self.sigma * ndtri(a + (b - a) * np.asarray(share, dtype=float))
        return np.clip(value, self.low, self.high)

    @property
    def support(self) -> tuple[float, float]:
        """Lowest and highest possible value."""
        return self.low, self.high

    def widened(self, factor: float) -> Law:
        """Return the law with its width multiplied by ``factor``."""
        return TruncatedNormal(mean=self.mean, sigma=self.sigma * factor, low=self.low, high=self.high)

    def words(self) -> str:
        """One short phrase for people."""
        return f"{self.mean:g} ± {self.sigma:g} within [{self.low:g}, {self.high:g}]"


LAWS: dict[str, type[Law]] = {law.name: law for law in (Fixed, Normal, Lognormal, Uniform, TruncatedNormal)}


def read_law(data: Any) -> Law:
    """Turn a YAML value into a law: a number is fixed; else a mapping with one key, the law's name."""
    if isinstance(data, Law):
        return data
    if isinstance(data, (int, float)) and not isinstance(data, bool):
        try:
            return Fixed(value=float(data))
        except ValidationError as error:
            raise_faults("Law", moved(error, (), drop=1))
    if not isinstance(data, Mapping) or len(data) != 1:
        shown = "nothing" if data is None else repr(data)
        raise ValueError(f"got {shown}; give a number, or one law of: {', '.join(LAWS)}")
    ((name, body),) = data.items()
    if name not in LAWS:
        raise_faults("Law", [unknown((), str(name), LAWS, "law")])
    if name == "fixed" and not isinstance(body, Mapping):
        body = {"value": body}
    return _read_body(name, body)


def _read_body(name: str, body: Any) -> Law:
    law = LAWS[name]
    if not isinstance(body, Mapping):
        needs = ", ".join(law.permitted_keys())
        raise_faults("Law", [fault((name,), f"got {body!r}, needs a mapping of: {needs}", body)])
    odd = [key for key in body if key not in law.permitted_keys()]
    raise_faults("Law", [unknown((name, k), str(k), law.permitted_keys(), "key", "unknown_key") for k in odd])
    try:
        return law.model_validate(body)
    except ValidationError as error:
        raise_faults("Law", moved(error, (name,)))
        raise


def _above_zero(law: Law) -> Law:
    if not law.positive:
        low, _ = law.support
        what = f"{law.median():g}" if law.fixed else f"a law that reaches {low:g}"
        raise ValueError(f"got {what}, needs a value above 0 (use lognormal, or truncated_normal with low above 0)")
    return law


def _schema() -> dict[str, Any]:
    """JSON Schema of what a user may write for a law."""
    one = [
        {
            "type": "object",
            "properties": {name: {"type": "object"}},
            "required": [name],
            "additionalProperties": False,
        }
        for name in LAWS
    ]
    return {"anyOf": [{"type": "number"}, *one], "description": "a number, or one prior law"}


AnyLaw = Annotated[Law, BeforeValidator(read_law), WithJsonSchema(_schema())]
PositiveLaw = Annotated[Law, BeforeValidator(read_law), AfterValidator(_above_zero), WithJsonSchema(_schema())]
