"""Sums of stars whose hosts have nuisances of their own, star by star; compiled.

A star of a host with modulus-like local u and nuisances n (a mean colour, a mean
metallicity, amplitudes of shared errors) gives a row

    y = u + X . g + s g_c + N . n + e ,

where N, s, y and the variance of e may differ from draw to draw, and g_c is one
coefficient of g.  Side rows are data that see one nuisance and perhaps g_c alone:

    d = n_j + t g_c + e .

The nuisances have normal priors and are eliminated host by host (block
elimination: Golub & Van Loan 2013, Matrix Computations, section 3.2).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ladderfit.kernels.arrow import LOG_2PI, Moments
from ladderfit.kernels.compiling import compiled, in_halves

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

_BATCHED = 8  # weights multiplied before one logarithm is taken


@dataclass(frozen=True, eq=False)
class SideRows:
    """Data on one nuisance: `datum` = nuisance + `slope` g_c + e.

    Attributes
    ----------
    nuisance : int
    slope : array, shape (n,), or None
    datum : array, shape (n,)
    weight : array, shape (b, n)
    """

    nuisance: int
    slope: FloatArray | None
    datum: FloatArray
    weight: FloatArray


@dataclass(frozen=True, eq=False)
class StarRows:
    """Rows of stars sorted by host, at given values of phi.

    Attributes
    ----------
    columns : array, shape (n, k)
        X; zero in the column of g_c.
    y, weight : array, shape (b, n)
    nuisances : array, shape (b, n, q)
    prior_mean : array, shape (runs, q)
        Of every host's nuisances.
    prior_precision : array, shape (q,)
    slope_column : int
        Column of g_c; -1 where there is none.
    slope : array, shape (b, n), or None
    sides : tuple of SideRows
    """

    columns: FloatArray
    y: FloatArray
    weight: FloatArray
    nuisances: FloatArray
    prior_mean: FloatArray
    prior_precision: FloatArray
    slope_column: int
    slope: FloatArray | None
    sides: tuple[SideRows, ...]


def add_stars(total: Moments, rows: StarRows, runs: IntArray, at: slice) -> None:
    """Add the sums of all stars to the moments of some draws, in place.

    Parameters
    ----------
    total : Moments
        Of all draws.
    rows : StarRows
        Of the draws `at`.
    runs : array of int, shape (runs, 3)
        Host, first star and one past the last.
    at : slice
    """
    batch, n = rows.y.shape
    sides = rows.sides
    count = len(sides)
    side_datum, side_slope = np.zeros((count, n)), np.zeros((count, n))
    side_weight = np.empty((count, batch, n))
    for place, side in enumerate(sides):
        side_datum[place], side_weight[place] = side.datum, side.weight
        if side.slope is not None:
            side_slope[place] = side.slope
    which = np.array([side.nuisance for side in sides], dtype=np.int64)
    sloped = rows.slope if rows.slope is not None else np.zeros((batch, 0))
    local, cross, square, constant = (
        part[at] for part in (total.local, total.cross, total.square, total.constant)
    )

    def part(start: int, stop: int) -> None:
        chosen = slice(start, stop)
        _star_sums(
            runs,
            np.ascontiguousarray(rows.columns),
            rows.y[chosen],
            rows.weight[chosen],
            rows.nuisances[chosen],
            rows.prior_mean,
            rows.prior_precision,
            rows.slope_column,
            sloped[chosen],
            which,
            side_slope,
            side_datum,
            side_weight[:, chosen],
            local[chosen],
            cross[chosen],
            square[chosen],
            constant[chosen],
        )

    width = rows.columns.shape[1] + rows.nuisances.shape[2] + 2
    in_halves(part, batch, work=batch * n * width * width)


@compiled
def _star_sums(
    runs: IntArray,
    columns: FloatArray,
    y: FloatArray,
    weight: FloatArray,
    nuisances: FloatArray,
    prior_mean: FloatArray,
    prior_precision: FloatArray,
    slope_column: int,
    sloped: FloatArray,
    which: IntArray,
    side_slope: FloatArray,
    side_datum: FloatArray,
    side_weight: FloatArray,
    local: FloatArray,
    cross: FloatArray,
    square: FloatArray,
    constant: FloatArray,
) -> None:
    k, q, sides = columns.shape[1], nuisances.shape[2], len(which)
    width = q + k + 2
    last, at_slope = width - 1, q + 1 + slope_column
    sums, row = np.empty((width, width)), np.empty(width)
    for draw in range(len(y)):
        logs, product, count = 0.0, 1.0, 0
        for run in range(len(runs)):
            host = runs[run, 0]
            sums[:] = 0.0
            for star in range(runs[run, 1], runs[run, 2]):
                w = weight[draw, star]
                for j in range(q):
                    row[j] = nuisances[draw, star, j]
                row[q] = 1.0
                for j in range(k):
                    row[q + 1 + j] = columns[star, j]
                if slope_column >= 0:
                    row[at_slope] = sloped[draw, star]
                row[last] = y[draw, star]
                _add_row(sums, row, w)
                product *= w
                for side in range(sides):
                    w = side_weight[side, draw, star]
                    t, datum = side_slope[side, star], side_datum[side, star]
                    _add_side(sums, which[side], at_slope, w, t, datum)
                    product *= w
                count += 1
                if count == _BATCHED:
                    logs += 0.5 * math.log(product)
                    product, count = 1.0, 0
            _add_prior(sums, prior_mean[run], prior_precision)
            logs += _eliminate_nuisances(sums, q)
            local[draw, host] += sums[q, q]
            for i in range(k + 1):
                cross[draw, host, i] += sums[q + 1 + i, q]
                for j in range(i + 1):
                    square[draw, i, j] += sums[q + 1 + i, q + 1 + j]
                    if j < i:
                        square[draw, j, i] += sums[q + 1 + i, q + 1 + j]
        logs += 0.5 * math.log(product)
        for j in range(q):
            logs += 0.5 * len(runs) * math.log(prior_precision[j])
        constant[draw] += logs - 0.5 * len(columns) * (1 + sides) * LOG_2PI


@compiled
def _add_row(sums: FloatArray, row: FloatArray, weight: float) -> None:
    for i in range(len(row)):
        part = weight * row[i]
        for j in range(i + 1):
            sums[i, j] += part * row[j]


@compiled
def _add_side(
    sums: FloatArray, place: int, at_slope: int, weight: float, slope: float, datum: float
) -> None:
    """A row that sees the nuisance `place` and, where its slope is not zero, g_c."""
    last = len(sums) - 1
    sums[place, place] += weight
    sums[last, place] += weight * datum
    sums[last, last] += weight * datum * datum
    if slope != 0.0:
        sums[at_slope, place] += weight * slope
        sums[at_slope, at_slope] += weight * slope * slope
        sums[last, at_slope] += weight * slope * datum


@compiled
def _add_prior(sums: FloatArray, mean: FloatArray, precision: FloatArray) -> None:
    """Normal priors of the nuisances, the first columns of the sums."""
    last = len(sums) - 1
    for j in range(len(mean)):
        sums[j, j] += precision[j]
        sums[last, j] += precision[j] * mean[j]
        sums[last, last] += precision[j] * mean[j] * mean[j]


@compiled
def _eliminate_nuisances(sums: FloatArray, count: int) -> float:
    """Schur complement of the first columns, lower triangle; the log of its normalisation."""
    width, logs = len(sums), 0.0
    for j in range(count):
        pivot = sums[j, j]
        logs -= 0.5 * math.log(pivot)
        for i in range(j + 1, width):
            part = sums[i, j] / pivot
            for other in range(j + 1, i + 1):
                sums[i, other] -= part * sums[other, j]
    return logs
