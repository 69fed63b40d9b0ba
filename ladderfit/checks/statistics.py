"""What is checked of deviations that should be standard normal: statistics T of them.

Each is large where the deviations are not what they should be, in either direction.
Asymmetry and tails are sums of Hermite polynomials He3 and He4, which to first order
ask for nothing that a fitted mean and spread take up.  The ends are the largest and
the smallest deviation, each turned to a standard normal number by its exact
distribution (that of a normal to the power n): a cut leaves an end too short.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field

import numpy as np
from scipy.special import log_ndtr, ndtri_exp

from ladderfit.samples import FloatArray, IntArray

Statistic = Callable[[FloatArray], FloatArray]  # deviations (b, n) -> T (b,)

PLAIN = ("distribution", "largest deviation", "scatter")
BOTH = ("trend", "scatter")
_FEWEST = 8  # objects for a check
_PER_HOST = 3  # stars of a host, for checks of hosts
_LEAST_LOG = -1e-300  # of a chance that rounds to 1


@dataclass(frozen=True)
class Sample:
    """Deviations of one kind of object and what they may depend on.

    Attributes
    ----------
    name : str
    deviations : array, shape (b, n)
    along : mapping of str to array, shape (n,) or (b, n)
        Quantities by name; a missing number leaves an object out.
    host : array of int, shape (n,), or None
    kinds : mapping of str to tuple of str
        What is looked for along a quantity: "trend", "scatter", "bend"; the first two
        where nothing is said.
    alone : tuple of str
        What is checked of the deviations by themselves: names in `ALONE`.
    group : str
        Of supernovae, their population, "hosts" or "expansion"; else empty.
    """

    name: str
    deviations: FloatArray
    along: Mapping[str, FloatArray]
    host: IntArray | None = None
    kinds: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    alone: tuple[str, ...] = PLAIN
    group: str = ""


def statistics_of(sample: Sample) -> Iterator[tuple[str, FloatArray, Statistic]]:
    """What is checked of a sample: words, deviations, statistic."""
    z = sample.deviations
    if z.shape[1] < _FEWEST:
        return
    for name in sample.alone:
        yield name, z, ALONE[name]
    for name, values in sample.along.items():
        here = np.isfinite(np.atleast_2d(values)).all(axis=0)
        x = np.atleast_2d(values)[:, here]
        x = x - x.mean(axis=1, keepdims=True) if here.any() else x
        if here.sum() < _FEWEST or not np.ptp(x) > 0.0:
            continue
        for kind in sample.kinds.get(name, BOTH):
            yield f"{kind} with {name}", z[:, here], _ALONG[kind](x)
    if sample.host is not None:
        count = np.bincount(sample.host)
        here = count[sample.host] >= _PER_HOST
        if len(np.unique(sample.host[here])) > 1:
            host = np.unique(sample.host[here], return_inverse=True)[1]
            yield "scatter by host", z[:, here], _by_host(host)
            if "period" in sample.along:
                x = sample.along["period"][here]
                yield "slope by host", z[:, here], _slope_by_host(host, x)


def anderson_darling(z: FloatArray) -> FloatArray:
    """Distance of the distribution from a standard normal, tails weighted (1952), shape (b,)."""
    n = z.shape[1]
    z = np.sort(z, axis=1)
    odd = 2.0 * np.arange(1, n + 1) - 1.0
    return np.asarray(-n - (odd * (log_ndtr(z) + log_ndtr(-z[:, ::-1]))).sum(axis=1) / n)


def _largest(z: FloatArray) -> FloatArray:
    return np.asarray(np.abs(z).max(axis=1))


def _whole_scatter(z: FloatArray) -> FloatArray:
    return np.asarray(np.abs(np.sum(z**2 - 1.0, axis=1)))


def _asymmetry(z: FloatArray) -> FloatArray:
    return np.asarray(np.abs(np.sum(z * (z**2 - 3.0), axis=1)))


def _tails(z: FloatArray) -> FloatArray:
    square = z**2
    return np.asarray(np.abs(np.sum(square * (square - 6.0) + 3.0, axis=1)))


def upper_end(z: FloatArray) -> FloatArray:
    """How unusual the largest of n is, too small or too large, in standard deviations, (b,)."""
    log = np.minimum(z.shape[1] * log_ndtr(z.max(axis=1)), _LEAST_LOG)
    return np.asarray(np.abs(ndtri_exp(log)))


def lower_end(z: FloatArray) -> FloatArray:
    """The same of the smallest."""
    return upper_end(-z)


ALONE: Mapping[str, Statistic] = {
    "distribution": anderson_darling,
    "largest deviation": _largest,
    "scatter": _whole_scatter,
    "asymmetry": _asymmetry,
    "tails": _tails,
    "upper end": upper_end,
    "lower end": lower_end,
}


def _trend(x: FloatArray) -> Statistic:
    unit = x / np.sqrt(np.sum(x**2, axis=1, keepdims=True))
    return lambda z: np.abs((z * unit).sum(axis=1))


def _scatter_trend(x: FloatArray) -> Statistic:
    unit = x / np.sqrt(np.sum(x**2, axis=1, keepdims=True))
    return lambda z: np.abs(((z**2 - 1.0) * unit).sum(axis=1))


def _bend(x: FloatArray) -> Statistic:
    """Trend with the square of x, shape (1, n), less the constant and linear part of it."""
    basis, square = np.stack([np.ones_like(x[0]), x[0]], axis=1), x[0] ** 2
    return _trend(np.asarray(square - basis @ np.linalg.lstsq(basis, square)[0])[None, :])


_ALONG: Mapping[str, Callable[[FloatArray], Statistic]] = {
    "trend": _trend,
    "scatter": _scatter_trend,
    "bend": _bend,
}


def _by_host(host: IntArray) -> Statistic:
    member = (host[:, None] == np.arange(host.max() + 1)).astype(float)
    count = member.sum(axis=0)
    return lambda z: np.asarray((((z**2 - 1.0) @ member) ** 2 / (2.0 * count)).sum(axis=1))


def _slope_by_host(host: IntArray, x: FloatArray) -> Statistic:
    member = (host[:, None] == np.arange(host.max() + 1)).astype(float)
    inner = x - (x @ member / member.sum(axis=0))[host]
    loads = member * inner[:, None]
    loads = loads / np.sqrt(np.maximum((loads**2).sum(axis=0), 1e-300))
    return lambda z: np.asarray(((z @ loads) ** 2).sum(axis=1))
