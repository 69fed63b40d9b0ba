"""The integral over a parallax star's modulus: dense grid, plain reference, compiled kernel."""

from __future__ import annotations

import numpy as np
import pytest
from oracle_quadrature import log_parallax_integral as plain
from oracles import log_parallax_integral as dense

from ladderfit.kernels.quadrature import K, log_parallax_integrals

VOLUME = 0.6 * np.log(10.0)


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


def compiled(a, v, parallax, error, tilt=0.0):
    a, v, parallax, error = (np.atleast_1d(np.asarray(x, float)) for x in (a, v, parallax, error))
    return log_parallax_integrals(a[None, :], v, parallax, error, tilt)[0]


@pytest.mark.parametrize("tilt", [0.0, VOLUME])
def test_both_agree_with_a_dense_grid(tilt):
    """To 1e-6 + 1e-12 |log p| for 2,000 draws."""
    cases = draw_cases(np.random.default_rng(3), 1000)
    slow, fast = plain(*cases, tilt), compiled(*cases, tilt)
    assert np.isfinite(fast).all()
    expected = np.array(
        [
            dense(a, v, p, s, lambda mu: tilt * mu, points=20_001)
            for a, v, p, s in zip(*cases, strict=True)
        ]
    )
    allowed = 1e-6 + 1e-12 * np.abs(expected)
    assert np.max(np.abs(slow - expected) / allowed) < 1.0
    assert np.max(np.abs(fast - expected) / allowed) < 1.0


@pytest.mark.parametrize("tilt", [0.0, VOLUME])
@pytest.mark.parametrize("seed", [1, 2])
def test_compiled_agrees_with_plain(tilt, seed):
    """20,000 draws each, to a fifth of what is asked."""
    cases = draw_cases(np.random.default_rng(seed), 20_000)
    expected = plain(*cases, tilt)
    allowed = 2e-7 + 1e-12 * np.abs(expected)
    assert np.max(np.abs(compiled(*cases, tilt) - expected) / allowed) < 1.0


def test_dense_grid_itself_is_converged():
    cases = draw_cases(np.random.default_rng(4), 20)
    for a, v, p, s in zip(*cases, strict=True):
        assert dense(a, v, p, s, points=20_001) == pytest.approx(
            dense(a, v, p, s, points=400_001), abs=1e-8
        )


def test_a_parallax_without_information_leaves_a_constant():
    """With a huge error the integral over mu of the magnitude's Gaussian is 1."""
    found = compiled(11.0, 0.01, 0.3, 1e6)
    assert found[0] == pytest.approx(-np.log(1e6) - 0.5 * np.log(2 * np.pi), abs=1e-7)


def test_a_sharp_magnitude_leaves_the_parallax_density():
    """With a tiny variance the parallax is simply normal about its photometric value."""
    found = compiled(11.0, 1e-12, 0.6, 0.02)
    residual = (10.0 ** (2.0 - 2.2) - 0.6) / 0.02
    expected = -0.5 * residual**2 - np.log(0.02) - 0.5 * np.log(2 * np.pi)
    assert found[0] == pytest.approx(expected, abs=1e-4)


def test_a_sharp_parallax_leaves_the_magnitude_density():
    """Change of variables: N(a | mu(plx), v) times d mu / d plx."""
    found = compiled(5.2, 0.04, 10.0, 1e-5)
    expected = -0.5 * 0.2**2 / 0.04 - 0.5 * np.log(2 * np.pi * 0.04) - np.log(K * 10.0)
    assert found[0] == pytest.approx(expected, abs=1e-5)


def test_far_from_any_agreement_it_stays_finite():
    a, parallax = np.array([-20.0, 0.0, 40.0, 11.0]), np.array([0.5, -3.0, 50.0, -50.0])
    for scatter in (0.01, 1.0):
        found = compiled(a, np.full(4, scatter**2), parallax, np.full(4, 0.01))
        assert np.isfinite(found).all()


def test_the_same_numbers_on_one_thread_and_on_two(monkeypatch):
    rng = np.random.default_rng(1)
    a, v, parallax, error = draw_cases(rng, 60)
    many = a + rng.normal(size=(800, 60)) * 0.1
    variance = v + rng.uniform(0.0, 0.1, (800, 1))
    shifted = parallax - rng.normal(size=(800, 1)) * 0.01
    found = []
    for threads in ("1", "2"):
        monkeypatch.setenv("LADDERFIT_THREADS", threads)
        found.append(log_parallax_integrals(many, variance, shifted, error))
    np.testing.assert_array_equal(*found)


def test_a_scatter_of_hundreds_of_magnitudes_takes_no_time():
    """Such points are visited by a climb to the mode; they must cost little and stay finite."""
    a, parallax = np.linspace(-1500.0, 50.0, 60), np.linspace(-0.5, 1.0, 60)
    found = compiled(a, np.full(60, 1e5), parallax, np.full(60, 0.02))
    assert np.isfinite(found).all()
