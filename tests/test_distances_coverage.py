"""Hosts held out of simulated surveys: their true moduli lie where they are said to, as often."""

from __future__ import annotations

import held_out
import numpy as np
import pytest
from scipy.stats import chi2, kstest

from ladderfit.distances.moduli import Distances, distances_of
from ladderfit.sampling.run import draw

DRAWS = 1500
# The first forty happened to deviate less than they should together (1 in 600 by chance), so a
# hundred and sixty more were drawn; none is left out.
FULL = [*range(100, 140), *range(1000, 1160)]
CHANCES = (0.68, 0.95)


def inside(found: Distances, truth: dict[str, float], narrow: float = 1.0) -> list[float]:
    """Share of hosts whose truth is in the central intervals, `narrow` times as wide."""
    shares = []
    for chance in CHANCES:
        hits = []
        for host, draws in found.draws.items():
            low, high = np.quantile(draws, [0.5 - 0.5 * chance, 0.5 + 0.5 * chance])
            middle = np.median(draws)
            hits.append(abs(truth[host] - middle) < narrow * 0.5 * (high - low))
        shares.append(float(np.mean(hits)))
    return shares


def joint_chance(found: Distances, truth: dict[str, float]) -> float:
    """Chance of a larger deviation of all hosts together, by their covariance."""
    off = np.array([found.draws[host].mean() - truth[host] for host in found.hosts])
    matrix = found.covariance()
    return float(chi2.sf(off @ np.linalg.solve(matrix, off), len(off)))


@pytest.fixture(scope="module")
def surveys(in_full: bool) -> list[tuple[Distances, dict[str, float]]]:
    found = []
    for seed in FULL if in_full else FULL[:8]:
        survey = held_out.survey(seed)
        base = draw(survey.ladder, seed=seed, draws=DRAWS)
        new = distances_of(base, [survey.cepheids, survey.supernovae], seed=seed)
        found.append((new, survey.truth))
    return found


def well_covered(shares: np.ndarray) -> bool:
    """Mean coverage within three of its errors; hosts of a survey share the calibration's."""
    for place, chance in enumerate(CHANCES):
        mean = shares[:, place].mean()
        own = np.sqrt(chance * (1.0 - chance) / shares.shape[0] / len(held_out.HELD_OUT))
        error = max(shares[:, place].std(ddof=1) / np.sqrt(len(shares)), own)
        if abs(mean - chance) > 3.0 * error:
            return False
    return True


@pytest.mark.full
def test_true_moduli_are_covered(surveys: list[tuple[Distances, dict[str, float]]]) -> None:
    shares = np.array([inside(found, truth) for found, truth in surveys])
    count = len(held_out.HELD_OUT) * len(shares)
    print(f"coverage of {count} intervals at 68 and 95 %: {shares.mean(axis=0)}")
    assert well_covered(shares), shares.mean(axis=0)


@pytest.mark.full
def test_intervals_too_narrow_are_found(
    surveys: list[tuple[Distances, dict[str, float]]],
) -> None:
    """Negative control: intervals of half the width."""
    shares = np.array([inside(found, truth, narrow=0.5) for found, truth in surveys])
    assert not well_covered(shares), shares.mean(axis=0)


@pytest.mark.full
def test_all_hosts_together_deviate_as_their_covariance_says(
    surveys: list[tuple[Distances, dict[str, float]]],
) -> None:
    chances = [joint_chance(found, truth) for found, truth in surveys]
    assert kstest(chances, "uniform").pvalue > 0.01, chances
    assert {found.route for found, _ in surveys} == {"weights"}
    assert max(found.pareto_k for found, _ in surveys) < 0.7
