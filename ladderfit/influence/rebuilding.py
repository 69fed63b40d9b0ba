"""The posterior without some objects, built anew."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from ladderfit.influence.given import Given, Taken
from ladderfit.influence.parallaxes import only
from ladderfit.influence.without import Left, without
from ladderfit.posterior.joint import Posterior, posterior


def posterior_without(joint: Posterior, left: Left) -> Posterior:
    """The posterior of a ladder without some objects; parallax stars keep the meaning of phi."""
    if len(left.parallax_stars) and joint.parallaxes is not None:
        stay = np.ones(len(joint.parallaxes.parallax), dtype=bool)
        stay[left.parallax_stars] = False
        terms = only(joint.parallaxes, stay) if stay.any() else None
        return replace(joint, parallaxes=terms)
    return posterior(without(joint.ladder, left), joint)


def rebuilt(given: Given, left: Left) -> Taken:
    """What taking some objects out does, from the densities of both ladders; n is 1.

    Where phi would be another without them (a scatter that no object has any more) its
    density is not compared, and the weights count as too heavy.
    """
    rest = posterior_without(given.joint, left)
    if rest.split.phi_names != given.joint.split.phi_names:
        lost = np.full((len(given.z), 1), np.nan)
        return Taken(lost, {name: value[:, None] for name, value in given.base.items()})
    alone = Given(rest, given.z, given.targets)
    gain = given.joint.log_density(given.z) - rest.log_density(given.z)
    expected = {
        name: alone.base.get(name, np.full(len(given.z), np.nan))[:, None] for name in given.base
    }
    return Taken(gain[:, None], expected)
