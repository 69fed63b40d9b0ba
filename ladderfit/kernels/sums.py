"""Sums over rows and sums from tables, added to moments draw by draw; compiled."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from ladderfit.kernels.compiling import compiled

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
    variance: FloatArray,
    extra: FloatArray,
) -> None:
    """Add rows, `extra` (b,) on top of every variance, to moments; fills the first four.

    Moments are laid out as in `ladderfit.kernels.arrow.Moments`; `host` is -1 where
    a row has no local parameter.
    """
    n, width = columns.shape
    for draw in range(len(extra)):
        logs = 0.0
        for row in range(n):
            total = variance[row] + extra[draw]
            weight = 1.0 / total
            logs += math.log(total)
            if host[row] >= 0:
                local[draw, host[row]] += weight
                for j in range(width):
                    cross[draw, host[row], j] += weight * columns[row, j]
            for i in range(width):
                part = weight * columns[row, i]
                for j in range(i + 1):
                    square[draw, i, j] += part * columns[row, j]
        for i in range(width):
            for j in range(i):
                square[draw, j, i] = square[draw, i, j]
        constant[draw] -= 0.5 * (logs + n * LOG_2PI)


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
        place = 1
        for i in range(width):
            for j in range(i, width):
                value = square[draw, i, j] + packed[draw, place]
                square[draw, i, j] = square[draw, j, i] = value
                place += 1
        for host in hosts:
            local[draw, host] += packed[draw, place]
            place += 1
        for host in hosts:
            for j in range(width):
                cross[draw, host, j] += packed[draw, place]
                place += 1
