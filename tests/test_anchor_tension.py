"""The tension of an anchor: against densities written as parabolas, and over mocks."""

from __future__ import annotations

from functools import cache
from typing import Any

import numpy as np
import pytest
import test_covariance_posterior as covariances
from scipy.stats import kstest
from small_ladders import MODULI, TRUTH, small_ladder

from ladderfit.anchors import PARALLAXES, NoTensionError, Tension, tension
from ladderfit.anchors.tension import _from_draws
from ladderfit.ladder import Ladder, build_ladder
from ladderfit.mock.redraw import mock_from_ladder
from ladderfit.posterior.joint import posterior
from ladderfit.sampling.run import draw

SEED = 12
TRUE = TRUTH | {f"modulus[{host}]": modulus for host, modulus in MODULI.items()}
FIXED = {"priors.scatter": {"fixed": 0.08}}
SHARED = {
    "anchors.shared_errors": {"maser": {"error": 0.06, "loads": {"Tavin": 1.0, "Orrel": 0.7}}}
}
MODULUS = "anchors.geometric.Tavin.modulus"


def by_parabola(ladder: Ladder) -> tuple[float, float]:
    """Mean and standard deviation of Tavin's modulus as all other data predict it.

    With nothing in phi the evidence is a normal density of the anchor's datum: three
    values of it say which.
    """
    own = ladder.choices.anchors.geometric["Tavin"].modulus
    at = own + np.array([-0.1, 0.0, 0.1])
    ladders = [ladder.change({MODULUS: float(value)}) for value in at]
    density = [float(posterior(each).log_density(np.empty((1, 0)))[0]) for each in ladders]
    square, linear, _ = np.polyfit(at - own, density, 2)
    variance = -0.5 / square
    return own + linear * variance, float(np.sqrt(variance))


def with_covariance() -> Ladder:
    choices, tables = covariances.parts_of("anchors")
    choices["anchors"]["covariance"] = {"adds": True}
    matrix = covariances.correlated(2, 0.05)
    return build_ladder(choices, tables | {"anchors.covariance": matrix})


CASES = {
    "independent": lambda: small_ladder("anchors"),
    "an error they share": lambda: small_ladder("anchors").change(SHARED),
    "a covariance": with_covariance,
    "hosts in volume": lambda: small_ladder("hosts in volume"),
    "supernovae alone": lambda: small_ladder("no Cepheids").change(
        {"priors.peak_scatter": {"fixed": 0.1}}
    ),
}


@pytest.mark.parametrize("case", CASES)
def test_the_difference_is_that_of_the_evidence(case: str) -> None:
    """Correlations counted: the evidence knows shared errors and covariances."""
    ladder = CASES[case]().change(FIXED)

    found = tension(ladder, "Tavin", draws=200)

    mean, sd = by_parabola(ladder)
    own = ladder.choices.anchors.geometric["Tavin"].modulus
    assert found.difference == pytest.approx(own - mean, abs=1e-6)
    assert found.error == pytest.approx(sd, rel=1e-6)
    assert found.deviations == pytest.approx(abs(own - mean) / sd, rel=1e-6)


def test_a_shared_error_brings_anchors_together() -> None:
    """Counting it as two independent errors would be wrong by this much."""
    plain, shared = (CASES[name]().change(FIXED) for name in ("independent", "an error they share"))
    apart = plain.change(
        {
            "anchors.geometric.Tavin.error": float(np.hypot(0.025, 0.06)),
            "anchors.geometric.Orrel.error": float(np.hypot(0.035, 0.042)),
        }
    )
    together, independent = (tension(each, "Tavin", draws=200) for each in (shared, apart))
    assert together.error < 0.8 * independent.error


@pytest.mark.parametrize("case", ["independent", "an error they share"])
def test_draws_of_the_modulus_say_the_same(case: str) -> None:
    """What is done where the modulus is not normal given phi: limits, outliers."""
    ladder = CASES[case]()
    without = draw(ladder.change({"anchors.geometric.Tavin.use": False}), draws=4000)
    exact = tension(ladder, "Tavin", without=without)
    found = _from_draws(ladder, "Tavin", without)
    assert found.difference == pytest.approx(exact.difference, abs=4.0 * exact.error / 60.0)
    assert found.error == pytest.approx(exact.error, rel=0.05)
    assert found.deviations == pytest.approx(exact.deviations, abs=0.1)


@pytest.mark.long
def test_an_anchor_that_the_outliers_do_not_touch() -> None:
    """Modelling outliers that are not there leaves the tension nearly as it is."""
    ladder = small_ladder("anchors")
    plain = tension(ladder, "Tavin", seed=1)
    robust = tension(ladder.change({"cepheids.outliers.treatment": "mixture"}), "Tavin", seed=1)
    assert robust.difference == pytest.approx(plain.difference, abs=plain.error)


def test_an_anchor_out_of_use_is_compared_too() -> None:
    ladder = small_ladder("anchors")
    unused = ladder.change({"anchors.geometric.Tavin.use": False})
    assert tension(unused, "Tavin", seed=3) == tension(ladder, "Tavin", seed=3)


@cache
def tensions(
    name: str, mocks: int, *, anchor: str = "Tavin", planted: float = 0.0
) -> tuple[Tension, ...]:
    """Of mocks of a small ladder, an anchor's modulus moved by `planted` [mag].

    Where parallaxes are compared their offset is drawn from its prior, which the data
    hardly narrow: held at one value it would pull all mocks to one side.
    """
    ladder, found = small_ladder(name), []
    for number in range(mocks):
        rng = np.random.default_rng([SEED, number])
        offset = {"parallax_offset": rng.normal(0.0, 0.02)} if anchor == PARALLAXES else {}
        mock = mock_from_ladder(ladder, TRUE | offset, rng)
        if planted:
            modulus = mock.choices.anchors.geometric["Tavin"].modulus
            mock = mock.change({MODULUS: modulus + planted})
        found.append(tension(mock, anchor, seed=1, draws=1000))
    return tuple(found)


def uniform(found: tuple[Tension, ...]) -> float:
    return float(kstest([each.probability for each in found], "uniform").pvalue)


@pytest.mark.full
def test_probabilities_of_consistent_anchors_are_uniform(in_full: bool) -> None:
    assert uniform(tensions("anchors", 200 if in_full else 100)) > 0.01


def test_three_deviations_planted_are_found() -> None:
    """Two anchors moved apart by three of the errors of their difference."""
    error = float(np.mean([each.error for each in tensions("anchors", 10)]))
    found = tensions("anchors", 50, planted=3.0 * error)
    assert 2.7 < np.median([each.deviations for each in found]) < 3.3
    assert uniform(found) < 1e-6  # negative control of the test above


@pytest.mark.full
def test_probabilities_of_consistent_parallaxes_are_uniform(in_full: bool) -> None:
    found = tensions("anchors and parallaxes", 200 if in_full else 40, anchor=PARALLAXES)
    assert uniform(found) > 0.01


def test_parallaxes_off_by_an_offset_are_found() -> None:
    """Negative control: the stars made fainter by 0.4 mag, so that their zero point is."""
    ladder = small_ladder("anchors and parallaxes")
    tables: dict[str, Any] = {}
    for section in ("cepheids", "anchors.parallaxes"):
        columns = ladder.table(section).columns
        tables[section] = {name: np.array(column.values) for name, column in columns.items()}
    honest = tension(ladder, PARALLAXES, seed=1)
    tables["anchors.parallaxes"]["W"] = tables["anchors.parallaxes"]["W"] + 0.4
    plain = ladder.choices.to_mapping()
    found = tension(build_ladder(plain, tables), PARALLAXES, seed=1)
    assert found.difference == pytest.approx(honest.difference + 0.4, abs=0.05)
    assert found.deviations > 3.0


@pytest.mark.parametrize(
    ("name", "anchor", "words"),
    [
        ("one anchor", "Tavin", "without Tavin nothing fixes the distance scale"),
        ("anchors", "Tavim", "did you mean 'Tavin'"),
        ("anchors", PARALLAXES, "no parallax stars"),
        ("parallaxes", PARALLAXES, "no other anchor"),
    ],
)
def test_what_cannot_be_compared_is_said(name: str, anchor: str, words: str) -> None:
    with pytest.raises(NoTensionError, match=words):
        tension(small_ladder(name), anchor, draws=100)


def test_parallax_stars_with_their_own_zero_point_have_no_tension() -> None:
    ladder = small_ladder("anchors and parallaxes").change(
        {"groups.near": {"parallax_stars": True}, "relation.zero_points": ["near"]}
    )
    with pytest.raises(NoTensionError, match=r"zero point of their own \(near\)"):
        tension(ladder, PARALLAXES, draws=100)


def test_a_tension_in_words() -> None:
    text = str(Tension("Tavin", -0.0953, 0.0366, 0.0088, 2.62))
    assert text == (
        "Tavin has a modulus 0.095 mag below what the ladder says without it, +- 0.037: "
        "2.6 standard deviations (p = 0.0088)."
    )
    assert str(Tension(PARALLAXES, 0.1, 0.1, 0.32, 1.0)).startswith(
        "The parallaxes have a zero point 0.100 mag above what the ladder says without them"
    )
