"""Alternatives from a ladder to a folder: the sweep, tables, figures."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import pandas as pd

from ladderfit.alternatives import Comparison, alternatives_of, run_alternatives
from ladderfit.alternatives.folder import write_comparison
from ladderfit.ladder import Ladder
from ladderfit.plots import save_figure
from ladderfit.plots.alternatives import comparison_figures
from ladderfit.sampling.direct import Progress
from ladderfit.sensitivity.error_budget import error_budget
from ladderfit.sweep.folder import OUTCOMES, sweep_folder


def alternatives_in_folder(
    ladder: Ladder,
    folder: str | Path,
    axes: Mapping[str, Sequence[Any]] | None = None,
    *,
    grid: bool = False,
    draws: int | None = None,
    seed: int | None = None,
    workers: Any = None,
    progress: Progress | None = None,
) -> tuple[Comparison, pd.DataFrame]:
    """As `run_alternatives`, everything in a folder; a folder whose sweep was killed goes on.

    Outcomes stream to ``outcomes.jsonl``; at the end come ``alternatives``,
    ``systematics`` and ``budget`` (each ``.ecsv`` and ``.csv``), ``figures/`` and
    ``provenance.json``.

    Returns
    -------
    comparison : Comparison
    budget : DataFrame
        The baseline's error budget.

    Raises
    ------
    InputError
        If the axes make no sense, or the folder holds something else.
    UndeterminedError, SamplingError
        If the baseline cannot be fitted.
    OSError
        If the folder cannot be written.
    """
    alternatives_of(ladder.choices, axes, grid=grid)  # raises before a folder is made
    folder = sweep_folder(Path(folder))
    comparison = run_alternatives(
        ladder,
        axes,
        grid=grid,
        draws=draws,
        seed=seed,
        workers=workers,
        file=folder / OUTCOMES,
        progress=progress,
    )
    if progress is not None:
        progress("writing tables and figures", 0.0)
    budget = error_budget(comparison.result)
    write_comparison(comparison, budget, folder)
    save_comparison_figures(comparison, budget, folder / "figures")
    return comparison, budget


def save_comparison_figures(
    comparison: Comparison, budget: pd.DataFrame, folder: Path
) -> list[Path]:
    """Write the figures of a comparison as PDF and PNG; gives the files written."""
    folder.mkdir(parents=True, exist_ok=True)
    written = []
    for name, figure in comparison_figures(comparison, budget):
        written += save_figure(figure, [folder / f"{name}{suffix}" for suffix in (".pdf", ".png")])
    return written
