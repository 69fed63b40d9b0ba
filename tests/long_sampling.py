"""Long sampling of all unknowns of a ladder; used by tests alone.

Hamiltonian Monte Carlo (Duane et al. 1987) on the density of `brute_force`, in
many independent chains, whose scatter about one another gives the Monte Carlo
errors without any assumption.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from brute_force import Written

Density = Callable[[np.ndarray], tuple[np.ndarray, np.ndarray]]


@dataclass(frozen=True, eq=False)
class Chains:
    """Draws of independent chains, in the parameters' own units.

    `x` has shape (chains, draws, p), `acceptance` is the share of accepted moves.
    """

    names: tuple[str, ...]
    x: np.ndarray
    acceptance: float


def sample(
    whole: Written, truth: dict[str, float], rng: np.random.Generator, chains: int, draws: int
) -> Chains:
    """Draw from the density of all unknowns.

    Rounds of warming up learn the covariance from all chains and the step from
    the acceptance; both then stay as they are.
    """
    start = whole.point(truth)
    factor = np.linalg.cholesky(_curvature(whole.log_density, start))
    state = _State(whole.log_density, start, factor, chains, rng)
    for length in (10, 12, 15, 20):
        drawn = state.run(length)
        late = drawn[length // 2 :].reshape(-1, len(start))
        state.factor = np.linalg.cholesky(np.cov(late.T))
    state.run(20)
    drawn = state.run(draws, learn=False)
    own = [whole.natural(name, drawn[:, :, place].T) for place, name in enumerate(whole.names)]
    return Chains(whole.names, np.stack(own, axis=-1), state.acceptance)


def _curvature(density: Density, start: np.ndarray) -> np.ndarray:
    """A covariance to begin with: the inverse curvature at the start, made positive."""
    step = 1e-4
    shifts = step * np.eye(len(start))
    hessian = (density(start + shifts)[1] - density(start - shifts)[1]) / (2.0 * step)
    size, vectors = np.linalg.eigh(-0.5 * (hessian + hessian.T))
    return (vectors / np.maximum(np.abs(size), 1e-4)) @ vectors.T


class _State:
    """All chains at once; the momenta are standard normal in coordinates whitened by `factor`."""

    def __init__(
        self,
        density: Density,
        start: np.ndarray,
        factor: np.ndarray,
        chains: int,
        rng: np.random.Generator,
    ) -> None:
        self.density, self.rng, self.step = density, rng, 0.3
        self.factor, self.acceptance = factor, 0.0
        self.x = start + 0.3 * rng.standard_normal((chains, len(start))) @ factor.T
        self.value, self.gradient = density(self.x)

    def run(self, draws: int, learn: bool = True) -> np.ndarray:
        """Draws of all chains, shape (draws, chains, p); `learn` adapts the step meanwhile."""
        kept = np.empty((draws, *self.x.shape))
        accepted, steps = [], []
        for i in range(draws):
            with np.errstate(over="ignore", invalid="ignore"):  # a path that runs away is refused
                accepted.append(self._trajectory())
            kept[i] = self.x
            if learn:
                self.step *= np.exp(0.3 * (accepted[-1] - 0.85))
                steps.append(self.step)
        if learn:
            self.step = float(np.exp(np.mean(np.log(steps[draws // 2 :]))))
        self.acceptance = float(np.mean(accepted))
        return kept

    def _trajectory(self) -> float:
        """One move of every chain, of random length; the share accepted."""
        rng, factor = self.rng, self.factor
        step = self.step * rng.uniform(0.8, 1.2)
        count = min(max(1, round(rng.uniform(0.6, 4.0) / step)), 60)
        start = rng.standard_normal(self.x.shape)
        x, gradient, momentum = self.x, self.gradient, start
        momentum = momentum + 0.5 * step * gradient @ factor
        for i in range(count):
            x = x + step * momentum @ factor.T
            value, gradient = self.density(x)
            momentum = momentum + (0.5 if i == count - 1 else 1.0) * step * gradient @ factor
        energy = 0.5 * np.sum(start**2 - momentum**2, axis=1) + value - self.value
        taken = np.log(rng.uniform(size=len(x))) < energy
        self.x = np.where(taken[:, None], x, self.x)
        self.value = np.where(taken, value, self.value)
        self.gradient = np.where(taken[:, None], gradient, self.gradient)
        return float(np.mean(taken))
