"""Parallax stars taken out: each is one factor of the density of phi."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from ladderfit.influence.given import Given
from ladderfit.influence.without import taken
from ladderfit.posterior.moduli import Sharing
from ladderfit.posterior.parallaxes import ParallaxTerms
from ladderfit.samples import BoolArray, FloatArray, IntArray


def log_factors(given: Given) -> FloatArray:
    """Log density of every parallax star given all others and phi, shape (s, n).

    A star that shares its modulus with others is predicted by them too: its factor
    is that of all of them over that of all but the star.
    """
    joint, terms = given.joint, given.joint.parallaxes
    together = joint.log_parallaxes(given.z)
    if terms is None or terms.sharing is None:
        return together
    sharing = terms.sharing
    factors = np.empty((len(given.z), len(terms.parallax)))
    for group in range(len(sharing.starts) - 1):
        stars = sharing.order[sharing.starts[group] : sharing.starts[group + 1]]
        for star in stars:
            rest = stars[stars != star]
            factors[:, star] = together[:, group]
            if len(rest):
                stay = np.zeros(len(terms.parallax), dtype=bool)
                stay[rest] = True
                factors[:, star] -= only(terms, stay).log_density(given.value)[:, 0]
    return factors


def only(terms: ParallaxTerms, stay: BoolArray) -> ParallaxTerms:
    """The terms of some of the stars; modes of shared errors stay what they are.

    A cluster's own parallax goes with its last star.
    """
    sharing, kept_own = terms.sharing, np.ones(len(terms.cluster_parallax), dtype=bool)
    groups = stay
    if sharing is not None:
        sharing, groups, kept_own = _sharing(sharing, stay)
    both = np.concatenate([stay, kept_own])
    own = terms.distances
    return replace(
        taken(terms, stay),
        offsets={name: column[both] for name, column in terms.offsets.items()},
        cluster_parallax=terms.cluster_parallax[kept_own],
        cluster_error=terms.cluster_error[kept_own],
        distances=replace(own, sight=own.sight[groups], tables=own.tables[groups]),
        sharing=sharing,
    )


def _sharing(sharing: Sharing, stay: BoolArray) -> tuple[Sharing, BoolArray, BoolArray]:
    """Who shares a modulus among those that stay; the groups and clusters' parallaxes left."""
    n = len(stay)
    group = _group(sharing.order, sharing.starts)
    size = len(sharing.starts) - 1
    groups = np.zeros(size, dtype=bool)
    groups[group[stay]] = True
    both = _group(sharing.parallax_order, sharing.parallax_starts)
    own = groups[both[n:]]
    fresh = np.cumsum(groups) - 1
    order, starts = _sorted(fresh[group[stay]])
    every = np.concatenate([fresh[group[stay]], fresh[both[n:]][own]])
    return Sharing(order, starts, *_sorted(every)), groups, own


def _group(order: IntArray, starts: IntArray) -> IntArray:
    """Which group each member is in."""
    found = np.empty(len(order), dtype=np.int64)
    found[order] = np.repeat(np.arange(len(starts) - 1), np.diff(starts))
    return found


def _sorted(group: IntArray) -> tuple[IntArray, IntArray]:
    order = np.argsort(group, kind="stable")
    edges = np.flatnonzero(np.diff(group[order])) + 1
    return order, np.array([0, *edges, len(group)], dtype=np.int64)
