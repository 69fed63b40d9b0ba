"""Period cuts beyond which a limit does not matter: found, proposed, and good enough."""

from __future__ import annotations

import numpy as np
import pytest
from photometry_ladders import MODULI, TRUTH, ladder

from ladderfit.checks.completeness import propose_period_cuts
from ladderfit.errors import LadderfitError
from ladderfit.ladder import Ladder
from ladderfit.mock import mock_from_ladder
from ladderfit.result import Result
from ladderfit.sampling.run import draw

LIMITS = {"Orrel": 17.6, "Q07": 18.6}
KNOWN = TRUTH | {"scatter": 0.2} | {f"modulus[{host}]": mu for host, mu in MODULI.items()}


@pytest.fixture(scope="module")
def base() -> Ladder:
    changes = {
        "cepheids.completeness": {"band": "H", "limits": LIMITS},
        "anchors.geometric.Tavin.error": 0.01,
    }
    return ladder(3, changes, stars=150)


@pytest.fixture(scope="module")
def fitted(base: Ladder) -> Result:
    return draw(mock_from_ladder(base, KNOWN, np.random.default_rng(1)), seed=1, draws=1000)


def test_pulls_are_those_of_stars_simulated_one_by_one(fitted: Result) -> None:
    """The shift of the mean of stars that a limit lets in, by drawing very many."""
    cuts = {cut.host: cut for cut in propose_period_cuts(fitted).hosts}
    assert list(cuts) == ["Orrel", "Q07"]
    stars, rng = fitted.ladder.cepheids, np.random.default_rng(3)
    here = stars.host == fitted.ladder.hosts.index("Q07")
    variance = stars.variance[here] + fitted.mean("scatter") ** 2
    mean = fitted.mean("modulus[Q07]") + fitted.mean("zero_point")
    mean = mean + fitted.mean("slope") * (stars.log_period[here] - 1.0)
    mean = mean + fitted.mean("metallicity") * (stars.metallicity[here] - 8.69)
    edge = stars.magnitude[here] + stars.headroom[here]
    drawn = mean + np.sqrt(variance) * rng.normal(size=(20_000, here.sum()))
    seen = np.ma.masked_array(drawn, drawn > edge).mean(axis=0) - mean
    expected = np.average(seen, weights=1.0 / variance)
    assert cuts["Q07"].pull == pytest.approx(expected, abs=0.002)
    assert cuts["Q07"].pull < -0.02


def test_the_cut_is_the_least_that_does(fitted: Result) -> None:
    for cut in propose_period_cuts(fitted).hosts:
        assert abs(cut.pull_beyond) <= 0.1 * cut.error_beyond
        assert abs(cut.pull) > 0.1 * cut.error
        assert 3 <= cut.kept < cut.stars
        period = 10.0**fitted.ladder.cepheids.log_period
        place = fitted.ladder.hosts.index(cut.host)
        inside = period[fitted.ladder.cepheids.host == place] >= cut.shortest
        assert inside.sum() == cut.kept
    wide = propose_period_cuts(fitted, tolerance=0.5)
    pairs = zip(propose_period_cuts(fitted).hosts, wide.hosts, strict=True)
    assert all(strict.kept < loose.kept for strict, loose in pairs)


def test_the_changes_cut_the_stars(fitted: Result) -> None:
    cuts = propose_period_cuts(fitted)
    changed = fitted.ladder.change(cuts.changes)
    assert changed.choices.cepheids.completeness is None
    for cut in cuts.hosts:
        place = changed.hosts.index(cut.host)
        assert np.sum(changed.cepheids.host == place) == cut.kept


def test_without_limits_the_faintest_star_stands_for_one(base: Ladder) -> None:
    plain = mock_from_ladder(base, KNOWN, np.random.default_rng(1)).change(
        {"cepheids.completeness": None}
    )
    result = draw(plain, seed=1, draws=500)
    cuts = propose_period_cuts(result)
    assert [cut.host for cut in cuts.hosts] == list(plain.hosts)
    assert all(cut.assumed for cut in cuts.hosts)
    faintest = plain.cepheids.magnitude[plain.cepheids.host == 0].max()
    assert cuts.hosts[0].limit == pytest.approx(faintest)
    with pytest.raises(LadderfitError, match="no magnitude 'K'"):
        propose_period_cuts(result, band="K")


def pulls(base: Ladder, repeats: int) -> dict[str, np.ndarray]:
    """Pulls of the mean limited modulus: limits modelled, periods cut, and neither."""
    found: dict[str, list[list[float]]] = {"modelled": [], "cut": [], "neither": []}
    for seed in range(repeats):
        mock = mock_from_ladder(base, KNOWN, np.random.default_rng([5, seed]))
        modelled = draw(mock, seed=seed, draws=500)
        results = {
            "modelled": modelled,
            "cut": draw(mock.change(propose_period_cuts(modelled).changes), seed=seed, draws=500),
            "neither": draw(mock.change({"cepheids.completeness": None}), seed=seed, draws=500),
        }
        for name, result in results.items():
            names = ("modulus[Orrel]", "modulus[Q07]")
            found[name].append([(result.mean(n) - KNOWN[n]) / result.sd(n) for n in names])
    return {name: np.array(each).ravel() for name, each in found.items()}


@pytest.mark.full
def test_moduli_are_recovered_with_limits_or_cuts_and_not_without(
    base: Ladder, in_full: bool
) -> None:
    repeats = 100 if in_full else 12
    found = pulls(base, repeats)
    allowed = 0.2 + 2.5 / np.sqrt(repeats) if not in_full else 0.25
    assert abs(found["modelled"].mean()) < allowed
    assert abs(found["cut"].mean()) < allowed
    assert found["neither"].mean() < -0.7  # the negative control
