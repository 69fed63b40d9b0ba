"""Outliers summed over exactly, against sampling every label, scale and coefficient."""

from __future__ import annotations

import numpy as np
import pytest
from gibbs import Gibbs
from small_ladders import MODULI, TRUTH, small_ladder

from ladderfit.checks.outliers import outlier_table
from ladderfit.diagnostics import ess_of_mean, rhat
from ladderfit.ladder import Ladder
from ladderfit.mock import mock_from_ladder
from ladderfit.sampling.run import draw

LAWS = {
    "mixture": {"outlier_fraction": 0.12, "outlier_width": 0.7},
    "Student-t": {"degrees_of_freedom": 3.0},
}
LADDERS = {"anchors": 42, "up to the peaks": 50}


def contaminated(name: str, law: str) -> Ladder:
    """A small ladder whose stars follow the law, and which says so."""
    ladder = small_ladder(name).change({"cepheids.outliers.treatment": law})
    moduli = {f"modulus[{host}]": MODULI[host] for host in ladder.hosts}
    rng = np.random.default_rng([1106, len(name)])
    return mock_from_ladder(ladder, {**TRUTH, **moduli, **LAWS[law]}, rng)


IN_BRIEF = (("up to the peaks", "mixture"), ("anchors", "Student-t"))
HEAVY = ("degrees_of_freedom", "outlier_width")  # tails: compared in the logarithm


@pytest.mark.full
@pytest.mark.parametrize("law", LAWS)
@pytest.mark.parametrize("name", LADDERS)
def test_direct_agrees_with_sampling_of_labels(name: str, law: str, *, in_full: bool) -> None:
    if not in_full and (name, law) not in IN_BRIEF:
        pytest.skip("other ladders are sampled with LADDERFIT_FULL=1")
    ladder = contaminated(name, law)
    assert len(ladder.cepheids) == LADDERS[name]
    found = draw(ladder, seed=4, draws=60_000 if in_full else 16_000)
    assert found.diagnostics.pareto_k < 0.7
    sampler = Gibbs(ladder, 24, np.random.default_rng(8))
    chains = sampler.run(4000 if in_full else 1200, 300)
    for parameter, values in chains.items():
        mine, theirs = found.draws[parameter], values
        if parameter in HEAVY:
            mine, theirs = np.log(mine), np.log(theirs)
        assert rhat(theirs) < 1.02, parameter
        gibbs, direct = ess_of_mean(theirs), found.diagnostics.ess[parameter]
        error = np.sqrt(theirs.var() / gibbs + mine.var() / direct)
        assert abs(mine.mean() - theirs.mean()) < 4.0 * error, parameter
        assert mine.std() == pytest.approx(theirs.std(), rel=0.05), parameter
    if law == "mixture":
        table = outlier_table(found)
        assert list(table.star) == list(ladder.cepheids.star)
        assert np.abs(table.probability - sampler.labels).max() < 0.03
        assert table.probability.max() > 0.95


def test_the_comparison_can_fail() -> None:
    """The plain fit of the same stars is told from the sampled one."""
    ladder = contaminated("anchors", "mixture")
    plain = draw(ladder.change({"cepheids.outliers.treatment": "none"}), seed=4)
    robust = draw(ladder, seed=4)
    assert plain.sd("slope") > 1.3 * robust.sd("slope")
    assert plain.mean("scatter") > robust.mean("scatter") + 5.0 * robust.sd("scatter")
