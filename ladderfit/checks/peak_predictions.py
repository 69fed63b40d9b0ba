"""What the peak-magnitude relation expects of each supernova, at the posterior mean."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from ladderfit.kernels.populations import CURVED, LINEAR, WIDENED, condition
from ladderfit.peak_terms import PeakTerms, Supernovae, peak_terms
from ladderfit.result import Result
from ladderfit.samples import FloatArray


@dataclass(frozen=True)
class Expected:
    """Parts of the expected peak beyond distance and standard peak, shape (n,) each [mag].

    Attributes
    ----------
    terms : mapping of str to array
        By term: width, decline_rate, colour, host_mass, survey.  A term whose input has
        errors is that of the expected true input, given what was measured of it.
    noise : array
        Expected error of the peak, given the measured inputs, as their errors go together.
    variance : array
        What the unknown true inputs add to the variance of the peak [mag^2]; it may
        be negative where errors go together.
    """

    terms: Mapping[str, FloatArray]
    noise: FloatArray
    variance: FloatArray

    @property
    def total(self) -> FloatArray:
        """All terms, and the noise."""
        return np.asarray(sum(self.terms.values(), start=self.noise))

    def but(self, term: str) -> FloatArray:
        """All but one term, and the noise."""
        rest = (values for name, values in self.terms.items() if name != term)
        return np.asarray(sum(rest, start=self.noise))


def terms_of(result: Result) -> PeakTerms:
    """The terms of the peak-magnitude relation of the ladder that was fitted."""
    ladder = result.ladder
    return peak_terms(result.choices, ladder.peaks, ladder.flow)


def expected(result: Result, sample: Supernovae, group: str) -> Expected:
    """What the relation at the posterior mean expects of each supernova.

    Parameters
    ----------
    result : Result
        With its ladder.
    sample : PeakSample or FlowSample
        Of that ladder.
    group : str
        The population it belongs to, "hosts" or "expansion".
    """
    terms, n = terms_of(result), len(sample)
    mean = {name: float(np.mean(draws)) for name, draws in result.draws.items()}
    found: dict[str, FloatArray] = {}
    for name in terms.exact:
        value = terms.measured(sample, name)
        found[name] = sum(
            (p.sign * mean[p.name] * value**p.power for p in terms.powers(name)), start=np.zeros(n)
        )
    columns = terms.design(sample)
    if "mass_step" in columns:
        found["host_mass"] = mean["mass_step"] * columns["mass_step"]
    offsets = [mean[name] * column for name, column in columns.items() if name.startswith("survey")]
    if offsets:
        found["survey"] = np.asarray(sum(offsets))
    if not terms.noisy:
        return Expected(found, np.zeros(n), np.zeros(n))
    by_input, noise, variance = _integrated(terms, sample, group, mean)
    return Expected(found | by_input, noise, variance)


def _integrated(
    terms: PeakTerms, sample: Supernovae, group: str, mean: Mapping[str, float]
) -> tuple[dict[str, FloatArray], FloatArray, FloatArray]:
    """Terms of noisy inputs one by one, the expected noise, and the extra variance."""
    arrays = {name: np.array([value]) for name, value in mean.items()}
    a, square = terms.linear(arrays), terms.square(arrays)
    curve = np.zeros(1) if square is None else square
    x, own, with_peak = terms.noisy_inputs(sample)
    p = len(terms.noisy)
    style = (CURVED if terms.curved else LINEAR) if terms.integrated else WIDENED
    spread, centre = np.zeros((1, 1, p, p)), np.zeros((1, 1, p))
    if terms.integrated:
        spread[0, 0], centre[0, 0] = _population(terms, group, mean)

    def run(
        slopes: FloatArray, bend: FloatArray, covariance: FloatArray
    ) -> tuple[FloatArray, FloatArray]:
        lever, shift = np.zeros((1, len(x), p)), np.zeros((1, len(x)))
        extra, sums = np.zeros((1, len(x))), np.zeros((1, 1, p + 1, p + 1))
        condition(
            style,
            slopes,
            bend,
            spread,
            centre,
            np.zeros(len(x), dtype=np.int64),
            x,
            own,
            covariance,
            lever,
            shift,
            extra,
            sums,
            np.zeros(1),
        )
        return shift[0] + lever[0] @ centre[0, 0], extra[0]

    nothing, uncorrelated = np.zeros(1), np.zeros_like(with_peak)
    by_input = {}
    for place, name in enumerate(terms.noisy):
        alone = np.zeros_like(a)
        alone[0, place] = a[0, place]
        by_input[name] = run(alone, curve if place == 0 else nothing, uncorrelated)[0]
    total, variance = run(a, curve, with_peak)
    return by_input, np.asarray(total - sum(by_input.values())), variance


def _population(
    terms: PeakTerms, group: str, mean: Mapping[str, float]
) -> tuple[FloatArray, FloatArray]:
    """Covariance and mean of true inputs."""
    spread = [mean[name] for name in terms.spreads_of(group)]
    covariance = np.diag(np.square(spread))
    correlation = terms.correlation_of(group)
    if correlation is not None:
        covariance[0, 1] = covariance[1, 0] = mean[correlation] * spread[0] * spread[1]
    return covariance, np.array([mean[name] for name in terms.means_of(group)])
