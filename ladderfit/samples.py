"""The arrays a fit sees, after every cut: numbers only, read-only.

Hosts are integers into `Ladder.hosts`; names stay outside the arithmetic and
are carried along only to label results.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]
TextArray = npt.NDArray[np.str_]
BoolArray = npt.NDArray[np.bool_]


@dataclass(frozen=True)
class ParallaxExtras:
    """What some choices need to know of parallax stars; None where no choice does.

    Attributes
    ----------
    g_magnitude : array, shape (n,), or None
        G [mag].
    longitude, latitude : array, shape (n,), or None
        Galactic coordinates [deg].
    headroom : array, shape (n,), or None
        Limit of the selection minus the star's magnitude in that band [mag].
    cluster : array of int, shape (n,), or None
        Index into `clusters`; -1 for a star in none.
    clusters : tuple of str
    """

    g_magnitude: FloatArray | None = None
    longitude: FloatArray | None = None
    latitude: FloatArray | None = None
    headroom: FloatArray | None = None
    cluster: IntArray | None = None
    clusters: tuple[str, ...] = ()


@dataclass(frozen=True)
class Photometry:
    """What a Wesenheit index is made of; variances are None where only its total error is known.

    Attributes
    ----------
    band, colour : array, shape (n,)
        Magnitude and colour [mag].
    band_variance, colour_variance : array, shape (n,), or None
        In mag^2.
    covariance : array, shape (n,), or None
        Of the two, from a band that stands in both [mag^2].
    """

    band: FloatArray
    colour: FloatArray
    band_variance: FloatArray | None = None
    colour_variance: FloatArray | None = None
    covariance: FloatArray | None = None


@dataclass(frozen=True)
class StarSample:
    """Cepheids that take part, sorted by host.

    Attributes
    ----------
    star : array of str, shape (n,)
        Names.
    host : array of int, shape (n,)
        Index into the ladder's hosts; -1 throughout for parallax stars.
    log_period : array, shape (n,)
        log10 of the period in days.
    magnitude, variance : array, shape (n,)
        Magnitude or Wesenheit index [mag] and its measurement variance [mag^2].
    metallicity : array, shape (n,)
        On the scale of the choices [dex]; NaN throughout where there is no such term.
    parallax, parallax_error : array, shape (n,), or None
        In mas; None for Cepheids in galaxies.
    row : array of int, shape (n,)
        Row in the table, counted from 1.
    overtone : array of bool, shape (n,), or None
        Which stars pulsate in the first overtone; None where all are fundamental
        (or their periods converted).
    system : array of str, shape (n,), or None
        Photometric system of each star; None where the table names none.
    log_period_error, metallicity_error : array, shape (n,), or None
        Errors of log10 period and of the metallicity [dex]; None where they are
        not given.
    extras : ParallaxExtras
        Of parallax stars.
    photometry : Photometry or None
        None where the magnitude is one band.
    loadings : array, shape (n, terms), or None
        On photometric errors that a host's stars share, in the order of the choices.
    headroom : array, shape (n,), or None
        Limit of the host minus the star's magnitude in that band [mag]; NaN where
        the host has none.
    """

    star: TextArray
    host: IntArray
    log_period: FloatArray
    magnitude: FloatArray
    variance: FloatArray
    metallicity: FloatArray
    row: IntArray
    parallax: FloatArray | None = None
    parallax_error: FloatArray | None = None
    overtone: BoolArray | None = None
    system: TextArray | None = None
    log_period_error: FloatArray | None = None
    metallicity_error: FloatArray | None = None
    extras: ParallaxExtras = field(default_factory=ParallaxExtras)
    photometry: Photometry | None = None
    loadings: FloatArray | None = None
    headroom: FloatArray | None = None

    def __len__(self) -> int:
        """Number of stars."""
        return len(self.star)


@dataclass(frozen=True)
class PeakInputs:
    """What terms of the peak-magnitude relation need of supernovae; empty where none does.

    Attributes
    ----------
    values : mapping of str to array, shape (n,)
        By the column's role: width, its error and covariances, and so on.
    survey : array of str, shape (n,), or None
    """

    values: Mapping[str, FloatArray] = field(default_factory=dict)
    survey: TextArray | None = None


@dataclass(frozen=True)
class PeakSample:
    """Supernovae in hosts: `magnitude` is the peak [mag], `variance` its own.

    The peak is standardised already, or `inputs` holds what the terms of the
    peak-magnitude relation need.
    """

    name: TextArray
    host: IntArray
    magnitude: FloatArray
    variance: FloatArray
    row: IntArray
    inputs: PeakInputs = field(default_factory=PeakInputs)

    def __len__(self) -> int:
        """Number of supernovae."""
        return len(self.name)


@dataclass(frozen=True)
class FlowSample:
    """Supernovae that follow the expansion.

    Attributes
    ----------
    redshift, redshift_heliocentric : array, shape (n,)
        Redshift in the frame of the background radiation, and as observed
        (equal to it where the table gives none).
    magnitude, variance : array, shape (n,)
        Peak [mag] and its variance [mag^2], without peculiar velocities.
    peculiar_velocity_error : array, shape (n,), or None
        Error of each redshift from its peculiar velocity [km/s]; None where the
        choices give one dispersion for all.
    inputs : PeakInputs
        For terms of the peak-magnitude relation.
    """

    name: TextArray
    redshift: FloatArray
    redshift_heliocentric: FloatArray
    magnitude: FloatArray
    variance: FloatArray
    row: IntArray
    peculiar_velocity_error: FloatArray | None = None
    inputs: PeakInputs = field(default_factory=PeakInputs)

    def __len__(self) -> int:
        """Number of supernovae."""
        return len(self.name)


@dataclass(frozen=True)
class VelocitySample:
    """Objects with a distance [Mpc] and a velocity [km/s]."""

    name: TextArray
    distance: FloatArray
    velocity: FloatArray
    row: IntArray

    def __len__(self) -> int:
        """Number of objects."""
        return len(self.name)


@dataclass(frozen=True)
class Kept:
    """How many rows of a table take part, and why the others do not.

    Attributes
    ----------
    total, kept : int
        Rows in the table; rows that take part.
    reasons : mapping of str to int
        Rows left out, by reason; each row counts once, under the first that applies.
    """

    total: int
    kept: int
    reasons: Mapping[str, int] = field(default_factory=dict)

    def __str__(self) -> str:
        """For example ``1,204 of 1,486 kept (270 outside the period range; 12 overtone)``."""
        text = f"{self.kept:,} of {self.total:,} kept"
        if self.reasons:
            text += f" ({'; '.join(f'{n:,} {reason}' for reason, n in self.reasons.items())})"
        return text


def frozen(values: npt.ArrayLike, kind: type = np.float64) -> npt.NDArray[Any]:
    """A read-only contiguous copy of an array."""
    array: npt.NDArray[Any] = np.array(values, dtype=kind, order="C")
    array.setflags(write=False)
    return array
