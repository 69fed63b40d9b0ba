"""Deviations of stars from the model, standard normal and independent if it is true.

They are taken at draws of everything, nuisances of hosts and moduli of parallax stars
included: at a draw from the posterior such pivotal quantities have the distribution
that they have at the truth (Johnson 2007, Bayesian Analysis 2, 719; exactly so on
average over the prior).  Stars under a magnitude limit are mapped from their
truncated distribution to a normal one.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from scipy.special import log_ndtr, ndtr, ndtri, ndtri_exp

from ladderfit.choices import Magnitude
from ladderfit.kernels import detection
from ladderfit.kernels.sightlines import VOLUME_TILT
from ladderfit.kernels.star_sums import StarRows
from ladderfit.ladder import Ladder
from ladderfit.names import with_group
from ladderfit.posterior.frame import host_frame
from ladderfit.posterior.parallaxes import ParallaxTerms, parallax_terms
from ladderfit.posterior.split import linear_coefficients
from ladderfit.posterior.star_terms import StarTerms, star_terms
from ladderfit.samples import FloatArray, StarSample

Draws = Mapping[str, FloatArray]

_SOFT_NODES, _LOWEST = 200, -9.0
_GRID = 241
_FEWEST = 1e-300


@dataclass(frozen=True)
class StarDeviations:
    """Of stars at every draw, shape (b, n) each.

    Attributes
    ----------
    magnitude : array
    other : array or None
        Of colours or parallaxes, where they are data of their own.
    colour : array or None
        The measured colour [mag] without what its error has in common with the
        magnitude's deviation, so that the two are independent; None where the errors
        are not known apart.
    """

    magnitude: FloatArray
    other: FloatArray | None
    colour: FloatArray | None


def cepheid_deviations(ladder: Ladder, draws: Draws, rng: np.random.Generator) -> StarDeviations:
    """Deviations of the Cepheids in hosts from the relation, and of their colours if modelled.

    Parameters
    ----------
    ladder : Ladder
        With Cepheids.
    draws : mapping of str to array, shape (b,)
        Of every parameter and modulus.
    rng : Generator
    """
    names = linear_coefficients(ladder)
    frame = host_frame(ladder, len(names))
    terms = star_terms(ladder, frame, names)
    rows = terms.at(draws.__getitem__)
    coefficients = np.stack([draws[name] for name in names], axis=1)  # others' columns are zero
    moduli = np.stack([draws[with_group("modulus", host)] for host in ladder.hosts], axis=1)
    local = moduli - frame.origin + coefficients @ frame.centroid.T
    host = np.repeat(terms.runs[:, 0], terms.runs[:, 2] - terms.runs[:, 1])
    left = rows.y - local[:, host] - coefficients @ rows.columns.T
    slope = coefficients[:, rows.slope_column] if rows.slope_column >= 0 else np.zeros(len(rows.y))
    if rows.slope is not None:
        left = left - rows.slope * slope[:, None]
    colour = None
    if rows.nuisances.shape[2]:
        nuisances = _nuisances(rows, terms, left, slope, rng)
        left = left - (rows.nuisances * nuisances).sum(axis=2)
        if rows.slope is not None:
            side = rows.sides[0]
            along = 0.0 if side.slope is None else slope[:, None] * side.slope
            gap = side.datum - nuisances[:, :, side.nuisance] - along
            colour = gap * np.sqrt(side.weight)
    cleared = _cleared(ladder, ladder.cepheids, draws, left, 1.0 / rows.weight)
    return StarDeviations(_unlimited(ladder, rows, left), colour, cleared)


def _cleared(
    ladder: Ladder,
    stars: StarSample | None,
    draws: Draws,
    left: FloatArray,
    variance: FloatArray,
) -> FloatArray | None:
    """Colours without what they share with the deviations `left` of that variance, (b, n)."""
    light = None if stars is None else stars.photometry
    treatment, magnitude = ladder.choices.relation.reddening, _magnitude(ladder, stars)
    if light is None or light.covariance is None or light.colour_variance is None:
        return None
    if treatment != "fixed" and treatment.population:  # deviations are those given the colour
        return np.broadcast_to(light.colour, left.shape)
    if treatment != "fixed":
        ratio = draws["reddening_ratio"][:, None]
    elif magnitude is not None and magnitude.wesenheit is not None:
        ratio = np.full((1, 1), magnitude.wesenheit.ratio)
    else:
        return None
    shared = light.covariance - ratio * light.colour_variance
    return np.asarray(light.colour - shared / variance * left)


def _magnitude(ladder: Ladder, stars: StarSample | None) -> Magnitude | None:
    cepheids, parallaxes = ladder.choices.cepheids, ladder.choices.anchors.parallaxes
    in_galaxy = stars is not None and stars.parallax is not None
    if in_galaxy and parallaxes is not None and parallaxes.magnitude is not None:
        return parallaxes.magnitude
    return None if cepheids is None else cepheids.magnitude


def _nuisances(
    rows: StarRows,
    terms: StarTerms,
    left: FloatArray,
    slope: FloatArray,
    rng: np.random.Generator,
) -> FloatArray:
    """Draws of each host's nuisances, given everything else, for each of its stars (b, n, q)."""
    batch, n, q = rows.nuisances.shape
    found = np.empty((batch, n, q))
    for run, (_, start, stop) in enumerate(terms.runs):
        here = slice(start, stop)
        loads, weight = rows.nuisances[:, here], rows.weight[:, here]
        weighted = np.swapaxes(loads * weight[:, :, None], 1, 2)
        precision = weighted @ loads + np.diag(rows.prior_precision)
        linear = (weighted @ left[:, here, None])[:, :, 0]
        linear = linear + rows.prior_precision * rows.prior_mean[run]
        for side in rows.sides:
            datum: FloatArray = np.broadcast_to(side.datum[here], (batch, stop - start))
            if side.slope is not None:
                datum = datum - slope[:, None] * side.slope[here]
            precision[:, side.nuisance, side.nuisance] += side.weight[:, here].sum(axis=1)
            linear[:, side.nuisance] += (side.weight[:, here] * datum).sum(axis=1)
        factor = np.linalg.cholesky(precision)
        mean = np.linalg.solve(precision, linear[:, :, None])
        noise = rng.standard_normal((batch, q, 1))
        drawn = mean + np.linalg.solve(np.swapaxes(factor, 1, 2), noise)
        found[:, here] = np.swapaxes(drawn, 1, 2)
    return found


def _unlimited(ladder: Ladder, rows: StarRows, left: FloatArray) -> FloatArray:
    """Deviations in units of their spread; those cut at a limit mapped to normal ones."""
    root = np.sqrt(rows.weight)
    z, stars, section = left * root, ladder.cepheids, ladder.choices.cepheids
    if stars is None or stars.headroom is None or section is None or section.completeness is None:
        return np.asarray(z)
    cut = np.isfinite(stars.headroom)
    lead = (left[:, cut] + stars.headroom[cut]) * root[:, cut]
    softness = section.completeness.softness * root[:, cut]
    if section.completeness.softness == 0.0:
        z[:, cut] = ndtri_exp(np.minimum(log_ndtr(z[:, cut]) - log_ndtr(lead), -_FEWEST))
        return np.asarray(z)
    share = np.empty_like(lead)
    node, weight = np.polynomial.legendre.leggauss(_SOFT_NODES)
    for row in range(len(z)):  # one draw at a time: nodes take room
        top = z[row, cut][:, None]
        half = 0.5 * (np.maximum(top, _LOWEST) - _LOWEST)
        t = _LOWEST + half * (1.0 + node)
        inner = np.exp(-0.5 * t**2) * ndtr((lead[row][:, None] - t) / softness[row][:, None])
        chance = ndtr(lead[row] / np.hypot(1.0, softness[row]))
        share[row] = (half * weight * inner).sum(axis=1) / np.sqrt(2.0 * np.pi) / chance
    z[:, cut] = ndtri(np.clip(share, _FEWEST, 1.0 - 1e-16))
    return np.asarray(z)


def why_no_parallaxes(ladder: Ladder) -> str | None:
    """Why deviations of the parallax stars are not worked out, or None where they are."""
    section = ladder.choices.anchors.parallaxes
    if section is None:
        return None
    if section.outliers.robust:
        return "their deviations are no longer normal by choice"
    if section.selection is not None:
        return "their sample has limits"
    if section.clusters or (ladder.parallax_stars and ladder.parallax_stars.extras.clusters):
        return "stars of clusters share a modulus"
    return "their distances follow a disc" if section.disc is not None else None


def parallax_deviations(ladder: Ladder, draws: Draws, rng: np.random.Generator) -> StarDeviations:
    """Deviations of parallax stars from the relation and of their parallaxes.

    Every star's modulus is drawn from what prior, magnitude and parallax say of it.

    Parameters
    ----------
    ladder : Ladder
        With parallax stars for which `why_no_parallaxes` gives None.
    draws : mapping of str to array, shape (b,)
    rng : Generator
    """
    terms = parallax_terms(ladder)
    if terms is None:
        raise TypeError("a ladder without parallax stars")
    near, variance, measured, error = terms.measured(draws.__getitem__)
    root = np.sqrt(variance)
    low, high = near - 9.0 * root, near + 9.0 * root
    for last in (False, False, True):
        mu = np.linspace(low, high, _GRID)
        log = _log_modulus(terms, draws, mu) - 0.5 * ((near - mu) / root) ** 2
        log = log - 0.5 * ((measured - 10.0 ** (2.0 - 0.2 * mu)) / error) ** 2
        density = np.exp(log - log.max(axis=0))
        if not last:
            heavy = density > 1e-14
            first = np.argmax(heavy, axis=0)
            end = _GRID - 1 - np.argmax(heavy[::-1], axis=0)
            step = (high - low) / (_GRID - 1)
            low, high = low + (first - 1) * step, low + (end + 1) * step
    mass = np.cumsum(0.5 * (density[1:] + density[:-1]), axis=0)
    wanted = rng.random(near.shape) * mass[-1]
    cell = np.minimum((mass < wanted).sum(axis=0), _GRID - 2)
    below = np.where(cell > 0, np.take_along_axis(mass, np.maximum(cell - 1, 0)[None], 0)[0], 0.0)
    here = np.take_along_axis(mass, cell[None], 0)[0]
    part = (wanted - below) / np.maximum(here - below, _FEWEST)
    drawn = low + (cell + part) * (high - low) / (_GRID - 1)
    left = near - drawn
    return StarDeviations(
        left / root,
        (measured - 10.0 ** (2.0 - 0.2 * drawn)) / error,
        _cleared(ladder, ladder.parallax_stars, draws, left, variance),
    )


def _log_modulus(terms: ParallaxTerms, draws: Draws, mu: FloatArray) -> FloatArray:
    """Log of the prior of a modulus, unnormalised, shape (grid, b, n)."""
    if terms.distances.kind == detection.FLAT:
        return np.zeros_like(mu)
    log = VOLUME_TILT * mu
    if terms.distances.kind == detection.EXPONENTIAL:
        log = log - 10.0 ** (0.2 * mu - 2.0) / draws["distance_length"][:, None]
    return np.asarray(log)
