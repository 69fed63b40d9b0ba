"""Rows taken out of a Gaussian system, one at a time and draw by draw, compiled."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from ladderfit.kernels.compiling import compiled

FloatArray = npt.NDArray[np.float64]


@compiled
def leave_out(
    factor: FloatArray,
    white: FloatArray,
    rows: FloatArray,
    room: FloatArray,
    left: FloatArray,
    covariance: FloatArray,
) -> None:
    """What is left of each row's variance, and its covariance with the targets; fills the last two.

    A row of variance v whose fitted value has variance s^2 leaves v - s^2.  It is
    the one number that a rank-one downdate needs.

    Parameters
    ----------
    factor : array, shape (b, k, k)
        Lower Cholesky factor of the globals' precision.
    white : array, shape (b, t, k)
        The targets' combinations of globals, solved by the factor.
    rows : array, shape (b, n, k)
        The rows' combinations of globals, locals eliminated.
    room : array, shape (b, n)
        The rows' variances less what the locals alone take.
    left : array, shape (b, n)
    covariance : array, shape (b, n, t)
        Posterior covariance of each row's fitted value with each target.
    """
    batch, n, k = rows.shape
    targets = white.shape[1]
    solved = np.empty(k)
    for draw in range(batch):
        for row in range(n):
            taken = 0.0
            for i in range(k):
                value = rows[draw, row, i]
                for j in range(i):
                    value -= factor[draw, i, j] * solved[j]
                value /= factor[draw, i, i]
                solved[i] = value
                taken += value * value
            left[draw, row] = room[draw, row] - taken
            for target in range(targets):
                total = 0.0
                for i in range(k):
                    total += white[draw, target, i] * solved[i]
                covariance[draw, row, target] = total


def log_predictive(residual: FloatArray, variance: FloatArray, left: FloatArray) -> FloatArray:
    """Log density of each row given all the others, any shape.

    With e the residual from the fit to all rows, v the row's variance and
    l = v - s^2 what the fit leaves of it, the row is predicted by the others with
    residual e v / l and variance v^2 / l.
    """
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(
            -0.5
            * (math.log(2.0 * math.pi) + 2.0 * np.log(variance) - np.log(left) + residual**2 / left)
        )
