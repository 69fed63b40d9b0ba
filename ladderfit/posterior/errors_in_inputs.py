"""Where the relation's inputs, period and metallicity, have errors of their own.

A period error enters the variance with the local slope.  A metallicity error is
integrated over a Gaussian population: true metallicities of a host's stars spread
by tau about the host's mean, so that a star's is, given its measurement,
l o_obs + (1 - l) o_host with variance tau^2 s_o^2 / (tau^2 + s_o^2), where
l = tau^2 / (tau^2 + s_o^2) (Kelly 2007, ApJ 665, 1489; one input, one population
per host).  Putting Z^2 s_o^2 into the variance alone dilutes the term.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ladderfit.choices import Choices
from ladderfit.ladder import Ladder
from ladderfit.relations import metallicity_sensitivity, period_sensitivity
from ladderfit.samples import BoolArray, FloatArray, StarSample

MEAN_SD = 1.0  # dex: prior sd of a host's mean metallicity about the reference


@dataclass(frozen=True)
class InputErrors:
    """Errors of the inputs of one sample; arrays are None where there are none.

    Attributes
    ----------
    period_slope, metallicity_slope : array, shape (n, k), or None
        Derivative of every design column with respect to the input.
    period_error, metallicity_error : array, shape (n,), or None
        In dex.
    population : bool
        Whether metallicities are integrated over populations.
    """

    period_slope: FloatArray | None
    period_error: FloatArray | None
    metallicity_slope: FloatArray | None
    metallicity_error: FloatArray | None
    population: bool

    @property
    def sensitive(self) -> BoolArray:
        """Which coefficients enter the variance, shape (k,)."""
        parts = [s for s in (self.period_slope, self.metallicity_slope) if s is not None]
        found: BoolArray = np.any([np.any(part != 0.0, axis=0) for part in parts], axis=0)
        return found

    def effect(self, coefficients: FloatArray, spread: FloatArray | None) -> Effect:
        """What the errors do at given coefficients, shape (b, k), and spread, shape (b,)."""
        variance = np.zeros((len(coefficients), self._size()))
        pull = weight = None
        if self.period_slope is not None and self.period_error is not None:
            variance += (coefficients @ self.period_slope.T * self.period_error) ** 2
        if self.metallicity_slope is not None and self.metallicity_error is not None:
            slope = coefficients @ self.metallicity_slope.T
            noise = self.metallicity_error**2
            if self.population and spread is not None:
                tau2 = (spread**2)[:, None]
                weight = 1.0 / (tau2 + noise)
                variance += slope**2 * tau2 * noise * weight
                pull = slope * noise * weight
            else:
                variance += slope**2 * noise
        return Effect(variance, pull, weight)

    def _size(self) -> int:
        errors = (self.period_error, self.metallicity_error)
        return next(len(error) for error in errors if error is not None)


@dataclass(frozen=True)
class Effect:
    """Extra variance [mag^2], pull towards the host's mean [mag/dex] and its weight [1/dex^2].

    Each of shape (b, n); `pull` and `weight` are None without populations.
    """

    variance: FloatArray
    pull: FloatArray | None
    weight: FloatArray | None


def input_errors(ladder: Ladder, stars: StarSample | None) -> InputErrors | None:
    """The input errors of a sample, or None where it has none that matter."""
    if stars is None:
        return None
    choices, hosts = ladder.choices, ladder.hosts
    period = stars.log_period_error
    metallicity = stars.metallicity_error if _meets_metallicity(choices) else None
    if period is None and metallicity is None:
        return None
    return InputErrors(
        None if period is None else period_sensitivity(choices, stars, hosts),
        period,
        None if metallicity is None else metallicity_sensitivity(choices, stars, hosts),
        metallicity,
        population=has_population(choices),
    )


def has_population(choices: Choices) -> bool:
    """Whether the choices ask for populations of metallicity."""
    metallicity = choices.relation.metallicity
    return metallicity != "none" and metallicity.errors == "population"


def uses_population(ladder: Ladder, stars: StarSample | None) -> bool:
    """Whether this sample's metallicities are integrated over populations."""
    errors = input_errors(ladder, stars)
    return errors is not None and errors.metallicity_error is not None and errors.population


def _meets_metallicity(choices: Choices) -> bool:
    metallicity = choices.relation.metallicity
    return metallicity != "none" and metallicity.errors != "ignored"
