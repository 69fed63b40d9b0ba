"""Sensitivity to the power of priors: against closed forms and against fits with other priors."""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
import test_covariance_posterior as covariances
import test_limits as limits
from brute_force import in_magnitudes, rows_of
from peak_ladders import TRIPP, ladder_with
from photometry_ladders import ladder as in_bands
from relation_ladders import made
from scipy.stats import norm
from small_ladders import small_ladder
from test_input_errors import METALS

import ladderfit as lf
from ladderfit.errors import LadderfitError
from ladderfit.posterior.joint import Posterior, posterior
from ladderfit.predictive.likelihood import log_terms
from ladderfit.result import Result
from ladderfit.sampling.run import draw
from ladderfit.sensitivity.power_scaling import (
    BY_BOTH,
    BY_DATA,
    BY_NEITHER,
    BY_PRIOR,
    PriorSensitivity,
    narrowing,
    prior_sensitivity,
    sensitivity,
    shift,
    verdict,
)

TIGHT = {"priors.slope": {"normal": [-3.1, 0.03]}}


@cache
def sensitive(name: str, tight: bool = False) -> PriorSensitivity:
    ladder = small_ladder(name)
    return prior_sensitivity(draw(ladder.change(TIGHT) if tight else ladder))


def normal(prior: tuple[float, float], datum: tuple[float, float], power: float = 1.0):
    """Mean and standard deviation of a normal datum under a normal prior at some power."""
    weights = np.array([power / prior[1] ** 2, 1.0 / datum[1] ** 2])
    return float(weights @ [prior[0], datum[0]] / weights.sum()), float(weights.sum() ** -0.5)


def test_shift_and_narrowing_are_the_derivatives_of_a_normal() -> None:
    prior, datum = (1.0, 0.7), (-0.5, 1.1)
    mean, sd = normal(prior, datum)
    x = np.random.default_rng(4).normal(mean, sd, 400_000)
    log_prior = -0.5 * ((x - prior[0]) / prior[1]) ** 2
    step = 1e-4
    (m1, s1), (m0, s0) = (normal(prior, datum, 2.0**power) for power in (step, -step))
    error = 4.0 / np.sqrt(len(x))
    assert shift(x, log_prior) == pytest.approx((m1 - m0) / (2.0 * step) / sd, abs=error)
    assert narrowing(x, log_prior) == pytest.approx((s1 - s0) / (2.0 * step) / sd, abs=error)


def test_sensitivity_is_the_distance_of_two_normals() -> None:
    """The cumulative Jensen-Shannon distance by quadrature, at powers 1.01 and 1 / 1.01."""
    prior, datum = (1.0, 0.7), (-0.5, 1.1)
    mean, sd = normal(prior, datum)
    x = np.random.default_rng(4).normal(mean, sd, 400_000)
    log_prior = -0.5 * ((x - prior[0]) / prior[1]) ** 2
    grid = np.linspace(x.min(), x.max(), 200_001)

    def distance(power: float, sign: float) -> float:
        other = normal(prior, datum, power)
        p, q = norm.cdf(sign * (grid - mean) / sd), norm.cdf(sign * (grid - other[0]) / other[1])
        middle = np.log2(np.maximum(0.5 * (p + q), 1e-300))
        parts = (p * (np.log2(np.maximum(p, 1e-300)) - middle)).sum()
        parts += (q * (np.log2(np.maximum(q, 1e-300)) - middle)).sum()
        return float(np.sqrt(parts / (p + q).sum()))

    expected = np.mean(
        [max(distance(power, sign) for sign in (1.0, -1.0)) for power in (1.01, 1.0 / 1.01)]
    ) / np.log2(1.01)
    assert sensitivity(x, log_prior) == pytest.approx(expected, rel=0.03)


def test_a_tight_prior_is_seen_and_named() -> None:
    loose, tight = sensitive("anchors"), sensitive("anchors", True)
    assert loose.table.loc["slope", "verdict"] == BY_DATA
    assert tight.table.loc["slope", "prior"] > 0.05
    assert tight.table.loc["slope", "largest"] == "slope"
    assert tight.table.loc["slope", "verdict"] == BY_BOTH
    text = " ".join(tight.sentences())
    assert "The slope of the relation (slope) owes to its own prior, normal(-3.1, 0.03)" in text
    assert "the data pull against it" in text
    assert "No number owes much to its priors" in " ".join(loose.sentences())


def test_shifts_agree_with_a_fit_under_the_narrower_prior() -> None:
    """The prior to the power 1.2, that is, narrower by the root of it, drawn anew."""
    ladder = small_ladder("anchors").change(TIGHT)
    base = draw(ladder, draws=20_000)
    power = 1.2
    narrower = {"priors.slope": {"normal": [-3.1, 0.03 / np.sqrt(power)]}}
    other = draw(ladder.change(narrower), draws=20_000)
    expected = (other.mean("slope") - base.mean("slope")) / base.sd("slope") / np.log2(power)
    found = prior_sensitivity(base).shifts.loc["slope", "slope"]
    assert found == pytest.approx(expected, rel=0.15)
    assert found > 0.3  # towards the prior at -3.1, in standard deviations per doubling


def test_what_only_a_prior_holds_is_made_by_it() -> None:
    found = sensitive("expansion alone")
    assert found.table.loc["hubble_constant", "verdict"] == BY_PRIOR
    assert found.table.loc["hubble_constant", "largest"] == "peak_magnitude"
    assert "have little to say" in " ".join(found.sentences())


@pytest.mark.parametrize("name", ["all rungs", "hosts in volume", "velocities", "intercept"])
def test_the_likelihood_is_that_of_the_rows(name: str) -> None:
    """Every datum's normal density at the draws, written out row by row."""
    ladder = small_ladder(name)
    result = draw(ladder, draws=200)
    values = dict(result.draws)
    if in_magnitudes(ladder, "hubble_constant") and "hubble_constant" in values:
        values["hubble_constant"] = 5.0 * np.log10(values["hubble_constant"])
    expected = np.zeros(200)
    for row in rows_of(ladder):
        if any(term.startswith("star[") for term in row.terms):
            continue
        mean = sum(size * values[term] for term, size in row.terms.items())
        scatter = 0.0 if row.scatter is None else values[row.scatter]
        expected = expected + norm.logpdf(row.y, mean, np.sqrt(row.variance + scatter**2))
    joint = posterior(ladder)
    expected += joint.log_parallaxes(points_of(joint, result)).sum(axis=1)
    np.testing.assert_allclose(log_terms(result).likelihood, expected, atol=1e-5)


def points_of(joint: Posterior, result: Result) -> np.ndarray:
    names = joint.split.phi_names
    return np.array(
        [
            joint.coordinates({name: float(result.draws[name][i]) for name in names})
            for i in range(result.size)
        ]
    )


OTHERS = {
    "a covariance": lambda: covariances.both("flow", adds=True)[0],
    "metallicities": lambda: made(3, parallaxes=False).built(METALS),
    "widths and colours": lambda: ladder_with("flow", TRIPP),
    "shared on the sky": lambda: in_bands(1, {"cepheids.shared": {"sky": {"loading": "sky"}}}),
}


@pytest.mark.parametrize("case", OTHERS)
def test_prior_times_likelihood_is_the_joint_density(case: str) -> None:
    """Over the density of theta given phi it is the density of phi.

    The density of theta at its own draws is a constant less half of chi squared, but for
    its determinant, which varies little: so must the ratio be.
    """
    ladder = OTHERS[case]()
    result = draw(ladder, draws=1500)
    terms, joint = log_terms(result), posterior(ladder)
    z = points_of(joint, result)
    solution = joint.solution(z)
    ratio = sum(terms.priors.values()) + terms.likelihood - joint.log_density(z)
    weight = np.log(np.diagonal(solution.factor, axis1=1, axis2=2)).sum(axis=1)
    ratio -= weight + 0.5 * np.log(solution.moments.local).sum(axis=1)
    freedom = solution.mean.shape[1] + len(ladder.hosts)
    spread = 0.5 * freedom * np.sqrt(2.0 / len(z)) * np.sqrt(1.0 + 6.0 / freedom)
    assert abs(np.var(ratio) - 0.5 * freedom) < 5.0 * spread + 0.1


@pytest.mark.parametrize("treatment", ["mixture", "Student-t"])
def test_outliers_are_part_of_the_likelihood(treatment: str) -> None:
    """All coefficients are in phi: prior times likelihood is the density of phi itself."""
    ladder = small_ladder("anchors").change({"cepheids.outliers.treatment": treatment})
    result = draw(ladder, draws=200)
    terms, joint = log_terms(result), posterior(ladder)
    z = points_of(joint, result)
    jacobian = joint.split.log_prior(z) - sum(terms.priors.values())
    whole = sum(terms.priors.values()) + terms.likelihood
    np.testing.assert_allclose(whole + jacobian, joint.log_density(z), atol=1e-6)
    assert prior_sensitivity(result).table.loc["slope", "likelihood"] > 0.05


def test_limits_are_part_of_the_likelihood() -> None:
    """Every star of a host with a limit counts with its density over its chance."""
    ladder = limits.limited("H", 0.1)
    result = draw(ladder, draws=100)
    plain = ladder.change({"cepheids.completeness": None})
    beside = Result(plain.choices, result.draws, result.diagnostics, plain)
    stars, draws = ladder.cepheids, result.draws
    expected = np.zeros(100)
    for i in np.flatnonzero(np.isfinite(stars.headroom)):
        mean = draws["zero_point"] + draws["slope"] * (stars.log_period[i] - 1.0)
        mean = mean + draws["metallicity"] * (stars.metallicity[i] - 8.69)
        mean = mean + draws[f"modulus[{ladder.hosts[stars.host[i]]}]"]
        width = np.sqrt(stars.variance[i] + draws["scatter"] ** 2 + 0.1**2)
        expected -= norm.logcdf((stars.magnitude[i] + stars.headroom[i] - mean) / width)
    plainly = _unchecked(beside)
    np.testing.assert_allclose(log_terms(result).likelihood - plainly, expected, atol=1e-6)


def _unchecked(result: Result) -> np.ndarray:
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr("ladderfit.predictive.likelihood._check", lambda square, freedom: None)
        return log_terms(result).likelihood


def test_a_posterior_that_holds_more_is_refused() -> None:
    """Negative control."""
    result = draw(small_ladder("anchors"), draws=500)
    shifted = dict(result.draws) | {"modulus[Tavin]": result.draws["modulus[Tavin]"] + 0.5}
    wrong = type(result)(result.choices, shifted, result.diagnostics, result.source)
    with pytest.raises(LadderfitError, match="change the priors and draw anew"):
        prior_sensitivity(wrong)


@pytest.mark.parametrize(
    ("prior", "likelihood", "words"),
    [(0.2, 0.1, BY_BOTH), (0.2, 0.01, BY_PRIOR), (0.01, 0.1, BY_DATA), (0.01, 0.01, BY_NEITHER)],
)
def test_verdicts(prior: float, likelihood: float, words: str) -> None:
    assert verdict(prior, likelihood) == words


def test_from_the_top() -> None:
    assert lf.prior_sensitivity is prior_sensitivity
