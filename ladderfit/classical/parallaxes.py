"""Absolute magnitudes from parallaxes: Lutz-Kelker corrections, astrometry-based luminosity."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from ladderfit.errors import LadderfitError
from ladderfit.samples import FloatArray
from ladderfit.units import LN10

BENEDICT_2007_COEFFICIENT = -8.09  # mag; see `scaled_correction`

_MAG_PER_EFOLD = 5.0 / LN10
_PER_MAG = 0.2 * LN10
_ROUNDS = 200


def lutz_kelker(relative_error: npt.ArrayLike, exponent: float = 4.0) -> FloatArray:
    """Lutz-Kelker correction of an absolute magnitude [mag], to be added to it.

    The mean of 5 log10 of true over measured parallax under a prior that goes as
    the parallax to the power of minus `exponent`, expanded in the relative error q:
    -5 / ln 10 [(n + 1/2) q^2 + (6 n^2 + 10 n + 3) / 4 q^4] (Lutz & Kelker 1973, PASP
    85, 573; in this form Hanson 1979, MNRAS 186, 875, from memory; both orders were
    derived anew).  n = 4 is a uniform density of stars without any limit.

    Parameters
    ----------
    relative_error : array_like
        Error of the parallax over the measured parallax.
    exponent : float

    Notes
    -----
    The series is asymptotic, as the mean itself diverges at zero parallax.  For
    n = 4 the second term is a quarter of the first at a relative error of 0.18.
    """
    q2 = np.asarray(relative_error, float) ** 2
    n = exponent
    second, fourth = n + 0.5, (6.0 * n**2 + 10.0 * n + 3.0) / 4.0
    return np.asarray(-_MAG_PER_EFOLD * (second * q2 + fourth * q2**2))


def scaled_correction(
    relative_error: npt.ArrayLike, coefficient: float = BENEDICT_2007_COEFFICIENT
) -> FloatArray:
    """Lutz-Kelker-Hanson correction [mag] scaled by the squared relative error alone.

    ``coefficient`` times the square; -8.09 as in Benedict et al. (2007, AJ 133,
    1810; from memory), where it is scaled from one star and stands for n = 3.2.
    """
    return np.asarray(coefficient * np.asarray(relative_error, float) ** 2)


class Luminosity(NamedTuple):
    """Astrometry-based luminosities 10^(0.2 M) and their errors, shape (n,) each."""

    value: FloatArray
    error: FloatArray


def astrometric_luminosity(
    magnitude: npt.ArrayLike, parallax: npt.ArrayLike, parallax_error: npt.ArrayLike
) -> Luminosity:
    """10^(0.2 M) = parallax [mas] x 10^(0.2 m - 2), for any parallax, negative ones too.

    Arenou & Luri (1999, ASP Conf. Ser. 167, 13), as the reduced parallax Feast &
    Catchpole (1997, MNRAS 286, L1); from memory.  Linear in the parallax, hence
    with a normal error, that of the magnitude left out.
    """
    factor = 10.0 ** (0.2 * np.asarray(magnitude, float) - 2.0)
    return Luminosity(
        np.asarray(factor * np.asarray(parallax, float)),
        np.asarray(factor * np.asarray(parallax_error, float)),
    )


class ZeroPointEstimate(NamedTuple):
    """A zero point and its standard error [mag]."""

    value: float
    error: float


def zero_point_by_luminosity(
    reduced: npt.ArrayLike,
    parallax: npt.ArrayLike,
    parallax_error: npt.ArrayLike,
    scatter: npt.ArrayLike = 0.0,
) -> ZeroPointEstimate:
    """Zero point from the weighted mean of astrometry-based luminosities.

    Weights follow from the error of the parallax and, at the mean itself rather
    than at each star's own value, from the scatter in magnitude.  A scatter s biases
    the zero point, from +0.1 ln 10 s^2 mag where it dominates to -0.3 ln 10 s^2 where
    the errors of the parallaxes do, as their weights follow the magnitudes; this is
    left as it is.

    Parameters
    ----------
    reduced : array_like, shape (n,)
        Magnitudes less the relation's other terms: m - b x [mag].
    parallax, parallax_error : array_like, shape (n,)
        In mas.
    scatter : array_like, shape (n,) or ()
        Standard deviation of a magnitude round the relation [mag].

    Raises
    ------
    LadderfitError
        If the mean luminosity is not above zero.
    """
    value, error = astrometric_luminosity(reduced, parallax, parallax_error)
    spread = _PER_MAG * np.asarray(scatter, float)
    mean = float(np.average(value, weights=error**-2))
    for _ in range(_ROUNDS):
        before, mean = mean, float(np.average(value, weights=1 / (error**2 + (spread * mean) ** 2)))
        if abs(mean - before) <= 1e-14 * abs(mean):
            break
    if not mean > 0.0:
        raise LadderfitError("the mean of the parallaxes gives no luminosity: it is not above zero")
    own = 1.0 / np.sqrt(np.sum(1.0 / (error**2 + (spread * mean) ** 2)))
    return ZeroPointEstimate(5.0 * float(np.log10(mean)), float(own / mean / _PER_MAG))
