"""Fits of a review against least squares written out: values, influence, resampling."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from relation_ladders import made
from review_papers import CEPHEIDS, table

import ladderfit as lf
from ladderfit.classical import clipped_least_squares, line_design, ordinary_least_squares
from ladderfit.ladder import Ladder
from ladderfit.review.bench import Bench
from ladderfit.review.claims import Claim, Method
from ladderfit.review.fits import Fit, Treatment, fit, independent, without
from ladderfit.review.refits import Way
from ladderfit.review.reliance import smallest_set
from ladderfit.review.resampling import Resampling, Wanted, number
from ladderfit.review.system import linear_system, objects

SLOPE = Wanted({"slope": 1.0})
SCATTER = Wanted(scatter=True)
WEIGHTED = "errors and scatter"


def one_host(seed: int = 3) -> Ladder:
    stars = table(np.random.default_rng(seed))
    return lf.build_ladder({"cepheids": CEPHEIDS}, {"cepheids": stars})


@pytest.fixture(scope="module")
def ladder() -> Ladder:
    return one_host()


def arrays(ladder: Ladder) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    stars = ladder.cepheids
    return stars.log_period - 1.0, stars.magnitude, np.sqrt(stars.variance)


def value(found: Fit, wanted: Wanted) -> float:
    return number(found, wanted)[0]


def test_without_weights_it_is_ordinary_least_squares(ladder: Ladder) -> None:
    x, y, _ = arrays(ladder)
    expected = ordinary_least_squares(line_design(x), y)
    found = fit(linear_system(ladder), Treatment())
    slope, error, _ = number(found, SLOPE)
    assert slope == pytest.approx(expected.values[0], rel=1e-12)
    assert error == pytest.approx(expected.errors[0], rel=1e-12)
    assert found.scatter == pytest.approx(expected.residual_sd, rel=1e-12)


@pytest.mark.parametrize("clip", [2.0, 2.5, 3.0])
def test_the_clip_is_that_of_older_papers(ladder: Ladder, clip: float) -> None:
    x, y, _ = arrays(ladder)
    expected = clipped_least_squares(line_design(x), y, clip)
    found = fit(linear_system(ladder), Treatment(clip=clip))
    np.testing.assert_array_equal(found.kept, expected.kept)
    assert value(found, SLOPE) == pytest.approx(expected.fit.values[0], rel=1e-12)


def test_weights_from_errors_are_scaled_to_the_residuals(ladder: Ladder) -> None:
    x, y, error = arrays(ladder)
    expected, covariance = np.polyfit(x, y, 1, w=1.0 / error, cov=True)
    slope, own, _ = number(fit(linear_system(ladder), Treatment("errors")), SLOPE)
    assert slope == pytest.approx(expected[0], rel=1e-10)
    assert own == pytest.approx(np.sqrt(covariance[0, 0]), rel=1e-10)


def test_the_scatter_makes_chi_squared_what_is_expected(ladder: Ladder) -> None:
    found = fit(linear_system(ladder), Treatment(WEIGHTED))
    freedom = found.stars - 2.0
    assert np.sum((found.found.residuals / found.sigma) ** 2) == pytest.approx(freedom, rel=1e-6)
    intrinsic = value(found, Wanted(scatter=True, intrinsic=True))
    np.testing.assert_allclose(found.sigma**2 - found.used.variance, intrinsic**2, rtol=1e-9)


@pytest.mark.parametrize("treatment", [Treatment(), Treatment("errors"), Treatment(WEIGHTED)])
@pytest.mark.parametrize("wanted", [SLOPE, SCATTER])
def test_leaving_out_each_star_is_exact(
    ladder: Ladder, treatment: Treatment, wanted: Wanted
) -> None:
    found = fit(linear_system(ladder), treatment)
    start, _, gaps = number(found, wanted)
    for place in (0, 7, len(gaps) - 1):
        removed = np.arange(len(gaps)) == place
        x, y, _ = arrays(ladder)
        w = 1.0 / found.sigma[~removed]
        line = np.polyfit(x[~removed], y[~removed], 1, w=w)
        rest = y[~removed] - np.polyval(line, x[~removed])
        expected = line[0] if wanted is SLOPE else np.sqrt(np.sum(rest**2) / (len(rest) - 2))
        exact = wanted is SLOPE or treatment == Treatment()  # else the scatter is to first order
        assert start - gaps[place] == pytest.approx(expected, rel=1e-9 if exact else 1e-3)
        assert value(without(found, removed), wanted) == pytest.approx(expected, rel=1e-3)


def test_the_spread_is_the_jackknife(ladder: Ladder) -> None:
    x, y, _ = arrays(ladder)
    n = len(x)
    each = [np.polyfit(np.delete(x, i), np.delete(y, i), 1)[0] for i in range(n)]
    expected = np.sqrt((n - 1) * np.var(each))
    made = Resampling(objects(ladder)).estimate(fit(linear_system(ladder), Treatment()), SLOPE)
    assert made.spread == pytest.approx(expected, rel=1e-9)
    # Random weights agree with it, within the error of 300 of them (4 %) and the difference
    # of jackknife and bootstrap.
    assert np.std(made.deviations) == pytest.approx(expected, rel=0.15)


@pytest.mark.parametrize("treatment", [Treatment(clip=2.5), Treatment(WEIGHTED, 2.5)])
def test_clips_under_random_weights_against_a_loop(ladder: Ladder, treatment: Treatment) -> None:
    """Twenty sets of weights, each clipped in a loop with numpy's own fit."""
    found = fit(linear_system(ladder), treatment)
    resampling = Resampling(objects(ladder))
    made = resampling._clipped(found, SLOPE)
    x, y, _ = arrays(ladder)
    sigma = np.full(len(x), np.median(found.sigma))
    sigma[found.kept] = found.sigma
    for own, weights in zip(made[:20], resampling.weights[:20, found.system.row], strict=True):
        kept = found.kept.copy()
        for _ in range(40):
            w = np.sqrt(weights[kept]) / sigma[kept]
            line = np.polyfit(x[kept], y[kept], 1, w=w)
            scaled = ((y - np.polyval(line, x)) / sigma) ** 2
            freedom = 1.0 - 2.0 / kept.sum()
            spread = np.average(scaled[kept], weights=weights[kept]) / freedom
            near = scaled < treatment.clip**2 * spread
            if np.array_equal(near, kept):
                break
            kept = near
        assert own == pytest.approx(line[0], rel=1e-6)


def test_many_hosts_have_a_level_each() -> None:
    """Against a design of indicator columns, solved by numpy."""
    mock = made(5, parallaxes=False)
    mock.choices["anchors"] = {}
    ladder = mock.built()
    stars = ladder.cepheids
    found = fit(linear_system(ladder), Treatment())
    levels = np.stack([(stars.host == h).astype(float) for h in range(3)], axis=1)
    design = np.column_stack(
        [levels, stars.log_period - 1.0, stars.metallicity - 8.69, stars.overtone]
    )
    expected = np.linalg.lstsq(design, stars.magnitude)[0]
    assert value(found, SLOPE) == pytest.approx(expected[3], rel=1e-9)
    assert value(found, Wanted({"metallicity": 1.0})) == pytest.approx(expected[4], rel=1e-9)
    level = Wanted({"zero_point": 1.0, "modulus[Orrel]": 1.0})
    assert value(found, level) == pytest.approx(expected[1], rel=1e-9)
    # Nothing sets the scale: neither a zero point nor a modulus alone can be had.
    assert number(found, Wanted({"zero_point": 1.0})) is None
    assert number(found, Wanted({"modulus[Orrel]": 1.0})) is None


def test_a_ladder_with_anchors_and_parallaxes_agrees_with_its_posterior() -> None:
    """The linear system of every rung lies by the joint posterior: within half an error."""
    ladder = made(7, stars=30).built()
    found = fit(linear_system(ladder), Treatment(WEIGHTED))
    result = lf.draw(ladder, seed=1, draws=4000)
    for name in ("slope", "zero_point", "metallicity", "modulus[Tavin]", "modulus[Q07]"):
        own, error, _ = number(found, Wanted({name: 1.0}))
        assert abs(own - result.mean(name)) < 0.5 * result.sd(name), name
        assert error == pytest.approx(result.sd(name), rel=0.35), name


def test_columns_in_the_span_of_others_are_dropped() -> None:
    rng = np.random.default_rng(1)
    X = rng.normal(size=(9, 3))
    X = np.column_stack([X[:, 0], X[:, 1], X[:, 0] - 2.0 * X[:, 1], X[:, 2]])
    good, span = independent(X)
    assert good.tolist() == [0, 1, 3]
    np.testing.assert_allclose(X[:, good] @ span.T, X[:, [2]], atol=1e-9)


def test_smallest_set_against_every_set() -> None:
    """Of twelve stars no set smaller than the fewest moves the slope; ours is near it."""
    larger = 0
    for seed in range(6):
        stars = table(np.random.default_rng(seed)).iloc[:12]
        ladder = lf.build_ladder({"cepheids": CEPHEIDS}, {"cepheids": stars})
        bench = Bench(ladder, draws=0)
        claim = Claim("slope", -3.3)
        way = Way(bench.described(Method()), Treatment())
        start = way.estimate(bench, claim)
        found = smallest_set(bench, claim, way, start.error)
        x, y, _ = arrays(ladder)
        fewest = None
        for size in range(1, 5):
            sets = itertools.combinations(range(len(x)), size)
            slopes = [np.polyfit(np.delete(x, s), np.delete(y, s), 1)[0] for s in sets]
            if np.max(np.abs(np.array(slopes) - start.value)) >= start.error:
                fewest = size
                break
        assert fewest is not None
        assert found.size >= fewest
        assert abs(found.change) >= start.error
        gone = np.isin(ladder.cepheids.star, found.stars)
        refit = np.polyfit(x[~gone], y[~gone], 1)[0]
        assert found.value == pytest.approx(refit, rel=1e-9)
        larger += found.size - fewest
    assert larger <= 1
