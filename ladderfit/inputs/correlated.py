"""Covariances of what takes part: all supernovae together, and the geometric anchors.

The rows of a matrix that belong to rows cut from the tables are cut with them.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from ladderfit.choices import Expansion
from ladderfit.inputs.covariance_rows import Members, check_definite, places
from ladderfit.inputs.covariances import Matrix
from ladderfit.inputs.select_supernovae import ExpansionSelection, PeakSelection
from ladderfit.physics.expansion import (
    magnitudes_per_velocity,
    peculiar_variance,
    peculiar_velocities,
)
from ladderfit.samples import FloatArray, FlowSample, PeakSample, frozen

_SEVERAL = 5  # names that a note lists


@dataclass(frozen=True, eq=False)
class Given:
    """A matrix, its dotted key, and whether it is added to the single errors."""

    matrix: Matrix
    key: str
    adds: bool


@dataclass(frozen=True, eq=False)
class Supernovae:
    """Samples whose variances are those of the covariance, and the covariance itself.

    Attributes
    ----------
    peaks : PeakSample or None
    flow : FlowSample or None
    matrix : array, shape (n, n), or None
        Of the peak magnitudes less their prediction, without intrinsic scatter
        [mag^2]: the peaks in hosts first, then those of the expansion, peculiar
        velocities included.  None where all are independent.
    single : array, shape (n,), or None
        The part of its diagonal that comes from single errors [mag^2].
    """

    peaks: PeakSample | None
    flow: FlowSample | None
    matrix: FloatArray | None
    single: FloatArray | None = None


def supernovae_together(
    peaks: PeakSelection | None,
    expansion: ExpansionSelection | None,
    section: Expansion | None,
    magnitudes: Given | None,
    velocities: Given | None,
    *,
    same_table: bool,
) -> Supernovae:
    """Put the covariance of all supernovae that take part together.

    Parameters
    ----------
    peaks, expansion : selections or None
    section : Expansion or None
        The choices of the expansion.
    magnitudes : Given or None
        Covariance of peak magnitudes [mag^2].
    velocities : Given or None
        Covariance of peculiar velocities [(km/s)^2].
    same_table : bool
        Whether hosts and expansion are rows of one and the same table.

    Raises
    ------
    InputError
        If a matrix does not fit the tables, or what comes out is not positive definite.
    """
    near = None if peaks is None else peaks.sample
    flow = None if expansion is None else expansion.flow
    if magnitudes is None and velocities is None:
        return Supernovae(near, flow, None)
    samples = [sample for sample in (near, flow) if sample is not None]
    total = np.diag(np.concatenate([sample.variance for sample in samples]))
    split = 0 if near is None else len(near)
    single = np.diag(total).copy()
    if magnitudes is not None:
        _add_magnitudes(total, split, peaks, expansion, magnitudes, same_table=same_table)
    variance = np.diag(total).copy()
    if flow is not None and expansion is not None and section is not None:
        total[split:, split:] += _of_velocities(flow, expansion, section, velocities)
        if velocities is None or velocities.adds:
            single[split:] += peculiar_variance(flow.redshift, peculiar_velocities(flow, section))
    named = [str(name) for sample in samples for name in sample.name]
    blamed = magnitudes or velocities
    if blamed is not None:
        check_definite(total, named, blamed.matrix, blamed.key)
    return Supernovae(
        None if near is None else replace(near, variance=frozen(variance[:split])),
        None if flow is None else replace(flow, variance=frozen(variance[split:])),
        frozen(total),
        frozen(single),
    )


def _add_magnitudes(
    total: FloatArray,
    split: int,
    peaks: PeakSelection | None,
    expansion: ExpansionSelection | None,
    given: Given,
    *,
    same_table: bool,
) -> None:
    """Add the matrix to the block of the samples it covers, in place."""
    tables: list[Members] = []
    start = split
    if peaks is not None and given.key.startswith("supernovae"):
        tables.append(Members(list(peaks.names), peaks.sample.row - 1, "supernovae in hosts"))
        start = 0
    if expansion is not None and expansion.flow is not None:
        names, left = list(expansion.names), expansion.flow.row - 1
        tables.append(Members(names, left, "in the expansion", same_as_first=same_table))
    where = places(given.matrix, tables, given.key)
    block = slice(start, start + len(where))
    total[block, block] += given.matrix.values[np.ix_(where, where)]


def _of_velocities(
    flow: FlowSample, expansion: ExpansionSelection, section: Expansion, given: Given | None
) -> FloatArray:
    """What peculiar velocities add [mag^2], shape (n, n)."""
    factor = magnitudes_per_velocity(flow.redshift)
    single = np.diag((factor * peculiar_velocities(flow, section)) ** 2)
    if given is None:
        return single
    members = Members(list(expansion.names), flow.row - 1, "in the expansion")
    where = places(given.matrix, [members], given.key)
    found = given.matrix.values[np.ix_(where, where)] * np.outer(factor, factor)
    return np.asarray(found + single if given.adds else found)


def anchors_together(
    names: Sequence[str], used: Sequence[str], errors: FloatArray, given: Given
) -> FloatArray:
    """Covariance of the geometric moduli in use [mag^2], shape (n, n).

    Parameters
    ----------
    names : sequence of str
        All geometric anchors, in the order of the ladder file.
    used : sequence of str, length n
        Those in use.
    errors : array, shape (n,)
        Their single errors [mag].
    given : Given

    Raises
    ------
    InputError
        If the matrix does not fit the anchors, or is not positive definite.
    """
    left = np.array([list(names).index(name) for name in used], dtype=np.int64)
    where = places(given.matrix, [Members(list(names), left, "geometric anchors")], given.key)
    found = given.matrix.values[np.ix_(where, where)]
    if given.adds:
        found = found + np.diag(errors**2)
    check_definite(found, list(used), given.matrix, given.key)
    total: FloatArray = frozen(found)
    return total


def repeated_notes(peaks: PeakSample | None, flow: FlowSample | None) -> Iterator[str]:
    """What is assumed of names that stand several times where nothing correlates them."""
    samples = [[] if s is None else [str(name) for name in s.name] for s in (peaks, flow)]
    both = sorted(set(samples[0]) & set(samples[1]))
    if both:
        yield (
            f"{_listed(both, 'stand')} in hosts and in the expansion; without a covariance "
            "the measurements are taken as independent"
        )
    for names, where in zip(samples, ("hosts", "the expansion"), strict=True):
        counts = Counter(names)
        several = sorted(name for name, count in counts.items() if count > 1)
        if several:
            yield (
                f"{_listed(several, 'stand')} more than once in {where}; without a covariance "
                "the light curves are taken as independent"
            )


def _listed(names: list[str], verb: str) -> str:
    if len(names) == 1:
        return f"the supernova {names[0]} {verb}s"
    listed = ", ".join(names[:_SEVERAL]) + (", ..." if len(names) > _SEVERAL else "")
    return f"{len(names)} supernovae ({listed}) {verb}"
