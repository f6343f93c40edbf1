"""Prior laws: what is believed of one number before any epoch."""

from __future__ import annotations

import math
from typing import Annotated, Any, ClassVar

import numpy as np
from numpy.typing import ArrayLike, NDArray
from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, model_validator

Array = NDArray[np.float64]


class Law(BaseModel):
    """One number's prior. In YAML: a bare number (fixed) or one key, e.g. ``{normal: {mean: 3, sigma: 1}}``."""

    model_config = ConfigDict(frozen=True, extra="forbid", allow_inf_nan=False)
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
        return np.full(np.shape(share), self.value, dtype=float)

    @property
    def support(self) -> tuple[float, float]:
        return self.value, self.value

    def widened(self, factor: float) -> Law:
        return self

    def words(self) -> str:
        return f"{self.value:g} (fixed)"


class Normal(Law):
    """Normal law."""

    name: ClassVar[str] = "normal"
    mean: float
    sigma: float

    @model_validator(mode="after")
    def _check(self) -> Normal:
        if self.sigma <= 0:
            raise ValueError(f"sigma: got {self.sigma:g}, needs a value above 0; use a bare number if it is known")
        return self

    def quantile(self, share: ArrayLike) -> Array:
        from scipy.special import ndtri

        return self.mean + self.sigma * ndtri(np.asarray(share, dtype=float))

    @property
    def support(self) -> tuple[float, float]:
        return -math.inf, math.inf

    def widened(self, factor: float) -> Law:
        return Normal(mean=self.mean, sigma=self.sigma * factor)

    def words(self) -> str:
        return f"{self.mean:g} ± {self.sigma:g}"


class Lognormal(Law):
    """Lognormal law; ``sigma_fraction`` is the standard deviation of the natural logarithm."""

    name: ClassVar[str] = "lognormal"
    median_value: float
    sigma_fraction: float

    @model_validator(mode="before")
    @classmethod
    def _rename(cls, data: Any) -> Any:
        if isinstance(data, dict) and "median" in data:
            data = {("median_value" if k == "median" else k): v for k, v in data.items()}
        return data

    @model_validator(mode="after")
    def _check(self) -> Lognormal:
        if self.median_value <= 0:
            raise ValueError(f"median: got {self.median_value:g}, needs a value above 0")
        if self.sigma_fraction <= 0:
            raise ValueError(f"sigma_fraction: got {self.sigma_fraction:g}, needs a value above 0")
        return self

    def quantile(self, share: ArrayLike) -> Array:
        from scipy.special import ndtri

        return self.median_value * np.exp(self.sigma_fraction * ndtri(np.asarray(share, dtype=float)))

    @property
    def support(self) -> tuple[float, float]:
        return 0.0, math.inf

    def widened(self, factor: float) -> Law:
        return Lognormal(median_value=self.median_value, sigma_fraction=self.sigma_fraction * factor)

    def words(self) -> str:
        return f"{self.median_value:g} ± {100 * self.sigma_fraction:.3g} % (lognormal)"


class Uniform(Law):
    """Equal chance between two limits."""

    name: ClassVar[str] = "uniform"
    low: float
    high: float

    @model_validator(mode="after")
    def _check(self) -> Uniform:
        if not self.low < self.high:
            raise ValueError(f"low {self.low:g} must be below high {self.high:g}")
        return self

    def quantile(self, share: ArrayLike) -> Array:
        return self.low + (self.high - self.low) * np.asarray(share, dtype=float)

    @property
    def support(self) -> tuple[float, float]:
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
        return f"{self.low:g} to {self.high:g}"


class TruncatedNormal(Law):
    """Normal law cut off outside [low, high]."""

    name: ClassVar[str] = "truncated_normal"
    mean: float
    sigma: float
    low: float = -math.inf
    high: float = math.inf
    model_config = ConfigDict(frozen=True, extra="forbid", allow_inf_nan=True)

    @model_validator(mode="after")
    def _check(self) -> TruncatedNormal:
        if not (math.isfinite(self.mean) and math.isfinite(self.sigma)):
            raise ValueError("mean and sigma must be finite")
        if math.isnan(self.low) or math.isnan(self.high) or not self.low < self.high:
            raise ValueError(f"low {self.low:g} must be below high {self.high:g}")
        if self.sigma <= 0:
            raise ValueError(f"sigma: got {self.sigma:g}, needs a value above 0")
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
        from scipy.special import ndtri

        a, b = self._ends()
        value = self.mean + self.sigma * ndtri(a + (b - a) * np.asarray(share, dtype=float))
        return np.clip(value, self.low, self.high)

    @property
    def support(self) -> tuple[float, float]:
        return self.low, self.high

    def widened(self, factor: float) -> Law:
        return TruncatedNormal(mean=self.mean, sigma=self.sigma * factor, low=self.low, high=self.high)

    def words(self) -> str:
        return f"{self.mean:g} ± {self.sigma:g} within [{self.low:g}, {self.high:g}]"


LAWS: dict[str, type[Law]] = {law.name: law for law in (Fixed, Normal, Lognormal, Uniform, TruncatedNormal)}


def read_law(data: Any) -> Law:
    """Turn a YAML value into a law: a number is fixed; else a mapping with one key, the law's name."""
    if isinstance(data, Law):
        return data
    if isinstance(data, bool) or data is None or isinstance(data, str):
        raise ValueError(f"got {data!r}; give a number, or one law of: {', '.join(LAWS)}")
    if isinstance(data, (int, float)):
        return Fixed(value=float(data))
    if isinstance(data, dict) and len(data) == 1:
        (name, body), *_ = data.items()
        if name in LAWS:
            if name == "fixed" and isinstance(body, (int, float)):
                body = {"value": body}
            return LAWS[name].model_validate(body)
        from planner.errors import nearest

        near = nearest(str(name), LAWS)
        hint = f"; did you mean {near!r}?" if near else ""
        raise ValueError(f"unknown law {name!r}{hint} (allowed: a number, {', '.join(LAWS)})")
    raise ValueError(f"got {data!r}; give a number, or one law of: {', '.join(LAWS)}")


def _above_zero(law: Law) -> Law:
    if not law.positive:
        low, _ = law.support
        what = f"{law.median():g}" if law.fixed else f"a law that reaches {low:g}"
        raise ValueError(f"got {what}, needs a value above 0 (use lognormal, or truncated_normal with low above 0)")
    return law


AnyLaw = Annotated[Law, BeforeValidator(read_law)]
PositiveLaw = Annotated[Law, BeforeValidator(read_law), AfterValidator(_above_zero)]
