"""Bands of ranks: exact against simulation, and p-values that agree with them."""

from __future__ import annotations

import numpy as np
import pytest

from ladderfit.coverage.ranks import DRAWS, LEVELS, POINTS, band, counts, covered, simultaneous_p


def leaves(ranks: np.ndarray, low: np.ndarray, high: np.ndarray) -> bool:
    found = counts(ranks)
    return bool(np.any(found < low) or np.any(found > high))


@pytest.mark.parametrize(("size", "chance"), [(50, 0.1), (200, 0.05), (1000, 0.05)])
def test_uniform_ranks_leave_the_band_as_often_as_stated(size: int, chance: float) -> None:
    """Within 4 errors of 2,000 simulations; counts are whole, so a little less than stated."""
    rng, low, high = np.random.default_rng(31), *band(size, chance)
    out = np.mean([leaves(rng.integers(0, DRAWS + 1, size), low, high) for _ in range(2000)])
    error = np.sqrt(chance * (1.0 - chance) / 2000)
    assert -4.0 * error - 0.25 * chance < out - chance < 4.0 * error


def test_p_values_and_bands_agree() -> None:
    rng, low, high = np.random.default_rng(32), *band(150, 0.1)
    seen = set()
    for _ in range(200):
        ranks = rng.integers(0, DRAWS + 1, 150)
        p = simultaneous_p(counts(ranks), 150)
        if abs(p - 0.1) > 0.003:
            assert (p < 0.1) == leaves(ranks, low, high)
            seen.add(p < 0.1)
    assert seen == {True, False}


@pytest.mark.parametrize("kind", ["narrow", "wide", "shifted"])
def test_ranks_that_are_not_uniform_are_found(kind: str) -> None:
    rng = np.random.default_rng(33)
    draws = {"narrow": rng.beta(1.6, 1.6, 400), "wide": rng.beta(0.7, 0.7, 400)}
    share = draws.get(kind, np.clip(rng.beta(1.0, 1.5, 400), 0.0, 1.0))
    ranks = np.floor(share * (DRAWS + 1)).astype(np.int64)
    assert simultaneous_p(counts(ranks), 400) < 1e-3


def test_counts_and_coverage_of_every_rank_once_are_exact() -> None:
    ranks = np.arange(DRAWS + 1)
    np.testing.assert_array_equal(counts(ranks), 8 * np.arange(1, POINTS))
    assert [covered(ranks, level) for level in LEVELS] == pytest.approx(LEVELS, abs=1e-12)
