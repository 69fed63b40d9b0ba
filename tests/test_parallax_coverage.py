"""Simulated surveys of parallax stars: right treatment recovers the truth, wrong ones fail."""

from __future__ import annotations

import copy
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from scipy.stats import kstest

import ladderfit as lf
from ladderfit.mock.parallax_survey import ParallaxSurvey, parallax_survey
from ladderfit.sampling.run import draw

CHOICES: dict[str, Any] = {
    "anchors": {
        "parallaxes": {
            "columns": {
                "star": "ID",
                "period": "P",
                "parallax": "plx",
                "parallax_error": "e_plx",
                "l": "l",
                "b": "b",
            },
            "magnitude": {"band": "W", "bands": {"W": "W", "V": "V"}, "errors": {"W": "e_W"}},
        }
    },
    "priors": {
        "zero_point": {"normal": [-5.9, 0.3]},
        "slope": {"normal": [-3.3, 0.2]},
        "scatter": {"half_normal": 0.15},
        "parallax_offset": {"normal": [0.0, 0.005]},
    },
}
LIMIT = {"band": "V", "limit": 9.0}
DISC = (2.5, 0.1)
IN_DISC = {"distance_prior": {"disc": {"length": DISC[0], "height": DISC[1]}}}
IN_VOLUME = {"distance_prior": "uniform in volume"}
SEED = 707
DRAWS = 800


def fitted(survey: ParallaxSurvey, section: dict[str, Any], seed: int) -> tuple[dict, dict]:
    """Truth drawn from the priors, and draws of the fit to one simulated survey."""
    rng = np.random.default_rng([SEED, seed])
    truth = {
        "zero_point": rng.normal(-5.9, 0.3),
        "slope": rng.normal(-3.3, 0.2),
        "scatter": abs(rng.normal(0.0, 0.15)),
        "parallax_offset": rng.normal(0.0, 0.005),
    }
    seen = replace(
        survey,
        zero_point=truth["zero_point"],
        slope=truth["slope"],
        scatter=truth["scatter"],
        offset=truth["parallax_offset"],
    )
    plain = copy.deepcopy(CHOICES)
    plain["anchors"]["parallaxes"] |= section
    ladder = lf.build_ladder(plain, {"anchors.parallaxes": parallax_survey(seen, rng)})
    return truth, dict(draw(ladder, seed=1, draws=DRAWS).draws)


def zero_points(
    survey: ParallaxSurvey, section: dict[str, Any], mocks: int
) -> tuple[np.ndarray, np.ndarray]:
    """Pull of the zero point in each mock, and the rank of its truth among the draws."""
    pulls, ranks = [], []
    for seed in range(mocks):
        truth, draws = fitted(survey, section, seed)
        values, true = draws["zero_point"], truth["zero_point"]
        pulls.append((values.mean() - true) / values.std(ddof=1))
        ranks.append(np.mean(values < true))
    return np.array(pulls), np.array(ranks)


TREATED = {
    "volume": (ParallaxSurvey(), IN_VOLUME | {"selection": LIMIT}),
    "disc": (ParallaxSurvey(disc=DISC), IN_DISC | {"selection": LIMIT}),
}


def well_covered(pulls: np.ndarray) -> bool:
    """Mean under 0.2 and 68 % intervals right, for 200; for 40 as their errors allow."""
    inside = float(np.mean(np.abs(pulls) < 1.0))
    if len(pulls) >= 200:
        return abs(pulls.mean()) < 0.2 and 0.60 < inside < 0.76
    return abs(pulls.mean()) < 0.45 and 0.50 < inside < 0.86


@pytest.mark.full
@pytest.mark.parametrize("kind", ["volume", pytest.param("disc", marks=pytest.mark.long)])
def test_right_prior_and_selection_recover_the_zero_point(kind: str, in_full: bool) -> None:
    """70 stars at 5 % parallaxes."""
    pulls, _ = zero_points(*TREATED[kind], 200 if in_full else 40)
    assert well_covered(pulls), (pulls.mean(), np.mean(np.abs(pulls) < 1.0))


@pytest.mark.full
def test_selection_left_out_is_found(in_full: bool) -> None:
    """Negative control: a volume prior without the magnitude limit."""
    pulls, _ = zero_points(ParallaxSurvey(), IN_VOLUME, 200 if in_full else 40)
    assert not well_covered(pulls)
    assert pulls.mean() < -1.0  # distances too large, so stars too bright


POOR = {
    "volume": (
        ParallaxSurvey(stars=40, error=0.25),
        IN_VOLUME | {"selection": LIMIT},
    ),
    "disc, positive parallaxes": (
        ParallaxSurvey(stars=25, error=0.25, disc=DISC, parallax_min=0.0),
        IN_DISC | {"selection": LIMIT | {"parallax_min": 0.0}},
    ),
}


@pytest.mark.full
@pytest.mark.parametrize(
    "kind", ["volume", pytest.param("disc, positive parallaxes", marks=pytest.mark.long)]
)
def test_ranks_are_uniform_at_one_sigma(kind: str, in_full: bool) -> None:
    """Where posteriors are far from normal, ranks are held to be uniform, not means to be right."""
    _, ranks = zero_points(*POOR[kind], 200 if in_full else 40)
    assert kstest(ranks, "uniform").pvalue > 0.01, np.histogram(ranks, 5, (0.0, 1.0))[0]


@pytest.mark.full
@pytest.mark.long
def test_ranks_find_a_missing_limit(in_full: bool) -> None:
    """Negative control: positive parallaxes alone, and the fit not told."""
    survey, _ = POOR["disc, positive parallaxes"]
    more = replace(survey, stars=40)
    _, ranks = zero_points(more, IN_DISC | {"selection": LIMIT}, 200 if in_full else 40)
    assert kstest(ranks, "uniform").pvalue < 0.01
