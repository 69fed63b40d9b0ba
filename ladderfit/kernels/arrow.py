"""Gaussian systems of arrow shape: one local parameter per host, a few globals.

Hosts whose rows are correlated with one another are an exception: their locals
are factored together, after all others have gone.

Rows y = u[host] + X g + e, or y = X g + e where there is no host, with e normal
of known variance, are summed into moments; the locals are eliminated one by one
and the globals by a Cholesky factor.  Everything carries a leading batch axis,
since variances and the known part of g differ from draw to draw.

The data column y is treated as one more column of X: `cross` and `square` hold
products with [X, y], so that a coefficient that becomes known is moved to the
left-hand side by a contraction.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from functools import cache, cached_property, partial

import numpy as np
import numpy.typing as npt

from ladderfit.kernels.compiling import in_halves, side_by_side
from ladderfit.kernels.elimination import draw_coupled, draw_each, eliminate
from ladderfit.kernels.sums import add_rows

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

LOG_2PI = math.log(2.0 * math.pi)

_FEW = 200  # rows up to which a plain loop is faster than matrix products
_BLOCK = 16_384  # rows summed at once
_WORTH_HALVING = 500_000  # elements above which two threads share them
_CHUNK = 4_000_000  # elements of a (draws, rows) array held at once


@dataclass(frozen=True)
class Moments:
    """Sums of weight times products of columns.

    Attributes
    ----------
    local : array, shape (b, h)
        Sum of weights per host.
    cross : array, shape (b, h, k + 1)
        Weighted sums of [X, y] per host.
    square : array, shape (b, k + 1, k + 1)
        Weighted products of [X, y], over all rows.
    constant : array, shape (b,)
        Part of the log density that depends on no coefficient.
    coupling : array, shape (b, m, m), or None
        Weighted products of the locals of coupled hosts with one another, on top
        of `local`; None where every product is in `local`.
    coupled : array of int, shape (m,), or None
        The coupled hosts, ascending.
    """

    local: FloatArray
    cross: FloatArray
    square: FloatArray
    constant: FloatArray
    coupling: FloatArray | None = None
    coupled: IntArray | None = None

    def __add__(self, other: Moments) -> Moments:
        """Moments of both sets of rows; both have the same coupled hosts, or one has none."""
        mine, theirs = self.coupling, other.coupling
        first, second = self.coupled, other.coupled
        if first is not None and second is not None and not np.array_equal(first, second):
            raise ValueError("the two sets of rows couple different hosts")
        return Moments(
            self.local + other.local,
            self.cross + other.cross,
            self.square + other.square,
            self.constant + other.constant,
            theirs if mine is None else mine if theirs is None else mine + theirs,
            first if first is not None else second,
        )

    def repeated(self, batch: int) -> Moments:
        """A writable copy with the first entry repeated `batch` times."""
        return Moments(
            np.repeat(self.local[:1], batch, axis=0),
            np.repeat(self.cross[:1], batch, axis=0),
            np.repeat(self.square[:1], batch, axis=0),
            np.repeat(self.constant[:1], batch, axis=0),
            None if self.coupling is None else np.repeat(self.coupling[:1], batch, axis=0),
            self.coupled,
        )


@cache
def upper_triangle(width: int) -> tuple[IntArray, IntArray]:
    """Row and column indices of the upper triangle of a square matrix, diagonal included."""
    row, column = np.triu_indices(width)
    return row, column


@cache
def _all_but(count: int, taken: bytes) -> IntArray:
    """The numbers below `count` that an array of integers does not hold."""
    return np.setdiff1d(np.arange(count), np.frombuffer(taken, dtype=np.int64))


def no_moments(batch: int, hosts: int, width: int, coupled: IntArray | None = None) -> Moments:
    """Moments of no rows, for `width` coefficients; `coupled` hosts, if any, shape (m,)."""
    some = coupled is not None and len(coupled) > 0
    return Moments(
        np.zeros((batch, hosts)),
        np.zeros((batch, hosts, width + 1)),
        np.zeros((batch, width + 1, width + 1)),
        np.zeros(batch),
        np.zeros((batch, len(coupled), len(coupled))) if some and coupled is not None else None,
        coupled if some else None,
    )


@dataclass(frozen=True)
class Rows:
    """Rows of one kind, sorted by host; build with `rows`.

    Attributes
    ----------
    columns : array, shape (n, k + 1)
        [X, y].
    variance : array, shape (n,)
        Measurement variance; a common extra variance may be added per draw.
    hosts : int
        Number of hosts of the whole system.
    slices : tuple of (host, start, stop)
        Runs of rows that belong to one host.
    host : array of int, shape (n,)
        Each row's host, or -1.
    """

    columns: FloatArray
    variance: FloatArray
    hosts: int
    slices: tuple[tuple[int, int, int], ...]
    host: IntArray = field(repr=False)

    def moments(self, extra: FloatArray) -> Moments:
        """Sum the rows up, with `extra` (shape (b,)) added to every variance."""
        total = no_moments(len(extra), self.hosts, self.columns.shape[1] - 1)
        self.add_to(total, extra)
        return total

    def add_to(self, total: Moments, extra: FloatArray) -> None:
        """Add the rows' sums to `total`, in place."""
        if len(self.variance) < _FEW:
            sums = (total.local, total.cross, total.square, total.constant)
            add_rows(*sums, self.host, self.columns, self._products, self.variance, extra)
            return
        for first in range(0, len(self.variance), _BLOCK):
            columns = self.columns[first : first + _BLOCK]
            upper = upper_triangle(columns.shape[1])
            products = columns[:, upper[0]] * columns[:, upper[1]]
            step = max(1, _CHUNK // len(columns))
            if len(extra) * len(columns) > _WORTH_HALVING:
                step = min(step, -(-len(extra) // 2))
            parts = [slice(start, start + step) for start in range(0, len(extra), step)]
            side_by_side(partial(self._add_part, total, first, extra, products), parts)

    @cached_property
    def _products(self) -> FloatArray:
        upper = upper_triangle(self.columns.shape[1])
        return np.ascontiguousarray(self.columns[:, upper[0]] * self.columns[:, upper[1]])

    def _add_part(
        self, total: Moments, first: int, extra: FloatArray, products: FloatArray, part: slice
    ) -> None:
        """Add a block of rows, from `first` on, for some of the draws."""
        last = first + len(products)
        variance = self.variance[first:last] + extra[part, None]
        weight = 1.0 / variance
        for host, start, stop in self.slices:
            if stop > first and start < last:
                inside = slice(max(start, first), min(stop, last))
                here = weight[:, inside.start - first : inside.stop - first]
                total.local[part, host] += here.sum(axis=1)
                total.cross[part, host] += here @ self.columns[inside]
        upper = upper_triangle(self.columns.shape[1])
        square = np.empty((len(variance), *total.square.shape[1:]))
        square[:, upper[0], upper[1]] = square[:, upper[1], upper[0]] = weight @ products
        total.square[part] += square
        logs = _sum_of_logs(variance)
        total.constant[part] -= 0.5 * (logs + len(products) * LOG_2PI)


def _sum_of_logs(values: FloatArray) -> FloatArray:
    """Sum of logs along the last axis, one logarithm for four values."""
    quarter = values.shape[-1] // 4
    four = [values[..., place * quarter : (place + 1) * quarter] for place in range(4)]
    product = four[0] * four[1]
    product *= four[2]
    product *= four[3]
    rest = np.log(values[..., 4 * quarter :]).sum(axis=-1)
    return np.asarray(np.log(product, out=product).sum(axis=-1) + rest)


def rows(
    host: IntArray, columns: FloatArray, y: FloatArray, variance: FloatArray, hosts: int
) -> Rows:
    """Prepare rows; `host` is -1 where a row has no local parameter.

    Parameters
    ----------
    host : array of int, shape (n,)
    columns : array, shape (n, k)
    y, variance : array, shape (n,)
    hosts : int
        Number of hosts of the whole system.
    """
    full = np.empty((len(y), columns.shape[1] + 1))
    full[:, :-1], full[:, -1] = columns, y
    variance = variance.astype(float)
    if np.any(np.diff(host) < 0):
        order = np.argsort(host, kind="stable")
        host, full, variance = host[order], full[order], variance[order]
    edges = np.flatnonzero(np.diff(host)) + 1
    starts, stops = [0, *edges.tolist()], [*edges.tolist(), len(host)]
    slices = tuple(
        (int(host[start]), start, stop)
        for start, stop in zip(starts, stops, strict=True)
        if stop > start and host[start] >= 0
    )
    return Rows(full, variance, hosts, slices, host.astype(np.int64))


@dataclass(frozen=True)
class Solution:
    """The Gaussian posterior of globals and locals, given the moments.

    Attributes
    ----------
    log_evidence : array, shape (b,)
        Log of the integral over globals and locals; minus infinity where the
        globals' precision is not positive definite.
    mean : array, shape (b, f)
        Mean of the free globals.
    factor : array, shape (b, f, f)
        Lower Cholesky factor of their precision.
    coefficients : array, shape (b, k)
        All globals: known values, and the mean of the free ones.
    """

    log_evidence: FloatArray
    mean: FloatArray
    factor: FloatArray
    coefficients: FloatArray
    free: IntArray
    moments: Moments

    def draw(self, white: FloatArray) -> tuple[FloatArray, FloatArray]:
        """One draw per batch entry: all globals, shape (b, k), and locals, shape (b, h).

        Parameters
        ----------
        white : array, shape (b, f + h)
            Standard normal numbers.
        """
        cross, local = self.moments.cross, self.moments.local
        globals_, drawn = self.coefficients.copy(), np.empty(local.shape)
        draw_each(
            np.ascontiguousarray(self.factor),
            np.ascontiguousarray(cross),
            np.ascontiguousarray(local),
            self.free,
            np.ascontiguousarray(white),
            globals_,
            drawn,
        )
        coupled = self.moments.coupled
        if coupled is None or self.moments.coupling is None:
            return globals_, drawn
        precision = self.moments.coupling.copy()
        places = np.arange(len(coupled))
        precision[:, places, places] += local[:, coupled]
        expected = np.einsum("bhk,bk->bh", cross[:, coupled, :-1], globals_)
        together = np.ascontiguousarray(cross[:, coupled, -1] - expected)
        noise = white[:, len(self.free) + coupled]
        draw_coupled(precision, together, np.ascontiguousarray(noise))
        drawn[:, coupled] = together
        return globals_, drawn


def solve(
    moments: Moments, known: IntArray | None = None, values: FloatArray | None = None
) -> Solution:
    """Eliminate the locals, factor the free globals, and integrate both out.

    Parameters
    ----------
    moments : Moments
        Of k coefficients.
    known : array of int, shape (j,), optional
        Coefficients whose values are known.
    values : array, shape (b, j), optional
        Their values.

    Notes
    -----
    Every host needs at least one row of its own, and the free globals' precision
    has to be positive definite (which proper priors ensure).  Hosts that are not
    coupled go first, one by one; the m coupled ones are then eliminated from one
    dense block, which costs of the order of m^2 (m / 3 + k) steps a draw.
    """
    batch, width = len(moments.constant), moments.square.shape[-1]
    known = np.empty(0, dtype=np.int64) if known is None else known.astype(np.int64)
    values = np.empty((batch, 0)) if values is None else np.ascontiguousarray(values)
    free = _all_but(width - 1, known.tobytes())
    log_evidence = np.empty(batch)
    mean = np.empty((batch, len(free)))
    factor = np.zeros((batch, len(free), len(free)))
    hosts = moments.local.shape[1]
    coupled, coupling = moments.coupled, moments.coupling
    if coupled is None or coupling is None:
        coupled, coupling = np.empty(0, dtype=np.int64), np.empty((batch, 0, 0))
    alone = _all_but(hosts, coupled.tobytes())

    def part(start: int, stop: int) -> None:
        chosen = slice(start, stop)
        eliminate(
            np.ascontiguousarray(moments.local[chosen]),
            np.ascontiguousarray(moments.cross[chosen]),
            np.ascontiguousarray(moments.square[chosen]),
            np.ascontiguousarray(moments.constant[chosen]),
            np.ascontiguousarray(coupling[chosen]),
            coupled,
            alone,
            known,
            values[chosen],
            free,
            log_evidence[chosen],
            mean[chosen],
            factor[chosen],
        )

    in_halves(part, batch, work=batch * (hosts + 4 + len(coupled) ** 2) * width)
    coefficients = np.empty((batch, width - 1))
    coefficients[:, known], coefficients[:, free] = values, mean
    return Solution(log_evidence, mean, factor, coefficients, free, moments)
