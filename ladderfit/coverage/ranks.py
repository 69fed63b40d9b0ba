"""Ranks of truths among draws: simultaneous bands, p-values, coverage of intervals.

Under a right fit the rank of a truth among L independent draws is uniform on 0 ... L
(Talts et al. 2018, arXiv:1804.06788).  The share of ranks below each of K points is
held against bands that all of it leaves with a chance of alpha only (Säilynoja,
Bürkner & Vehtari 2022, Statistics and Computing 32, 32); the chance is summed exactly.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from scipy.special import gammaln
from scipy.stats import binom

from ladderfit.samples import IntArray

LEVELS = (0.50, 0.68, 0.95)
DRAWS = 399  # L: L + 1 is a multiple of the points, and of what the levels need
POINTS = 50
_STEPS = 40  # of halving, for the width of a band


def counts(ranks: IntArray, draws: int = DRAWS, points: int = POINTS) -> IntArray:
    """How many ranks lie below each of the inner points k / points, shape (points - 1,)."""
    size = (draws + 1) / points
    edges = size * np.arange(1, points)
    return np.asarray(np.searchsorted(np.sort(ranks), edges, side="left"), dtype=np.int64)


def band(size: int, chance: float, points: int = POINTS) -> tuple[IntArray, IntArray]:
    """Least and greatest counts that uniform ranks leave anywhere with a given chance.

    Parameters
    ----------
    size : int
        Number of ranks.
    chance : float
        Of at least one count outside; the bands' own is at most that.
    points : int

    Returns
    -------
    low, high : array of int, shape (points - 1,)
    """
    return _edges(size, _pointwise(size, chance, points), points)


def simultaneous_p(found: IntArray, size: int) -> float:
    """Chance that uniform ranks somewhere leave a band as wide as these counts just touch.

    Parameters
    ----------
    found : array of int, shape (points - 1,)
        From `counts`.
    size : int
        Number of ranks.
    """
    points = len(found) + 1
    share = np.arange(1, points) / points
    below = binom.cdf(found, size, share)
    above = binom.sf(found - 1, size, share)
    tail = float(np.min(np.minimum(below, above)))
    low, high = _edges(size, 2.0 * tail * (1.0 + 1e-9), points)  # what was found is outside
    return float(min(max(1.0 - _inside(size, low, high, points), 0.0), 1.0))


def covered(ranks: IntArray, level: float, draws: int = DRAWS) -> float:
    """Share of truths inside the central interval of a level."""
    place = (ranks + 0.5) / (draws + 1)
    return float(np.mean(np.abs(2.0 * place - 1.0) < level))


@lru_cache(maxsize=64)
def _pointwise(size: int, chance: float, points: int) -> float:
    """The pointwise chance whose bands are left with the given one at most, by halving."""
    low, high = 0.5 * chance / points, chance
    for _ in range(_STEPS):
        middle = float(np.sqrt(low * high))
        outside = 1.0 - _inside(size, *_edges(size, middle, points), points)
        low, high = (middle, high) if outside <= chance else (low, middle)
        if high < 1.001 * low:
            break
    return low


def _edges(size: int, pointwise: float, points: int) -> tuple[IntArray, IntArray]:
    share = np.arange(1, points) / points
    low = binom.ppf(0.5 * pointwise, size, share)
    high = binom.isf(0.5 * pointwise, size, share)
    return low.astype(np.int64), high.astype(np.int64)


def _inside(size: int, low: IntArray, high: IntArray, points: int) -> float:
    """Chance that counts of uniform ranks stay within all edges, summed point by point."""
    log_factorial = gammaln(np.arange(size + 1) + 1.0)
    before, chance = np.array([0]), np.array([1.0])
    for k in range(points - 1):
        now = np.arange(low[k], high[k] + 1)
        if len(now) == 0:
            return 0.0
        step = 1.0 / (points - k)  # of what is left, that falls below the next point
        more = now[:, None] - before[None, :]
        left = size - before[None, :]
        fits = (more >= 0) & (more <= left)
        safe, rest = np.where(fits, more, 0), np.where(fits, left - more, 0)
        log = log_factorial[left] - log_factorial[safe] - log_factorial[rest]
        log = log + safe * np.log(step) + rest * np.log1p(-step)
        chance = np.exp(np.where(fits, log, -np.inf)) @ chance
        before = now
    return float(chance.sum())
