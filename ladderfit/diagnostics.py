"""Effective sample sizes, Monte Carlo errors, R-hat and Pareto smoothing, on arrays.

The algorithms are those of arviz-stats: rank-normalised split R-hat and
effective sample sizes (Vehtari et al. 2021, Bayesian Analysis 16, 667) and
Pareto-smoothed importance sampling (Vehtari et al. 2024, JMLR 25, 72).
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from arviz_stats.base import array_stats

FloatArray = npt.NDArray[np.float64]

TRUSTED_K = 0.7  # Vehtari et al. 2024: above this, importance weights are not to be trusted


def smoothed_weights(log_weight: FloatArray) -> tuple[FloatArray, float]:
    """Pareto-smoothed, normalised weights and the Pareto k.

    Parameters
    ----------
    log_weight : array, shape (n,)
        Log of target over proposal density; minus infinity is allowed.

    Returns
    -------
    weights : array, shape (n,)
        Summing to one.
    k : float
        Shape of the tail; infinite if too few weights are finite.
    """
    finite = np.isfinite(log_weight)
    if finite.sum() < 25:
        return np.full(len(log_weight), 1.0 / max(len(log_weight), 1)), float("inf")
    weights = np.zeros(len(log_weight))
    if np.ptp(log_weight[finite]) < 1e-12:
        weights[finite] = 1.0 / finite.sum()
        return weights, 0.0
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        # the library takes log likelihoods left out, that is, minus the log weights
        smoothed, k = array_stats.psislw(-log_weight[finite])
    weights[finite] = np.exp(smoothed - smoothed.max())
    return weights / weights.sum(), float(k)


def weights_ess(weights: FloatArray) -> float:
    """Effective number of draws behind weights that sum to one (Kish 1965)."""
    return float(1.0 / np.sum(weights**2))


def ess(draws: FloatArray) -> float:
    """Bulk effective sample size; `draws` has shape (chains, n)."""
    return float(array_stats.ess(draws, method="bulk"))


def ess_of_mean(draws: FloatArray) -> float:
    """Effective sample size for the mean; `draws` has shape (chains, n)."""
    return float(array_stats.ess(draws, method="mean"))


def rhat(draws: FloatArray) -> float:
    """Rank-normalised split R-hat over independent runs; `draws` has shape (chains, n)."""
    return float(array_stats.rhat(draws, method="rank"))
