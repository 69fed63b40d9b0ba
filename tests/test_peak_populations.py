"""Width and colour integrated over populations, against integrals written out and summed."""

from __future__ import annotations

import numpy as np
import pytest
from peak_ladders import (
    EVERYTHING,
    RATE,
    TRIPP,
    ladder_with,
    log_marginal,
    log_on_a_grid,
    parts_with,
)
from test_covariance_posterior import correlated
from test_log_density import log_prior_of_phi, prior_draws

from ladderfit.kernels.wide import LowRankCovariance
from ladderfit.ladder import Ladder, build_ladder
from ladderfit.physics.expansion import distance_term, peculiar_variance
from ladderfit.posterior.joint import Posterior, posterior
from ladderfit.posterior.populations import PopulationBlock

FREE_CORRELATION = {"priors.shape_colour_correlation": {"uniform": [-0.95, 0.95]}}


def phi_values(joint: Posterior, z: np.ndarray) -> list[dict[str, float]]:
    """Values of phi and of what is fixed, one mapping per row."""
    columns = {c.name: c.natural(z[:, i]) for i, c in enumerate(joint.split.phi)}
    columns |= {name: np.full(len(z), value) for name, value in joint.split.fixed.items()}
    return [{name: float(column[i]) for name, column in columns.items()} for i in range(len(z))]


def draws_of_phi(joint: Posterior, n: int = 12) -> np.ndarray:
    """As `prior_draws`, but a population of no spread only beside one that has some."""
    return prior_draws(joint, np.random.default_rng(11), n)


def agree(ladder: Ladder, n: int = 12) -> None:
    joint = posterior(ladder)
    z = draws_of_phi(joint, n)
    found = joint.log_density(z) - joint.log_parallaxes(z).sum(axis=1) - log_prior_of_phi(joint, z)
    expected = [log_marginal(ladder, values) for values in phi_values(joint, z)]
    np.testing.assert_allclose(found, expected, rtol=1e-9, atol=1e-7)  # what tables may err by


@pytest.mark.parametrize("name", ["flow", "no Cepheids", "up to the peaks", "expansion alone"])
@pytest.mark.parametrize("relation", [TRIPP, RATE, EVERYTHING], ids=["Tripp", "rate", "all"])
def test_populations_equal_the_covariance_of_everything_measured(
    name: str, relation: dict[str, object]
) -> None:
    ladder = ladder_with(name, relation)
    agree(ladder)


@pytest.mark.parametrize(
    "change",
    [
        FREE_CORRELATION,
        {"supernovae.scatter": "apart"},
        {"peak_relation.host_mass": {"step": 10.3, "smoothing": 0.2}},
        {"peak_relation.colour.reference": 0.05},
        {"priors.beta": {"fixed": 3.1}, "priors.width_spread": {"fixed": 0.9}},
        {"priors.peak_magnitude": {"uniform": [-21.0, -18.0]}},
        {"priors.colour_mean": {"uniform": [-0.5, 0.5]}},
        {"peak_relation.colour": "none"},
    ],
    ids=lambda change: next(iter(change)),
)
def test_choices_that_touch_the_populations(change: dict[str, object]) -> None:
    agree(ladder_with("flow", EVERYTHING).change(change))


@pytest.mark.parametrize("scatter", ["common", "apart"])
@pytest.mark.parametrize("adds", [True, False])
def test_with_a_full_covariance(scatter: str, adds: bool) -> None:
    choices, tables = parts_with("flow", EVERYTHING)
    n = len(tables["supernovae"]) + len(tables["expansion"])
    choices["supernovae"] |= {"covariance": {"adds": adds}, "scatter": scatter}
    matrix = correlated(n, 0.2)
    agree(build_ladder(choices, tables | {"supernovae.covariance": matrix}))


@pytest.mark.parametrize("scatter", ["common", "apart"])
def test_with_a_covariance_of_few_patterns(scatter: str) -> None:
    choices, tables = parts_with("flow", EVERYTHING)
    n = len(tables["supernovae"]) + len(tables["expansion"])
    choices["supernovae"] |= {"covariance": {"adds": True}, "scatter": scatter}
    patterns = 0.1 * np.random.default_rng(3).normal(size=(n, 3))
    matrix = patterns @ patterns.T
    ladder = build_ladder(choices, tables | {"supernovae.covariance": matrix})
    (block,) = [b for b in posterior(ladder).blocks if isinstance(b, PopulationBlock)]
    assert isinstance(block.shared, LowRankCovariance)
    agree(ladder)


def test_what_was_found_out_about_a_covariance_is_kept() -> None:
    choices, tables = parts_with("flow", TRIPP)
    n = len(tables["supernovae"]) + len(tables["expansion"])
    choices["supernovae"] |= {"covariance": {"adds": True}}
    ladder = build_ladder(choices, tables | {"supernovae.covariance": correlated(n, 0.1)})
    first = posterior(ladder)
    again = posterior(ladder.change({"peak_relation.host_mass": {}}), first)
    shared = [b.shared for j in (first, again) for b in j.blocks if isinstance(b, PopulationBlock)]
    assert len(shared) == 2
    assert shared[0] is shared[1]


def test_with_a_covariance_of_the_expansion_alone() -> None:
    choices, tables = parts_with("flow", TRIPP)
    choices["expansion"]["covariance"] = {"adds": True}
    ladder = build_ladder(
        choices, tables | {"expansion.covariance": correlated(len(tables["expansion"]), 0.1)}
    )
    assert posterior(ladder).constant.coupling is None  # hosts stay independent
    agree(ladder)


def test_a_diagonal_covariance_changes_nothing() -> None:
    choices, tables = parts_with("flow", TRIPP)
    plain = build_ladder(choices, tables)
    joint = posterior(plain)
    z = draws_of_phi(joint)
    tables["expansion"]["e_mB"] = np.hypot(tables["expansion"]["e_mB"], 0.05)
    wider = posterior(build_ladder(choices, tables)).log_density(z)
    tables["expansion"]["e_mB"] = np.sqrt(tables["expansion"]["e_mB"] ** 2 - 0.05**2)
    choices["expansion"]["covariance"] = {"adds": True}
    tiny = 1e-12 * np.ones((24, 24))  # correlated, if only just: takes the dense way
    matrix = 0.05**2 * np.eye(24) + tiny
    dense = posterior(build_ladder(choices, tables | {"expansion.covariance": matrix}))
    np.testing.assert_allclose(dense.log_density(z), wider, rtol=1e-8, atol=1e-7)


@pytest.mark.parametrize(
    "wrong",
    [
        {"supernovae.columns.peak_width_covariance": None},
        {"expansion.columns.width_colour_covariance": None},
        {"peak_relation.width.reference": 0.02},
        {"peak_relation.host_mass.step": 10.2},
        {"priors.colour_mean": {"normal": [0.0, 0.301]}},
    ],
    ids=lambda wrong: next(iter(wrong)),
)
def test_a_small_mistake_would_be_seen(wrong: dict[str, object]) -> None:
    """The negative control: each change is far above the tolerance."""
    ladder = ladder_with("flow", EVERYTHING)
    joint = posterior(ladder)
    z = draws_of_phi(joint, 5)
    found = joint.log_density(z) - log_prior_of_phi(joint, z)
    mistaken = ladder.change(wrong)
    expected = [log_marginal(mistaken, values) for values in phi_values(joint, z)]
    assert np.all(np.abs(found - expected) > 1e-5)


def test_integral_over_true_width_and_colour_summed_on_a_grid() -> None:
    """Nothing Gaussian is used: every true width and colour of a fine grid is summed."""
    ladder, held = known_expansion("TRIPP")
    joint = posterior(ladder)
    rng = np.random.default_rng(5)
    names = joint.split.phi_names
    typical = {
        "alpha": rng.normal(0.14, 0.1, 3),
        "beta": rng.normal(3.1, 0.5, 3),
        "width_spread[expansion]": rng.uniform(0.7, 1.2, 3),
        "colour_spread[expansion]": rng.uniform(0.07, 0.12, 3),
        "shape_colour_correlation[expansion]": rng.uniform(-0.6, 0.6, 3),
        "peak_scatter": rng.uniform(0.05, 0.2, 3),
    }
    assert set(typical) == set(names)
    z = np.array([joint.coordinates({n: v[i] for n, v in typical.items()}) for i in range(3)])
    found = joint.log_density(z) - log_prior_of_phi(joint, z)
    expected = [sum_over_grids(ladder, values | held, 0.0) for values in phi_values(joint, z)]
    np.testing.assert_allclose(found, expected, rtol=0.0, atol=1e-6)


@pytest.mark.parametrize("size", [0.5, 0.05, 0.0])
def test_a_square_is_integrated_to_its_first_two_moments(size: float) -> None:
    """What is neglected is the skewness, which grows in proportion to the square's coefficient."""
    ladder, held = known_expansion("RATE")
    joint = posterior(ladder)
    typical = {
        "decline_slope": 0.4,
        "decline_curvature": size,
        "beta": 0.3,
        "decline_rate_mean[expansion]": 0.02,
        "colour_mean[expansion]": 0.01,
        "decline_rate_spread[expansion]": 0.15,
        "colour_spread[expansion]": 0.1,
        "shape_colour_correlation[expansion]": 0.2,
        "peak_scatter": 0.12,
    }
    z = joint.coordinates(typical)[None]
    found = float(joint.log_density(z)[0] - log_prior_of_phi(joint, z)[0])
    (values,) = phi_values(joint, z)
    expected = sum_over_grids(ladder, values | held, size)
    assert abs(found - expected) < 0.05 * size + 1e-6  # of 24 supernovae together


def known_expansion(kind: str) -> tuple[Ladder, dict[str, float]]:
    """An expansion of which all but phi is known."""
    relation = {"TRIPP": TRIPP, "RATE": {"decline_rate": {"quadratic": True}, "colour": {}}}[kind]
    held = {"peak_magnitude": -19.27, "hubble_constant": 71.0}
    shape = "width" if kind == "TRIPP" else "decline_rate"
    means = {"colour_mean": 0.01} | ({f"{shape}_mean": 0.2} if kind == "TRIPP" else {})
    fixed = {f"priors.{name}": {"fixed": value} for name, value in (held | means).items()}
    ladder = ladder_with("expansion alone", relation).change(fixed | FREE_CORRELATION)
    return ladder, held | {f"{name}[expansion]": value for name, value in means.items()}


def sum_over_grids(ladder: Ladder, values: dict[str, float], square: float) -> float:
    """Log density of all supernovae in the expansion, one grid for each."""
    flow, inputs = ladder.flow, ladder.flow.inputs.values
    shape = "width" if "width" in inputs else "decline_rate"
    slope = -values["alpha"] if shape == "width" else values["decline_slope"]
    level = distance_term(flow.redshift, flow.redshift_heliocentric, -0.55, 1.0)
    level = level + values["peak_magnitude"] - 5.0 * np.log10(values["hubble_constant"])
    own = flow.variance + peculiar_variance(flow.redshift, 250.0) + values["peak_scatter"] ** 2
    reference = getattr(ladder.choices.peak_relation, shape).reference
    mean = np.array([values[f"{shape}_mean[expansion]"], values["colour_mean[expansion]"]])
    spread = [values[f"{name}_spread[expansion]"] for name in (shape, "colour")]
    population = np.diag(np.square(spread))
    rho = values["shape_colour_correlation[expansion]"]
    population[0, 1] = population[1, 0] = rho * spread[0] * spread[1]
    total = 0.0
    for i in range(len(flow)):
        mw, mc = inputs[f"peak_{shape}_covariance"][i], inputs["peak_colour_covariance"][i]
        wc = inputs[f"{shape}_colour_covariance"][i]
        ww, cc = inputs[f"{shape}_error"][i] ** 2, inputs["colour_error"][i] ** 2
        errors = np.array([[own[i], mw, mc], [mw, ww, wc], [mc, wc, cc]])
        measured = np.array([flow.magnitude[i], inputs[shape][i] - reference, inputs["colour"][i]])

        def model(w: np.ndarray, c: np.ndarray, i: int = i) -> np.ndarray:
            return level[i] + slope * w + square * w**2 + values["beta"] * c

        total += log_on_a_grid(measured, errors, mean, population, model)
    return total
