r"""Hosts whose stars are cut at a magnitude limit: one integral per host; compiled.

Given coefficients and scatters, all data leave a host's local u normal, N(u | c, 1/p).
Every star then counts with its density divided by its chance of detection, so that

    I = \int N(u | c, 1/p) \prod_i 1 / Phi((b_i - u) / w_i) du ,

where b_i is the local at which the star's mean magnitude lies at the limit and w_i
the width of its magnitude and of the limit (truncated regression: Amemiya 1973,
Econometrica 41, 997).  The integrand is log-concave, as the stars' own information
is part of p.  Its peak is found by Newton steps, which climb monotonically, and the
trapezoidal rule runs from it in both directions until the integrand has fallen by
e^-27.  Its step is 0.8 widths of the peak, or 0.45 w_i where that is less: the rule
converges exponentially (Trefethen & Weideman 2014, SIAM Review 56, 385), the nearest
zeros of Phi lying 1.9 w_i off the real axis.
"""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from ladderfit.kernels.compiling import compiled, in_halves

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

_ROOT2, _ROOT2PI = math.sqrt(2.0), math.sqrt(2.0 * math.pi)
_HALF_LOG_2PI = 0.5 * math.log(2.0 * math.pi)
_CERTAIN = 7.5  # widths before the limit from which detection is certain
_STEP, _STEP_OF_WIDTH = 0.8, 0.45
_DEEP = 27.0  # fall of the log integrand at which the sums end
_MOST = 2000  # nodes in either direction
_NEWTON = 200
_UNDERFLOW = 1e-250
_PARTS = 16  # points within a step, for drawing


@compiled
def log_phi(z: float) -> float:
    """Log of the normal distribution function."""
    if z > -30.0:
        return math.log(0.5 * math.erfc(-z / _ROOT2))
    square = 1.0 / (z * z)
    series = 1.0 - square * (1.0 - square * (3.0 - 15.0 * square))
    return -0.5 * z * z - _HALF_LOG_2PI - math.log(-z) + math.log(series)


@compiled
def _slopes(
    u: float, centre: float, precision: float, lead: FloatArray, width: FloatArray
) -> tuple[float, float, float]:
    """The log integrand without constants, and its first two derivatives."""
    gap = u - centre
    value, first, second = -0.5 * precision * gap * gap, -precision * gap, -precision
    for star in range(len(lead)):
        z = (lead[star] - u) / width[star]
        if z > _CERTAIN:
            continue
        chance = log_phi(z)
        ratio = math.exp(-0.5 * z * z - _HALF_LOG_2PI - chance)
        value -= chance
        first += ratio / width[star]
        second += ratio * (z + ratio) / width[star] ** 2
    return value, first, second


@compiled
def _value(u: float, centre: float, precision: float, lead: FloatArray, width: FloatArray) -> float:
    """The log integrand without constants; logarithms are taken of products."""
    value, product = -0.5 * precision * (u - centre) ** 2, 1.0
    for star in range(len(lead)):
        z = (lead[star] - u) / width[star]
        if z > _CERTAIN:
            continue
        if z < -8.0:
            value -= log_phi(z)
            continue
        product *= 0.5 * math.erfc(-z / _ROOT2)
        if product < _UNDERFLOW:
            value -= math.log(product)
            product = 1.0
    return value - math.log(product)


@compiled
def _peak(
    centre: float, precision: float, lead: FloatArray, width: FloatArray
) -> tuple[float, float, float]:
    """Place and height of the peak, and the step of the rule."""
    u = centre
    value, first, second = _slopes(u, centre, precision, lead, width)
    for _ in range(_NEWTON):
        if not second < 0.0:
            return u, math.nan, 1.0
        move = -first / second
        u += move
        value, first, second = _slopes(u, centre, precision, lead, width)
        if abs(move) * math.sqrt(-second) < 1e-3:
            break
    step = _STEP / math.sqrt(-second) if second < 0.0 else math.nan
    for star in range(len(width)):
        if (lead[star] - u) / width[star] < 4.0:
            step = min(step, _STEP_OF_WIDTH * width[star])
    return u, value, step


@compiled
def _log_integral(centre: float, precision: float, lead: FloatArray, width: FloatArray) -> float:
    peak, top, step = _peak(centre, precision, lead, width)
    if math.isnan(top) or math.isnan(step):
        return math.nan
    total = 1.0
    for sign in (-1.0, 1.0):
        for node in range(1, _MOST):
            value = _value(peak + sign * node * step, centre, precision, lead, width) - top
            if value < -_DEEP:
                break
            total += math.exp(value)
    return top + math.log(total * step) + 0.5 * math.log(precision) - _HALF_LOG_2PI


@compiled
def _quantile(
    share: float, centre: float, precision: float, lead: FloatArray, width: FloatArray
) -> float:
    """The place below which `share` of the integrand lies.

    Between nodes its logarithm is a cubic with the right values and slopes, exact
    where the integrand is normal.
    """
    peak, top, step = _peak(centre, precision, lead, width)
    if math.isnan(top) or math.isnan(step):
        return math.nan
    low = 0
    while low > -_MOST:
        low -= 1
        if _value(peak + low * step, centre, precision, lead, width) - top < -_DEEP:
            break
    high = 0
    while high < _MOST:
        high += 1
        if _value(peak + high * step, centre, precision, lead, width) - top < -_DEEP:
            break
    cells = high - low
    density = np.empty(cells * _PARTS + 1)
    value, first, _ = _slopes(peak + low * step, centre, precision, lead, width)
    for cell in range(cells):
        after, slope, _ = _slopes(peak + (low + cell + 1) * step, centre, precision, lead, width)
        for part in range(_PARTS + 1):
            t = part / _PARTS
            bend = (1.0 + 2.0 * t) * (1.0 - t) ** 2 * value + t * t * (3.0 - 2.0 * t) * after
            bend += step * t * (1.0 - t) * ((1.0 - t) * first - t * slope)
            density[cell * _PARTS + part] = math.exp(bend - top)
        value, first = after, slope
    total = 0.0
    for part in range(len(density) - 1):
        total += 0.5 * (density[part] + density[part + 1])
    wanted, fine = share * total, step / _PARTS
    for part in range(len(density) - 1):
        mass = 0.5 * (density[part] + density[part + 1])
        if wanted <= mass or part == len(density) - 2:
            start, rise = density[part], density[part + 1] - density[part]
            root = math.sqrt(max(start * start + 2.0 * rise * wanted, 0.0))
            t = 2.0 * wanted / (start + root) if start + root > 0.0 else 0.0
            return peak + low * step + (part + min(t, 1.0)) * fine
        wanted -= mass
    return math.nan


@compiled
def _integrals(
    runs: IntArray,
    centre: FloatArray,
    precision: FloatArray,
    lead: FloatArray,
    width: FloatArray,
    share: FloatArray,
    result: FloatArray,
) -> None:
    for draw in range(len(centre)):
        for run in range(len(runs)):
            start, stop = runs[run, 1], runs[run, 2]
            c, p = centre[draw, run], precision[draw, run]
            leads, widths = lead[draw, start:stop], width[draw, start:stop]
            if share.shape[1] > 0:
                result[draw, run] = _quantile(share[draw, run], c, p, leads, widths)
            else:
                result[draw, run] = _log_integral(c, p, leads, widths)


def truncated_hosts(
    runs: IntArray,
    centre: FloatArray,
    precision: FloatArray,
    lead: FloatArray,
    width: FloatArray,
    share: FloatArray | None = None,
) -> FloatArray:
    """Log integrals of hosts with limits, or quantiles of their locals.

    Parameters
    ----------
    runs : array of int, shape (r, 3)
        Host, first star and one past the last.
    centre, precision : array, shape (b, r)
        Of each host's local without the limits.
    lead, width : array, shape (b, n)
        b_i and w_i above.
    share : array, shape (b, r), optional
        Where given, the quantiles at these probabilities are wanted.

    Returns
    -------
    array, shape (b, r)
        NaN where the integrand has no peak, which only rounding can bring about.
    """
    result = np.empty(centre.shape)
    wanted = np.empty((len(centre), 0)) if share is None else share

    def part(start: int, stop: int) -> None:
        chosen = slice(start, stop)
        _integrals(
            runs,
            np.ascontiguousarray(centre[chosen]),
            np.ascontiguousarray(precision[chosen]),
            np.ascontiguousarray(lead[chosen]),
            np.ascontiguousarray(width[chosen]),
            np.ascontiguousarray(wanted[chosen]),
            result[chosen],
        )

    in_halves(part, len(centre), work=20 * lead.size)
    return result
