"""Predictive checks: uniform where they have to be, shy where they may be, and not blind."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from photometry_ladders import MODULI, TRUTH, choices, ladder, tables
from scipy.stats import kstest

import ladderfit as lf
from ladderfit.checks.predictive import Checks, predictive_checks
from ladderfit.checks.statistics import statistics_of
from ladderfit.ladder import Ladder, build_ladder
from ladderfit.mock import mock_from_ladder
from ladderfit.posterior.deviations import cepheid_deviations, parallax_deviations
from ladderfit.sampling.run import draw
from ladderfit.shipped import sample_ladder

KNOWN = TRUTH | {f"modulus[{host}]": mu for host, mu in MODULI.items()}
LIMITED = {"cepheids.completeness": {"band": "H", "limits": {"Orrel": 18.0, "Q07": 19.0}}}
MODELS: dict[str, dict[str, Any]] = {
    "plain": {},
    "free ratio": {"relation.reddening": {"colours": "intrinsic relation"}},
    "shared": {"cepheids.shared": {"sky": {"loading": "sky", "error": 0.1}}},
    "limits": LIMITED,
    "soft limits": {
        "cepheids.completeness": {**LIMITED["cepheids.completeness"], "softness": 0.3},
        "cepheids.shortest": {"Orrel": 17.0, "Q07": 14.0},
    },
}


def at_the_truth(found: Ladder, size: int = 1) -> dict[str, np.ndarray]:
    truth = KNOWN | {"shared_photometry[sky]": 0.1}
    return {name: np.full(size, value) for name, value in truth.items()}


@pytest.mark.parametrize("model", MODELS)
def test_deviations_are_standard_normal_at_the_truth(model: str) -> None:
    """Nuisances drawn given the data, truncation taken out: pooled over simulations."""
    rng = np.random.default_rng(5)
    base = ladder(3, MODELS[model], stars=40, parallaxes=20)
    found: dict[str, list[np.ndarray]] = {"magnitude": [], "colour": [], "parallax": []}
    for _ in range(10):
        mock = mock_from_ladder(base, KNOWN | {"shared_photometry[sky]": 0.1}, rng)
        stars = cepheid_deviations(mock, at_the_truth(mock), rng)
        far = parallax_deviations(mock, at_the_truth(mock), rng)
        found["magnitude"] += [stars.magnitude.ravel(), far.magnitude.ravel()]
        found["parallax"].append(far.other.ravel())
        if stars.other is not None:
            found["colour"].append(stars.other.ravel())
    assert bool(found["colour"]) == (model == "free ratio")
    for name, parts in found.items():
        if parts:
            values = np.concatenate(parts)
            assert kstest(values, "norm").pvalue > 1e-3, name
            assert normal(values), name
            assert not normal(1.3 * values), name  # what it would notice


def normal(values: np.ndarray) -> bool:
    """Mean 0 and standard deviation 1 within 4 of their errors."""
    n = len(values)
    return abs(values.mean()) < 4.0 / np.sqrt(n) and abs(values.std() - 1.0) < 4.0 / np.sqrt(2 * n)


def p_values(repeats: int, draws: int) -> dict[str, np.ndarray]:
    """P-values of fits to simulations whose truth is drawn from the priors, by check."""
    base = ladder(
        3, {"priors": {"scatter": {"half_normal": 0.1}, "slope": {"normal": [-3.3, 0.2]}}}, stars=15
    )
    found: dict[str, list[float]] = {}
    for seed in range(repeats):
        rng = np.random.default_rng([3, seed])
        truth = KNOWN | {
            "scatter": abs(0.1 * rng.normal()),
            "slope": -3.3 + 0.2 * rng.normal(),
            "metallicity": -0.2 + 0.5 * rng.normal(),
            "zero_point": -5.9 + 2.0 * rng.normal(),
        }
        result = draw(mock_from_ladder(base, truth, rng), seed=seed, draws=400)
        for check in predictive_checks(result, seed=seed, draws=draws).checks:
            found.setdefault(check.about, []).append(check.p)
    return {name: np.array(values) for name, values in found.items()}


@pytest.mark.full
def test_small_p_values_are_no_more_frequent_than_they_say(in_full: bool) -> None:
    found = p_values(200 if in_full else 40, 100)
    assert len(found) >= 11
    for name, values in found.items():
        for level in (0.05, 0.2):
            allowed = level + 3.5 * np.sqrt(level * (1.0 - level) / len(values))
            assert np.mean(values <= level) <= allowed, (name, level, np.mean(values <= level))
        assert values.mean() > 0.4, name


@pytest.mark.full
def test_at_a_single_draw_they_are_uniform(in_full: bool) -> None:
    """Pivotal: one draw of the posterior against many replications (Johnson 2007)."""
    repeats = 200 if in_full else 60
    base = ladder(3, {"priors.scatter": {"half_normal": 0.1}}, stars=15)
    found: dict[str, list[float]] = {}
    for seed in range(repeats):
        rng = np.random.default_rng([4, seed])
        truth = KNOWN | {"scatter": abs(0.1 * rng.normal()), "slope": -3.3 + 0.5 * rng.normal()}
        truth["metallicity"] += 0.5 * rng.normal()
        result = draw(mock_from_ladder(base, truth, rng), seed=seed, draws=200)
        (sample,) = predictive_checks(result, seed=seed, draws=1).samples
        for about, z, statistic in statistics_of(sample):
            if "colour" in about:  # the colour belongs to one draw
                continue
            again = statistic(rng.standard_normal((400, z.shape[1])))
            found.setdefault(about, []).append(float(np.mean(again >= statistic(z))))
    for about, values in found.items():
        assert kstest(values, "uniform").pvalue > 1e-3, (about, np.histogram(values, 5)[0])


def faulty(change: Callable[[np.random.Generator, Any], None], **more: Any) -> Checks:
    """Checks of a fit to data with a fault planted in the table."""
    rng = np.random.default_rng(9)
    made = tables(6, 80)
    change(rng, made["cepheids"])
    found = build_ladder(choices(), made).change(more)
    return predictive_checks(draw(found, seed=1, draws=1000))


def _shift(table: Any, shift: Any) -> None:
    for band in ("V", "I", "H"):
        table[band] = table[band] + shift


def _outliers(rng: np.random.Generator, table: Any) -> None:
    _shift(table, np.where(np.arange(len(table)) % 30 == 0, 0.9, 0.0))


def _bent(rng: np.random.Generator, table: Any) -> None:
    _shift(table, 1.2 * (np.log10(table["P"]) - 1.2) ** 2)


def _wide_at_long_periods(rng: np.random.Generator, table: Any) -> None:
    wide = np.clip(0.6 * (np.log10(table["P"]) - 1.1), 0.0, None)
    _shift(table, wide * rng.normal(size=len(table)))


def _wide_in_one_host(rng: np.random.Generator, table: Any) -> None:
    _shift(table, 0.25 * (table["Galaxy"] == "Q07") * rng.normal(size=len(table)))


def _slope_of_one_host(rng: np.random.Generator, table: Any) -> None:
    _shift(table, 0.5 * (table["Galaxy"] == "Q07") * (np.log10(table["P"]) - 1.2))


def _wide_with_metals(rng: np.random.Generator, table: Any) -> None:
    wide = np.clip(1.5 * (table["OH"] - 8.7), 0.0, None)
    _shift(table, wide * rng.normal(size=len(table)))


def _dust_of_another_law(rng: np.random.Generator, table: Any) -> None:
    table["H"] = table["H"] + 0.5 * (table["V"] - table["I"])


def _errors_too_small(rng: np.random.Generator, table: Any) -> None:
    for band in ("V", "I", "H"):
        table[f"e_{band}"] = 0.1 * table[f"e_{band}"] ** 0.0 * rng.uniform(0.05, 2.0, len(table))


def nothing(rng: np.random.Generator, table: Any) -> None:
    del rng, table


PLANTED = [
    (_outliers, "distribution"),
    (_outliers, "largest deviation"),
    (_bent, "bend with period"),
    (_wide_at_long_periods, "scatter with period"),
    (_wide_in_one_host, "scatter by host"),
    (_slope_of_one_host, "slope by host"),
    (_wide_with_metals, "scatter with metallicity"),
    (_dust_of_another_law, "trend with colour"),
    (_errors_too_small, "scatter with stated error"),
]


@pytest.mark.parametrize(
    ("fault", "about"), PLANTED, ids=lambda value: getattr(value, "__name__", value)
)
def test_planted_faults_are_caught(fault: Any, about: str) -> None:
    caught = faulty(fault).table().set_index("about")["p"]
    assert caught[about] <= 0.01, caught


def test_far_hosts_with_more_scatter_are_caught() -> None:
    found = faulty(_wide_in_one_host).table().set_index("about")["p"]
    assert found["scatter with distance"] <= 0.01


def test_nothing_is_caught_where_nothing_is_planted() -> None:
    found = faulty(nothing)
    assert found.smallest.p > 0.02, str(found)


def test_noise_that_colour_and_index_share_is_no_trend() -> None:
    """The measured colour itself would trend with the index, whose noise holds its own."""
    rng, trends = np.random.default_rng(2), []
    base = ladder(3, {}, stars=60)
    for _ in range(10):
        mock = mock_from_ladder(
            ladder(3, MODELS["free ratio"], stars=60), KNOWN | {"intrinsic_colour_term": 0.0}, rng
        )
        plain = mock.change({"relation.reddening": "fixed"})
        at = at_the_truth(plain)
        found = cepheid_deviations(plain, at, rng)
        light = plain.cepheids.photometry
        for colour in (found.colour[0], light.colour):
            x = colour - colour.mean()
            trends.append(found.magnitude[0] @ x / np.sqrt(x @ x))
    cleared, raw = np.array(trends).reshape(-1, 2).T
    assert abs(cleared.mean()) < 4.0 / np.sqrt(10)
    assert raw.mean() < -1.5
    assert base.cepheids is not None


def test_the_sample_has_every_kind_of_check_and_the_words_name_the_smallest() -> None:
    result = draw(lf.read_ladder(sample_ladder()), seed=1, draws=500)
    found = predictive_checks(result, draws=200)
    kinds = set(found.table()["sample"])
    assert kinds == {"Cepheids", "parallax stars", "parallaxes", "supernovae in hosts", "expansion"}
    assert found.smallest.p > 0.005
    words = str(found)
    assert len(words.splitlines()) == len(found.checks) + 1  # none hidden
    assert f"smallest of {len(found.checks)}: p = {found.smallest.p:.3f}" in words
    assert found.table().equals(predictive_checks(result, draws=200).table())  # same seed


def test_what_is_not_checked_is_said() -> None:
    plain = ladder(3, {"cepheids.magnitude.errors": {"total": "e_H"}}, stars=12)
    found = predictive_checks(draw(plain, seed=1, draws=200), draws=50)
    assert "colours of Cepheids" in found.left_out
    assert "colours of Cepheids: no checks" in str(found)
    assert not any("colour" in check.about for check in found.checks)
