"""Whole hosts taken out: Cepheids, supernovae and anchor at once."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from ladderfit.influence.blocks import difference, part_of, some_stars, some_supernovae, star_block
from ladderfit.influence.correlated import (
    Correlated,
    anchor_columns,
    correlated_anchors,
)
from ladderfit.influence.given import Given, Taken, less_rows, without_host
from ladderfit.influence.sets import RowSet, cut, noisy_block
from ladderfit.kernels.arrow import Moments
from ladderfit.posterior.cepheids import Block
from ladderfit.posterior.moduli import log_modulus_norm, tilt_of
from ladderfit.posterior.populations import PopulationBlock


class Hosts:
    """Takes whole hosts out of a posterior.

    Parameters
    ----------
    given : Given
    sets : list of RowSet
    supernovae : Correlated or None
        Those with a covariance.
    """

    def __init__(self, given: Given, sets: list[RowSet], supernovae: Correlated | None) -> None:
        self.given, self.sets, self.supernovae = given, sets, supernovae
        self.anchors = correlated_anchors(given)

    def taken(self, host: int) -> Taken:
        """One host out; the density of all its data given all others."""
        total = self._without_rows(self.given.solution.moments, host)
        total = self._without_anchor(total, host)
        total = self._without_prior(total, host)
        return self.given.replaced(without_host(total, host))

    def _without_rows(self, total: Moments, host: int) -> Moments:
        for each in self.sets:
            rows = each.among(host)
            if len(rows):
                variance = each.variance(self.given)
                variance = np.broadcast_to(variance, (len(self.given.z), variance.shape[1]))
                total = less_rows(total, host, each.rows.columns[rows], variance[:, rows])
        for block in self._blocks(host):
            total = difference(total, part_of(self.given, block))
        if self.supernovae is not None:
            rows = np.flatnonzero(self.supernovae.data.host == host)
            if len(rows):
                total = self.supernovae.less(total, rows)
        return total

    def _blocks(self, host: int) -> Iterator[Block | None]:
        """The host's part of blocks that are no plain rows."""
        joint = self.given.joint
        noisy, stars = noisy_block(joint), star_block(joint)
        if noisy is not None:
            yield cut(noisy, host)
        if stars is not None:
            of_star = np.repeat(stars.runs[:, 0], stars.runs[:, 2] - stars.runs[:, 1])
            yield some_stars(stars, of_star == host)
        for block in joint.blocks:
            if isinstance(block, PopulationBlock):
                yield some_supernovae(block, block.rows.host == host)

    def _without_anchor(self, total: Moments, host: int) -> Moments:
        ladder = self.given.joint.ladder
        places = [n for n, anchor in enumerate(ladder.geometric) if anchor.host == host]
        if not places:
            return total
        if self.anchors is not None:
            return self.anchors.less(total, np.array(places))
        columns = anchor_columns(self.given)[1][places]
        error = ladder.geometric[places[0]].error
        return less_rows(total, host, columns, np.full((len(self.given.z), 1), error**2))

    def _without_prior(self, total: Moments, host: int) -> Moments:
        """Without the prior of the host's modulus."""
        frame = self.given.joint.frame
        prior = self.given.joint.ladder.choices.hosts.distance_prior
        tilt = tilt_of(prior)
        cross, square = total.cross.copy(), total.square.copy()
        cross[:, host, -1] -= tilt
        square[:, :-1, -1] += tilt * frame.centroid[host]
        square[:, -1, :-1] += tilt * frame.centroid[host]
        constant = total.constant - tilt * frame.origin[host] + log_modulus_norm(prior)
        return replace(total, cross=cross, square=square, constant=constant)
