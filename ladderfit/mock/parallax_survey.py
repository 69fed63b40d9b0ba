"""Parallax stars found by a survey with limits, in a volume or in a disc, star by star.

Stars are put into space as the density has them, given a period, an absolute
magnitude, a colour and dust, measured, and kept if they pass the limits, until
there are enough.  Errors of parallaxes and of magnitudes do not depend on
distance, nor does the dust.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from astropy.table import Table

from ladderfit.mock.tables import digits_column, text_column
from ladderfit.samples import FloatArray

Rng = np.random.Generator

_BATCH = 20_000
_MOST_BATCHES = 2_000


@dataclass(frozen=True)
class ParallaxSurvey:
    """What a survey looks at, and what is true there.

    Attributes
    ----------
    stars : int
        How many are wanted.
    limit : float or None
        Faintest V [mag]; the band's limit acts on the measured magnitude.
    softness : float
        Width of the limit [mag].
    parallax_min : float or None
        Least measured parallax [mas].
    error : float
        Median error of the parallaxes [mas]; a star's own is up to a third off.
    magnitude_error : float
        Of the index and the band alike, which share it [mag].
    zero_point, slope, scatter, offset : float
        Of the relation at 10 d [mag, mag/dex, mag], and of the parallaxes [mas].
    error_scale : float
        True errors of the parallaxes over the stated ones.
    disc : tuple of float or None
        Scale length and height [kpc] of a disc with the Sun at (8.2, 0.02) kpc;
        None for stars uniform in volume.
    farthest : float
        Radius of the volume [kpc]; must lie beyond the limits.
    """

    stars: int = 70
    limit: float | None = 9.0
    softness: float = 0.0
    parallax_min: float | None = None
    error: float = 0.012
    magnitude_error: float = 0.03
    zero_point: float = -5.9
    slope: float = -3.3
    scatter: float = 0.08
    offset: float = 0.0
    error_scale: float = 1.0
    disc: tuple[float, float] | None = None
    farthest: float = 25.0


def parallax_survey(survey: ParallaxSurvey, rng: Rng) -> Table:
    """Look until there are enough stars.

    Parameters
    ----------
    survey : ParallaxSurvey
    rng : Generator

    Returns
    -------
    Table
        Columns ID, P [d], W, e_W, V [mag], plx, e_plx [mas], l, b [deg].

    Raises
    ------
    ValueError
        If the limits let hardly a star through.
    """
    found: list[dict[str, FloatArray]] = []
    for _ in range(_MOST_BATCHES):
        found.append(_seen(survey, rng))
        if sum(len(batch["P"]) for batch in found) >= survey.stars:
            break
    else:
        raise ValueError("the limits let hardly a star through")
    every = {name: np.concatenate([batch[name] for batch in found]) for name in found[0]}
    kept = {name: values[: survey.stars] for name, values in every.items()}
    names = np.array([f"S{number:04d}" for number in range(1, survey.stars + 1)])
    units = {"P": "d", "plx": "mas", "e_plx": "mas", "l": "deg", "b": "deg"}
    return Table(
        [
            text_column("ID", names, "invented star"),
            *(
                digits_column(name, values, 8, units.get(name, "mag"), _WORDS[name])
                for name, values in kept.items()
            ),
        ]
    )


_WORDS = {
    "P": "period",
    "W": "index without dust",
    "e_W": "error of W",
    "V": "V magnitude",
    "plx": "parallax",
    "e_plx": "error of the parallax",
    "l": "Galactic longitude",
    "b": "Galactic latitude",
}


def _seen(survey: ParallaxSurvey, rng: Rng) -> dict[str, FloatArray]:
    """Those of one batch that pass the limits, measured."""
    distance, longitude, latitude = _places(survey, rng)
    n = len(distance)
    log_period = np.clip(rng.normal(1.0, 0.25, n), 0.5, 1.8)
    absolute = survey.zero_point + survey.slope * (log_period - 1.0)
    absolute = absolute + survey.scatter * rng.normal(size=n)
    index = absolute + 10.0 + 5.0 * np.log10(distance)
    index = index + survey.magnitude_error * rng.normal(size=n)
    visual = index + 1.6 + rng.exponential(0.7, n)  # colour and dust
    error = survey.error * np.exp(rng.uniform(-0.3, 0.3, n))
    parallax = 1.0 / distance + survey.offset + survey.error_scale * error * rng.normal(size=n)
    kept = np.ones(n, bool)
    if survey.limit is not None:
        kept &= visual + survey.softness * rng.normal(size=n) < survey.limit
    if survey.parallax_min is not None:
        kept &= parallax > survey.parallax_min
    columns = {
        "P": 10.0**log_period,
        "W": index,
        "e_W": np.full(n, survey.magnitude_error),
        "V": visual,
        "plx": parallax,
        "e_plx": error,
        "l": longitude,
        "b": latitude,
    }
    return {name: values[kept] for name, values in columns.items()}


def _places(survey: ParallaxSurvey, rng: Rng) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Distances [kpc] and Galactic coordinates [deg]."""
    if survey.disc is None:
        distance = survey.farthest * rng.uniform(size=_BATCH) ** (1.0 / 3.0)
        latitude = np.arcsin(rng.uniform(-1.0, 1.0, _BATCH))
        return distance, rng.uniform(0.0, 360.0, _BATCH), np.rad2deg(latitude)
    length, height = survey.disc
    radius = rng.gamma(2.0, length, _BATCH)
    azimuth = rng.uniform(0.0, 2.0 * np.pi, _BATCH)
    z = 2.0 * height * np.arctanh(rng.uniform(-1.0, 1.0, _BATCH)) - 0.02
    towards = 8.2 - radius * np.cos(azimuth)
    across = radius * np.sin(azimuth)
    distance = np.sqrt(towards**2 + across**2 + z**2)
    longitude = np.rad2deg(np.arctan2(across, towards)) % 360.0
    return distance, longitude, np.rad2deg(np.arcsin(z / distance))
