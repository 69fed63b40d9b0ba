"""Slow, readable references for the fast kernels; used by tests alone."""

from __future__ import annotations

import numpy as np
from scipy.stats import multivariate_normal

LOG_2PI = np.log(2.0 * np.pi)


def dense_log_evidence(host, columns, y, variance, hosts, prior_mean, prior_sd, modulus_sd=None):
    """Log density of y with coefficients and host locals integrated out, covariance written out.

    `variance` is that of each row, or the whole covariance of the rows.  Where
    `modulus_sd` is None the locals are flat (their improper density is 1).
    """
    indicator = np.zeros((len(y), hosts))
    inside = host >= 0
    indicator[np.flatnonzero(inside), host[inside]] = 1.0
    own = np.diag(variance) if np.ndim(variance) == 1 else variance
    covariance = own + (columns * np.asarray(prior_sd) ** 2) @ columns.T
    mean = columns @ np.asarray(prior_mean)
    if modulus_sd is not None:
        covariance = covariance + modulus_sd**2 * indicator @ indicator.T
        return float(multivariate_normal(mean, covariance).logpdf(y))
    inverse = np.linalg.inv(covariance)
    residual = y - mean
    precision = indicator.T @ inverse @ indicator
    estimate = np.linalg.solve(precision, indicator.T @ inverse @ residual)
    chi2 = residual @ inverse @ residual - estimate @ precision @ estimate
    return float(
        -0.5 * chi2
        - 0.5 * np.linalg.slogdet(covariance)[1]
        - 0.5 * np.linalg.slogdet(precision)[1]
        - 0.5 * (len(y) - hosts) * LOG_2PI
    )


def log_parallax_integral(a, variance, parallax, error, log_prior=None, points=400_001):
    """Log of the integral over one star's modulus on a dense grid in the modulus."""
    root = np.sqrt(variance)

    def log_integrand(mu):
        total = -0.5 * ((mu - a) / root) ** 2 - 0.5 * np.log(variance) - LOG_2PI
        total = total - 0.5 * ((10.0 ** (2.0 - 0.2 * mu) - parallax) / error) ** 2 - np.log(error)
        return total if log_prior is None else total + log_prior(mu)

    far = 10.0 - 5.0 * np.log10(max(parallax, 0.2 * error))
    low, high = min(a, far) - 15.0 * root - 2.0, max(a, far) + 15.0 * root + 8.0
    for _ in range(40):
        grid = np.linspace(low, high, 4001)
        value = log_integrand(grid)
        inside = np.flatnonzero(value > value.max() - 80.0)
        new_low, new_high = grid[max(inside[0] - 1, 0)], grid[min(inside[-1] + 1, 4000)]
        settled = new_high - new_low > 0.9 * (high - low)
        low, high = new_low, new_high
        if settled:
            break
    grid = np.linspace(low, high, points)
    value = log_integrand(grid)
    peak = value.max()
    return peak + np.log(np.trapezoid(np.exp(value - peak), grid))
