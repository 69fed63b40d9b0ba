r"""A star's modulus integrated out under a prior that falls off along its sight line; compiled.

The prior of a star's modulus is d^3 exp(g(d)), unnormalised, with d its distance
in kpc; d^3 is the volume of a shell of given depth in modulus, and

    g(d) = -d / L                                     exponentially decreasing density
    g(d) = -(R - R0) / L_R - 2 log cosh(z / (2 h))    exponential disc

where R is the distance from the axis of the Galaxy and z that from its plane.
As d = 1 / parallax, g costs no exponential at a node of the quadrature for the
first.  R is taken as sqrt(R^2 + (0.1 kpc)^2), which leaves no cusp where a sight
line meets the axis.

The routes are those of `ladderfit.kernels.quadrature`: nodes march from the
likelihood's own peak where that is narrow, with g in the drop; otherwise a wide
range in the stretched coordinate is scanned and narrowed.
"""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from ladderfit.kernels.compiling import compiled, in_halves
from ladderfit.kernels.narrow import K
from ladderfit.kernels.quadrature import LOG_2PI, log_stretched, y_of

FloatArray = npt.NDArray[np.float64]

VOLUME_TILT = 3.0 * K  # of a prior uniform in volume, per mag: 10^(0.6 mu)

_SOFT2 = 0.01  # kpc^2
_NARROW = 0.17  # mag
_FLOOR = 18.0
_PULLED = 3.0  # widths by which g may move a narrow peak
_REACH = 6.0
_NEARER, _FARTHER = 14.0, 5.0  # widths by which g is first taken to move a broad peak
_STEP = 0.6
_DEPTH = 40.0
_MOST_NODES = 10_000
_LOG_2 = math.log(2.0)


def sight_lines(
    longitude: FloatArray,
    latitude: FloatArray,
    *,
    length: float,
    height: float,
    solar_radius: float,
    solar_height: float,
) -> FloatArray:
    """What the kernels need to know of each star's sight line through a disc.

    Parameters
    ----------
    longitude, latitude : array, shape (n,)
        Galactic coordinates [deg].
    length, height : float
        Scale length and height of the disc, exp(-R / length) sech^2(z / (2 height)) [kpc].
    solar_radius, solar_height : float
        Where the observer is [kpc].

    Returns
    -------
    array, shape (n, 7)
    """
    l_, b = np.deg2rad(longitude), np.deg2rad(latitude)
    ones = np.ones(len(l_))
    return np.stack(
        [
            np.cos(b) * np.cos(l_),
            np.cos(b) ** 2,
            np.sin(b),
            solar_radius * ones,
            solar_height * ones,
            ones / length,
            ones / (2.0 * height),
        ],
        axis=1,
    )


@compiled
def log_falloff(d: float, rate: float, sight: FloatArray) -> float:
    """g at distance d [kpc]; `rate` is 1 / L, `sight` a row of `sight_lines` or empty."""
    total = -rate * d
    if sight.size > 0:
        radius2 = sight[3] * (sight[3] - 2.0 * d * sight[0]) + d * d * sight[1]
        radius = math.sqrt(max(radius2, 0.0) + _SOFT2)
        height = abs(sight[4] + d * sight[2]) * sight[6]
        log_cosh = height + math.log1p(math.exp(-2.0 * height)) - _LOG_2
        total -= (radius - sight[3]) * sight[5] + 2.0 * log_cosh
    return float(total)


@compiled
def _axis_step(nearest: float, farthest: float, sight: FloatArray) -> float:
    """Longest step, relative to d, where the sight line passes the axis within a range of d."""
    if sight.size == 0 or sight[0] <= 0.0:
        return math.inf
    closest = sight[3] * sight[0] / sight[1]
    if closest < nearest or closest > farthest:
        return math.inf
    gap2 = sight[3] * sight[3] * max(1.0 - sight[0] * sight[0] / sight[1], 0.0)
    return float(0.5 * math.sqrt(gap2 + _SOFT2) / closest)


@compiled
def _peak(a: float, v: float, plx: float, err: float) -> tuple[float, float, float, float]:
    """Likelihood's peak: modulus, parallax, width and curvature times width^2; NaN if unsettled."""
    mu = a
    per_mag, per_plx = 1.0 / v, 1.0 / (err * err)
    parallax = math.exp(K * (10.0 - mu))
    for _ in range(8):
        slope = -(mu - a) * per_mag + K * parallax * (parallax - plx) * per_plx
        pull = K * parallax
        width = 1.0 / math.sqrt(per_mag + pull * pull * per_plx)
        step = slope * width * width
        if abs(step) > 0.5:
            step = math.copysign(0.5, step)
        mu += step
        parallax *= math.exp(-K * step)
        if abs(step) < 0.2 * width:
            bent = per_mag + K * K * parallax * (2.0 * parallax - plx) * per_plx
            return mu, parallax, width, bent * width * width
    return mu, parallax, math.nan, math.nan


@compiled
def _narrow(a: float, v: float, plx: float, err: float, rate: float, sight: FloatArray) -> float:
    """Log of the integral of both exponentials and exp(g); NaN where this way does not apply."""
    mu, parallax, width, relative = _peak(a, v, plx, err)
    if not (width <= _NARROW and 0.4 <= relative <= 2.5):
        return math.nan
    d = 1.0 / parallax
    moved = math.exp(K * width)
    middle = log_falloff(d, rate, sight)
    nearer, farther = log_falloff(d / moved, rate, sight), log_falloff(d * moved, rate, sight)
    if abs(farther - nearer) > 2.0 * _PULLED:
        return math.nan
    bent = max(relative, 1.0) + max(2.0 * middle - nearer - farther, 0.0)
    step = width / math.sqrt(bent)
    reach = math.exp(8.0 * K * width)
    step = min(step, _axis_step(d / reach, d * reach, sight) / K)
    per_mag, per_plx = 1.0 / v, 1.0 / (err * err)
    off, miss = mu - a, parallax - plx
    top = 0.5 * (off * off * per_mag + miss * miss * per_plx)
    total = 1.0
    for side in range(2):
        stride = step if side == 0 else -step
        ratio = math.exp(-K * stride)
        here, far = off, parallax
        while True:
            here += stride
            far *= ratio
            miss = far - plx
            drop = top - 0.5 * (here * here * per_mag + miss * miss * per_plx)
            drop += log_falloff(1.0 / far, rate, sight) - middle
            if drop < -_FLOOR:
                break
            total += math.exp(drop)
    return math.log(total * step) - top + middle


@compiled
def _log_here(
    y: float,
    a: float,
    root: float,
    plx: float,
    err: float,
    log_scale: float,
    rate: float,
    sight: FloatArray,
) -> float:
    value = log_stretched(y, a, root, plx, err, log_scale)
    if value == -math.inf:
        return value
    return value + log_falloff(1.0 / _parallax_at(y, log_scale), rate, sight)


@compiled
def _parallax_at(y: float, log_scale: float) -> float:
    u = y + math.log1p(math.exp(-y)) if y > 0.0 else math.log1p(math.exp(y))
    return u * math.exp(log_scale)


@compiled
def _stretched(
    a: float, root: float, plx: float, err: float, rate: float, sight: FloatArray
) -> float:
    """Log of the integral of both exponentials and exp(g), whatever the star."""
    unit = K * root
    scale = err / unit
    log_scale = math.log(scale)
    by_magnitude = y_of(math.exp(min(K * (10.0 - a), 600.0)) / scale)
    by_parallax = y_of(max(plx, 0.5 * err) / scale)
    low = min(by_magnitude, by_parallax) - (_REACH + _FARTHER) * unit
    nearer = max(by_magnitude, by_parallax) + _REACH * unit
    found = (low, nearer, nearer)
    top = nearer
    for _ in range(40):  # until the peak is well inside
        if top <= nearer - _REACH * unit:
            break
        nearer += _NEARER * unit
        found = _scanned(low, nearer, a, root, plx, err, log_scale, rate, sight)
        top = found[2]
    low, high, top = found
    d, moved = 1.0 / _parallax_at(top, log_scale), math.exp(0.5 * unit)
    bent = 2.0 * log_falloff(d, rate, sight)
    bent -= log_falloff(d * moved, rate, sight) + log_falloff(d / moved, rate, sight)
    pulled = max(1.0, 1.0 - 0.35 * unit * plx / err)
    step = _STEP * unit / (pulled * math.sqrt(1.0 + max(4.0 * bent, 0.0)))
    nearest, farthest = 1.0 / _parallax_at(high, log_scale), 1.0 / _parallax_at(low, log_scale)
    step = min(step, _axis_step(nearest, farthest, sight))
    count = min(max(math.ceil((high - low) / step), 16), _MOST_NODES)
    step = (high - low) / count
    peak, total = -math.inf, 0.0
    for node in range(count + 1):
        value = _log_here(low + node * step, a, root, plx, err, log_scale, rate, sight)
        if value > peak:
            total = total * math.exp(peak - value) + 1.0
            peak = value
        elif value > peak - 60.0:
            total += math.exp(value - peak)
    return peak + math.log(total * step)


@compiled
def _scanned(
    low: float,
    high: float,
    a: float,
    root: float,
    plx: float,
    err: float,
    log_scale: float,
    rate: float,
    sight: FloatArray,
) -> tuple[float, float, float]:
    """The part of a range within `_DEPTH` of the peak, and where the peak is."""
    top = low
    for _ in range(60):
        step = (high - low) / 64.0
        peak = -math.inf
        for node in range(65):
            value = _log_here(low + node * step, a, root, plx, err, log_scale, rate, sight)
            if value > peak:
                peak, top = value, low + node * step
        first, last = 64, 0
        for node in range(65):
            value = _log_here(low + node * step, a, root, plx, err, log_scale, rate, sight)
            if value >= peak - _DEPTH:
                first, last = min(first, node), max(last, node)
        new_low = low + max(first - 1, 0) * step
        new_high = low + min(last + 1, 64) * step
        done = new_high - new_low > 0.5 * (high - low)
        low, high = new_low, new_high
        if done:
            break
    return low, high, top


@compiled
def _fill(
    result: FloatArray,
    distance_like: FloatArray,
    variance: FloatArray,
    parallax: FloatArray,
    error: FloatArray,
    rate: FloatArray,
    sight: FloatArray,
) -> None:
    tilt = VOLUME_TILT
    for draw in range(result.shape[0]):
        for star in range(result.shape[1]):
            a, v = distance_like[draw, star], variance[draw, star]
            plx, err, line = parallax[draw, star], error[draw, star], sight[star]
            shifted = a + tilt * v
            value = _narrow(shifted, v, plx, err, rate[draw], line)
            if math.isnan(value):
                value = _stretched(shifted, math.sqrt(v), plx, err, rate[draw], line)
            value += tilt * (a - 10.0 + 0.5 * tilt * v)
            result[draw, star] = value - 0.5 * math.log(v) - math.log(err) - LOG_2PI


def log_falloff_integrals(
    distance_like: FloatArray,
    variance: FloatArray,
    parallax: FloatArray,
    error: FloatArray,
    rate: FloatArray,
    sight: FloatArray,
) -> FloatArray:
    """Log of the integral of d^3 exp(g) N(a | mu, v) N(plx | 10^(2 - 0.2 mu), s^2) over mu.

    Parameters
    ----------
    distance_like, variance, parallax, error : array, shape (b, n) or what broadcasts to it
        As for `ladderfit.kernels.quadrature.log_parallax_integrals`.
    rate : array, shape (b,)
        1 / L per draw [1/kpc]; zero where density does not fall off with distance.
    sight : array, shape (n, 7) or (n, 0)
        Rows of `sight_lines`; no columns without a disc.

    Returns
    -------
    array, shape (b, n)
        Accurate to about 1e-6 (absolute, in the log).
    """
    shape = distance_like.shape
    inputs = [
        np.array(np.broadcast_to(values, shape), dtype=float, order="C")
        for values in (distance_like, variance, parallax, error)
    ]
    rate, sight = np.array(rate, dtype=float), np.array(sight, dtype=float, order="C")
    result = np.empty(shape)

    def part(start: int, stop: int) -> None:
        a, v, plx, err = (values[start:stop] for values in inputs)
        _fill(result[start:stop], a, v, plx, err, rate[start:stop], sight)

    in_halves(part, len(result), work=2 * result.size)
    return result
