"""Straight lines with errors in both coordinates, or with outliers."""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from ladderfit.classical.least_squares import (
    line_design,
    ordinary_least_squares,
    weighted_least_squares,
)
from ladderfit.errors import LadderfitError
from ladderfit.samples import BoolArray, FloatArray

_LOG_2PI = float(np.log(2.0 * np.pi))
_ROUNDS = 200
_MANY_ROUNDS = 20_000


@dataclass(frozen=True)
class Line:
    """y = intercept + slope x, with standard errors, and the weighted sum of squares."""

    slope: float
    intercept: float
    slope_error: float
    intercept_error: float
    sum_of_squares: float


def line_with_both_errors(
    x: npt.ArrayLike,
    y: npt.ArrayLike,
    x_error: npt.ArrayLike,
    y_error: npt.ArrayLike,
    correlation: npt.ArrayLike = 0.0,
) -> Line:
    """The best straight line with errors in both coordinates (York et al. 2004).

    American Journal of Physics 72, 367, its iteration and its standard errors,
    written in variances so that an error may be zero.  It minimises the squared
    distances along the line's normal over their variances, the likelihood of Hogg,
    Bovy & Lang (2010, arXiv 1008.4686, section 7).

    Parameters
    ----------
    x, y, x_error, y_error : array_like, shape (n,)
    correlation : array_like, shape (n,) or ()
        Correlation of the two errors of each point.

    Raises
    ------
    LadderfitError
        If the iteration does not converge.
    """
    points = _Points(
        np.asarray(x, float),
        np.asarray(y, float),
        np.asarray(x_error, float) ** 2,
        np.asarray(y_error, float) ** 2,
        np.asarray(correlation, float) * np.asarray(x_error, float) * np.asarray(y_error, float),
    )
    slope = float(ordinary_least_squares(line_design(points.x), points.y).values[0])
    for _ in range(_ROUNDS):
        weight, u, v, moved = points.seen_from(slope)
        before, slope = slope, float(np.sum(weight * moved * v) / np.sum(weight * moved * u))
        error = 1.0 / np.sqrt(np.sum(weight * u**2))
        if abs(slope - before) <= 1e-14 * abs(slope) + 1e-12 * error:
            return points.line(slope)
    raise LadderfitError("the line with errors in both coordinates does not converge")


class _Points(NamedTuple):
    """Points and their variances and covariances, shape (n,) each."""

    x: FloatArray
    y: FloatArray
    xx: FloatArray
    yy: FloatArray
    xy: FloatArray

    def weight(self, slope: float) -> FloatArray:
        """One over the variance of y - slope x."""
        return np.asarray(1.0 / (self.yy + slope**2 * self.xx - 2.0 * slope * self.xy))

    def seen_from(self, slope: float) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
        """Weights, both coordinates less their means, and where on the line each x belongs."""
        weight = self.weight(slope)
        u = self.x - np.average(self.x, weights=weight)
        v = self.y - np.average(self.y, weights=weight)
        moved = u * self.yy + slope * v * self.xx - (slope * u + v) * self.xy
        return weight, u, v, weight * moved

    def line(self, slope: float) -> Line:
        """The line of this slope through the weighted mean, errors at the adjusted points."""
        weight, _, _, moved = self.seen_from(slope)
        mean = np.average(self.x, weights=weight)
        intercept = float(np.average(self.y, weights=weight) - slope * mean)
        shift = np.average(moved, weights=weight)
        variance = 1.0 / np.sum(weight * (moved - shift) ** 2)
        return Line(
            slope,
            intercept,
            float(np.sqrt(variance)),
            float(np.sqrt(1.0 / np.sum(weight) + (mean + shift) ** 2 * variance)),
            float(np.sum(weight * (self.y - intercept - slope * self.x) ** 2)),
        )


@dataclass(frozen=True)
class LineWithOutliers:
    """The most likely line and population of outliers.

    Attributes
    ----------
    slope, intercept : float
    fraction : float
        Share of outliers.
    mean, variance : float
        Of the outliers' y, without their errors.
    log_likelihood : float
    """

    slope: float
    intercept: float
    fraction: float
    mean: float
    variance: float
    log_likelihood: float


def line_with_outliers(
    x: npt.ArrayLike, y: npt.ArrayLike, y_error: npt.ArrayLike
) -> LineWithOutliers:
    """The maximum likelihood of a line and a normal population of outliers.

    Each point follows the line with its error, or else a normal distribution of
    its own mean and variance, its error added (Hogg, Bovy & Lang 2010, arXiv
    1008.4686, equation 17).  Found by expectation maximisation, which can end in a
    local maximum: of several starts the best is kept.

    Parameters
    ----------
    x, y, y_error : array_like, shape (n,)

    Raises
    ------
    LadderfitError
        If no start settles.
    """
    x, y, error = np.asarray(x, float), np.asarray(y, float), np.asarray(y_error, float)
    rest = y - _median_slope(x, y) * x
    pull = np.abs(rest - np.median(rest)) / error
    ends = [_maximised(x, y, error, pull > np.quantile(pull, share)) for share in (0.5, 0.7, 0.9)]
    found = [end for end in ends if end is not None]
    if not found:
        raise LadderfitError("no maximum of the likelihood of line and outliers was found")
    return max(found, key=lambda end: end.log_likelihood)


def _median_slope(x: FloatArray, y: FloatArray) -> float:
    """Median of the slopes through all pairs of points (Theil 1950, Sen 1968)."""
    first, second = np.triu_indices(len(x), 1)
    apart = x[first] != x[second]
    first, second = first[apart], second[apart]
    return float(np.median((y[second] - y[first]) / (x[second] - x[first])))


def _maximised(
    x: FloatArray, y: FloatArray, error: FloatArray, outlying: BoolArray
) -> LineWithOutliers | None:
    """Expectation maximisation from a first guess of who is an outlier."""
    share = np.where(outlying, 0.9, 0.1)
    mean, variance = float(y.mean()), float(y.var())
    before = -np.inf
    for _ in range(_MANY_ROUNDS):
        fit = weighted_least_squares(line_design(x), y, error / np.sqrt(1.0 - share))
        given = variance + error**2
        true = (mean * error**2 + variance * y) / given
        mean = float(np.average(true, weights=share))
        spread = (true - mean) ** 2 + variance * error**2 / given
        variance = float(np.average(spread, weights=share))
        fraction = float(share.mean())
        inside = np.log1p(-fraction) + _log_normal(fit.residuals, error**2)
        outside = np.log(fraction) + _log_normal(y - mean, variance + error**2)
        total = np.logaddexp(inside, outside)
        share = np.clip(np.exp(outside - total), 1e-12, 1.0 - 1e-12)
        after = float(total.sum())
        if abs(after - before) <= 1e-14 * abs(after):
            slope, intercept = fit.values
            return LineWithOutliers(float(slope), float(intercept), fraction, mean, variance, after)
        before = after
    return None


def _log_normal(off: FloatArray, variance: FloatArray) -> FloatArray:
    return np.asarray(-0.5 * (off**2 / variance + np.log(variance) + _LOG_2PI))
