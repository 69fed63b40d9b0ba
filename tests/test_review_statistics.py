"""Reviews of simulated papers: honest claims pass, spoiled ones are found.

In full, 200 of each: at most 6 honest ones called anything but reproduced (the level is
1 %: more than 6 would happen once in 200 runs), at least 180 spoiled ones found.
Measured with this seed: 0; 198, 200 and 200.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from review_papers import QUANTITIES, Paper, author, claim, printed

from ladderfit.review import ClaimReview, claims_from, review
from ladderfit.review.verdicts import (
    ANOTHER_PIVOT,
    ERROR_TOO_SMALL,
    NOT_REPRODUCED,
    REPRODUCED,
)

SEED = 1
PIVOTS = (1.0, 3.0, 5.0, 20.0)  # d

pytestmark = pytest.mark.full


def reviewed(paper: Paper, entry: dict[str, Any], rng: np.random.Generator) -> ClaimReview:
    if rng.random() < 0.5:
        entry = entry | {"stars": paper.stars}
    return review(paper.ladder, claims_from({"claim": [entry]})).claims[0]


def test_honest_claims_are_reproduced(in_full: bool) -> None:
    count, allowed = (200, 6) if in_full else (16, 1)
    failed = []
    for number in range(count):
        rng = np.random.default_rng([SEED, 0, number])
        paper = author(rng, stated=bool(number % 2))
        entry = claim(paper, QUANTITIES[number % 3], bool(rng.random() < 0.5))
        found = reviewed(paper, entry, rng)
        if found.verdict not in REPRODUCED or len(found.verdicts) > 1:
            failed.append((number, [str(verdict) for verdict in found.verdicts]))
    assert len(failed) <= allowed, failed


def moved_slope(paper: Paper, rng: np.random.Generator) -> dict[str, Any]:
    """The slope moved by three of its errors."""
    sign = 1.0 if rng.random() < 0.5 else -1.0
    value = paper.slope + 3.0 * sign * paper.slope_error
    return claim(paper, "slope") | printed(value, paper.slope_error, True)


def small_error(paper: Paper, rng: np.random.Generator) -> dict[str, Any]:
    """An error too small by a factor of four."""
    slope = bool(rng.random() < 0.5)
    value = paper.slope if slope else paper.level
    error = paper.slope_error if slope else paper.level_error
    return claim(paper, "slope" if slope else "zero_point") | printed(value, error / 4.0, True)


def wrong_pivot(paper: Paper, rng: np.random.Generator) -> dict[str, Any]:
    """A zero point at another period than the 10 d that are stated."""
    value, error = paper.level_at(float(np.log10(PIVOTS[rng.integers(len(PIVOTS))])))
    return claim(paper, "zero_point") | printed(value, error, True)


Spoil = Callable[[Paper, np.random.Generator], dict[str, Any]]


@pytest.mark.parametrize(
    ("spoil", "verdict"),
    [
        (moved_slope, NOT_REPRODUCED),
        (small_error, ERROR_TOO_SMALL),
        (wrong_pivot, ANOTHER_PIVOT),
    ],
)
def test_spoiled_claims_are_found(spoil: Spoil, verdict: str, in_full: bool) -> None:
    count = 200 if in_full else 6
    missed = []
    for number in range(count):
        rng = np.random.default_rng([SEED, 1, number])
        paper = author(rng, stated=bool(number % 2))
        found = reviewed(paper, spoil(paper, rng), rng)
        if verdict not in found.names:
            missed.append((number, [str(each) for each in found.verdicts]))
    assert len(missed) <= 0.1 * count, missed
