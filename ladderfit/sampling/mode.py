"""Modes of a log density of few dimensions, by Newton steps with a line search.

Gradient and curvature come from central differences, all evaluated in one
vectorised call; the step is the best of a fan of lengths, so that it can neither
overshoot nor stall on a curvature of the wrong sign.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]
LogDensity = Callable[[FloatArray], FloatArray]

_FAN = np.array([0.02, 0.1, 0.3, 0.6, 1.0, 1.5])
_LONGEST = 10.0  # of the scale given, for one step in any direction
_DIFFERENCE = 0.05  # of the current width, for central differences


@dataclass(frozen=True)
class Mode:
    """A local maximum.

    Attributes
    ----------
    point : array, shape (d,)
    log_density : float
    covariance : array, shape (d, d)
        Inverse of the curvature of minus the log density.
    converged : bool
    """

    point: FloatArray
    log_density: float
    covariance: FloatArray
    converged: bool

    @property
    def log_mass(self) -> float:
        """Log of the integral in the Gaussian approximation."""
        _, logdet = np.linalg.slogdet(self.covariance)
        constant = len(self.point) * math.log(2.0 * math.pi)
        return self.log_density + 0.5 * (float(logdet) + constant)


def find_mode(
    log_density: LogDensity, start: FloatArray, scale: FloatArray, steps: int = 60
) -> Mode:
    """Climb from `start` to a local maximum.

    Parameters
    ----------
    log_density : callable
        Maps shape (b, d) to (b,).
    start, scale : array, shape (d,)
        Starting point, and first guess of the width in each direction.
    steps : int
        Most Newton steps.
    """
    point, width = start.astype(float), scale.astype(float)
    value = float(log_density(point[None, :])[0])
    converged = False
    covariance = np.diag(width**2)
    for _ in range(steps):
        gradient, hessian = derivatives(log_density, point, _DIFFERENCE * width)
        covariance = _covariance(hessian, width)
        step = np.clip(covariance @ gradient, -_LONGEST * scale, _LONGEST * scale)
        square = float(step @ np.linalg.solve(covariance, step))
        length = math.sqrt(max(square, 0.0))
        fan = point + _FAN[:, None] * step
        values = log_density(fan)
        best = int(np.argmax(values))
        if values[best] > value:
            point, value = fan[best], float(values[best])
        new_width = np.clip(np.sqrt(np.diag(covariance)), 0.05 * width, 5.0 * width)
        new_width = np.minimum(new_width, _LONGEST * scale)
        settled = bool(np.all(np.abs(new_width / width - 1.0) < 0.3))
        width = new_width
        if length < 0.02 and settled:
            converged = True
            break
    return Mode(point, value, covariance, converged)


def derivatives(
    log_density: LogDensity, point: FloatArray, step: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Gradient, shape (d,), and Hessian, shape (d, d), by central differences."""
    d = len(point)
    pairs = [(i, j) for i in range(d) for j in range(i)]
    moves = np.diag(step)
    corners = [moves[i] + sign * moves[j] for i, j in pairs for sign in (1.0, -1.0)]
    shifts = np.array([*moves, *(-moves), *corners, *(-c for c in corners), np.zeros(d)])
    values = log_density(point + shifts)
    values = np.where(np.isfinite(values), values, values[-1] - 1e6)
    centre, plus, minus = values[-1], values[:d], values[d : 2 * d]
    gradient = (plus - minus) / (2.0 * step)
    hessian = np.diag((plus + minus - 2.0 * centre) / step**2)
    there, back = values[2 * d : 2 * d + len(corners)], values[2 * d + len(corners) : -1]
    both = there + back
    for place, (i, j) in enumerate(pairs):
        mixed = (both[2 * place] - both[2 * place + 1]) / (4.0 * step[i] * step[j])
        hessian[i, j] = hessian[j, i] = mixed
    return gradient, hessian


def _covariance(hessian: FloatArray, width: FloatArray) -> FloatArray:
    """Inverse of minus the Hessian, directions of the wrong curvature mirrored or capped."""
    scaled = -hessian * np.outer(width, width)
    scaled = np.nan_to_num(scaled, nan=0.0, posinf=1e6, neginf=-1e6)
    size, vectors = np.linalg.eigh(0.5 * (scaled + scaled.T))
    size = np.maximum(np.abs(size), 0.01)
    inverse = (vectors / size) @ vectors.T
    return np.asarray(inverse * np.outer(width, width))
