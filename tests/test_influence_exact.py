"""Objects taken out at given phi, against the posterior of the ladder built without them.

That posterior is held against dense covariances elsewhere (test_log_density.py and the
tests of every term).  At the same phi the difference of the two log densities is the
object's predictive density, and the means of the targets are those without it.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np
import pytest
import test_covariance_posterior as covariances
import test_limits as limits
from contaminated import MIXTURE, STUDENT
from peak_ladders import EVERYTHING, RATE, TRIPP, ladder_with
from photometry_ladders import ladder as in_bands
from relation_ladders import made
from set_asides import set_aside
from small_ladders import SMALL, small_ladder
from test_input_errors import CASES

from ladderfit.influence.given import Given, coordinates
from ladderfit.influence.objects import KINDS, Batch, Objects
from ladderfit.influence.rebuilding import posterior_without
from ladderfit.influence.sets import CEPHEID, HOST, NotCoveredError
from ladderfit.ladder import Ladder
from ladderfit.posterior.joint import Posterior, posterior
from ladderfit.sampling.run import draw

FREE = {"relation.reddening": {"colours": "in the variance"}}
POPULATION = {"relation.reddening": {"colours": "one population"}}
SKY = {"cepheids.shared": {"sky": {"loading": "sky"}}}
OTHERS = {
    "shared on the sky": lambda: in_bands(1, SKY, stars=4),
    "free ratio": lambda: in_bands(1, FREE, stars=4, parallaxes=3),
    "widths and colours": lambda: ladder_with("all rungs", TRIPP),
    "every term of the peaks": lambda: ladder_with("flow", EVERYTHING),
    "decline rates": lambda: ladder_with("flow", RATE),
    "inputs without errors": lambda: ladder_with("flow", TRIPP, errors=False, covariances=False),
    "a covariance": lambda: covariances.both("flow", adds=True)[0],
    "a covariance and two scatters": lambda: covariances.both(
        "all rungs", adds=False, scatter="apart"
    )[0],
    "limits": lambda: limits.limited("H", 0.1),
    "outliers as a mixture": lambda: small_ladder("flow").change(MIXTURE),
    "outliers as tails": lambda: small_ladder("anchors and parallaxes").change(STUDENT),
}


def given_draws(ladder: Ladder, size: int = 8) -> tuple[Posterior, np.ndarray]:
    joint = posterior(ladder)
    return joint, coordinates(joint, draw(ladder, draws=100), size)


def some(batches: Iterator[Batch], count: int, every: int) -> Iterator[tuple[Batch, int]]:
    """A few objects of a kind, spread over all batches."""
    seen, step = 0, max(1, every // count)
    for batch in batches:
        for number in range(len(batch.place)):
            if (seen + number) % step == 0:
                yield batch, number
        seen += len(batch.place)


def compare(ladder: Ladder, *, per_kind: int = 3, within: float = 1e-6) -> int:
    """Compare a few objects of every kind; how many were compared."""
    joint, z = given_draws(ladder)
    objects = Objects(Given(joint, z))
    compared = 0
    for kind in KINDS:
        for batch, number in some(objects.batches(kind), per_kind, objects.count(kind)):
            rest = posterior_without(joint, batch.left(number))
            if rest.split.phi_names != joint.split.phi_names:
                continue
            alone, found = Given(rest, z), batch.taken
            gain = joint.log_density(z) - rest.log_density(z)
            np.testing.assert_allclose(found.log_predictive[:, number], gain, atol=within)
            for name, mean in alone.base.items():
                np.testing.assert_allclose(
                    found.expected[name][:, number], mean, rtol=within, err_msg=f"{kind} {name}"
                )
            compared += 1
    return compared


QUICK = (
    "faint parallaxes",
    "anchors",
    "all rungs",
    "uniform in volume",
    "no Cepheids",
    "velocities",
    "fixed scatter",
    "uniform Hubble constant",
)
QUICK_CASES = ("both and their product", "groups", "anchors with a shared error", "in the variance")


@pytest.mark.full
def test_small_ladders(in_full: bool) -> None:
    for name in SMALL if in_full else QUICK:
        assert compare(small_ladder(name), per_kind=6 if in_full else 2) > 0


@pytest.mark.full
def test_errors_of_the_inputs(in_full: bool) -> None:
    for case in CASES if in_full else QUICK_CASES:
        assert compare(made(3, stars=5).built(CASES[case]), per_kind=2) >= 5


@pytest.mark.parametrize("name", OTHERS)
def test_other_terms(name: str) -> None:
    assert compare(OTHERS[name](), per_kind=2) >= 3


def test_a_mean_colour_is_stated_where_its_host_was() -> None:
    """A host's mean colour has its (wide) prior at the mean period of all its stars."""
    ladder = in_bands(1, POPULATION, index="band in the colour", stars=4)
    compare(ladder, within=5e-3)
    with pytest.raises(AssertionError):
        compare(ladder, within=1e-6)


def test_anchors_with_a_covariance() -> None:
    choices, tables = covariances.parts_of("flow")
    n = 3
    matrix = covariances.correlated(n, 0.04)
    choices["anchors"]["covariance"] = {"adds": True}
    ladder = covariances.build_ladder(choices, tables | {"anchors.covariance": matrix})
    joint, z = given_draws(ladder)
    objects = Objects(Given(joint, z))
    for batch in objects.batches(HOST):
        host = int(batch.place[0])
        rest = posterior_without(joint, batch.left(0))
        gain = joint.log_density(z) - rest.log_density(z)
        np.testing.assert_allclose(batch.taken.log_predictive[:, 0], gain, atol=1e-6)
        assert ladder.hosts[host] not in rest.ladder.hosts


@pytest.mark.parametrize("kind", ["Cepheid", "parallax star", "supernova", "in the expansion"])
def test_objects_set_aside_by_the_choices(kind: str) -> None:
    """The same by another way: the ladder is assembled anew from its tables."""
    ladder = small_ladder("all rungs")
    joint, z = given_draws(ladder)
    labels = {
        "Cepheid": (ladder.cepheids.star, ladder.cepheids.host),
        "parallax star": (ladder.parallax_stars.star, None),
        "supernova": (ladder.peaks.name, None),
        "in the expansion": (ladder.flow.name, None),
    }
    names, hosts = labels[kind]
    for batch in Objects(Given(joint, z)).batches(kind):
        for number in range(0, len(batch.place), 9):
            place = batch.place[number]
            host = "" if hosts is None else ladder.hosts[hosts[place]]
            rest = posterior(set_aside(ladder, kind, str(names[place]), host))
            gain = joint.log_density(z) - rest.log_density(z)
            lost_host = len(rest.ladder.hosts) < len(ladder.hosts)
            offset = gain[0] - batch.taken.log_predictive[0, number] if lost_host else 0.0
            found = batch.taken.log_predictive[:, number] + offset
            np.testing.assert_allclose(found, gain, atol=1e-6)


def test_a_term_that_is_not_known_is_refused() -> None:
    """Negative control: a posterior with rows that no object accounts for."""
    joint, z = given_draws(small_ladder("anchors"))
    Objects(Given(joint, z))
    strange = replace(joint, blocks=(*joint.blocks, *joint.blocks))
    with pytest.raises(NotCoveredError, match="refit with the object set aside"):
        Objects(Given(strange, z))


class _Steeper(Posterior):
    """A posterior with one more factor."""

    def log_density(self, z: np.ndarray) -> np.ndarray:
        return super().log_density(z) + z.sum(axis=1)


def test_a_factor_that_is_not_known_is_refused() -> None:
    joint, z = given_draws(small_ladder("anchors"))
    with pytest.raises(NotCoveredError):
        Objects(Given(_Steeper(**vars(joint)), z))


def test_a_wrong_weight_would_be_seen() -> None:
    """Negative control: one star's own variance off by a tenth."""
    joint, z = given_draws(small_ladder("anchors"))
    objects = Objects(Given(joint, z))
    each = objects.sets[0]
    wrong = replace(each, rows=replace(each.rows, variance=1.1 * each.rows.variance))
    (batch,) = Objects(Given(joint, z)).batches(CEPHEID)
    objects.sets = [wrong]
    (other,) = objects.batches(CEPHEID)
    difference = np.abs(batch.taken.log_predictive - other.taken.log_predictive)
    assert difference.max() > 1e-3
