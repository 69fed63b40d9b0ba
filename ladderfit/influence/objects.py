"""Every object of a ladder in turn, and what taking it out does given phi."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from ladderfit.influence.blocks import star_block, stars_one_by_one, supernovae_one_by_one
from ladderfit.influence.correlated import correlated
from ladderfit.influence.given import Given, Taken
from ladderfit.influence.hosts import Hosts
from ladderfit.influence.outliers import log_ratios
from ladderfit.influence.parallaxes import log_factors
from ladderfit.influence.populations import places_of_host, stars_of_host
from ladderfit.influence.rebuilding import rebuilt
from ladderfit.influence.sets import (
    CEPHEID,
    FLOW,
    HOST,
    PEAK,
    STAR,
    VELOCITY,
    RowSet,
    check_covered,
    noisy_block,
    row_sets,
    rows_of_host,
    slow_kinds,
)
from ladderfit.influence.without import Left
from ladderfit.posterior.populations import PopulationBlock
from ladderfit.samples import FloatArray, IntArray

KINDS = (CEPHEID, STAR, PEAK, FLOW, VELOCITY, HOST)
SLOW_DRAWS = 1000  # where sums are made anew without each object
_ELEMENTS = 3_000_000  # of the largest array held at once


@dataclass(frozen=True, eq=False)
class Batch:
    """Some objects of one kind.

    Attributes
    ----------
    kind : str
    place : array of int, shape (n,)
        In their sample; of hosts, in the ladder's.
    given : Given
        Where they were taken out.
    taken : Taken
    """

    kind: str
    place: IntArray
    given: Given
    taken: Taken

    def left(self, number: int) -> Left:
        """What is left out with one of them."""
        return left_out(self.kind, int(self.place[number]))


def left_out(kind: str, place: int) -> Left:
    """One object left out; `place` is its own in its sample, or a host's."""
    if kind == HOST:
        return Left(host=place)
    names = {
        CEPHEID: "cepheids",
        STAR: "parallax_stars",
        PEAK: "peaks",
        FLOW: "flow",
        VELOCITY: "velocities",
    }
    cut: Mapping[str, Any] = {names[kind]: np.array([place])}
    return Left(**cut)


class Objects:
    """The objects of a posterior at given draws of phi.

    Raises
    ------
    NotCoveredError
        If the posterior has terms that are not known here.
    """

    def __init__(self, given: Given) -> None:
        self.given = given
        self.sets = row_sets(given.joint)
        check_covered(given, self.sets)
        self.correlated = correlated(given)
        self.hosts = Hosts(given, self.sets, self.correlated)
        self._rows = rows_of_host(given.joint)
        self._slow = slow_kinds(given.joint)

    @cached_property
    def coarse(self) -> Given:
        """The same at fewer draws, for objects whose sums are made anew one by one."""
        step = max(1, -(-len(self.given.z) // SLOW_DRAWS))
        return Given(self.given.joint, self.given.z[::step], self.given.targets)

    def count(self, kind: str) -> int:
        """How many objects of a kind the ladder has."""
        ladder = self.given.joint.ladder
        if kind == HOST:
            return len(ladder.hosts)
        samples = {
            CEPHEID: ladder.cepheids,
            STAR: ladder.parallax_stars,
            PEAK: ladder.peaks,
            FLOW: ladder.flow,
            VELOCITY: ladder.velocities,
        }
        sample = samples[kind]
        return 0 if sample is None else len(sample)

    def batches(self, kind: str) -> Iterator[Batch]:
        """All objects of one kind, some at a time."""
        if kind in self._slow:
            yield from self._rebuilt(kind)
        elif kind == HOST:
            for host in range(self.count(HOST)):
                yield self._batch(HOST, np.array([host]), self.hosts.taken(host))
        elif kind == STAR:
            if self.count(STAR):
                factors = log_factors(self.given)
                yield from self._parallax_stars(factors)
        else:
            for each in self.sets:
                if each.kind == kind:
                    yield from self._rows_of(each)
            yield from self._correlated(kind)
            yield from self._populations(kind)
            if kind == CEPHEID:
                yield from self._noisy()
                yield from self._star_by_star()
                yield from self._robust()

    def _batch(self, kind: str, place: IntArray, taken: Taken) -> Batch:
        return Batch(kind, place, self.given, taken)

    def _rebuilt(self, kind: str) -> Iterator[Batch]:
        """Objects that are not rows: the ladder is built without each, at fewer draws."""
        given = self.coarse
        for place in range(self.count(kind)):
            yield Batch(kind, np.array([place]), given, rebuilt(given, left_out(kind, place)))

    def _parallax_stars(self, factors: FloatArray) -> Iterator[Batch]:
        yield self._batch(STAR, np.arange(factors.shape[1]), self.given.unchanged(factors))

    def _lone(self, host: IntArray) -> IntArray:
        """Which rows are all that their host has."""
        return np.array(
            [row for row, number in enumerate(host) if number >= 0 and self._rows[number] == 1],
            dtype=np.int64,
        )

    def _rows_of(self, each: RowSet) -> Iterator[Batch]:
        lone = self._lone(each.host)
        for row in lone:
            yield self._batch(each.kind, each.place[[row]], self.hosts.taken(int(each.host[row])))
        others = np.setdiff1d(np.arange(len(each.place)), lone)
        variance = each.variance(self.given)
        size = max(1, _ELEMENTS // (len(self.given.z) * each.rows.columns.shape[1]))
        for start in range(0, len(others), size):
            rows = others[start : start + size]
            own = np.broadcast_to(variance[:, rows], (len(self.given.z), len(rows)))
            taken = self.given.rows_out(each.rows.columns[rows], own, each.host[rows])
            yield self._batch(each.kind, each.place[rows], taken)

    def _correlated(self, kind: str) -> Iterator[Batch]:
        if self.correlated is None or kind not in (PEAK, FLOW):
            return
        host = self.correlated.data.host
        hosted = int(np.sum(host >= 0))
        wanted = np.arange(hosted) if kind == PEAK else np.arange(hosted, len(host))
        lone = self._lone(host[wanted])
        for row in wanted[lone]:
            yield self._batch(kind, np.array([row]), self.hosts.taken(int(host[row])))
        shift = 0 if kind == PEAK else hosted
        for rows, taken in self.correlated.taken(self.given, np.delete(wanted, lone)):
            yield self._batch(kind, rows - shift, taken)

    def _noisy(self) -> Iterator[Batch]:
        block = noisy_block(self.given.joint)
        if block is None:
            return
        for host, start, _ in block.slices:
            if self._rows[host] == 1:
                yield self._batch(CEPHEID, np.array([start]), self.hosts.taken(host))
                continue
            places = places_of_host(block, host)
            for place, taken in zip(places, stars_of_host(self.coarse, block, host), strict=True):
                yield Batch(CEPHEID, np.array([place]), self.coarse, taken)

    def _star_by_star(self) -> Iterator[Batch]:
        block = star_block(self.given.joint)
        if block is None:
            return
        for place, host, taken in stars_one_by_one(self.coarse, block):
            if taken is None or self._rows[host] == 1:
                yield self._batch(CEPHEID, np.array([place]), self.hosts.taken(host))
            else:
                yield Batch(CEPHEID, np.array([place]), self.coarse, taken)

    def _robust(self) -> Iterator[Batch]:
        robust = self.given.joint.robust
        if robust is None:
            return
        seen: list[int] = []
        for place, _, ratio in log_ratios(self.coarse, robust):
            seen.append(place)
            taken = self.coarse.unchanged(ratio[:, None])
            yield Batch(CEPHEID, np.array([place]), self.coarse, taken)
        for place in np.setdiff1d(np.arange(self.count(CEPHEID)), seen).tolist():
            taken = rebuilt(self.coarse, left_out(CEPHEID, place))
            yield Batch(CEPHEID, np.array([place]), self.coarse, taken)

    def _populations(self, kind: str) -> Iterator[Batch]:
        """Supernovae whose inputs have errors; each block is of one kind."""
        for block in self.given.joint.blocks:
            if not isinstance(block, PopulationBlock):
                continue
            if (PEAK if np.all(block.rows.host >= 0) else FLOW) != kind:
                continue
            taken = supernovae_one_by_one(self.coarse, block)
            for place, host in enumerate(block.rows.host.tolist()):
                one = next(taken)
                if host >= 0 and self._rows[host] == 1:
                    yield self._batch(kind, np.array([place]), self.hosts.taken(host))
                else:
                    yield Batch(kind, np.array([place]), self.coarse, one)
