r"""A host's modulus under deviations that are not normal, integrated out; compiled.

Given the coefficients, the rows of one host share one unknown, its local u:

    I = \int exp(-A u^2 / 2 + B u) \prod_i p(a_i - u) du ,

with A, B from rows that are normal, a_i = y_i - X_i g, and p either a mixture,

    p(r) = (1 - f) N(r; 0, v) + f N(r; d, v + w^2) ,

or a Student-t of scale sqrt(v).  Which rows are outliers is summed over exactly
within p.  One dimension is left per host, and the trapezoidal rule, which converges
geometrically for smooth integrands that vanish at both ends, takes it:

- Candidates for a maximum are places of the rows themselves (every one where there
  are few, else a spread of them) and of the normal rows.  Each that is higher than
  its neighbours is climbed by the steps of expectation and maximisation
  (Dempster, Laird & Rubin 1977), which never go down.
- Nodes run from the lowest maximum that counts to the highest, and outward until the
  integrand has died away, at a step no wider than the narrowest maximum.
"""

from __future__ import annotations

import math
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from ladderfit.kernels.compiling import compiled

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

LOG_2PI = math.log(2.0 * math.pi)

MIXTURE, STUDENT = 0, 1
CANDIDATES = 9  # rows of a host that are tried as places of a maximum

_FLOOR = 18.0  # the march ends where the log integrand is this far below its peak
_COUNTS = 25.0  # a maximum this far below the highest is left out
_STEP = 1.0  # widths of the narrowest maximum, between nodes
_ONE_ROW = 0.35  # the same in widths of the sharpest row: its complex poles lie near by
_SETTLED = 0.15  # widths: the climb ends at a step shorter than this
_CLIMB = 40
MOST_NODES = 20_000  # nodes to each side
_LARGE, _TINY = 1e200, 1e-200
_FAR = 40.0  # log ratio beyond which the second part is all

# columns of a prepared row
_A, _IN, _OUT, _SHIFT, _REST, _RHO, _KIND = 0, 1, 2, 3, 4, 5, 6
PREPARED = 7


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
    degrees of freedom.
    """
    total = 0.0
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
        out[here, _A] = a
        out[here, _KIND] = stars.kinds[j]
        if stars.kinds[j] == MIXTURE:
            wide = v + shape[j, 2]
            out[here, _IN] = 0.5 / v
            out[here, _OUT] = 0.5 / wide
            out[here, _SHIFT] = shape[j, 3]
            out[here, _REST] = 1.0 - shape[j, 1]
            out[here, _RHO] = shape[j, 1] * math.sqrt(v / wide)
            total -= 0.5 * (math.log(v) + LOG_2PI)
        else:
            nu = shape[j, 4]
            out[here, _IN] = 1.0 / (nu * v)
            out[here, _OUT] = 0.5 * (nu + 1.0)
            total += math.lgamma(0.5 * (nu + 1.0)) - math.lgamma(0.5 * nu)
            total -= 0.5 * math.log(math.pi * nu * v)
    return total


@compiled
def log_rows(u: float, rows: FloatArray, n: int) -> float:
    """Log density of prepared rows at a local u, without their norms."""
    total, product = 0.0, 1.0
    for i in range(n):
        r = rows[i, _A] - u
        inner = r * r * rows[i, _IN]
        if rows[i, _KIND] == MIXTURE:
            d = r - rows[i, _SHIFT]
            ratio = inner - d * d * rows[i, _OUT]
            total -= inner
            if ratio > _FAR and rows[i, _RHO] > 0.0:
                total += ratio + math.log(rows[i, _RHO])
            else:
                product *= rows[i, _REST] + rows[i, _RHO] * math.exp(ratio)
        else:
            total -= rows[i, _OUT] * math.log1p(inner)
        if product > _LARGE or product < _TINY:
            total += math.log(product)
            product = 1.0
    return total + math.log(product)


@compiled
def _pull(u: float, rows: FloatArray, n: int) -> tuple[float, float]:
    """Sum of weight times place, and of weights, of the rows at u."""
    linear, weight = 0.0, 0.0
    for i in range(n):
        a = rows[i, _A]
        r = a - u
        inner = r * r * rows[i, _IN]
        if rows[i, _KIND] == MIXTURE:
            d = r - rows[i, _SHIFT]
            ratio = inner - d * d * rows[i, _OUT]
            chance = 0.0
            if rows[i, _RHO] > 0.0:
                against = rows[i, _REST] / rows[i, _RHO]
                chance = 1.0 / (1.0 + against * math.exp(-min(ratio, 700.0)))
            close, wide = 2.0 * (1.0 - chance) * rows[i, _IN], 2.0 * chance * rows[i, _OUT]
            linear += close * a + wide * (a - rows[i, _SHIFT])
            weight += close + wide
        else:
            close = 2.0 * rows[i, _OUT] * rows[i, _IN] / (1.0 + inner)
            linear += close * a
            weight += close
    return linear, weight


@compiled
def log_local(u: float, rows: FloatArray, n: int, A: float, B: float) -> float:
    """Log integrand at a local u, without the norms of the rows."""
    return B * u - 0.5 * A * u * u + log_rows(u, rows, n)


@compiled
def _climb(u: float, rows: FloatArray, n: int, A: float, B: float) -> tuple[float, float]:
    """The maximum above u, and the precision there of rows with their weights."""
    precision = 0.0
    for _ in range(_CLIMB):
        linear, weight = _pull(u, rows, n)
        precision = A + weight
        step = (B + linear) / precision - u
        u += step
        if abs(step) * math.sqrt(precision) < _SETTLED:
            break
    return u, precision


@compiled
def _candidates(
    rows: FloatArray, n: int, chosen: IntArray, A: float, B: float, places: FloatArray
) -> int:
    """Places of maxima to try, ascending."""
    count = 0
    if A > 0.0:
        places[0] = B / A
        count = 1
    for place in chosen:
        if place >= 0:
            places[count] = rows[place, _A]
            count += 1
    for i in range(1, count):  # insertion sort
        value, j = places[i], i - 1
        while j >= 0 and places[j] > value:
            places[j + 1] = places[j]
            j -= 1
        places[j + 1] = value
    return count


@compiled
def _maxima(
    rows: FloatArray,
    n: int,
    chosen: IntArray,
    A: float,
    B: float,
    work: FloatArray,
) -> tuple[float, float, float]:
    """Lowest and highest maximum that counts, and the step between nodes."""
    places, values, heights, tops, steps = work[0], work[1], work[2], work[3], work[4]
    count = _candidates(rows, n, chosen, A, B, places)
    for i in range(count):
        values[i] = log_local(places[i], rows, n, A, B)
    found, best = 0, -np.inf
    for i in range(count):
        if (i > 0 and values[i] < values[i - 1]) or (i + 1 < count and values[i] < values[i + 1]):
            continue
        u, precision = _climb(places[i], rows, n, A, B)
        height = log_local(u, rows, n, A, B)
        tops[found], heights[found], steps[found] = u, height, _STEP / math.sqrt(precision)
        best = max(best, height)
        found += 1
    low, high, step = np.inf, -np.inf, _ONE_ROW * _sharpest(rows, n)
    for i in range(found):
        if heights[i] > best - _COUNTS:
            low, high, step = min(low, tops[i]), max(high, tops[i]), min(step, steps[i])
    return low, high, step


@compiled
def _sharpest(rows: FloatArray, n: int) -> float:
    """Width of the narrowest row."""
    most = 0.0
    for i in range(n):
        scale = 2.0 if rows[i, _KIND] == MIXTURE else 1.0
        most = max(most, scale * rows[i, _IN])
    return 1.0 / math.sqrt(most)


@compiled
def march(
    rows: FloatArray,
    n: int,
    chosen: IntArray,
    A: float,
    B: float,
    work: FloatArray,
    nodes: FloatArray,
) -> tuple[float, float, int, int]:
    """Log integrand at nodes origin + j step: fills nodes[first:stop], j = 0 at MOST_NODES."""
    low, high, step = _maxima(rows, n, chosen, A, B, work)
    step = max(step, (high - low) / (0.5 * MOST_NODES))
    top = -np.inf
    stop = MOST_NODES
    while stop < 2 * MOST_NODES:
        u = low + (stop - MOST_NODES) * step
        value = log_local(u, rows, n, A, B)
        nodes[stop] = value
        top = max(top, value)
        stop += 1
        if value < top - _FLOOR and u > high:
            break
    first = MOST_NODES
    while first > 0:
        first -= 1
        value = log_local(low + (first - MOST_NODES) * step, rows, n, A, B)
        nodes[first] = value
        top = max(top, value)
        if value < top - _FLOOR:
            break
    return low, step, first, stop


@compiled
def _log_sum(nodes: FloatArray, first: int, stop: int) -> float:
    top = -np.inf
    for j in range(first, stop):
        top = max(top, nodes[j])
    total = 0.0
    for j in range(first, stop):
        total += math.exp(nodes[j] - top)
    return top + math.log(total)


@compiled
def integrate_hosts(
    stars: HostStars,
    shape: FloatArray,
    coefficients: FloatArray,
    local: FloatArray,
    linear: FloatArray,
    out: FloatArray,
) -> None:
    """Add to `out` the log of every draw's integrals over all hosts' locals.

    Shapes: `shape` (b, families, 5), `coefficients` (b, k), `local` and `linear` (b, h),
    `out` (b,).
    """
    hosts = len(stars.starts) - 1
    longest = 0
    for h in range(hosts):
        longest = max(longest, stars.starts[h + 1] - stars.starts[h])
    rows = np.empty((longest, PREPARED))
    nodes, work = np.empty(2 * MOST_NODES), np.empty((5, CANDIDATES + 1))
    for b in range(len(out)):
        for h in range(hosts):
            A, B = local[b, h], linear[b, h]
            start, stop = stars.starts[h], stars.starts[h + 1]
            if start == stop:
                out[b] += 0.5 * (LOG_2PI - math.log(A) + B * B / A)
                continue
            out[b] += prepare(stars, shape[b], coefficients[b], start, stop, rows)
            _, step, first, last = march(rows, stop - start, stars.chosen[h], A, B, work, nodes)
            out[b] += _log_sum(nodes, first, last) + math.log(step)
