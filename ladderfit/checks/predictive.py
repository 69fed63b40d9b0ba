"""Posterior predictive checks: whether the model leaves over what it should.

At every draw the deviations of stars and supernovae are standard normal and
independent if the model is true (`ladderfit.posterior.deviations`).  A check is a
number T of these deviations, such as their trend with the period; its p-value is
the share of draws in which deviations drawn anew give a T as large (Gelman, Meng &
Stern 1996, Statistica Sinica 6, 733).  Small p-values speak against the model.  The
same data fitted the model, so that p-values crowd towards 0.5: under a true model
they are small at most as often as they should be.  Every check is listed.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field

import numpy as np
import pandas as pd
from scipy.special import log_ndtr

from ladderfit.physics.expansion import peculiar_variance, peculiar_velocities, term_of
from ladderfit.posterior.deviations import (
    StarDeviations,
    cepheid_deviations,
    parallax_deviations,
    why_no_parallaxes,
)
from ladderfit.result import Result
from ladderfit.samples import FloatArray, IntArray, StarSample

Statistic = Callable[[FloatArray], FloatArray]  # deviations (b, n) -> T (b,)

DRAWS = 500
_FEWEST = 8  # objects for a check
_PER_HOST = 3  # stars of a host, for checks of hosts


@dataclass(frozen=True)
class Check:
    """One check.

    Attributes
    ----------
    sample, about : str
        Whose deviations, and what of them.
    p : float
        Share of replications that deviate at least as much.
    size : int
        Number of objects.
    """

    sample: str
    about: str
    p: float
    size: int


@dataclass(frozen=True)
class Sample:
    """Deviations of one kind of object and what they may depend on.

    Attributes
    ----------
    name : str
    deviations : array, shape (b, n)
    along : mapping of str to array, shape (n,) or (b, n)
        Quantities by name; a missing number leaves an object out.
    host : array of int, shape (n,), or None
    bend : str or None
        The quantity along which a bend is looked for too.
    """

    name: str
    deviations: FloatArray
    along: Mapping[str, FloatArray]
    host: IntArray | None = None
    bend: str | None = None


@dataclass(frozen=True, eq=False)
class Checks:
    """All checks of a result.

    Attributes
    ----------
    checks : tuple of Check
    left_out : mapping of str to str
        Samples without checks, and why.
    samples : tuple of Sample
        The deviations behind the checks.
    """

    checks: tuple[Check, ...]
    left_out: Mapping[str, str] = field(default_factory=dict)
    samples: tuple[Sample, ...] = ()

    def table(self) -> pd.DataFrame:
        """One row per check: sample, about, p, size."""
        rows = [(c.sample, c.about, c.p, c.size) for c in self.checks]
        return pd.DataFrame(rows, columns=["sample", "about", "p", "size"])

    @property
    def smallest(self) -> Check:
        """The check with the smallest p-value."""
        return min(self.checks, key=lambda check: check.p)

    def __str__(self) -> str:
        if not self.checks:
            return "no checks: " + "; ".join(self.left_out.values())
        worst, count = self.smallest, len(self.checks)
        chance = 1.0 - (1.0 - worst.p) ** count
        lines = [f"{c.sample:<20}  {c.about:<34}  p = {c.p:.3f}  ({c.size:,})" for c in self.checks]
        lines += [f"{name}: no checks, as {why}" for name, why in self.left_out.items()]
        return "\n".join(
            [
                *lines,
                f"smallest of {count}: p = {worst.p:.3f} ({worst.sample}, {worst.about}); "
                f"{count} independent checks of a true model have one as small with a chance "
                f"of {chance:.2f} at most",
            ]
        )


def predictive_checks(result: Result, *, seed: int = 1, draws: int = DRAWS) -> Checks:
    """Check a result against its data.

    Parameters
    ----------
    result : Result
        With its ladder.
    seed : int
        Of the replications.
    draws : int
        How many draws are used, at most.

    Raises
    ------
    LadderfitError
        If the tables behind the result are missing.
    """
    rng = np.random.default_rng(seed)
    chosen = np.linspace(0, result.size - 1, min(draws, result.size)).astype(int)
    some = {name: values[chosen] for name, values in result.draws.items()}
    left_out: dict[str, str] = {}
    samples = tuple(_samples(result, some, rng, left_out))
    found = [
        Check(sample.name, about, p_value(values, statistic, rng), values.shape[1])
        for sample in samples
        for about, values, statistic in _statistics(sample)
    ]
    return Checks(tuple(found), left_out, samples)


def p_value(deviations: FloatArray, statistic: Statistic, rng: np.random.Generator) -> float:
    """Share of replications whose statistic is at least that of the data."""
    seen = statistic(deviations)
    again = statistic(rng.standard_normal(deviations.shape))
    return float((1.0 + np.sum(again >= seen)) / (1.0 + len(seen)))


def _samples(
    result: Result,
    draws: Mapping[str, FloatArray],
    rng: np.random.Generator,
    left_out: dict[str, str],
) -> Iterator[Sample]:
    ladder, section = result.ladder, result.choices.cepheids
    if section is not None and section.outliers.robust:
        left_out["Cepheids"] = "their deviations are no longer normal by choice"
    elif ladder.cepheids is not None:
        stars = ladder.cepheids
        found = cepheid_deviations(ladder, draws, rng)
        moduli = np.array([result.mean(f"modulus[{host}]") for host in ladder.hosts])
        along = _along(result, stars, found) | {"distance": moduli[stars.host]}
        if found.colour is None and stars.photometry is not None:
            left_out["colours of Cepheids"] = "the error of the colour is not known apart"
        yield Sample("Cepheids", found.magnitude, along, stars.host, "period")
        if found.other is not None:
            period = {"period": stars.log_period}
            yield Sample("colours of Cepheids", found.other, period, stars.host)
    if ladder.parallax_stars is not None:
        why = why_no_parallaxes(ladder)
        if why is not None:
            left_out["parallax stars"] = why
        else:
            stars = ladder.parallax_stars
            found = parallax_deviations(ladder, draws, rng)
            along = _along(result, stars, found)
            if stars.parallax is not None:
                along["parallax"] = stars.parallax
            yield Sample("parallax stars", found.magnitude, along, None, "period")
            if found.other is not None:
                signal = {"parallax": along["parallax"]}
                yield Sample("parallaxes", found.other, signal)
    yield from _supernovae(result, draws, left_out)


def _along(result: Result, stars: StarSample, star: StarDeviations) -> dict[str, FloatArray]:
    found = {"period": stars.log_period}
    if star.colour is not None:
        found["colour"] = star.colour
    if result.choices.relation.metallicity != "none":
        found["metallicity"] = stars.metallicity
    return found | {"stated error": np.log(stars.variance)}


def _supernovae(
    result: Result, draws: Mapping[str, FloatArray], left_out: dict[str, str]
) -> Iterator[Sample]:
    ladder, expansion = result.ladder, result.choices.expansion
    in_hosts, elsewhere = result.choices.peak_scatters
    present = ladder.peaks is not None or ladder.flow is not None
    if present and ladder.peak_covariance is not None:
        left_out["supernovae"] = "their covariance ties them together"
        return
    if present and result.choices.peak_relation != type(result.choices.peak_relation)():
        left_out["supernovae"] = "terms of the peak relation are integrated over"
        return
    if ladder.peaks is not None:
        peaks = ladder.peaks
        moduli = np.stack([draws[f"modulus[{ladder.hosts[h]}]"] for h in peaks.host], axis=1)
        width = np.sqrt(peaks.variance + draws[in_hosts][:, None] ** 2)
        z = (peaks.magnitude - moduli - draws["peak_magnitude"][:, None]) / width
        yield Sample("supernovae in hosts", z, {"distance": moduli.mean(axis=0)})
    if ladder.flow is not None and expansion is not None:
        flow = ladder.flow
        velocity = peculiar_velocities(flow, expansion)
        variance = flow.variance + peculiar_variance(flow.redshift, velocity)
        width = np.sqrt(variance + draws[elsewhere][:, None] ** 2)
        zero = draws["peak_magnitude"] - 5.0 * np.log10(draws["hubble_constant"])
        term = term_of(expansion, flow.redshift, flow.redshift_heliocentric)
        z = (flow.magnitude - term - zero[:, None]) / width
        yield Sample("expansion", z, {"redshift": np.log(flow.redshift)}, None, "redshift")


def _statistics(sample: Sample) -> Iterator[tuple[str, FloatArray, Statistic]]:
    """What is checked of a sample: words, deviations, statistic."""
    z = sample.deviations
    if z.shape[1] < _FEWEST:
        return
    yield "distribution", z, anderson_darling
    yield "largest deviation", z, _largest
    yield "scatter", z, _whole_scatter
    for name, values in sample.along.items():
        here = np.isfinite(np.atleast_2d(values)).all(axis=0)
        x = np.atleast_2d(values)[:, here]
        x = x - x.mean(axis=1, keepdims=True) if here.any() else x
        if here.sum() < _FEWEST or not np.ptp(x) > 0.0:
            continue
        if name not in ("stated error", "distance") or sample.host is None:
            yield f"trend with {name}", z[:, here], _trend(x)
        yield f"scatter with {name}", z[:, here], _scatter_trend(x)
        if name == sample.bend:
            yield f"bend with {name}", z[:, here], _trend(_bend(x))
    if sample.host is not None:
        count = np.bincount(sample.host)
        here = count[sample.host] >= _PER_HOST
        if len(np.unique(sample.host[here])) > 1:
            host = np.unique(sample.host[here], return_inverse=True)[1]
            yield "scatter by host", z[:, here], _by_host(host)
            if "period" in sample.along:
                x = sample.along["period"][here]
                yield "slope by host", z[:, here], _slope_by_host(host, x)


def anderson_darling(z: FloatArray) -> FloatArray:
    """Distance of the distribution from a standard normal, tails weighted (1952), shape (b,)."""
    n = z.shape[1]
    z = np.sort(z, axis=1)
    odd = 2.0 * np.arange(1, n + 1) - 1.0
    return np.asarray(-n - (odd * (log_ndtr(z) + log_ndtr(-z[:, ::-1]))).sum(axis=1) / n)


def _largest(z: FloatArray) -> FloatArray:
    return np.asarray(np.abs(z).max(axis=1))


def _whole_scatter(z: FloatArray) -> FloatArray:
    return np.asarray(np.abs(np.sum(z**2 - 1.0, axis=1)))


def _trend(x: FloatArray) -> Statistic:
    unit = x / np.sqrt(np.sum(x**2, axis=1, keepdims=True))
    return lambda z: np.abs((z * unit).sum(axis=1))


def _scatter_trend(x: FloatArray) -> Statistic:
    unit = x / np.sqrt(np.sum(x**2, axis=1, keepdims=True))
    return lambda z: np.abs(((z**2 - 1.0) * unit).sum(axis=1))


def _bend(x: FloatArray) -> FloatArray:
    """The square of x, shape (1, n), without its constant and linear part."""
    basis, square = np.stack([np.ones_like(x[0]), x[0]], axis=1), x[0] ** 2
    return np.asarray(square - basis @ np.linalg.lstsq(basis, square)[0])[None, :]


def _by_host(host: IntArray) -> Statistic:
    member = (host[:, None] == np.arange(host.max() + 1)).astype(float)
    count = member.sum(axis=0)
    return lambda z: np.asarray((((z**2 - 1.0) @ member) ** 2 / (2.0 * count)).sum(axis=1))


def _slope_by_host(host: IntArray, x: FloatArray) -> Statistic:
    member = (host[:, None] == np.arange(host.max() + 1)).astype(float)
    inner = x - (x @ member / member.sum(axis=0))[host]
    loads = member * inner[:, None]
    loads = loads / np.sqrt(np.maximum((loads**2).sum(axis=0), 1e-300))
    return lambda z: np.asarray(((z @ loads) ** 2).sum(axis=1))
