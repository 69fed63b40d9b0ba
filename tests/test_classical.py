"""The estimates of older papers: their algebra, and published values of straight lines."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st
from published import CERTIFIED, LONGLEY, NOINT1, NORRIS, PONTIUS
from published_lines import HOGG_2010, LINES_TRANSCRIBED, PEARSON_YORK

from ladderfit.classical import (
    Line,
    clipped_least_squares,
    line_design,
    line_with_both_errors,
    line_with_outliers,
    ordinary_least_squares,
    weighted_least_squares,
)
from ladderfit.errors import LadderfitError
from ladderfit.samples import FloatArray

MOCKS = 100
SEEDS = st.integers(0, 2**32 - 1)
GOOD = HOGG_2010[HOGG_2010["ID"] >= 5]


@pytest.mark.published
@pytest.mark.parametrize("name", LINES_TRANSCRIBED)
def test_transcription(name: str, published_tables: Path) -> None:
    original = pd.read_csv(published_tables / f"{name}.csv")
    pd.testing.assert_frame_equal(LINES_TRANSCRIBED[name], original, check_exact=True)


# Least squares.


def certified(dataset: str, coefficients: int) -> tuple[FloatArray, FloatArray]:
    """Coefficients and their standard deviations, in the order of the table."""
    rows = CERTIFIED[CERTIFIED["dataset"] == dataset].iloc[:coefficients]
    return rows["certified"].to_numpy(float), rows["certified_sd"].to_numpy(float)


def with_constant(*columns: object) -> FloatArray:
    stacked = np.stack([np.asarray(column, float) for column in columns], axis=1)
    return np.column_stack([np.ones(len(stacked)), stacked])


NIST = {
    "norris": (with_constant(NORRIS["x"]), NORRIS["y"]),
    "pontius": (with_constant(PONTIUS["x"], PONTIUS["x"] ** 2.0), PONTIUS["y"]),
    "noint1": (NOINT1[["x"]].to_numpy(float), NOINT1["y"]),
    "longley": (
        with_constant(*(LONGLEY[name] for name in LONGLEY.columns[1:])),
        LONGLEY["TOTEMP"],
    ),
}


@pytest.mark.parametrize("name", NIST)
def test_nist(name: str) -> None:
    # NIST StRD, certified values (read).
    design, y = NIST[name]
    values, deviations = certified(name, design.shape[1])
    found = ordinary_least_squares(design, y)
    np.testing.assert_allclose(found.values, values, rtol=1e-9)
    np.testing.assert_allclose(found.errors, deviations, rtol=1e-9)
    assert found.freedom == len(y) - design.shape[1]


def test_nist_residual_deviations() -> None:
    # NIST StRD (read): Norris 0.884796396144373, NoInt1 3.56753034006338.
    assert ordinary_least_squares(*NIST["norris"]).residual_sd == pytest.approx(
        0.884796396144373, rel=1e-9
    )
    assert ordinary_least_squares(*NIST["noint1"]).residual_sd == pytest.approx(
        3.56753034006338, rel=1e-9
    )


@given(SEEDS)
def test_weights_are_repeated_rows(seed: int) -> None:
    """A row measured twice as well as the rest (in variance) counts like two rows."""
    rng = np.random.default_rng(seed)
    X, y = line_design(rng.normal(size=9)), rng.normal(size=9)
    times = rng.integers(1, 5, 9)
    weighted = weighted_least_squares(X, y, 1.0 / np.sqrt(times))
    repeated = weighted_least_squares(
        np.repeat(X, times, 0), np.repeat(y, times), np.ones(sum(times))
    )
    np.testing.assert_allclose(weighted.values, repeated.values, rtol=1e-9, atol=1e-9)
    np.testing.assert_allclose(weighted.covariance, repeated.covariance, rtol=1e-9)
    assert weighted.sum_of_squares == pytest.approx(repeated.sum_of_squares, rel=1e-9)


def test_errors_of_weighted_least_squares_do_not_follow_the_residuals() -> None:
    x = np.arange(6.0)
    y = np.array([0.0, 1.5, 1.5, 3.5, 3.5, 5.0])
    small, large = (weighted_least_squares(line_design(x), scale * y, 0.1) for scale in (1.0, 9.0))
    np.testing.assert_array_equal(small.errors, large.errors)
    plain, wider = (ordinary_least_squares(line_design(x), scale * y) for scale in (1.0, 9.0))
    np.testing.assert_allclose(wider.errors, 9.0 * plain.errors, rtol=1e-12)


@pytest.mark.parametrize(
    ("design", "error", "words"),
    [
        ([[1.0, 2.0], [2.0, 4.0], [3.0, 6.0]], 1.0, "not independent"),
        ([[1.0, 0.0], [2.0, 0.0], [3.0, 0.0]], 1.0, "column of zeros"),
        ([[1.0, 2.0, 1.0, 0.0], [2.0, 4.0, 0.0, 1.0], [3.0, 5.0, 1.0, 1.0]], 1.0, "fewer rows"),
        ([[1.0, 2.0], [2.0, 5.0], [3.0, 6.0]], 0.0, "above zero"),
    ],
)
def test_unusable_systems(design: list[list[float]], error: float, words: str) -> None:
    with pytest.raises(ValueError, match=words):
        weighted_least_squares(design, [1.0, 2.0, 4.0], error)


# Iterative clipping, as in older papers.


def test_clip_sets_aside_and_takes_back() -> None:
    rng = np.random.default_rng(1)
    x = np.linspace(-1.0, 1.0, 60)
    y = -3.3 * x + 0.1 * rng.uniform(-1.0, 1.0, 60)
    y[[4, 31]] += 5.0
    y[50] -= 1.0  # hidden by the two larger ones at first
    clipped = clipped_least_squares(line_design(x), y)
    assert np.flatnonzero(~clipped.kept).tolist() == [4, 31, 50]
    alone = ordinary_least_squares(line_design(x)[clipped.kept], y[clipped.kept])
    np.testing.assert_array_equal(clipped.fit.values, alone.values)
    assert abs(clipped.fit.values[0] + 3.3) < 0.1
    assert clipped_least_squares(line_design(x), y, np.inf).kept.all()


def test_clip_underestimates_the_scatter() -> None:
    """Why it is for comparison only: of a normal sample it keeps the middle."""
    y = np.random.default_rng(2).normal(size=20_000)
    scatter = clipped_least_squares(np.ones((len(y), 1)), y, 2.0).fit.residual_sd
    assert scatter < 0.9


def test_clip_that_goes_round_in_circles() -> None:
    with pytest.raises(LadderfitError, match="does not settle"):
        clipped_least_squares(line_design(range(5)), [10.0, 12.0, 14.0, 29.0, 18.0], 1.1)


def test_clip_that_leaves_nothing() -> None:
    with pytest.raises(LadderfitError, match="no more rows"):
        clipped_least_squares(line_design(range(4)), [0.0, 1.0, 0.0, 1.0], 0.1)


# Straight lines: Hogg, Bovy & Lang 2010 and Pearson 1901 with the weights of York 1966.


@pytest.mark.parametrize(
    ("table", "values", "errors"),
    [
        # Computed; published 2.24 +- 0.11, 34 +- 18 (memory).
        (GOOD, [2.23992, 34.0477], [0.10778, 18.2462]),
        # Computed; published 1.08 +- 0.08, 213 +- 14 (memory).
        (HOGG_2010, [1.07675, 213.2735], [0.08, 14.0]),
    ],
    ids=["IDs 5 to 20", "all"],
)
def test_hogg_2010(table: pd.DataFrame, values: list[float], errors: list[float]) -> None:
    found = weighted_least_squares(line_design(table["x"]), table["y"], table["sigma_y"])
    digits = 0.6 * 10.0 ** -np.array([5.0, 4.0])  # half of the last digit
    np.testing.assert_array_less(np.abs(found.values - values), digits)
    last = digits if table is GOOD else np.array([0.005, 0.5])
    np.testing.assert_array_less(np.abs(found.errors - errors), last)


def test_hogg_2010_mixture() -> None:
    # Maximum likelihood with outliers, all 20 points (computed).
    found = line_with_outliers(HOGG_2010["x"], HOGG_2010["y"], HOGG_2010["sigma_y"])
    assert found.slope == pytest.approx(2.25882, abs=0.6e-5)
    assert found.intercept == pytest.approx(32.0028, abs=0.6e-4)
    assert found.fraction == pytest.approx(0.2573, abs=0.6e-4)
    assert found.mean == pytest.approx(447.39, abs=0.006)
    assert np.log(found.variance) == pytest.approx(8.533, abs=0.0006)
    assert found.log_likelihood == pytest.approx(-105.1744, abs=0.6e-4)


def written_out(parameters: FloatArray) -> float:
    """Log likelihood of line and outliers, one point after the other."""
    slope, intercept, fraction, mean, log_variance = parameters
    total = 0.0
    for point in HOGG_2010.itertuples():
        own, wide = point.sigma_y**2, np.exp(log_variance) + point.sigma_y**2
        good = np.exp(-((point.y - intercept - slope * point.x) ** 2) / (2.0 * own))
        bad = np.exp(-((point.y - mean) ** 2) / (2.0 * wide))
        density = (1.0 - fraction) * good / np.sqrt(own) + fraction * bad / np.sqrt(wide)
        total += np.log(density / np.sqrt(2.0 * np.pi))
    return total


def test_mixture_is_at_a_maximum() -> None:
    found = line_with_outliers(HOGG_2010["x"], HOGG_2010["y"], HOGG_2010["sigma_y"])
    best = np.array(
        [found.slope, found.intercept, found.fraction, found.mean, np.log(found.variance)]
    )
    top = written_out(best)
    assert top == pytest.approx(found.log_likelihood, abs=1e-9)
    for place, step in enumerate([0.01, 1.0, 0.01, 5.0, 0.1]):
        for sign in (-1.0, 1.0):
            assert written_out(best + sign * step * np.eye(5)[place]) < top


def both_errors(table: pd.DataFrame) -> Line:
    return line_with_both_errors(
        table["x"], table["y"], table["sigma_x"], table["sigma_y"], table["rho_xy"]
    )


def test_pearson_york() -> None:
    # York et al. 2004, AJP 72, 367 (slope and intercept from memory; errors computed).
    found = line_with_both_errors(
        PEARSON_YORK["x"],
        PEARSON_YORK["y"],
        PEARSON_YORK["weight_x"] ** -0.5,
        PEARSON_YORK["weight_y"] ** -0.5,
    )
    assert found.slope == pytest.approx(-0.480533407, abs=0.6e-9)
    assert found.intercept == pytest.approx(5.47991022, abs=0.6e-8)
    assert found.slope_error == pytest.approx(0.0579850, abs=0.6e-7)
    assert found.intercept_error == pytest.approx(0.2949707, abs=0.6e-7)


def test_correlated_errors_by_a_second_route() -> None:
    """Hogg, Bovy & Lang 2010, points 5 to 20: the squared distances along the normal.

    Their section 7: displacement over its variance, both along the line's normal,
    summed; the line found here is where the sum is smallest.
    """
    found = both_errors(GOOD)

    def normal_distances(slope: float, intercept: float) -> float:
        normal = np.array([-slope, 1.0]) / np.hypot(1.0, slope)
        total = 0.0
        for point in GOOD.itertuples():
            shared = point.rho_xy * point.sigma_x * point.sigma_y
            spread = np.array([[point.sigma_x**2, shared], [shared, point.sigma_y**2]])
            off = normal @ [point.x, point.y] - intercept / np.hypot(1.0, slope)
            total += off**2 / (normal @ spread @ normal)
        return float(total)

    least = normal_distances(found.slope, found.intercept)
    assert least == pytest.approx(found.sum_of_squares, rel=1e-12)
    for angle in np.linspace(0.0, 2.0 * np.pi, 24, endpoint=False):
        slope = found.slope + 1e-3 * np.cos(angle)
        intercept = found.intercept + 0.16 * np.sin(angle) - 160.0e-3 * np.cos(angle)
        assert normal_distances(slope, intercept) > least


def test_without_errors_in_x_it_is_weighted_least_squares() -> None:
    found = line_with_both_errors(GOOD["x"], GOOD["y"], 0.0 * GOOD["x"], GOOD["sigma_y"])
    plain = weighted_least_squares(line_design(GOOD["x"]), GOOD["y"], GOOD["sigma_y"])
    np.testing.assert_allclose([found.slope, found.intercept], plain.values, rtol=1e-12)
    np.testing.assert_allclose([found.slope_error, found.intercept_error], plain.errors, rtol=1e-9)
    assert found.sum_of_squares == pytest.approx(plain.sum_of_squares, rel=1e-12)


def test_axes_may_be_swapped() -> None:
    """The line does not know which coordinate is the dependent one."""
    here = both_errors(GOOD)
    swapped = {"x": "y", "y": "x", "sigma_x": "sigma_y", "sigma_y": "sigma_x"}
    there = both_errors(GOOD.rename(columns=swapped))
    assert there.slope == pytest.approx(1.0 / here.slope, rel=1e-10)
    assert there.intercept == pytest.approx(-here.intercept / here.slope, rel=1e-10)
    assert there.slope_error == pytest.approx(here.slope_error / here.slope**2, rel=1e-9)
    assert there.sum_of_squares == pytest.approx(here.sum_of_squares, rel=1e-10)


@given(st.floats(-3.0, 3.0))
def test_shear(k: float) -> None:
    """y -> y + k x correlates the errors further, and adds k to the slope."""
    shared = GOOD["rho_xy"] * GOOD["sigma_x"] * GOOD["sigma_y"]
    variance = GOOD["sigma_y"] ** 2 + k**2 * GOOD["sigma_x"] ** 2 + 2.0 * k * shared
    sheared = GOOD.assign(
        y=GOOD["y"] + k * GOOD["x"],
        sigma_y=np.sqrt(variance),
        rho_xy=(shared + k * GOOD["sigma_x"] ** 2) / (GOOD["sigma_x"] * np.sqrt(variance)),
    )
    here, there = both_errors(GOOD), both_errors(sheared)
    assert there.slope == pytest.approx(here.slope + k, abs=1e-9)
    assert there.intercept == pytest.approx(here.intercept, abs=1e-7)
    assert there.slope_error == pytest.approx(here.slope_error, rel=1e-8)


def mock_lines(rng: np.random.Generator) -> tuple[Line, float]:
    """Forty points with correlated errors on y = 2 x + 1, and the slope of plain least squares."""
    true = np.linspace(-3.0, 3.0, 40)
    noise = rng.multivariate_normal([0.0, 0.0], [[0.64, 0.3], [0.3, 0.36]], 40)
    x, y = true + noise[:, 0], 2.0 * true + 1.0 + noise[:, 1]
    size = np.ones(40)
    line = line_with_both_errors(x, y, 0.8 * size, 0.6 * size, 0.3 / 0.48)
    return line, float(ordinary_least_squares(line_design(x), y).values[0])


def test_recovers_the_slope_where_plain_least_squares_does_not() -> None:
    """100 mocks: unbiased, with errors as large as the scatter; the other is the control."""
    rng = np.random.default_rng(3)
    found = [mock_lines(rng) for _ in range(MOCKS)]
    slopes = np.array([line.slope for line, _ in found])
    pulls = (slopes - 2.0) / np.array([line.slope_error for line, _ in found])
    error = slopes.std(ddof=1) / np.sqrt(MOCKS)
    assert abs(slopes.mean() - 2.0) < 4.0 * error
    assert pulls.std(ddof=1) == pytest.approx(1.0, abs=4.0 / np.sqrt(2 * MOCKS))
    intercepts = np.array([(line.intercept - 1.0) / line.intercept_error for line, _ in found])
    assert intercepts.std(ddof=1) == pytest.approx(1.0, abs=4.0 / np.sqrt(2 * MOCKS))
    assert np.mean([plain for _, plain in found]) < 2.0 - 10.0 * error


def test_a_cloud_that_has_no_line() -> None:
    x, y = [-1.0, 0.0, 4.0, 0.0, 2.0], [0.0, 3.0, 2.0, 1.0, -3.0]
    with pytest.raises(LadderfitError, match="does not converge"):
        line_with_both_errors(x, y, [2.0, 3.0, 1.0, 2.0, 2.0], [3.0, 1.0, 4.0, 2.0, 1.0])
