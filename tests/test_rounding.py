"""Rounding by the rule of the Particle Data Group, and the interval behind figures and text."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ladderfit.rounding import MINUS, Interval, last_place, rounded


@pytest.mark.parametrize(
    ("value", "error", "text"),
    [
        (0.827, 0.119, "0.83 ± 0.12"),  # the review's own two examples
        (0.827, 0.367, "0.8 ± 0.4"),
        (0.827, 0.100, "0.83 ± 0.10"),
        (0.827, 0.354, "0.83 ± 0.35"),
        (0.827, 0.355, "0.8 ± 0.4"),
        (0.827, 0.949, "0.8 ± 0.9"),
        (0.827, 0.950, "0.8 ± 1.0"),  # up to 1000, two digits
        (0.827, 0.999, "0.8 ± 1.0"),
        (1234.5, 123.0, "1230 ± 120"),
        (12345.0, 987.0, "12300 ± 1000"),
        (18.477, 0.0263, "18.477 ± 0.026"),
        (-3.2604, 0.0095, f"{MINUS}3.260 ± 0.010"),
        (-0.0001, 0.5, "0.0 ± 0.5"),
    ],
)
def test_rule(value: float, error: float, text: str) -> None:
    assert str(rounded(value, error)) == text


@pytest.mark.parametrize("error", [0.0, -1.0, float("nan"), float("inf")])
def test_no_usable_error_leaves_the_value_alone(error: float) -> None:
    assert str(rounded(70.0, error)) == "70"
    with pytest.raises(ValueError, match="no digits"):
        last_place(error)


@given(
    st.floats(-1e12, 1e12),
    st.floats(1e-12, 1e12),
)
def test_rounding_loses_less_than_the_error_can_show(value: float, error: float) -> None:
    shown = rounded(value, error)
    number = float(shown.value.replace(MINUS, "-"))
    assert abs(number - value) <= 0.51 * 10.0 ** last_place(error) + 1e-15 * abs(value)
    assert float(shown.error) == pytest.approx(error, rel=0.15)  # 355 is shown as 4


@given(st.integers(100, 999), st.integers(-8, 8))
def test_the_power_of_ten_does_not_matter(three: int, power: int) -> None:
    here = last_place(float(f"{three}e{power}"))
    assert here - power == (1 if three <= 354 else 2)


def test_interval_of_draws() -> None:
    draws = np.random.default_rng(5).normal(72.4, 2.0, 200_000)
    interval = Interval.of(draws)
    inside = np.mean((draws >= interval.low) & (draws <= interval.high))
    assert inside == pytest.approx(0.68, abs=1e-4)
    assert interval.mean == pytest.approx(72.4, abs=0.02)
    assert interval.sd == pytest.approx(2.0, rel=0.01)
    assert str(interval) == str(rounded(interval.mean, interval.sd))
    assert interval.arms == (interval.mean - interval.low, interval.high - interval.mean)


def test_interval_of_a_constant() -> None:
    interval = Interval.of(np.full(50, 0.1))
    assert interval.sd == 0.0
    assert str(interval) == "0.1"
    assert max(interval.arms) < 1e-15
