"""The main job: draw the posterior of a ladder and leave a result folder, whole or not at all."""

from __future__ import annotations

import shutil
from pathlib import Path

from ladderfit.errors import LadderfitError
from ladderfit.files import new_folder
from ladderfit.ladder import Ladder
from ladderfit.plots import save_figures
from ladderfit.report.write import clear_leftover, move_report, write_report
from ladderfit.result import Result
from ladderfit.sampling.direct import Progress
from ladderfit.sampling.live import Run, start
from ladderfit.sampling.progress import RunProgress
from ladderfit.sampling.run import draw
from ladderfit.store import write_result


class StoppedError(LadderfitError):
    """A run was stopped before its goal; the message says how to go on."""


def calibrate(
    ladder: Ladder,
    folder: str | Path,
    *,
    seed: int | None = None,
    draws: int | None = None,
    progress: Progress | None = None,
) -> Result:
    """Draw the posterior and leave numbers, draws, choices, figures and report in a new folder.

    The ladder's ``sampling.sampler`` says how: `direct`, or `ensemble`, whose folder
    exists from the start so that the run can be stopped and resumed.

    Parameters
    ----------
    ladder : Ladder
    folder : str or Path
        Must not exist.  With `direct` it appears once everything in it is written.
    seed, draws : int, optional
        In place of the ladder's own; with `ensemble` the draws are effective ones.
    progress : callable, optional
        Called with a stage in words and the fraction of it that is done.

    Returns
    -------
    Result

    Raises
    ------
    InputError
        If the folder exists, or the ladder leaves something undetermined.
    OSError
        If the folder cannot be written.
    SamplingError
        If the posterior could not be drawn.
    StoppedError
        If an ensemble run was interrupted; what it drew is kept.
    """
    if ladder.choices.sampling.sampler == "ensemble":
        return finish(start(ladder, folder, seed=seed, ess=draws), progress)
    with new_folder(folder) as temporary:
        result = draw(ladder, seed=seed, draws=draws, progress=progress)
        if progress is not None:
            progress("writing numbers, figures and the report", 0.0)
        write_result(result, temporary)
        save_figures(result, temporary / "figures")
        write_report(result, temporary, name=Path(folder).name)
    return result


def finish(run: Run, progress: Progress | None = None) -> Result:
    """Wait for an ensemble run, then add figures, tables and report to its folder.

    Raises
    ------
    StoppedError
        If the run was stopped before its goal, here by an interrupt or from elsewhere.
    LadderfitError
        If the run failed.
    """

    def tell(found: RunProgress) -> None:
        if progress is not None:
            progress(*stage(found))

    found = run.wait(tell=tell)
    if found.state != "finished":
        raise StoppedError(
            f"stopped; {found.draws:,} draws are kept in {run.path}; "
            f"to go on: ladderfit calibrate --resume {run.path}"
        )
    result = run.result()
    if progress is not None:
        progress("drawing figures and writing the report", 0.0)
    temporary = run.path / ".report.tmp"
    clear_leftover(temporary, run.path)
    save_figures(result, temporary / "figures")
    shutil.copyfile(run.path / "provenance.json", temporary / "provenance.json")
    write_report(result, temporary, name=run.path.name)
    move_report(temporary, run.path)
    shutil.rmtree(temporary)
    return result


def stage(found: RunProgress) -> tuple[str, float]:
    """A run's progress as a stage in words and the fraction of it that is done."""
    if found.worst is None:
        return found.message or f"{found.state} the ensembles", 0.0
    if found.goal.ess is None:
        return f"{found.draws:,} draws of the ensembles", found.fraction
    return f"{found.ess:,.0f} effective draws of {found.worst}", found.fraction
