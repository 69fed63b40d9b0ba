"""Supernovae whose width, decline rate or colour have errors: a block that depends on phi.

What is drawn are the coefficients (alpha, beta), the populations' spreads and the
scatter; the populations' means are integrated with the other coefficients.  A full
covariance of the peaks is factored in every draw, as the variance that the inputs
add differs from one supernova to the next.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from ladderfit.kernels.arrow import Moments
from ladderfit.kernels.compiling import in_halves
from ladderfit.kernels.coupled import CoupledData, add_products
from ladderfit.kernels.populations import CURVED, LINEAR, WIDENED, add_rows, condition
from ladderfit.kernels.wide import Covariance, FullCovariance, LowRankCovariance, covariance_of
from ladderfit.ladder import Ladder
from ladderfit.peak_terms import EXPANSION, HOSTS, PeakTerms
from ladderfit.posterior.cepheids import Block, Values
from ladderfit.posterior.coupled import coupled_hosts
from ladderfit.posterior.frame import Frame
from ladderfit.posterior.supernovae import (
    correlated_samples,
    flow_variance,
    supernova_arrays,
    terms_of,
)
from ladderfit.samples import FloatArray, IntArray

_CHUNK = 1_000_000  # elements of a (draws, supernovae) array held at once
_KINDS = {HOSTS: "peaks", EXPANSION: "flow"}


@dataclass(frozen=True, eq=False)
class PopulationBlock:
    """Supernovae with noisy inputs.

    Attributes
    ----------
    terms : PeakTerms
    groups : tuple of str
        Populations that occur among the rows.
    group : array of int, shape (n,)
        Which of them each row belongs to.
    means : array of int, shape (g, p)
        Places of the populations' means among the coefficients; no columns where
        nothing is integrated.
    scatters : tuple of str
        Name of the scatter of each population's supernovae.
    rows : CoupledData
        Columns in the frame, y last.
    independent : array, shape (n,), or None
        Variances, where the covariance is diagonal.
    shared : Covariance or None
        The covariance, where it is not.
    x, errors, with_peak : array, shape (n, p), (n, p, p), (n, p)
        Measured inputs less references, covariances of their errors, and with the peak.
    """

    terms: PeakTerms
    groups: tuple[str, ...]
    group: IntArray
    means: IntArray
    scatters: tuple[str, ...]
    rows: CoupledData
    independent: FloatArray | None
    shared: Covariance | None
    x: FloatArray
    errors: FloatArray
    with_peak: FloatArray

    def add_to(self, total: Moments, values: Values) -> None:
        """Add the sums at the given coefficients, spreads and scatters to `total`, in place."""
        batch, n = len(total.constant), len(self.x)
        known = _Known(self, values)
        step = max(1, _CHUNK // n)
        for start in range(0, batch, step):
            self._add_part(total, slice(start, min(start + step, batch)), known)

    def _add_part(self, total: Moments, part: slice, known: _Known) -> None:
        batch, (n, p) = part.stop - part.start, self.x.shape
        lever, shift = np.zeros((batch, n, p)), np.empty((batch, n))
        extra, sums = np.empty((batch, n)), np.zeros((batch, len(self.groups), p + 1, p + 1))
        constant = np.zeros(batch)
        a, c, spread, mean = (v[part] for v in (known.a, known.c, known.spread, known.mean))

        def some(start: int, stop: int) -> None:
            here = slice(start, stop)
            condition(
                known.style,
                a[here],
                c[here],
                spread[here],
                mean[here],
                self.group,
                self.x,
                self.errors,
                self.with_peak,
                lever[here],
                shift[here],
                extra[here],
                sums[here],
                constant[here],
            )

        in_halves(some, batch, work=batch * n * (1 + p) ** 2)
        total.constant[part] += constant
        if known.style != WIDENED:
            self._add_inputs(total.square[part], sums)
        extra += known.scatter2[part][:, self.group]
        if self.independent is not None:
            self._add_independent(total, part, lever, shift, extra + self.independent)
        else:
            self._add_correlated(total, part, lever, shift, extra)

    def _add_inputs(self, square: FloatArray, sums: FloatArray) -> None:
        """The measured inputs as rows of the populations' means."""
        for number, places in enumerate(self.means):
            every = np.append(places, square.shape[-1] - 1)
            square[:, every[:, None], every[None, :]] += sums[:, number]

    @property
    def _levers(self) -> bool:
        return self.means.shape[1] > 0 and not self.terms.curved

    def _add_independent(
        self,
        total: Moments,
        part: slice,
        lever: FloatArray,
        shift: FloatArray,
        variance: FloatArray,
    ) -> None:
        (places,) = self.means  # independent rows have one population
        columns = self.rows.columns
        used = np.any(columns != 0.0, axis=0)
        used[-1] = True
        used[places] |= self._levers
        active = np.flatnonzero(used)
        means = np.searchsorted(active, places) if self._levers else np.empty(0, dtype=np.int64)
        narrow = np.ascontiguousarray(columns[:, active])
        local, cross = total.local[part], total.cross[part]
        square, constant = total.square[part], total.constant[part]

        def some(start: int, stop: int) -> None:
            here = slice(start, stop)
            add_rows(
                self.rows.host,
                narrow,
                active,
                means,
                variance[here],
                lever[here],
                shift[here],
                local[here],
                cross[here],
                square[here],
                constant[here],
            )

        in_halves(some, len(variance), work=variance.size * len(active) ** 2)

    def _add_correlated(
        self,
        total: Moments,
        part: slice,
        lever: FloatArray,
        shift: FloatArray,
        extra: FloatArray,
    ) -> None:
        """By what the covariance is made of."""
        if self.shared is None:
            raise ValueError("independent rows have no covariance")
        m = len(self.rows.inside)
        columns = np.hstack([self.rows.indicators(), self.rows.columns])
        y = columns[:, -1].copy()
        products = np.empty((len(extra), columns.shape[1], columns.shape[1]))
        constant = np.empty(len(extra))
        for draw in range(len(extra)):
            if self._levers:
                for number, places in enumerate(self.means):
                    mine = self.group == number
                    columns[np.ix_(mine, m + places)] = lever[draw, mine]
            columns[:, -1] = y - shift[draw]
            products[draw], constant[draw] = self.shared.products(extra[draw], columns)
        views = Moments(
            total.local[part],
            total.cross[part],
            total.square[part],
            total.constant[part],
            None if total.coupling is None else total.coupling[part],
            total.coupled,
        )
        add_products(views, self.rows, products, constant)


class _Known:
    """Values of phi as arrays over draws."""

    def __init__(self, block: PopulationBlock, values: Values) -> None:
        terms, groups = block.terms, block.groups
        named = {name: values(name) for name in terms.nonlinear}
        self.a = np.ascontiguousarray(terms.linear(named))
        batch, p = self.a.shape
        square = terms.square(named)
        self.c = np.zeros(batch) if square is None else square
        self.scatter2 = np.stack([values(name) ** 2 for name in block.scatters], axis=1)
        self.spread = np.zeros((batch, len(groups), p, p))
        self.mean = np.zeros((batch, len(groups), p))
        self.style = WIDENED
        if terms.integrated:
            self.style = CURVED if terms.curved else LINEAR
            for number, group in enumerate(groups):
                self._populate(terms, number, group, named, values)

    def _populate(
        self,
        terms: PeakTerms,
        number: int,
        group: str,
        named: Mapping[str, FloatArray],
        values: Callable[[str], FloatArray],
    ) -> None:
        spread = [named[name] for name in terms.spreads_of(group)]
        for i, own in enumerate(spread):
            self.spread[:, number, i, i] = own**2
        correlation = terms.correlation_of(group)
        if correlation is not None:
            both = named[correlation] * spread[0] * spread[1]
            self.spread[:, number, 0, 1] = self.spread[:, number, 1, 0] = both
        if terms.curved:
            for i, name in enumerate(terms.means_of(group)):
                self.mean[:, number, i] = values(name)


def population_blocks(
    ladder: Ladder, frame: Frame, names: tuple[str, ...], before: Iterable[Block] = ()
) -> list[Block]:
    """The supernovae as blocks, where errors of their inputs are met; else none.

    Supernovae that a covariance correlates are one block.  From blocks of an earlier
    posterior, `before`, what was found out about the same covariance is taken over.
    """
    terms = terms_of(ladder)
    if not terms.noisy:
        return []
    correlated = correlated_samples(ladder)
    groups = [group for group in terms.groups if _KINDS[group] in correlated]
    alone = [(group,) for group in terms.groups if group not in groups]
    blocks: list[Block] = [_block(ladder, frame, names, terms, one, None) for one in alone]
    if groups:
        blocks.append(_block(ladder, frame, names, terms, tuple(groups), before))
    return blocks


def _block(
    ladder: Ladder,
    frame: Frame,
    names: tuple[str, ...],
    terms: PeakTerms,
    groups: tuple[str, ...],
    before: Iterable[Block] | None,
) -> PopulationBlock:
    samples: dict[str, Any] = {HOSTS: ladder.peaks, EXPANSION: ladder.flow}
    parts = [terms.noisy_inputs(samples[group]) for group in groups]
    x, errors, with_peak = (np.concatenate(arrays) for arrays in zip(*parts, strict=True))
    kinds = tuple(_KINDS[group] for group in groups)
    host, columns, y = supernova_arrays(ladder, kinds, names)
    shared, independent = None, None
    if before is not None and ladder.peak_covariance is not None:
        split = 0 if ladder.peaks is None else len(ladder.peaks)
        start = 0 if HOSTS in groups else split
        stop = len(ladder.peak_covariance) if EXPANSION in groups else split
        part = slice(start, stop)
        shared = _shared(ladder.peak_covariance[part, part], ladder.peak_single, part, before)
    elif groups == (HOSTS,):
        independent = samples[HOSTS].variance
    else:
        independent = flow_variance(ladder)
    of_group = dict(zip((HOSTS, EXPANSION), ladder.choices.peak_scatters, strict=True))
    return PopulationBlock(
        terms,
        groups,
        np.repeat(np.arange(len(groups)), [len(samples[group]) for group in groups]),
        np.array([[names.index(name) for name in terms.means_of(g)] for g in groups], dtype=int),
        tuple(of_group[group] for group in groups),
        CoupledData(
            host,
            frame.columns(host, columns, y),
            np.empty((0, 0)),
            frame.hosts,
            coupled_hosts(ladder),
        ),
        independent,
        shared,
        x,
        errors,
        with_peak,
    )


def _shared(
    matrix: FloatArray, single: FloatArray | None, part: slice, before: Iterable[Block]
) -> Covariance:
    """What the covariance is made of; as found out before, where it is the same."""
    known = single is not None and len(single) >= part.stop
    own = single[part] if known and single is not None else None
    for block in before:
        earlier = block.shared if isinstance(block, PopulationBlock) else None
        if isinstance(earlier, FullCovariance) and np.array_equal(earlier.matrix, matrix):
            return earlier
        if isinstance(earlier, LowRankCovariance) and np.array_equal(earlier.whole, matrix):
            return earlier
    return covariance_of(matrix, own)
