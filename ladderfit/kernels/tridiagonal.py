"""Symmetric matrices as rotations of tridiagonal ones (Golub & Van Loan 2013, section 8.3)."""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
import numpy.typing as npt
from scipy.linalg import eigvalsh_tridiagonal, lapack

FloatArray = npt.NDArray[np.float64]

_BLOCK = 64  # columns that LAPACK handles at once


@dataclass(frozen=True, eq=False)
class Tridiagonal:
    """A symmetric matrix as Q T Q' with T tridiagonal; build with `tridiagonal`.

    Attributes
    ----------
    matrix : array, shape (n, n)
        The matrix itself.
    diagonal, off : array, shapes (n,) and (n - 1,)
        Of T.
    reflectors, factors : array
        Q, as LAPACK keeps it.
    """

    matrix: FloatArray = field(repr=False)
    diagonal: FloatArray = field(repr=False)
    off: FloatArray = field(repr=False)
    reflectors: FloatArray = field(repr=False)
    factors: FloatArray = field(repr=False)

    def __len__(self) -> int:
        """Number of rows."""
        return len(self.diagonal)

    @cached_property
    def smallest(self) -> float:
        """The smallest eigenvalue."""
        if len(self) == 1:
            return float(self.diagonal[0])
        values = eigvalsh_tridiagonal(self.diagonal, self.off, select="i", select_range=(0, 0))
        return float(values[0])

    def rotated(self, columns: FloatArray) -> FloatArray:
        """Q' times columns, shape (n, q)."""
        out = np.array(columns, dtype=float, order="F")
        if len(self) > 1 and out.shape[1] > 0:
            below = np.asfortranarray(out[1:])
            room = _BLOCK * max(1, out.shape[1])
            result = lapack.dormqr("L", "T", self.reflectors, self.factors, below, lwork=room)
            out[1:] = result[0]
        return out


def tridiagonal(matrix: FloatArray) -> Tridiagonal:
    """Decompose a symmetric matrix, shape (n, n), in about 4/3 n^3 steps."""
    n = len(matrix)
    if n == 1:
        empty = np.empty(0)
        return Tridiagonal(matrix, matrix[0].copy(), empty, np.empty((0, 0)), empty)
    copy = np.array(matrix, dtype=float, order="F")
    packed, diagonal, off, factors, _ = lapack.dsytrd(
        copy, lower=1, lwork=_BLOCK * n, overwrite_a=1
    )
    return Tridiagonal(matrix, diagonal, off, np.asfortranarray(packed[1:, :-1]), factors)
