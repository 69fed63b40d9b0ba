"""Blocks of correlated rows: supernovae with a covariance, anchors with one."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace

import numpy as np

from ladderfit.kernels.arrow import Moments
from ladderfit.kernels.coupled import (
    CoupledData,
    CoupledRows,
    TwoScatterRows,
    coupled_rows,
    two_scatters,
)
from ladderfit.kernels.tridiagonal import Tridiagonal
from ladderfit.ladder import Ladder
from ladderfit.posterior.cepheids import Block, Values
from ladderfit.posterior.frame import Frame
from ladderfit.posterior.supernovae import correlated_samples, supernova_arrays
from ladderfit.samples import IntArray

_LEAST = 1e-4  # mag^2: a table's range is never empty


@dataclass(frozen=True, eq=False)
class CoupledBlock:
    """Correlated rows widened by one scatter."""

    rows: CoupledRows
    scatter: str
    largest: float

    def add_to(self, total: Moments, values: Values) -> None:
        """Add the sums at the scatter's values to `total`, in place."""
        self.rows.add_to(total, values(self.scatter) ** 2)


@dataclass(frozen=True, eq=False)
class TwoScatterBlock:
    """Correlated rows with one scatter in hosts, and another (`scatter`) elsewhere."""

    rows: TwoScatterRows
    in_hosts: str
    scatter: str
    largest: float

    def add_to(self, total: Moments, values: Values) -> None:
        """Add the sums at the two scatters' values to `total`, in place."""
        self.rows.add_to(total, values(self.in_hosts) ** 2, values(self.scatter) ** 2)


def coupled_hosts(ladder: Ladder) -> IntArray:
    """Hosts that a covariance couples, ascending: of supernovae, of anchors."""
    found: set[int] = set()
    if ladder.peaks is not None and "peaks" in correlated_samples(ladder):
        found.update(ladder.peaks.host.tolist())
    if ladder.anchor_covariance is not None:
        found.update(anchor.host for anchor in ladder.geometric)
    return np.array(sorted(found), dtype=np.int64)


def supernova_data(ladder: Ladder, frame: Frame, names: tuple[str, ...]) -> CoupledData | None:
    """The correlated supernovae: those in hosts first."""
    kinds = correlated_samples(ladder)
    if not kinds or ladder.peak_covariance is None:
        return None
    split = 0 if ladder.peaks is None else len(ladder.peaks)
    start = 0 if "peaks" in kinds else split
    stop = len(ladder.peak_covariance) if "flow" in kinds else split
    host, columns, y = supernova_arrays(ladder, kinds, names)
    return CoupledData(
        host,
        frame.columns(host, columns, y),
        ladder.peak_covariance[start:stop, start:stop],
        frame.hosts,
        coupled_hosts(ladder),
    )


def supernova_block(
    ladder: Ladder,
    data: CoupledData,
    fixed: dict[str, float],
    largest: dict[str, float],
    before: Iterable[Block],
) -> Block | Moments:
    """The correlated supernovae as a block, or as moments where their scatters are fixed.

    Parameters
    ----------
    ladder : Ladder
    data : CoupledData
    fixed : mapping of str to float
        Scatters that are held.
    largest : mapping of str to float
        Square up to which each scatter is tabulated [mag^2].
    before : iterable of Block
        Blocks of an earlier posterior; what the difference leaves alone is taken over.
    """
    in_hosts, elsewhere = ladder.choices.peak_scatters
    used = {in_hosts if host else elsewhere for host in (data.host >= 0).tolist()}
    if used <= set(fixed):
        scatter = np.array([fixed[in_hosts if host >= 0 else elsewhere] for host in data.host])
        whole = replace(data, covariance=data.covariance + np.diag(scatter**2))
        return coupled_rows(whole, None).moments(np.zeros(1))
    if len(used) == 1:
        (name,) = used
        return _one(data, name, max(largest[name], _LEAST), before)
    reach = max(largest[elsewhere], _LEAST)
    return _two(data, in_hosts, elsewhere, reach, before)


def _one(data: CoupledData, name: str, largest: float, before: Iterable[Block]) -> CoupledBlock:
    base: Tridiagonal | None = None
    for block in before:
        if isinstance(block, CoupledBlock):
            wide = block.largest >= largest
            if block.scatter == name and wide and block.rows.data.same(data):
                return block
            if np.array_equal(block.rows.data.covariance, data.covariance):
                base = block.rows.base
    return CoupledBlock(coupled_rows(data, largest, base), name, largest)


def _two(
    data: CoupledData, in_hosts: str, elsewhere: str, largest: float, before: Iterable[Block]
) -> TwoScatterBlock:
    base: Tridiagonal | None = None
    n = int(np.sum(data.host >= 0))
    for block in before:
        if isinstance(block, TwoScatterBlock):
            same = block.in_hosts == in_hosts and block.scatter == elsewhere
            if same and block.largest >= largest and block.rows.data.same(data):
                return block
            if np.array_equal(block.rows.base.matrix, data.covariance[n:, n:]):
                base = block.rows.base
    return TwoScatterBlock(two_scatters(data, largest, base), in_hosts, elsewhere, largest)
