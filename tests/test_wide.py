"""Products under a covariance with a changing diagonal, against its inverse written out."""

from __future__ import annotations

import numpy as np
import pytest

from ladderfit.kernels.wide import FullCovariance, LowRankCovariance, covariance_of

LOG_2PI = np.log(2.0 * np.pi)


def parts(n: int = 40, rank: int = 5) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Single variances, patterns, what is added, and columns."""
    rng = np.random.default_rng(4)
    single = rng.uniform(0.002, 0.02, n)
    patterns = 0.1 * rng.normal(size=(n, rank))
    return single, patterns, rng.uniform(0.0, 0.03, n), rng.normal(size=(n, 7))


def written_out(
    matrix: np.ndarray, extra: np.ndarray, columns: np.ndarray
) -> tuple[np.ndarray, float]:
    whole = matrix + np.diag(extra)
    constant = -0.5 * (np.linalg.slogdet(whole)[1] + len(whole) * LOG_2PI)
    return columns.T @ np.linalg.inv(whole) @ columns, constant


@pytest.mark.parametrize("known", [True, False], ids=["low rank", "full"])
def test_products_equal_those_of_the_inverse(known: bool) -> None:
    single, patterns, extra, columns = parts()
    matrix = np.diag(single) + patterns @ patterns.T
    found = covariance_of(matrix, single if known else None)
    assert isinstance(found, LowRankCovariance if known else FullCovariance)
    products, constant = found.products(extra, columns)
    expected, level = written_out(matrix, extra, columns)
    np.testing.assert_allclose(products, expected, rtol=1e-10, atol=1e-10)
    assert constant == pytest.approx(level, rel=1e-12)


def test_the_rank_is_found() -> None:
    single, patterns, _, _ = parts()
    found = covariance_of(np.diag(single) + patterns @ patterns.T, single)
    assert isinstance(found, LowRankCovariance)
    assert found.factor.shape == (40, 5)
    np.testing.assert_allclose(found.factor @ found.factor.T, patterns @ patterns.T, atol=1e-13)


@pytest.mark.parametrize(
    ("spoil", "kind"),
    [(0.0, LowRankCovariance), (1e-3, FullCovariance)],
    ids=["as it is", "every row with a pattern of its own"],
)
def test_structure_is_not_invented(spoil: float, kind: type) -> None:
    """Negative control: what the rank leaves out would be seen."""
    single, patterns, _, _ = parts()
    shared = patterns @ patterns.T
    rough = spoil * np.random.default_rng(9).normal(size=shared.shape)
    assert isinstance(covariance_of(np.diag(single) + shared + rough @ rough.T, single), kind)
    assert isinstance(covariance_of(np.diag(single) + shared, 2.0 * single), FullCovariance)
    assert isinstance(covariance_of(np.diag(single) + shared, 0.0 * single), FullCovariance)


@pytest.mark.parametrize("known", [True, False])
def test_an_indefinite_covariance_gives_nan(known: bool) -> None:
    single, patterns, _, columns = parts()
    found = covariance_of(np.diag(single) + patterns @ patterns.T, single if known else None)
    products, constant = found.products(-1.0 * np.ones(40), columns)
    assert np.isnan(constant)
    assert np.all(np.isnan(products))
