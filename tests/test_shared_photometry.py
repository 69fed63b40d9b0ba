"""Photometric errors that a host's stars share: against one covariance, and by two routes."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from photometry_ladders import dense, ladder, points

from ladderfit.errors import InputError
from ladderfit.kernels.arrow import no_moments
from ladderfit.ladder import Ladder
from ladderfit.posterior.frame import host_frame
from ladderfit.posterior.joint import posterior
from ladderfit.posterior.shared import SharedBlock, shared_block
from ladderfit.posterior.star_terms import star_terms

SKY = {"cepheids.shared": {"sky": {"loading": "sky"}}}
INPUTS = {
    "cepheids.columns.period_error": "e_P",
    "cepheids.columns.metallicity_error": "e_OH",
}
FREE = {"relation.reddening": {"colours": "intrinsic relation"}}


def faults(found: Ladder) -> np.ndarray:
    joint, places = posterior(found), points(found, 5)
    z = np.stack([joint.coordinates(place) for place in places])
    fast = joint.log_density(z) - joint.split.log_prior(z)
    slow = np.array([dense(found, place) for place in places])
    return np.abs(fast - slow) / np.abs(slow)


@pytest.mark.parametrize("stars", [7, 40])
@pytest.mark.parametrize("more", [{}, FREE], ids=["reduced", "free ratio"])
def test_density_is_the_one_written_out(more: dict[str, Any], stars: int) -> None:
    """Forty stars a host are tabulated, seven are not; with a free ratio none is."""
    found = ladder(3, SKY | more, stars=stars)
    block = posterior(found).blocks[-1]
    assert isinstance(block, SharedBlock) == (not more)
    if not more:
        assert bool(block.rows[0].tables) == (stars == 40)
    assert faults(found).max() < 1e-8


@pytest.mark.parametrize("scatter", [0.0, 0.07])
def test_a_fixed_scatter(scatter: float) -> None:
    found = ladder(3, {**SKY, "priors.scatter": {"fixed": scatter}}, stars=40)
    joint = posterior(found)
    places = [{"shared_photometry[sky]": width} for width in (0.02, 0.1, 0.3)]
    z = np.stack([joint.coordinates(place) for place in places])
    fast = joint.log_density(z) - joint.split.log_prior(z)
    slow = [dense(found, {**place, "scatter": scatter}) for place in places]
    np.testing.assert_allclose(fast, slow, rtol=1e-8)


def test_tables_over_a_range_are_as_good() -> None:
    found = ladder(3, SKY, stars=40)
    joint, places = posterior(found), points(found, 5)
    z = np.stack([joint.coordinates(place) for place in places])
    before = joint.log_density(z)
    joint.focus(z.min(axis=0), z.max(axis=0))
    assert len(joint.blocks[-1].rows[0].tables) == 2
    np.testing.assert_allclose(joint.log_density(z), before, rtol=1e-9)


def test_two_routes_to_one_number() -> None:
    """Sums from tables, two scatters, against the same stars one by one."""
    changes: dict[str, Any] = {
        **SKY,
        "groups": {"far": {"hosts": ["Q07", "Orrel"]}},
        "relation.scatter": ["far"],
    }
    found = ladder(3, changes, stars=40)
    joint = posterior(found)
    names = joint.split.coefficients
    values = {
        "scatter": np.array([0.05, 0.0]),
        "scatter[far]": np.array([0.1, 0.3]),
        "shared_photometry[sky]": np.array([0.2, 0.0]),
    }
    frame = host_frame(found, len(names))
    blocks = (
        shared_block(found, frame, found.cepheids, lambda _: 1.0),
        star_terms(found, frame, names),
    )
    sums = [no_moments(2, 3, len(names)) for _ in blocks]
    for total, block in zip(sums, blocks, strict=True):
        block.add_to(total, values.__getitem__)
    for part in ("local", "cross", "square", "constant"):
        one, two = (getattr(total, part) for total in sums)
        np.testing.assert_allclose(one, two, rtol=1e-7, atol=1e-7)


@pytest.mark.parametrize("error", [1e-9, 0.1])
def test_without_a_width_the_stars_are_independent(error: float) -> None:
    """Star by star with errors of the inputs, held against the route without shared terms."""
    shared = {"cepheids.shared": {"sky": {"loading": "sky", "error": error}}}
    plain = posterior(ladder(3, INPUTS))
    both = posterior(ladder(3, INPUTS | shared))
    places = points(plain.ladder, 5)
    z = np.stack([plain.coordinates(place) for place in places])
    gap = np.abs(both.log_density(z) / plain.log_density(z) - 1.0)
    assert gap.max() < 1e-8 if error < 0.01 else gap.min() > 1e-4


def test_only_the_hosts_named() -> None:
    some = {"cepheids.shared": {"sky": {"loading": "sky", "error": 0.1, "hosts": ["Q07"]}}}
    found = ladder(3, some)
    loads = found.cepheids.loadings[:, 0]
    inside = found.cepheids.host == found.hosts.index("Q07")
    assert (loads[inside] > 0.0).all()
    assert (loads[~inside] == 0.0).all()


@pytest.mark.parametrize(
    ("term", "words"),
    [
        ({"loading": "skies"}, "the loading of sky; did you mean 'sky'?"),
        ({"loading": "sky", "error": 0.0}, "an error above 0"),
        ({"loading": "sky", "hosts": ["Q7"]}, "'Q07'"),
    ],
)
def test_faults_in_words(term: dict[str, Any], words: str) -> None:
    with pytest.raises(InputError) as caught:
        ladder(3, {"cepheids.shared": {"sky": term}})
    assert len(caught.value.problems) == 1
    assert words in str(caught.value), str(caught.value)
