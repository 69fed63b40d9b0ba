r"""A parallax star's own modulus, integrated out; compiled.

For a star of apparent magnitude m and absolute magnitude M, with a = m - M,

    L = \int exp(tilt mu) N(a | mu, v) N(plx | 10^(2 - 0.2 mu), s^2) d mu ,

one dimension per star and per draw.  A bright star's parallax pins mu far more
tightly than its magnitude does, a faint one's hardly at all, so nodes laid over
either factor alone fail.  The trapezoidal rule, which converges geometrically
for smooth integrands that vanish at both ends, is applied in one of two ways:

*Narrow.*  Where the product is narrower than a sixth of a magnitude it is close
to a Gaussian: nodes march outward in mu from its own peak, found by safeguarded
Newton steps, until the integrand has died away.

*Stretched.*  Otherwise in a coordinate y in which both factors have unit width
at every distance,

    u = 10^(2 - 0.2 mu) k sqrt(v) / s,   u = log(1 + e^y),   k = ln(10) / 5.

Near by (u >> 1) y runs linearly in parallax, far away (u << 1) linearly in
modulus; one unit of width is k sqrt(v) in y.  The peaks of the product lie
between the peaks of the factors, so the range follows without a search, and
negative parallaxes need no special case.
"""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from ladderfit.kernels.compiling import compiled, in_halves

FloatArray = npt.NDArray[np.float64]

K = math.log(10.0) / 5.0
LOG_2PI = math.log(2.0 * math.pi)

_NARROW = 0.17  # mag: width of the product up to which the narrow way is taken
_NARROW_STEP = 1.0  # of that width, between nodes
_FLOOR = 18.0  # the march ends where the log integrand is this far below its peak
_REACH = 6.0  # stretched: widths beyond the outer of the two peaks
_STEP = 0.75  # stretched: widths between nodes
_WIDEST = 40.0  # stretched: widths between the peaks beyond which the range is scanned
_MOST_NODES = 4000  # reached only where a scatter of many magnitudes meets a negative parallax
_DEPTH = 40.0  # a scanned range is narrowed to where the log integrand is this near its peak


@compiled
def _narrow(a: float, v: float, plx: float, err: float) -> float:
    """Log of the integral of both exponentials over mu; NaN where this way does not apply."""
    mu = a
    per_mag, per_plx = 1.0 / v, 1.0 / (err * err)
    parallax = math.exp(K * (10.0 - mu))
    width = 0.0
    settled = False
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
            settled = True
            break
    if not settled or width > _NARROW:
        return math.nan
    curvature = per_mag + K * K * parallax * (2.0 * parallax - plx) * per_plx
    relative = curvature * width * width
    if relative < 0.4 or relative > 2.5:
        return math.nan
    step = _NARROW_STEP * width / math.sqrt(max(relative, 1.0))
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
            if drop < -_FLOOR:
                break
            total += math.exp(drop)
    return math.log(total * step) - top


@compiled
def y_of(u: float) -> float:
    """Inverse of u = log(1 + e^y), without overflow or loss of digits."""
    return u if u > 30.0 else math.log(math.expm1(u) + 1e-300)


@compiled
def log_stretched(
    y: float, a: float, root: float, plx: float, err: float, log_scale: float
) -> float:
    """Log of the integrand in y, Jacobian included."""
    u = y + math.log1p(math.exp(-y)) if y > 0.0 else math.log1p(math.exp(y))
    log_u = y if y < -40.0 else math.log(u)  # u is e^y there, and may underflow
    off = (10.0 - (log_u + log_scale) / K - a) / root
    miss = (u * math.exp(log_scale) - plx) / err
    return -0.5 * (off * off + miss * miss) + (y - u) - log_u - math.log(K)


@compiled
def _stretched(a: float, root: float, plx: float, err: float) -> float:
    """Log of the integral of both exponentials over mu, whatever the star."""
    unit = K * root
    log_scale = math.log(err / unit)
    scale = err / unit
    by_magnitude = y_of(math.exp(min(K * (10.0 - a), 600.0)) / scale)
    by_parallax = y_of(max(plx, 0.5 * err) / scale)
    low = min(by_magnitude, by_parallax) - _REACH * unit
    high = max(by_magnitude, by_parallax) + _REACH * unit
    if high - low > _WIDEST * unit:
        low, high = _narrowed(low, high, a, root, plx, err, log_scale)
    pulled = max(1.0, 1.0 - 0.35 * unit * plx / err)  # a negative parallax bends more sharply
    count = min(max(math.ceil((high - low) / (_STEP * unit) * pulled), 16), _MOST_NODES)
    step = (high - low) / count
    peak, total = -math.inf, 0.0
    for node in range(count + 1):
        value = log_stretched(low + node * step, a, root, plx, err, log_scale)
        if value > peak:
            total = total * math.exp(peak - value) + 1.0
            peak = value
        elif value > peak - 60.0:
            total += math.exp(value - peak)
    return peak + math.log(total * step)


@compiled
def _narrowed(
    low: float,
    high: float,
    a: float,
    root: float,
    plx: float,
    err: float,
    log_scale: float,
) -> tuple[float, float]:
    """The part of a wide range that holds all that is within `_DEPTH` of the peak."""
    for _ in range(60):  # a range of 1e40 widths, met while a mode is sought, takes 30
        step = (high - low) / 64.0
        peak = -math.inf
        for node in range(65):
            peak = max(peak, log_stretched(low + node * step, a, root, plx, err, log_scale))
        first, last = 64, 0
        for node in range(65):
            value = log_stretched(low + node * step, a, root, plx, err, log_scale)
            if value >= peak - _DEPTH:
                first, last = min(first, node), max(last, node)
        new_low = low + max(first - 1, 0) * step
        new_high = low + min(last + 1, 64) * step
        done = new_high - new_low > 0.5 * (high - low)
        low, high = new_low, new_high
        if done:
            break
    return low, high


@compiled
def _star(a: float, v: float, plx: float, err: float, tilt: float) -> float:
    shifted = a + tilt * v
    value = _narrow(shifted, v, plx, err)
    if math.isnan(value):
        value = _stretched(shifted, math.sqrt(v), plx, err)
    return value + tilt * (a + 0.5 * tilt * v) - 0.5 * math.log(v) - math.log(err) - LOG_2PI


@compiled
def _fill(
    result: FloatArray,
    distance_like: FloatArray,
    variance: FloatArray,
    parallax: FloatArray,
    error: FloatArray,
    tilt: float,
) -> None:
    for draw in range(result.shape[0]):
        for star in range(result.shape[1]):
            result[draw, star] = _star(
                distance_like[draw, star],
                variance[draw, star],
                parallax[draw, star],
                error[draw, star],
                tilt,
            )


def log_parallax_integrals(
    distance_like: FloatArray,
    variance: FloatArray,
    parallax: FloatArray,
    error: FloatArray,
    tilt: float = 0.0,
) -> FloatArray:
    """Log of L for every draw and star.

    Parameters
    ----------
    distance_like : array, shape (b, n)
        Apparent minus absolute magnitude, a [mag].
    variance : array, shape (b, n) or what broadcasts to it
        Measurement plus intrinsic variance of a [mag^2], above zero.
    parallax, error : array, shape (b, n) or what broadcasts to it
        Parallax less its offset, and its error [mas].
    tilt : float
        The distance prior is exp(tilt mu), not normalised [1/mag].

    Returns
    -------
    array, shape (b, n)
        Accurate to about 2e-7 (absolute, in the log); the same on any number of
        threads.
    """
    shape = distance_like.shape
    inputs = [_written_out(values, shape) for values in (distance_like, variance, parallax, error)]
    result = np.empty(shape)

    def part(start: int, stop: int) -> None:
        a, v, plx, err = (values[start:stop] for values in inputs)
        _fill(result[start:stop], a, v, plx, err, tilt)

    in_halves(part, len(result), work=result.size)
    return result


def _written_out(values: FloatArray, shape: tuple[int, ...]) -> FloatArray:
    """The values at full shape in one memory layout, so that one compiled version serves all."""
    if values.shape == shape and values.flags.c_contiguous and values.flags.writeable:
        return values
    return np.array(np.broadcast_to(values, shape), dtype=float, order="C")
