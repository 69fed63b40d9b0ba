"""The tension between an anchor's own distance and what the ladder says without it.

For a geometric anchor the datum is its modulus.  The ladder without it is drawn; at
each draw of phi the datum's predictive density is normal and known in closed form,
with the errors that anchors share and their covariance counted.  The difference
contains the datum's own error.

Parallaxes have no single distance.  The ladder is drawn with a zero point of their
own, which gives the difference between what they and the other anchors say, with all
that both share (slope, metallicity term, scatter) counted once.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.special import ndtr, ndtri

from ladderfit.errors import LadderfitError, Problem, UndeterminedError, nearest
from ladderfit.influence.correlated import anchor_columns, correlated_anchors
from ladderfit.influence.given import Given, coordinates
from ladderfit.ladder import Ladder
from ladderfit.names import with_group
from ladderfit.posterior.joint import posterior
from ladderfit.priors import Normal
from ladderfit.result import Result
from ladderfit.samples import FloatArray
from ladderfit.sampling.run import draw
from ladderfit.schema import join

PARALLAXES = "the parallaxes"
OWN = "parallax stars"  # the group that gets a zero point of its own
WIDE = 3.0  # mag: prior of that offset, far wider than any difference
_FEWEST = 50  # draws beyond zero below which the tail is taken as normal


class NoTensionError(LadderfitError):
    """An anchor has nothing to be compared with; the message says why."""


@dataclass(frozen=True)
class Tension:
    """How far an anchor is from the ladder without it.

    Attributes
    ----------
    anchor : str
    difference : float
        Its own value minus the predicted one [mag]: of the modulus for a geometric
        anchor, of the zero point for the parallaxes.
    error : float
        Standard deviation of the difference [mag].
    probability : float
        Of a difference as large as this, or larger, by chance; two-sided.
    deviations : float
        The same as standard deviations of a normal.
    """

    anchor: str
    difference: float
    error: float
    probability: float
    deviations: float

    def __str__(self) -> str:
        """In a sentence."""
        kind = "zero point" if self.anchor == PARALLAXES else "modulus"
        verb = "have" if self.anchor == PARALLAXES else "has"
        return (
            f"{self.anchor[:1].upper()}{self.anchor[1:]} {verb} a {kind} "
            f"{abs(self.difference):.3f} mag "
            f"{'above' if self.difference > 0.0 else 'below'} what the ladder says without "
            f"{'them' if self.anchor == PARALLAXES else 'it'}, +- {self.error:.3f}: "
            f"{self.deviations:.1f} standard deviations (p = {self.probability:.2g})."
        )


def switched(ladder: Ladder, anchor: str, *, use: bool) -> Ladder:
    """The ladder with an anchor in use or not; the same object where nothing changes.

    Raises
    ------
    InputError
        If the ladder has no such anchor.
    """
    if anchor == PARALLAXES:
        section = ladder.choices.anchors.parallaxes
        if section is None:
            raise NoTensionError("the ladder has no parallax stars")
        return ladder if section.use == use else ladder.change({"anchors.parallaxes.use": use})
    known = ladder.choices.anchors.geometric
    if anchor not in known:
        problem = Problem(
            found=f"no anchor {anchor!r}",
            expected=f"a geometric anchor, or {PARALLAXES!r}",
            remedy=nearest(anchor, [*known, PARALLAXES]),
        )
        raise NoTensionError(str(problem))
    if known[anchor].use == use:
        return ladder
    return ladder.change({join(join("anchors.geometric", anchor), "use"): use})


def tension(
    ladder: Ladder,
    anchor: str,
    *,
    without: Result | None = None,
    seed: int | None = None,
    draws: int | None = None,
) -> Tension:
    """Compare an anchor's own distance with the ladder's prediction without it.

    Parameters
    ----------
    ladder : Ladder
        The anchor may be in use or not.
    anchor : str
        Name of a geometric anchor, or ``the parallaxes``.
    without : Result, optional
        Of the ladder without this (geometric) anchor, if it has been drawn.
    seed, draws : int, optional
        In place of the ladder's own.

    Raises
    ------
    NoTensionError
        If there is no such anchor, or nothing to compare it with.
    """
    if anchor == PARALLAXES:
        return _of_parallaxes(ladder, seed, draws)
    full, rest = switched(ladder, anchor, use=True), switched(ladder, anchor, use=False)
    places = [n for n, each in enumerate(full.geometric) if each.name == anchor]
    if not places:
        raise NoTensionError(f"nothing of {anchor} is left after the cuts")
    if without is None:
        try:
            without = draw(rest, seed=seed, draws=draws)
        except UndeterminedError:
            raise NoTensionError(f"without {anchor} nothing fixes the distance scale") from None
    joint = posterior(full)
    if joint.limits is not None or joint.robust is not None:
        return _from_draws(full, anchor, without)
    given = Given(joint, coordinates(joint, without, without.size), ())
    anchors = correlated_anchors(given)
    if anchors is None:
        host, columns = anchor_columns(given)
        variance = np.full((len(given.z), 1), full.geometric[places[0]].error ** 2)
        residual, left, _ = given.fitted(columns[places], variance, host[places])
    else:
        columns, variance, host, weights = anchors.as_independent(given, np.array(places))
        residual, left, _ = given.fitted(columns, variance, host, weights)
    mean, spread = (residual * variance / left)[:, 0], (variance**2 / left)[:, 0]
    return _mixture(anchor, mean, np.sqrt(spread))


def _from_draws(full: Ladder, anchor: str, without: Result) -> Tension:
    """From draws of the modulus, where that is not normal given phi (limits, outliers)."""
    if full.anchor_covariance is not None:
        raise NoTensionError(
            "a covariance of anchors beside magnitude limits or outliers is not covered"
        )
    own = next(each for each in full.geometric if each.name == anchor)
    name = with_group("modulus", anchor)
    if name not in without.draws:
        raise NoTensionError(f"without its anchor nothing of {anchor} takes part")
    predicted, variance = without.draws[name], own.error**2
    for name, shared in full.choices.anchors.shared_errors.items():
        size = shared.error * shared.loads.get(anchor, 0.0)
        drawn = without.draws.get(with_group("shared_error", name))
        if drawn is None:  # no other anchor has it
            variance += size**2
        else:
            predicted = predicted + size * drawn
    mean = own.modulus - predicted
    return _mixture(anchor, mean, np.full(len(mean), math.sqrt(variance)))


def _mixture(anchor: str, mean: FloatArray, sd: FloatArray) -> Tension:
    """From the difference's mean and standard deviation at every draw of phi."""
    above, below = float(np.mean(ndtr(mean / sd))), float(np.mean(ndtr(-mean / sd)))
    error = math.sqrt(float(np.mean(sd**2) + np.var(mean)))
    return _tension(anchor, float(np.mean(mean)), error, 2.0 * min(above, below))


def _tension(anchor: str, difference: float, error: float, probability: float) -> Tension:
    probability = min(probability, 1.0)
    normal = abs(difference) / error  # where the probability is below the smallest number
    deviations = float(-ndtri(0.5 * probability)) if probability > 0.0 else normal
    return Tension(anchor, difference, error, probability, deviations)


def with_own_zero_points(
    ladder: Ladder, groups: Mapping[str, Mapping[str, Any]], spread: float
) -> Ladder:
    """The ladder with a zero-point offset for each of some new groups of stars.

    Parameters
    ----------
    ladder : Ladder
    groups : mapping of str to mapping
        Criteria of the groups, as ``[groups]`` writes them.
    spread : float
        Standard deviation of every offset's normal prior about 0 [mag].
    """
    changes: dict[str, Any] = {}
    for name, group in groups.items():
        changes[join("groups", name)] = dict(group)
        parameter = with_group("zero_point_offset", name)
        prior = Normal(0.0, spread)
        if prior == ladder.choices.prior(parameter):  # a default would count as not stated
            prior = Normal(0.0, math.nextafter(spread, math.inf))
        changes[join("priors", parameter)] = prior
    changes["relation.zero_points"] = [*ladder.choices.relation.zero_points, *groups]
    return ladder.change(changes)


def free_name(ladder: Ladder, wanted: str) -> str:
    """A name that no group of the ladder has."""
    name, number = wanted, 2
    while name in ladder.choices.groups:
        name, number = f"{wanted} {number}", number + 1
    return name


def _of_parallaxes(ladder: Ladder, seed: int | None, draws: int | None) -> Tension:
    full = switched(ladder, PARALLAXES, use=True)
    if not full.geometric:
        raise NoTensionError("there is no other anchor to compare the parallaxes with")
    relation = full.choices.relation
    for name in relation.zero_points:
        group = full.choices.groups[name]
        if group.parallax_stars and not (group.hosts or group.mode or group.system):
            raise NoTensionError(f"the parallax stars have a zero point of their own ({name})")
    if full.cepheids is None:
        raise NoTensionError("no Cepheids in galaxies share the parallax stars' relation")
    name = free_name(full, OWN)
    wide = with_own_zero_points(full, {name: {"parallax_stars": True}}, WIDE)
    try:
        result = draw(wide, seed=seed, draws=draws)
    except UndeterminedError:
        raise NoTensionError("without the parallaxes nothing fixes the distance scale") from None
    offset = result.draws[with_group("zero_point_offset", name)]
    mean, sd = float(np.mean(offset)), float(np.std(offset, ddof=1))
    beyond = min(int(np.sum(offset > 0.0)), int(np.sum(offset < 0.0)))
    tail = beyond / len(offset) if beyond >= _FEWEST else float(ndtr(-abs(mean) / sd))
    return _tension(PARALLAXES, mean, sd, 2.0 * tail)
