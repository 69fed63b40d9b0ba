"""Correlated rows: supernovae with a full covariance.

With one scatter t the rows' covariance is C + t^2 I.  An orthogonal rotation that
makes C tridiagonal leaves t^2 I as it is, so that C is decomposed once; a solve
with T + t^2 I then costs as many steps as there are rows (Golub & Van Loan 2013,
Matrix Computations, sections 8.3 and 4.3).  The sums of products of [host
indicators, X, y] under the inverse covariance are smooth functions of t and are
tabulated like those of independent rows.

With a scatter for the rows in hosts and another for the rest (the expansion),

    C = [C_hh + t_h^2, C_he; C_eh, C_ee + t_e^2] ,

C_ee is decomposed once, and the products of [C_eh, X_e, y_e] under the inverse of
its block are tabulated over t_e; what is left in a draw is the Schur complement
C_hh + t_h^2 - C_he (C_ee + t_e^2)^-1 C_eh, of the size of the rows in hosts.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt
from scipy.linalg import lapack

from ladderfit.kernels.arrow import LOG_2PI, Moments, no_moments, solve, upper_triangle
from ladderfit.kernels.compiling import compiled, in_halves
from ladderfit.kernels.elimination import eliminate_coupled
from ladderfit.kernels.reduced import SumTable, focus, interpolated, table_of
from ladderfit.kernels.tridiagonal import Tridiagonal, tridiagonal

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class _Products:
    """Products of columns under the inverse of T + extra I, as smooth sums.

    Packed: the constant -(log det + n log 2 pi) / 2, then the upper triangle.
    """

    base: Tridiagonal
    columns: FloatArray
    density: Callable[[FloatArray], FloatArray]

    @property
    def size(self) -> int:
        """Number of rows."""
        return len(self.base)

    @property
    def shift(self) -> float:
        """The smallest eigenvalue."""
        return self.base.smallest

    def packed(self, extra: FloatArray) -> FloatArray:
        """Exact products, shape (b, 1 + q (q + 1) / 2)."""
        n, q = self.columns.shape
        upper = upper_triangle(q)
        out = np.empty((len(extra), 1 + len(upper[0])))
        for place, more in enumerate(extra):
            if n == 1:
                pivots, solved = (
                    self.base.diagonal + more,
                    self.columns / (self.base.diagonal[0] + more),
                )
            else:
                pivots, below, bad = lapack.dpttrf(self.base.diagonal + more, self.base.off)
                if bad:
                    out[place] = np.nan
                    continue
                solved = lapack.dpttrs(pivots, below, self.columns)[0]
            out[place, 0] = -0.5 * (float(np.log(pivots).sum()) + n * LOG_2PI)
            out[place, 1:] = (self.columns.T @ solved)[upper]
        return out

    def log_density(self, packed: FloatArray) -> FloatArray:
        """Log density of the rows under unit priors."""
        return self.density(packed)


def _unpacked(packed: FloatArray, width: int) -> FloatArray:
    """Full symmetric matrices from upper triangles, shape (b, width, width)."""
    upper = upper_triangle(width)
    square = np.empty((len(packed), width, width))
    square[:, upper[0], upper[1]] = square[:, upper[1], upper[0]] = packed
    return square


@dataclass(frozen=True, eq=False)
class CoupledData:
    """Correlated rows y = u[host] + X g + e (or y = X g + e where host is -1).

    Attributes
    ----------
    host : array of int, shape (n,)
    columns : array, shape (n, k + 1)
        [X, y].
    covariance : array, shape (n, n)
        Of e, without scatters.
    hosts : int
        Number of hosts of the whole system.
    coupled : array of int, shape (m,)
        All hosts of the system that are coupled by any rows.
    """

    host: IntArray
    columns: FloatArray
    covariance: FloatArray = field(repr=False)
    hosts: int
    coupled: IntArray

    @property
    def inside(self) -> IntArray:
        """The hosts that occur, ascending."""
        return np.unique(self.host[self.host >= 0])

    def same(self, other: CoupledData) -> bool:
        """Whether these are the very same rows of the same system."""
        return bool(
            self.hosts == other.hosts
            and np.array_equal(self.coupled, other.coupled)
            and np.array_equal(self.host, other.host)
            and np.array_equal(self.columns, other.columns)
            and np.array_equal(self.covariance, other.covariance)
        )

    def indicators(self) -> FloatArray:
        """Which row belongs to which occurring host, shape (n, len(inside))."""
        return np.asarray(self.host[:, None] == self.inside[None, :], dtype=float)


def _empty(batch: int, data: CoupledData) -> Moments:
    return no_moments(batch, data.hosts, data.columns.shape[1] - 1, data.coupled)


def add_products(
    total: Moments, data: CoupledData, products: FloatArray, constant: FloatArray
) -> None:
    """Add products of [indicators, X, y], shape (b, q, q), to the moments, in place."""
    inside = data.inside
    m = len(inside)
    total.constant[:] += constant
    total.square[:] += products[:, m:, m:]
    if m == 0:
        return
    total.cross[:, inside] += products[:, :m, m:]
    if total.coupling is None:
        raise ValueError("the moments have no room for coupled hosts")
    if m == len(data.coupled):
        total.coupling[:] += products[:, :m, :m]
    else:
        places = np.searchsorted(data.coupled, inside)
        total.coupling[:, places[:, None], places[None, :]] += products[:, :m, :m]


def _alone(products: FloatArray, constant: FloatArray, m: int) -> FloatArray:
    """Log density of rows alone, unit priors on the coefficients, flat ones on the locals."""
    square = np.ascontiguousarray(products[:, m:, m:])
    free = np.arange(square.shape[-1] - 1)
    square[:, free, free] += 1.0
    local, cross = np.zeros((len(square), m)), products[:, :m, m:]
    coupling = products[:, :m, :m] if m else None
    places = np.arange(m) if m else None
    return solve(Moments(local, cross, square, constant, coupling, places)).log_evidence


@dataclass(eq=False)
class CoupledRows:
    """Correlated rows with one scatter; build with `coupled_rows`.

    Attributes
    ----------
    data : CoupledData
    base : Tridiagonal
        Their covariance, decomposed.
    tables : list of SumTable
        Finer tables first.
    """

    data: CoupledData
    base: Tridiagonal
    sums: _Products = field(repr=False)
    tables: list[SumTable]

    def add_to(self, total: Moments, extra: FloatArray) -> None:
        """Add the rows' sums, `extra` (shape (b,)) added to every variance, in place."""
        packed = interpolated(self.sums, self.tables, extra)
        width = self.sums.columns.shape[1]
        add_products(total, self.data, _unpacked(packed[:, 1:], width), packed[:, 0])

    def moments(self, extra: FloatArray) -> Moments:
        """The rows' sums alone; `extra` has shape (b,)."""
        total = _empty(len(extra), self.data)
        self.add_to(total, extra)
        return total

    def focus(self, low: float, high: float) -> None:
        """Have a short table for the range of extra variance where most draws will fall."""
        if self.tables:
            focus(self.sums, self.tables, low, high)


def coupled_rows(
    data: CoupledData, largest: float | None, base: Tridiagonal | None = None
) -> CoupledRows:
    """Decompose the covariance and tabulate the sums.

    Parameters
    ----------
    data : CoupledData
    largest : float or None
        Extra variance up to which sums are tabulated; None for no table.
    base : Tridiagonal, optional
        The covariance decomposed before.
    """
    base = tridiagonal(data.covariance) if base is None else base
    width, m = data.columns.shape[1] + len(data.inside), len(data.inside)

    def density(packed: FloatArray) -> FloatArray:
        return _alone(_unpacked(packed[:, 1:], width), packed[:, 0], m)

    rotated = base.rotated(np.hstack([data.indicators(), data.columns]))
    sums = _Products(base, rotated, density)
    tables = [] if largest is None else [table_of(sums, 0.0, largest)]
    return CoupledRows(data, base, sums, tables)


@dataclass(eq=False)
class TwoScatterRows:
    """Correlated rows with one scatter in hosts and another elsewhere; build with `two_scatters`.

    A draw costs a factorisation of the size of the rows in hosts.

    Attributes
    ----------
    data : CoupledData
        Rows in hosts first, then the others.
    base : Tridiagonal
        The covariance of the others, decomposed.
    tables : list of SumTable
        Over the others' extra variance, finer tables first.
    """

    data: CoupledData
    base: Tridiagonal
    sums: _Products = field(repr=False)
    tables: list[SumTable]

    def add_to(self, total: Moments, hosts: FloatArray, others: FloatArray) -> None:
        """Add the rows' sums at the two extra variances, shape (b,) each, in place."""
        packed = interpolated(self.sums, self.tables, others)
        products, constant = _schur(self.data, packed, hosts)
        add_products(total, self.data, products, constant)

    def moments(self, hosts: FloatArray, others: FloatArray) -> Moments:
        """The rows' sums alone."""
        total = _empty(len(hosts), self.data)
        self.add_to(total, hosts, others)
        return total

    def focus(self, low: float, high: float) -> None:
        """Have a short table for the range of the others' extra variance."""
        focus(self.sums, self.tables, low, high)


def two_scatters(
    data: CoupledData, largest: float, base: Tridiagonal | None = None
) -> TwoScatterRows:
    """Decompose the block of the rows without host, and tabulate what hosts need of it.

    Parameters
    ----------
    data : CoupledData
        Rows in hosts first; at least one of each kind.
    largest : float
        Extra variance of the others up to which sums are tabulated.
    base : Tridiagonal, optional
        The others' covariance decomposed before.
    """
    n = int(np.sum(data.host >= 0))
    base = tridiagonal(np.ascontiguousarray(data.covariance[n:, n:])) if base is None else base
    rotated = base.rotated(np.hstack([data.covariance[n:, :n], data.columns[n:]]))

    def density(packed: FloatArray) -> FloatArray:
        products, constant = _schur(data, packed, np.zeros(len(packed)))
        return _alone(products, constant, len(data.inside))

    sums = _Products(base, rotated, density)
    return TwoScatterRows(data, base, sums, [table_of(sums, 0.0, largest)])


def _schur(
    data: CoupledData, packed: FloatArray, extra: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Products of [indicators, X, y] and the constant, the rows without host eliminated."""
    n, width = int(np.sum(data.host >= 0)), data.columns.shape[1]
    others = _unpacked(packed[:, 1:], n + width)
    first = np.hstack([data.indicators()[:n], data.columns[:n]])
    m = first.shape[1] - width
    size = len(packed)
    products = np.empty((size, m + width, m + width))
    constant = packed[:, 0] - 0.5 * n * LOG_2PI

    def part(start: int, stop: int) -> None:
        chosen = slice(start, stop)
        _condition(
            data.covariance[:n, :n].copy(),
            first,
            others[chosen],
            extra[chosen],
            products[chosen],
            constant[chosen],
        )

    in_halves(part, size, work=size * n * n * (n + m))
    return products, constant


@compiled
def _condition(
    covariance: FloatArray,
    first: FloatArray,
    others: FloatArray,
    extra: FloatArray,
    products: FloatArray,
    constant: FloatArray,
) -> None:
    n, q = first.shape
    width = others.shape[1] - n
    m = q - width
    dense = np.empty((n, n + q))
    work = np.empty((q, q))
    for draw in range(len(extra)):
        for i in range(n):
            for j in range(n):
                dense[i, j] = covariance[i, j] - others[draw, i, j]
            dense[i, i] += extra[draw]
            for j in range(q):
                dense[i, n + j] = first[i, j]
            for j in range(width):
                dense[i, n + m + j] -= others[draw, i, n + j]
        work[:] = 0.0
        constant[draw] -= 0.5 * eliminate_coupled(dense, n, work)
        for i in range(q):
            for j in range(i + 1):
                value = -work[i, j]
                if j >= m:
                    value += others[draw, n + i - m, n + j - m]
                products[draw, i, j] = value
                products[draw, j, i] = value
