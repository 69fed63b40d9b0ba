"""Wesenheit indices and the errors of what they are made of."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ladderfit.physics.photometry import combine, combine_variance, index_weights, wesenheit

RATIO = st.floats(0.0, 4.0)
ERROR = st.floats(0.001, 0.5)


def test_separate_band_and_colour() -> None:
    weights = index_weights("H", ("V", "I"), 0.386)
    assert weights == {"H": 1.0, "V": -0.386, "I": 0.386}
    errors = {"H": np.array([0.05]), "V": np.array([0.02]), "I": np.array([0.03])}
    expected = 0.05**2 + 0.386**2 * (0.02**2 + 0.03**2)
    assert combine_variance(weights, errors) == pytest.approx([expected], rel=1e-14)


@given(RATIO, ERROR, ERROR)
def test_band_shared_with_the_red_end_of_the_colour(r: float, s_v: float, s_i: float) -> None:
    # W = I - R (V - I) = (1 + R) I - R V
    weights = index_weights("I", ("V", "I"), r)
    variance = combine_variance(weights, {"V": np.array([s_v]), "I": np.array([s_i])})
    assert variance == pytest.approx([(1 + r) ** 2 * s_i**2 + r**2 * s_v**2], rel=1e-12)


@given(RATIO, ERROR, ERROR)
def test_band_shared_with_the_blue_end_of_the_colour(r: float, s_v: float, s_i: float) -> None:
    # W = V - R (V - I) = (1 - R) V + R I
    weights = index_weights("V", ("V", "I"), r)
    variance = combine_variance(weights, {"V": np.array([s_v]), "I": np.array([s_i])})
    assert variance == pytest.approx([(1 - r) ** 2 * s_v**2 + r**2 * s_i**2], rel=1e-12, abs=1e-18)


def test_one_colour_column_with_its_own_error() -> None:
    weights = index_weights("H", ("V-I",), 0.4)
    assert weights == {"H": 1.0, "V-I": -0.4}
    variance = combine_variance(weights, {"H": np.array([0.1]), "V-I": np.array([0.05])})
    assert variance == pytest.approx([0.1**2 + 0.02**2])


def test_variance_of_a_shared_band_by_simulation() -> None:
    rng = np.random.default_rng(11)
    v, i = rng.normal(0.0, 0.03, 200_000), rng.normal(0.0, 0.05, 200_000)
    simulated = np.var(wesenheit(i, v, i, 1.55))
    weights = index_weights("I", ("V", "I"), 1.55)
    variance = combine_variance(weights, {"V": np.array([0.03]), "I": np.array([0.05])})
    assert variance[0] == pytest.approx(simulated, rel=5.0 * np.sqrt(2.0 / 200_000))


@given(RATIO, st.floats(0.0, 30.0), st.floats(0.0, 30.0), st.floats(0.0, 30.0))
def test_the_weighted_sum_is_the_index(r: float, h: float, v: float, i: float) -> None:
    magnitudes = {"H": np.array([h]), "V": np.array([v]), "I": np.array([i])}
    for band in "HVI":
        expected = wesenheit(magnitudes[band], v, i, r)
        summed = combine(index_weights(band, ("V", "I"), r), magnitudes)
        assert summed == pytest.approx(expected, abs=1e-11)


@given(st.floats(0.0, 2.0), st.floats(0.2, 2.0))
def test_extinction_leaves_the_index_alone(extinction: float, ratio: float) -> None:
    # With absorption A_H = R E(V-I), the index does not feel the dust.
    v, i, h = 12.0 + 2.0 * extinction, 11.0 + extinction, 10.0 + ratio * extinction
    assert wesenheit(h, v, i, ratio) == pytest.approx(10.0 - ratio, abs=1e-12)


def test_a_colour_is_one_or_two_names() -> None:
    with pytest.raises(ValueError, match="one column or two bands"):
        index_weights("H", ("V", "R", "I"), 0.4)
