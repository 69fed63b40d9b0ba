"""The integral over a host's modulus under deviations that are not normal, and draws from it."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
import pytest
from scipy.stats import kstest, t

from ladderfit.kernels import robust
from ladderfit.kernels.robust_draw import draw_hosts

LAWS = {"mixture": robust.MIXTURE, "Student-t": robust.STUDENT}


@dataclass
class Case:
    """One host: places and variances of its rows, the law, and the normal rows."""

    law: str
    a: np.ndarray
    v: np.ndarray
    fraction: float = 0.1
    width: float = 1.0
    offset: float = 0.0
    freedom: float = 4.0
    precision: float = 0.0
    linear: float = 0.0
    scatter: float = field(default=0.0)

    def log_integrand(self, u: np.ndarray) -> np.ndarray:
        """Written out with numpy and scipy alone."""
        r, v = self.a[:, None] - u, (self.v + self.scatter**2)[:, None]
        if self.law == "mixture":
            wide, f = v + self.width**2, self.fraction
            inner = np.log1p(-f) - 0.5 * (r**2 / v + np.log(2.0 * np.pi * v))
            outer = (r - self.offset) ** 2 / wide + np.log(2.0 * np.pi * wide)
            rows = np.logaddexp(inner, np.log(f) - 0.5 * outer)
        else:
            rows = t.logpdf(r / np.sqrt(v), self.freedom) - 0.5 * np.log(v)
        return rows.sum(axis=0) + self.linear * u - 0.5 * self.precision * u**2

    def grid(self) -> np.ndarray:
        places = [*self.a, self.linear / self.precision] if self.precision > 0.0 else self.a
        reach = 60.0 if self.law == "Student-t" and self.precision == 0.0 else 12.0
        return np.linspace(min(places) - reach, max(places) + reach, 50_001)

    def arguments(self, draws: int = 1) -> tuple:
        n = len(self.a)
        chosen = np.full((1, robust.CANDIDATES), -1)
        order = np.argsort(self.a)
        few = order[np.unique(np.linspace(0, n - 1, min(n, robust.CANDIDATES)).astype(int))]
        chosen[0, : len(few)] = few
        stars = robust.HostStars(
            self.a,
            self.v,
            np.zeros((n, 0)),
            np.zeros((0, n, 0)),
            np.zeros(n, np.int64),
            np.array([LAWS[self.law]]),
            np.array([0, n]),
            chosen,
        )
        law = [self.scatter**2, self.fraction, self.width**2, self.offset, self.freedom]
        if self.law == "mixture":
            law.append(-0.5 * np.log(2.0 * np.pi))
        else:
            norm = t.logpdf(0.0, self.freedom)
            law.append(norm)
        whole = np.ones((draws, 1))
        shape = np.tile(np.array(law), (draws, 1, 1))
        return (
            stars, shape, np.zeros((draws, 0)), whole * self.precision, whole * self.linear,
        )  # fmt: skip


def random_case(law: str, n: int, seed: int) -> Case:
    rng = np.random.default_rng([n, seed])
    v, scatter = rng.uniform(0.01, 0.1, n) ** 2 * rng.choice([1.0, 9.0]), rng.uniform(0.0, 0.1)
    fraction, width = rng.choice([0.02, 0.1, 0.5]), rng.choice([0.3, 1.0, 2.0])
    offset, freedom = rng.choice([0.0, -0.8]), rng.choice([2.5, 6.0, 30.0])
    a = rng.normal(size=n) * np.sqrt(v + scatter**2)
    a = a + (rng.random(n) < 1.5 * fraction) * (offset + width * rng.normal(size=n))
    precision = rng.choice([0.0, 25.0, 4e3])
    linear = precision * rng.choice([0.0, 0.3, 1.5])
    return Case(law, a, v, fraction, width, offset, freedom, precision, linear, scatter)


@pytest.mark.parametrize("law", LAWS)
@pytest.mark.parametrize("n", [1, 2, 3, 9, 12, 40])
def test_integral_is_that_of_a_dense_sum(law: str, n: int) -> None:
    for seed in range(3):
        case = random_case(law, n, seed)
        grid = case.grid()
        logs = case.log_integrand(grid)
        dense = logs.max() + np.log(np.exp(logs - logs.max()).sum() * (grid[1] - grid[0]))
        found = np.zeros(1)
        robust.integrate_hosts(*case.arguments(), found)
        assert found[0] == pytest.approx(dense, abs=2e-5), (seed, case)


def test_a_maximum_away_from_most_stars_is_found() -> None:
    """An anchor against three stars that agree with one another, all of them outliers then."""
    case = Case("mixture", np.array([0.8, 0.82, 0.79]), np.full(3, 0.0016), fraction=0.3)
    case.precision, case.width = 100.0, 0.3  # an anchor at 0, 8 of its errors away
    grid = case.grid()
    logs = case.log_integrand(grid)
    inside = np.exp(logs - logs.max())
    near_anchor = inside[grid < 0.4].sum() / inside.sum()
    assert 1e-4 < near_anchor < 0.9999  # both maxima count
    draws = drawn(case, 4000)
    assert np.mean(draws < 0.4) == pytest.approx(near_anchor, abs=4.0 * 0.5 / np.sqrt(4000))


def drawn(case: Case, draws: int) -> np.ndarray:
    seeds = np.random.default_rng(5).standard_normal((draws, 1)).view(np.uint64)
    out = np.empty((draws, 1))
    draw_hosts(*case.arguments(draws), seeds, out)
    return out[:, 0]


@pytest.mark.parametrize("law", LAWS)
@pytest.mark.parametrize("n", [1, 3, 12])
def test_draws_follow_the_density(law: str, n: int) -> None:
    for seed in range(3):
        case = random_case(law, n, 20 + seed)
        grid = case.grid()
        logs = case.log_integrand(grid)
        weight = np.exp(logs - logs.max())
        below = np.cumsum(weight) - 0.5 * weight

        def cdf(u: np.ndarray, grid: np.ndarray = grid, below: np.ndarray = below) -> np.ndarray:
            return np.interp(u, grid, below / below[-1])

        draws = drawn(case, 8_000)
        assert kstest(draws, cdf).pvalue > 1e-3, (seed, case)
        assert kstest(draws + 0.12 * draws.std(), cdf).pvalue < 1e-3  # the test can fail


def test_without_outliers_the_integral_is_the_normal_one() -> None:
    rng = np.random.default_rng(3)
    a, v = rng.normal(size=7), rng.uniform(0.5, 1.0, 7)
    found, many = np.zeros(1), np.zeros(1)
    robust.integrate_hosts(*Case("mixture", a, v, fraction=0.0).arguments(), found)
    weight = 1.0 / v
    mean = (weight @ a) / weight.sum()
    exact = -0.5 * (weight @ (a - mean) ** 2) - 0.5 * np.log(2.0 * np.pi * v).sum()
    exact += 0.5 * np.log(2.0 * np.pi / weight.sum())
    assert found[0] == pytest.approx(exact, abs=1e-6)
    robust.integrate_hosts(*Case("Student-t", a, v, freedom=1e7).arguments(), many)
    assert many[0] == pytest.approx(exact, abs=1e-5)
