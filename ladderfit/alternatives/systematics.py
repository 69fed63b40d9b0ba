"""The table of systematics that papers print: per axis the largest shift and the spread."""

from __future__ import annotations

import math
from collections import defaultdict

import numpy as np
import pandas as pd

from ladderfit.alternatives.comparison import Comparison, Fit
from ladderfit.ladder_file import as_written
from ladderfit.names import parameter

ALL = "all axes"


def systematics(comparison: Comparison) -> pd.DataFrame:
    """How far each axis moves each headline parameter.

    A fit is compared with the one that differs from it in this axis alone, at the
    baseline's value: the baseline itself, where one change was made at a time.
    Fits that failed, or whose Pareto k is not to be trusted, are left out.

    Parameters
    ----------
    comparison : Comparison

    Returns
    -------
    DataFrame
        One row per axis and parameter, and per parameter over all axes:
        ``axis``, ``parameter``, ``fits`` (how many were compared), ``largest`` (the change
        of largest size, with its sign, in the parameter's unit), ``largest_in_errors``
        (in the baseline's errors), ``of`` (the value that makes it), ``spread``
        (standard deviation of the means over the axis' values, the baseline's
        included, averaged over the other axes first) and ``unit``.
    """
    rows = []
    for axis in comparison.axes:
        for name in comparison.headline:
            known = changes_along(comparison, axis, name)
            by_value: dict[str, list[float]] = defaultdict(list)
            for fit, change in known:
                by_value[as_written(fit.alternative.changes[axis])].append(change)
            effects = [0.0, *(float(np.mean(each)) for each in by_value.values())]
            row = _row(comparison, name, known, effects)
            rows.append({"axis": axis, "parameter": name, **row})
    for name in comparison.headline:
        known = _changes(comparison, name)
        row = _row(comparison, name, known, [0.0, *(change for _, change in known)])
        rows.append({"axis": ALL, "parameter": name, **row})
    return pd.DataFrame(rows)


def changes_along(comparison: Comparison, axis: str, name: str) -> list[tuple[Fit, float]]:
    """Fits with a change along an axis, and by how much it alone moves a parameter [its unit]."""
    partners = _trusted(comparison)
    found = []
    for fit in partners.values():
        partner = partners.get(fit.alternative.without(axis).key)
        if axis in fit.alternative.changes and partner is not None:
            found.append((fit, fit.mean(name) - partner.mean(name)))
    return [(fit, change) for fit, change in found if math.isfinite(change)]


def _changes(comparison: Comparison, name: str) -> list[tuple[Fit, float]]:
    """Trusted fits, and by how much they differ from the baseline."""
    base = comparison.baseline.mean(name)
    found = [(fit, fit.mean(name) - base) for fit in comparison.fits if fit.trusted]
    return [(fit, change) for fit, change in found if math.isfinite(change)]


def _trusted(comparison: Comparison) -> dict[str, Fit]:
    """By key; the baseline counts, as everything is compared with it."""
    trusted = {fit.alternative.key: fit for fit in comparison.fits if fit.trusted}
    return {comparison.baseline.alternative.key: comparison.baseline, **trusted}


def _row(
    comparison: Comparison, name: str, known: list[tuple[Fit, float]], effects: list[float]
) -> dict[str, object]:
    largest, of = max(
        ((change, fit.alternative.key) for fit, change in known),
        key=lambda pair: abs(pair[0]),
        default=(math.nan, ""),
    )
    spread = float(np.std(effects, ddof=1)) if len(effects) > 1 else math.nan
    return {
        "fits": len(known),
        "largest": largest,
        "largest_in_errors": largest / comparison.baseline.sd(name),
        "of": of,
        "spread": spread,
        "unit": parameter(name).unit,
    }
