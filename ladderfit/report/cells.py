"""What a table of results holds: cells that know what they are, not how they are typeset."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ladderfit.rounding import Rounded, RoundedArms, rounded, rounded_arms

FloatArray = npt.NDArray[np.float64]

# The two arms of a symmetric posterior differ by Monte Carlo error alone.  For normal draws
# q84 + q16 - 2 q50 has a standard error of 2.26 sd / sqrt(n) (from the asymptotic covariance
# of quantiles); three of them, and a fifth of the mean arm, make arms worth telling apart.
_QUANTILE_ERROR = 2.26
_WORTH_TELLING = 0.2


@dataclass(frozen=True)
class Quoted:
    """A number as a paper quotes it.

    Attributes
    ----------
    value : float
        The mean; the median where the errors are asymmetric.
    below, above : float
        Standard deviation, or the distances from the median to the 16 and 84 % points.
    asymmetric : bool
    """

    value: float
    below: float
    above: float
    asymmetric: bool

    @property
    def text(self) -> Rounded | RoundedArms:
        """Rounded by the rule of the Particle Data Group."""
        if self.asymmetric:
            return rounded_arms(self.value, self.below, self.above)
        return rounded(self.value, self.above)

    def __str__(self) -> str:
        return str(self.text)


def quoted(draws: FloatArray, ess: float | None = None) -> Quoted:
    """How to quote a posterior: mean and sd, or median and arms where it is plainly skew.

    Parameters
    ----------
    draws : array, shape (n,)
    ess : float, optional
        Effective number of draws; by default all of them.
    """
    if np.ptp(draws) == 0.0:
        return Quoted(float(draws[0]), 0.0, 0.0, asymmetric=False)
    low, middle, high = (float(q) for q in np.quantile(draws, [0.16, 0.5, 0.84]))
    mean, sd = float(np.mean(draws)), float(np.std(draws, ddof=1))
    below, above = middle - low, high - middle
    count = len(draws) if ess is None or not math.isfinite(ess) else ess
    apart = abs(above - below)
    noise = 3.0 * _QUANTILE_ERROR * sd / math.sqrt(count)
    if apart > max(noise, _WORTH_TELLING * 0.5 * (above + below)):
        return Quoted(middle, below, above, asymmetric=True)
    return Quoted(mean, sd, sd, asymmetric=False)


@dataclass(frozen=True)
class Symbol:
    """A parameter's symbol, with its group, for typesetting."""

    name: str


@dataclass(frozen=True)
class Words:
    """Text that may be long and is to be broken into lines."""

    text: str


@dataclass(frozen=True)
class Unit:
    """A unit in FITS style, such as ``km/s/Mpc``."""

    text: str


@dataclass(frozen=True)
class Scientific:
    """A number with three digits and a power of ten where it is not near one."""

    value: float


Cell = str | Quoted | Symbol | Words | Unit | Scientific


@dataclass(frozen=True)
class Column:
    """One column for machines: full precision, one type.

    Attributes
    ----------
    name : str
        An identifier.
    values : array, shape (rows,)
        Numbers, text or booleans.
    unit : str
        FITS style; empty where there is none, or each row has its own.
    words : str
        What it holds.
    """

    name: str
    values: npt.NDArray[np.generic]
    unit: str = ""
    words: str = ""


@dataclass(frozen=True)
class PaperTable:
    """One table, for machines and for print.

    Attributes
    ----------
    name : str
        Stem of its files.
    title : str
        A caption, without a full stop.
    columns : tuple of Column
        For machines.
    head : tuple of Cell
        For print; empty for a table that is not printed.
    rows : tuple of tuple of Cell
    notes : tuple of str
        Below the table.
    cut : bool
        Whether printed columns, but for the first, are cut into panels that fit a line.
    """

    name: str
    title: str
    columns: tuple[Column, ...]
    head: tuple[Cell, ...] = ()
    rows: tuple[tuple[Cell, ...], ...] = ()
    notes: tuple[str, ...] = ()
    cut: bool = False

    def __len__(self) -> int:
        """Number of rows for machines."""
        return len(self.columns[0].values) if self.columns else 0


def text_column(name: str, values: list[str], words: str = "") -> Column:
    """A column of text."""
    return Column(name, np.array(values, dtype=np.str_), "", words)


def number_column(name: str, values: npt.ArrayLike, unit: str = "", words: str = "") -> Column:
    """A column of numbers."""
    return Column(name, np.asarray(values, dtype=np.float64), unit, words)
