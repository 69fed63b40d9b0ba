"""Leave-one-out of every object: one tidy table of shifts, and sentences about it."""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from ladderfit.influence.given import TARGETS, Given, coordinates
from ladderfit.influence.objects import KINDS, Batch, Objects
from ladderfit.influence.reweighting import (
    NOT_TRUSTED,
    UNDETERMINED,
    Moved,
    refitted,
    reweighted,
    undetermined_without,
)
from ladderfit.influence.sets import CEPHEID, FLOW, HOST, PEAK, STAR
from ladderfit.influence.words import sentences
from ladderfit.kernels.compiling import one_blas_thread
from ladderfit.ladder import Ladder
from ladderfit.posterior.joint import Posterior, posterior
from ladderfit.result import Result
from ladderfit.samples import FloatArray

MOST_DRAWS = 4000
Progress = Callable[[str, float], None]


@dataclass(frozen=True, eq=False, repr=False)
class Influence:
    """What leaving out each object alone does to a calibration.

    Attributes
    ----------
    table : DataFrame
        One row per object: ``kind``, ``name``, ``host``, ``how`` (reweighted, refitted,
        undetermined, not trusted), ``k`` (Pareto k of the weights), ``elpd`` (log
        density of its data given all other data), and for every target its change
        (in its unit), ``NAME_mcse`` (Monte Carlo error of that) and
        ``NAME_in_errors`` (the change in units of the calibration's error).
    targets : tuple of str
        Parameters that are followed.
    errors : mapping of str to float
        Posterior standard deviation of each.
    draws : int
        Draws of phi behind the weights.
    """

    table: pd.DataFrame
    targets: tuple[str, ...]
    errors: Mapping[str, float]
    draws: int

    def __repr__(self) -> str:
        """How many objects; `sentences` has the words."""
        counts = self.table["kind"].value_counts(sort=False)
        listed = ", ".join(f"{count:,} of kind {kind!r}" for kind, count in counts.items())
        return f"<Influence: {listed}; see .table, .by(parameter) and .sentences()>"

    def by(self, parameter: str, *, kind: str | None = None) -> pd.DataFrame:
        """The table sorted by the size of the change of a parameter, the largest first.

        Objects without which the scale is undetermined come before all others.

        Parameters
        ----------
        parameter : str
            One of `targets`.
        kind : str, optional
            Only objects of this kind.

        Raises
        ------
        KeyError
            If the parameter is not among the targets.
        """
        if parameter not in self.targets:
            raise KeyError(f"{parameter!r} is not among {', '.join(self.targets)}")
        table = self.table if kind is None else self.table[self.table["kind"] == kind]
        size = table[parameter].abs().fillna(np.inf)
        return table.loc[size.sort_values(ascending=False, kind="stable").index]

    def sentences(self) -> list[str]:
        """What moves what the most, in words."""
        return sentences(self.table, self.targets, self.errors)


def leave_one_out(
    result: Result,
    *,
    kinds: Collection[str] = KINDS,
    targets: Sequence[str] = TARGETS,
    refit: bool = True,
    progress: Progress | None = None,
) -> Influence:
    """Leave out every object alone, and say how the calibration would move.

    Given phi the ladder is Gaussian, and an object's data are taken out of it in
    closed form; phi is reweighted by what the other data say of the object.  Where
    the weights are too heavy (Pareto k above 0.7) the ladder is drawn anew without
    the object.

    Parameters
    ----------
    result : Result
        With its ladder.
    kinds : collection of str
        Among ``Cepheid``, ``parallax star``, ``supernova``, ``in the expansion``,
        ``velocity`` and ``host``.  A host goes with its Cepheids, supernovae and anchor.
    targets : sequence of str
        Parameters to follow; those the ladder does not have are passed over.
    refit : bool
        Whether to draw anew where weights are too heavy; without, such rows are
        marked ``not trusted``.
    progress : callable, optional
        Told the kind at work and the fraction done.

    Returns
    -------
    Influence

    Raises
    ------
    NotCoveredError
        If the ladder has terms that this does not cover; the message names them.
    ValueError
        If a kind is unknown.
    LadderfitError
        If the result's tables are missing.

    Notes
    -----
    Memory is bounded: objects are taken in pieces of at most 3 million numbers.
    """
    unknown = sorted(set(kinds) - set(KINDS))
    if unknown:
        raise ValueError(f"unknown kinds {', '.join(unknown)}; known: {', '.join(KINDS)}")
    with one_blas_thread():
        work = _Work(result, targets)
        rows = work.rows(kinds, progress, refit=refit)
    columns = ["kind", "name", "host", "how", "k", "elpd"]
    for name in work.given.targets:
        columns += [name, f"{name}_mcse", f"{name}_in_errors"]
    errors = {name: result.sd(name) for name in work.given.targets}
    table = pd.DataFrame(rows, columns=columns)
    return Influence(table, work.given.targets, errors, len(work.given.z))


class _Work:
    """One pass over the objects of a result."""

    def __init__(self, result: Result, targets: Sequence[str]) -> None:
        self.result = result
        joint = posterior(result.ladder)
        z = coordinates(joint, result, MOST_DRAWS)
        _focus(joint, z)
        self.given = Given(joint, z, targets)
        self.objects = Objects(self.given)
        ess = [value for value in result.diagnostics.ess.values() if np.isfinite(value)]
        whole = max(min(ess, default=float(result.size)), 1.0)
        self.ess = min(whole, float(len(z)))
        self.thinning = max(len(z) / self.ess, 1.0)
        self.errors = {name: result.sd(name) for name in self.given.targets}

    def rows(
        self, kinds: Collection[str], progress: Progress | None, *, refit: bool
    ) -> list[tuple[object, ...]]:
        """One tuple per object, kind by kind, in the order of the samples."""
        wanted = [kind for kind in KINDS if kind in kinds]
        total = max(sum(self.objects.count(kind) for kind in wanted), 1)
        done, rows = 0, []
        for kind in wanted:
            found: dict[int, Moved] = {}
            for batch in self.objects.batches(kind):
                moved = reweighted(batch.given, batch.taken, self.thinning)
                for number, each in enumerate(moved):
                    found[int(batch.place[number])] = self._settled(batch, number, each, refit)
                done += len(batch.place)
                if progress is not None:
                    progress(kind, done / total)
            labels = _labels(self.result.ladder, kind)
            rows += [self._row(kind, *labels[place], found[place]) for place in sorted(found)]
        return rows

    def _settled(self, batch: Batch, number: int, moved: Moved, refit: bool) -> Moved:
        left = batch.left(number)
        decisive = batch.kind == HOST or self.objects.count(batch.kind) == 1
        if decisive and undetermined_without(self.given, left):
            nothing = dict.fromkeys(moved.shift, float("nan"))
            return Moved(UNDETERMINED, moved.k, moved.elpd, nothing, nothing)
        if moved.how == NOT_TRUSTED and refit:
            seed = self.result.diagnostics.seed + 1
            return refitted(self.given, left, moved, seed, self.ess)
        return moved

    def _row(self, kind: str, name: str, host: str, moved: Moved) -> tuple[object, ...]:
        row: list[object] = [kind, name, host, moved.how, moved.k, moved.elpd]
        for target in self.given.targets:
            shift, error = moved.shift[target], self.errors[target]
            row += [shift, moved.error[target], shift / error if error > 0.0 else float("nan")]
        return tuple(row)


def _focus(joint: Posterior, z: FloatArray) -> None:
    """Have fine tables where the draws are."""
    if z.size:
        joint.focus(z.min(axis=0), z.max(axis=0))


def _labels(ladder: Ladder, kind: str) -> list[tuple[str, str]]:
    """Name and host of every object of a kind."""
    if kind == HOST:
        return [(host, host) for host in ladder.hosts]
    stars = {CEPHEID: ladder.cepheids, STAR: ladder.parallax_stars}.get(kind)
    if stars is not None:
        hosts = [ladder.hosts[host] if host >= 0 else "" for host in stars.host]
        return list(zip(stars.star.tolist(), hosts, strict=True))
    if kind == PEAK and ladder.peaks is not None:
        hosts = [ladder.hosts[host] for host in ladder.peaks.host]
        return list(zip(ladder.peaks.name.tolist(), hosts, strict=True))
    sample = ladder.flow if kind == FLOW else ladder.velocities
    return [] if sample is None else [(name, "") for name in sample.name.tolist()]
