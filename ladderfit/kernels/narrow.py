r"""Integrals over the modulus of well-measured stars, a row of stars at a time; compiled.

Where the product of a star's two normals is narrower than a sixth of a magnitude it
is nearly a normal itself.  Its peak is found by Newton steps; a quadratic change of
variable, mu = peak + width (x + c x^2), takes out its skewness; and nine Gauss-Hermite
nodes in x leave less than 1e-8.  There are no branches and, but for one exponential
and one logarithm a star, no library calls, so that the loops over stars run several at
a time on any processor.  Stars to which this does not apply come back as NaN.
"""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from ladderfit.kernels.compiling import compiled_fused

FloatArray = npt.NDArray[np.float64]

K = math.log(10.0) / 5.0

_WIDEST = 0.17  # mag: width of the product up to which this way is taken
_LONGEST = 0.5  # mag: longest Newton step
_SETTLED = 0.2  # of the width: a Newton step small enough to be the last
_STEPS = 8
_LEAST_BENT, _MOST_BENT = 0.4, 2.5  # curvature at the peak over that of two normals
_FAR_OFF = 1.5  # of the log integrand from a normal, beyond which the series for exp fails

_ALL_NODES, _ALL_WEIGHTS = np.polynomial.hermite_e.hermegauss(9)
_NODES = np.concatenate([_ALL_NODES[:4], _ALL_NODES[5:]])
_WEIGHTS = np.concatenate([_ALL_WEIGHTS[:4], _ALL_WEIGHTS[5:]])
_MIDDLE = float(_ALL_WEIGHTS[4])

SCRATCH = 9  # rows of the scratch array


@compiled_fused
def _exp_less_one(y: float) -> float:
    """exp(y) - 1 by its series to y^11, for |y| of order one."""
    y2 = y * y
    y4 = y2 * y2
    first = 0.5 + y * (1.0 / 6.0) + y2 * (1.0 / 24.0 + y * (1.0 / 120.0))
    second = 1.0 / 720.0 + y * (1.0 / 5040.0) + y2 * (1.0 / 40320.0 + y * (1.0 / 362880.0))
    third = 1.0 / 3628800.0 + y * (1.0 / 39916800.0)
    return y + y2 * (first + y4 * (second + y4 * third))


@compiled_fused
def _climb(
    mu: FloatArray,
    parallax: FloatArray,
    curvature: FloatArray,
    step: FloatArray,
    shifted: FloatArray,
    per_mag: FloatArray,
    per_plx: FloatArray,
    plx: FloatArray,
) -> None:
    """Take every `mu` and its parallax to the peak, together; fills the first four arguments."""
    n = len(mu)
    for i in range(n):
        mu[i] = shifted[i]
        parallax[i] = math.exp(K * (10.0 - mu[i]))
    for _ in range(_STEPS):
        moving = 0
        for i in range(n):
            pull = K * parallax[i]
            bent = per_mag[i] + pull * pull * per_plx[i]
            push = (shifted[i] - mu[i]) * per_mag[i] + pull * (parallax[i] - plx[i]) * per_plx[i]
            move = min(max(push / bent, -_LONGEST), _LONGEST)
            mu[i] += move
            parallax[i] += parallax[i] * _exp_less_one(-K * move)
            curvature[i], step[i] = bent, move
            moving += 0 if move * move * bent < _SETTLED * _SETTLED else 1
        if moving == 0:
            break


@compiled_fused
def _add_nodes(
    total: FloatArray,
    farthest: FloatArray,
    mu: FloatArray,
    parallax: FloatArray,
    width: FloatArray,
    bend: FloatArray,
    shifted: FloatArray,
    per_mag: FloatArray,
    per_plx: FloatArray,
    plx: FloatArray,
) -> None:
    """Sum the nodes up, relative to the peak; and how far the integrand is from a normal."""
    n = len(mu)
    for i in range(n):
        total[i], farthest[i] = _MIDDLE, 0.0
    for node in range(len(_NODES)):
        x, weight = _NODES[node], _WEIGHTS[node]
        for i in range(n):
            off, miss = mu[i] - shifted[i], parallax[i] - plx[i]
            shift = width[i] * x * (1.0 + bend[i] * x)
            far = parallax[i] * _exp_less_one(-K * shift)
            drop = shift * (off + 0.5 * shift) * per_mag[i]
            drop += far * (miss + 0.5 * far) * per_plx[i]
            rest = 0.5 * x * x - drop
            total[i] += weight * (1.0 + 2.0 * bend[i] * x) * (1.0 + _exp_less_one(rest))
            farthest[i] = max(farthest[i], abs(rest))


@compiled_fused
def narrow_row(
    result: FloatArray,
    a: FloatArray,
    v: FloatArray,
    plx: FloatArray,
    err: FloatArray,
    tilt: float,
    scratch: FloatArray,
) -> None:
    """Fill `result` with log L of `ladderfit.kernels.quadrature`; NaN where this way fails.

    Parameters
    ----------
    result, a, v, plx, err : array, shape (n,)
        As there.
    tilt : float
    scratch : array, shape (SCRATCH, n)
        Overwritten.
    """
    shifted, per_mag, per_plx, mu, parallax = (
        scratch[0],
        scratch[1],
        scratch[2],
        scratch[3],
        scratch[4],
    )
    curvature, width, bend, total = scratch[5], scratch[6], scratch[7], scratch[8]
    n = len(a)
    for i in range(n):
        shifted[i] = a[i] + tilt * v[i]
        per_mag[i] = 1.0 / v[i]
        per_plx[i] = 1.0 / (err[i] * err[i])
    _climb(mu, parallax, curvature, width, shifted, per_mag, per_plx, plx)
    for i in range(n):
        step = width[i]
        bent = per_mag[i] + K * K * parallax[i] * (2.0 * parallax[i] - plx[i]) * per_plx[i]
        fits = (
            (step * step * curvature[i] < _SETTLED * _SETTLED)
            & (bent > _LEAST_BENT * curvature[i])
            & (bent < _MOST_BENT * curvature[i])
            & (bent * _WIDEST * _WIDEST > 1.0)
        )
        width[i] = 1.0 / math.sqrt(bent) if fits else math.nan
        third = K * K * K * parallax[i] * (4.0 * parallax[i] - plx[i]) * per_plx[i]
        bend[i] = third * width[i] * width[i] * width[i] / 6.0
    farthest = curvature
    _add_nodes(total, farthest, mu, parallax, width, bend, shifted, per_mag, per_plx, plx)
    for i in range(n):
        off, miss = mu[i] - shifted[i], parallax[i] - plx[i]
        top = 0.5 * (off * off * per_mag[i] + miss * miss * per_plx[i])
        size = total[i] * width[i] * math.sqrt(per_mag[i] * per_plx[i]) / (2.0 * math.pi)
        value = math.log(size) - top + tilt * (a[i] + 0.5 * tilt * v[i])
        result[i] = value if farthest[i] < _FAR_OFF else math.nan
