"""A free ratio of absorption: densities written out, samplers, notes and refusals."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from photometry_ladders import INDICES, dense, ladder, points

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
