"""Period cuts beyond which a host's magnitude limit does not matter, found and proposed.

Near its limit a host shows the brighter of its short-period stars: the mean
magnitude of those of a period that are seen lies

    sqrt(v) lambda(z) ,   lambda = phi / Phi ,   z = (B - mu - M(P)) / sqrt(v + soft^2)

above that of all, times sqrt(v / (v + soft^2)), where B is the magnitude of the limit,
v the variance of a star (intrinsic scatter included), and M the relation (Sandage
1988, PASP 100, 935).  Left out of the model, this pulls the host's modulus by the
weighted mean over its stars.  The shortest period is the least one at which the pull
is a small share of the modulus's own error.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd
from scipy.special import log_ndtr

from ladderfit.errors import LadderfitError
from ladderfit.names import with_group
from ladderfit.posterior.indices import index_of
from ladderfit.relations import design, scatters
from ladderfit.result import Result
from ladderfit.samples import FloatArray, StarSample

TOLERANCE = 0.1  # of the modulus's error from its own stars
_FEWEST = 3  # stars to be left in a host


@dataclass(frozen=True)
class HostCut:
    """What a limit does to one host, and the period cut that undoes it.

    Attributes
    ----------
    host : str
    limit : float
        In the band of the limits [mag].
    assumed : bool
        Whether the limit was taken from the faintest star, as none is stated.
    stars, kept : int
        Stars that take part now, and beyond the cut.
    shortest : float or None
        The proposed cut [d]; None where no cut leaves enough stars.
    pull, pull_beyond : float
        Change of the modulus if the limit is left out, with all stars and with those
        beyond the cut [mag].
    error, error_beyond : float
        Of the modulus from its own stars, the relation given, with all stars and with
        those beyond the cut [mag].
    """

    host: str
    limit: float
    assumed: bool
    stars: int
    kept: int
    shortest: float | None
    pull: float
    pull_beyond: float
    error: float
    error_beyond: float


@dataclass(frozen=True)
class PeriodCuts:
    """Proposed period cuts of all hosts with a limit, stated or assumed."""

    hosts: tuple[HostCut, ...]

    @property
    def changes(self) -> dict[str, Mapping[str, float] | None]:
        """For `Ladder.change`: the cuts in place of the limits; hosts that need none left out."""
        shortest = {
            cut.host: round(cut.shortest, 3)
            for cut in self.hosts
            if cut.shortest is not None and cut.kept < cut.stars
        }
        return {"cepheids.completeness": None, "cepheids.shortest": shortest}

    def table(self) -> pd.DataFrame:
        """One row per host, columns as the attributes of `HostCut`."""
        return pd.DataFrame([vars(cut) for cut in self.hosts])


def propose_period_cuts(
    result: Result, *, band: str | None = None, tolerance: float = TOLERANCE
) -> PeriodCuts:
    """Find each host's shortest period beyond which its limit hardly pulls its modulus.

    Parameters
    ----------
    result : Result
        Best of a fit that accounts for the limits, or of long-period stars alone.
    band : str, optional
        Where the ladder states no limits: the magnitude in which to take each host's
        faintest star for its limit; the relation's own index by default (then "index").
        Such a limit is at most the true one, so that the cut is on the safe side.
    tolerance : float
        Largest pull, as a share of the modulus's error.

    Raises
    ------
    LadderfitError
        If the ladder has no Cepheids in hosts, or the band is not among its numbers.
    """
    ladder = result.ladder
    stars = ladder.cepheids
    if stars is None:
        raise LadderfitError("the ladder has no Cepheids in hosts")
    seen, limits = _seen(result, stars, band)
    lead, variance, softness = _leads(result, stars, seen)
    cuts = []
    for place, host in enumerate(ladder.hosts):
        here = np.flatnonzero(stars.host == place)
        if here.size == 0 or (limits and host not in limits):
            continue
        limit = limits.get(host, float(seen[here].max()))
        z = (limit + lead[here]) / np.sqrt(variance[here] + softness**2)
        pulls = variance[here] / np.sqrt(variance[here] + softness**2) * _hazard(z)
        period = 10.0 ** stars.log_period[here]
        cuts.append(
            _cut(host, limit, pulls, 1.0 / variance[here], period, tolerance, assumed=not limits)
        )
    return PeriodCuts(tuple(cuts))


def _seen(
    result: Result, stars: StarSample, band: str | None
) -> tuple[FloatArray, Mapping[str, float]]:
    """The magnitude in which limits act, and the limits that are stated."""
    section = result.choices.cepheids
    if section is not None and section.completeness is not None and stars.headroom is not None:
        limits = section.completeness.limits
        of_star = np.array([limits.get(result.ladder.hosts[h], np.nan) for h in stars.host])
        return np.asarray(of_star - stars.headroom), limits
    if band in (None, "index"):
        return stars.magnitude, {}
    index = None if section is None else section.magnitude.wesenheit
    if stars.photometry is not None and index is not None and band == index.band:
        return stars.photometry.band, {}
    raise LadderfitError(
        f"no magnitude {band!r} is at hand without a limit in it: state one under "
        "cepheids.completeness, or take the index"
    )


def _leads(
    result: Result, stars: StarSample, seen: FloatArray
) -> tuple[FloatArray, FloatArray, float]:
    """What to add to a limit for its distance from each star's mean magnitude; variances."""
    ladder, section = result.ladder, result.choices.cepheids
    columns = design(result.choices, stars, ladder.hosts)
    absolute = np.zeros(len(stars))
    for name, column in columns.items():
        absolute += result.mean(name) * column
    moduli = np.array([result.mean(with_group("modulus", host)) for host in ladder.hosts])
    names, which = scatters(result.choices, stars, ladder.hosts)
    index = index_of(ladder, stars, result.mean)
    scatter = np.array([result.mean(name) for name in names])
    soft = section.completeness if section is not None else None
    lead = index.value - index.pulled - seen - moduli[stars.host] - absolute
    return lead, index.variance + scatter[which] ** 2, 0.0 if soft is None else soft.softness


def _hazard(z: FloatArray) -> FloatArray:
    """phi / Phi."""
    return np.asarray(np.exp(-0.5 * z**2 - 0.5 * np.log(2.0 * np.pi) - log_ndtr(z)))


def _cut(
    host: str,
    limit: float,
    pulls: FloatArray,
    weight: FloatArray,
    period: FloatArray,
    tolerance: float,
    *,
    assumed: bool,
) -> HostCut:
    """The least cut at which the weighted pull is below the tolerance, and stays so."""
    order = np.argsort(-period, kind="stable")  # longest first
    total = np.cumsum(weight[order])
    pull = np.cumsum((weight * pulls)[order]) / total
    error = total**-0.5
    good = np.flatnonzero(np.logical_and.accumulate(pull <= tolerance * error))
    kept = 0 if good.size == 0 else int(good[-1]) + 1
    last = max(kept - 1, 0)
    if kept == len(period):
        shortest: float | None = float(period.min())
    elif kept < _FEWEST:
        shortest = None
    else:  # between the last star kept and the first left out
        shortest = float(np.sqrt(period[order[kept - 1]] * period[order[kept]]))
    return HostCut(
        host=host,
        limit=limit,
        assumed=assumed,
        stars=len(period),
        kept=kept,
        shortest=shortest,
        pull=-float(pull[-1]),
        pull_beyond=-float(pull[last]) if kept else 0.0,
        error=float(error[-1]),
        error_beyond=float(error[last]),
    )
