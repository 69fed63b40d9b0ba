"""A coverage experiment with its chart: what the command writes."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from ladderfit.coverage.folder import coverage_in_folder
from ladderfit.coverage.outcome import Experiment
from ladderfit.ladder import Ladder
from ladderfit.plots import save_figure
from ladderfit.plots.coverage import coverage_figure
from ladderfit.sampling.direct import Progress


def coverage_with_figure(
    ladder: Ladder,
    folder: str | Path,
    repeats: int = 200,
    *,
    seed: int = 1,
    fixed: bool = False,
    workers: Any = None,
    progress: Progress | None = None,
) -> Experiment:
    """As `ladderfit.coverage.folder.coverage_in_folder`; ``coverage.pdf`` and ``.png`` beside.

    Raises
    ------
    InputError
        If the folder holds something else, or the simulator does not know a term.
    UndeterminedError, SamplingError
        If the ladder itself cannot be fitted.
    OSError
        If the folder cannot be written.
    """
    experiment = coverage_in_folder(
        ladder, folder, repeats, seed=seed, fixed=fixed, workers=workers, progress=progress
    )
    save_coverage_figure(experiment, Path(folder))
    return experiment


def save_coverage_figure(experiment: Experiment, folder: Path) -> list[Path]:
    """Write the chart as PDF and PNG; gives the files written."""
    paths = [folder / f"coverage{suffix}" for suffix in (".pdf", ".png")]
    return save_figure(coverage_figure(experiment), paths)
