"""The zero point of Gaia EDR3 and DR3 parallaxes after Lindegren et al. (2021, A&A 649, A4).

    Z = sum over j, k of q_jk(G) c_j(colour) b_k(beta)

in microarcseconds, with coefficients q_jk that are linear in G between the nodes
of the paper's tables of the five- and of the six-parameter solutions, copied
below.  The colour is nu_eff for five parameters and the pseudocolour for six, in
inverse micrometres; beta is the ecliptic latitude.  Z is subtracted from the
catalogue's parallax.

The functions c_j and b_k and the ranges below were written down from memory; the
reference values in the tests agree with the formula to rounding.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]

FIVE_PARAMETERS = 31  # values of the catalogue's column astrometric_params_solved
SIX_PARAMETERS = 95

# Ranges in which the recipe is stated to hold: G [mag], nu_eff, pseudocolour [1/micrometre].
MAGNITUDES = (6.0, 21.0)
COLOURS = {FIVE_PARAMETERS: (1.1, 1.9), SIX_PARAMETERS: (1.24, 1.72)}


@dataclass(frozen=True)
class Coefficients:
    """One table of the paper.

    Attributes
    ----------
    terms : tuple of (int, int), length m
        (j, k) of each coefficient.
    magnitude : array, shape (nodes,)
        G of the nodes.
    values : array, shape (nodes, m)
        q_jk [microarcsecond].
    """

    terms: tuple[tuple[int, int], ...]
    magnitude: FloatArray
    values: FloatArray


def _table(terms: tuple[tuple[int, int], ...], *rows: tuple[float, ...]) -> Coefficients:
    """Rows of G and one coefficient per term."""
    array = np.array(rows)
    array.setflags(write=False)
    return Coefficients(terms, array[:, 0], array[:, 1:])


COEFFICIENTS = {
    FIVE_PARAMETERS: _table(
        ((0, 0), (0, 1), (0, 2), (1, 0), (1, 1), (2, 0), (3, 0), (4, 0)),
        (6.0, -26.98, -9.62, 27.4, -25.1, 0.0, -1257.0, 0.0, 0.0),
        (10.8, -27.23, -3.07, 23.04, 35.3, 15.7, -1257.0, 0.0, 0.0),
        (11.2, -30.33, -9.23, 9.08, -88.4, -11.8, -1257.0, 0.0, 0.0),
        (11.8, -33.54, -10.08, 13.28, -126.7, 11.6, -1257.0, 0.0, 0.0),
        (12.2, -13.65, -0.07, 9.35, -111.4, 40.6, -1257.0, 0.0, 0.0),
        (12.9, -19.53, -1.64, 15.86, -66.8, 20.6, -1257.0, 0.0, 0.0),
        (13.1, -37.99, 2.63, 16.14, -5.7, 14.0, -1257.0, 107.9, 104.3),
        (15.9, -38.33, 5.61, 15.42, 0.0, 18.7, -1189.0, 243.8, 155.2),
        (16.1, -31.05, 2.83, 8.59, 0.0, 15.5, -1404.0, 105.5, 170.7),
        (17.5, -29.18, -0.09, 2.41, 0.0, 24.5, -1165.0, 189.7, 325.0),
        (19.0, -18.4, 5.98, -6.46, 0.0, 5.5, 0.0, 0.0, 276.6),
        (20.0, -12.65, -4.57, -7.46, 0.0, 97.9, 0.0, 0.0, 0.0),
        (21.0, -18.22, -15.24, -18.54, 0.0, 128.2, 0.0, 0.0, 0.0),
    ),
    SIX_PARAMETERS: _table(
        ((0, 0), (0, 1), (0, 2), (1, 0), (1, 1), (1, 2), (2, 0)),
        (6.0, -27.85, -7.78, 27.47, -32.1, 14.4, 9.5, -67.0),
        (10.8, -28.91, -3.57, 22.92, 7.7, 12.6, 1.6, -572.0),
        (11.2, -26.72, -8.74, 9.36, -30.3, 5.6, 17.2, -1104.0),
        (11.8, -29.04, -9.69, 13.63, -49.4, 36.3, 17.7, -1129.0),
        (12.2, -12.39, -2.16, 10.23, -92.6, 19.8, 27.6, -365.0),
        (12.9, -18.99, -1.93, 15.9, -57.2, -8.0, 19.9, -554.0),
        (13.1, -38.29, 2.59, 16.2, -10.5, 1.4, 0.4, -960.0),
        (15.9, -36.83, 4.2, 15.76, 22.3, 11.1, 10.0, -1367.0),
        (16.1, -28.37, 1.99, 9.28, 50.4, 17.2, 13.7, -1351.0),
        (17.5, -24.68, -1.37, 3.52, 86.8, 19.8, 21.3, -1380.0),
        (19.0, -15.32, 4.01, -6.03, 29.2, 14.1, 0.4, -563.0),
        (20.0, -13.73, -10.92, -8.3, -74.4, 196.4, -42.0, 536.0),
        (21.0, -29.53, -20.34, -18.74, -39.5, 326.8, -262.3, 1598.0),
    ),
}

_MAS_PER_MICROARCSECOND = 1.0e-3


class ZeroPoint(NamedTuple):
    """Zero points and where they are extrapolated.

    Attributes
    ----------
    value : array, shape (n,)
        To be subtracted from the catalogue's parallax [mas]; NaN where an input is missing.
    outside_magnitude, outside_colour : array of bool, shape (n,)
        Rows whose G or colour lies outside the range the recipe is stated for.
    """

    value: FloatArray
    outside_magnitude: BoolArray
    outside_colour: BoolArray

    @property
    def outside(self) -> BoolArray:
        """Rows outside either range, shape (n,)."""
        return np.asarray(self.outside_magnitude | self.outside_colour)


def parallax_zero_point(
    magnitude: npt.ArrayLike,
    colour: npt.ArrayLike,
    latitude: npt.ArrayLike,
    solved: npt.ArrayLike = FIVE_PARAMETERS,
) -> ZeroPoint:
    """The zero point of each star's parallax (Lindegren et al. 2021, A&A 649, A4).

    Outside the tables' magnitudes, 6 to 21, the coefficients of the nearer end
    are used; outside the range of colours the formula is used as it stands.
    Both are marked.

    Parameters
    ----------
    magnitude : array_like, shape (n,)
        Mean G magnitude.
    colour : array_like, shape (n,)
        nu_eff of stars with five parameters, the pseudocolour of those with six
        [1/micrometre].
    latitude : array_like, shape (n,)
        Ecliptic latitude [deg].
    solved : array_like of int, shape (n,)
        astrometric_params_solved: 31 for five parameters, 95 for six.

    Returns
    -------
    ZeroPoint

    Raises
    ------
    ValueError
        If `solved` holds anything but 31 and 95, or a latitude is not in [-90, 90].
    """
    g, c, beta, kind = np.broadcast_arrays(
        np.asarray(magnitude, float),
        np.asarray(colour, float),
        np.asarray(latitude, float),
        np.asarray(solved),
    )
    if not np.all(np.isin(kind, tuple(COEFFICIENTS))):
        raise ValueError("astrometric_params_solved must be 31 or 95")
    if np.any(np.abs(beta) > 90.0):
        raise ValueError("an ecliptic latitude must lie between -90 and 90 degrees")
    value = np.full(g.shape, np.nan)
    outside_colour = np.zeros(g.shape, bool)
    for code, table in COEFFICIENTS.items():
        here = kind == code
        value[here] = _zero_point(g[here], c[here], beta[here], table)
        low, high = COLOURS[code]
        outside_colour |= here & ((c < low) | (c > high))
    low, high = MAGNITUDES
    return ZeroPoint(value, np.asarray((g < low) | (g > high)), outside_colour)


def _zero_point(
    g: FloatArray, colour: FloatArray, latitude: FloatArray, table: Coefficients
) -> FloatArray:
    """The sum over all coefficients of one table [mas], shape (n,)."""
    of_colour, of_latitude = _colour_functions(colour), _latitude_functions(latitude)
    total = np.zeros(g.shape)
    for (j, k), q in zip(table.terms, table.values.T, strict=True):
        total += np.interp(g, table.magnitude, q) * of_colour[j] * of_latitude[k]
    return _MAS_PER_MICROARCSECOND * total


def _colour_functions(colour: FloatArray) -> tuple[FloatArray, ...]:
    """c_0 to c_4, shape (n,) each."""
    blueward = np.clip(1.48 - colour, 0.0, 0.24)
    return (
        np.ones_like(colour),
        np.clip(colour - 1.48, -0.24, 0.24),
        blueward**3,
        np.minimum(colour - 1.24, 0.0),
        np.maximum(colour - 1.72, 0.0),
    )


def _latitude_functions(latitude: FloatArray) -> tuple[FloatArray, ...]:
    """b_0 to b_2, shape (n,) each."""
    sine = np.sin(np.deg2rad(latitude))
    return np.ones_like(sine), sine, sine**2 - 1.0 / 3.0
