"""Reddening-free magnitudes, and the errors of what they are made of.

A Wesenheit index W = m - R (blue - red) does not change with extinction if R is
the ratio of total absorption in m to the colour excess (Madore 1982, ApJ 253,
575).  Where m is itself one of the two colour bands its error counts once, with
the sum of its weights: for W = I - R (V - I) the variance is
(1 + R)^2 s_I^2 + R^2 s_V^2.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]


def wesenheit(
    band: npt.ArrayLike, blue: npt.ArrayLike, red: npt.ArrayLike, ratio: float
) -> FloatArray:
    """W = band - ratio (blue - red) [mag], for arrays of one shape."""
    colour = np.asarray(blue, float) - np.asarray(red, float)
    return np.asarray(np.asarray(band, float) - ratio * colour)


def index_weights(band: str, colour: Sequence[str], ratio: float) -> dict[str, float]:
    """The weight of each measured quantity in a Wesenheit index, by name.

    Parameters
    ----------
    band : str
        The band the index is built on.
    colour : sequence of str
        Blue and red band, or the name of one colour.
    ratio : float
        Ratio of total to selective absorption.

    Returns
    -------
    dict
        The weights; a band that stands in the colour too has one, summed.

    Raises
    ------
    ValueError
        If `colour` names neither one colour nor two bands.
    """
    if len(colour) not in (1, 2):
        raise ValueError("a colour is one column or two bands")
    weights = {band: 1.0}
    for name, sign in zip(colour, (-1.0, 1.0), strict=False):
        weights[name] = weights.get(name, 0.0) + sign * ratio
    return weights


def colour_weights(colour: Sequence[str]) -> dict[str, float]:
    """The weight of each measured quantity in a colour: two bands, blue first, or one colour."""
    return dict(zip(colour, (1.0, -1.0), strict=False))


def combine_covariance(
    one: Mapping[str, float], other: Mapping[str, float], errors: Mapping[str, FloatArray]
) -> FloatArray:
    """Covariance [mag^2] of two sums of quantities with independent `errors` [mag], shape (n,)."""
    size = np.zeros_like(next(iter(errors.values())))
    for name in one.keys() & other.keys():
        size = size + one[name] * other[name] * errors[name] ** 2
    return np.asarray(size, float)


def combine(weights: Mapping[str, float], magnitudes: Mapping[str, FloatArray]) -> FloatArray:
    """The weighted sum of magnitudes and colours [mag], shape (n,)."""
    return np.asarray(sum(weight * magnitudes[name] for name, weight in weights.items()), float)


def combine_variance(weights: Mapping[str, float], errors: Mapping[str, FloatArray]) -> FloatArray:
    """Variance [mag^2] of `combine` for independent `errors` [mag], shape (n,)."""
    return np.asarray(sum((weight * errors[name]) ** 2 for name, weight in weights.items()), float)
