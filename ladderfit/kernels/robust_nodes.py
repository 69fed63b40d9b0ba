"""The rows of one host at evenly spaced nodes all at once; compiled.

Along nodes u + j h the log ratio of the two parts of a mixture is quadratic in j, so
that the ratio itself follows from node to node by two products and no exponential.
Stars whose ratio is far from 1 are taken one by one, lest products overflow.
"""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from ladderfit.kernels.compiling import compiled
from ladderfit.kernels.robust_rows import IN, KIND, MIXTURE, OUT, PLACE, REST, RHO, SHIFT

FloatArray = npt.NDArray[np.float64]

WORK_ROWS = 6  # of the array that `regular_nodes` works in

_NEAR = 15.0  # log ratio up to which a star is taken with the others
_TOGETHER = 16  # factors multiplied before a logarithm
_PER_NODE = 2.5  # change of the log ratio from node to node up to which the same holds


@compiled
def regular_nodes(
    rows: FloatArray,
    n: int,
    u: float,
    h: float,
    reach: int,
    work: FloatArray,
    nodes: FloatArray,
) -> None:
    """Log density of prepared rows at u + (j - reach) h in nodes[j], j = 0 ... 2 reach."""
    ratio, growth, change, rest, rho, square = work[0], work[1], work[2], work[3], work[4], work[5]
    count, students, power, even = 0, 0, 0.0, True
    s0, s1, s2 = 0.0, 0.0, 0.0
    nodes[:] = 0.0
    first = -reach * h
    for i in range(n):
        r = rows[i, PLACE] - u
        if rows[i, KIND] != MIXTURE:
            even = even and (students == 0 or rows[i, OUT] == power)
            power = rows[i, OUT]
            students += 1
            continue
        inner, outer, shift = rows[i, IN], rows[i, OUT], rows[i, SHIFT]
        s0 += inner
        s1 += inner * r
        s2 += inner * r * r
        slope = -2.0 * (r * inner - (r - shift) * outer) * h
        middle = r * r * inner - (r - shift) * (r - shift) * outer
        if middle > _NEAR or abs(slope) > _PER_NODE:
            _add_far(rows, i, u, h, reach, nodes)
            continue
        curve = (inner - outer) * h * h
        ratio[count] = rows[i, RHO] * math.exp(middle - slope * reach + curve * reach * reach)
        growth[count] = math.exp(slope + curve * (1 - 2 * reach))
        change[count] = math.exp(2.0 * curve)
        rest[count] = rows[i, REST]
        count += 1
    for j in range(2 * reach + 1):
        d = first + j * h
        nodes[j] += _log_product(ratio, rest, count) - (s2 - 2.0 * d * s1 + d * d * s0)
        for i in range(count):
            ratio[i] *= growth[i]
            growth[i] *= change[i]
    if students > 0:
        _add_students(rows, n, u, h, reach, even, rho, square, nodes)


@compiled
def _log_product(ratio: FloatArray, rest: FloatArray, count: int) -> float:
    """Log of the product of rest + ratio."""
    total, start = 0.0, 0
    while start + _TOGETHER <= count:
        first, second, third, fourth = 1.0, 1.0, 1.0, 1.0
        for i in range(start, start + _TOGETHER, 4):
            first *= rest[i] + ratio[i]
            second *= rest[i + 1] + ratio[i + 1]
            third *= rest[i + 2] + ratio[i + 2]
            fourth *= rest[i + 3] + ratio[i + 3]
        total += math.log((first * second) * (third * fourth))
        start += _TOGETHER
    product = 1.0
    for i in range(start, count):
        product *= rest[i] + ratio[i]
    return total + math.log(product)


@compiled
def _add_far(rows: FloatArray, i: int, u: float, h: float, reach: int, nodes: FloatArray) -> None:
    """One star of a mixture: what its second part adds to the logarithm, at all nodes."""
    inner, outer, shift, rho = rows[i, IN], rows[i, OUT], rows[i, SHIFT], rows[i, RHO]
    if rho <= 0.0:
        nodes += math.log(rows[i, REST])
        return
    for j in range(2 * reach + 1):
        r = rows[i, PLACE] - u - (j - reach) * h
        log_ratio = r * r * inner - (r - shift) * (r - shift) * outer + math.log(rho)
        if log_ratio > 0.0:
            nodes[j] += log_ratio + math.log1p(rows[i, REST] * math.exp(-log_ratio))
        else:
            nodes[j] += math.log(rows[i, REST] + math.exp(log_ratio))


@compiled
def _add_students(
    rows: FloatArray,
    n: int,
    u: float,
    h: float,
    reach: int,
    even: bool,
    place: FloatArray,
    inner: FloatArray,
    nodes: FloatArray,
) -> None:
    """Rows with Student's tails, by products where all have the same degrees of freedom."""
    count, power = 0, 0.0
    for i in range(n):
        if rows[i, KIND] != MIXTURE:
            place[count], inner[count] = rows[i, PLACE] - u, rows[i, IN]
            power = rows[i, OUT]
            count += 1
    for j in range(2 * reach + 1):
        d = (j - reach) * h
        total, start = 0.0, 0
        if not even:
            for i in range(n):
                if rows[i, KIND] != MIXTURE:
                    r = rows[i, PLACE] - u - d
                    nodes[j] -= rows[i, OUT] * math.log1p(r * r * rows[i, IN])
            continue
        while start < count:
            stop = min(start + _TOGETHER, count)
            product = 1.0
            for i in range(start, stop):
                r = place[i] - d
                product *= 1.0 + r * r * inner[i]
            total += math.log(product)
            start = stop
        nodes[j] -= power * total
