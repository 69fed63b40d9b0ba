"""The linear core: against covariances written out, and NIST's certified lines."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from oracles import dense_log_evidence

from ladderfit.kernels.arrow import condition, rows, solve


def random_rows(rng, hosts, n, k):
    host = np.concatenate([np.arange(hosts), rng.integers(-1, hosts, n)])
    columns = rng.normal(size=(len(host), k))
    variance = rng.uniform(0.01, 1.0, len(host)) ** 2
    y = rng.normal(size=len(host))
    return host, columns, y, variance


def with_prior(k, hosts, mean, sd):
    return rows(np.full(k, -1), np.eye(k), np.asarray(mean), np.asarray(sd) ** 2, hosts)


@settings(max_examples=60, deadline=None)
@given(
    st.integers(0, 2**32 - 1), st.integers(0, 4), st.integers(0, 12), st.integers(1, 3)
)
def test_evidence_equals_written_out_covariance(seed, hosts, n, k):
    rng = np.random.default_rng(seed)
    host, columns, y, variance = random_rows(rng, hosts, n, k)
    mean, sd = rng.normal(size=k), rng.uniform(0.3, 2.0, k)
    extra = rng.uniform(0.0, 0.3, 3) ** 2
    data = rows(host, columns, y, variance, hosts).moments(extra)
    total = data + with_prior(k, hosts, mean, sd).moments(np.zeros(3))
    found = solve(total).log_evidence
    expected = [
        dense_log_evidence(host, columns, y, variance + e, hosts, mean, sd) for e in extra
    ]
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
    found = solve(condition(rows(host, columns, y, variance, 3).moments(zero) + prior, known, values))
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
    repeated = type(total)(
        *(np.repeat(part, size, axis=0) for part in (total.local, total.cross, total.square, total.constant))
    )
    g, u = solve(repeated).draw(rng)
    full = np.concatenate([columns, np.eye(3)[host] * (host >= 0)[:, None]], axis=1)
    precision = (full / variance[:, None]).T @ full + np.diag([1.0, 1.0, 0.0, 0.0, 0.0])
    mean = np.linalg.solve(precision, (full / variance[:, None]).T @ y)
    covariance = np.linalg.inv(precision)
    drawn = np.concatenate([g, u], axis=1)
    error = np.sqrt(np.diag(covariance) / size)
    assert np.all(np.abs(drawn.mean(axis=0) - mean) < 5.0 * error)
    scale = np.sqrt(np.outer(np.diag(covariance), np.diag(covariance)))
    assert np.max(np.abs(np.cov(drawn.T) - covariance) / scale) < 5.0 * np.sqrt(2.0 / size)
