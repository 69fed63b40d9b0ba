"""Treatments of outliers: what they refuse, the parallax stars' integrals, clipping, mocks."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from contaminated import clean, survey
from small_ladders import MODULI, TRUTH, small_ladder

from ladderfit.checks.outliers import outlier_table
from ladderfit.choices.outliers import CLIPPING
from ladderfit.errors import InputError
from ladderfit.ladder import Ladder
from ladderfit.ladder_file import read_choices, write_choices
from ladderfit.mock import mock_from_ladder
from ladderfit.plots import figures
from ladderfit.plots.outliers import outlier_figure
from ladderfit.posterior.joint import posterior
from ladderfit.sampling.run import draw
from ladderfit.sampling.warm import WarmDrawer

CEPHEIDS, PARALLAXES = "cepheids.outliers.treatment", "anchors.parallaxes.outliers.treatment"
BOTH = {CEPHEIDS: "mixture", PARALLAXES: "mixture"}


@pytest.mark.parametrize(
    ("changes", "key", "words"),
    [
        ({CEPHEIDS: "clipping"}, CEPHEIDS, "clipping as in older papers"),
        ({"cepheids.outliers.threshold": 0.5}, "cepheids.outliers.threshold", "1 or more"),
        ({"cepheids.outliers.groups": ["A"]}, "cepheids.outliers.groups", "'none'"),
        (
            {CEPHEIDS: "mixture", "cepheids.outliers.groups": ["A"]},
            "cepheids.outliers.groups",
            "[groups] does not define",
        ),
        ({PARALLAXES: "Student-t"}, PARALLAXES, "makes infinite"),
        ({PARALLAXES: CLIPPING}, PARALLAXES, "distances from parallaxes"),
        (
            {CEPHEIDS: "mixture", "relation.reddening": {"colours": "in the variance"}},
            CEPHEIDS,
            'relation.reddening = "fixed"',
        ),
        ({"priors.outlier_fraction": {"normal": [0.1, 0.1]}}, "priors.outlier_fraction", "0 and 1"),
        ({"priors.outlier_width": {"normal": [1.0, 0.1]}}, "priors.outlier_width", "above 0"),
        (
            {"priors.degrees_of_freedom": {"fixed": 0.0}},
            "priors.degrees_of_freedom",
            "above 0",
        ),
    ],
)
def test_what_does_not_fit_is_refused(changes: dict[str, Any], key: str, words: str) -> None:
    with pytest.raises(InputError) as caught:
        small_ladder("all rungs").change(changes)
    problems = [p for p in caught.value.problems if p.key == key]
    assert problems
    assert any(words in str(p) for p in problems)


def test_choices_survive_the_ladder_file(tmp_path: Any) -> None:
    changed = small_ladder("all rungs").change({**BOTH, "cepheids.outliers.threshold": 2.5})
    write_choices(changed.choices, tmp_path / "ladder.toml")
    again = read_choices(tmp_path / "ladder.toml")
    assert again.cepheids.outliers == changed.choices.cepheids.outliers
    assert again.value(PARALLAXES) == "mixture"


@pytest.mark.parametrize("prior", ["flat in modulus", "uniform in volume"])
def test_parallax_stars_are_mixed_as_a_dense_sum_has_it(prior: str) -> None:
    ladder = small_ladder("parallaxes").change(
        {PARALLAXES: "mixture", "anchors.parallaxes.distance_prior": prior}
    )
    joint = posterior(ladder)
    values = {"slope": -3.2, "zero_point": -5.9, "metallicity": -0.2, "scatter": 0.1}
    values |= {"parallax_offset": -0.01, "parallax_outlier_fraction": 0.2}
    values |= {"parallax_outlier_width": 0.7}
    found = joint.log_parallaxes(joint.coordinates(values)[None, :])[0]
    stars = ladder.parallax_stars
    tilt = 0.0 if prior == "flat in modulus" else 0.6 * np.log(10.0)
    mu = np.linspace(0.0, 30.0, 60_001)
    norm = 50.0 if tilt == 0.0 else np.exp(tilt * 50.0) / tilt
    for i in range(len(stars)):
        mean = values["zero_point"] + values["slope"] * (stars.log_period[i] - 1.0)
        mean += values["metallicity"] * (stars.metallicity[i] - 8.69)
        close = stars.variance[i] + 0.1**2
        off = stars.magnitude[i] - mean - mu
        density = 0.8 * normal(off, close) + 0.2 * normal(off, close + 0.7**2)
        miss = stars.parallax[i] - 10.0 ** (2.0 - 0.2 * mu) + 0.01
        density = density * normal(miss, stars.parallax_error[i] ** 2) * np.exp(tilt * mu) / norm
        assert found[i] == pytest.approx(np.log(density.sum() * (mu[1] - mu[0])), abs=1e-4)


def normal(x: np.ndarray, variance: float) -> np.ndarray:
    return np.exp(-0.5 * x**2 / variance) / np.sqrt(2.0 * np.pi * variance)


def test_fraction_of_zero_is_the_plain_fit() -> None:
    plain = small_ladder("all rungs")
    none = {"priors.outlier_fraction": {"fixed": 0.0}}
    none |= {"priors.parallax_outlier_fraction": {"fixed": 0.0}}
    mixed = plain.change({**BOTH, **none})
    first, second = draw(plain, seed=1), draw(mixed, seed=1)
    assert second.diagnostics.log_evidence == pytest.approx(
        first.diagnostics.log_evidence, abs=4.0 * second.diagnostics.log_evidence_error + 0.01
    )
    for name in ("slope", "hubble_constant", "modulus[Q07]", "scatter"):
        assert abs(first.mean(name) - second.mean(name)) < 0.08 * first.sd(name)
        assert second.sd(name) == pytest.approx(first.sd(name), rel=0.08)


def contaminated(changes: dict[str, Any], extra: dict[str, float]) -> Ladder:
    ladder = small_ladder("all rungs").change(changes)
    truth = {**TRUTH, **{f"modulus[{host}]": MODULI[host] for host in ladder.hosts}, **extra}
    return mock_from_ladder(ladder, truth, np.random.default_rng(12))


def test_result_has_the_same_shape_whatever_the_treatment() -> None:
    truth = {"outlier_fraction": 0.1, "outlier_width": 1.0}
    truth |= {"parallax_outlier_fraction": 0.1, "parallax_outlier_width": 1.0}
    ladder = contaminated(BOTH, truth)
    result = draw(ladder, seed=1, draws=1000)
    assert {*truth, "outlier_offset"} <= set(result.draws)
    assert result.size == 1000
    assert result.diagnostics.pareto_k < 0.7
    table = outlier_table(result)
    assert list(table["sample"].unique()) == ["cepheids", "anchors.parallaxes"]
    assert table.probability.between(0.0, 1.0).all()
    assert ladder.table("cepheids").texts("outlier").known  # who is one, in the simulated table
    with pytest.raises(InputError, match="outlier_width"):
        contaminated(BOTH, {"outlier_fraction": 0.1})


def test_groups_have_fractions_of_their_own() -> None:
    ladder = small_ladder("anchors").change(
        {
            "groups.near": {"hosts": ["Tavin"]},
            CEPHEIDS: "mixture",
            "cepheids.outliers.groups": ["near"],
        }
    )
    result = draw(ladder, seed=1, draws=500)
    names = {"outlier_fraction", "outlier_fraction[near]", "outlier_width[near]"}
    assert names <= set(result.draws)
    assert not np.array_equal(
        result.draws["outlier_fraction"], result.draws["outlier_fraction[near]"]
    )


def test_the_warm_drawer_follows_a_change_of_treatment() -> None:
    ladder, warm = small_ladder("anchors"), WarmDrawer()
    for treatment in ("none", "mixture", "Student-t", "none"):
        changed = ladder.change({CEPHEIDS: treatment})
        found, cold = warm.draw(changed, draws=500, seed=2), draw(changed, draws=500, seed=3)
        gap = found.mean("slope") - cold.mean("slope")
        assert abs(gap) < 0.3 * cold.sd("slope")


def test_clipping_is_told_and_only_for_comparing() -> None:
    ladder, table = survey(3)
    clipped = ladder.change({CEPHEIDS: CLIPPING})
    aside = len(ladder.cepheids) - len(clipped.cepheids)
    assert 0 < aside < 60
    assert f"{aside} clipped at 3 residual sd" in str(clipped.kept["cepheids"])
    (note,) = (n for n in clipped.notes if "clipping" in n)
    assert "as in older papers and for comparing only" in note
    gone = set(ladder.cepheids.row) - set(clipped.cepheids.row)
    outliers = {row for row, told in enumerate(table["outlier"], start=1) if told == "yes"}
    assert len(gone & outliers) > 0.8 * len(gone)
    assert len(ladder.change({CEPHEIDS: "none"}).cepheids) == len(ladder.cepheids)
    known = clean(ladder, table)  # without outliers a clip takes good stars, and errors shrink
    tighter = {CEPHEIDS: CLIPPING, "cepheids.outliers.threshold": 2.0}
    full, cut = draw(known, draws=500), draw(known.change(tighter), draws=500)
    assert cut.mean("scatter") < full.mean("scatter") - 3.0 * full.sd("scatter")
    assert cut.sd("slope") < full.sd("slope")


@pytest.mark.parametrize("treatment", ["mixture", "Student-t"])
def test_the_figure_marks_every_star(treatment: str) -> None:
    ladder, table = survey(1)
    result = draw(ladder.change({CEPHEIDS: treatment}), seed=1, draws=400)
    figure = outlier_figure(result)
    words = [text.get_text() for legend in figure.legends for text in legend.get_texts()]
    counts = [
        int(w.rpartition("(")[2].split()[0]) for w in words if w.endswith(("star)", "stars)"))
    ]
    assert sum(counts) == len(ladder.cepheids)
    known = {row["ID"] for row in table if row["outlier"] == "yes"}
    if treatment == "mixture":
        assert abs(counts[1] + counts[2] - len(known)) <= 6
    named = {text.get_text() for text in figure.axes[1].texts}
    assert named <= known
    assert len(named) > 2
    assert outlier_figure(draw(ladder, seed=1, draws=200)) is None
    assert "outliers" in figures(result)
