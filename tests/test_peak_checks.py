"""Checks of supernovae whose peaks have terms: exact, uniform, and not blind to selections."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from peak_ladders import EVERYTHING, RATE, SIGNS, TRIPP, ladder_with
from peak_surveys import LIGHT, NARROW, again, survey
from scipy.stats import kstest, norm

from ladderfit.checks.predictive import Checks, p_value, predictive_checks
from ladderfit.checks.statistics import ALONE, lower_end, statistics_of, upper_end
from ladderfit.ladder import Ladder
from ladderfit.peak_terms import Supernovae
from ladderfit.physics.expansion import peculiar_variance, term_of
from ladderfit.posterior.peak_deviations import peak_deviations
from ladderfit.sampling.run import draw

pytestmark = pytest.mark.timeout(1500)  # at full length

GROUPS = ("hosts", "expansion")
SAMPLES = ["supernovae in hosts", "expansion"]
INPUTS = [f"{name}, {group}" for name in ("colours", "widths") for group in GROUPS]


def values_of(ladder: Ladder, rng: np.random.Generator) -> dict[str, np.ndarray]:
    """One set of plausible numbers for everything, as a single draw."""
    found = {
        "peak_magnitude": -19.3 + 0.1 * rng.normal(),
        "hubble_constant": 70.0 + rng.normal(),
        "mass_step": -0.06,
        "alpha": 0.14,
        "beta": 3.1,
        "decline_slope": 0.8,
        "peak_scatter": 0.1,
    }
    for host in ladder.hosts:
        found[f"modulus[{host}]"] = 30.0 + rng.normal()
    for group in GROUPS:
        for name in ("width", "decline_rate", "colour"):
            found[f"{name}_mean[{group}]"] = 0.1 * rng.normal()
            found[f"{name}_spread[{group}]"] = rng.uniform(0.1, 0.5)
        found[f"shape_colour_correlation[{group}]"] = rng.uniform(-0.7, 0.7)
    for name in ladder.choices.peak_relation.surveys:
        found[f"survey_offset[{name}]"] = 0.1 * rng.normal()
    return {name: np.array([value]) for name, value in found.items()}


def written_out(
    ladder: Ladder, group: str, sample: Supernovae, at: dict[str, np.ndarray], i: int
) -> np.ndarray:
    """(colour, shape, peak) of one supernova whitened by a Cholesky factor of their covariance."""
    value, inputs = {name: float(v[0]) for name, v in at.items()}, sample.inputs.values
    relation = ladder.choices.peak_relation
    shape = "width" if relation.width != "none" else "decline_rate"
    names = ("colour", shape)
    of = {name: (key, sign) for key, (name, sign) in SIGNS.items()}
    a = np.array([of[name][1] * value[of[name][0]] for name in names])
    spread = [value[f"{name}_spread[{group}]"] for name in names]
    both = value[f"shape_colour_correlation[{group}]"] * spread[0] * spread[1]
    population = np.array([[spread[0] ** 2, both], [both, spread[1] ** 2]])
    mean = np.array([value[f"{name}_mean[{group}]"] for name in names])
    peak = value["peak_magnitude"]
    variance = sample.variance[i] + value["peak_scatter"] ** 2
    if group == "hosts":
        peak += value[f"modulus[{ladder.hosts[sample.host[i]]}]"]
    else:
        expansion, z = ladder.choices.expansion, sample.redshift[i : i + 1]
        peak += float(term_of(expansion, z, sample.redshift_heliocentric[i : i + 1])[0])
        peak -= 5.0 * np.log10(value["hubble_constant"])
        variance += float(peculiar_variance(z, np.array([expansion.peculiar_velocity]))[0])
    if relation.host_mass != "none":
        peak += value["mass_step"] * (0.5 if inputs["host_mass"][i] >= 10.0 else -0.5)
    for name in relation.surveys:
        peak += value[f"survey_offset[{name}]"] * float(sample.inputs.survey[i] == name)
    errors = np.zeros((3, 3))
    errors[2, 2] = variance
    for j, name in enumerate(names):
        errors[j, j] = inputs[f"{name}_error"][i] ** 2
        errors[2, j] = errors[j, 2] = inputs[f"peak_{name}_covariance"][i]
    errors[0, 1] = errors[1, 0] = inputs[f"{shape}_colour_covariance"][i]
    seen = np.vstack([np.eye(2), a])
    covariance = errors + seen @ population @ seen.T
    measured = [inputs[name][i] - relation.reference(name) for name in names]
    off = np.array([*measured, sample.magnitude[i]]) - np.array([*mean, peak + a @ mean])
    return np.linalg.solve(np.linalg.cholesky(covariance), off)


@pytest.mark.parametrize("relation", [TRIPP, EVERYTHING, RATE], ids=["Tripp", "all", "rate"])
@pytest.mark.parametrize("group", GROUPS)
def test_deviations_are_those_of_the_joint_covariance(relation: Any, group: str) -> None:
    ladder = ladder_with("flow", relation)
    at = values_of(ladder, np.random.default_rng(4))
    sample = ladder.peaks if group == "hosts" else ladder.flow
    found = peak_deviations(ladder, group, at)
    ours = np.stack([*(z[0] for z in found.inputs.values()), found.peak[0]], axis=1)
    assert next(iter(found.inputs)) == "colour"
    slow = [written_out(ladder, group, sample, at, i) for i in range(len(sample))]
    np.testing.assert_allclose(ours, slow, rtol=1e-9, atol=1e-9)


@pytest.mark.parametrize("errors", [True, False], ids=["populations", "plain columns"])
def test_deviations_are_standard_normal_at_the_truth(errors: bool) -> None:
    """And independent of each other and of the measured inputs: pooled over simulations."""
    rng, base = np.random.default_rng(6), survey(0, errors=errors, priors=NARROW)
    parts = []
    for _ in range(12):
        ladder, truth = again(base, rng)
        at = {name: np.array([value]) for name, value in truth.items()}
        for group, sample in zip(GROUPS, (ladder.peaks, ladder.flow), strict=True):
            found = peak_deviations(ladder, group, at)
            inputs = sample.inputs.values
            scaled = [inputs[n] - inputs[n].mean() for n in ("width", "colour")]
            scaled = [values / values.std() for values in scaled]
            parts.append(np.stack([found.peak[0], *(z[0] for z in found.inputs.values()), *scaled]))
            assert bool(found.inputs) == errors
    z = np.concatenate(parts, axis=1)
    deviations, n = z[:-2], z.shape[1]
    for values in deviations:
        assert kstest(values, "norm").pvalue > 1e-3
        assert kstest(1.3 * values, "norm").pvalue < 1e-3  # what it would notice
    shared = deviations @ deviations.T / n - np.eye(len(deviations))
    assert np.abs(shared).max() < 4.0 / np.sqrt(n)
    assert np.abs(z[0] @ z[-2:].T / n).max() < 4.0 / np.sqrt(n)  # of the peak with inputs


@pytest.mark.full
@pytest.mark.parametrize("errors", [True, False], ids=["populations", "plain columns"])
def test_at_a_single_draw_p_values_are_uniform(errors: bool, in_full: bool) -> None:
    """Pivotal: one draw of the posterior against many replications (Johnson 2007)."""
    found: dict[tuple[str, str], list[float]] = {}
    base = survey(1, errors=errors, hosts=10, flow=40, priors=NARROW)
    for seed in range(300 if in_full else 30):
        rng = np.random.default_rng([8, seed])
        result = draw(again(base, rng)[0], seed=seed, draws=200)
        for sample in predictive_checks(result, seed=seed, draws=1).samples:
            for about, z, statistic in statistics_of(sample):
                replicated = statistic(rng.standard_normal((400, z.shape[1])))
                p = float(np.mean(replicated >= statistic(z)))
                found.setdefault((sample.name, about), []).append(p)
    assert len(found) == (65 if errors else 31)
    for key, values in found.items():
        assert kstest(values, "uniform").pvalue > 1e-3 / len(found), (key, np.histogram(values, 5))


@pytest.mark.full
def test_small_p_values_are_no_more_frequent_than_they_say(in_full: bool) -> None:
    found: dict[tuple[str, str], list[float]] = {}
    base = survey(1, hosts=10, flow=40, priors=NARROW)
    for seed in range(200 if in_full else 8):
        result = draw(again(base, np.random.default_rng([9, seed]))[0], seed=seed, draws=200)
        for check in predictive_checks(result, seed=seed, draws=100).checks:
            found.setdefault((check.sample, check.about), []).append(check.p)
    for key, values in found.items():
        for level in (0.05, 0.2):
            allowed = level + 4.0 * np.sqrt(level * (1.0 - level) / len(values))
            assert np.mean(np.array(values) <= level) <= allowed, (key, level)
    every = np.concatenate(list(found.values()))
    assert np.mean(every <= 0.01) <= 0.01 + 0.01  # false alarms of all together
    assert every.mean() > 0.45


def _no_red(rng: np.random.Generator, near: Any, far: Any) -> Any:
    del rng
    return near, far[np.asarray(far["c"]) <= 0.05]


def _no_blue(rng: np.random.Generator, near: Any, far: Any) -> Any:
    del rng
    return near, far[np.asarray(far["c"]) >= -0.05]


def _no_narrow(rng: np.random.Generator, near: Any, far: Any) -> Any:
    del rng
    return near, far[np.asarray(far["w"]) >= -0.6]


def _bluer_far_away(rng: np.random.Generator, near: Any, far: Any) -> Any:
    del rng
    shift = -0.08 * (np.log(far["zcmb"]) - np.log(far["zcmb"]).mean())
    far["c"], far["mB"] = far["c"] + shift, far["mB"] + LIGHT.beta * shift
    return near, far


def _wide_in_small_galaxies(rng: np.random.Generator, near: Any, far: Any) -> Any:
    del rng
    shift = -0.7 * (far["logM"] - np.mean(far["logM"]))
    far["w"], far["mB"] = far["w"] + shift, far["mB"] - LIGHT.alpha * shift
    return near, far


def _wide_and_blue(rng: np.random.Generator, near: Any, far: Any) -> Any:
    """Colour and width go together, where the prior fixes their correlation at none."""
    del rng
    shift = -0.04 * far["w"]
    far["c"], far["mB"] = far["c"] + shift, far["mB"] + LIGHT.beta * shift
    return near, far


def _bent_law(rng: np.random.Generator, near: Any, far: Any) -> Any:
    del rng
    far["mB"] = far["mB"] + 12.0 * far["c"] ** 2
    return near, far


def _red_ones_scatter(rng: np.random.Generator, near: Any, far: Any) -> Any:
    wide = np.clip(4.0 * (np.asarray(far["c"]) + 0.05), 0.0, None)
    far["mB"] = far["mB"] + wide * rng.normal(size=len(far))
    return near, far


def _errors_of_colours_mean_nothing(rng: np.random.Generator, near: Any, far: Any) -> Any:
    far["e_c"] = np.where(rng.random(len(far)) < 0.5, 0.01, 0.1)
    far["cov_mc"], far["cov_wc"] = 0.0 * far["cov_mc"], 0.0 * far["cov_wc"]
    return near, far


def nothing(rng: np.random.Generator, near: Any, far: Any) -> Any:
    del rng
    return near, far


def thinned(rng: np.random.Generator, near: Any, far: Any) -> Any:
    """Half are missing, whatever their colour."""
    return near, far[rng.random(len(far)) < 0.5]


PLANTED = [
    (_no_red, "colours, expansion", "upper end"),
    (_no_red, "colours, expansion", "asymmetry"),
    (_no_blue, "colours, expansion", "lower end"),
    (_no_narrow, "widths, expansion", "lower end"),
    (_bluer_far_away, "colours, expansion", "trend with redshift"),
    (_wide_in_small_galaxies, "widths, expansion", "trend with host mass"),
    (_wide_and_blue, "widths, expansion", "trend with colour"),
    (_bent_law, "expansion", "bend with colour"),
    (_red_ones_scatter, "expansion", "scatter with colour"),
    (_errors_of_colours_mean_nothing, "colours, expansion", "scatter with stated error"),
]


def faulty(change: Any, **more: Any) -> Checks:
    found = survey(2, change=change, flow=250, **more)
    return predictive_checks(draw(found, seed=1, draws=500), draws=300)


def p_of(checks: Checks, sample: str, about: str) -> float:
    table = checks.table().set_index(["sample", "about"])["p"]
    return float(table[sample, about])


@pytest.mark.parametrize("change", dict.fromkeys(row[0] for row in PLANTED))
def test_planted_faults_are_caught(change: Any) -> None:
    found = faulty(change)
    for planted, sample, about in PLANTED:
        if planted is change:
            assert p_of(found, sample, about) <= 0.01, str(found)


@pytest.mark.parametrize("change", [nothing, thinned])
def test_what_is_no_fault_is_not_caught(change: Any) -> None:
    found = faulty(change)
    assert {c.sample for c in found.checks} == {*SAMPLES, *INPUTS}
    assert found.smallest.p > 0.005, str(found)
    assert p_of(found, "colours, expansion", "upper end") > 0.05


def test_a_cut_is_seen_at_its_own_end_alone() -> None:
    """Negative control the other way: the end that nothing was cut from."""
    red, blue = faulty(_no_red), faulty(_no_blue)
    assert p_of(red, "colours, expansion", "upper end") <= 0.01
    assert p_of(red, "colours, expansion", "lower end") > 0.01
    assert p_of(blue, "colours, expansion", "lower end") <= 0.01
    assert p_of(blue, "colours, expansion", "upper end") > 0.01


@pytest.mark.parametrize("how", ["no errors", "ignored", "in the variance"])
def test_without_populations_colours_are_given_and_a_cut_in_them_is_no_fault(how: str) -> None:
    relation = {} if how == "no errors" else {"peak_relation.errors": how}
    ladder = survey(2, change=_no_red, flow=250, errors=how != "no errors").change(relation)
    found = predictive_checks(draw(ladder, seed=1, draws=300), draws=200)
    assert {c.sample for c in found.checks} == set(SAMPLES)
    assert p_of(found, "expansion", "asymmetry") > 0.01


def test_the_ends_are_uniform_whatever_the_number() -> None:
    """The largest of n normal numbers, by its exact distribution."""
    rng = np.random.default_rng(3)
    for n in (8, 400):
        z = rng.standard_normal((2000, n))
        for end in (upper_end, lower_end):
            p = 2.0 * norm.sf(end(z))
            assert kstest(p, "uniform").pvalue > 1e-3
        assert kstest(2.0 * norm.sf(upper_end(np.minimum(z, 1.0))), "uniform").pvalue < 1e-6
    assert np.all(np.isfinite(upper_end(np.array([[50.0, 0.0], [-50.0, -40.0]]))))


def test_asymmetry_and_tails_ask_for_nothing_that_mean_and_spread_take_up() -> None:
    """To first order: He3 and He4 against small shifts and stretches; not so for a skew."""
    z = np.random.default_rng(5).standard_normal((1, 200_000))
    for name in ("asymmetry", "tails"):
        size = np.sqrt(z.size * {"asymmetry": 6.0, "tails": 24.0}[name])
        for changed in (z, z + 0.02, 1.01 * z):
            assert ALONE[name](changed)[0] / size < 4.0
    assert ALONE["asymmetry"](z + 0.02 * z**2)[0] / np.sqrt(6.0 * z.size) > 8.0
    assert ALONE["tails"](z + 0.02 * z**3)[0] / np.sqrt(24.0 * z.size) > 8.0


def test_small_p_values_are_told_finely() -> None:
    """Replications go on while few are as large."""
    rng = np.random.default_rng(1)
    seen = np.full((100, 30), 1.0)
    assert p_value(seen, ALONE["largest deviation"], rng) > 0.5
    assert p_value(4.0 * seen, ALONE["scatter"], rng) == pytest.approx(1.0 / 2001.0)
