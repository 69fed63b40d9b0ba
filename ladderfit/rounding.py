"""Numbers as a paper prints them: as many digits as the error deserves, and no more.

The rule is that of the Particle Data Group (Review of Particle Physics,
introduction, section on rounding).  An `Interval` is what a figure draws and
what stands beside it in words, so that the two cannot disagree.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from decimal import ROUND_HALF_EVEN, Context, Decimal

import numpy as np
import numpy.typing as npt

PROBABILITIES = (0.68, 0.95)  # of the bands and contours in figures
MINUS = "\N{MINUS SIGN}"
_SIX_DIGITS = 6
_CONTEXT = Context(prec=1000, rounding=ROUND_HALF_EVEN)  # enough for any double


def last_place(error: float) -> int:
    """Power of ten of the last digit worth printing beside an error.

    The three highest digits of the error decide: 100 to 354 keep two digits, 355 to
    949 keep one, 950 to 999 round up to 1000 and keep two.

    Parameters
    ----------
    error : float
        Standard error, finite and above zero.

    Returns
    -------
    int
        For example -2 for an error of 0.119, which is printed 0.12.

    Raises
    ------
    ValueError
        If the error is zero, negative or not finite.
    """
    if not (math.isfinite(error) and error > 0.0):
        raise ValueError(f"an error of {error!r} has no digits")
    exact = Decimal(repr(float(error)))
    power = exact.adjusted()
    three = int(exact.scaleb(2 - power))
    return power - 1 if three <= 354 else power


def to_place(value: float, place: int) -> str:
    """`value` rounded at a power of ten, in plain decimals with a real minus sign."""
    rounded_value = Decimal(repr(float(value))).quantize(Decimal(1).scaleb(place), context=_CONTEXT)
    if rounded_value == 0:
        rounded_value = abs(rounded_value)
    return f"{rounded_value:f}".replace("-", MINUS)


@dataclass(frozen=True)
class Rounded:
    """A value and its error as text, to the same decimal place."""

    value: str
    error: str

    def __str__(self) -> str:
        """For example ``0.83 ± 0.12``; the value alone where it has no error."""
        return f"{self.value} ± {self.error}" if self.error else self.value


def rounded(value: float, error: float) -> Rounded:
    """Round a value and its standard error by the rule of the Particle Data Group.

    Parameters
    ----------
    value, error : float
        In the same unit.  With an error of zero, or one that is not finite, the
        value is printed to six digits and stands alone.

    Returns
    -------
    Rounded

    Examples
    --------
    >>> print(rounded(0.827, 0.119))
    0.83 ± 0.12
    >>> print(rounded(0.827, 0.367))
    0.8 ± 0.4
    >>> print(rounded(73.2431, 0.966))
    73.2 ± 1.0
    """
    if not (math.isfinite(error) and error > 0.0 and math.isfinite(value)):
        return Rounded(f"{value:.{_SIX_DIGITS}g}".replace("-", MINUS), "")
    place = last_place(error)
    return Rounded(to_place(value, place), to_place(error, place))


@dataclass(frozen=True)
class RoundedArms:
    """A value and its two unequal errors as text, all to one decimal place."""

    value: str
    below: str
    above: str

    def __str__(self) -> str:
        """For example ``0.12 +0.05 −0.03``."""
        return f"{self.value} +{self.above} {MINUS}{self.below}"


def rounded_arms(value: float, below: float, above: float) -> RoundedArms | Rounded:
    """Round a value with unequal errors; the smaller error decides the place.

    Parameters
    ----------
    value, below, above : float
        The errors are lengths, in the value's unit.  Where one of them is zero or
        not finite, the value stands alone, as from `rounded`.

    Returns
    -------
    RoundedArms or Rounded

    Examples
    --------
    >>> print(rounded_arms(0.1234, 0.0311, 0.0528))
    0.123 +0.053 −0.031
    """
    if not (math.isfinite(value) and all(math.isfinite(a) and a > 0.0 for a in (below, above))):
        return rounded(value, 0.0)
    place = min(last_place(below), last_place(above))
    return RoundedArms(to_place(value, place), to_place(below, place), to_place(above, place))


@dataclass(frozen=True)
class Interval:
    """One parameter's posterior in a few numbers, in the parameter's unit.

    Attributes
    ----------
    mean, sd : float
        Mean and standard deviation of the draws.
    low, high : float
        Ends of the central interval that holds 68 % of the draws.
    """

    mean: float
    sd: float
    low: float
    high: float

    @classmethod
    def of(cls, draws: npt.ArrayLike) -> Interval:
        """From draws, shape (n,)."""
        values = np.asarray(draws, dtype=float)
        half = 0.5 * PROBABILITIES[0]
        low, high = np.quantile(values, [0.5 - half, 0.5 + half])
        sd = float(np.std(values, ddof=1)) if np.ptp(values) > 0.0 else 0.0
        return cls(float(np.mean(values)), sd, float(low), float(high))

    @property
    def arms(self) -> tuple[float, float]:
        """Lengths of an error bar below and above the mean, never negative."""
        return max(self.mean - self.low, 0.0), max(self.high - self.mean, 0.0)

    def __str__(self) -> str:
        """Mean and standard deviation, rounded."""
        return str(rounded(self.mean, self.sd))
