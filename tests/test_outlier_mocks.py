"""Surveys of which 5 % do not follow the relation: pulls, and what probabilities are worth."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from contaminated import MIXTURE, PLAN, clean, survey

from ladderfit.checks.outliers import outlier_table
from ladderfit.mock import mock_from_ladder
from ladderfit.result import Result
from ladderfit.sampling.run import draw

pytestmark = pytest.mark.timeout(1500)  # at full length

NAMES = ("slope", "zero_point")
BRIEF, FULL = 5, 60
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


# Probabilities are frequencies where the truth is drawn from the priors that the fit states:
# 2 to 8 % of outliers, near enough to other stars that probabilities in between are common.
STATED = {
    "cepheids.outliers.treatment": "mixture",
    "priors.outlier_fraction": {"uniform": [0.02, 0.08]},
    "priors.outlier_width": {"log_normal": [0.4, 0.5]},
}


@pytest.mark.full
def test_probabilities_are_frequencies(*, in_full: bool) -> None:
    ladder = survey(0)[0].change(STATED)
    prior = ladder.choices.prior
    given, true, which = [], [], []
    for seed in range(150 if in_full else 6):
        rng = np.random.default_rng([1107, seed])
        names = ("outlier_fraction", "outlier_width")
        truth = TRUTH | {name: float(prior(name).draw(rng, 1)[0]) for name in names}
        mock = mock_from_ladder(ladder, truth, rng)
        stars = outlier_table(draw(mock, seed=1, draws=300))
        told = mock.table("cepheids").texts("outlier").values
        given.append(stars.probability.to_numpy())
        true.append(told[stars.row.to_numpy() - 1] == "yes")
        which.append(np.full(len(stars), seed))
    p, is_outlier, survey_of = (np.concatenate(parts) for parts in (given, true, which))
    edges = np.array([0.0, 0.02, 0.05, 0.1, 0.2, 0.5, 0.85, 0.95, 1.0 + 1e-9])
    places = np.digitize(p, edges)
    for place in np.unique(places):
        assert abs(excess(places == place, is_outlier - p, survey_of, p)) < 3.5, edges[place - 1]
    near = (p > 0.85) & (p < 0.95)
    assert near.sum() > (150 if in_full else 3)
    slack = 0.0 if in_full else 2.5 * 0.3 / np.sqrt(near.sum())
    assert 0.85 - slack < is_outlier[near].mean() < 0.95 + slack
    doubled = 2.0 * p / (1.0 + p)  # of doubled odds: wrong probabilities are told from right ones
    assert abs(excess(p >= 0.0, is_outlier - doubled, survey_of, p)) > (4.0 if in_full else 2.2)


def excess(mine: np.ndarray, gap: np.ndarray, survey_of: np.ndarray, p: np.ndarray) -> float:
    """Mean gap over its error; stars of one survey share what is unknown of its fraction."""
    sums = np.bincount(survey_of[mine], weights=gap[mine])
    own = (p[mine] * (1.0 - p[mine])).sum()
    return float(sums.sum() / np.sqrt(max(float(np.sum(sums**2)), own)))
