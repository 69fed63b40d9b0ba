"""Posteriors drawn directly against long sampling of everything at once.

The reference (`long_sampling`) samples coefficients, scatters, host moduli and
star moduli together, from a density written out object by object.  Both sides
have at least 4,000 effective draws: means agree within 4 combined Monte Carlo
errors, standard deviations within 5 %, covariances within 5 Monte Carlo errors.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pytest
from brute_force import written
from long_sampling import Chains, sample
from small_ladders import MODULI, SMALL, TRUTH, small_ladder

from ladderfit.diagnostics import ess
from ladderfit.ladder import Ladder
from ladderfit.result import Result
from ladderfit.sampling.run import draw

# One of each combination of rungs, and what is peculiar to some priors.
BRIEF = (
    "parallaxes",
    "anchors",
    "anchors and parallaxes",
    "up to the peaks",
    "intercept",
    "flow",
    "all rungs",
    "uniform in volume",
    "no Cepheids",
    "expansion alone",
    "velocities",
    "zero scatters",
    "slope at a bound",
    "fixed slope",
    "uniform Hubble constant",
)
CHAINS = 200
DRAWS = {  # of each chain
    "parallaxes": 160,
    "up to the peaks": 160,
    "intercept": 160,
    "zero scatters": 100,
    "slope at a bound": 100,
}
FEW = 60  # for all others
DIRECT = 20_000
ENOUGH = 4000


@dataclass(frozen=True)
class Gaps:
    """How far two samples of one posterior lie apart.

    Attributes
    ----------
    mean : dict of str to float
        Difference of means, in combined Monte Carlo errors.
    sd : dict of str to float
        Relative difference of standard deviations.
    joint : float
        Largest difference of the covariances of whitened parameters, in Monte Carlo errors.
    """

    mean: dict[str, float]
    sd: dict[str, float]
    joint: float

    @property
    def agree(self) -> bool:
        return max(self.mean.values()) < 4.0 and max(self.sd.values()) < 0.05 and self.joint < 5.0


def compare(result: Result, chains: Chains) -> Gaps:
    """Means, standard deviations and covariances of all parameters that both have."""
    names = [name for name in chains.names if name in result.draws]
    long = chains.x[:, :, [chains.names.index(name) for name in names]]
    direct = np.stack([result.draws[name] for name in names], axis=1)
    size = np.array([result.diagnostics.ess[name] for name in names])
    centre, sd = long.mean(axis=(0, 1)), long.std(axis=(0, 1))
    error = np.sqrt(_error(long) ** 2 + direct.var(axis=0) / size)
    mean = np.abs(direct.mean(axis=0) - centre) / error
    root = np.linalg.cholesky(np.cov(long.reshape(-1, len(names)).T))
    a, b = (np.linalg.solve(root, (x - centre).reshape(-1, len(names)).T).T for x in (long, direct))
    joint = 0.0
    for i in range(len(names)):
        for j in range(i + 1):
            ours, theirs = b[:, i] * b[:, j], (a[:, i] * a[:, j]).reshape(long.shape[:2])
            spread = np.hypot(_error(theirs), ours.std() / np.sqrt(size.min()))
            joint = max(joint, float(abs(ours.mean() - theirs.mean()) / spread))
    return Gaps(
        dict(zip(names, mean.tolist(), strict=True)),
        dict(zip(names, np.abs(direct.std(axis=0) / sd - 1.0).tolist(), strict=True)),
        joint,
    )


def _error(chains: np.ndarray) -> np.ndarray:
    """Monte Carlo error of the mean, from the means of independent chains."""
    return chains.mean(axis=1).std(axis=0, ddof=1) / np.sqrt(len(chains))


def truth_of(name: str) -> dict[str, float]:
    moduli = {f"modulus[{host}]": value for host, value in MODULI.items()}
    return TRUTH | moduli | dict(SMALL[name][1].get("truth", {}))


def long_sample(ladder: Ladder, name: str, draws: int = FEW) -> Chains:
    return sample(written(ladder), truth_of(name), np.random.default_rng(21), CHAINS, draws)


def drift(long: Chains) -> float:
    """Largest change from the first half of the chains to the second, in its own error."""
    first, second = np.array_split(long.x, 2, axis=1)
    change = second.mean(axis=1) - first.mean(axis=1)
    return float(np.max(np.abs(change.mean(axis=0)) / change.std(axis=0) * np.sqrt(len(change))))


def check(name: str, seed: int, draws: int) -> Gaps:
    ladder = small_ladder(name, seed)
    long = long_sample(ladder, name, draws=draws)
    for place, parameter in enumerate(long.names):
        assert ess(long.x[:, :, place]) > ENOUGH, parameter
    assert drift(long) < 4.5
    direct = draw(ladder, seed=22 + seed, draws=DIRECT)
    assert min(direct.diagnostics.ess.values()) > ENOUGH
    return compare(direct, long)


@pytest.mark.parametrize("name", BRIEF)
def test_direct_draws_agree_with_long_sampling(name: str) -> None:
    gaps = check(name, 0, DRAWS.get(name, FEW))
    assert gaps.agree, gaps


@pytest.mark.full
@pytest.mark.parametrize("seed", range(3))
@pytest.mark.parametrize("name", SMALL)
def test_every_ladder_and_other_data(name: str, seed: int, in_full: bool) -> None:
    if not in_full:
        pytest.skip("other data are sampled with LADDERFIT_FULL=1")
    gaps = check(name, seed, 5 * DRAWS.get(name, 2 * FEW))
    assert gaps.agree, gaps


@pytest.mark.parametrize(
    ("name", "wrong"),
    [
        ("all rungs", {"priors.scatter": {"fixed": 0.2}}),
        ("all rungs", {"priors.parallax_offset": {"fixed": 0.0}}),
        ("all rungs", {"anchors.geometric.Tavin.error": 0.03}),
        ("all rungs", {"expansion.peculiar_velocity": 350.0}),
        ("all rungs", {"relation.metallicity.reference": 8.6}),
        ("hosts in volume", {"hosts.distance_prior": "flat in modulus"}),
        ("parallaxes", {"anchors.parallaxes.distance_prior": "uniform in volume"}),
    ],
    ids=lambda value: next(iter(value)) if isinstance(value, dict) else value,
)
def test_a_wrong_model_does_not_agree(name: str, wrong: dict[str, Any]) -> None:
    """The negative control: the long sampling of another model is told apart."""
    ladder = small_ladder(name)
    long = long_sample(ladder.change(wrong), name)
    assert not compare(draw(ladder, seed=23, draws=DIRECT), long).agree


@pytest.mark.parametrize("name", ["zero scatter", "zero scatters"])
@pytest.mark.parametrize("seed", range(4))
def test_a_true_scatter_of_zero_is_drawn_well(name: str, seed: int) -> None:
    result = draw(small_ladder(name, seed), seed=seed)
    assert result.diagnostics.pareto_k < 0.5
    assert result.diagnostics.efficiency > 0.5
    assert min(result.draws["scatter"]) >= 0.0
    # the data were drawn without scatter: zero is well inside the posterior
    assert np.quantile(result.draws["scatter"], 0.05) < 0.02
