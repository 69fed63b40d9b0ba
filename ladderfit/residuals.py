"""What the model at the posterior mean leaves over, object by object.

Each function returns None where the ladder lacks the data.  `sd` is the spread
that the model expects of one object round that prediction: its measurement
error, and the intrinsic scatter at its posterior mean.  It leaves out the
uncertainty of the fit itself, which is shared by all objects.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ladderfit.names import with_group
from ladderfit.physics.expansion import distance_term, peculiar_variance
from ladderfit.result import Result
from ladderfit.samples import FloatArray, IntArray, StarSample, TextArray

_PER_MAG = 0.2 * float(np.log(10.0))


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


def _relation(result: Result, stars: StarSample) -> tuple[FloatArray, FloatArray]:
    """The line at each star's period, and its metallicity term, both in mag."""
    relation = result.choices.relation
    x = stars.log_period - np.log10(relation.pivot)
    line = at_mean(result, "zero_point") + at_mean(result, "slope") * x
    if relation.metallicity == "none":
        return line, np.zeros(len(stars))
    offset = stars.metallicity - relation.metallicity.reference
    return line, at_mean(result, "metallicity") * offset


def line_draws(result: Result, log_period: npt.ArrayLike) -> FloatArray:
    """Absolute magnitude at the reference metallicity, for every draw.

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
    x = np.asarray(log_period, dtype=float) - np.log10(result.choices.relation.pivot)
    return np.asarray(
        result.draws["zero_point"][:, None] + result.draws["slope"][:, None] * x[None, :]
    )


def cepheid_residuals(result: Result) -> HostResiduals | None:
    """Cepheids in galaxies: absolute magnitudes at the reference metallicity.

    `x` is log10 of the period in days; `data` is the magnitude minus the host's
    modulus and the metallicity term, `model` the line; in mag.
    """
    stars = result.ladder.cepheids
    if stars is None:
        return None
    line, metals = _relation(result, stars)
    return HostResiduals(
        name=stars.star,
        x=stars.log_period,
        data=stars.magnitude - moduli(result)[stars.host] - metals,
        model=line,
        sd=np.sqrt(stars.variance + at_mean(result, "scatter") ** 2),
        host=stars.host,
    )


def parallax_residuals(result: Result) -> Residuals | None:
    """Parallax stars: measured parallaxes against those that the relation predicts.

    `x` is log10 of the period in days.  The prediction is the photometric parallax
    10^(2 - 0.2 (m - M)) plus the residual offset, in mas; `sd` adds to the
    measurement error the error of the prediction from the star's magnitude and
    the intrinsic scatter, to first order.
    """
    stars = result.ladder.parallax_stars
    if stars is None or stars.parallax is None or stars.parallax_error is None:
        return None
    line, metals = _relation(result, stars)
    photometric = 10.0 ** (2.0 - 0.2 * (stars.magnitude - line - metals))
    spread = stars.variance + at_mean(result, "scatter") ** 2
    return Residuals(
        name=stars.star,
        x=stars.log_period,
        data=stars.parallax,
        model=photometric + at_mean(result, "parallax_offset"),
        sd=np.sqrt(stars.parallax_error**2 + (_PER_MAG * photometric) ** 2 * spread),
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
        the parallax (offset removed) and the metallicity term, `model` the line;
        `sd` to first order; in mag.
    below, above : array
        Distances from `data` to the magnitudes at the parallax minus and plus its
        error: the arms of an error bar towards brighter and towards fainter.
    """
    stars = result.ladder.parallax_stars
    if stars is None or stars.parallax is None or stars.parallax_error is None:
        return None
    line, metals = _relation(result, stars)
    parallax = stars.parallax - at_mean(result, "parallax_offset")
    good = parallax >= least_signal * stars.parallax_error
    value, error = parallax[good], stars.parallax_error[good]
    photometric_variance = stars.variance[good] + at_mean(result, "scatter") ** 2
    shown = Residuals(
        name=stars.star[good],
        x=stars.log_period[good],
        data=(stars.magnitude - metals)[good] + 5.0 * np.log10(value) - 10.0,
        model=line[good],
        sd=np.sqrt(photometric_variance + (error / value / _PER_MAG) ** 2),
    )
    below = -5.0 * np.log10(1.0 - error / value)
    return shown, np.asarray(below), np.asarray(5.0 * np.log10(1.0 + error / value))


def peak_residuals(result: Result) -> HostResiduals | None:
    """Supernovae in hosts: `x` is the host's modulus, `data` and `model` peaks, in mag."""
    peaks = result.ladder.peaks
    if peaks is None:
        return None
    modulus = moduli(result)[peaks.host]
    return HostResiduals(
        name=peaks.name,
        x=modulus,
        data=peaks.magnitude,
        model=modulus + at_mean(result, "peak_magnitude"),
        sd=np.sqrt(peaks.variance + at_mean(result, "peak_scatter") ** 2),
        host=peaks.host,
    )


def flow_model(result: Result, redshift: npt.ArrayLike) -> FloatArray:
    """Peak magnitude expected at a redshift [mag], the same in both frames."""
    expansion = result.choices.expansion
    if expansion is None:
        raise ValueError("the ladder has no expansion")
    term = distance_term(redshift, redshift, expansion.q0, expansion.j0)
    return np.asarray(term + _flow_zero_point(result))


def _flow_zero_point(result: Result) -> float:
    """Posterior mean of M - 5 log10 H0, which the flow knows far better than either."""
    draws = 5.0 * np.log10(result.draws["hubble_constant"])
    return at_mean(result, "peak_magnitude") - float(np.mean(draws))


def flow_residuals(result: Result) -> Residuals | None:
    """Supernovae in the expansion: `x` is the redshift, `data` and `model` peaks, in mag."""
    flow, expansion = result.ladder.flow, result.choices.expansion
    if flow is None or expansion is None:
        return None
    term = distance_term(flow.redshift, flow.redshift_heliocentric, expansion.q0, expansion.j0)
    peculiar = peculiar_variance(flow.redshift, expansion.peculiar_velocity)
    return Residuals(
        name=flow.name,
        x=flow.redshift,
        data=flow.magnitude,
        model=term + _flow_zero_point(result),
        sd=np.sqrt(flow.variance + peculiar + at_mean(result, "peak_scatter") ** 2),
    )


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
