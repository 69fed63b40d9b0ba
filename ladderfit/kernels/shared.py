"""Rows that share errors host by host: a diagonal plus low-rank covariance, reduced.

A row of host h is y = u[h] + X g + sum_j s_j L_j a[h, j] + e, with loadings L and
amplitudes a that are standard normal.  Given the variances of e, the sums of weight
times products of [1, L, X, y] per host are enough: they are tabulated over the
scatter like other sums, and the amplitudes are eliminated in every draw at the
widths s_j, so that a draw costs the same for any number of stars.  With I + s G s
in place of G + 1/s^2 a width of zero is an ordinary value (Woodbury's identity).
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

from ladderfit.kernels.arrow import LOG_2PI, Moments, Rows, solve, upper_triangle
from ladderfit.kernels.reduced import SumTable, focus, interpolated, table_of

FloatArray = npt.NDArray[np.float64]

_FEWEST_ROWS = 64  # below this the exact sums are as cheap
_CHUNK = 4_000_000  # elements of a (draws, rows) array held at once


@dataclass(frozen=True, eq=False)
class SharedSums:
    """Sums over the rows of one scatter, as `ladderfit.kernels.reduced.SmoothSums`.

    Packed: the constant, the upper triangle of products of [X, y], and per host the
    products of [1, L] with [1, L, X, y].

    Attributes
    ----------
    rows : Rows
    loadings : array, shape (n, q)
        In the order of the rows.
    products : array, shape (n, (q + 1) (q + k + 2))
    squares : array, shape (n, (k + 1) (k + 2) / 2)
    """

    rows: Rows
    loadings: FloatArray
    products: FloatArray = field(repr=False)
    squares: FloatArray = field(repr=False)

    @property
    def size(self) -> int:
        """Number of rows."""
        return len(self.rows.variance)

    @property
    def shift(self) -> float:
        """The smallest measurement variance."""
        return float(self.rows.variance.min())

    def packed(self, extra: FloatArray) -> FloatArray:
        """Exact sums at the given extra variances, shape (b, p)."""
        size = max(1, _CHUNK // max(self.size, 1))
        parts = [self._packed(extra[at : at + size]) for at in range(0, len(extra), size)]
        return np.concatenate(parts)

    def _packed(self, extra: FloatArray) -> FloatArray:
        variance = self.rows.variance + extra[:, None]
        weight = 1.0 / variance
        constant = -0.5 * (np.log(variance).sum(axis=1) + self.size * LOG_2PI)
        by_host = [
            weight[:, start:stop] @ self.products[start:stop] for _, start, stop in self.rows.slices
        ]
        return np.concatenate([constant[:, None], weight @ self.squares, *by_host], axis=1)

    def unpacked(self, packed: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Constant, products of [X, y], and per host those of [1, L] with [1, L, X, y]."""
        width, q = self.rows.columns.shape[1], self.loadings.shape[1]
        upper = upper_triangle(width)
        after = 1 + len(upper[0])
        square = np.empty((len(packed), width, width))
        square[:, upper[0], upper[1]] = square[:, upper[1], upper[0]] = packed[:, 1:after]
        shape = (len(packed), len(self.rows.slices), q + 1, q + 1 + width)
        return packed[:, 0], square, packed[:, after:].reshape(shape)

    def log_density(self, packed: FloatArray) -> FloatArray:
        """Log density of the rows under unit priors."""
        constant, square, sums = self.unpacked(packed)
        unit = np.ones((len(packed), self.loadings.shape[1]))
        reduced = eliminated(constant, square, sums, unit)
        free = np.arange(square.shape[1] - 1)
        reduced.square[:, free, free] += 1.0
        return solve(reduced).log_evidence


def shared_sums(rows: Rows, loadings: FloatArray) -> SharedSums:
    """Prepare rows; `loadings`, shape (n, q), are in the order of the rows."""
    first = np.column_stack([np.ones(len(loadings)), loadings])
    whole = np.column_stack([first, rows.columns])
    products = first[:, :, None] * whole[:, None, :]
    upper = upper_triangle(rows.columns.shape[1])
    squares = rows.columns[:, upper[0]] * rows.columns[:, upper[1]]
    return SharedSums(rows, loadings, products.reshape(len(loadings), -1), squares)


def tables_of(sums: SharedSums, largest: float) -> list[SumTable]:
    """Tables of the sums for extra variances up to `largest`, if that pays."""
    return [] if sums.size < _FEWEST_ROWS else [table_of(sums, 0.0, largest)]


def eliminated(
    constant: FloatArray, square: FloatArray, sums: FloatArray, width: FloatArray
) -> Moments:
    """Moments of rows whose amplitudes are integrated out.

    Parameters
    ----------
    constant, square, sums : array
        As `SharedSums.unpacked` gives them.
    width : array, shape (b, q)
        Standard deviations s of the amplitudes.
    """
    q = width.shape[1]
    gram = sums[:, :, 1:, 1 : q + 1] * (width[:, None, :, None] * width[:, None, None, :])
    inner = np.eye(q) + gram
    # products of s L with [1, X, y]
    first = np.concatenate([sums[:, :, 1:, :1], sums[:, :, 1:, q + 1 :]], axis=3)
    first = first * width[:, None, :, None]
    removed = np.swapaxes(first, 2, 3) @ np.linalg.solve(inner, first)
    logs = np.linalg.slogdet(inner)[1].sum(axis=1)
    return Moments(
        sums[:, :, 0, 0] - removed[:, :, 0, 0],
        sums[:, :, 0, q + 1 :] - removed[:, :, 0, 1:],
        square - removed[:, :, 1:, 1:].sum(axis=1),
        constant - 0.5 * logs,
    )


@dataclass(eq=False)
class SharedRows:
    """Sums of one scatter with their tables, finer ones first."""

    sums: SharedSums
    tables: list[SumTable]

    def unpacked(self, extra: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """As `SharedSums.unpacked`, at extra variances of shape (b,)."""
        if not self.tables and len(extra) > 1 and np.all(extra == extra[0]):  # a fixed scatter
            packed = self.sums.packed(extra[:1])
            return self.sums.unpacked(np.repeat(packed, len(extra), axis=0))
        return self.sums.unpacked(interpolated(self.sums, self.tables, extra))

    def focus(self, low: float, high: float) -> None:
        """Have a short table for the range of extra variance where most draws will fall."""
        if self.tables:
            focus(self.sums, self.tables, low, high)
