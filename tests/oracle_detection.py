"""Slow references for distance priors and the chance of detection; used by tests alone."""

from __future__ import annotations

import numpy as np
from scipy.special import ndtr

PER_MAG = 0.2 * np.log(10.0)
SUN = {"solar_radius": 8.2, "solar_height": 0.02}


def log_prior(kind, length=None, sky=None, disc=None):
    """Unnormalised log prior of a modulus: d^3 times a density, d in kpc."""

    def density(mu):
        d = 10.0 ** (0.2 * mu - 2.0)
        total = 3.0 * np.log(d)
        if kind == "exponential":
            total = total - d / length
        if kind == "disc":
            l_, b = np.deg2rad(sky)
            x = disc["solar_radius"] - d * np.cos(b) * np.cos(l_)
            y = d * np.cos(b) * np.sin(l_)
            z = disc["solar_height"] + d * np.sin(b)
            radius = np.sqrt(x**2 + y**2 + 0.01)
            total = total - (radius - disc["solar_radius"]) / disc["length"]
            w = np.abs(z) / (2.0 * disc["height"])
            total = total - 2.0 * (w + np.log1p(np.exp(-2.0 * w)) - np.log(2.0))
        return total

    return density


def log_detection(prior, magnitudes=(), parallaxes=(), low=-20.0, high=45.0, points=650_001):
    """Log of the integral of a prior times all chances of detection, on a dense grid.

    `magnitudes` holds pairs (modulus at the limit, width), `parallaxes` pairs (least
    parallax less the offset, error).
    """
    mu = np.linspace(low, high, points)
    value = np.exp(prior(mu))
    for limit, width in magnitudes:
        value = value * ndtr((limit - mu) / width)
    for least, error in parallaxes:
        value = value * ndtr((10.0 ** (2.0 - 0.2 * mu) - least) / error)
    return float(np.log(np.trapezoid(value, mu)))
