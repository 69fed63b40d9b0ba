"""Prior families, and which of them keep a parameter Gaussian.

A prior is written in the ladder file as a one-entry table, for example
``{normal = [-3.3, 0.5]}``.  All families are proper.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]

_LOG_2PI = float(np.log(2.0 * np.pi))
_MAG_PER_EFOLD = 5.0 / float(np.log(10.0))


class Prior(ABC):
    """A proper prior on one number, in the unit of its parameter."""

    family: ClassVar[str]

    @abstractmethod
    def log_density(self, x: FloatArray) -> FloatArray:
        """Log of the normalised density at `x` (any shape)."""

    @abstractmethod
    def draw(self, rng: np.random.Generator, size: int) -> FloatArray:
        """Independent draws, shape (size,)."""

    @property
    @abstractmethod
    def centre(self) -> float:
        """A typical value, used as a starting point."""

    @property
    @abstractmethod
    def sd(self) -> float:
        """Standard deviation in the parameter's unit."""

    @property
    @abstractmethod
    def arguments(self) -> float | list[float]:
        """The numbers as the ladder file writes them."""

    @property
    def bounds(self) -> tuple[float, float]:
        """Support of the density."""
        return (-np.inf, np.inf)

    def written(self) -> dict[str, Any]:
        """The prior as a ladder file holds it."""
        return {self.family: self.arguments}

    def __str__(self) -> str:
        """As the summary prints it."""
        values = self.arguments if isinstance(self.arguments, list) else [self.arguments]
        return f"{self.family.replace('_', '-')}({', '.join(f'{v:g}' for v in values)})"


@dataclass(frozen=True)
class Normal(Prior):
    """Normal with mean and standard deviation."""

    mean: float
    deviation: float
    family: ClassVar[str] = "normal"

    def log_density(self, x: FloatArray) -> FloatArray:
        """Log of the normalised density."""
        z = (np.asarray(x, float) - self.mean) / self.deviation
        return np.asarray(-0.5 * z * z - np.log(self.deviation) - 0.5 * _LOG_2PI)

    def draw(self, rng: np.random.Generator, size: int) -> FloatArray:
        """Independent draws."""
        return rng.normal(self.mean, self.deviation, size)

    @property
    def centre(self) -> float:
        """The mean."""
        return self.mean

    @property
    def sd(self) -> float:
        """The standard deviation."""
        return self.deviation

    @property
    def arguments(self) -> list[float]:
        """Mean and standard deviation."""
        return [self.mean, self.deviation]


@dataclass(frozen=True)
class HalfNormal(Prior):
    """Normal of mean zero folded at zero, for scatters; `scale` is the sd before folding."""

    scale: float
    family: ClassVar[str] = "half_normal"

    def log_density(self, x: FloatArray) -> FloatArray:
        """Log of the normalised density; minus infinity below zero."""
        x = np.asarray(x, float)
        z = x / self.scale
        inside = -0.5 * z * z - np.log(self.scale) - 0.5 * _LOG_2PI + np.log(2.0)
        return np.where(x >= 0.0, inside, -np.inf)

    def draw(self, rng: np.random.Generator, size: int) -> FloatArray:
        """Independent draws."""
        return np.abs(rng.normal(0.0, self.scale, size))

    @property
    def centre(self) -> float:
        """A third of the scale."""
        return self.scale / 3.0

    @property
    def sd(self) -> float:
        """The scale times sqrt(1 - 2/pi)."""
        return self.scale * float(np.sqrt(1.0 - 2.0 / np.pi))

    @property
    def arguments(self) -> float:
        """The scale."""
        return self.scale

    @property
    def bounds(self) -> tuple[float, float]:
        """Zero and up."""
        return (0.0, np.inf)


@dataclass(frozen=True)
class LogNormal(Prior):
    """Normal in 5 log10 of the parameter: `deviation` is in magnitudes.

    For the Hubble constant this is a normal prior in 5 log10 H0, the quantity in
    which the ladder is linear; as a density in H0 it is log-normal, with a
    relative width of 0.46 times `deviation`.
    """

    median: float
    deviation: float
    family: ClassVar[str] = "log_normal"

    def in_magnitudes(self) -> Normal:
        """The same prior on 5 log10 of the parameter."""
        return Normal(5.0 * float(np.log10(self.median)), self.deviation)

    def log_density(self, x: FloatArray) -> FloatArray:
        """Log of the normalised density in the parameter itself."""
        x = np.asarray(x, float)
        safe = np.where(x > 0.0, x, 1.0)
        inside = self.in_magnitudes().log_density(5.0 * np.log10(safe))
        return np.where(x > 0.0, inside + np.log(_MAG_PER_EFOLD / safe), -np.inf)

    def draw(self, rng: np.random.Generator, size: int) -> FloatArray:
        """Independent draws."""
        return np.asarray(10.0 ** (0.2 * self.in_magnitudes().draw(rng, size)))

    @property
    def centre(self) -> float:
        """The median."""
        return self.median

    @property
    def sd(self) -> float:
        """Standard deviation in the parameter's own unit."""
        s = self.deviation / _MAG_PER_EFOLD
        return self.median * float(np.exp(0.5 * s * s) * np.sqrt(np.expm1(s * s)))

    @property
    def arguments(self) -> list[float]:
        """Median and width in magnitudes."""
        return [self.median, self.deviation]

    @property
    def bounds(self) -> tuple[float, float]:
        """Above zero."""
        return (0.0, np.inf)


@dataclass(frozen=True)
class Uniform(Prior):
    """Uniform between two bounds."""

    low: float
    high: float
    family: ClassVar[str] = "uniform"

    def log_density(self, x: FloatArray) -> FloatArray:
        """Log of the normalised density; minus infinity outside."""
        x = np.asarray(x, float)
        inside = (x >= self.low) & (x <= self.high)
        return np.where(inside, -np.log(self.high - self.low), -np.inf)

    def draw(self, rng: np.random.Generator, size: int) -> FloatArray:
        """Independent draws."""
        return rng.uniform(self.low, self.high, size)

    @property
    def centre(self) -> float:
        """The middle."""
        return 0.5 * (self.low + self.high)

    @property
    def sd(self) -> float:
        """The width over sqrt(12)."""
        return (self.high - self.low) / float(np.sqrt(12.0))

    @property
    def arguments(self) -> list[float]:
        """Lower and upper bound."""
        return [self.low, self.high]

    @property
    def bounds(self) -> tuple[float, float]:
        """The two bounds."""
        return (self.low, self.high)


@dataclass(frozen=True)
class Fixed(Prior):
    """A known value: the parameter is not fitted."""

    value: float
    family: ClassVar[str] = "fixed"

    def log_density(self, x: FloatArray) -> FloatArray:
        """Zero: a fixed value carries no density."""
        return np.zeros(np.shape(x))

    def draw(self, rng: np.random.Generator, size: int) -> FloatArray:
        """The value, repeated."""
        return np.full(size, self.value)

    @property
    def centre(self) -> float:
        """The value."""
        return self.value

    @property
    def sd(self) -> float:
        """Zero."""
        return 0.0

    @property
    def arguments(self) -> float:
        """The value."""
        return self.value


def _pair(family: Callable[[float, float], Prior], positive_second: bool) -> Callable[[Any], Prior]:
    def build(value: Any) -> Prior:
        first, second = (_number(v) for v in value)
        if positive_second and not second > 0.0:
            raise ValueError(f"a width of {second:g}")
        return family(first, second)

    return build


def _number(value: Any) -> float:
    if isinstance(value, bool) or not isinstance(value, int | float) or not np.isfinite(value):
        raise ValueError(f"{value!r}")
    return float(value)


def _half_normal(value: Any) -> Prior:
    scale = _number(value)
    if not scale > 0.0:
        raise ValueError(f"a width of {scale:g}")
    return HalfNormal(scale)


def _log_normal(value: Any) -> Prior:
    median, deviation = (_number(v) for v in value)
    if not (median > 0.0 and deviation > 0.0):
        raise ValueError(f"[{median:g}, {deviation:g}]")
    return LogNormal(median, deviation)


def _uniform(value: Any) -> Prior:
    low, high = (_number(v) for v in value)
    if not low < high:
        raise ValueError(f"[{low:g}, {high:g}]")
    return Uniform(low, high)


_READERS: dict[str, Callable[[Any], Prior]] = {
    "normal": _pair(Normal, positive_second=True),
    "half_normal": _half_normal,
    "log_normal": _log_normal,
    "uniform": _uniform,
    "fixed": lambda value: Fixed(_number(value)),
}

EXPECTED = (
    "a prior such as {normal = [mean, sd]}, {half_normal = sd}, "
    "{log_normal = [median, sd in mag]}, {uniform = [low, high]} or {fixed = value}"
)


def read_prior(value: Any) -> Prior:
    """Build a prior from its entry in a ladder file.

    Raises
    ------
    ValueError
        With what was found, if `value` is not a prior.
    """
    if isinstance(value, Prior):
        return value
    if not isinstance(value, Mapping) or len(value) != 1:
        raise ValueError(f"{value!r}")
    ((family, arguments),) = value.items()
    if family not in _READERS:
        raise ValueError(f"the family {family!r}")
    try:
        return _READERS[family](arguments)
    except (TypeError, ValueError) as error:
        raise ValueError(f"{family} = {arguments!r} ({error})") from None
