"""A number of a fit, what it would be without each row, and under resampling of the rows.

Without a clip the answers are closed: deleting row i changes the coefficients by
gain_i r_i / (1 - h_i), exactly while the weights stay, and the spread under
resampling is the jackknife's (Efron & Stein 1981, Annals of Statistics 9, 586).
With a clip, rows that come and go are followed under random exponential weights,
the Bayesian bootstrap (Rubin 1981, Annals of Statistics 9, 130), all at once.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from ladderfit.review.fits import Fit
from ladderfit.review.system import HUBBLE, STARS, SUPERNOVAE
from ladderfit.samples import BoolArray, FloatArray
from ladderfit.units import LN10

_REPLICATES = 300
_CELLS = 1_000_000  # of the array of weights
_SINGLE = 1e-9
_LEAST_SCATTER = 1e-3  # mag: below this the slope of t with t^2 is cut off
_CLIP_ROUNDS = 40
_RIDGE = 1e-12


@dataclass(frozen=True)
class Wanted:
    """Which number of a fit is meant: a sum of coefficients, or the stars' scatter.

    The intrinsic scatter is known to fits with weights from errors and scatter alone.

    A sum that contains `HUBBLE` stands for the Hubble constant itself.
    """

    coefficients: Mapping[str, float] = field(default_factory=dict)
    scatter: bool = False
    intrinsic: bool = False


@dataclass(frozen=True, eq=False)
class Estimate:
    """A number with its errors.

    Attributes
    ----------
    value : float
    error : float
        Standard error by the method's own formula.
    spread : float
        Standard deviation under resampling of the same objects.
    stars : int
    gaps : array, shape (kept,)
        Value less the value without each row, the clip not repeated.
    deviations : array, shape (replicates,)
        Of resampled values; the same weights for every fit to one table, so that
        differences of fits can be paired.
    """

    value: float
    error: float
    spread: float
    stars: int
    gaps: FloatArray
    deviations: FloatArray


class Resampling:
    """Random weights for every object of the tables, drawn once.

    Parameters
    ----------
    objects : int
        Their number, with object 0 for rows that are none and keep the weight 1.
    seed : int
    """

    def __init__(self, objects: int, seed: int = 1) -> None:
        n = objects
        self.count = int(np.clip(_CELLS // max(n, 1), 40, _REPLICATES))
        rng = np.random.default_rng(seed)
        self.weights = rng.standard_exponential((self.count, n))
        self.weights[:, 0] = 1.0
        self._clips: dict[int, tuple[Fit, _Clips]] = {}

    def estimate(self, fit: Fit, wanted: Wanted) -> Estimate | None:
        """A number of a fit; None where the rows do not determine it."""
        found = number(fit, wanted)
        if found is None:
            return None
        value, error, gaps = found
        weights = self.weights[:, fit.used.row]
        if fit.treatment.clip is None:
            taken = _resampled(fit)
            n = int(np.sum(taken))
            spread = float(np.sqrt((n - 1) * np.var(gaps[taken]))) if n > 1 else float("nan")
            return Estimate(value, error, spread, fit.stars, gaps, (weights - 1.0) @ gaps)
        deviations = self._clipped(fit, wanted) - value
        deviations -= np.mean(deviations)
        n = max(fit.stars, 2)
        deviations *= np.sqrt(n / max(fit.freedom, 1.0))
        return Estimate(value, error, float(np.std(deviations)), fit.stars, gaps, deviations)

    def _clipped(self, fit: Fit, wanted: Wanted) -> FloatArray:
        """Values of fits with random weights, the clip repeated in each."""
        if id(fit) not in self._clips:  # the fit is held, so that its id stays its own
            self._clips[id(fit)] = (fit, _Clips(fit, self.weights[:, fit.system.row]))
        return self._clips[id(fit)][1].numbers(wanted)


def _resampled(fit: Fit) -> BoolArray:
    group = fit.used.group
    return np.asarray((group == STARS) | (group == SUPERNOVAE))


def number(fit: Fit, wanted: Wanted) -> tuple[float, float, FloatArray] | None:
    """Value, error and gaps of a number; None where the rows do not determine it."""
    if wanted.scatter:
        return _intrinsic(fit) if wanted.intrinsic else _scatter(fit)
    fixed = fit.system.fixed
    free = {name: c for name, c in wanted.coefficients.items() if name not in fixed}
    constant = sum(c * fixed[name] for name, c in wanted.coefficients.items() if name in fixed)
    if not free:
        return None
    vector = fit.combination(free)
    if vector is None:
        return None
    value = float(vector @ fit.found.values) + constant
    error = float(np.sqrt(vector @ fit.found.covariance @ vector))
    rest = 1.0 - fit.leverage
    pull = np.where(rest > _SINGLE, fit.found.residuals / np.where(rest > _SINGLE, rest, 1.0), 0.0)
    gaps = np.where(_resampled(fit), (vector @ fit.gain) * pull, 0.0)
    if HUBBLE in wanted.coefficients:
        value = 10.0 ** (0.2 * value)
        error, gaps = error * 0.2 * LN10 * value, gaps * 0.2 * LN10 * value
    return value, error, gaps


def _scatter(fit: Fit) -> tuple[float, float, FloatArray] | None:
    stars, freedom = fit.is_star, fit.freedom
    if freedom < 1.5:
        return None
    value = fit.scatter
    rest = np.maximum(1.0 - fit.leverage, _SINGLE)
    left = freedom * value**2 - fit.found.residuals**2 / rest
    without = np.sqrt(np.maximum(left, 0.0) / (freedom - 1.0))
    gaps = np.where(stars, value - without, 0.0)
    return value, value / float(np.sqrt(2.0 * freedom)), gaps


def _intrinsic(fit: Fit) -> tuple[float, float, FloatArray] | None:
    """The scatter t of sum r^2 / (v + t^2) = degrees of freedom; gaps to first order."""
    stars, freedom = fit.is_star, fit.freedom
    if freedom < 1.5 or fit.treatment.weights != "errors and scatter":
        return None
    variance = fit.sigma[stars] ** 2
    value = float(np.sqrt(fit.extra))
    squares = fit.found.residuals[stars] ** 2
    steep = 2.0 * max(value, _LEAST_SCATTER) * float(np.sum(squares / variance**2))
    rest = np.maximum(1.0 - fit.leverage[stars], _SINGLE)
    gaps = np.zeros(len(fit.sigma))
    gaps[stars] = (squares / rest / variance - 1.0) / steep
    return value, float(np.sqrt(2.0 * freedom)) / steep, gaps


class _Clips:
    """Clipped fits under many sets of weights at once.

    Parameters
    ----------
    fit : Fit
        The fit that is repeated: its rows before the clip, its spread of each row.
    weights : array, shape (replicates, n)
    """

    def __init__(self, fit: Fit, weights: FloatArray) -> None:
        self._fit = fit
        self._rows = _Products.of(fit)
        count, k = len(weights), len(fit.columns)
        self._coefficients, self._scatter = np.empty((count, k)), np.empty(count)
        kept = np.broadcast_to(fit.kept, weights.shape).copy()
        busy = np.arange(count)
        for _ in range(_CLIP_ROUNDS):
            found, scatter, near = self._rows.solved(weights[busy], kept[busy])
            self._coefficients[busy], self._scatter[busy] = found, scatter
            enough = np.sum(near[:, self._rows.star], axis=1) > k + 2
            moved = np.any(near != kept[busy], axis=1) & enough
            kept[busy[moved]] = near[moved]
            busy = busy[moved]
            if not busy.size:
                break

    def numbers(self, wanted: Wanted) -> FloatArray:
        """Values of a number, shape (replicates,)."""
        if wanted.intrinsic:
            errors = float(np.mean(self._fit.used.variance[self._fit.is_star]))
            return np.sqrt(np.maximum(self._scatter**2 - errors, 0.0))
        if wanted.scatter:
            return self._scatter.copy()
        fixed = self._fit.system.fixed
        free = {name: c for name, c in wanted.coefficients.items() if name not in fixed}
        constant = sum(c * fixed[n] for n, c in wanted.coefficients.items() if n in fixed)
        vector = self._fit.combination(free)
        if vector is None:
            raise ValueError("a number that the fit does not determine")
        values = self._coefficients @ vector + constant
        return np.asarray(10.0 ** (0.2 * values) if HUBBLE in wanted.coefficients else values)


@dataclass(frozen=True, eq=False)
class _Products:
    """Products of columns that the normal equations are summed from, one row each."""

    X: FloatArray
    y: FloatArray
    star: BoolArray
    precision: FloatArray
    outer: FloatArray
    right: FloatArray
    clip: float

    @classmethod
    def of(cls, fit: Fit) -> _Products:
        system = fit.system
        X, star = system.X[:, fit.columns], system.group == STARS
        sigma = np.empty(len(system.y))
        sigma[fit.kept] = fit.sigma
        sigma[~fit.kept] = np.median(fit.sigma[fit.is_star])
        weighted = X * (sigma**-2)[:, None]
        outer = (X[:, :, None] * weighted[:, None, :]).reshape(len(X), -1)
        right = weighted * system.y[:, None]
        clip = fit.treatment.clip or np.inf
        return cls(X, system.y, star, sigma**-2, outer, right, clip)

    def solved(
        self, weights: FloatArray, kept: BoolArray
    ) -> tuple[FloatArray, FloatArray, BoolArray]:
        """Coefficients, scatter and who is near, for sets of weights of rows kept so far."""
        active = weights * kept
        k = self.X.shape[1]
        left = (active @ self.outer).reshape(-1, k, k)
        diagonal = np.einsum("bii->bi", left)
        diagonal += _RIDGE * np.max(diagonal, axis=1, keepdims=True)  # a host may lose all stars
        found = np.linalg.solve(left, (active @ self.right)[:, :, None])[:, :, 0]
        squares = (self.y - found @ self.X.T)[:, self.star] ** 2
        active = active[:, self.star]
        scaled = squares * self.precision[self.star]
        share = np.sum(active, axis=1)
        freedom = np.maximum(1.0 - k / np.maximum(np.sum(active > 0.0, axis=1), k + 1.0), 0.05)
        spread = np.sqrt(np.sum(active * scaled, axis=1) / share / freedom)
        near = np.ones(weights.shape, bool)
        near[:, self.star] = scaled < (self.clip * spread[:, None]) ** 2
        scatter = np.sqrt(np.sum(active * squares, axis=1) / share / freedom)
        return np.asarray(found), np.asarray(scatter), near
