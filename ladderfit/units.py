"""Distances, moduli, parallaxes and periods, one into the other; plain numpy.

Units throughout: distance modulus in mag, parallax in mas, distance in Mpc,
period in days.  The astronomical unit is exact (IAU 2012 Resolution B2), the
parsec is 648000/pi of it (IAU 2015 Resolution B2), and a light year is a Julian
year of light.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]

METRES_PER_AU = 149_597_870_700.0
METRES_PER_PARSEC = METRES_PER_AU * 648_000.0 / float(np.pi)
LIGHT_SPEED = 299_792.458  # km/s
METRES_PER_LIGHT_YEAR = 1.0e3 * LIGHT_SPEED * 86_400.0 * 365.25
LIGHT_YEARS_PER_PARSEC = METRES_PER_PARSEC / METRES_PER_LIGHT_YEAR
LN10 = float(np.log(10.0))


def _positive(values: npt.ArrayLike, words: str) -> FloatArray:
    array = np.asarray(values, float)
    if not np.all(array > 0.0):
        raise ValueError(f"{words} must be above zero")
    return array


def parallax_from_modulus(modulus: npt.ArrayLike) -> FloatArray:
    """Parallax [mas] of a distance modulus [mag], any shape: 10^(2 - 0.2 mu)."""
    return np.asarray(10.0 ** (2.0 - 0.2 * np.asarray(modulus, float)))


def modulus_from_parallax(parallax: npt.ArrayLike) -> FloatArray:
    """Distance modulus [mag] of a true parallax [mas], any shape: 10 - 5 log10.

    For exact values only: a measured parallax is never inverted in a fit.

    Raises
    ------
    ValueError
        If a parallax is not above zero.
    """
    return np.asarray(10.0 - 5.0 * np.log10(_positive(parallax, "a parallax")))


def modulus_from_distance(distance: npt.ArrayLike) -> FloatArray:
    """Distance modulus [mag] of a distance [Mpc], any shape: 25 + 5 log10.

    Raises
    ------
    ValueError
        If a distance is not above zero.
    """
    return np.asarray(25.0 + 5.0 * np.log10(_positive(distance, "a distance")))


def distance_from_modulus(modulus: npt.ArrayLike) -> FloatArray:
    """Distance [Mpc] of a distance modulus [mag], any shape."""
    return np.asarray(10.0 ** (0.2 * (np.asarray(modulus, float) - 25.0)))


def parallax_from_distance(distance: npt.ArrayLike) -> FloatArray:
    """Parallax [mas] of a distance [Mpc], any shape: 0.001 over it.

    Raises
    ------
    ValueError
        If a distance is not above zero.
    """
    return np.asarray(1.0e-3 / _positive(distance, "a distance"))


def log_period(period: npt.ArrayLike) -> FloatArray:
    """log10 of a period [d], any shape.

    Raises
    ------
    ValueError
        If a period is not above zero.
    """
    return np.asarray(np.log10(_positive(period, "a period")))


def period_from_log(log_of_period: npt.ArrayLike) -> FloatArray:
    """Period [d] from its log10, any shape."""
    return np.asarray(10.0 ** np.asarray(log_of_period, float))


def relative_from_magnitudes(error: npt.ArrayLike) -> FloatArray:
    """Relative error of a distance for a small error of its modulus [mag]: 0.2 ln 10 times it."""
    return np.asarray(0.2 * LN10 * np.asarray(error, float))
