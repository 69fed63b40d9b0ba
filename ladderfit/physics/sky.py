"""Positions on the sky: Galactic coordinates, ecliptic latitude, separations.

Rotations of the ICRS as the Gaia archive documents them: the North Galactic Pole at
(192.85948, 27.12825) deg, the Galactic longitude of the celestial pole 122.93192 deg
(Hipparcos catalogue, ESA SP-1200, vol. 1, sect. 1.5.3); obliquity of the ecliptic
84381.41100 arcsec.  Written down from memory; a test compares with astropy.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]

_POLE = np.deg2rad((192.85948, 27.12825))
_LONGITUDE_OF_POLE = np.deg2rad(122.93192)
_OBLIQUITY = np.deg2rad(84381.411 / 3600.0)


def galactic(ra: npt.ArrayLike, dec: npt.ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Galactic longitude in [0, 360) and latitude [deg] of ICRS positions [deg], shape (n,)."""
    alpha = np.deg2rad(np.asarray(ra, float)) - _POLE[0]
    delta = np.deg2rad(np.asarray(dec, float))
    sine = np.sin(_POLE[1]) * np.sin(delta)
    sine = sine + np.cos(_POLE[1]) * np.cos(delta) * np.cos(alpha)
    across = np.cos(delta) * np.sin(alpha)
    along = np.cos(_POLE[1]) * np.sin(delta) - np.sin(_POLE[1]) * np.cos(delta) * np.cos(alpha)
    longitude = np.rad2deg(_LONGITUDE_OF_POLE - np.arctan2(across, along)) % 360.0
    return np.asarray(longitude), np.asarray(np.rad2deg(np.arcsin(np.clip(sine, -1.0, 1.0))))


def ecliptic_latitude(ra: npt.ArrayLike, dec: npt.ArrayLike) -> FloatArray:
    """Ecliptic latitude [deg] of ICRS positions [deg], shape (n,)."""
    alpha, delta = np.deg2rad(np.asarray(ra, float)), np.deg2rad(np.asarray(dec, float))
    sine = np.cos(_OBLIQUITY) * np.sin(delta)
    sine = sine - np.sin(_OBLIQUITY) * np.cos(delta) * np.sin(alpha)
    return np.asarray(np.rad2deg(np.arcsin(np.clip(sine, -1.0, 1.0))))


def separations(longitude: npt.ArrayLike, latitude: npt.ArrayLike) -> FloatArray:
    """Angle [deg] between every two of n positions [deg], shape (n, n)."""
    l_, b = np.deg2rad(np.asarray(longitude, float)), np.deg2rad(np.asarray(latitude, float))
    unit = np.stack([np.cos(b) * np.cos(l_), np.cos(b) * np.sin(l_), np.sin(b)], axis=-1)
    chord = np.linalg.norm(unit[:, None, :] - unit[None, :, :], axis=-1)
    return np.asarray(np.rad2deg(2.0 * np.arcsin(np.clip(0.5 * chord, 0.0, 1.0))))
