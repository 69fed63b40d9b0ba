"""Predictive fit: against refits and evidences, and what must not be compared."""

from __future__ import annotations

from functools import cache
from typing import Any

import numpy as np
import pytest
from relation_ladders import made
from set_asides import set_aside
from small_ladders import small_ladder

import ladderfit as lf
from ladderfit.ladder import Ladder, build_ladder
from ladderfit.posterior.joint import posterior
from ladderfit.predictive.fit import (
    DifferentDataError,
    PredictiveDifference,
    PredictiveFit,
    compare_fits,
    on_same_objects,
    predictive_fit,
)
from ladderfit.sampling.run import draw

MERIL = "anchors.geometric.Meril"  # the host of a supernova alone
CURVED = {"relation.curvature": True}


@cache
def fit(name: str, change: tuple[tuple[str, Any], ...] = ()) -> PredictiveFit:
    return predictive_fit(draw(small_ladder(name).change(dict(change)), draws=2000))


def bent(size: float) -> Ladder:
    """A small ladder whose magnitudes are bent by `size` mag at one dex from the pivot."""
    ladder = small_ladder("many stars")
    columns = ladder.table("cepheids").columns
    table = {name: np.array(column.values) for name, column in columns.items()}
    table["W"] = table["W"] + size * np.log10(table["P"] / 10.0) ** 2
    return build_ladder(ladder.choices.to_mapping(), {"cepheids": table})


def test_terms_are_ratios_of_evidences_where_nothing_is_in_phi() -> None:
    """Exact: the evidence of all data over that of all data but the object's."""
    ladder, found = small_ladder("fixed scatter"), fit("fixed scatter").objects
    whole = posterior(ladder).log_density(np.empty((1, 0)))[0]
    for _, row in found.iloc[::7].iterrows():
        rest = posterior(set_aside(ladder, "Cepheid", row["name"], row["host"]))
        expected = whole - rest.log_density(np.empty((1, 0)))[0]
        assert row["elpd"] == pytest.approx(expected, abs=1e-6)


def test_terms_are_those_of_refits() -> None:
    """Draws of the fit without the object predict its data with the same density."""
    ladder, found = small_ladder("all rungs"), fit("all rungs").objects
    joint = posterior(ladder)
    for _, row in found.iloc[::15].iterrows():
        result = draw(set_aside(ladder, row["kind"], row["name"], row["host"]), draws=4000)
        rest = posterior(result.ladder)
        points = [
            joint.coordinates({n: float(result.draws[n][i]) for n in joint.split.phi_names})
            for i in range(0, 4000, 4)
        ]
        z = np.array(points)
        gain = joint.log_density(z) - rest.log_density(z)
        expected = np.log(np.mean(np.exp(gain)))
        assert row["elpd"] == pytest.approx(expected, abs=0.05), row["name"]


def test_a_bend_that_is_there_is_seen() -> None:
    plain, curved = (
        predictive_fit(draw(ladder, draws=2000)) for ladder in (bent(1.0), bent(1.0).change(CURVED))
    )
    found = compare_fits(curved, plain)
    assert found.difference > 3.0 * found.error > 0.0
    assert str(found).startswith("The first predicts better by")
    assert compare_fits(plain, curved).difference == -found.difference


def test_a_bend_that_is_not_there_is_not_seen() -> None:
    """Negative control."""
    found = compare_fits(fit("many stars", tuple(CURVED.items())), fit("many stars"))
    assert abs(found.difference) < 4.0
    assert str(found).startswith("The two predict alike")


def test_sum_and_error() -> None:
    found = fit("anchors")
    terms = found.objects["elpd"].to_numpy()
    assert found.elpd == pytest.approx(terms.sum())
    assert found.error == pytest.approx(np.sqrt(len(terms)) * terms.std(ddof=1))
    assert found.trusted


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"cepheids.periods": [8.0, 100.0]}, "take part in one of them only"),
        ({"anchors.geometric.Tavin.modulus": 18.4}, "the anchor Tavin is not the same"),
        ({"anchors.parallaxes.use": False}, "'parallax star' take part in one of them only"),
        ({"supernovae": None, "expansion": None, MERIL: None}, "hosts differ"),
    ],
)
def test_other_data_are_refused(change: dict[str, Any], words: str) -> None:
    base = fit("all rungs")
    other = predictive_fit(draw(small_ladder("all rungs").change(change), draws=200))
    with pytest.raises(DifferentDataError, match=words):
        compare_fits(base, other)


def test_other_magnitudes_are_refused() -> None:
    first, second = (predictive_fit(draw(bent(size), draws=200)) for size in (0.0, 0.1))
    with pytest.raises(DifferentDataError, match=r"the magnitude of \d+ objects"):
        compare_fits(first, second)


def test_metallicities_that_are_data_in_one_alone_are_refused() -> None:
    """With a population the measured metallicities are predicted too."""
    plain = made(3, parallaxes=False)
    errors = {"cepheids.columns.metallicity_error": "e_OH"}
    fits = [predictive_fit(draw(plain.built(change), draws=200)) for change in ({}, errors)]
    with pytest.raises(DifferentDataError, match="metallicities"):
        compare_fits(*fits)


def test_the_same_objects_can_be_compared() -> None:
    """A cut lets other stars in; without them the two relations are compared."""
    ladder = small_ladder("anchors")
    other = ladder.change({"cepheids.periods": [8.0, 100.0], "relation.metallicity": "none"})
    first, second = on_same_objects(ladder, other)
    assert len(first.cepheids) == len(second.cepheids) < len(ladder.cepheids)
    found = compare_fits(*(predictive_fit(draw(each, draws=500)) for each in (first, second)))
    assert found.objects == len(first.cepheids)


@pytest.mark.parametrize(
    ("difference", "error", "trusted", "words"),
    [
        (1.0, 5.0, True, "The two predict alike: log predictive densities differ by 1.0"),
        (-9.0, 6.0, True, "The second predicts better by 9.0 +- 6.0 over 50 objects, which chance"),
        (30.0, 5.0, True, "The first predicts better by 30.0 +- 5.0 over 50 objects (6.0 of them)"),
        (30.0, 5.0, False, "Some weights are too heavy to trust."),
    ],
)
def test_verdicts(difference: float, error: float, trusted: bool, words: str) -> None:
    assert words in str(PredictiveDifference(difference, error, 50, trusted))


def test_from_the_top() -> None:
    assert lf.predictive_fit is predictive_fit
    assert lf.compare_fits is compare_fits
