"""The simulator against the model, term by term: the same relation, and ranks that are uniform."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from term_ladders import CASES, LIMIT, term_ladder

from ladderfit.coverage import run_coverage
from ladderfit.coverage.quantities import DISTANCE
from ladderfit.coverage.ranks import DRAWS, counts, simultaneous_p
from ladderfit.coverage.words import statement
from ladderfit.ladder import Ladder
from ladderfit.mock import mock_from_ladder
from ladderfit.mock.redraw import absolute, needed
from ladderfit.posterior.joint import posterior
from ladderfit.relations import design
from ladderfit.result import Result
from ladderfit.sampling.run import draw

SEED = 1505
POOLED = ("slope", "zero_point", "scatter", DISTANCE)


def some_truth(ladder: Ladder) -> dict[str, float]:
    result: Result = draw(ladder, draws=200)
    return {name: result.mean(name) for name in result.draws}


@pytest.mark.parametrize("name", CASES)
def test_the_relation_is_the_same_by_both(name: str) -> None:
    """Each star's mean magnitude, from the definition and by the fit's design matrix."""
    ladder = term_ladder(name)
    rng = np.random.default_rng(3)
    truth = {each: float(rng.normal()) for each in needed(ladder)}
    for stars in (ladder.cepheids, ladder.parallax_stars):
        assert stars is not None
        columns = design(ladder.choices, stars, ladder.hosts)
        total = sum(truth[each] * column for each, column in columns.items())
        np.testing.assert_allclose(absolute(ladder, stars, truth), total, atol=1e-12)


@pytest.mark.parametrize("name", CASES)
def test_a_mock_has_the_parameters_and_the_stars_of_its_ladder(name: str) -> None:
    ladder = term_ladder(name)
    mock = mock_from_ladder(ladder, some_truth(ladder), np.random.default_rng(1))
    assert posterior(mock).split.phi_names == posterior(ladder).split.phi_names
    assert posterior(mock).split.coefficients == posterior(ladder).split.coefficients
    for part in ("cepheids", "parallax_stars"):
        before, after = getattr(ladder, part), getattr(mock, part)
        np.testing.assert_array_equal(before.star, after.star)
        for field in dataclasses.fields(before):
            one, other = getattr(before, field.name), getattr(after, field.name)
            assert (one is None) == (other is None), field.name
            if field.name.endswith("_error") and one is not None:
                np.testing.assert_allclose(one, other, rtol=1e-4)


@pytest.mark.full
def test_truths_rank_uniformly_under_every_term(in_full: bool) -> None:
    """200 ladders a term in full; else a few of each, pooled."""
    size = 200 if in_full else 4
    pooled: dict[str, list[int]] = {name: [] for name in POOLED}
    for place, name in enumerate(CASES):
        found = run_coverage(term_ladder(name), size, seed=SEED + place, workers=1)
        assert found.outside == (), (name, statement(found))
        assert len(found.failures) <= 0.01 * size
        for each in POOLED:
            pooled[each] += list(found.ranks[each]) if each in found.ranks else []
    for each, ranks in pooled.items():
        assert len(ranks) > 4 * size
        assert max(ranks) <= DRAWS
        assert simultaneous_p(counts(np.array(ranks)), len(ranks)) > 0.0025, each


@pytest.mark.full
def test_a_selection_left_out_of_the_fits_is_found(in_full: bool) -> None:
    """Negative control: stars limited in magnitude, fits that take the volume as endless."""
    ladder = term_ladder("limit in a volume")
    changes = {"anchors.parallaxes.selection": None}
    assert "anchors.parallaxes.selection" in LIMIT
    found = run_coverage(ladder, 200 if in_full else 40, seed=SEED, workers=1, changes=changes)
    assert found.outside, statement(found)
