"""Smooth densities of draws, and the levels that hold a stated part of them.

The draws are put on a grid in coordinates in which they are round and of unit
size, smoothed there with a Gaussian, and read off where the figure needs them.
So a narrow, tilted cloud is not blurred across its short side.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.ndimage import gaussian_filter, map_coordinates

from ladderfit.samples import FloatArray

_HALF = 6.0  # the grid reaches from minus to plus this many standard deviations
_CELLS = 161
_WIDENED = 1.5  # calmer contours; levels are set on the draws, so they enclose what they say


@dataclass(frozen=True)
class Density:
    """A smoothed density of draws in one or two dimensions, up to a constant.

    Attributes
    ----------
    centre : array, shape (d,)
        Mean of the draws.
    whiten : array, shape (d, d)
        Turns a deviation from the mean into round coordinates.
    grid : array, shape (161,) * d
        Smoothed counts in these coordinates.
    """

    centre: FloatArray
    whiten: FloatArray
    grid: FloatArray

    @classmethod
    def of(cls, draws: FloatArray, floors: tuple[float, ...] = ()) -> Density:
        """From draws.

        Parameters
        ----------
        draws : array, shape (d, n)
            d is 1 or 2; each row must vary.
        floors : tuple of float
            Per row, a bound below which there can be nothing (minus infinity for
            none).  A row that comes near its bound is mirrored there, so that the
            smoothing does not leak across.

        Returns
        -------
        Density
        """
        count = draws.shape[1]
        full = draws
        for row, floor in enumerate(floors):
            if _touches(draws[row], floor):
                mirrored = full.copy()
                mirrored[row] = 2.0 * floor - mirrored[row]
                full = np.concatenate([full, mirrored], axis=1)
        centre = full.mean(axis=1)
        covariance = np.atleast_2d(np.cov(full))
        whiten = np.linalg.inv(np.linalg.cholesky(covariance))
        white = whiten @ (full - centre[:, None])
        edges = np.linspace(-_HALF, _HALF, _CELLS + 1)
        counts, _ = np.histogramdd(white.T, bins=[edges] * len(draws))
        scott = count ** (-1.0 / (4.0 + len(draws)))  # Scott (1992), for a unit Gaussian
        width = _WIDENED * scott if len(draws) == 2 else scott
        return cls(centre, whiten, gaussian_filter(counts, width * _CELLS / (2.0 * _HALF)))

    def at(self, points: FloatArray) -> FloatArray:
        """The density at points, shape (d, ...); zero off the grid."""
        flat = points.reshape(len(points), -1)
        white = self.whiten @ (flat - self.centre[:, None])
        index = (white + _HALF) * _CELLS / (2.0 * _HALF) - 0.5
        found = map_coordinates(self.grid, index, order=1, mode="constant")
        return np.asarray(found).reshape(points.shape[1:])

    def level(self, draws: FloatArray, probability: float) -> float:
        """The density that encloses this part of the draws, shape (d, n)."""
        return float(np.quantile(self.at(draws), 1.0 - probability))


def _touches(values: FloatArray, floor: float) -> bool:
    return bool(np.isfinite(floor)) and float(np.mean(values)) - 3.0 * float(np.std(values)) < floor
