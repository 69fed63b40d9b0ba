"""Correlated rows: against covariances written out, one scatter and two."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from oracles import dense_log_evidence
from test_arrow import random_rows, with_prior

from ladderfit.kernels.arrow import Moments, no_moments, rows, solve
from ladderfit.kernels.coupled import CoupledData, coupled_rows, two_scatters
from ladderfit.kernels.tridiagonal import tridiagonal


def random_covariance(rng, n):
    """Errors of 0.05 to 0.5, and three patterns that rows share."""
    shared = 0.1 * rng.normal(size=(n, 3))
    return np.diag(rng.uniform(0.05, 0.5, n) ** 2) + shared @ shared.T


def random_data(rng, hosts, in_hosts, others, k, coupled=None):
    host = np.concatenate([rng.integers(0, hosts, in_hosts), np.full(others, -1)])
    columns = rng.normal(size=(len(host), k + 1))
    coupled = np.unique(host[host >= 0]) if coupled is None else coupled
    covariance = random_covariance(rng, len(host))
    return CoupledData(host, columns, covariance, hosts, coupled)


def oracle(data, variance, plain, mean, sd):
    """Log density, covariance written out: correlated rows, independent ones, flat hosts."""
    host, columns, y, alone = plain
    whole = np.zeros((len(variance) + len(y),) * 2)
    n = len(variance)
    whole[:n, :n] = data.covariance + np.diag(variance)
    whole[n:, n:] = np.diag(alone)
    return dense_log_evidence(
        np.concatenate([data.host, host]),
        np.vstack([data.columns[:, :-1], columns]),
        np.concatenate([data.columns[:, -1], y]),
        whole,
        data.hosts,
        mean,
        sd,
    )


@settings(max_examples=40, deadline=None)
@given(st.integers(0, 2**32 - 1), st.integers(1, 5), st.integers(1, 9), st.integers(0, 30))
def test_evidence_equals_written_out_covariance(seed, hosts, in_hosts, others):
    """Some hosts are coupled, some have independent rows only, most have both."""
    rng = np.random.default_rng(seed)
    k = 3
    data = random_data(rng, hosts, in_hosts, others, k)
    host, columns, y, variance = random_rows(rng, hosts, 8, k)
    mean, sd = rng.normal(size=k), rng.uniform(0.3, 2.0, k)
    extra = rng.uniform(0.0, 0.3, 3) ** 2
    zero = np.zeros(3)
    total = coupled_rows(data, 1.0).moments(extra)
    total = total + rows(host, columns, y, variance, hosts).moments(zero)
    total = total + with_prior(k, hosts, mean, sd).moments(zero)
    expected = [
        oracle(data, np.full(len(data.host), e), (host, columns, y, variance), mean, sd)
        for e in extra
    ]
    np.testing.assert_allclose(solve(total).log_evidence, expected, rtol=1e-8, atol=1e-7)


@settings(max_examples=30, deadline=None)
@given(st.integers(0, 2**32 - 1), st.integers(1, 5), st.integers(1, 9), st.integers(1, 30))
def test_two_scatters_equal_written_out_covariance(seed, hosts, in_hosts, others):
    rng = np.random.default_rng(seed)
    data = random_data(rng, hosts, in_hosts, others, 2)
    host, columns, y, variance = random_rows(rng, hosts, 5, 2)
    mean, sd = rng.normal(size=2), rng.uniform(0.3, 2.0, 2)
    first, second = rng.uniform(0.0, 0.3, (2, 3)) ** 2
    zero = np.zeros(3)
    total = two_scatters(data, 1.0).moments(first, second)
    total = total + rows(host, columns, y, variance, hosts).moments(zero)
    total = total + with_prior(2, hosts, mean, sd).moments(zero)
    expected = [
        oracle(
            data,
            np.where(data.host >= 0, first[i], second[i]),
            (host, columns, y, variance),
            mean,
            sd,
        )
        for i in range(3)
    ]
    np.testing.assert_allclose(solve(total).log_evidence, expected, rtol=1e-8, atol=1e-7)


def test_two_scatters_that_are_tied_give_the_numbers_of_one():
    rng = np.random.default_rng(4)
    data = random_data(rng, 12, 20, 150, 3)
    extra = np.concatenate([[0.0], rng.uniform(0.0, 0.5, 20) ** 2])
    one, two = coupled_rows(data, 1.0).moments(extra), two_scatters(data, 1.0).moments(extra, extra)
    prior = with_prior(3, 12, np.zeros(3), np.ones(3)).moments(np.zeros(1)).repeated(len(extra))
    prior.local[:] += 1.0
    first, second = solve(one + prior), solve(two + prior)
    np.testing.assert_allclose(first.log_evidence, second.log_evidence, rtol=1e-10, atol=1e-7)
    np.testing.assert_allclose(first.mean, second.mean, atol=1e-8)
    apart = two_scatters(data, 1.0).moments(extra, extra + 0.1)
    assert np.max(np.abs(solve(apart + prior).log_evidence - first.log_evidence)) > 1.0


def test_without_correlations_the_sums_are_those_of_independent_rows():
    rng = np.random.default_rng(8)
    data = random_data(rng, 4, 15, 100, 2)
    diagonal = CoupledData(
        data.host, data.columns, np.diag(np.diag(data.covariance)), 4, data.coupled
    )
    plain = rows(data.host, data.columns[:, :2], data.columns[:, 2], np.diag(data.covariance), 4)
    extra = rng.uniform(0.0, 0.5, 10) ** 2
    prior = with_prior(2, 4, np.zeros(2), np.ones(2)).moments(np.zeros(1)).repeated(10)
    prior.local[:] += 1.0
    known, values = np.array([1]), rng.normal(size=(10, 1))
    first = solve(plain.moments(extra) + prior, known, values)
    second = solve(coupled_rows(diagonal, 1.0).moments(extra) + prior, known, values)
    np.testing.assert_allclose(first.log_evidence, second.log_evidence, rtol=1e-9)
    np.testing.assert_allclose(first.mean, second.mean, atol=1e-9)
    np.testing.assert_allclose(first.factor, second.factor, atol=1e-7)


def test_draws_have_the_posterior_mean_and_covariance():
    """Globals, coupled hosts and a host with independent rows only, all jointly."""
    rng = np.random.default_rng(5)
    data = random_data(rng, 3, 6, 10, 2)
    lonely = CoupledData(np.where(data.host == 1, 0, data.host), *_rest(data))
    host, columns, y, variance = random_rows(rng, 3, 6, 2)
    size, zero = 40_000, np.zeros(1)
    total = coupled_rows(lonely, None).moments(np.array([0.04]))
    assert list(total.coupled) == [0, 2]
    total = total + rows(host, columns, y, variance, 3).moments(zero)
    total = total + with_prior(2, 3, np.zeros(2), np.ones(2)).moments(zero)
    white = rng.standard_normal((size, 2 + 3))
    drawn = np.concatenate(solve(total.repeated(size)).draw(white), axis=1)
    full = np.vstack([_full(lonely.host, lonely.columns[:, :2]), _full(host, columns)])
    n = len(lonely.host)
    inverse = np.zeros((len(full),) * 2)
    inverse[:n, :n] = np.linalg.inv(lonely.covariance + 0.04 * np.eye(n))
    inverse[n:, n:] = np.diag(1.0 / variance)
    precision = full.T @ inverse @ full + np.diag([1.0, 1.0, 0.0, 0.0, 0.0])
    mean = np.linalg.solve(precision, full.T @ inverse @ np.append(lonely.columns[:, 2], y))
    covariance = np.linalg.inv(precision)
    error = np.sqrt(np.diag(covariance) / size)
    assert np.all(np.abs(drawn.mean(axis=0) - mean) < 5.0 * error)
    scale = np.sqrt(np.outer(np.diag(covariance), np.diag(covariance)))
    assert np.max(np.abs(np.cov(drawn.T) - covariance) / scale) < 5.0 * np.sqrt(2.0 / size)


def _rest(data):
    return data.columns, data.covariance, data.hosts, np.array([0, 2])


def _full(host, columns):
    return np.hstack([columns, np.eye(3)[host] * (host >= 0)[:, None]])


@settings(max_examples=15, deadline=None)
@given(st.integers(0, 2**32 - 1), st.integers(70, 400), st.floats(0.01, 0.1))
def test_tabulated_sums_give_the_same_log_density(seed, others, smallest):
    rng = np.random.default_rng(seed)
    data = random_data(rng, 5, 12, others, 3)
    small = np.exp(rng.uniform(np.log(smallest), 0.0, len(data.host)))
    data = CoupledData(
        data.host, data.columns, data.covariance * np.outer(small, small), 5, data.coupled
    )
    extra = np.concatenate([[0.0], rng.uniform(0.0, 2.0, 20) ** 2, [1e-12, 4.0]])
    prior = with_prior(3, 5, np.zeros(3), np.ones(3)).moments(np.zeros(1)).repeated(len(extra))
    quick, exact = coupled_rows(data, 4.0), coupled_rows(data, None)
    assert quick.tables
    assert not exact.tables
    found, expected = (solve(each.moments(extra) + prior) for each in (quick, exact))
    np.testing.assert_allclose(found.log_evidence, expected.log_evidence, rtol=1e-11, atol=1e-6)
    quick.focus(0.01, 0.02)
    assert len(quick.tables[0].coefficients) < len(quick.tables[1].coefficients)
    inside = np.linspace(0.01, 0.02, len(extra))
    found, expected = (solve(each.moments(inside) + prior) for each in (quick, exact))
    np.testing.assert_allclose(found.log_evidence, expected.log_evidence, rtol=1e-11, atol=1e-6)


@pytest.mark.parametrize("n", [1, 2, 3, 40])
def test_the_decomposition_holds_the_inverse(n):
    rng = np.random.default_rng(n)
    matrix, columns = random_covariance(rng, n), rng.normal(size=(n, 3))
    base = tridiagonal(matrix)
    whole = np.diag(base.diagonal) + np.diag(base.off, 1) + np.diag(base.off, -1)
    rotated = base.rotated(columns)
    expected = columns.T @ np.linalg.solve(matrix, columns)
    np.testing.assert_allclose(rotated.T @ np.linalg.solve(whole, rotated), expected, rtol=1e-10)
    assert base.smallest == pytest.approx(np.linalg.eigvalsh(matrix)[0], rel=1e-9)


def test_a_coupled_precision_that_is_not_positive_gives_minus_infinity():
    moments = Moments(
        np.zeros((1, 2)),
        np.zeros((1, 2, 2)),
        np.ones((1, 2, 2)),
        np.zeros(1),
        np.array([[[1.0, 2.0], [2.0, 1.0]]]),
        np.array([0, 1]),
    )
    assert solve(moments).log_evidence[0] == -np.inf


def test_sums_of_different_couplings_are_refused():
    first, second = (no_moments(1, 3, 1, np.array(hosts)) for hosts in ([0, 1], [1, 2]))
    with pytest.raises(ValueError, match="different hosts"):
        _ = first + second
    assert (first + no_moments(1, 3, 1)).coupling is not None
    assert no_moments(1, 3, 1, np.array([], dtype=int)).coupling is None
