"""Products of columns under the inverse of a covariance whose diagonal changes from draw to draw.

With a diagonal that is not one number, no rotation leaves the covariance as it is: it
is factored in every draw, in n^3 / 3 steps.  Where it is a diagonal and a matrix of low
rank r, a draw takes about n (r + q)^2 steps instead (Woodbury; Golub & Van Loan 2013,
Matrix Computations, section 2.1.4).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np
import numpy.typing as npt
from scipy.linalg import lapack

from ladderfit.kernels.arrow import LOG_2PI

FloatArray = npt.NDArray[np.float64]

_LOW = 0.3  # rank over rows below which the second way pays
_NEGLIGIBLE = 1e-12  # of the smallest single variance: what a factor may leave out
_HUGE = 1e60  # keeps a border positive definite, whatever stands beside it


class Covariance(Protocol):
    """A covariance to whose diagonal something is added."""

    def products(self, extra: FloatArray, columns: FloatArray) -> tuple[FloatArray, float]:
        """Products of columns, shape (q, q), and -(log det + n log 2 pi) / 2; NaN where indefinite.

        Parameters
        ----------
        extra : array, shape (n,)
            Added to the diagonal.
        columns : array, shape (n, q)
        """


@dataclass(frozen=True, eq=False)
class FullCovariance:
    """A covariance without structure, shape (n, n)."""

    matrix: FloatArray

    def products(self, extra: FloatArray, columns: FloatArray) -> tuple[FloatArray, float]:
        """By one Cholesky factor."""
        n = len(extra)
        bordered, logs = _bordered(self.matrix, extra, columns)
        return bordered @ bordered.T, -logs - 0.5 * n * LOG_2PI


@dataclass(frozen=True, eq=False)
class LowRankCovariance:
    """Single variances, shape (n,), and a factor of what the rows share, shape (n, r).

    `whole` is the covariance itself, shape (n, n).
    """

    single: FloatArray
    factor: FloatArray
    whole: FloatArray

    def products(self, extra: FloatArray, columns: FloatArray) -> tuple[FloatArray, float]:
        """By a Cholesky factor of the size of the rank."""
        variance = self.single + extra
        if not np.all(variance > 0.0):
            return np.full((columns.shape[1],) * 2, np.nan), np.nan
        rank = self.factor.shape[1]
        both = np.hstack([self.factor, columns]) / np.sqrt(variance)[:, None]
        gram = both.T @ both
        bordered, logs = _bordered(gram[:rank, :rank], np.ones(rank), gram[:rank, rank:])
        constant = -logs - 0.5 * float(np.log(variance).sum() + len(variance) * LOG_2PI)
        return gram[rank:, rank:] - bordered @ bordered.T, constant


def covariance_of(matrix: FloatArray, single: FloatArray | None) -> Covariance:
    """Find out whether a covariance is single variances and a matrix of low rank.

    Parameters
    ----------
    matrix : array, shape (n, n)
    single : array, shape (n,), or None
        Variances that the rows do not share; None or zeros where that is not known.
    """
    if single is None or not np.all(single > 0.0):
        return FullCovariance(matrix)
    n = len(matrix)
    shared = matrix - np.diag(single)
    if np.min(np.diag(shared)) < -_NEGLIGIBLE * float(single.min()):
        return FullCovariance(matrix)
    found, pivots, rank, _ = lapack.dpstrf(shared, tol=_NEGLIGIBLE * float(single.min()), lower=1)
    if rank > _LOW * n:
        return FullCovariance(matrix)
    factor = np.zeros((n, rank))
    factor[pivots - 1] = np.tril(found)[:, :rank]
    left = np.abs(shared - factor @ factor.T).max() / float(single.min())
    return LowRankCovariance(single, factor, matrix) if left < 1e-10 else FullCovariance(matrix)


def _bordered(
    matrix: FloatArray, extra: FloatArray, columns: FloatArray
) -> tuple[FloatArray, float]:
    """Columns solved by the factor L of matrix + diag(extra), (L^-1 columns)^T, and log det L.

    Both come from one factor of the matrix bordered by the columns: the border's own
    corner is huge and is not looked at.  (That routine lets other threads run.)
    """
    n, q = columns.shape
    whole = np.empty((n + q, n + q))
    whole[:n, :n] = matrix
    whole[n:, :n] = columns.T
    whole[:n, n:] = columns
    whole[n:, n:] = 0.0
    diagonal = np.arange(n + q)
    whole[diagonal[:n], diagonal[:n]] += extra
    whole[diagonal[n:], diagonal[n:]] = _HUGE
    try:
        factor = np.linalg.cholesky(whole)
    except np.linalg.LinAlgError:
        return np.full((q, n), np.nan), np.nan
    return factor[n:, :n], float(np.log(np.diagonal(factor)[:n]).sum())
