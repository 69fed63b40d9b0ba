"""A run: ensemble sampling in a process of its own that can be watched, stopped and resumed.

The process outlives whoever started it.  All that is known about a run lies in its
folder, so that `open_run` gives it back from anywhere, at any time.
"""

from __future__ import annotations

import subprocess
import time
from collections.abc import Callable
from pathlib import Path

from ladderfit.errors import InputError, LadderfitError, Problem
from ladderfit.files import new_folder
from ladderfit.ladder import Ladder, read_ladder
from ladderfit.ladder_copy import copy_ladder
from ladderfit.result import Result
from ladderfit.sampling.chain_layout import Commit, Header
from ladderfit.sampling.chain_reading import Chain, read_chain, read_commit
from ladderfit.sampling.convergence import Goal, Report
from ladderfit.sampling.ensemble import focus
from ladderfit.sampling.ensemble_result import checked_posterior, ensemble_result, phi_report
from ladderfit.sampling.launch import last_words, launch
from ladderfit.sampling.progress import RunProgress
from ladderfit.sampling.run import target
from ladderfit.sampling.run_folder import (
    RunFolder,
    Settings,
    State,
    Status,
    changed_inputs,
    inputs_of,
)
from ladderfit.store import read_result

_POLL = 0.1  # s
_PATIENCE = 120.0  # s that a worker has to stop


class Run:
    """One ensemble run in its folder; made by `start`, or by `open_run` from anywhere."""

    def __init__(self, folder: RunFolder) -> None:
        self._folder = folder
        self._worker: subprocess.Popen[bytes] | None = None
        self._seen: tuple[int, Report] = (0, Report(0, {}, {}))
        folder.settings()

    def __repr__(self) -> str:
        return f"Run({str(self.path)!r}, {self.state})"

    @property
    def path(self) -> Path:
        """The run's folder."""
        return self._folder.path

    @property
    def goal(self) -> Goal:
        """When the run ends."""
        return self._folder.settings().goal

    @property
    def ladder(self) -> Ladder:
        """The ladder that is being fitted.

        Raises
        ------
        InputError
            If its tables are missing or changed since the run was started.
        """
        ladder = read_ladder(self._folder.ladder)
        problems = changed_inputs(ladder, self._folder.settings().inputs)
        if problems:
            raise InputError(problems)
        return ladder

    @property
    def state(self) -> State:
        """One of starting, running, stopped, finished and failed."""
        return self._status().state

    def progress(self) -> RunProgress:
        """How the run stands, read from its folder; cheap where nothing is new.

        Raises
        ------
        InputError
            If the chain file is damaged.
        """
        status, goal = self._status(), self.goal
        header, commit = self._commit()
        if header is None or commit is None or commit.warm_up is None:
            words = status.message
            if commit is not None and status.state == "running":
                words = f"warming up, {commit.rows:,} rows so far"
            return RunProgress(status.state, 0, Report(0, {}, {}), 0.0, goal, words)
        draws = commit.kept * header.plan.per_row
        report = self._report(header, commit)
        if status.state == "finished" and status.report and status.report.draws == draws:
            report = status.report
        rate = commit.rows * header.plan.per_row / commit.seconds if commit.seconds > 0.0 else 0.0
        return RunProgress(status.state, draws, report, rate, goal, status.message)

    def stop(self) -> RunProgress:
        """Stop drawing and keep what is drawn; `resume` goes on from there.

        Raises
        ------
        LadderfitError
            If the worker does not stop.
        """
        if self._at_work():
            self._folder.stop.touch()
            self._wait_for_worker(_PATIENCE)
            self._folder.stop.unlink(missing_ok=True)
        return self.progress()

    def resume(self, *, ess: float | None = None, total: int | None = None) -> None:
        """Go on towards the goal, or towards another one.

        A total is completed, never added to.

        Parameters
        ----------
        ess, total : optional
            As in `start`; both absent, the goal stays.

        Raises
        ------
        LadderfitError
            If the run is under way.
        """
        holder = self._folder.held()
        if holder is not None:
            raise LadderfitError(holder)
        if self._at_work():
            raise LadderfitError(f"{self.path}: a run is starting in this folder; wait for it")
        self.set_goal(ess=ess, total=total)
        self._folder.stop.unlink(missing_ok=True)
        self._worker = launch(self._folder)

    def set_goal(self, *, ess: float | None = None, total: int | None = None) -> None:
        """Another goal, as in `start`; a run under way takes it up at its next commit."""
        goal = _goal(ess, total)
        if goal is not None:
            self._folder.set_goal(goal)

    def wait(
        self,
        *,
        ess: float | None = None,
        total: int | None = None,
        tell: Callable[[RunProgress], None] | None = None,
    ) -> RunProgress:
        """Wait until the run ends; a keyboard interrupt stops it and keeps what is drawn.

        A stopped run is resumed where a goal is given that it has not reached.

        Parameters
        ----------
        ess, total : optional
            Another goal in place of the run's, which the run takes up at once.
        tell : callable, optional
            Told about the progress about every second.

        Returns
        -------
        RunProgress
            Its state is "stopped" after an interrupt.

        Raises
        ------
        LadderfitError
            If the run failed.
        """
        goal = _goal(ess, total)
        try:
            if goal is not None and goal != self.goal:
                self._folder.set_goal(goal)
            if goal is not None and not self._at_work() and self._short_of(goal):
                self.resume()
            self._attend(tell)
            if goal is not None and self.state == "finished" and self._short_of(goal):
                self.resume()  # it finished before it saw the new goal
                self._attend(tell)
        except KeyboardInterrupt:
            return self.stop()
        status = self._status()
        if status.state == "failed":
            raise LadderfitError(f"{self.path}: the run failed: {status.message}")
        return self.progress()

    def result(self) -> Result:
        """The joint posterior as drawn so far: same names, units and order as from `draw`.

        A run that has not reached its goal says so in the result's notes.

        Raises
        ------
        LadderfitError
            If nothing is drawn yet.
        InputError
            If the chain is damaged, or a table changed since the run was started.
        """
        if self.state == "finished":
            return read_result(self.path)
        ladder = self.ladder
        chain = self._chain()
        joint = checked_posterior(ladder)
        focus(target(joint), chain.header.box)
        return ensemble_result(joint, chain, self.goal)[0]

    def _chain(self) -> Chain:
        if not self._folder.chain.exists():
            raise LadderfitError(f"{self.path}: nothing is drawn yet; the run is {self.state}")
        chain = read_chain(self._folder.chain, verify=True)
        if chain.commit.kept == 0:
            raise LadderfitError(f"{self.path}: the warm-up is not over yet; nothing is kept")
        return chain

    def _commit(self) -> tuple[Header | None, Commit | None]:
        if not self._folder.chain.exists():
            return None, None
        return read_commit(self._folder.chain)

    def _report(self, header: Header, commit: Commit) -> Report:
        if self._seen[0] != commit.number:
            chain = read_chain(self._folder.chain)
            warm_up = chain.commit.warm_up or 0
            self._seen = chain.commit.number, phi_report(header, chain.z[warm_up:])
        return self._seen[1]

    def _status(self) -> Status:
        """What the worker put down, held against whether there is one."""
        status = self._folder.status()
        if status.state in ("starting", "running") and not self._at_work():
            status = self._folder.status()  # it may have ended in between
            if status.state in ("starting", "running"):
                words = "the process ended without a word; what is committed is kept"
                return Status("stopped", last_words(self._folder) or words)
        return status

    def _at_work(self) -> bool:
        if self._folder.held() is not None:
            return True
        if self._worker is None:
            return self._folder.being_launched()
        going = self._folder.status().state in ("starting", "running")
        return going and self._worker.poll() is None

    def _attend(self, tell: Callable[[RunProgress], None] | None) -> None:
        told = 0.0
        while self._at_work():
            if tell is not None and time.monotonic() - told > 1.0:
                tell(self.progress())
                told = time.monotonic()
            time.sleep(_POLL)

    def _wait_for_worker(self, seconds: float) -> None:
        end = time.monotonic() + seconds
        while self._at_work():
            if time.monotonic() > end:
                raise LadderfitError(
                    f"{self._folder.held() or self.path}; it was asked to stop and does not: "
                    "it will at its next commit, or end that process"
                )
            time.sleep(_POLL)

    def _short_of(self, goal: Goal) -> bool:
        return not self.progress().report.reaches(goal)


def start(
    ladder: Ladder,
    out: str | Path,
    *,
    seed: int | None = None,
    ess: float | None = None,
    total: int | None = None,
) -> Run:
    """Start an ensemble run in a process of its own.

    Parameters
    ----------
    ladder : Ladder
    out : str or Path
        The run's folder; must not exist.
    seed : int, optional
        In place of the ladder's ``sampling.seed``.
    ess : float, optional
        Ends the run once the worst parameter has so many effective draws and the
        ensembles agree.  By default the ladder's ``sampling.draws``, unless a total is given.
    total : int, optional
        Ends the run at so many draws after the warm-up, rounded up to whole rows.

    Returns
    -------
    Run

    Raises
    ------
    InputError
        If the folder exists, or a table changed since the ladder was read.
    UndeterminedError
        If the data and the stated priors leave the distance scale undetermined.
    """
    run = Run(lay_out(ladder, out, seed=seed, goal=_goal(ess, total)))
    run.resume()
    return run


def lay_out(
    ladder: Ladder, out: str | Path, *, seed: int | None = None, goal: Goal | None = None
) -> RunFolder:
    """Lay out the folder of a run, without starting it; raises what `start` raises."""
    sampling = ladder.choices.sampling
    seed = sampling.seed if seed is None else seed
    ladder = ladder.change({"sampling.sampler": "ensemble", "sampling.seed": seed})
    if checked_posterior(ladder).dimension == 0:
        raise InputError(
            Problem(
                found="no parameter that an ensemble could move: given the fixed ones "
                "everything is Gaussian",
                expected="at least one scatter or other non-linear parameter that is free",
                remedy='use sampler = "direct", whose draws are exact here',
                key="sampling.sampler",
            )
        )
    with new_folder(out) as temporary:
        folder = RunFolder(temporary)
        copy = copy_ladder(ladder, temporary)
        goal = goal or Goal(ess=float(sampling.draws))
        folder.write_settings(Settings(seed, goal, inputs_of(copy)))
        folder.write_status(Status("stopped", "not started yet"))
    return RunFolder(Path(out))


def open_run(folder: str | Path) -> Run:
    """Give back the run in a folder, at work or not.

    Raises
    ------
    InputError
        If the folder is not that of a run.
    """
    return Run(RunFolder(Path(folder)))


def _goal(ess: float | None, total: int | None) -> Goal | None:
    for value, name in ((ess, "ess"), (total, "total")):
        if value is not None and not value >= 1:
            raise InputError(
                Problem(f"{name} = {value}", "1 draw or more", "write 4000, say", key=name)
            )
    return None if ess is None and total is None else Goal(ess, total)
