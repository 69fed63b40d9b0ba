"""The frame in which host moduli are eliminated.

A host's own Cepheids pin the apparent magnitude u of their centroid; the
relation's coefficients then say what modulus that means:

    mu[h] = u[h] + origin[h] - centroid[h] . g ,

with g the coefficients and centroid[h] the mean of the design columns over the
host's stars.  In this frame the star sums are centred, so that no digits are
lost and slope and moduli hardly correlate.  A host without Cepheids has
centroid 0: there u + origin is the modulus.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ladderfit.kernels.arrow import Rows, rows
from ladderfit.ladder import Ladder
from ladderfit.relations import design
from ladderfit.samples import BoolArray, FloatArray, IntArray, StarSample


@dataclass(frozen=True)
class Frame:
    """Origins, shape (h,), and centroids, shape (h, k), of all hosts."""

    origin: FloatArray
    centroid: FloatArray

    @property
    def hosts(self) -> int:
        """Number of hosts."""
        return len(self.origin)

    def modulus(self, local: FloatArray, coefficients: FloatArray) -> FloatArray:
        """Moduli from locals, shape (b, h), and coefficients, shape (b, k)."""
        return np.asarray(local + self.origin - coefficients @ self.centroid.T)

    def modulus_rows(
        self, host: IntArray, columns: FloatArray, y: FloatArray, variance: FloatArray
    ) -> Rows:
        """Rows y = mu[host] + columns . g + e, brought into the frame."""
        whole = self.columns(host, columns, y)
        return rows(host, whole[:, :-1], whole[:, -1], variance, self.hosts)

    def columns(self, host: IntArray, columns: FloatArray, y: FloatArray) -> FloatArray:
        """[columns, y] of rows y = mu[host] + columns . g + e in the frame, shape (n, k + 1).

        Rows of no host, where it is -1, stay as they are.
        """
        whole = np.column_stack([columns, y])
        inside = host >= 0
        whole[inside, :-1] -= self.centroid[host[inside]]
        whole[inside, -1] -= self.origin[host[inside]]
        return whole


def host_frame(ladder: Ladder, width: int) -> Frame:
    """The frame for a system with `width` coefficients."""
    hosts = len(ladder.hosts)
    origin, centroid = np.zeros(hosts), np.zeros((hosts, width))
    for anchor in ladder.geometric:
        origin[anchor.host] = anchor.modulus
    stars = ladder.cepheids
    if stars is None:
        return Frame(origin, centroid)
    columns = _wide(ladder, stars, width)
    count = np.bincount(stars.host, minlength=hosts)
    inhabited = count > 0
    for place in range(width):
        sums = np.bincount(stars.host, weights=columns[:, place], minlength=hosts)
        centroid[inhabited, place] = sums[inhabited] / count[inhabited]
    total = np.bincount(stars.host, weights=stars.magnitude, minlength=hosts)
    origin[inhabited] = total[inhabited] / count[inhabited]
    return Frame(origin, centroid)


def star_rows(ladder: Ladder, frame: Frame, stars: StarSample, chosen: BoolArray) -> Rows:
    """Rows m = mu[host] + columns . g + e of the chosen Cepheids."""
    columns = _wide(ladder, stars, frame.centroid.shape[1])[chosen]
    return frame.modulus_rows(
        stars.host[chosen], columns, stars.magnitude[chosen], stars.variance[chosen]
    )


def star_columns(ladder: Ladder, stars: StarSample) -> tuple[FloatArray, tuple[str, ...]]:
    """The relation's design columns, shape (n, k), and their names."""
    columns = design(ladder.choices, stars, ladder.hosts)
    return np.stack(list(columns.values()), axis=1), tuple(columns)


def _wide(ladder: Ladder, stars: StarSample, width: int) -> FloatArray:
    narrow, _ = star_columns(ladder, stars)
    columns = np.zeros((len(stars), width))
    columns[:, : narrow.shape[1]] = narrow
    return columns
