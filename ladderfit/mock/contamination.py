"""Stars that do not follow the relation: blends, wrong identifications, heavy tails."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np

from ladderfit.choices import Outliers
from ladderfit.errors import Problem
from ladderfit.ladder import Ladder
from ladderfit.samples import BoolArray, FloatArray, StarSample

Rng = np.random.Generator


@dataclass(frozen=True)
class Contamination:
    """Cepheids of hosts that are too bright or too faint, in all bands alike.

    Attributes
    ----------
    share : float
        Chance that a star is such, if its period is at most `longest`.
    offset, width : float
        Mean and standard deviation of what is added to its magnitudes [mag].
    longest : float
        The longest period of such stars [d].  Where only some periods are concerned
        a plain fit's slope is pulled too.
    """

    share: float
    offset: float = 0.0
    width: float = 1.0
    longest: float = float("inf")

    def draw(self, rng: Rng, period: FloatArray) -> tuple[BoolArray, FloatArray]:
        """Which stars are concerned, and what is added to their magnitudes, shape (n,) each."""
        off = (rng.random(len(period)) < self.share) & (period <= self.longest)
        shift = self.offset + self.width * rng.normal(size=len(period))
        return off, np.where(off, shift, 0.0)


def outliers_in_use(ladder: Ladder, stars: StarSample) -> tuple[Outliers, str]:
    """The treatment that a sample's choices ask for, and how its parameters' names start."""
    cepheids, parallaxes = ladder.choices.cepheids, ladder.choices.anchors.parallaxes
    if stars.parallax is not None:
        return (Outliers() if parallaxes is None else parallaxes.outliers), "parallax_"
    return (Outliers() if cepheids is None else cepheids.outliers), ""


def contamination_beyond(ladder: Ladder) -> Iterator[Problem]:
    """What the simulator does not know of outliers."""
    for key, stars in _samples(ladder).items():
        if outliers_in_use(ladder, stars)[0].groups:
            yield Problem(
                "groups with outliers of their own",
                "one law for the sample",
                "take the groups out to simulate the rest",
                key=f"{key}.outliers.groups",
            )


def contamination_needs(ladder: Ladder) -> tuple[str, ...]:
    """Names of parameters that need a true value; an offset is zero where none is given."""
    names: list[str] = []
    for stars in _samples(ladder).values():
        outliers, prefix = outliers_in_use(ladder, stars)
        if outliers.treatment == "mixture":
            names += [f"{prefix}outlier_fraction", f"{prefix}outlier_width"]
        elif outliers.treatment == "Student-t":
            names.append(f"{prefix}degrees_of_freedom")
    return tuple(names)


def off_relation(
    ladder: Ladder, stars: StarSample, noise: FloatArray, truth: Mapping[str, float], rng: Rng
) -> tuple[FloatArray, BoolArray | None]:
    """Deviations as the choices have them, given normal ones; and who is an outlier, if any is."""
    outliers, prefix = outliers_in_use(ladder, stars)
    if outliers.treatment == "Student-t":
        freedom = truth[f"{prefix}degrees_of_freedom"]
        return noise * np.sqrt(freedom / rng.chisquare(freedom, len(noise))), None
    if outliers.treatment != "mixture":
        return noise, None
    off = rng.random(len(noise)) < truth[f"{prefix}outlier_fraction"]
    offset = truth.get(f"{prefix}outlier_offset", 0.0)
    shift = offset + truth[f"{prefix}outlier_width"] * rng.normal(size=len(noise))
    return noise + np.where(off, shift, 0.0), off


def outliers_given_magnitudes(
    ladder: Ladder, stars: StarSample, truth: Mapping[str, float], tilt: float, rng: Rng
) -> tuple[FloatArray, FloatArray]:
    """Of stars that keep their magnitude: mean deviation and extra variance of each, shape (n,).

    `tilt` is that of the moduli's prior exp(tilt mu).  Under it outliers, which may be
    farther, are more or less frequent at a magnitude than among all stars.
    """
    outliers, prefix = outliers_in_use(ladder, stars)
    if outliers.treatment != "mixture":
        return np.zeros(len(stars)), np.zeros(len(stars))
    fraction, width = truth[f"{prefix}outlier_fraction"], truth[f"{prefix}outlier_width"]
    offset = truth.get(f"{prefix}outlier_offset", 0.0)
    gain = np.exp(0.5 * (tilt * width) ** 2 - tilt * offset)
    off = rng.random(len(stars)) < fraction * gain / (1.0 - fraction + fraction * gain)
    return np.where(off, offset, 0.0), np.where(off, width**2, 0.0)


def _samples(ladder: Ladder) -> dict[str, StarSample]:
    both = {"cepheids": ladder.cepheids, "anchors.parallaxes": ladder.parallax_stars}
    return {key: stars for key, stars in both.items() if stars is not None}
