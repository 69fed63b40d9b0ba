"""Results side by side: parameters, shifts with their errors, and the choices that differ.

Two calibrations mostly share data, so the error of a shift is not the quadrature
sum.  Where the inputs allow, the objects behind all the results are resampled together,
every ladder is fitted to each resample, and the spread of the shift is its error.
Where not, the error lies between the difference and the sum of the two errors,
whatever the correlation (Cauchy and Schwarz), and that is said.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from ladderfit.comparison.resampling import SAMPLES, Together, resample_together
from ladderfit.errors import InputError, LadderfitError, Problem
from ladderfit.names import base_name, parameter
from ladderfit.result import Result
from ladderfit.samples import FloatArray
from ladderfit.sampling.warm import WarmDrawer

RESAMPLES = 100
_DRAWS = 1000  # of each fit to a resample
_LEAST = 20  # resamples below which a spread is no error
_PATHS = ("table", "file", "names")


@dataclass(frozen=True, eq=False)
class ResultComparison:
    """Several results against the first.

    Attributes
    ----------
    labels : tuple of str
    results : tuple of Result
    differences : mapping of str to tuple of value
        Dotted keys whose values differ: one value per result, None where absent.
    shared : mapping of str to (counts, common)
        By sample: objects per result, and how many all of them use.
    shifts : mapping of str to array, shape (resamples, results)
        Of each parameter, its mean in each resample; empty without resampling.
    reason : str
        Why nothing was resampled; empty where it was.
    notes : tuple of str
    """

    labels: tuple[str, ...]
    results: tuple[Result, ...]
    differences: Mapping[str, tuple[Any, ...]]
    shared: Mapping[str, tuple[tuple[int, ...], int]]
    means: Mapping[str, FloatArray]
    reason: str
    notes: tuple[str, ...]

    @property
    def parameters(self) -> tuple[str, ...]:
        """Every parameter of the first result, and what others have beside it."""
        found = dict.fromkeys(self.results[0].draws)
        for result in self.results[1:]:
            found |= dict.fromkeys(result.draws)
        return tuple(found)

    @property
    def resamples(self) -> int:
        """How many resamples were fitted."""
        return max((len(means) for means in self.means.values()), default=0)

    def table(self) -> pd.DataFrame:
        """One row per parameter: ``mean`` and ``sd`` of each result, columns by label."""
        rows = {}
        for name in self.parameters:
            row = {}
            for label, result in zip(self.labels, self.results, strict=True):
                known = name in result.draws
                row[f"{label}: mean"] = result.mean(name) if known else math.nan
                row[f"{label}: sd"] = result.sd(name) if known else math.nan
            rows[name] = row
        return pd.DataFrame.from_dict(rows, orient="index")

    def shift(self, other: int) -> pd.DataFrame:
        """Shift of every shared parameter from the first result to another.

        Parameters
        ----------
        other : int
            Place of the other result, 1 or more.

        Returns
        -------
        DataFrame
            ``shift``; ``error`` by joint resampling (NaN without); ``ratio`` of the two;
            ``least`` and ``most`` that the error can be, whatever is shared;
            ``independent``, the error were nothing shared; ``mcse``, the Monte Carlo
            error of the shift; all in the parameter's unit.
        """
        base, one = self.results[0], self.results[other]
        rows = {}
        for name in base.draws:
            if name in one.draws and (base.sd(name) > 0.0 or one.sd(name) > 0.0):
                rows[name] = self._row(name, other)
        columns = ["shift", "error", "ratio", "least", "most", "independent", "mcse", "unit"]
        return pd.DataFrame.from_dict(rows, orient="index", columns=columns)

    def _row(self, name: str, other: int) -> tuple[float | str, ...]:
        base, one = self.results[0], self.results[other]
        a, b = base.sd(name), one.sd(name)
        shift = one.mean(name) - base.mean(name)
        error = self._error(name, other)
        ratio = shift / error if error > 0.0 else math.nan
        mcse = math.hypot(_mcse(base, name), _mcse(one, name))
        bounds = (abs(a - b), a + b, math.hypot(a, b))
        return (shift, error, ratio, *bounds, mcse, parameter(name).unit)

    def _error(self, name: str, other: int) -> float:
        means = self.means.get(name)
        if means is None or len(means) < _LEAST:
            return math.nan
        apart = means[:, other] - means[:, 0]
        known = apart[np.isfinite(apart)]
        return float(np.std(known, ddof=1)) if len(known) >= _LEAST else math.nan


def _mcse(result: Result, name: str) -> float:
    ess = result.diagnostics.ess.get(name, float(result.size))
    return result.sd(name) / math.sqrt(ess) if ess > 0.0 and math.isfinite(ess) else 0.0


def compare_results(
    results: Mapping[str, Result],
    *,
    resamples: int = RESAMPLES,
    seed: int = 1,
    progress: Callable[[str, float], None] | None = None,
) -> ResultComparison:
    """Hold results against the first of them.

    Parameters
    ----------
    results : mapping of str to Result
        Two or more, by what to call them.
    resamples : int
        Fits of each ladder to resampled data; 0 for none.
    seed : int
    progress : callable, optional
        Told the stage, in words, and the fraction done.

    Raises
    ------
    InputError
        If there are fewer than two results.
    """
    if len(results) < 2:
        raise InputError(
            Problem("one result", "two or more", "name another folder to compare it with")
        )
    listed = tuple(results.values())
    ready: Together | str = "not asked for"
    if any(result.source is None for result in listed):
        gone = [label for label, result in results.items() if result.source is None]
        ready = f"the tables behind {', '.join(gone)} are missing or have changed"
    else:
        ready = resample_together(listed)
    shared: dict[str, tuple[tuple[int, ...], int]] = {}
    notes: tuple[str, ...] = ()
    means: Mapping[str, FloatArray] = {}
    if isinstance(ready, Together):
        shared = {kind: ready.shared(kind) for kind in SAMPLES}
        shared = {kind: found for kind, found in shared.items() if any(found[0])}
        notes = ready.notes
        if 0 < resamples < _LEAST:
            notes = (*notes, f"{resamples} resamples are too few: at least {_LEAST} give an error.")
        means, failed = _resampled(ready, resamples, seed, progress)
        if failed:
            notes = (*notes, f"{failed} of {resamples} resamples could not be fitted.")
    return ResultComparison(
        tuple(results),
        listed,
        _differences(listed),
        shared,
        means,
        ready if isinstance(ready, str) else "" if resamples else "not asked for",
        notes,
    )


def _resampled(
    ready: Together,
    resamples: int,
    seed: int,
    progress: Callable[[str, float], None] | None,
) -> tuple[dict[str, FloatArray], int]:
    """Means of all parameters in every resample, and how many could not be fitted."""
    drawers = [WarmDrawer() for _ in ready.ladders]
    found: list[list[dict[str, float]]] = []
    failed = 0
    for number, rng in enumerate(np.random.default_rng(seed).spawn(resamples)):
        if progress is not None:
            progress("resampling what the results share", number / resamples)
        ladders = ready.resampled(rng)
        try:
            drawn = [
                drawer.draw(ladder, draws=_DRAWS, seed=seed + number)
                for drawer, ladder in zip(drawers, ladders, strict=True)
            ]
        except LadderfitError:
            failed += 1
            continue
        found.append([{name: each.mean(name) for name in each.draws} for each in drawn])
    names = dict.fromkeys(name for row in found for each in row for name in each)
    means = {
        name: np.array([[each.get(name, math.nan) for each in row] for row in found])
        for name in names
    }
    return means, failed


def _differences(results: Sequence[Result]) -> dict[str, tuple[Any, ...]]:
    """Keys that differ; tables are told apart by their contents, not by their paths."""
    every = [result.choices for result in results]
    keys: dict[str, None] = {}
    for choices in every[1:]:
        keys |= dict.fromkeys(choices.difference(every[0]))
    values = {key: tuple(_value(choices, key) for choices in every) for key in keys}
    hashes = [_hashes(result) for result in results]
    found = {}
    for key, row in values.items():
        section, _, last = key.rpartition(".")
        if last in _PATHS and _equal([each.get(section) for each in hashes]):
            continue  # the same contents seen from another place
        if not key.startswith(("title", "alternatives")):
            found[key] = row
    for section in dict.fromkeys(name for each in hashes for name in each):
        contents = [each.get(section, "") for each in hashes]
        if f"{section}.table" not in found and len(set(contents)) > 1 and all(contents):
            found[f"{section} (contents, SHA-256)"] = tuple(text[:12] for text in contents)
    return found


def _equal(contents: Sequence[str | None]) -> bool:
    return None not in contents and len(set(contents)) == 1


def _hashes(result: Result) -> dict[str, str]:
    if result.source is None:
        return {}
    return {key: source.sha256 for key, source in result.source.sources.items()}


def _value(choices: Any, key: str) -> Any:
    try:
        return choices.value(key)
    except KeyError:
        return None


def headline_shifts(found: ResultComparison, other: int) -> pd.DataFrame:
    """Shifts of all parameters but the moduli."""
    shifts = found.shift(other)
    keep = [name for name in shifts.index if base_name(str(name)) != "modulus"]
    return shifts.loc[keep]
