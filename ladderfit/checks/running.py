"""Running means of residuals."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ladderfit.checks.residuals import Residuals
from ladderfit.samples import FloatArray

_SMALLEST, _SHARE = 10, 10  # objects in a window: this many, or a tenth of all if that is more
_WINDOWS = 3  # below which a running mean says little


@dataclass(frozen=True)
class RunningMean:
    """Weighted means of neighbours along x, shape (m,) each.

    Attributes
    ----------
    x : array
        Mean of the window's x.
    mean, error : array
        Weighted mean of data minus model, and its standard error were the objects
        independent; in the unit of the data.
    size : int
        Objects in a window.  Windows overlap: only every `size`-th point is
        independent of the first.
    """

    x: FloatArray
    mean: FloatArray
    error: FloatArray
    size: int


def running_mean(data: Residuals, size: int | None = None) -> RunningMean | None:
    """Means over windows of neighbours, weighted by the expected spread.

    Parameters
    ----------
    data : Residuals
    size : int, optional
        Objects in a window; by default 10, or a tenth of all if that is more.

    Returns
    -------
    RunningMean or None
        None where there are not at least three windows' worth of objects.
    """
    size = max(_SMALLEST, len(data) // _SHARE) if size is None else size
    if size < 1 or len(data) < _WINDOWS * size:
        return None
    order = np.argsort(data.x, kind="stable")
    x, weight = data.x[order], data.sd[order] ** -2
    sums = np.cumsum(
        np.vstack([np.zeros(3), np.stack([x, weight, weight * data.residual[order]], axis=1)]),
        axis=0,
    )
    of_x, of_weight, pull = (sums[size:] - sums[:-size]).T
    return RunningMean(of_x / size, pull / of_weight, of_weight**-0.5, size)
