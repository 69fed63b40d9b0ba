"""The Gaussian part of a posterior at given draws of phi, ready to lose some of its rows."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from functools import partial

import numpy as np

from ladderfit.kernels.arrow import LOG_2PI, Moments, Solution, solve
from ladderfit.kernels.downdate import leave_out, log_predictive
from ladderfit.posterior.joint import Posterior
from ladderfit.result import Result
from ladderfit.samples import FloatArray, IntArray
from ladderfit.units import LN10

TARGETS = ("zero_point", "slope", "peak_magnitude", "hubble_constant")
_PER_MAG = 0.2 * LN10


@dataclass(frozen=True, eq=False)
class Taken:
    """What n objects do, each taken out alone, at s draws of phi.

    Attributes
    ----------
    log_predictive : array, shape (s, n)
        Log density of each object's data given all other data and phi.
    expected : mapping of str to array, shape (s, n)
        By target, its mean given phi and all other data, in the target's unit.
    """

    log_predictive: FloatArray
    expected: Mapping[str, FloatArray]


class Given:
    """A posterior at given draws of phi.

    Parameters
    ----------
    joint : Posterior
    z : array, shape (s, d)
        Draws of phi, in coordinates.
    targets : sequence of str
        Parameters whose means are followed.

    Attributes
    ----------
    base : mapping of str to array, shape (s,)
        Mean of every target given phi and all data.
    """

    def __init__(self, joint: Posterior, z: FloatArray, targets: Sequence[str] = TARGETS) -> None:
        self.joint, self.z = joint, z
        self.value = partial(joint.split.value, z=z)
        self.solution = joint.solution(z)
        parts = joint.split
        known = {*parts.coefficients, *parts.phi_names, *parts.fixed}
        self.targets = tuple(name for name in targets if name in known)
        free = self.solution.free.tolist()
        self.place = {
            name: free.index(parts.coefficients.index(name))
            for name in self.targets
            if name in parts.theta
        }
        self._white = self._solved_targets(len(free))
        self.locals = _Locals(self.solution)
        self.base = self.expectations(self.solution)

    def _solved_targets(self, width: int) -> FloatArray:
        factor = self.solution.factor
        unit = np.zeros((len(factor), width, len(self.place)))
        for column, place in enumerate(self.place.values()):
            unit[:, place, column] = 1.0
        return np.ascontiguousarray(np.swapaxes(np.linalg.solve(factor, unit), 1, 2))

    def expectations(self, solution: Solution) -> dict[str, FloatArray]:
        """Mean of every target given phi, shape (s,), from a solution of this system."""
        inverse = np.linalg.inv(solution.factor)
        found = {}
        for name in self.targets:
            if name not in self.place:
                found[name] = self.value(name)
                continue
            place = self.place[name]
            variance = np.sum(inverse[:, :, place] ** 2, axis=1)
            found[name] = self._natural(name, solution.mean[:, place], variance)
        return found

    def _natural(self, name: str, mean: FloatArray, variance: FloatArray) -> FloatArray:
        """Mean of a parameter whose coefficient is normal."""
        if name in self.joint.split.logarithmic:
            return np.asarray(np.exp(_PER_MAG * mean + 0.5 * _PER_MAG**2 * variance))
        return mean

    def rows_out(
        self,
        columns: FloatArray,
        variance: FloatArray,
        host: IntArray,
        weights: FloatArray | None = None,
    ) -> Taken:
        """Take out independent rows, each alone.

        Parameters
        ----------
        columns : array, shape (n, k + 1) or (s, n, k + 1)
            [X, y] in the frame.
        variance : array, shape (s, n)
        host : array of int, shape (n,)
            -1 where a row has no local.
        weights : array, shape (s, n, m), optional
            Of the coupled hosts' locals, in place of `host`.
        """
        residual, left, covariance = self.fitted(columns, variance, host, weights)
        return Taken(
            log_predictive(residual, variance, left), self._moved(residual, left, covariance)
        )

    def fitted(
        self,
        columns: FloatArray,
        variance: FloatArray,
        host: IntArray,
        weights: FloatArray | None = None,
    ) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Residual of each row, what the fit leaves of its variance, covariances with targets.

        Arguments are those of `rows_out`.  The other rows miss the row's datum by
        residual v / left, with variance v^2 / left.

        Returns
        -------
        residual, left : array, shape (s, n)
        covariance : array, shape (s, n, t)
        """
        free, batch = self.solution.free, len(self.z)
        whole = np.broadcast_to(columns, (batch, *columns.shape[-2:]))
        fitted = np.einsum("snk,sk->sn", whole[..., :-1], self.solution.coefficients)
        residual = whole[..., -1] - fitted
        rows, room = whole[..., free], variance
        if weights is not None:
            rows, residual, room = self.locals.spread(weights, rows, residual, room)
        else:
            rows, residual, room = self.locals.single(host, rows, residual, room)
        left = np.empty(variance.shape)
        covariance = np.empty((*variance.shape, len(self.place)))
        leave_out(
            self.solution.factor,
            self._white,
            np.ascontiguousarray(rows),
            np.ascontiguousarray(room),
            left,
            covariance,
        )
        return residual, left, covariance

    def _moved(
        self, residual: FloatArray, left: FloatArray, covariance: FloatArray
    ) -> dict[str, FloatArray]:
        moved = {}
        for name in self.targets:
            if name not in self.place:
                moved[name] = np.broadcast_to(self.value(name)[:, None], residual.shape)
                continue
            column = list(self.place).index(name)
            own = covariance[:, :, column]
            mean = self.solution.mean[:, self.place[name], None] - own * residual / left
            spread = np.sum(self._white[:, column] ** 2, axis=1)[:, None] + own**2 / left
            moved[name] = self._natural(name, mean, spread)
        return moved

    def replaced(self, total: Moments) -> Taken:
        """One object out, from the moments of all the others; n is 1."""
        known = self.joint.split.known
        changed = solve(total, known, self.joint.split.known_values(self.z))
        expected = {name: value[:, None] for name, value in self.expectations(changed).items()}
        gain = self.solution.log_evidence - changed.log_evidence
        return Taken(gain[:, None], expected)

    def unchanged(self, log_density: FloatArray) -> Taken:
        """Objects that only phi depends on; `log_density` has shape (s, n)."""
        shape = log_density.shape
        expected = {
            name: np.broadcast_to(value[:, None], shape) for name, value in self.base.items()
        }
        return Taken(log_density, expected)


class _Locals:
    """Locals given the globals: variances, what they take of the globals, and their means."""

    def __init__(self, solution: Solution) -> None:
        moments, free = solution.moments, solution.free
        self.coupled = moments.coupled
        linear = moments.cross[:, :, -1] - np.einsum(
            "shk,sk->sh", moments.cross[:, :, :-1], solution.coefficients
        )
        with np.errstate(divide="ignore", invalid="ignore"):
            self.variance = 1.0 / moments.local
            self.pull = moments.cross[:, :, free] * self.variance[:, :, None]
            self.mean = linear * self.variance
        self.inverse: FloatArray | None = None
        if self.coupled is None or moments.coupling is None:
            return
        precision = moments.coupling.copy()
        at = np.arange(len(self.coupled))
        precision[:, at, at] += moments.local[:, self.coupled]
        inverse = np.asarray(np.linalg.inv(precision))
        self.inverse = inverse
        self.variance[:, self.coupled] = inverse[:, at, at]
        self.pull[:, self.coupled] = inverse @ moments.cross[:, self.coupled][..., free]
        self.mean[:, self.coupled] = (inverse @ linear[:, self.coupled, None])[..., 0]

    def single(
        self, host: IntArray, rows: FloatArray, residual: FloatArray, room: FloatArray
    ) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Rows of one local each, or of none, with the locals eliminated."""
        if np.all(host < 0):
            return rows, residual, room
        inside = (host >= 0).astype(float)
        return (
            rows - self.pull[:, host] * inside[:, None],
            residual - self.mean[:, host] * inside,
            room - self.variance[:, host] * inside,
        )

    def spread(
        self, weights: FloatArray, rows: FloatArray, residual: FloatArray, room: FloatArray
    ) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Rows that are combinations of the coupled locals, shape (s, n, m)."""
        if self.inverse is None or self.coupled is None:
            raise ValueError("no hosts are coupled")
        taken = np.einsum("snm,snm->sn", weights @ self.inverse, weights)
        return (
            rows - weights @ self.pull[:, self.coupled],
            residual - (weights @ self.mean[:, self.coupled, None])[..., 0],
            room - taken,
        )


def less_rows(total: Moments, host: int, columns: FloatArray, variance: FloatArray) -> Moments:
    """Moments without some independent rows of one host (or of none, -1).

    Parameters
    ----------
    total : Moments
    host : int
    columns : array, shape (n, k + 1)
    variance : array, shape (s, n)
    """
    weight = 1.0 / variance
    weighted = weight[:, :, None] * columns
    square = total.square - np.swapaxes(weighted, 1, 2) @ columns
    constant = total.constant + 0.5 * np.sum(np.log(variance) + LOG_2PI, axis=1)
    if host < 0:
        return replace(total, square=square, constant=constant)
    local, cross = total.local.copy(), total.cross.copy()
    local[:, host] -= weight.sum(axis=1)
    cross[:, host] -= weighted.sum(axis=1)
    return replace(total, local=local, cross=cross, square=square, constant=constant)


def without_host(total: Moments, host: int) -> Moments:
    """Moments of a system that no longer has this host, which has no rows left."""
    coupled, coupling = total.coupled, total.coupling
    if coupled is not None and coupling is not None:
        stay = coupled != host
        coupling = coupling[:, stay][:, :, stay]
        coupled = coupled[stay] - (coupled[stay] > host)
        if not len(coupled):
            coupled = coupling = None
    return replace(
        total,
        local=np.delete(total.local, host, axis=1),
        cross=np.delete(total.cross, host, axis=1),
        coupling=coupling,
        coupled=coupled,
    )


def coordinates(joint: Posterior, result: Result, most: int) -> FloatArray:
    """The result's draws of phi in coordinates, evenly thinned to at most `most` of them."""
    step = max(1, -(-result.size // most))
    columns = [
        [c.coordinate(float(value)) for value in result.draws[c.name][::step]]
        for c in joint.split.phi
    ]
    size = len(range(0, result.size, step))
    return np.array(columns, dtype=float).T if columns else np.empty((size, 0))
