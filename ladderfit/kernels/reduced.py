"""Star sums as smooth functions of the scatter: a draw costs the same for any number of stars.

The sums of weight times products of columns depend on the scatter t alone, through
weights 1 / (s_i^2 + t^2).  They are tabulated once, at Chebyshev points in
ln(t^2 + s_min^2), and interpolated; t = 0 is included.  The nearest singularities
lie a distance pi off the real axis, so that convergence is geometric.  The number
of nodes is doubled until the *summed log density* agrees with the exact one at
all points in between: how many that takes grows with the number of stars and with
small errors, so it is measured at every build, never assumed.

What is tabulated are `SmoothSums`: the sums of independent rows here, those of
correlated ones in `ladderfit.kernels.coupled`.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property
from typing import Protocol

import numpy as np
import numpy.typing as npt

from ladderfit.kernels.arrow import Moments, Rows, no_moments, solve, upper_triangle
from ladderfit.kernels.sums import add_packed, chebyshev

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

_FIRST, _LAST = 9, 257  # nodes; nested Clenshaw-Curtis points: 9, 17, 33, ...
_TOLERANCE = 1e-7  # of the summed log density, per thousand stars
_ROUNDING, _STALLED = 10.0, 0.1  # near the tolerance, yet no better for twice the nodes
_MUCH_WIDER = 4.0
_FEWEST_ROWS = 64  # below this the exact sums are as cheap


class SmoothSums(Protocol):
    """Sums that are smooth functions of one extra variance."""

    @property
    def size(self) -> int:
        """Number of rows."""

    @property
    def shift(self) -> float:
        """The smallest variance: the sums' nearest singularity lies at minus this."""

    def packed(self, extra: FloatArray) -> FloatArray:
        """Exact sums at the given extra variances, shape (b, q)."""

    def log_density(self, packed: FloatArray) -> FloatArray:
        """Log density of the rows under unit priors, shape (b,), from such sums."""


@dataclass(frozen=True, eq=False)
class SumTable:
    """Interpolated sums of one set of rows over a range of extra variance.

    Attributes
    ----------
    low, high : float
        Range of the extra variance [the square of the rows' unit].
    shift : float
        The smallest measurement variance.
    coefficients : array, shape (nodes, q)
        Chebyshev coefficients of all sums, packed.
    error : float
        Largest difference of the summed log density from the exact one, as measured.
    """

    low: float
    high: float
    shift: float
    coefficients: FloatArray = field(repr=False)
    error: float

    def sums(self, extra: FloatArray) -> FloatArray:
        """All sums at the given extra variances, packed, shape (b, q)."""
        low, high = np.log(self.low + self.shift), np.log(self.high + self.shift)
        x = (2.0 * np.log(extra + self.shift) - low - high) / (high - low)
        return np.asarray(chebyshev(x, len(self.coefficients)) @ self.coefficients)

    def covers(self, low: float, high: float) -> bool:
        """Whether the table holds this range without being much wider."""
        return self.low <= low and high <= self.high <= _MUCH_WIDER * high

    def holds(self, extra: FloatArray) -> npt.NDArray[np.bool_]:
        """Which of the extra variances lie in the range."""
        slack = 1e-12 * (self.high + self.shift)
        return (extra >= self.low - slack) & (extra <= self.high + slack)


@dataclass(eq=False)
class ReducedRows:
    """Rows whose sums come from tables where they can, and are exact where not.

    Attributes
    ----------
    rows : Rows
        The rows themselves.
    tables : list of SumTable
        Finer tables first.
    """

    rows: Rows
    tables: list[SumTable]

    def add_to(self, total: Moments, extra: FloatArray) -> None:
        """As `Rows.add_to`; `extra` has shape (b,)."""
        sums = (total.local, total.cross, total.square, total.constant)
        add_packed(*sums, self._hosts, self._sums(extra))

    @cached_property
    def _hosts(self) -> IntArray:
        return np.array([host for host, _, _ in self.rows.slices], dtype=np.int64)

    def moments(self, extra: FloatArray) -> Moments:
        """As `Rows.moments`; `extra` has shape (b,)."""
        total = no_moments(len(extra), self.rows.hosts, self.rows.columns.shape[1] - 1)
        self.add_to(total, extra)
        return total

    def _sums(self, extra: FloatArray) -> FloatArray:
        return interpolated(RowSums(self.rows), self.tables, extra)

    def focus(self, low: float, high: float) -> None:
        """Have a short table for the range of extra variance where most draws will fall."""
        focus(RowSums(self.rows), self.tables, low, high)


def interpolated(source: SmoothSums, tables: list[SumTable], extra: FloatArray) -> FloatArray:
    """Sums from the first table that holds each extra variance; exact where none does."""
    packed: FloatArray | None = None
    todo = np.ones(len(extra), bool)
    for table in tables:
        here = todo & table.holds(extra)
        if here.all():
            return table.sums(extra)
        if here.any():
            found = table.sums(extra[here])
            packed = np.empty((len(extra), found.shape[1])) if packed is None else packed
            packed[here] = found
            todo &= ~here
    if packed is None:
        return source.packed(extra)
    if todo.any():
        packed[todo] = source.packed(extra[todo])
    return packed


def focus(source: SmoothSums, tables: list[SumTable], low: float, high: float) -> None:
    """Put a short table for a range of extra variance before the wide one, in place."""
    if not any(table.covers(low, high) for table in tables[:-1]):
        tables[:-1] = [table_of(source, low, high)]


def reduced(rows: Rows, largest: float) -> Rows | ReducedRows:
    """Tabulate the sums of `rows` for extra variances from 0 to `largest`, if that pays."""
    if len(rows.variance) < _FEWEST_ROWS:
        return rows
    return ReducedRows(rows, [tabulate(rows, 0.0, largest)])


def tabulate(rows: Rows, low: float, high: float) -> SumTable:
    """As `table_of`, for independent rows."""
    return table_of(RowSums(rows), low, high)


def table_of(source: SmoothSums, low: float, high: float) -> SumTable:
    """Tabulate sums between two extra variances, to the tolerance in the log density.

    Where the rounding of the sums themselves is larger than that, more nodes are no
    remedy, and the table ends with the error it has.
    """
    shift = source.shift
    tolerance = _TOLERANCE * max(1.0, source.size / 1000.0)
    ends = np.log(low + shift), np.log(high + shift)
    count = _FIRST
    values = source.packed(_extra(_points(count), ends, shift))
    before = np.inf
    while True:
        table = SumTable(low, high, shift, _coefficients(values), np.inf)
        extra = _extra(_points(2 * count - 1)[1::2], ends, shift)
        exact = source.packed(extra)
        error = _largest_error(source, table.sums(extra), exact)
        rounding = error > _STALLED * before and error < _ROUNDING * tolerance
        if error < tolerance or rounding or count >= _LAST:
            return SumTable(low, high, shift, _coefficients(values), error)
        before = error
        merged = np.empty((2 * count - 1, values.shape[1]))
        merged[0::2], merged[1::2] = values, exact
        values, count = merged, 2 * count - 1


@dataclass(frozen=True, eq=False)
class RowSums:
    """The sums of independent rows, as `SmoothSums`."""

    rows: Rows

    @property
    def size(self) -> int:
        """Number of rows."""
        return len(self.rows.variance)

    @property
    def shift(self) -> float:
        """The smallest measurement variance."""
        return float(self.rows.variance.min())

    def packed(self, extra: FloatArray) -> FloatArray:
        """Exact sums, as `pack` lays them out."""
        return pack(self.rows, self.rows.moments(extra))

    def log_density(self, packed: FloatArray) -> FloatArray:
        """Log density of the rows under unit priors."""
        return _log_density(self.rows, packed)


def pack(rows: Rows, moments: Moments) -> FloatArray:
    """All sums of the hosts that occur, as one row per draw."""
    batch = len(moments.constant)
    hosts = [host for host, _, _ in rows.slices]
    upper = upper_triangle(moments.square.shape[-1])
    return np.concatenate(
        [
            moments.constant[:, None],
            moments.square[:, upper[0], upper[1]],
            moments.local[:, hosts],
            moments.cross[:, hosts].reshape(batch, -1),
        ],
        axis=1,
    )


def _points(count: int) -> FloatArray:
    return -np.cos(np.pi * np.arange(count) / (count - 1))


def _extra(points: FloatArray, ends: tuple[float, float], shift: float) -> FloatArray:
    middle, half = 0.5 * (ends[0] + ends[1]), 0.5 * (ends[1] - ends[0])
    return np.maximum(np.exp(middle + half * points) - shift, 0.0)


def _coefficients(values: FloatArray) -> FloatArray:
    """Chebyshev coefficients from values at the Clenshaw-Curtis points."""
    count = len(values)
    basis = chebyshev(_points(count), count)
    weight = np.ones(count)
    weight[[0, -1]] = 0.5
    scaled = 2.0 / (count - 1) * weight[:, None] * (basis * weight[:, None]).T
    return np.asarray(scaled @ values)


def _largest_error(source: SmoothSums, packed: FloatArray, exact: FloatArray) -> float:
    """Largest difference in the log density of the rows, coefficients integrated out."""
    found = [source.log_density(sums) for sums in (packed, exact)]
    difference = np.abs(found[0] - found[1])
    return float(np.max(np.where(np.isfinite(difference), difference, np.inf)))


def _log_density(rows: Rows, packed: FloatArray) -> FloatArray:
    """Log density of the rows under unit priors, from packed sums."""
    width, hosts = rows.columns.shape[1], len(rows.slices)
    upper = upper_triangle(width)
    after = 1 + len(upper[0])
    square = np.empty((len(packed), width, width))
    square[:, upper[0], upper[1]] = square[:, upper[1], upper[0]] = packed[:, 1:after]
    free = np.arange(width - 1)
    square[:, free, free] += 1.0
    local = np.ascontiguousarray(packed[:, after : after + hosts])
    cross = packed[:, after + hosts :].reshape(len(packed), hosts, width)
    return solve(Moments(local, cross, square, packed[:, 0])).log_evidence
