"""The log density of phi against densities written out object by object.

The Gaussian part is held against the covariance of the data written out in host
moduli (`brute_force.marginal`), the parallax stars against a dense grid, and both
against the density of all unknowns together.
"""

from __future__ import annotations

import numpy as np
import pytest
from brute_force import (
    PER_MAG,
    Written,
    conditional,
    in_magnitudes,
    log_prior,
    marginal,
    tilt_and_norm,
    written,
)
from oracles import log_parallax_integral
from scipy import stats
from small_ladders import SMALL, small_ladder

from ladderfit.posterior.joint import Posterior, posterior
from ladderfit.priors import HalfNormal, LogNormal, Normal, Prior, Uniform

PARALLAXES = ("faint parallaxes", "parallaxes", "uniform in volume", "fixed slope")
TABULATED = 3e-7  # of the summed log density: what tables of star sums may err by


def prior_draws(joint: Posterior, rng: np.random.Generator, n: int) -> np.ndarray:
    """Draws of phi from its prior, in coordinates, some with scatters of zero.

    Not so the scatter of velocities: written out with variances of 1e-6 beside a
    prior's 1e6, the covariance itself would lose the digits that are compared.
    """
    z = np.empty((n, joint.dimension))
    for place, coordinate in enumerate(joint.split.phi):
        z[:, place] = [coordinate.coordinate(v) for v in coordinate.prior.draw(rng, n)]
        if coordinate.kind == "folded" and coordinate.name != "velocity_scatter":
            z[rng.uniform(size=n) < 0.1, place] = 0.0
    return z


def values_at(joint: Posterior, whole: Written, z: np.ndarray) -> list[dict[str, float]]:
    """Values of phi, one mapping per row, as `marginal` takes them."""
    columns = {}
    for place, coordinate in enumerate(joint.split.phi):
        value = coordinate.natural(z[:, place])
        if in_magnitudes(whole.ladder, coordinate.name):
            value = 5.0 * np.log10(value)
        columns[coordinate.name] = value
    for name, value in joint.split.fixed.items():
        columns[name] = np.full(len(z), value)
    return [{name: float(column[i]) for name, column in columns.items()} for i in range(len(z))]


def log_prior_of_phi(joint: Posterior, z: np.ndarray) -> np.ndarray:
    """With the Jacobian of each coordinate."""
    total = np.zeros(len(z))
    for place, coordinate in enumerate(joint.split.phi):
        x = coordinate.natural(z[:, place])
        total += log_prior(coordinate.prior, x)
        if coordinate.kind == "bounded":
            low, high = coordinate.prior.bounds
            total += np.log((x - low) * (high - x) / (high - low))
        if coordinate.kind == "logarithmic":
            total += np.log(PER_MAG * x)
    return total


# --- the Gaussian part -------------------------------------------------------------------


@pytest.mark.parametrize("name", SMALL)
def test_theta_equals_the_covariance_written_out(name: str) -> None:
    ladder = small_ladder(name)
    joint, whole = posterior(ladder), written(ladder)
    z = prior_draws(joint, np.random.default_rng(11), 20)
    found = joint.log_density(z) - joint.log_parallaxes(z).sum(axis=1)
    expected = log_prior_of_phi(joint, z)
    expected += [marginal(whole, values) for values in values_at(joint, whole, z)]
    few = ladder.cepheids is None or len(ladder.cepheids) < 64
    np.testing.assert_allclose(found, expected, rtol=1e-9, atol=1e-8 if few else TABULATED)


@pytest.mark.parametrize(
    "wrong",
    [
        {"anchors.geometric.Tavin.error": 0.026},
        {"anchors.geometric.Meril.use": False},
        {"hosts.distance_prior": "uniform in volume"},
        {"relation.pivot": 10.1},
        {"expansion.peculiar_velocity": 260.0},
        {"expansion.q0": -0.5},
        {"priors.metallicity": {"normal": [-0.2, 0.51]}},
    ],
    ids=lambda wrong: next(iter(wrong)),
)
def test_a_small_mistake_would_be_seen(wrong: dict[str, object]) -> None:
    """The negative control: each change is far above the tolerance."""
    ladder = small_ladder("flow")
    joint, mistaken = posterior(ladder), written(ladder.change(wrong))
    z = prior_draws(joint, np.random.default_rng(11), 5)
    found = joint.log_density(z) - log_prior_of_phi(joint, z)
    expected = [marginal(mistaken, values) for values in values_at(joint, mistaken, z)]
    assert np.all(np.abs(found - expected) > 1e-4)


@pytest.mark.parametrize("name", ["one anchor", "up to the peaks", "flow", "no Cepheids"])
def test_equals_the_density_of_all_unknowns_over_the_conditional(name: str) -> None:
    """p(phi) = p(phi, theta) / p(theta | phi) at any theta: the target of the long sampling."""
    ladder = small_ladder(name)
    joint, whole = posterior(ladder), written(ladder)
    rng = np.random.default_rng(12)
    z = prior_draws(joint, rng, 10)
    k = len(whole.linear)
    for row, values in zip(z, values_at(joint, whole, z), strict=True):
        mean, covariance = conditional(whole, values)
        # held near the mean, where the bounds of the moduli are far
        x = np.empty((1, len(whole.names)))
        x[0, :k] = rng.multivariate_normal(mean, covariance, method="cholesky")
        x[0, k:] = [values[other] for other in whole.others]
        theta = stats.multivariate_normal(mean, covariance).logpdf(x[0, :k])
        expected = whole.log_density(x)[0][0] - theta
        assert joint.log_density(row[None])[0] == pytest.approx(expected, rel=1e-8, abs=1e-7)


@pytest.mark.parametrize("name", ["up to the peaks", "flow", "hosts in volume", "no Cepheids"])
def test_draws_of_theta_have_the_conditional_mean_and_covariance(name: str) -> None:
    """Coefficients and host moduli given phi, against dense linear algebra."""
    ladder, size = small_ladder(name), 20_000
    joint, whole = posterior(ladder), written(ladder)
    z = np.array([c.coordinate(0.1) for c in joint.split.phi])
    values = values_at(joint, whole, z[None])[0]
    mean, covariance = conditional(whole, values)
    draws = joint.draw(np.tile(z, (size, 1)), np.random.default_rng(13))
    found = np.stack(
        [
            5.0 * np.log10(draws[name]) if in_magnitudes(ladder, name) else draws[name]
            for name in whole.linear
        ],
        axis=1,
    )
    whitened = np.linalg.solve(np.linalg.cholesky(covariance), (found - mean).T)
    assert np.all(np.abs(whitened.mean(axis=1)) < 5.0 / np.sqrt(size))
    gap = np.cov(whitened) - np.eye(len(mean))
    assert np.max(np.abs(gap)) < 5.0 * np.sqrt(2.0 / size)


# --- parallax stars ----------------------------------------------------------------------


@pytest.mark.full
@pytest.mark.parametrize("name", PARALLAXES)
def test_parallax_terms_equal_a_dense_grid(name: str, in_full: bool) -> None:
    """2,000 prior draws in all; every star of each in full, one of each otherwise."""
    ladder = small_ladder(name).change({"priors.scatter": {"uniform": [0.0, 1.0]}})
    joint, whole = posterior(ladder), written(ladder)
    rng = np.random.default_rng(14)
    z = prior_draws(joint, rng, 2000 // len(PARALLAXES))
    place = joint.split.phi_names.index("scatter")
    z[rng.uniform(size=len(z)) < 0.2, place] = -700.0  # a scatter of zero
    stars, section = ladder.parallax_stars, ladder.choices.anchors.parallaxes
    found, values = joint.log_parallaxes(z), values_at(joint, whole, z)
    assert np.isfinite(found).all()
    tilt, log_norm = tilt_and_norm(section.distance_prior)
    rows = star_rows(whole)
    worst = 0.0
    for draw, at in enumerate(values):
        for i in range(len(stars)) if in_full else (draw % len(stars),):
            coefficients, y, variance = rows[i]
            a = y - sum(at[name] * column for name, column in coefficients.items())
            plx = stars.parallax[i] - at["parallax_offset"]
            expected = log_parallax_integral(
                a,
                variance + at["scatter"] ** 2,
                plx,
                stars.parallax_error[i],
                lambda mu: tilt * mu,
                points=20_001,
            )
            gap = abs(found[draw, i] - (expected - log_norm))
            worst = max(worst, gap / (1e-6 + 1e-12 * abs(expected)))
    assert worst < 1.0


def star_rows(whole: Written) -> list[tuple[dict[str, float], float, float]]:
    """Of each parallax star: relation's columns, magnitude less fixed terms, variance."""
    found = []
    for i in range(len(whole.ladder.parallax_stars)):
        row = int(np.flatnonzero(whole.A[:, whole.linear.index(f"star[{i}]")])[0])
        columns = {
            name: whole.A[row, place]
            for place, name in enumerate(whole.linear)
            if whole.A[row, place] != 0.0 and not name.startswith("star[")
        }
        found.append((columns, whole.y[row], whole.variance[row]))
    return found


def test_the_stars_of_that_test_cover_what_it_promises() -> None:
    stars = small_ladder("faint parallaxes").parallax_stars
    signal = stars.parallax / stars.parallax_error
    assert signal.max() >= 200.0 * (1.0 - 1e-12)
    assert signal[signal > 0.0].min() <= 0.5 * (1.0 + 1e-12)
    assert signal.min() < -2.0


# --- everywhere --------------------------------------------------------------------------


@pytest.mark.parametrize("name", SMALL)
@pytest.mark.parametrize("width", [1.0, 6.0])
def test_finite_everywhere(name: str, width: float) -> None:
    """Under draws of the prior and of one six times as wide."""
    joint = posterior(small_ladder(name))
    rng = np.random.default_rng(15)
    start = np.array([c.start for c in joint.split.phi])
    scale = np.array([c.scale for c in joint.split.phi])
    z = start + width * scale * rng.standard_normal((200, joint.dimension))
    assert np.isfinite(joint.log_density(z)).all()


@pytest.mark.parametrize(
    ("prior", "reference"),
    [
        (Normal(1.0, 0.3), stats.norm(1.0, 0.3)),
        (HalfNormal(0.7), stats.halfnorm(scale=0.7)),
        (Uniform(-1.0, 1.5), stats.uniform(-1.0, 2.5)),
        (LogNormal(2.0, 1.5), stats.lognorm(1.5 * PER_MAG, scale=2.0)),
    ],
    ids=["normal", "half-normal", "uniform", "log-normal"],
)
def test_priors_are_those_of_scipy(prior: Prior, reference: object) -> None:
    x = np.linspace(-2.0, 4.0, 61)
    expected = reference.logpdf(x)
    np.testing.assert_allclose(prior.log_density(x), expected, rtol=1e-12)
    np.testing.assert_allclose(log_prior(prior, x), expected, rtol=1e-12)
    assert prior.sd == pytest.approx(reference.std(), rel=1e-9)
