"""The parallax integral in plain numpy: the slower, simpler reference for the compiled kernel.

One rule for every star: the trapezoidal rule in the stretched coordinate that
ladderfit/kernels/quadrature.py describes, with more nodes.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]

K = float(np.log(10.0) / 5.0)
LOG_2PI = float(np.log(2.0 * np.pi))

_REACH = 7.0  # widths beyond the outer of the two peaks; leaves out less than 1e-10
_STEP = 0.6  # widths between nodes
_WIDEST = 24.0  # widths between the peaks up to which the range is taken as it is
_DEPTH = 60.0  # a scanned range is narrowed to where the log integrand is this near its peak


def log_parallax_integral(
    distance_like: FloatArray,
    variance: FloatArray,
    parallax: FloatArray,
    parallax_error: FloatArray,
    tilt: float = 0.0,
) -> FloatArray:
    """Log of L for every element of the broadcast arguments.

    Parameters
    ----------
    distance_like : array
        Apparent minus absolute magnitude, a [mag].
    variance : array
        Measurement plus intrinsic variance of a [mag^2], above zero.
    parallax, parallax_error : array
        Parallax less its offset, and its error [mas].
    tilt : float
        The distance prior is exp(tilt mu), not normalised [1/mag].

    Returns
    -------
    array
        Accurate to about 1e-8 (absolute, in the log).
    """
    a, v, plx, err = np.broadcast_arrays(distance_like, variance, parallax, parallax_error)
    shape = a.shape
    a, v, plx, err = (np.ascontiguousarray(part, dtype=float).ravel() for part in (a, v, plx, err))
    shifted = a + tilt * v
    root = np.sqrt(v)
    constant = tilt * (a + 0.5 * tilt * v) - 0.5 * np.log(v) - np.log(err) - LOG_2PI
    integrand = _Integrand(shifted, root, plx, err)
    low, high = integrand.range()
    width = (high - low) / (K * root)
    wide = np.flatnonzero(width > _WIDEST + 2.0 * _REACH)
    if len(wide):
        low[wide], high[wide] = integrand.take(wide).narrowed(low[wide], high[wide])
        width[wide] = (high[wide] - low[wide]) / (K * root[wide])
    result = np.empty(len(a))
    nodes = np.maximum(np.ceil(width / _STEP), 24.0)
    classes = np.ceil(np.log(nodes / 24.0) / np.log(1.25)).astype(int)
    for level in np.unique(classes):
        chosen = np.flatnonzero(classes == level)
        count = int(np.ceil(24.0 * 1.25**level))
        result[chosen] = _trapezoid(integrand, chosen, low, high, count)
    return np.asarray((result + constant).reshape(shape))


class _Integrand:
    """The log integrand in y, for a list of (star, draw) pairs."""

    def __init__(self, a: FloatArray, root: FloatArray, plx: FloatArray, err: FloatArray) -> None:
        self.a, self.root, self.plx, self.err = a, root, plx, err
        self.scale = err / (K * root)  # parallax per u

    def take(self, chosen: npt.NDArray[np.intp]) -> _Integrand:
        """The same for some of the pairs."""
        return _Integrand(self.a[chosen], self.root[chosen], self.plx[chosen], self.err[chosen])

    def range(self) -> tuple[FloatArray, FloatArray]:
        """From beyond the outer peaks of the two factors, in y."""
        reach = _REACH * K * self.root
        by_magnitude = _y_of(np.exp(K * (10.0 - self.a)) / self.scale)
        by_parallax = _y_of(np.maximum(self.plx, 0.5 * self.err) / self.scale)
        return (
            np.minimum(by_magnitude, by_parallax) - reach,
            np.maximum(by_magnitude, by_parallax) + reach,
        )

    def log(self, y: FloatArray) -> FloatArray:
        """Log of the integrand in y (Jacobian included), shape (nodes, pairs)."""
        u = np.logaddexp(0.0, y)
        log_u = np.log(u)
        mu = 10.0 - (log_u + np.log(self.scale)) / K
        from_magnitude = (mu - self.a) / self.root
        from_parallax = (u * self.scale - self.plx) / self.err
        jacobian = (y - u) - log_u - np.log(K)
        return -0.5 * (from_magnitude**2 + from_parallax**2) + jacobian

    def narrowed(self, low: FloatArray, high: FloatArray) -> tuple[FloatArray, FloatArray]:
        """A range that holds all that is within `_DEPTH` of the peak, by repeated scans."""
        steps = np.linspace(0.0, 1.0, 65)[:, None]
        for _ in range(12):
            y = low + steps * (high - low)
            value = self.log(y)
            inside = value >= value.max(axis=0) - _DEPTH
            first = np.argmax(inside, axis=0)
            last = len(steps) - 1 - np.argmax(inside[::-1], axis=0)
            pair = np.arange(len(low))
            new_low = y[np.maximum(first - 1, 0), pair]
            new_high = y[np.minimum(last + 1, len(steps) - 1), pair]
            done = np.all((new_high - new_low) > 0.5 * (high - low))
            low, high = new_low, new_high
            if done:
                break
        return low, high


def _y_of(u: FloatArray) -> FloatArray:
    """Inverse of u = log(1 + e^y), without overflow or loss of digits."""
    return np.where(u > 30.0, u, np.log(np.expm1(np.minimum(u, 30.0)) + 1e-300))


def _trapezoid(
    integrand: _Integrand,
    chosen: npt.NDArray[np.intp],
    low: FloatArray,
    high: FloatArray,
    count: int,
) -> FloatArray:
    """Log of the trapezoidal sum with `count` nodes, in blocks that stay in cache."""
    result = np.empty(len(chosen))
    grid = np.arange(count)[:, None]
    block = max(1, 200_000 // count)
    for start in range(0, len(chosen), block):
        part = chosen[start : start + block]
        step = (high[part] - low[part]) / (count - 1)
        value = integrand.take(part).log(low[part] + grid * step)
        peak = value.max(axis=0)
        total = np.exp(value - peak).sum(axis=0)
        result[start : start + block] = peak + np.log(total) + np.log(step)
    return result
