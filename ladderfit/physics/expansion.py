"""Luminosity distances at low redshift: the expansion series, and what peculiar velocities add.

The series needs no matter content: only the deceleration q0 and the jerk j0 of
the expansion today.  Third order in redshift, Visser (2004, Classical and
Quantum Gravity 21, 2603), in the form used by Riess et al. (2016, ApJ 826, 56).
Against the exact distance of a flat universe with a cosmological constant it
errs, up to z = 0.15, by less than 1 part in 10^4 (0.0002 mag) where the matter
density is 0.16 to 0.33 (q0 from -0.76 to -0.5), and by less than 7 parts in 10^4
for any matter density from 0.1 to 1.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from ladderfit.choices import Expansion
from ladderfit.cosmologies import KINEMATIC, luminosity_shape
from ladderfit.samples import FlowSample
from ladderfit.units import LIGHT_SPEED

FloatArray = npt.NDArray[np.float64]

MODULUS_OF_MEGAPARSEC = 25.0  # mag: 5 log10(1 Mpc / 10 pc)
_MAG_PER_EFOLD = 5.0 / float(np.log(10.0))


def series(redshift: npt.ArrayLike, q0: float, j0: float) -> FloatArray:
    """Luminosity distance over its first-order value: d_L = (c z / H0) f.

    Parameters
    ----------
    redshift : array_like
        Cosmological redshift z, any shape.
    q0, j0 : float
        Deceleration and jerk today.

    Returns
    -------
    f : array, the shape of `redshift`
        1 + (1 - q0) z / 2 - (1 - q0 - 3 q0^2 + j0) z^2 / 6 (Visser 2004).
    """
    z = np.asarray(redshift, dtype=float)
    second = 0.5 * (1.0 - q0)
    third = (1.0 - q0 - 3.0 * q0**2 + j0) / 6.0
    return np.asarray(1.0 + z * (second - z * third))


def distance_term(
    redshift: npt.ArrayLike,
    redshift_heliocentric: npt.ArrayLike,
    q0: float = -0.55,
    j0: float = 1.0,
) -> FloatArray:
    """The part of a distance modulus that the redshift fixes: mu = term - 5 log10 H0.

    The comoving part of the distance follows the redshift in the frame of the
    background radiation, the dimming by (1 + z) the redshift as observed.

    Parameters
    ----------
    redshift, redshift_heliocentric : array_like
        Redshift in the frame of the background radiation, and as observed; above zero.
    q0, j0 : float
        Deceleration and jerk today.

    Returns
    -------
    term : array
        25 + 5 log10[(1 + z_hel) / (1 + z_cmb) c z_cmb f(z_cmb)], in mag for H0 in
        km/s/Mpc.
    """
    z = np.asarray(redshift, dtype=float)
    dimming = (1.0 + np.asarray(redshift_heliocentric, dtype=float)) / (1.0 + z)
    velocity = LIGHT_SPEED * z * series(z, q0, j0)
    return np.asarray(MODULUS_OF_MEGAPARSEC + 5.0 * np.log10(dimming * velocity))


def term_of(
    expansion: Expansion, redshift: npt.ArrayLike, redshift_heliocentric: npt.ArrayLike
) -> FloatArray:
    """As `distance_term`, for whatever law of distances the choices name.

    Of a cosmology other than the kinematic one only H0 d_L / c is used, so that the
    Hubble constant scales it.
    """
    model = expansion.cosmology
    if model.model == KINEMATIC:
        return distance_term(redshift, redshift_heliocentric, expansion.q0, expansion.j0)
    z = np.asarray(redshift, dtype=float)
    dimming = (1.0 + np.asarray(redshift_heliocentric, dtype=float)) / (1.0 + z)
    shape = luminosity_shape(model.model, model.parameters, z)
    return np.asarray(MODULUS_OF_MEGAPARSEC + 5.0 * np.log10(dimming * LIGHT_SPEED * shape))


def magnitudes_per_velocity(redshift: npt.ArrayLike) -> FloatArray:
    """What a peculiar velocity of 1 km/s does to a predicted modulus, 5 / ln 10 / (c z) [mag]."""
    return np.asarray(_MAG_PER_EFOLD / (LIGHT_SPEED * np.asarray(redshift, dtype=float)))


def peculiar_velocities(flow: FlowSample, expansion: Expansion) -> FloatArray:
    """Each redshift's error from peculiar velocities [km/s]: the table's column, or the choice."""
    if flow.peculiar_velocity_error is not None:
        return flow.peculiar_velocity_error
    return np.full(len(flow), expansion.peculiar_velocity)


def peculiar_variance(redshift: npt.ArrayLike, dispersion: npt.ArrayLike) -> FloatArray:
    """Variance that random velocities along the line of sight give a predicted modulus.

    First order in velocity and in redshift, sd = 5 / ln 10 x dispersion / (c z).
    The complete first-order term in velocity (Hui & Greene 2006, Physical Review
    D 73, 123526) is smaller by 1 % at z = 0.05 and by 4 % at z = 0.15.

    Parameters
    ----------
    redshift : array_like
        Redshift in the frame of the background radiation, above zero.
    dispersion : array_like
        Dispersion of the line-of-sight velocities [km/s], one for all or one each.

    Returns
    -------
    variance : array, the shape of `redshift`
        In mag^2.
    """
    return np.asarray((np.asarray(dispersion) * magnitudes_per_velocity(redshift)) ** 2)
