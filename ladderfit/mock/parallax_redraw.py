"""Parallaxes of existing stars drawn again.

Without a proper prior of the moduli, a star (of a cluster, its first) keeps its
magnitude: such a prior says what the modulus, and so the parallax, may be given the
magnitude, and nothing of the magnitude itself.  Under a proper prior or a selection,
moduli are drawn from the prior and whole stars or clusters again until all are found.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np
from astropy.table import MaskedColumn

from ladderfit.choices import Parallaxes
from ladderfit.errors import InputError, Problem
from ladderfit.ladder import Ladder
from ladderfit.mock.contamination import outliers_given_magnitudes
from ladderfit.mock.photometry_redraw import SEEN, Light, band_columns, free_moduli, shine_again
from ladderfit.mock.star_law import belongs, has_input_errors, scatter_of, stars_again
from ladderfit.mock.tables import digits_column
from ladderfit.names import with_group
from ladderfit.samples import FloatArray, IntArray, StarSample

Rng = np.random.Generator
_ROUNDS = 5000  # of drawing again what is not found
_TILT = 0.6 * float(np.log(10.0))
_STEP = 0.01  # mag, of the table of a disc's density
_FAR = 25.0  # mag, where that table ends
_REACH = 6.0  # widths beyond a limit at which stars are still drawn


@dataclass(frozen=True)
class Found:
    """Stars as measured, and the true parallax of each cluster [mas]."""

    columns: list[MaskedColumn]
    metallicity: FloatArray
    parallax: FloatArray
    clusters: Mapping[str, float]


def parallax_beyond(ladder: Ladder) -> Iterator[Problem]:
    """What the simulator does not know of parallax stars."""
    stars, section = ladder.parallax_stars, ladder.choices.anchors.parallaxes
    if stars is None or section is None:
        return
    volume = section.distance_prior == "uniform in volume" and section.selection is None
    if volume and has_input_errors(ladder, stars):
        yield _problem("errors of periods or metallicities in an endless volume", "columns")
    if volume and stars.extras.cluster is not None:
        yield _problem("clusters in an endless volume", "distance_prior")
    if ladder.choices.relation.reddening != "fixed":
        for key in ("modulus_bounds", "selection", "clusters"):
            if getattr(section, key):
                yield _problem(f"{key.replace('_', ' ')} beside a free ratio", key)


def _problem(found: str, key: str) -> Problem:
    return Problem(
        found,
        "terms that the simulator knows",
        "take it out to simulate the rest",
        key=f"anchors.parallaxes.{key}",
    )


def parallax_needs(ladder: Ladder) -> Iterator[str]:
    """Names of the parallaxes' own parameters that need a true value."""
    stars, section = ladder.parallax_stars, ladder.choices.anchors.parallaxes
    if stars is None or section is None:
        return
    groups = [belongs(ladder, stars, ladder.choices.groups[name]) for name in section.offsets]
    inside = np.any(groups, axis=0) if groups else np.zeros(len(stars), bool)
    if not inside.all() or any(cluster.offset for cluster in section.clusters.values()):
        yield "parallax_offset"
    yield from (with_group("parallax_offset", name) for name in section.offsets)
    if ladder.choices.states_prior("parallax_error_scale"):
        yield "parallax_error_scale"
    if section.exponential is not None:
        yield "distance_length"


def parallaxes_again(
    ladder: Ladder,
    stars: StarSample,
    section: Parallaxes,
    truth: Mapping[str, float],
    rng: Rng,
    moduli: tuple[float, float] | None = None,
) -> Found:
    """Simulate the stars; see the head of this file.

    Parameters
    ----------
    ladder, stars, section
        The stars and the choices for them.
    truth : mapping of str to float
    rng : Generator
    moduli : pair of float, optional
        A range in which moduli follow a prior flat in modulus or uniform in volume.
    """
    if moduli is not None:
        modulus = _moduli_between(str(section.distance_prior), moduli, len(stars), rng)
        modulus = modulus[_first(stars)]
        again = stars_again(ladder, stars, truth, rng)
        light = shine_again(ladder, stars, modulus + again.mean, truth, rng)
        parallax = _measured(ladder, stars, section, modulus, truth, rng)
        return Found(band_columns(light), again.metallicity, parallax, _of_clusters(stars, modulus))
    proper = section.exponential is not None or section.disc is not None
    if proper or section.modulus_bounds is not None or section.selection is not None:
        return _found(ladder, stars, section, truth, rng)
    again = stars_again(ladder, stars, truth, rng)
    if ladder.choices.relation.reddening != "fixed":
        modulus, light = free_moduli(ladder, stars, again.mean, truth, rng)
    else:
        modulus = _given_magnitudes(ladder, stars, section, again.mean, truth, rng)
        light = _kept(ladder, stars, again.mean, modulus, truth, rng)
        modulus = modulus[_first(stars)]
    parallax = _measured(ladder, stars, section, modulus, truth, rng)
    return Found(band_columns(light), again.metallicity, parallax, _of_clusters(stars, modulus))


def cluster_parallaxes(
    ladder: Ladder, parallax: Mapping[str, float], truth: Mapping[str, float], rng: Rng
) -> dict[str, float]:
    """Clusters' own parallaxes measured again [mas], given the true ones by name."""
    section = ladder.choices.anchors.parallaxes
    clusters = {} if section is None else section.clusters
    found = {}
    for name, cluster in clusters.items():
        if name in parallax:
            shift = truth["parallax_offset"] if cluster.offset else 0.0
            found[name] = parallax[name] + shift + cluster.error * float(rng.normal())
    return found


def _of_clusters(stars: StarSample, modulus: FloatArray) -> dict[str, float]:
    """True parallax of each cluster [mas]."""
    cluster = stars.extras.cluster
    if cluster is None:
        return {}
    places = {int(c): place for place, c in enumerate(cluster) if c >= 0}
    named = {stars.extras.clusters[c]: place for c, place in places.items()}
    return {name: float(10.0 ** (2.0 - 0.2 * modulus[place])) for name, place in named.items()}


def _first(stars: StarSample) -> IntArray:
    """For each star, the first of those that share its modulus, shape (n,)."""
    cluster = stars.extras.cluster
    own = np.arange(len(stars))
    if cluster is None:
        return own
    first = {int(c): int(place) for place, c in reversed(list(enumerate(cluster))) if c >= 0}
    return np.array([first.get(int(c), int(i)) for i, c in zip(own, cluster, strict=True)])


def _given_magnitudes(
    ladder: Ladder,
    stars: StarSample,
    section: Parallaxes,
    mean: FloatArray,
    truth: Mapping[str, float],
    rng: Rng,
) -> FloatArray:
    """Moduli as prior and magnitude have them: normal, and farther where volume counts."""
    tilt = 0.0 if section.distance_prior == "flat in modulus" else _TILT
    offset, extra = outliers_given_magnitudes(ladder, stars, truth, tilt, rng)
    variance = stars.variance + scatter_of(ladder, stars, truth) ** 2 + extra
    middle = stars.magnitude - mean - offset + tilt * variance
    return np.asarray(middle + np.sqrt(variance) * rng.normal(size=len(stars)))


def _kept(
    ladder: Ladder,
    stars: StarSample,
    mean: FloatArray,
    modulus: FloatArray,
    truth: Mapping[str, float],
    rng: Rng,
) -> Light:
    """The magnitudes as they were, but of a cluster's other stars drawn again."""
    first = _first(stars)
    kept = first == np.arange(len(stars))
    light = Light({"W": stars.magnitude}, {"W": np.sqrt(stars.variance)})
    if kept.all():
        return light
    other = shine_again(ladder, stars, modulus[first] + mean, truth, rng)
    return Light({"W": np.where(kept, stars.magnitude, other.measured["W"])}, light.errors)


def _measured(
    ladder: Ladder,
    stars: StarSample,
    section: Parallaxes,
    modulus: FloatArray,
    truth: Mapping[str, float],
    rng: Rng,
) -> FloatArray:
    """Parallaxes with their offsets and errors [mas], shape (n,)."""
    if stars.parallax_error is None:
        raise TypeError("a parallax sample without errors")
    offset = np.full(len(stars), truth.get("parallax_offset", 0.0))
    for name in reversed(section.offsets):
        inside = belongs(ladder, stars, ladder.choices.groups[name])
        offset[inside] = truth[with_group("parallax_offset", name)]
    scale = truth.get("parallax_error_scale", 1.0)
    noise = scale * stars.parallax_error * rng.normal(size=len(stars))
    return np.asarray(10.0 ** (2.0 - 0.2 * modulus) + offset + noise)


def _found(
    ladder: Ladder, stars: StarSample, section: Parallaxes, truth: Mapping[str, float], rng: Rng
) -> Found:
    """Stars, or clusters of them, drawn until all pass the limits."""
    first, chosen = _first(stars), section.selection
    headroom = stars.extras.headroom
    seen_now = stars.magnitude if headroom is None or chosen is None else headroom
    limit = None if chosen is None else chosen.limit
    difference = np.zeros(len(stars)) if limit is None else limit - seen_now - stars.magnitude
    lost = np.ones(len(stars), bool)
    light: dict[str, FloatArray] = {}
    metallicity, parallax, true = (np.empty(len(stars)) for _ in range(3))
    for _ in range(_ROUNDS):
        again = stars_again(ladder, stars, truth, rng)
        ends = None if limit is None else limit - difference - again.mean
        modulus = _from_prior(ladder, stars, section, ends, truth, rng)[first]
        new = shine_again(ladder, stars, modulus + again.mean, truth, rng)
        measured = _measured(ladder, stars, section, modulus, truth, rng)
        passed = np.ones(len(stars), bool)
        if chosen is not None and limit is not None:
            dim = new.measured["W"] + difference + chosen.softness * rng.normal(size=len(stars))
            passed &= dim <= limit
        if chosen is not None and chosen.parallax_min is not None:
            passed &= measured >= chosen.parallax_min
        failed = np.bincount(first[~passed], minlength=len(stars)) > 0
        take = lost & ~failed[first]
        for name, values in new.measured.items():
            light.setdefault(name, values.copy())[take] = values[take]
        metallicity[take], parallax[take] = again.metallicity[take], measured[take]
        true[take] = modulus[take]
        lost &= ~take
        if not lost.any():
            columns = band_columns(Light(light, new.errors))
            if limit is not None:
                band = light["W"] + difference
                columns.append(digits_column(SEEN, band, 8, "mag", "band of the limit"))
            return Found(columns, metallicity, parallax, _of_clusters(stars, true))
    raise InputError(
        Problem(
            found=f"{int(lost.sum())} stars that the limits would hardly ever let in",
            expected="limits and a truth under which each star may be seen",
            remedy="cut those stars, or correct the limits",
            key="anchors.parallaxes.selection",
        )
    )


def _from_prior(
    ladder: Ladder,
    stars: StarSample,
    section: Parallaxes,
    ends: FloatArray | None,
    truth: Mapping[str, float],
    rng: Rng,
) -> FloatArray:
    """One modulus for each star by the distance prior; `ends` are moduli at the limit [mag]."""
    n = len(stars)
    if section.modulus_bounds is not None:
        return rng.uniform(*section.modulus_bounds, n)
    if section.exponential is not None:
        return np.asarray(10.0 + 5.0 * np.log10(rng.gamma(3.0, truth["distance_length"], n)))
    if section.disc is not None:
        return _in_disc(stars, section, rng)
    if ends is None:  # the choices refuse such a selection
        raise AssertionError
    softness = 0.0 if section.selection is None else section.selection.softness
    scatter = scatter_of(ladder, stars, truth)
    width = np.sqrt(stars.variance + scatter**2 + softness**2)
    far = np.asarray(ends + _REACH * width)
    first = _first(stars)
    nearest = np.full(n, np.inf)  # all stars of a cluster have to pass
    np.minimum.at(nearest, first, far)
    return np.asarray(nearest[first] + np.log(rng.uniform(size=n)) / _TILT)


def _in_disc(stars: StarSample, section: Parallaxes, rng: Rng) -> FloatArray:
    """Moduli along each sight line, by the density of stars times the volume."""
    disc, sky = section.disc, stars.extras
    if disc is None or sky.longitude is None or sky.latitude is None:
        raise AssertionError  # a disc needs the sky
    modulus = np.arange(0.0, _FAR, _STEP)
    distance = 10.0 ** (0.2 * modulus - 2.0)
    longitude, latitude = np.deg2rad(sky.longitude), np.deg2rad(sky.latitude)
    found = np.empty(len(stars))
    for place in range(len(stars)):
        flat = distance * np.cos(latitude[place])
        x = disc.solar_radius - flat * np.cos(longitude[place])
        y = flat * np.sin(longitude[place])
        z = disc.solar_height + distance * np.sin(latitude[place])
        density = np.exp(-np.hypot(x, y) / disc.length) / np.cosh(z / (2.0 * disc.height)) ** 2
        total = np.cumsum(distance**3 * density)
        found[place] = np.interp(rng.uniform() * total[-1], total, modulus)
    return found


def _moduli_between(prior: str, ends: tuple[float, float], size: int, rng: Rng) -> FloatArray:
    """Moduli between two ends, by the distance prior: flat, or as the volume grows."""
    if prior == "flat in modulus":
        return rng.uniform(*ends, size)
    smallest = 10.0 ** (0.6 * (ends[0] - ends[1]))
    return np.asarray(ends[1] + np.log10(rng.uniform(smallest, 1.0, size)) / 0.6)
