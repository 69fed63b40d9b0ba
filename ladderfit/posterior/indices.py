"""The index of every star and its spread at one set of parameter values, for residuals."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from ladderfit.ladder import Ladder
from ladderfit.posterior.colours import PARALLAX_COLOUR, SLOPE, colours_of
from ladderfit.posterior.split import shared_photometry
from ladderfit.samples import FloatArray, StarSample


@dataclass(frozen=True)
class Index:
    """Of every star of a sample, shape (n,).

    Attributes
    ----------
    value : array
        The magnitude or index [mag]; with a free ratio, at that ratio.
    variance : array
        Measurement variance, and what colours and shared errors add to it [mag^2].
    pulled : array
        What the star's colour says of the index beyond the relation [mag].
    """

    value: FloatArray
    variance: FloatArray
    pulled: FloatArray


def index_of(ladder: Ladder, stars: StarSample, at: Callable[[str], float]) -> Index:
    """The index of a sample at given parameter values.

    Parameters
    ----------
    ladder : Ladder
    stars : StarSample
        Cepheids or parallax stars of it.
    at : callable
        The value of a parameter by name.
    """
    value, variance, pulled = stars.magnitude, stars.variance, np.zeros(len(stars))
    colours = colours_of(ladder, stars)
    if colours is not None:
        told = colours.at(lambda name: np.array([at(name)]))
        value, variance = told.index[0], told.variance[0]
        if told.pull is not None and told.weight is not None:
            x = stars.log_period - np.log10(ladder.choices.relation.pivot)
            off = colours.colour - at(SLOPE) * x
            mean = np.full(len(stars), at(PARALLAX_COLOUR))
            if stars.parallax is None:
                mean = _host_means(off, told.weight[0], stars)
            pulled = told.pull[0] * (off - mean)
    if stars.loadings is not None:
        for place, name in enumerate(shared_photometry(ladder)):
            variance = variance + (at(name) * stars.loadings[:, place]) ** 2
    return Index(value, variance, pulled)


def _host_means(values: FloatArray, weight: FloatArray, stars: StarSample) -> FloatArray:
    """Weighted mean of each star's host."""
    sums = np.bincount(stars.host, weight * values)
    with np.errstate(invalid="ignore"):  # hosts without stars are not asked for
        means = sums / np.bincount(stars.host, weight)
    return np.asarray(means[stars.host])
