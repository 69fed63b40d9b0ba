"""A coverage experiment on disk: outcomes, tables, the statement, the chart."""

from __future__ import annotations

import io
import json
from pathlib import Path
from typing import Any

import pandas as pd
from astropy.table import Table

from ladderfit.coverage.experiment import run_coverage
from ladderfit.coverage.outcome import Experiment
from ladderfit.coverage.words import statement
from ladderfit.files import write_text_atomically
from ladderfit.ladder import Ladder
from ladderfit.sampling.direct import Progress
from ladderfit.sweep.folder import OUTCOMES, sweep_folder


def coverage_in_folder(
    ladder: Ladder,
    folder: str | Path,
    repeats: int = 200,
    *,
    seed: int = 1,
    fixed: bool = False,
    workers: Any = None,
    progress: Progress | None = None,
) -> Experiment:
    """As `run_coverage`, with everything in a folder; one that was killed goes on.

    Outcomes stream to ``outcomes.jsonl``; at the end come ``coverage.ecsv``,
    ``design.ecsv`` (where truths are drawn), ``ranks.csv`` and ``statement.txt``.

    Raises
    ------
    InputError
        If the folder holds something else, or the simulator does not know a term.
    UndeterminedError, SamplingError
        If the ladder itself cannot be fitted.
    OSError
        If the folder cannot be written.
    """
    folder = sweep_folder(Path(folder))
    experiment = run_coverage(
        ladder,
        repeats,
        seed=seed,
        fixed=fixed,
        workers=workers,
        file=folder / OUTCOMES,
        progress=progress,
    )
    write_experiment(experiment, folder)
    return experiment


def write_experiment(experiment: Experiment, folder: Path) -> None:
    """Write the tables and the statement into an existing folder, each in one step."""
    _write(experiment.table(), folder / "coverage.ecsv")
    if experiment.design is not None:
        _write(experiment.design.table(), folder / "design.ecsv")
    ranks = pd.DataFrame(experiment.ranks)
    write_text_atomically(folder / "ranks.csv", ranks.to_csv(index=False))
    write_text_atomically(folder / "statement.txt", statement(experiment) + "\n")
    told = {"fitted": experiment.size, "asked": experiment.asked, "seconds": experiment.seconds}
    write_text_atomically(folder / "effort.json", json.dumps(told) + "\n")


def _write(frame: pd.DataFrame, path: Path) -> None:
    table = Table({name: frame[name].to_numpy() for name in frame.columns})
    for name in table.colnames:
        if table[name].dtype.kind == "O":
            table[name] = [str(cell) for cell in table[name]]
    text = io.StringIO()
    table.write(text, format="ascii.ecsv")
    write_text_atomically(path, text.getvalue())
