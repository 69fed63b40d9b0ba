"""Rows whose inputs were measured with errors, true inputs integrated over a population.

A supernova's magnitude and its inputs (width, colour) are measured together,

    m = X g + a . x + c x_0^2 + e,    x_obs = x + f,    x ~ N(mean, P) ,

with (e, f) normal: variance s^2, covariance S of f, covariance k of e with f.  Given
x_obs, the pair (x, e) is normal, so that x integrates out in closed form (Kelly 2007,
ApJ 665, 1489; March et al. 2011, MNRAS 418, 2308).  With K = (P + S)^-1,

    x_obs ~ N(mean, P + S),    m | x_obs ~ N(X g + shift + lever . mean, s^2 + extra) .

That is exact for c = 0.  With a square, m given x_obs is not normal; its exact mean and
variance stand for it, and the population's mean has to be known.

`Style` WIDENED has no population: a S a goes into the variance, for comparing only.
"""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from ladderfit.kernels.compiling import compiled

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

LINEAR, CURVED, WIDENED = 0, 1, 2  # styles
LOG_2PI = math.log(2.0 * math.pi)


@compiled
def condition(
    style: int,
    a: FloatArray,
    c: FloatArray,
    spread: FloatArray,
    mean: FloatArray,
    group: IntArray,
    x: FloatArray,
    errors: FloatArray,
    with_peak: FloatArray,
    lever: FloatArray,
    shift: FloatArray,
    extra: FloatArray,
    sums: FloatArray,
    constant: FloatArray,
) -> None:
    """What the inputs say of the magnitudes, and the inputs' own density; fills the last five.

    Parameters
    ----------
    style : int
        LINEAR, CURVED or WIDENED.
    a : array, shape (b, p)
        Coefficients of the inputs; p is 1 or 2.
    c : array, shape (b,)
        Coefficient of the first input's square; used where CURVED or WIDENED.
    spread : array, shape (b, g, p, p)
        Covariance P of each population.
    mean : array, shape (b, g, p)
        Means of the populations; used where CURVED.
    group : array of int, shape (n,)
        Population of each row.
    x, errors, with_peak : array, shape (n, p), (n, p, p), (n, p)
        Measured inputs, S and k.
    lever, shift, extra : array, shape (b, n, p), (b, n), (b, n)
    sums : array, shape (b, g, p + 1, p + 1)
        Products of [mean, x_obs] under K, summed over rows; added to.
    constant : array, shape (b,)
        Log determinants of the inputs' density; added to.
    """
    batch, (n, p) = len(a), x.shape
    inverse, off, half = np.empty((p, p)), np.empty(p), np.empty(p)
    for draw in range(batch):
        for row in range(n):
            if style == WIDENED:
                _widen(
                    a[draw],
                    c[draw],
                    x[row],
                    errors[row],
                    with_peak[row],
                    half,
                    shift[draw, row:],
                    extra[draw, row:],
                )
                continue
            here = group[row]
            P = spread[draw, here]
            constant[draw] -= 0.5 * (_invert(P, errors[row], inverse) + p * LOG_2PI)
            _add_inputs(inverse, x[row], sums[draw, here])
            if style == LINEAR:
                _linear(
                    a[draw],
                    P,
                    inverse,
                    x[row],
                    with_peak[row],
                    half,
                    lever[draw, row],
                    shift[draw, row:],
                    extra[draw, row:],
                )
            else:
                _curved(
                    a[draw],
                    c[draw],
                    P,
                    inverse,
                    x[row],
                    mean[draw, here],
                    with_peak[row],
                    off,
                    half,
                    shift[draw, row:],
                    extra[draw, row:],
                )


@compiled
def _invert(P: FloatArray, S: FloatArray, inverse: FloatArray) -> float:
    """K = (P + S)^-1 for one or two inputs; the log determinant of P + S."""
    if len(P) == 1:
        size = P[0, 0] + S[0, 0]
        inverse[0, 0] = 1.0 / size
        return math.log(size)
    first, second, both = P[0, 0] + S[0, 0], P[1, 1] + S[1, 1], P[0, 1] + S[0, 1]
    size = first * second - both * both
    inverse[0, 0], inverse[1, 1] = second / size, first / size
    inverse[0, 1] = inverse[1, 0] = -both / size
    return math.log(size) if size > 0.0 else math.nan


@compiled
def _add_inputs(inverse: FloatArray, x: FloatArray, sums: FloatArray) -> None:
    p = len(x)
    for i in range(p):
        for j in range(p):
            part = inverse[i, j]
            sums[i, j] += part
            sums[i, p] += part * x[j]
            sums[p, i] += part * x[j]
            sums[p, p] += part * x[i] * x[j]


@compiled
def _linear(
    a: FloatArray,
    P: FloatArray,
    inverse: FloatArray,
    x: FloatArray,
    k: FloatArray,
    half: FloatArray,
    lever: FloatArray,
    shift: FloatArray,
    extra: FloatArray,
) -> None:
    """G = (a P + k) K: shift G x, lever a - G, extra a P a - G (P a + k)."""
    p = len(a)
    shift[0], extra[0] = 0.0, 0.0
    for i in range(p):
        half[i] = k[i]
        for j in range(p):
            half[i] += P[i, j] * a[j]
        extra[0] += a[i] * (half[i] - k[i])
    for i in range(p):
        gain = 0.0
        for j in range(p):
            gain += half[j] * inverse[j, i]
        lever[i] = a[i] - gain
        shift[0] += gain * x[i]
        extra[0] -= gain * half[i]


@compiled
def _curved(
    a: FloatArray,
    c: float,
    P: FloatArray,
    inverse: FloatArray,
    x: FloatArray,
    mean: FloatArray,
    k: FloatArray,
    off: FloatArray,
    slope: FloatArray,
    shift: FloatArray,
    extra: FloatArray,
) -> None:
    """Mean and variance of a . x + c x_0^2 + e given x_obs, about X g and s^2."""
    p = len(a)
    for i in range(p):  # K (x_obs - mean)
        off[i] = 0.0
        for j in range(p):
            off[i] += inverse[i, j] * (x[j] - mean[j])
        slope[i] = a[i]
    left = P[0, 0]  # variance of x_0
    first = mean[0]  # its mean
    for i in range(p):
        first += P[0, i] * off[i]
        for j in range(p):
            left -= P[0, i] * inverse[i, j] * P[j, 0]
    shift[0] = c * (first * first + left)
    slope[0] += 2.0 * c * first
    extra[0] = 2.0 * (c * left) ** 2
    for i in range(p):
        centre = mean[i]
        half_i = k[i]
        for j in range(p):
            centre += P[i, j] * off[j]
            half_i += P[i, j] * slope[j]
            extra[0] += slope[i] * P[i, j] * slope[j]
        shift[0] += a[i] * centre + k[i] * off[i]
        for j in range(p):
            half_j = k[j]
            for m in range(p):
                half_j += P[j, m] * slope[m]
            extra[0] -= half_i * inverse[i, j] * half_j


@compiled
def _widen(
    a: FloatArray,
    c: float,
    x: FloatArray,
    S: FloatArray,
    k: FloatArray,
    slope: FloatArray,
    shift: FloatArray,
    extra: FloatArray,
) -> None:
    """No population: measured inputs stand for true ones, their errors for more variance."""
    p = len(a)
    shift[0], extra[0] = c * x[0] * x[0], 0.0
    for i in range(p):
        slope[i] = a[i]
    slope[0] += 2.0 * c * x[0]
    for i in range(p):
        shift[0] += a[i] * x[i]
        extra[0] -= 2.0 * slope[i] * k[i]
        for j in range(p):
            extra[0] += slope[i] * S[i, j] * slope[j]


@compiled
def add_rows(
    host: IntArray,
    columns: FloatArray,
    places: IntArray,
    means: IntArray,
    variance: FloatArray,
    lever: FloatArray,
    shift: FloatArray,
    local: FloatArray,
    cross: FloatArray,
    square: FloatArray,
    constant: FloatArray,
) -> None:
    """Add independent rows to moments (the last four), in place.

    Parameters
    ----------
    host : array of int, shape (n,)
        -1 for a row without one.
    columns : array, shape (n, q)
        The columns that are not zero throughout, y last; those of `means` are filled in.
    places : array of int, shape (q,)
        Where each stands in the system; y last.
    means : array of int, shape (p,)
        Which of the q are the population's means; may be empty.
    variance, lever, shift : array, shape (b, n), (b, n, p), (b, n)
    """
    n, q = columns.shape
    row, sums = np.empty(q), np.empty((q, q))
    for draw in range(len(variance)):
        sums[:] = 0.0
        logs = 0.0
        for j in range(n):
            row[:] = columns[j]
            for i in range(len(means)):
                row[means[i]] = lever[draw, j, i]
            row[q - 1] -= shift[draw, j]
            weight = 1.0 / variance[draw, j]
            logs += math.log(variance[draw, j])
            inside = host[j]
            if inside >= 0:
                local[draw, inside] += weight
            for i in range(q):
                part = weight * row[i]
                if inside >= 0:
                    cross[draw, inside, places[i]] += part
                for m in range(i + 1):
                    sums[i, m] += part * row[m]
        constant[draw] -= 0.5 * (logs + n * LOG_2PI)
        for i in range(q):
            for m in range(i + 1):
                square[draw, places[i], places[m]] += sums[i, m]
                if m != i:
                    square[draw, places[m], places[i]] += sums[i, m]
