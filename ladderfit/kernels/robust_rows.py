"""Rows whose deviations are a mixture or a Student-t, prepared for one draw; compiled."""

from __future__ import annotations

import math
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from ladderfit.kernels.compiling import compiled

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

MIXTURE, STUDENT = 0, 1
CANDIDATES = 9  # rows of a host that are tried as places of a maximum

# columns of a prepared row
PLACE, IN, OUT, SHIFT, REST, RHO, KIND = 0, 1, 2, 3, 4, 5, 6
PREPARED = 7

_LARGE, _TINY = 1e200, 1e-200
_FAR = 40.0  # log ratio beyond which the second part is all


class HostStars(NamedTuple):
    """Rows of hosts whose deviations are not normal, sorted by host.

    Attributes
    ----------
    y, variance : array, shape (n,)
    columns : array, shape (n, k)
    sensitivity : array, shape (q, n, k)
        Times the coefficients: what is added in quadrature to a row's deviation.
    family : array of int, shape (n,)
        Which law each row has.
    kinds : array of int, shape (families,)
        `MIXTURE` or `STUDENT`.
    starts : array of int, shape (h + 1,)
    chosen : array of int, shape (h, CANDIDATES)
        Rows of each host whose places are tried as maxima; -1 where there are fewer.
    """

    y: FloatArray
    variance: FloatArray
    columns: FloatArray
    sensitivity: FloatArray
    family: IntArray
    kinds: IntArray
    starts: IntArray
    chosen: IntArray


@compiled
def prepare(
    stars: HostStars,
    shape: FloatArray,
    coefficients: FloatArray,
    start: int,
    stop: int,
    out: FloatArray,
) -> float:
    """Bring rows start to stop to the form of one draw; returns the log of their norms.

    `shape` holds for every family: squared scatter, fraction, squared width, shift,
    degrees of freedom, and the log norm of a row of unit variance.
    """
    total, product = 0.0, 1.0
    for place in range(start, stop):
        here, j = place - start, stars.family[place]
        a = stars.y[place]
        for k in range(coefficients.shape[0]):
            a -= stars.columns[place, k] * coefficients[k]
        v = stars.variance[place] + shape[j, 0]
        for q in range(stars.sensitivity.shape[0]):
            slope = 0.0
            for k in range(coefficients.shape[0]):
                slope += stars.sensitivity[q, place, k] * coefficients[k]
            v += slope * slope
        out[here, PLACE] = a
        out[here, KIND] = stars.kinds[j]
        if stars.kinds[j] == MIXTURE:
            wide = v + shape[j, 2]
            out[here, IN] = 0.5 / v
            out[here, OUT] = 0.5 / wide
            out[here, SHIFT] = shape[j, 3]
            out[here, REST] = 1.0 - shape[j, 1]
            out[here, RHO] = shape[j, 1] * math.sqrt(v / wide)
        else:
            nu = shape[j, 4]
            out[here, IN] = 1.0 / (nu * v)
            out[here, OUT] = 0.5 * (nu + 1.0)
        total += shape[j, 5]
        product *= v
        if product > _LARGE or product < _TINY:
            total -= 0.5 * math.log(product)
            product = 1.0
    return total - 0.5 * math.log(product)


@compiled
def log_rows(u: float, rows: FloatArray, n: int) -> float:
    """Log density of prepared rows at a local u, without their norms."""
    total, product, tail, power = 0.0, 1.0, 1.0, 0.0
    for i in range(n):
        r = rows[i, PLACE] - u
        inner = r * r * rows[i, IN]
        if rows[i, KIND] == MIXTURE:
            d = r - rows[i, SHIFT]
            ratio = inner - d * d * rows[i, OUT]
            total -= inner
            if ratio > _FAR and rows[i, RHO] > 0.0:
                total += ratio + math.log(rows[i, RHO])
            else:
                product *= rows[i, REST] + rows[i, RHO] * math.exp(ratio)
        else:
            if rows[i, OUT] != power or tail > _LARGE:
                total -= power * math.log(tail)
                tail, power = 1.0, rows[i, OUT]
            tail *= 1.0 + inner
        if product > _LARGE or product < _TINY:
            total += math.log(product)
            product = 1.0
    return total + math.log(product) - power * math.log(tail)


@compiled
def pull(u: float, rows: FloatArray, n: int) -> tuple[float, float]:
    """Sum of weight times place, and of weights, of the rows at u."""
    linear, weight = 0.0, 0.0
    for i in range(n):
        a = rows[i, PLACE]
        r = a - u
        inner = r * r * rows[i, IN]
        if rows[i, KIND] == MIXTURE:
            d = r - rows[i, SHIFT]
            ratio = inner - d * d * rows[i, OUT]
            chance = 0.0
            if rows[i, RHO] > 0.0:
                against = rows[i, REST] / rows[i, RHO]
                chance = 1.0 / (1.0 + against * math.exp(-min(ratio, 700.0)))
            close, wide = 2.0 * (1.0 - chance) * rows[i, IN], 2.0 * chance * rows[i, OUT]
            linear += close * a + wide * (a - rows[i, SHIFT])
            weight += close + wide
        else:
            close = 2.0 * rows[i, OUT] * rows[i, IN] / (1.0 + inner)
            linear += close * a
            weight += close
    return linear, weight
