"""A free ratio of absorption: densities written out, samplers, notes and refusals."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from photometry_ladders import INDICES, dense, ladder, points
from scipy.stats import multivariate_normal, norm

from ladderfit.errors import InputError
from ladderfit.ladder import Ladder
from ladderfit.posterior.joint import posterior

TREATMENTS = ("intrinsic relation", "one population", "in the variance")


def free(how: str, **more: Any) -> dict[str, Any]:
    return {"relation.reddening": {"colours": how}, **more}


def faults(found: Ladder, seed: int = 5) -> np.ndarray:
    """Log density less the one written out, the priors of phi taken off, relative to its size."""
    joint = posterior(found)
    places = points(found, seed)
    z = np.stack([joint.coordinates(place) for place in places])
    fast = joint.log_density(z) - joint.split.log_prior(z)
    slow = np.array([dense(found, place) for place in places])
    return np.abs(fast - slow) / np.abs(slow)


@pytest.mark.parametrize("index", INDICES)
@pytest.mark.parametrize("how", TREATMENTS)
def test_density_is_the_one_written_out(how: str, index: str) -> None:
    assert faults(ladder(3, free(how), index=index)).max() < 1e-8


def test_variances_of_an_index_come_from_its_bands() -> None:
    """W = I - R (V - I): the shared band counts once, with the sum of its weights."""
    found = ladder(3, free("in the variance"), index="band in the colour")
    light, ratio = found.cepheids.photometry, 1.3
    table = found.table("cepheids")
    e_v, e_i = (np.asarray(table.columns[f"e_{b}"].values, float) for b in "VI")
    expected = ((1.0 + ratio) * e_i) ** 2 + (ratio * e_v) ** 2
    own = light.band_variance - 2.0 * ratio * light.covariance + ratio**2 * light.colour_variance
    np.testing.assert_allclose(own, expected, rtol=1e-12)


def test_a_wrong_covariance_is_found() -> None:
    """Negative control: the same comparison at another ratio's variances fails."""
    found = ladder(3, free("one population"), index="band in the colour")
    (place,) = points(found, 5, 1)
    joint = posterior(found)
    z = joint.coordinates(place)[None]
    wrong = dense(found, {**place, "reddening_spread": 1.01 * place["reddening_spread"]})
    fast = joint.log_density(z) - joint.split.log_prior(z)
    assert abs(fast[0] - wrong) > 1e-5 * abs(wrong)


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"cepheids.magnitude.errors": {"total": "e_H"}}, "the error of the whole index alone"),
        (
            {
                "cepheids.magnitude": {
                    "band": "H",
                    "bands": {"H": "H"},
                    "errors": {"H": "e_H"},
                }
            },
            "the one band H",
        ),
        ({"relation.reddening": {"colours": "guessed"}}, "guessed"),
    ],
)
def test_what_it_needs(changes: dict[str, Any], words: str) -> None:
    with pytest.raises(InputError) as caught:
        ladder(3, {**free("one population"), **changes})
    assert words in str(caught.value)
    assert len(caught.value.problems) == 1


# --- stars with parallaxes -------------------------------------------------------------


def on_a_grid(found: Ladder, value: dict[str, float]) -> float:
    """Log density of the parallax stars: the modulus on a grid, magnitude and colour jointly."""
    stars, light = found.parallax_stars, found.parallax_stars.photometry
    treatment, total = found.choices.relation.reddening, 0.0
    ratio = value["reddening_ratio"]
    for i in range(len(stars)):
        x = stars.log_period[i] - 1.0
        light_mean = value["zero_point"] + value["slope"] * x
        light_mean += value["metallicity"] * (stars.metallicity[i] - 8.69)
        far = 10.0 - 5.0 * np.log10(stars.parallax[i])
        mu = np.linspace(far - 6.0, far + 6.0, 60_001)
        true = 10.0 ** (2.0 - 0.2 * mu) + value["parallax_offset"]
        log = norm.logpdf(stars.parallax[i], true, stars.parallax_error[i]) - np.log(50.0)
        if treatment.population:
            tau2 = value["intrinsic_colour_scatter"] ** 2 if treatment.intrinsic else 0.0
            own = ratio + (value["intrinsic_colour_term"] if treatment.intrinsic else 0.0)
            dust = value["parallax_reddening_spread"] ** 2
            mean_colour = value["parallax_colour"] + value["intrinsic_colour_slope"] * x
            covariance = np.array(
                [
                    [
                        light.band_variance[i]
                        + value["scatter"] ** 2
                        + own**2 * tau2
                        + ratio**2 * dust,
                        light.covariance[i] + own * tau2 + ratio * dust,
                    ],
                    [0.0, light.colour_variance[i] + tau2 + dust],
                ]
            )
            covariance[1, 0] = covariance[0, 1]
            off = np.stack(
                [
                    light.band[i] - mu - light_mean - ratio * mean_colour,
                    np.full(len(mu), light.colour[i] - mean_colour),
                ],
                axis=1,
            )
            log = log + multivariate_normal(np.zeros(2), covariance).logpdf(off)
        else:
            variance = light.band_variance[i] - 2.0 * ratio * light.covariance[i]
            variance += ratio**2 * light.colour_variance[i] + value["scatter"] ** 2
            index = light.band[i] - ratio * light.colour[i]
            log = log + norm.logpdf(index, mu + light_mean, np.sqrt(variance))
        top = log.max()
        total += top + np.log(np.trapezoid(np.exp(log - top), mu))
    return total


@pytest.mark.parametrize("index", ["apart", "band in the colour"])
@pytest.mark.parametrize("how", TREATMENTS)
def test_parallax_stars_have_the_density_on_a_grid(how: str, index: str) -> None:
    found = ladder(3, free(how), index=index, parallaxes=6)
    joint = posterior(found)
    places = points(found, 5)
    z = np.stack([joint.coordinates(place) for place in places])
    fast = joint.log_density(z) - joint.split.log_prior(z)
    slow = np.array([dense(found, place) + on_a_grid(found, place) for place in places])
    np.testing.assert_allclose(fast - fast[0], slow - slow[0], rtol=1e-8, atol=2e-7)
    alone = joint.log_parallaxes(z).sum(axis=1)
    expected = np.array([on_a_grid(found, place) for place in places])
    np.testing.assert_allclose(alone, expected, rtol=1e-8)
