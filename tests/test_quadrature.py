"""The integral over a parallax star's modulus against a dense grid."""

from __future__ import annotations

import numpy as np
import pytest
from oracles import log_parallax_integral as dense

from ladderfit.kernels.quadrature import K, log_parallax_integral


def draw_cases(rng, n):
    """Stars from 200 sigma to 0.5 sigma and negative, scatters from 0 to 1 mag."""
    signal = 10.0 ** rng.uniform(np.log10(0.5), np.log10(200.0), n)
    error = 10.0 ** rng.uniform(-2.3, -0.5, n)
    negative = rng.uniform(size=n) < 0.15
    parallax = np.where(negative, -rng.uniform(0.0, 4.0, n), signal) * error
    scatter = np.where(rng.uniform(size=n) < 0.3, 0.0, rng.uniform(0.0, 1.0, n))
    variance = rng.uniform(0.005, 0.1, n) ** 2 + scatter**2
    modulus = 10.0 - 5.0 * np.log10(np.where(negative, rng.uniform(0.1, 1.0, n), parallax))
    off = rng.normal(size=n) * rng.choice([0.1, 1.0, 3.0], n)
    return modulus + off, variance, parallax, error


@pytest.mark.parametrize("tilt", [0.0, 0.6 * np.log(10.0)])
def test_agrees_with_a_dense_grid(tilt):
    """To 1e-6 + 1e-12 |log p| for 2,000 draws."""
    cases = draw_cases(np.random.default_rng(3), 1000)
    found = log_parallax_integral(*cases, tilt)
    assert np.isfinite(found).all()
    worst = 0.0
    for place, (a, v, p, s) in enumerate(zip(*cases, strict=True)):
        expected = dense(a, v, p, s, lambda mu: tilt * mu, points=20_001)
        allowed = 1e-6 + 1e-12 * abs(expected)
        worst = max(worst, abs(found[place] - expected) / allowed)
    assert worst < 1.0


def test_dense_grid_itself_is_converged():
    cases = draw_cases(np.random.default_rng(4), 20)
    for a, v, p, s in zip(*cases, strict=True):
        assert dense(a, v, p, s, points=20_001) == pytest.approx(
            dense(a, v, p, s, points=400_001), abs=1e-8
        )


def test_a_parallax_without_information_leaves_a_constant():
    """With a huge error the integral over mu of the magnitude's Gaussian is 1."""
    found = log_parallax_integral(
        np.array([11.0]), np.array([0.01]), np.array([0.3]), np.array([1e6])
    )
    assert found[0] == pytest.approx(-np.log(1e6) - 0.5 * np.log(2 * np.pi), abs=1e-9)


def test_a_sharp_magnitude_leaves_the_parallax_density():
    """With a tiny variance the parallax is simply normal about its photometric value."""
    found = log_parallax_integral(
        np.array([11.0]), np.array([1e-12]), np.array([0.6]), np.array([0.02])
    )
    residual = (10.0 ** (2.0 - 2.2) - 0.6) / 0.02
    expected = -0.5 * residual**2 - np.log(0.02) - 0.5 * np.log(2 * np.pi)
    assert found[0] == pytest.approx(expected, abs=1e-4)


def test_a_sharp_parallax_leaves_the_magnitude_density():
    """Change of variables: N(a | mu(plx), v) times d mu / d plx."""
    found = log_parallax_integral(
        np.array([5.2]), np.array([0.04]), np.array([10.0]), np.array([1e-5])
    )
    expected = -0.5 * 0.2**2 / 0.04 - 0.5 * np.log(2 * np.pi * 0.04) - np.log(K * 10.0)
    assert found[0] == pytest.approx(expected, abs=1e-5)


def test_far_from_any_agreement_it_stays_finite():
    a = np.array([-20.0, 0.0, 40.0, 11.0])
    found = log_parallax_integral(a, np.full(4, 1e-4), np.array([0.5, -3.0, 50.0, -50.0]), np.full(4, 0.01))
    assert np.isfinite(found).all()
