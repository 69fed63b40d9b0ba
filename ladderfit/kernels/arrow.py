"""Gaussian systems of arrow shape: one local parameter per host, a few globals.

Rows y = u[host] + X g + e, or y = X g + e where there is no host, with e normal
of known variance, are summed into moments; the locals are eliminated one by one
and the globals by a Cholesky factor.  Everything carries a leading batch axis,
since variances and the known part of g differ from draw to draw.

The data column y is treated as one more column of X: `cross` and `square` hold
products with [X, y], so that a coefficient that becomes known is moved to the
left-hand side by a contraction (`condition`).
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

LOG_2PI = float(np.log(2.0 * np.pi))


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
    """

    local: FloatArray
    cross: FloatArray
    square: FloatArray
    constant: FloatArray

    def __add__(self, other: Moments) -> Moments:
        """Moments of both sets of rows."""
        return Moments(
            self.local + other.local,
            self.cross + other.cross,
            self.square + other.square,
            self.constant + other.constant,
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
    """

    columns: FloatArray
    variance: FloatArray
    hosts: int
    slices: tuple[tuple[int, int, int], ...]
    products: FloatArray = field(repr=False)

    def moments(self, extra: FloatArray) -> Moments:
        """Sum the rows up, with `extra` (shape (b,)) added to every variance."""
        variance = self.variance + extra[:, None]
        weight = 1.0 / variance
        batch, width = len(extra), self.columns.shape[1]
        local = np.zeros((batch, self.hosts))
        cross = np.zeros((batch, self.hosts, width))
        for host, start, stop in self.slices:
            part = weight[:, start:stop]
            local[:, host] = part.sum(axis=1)
            cross[:, host] = part @ self.columns[start:stop]
        square = np.empty((batch, width, width))
        upper = np.triu_indices(width)
        sums = weight @ self.products
        square[:, upper[0], upper[1]] = sums
        square[:, upper[1], upper[0]] = sums
        constant = -0.5 * (np.log(variance).sum(axis=1) + len(self.variance) * LOG_2PI)
        return Moments(local, cross, square, constant)


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
    order = np.argsort(host, kind="stable")
    host = host[order]
    full = np.column_stack([columns[order], y[order]])
    edges = np.flatnonzero(np.diff(host)) + 1
    starts, stops = [0, *edges.tolist()], [*edges.tolist(), len(host)]
    slices = tuple(
        (int(host[start]), start, stop)
        for start, stop in zip(starts, stops, strict=True)
        if stop > start and host[start] >= 0
    )
    upper = np.triu_indices(full.shape[1])
    products = full[:, upper[0]] * full[:, upper[1]]
    return Rows(full, variance[order].astype(float), hosts, slices, products)


def condition(moments: Moments, known: IntArray, values: FloatArray) -> Moments:
    """Move coefficients with known values to the left-hand side.

    Parameters
    ----------
    moments : Moments
        With k coefficients.
    known : array of int, shape (j,)
        Which coefficients are known.
    values : array, shape (b, j)
        Their values.

    Returns
    -------
    Moments
        With k - j coefficients, in the old order.
    """
    if len(known) == 0:
        return moments
    width = moments.square.shape[-1]
    free = np.setdiff1d(np.arange(width - 1), known)
    cross, square = moments.cross, moments.square
    data = cross[:, :, -1] - np.einsum("bhj,bj->bh", cross[:, :, known], values)
    linear = square[:, :, -1] - np.einsum("bkj,bj->bk", square[:, :, known], values)
    total = linear[:, -1] - np.einsum("bj,bj->b", linear[:, known], values)
    small = np.empty((len(values), len(free) + 1, len(free) + 1))
    small[:, :-1, :-1] = square[:, free[:, None], free]
    small[:, :-1, -1] = small[:, -1, :-1] = linear[:, free]
    small[:, -1, -1] = total
    return Moments(
        moments.local,
        np.concatenate([cross[:, :, free], data[:, :, None]], axis=2),
        small,
        moments.constant,
    )


@dataclass(frozen=True)
class Solution:
    """The Gaussian posterior of globals and locals, given the moments.

    Attributes
    ----------
    log_evidence : array, shape (b,)
        Log of the integral over globals and locals.
    mean : array, shape (b, k)
        Mean of the globals.
    factor : array, shape (b, k, k)
        Lower Cholesky factor of the globals' precision.
    """

    log_evidence: FloatArray
    mean: FloatArray
    factor: FloatArray
    moments: Moments

    def draw(self, rng: np.random.Generator) -> tuple[FloatArray, FloatArray]:
        """One draw per batch entry: globals, shape (b, k), and locals, shape (b, h)."""
        batch, k = self.mean.shape
        noise = rng.standard_normal((batch, k, 1))
        globals_ = self.mean + np.linalg.solve(np.swapaxes(self.factor, 1, 2), noise)[..., 0]
        cross, local = self.moments.cross, self.moments.local
        centre = (cross[:, :, -1] - np.einsum("bhk,bk->bh", cross[:, :, :-1], globals_)) / local
        return globals_, centre + rng.standard_normal(local.shape) / np.sqrt(local)


def solve(moments: Moments) -> Solution:
    """Eliminate the locals, factor the globals, and integrate both out.

    Every host needs at least one row of its own, and the globals' precision has
    to be positive definite (which proper priors ensure).
    """
    local, cross = moments.local, moments.cross
    scaled = cross / np.sqrt(local)[:, :, None]
    reduced = moments.square - np.swapaxes(scaled, 1, 2) @ scaled
    batch, k, hosts = len(reduced), reduced.shape[-1] - 1, local.shape[1]
    factor = np.linalg.cholesky(reduced[:, :-1, :-1]) if k else np.empty((batch, 0, 0))
    rotated = np.linalg.solve(factor, reduced[:, :-1, -1:])[..., 0]
    mean = np.linalg.solve(np.swapaxes(factor, 1, 2), rotated[..., None])[..., 0]
    chi2 = reduced[:, -1, -1] - np.einsum("bk,bk->b", rotated, rotated)
    log_evidence = (
        moments.constant
        - 0.5 * chi2
        - 0.5 * np.log(local).sum(axis=1)
        - np.log(np.diagonal(factor, axis1=1, axis2=2)).sum(axis=1)
        + 0.5 * (k + hosts) * LOG_2PI
    )
    return Solution(log_evidence, mean, factor, moments)
