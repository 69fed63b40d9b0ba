"""Photometry drawn again where the ratio is free, errors are shared or hosts have limits.

Every star has an intrinsic colour, dust, a deviation of its own and noise in each
band; a host's shared errors are drawn once; a star beyond its host's limit is drawn
again until it is seen.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from astropy.table import MaskedColumn

from ladderfit.choices import Magnitude
from ladderfit.errors import InputError, Problem
from ladderfit.ladder import Ladder
from ladderfit.mock.contamination import off_relation
from ladderfit.mock.star_law import scatter_of
from ladderfit.mock.tables import digits_column, text_column
from ladderfit.names import with_group
from ladderfit.samples import BoolArray, FloatArray, StarSample

Rng = np.random.Generator
SEEN = "seen"  # the column in which limits act
_ROUNDS = 3000  # of drawing again what is not seen
_BANDS = ("blue", "red", "band")


@dataclass(frozen=True)
class Light:
    """Simulated photometry of stars, by column [mag], and which of them are outliers."""

    measured: Mapping[str, FloatArray]
    errors: Mapping[str, FloatArray]
    outlier: BoolArray | None = None


def photometry_beyond(ladder: Ladder) -> Iterator[Problem]:
    """What the simulator does not know of a free ratio."""
    treatment, stars = ladder.choices.relation.reddening, ladder.choices.anchors.parallaxes
    if treatment == "fixed":
        return
    remedy = "take it out to simulate the rest"
    if not treatment.population:
        yield Problem(
            'colours = "in the variance"', "colours with a population", remedy, key=_REDDENING
        )
    used = ladder.parallax_stars is not None and stars is not None
    if used and stars is not None and stars.distance_prior != "flat in modulus":
        yield Problem(
            f"{stars.prior_words!r} beside a free ratio",
            "a prior flat in modulus",
            remedy,
            key="anchors.parallaxes.distance_prior",
        )


_REDDENING = "relation.reddening.colours"


def photometry_needs(ladder: Ladder) -> tuple[str, ...]:
    """Names of parameters that need a true value."""
    treatment, cepheids = ladder.choices.relation.reddening, ladder.choices.cepheids
    names: list[str] = []
    if treatment != "fixed":
        names += ["reddening_ratio", "intrinsic_colour_slope"]
        if treatment.intrinsic:
            names += ["intrinsic_colour_scatter", "intrinsic_colour_term"]
        names += ["reddening_spread"] if ladder.cepheids is not None else []
        if ladder.parallax_stars is not None:
            names += ["parallax_colour", "parallax_reddening_spread"]
    if cepheids is not None and ladder.cepheids is not None:
        names += [with_group("shared_photometry", name) for name in cepheids.shared]
    return tuple(names)


def restated_magnitude(ladder: Ladder, magnitude: Magnitude) -> dict[str, Any] | None:
    """The magnitude of the new tables where the ratio is free; None where it is one column."""
    if ladder.choices.relation.reddening == "fixed" or magnitude.wesenheit is None:
        return None
    return {
        "wesenheit": {
            "band": _place(magnitude),
            "colour": ["blue", "red"],
            "ratio": magnitude.wesenheit.ratio,
        },
        "bands": {name: name for name in _BANDS},
        "errors": {name: f"e_{name}" for name in _BANDS},
    }


def restated_cepheids(section: Mapping[str, Any]) -> dict[str, Any]:
    """Limits and shared terms of the new table."""
    changed: dict[str, Any] = {}
    if "completeness" in section:
        changed["completeness"] = {**section["completeness"], "band": SEEN}
    if section.get("shared"):
        changed["shared"] = {
            name: {**term, "loading": f"load {name}"} for name, term in section["shared"].items()
        }
    return changed


def _place(magnitude: Magnitude) -> str:
    """Whether the index's band is the blue or the red band of the colour, or another."""
    index = magnitude.wesenheit
    bands = () if index is None else index.colour_bands
    if index is None or len(bands) < 2 or index.band not in bands:
        return "band"
    return _BANDS[bands.index(index.band)]


def shine_again(
    ladder: Ladder, stars: StarSample, mean: FloatArray, truth: Mapping[str, float], rng: Rng
) -> Light:
    """Magnitudes in every band of stars whose index would be `mean` on average [mag]."""
    treatment = ladder.choices.relation.reddening
    light = stars.photometry
    deviation = scatter_of(ladder, stars, truth) * rng.normal(size=len(stars))
    if treatment == "fixed":
        error = np.sqrt(stars.variance)
        noise = deviation + error * rng.normal(size=len(stars))
        noise, outlier = off_relation(ladder, stars, noise, truth, rng)
        return Light({"W": mean + noise}, {"W": error}, outlier)
    if light is None or light.band_variance is None or light.colour_variance is None:
        raise AssertionError  # a ladder with a free ratio has both
    colour, inner = _colours(ladder, stars, truth, rng)
    band = mean + deviation + truth["reddening_ratio"] * colour
    if treatment.intrinsic:
        band = band + truth["intrinsic_colour_term"] * inner
    magnitude = _magnitude(ladder, stars)
    place, own, whole = _place(magnitude), light.band_variance, light.colour_variance
    true = {"band": band, "red": band + 1.0, "blue": band + 1.0 + colour}
    variance = {"band": own, "red": 0.5 * whole, "blue": 0.5 * whole}
    if place == "red":
        true |= {"red": band, "blue": band + colour}
        variance |= {"red": own, "blue": whole - own}
    elif place == "blue":
        true |= {"blue": band, "red": band - colour}
        variance |= {"blue": own, "red": whole - own}
    errors = {name: np.sqrt(each) for name, each in variance.items()}
    measured = {name: true[name] + errors[name] * rng.normal(size=len(stars)) for name in _BANDS}
    return Light(measured, errors)


def free_moduli(
    ladder: Ladder, stars: StarSample, mean: FloatArray, truth: Mapping[str, float], rng: Rng
) -> tuple[FloatArray, Light]:
    """Moduli [mag] of stars that keep their magnitude, under a prior without ends, and the light.

    Everything but the modulus is simulated; the modulus is what the magnitude then leaves.
    """
    near = shine_again(ladder, stars, mean, truth, rng)
    if stars.photometry is None:
        raise AssertionError  # a ladder with a free ratio has it
    modulus = stars.photometry.band - near.measured[_place(_magnitude(ladder, stars))]
    return modulus, Light({n: m + modulus for n, m in near.measured.items()}, near.errors)


def _magnitude(ladder: Ladder, stars: StarSample) -> Magnitude:
    cepheids, parallaxes = ladder.choices.cepheids, ladder.choices.anchors.parallaxes
    if stars.parallax is not None and parallaxes is not None and parallaxes.magnitude is not None:
        return parallaxes.magnitude
    if cepheids is None:
        raise AssertionError  # one of the two sections has a magnitude
    return cepheids.magnitude


def _colours(
    ladder: Ladder, stars: StarSample, truth: Mapping[str, float], rng: Rng
) -> tuple[FloatArray, FloatArray]:
    """True colours, and their intrinsic deviations [mag]."""
    n, treatment = len(stars), ladder.choices.relation.reddening
    dex = stars.log_period - np.log10(ladder.choices.relation.pivot)
    along = truth["intrinsic_colour_slope"] * dex
    if stars.parallax is not None:
        mean, spread = np.full(n, truth["parallax_colour"]), truth["parallax_reddening_spread"]
    else:
        if stars.photometry is None:
            raise AssertionError
        bare, spread = stars.photometry.colour - along, truth["reddening_spread"]
        mean = np.array([bare[stars.host == host].mean() for host in stars.host])
    inner = np.zeros(n)
    if treatment != "fixed" and treatment.intrinsic:
        inner = truth["intrinsic_colour_scatter"] * rng.normal(size=n)
    return mean + along + inner + spread * rng.normal(size=n), inner


def cepheids_again(
    ladder: Ladder, stars: StarSample, mean: FloatArray, truth: Mapping[str, float], rng: Rng
) -> list[MaskedColumn]:
    """Photometric columns of Cepheids in hosts, shared errors and limits included."""
    cepheids = ladder.choices.cepheids
    columns: list[MaskedColumn] = []
    if cepheids is not None and stars.loadings is not None:
        for place, name in enumerate(cepheids.shared):
            width = truth[with_group("shared_photometry", name)]
            amplitude = width * rng.normal(size=len(ladder.hosts))
            mean = mean + amplitude[stars.host] * stars.loadings[:, place]
            columns.append(digits_column(f"load {name}", stars.loadings[:, place], 8, None, name))
    if cepheids is None or cepheids.completeness is None or stars.headroom is None:
        return [*columns, *band_columns(shine_again(ladder, stars, mean, truth, rng))]
    light, seen = _found(ladder, stars, mean, truth, rng)
    columns.append(digits_column(SEEN, seen, 8, "mag", "magnitude in the band of the limit"))
    return [*columns, *band_columns(light)]


def band_columns(light: Light) -> list[MaskedColumn]:
    """Magnitudes and errors as columns."""
    columns = []
    for name, values in light.measured.items():
        columns.append(digits_column(name, values, 8, "mag", f"magnitude {name}, simulated"))
        columns.append(digits_column(f"e_{name}", light.errors[name], 8, "mag", f"error of {name}"))
    if light.outlier is not None:
        told = np.where(light.outlier, "yes", "no")
        columns.append(text_column("outlier", told, "whether it was simulated as an outlier"))
    return columns


def _found(
    ladder: Ladder, stars: StarSample, mean: FloatArray, truth: Mapping[str, float], rng: Rng
) -> tuple[Light, FloatArray]:
    """Stars drawn until they are seen; each keeps its difference to the band of the limit."""
    cepheids = ladder.choices.cepheids
    if cepheids is None or cepheids.completeness is None or stars.headroom is None:
        raise AssertionError  # asked only where there are limits
    fixed = ladder.choices.relation.reddening == "fixed" or stars.photometry is None
    before = stars.magnitude if stars.photometry is None or fixed else stars.photometry.band
    limits, softness = cepheids.completeness.limits, cepheids.completeness.softness
    limit = np.array([limits.get(ladder.hosts[host], np.inf) for host in stars.host])
    has_limit = np.isfinite(stars.headroom)
    difference = np.where(has_limit, limit - np.nan_to_num(stars.headroom) - before, 0.0)
    place = "W" if fixed else _place(_magnitude(ladder, stars))
    light = shine_again(ladder, stars, mean, truth, rng)
    measured = {name: values.copy() for name, values in light.measured.items()}
    lost = np.ones(len(stars), bool)
    for _ in range(_ROUNDS):
        seen = measured[place] + difference
        lost &= seen + softness * rng.normal(size=len(stars)) > limit
        if not lost.any():
            return Light(measured, light.errors), seen
        again = shine_again(ladder, stars, mean, truth, rng)
        for name, values in again.measured.items():
            measured[name][lost] = values[lost]
    raise InputError(
        Problem(
            found=f"{int(lost.sum())} stars that the limits would hardly ever let in",
            expected="limits and a truth under which each star may be seen",
            remedy="cut those stars, or correct the limits",
            key="cepheids.completeness",
        )
    )
