r"""A parallax star's own modulus, integrated out; compiled.

For a star of apparent magnitude m and absolute magnitude M, with a = m - M,

    L = \int exp(tilt mu) N(a | mu, v) N(plx | 10^(2 - 0.2 mu), s^2) d mu ,

one dimension per star and per draw.  A bright star's parallax pins mu far more
tightly than its magnitude does, a faint one's hardly at all, so nodes laid over
either factor alone fail.

*Narrow.*  Where the product is narrower than a sixth of a magnitude it is close
to a normal: Gauss-Hermite nodes lie on its own peak (`ladderfit.kernels.narrow`).

*Stretched.*  Otherwise the trapezoidal rule, which converges geometrically for
smooth integrands that vanish at both ends, in a coordinate y in which both
factors have unit width at every distance,

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
from ladderfit.kernels.narrow import SCRATCH, K, narrow_row

FloatArray = npt.NDArray[np.float64]

LOG_2PI = math.log(2.0 * math.pi)

_REACH = 6.0  # stretched: widths beyond the outer of the two peaks
_STEP = 0.75  # stretched: widths between nodes
_WIDEST = 40.0  # stretched: widths between the peaks beyond which the range is scanned
_MOST_NODES = 4000  # reached only where a scatter of many magnitudes meets a negative parallax
_DEPTH = 40.0  # a scanned range is narrowed to where the log integrand is this near its peak


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
def _fill(
    result: FloatArray,
    distance_like: FloatArray,
    variance: FloatArray,
    parallax: FloatArray,
    error: FloatArray,
    tilt: float,
) -> None:
    scratch = np.empty((SCRATCH, result.shape[1]))
    for draw in range(result.shape[0]):
        a, v, plx, err = distance_like[draw], variance[draw], parallax[draw], error[draw]
        narrow_row(result[draw], a, v, plx, err, tilt, scratch)
        for star in range(result.shape[1]):
            if math.isnan(result[draw, star]):
                shifted = a[star] + tilt * v[star]
                value = _stretched(shifted, math.sqrt(v[star]), plx[star], err[star])
                value += tilt * (a[star] + 0.5 * tilt * v[star])
                result[draw, star] = value - 0.5 * math.log(v[star]) - math.log(err[star]) - LOG_2PI


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
