"""Least squares on a linear system: scatter, clip, influence and resampling in closed form.

Every estimate comes from `ladderfit.classical`; around it this module puts the
scatter of each group of rows, an iterative clip, what the estimate would be
without each row (exactly, from the leverages) and under resampling.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from scipy.linalg import solve_triangular
from scipy.optimize import brentq

from ladderfit.classical import LeastSquares, weighted_least_squares
from ladderfit.errors import LadderfitError
from ladderfit.review.system import STARS, SUPERNOVAE, System
from ladderfit.samples import BoolArray, FloatArray, IntArray

_ROUNDS = 200
_SETTLED = 1e-9
_SAME = 3e-5  # a column of length 1 closer to the span of those before it is dropped


@dataclass(frozen=True)
class Treatment:
    """How the rows are weighted, clipped, and whether period errors count.

    Attributes
    ----------
    weights : str
        ``none`` (one variance for all stars), ``errors`` (measurement errors alone) or
        ``errors and scatter``.
    clip : float or None
        Stars further from the fit than this many times its spread are set aside.
    period_errors : bool
        Whether slope^2 times the variance of log10 period is added.
    """

    weights: str = "none"
    clip: float | None = None
    period_errors: bool = False

    @property
    def words(self) -> str:
        """For tables."""
        if self.period_errors:
            text = "line with errors in both coordinates"
        elif self.weights == "none":
            text = "least squares, no weights"
        elif self.weights == "errors":
            text = "least squares, weights from the errors"
        else:
            text = "least squares, weights from errors and scatter"
        return text if self.clip is None else f"{text}, clip at {self.clip:g} s.d."


@dataclass(frozen=True, eq=False)
class Fit:
    """One least-squares fit.

    Attributes
    ----------
    system : System
        The rows it may use, fixed coefficients already taken out.
    kept : array of bool, shape (n,)
        Rows that the clip left.
    columns : array of int
        Columns of the system that the rows determine; the others are dropped.
    span : array, shape (k dropped, k kept)
        Each dropped column as a combination of the kept ones.
    found : LeastSquares
        Of the kept rows and columns.
    sigma : array, shape (kept,)
        Spread of each row, scatter included.
    gain : array, shape (k kept, kept)
        Change of each coefficient per change of y.
    leverage : array, shape (kept,)
    treatment : Treatment
    extra : float
        Variance of the stars beyond their errors, with weights from errors and scatter.
    """

    system: System
    kept: BoolArray
    columns: IntArray
    span: FloatArray
    found: LeastSquares
    sigma: FloatArray
    gain: FloatArray
    leverage: FloatArray
    treatment: Treatment
    extra: float = 0.0

    @property
    def used(self) -> System:
        """The rows that the clip left."""
        return self.system.rows(self.kept)

    @property
    def is_star(self) -> BoolArray:
        """Which of the kept rows are stars, shape (kept,)."""
        return np.asarray(self.system.group[self.kept] == STARS)

    @property
    def stars(self) -> int:
        """Number of stars that take part."""
        return int(np.sum(self.is_star))

    @property
    def freedom(self) -> float:
        """Stars less what they spend on coefficients."""
        return float(np.sum(1.0 - self.leverage[self.is_star]))

    @property
    def scatter(self) -> float:
        """Standard deviation of the stars' residuals, without weights."""
        squares = float(np.sum(self.found.residuals[self.is_star] ** 2))
        return float(np.sqrt(squares / self.freedom)) if self.freedom > 0.5 else float("nan")

    def combination(self, wanted: Mapping[str, float]) -> FloatArray | None:
        """A sum of coefficients as a vector on the kept ones; None where undetermined."""
        names = self.system.names
        whole = np.zeros(len(names))
        for name, factor in wanted.items():
            if name not in names:
                return None
            whole[names.index(name)] = factor
        dropped = np.setdiff1d(np.arange(len(names)), self.columns)
        vector = whole[self.columns]
        if dropped.size and np.any(np.abs(self.span @ vector - whole[dropped]) > 1e-6):
            return None
        return np.asarray(vector)


def fit(system: System, treatment: Treatment) -> Fit:
    """Fit a system; the clip takes back rows that come near again, as in older papers.

    Raises
    ------
    LadderfitError
        If the rows do not determine anything, or the clip does not settle.
    """
    kept = np.ones(len(system.y), bool)
    for _ in range(_ROUNDS):
        made = _fit_rows(system, kept, treatment)
        if treatment.clip is None:
            return made
        near = _near(made, treatment.clip)
        if np.array_equal(near, kept):
            return made
        kept = near
    raise LadderfitError("the clip does not settle: stars come and go")


def without(made: Fit, removed: BoolArray) -> Fit:
    """The fit without some of its kept rows, spreads of the rows as they were, no new clip.

    Parameters
    ----------
    made : Fit
    removed : array of bool, shape (kept,)

    Raises
    ------
    LadderfitError
        If what is left determines nothing.
    """
    kept = made.kept.copy()
    kept[np.flatnonzero(kept)[removed]] = False
    rows = made.system.rows(kept)
    return _solved(made.system, rows, kept, made.sigma[~removed], made.treatment)


def _near(made: Fit, clip: float) -> BoolArray:
    """Rows within the clip of a fit; rows other than stars always."""
    system = made.system
    coefficients = np.zeros(len(system.names))
    coefficients[made.columns] = made.found.values
    residual = system.y - system.X @ coefficients
    if made.treatment.weights == "none":
        spread = np.full(len(system.y), made.scatter)
    else:
        spread = np.full(len(system.y), np.inf)
        spread[made.kept] = made.sigma
        stars = system.group == STARS
        spread[stars] = _spread_of_stars(made, system, stars)
        pulls = (made.found.residuals / made.sigma)[made.is_star]
        spread[stars] *= max(float(np.sqrt(np.mean(pulls**2))), 1e-12)
    return np.asarray((np.abs(residual) < clip * spread) | (system.group != STARS))


def _spread_of_stars(made: Fit, system: System, stars: BoolArray) -> FloatArray:
    """The spread that a weighted fit gives stars, whether it used them or not."""
    variance = system.variance[stars]
    if made.treatment.weights == "errors":
        given, used = made.sigma[made.is_star] ** 2, made.used.variance[made.is_star]
        return np.asarray(np.sqrt(variance * float(np.median(given / used))))
    if made.treatment.period_errors:
        variance = variance + _slope(made) ** 2 * system.period_variance[stars]
    return np.asarray(np.sqrt(variance + made.extra))


def _fit_rows(system: System, kept: BoolArray, treatment: Treatment) -> Fit:
    rows = system.rows(kept)
    extra = {STARS: 1.0 if treatment.weights == "errors" else 0.0, SUPERNOVAE: 0.01}
    before: Fit | None = None
    made = _solved(system, rows, kept, _spreads(rows, None, treatment, extra), treatment)
    for _ in range(_ROUNDS):
        now = {group: _scatter(made, rows, group, treatment) for group in extra}
        same = all(abs(now[g] - extra[g]) <= _SETTLED + 1e-6 * extra[g] for g in extra)
        extra = now
        if _plain(rows, treatment) or (same and _as_before(before, made)):
            break
        before = made
        made = _solved(system, rows, kept, _spreads(rows, made, treatment, extra), treatment)
    if treatment.weights == "errors and scatter":
        made = replace(made, extra=extra[STARS])
    return _scaled(made, treatment)


def _as_before(before: Fit | None, made: Fit) -> bool:
    if before is None or len(before.found.values) != len(made.found.values):
        return False
    change = np.abs(before.found.values - made.found.values)
    return bool(np.all(change <= 1e-6 * made.found.errors))


def _plain(rows: System, treatment: Treatment) -> bool:
    """Whether one solution is final: stars alone, whose weights do not change."""
    alone = bool(np.all(rows.group == STARS))
    return alone and treatment.weights != "errors and scatter" and not treatment.period_errors


def _spreads(
    rows: System, made: Fit | None, treatment: Treatment, extra: Mapping[int, float]
) -> FloatArray:
    variance = rows.variance.copy()
    stars = rows.group == STARS
    if treatment.weights == "none":
        variance[stars] = extra[STARS] if made is not None else 0.01
    elif treatment.weights == "errors":
        variance[stars] *= extra[STARS]
    else:
        variance[stars] += extra[STARS]
        if treatment.period_errors:
            slope = -3.3 if made is None else _slope(made)
            variance[stars] += slope**2 * rows.period_variance[stars]
    variance[rows.group == SUPERNOVAE] += extra[SUPERNOVAE]
    return np.asarray(np.sqrt(np.maximum(variance, 1e-12)))


def _slope(made: Fit) -> float:
    if "slope" in made.system.fixed:
        return made.system.fixed["slope"]
    vector = made.combination({"slope": 1.0})
    return -3.3 if vector is None else float(vector @ made.found.values)


def _scatter(made: Fit, rows: System, group: int, treatment: Treatment) -> float:
    """The variance that a group needs beyond its errors for its chi squared to be as expected."""
    mine = rows.group == group
    if not mine.any():
        return 0.0
    squares = made.found.residuals[mine] ** 2
    freedom = float(np.sum(1.0 - made.leverage[mine]))
    if freedom < 0.5:
        return 0.0
    if group == STARS and treatment.weights == "none":
        return float(np.sum(squares) / freedom)
    variance = rows.variance[mine]
    if group == STARS and treatment.weights == "errors":
        return float(np.sum(squares / variance) / freedom)
    if treatment.period_errors and group == STARS:
        variance = variance + _slope(made) ** 2 * rows.period_variance[mine]

    def excess(extra: float) -> float:
        return float(np.sum(squares / (variance + extra)) - freedom)

    if excess(0.0) <= 0.0:
        return 0.0
    return float(brentq(excess, 0.0, float(np.sum(squares)) / freedom * 1.01 + 1e-12))


def independent(X: FloatArray) -> tuple[IntArray, FloatArray]:
    """Columns not in the span of those before, and the others as their combinations."""
    scale = np.linalg.norm(X, axis=0)
    scaled = X / np.where(scale > 0.0, scale, 1.0)
    R = np.asarray(np.linalg.qr(scaled, mode="r"))
    if X.shape[0] >= X.shape[1] and np.all(np.abs(np.diag(R)) > 1e-7) and np.all(scale > 0.0):
        return np.arange(X.shape[1]), np.zeros((0, X.shape[1]))
    good: list[int] = []
    basis = np.zeros((len(R), 0))  # R has the geometry of the columns, and few rows
    for place in range(X.shape[1]):
        rest = R[:, place] - basis @ (basis.T @ R[:, place])
        rest = rest - basis @ (basis.T @ rest)
        norm = float(np.linalg.norm(rest))
        if norm > _SAME and basis.shape[1] < X.shape[0]:
            good.append(place)
            basis = np.column_stack([basis, rest / norm])
    dropped = [place for place in range(X.shape[1]) if place not in good]
    combined = np.linalg.lstsq(R[:, good], R[:, dropped], rcond=None)[0].T
    span = combined.reshape(len(dropped), len(good)) * scale[dropped].reshape(-1, 1) / scale[good]
    return np.array(good, dtype=np.int64), np.asarray(span)


def _solved(
    system: System, rows: System, kept: BoolArray, sigma: FloatArray, treatment: Treatment
) -> Fit:
    columns, span = independent(rows.X / sigma[:, None])
    X = rows.X[:, columns]
    try:
        found = weighted_least_squares(X, rows.y, sigma)
    except ValueError as error:
        raise LadderfitError(f"the rows determine nothing: {error}") from None
    Q, R = np.linalg.qr(X / sigma[:, None])
    gain = solve_triangular(R, Q.T) / sigma
    leverage = np.sum(Q**2, axis=1)
    made = Fit(system, kept, columns, span, found, sigma, gain, leverage, treatment)
    return _along_the_normal(made, rows, X) if treatment.period_errors else made


def _along_the_normal(made: Fit, rows: System, X: FloatArray) -> Fit:
    """The line with errors in both coordinates, for given spreads of the rows.

    The iteration of York et al. (2004, American Journal of Physics 72, 367), written for
    any further columns: the slope's column is taken at the adjusted period
    x + b s_x^2 r / sigma^2 on the left of the normal equations alone.
    """
    names = [rows.names[place] for place in made.columns]
    if "slope" not in names:
        return made
    place, weight = names.index("slope"), made.sigma**-2
    values = made.found.values.copy()
    gain = made.gain
    for _ in range(_ROUNDS):
        residual = rows.y - X @ values
        adjusted = X.copy()
        adjusted[:, place] += values[place] * rows.period_variance * weight * residual
        left = (adjusted * weight[:, None]).T
        gain = np.asarray(np.linalg.solve(left @ X, left), dtype=np.float64)
        change = gain @ rows.y - values
        values += change
        if np.max(np.abs(change)) <= 1e-11 * (1.0 + np.max(np.abs(values))):
            break
    covariance = (gain * made.sigma**2) @ gain.T
    residual = rows.y - X @ values
    found = replace(made.found, values=values, covariance=covariance, residuals=residual)
    leverage = np.einsum("ij,ji->i", X, gain)
    return replace(made, found=found, gain=gain, leverage=leverage)


def _scaled(made: Fit, treatment: Treatment) -> Fit:
    """Errors scaled to the residuals where the stars are alone and were solved for once."""
    if not _plain(made.used, treatment) or made.freedom < 0.5:
        return made
    pulls = float(np.sum((made.found.residuals / made.sigma) ** 2) / made.freedom)
    found = replace(made.found, covariance=made.found.covariance * pulls)
    return replace(made, found=found, sigma=np.asarray(made.sigma * np.sqrt(pulls)))
