"""The truth is recovered: from the sample, whose seed came before the first fit, and from others.

A truth is inside the joint 95 % region if at least 5 % of the draws lie farther
from the centre than it does, in the metric of the posterior's own covariance.
"""

from __future__ import annotations

import tomllib
from typing import Any

import numpy as np
import pytest
from scipy import stats
from small_ladders import MODULI, small_ladder
from small_ladders import TRUTH as SMALL_TRUTH

from ladderfit.ladder import Ladder, build_ladder, read_ladder
from ladderfit.mock import PLAN, SEED, mock_from_ladder, simulate
from ladderfit.result import Result
from ladderfit.sampling.run import draw
from ladderfit.shipped import sample_ladder

TRUTH = PLAN.truth()
REPEATS, ENOUGH = 40, 34  # fewer than 34 of 40 happens to 1 right posterior in 300


def depth(result: Result, truth: dict[str, float], names: tuple[str, ...]) -> float:
    """Share of the draws that lie farther out than the truth, all `names` together."""
    draws = np.stack([result.draws[name] for name in names], axis=1)
    centre, root = draws.mean(axis=0), np.linalg.cholesky(np.cov(draws.T))
    point = np.array([truth[name] for name in names])
    out = np.sum(np.linalg.solve(root, (draws - centre).T) ** 2, axis=0)
    return float(np.mean(out >= np.sum(np.linalg.solve(root, point - centre) ** 2)))


def free(result: Result, kind: str) -> tuple[str, ...]:
    """Names of the headline parameters, of the host moduli or of both, without what is fixed."""
    moduli = [name for name in result.parameters if name.startswith("modulus[")]
    names = {"headline": result.headline, "moduli": moduli, "all": [*result.headline, *moduli]}
    return tuple(name for name in names[kind] if np.ptp(result.draws[name]) > 0.0)


@pytest.fixture(scope="module")
def sample() -> Ladder:
    return read_ladder(sample_ladder())


@pytest.fixture(scope="module")
def fitted(sample: Ladder) -> Result:
    return draw(sample, seed=1)


# --- the sample --------------------------------------------------------------------------


def test_the_truth_beside_the_sample_is_the_plans() -> None:
    written = tomllib.loads(sample_ladder().with_name("truth.toml").read_text(encoding="utf-8"))
    assert written["truth"] == TRUTH
    assert written["seed"] == SEED


@pytest.mark.parametrize(("kind", "count"), [("headline", 8), ("moduli", 22), ("all", 30)])
def test_the_samples_truth_is_recovered(fitted: Result, kind: str, count: int) -> None:
    names = free(fitted, kind)
    assert len(names) == count
    assert depth(fitted, TRUTH, names) > 0.05


def test_the_samples_draws_can_be_trusted(fitted: Result) -> None:
    assert fitted.diagnostics.pareto_k < 0.5
    assert min(fitted.diagnostics.ess.values()) > 3500
    assert fitted.diagnostics.notes == ()


@pytest.mark.parametrize(
    ("wrong", "kind"),
    [
        ({"cepheids.magnitude.wesenheit.ratio": 0.5}, "headline"),
        ({"anchors.geometric.Orsell.modulus": 29.8}, "moduli"),
        ({"expansion.q0": 0.5}, "headline"),
        ({"relation.metallicity": "none"}, "moduli"),
    ],
    ids=lambda value: next(iter(value)) if isinstance(value, dict) else value,
)
def test_a_wrong_choice_does_not_recover_it(
    sample: Ladder, wrong: dict[str, Any], kind: str
) -> None:
    """The negative control."""
    result = draw(sample.change(wrong), seed=1, draws=2000)
    assert depth(result, TRUTH, free(result, kind)) < 0.05


# --- further seeds -----------------------------------------------------------------------


def simulated(sample: Ladder, seed: int) -> Ladder:
    """The sample's survey observed again, from photometry on."""
    mock = simulate(PLAN, np.random.default_rng(seed))
    choices = sample.choices.to_mapping()
    del choices["alternatives"]
    for section in ("cepheids", "supernovae", "expansion"):
        del choices[section]["table"]
    del choices["anchors"]["parallaxes"]["table"]
    for host, (modulus, error) in mock.anchors.items():
        choices["anchors"]["geometric"][host] = {"modulus": modulus, "error": error}
    tables = {
        "cepheids": mock.cepheids,
        "anchors.parallaxes": mock.parallax_stars,
        "supernovae": mock.supernovae,
        "expansion": mock.flow,
    }
    return build_ladder(choices, tables)


@pytest.mark.full
def test_further_seeds_of_the_sample(sample: Ladder, in_full: bool) -> None:
    """40 seeds in full, of which 34 have to be inside; 8 otherwise, of which 6."""
    repeats, enough = (REPEATS, ENOUGH) if in_full else (8, 6)
    depths: dict[str, list[float]] = {"headline": [], "moduli": []}
    for seed in range(SEED + 1, SEED + 1 + repeats):
        result = draw(simulated(sample, seed), seed=seed, draws=1000)
        for kind, found in depths.items():
            found.append(depth(result, TRUTH, free(result, kind)))
    for kind, found in depths.items():
        assert sum(d > 0.05 for d in found) >= enough, (kind, found)
        # neither too bold nor too shy: the depths of truths are uniform
        assert stats.kstest(found, "uniform").pvalue > 0.001, (kind, found)


def repeated(fixed: dict[str, Any]) -> list[float]:
    """Depths of the truth in `REPEATS` simulations of a small ladder of all rungs."""
    ladder = small_ladder("all rungs")
    truth = SMALL_TRUTH | {f"modulus[{host}]": value for host, value in MODULI.items()}
    depths = []
    for seed in range(REPEATS):
        mock = mock_from_ladder(ladder, truth, np.random.default_rng(300 + seed), (7.0, 13.0))
        result = draw(mock.change(fixed), seed=seed, draws=1000)
        depths.append(depth(result, truth, free(result, "headline")))
    return depths


def test_truths_of_a_small_ladder_are_inside_as_often_as_they_should() -> None:
    depths = repeated({})
    assert sum(d > 0.05 for d in depths) >= ENOUGH
    assert stats.kstest(depths, "uniform").pvalue > 0.001


def test_without_scatters_they_are_not() -> None:
    """The negative control: errors that are too small leave too many truths outside."""
    depths = repeated({"priors.scatter": {"fixed": 0.0}, "priors.peak_scatter": {"fixed": 0.0}})
    assert sum(d > 0.05 for d in depths) < ENOUGH
