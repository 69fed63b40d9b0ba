"""The process that draws: ``python -m ladderfit.sampling.worker FOLDER``.

It works in a folder that `ladderfit.start` has laid out, tells how it stands
through the files in it, and stops at a commit when asked to: by the file ``stop``,
by SIGTERM or by SIGINT.
"""

from __future__ import annotations

import os
import shutil
import signal
import sys
import traceback
from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
import numpy.typing as npt

from ladderfit.errors import InputError, LadderfitError, Problem
from ladderfit.files import lock
from ladderfit.ladder import read_ladder
from ladderfit.posterior.joint import Posterior
from ladderfit.result import Result
from ladderfit.sampling.chain_file import ChainFile
from ladderfit.sampling.chain_layout import Header
from ladderfit.sampling.chain_reading import read_chain
from ladderfit.sampling.convergence import Goal
from ladderfit.sampling.ensemble import Start, focus, layout, start
from ladderfit.sampling.ensemble_result import (
    checked_posterior,
    ensemble_result,
    phi_report,
    take_stock,
)
from ladderfit.sampling.grow import grow
from ladderfit.sampling.run import target
from ladderfit.sampling.run_folder import RunFolder, Status, changed_inputs, fingerprint
from ladderfit.store import write_result

FloatArray = npt.NDArray[np.float64]

_RESULT_LAST = "summary.json"  # moved into place last: where it is, the result is whole
EXIT_FAILED = 1


def main(arguments: Sequence[str] | None = None) -> int:
    """Work in one folder until its goal is reached, or until asked to stop.

    Returns
    -------
    int
        0 where the run is finished or stopped, 1 where it failed or the folder is taken.
    """
    (path,) = sys.argv[1:] if arguments is None else arguments
    folder = RunFolder(Path(path))
    stopper = Stopper(folder)
    for number in (signal.SIGTERM, signal.SIGINT):
        signal.signal(number, stopper.ask)
    try:
        with lock(folder.lock, "a run is under way in this folder"):
            return _work(folder, stopper)
    except (LadderfitError, OSError) as error:  # somebody else is at work, or no place
        print(error, file=sys.stderr, flush=True)
        return EXIT_FAILED


@dataclass
class Stopper:
    """Knows whether somebody asked the worker to stop."""

    folder: RunFolder
    asked: bool = field(default=False)

    def ask(self, *_: object) -> None:
        """Ask for it; also the handler of a signal."""
        self.asked = True

    def __bool__(self) -> bool:
        """Whether it was asked for."""
        return self.asked or self.folder.stop.exists()


def _work(folder: RunFolder, stopper: Stopper) -> int:
    me = os.getpid()
    try:
        folder.write_status(Status("starting", "reading the ladder", me))
        status = run(folder, stopper)
    except (LadderfitError, MemoryError, OSError) as error:
        words = str(error) or "out of memory"
        status = Status("failed", " ".join(words.split()), me)
    except Exception as error:  # whatever it is, the folder has to say so
        traceback.print_exc()
        words = f"an unexpected error ({type(error).__name__}: {error}); see {folder.log}"
        status = Status("failed", words, me)
    folder.write_status(status)
    folder.stop.unlink(missing_ok=True)
    return EXIT_FAILED if status.state == "failed" else 0


def run(folder: RunFolder, stopper: Stopper) -> Status:
    """Draw until the goal is reached, then write the result; the lock is held.

    Raises
    ------
    LadderfitError
        If the ladder, its inputs or the chain file cannot be used; nothing is harmed.
    OSError
        If a file cannot be written; what is committed stays.
    """
    me = os.getpid()
    settings = folder.settings()
    ladder = read_ladder(folder.ladder)
    problems = changed_inputs(ladder, settings.inputs)
    if problems:
        raise InputError(problems)
    joint = checked_posterior(ladder)
    with _open_chain(folder, joint, settings.seed) as file:
        folder.write_status(Status("running", "", me))
        while True:
            judge = _Judge(folder, joint, file.header)
            for _ in grow(file, joint.log_density, judge.enough, judge.most):
                if stopper:
                    return Status("stopped", "", me)
                judge.refresh()
            if folder.settings().goal == judge.goal:
                break
        file.trim()
    chain = read_chain(folder.chain, verify=True)
    result, report = ensemble_result(joint, chain, judge.goal)
    _write_result_files(folder, result)
    return Status("finished", "", me, report)


@dataclass
class _Judge:
    """Says when a chain is long enough for the goal, as it stands in the folder."""

    folder: RunFolder
    joint: Posterior
    header: Header
    goal: Goal = field(init=False)

    def __post_init__(self) -> None:
        self.refresh()

    def refresh(self) -> None:
        """Read the goal again."""
        self.goal = self.folder.settings().goal

    def most(self) -> int | None:
        """Rows that the total takes."""
        total = self.goal.total
        return None if total is None else -(-total // self.header.plan.per_row)

    def enough(self, z: FloatArray) -> bool:
        """Whether phi, and then every parameter, has enough effective draws and agrees."""
        if self.goal.ess is None:
            return False
        if not phi_report(self.header, z).reaches(self.goal):
            return False
        _, report = take_stock(self.joint, self.header.plan, z, self.header.seed)
        return report.reaches(self.goal)


def _open_chain(folder: RunFolder, joint: Posterior, seed: int) -> ChainFile:
    """Resume the chain, or begin one."""
    for leftover in folder.path.glob(f".{folder.chain.name}.*.tmp"):  # of a killed worker
        leftover.unlink()
    aim = target(joint)
    mark = fingerprint(joint.ladder)
    if not folder.chain.exists():
        plan = layout(joint.dimension)
        begun: Start = start(aim, plan, seed)
        folded = tuple(bool(flag) for flag in aim.folded)
        header = Header(joint.split.phi_names, folded, plan, seed, mark, begun.box)
        return ChainFile.create(folder.chain, header, begun.states)
    file = ChainFile.resume(folder.chain)
    if file.header.fingerprint != mark or file.header.seed != seed:
        file.close()
        raise InputError(
            Problem(
                found="draws of another ladder or seed",
                expected=f"draws of the choices in {folder.ladder}",
                remedy="restore the ladder file as it was, or start a new run",
                file=str(folder.chain),
            )
        )
    focus(aim, file.header.box)
    return file


def _write_result_files(folder: RunFolder, result: Result) -> None:
    """Write the result's files beside the chain; the summary comes last."""
    temporary = folder.path / ".result.tmp"
    shutil.rmtree(temporary, ignore_errors=True)
    temporary.mkdir()
    write_result(result, temporary, folder.ladder)
    (folder.path / _RESULT_LAST).unlink(missing_ok=True)
    names = sorted((path.name for path in temporary.iterdir()), key=lambda n: n == _RESULT_LAST)
    for name in names:
        if name != folder.ladder.name:
            (temporary / name).replace(folder.path / name)
    shutil.rmtree(temporary)


if __name__ == "__main__":
    sys.exit(main())
