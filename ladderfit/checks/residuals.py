"""What the model at the posterior mean leaves over, object by object.

Each function returns None where the ladder lacks the data.  `sd` is the spread
that the model expects of one object round that prediction: its measurement
error, and the intrinsic scatter at its posterior mean.  It leaves out the
uncertainty of the fit itself, which is shared by all objects.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import partial

import numpy as np
import numpy.typing as npt

from ladderfit.checks.peak_predictions import expected
from ladderfit.choices import Expansion
from ladderfit.ladder import Ladder
from ladderfit.names import with_group
from ladderfit.peak_terms import EXPANSION, HOSTS
from ladderfit.physics.expansion import peculiar_variance, peculiar_velocities, term_of
from ladderfit.posterior.errors_in_inputs import input_errors
from ladderfit.posterior.indices import Index, index_of
from ladderfit.posterior.offsets import offset_terms
from ladderfit.relations import design, scatters
from ladderfit.result import Result
from ladderfit.samples import FloatArray, FlowSample, IntArray, StarSample, TextArray
from ladderfit.units import LN10, modulus_from_parallax, parallax_from_modulus

LINE = ("zero_point", "slope", "slope_beyond", "curvature")  # terms of the period alone
_PER_MAG = 0.2 * LN10


@dataclass(frozen=True)
class Residuals:
    """Data minus model, shape (n,) each.

    Attributes
    ----------
    name : array of str
        Stars or supernovae.
    x : array
        What the objects are plotted against; see the function that made them.
    data, model : array
        Measured and predicted, in the same unit.
    sd : array
        Spread the model expects of data minus model.
    """

    name: TextArray
    x: FloatArray
    data: FloatArray
    model: FloatArray
    sd: FloatArray

    @property
    def residual(self) -> FloatArray:
        """Data minus model."""
        return self.data - self.model

    @property
    def standardised(self) -> FloatArray:
        """Data minus model in units of the expected spread."""
        return self.residual / self.sd

    def __len__(self) -> int:
        """Number of objects."""
        return len(self.name)


@dataclass(frozen=True)
class HostResiduals(Residuals):
    """Residuals of objects in galaxies; `host` is an index into the ladder's hosts."""

    host: IntArray


def at_mean(result: Result, name: str) -> float:
    """Posterior mean of a parameter; 0 where the model has no such term."""
    draws = result.draws.get(name)
    return 0.0 if draws is None else float(np.mean(draws))


def moduli(result: Result) -> FloatArray:
    """Posterior mean of each host's distance modulus [mag], in the ladder's order."""
    names = [with_group("modulus", host) for host in result.ladder.hosts]
    return np.array([at_mean(result, name) for name in names])


@dataclass(frozen=True)
class _Predicted:
    """Absolute magnitudes: the line, what other terms add, the variance round both; the index."""

    line: FloatArray
    terms: FloatArray
    variance: FloatArray
    index: FloatArray


def _predicted(result: Result, stars: StarSample) -> _Predicted:
    """The relation at the posterior mean, for one sample."""
    ladder = result.ladder
    columns = design(result.choices, stars, ladder.hosts)
    mean = {name: at_mean(result, name) for name in columns}
    line, terms = np.zeros(len(stars)), np.zeros(len(stars))
    for name, column in columns.items():
        (line if name in LINE else terms)[:] += mean[name] * column
    names, which = scatters(result.choices, stars, ladder.hosts)
    scatter = np.array([at_mean(result, name) for name in names])
    index: Index = index_of(ladder, stars, partial(at_mean, result))
    variance, terms = index.variance + scatter[which] ** 2, terms + index.pulled
    errors = input_errors(ladder, stars)
    if errors is not None:
        spread = np.array([at_mean(result, "metallicity_spread")])
        effect = errors.effect(np.array([list(mean.values())]), spread)
        variance = variance + effect.variance[0]
        if effect.pull is not None and effect.weight is not None:
            off = stars.metallicity - _mean_metallicity(result, stars, effect.weight[0])
            terms -= effect.pull[0] * off
    return _Predicted(line, terms, variance, index.value)


def _mean_metallicity(result: Result, stars: StarSample, weight: FloatArray) -> FloatArray:
    """The mean of each star's population: its host's weighted mean, or the fitted one."""
    relation = result.choices.relation.metallicity
    if stars.parallax is not None and relation != "none":
        return np.full(len(stars), at_mean(result, "parallax_metallicity") + relation.reference)
    sums = np.bincount(stars.host, weight * stars.metallicity)
    with np.errstate(invalid="ignore"):  # hosts without stars are not asked for
        means = sums / np.bincount(stars.host, weight)
    return np.asarray(means[stars.host])


def line_draws(result: Result, log_period: npt.ArrayLike) -> FloatArray:
    """Absolute magnitude of a fundamental pulsator at the reference metallicity, per draw.

    The line has the terms that depend on the period alone: zero point, slope,
    slope beyond the break, curvature.

    Parameters
    ----------
    result : Result
        With a relation.
    log_period : array_like, shape (m,)
        log10 of periods in days.

    Returns
    -------
    magnitude : array, shape (n_draws, m)
        In mag.
    """
    columns = design(result.choices, _nobody_at(result, np.asarray(log_period, dtype=float)), ())
    parts = [result.draws[name][:, None] * columns[name] for name in LINE if name in columns]
    return np.asarray(sum(parts))


def _nobody_at(result: Result, log_period: FloatArray) -> StarSample:
    """Stars of no host at these periods and the reference metallicity."""
    n, relation = len(log_period), result.choices.relation.metallicity
    nothing = np.zeros(n)
    return StarSample(
        star=np.full(n, ""),
        host=np.full(n, -1),
        log_period=log_period,
        magnitude=nothing,
        variance=nothing,
        metallicity=nothing if relation == "none" else np.full(n, relation.reference),
        row=np.zeros(n, dtype=np.int64),
    )


def cepheid_residuals(result: Result) -> HostResiduals | None:
    """Cepheids in galaxies: absolute magnitudes at the reference metallicity.

    `x` is log10 of the period in days; `data` is the magnitude minus the host's
    modulus and all terms but the line's, `model` the line; in mag.
    """
    stars = result.ladder.cepheids
    if stars is None:
        return None
    predicted = _predicted(result, stars)
    return HostResiduals(
        name=stars.star,
        x=stars.log_period,
        data=predicted.index - moduli(result)[stars.host] - predicted.terms,
        model=predicted.line,
        sd=np.sqrt(predicted.variance),
        host=stars.host,
    )


def parallax_offsets(result: Result, stars: StarSample) -> FloatArray:
    """What each parallax has too much, at the posterior mean [mas], shape (n,)."""
    columns = offset_terms(result.choices, stars, result.ladder.hosts).columns
    total = np.zeros(len(stars))
    for name, column in columns.items():
        total += at_mean(result, name) * column
    return total


def _parallax_variance(result: Result, stars: StarSample) -> FloatArray:
    """Of each parallax, with the scale of the errors at its mean [mas^2]."""
    if stars.parallax_error is None:
        raise TypeError("a parallax sample without parallaxes")
    scale = at_mean(result, "parallax_error_scale") or 1.0
    left = offset_terms(result.choices, stars, result.ladder.hosts).variance
    return np.asarray((scale * stars.parallax_error) ** 2 + left)


def parallax_residuals(result: Result) -> Residuals | None:
    """Parallax stars: measured parallaxes against those that the relation predicts.

    `x` is log10 of the period in days.  The prediction is the photometric parallax
    10^(2 - 0.2 (m - M)) plus the residual offsets, in mas; `sd` adds to the
    measurement error the error of the prediction from the star's magnitude and
    the intrinsic scatter, to first order.
    """
    stars = result.ladder.parallax_stars
    if stars is None or stars.parallax is None or stars.parallax_error is None:
        return None
    predicted = _predicted(result, stars)
    modulus = predicted.index - predicted.line - predicted.terms
    photometric = parallax_from_modulus(modulus)
    return Residuals(
        name=stars.star,
        x=stars.log_period,
        data=stars.parallax,
        model=photometric + parallax_offsets(result, stars),
        sd=np.sqrt(
            _parallax_variance(result, stars) + (_PER_MAG * photometric) ** 2 * predicted.variance
        ),
    )


def parallax_magnitudes(
    result: Result, least_signal: float = 5.0
) -> tuple[Residuals, FloatArray, FloatArray] | None:
    """Absolute magnitudes that the parallaxes alone imply, for showing, never for fitting.

    A parallax is turned into a distance only where it is large against its error;
    the fit itself never does this.

    Parameters
    ----------
    result : Result
    least_signal : float
        Stars below this many errors of their parallax are left out.

    Returns
    -------
    stars : Residuals
        `x` is log10 of the period in days; `data` the magnitude minus the modulus of
        the parallax (offset removed) and all terms but the line's, `model` the line;
        `sd` to first order; in mag.
    below, above : array
        Distances from `data` to the magnitudes at the parallax minus and plus its
        error: the arms of an error bar towards brighter and towards fainter.
    """
    stars = result.ladder.parallax_stars
    if stars is None or stars.parallax is None or stars.parallax_error is None:
        return None
    predicted = _predicted(result, stars)
    parallax = stars.parallax - parallax_offsets(result, stars)
    good = parallax >= least_signal * stars.parallax_error
    value, error = parallax[good], stars.parallax_error[good]
    shown = Residuals(
        name=stars.star[good],
        x=stars.log_period[good],
        data=(predicted.index - predicted.terms)[good] - modulus_from_parallax(value),
        model=predicted.line[good],
        sd=np.sqrt(predicted.variance[good] + (error / value / _PER_MAG) ** 2),
    )
    below = -5.0 * np.log10(1.0 - error / value)
    return shown, np.asarray(below), np.asarray(5.0 * np.log10(1.0 + error / value))


def peak_residuals(result: Result) -> HostResiduals | None:
    """Supernovae in hosts: `x` is the host's modulus, `data` and `model` peaks, in mag.

    From the data all terms of the peak-magnitude relation are taken off.
    """
    peaks = result.ladder.peaks
    if peaks is None:
        return None
    modulus = moduli(result)[peaks.host]
    terms = expected(result, peaks, HOSTS)
    scatter = at_mean(result, result.choices.peak_scatters[0])
    return HostResiduals(
        name=peaks.name,
        x=modulus,
        data=peaks.magnitude - terms.total,
        model=modulus + at_mean(result, "peak_magnitude"),
        sd=np.sqrt(peaks.variance + terms.variance + scatter**2),
        host=peaks.host,
    )


def flow_model(result: Result, redshift: npt.ArrayLike) -> FloatArray:
    """Peak magnitude expected at a redshift [mag], the same in both frames."""
    expansion = result.choices.expansion
    if expansion is None:
        raise ValueError("the ladder has no expansion")
    term = term_of(expansion, redshift, redshift)
    return np.asarray(term + _flow_zero_point(result))


def _flow_zero_point(result: Result) -> float:
    """Posterior mean of M - 5 log10 H0, which the flow knows far better than either."""
    draws = 5.0 * np.log10(result.draws["hubble_constant"])
    return at_mean(result, "peak_magnitude") - float(np.mean(draws))


def flow_residuals(result: Result) -> Residuals | None:
    """Supernovae in the expansion: `x` is the redshift, `data` and `model` peaks, in mag.

    From the data all terms of the peak-magnitude relation are taken off.
    """
    flow, expansion = result.ladder.flow, result.choices.expansion
    if flow is None or expansion is None:
        return None
    term = term_of(expansion, flow.redshift, flow.redshift_heliocentric)
    scatter = at_mean(result, result.choices.peak_scatters[1])
    terms = expected(result, flow, EXPANSION)
    variance = _flow_variance(result.ladder, flow, expansion) + terms.variance
    return Residuals(
        name=flow.name,
        x=flow.redshift,
        data=flow.magnitude - terms.total,
        model=term + _flow_zero_point(result),
        sd=np.sqrt(variance + scatter**2),
    )


def _flow_variance(ladder: Ladder, flow: FlowSample, expansion: Expansion) -> FloatArray:
    """Variance of each peak in the expansion, peculiar velocities included."""
    if ladder.peak_covariance is not None:
        return np.asarray(np.diag(ladder.peak_covariance)[-len(flow) :])
    velocity = peculiar_velocities(flow, expansion)
    return np.asarray(flow.variance + peculiar_variance(flow.redshift, velocity))


def velocity_residuals(result: Result) -> Residuals | None:
    """Velocities against distances: `x` in Mpc, `data` and `model` in km/s."""
    sample = result.ladder.velocities
    if sample is None:
        return None
    slope = at_mean(result, "hubble_constant")
    return Residuals(
        name=sample.name,
        x=sample.distance,
        data=sample.velocity,
        model=at_mean(result, "velocity_constant") + slope * sample.distance,
        sd=np.full(len(sample), at_mean(result, "velocity_scatter")),
    )
