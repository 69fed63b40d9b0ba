"""Surveys of which 5 % do not follow the relation: pulls, and what probabilities are worth."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from contaminated import MIXTURE, PLAN, clean, survey

from ladderfit.mock import mock_from_ladder
from ladderfit.outliers import outlier_table
from ladderfit.result import Result
from ladderfit.sampling.run import draw

NAMES = ("slope", "zero_point")
BRIEF, FULL = 5, 100
TRUTH = PLAN.truth() | {"outlier_fraction": 0.05}


@dataclass
class Pulls:
    """Of slope and zero point, shape (mocks, 2): without outliers, plain, and robust."""

    clean: np.ndarray
    plain: np.ndarray
    robust: np.ndarray
    share: float


def pull(result: Result) -> list[float]:
    return [(result.mean(name) - TRUTH[name]) / result.sd(name) for name in NAMES]


@pytest.fixture(scope="module")
def pulls(in_full: bool) -> Pulls:
    found, share = [], []
    for seed in range(FULL if in_full else BRIEF):
        ladder, table = survey(seed)
        share.append(float(np.mean(table["outlier"] == "yes")))
        variants = (clean(ladder, table), ladder, ladder.change(MIXTURE))
        found.append([pull(draw(each, seed=1, draws=800)) for each in variants])
    whole = np.array(found)
    return Pulls(whole[:, 0], whole[:, 1], whole[:, 2], float(np.mean(share)))


@pytest.mark.full
def test_the_mixture_is_not_pulled_and_the_plain_fit_is(pulls: Pulls) -> None:
    assert pulls.share == pytest.approx(0.05, abs=0.008)
    mocks = len(pulls.robust)
    # the same noise is in the fit that knows the outliers: the difference is theirs alone
    beyond = (pulls.robust - pulls.clean).mean(axis=0)
    assert np.all(np.abs(beyond) < 0.2), beyond
    doubt = 0.0 if mocks == FULL else 3.0 / np.sqrt(mocks)
    assert np.all(np.abs(pulls.robust.mean(axis=0)) < 0.2 + doubt), pulls.robust.mean(axis=0)
    assert np.all(np.abs(pulls.plain.mean(axis=0)) > 2.0), pulls.plain.mean(axis=0)
    assert np.all(pulls.robust.std(axis=0) < 1.0 + 3.0 / np.sqrt(2.0 * mocks))


@pytest.mark.full
def test_probabilities_are_frequencies(*, in_full: bool) -> None:
    """Outliers that overlap with other stars, so that probabilities between 0 and 1 are common."""
    ladder = survey(0)[0].change({"cepheids.outliers.treatment": "mixture"})
    given, true = [], []
    for seed in range(150 if in_full else 6):
        truth = TRUTH | {"outlier_width": 0.4}
        mock = mock_from_ladder(ladder, truth, np.random.default_rng([1107, seed]))
        stars = outlier_table(draw(mock, seed=1, draws=300))
        told = mock.table("cepheids").texts("outlier").values
        given.append(stars.probability.to_numpy())
        true.append(told[stars.row.to_numpy() - 1] == "yes")
    p, is_outlier = np.concatenate(given), np.concatenate(true)
    edges = np.array([0.0, 0.02, 0.05, 0.1, 0.2, 0.5, 0.85, 0.95, 1.0 + 1e-9])
    places = np.digitize(p, edges)
    for place in np.unique(places):
        mine = places == place
        error = np.sqrt((p[mine] * (1.0 - p[mine])).sum()) / mine.sum()
        gap = is_outlier[mine].mean() - p[mine].mean()
        assert abs(gap) < 3.5 * error, (edges[place - 1], mine.sum(), gap)
    near = (p > 0.85) & (p < 0.95)
    assert near.sum() > (200 if in_full else 4)
    slack = 0.0 if in_full else 2.5 * 0.3 / np.sqrt(near.sum())
    assert 0.85 - slack < is_outlier[near].mean() < 0.95 + slack
    with_doubled_odds = 2.0 * p / (1.0 + p)  # wrong probabilities are told from right ones
    wrong = is_outlier.sum() - with_doubled_odds.sum()
    assert abs(wrong) > 5.0 * np.sqrt((with_doubled_odds * (1.0 - with_doubled_odds)).sum())
