"""From a ladder and its axes to a comparison."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from importlib import metadata
from pathlib import Path
from typing import Any

from ladderfit import schema
from ladderfit.alternatives.axes import Alternative, alternatives_of
from ladderfit.alternatives.comparison import Comparison, compared
from ladderfit.alternatives.fit import Baseline, fit, identity_of, start
from ladderfit.ladder import Ladder
from ladderfit.sampling.direct import Progress
from ladderfit.sweep import Job, Task, sweep

MOST_DRAWS = 2000  # of each fit, unless told otherwise


def run_alternatives(
    ladder: Ladder,
    axes: Mapping[str, Sequence[Any]] | None = None,
    *,
    grid: bool = False,
    draws: int | None = None,
    seed: int | None = None,
    workers: Any = None,
    file: str | Path | None = None,
    progress: Progress | None = None,
) -> Comparison:
    """Fit a ladder with one choice after another made otherwise.

    Every fit draws directly, with the same seed, and starts from the baseline; the
    numbers are the same whoever does the work.

    Parameters
    ----------
    ladder : Ladder
        The baseline.
    axes : mapping of str to sequence, optional
        Values to try, by dotted key of the ladder file, such as
        ``{"cepheids.periods": [[10, 100], [5, 60]]}``; by default the ladder's own
        ``[alternatives]``.
    grid : bool
        All combinations of the axes; otherwise one change at a time.
    draws : int, optional
        Of each fit; by default the ladder's ``sampling.draws``, and at most 2,000.
    seed : int, optional
        In place of the ladder's ``sampling.seed``.
    workers : int, str, Client, Executor or None
        A number of processes (1: this one); the address of a Dask scheduler, or a
        client of it; any executor of `concurrent.futures`; None: as many processes
        as there are cores and the alternatives are worth.
    file : path, optional
        Where outcomes are kept as they come, one JSON object a line; given again, the
        work goes on where it stood.
    progress : callable, optional
        Told how many are done, in words, and the fraction.

    Returns
    -------
    Comparison

    Raises
    ------
    InputError
        If the axes make no sense, or `file` is of other work.
    UndeterminedError, SamplingError
        If the baseline itself cannot be fitted; of an alternative, this is a row.
    """
    chosen = alternatives_of(ladder.choices, axes, grid=grid)
    baseline = baseline_of(ladder, draws=draws, seed=seed)
    if progress is not None:
        progress("fitting the baseline", 0.0)
    result = start(baseline).result
    outcomes = sweep(
        Job(fit, baseline, start),
        [Task(each.key, {"changes": dict(each.changes)}) for each in chosen],
        workers=workers,
        file=None if file is None else Path(file),
        identity=identity_of(baseline, metadata.version("ladderfit")),
        progress=progress,
    )
    order = ladder.choices.alternatives if axes is None else axes
    return compared(result, _current(baseline.ladder, order, chosen), chosen, outcomes)


def baseline_of(ladder: Ladder, *, draws: int | None = None, seed: int | None = None) -> Baseline:
    """The ladder without its list of alternatives, with the settings of all fits."""
    sampling = ladder.choices.sampling
    bare = ladder.change({"alternatives": None}) if ladder.choices.alternatives else ladder
    return Baseline(
        bare,
        min(sampling.draws, MOST_DRAWS) if draws is None else draws,
        sampling.seed if seed is None else seed,
    )


def _current(ladder: Ladder, axes: Iterable[str], chosen: Sequence[Alternative]) -> dict[str, Any]:
    """What the baseline has where alternatives differ."""
    flat: dict[str, Any] = {}
    used = {axis for each in chosen for axis in each.axes}
    for axis in (each for each in axes if each in used):
        try:
            flat[axis] = schema.written(ladder.choices.value(axis))
        except KeyError:
            flat[axis] = None
    return flat
