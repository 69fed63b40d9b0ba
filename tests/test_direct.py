"""Direct drawing on densities whose answer is known."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import multivariate_normal, multivariate_t

from ladderfit.errors import SamplingError
from ladderfit.sampling.direct import Target, draw_direct


def target(log_density, d, folded=None, scale=1.0):
    return Target(
        log_density,
        np.zeros(d) + 0.3,
        np.full(d, scale),
        np.zeros(d, bool) if folded is None else np.array(folded),
    )


def test_a_correlated_normal_and_its_evidence():
    rng = np.random.default_rng(1)
    root = rng.normal(size=(5, 5))
    covariance = root @ root.T + 0.1 * np.eye(5)
    mean = rng.normal(size=5)
    density = multivariate_normal(mean, covariance)
    found = draw_direct(
        target(lambda z: np.atleast_1d(density.logpdf(z)) + 7.0, 5, scale=3.0),
        4000,
        np.random.default_rng(2),
    )
    error = np.sqrt(np.diag(covariance) / found.ess)
    assert np.all(np.abs(found.z.mean(axis=0) - mean) < 4.0 * error)
    scale = np.sqrt(np.outer(np.diag(covariance), np.diag(covariance)))
    assert np.max(np.abs(np.cov(found.z.T) - covariance) / scale) < 5.0 * np.sqrt(2.0 / found.ess)
    assert found.log_evidence == pytest.approx(7.0, abs=5.0 * found.log_evidence_error)
    assert found.pareto_k < 0.5
    assert found.ess > 3000


@pytest.mark.parametrize("truth", [0.0, 0.5, 3.0])
def test_a_folded_scatter_near_zero_is_drawn_well(truth):
    """p(t) of a scatter: half-normal-like when the data prefer zero."""

    def log_density(z):
        t = np.abs(z[:, 0])
        return -0.5 * (t - truth) ** 2 - 0.5 * (z[:, 1] - 1.0) ** 2 * (1.0 + t)

    found = draw_direct(target(log_density, 2, [True, False]), 4000, np.random.default_rng(3))
    grid = np.linspace(0.0, 12.0, 20001)
    weight = np.exp(-0.5 * (grid - truth) ** 2) / np.sqrt(1.0 + grid)
    expected = np.trapezoid(weight * grid, grid) / np.trapezoid(weight, grid)
    sd = np.std(found.z[:, 0])
    assert np.all(found.z[:, 0] >= 0.0)
    assert found.z[:, 0].mean() == pytest.approx(expected, abs=4.0 * sd / np.sqrt(found.ess))
    assert found.pareto_k < 0.5
    assert found.efficiency > 0.7


def test_two_modes_are_both_drawn_and_reported():
    def log_density(z):
        parts = [np.log(0.7) + np.sum(-0.5 * (z - 6.0) ** 2, axis=1)]
        parts.append(np.log(0.3) + np.sum(-0.5 * (z + 6.0) ** 2, axis=1))
        return np.logaddexp(*parts)

    found = draw_direct(target(log_density, 2, scale=10.0), 4000, np.random.default_rng(1))
    assert len(found.modes) == 2
    share = np.mean(found.z[:, 0] > 0.0)
    assert share == pytest.approx(0.7, abs=0.04)


def test_heavy_tails_are_called_heavy(monkeypatch):
    """A Cauchy-like target under a lighter proposal that may not adapt: the k has to say so."""
    monkeypatch.setattr("ladderfit.sampling.direct._ROUNDS", 1)
    density = multivariate_t(np.zeros(10), np.eye(10), df=1)
    aim = target(lambda z: np.atleast_1d(density.logpdf(z)), 10)
    assert not draw_direct(aim, 4000, np.random.default_rng(1)).trusted


def test_heavy_tails_are_met_by_adapting():
    """The same target, allowed to adapt: quartiles of a Cauchy within their Monte Carlo error."""
    density = multivariate_t(np.zeros(6), np.eye(6), df=1)
    aim = target(lambda z: np.atleast_1d(density.logpdf(z)), 6)
    found = draw_direct(aim, 4000, np.random.default_rng(1))
    assert found.trusted
    error = np.sqrt(0.25 * 0.75 / found.ess) * 2.0 * np.pi  # density of a Cauchy at +-1: 1 / 2 pi
    for column in found.z.T:
        np.testing.assert_allclose(np.quantile(column, [0.25, 0.75]), [-1.0, 1.0], atol=4.5 * error)


def test_no_finite_density_is_an_error_in_words():
    with pytest.raises(SamplingError, match="no finite density"):
        draw_direct(target(lambda z: np.full(len(z), -np.inf), 2), 100, np.random.default_rng(1))


def test_same_seed_same_draws_other_seed_other_draws():
    def log_density(z):
        return -0.5 * np.sum(z**2, axis=1)

    first, again, other = (
        draw_direct(target(log_density, 3), 500, np.random.default_rng(seed)).z
        for seed in (4, 4, 5)
    )
    np.testing.assert_array_equal(first, again)
    assert not np.array_equal(first, other)


def test_heavy_weights_found_late_are_met_by_another_round():
    """A pilot can be lucky; the pool's own Pareto k then calls for a wider proposal."""
    density = multivariate_t(np.zeros(2), np.eye(2), df=5)
    found = [
        draw_direct(
            target(lambda z: np.atleast_1d(density.logpdf(z)), 2), 4000, np.random.default_rng(seed)
        ).pareto_k
        for seed in range(10)
    ]
    assert max(found) < 0.7
