"""`direct` and `ensemble` draw the same posterior: margins, covariances, joint distributions."""

from __future__ import annotations

import dataclasses
import os
from pathlib import Path

import numpy as np
import pytest
from samplers import (
    by_ensemble,
    covariance_faults,
    joint_p_value,
    marginal_faults,
    most_correlated,
)
from small_ladders import SMALL, small_ladder

from ladderfit.ladder import read_ladder
from ladderfit.result import Result
from ladderfit.sampling.convergence import Goal
from ladderfit.sampling.run import draw
from ladderfit.shipped import sample_ladder

EFFECTIVE = 4000
DIRECT = 16_000
IN_BRIEF = ("anchors and parallaxes", "velocities", "zero scatter")
WITHOUT = ("fixed scatter",)  # given the fixed numbers all is Gaussian: `start` refuses it
CHOSEN = (
    tuple(name for name in SMALL if name not in WITHOUT)
    if os.environ.get("LADDERFIT_FULL") == "1"
    else IN_BRIEF
)


@pytest.fixture(scope="module")
def pair(tmp_path_factory: pytest.TempPathFactory) -> tuple[Result, Result]:
    """The sample by both samplers."""
    ladder = read_ladder(sample_ladder())
    folder = tmp_path_factory.mktemp("runs") / "sample"
    return draw(ladder, seed=1, draws=DIRECT), by_ensemble(ladder, folder, goal=Goal(ess=EFFECTIVE))


def test_the_sample_is_drawn_alike(pair: tuple[Result, Result]) -> None:
    direct, ensemble = pair
    assert min(ensemble.diagnostics.ess.values()) >= EFFECTIVE
    assert max(ensemble.diagnostics.rhat.values()) < 1.01
    assert marginal_faults(direct, ensemble) == []
    assert covariance_faults(direct, ensemble) == []
    for names in (most_correlated(direct), ("hubble_constant", "peak_magnitude")):
        assert joint_p_value(direct, ensemble, names) > 0.005


def test_both_give_the_same_kind_of_object(pair: tuple[Result, Result]) -> None:
    direct, ensemble = pair
    assert list(direct.draws) == list(ensemble.draws)
    assert list(direct.summary()["unit"]) == list(ensemble.summary()["unit"])
    assert direct.diagnostics.rhat == {}
    assert list(ensemble.diagnostics.rhat) == list(ensemble.diagnostics.ess)
    assert ensemble.diagnostics.sampler == "ensemble"
    assert ensemble.diagnostics.pareto_k is None
    assert ensemble.ladder.hosts == direct.ladder.hosts


def altered(result: Result, **draws: np.ndarray) -> Result:
    return dataclasses.replace(result, draws={**result.draws, **draws})


def test_a_shifted_and_a_widened_parameter_are_found_out(pair: tuple[Result, Result]) -> None:
    """Negative controls."""
    direct, ensemble = pair
    slope = ensemble.draws["slope"]
    shifted = altered(ensemble, slope=slope + 0.15 * slope.std())
    assert [fault.split(":")[0] for fault in marginal_faults(direct, shifted)] == ["mean of slope"]
    wider = altered(ensemble, slope=slope.mean() + 1.1 * (slope - slope.mean()))
    assert [fault.split(":")[0] for fault in marginal_faults(direct, wider)] == [
        "deviation of slope"
    ]


def test_a_lost_correlation_is_found_out(pair: tuple[Result, Result]) -> None:
    """Negative control: margins as they were, the joint distribution wrong."""
    direct, ensemble = pair
    one, two = most_correlated(direct)
    shuffled = np.random.default_rng(1).permutation(ensemble.draws[one])
    wrong = altered(ensemble, **{one: shuffled})
    assert marginal_faults(direct, wrong) == []
    assert any(two in fault and one in fault for fault in covariance_faults(direct, wrong))
    assert joint_p_value(direct, wrong, (one, two)) <= 0.005


@pytest.mark.full
@pytest.mark.parametrize("name", CHOSEN)
def test_small_ladders_are_drawn_alike(name: str, tmp_path: Path) -> None:
    ladder = small_ladder(name)
    direct = draw(ladder, seed=1, draws=DIRECT)
    ensemble = by_ensemble(ladder, tmp_path / "run", goal=Goal(ess=EFFECTIVE))
    assert min(ensemble.diagnostics.ess.values()) >= EFFECTIVE
    assert list(direct.draws) == list(ensemble.draws)
    assert marginal_faults(direct, ensemble) == []
    assert covariance_faults(direct, ensemble) == []
    assert joint_p_value(direct, ensemble, most_correlated(direct)) > 0.002
