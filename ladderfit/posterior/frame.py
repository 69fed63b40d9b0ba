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
import numpy.typing as npt

from ladderfit.kernels.arrow import Rows, rows
from ladderfit.ladder import Ladder
from ladderfit.relations import design_matrix

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]


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
        return rows(
            host,
            columns - self.centroid[host],
            y - self.origin[host],
            variance,
            self.hosts,
        )


def frame_and_stars(ladder: Ladder, width: int) -> tuple[Frame, Rows | None]:
    """The frame, and the Cepheids' rows in it, for a system with `width` coefficients."""
    hosts = len(ladder.hosts)
    origin, centroid = np.zeros(hosts), np.zeros((hosts, width))
    for anchor in ladder.geometric:
        origin[anchor.host] = anchor.modulus
    stars = ladder.cepheids
    if stars is None:
        return Frame(origin, centroid), None
    design = design_matrix(ladder.choices.relation, stars)
    columns = np.zeros((len(stars), width))
    columns[:, : design.shape[1]] = design
    count = np.bincount(stars.host, minlength=hosts)
    inhabited = count > 0
    sums = np.zeros((hosts, width))
    np.add.at(sums, stars.host, columns)
    centroid[inhabited] = sums[inhabited] / count[inhabited, None]
    total = np.bincount(stars.host, weights=stars.magnitude, minlength=hosts)
    origin[inhabited] = total[inhabited] / count[inhabited]
    frame = Frame(origin, centroid)
    return frame, frame.modulus_rows(stars.host, columns, stars.magnitude, stars.variance)
