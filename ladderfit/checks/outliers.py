"""Which stars a fit takes for outliers: the probability of each, from the draws.

Draw by draw the probability that a star is an outlier, given everything else, is a
closed formula; its mean over the draws is the posterior probability.  Under a
Student-t there are no outliers to tell apart: there the weight that the star has in
the fit takes its place, 1 for a star whose deviation is as large as expected.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import pandas as pd

from ladderfit.choices.outliers import MIXTURE
from ladderfit.names import with_group
from ladderfit.posterior.errors_in_inputs import input_errors
from ladderfit.posterior.families import CEPHEIDS, PARALLAXES, Family, families, outliers_of
from ladderfit.posterior.parallaxes import parallax_terms
from ladderfit.relations import design
from ladderfit.result import Result
from ladderfit.samples import FloatArray, IntArray, StarSample

COLUMNS = ("sample", "star", "host", "row", "residual", "probability", "weight")

_ELEMENTS = 2_000_000  # of a (draws, stars) array held at once


def outlier_table(result: Result) -> pd.DataFrame | None:
    """Every star of the samples whose outliers are modelled; None where there is none.

    Returns
    -------
    DataFrame
        One row per star: ``sample`` ("cepheids" or "anchors.parallaxes"), ``star``,
        ``host`` (empty for parallax stars), ``row`` in its table, ``residual`` (data
        minus model, posterior mean [mag]; NaN for parallax stars), ``probability``
        of being an outlier (NaN under a Student-t) and ``weight`` (mean weight in
        the fit relative to a star of no deviation; NaN under a mixture).

    Raises
    ------
    LadderfitError
        If the tables behind the result are missing or changed.
    """
    parts = [part for part in (_of_hosts(result), _of_parallaxes(result)) if part is not None]
    return pd.concat(parts, ignore_index=True) if parts else None


@dataclass
class _Sums:
    """Sums over draws, one entry per star."""

    residual: FloatArray
    share: FloatArray


def _of_hosts(result: Result) -> pd.DataFrame | None:
    ladder, outliers = result.ladder, outliers_of(result.choices, CEPHEIDS)
    stars = ladder.cepheids
    if stars is None or outliers is None:
        return None
    laws, law_of = families(ladder, stars, outliers, CEPHEIDS)
    sums = _Sums(np.zeros(len(stars)), np.zeros(len(stars)))
    for part in _parts(result.size, len(stars)):
        residual, variance = _deviations(result, stars, laws, law_of, part)
        sums.residual += residual.sum(axis=0)
        for place, law in enumerate(laws):
            mine = law_of == place
            own = [result.draws[name][part, None] for name in law.own]
            sums.share[mine] += _share(law, residual[:, mine], variance[:, mine], own).sum(axis=0)
    mixed = outliers.treatment == MIXTURE
    share = sums.share / result.size
    hosts = np.array(ladder.hosts)[stars.host]
    return _table("cepheids", stars, hosts, sums.residual / result.size, share, mixed=mixed)


def _deviations(
    result: Result,
    stars: StarSample,
    laws: tuple[Family, ...],
    law_of: IntArray,
    part: slice,
) -> tuple[FloatArray, FloatArray]:
    """Data minus model and the variance of stars that are no outliers, shape (draws, stars)."""
    hosts = result.ladder.hosts
    columns = design(result.choices, stars, hosts)
    coefficients = np.stack([result.draws[name][part] for name in columns], axis=1)
    moduli = np.stack([result.draws[with_group("modulus", host)][part] for host in hosts], axis=1)
    model = moduli[:, stars.host] + coefficients @ np.stack(list(columns.values()))
    scatter = np.stack([result.draws[law.scatter][part] for law in laws], axis=1)
    variance = stars.variance + scatter[:, law_of] ** 2
    errors = input_errors(result.ladder, stars)
    if errors is not None:
        variance = variance + errors.effect(coefficients, None).variance
    return stars.magnitude - model, variance


def _share(law: Family, r: FloatArray, v: FloatArray, own: list[FloatArray]) -> FloatArray:
    """The probability of being an outlier, or the weight."""
    if law.treatment != MIXTURE:
        (freedom,) = own
        return np.asarray(freedom / (freedom + r**2 / v))
    fraction, width, offset = own
    wide = v + width**2
    gain = 0.5 * (r**2 / v - (r - offset) ** 2 / wide + np.log(v / wide))
    with np.errstate(over="ignore", divide="ignore"):
        return np.asarray(1.0 / (1.0 + (1.0 / fraction - 1.0) * np.exp(-gain)))


def _of_parallaxes(result: Result) -> pd.DataFrame | None:
    ladder, terms = result.ladder, parallax_terms(result.ladder)
    stars = ladder.parallax_stars
    if stars is None or terms is None or outliers_of(result.choices, PARALLAXES) is None:
        return None
    share = np.zeros(len(stars))
    for part in _parts(result.size, len(stars)):
        odds = terms.log_odds({name: d[part] for name, d in result.draws.items()}.__getitem__)
        share += (1.0 / (1.0 + np.exp(-np.clip(odds, -700.0, 700.0)))).sum(axis=0)
    nothing = np.full(len(stars), np.nan)
    nowhere = np.full(len(stars), "")
    return _table("anchors.parallaxes", stars, nowhere, nothing, share / result.size, mixed=True)


def _table(
    sample: str,
    stars: StarSample,
    host: np.ndarray,
    residual: FloatArray,
    share: FloatArray,
    *,
    mixed: bool,
) -> pd.DataFrame:
    nothing = np.full(len(stars), np.nan)
    values = (
        np.full(len(stars), sample),
        stars.star,
        host,
        stars.row,
        residual,
        share if mixed else nothing,
        nothing if mixed else share,
    )
    return pd.DataFrame(dict(zip(COLUMNS, values, strict=True)))


def _parts(draws: int, stars: int) -> Iterator[slice]:
    size = max(1, _ELEMENTS // max(stars, 1))
    for start in range(0, draws, size):
        yield slice(start, start + size)
