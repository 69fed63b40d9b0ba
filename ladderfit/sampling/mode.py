"""Modes of a log density of few dimensions, by Newton steps with a line search.

Gradient and curvature come from central differences, all evaluated in one
vectorised call for all ascents; the step is the best of a fan of lengths, so that it can neither
overshoot nor stall on a curvature of the wrong sign.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]
LogDensity = Callable[[FloatArray], FloatArray]

_FAN = np.array([0.02, 0.1, 0.3, 0.6, 1.0, 1.5])
_LONGEST = 10.0  # of the scale given, for one step in any direction
_MEETING = 1.0  # widths between two ascents, by the curvature at both, that have met
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


def find_modes_from(
    log_density: LogDensity, starts: FloatArray, scale: FloatArray, steps: int = 60
) -> list[Mode]:
    """Climb from each start to a local maximum, all of them in the same calls.

    Of two climbs that meet, the lower one ends there; every other one returns a mode.

    Parameters
    ----------
    log_density : callable
        Maps shape (b, d) to (b,).
    starts : array, shape (s, d)
    scale : array, shape (d,)
        First guess of the width in each direction.
    steps : int
        Most Newton steps.
    """
    values = log_density(starts)
    climbs = [
        _Climb(start.astype(float), float(value), scale.astype(float), scale)
        for start, value in zip(starts, values, strict=True)
    ]
    for _ in range(steps):
        left = [climb for climb in climbs if not climb.converged]
        if not left:
            break
        stencils = _apart(log_density, [climb.stencil() for climb in left])
        fans = [climb.fan(found) for climb, found in zip(left, stencils, strict=True)]
        for climb, fan, found in zip(left, fans, _apart(log_density, fans), strict=True):
            climb.move(fan, found)
        climbs = _parted(climbs)
    return [Mode(c.point, c.value, c.covariance, c.converged) for c in climbs]


@dataclass
class _Climb:
    """One ascent: where it is, how wide the density seems there, whether it has arrived."""

    point: FloatArray
    value: float
    width: FloatArray
    scale: FloatArray
    converged: bool = False
    covariance: FloatArray = field(init=False)
    length: float = field(init=False)

    def __post_init__(self) -> None:
        self.covariance, self.length = np.diag(self.width**2), math.inf

    def stencil(self) -> FloatArray:
        return stencil(self.point, _DIFFERENCE * self.width)

    def fan(self, values: FloatArray) -> FloatArray:
        """Points along the Newton step that the stencil's values give."""
        gradient, hessian = derivatives(values, _DIFFERENCE * self.width)
        self.covariance = _covariance(hessian, self.width)
        longest = _LONGEST * self.scale
        step = np.clip(self.covariance @ gradient, -longest, longest)
        square = float(step @ np.linalg.solve(self.covariance, step))
        self.length = math.sqrt(max(square, 0.0))
        return self.point + _FAN[:, None] * step

    def move(self, fan: FloatArray, values: FloatArray) -> None:
        """Go to the best point of the fan, and see whether that is the top."""
        best = int(np.argmax(values))
        if values[best] > self.value:
            self.point, self.value = fan[best], float(values[best])
        seen = np.sqrt(np.diag(self.covariance))
        width = np.clip(seen, 0.05 * self.width, 5.0 * self.width)
        width = np.minimum(width, _LONGEST * self.scale)
        settled = bool(np.all(np.abs(width / self.width - 1.0) < 0.3))
        self.width = width
        self.converged = self.length < 0.02 and settled


def _parted(climbs: list[_Climb]) -> list[_Climb]:
    """The climbs, the highest of those that have met alone."""
    kept: list[_Climb] = []
    for climb in sorted(climbs, key=lambda climb: -climb.value):
        if not any(_met(climb, other) for other in kept):
            kept.append(climb)
    return kept


def _met(one: _Climb, other: _Climb) -> bool:
    if abs(one.value - other.value) > 1.0:
        return False
    gap = one.point - other.point
    square = [float(gap @ np.linalg.solve(c.covariance, gap)) for c in (one, other)]
    return max(square) < _MEETING**2


def _apart(log_density: LogDensity, groups: list[FloatArray]) -> list[FloatArray]:
    """The densities of several groups of points, from one call."""
    values = log_density(np.concatenate(groups))
    return np.split(values, np.cumsum([len(group) for group in groups])[:-1])


def stencil(point: FloatArray, step: FloatArray) -> FloatArray:
    """Points for `derivatives`, shape (1 + d + d^2, d): the point, axes, and diagonals."""
    d = len(point)
    moves = np.diag(step)
    first, second = np.tril_indices(d, -1)
    diagonals = moves[first] + moves[second]
    return np.asarray(
        point + np.concatenate([np.zeros((1, d)), moves, -moves, diagonals, -diagonals])
    )


def derivatives(values: FloatArray, step: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Gradient, shape (d,), and Hessian, shape (d, d), by central differences.

    Parameters
    ----------
    values : array, shape (1 + d + d^2,)
        At the points of `stencil`; one that is not finite counts as very low.
    step : array, shape (d,)
    """
    d = len(step)
    values = np.where(np.isfinite(values), values, values[0] - 1e6)
    centre, plus, minus = values[0], values[1 : d + 1], values[d + 1 : 2 * d + 1]
    diagonal = values[2 * d + 1 :].reshape(2, -1).sum(axis=0)
    gradient = (plus - minus) / (2.0 * step)
    bend = plus + minus - 2.0 * centre
    first, second = np.tril_indices(d, -1)
    mixed = 0.5 * (diagonal - 2.0 * centre - bend[first] - bend[second])
    hessian = np.diag(bend)
    hessian[first, second] = hessian[second, first] = mixed
    return gradient, np.asarray(hessian / np.outer(step, step))


def _covariance(hessian: FloatArray, width: FloatArray) -> FloatArray:
    """Inverse of minus the Hessian, directions of the wrong curvature mirrored or capped."""
    scaled = -hessian * np.outer(width, width)
    scaled = np.nan_to_num(scaled, nan=0.0, posinf=1e6, neginf=-1e6)
    size, vectors = np.linalg.eigh(0.5 * (scaled + scaled.T))
    size = np.maximum(np.abs(size), 0.01)
    inverse = (vectors / size) @ vectors.T
    return np.asarray(inverse * np.outer(width, width))
