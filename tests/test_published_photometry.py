"""Riess et al. 2016 (ApJ 826, 56, table 4) under photometric treatments, and what checks say.

The whole table is printed by tests/benchmarks/photometry.py.
"""

from __future__ import annotations

from pathlib import Path

import pytest
from benchmarks.photometry import plain_ladder, treatments

from ladderfit.checks.predictive import predictive_checks
from ladderfit.ladder import Ladder
from ladderfit.result import Result
from ladderfit.sampling.run import draw

pytestmark = pytest.mark.published


@pytest.fixture(scope="module")
def base(published_tables: Path) -> Ladder:
    return plain_ladder(published_tables)


@pytest.fixture(scope="module")
def plain(base: Ladder) -> Result:
    return draw(base, seed=1, draws=2000)


QUICK = (
    "ratio free, in the variance",
    "ratio free, one population",
    "shared, 0.1 per mag of error",
    "shared, width free",
)


@pytest.mark.parametrize("name", QUICK)
def test_the_hubble_constant_hardly_moves(base: Ladder, plain: Result, name: str) -> None:
    """No treatment moves it by more than a quarter of its error; shared errors widen it."""
    result = draw(base.change(treatments(base, limits=False)[name]), seed=1, draws=2000)
    shift = result.shift_from(plain).loc["hubble_constant", "in_errors"]
    assert abs(shift) < 0.25 + 0.1  # 0.1: Monte Carlo error of the difference, three times over
    if "shared" in name:
        assert result.sd("hubble_constant") > plain.sd("hubble_constant")
    if "ratio" in name:
        assert result.mean("reddening_ratio") + 2.0 * result.sd("reddening_ratio") < 0.45


def test_checks_see_the_clip_and_the_errors(plain: Result) -> None:
    """The table was clipped (no star beyond 2.75 errors, computed in test_published_ladder).

    So the largest deviation is smaller than chance has it, and where stated errors are
    large the clip leaves too little scatter.
    """
    found = predictive_checks(plain).table().set_index(["sample", "about"])["p"]
    assert found["Cepheids", "largest deviation"] > 0.95
    assert found["Cepheids", "scatter with stated error"] < 0.01
    assert found["supernovae in hosts", "distribution"] > 0.05
