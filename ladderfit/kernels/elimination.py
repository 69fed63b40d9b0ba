"""Elimination of locals and globals from weighted products, compiled."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from ladderfit.kernels.compiling import compiled

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

LOG_2PI = math.log(2.0 * math.pi)
TOGETHER = 4  # weights of which one logarithm is taken: a product of four stays finite


@compiled
def eliminate(
    local: FloatArray,
    cross: FloatArray,
    square: FloatArray,
    constant: FloatArray,
    coupling: FloatArray,
    coupled: IntArray,
    alone: IntArray,
    known: IntArray,
    values: FloatArray,
    free: IntArray,
    log_evidence: FloatArray,
    mean: FloatArray,
    factor: FloatArray,
) -> None:
    """Eliminate all locals, then the free globals, draw by draw; fills the last three arguments.

    Arguments are those of `ladderfit.kernels.arrow.solve`; hosts are `alone` or `coupled`.
    """
    batch, hosts = local.shape
    k, m = len(free), len(coupled)
    work = np.empty((k + 1, k + 1))
    column = np.empty(k + 1)
    dense = np.empty((m, m + k + 1))
    for draw in range(batch):
        _move_known(square[draw], known, values[draw], free, work)
        logs, weights = 0.0, 1.0
        for place in range(len(alone)):
            host = alone[place]
            weight = local[draw, host]
            weights *= weight
            if place % TOGETHER == TOGETHER - 1 or place == len(alone) - 1:
                logs += math.log(weights)
                weights = 1.0
            _free_columns(cross[draw, host], known, values[draw], free, column)
            inverse = 1.0 / weight
            for i in range(k + 1):
                part = column[i] * inverse
                for j in range(i + 1):
                    work[i, j] -= part * column[j]
        if m > 0:
            for i in range(m):
                dense[i, :m] = coupling[draw, i]
                dense[i, i] += local[draw, coupled[i]]
                _free_columns(cross[draw, coupled[i]], known, values[draw], free, dense[i, m:])
            logs += eliminate_coupled(dense, m, work)
        log_pivots = _cholesky(work, k)
        log_evidence[draw] = (
            constant[draw]
            - 0.5 * work[k, k]
            - 0.5 * logs
            - log_pivots
            + 0.5 * (k + hosts) * LOG_2PI
        )
        if math.isnan(log_evidence[draw]):
            log_evidence[draw] = -math.inf
        for i in range(k - 1, -1, -1):
            value = work[k, i]
            for j in range(i + 1, k):
                value -= work[j, i] * mean[draw, j]
            mean[draw, i] = value / work[i, i]
            factor[draw, i, : i + 1] = work[i, : i + 1]


@compiled
def _free_columns(
    here: FloatArray, known: IntArray, values: FloatArray, free: IntArray, column: FloatArray
) -> None:
    """One local's products with [free columns, y less the known part]."""
    k = len(free)
    data = here[len(here) - 1]
    for j in range(len(known)):
        data -= here[known[j]] * values[j]
    for i in range(k):
        column[i] = here[free[i]]
    column[k] = data


@compiled
def eliminate_coupled(dense: FloatArray, m: int, work: FloatArray) -> float:
    """Eliminate m locals, rows [precision, products with the rest]; the log determinant.

    Row by row, upper triangle, so that the inner loops run along memory.
    """
    width, k = dense.shape[1], work.shape[0]
    logs = 0.0
    for p in range(m):
        pivot = dense[p, p]
        logs += math.log(pivot) if pivot > 0.0 else math.nan
        for i in range(p + 1, m):
            part = dense[p, i] / pivot
            for j in range(i, width):
                dense[i, j] -= part * dense[p, j]
        for i in range(k):
            part = dense[p, m + i] / pivot
            for j in range(i + 1):
                work[i, j] -= part * dense[p, m + j]
    return logs


@compiled
def draw_each(
    factor: FloatArray,
    cross: FloatArray,
    local: FloatArray,
    free: IntArray,
    white: FloatArray,
    globals_: FloatArray,
    locals_: FloatArray,
) -> None:
    """Draws of the free globals, added to their means in `globals_`, and of every local.

    `factor` (b, f, f) is the lower Cholesky factor of the globals' precision, `white`
    (b, f + h) is standard normal; fills `globals_` (b, k) and `locals_` (b, h).
    """
    k, hosts = len(free), local.shape[1]
    last = cross.shape[2] - 1
    off = np.empty(k)
    for draw in range(len(local)):
        for i in range(k - 1, -1, -1):
            value = white[draw, i]
            for j in range(i + 1, k):
                value -= factor[draw, j, i] * off[j]
            off[i] = value / factor[draw, i, i]
            globals_[draw, free[i]] += off[i]
        for host in range(hosts):
            linear, weight = cross[draw, host, last], local[draw, host]
            for i in range(last):
                linear -= cross[draw, host, i] * globals_[draw, i]
            locals_[draw, host] = linear / weight + white[draw, k + host] / math.sqrt(weight)


@compiled
def draw_coupled(precision: FloatArray, linear: FloatArray, noise: FloatArray) -> None:
    """Replace `linear` (b, m) by draws; `precision` (b, m, m) is overwritten."""
    batch, m = linear.shape
    for draw in range(batch):
        upper, x, white = precision[draw], linear[draw], noise[draw]
        for p in range(m):
            root = math.sqrt(upper[p, p])
            for j in range(p, m):
                upper[p, j] /= root
            x[p] /= root
            for i in range(p + 1, m):
                part = upper[p, i]
                x[i] -= part * x[p]
                for j in range(i, m):
                    upper[i, j] -= part * upper[p, j]
        for p in range(m - 1, -1, -1):
            value = x[p] + white[p]
            for j in range(p + 1, m):
                value -= upper[p, j] * x[j]
            x[p] = value / upper[p, p]


@compiled
def _move_known(
    square: FloatArray, known: IntArray, values: FloatArray, free: IntArray, work: FloatArray
) -> None:
    """Lower triangle of the products of [free columns, y less the known part]."""
    k, y = len(free), square.shape[0] - 1
    for i in range(k):
        for j in range(i + 1):
            work[i, j] = square[free[i], free[j]]
        linear = square[free[i], y]
        for j in range(len(known)):
            linear -= square[free[i], known[j]] * values[j]
        work[k, i] = linear
    total = square[y, y]
    for i in range(len(known)):
        total -= 2.0 * square[known[i], y] * values[i]
        for j in range(len(known)):
            total += values[i] * square[known[i], known[j]] * values[j]
    work[k, k] = total


@compiled
def _cholesky(work: FloatArray, k: int) -> float:
    """Factor the leading k by k part in place; the last row becomes L^-1 b and chi squared."""
    log_pivots = 0.0
    for i in range(k + 1):
        for j in range(min(i + 1, k)):
            value = work[i, j]
            for m in range(j):
                value -= work[i, m] * work[j, m]
            if i == j:
                work[i, i] = math.sqrt(value) if value > 0.0 else math.nan
                log_pivots += math.log(work[i, i])
            else:
                work[i, j] = value / work[j, j]
    for m in range(k):
        work[k, k] -= work[k, m] * work[k, m]
    return log_pivots
