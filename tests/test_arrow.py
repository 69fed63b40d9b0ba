"""The linear core: against covariances written out, and NIST's certified lines."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from oracles import dense_log_evidence

from ladderfit.kernels.arrow import Moments, rows, solve
from ladderfit.kernels.reduced import ReducedRows, reduced, tabulate


def random_rows(rng, hosts, n, k):
    host = np.concatenate([np.arange(hosts), rng.integers(-1, hosts, n)])
    columns = rng.normal(size=(len(host), k))
    variance = rng.uniform(0.01, 1.0, len(host)) ** 2
    y = rng.normal(size=len(host))
    return host, columns, y, variance


def with_prior(k, hosts, mean, sd):
    return rows(np.full(k, -1), np.eye(k), np.asarray(mean), np.asarray(sd) ** 2, hosts)


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 2**32 - 1), st.integers(0, 4), st.integers(0, 12), st.integers(1, 3))
def test_evidence_equals_written_out_covariance(seed, hosts, n, k):
    rng = np.random.default_rng(seed)
    host, columns, y, variance = random_rows(rng, hosts, n, k)
    mean, sd = rng.normal(size=k), rng.uniform(0.3, 2.0, k)
    extra = rng.uniform(0.0, 0.3, 3) ** 2
    data = rows(host, columns, y, variance, hosts).moments(extra)
    total = data + with_prior(k, hosts, mean, sd).moments(np.zeros(3))
    found = solve(total).log_evidence
    expected = [dense_log_evidence(host, columns, y, variance + e, hosts, mean, sd) for e in extra]
    np.testing.assert_allclose(found, expected, rtol=1e-9, atol=1e-9)


@settings(max_examples=30, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_conditioning_equals_moving_the_column_by_hand(seed):
    rng = np.random.default_rng(seed)
    host, columns, y, variance = random_rows(rng, 3, 20, 3)
    values = rng.normal(size=(2, 1))
    zero = np.zeros(2)
    prior = with_prior(3, 3, np.zeros(3), np.ones(3)).moments(zero)
    known = np.array([1])
    data = rows(host, columns, y, variance, 3).moments(zero)
    found = solve(data + prior, known, values)
    for place in range(2):
        moved = y - columns[:, 1] * values[place, 0]
        rest = rows(host, columns[:, [0, 2]], moved, variance, 3).moments(np.zeros(1))
        rest += with_prior(2, 3, np.zeros(2), np.ones(2)).moments(np.zeros(1))
        direct = solve(rest)
        known_prior = -0.5 * values[place, 0] ** 2 - 0.5 * np.log(2 * np.pi)
        assert found.log_evidence[place] == pytest.approx(
            direct.log_evidence[0] + known_prior, rel=1e-9, abs=1e-9
        )
        np.testing.assert_allclose(found.mean[place], direct.mean[0], rtol=1e-8, atol=1e-10)


def test_draws_have_the_posterior_mean_and_covariance():
    rng = np.random.default_rng(5)
    host, columns, y, variance = random_rows(rng, 3, 20, 2)
    size = 40_000
    zero = np.zeros(1)
    total = rows(host, columns, y, variance, 3).moments(zero) + with_prior(
        2, 3, np.zeros(2), np.ones(2)
    ).moments(zero)
    g, u = solve(total.repeated(size)).draw(rng.standard_normal((size, 2 + 3)))
    full = np.concatenate([columns, np.eye(3)[host] * (host >= 0)[:, None]], axis=1)
    precision = (full / variance[:, None]).T @ full + np.diag([1.0, 1.0, 0.0, 0.0, 0.0])
    mean = np.linalg.solve(precision, (full / variance[:, None]).T @ y)
    covariance = np.linalg.inv(precision)
    drawn = np.concatenate([g, u], axis=1)
    error = np.sqrt(np.diag(covariance) / size)
    assert np.all(np.abs(drawn.mean(axis=0) - mean) < 5.0 * error)
    scale = np.sqrt(np.outer(np.diag(covariance), np.diag(covariance)))
    assert np.max(np.abs(np.cov(drawn.T) - covariance) / scale) < 5.0 * np.sqrt(2.0 / size)


@settings(max_examples=25, deadline=None)
@given(
    st.integers(0, 2**32 - 1),
    st.integers(1, 6),
    st.integers(70, 3000),
    st.floats(0.005, 0.3),
    st.floats(0.3, 3.0),
)
def test_tabulated_sums_give_the_same_log_density(seed, hosts, n, smallest, largest):
    """Errors from 0.005 to 1 mag mixed; scatters from 0 to 3 mag; to 1e-6 up to 10^4 stars."""
    rng = np.random.default_rng(seed)
    host, columns, y, _ = random_rows(rng, hosts, n, 3)
    host = np.maximum(host, 0)
    variance = np.exp(rng.uniform(np.log(smallest), 0.0, len(host))) ** 2
    exact = rows(host, columns, y, variance, hosts)
    quick = reduced(exact, largest**2)
    assert isinstance(quick, ReducedRows)
    extra = np.concatenate([[0.0], rng.uniform(0.0, largest, 40) ** 2, [1e-12, largest**2]])
    prior = with_prior(3, hosts, np.zeros(3), np.ones(3)).moments(np.zeros(1)).repeated(len(extra))
    expected, found = solve(exact.moments(extra) + prior), solve(quick.moments(extra) + prior)
    np.testing.assert_allclose(found.log_evidence, expected.log_evidence, rtol=0.0, atol=1e-6)
    np.testing.assert_allclose(found.mean, expected.mean, rtol=0.0, atol=1e-8)
    assert quick.tables[0].error <= 1e-6


def test_beyond_its_table_the_sums_are_exact():
    rng = np.random.default_rng(2)
    host, columns, y, variance = random_rows(rng, 3, 100, 2)
    exact = rows(np.maximum(host, 0), columns, y, variance, 3)
    quick = reduced(exact, 0.1)
    extra = np.array([0.05, 5.0])
    for name in ("local", "cross", "square", "constant"):
        expected, found = (getattr(kind.moments(extra), name) for kind in (exact, quick))
        np.testing.assert_allclose(found[1], expected[1], rtol=1e-14)
        np.testing.assert_allclose(found[0], expected[0], rtol=1e-9, atol=1e-9)


def test_a_focused_table_is_shorter_and_at_least_as_good():
    rng = np.random.default_rng(2)
    host, columns, y, variance = random_rows(rng, 3, 5000, 2)
    quick = reduced(rows(np.maximum(host, 0), columns, y, variance, 3), 4.0)
    wide = len(quick.tables[0].coefficients)
    quick.focus(0.07**2, 0.09**2)
    assert len(quick.tables[0].coefficients) < 0.5 * wide
    assert quick.tables[0].error < 1e-6


def test_too_few_nodes_would_have_been_noticed(monkeypatch):
    """The measured error is the one that a user would get: starve the table and see."""
    monkeypatch.setattr("ladderfit.kernels.reduced._LAST", 9)
    rng = np.random.default_rng(2)
    host, columns, y, _ = random_rows(rng, 3, 5000, 2)
    variance = np.exp(rng.uniform(np.log(0.005), 0.0, len(host))) ** 2
    table = tabulate(rows(np.maximum(host, 0), columns, y, variance, 3), 0.0, 9.0)
    assert len(table.coefficients) == 9
    assert table.error > 1e-3


def test_a_precision_that_is_not_positive_gives_minus_infinity():
    moments = Moments(np.ones((1, 1)), np.zeros((1, 1, 2)), -np.ones((1, 2, 2)), np.zeros(1))
    assert solve(moments).log_evidence[0] == -np.inf
