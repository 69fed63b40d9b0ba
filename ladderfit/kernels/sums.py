"""Sums over rows and sums from tables, added to moments draw by draw; compiled."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from ladderfit.kernels.compiling import compiled
from ladderfit.kernels.elimination import TOGETHER

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

LOG_2PI = math.log(2.0 * math.pi)


@compiled
def add_rows(
    local: FloatArray,
    cross: FloatArray,
    square: FloatArray,
    constant: FloatArray,
    host: IntArray,
    columns: FloatArray,
    products: FloatArray,
    variance: FloatArray,
    extra: FloatArray,
) -> None:
    """Add rows, `extra` (b,) on top of every variance, to moments; fills the first four.

    Moments are laid out as in `ladderfit.kernels.arrow.Moments`; `host` is -1 where
    a row has no local parameter, and `products`, shape (n, p), are those of the columns,
    upper triangle by rows.
    """
    n, width = columns.shape
    whole = np.empty(products.shape[1])
    for draw in range(len(extra)):
        logs, totals = 0.0, 1.0
        whole[:] = 0.0
        for row in range(n):
            total = variance[row] + extra[draw]
            weight = 1.0 / total
            totals *= total
            if row % TOGETHER == TOGETHER - 1 or row == n - 1:
                logs += math.log(totals)
                totals = 1.0
            for i in range(len(whole)):
                whole[i] += weight * products[row, i]
            if host[row] >= 0:
                local[draw, host[row]] += weight
                for i in range(width):
                    cross[draw, host[row], i] += weight * columns[row, i]
        _add_square(square[draw], whole)
        constant[draw] -= 0.5 * (logs + n * LOG_2PI)


@compiled
def _add_square(square: FloatArray, upper: FloatArray) -> None:
    """Add an upper triangle by rows to a symmetric matrix."""
    place = 0
    for i in range(len(square)):
        for j in range(i, len(square)):
            value = square[i, j] + upper[place]
            square[i, j] = square[j, i] = value
            place += 1


@compiled
def chebyshev(x: FloatArray, count: int) -> FloatArray:
    """Chebyshev polynomials 0 to count - 1 at x, shape (b, count)."""
    basis = np.empty((len(x), count))
    for draw in range(len(x)):
        twice = 2.0 * x[draw]
        basis[draw, 0], basis[draw, 1] = 1.0, x[draw]
        for order in range(2, count):
            basis[draw, order] = twice * basis[draw, order - 1] - basis[draw, order - 2]
    return basis


@compiled
def add_packed(
    local: FloatArray,
    cross: FloatArray,
    square: FloatArray,
    constant: FloatArray,
    hosts: IntArray,
    packed: FloatArray,
) -> None:
    """Add sums as `ladderfit.kernels.reduced.pack` lays them out; fills the first four."""
    width = square.shape[1]
    for draw in range(len(packed)):
        constant[draw] += packed[draw, 0]
        place = 1 + width * (width + 1) // 2
        _add_square(square[draw], packed[draw, 1:place])
        for host in hosts:
            local[draw, host] += packed[draw, place]
            place += 1
        for host in hosts:
            for j in range(width):
                cross[draw, host, j] += packed[draw, place]
                place += 1
