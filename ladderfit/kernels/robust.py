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

import numpy as np
import numpy.typing as npt

from ladderfit.kernels.compiling import compiled
from ladderfit.kernels.robust_nodes import WORK_ROWS, regular_nodes
from ladderfit.kernels.robust_rows import (
    CANDIDATES,
    IN,
    KIND,
    MIXTURE,
    PLACE,
    PREPARED,
    STUDENT,
    HostStars,
    log_rows,
    prepare,
    pull,
)

__all__ = ["CANDIDATES", "MIXTURE", "STUDENT", "HostStars", "integrate_hosts"]

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

LOG_2PI = math.log(2.0 * math.pi)

_FLOOR = 18.0  # the march ends where the log integrand is this far below its peak
_COUNTS = 25.0  # a maximum this far below the highest is left out
_STEP = 1.0  # widths of the narrowest maximum, between nodes
_ONE_ROW = 0.35  # the same in widths of the sharpest row: its complex poles lie near by
_SETTLED = 0.3  # widths: the climb ends at a step shorter than this
_CLIMB = 40
MOST_NODES = 20_000  # nodes to each side
MANY = 12  # rows from which nodes about one maximum are taken all at once
_REGULAR = 7  # of these, to each side


@compiled
def log_local(u: float, rows: FloatArray, n: int, A: float, B: float) -> float:
    """Log integrand at a local u, without the norms of the rows."""
    return B * u - 0.5 * A * u * u + log_rows(u, rows, n)


@compiled
def _climb(u: float, rows: FloatArray, n: int, A: float, B: float) -> tuple[float, float]:
    """The maximum above u, and the precision there of rows with their weights."""
    precision = 0.0
    for _ in range(_CLIMB):
        linear, weight = pull(u, rows, n)
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
            places[count] = rows[place, PLACE]
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
        tops[found], precision = _climb(places[i], rows, n, A, B)
        steps[found] = _STEP / math.sqrt(precision)
        found += 1
    if found == 1:
        return tops[0], tops[0], min(_ONE_ROW * _sharpest(rows, n), steps[0])
    for i in range(found):
        heights[i] = log_local(tops[i], rows, n, A, B)
        best = max(best, heights[i])
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
        scale = 2.0 if rows[i, KIND] == MIXTURE else 1.0
        most = max(most, scale * rows[i, IN])
    return 1.0 / math.sqrt(most)


@compiled
def _about(
    rows: FloatArray,
    n: int,
    A: float,
    B: float,
    u: float,
    step: float,
    work: FloatArray,
    nodes: FloatArray,
) -> bool:
    """Fill the nodes about one maximum; whether the integrand has died away at both ends."""
    here = nodes[MOST_NODES - _REGULAR : MOST_NODES + _REGULAR + 1]
    regular_nodes(rows, n, u, step, _REGULAR, work[5:], here)
    for j in range(len(here)):
        place = u + (j - _REGULAR) * step
        here[j] += B * place - 0.5 * A * place * place
    ends = max(here[0], here[-1])
    return bool(ends < here.max() - _FLOOR)


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
    if n >= MANY and low == high and _about(rows, n, A, B, low, step, work, nodes):
        return low, step, MOST_NODES - _REGULAR, MOST_NODES + _REGULAR + 1
    top, stop = -np.inf, MOST_NODES
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
def workspace(longest: int) -> FloatArray:
    """Room for `march`, for hosts of at most so many rows."""
    return np.empty((5 + WORK_ROWS, max(longest, CANDIDATES + 1)))


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

    Shapes: `shape` (b, families, 6), `coefficients` (b, k), `local` and `linear` (b, h),
    `out` (b,).
    """
    hosts = len(stars.starts) - 1
    longest = 0
    for h in range(hosts):
        longest = max(longest, stars.starts[h + 1] - stars.starts[h])
    rows = np.empty((longest, PREPARED))
    nodes, work = np.empty(2 * MOST_NODES), workspace(longest)
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
