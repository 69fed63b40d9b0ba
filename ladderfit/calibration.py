"""The main job: draw the posterior of a ladder and leave a result folder, whole or not at all."""

from __future__ import annotations

from pathlib import Path

from ladderfit.files import new_folder
from ladderfit.ladder import Ladder
from ladderfit.plots import save_figures
from ladderfit.result import Result
from ladderfit.sampling.direct import Progress
from ladderfit.sampling.run import draw
from ladderfit.store import write_result


def calibrate(
    ladder: Ladder,
    folder: str | Path,
    *,
    seed: int | None = None,
    draws: int | None = None,
    progress: Progress | None = None,
) -> Result:
    """Draw the posterior and write numbers, draws, choices and figures into a new folder.

    Parameters
    ----------
    ladder : Ladder
    folder : str or Path
        Must not exist.  It appears once everything in it is written.
    seed, draws : int, optional
        In place of the ladder's own.
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
    """
    with new_folder(folder) as temporary:
        result = draw(ladder, seed=seed, draws=draws, progress=progress)
        if progress is not None:
            progress("writing numbers and figures", 0.0)
        write_result(result, temporary)
        save_figures(result, temporary / "figures")
    return result
