"""Least squares with and without weights, and iterative clipping as in older papers."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import NamedTuple

import numpy as np
import numpy.typing as npt
from scipy.linalg import solve_triangular

from ladderfit.errors import LadderfitError
from ladderfit.samples import BoolArray, FloatArray

_ROUNDS = 200


@dataclass(frozen=True)
class LeastSquares:
    """Estimates of k coefficients from n measurements.

    Attributes
    ----------
    values, errors : array, shape (k,)
        Estimates and standard errors.
    covariance : array, shape (k, k)
    residuals : array, shape (n,)
        Data minus model, in the data's unit.
    residual_sd : float
        sqrt(sum of squared residuals / (n - k)), without weights; NaN if n = k.
    sum_of_squares : float
        Of the residuals, each over its error where errors are given (chi squared).
    freedom : int
        n - k.
    """

    values: FloatArray
    covariance: FloatArray
    residuals: FloatArray
    residual_sd: float
    sum_of_squares: float
    freedom: int

    @property
    def errors(self) -> FloatArray:
        """Standard errors, shape (k,)."""
        return np.asarray(np.sqrt(np.diag(self.covariance)))


def ordinary_least_squares(design: npt.ArrayLike, y: npt.ArrayLike) -> LeastSquares:
    """Least squares without weights; errors from the scatter of the residuals.

    Parameters
    ----------
    design : array_like, shape (n, k)
        One column per coefficient, a column of ones for a constant.
    y : array_like, shape (n,)

    Raises
    ------
    ValueError
        If n < k, or the columns are not independent.
    """
    found = weighted_least_squares(design, y, 1.0)
    return replace(found, covariance=found.covariance * found.residual_sd**2)


def weighted_least_squares(
    design: npt.ArrayLike, y: npt.ArrayLike, error: npt.ArrayLike
) -> LeastSquares:
    """Least squares with known errors, shape (n,) or (), by the QR factors of scaled columns.

    The standard errors follow from the given errors alone, however large the
    residuals are.  See `ordinary_least_squares` for the other arguments.

    Raises
    ------
    ValueError
        If an error is not above zero, n < k, or the columns are not independent.
    """
    X, data = np.asarray(design, float), np.asarray(y, float)
    sigma = np.broadcast_to(np.asarray(error, float), data.shape)
    if not np.all(sigma > 0.0):
        raise ValueError("errors must be above zero")
    n, k = X.shape
    weighted = X / sigma[:, None]
    scale = np.linalg.norm(weighted, axis=0)
    if n < k or not np.all(scale > 0.0):
        raise ValueError("fewer rows than columns, or a column of zeros")
    Q, R = np.linalg.qr(weighted / scale)
    if np.min(np.abs(np.diag(R))) < 1e-13:
        raise ValueError("the columns are not independent")
    values = solve_triangular(R, Q.T @ (data / sigma)) / scale
    inverse = solve_triangular(R, np.eye(k)) / scale[:, None]
    residuals = data - X @ values
    freedom = n - k
    return LeastSquares(
        values=np.asarray(values),
        covariance=np.asarray(inverse @ inverse.T),
        residuals=residuals,
        residual_sd=float(np.sqrt(np.sum(residuals**2) / freedom)) if freedom else float("nan"),
        sum_of_squares=float(np.sum((residuals / sigma) ** 2)),
        freedom=freedom,
    )


def line_design(x: npt.ArrayLike) -> FloatArray:
    """Columns of a straight line, shape (n, 2): `x` for the slope, ones for the constant."""
    x = np.asarray(x, float)
    return np.stack([x, np.ones_like(x)], axis=1)


class Clipped(NamedTuple):
    """A fit to what a clip left: the fit itself, and which rows it kept, shape (n,)."""

    fit: LeastSquares
    kept: BoolArray


def clipped_least_squares(
    design: npt.ArrayLike, y: npt.ArrayLike, threshold: float = 3.0
) -> Clipped:
    """Iterative clipping, as in older papers.

    Fit, set aside every row further from the fit than `threshold` times the
    residual standard deviation of those kept, take back those that are nearer, and
    repeat until nothing changes.  The quoted scatter and errors are those of the
    clipped sample, hence too small even where there are no outliers.

    Raises
    ------
    LadderfitError
        If the clip does not settle, or leaves too few rows.
    ValueError
        As `ordinary_least_squares`.
    """
    X, data = np.asarray(design, float), np.asarray(y, float)
    kept = np.ones(len(data), bool)
    for _ in range(_ROUNDS):
        fit = ordinary_least_squares(X[kept], data[kept])
        near = np.abs(data - X @ fit.values) < threshold * fit.residual_sd
        if np.array_equal(near, kept):
            return Clipped(fit, kept)
        kept = near
        if kept.sum() <= X.shape[1]:
            raise LadderfitError("the clip leaves no more rows than there are coefficients")
    raise LadderfitError("the clip does not settle: rows come and go")
