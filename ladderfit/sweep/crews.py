"""Who does the work: this process, a pool of processes, a Dask cluster, or any executor.

Each is a `Crew`, which hands out futures of `concurrent.futures`.
"""

from __future__ import annotations

import contextlib
import importlib
import multiprocessing
import os
import signal
import threading
import uuid
from collections.abc import Iterator
from concurrent.futures import Executor, Future, ProcessPoolExecutor
from multiprocessing.connection import wait as wait_for
from typing import Any, Protocol

from ladderfit.errors import InputError, Problem
from ladderfit.sweep.job import Job, Outcome, Task, install, install_and_work, remove, work

Workers = Any  # None, a number, a scheduler's address, a Dask client or an Executor

_WORTH_A_PROCESS = 8  # tasks; a process takes some seconds to start
_AHEAD = 2  # tasks in flight per worker: one at work, one waiting for it


class Crew(Protocol):
    """Workers who know a job."""

    @property
    def window(self) -> int:
        """How many tasks to have in flight."""

    def submit(self, task: Task) -> Future[Outcome]:
        """Hand out a task."""

    def mend(self) -> None:
        """Replace workers after one of them broke the whole."""


@contextlib.contextmanager
def crew_for(workers: Workers, job: Job, tasks: int) -> Iterator[Crew]:
    """Workers who know the job, dismissed at the end.

    Parameters
    ----------
    workers : int, str, Client, Executor or None
        A number of processes of this machine (1: this process itself); None: as many as
        there are cores and the tasks are worth.  A Dask client, or the address of
        a Dask scheduler.  Or any `concurrent.futures.Executor`.
    job : Job
    tasks : int
        How many there are.

    Raises
    ------
    InputError
        If `workers` is none of these, or no scheduler answers at the address.
    """
    token = uuid.uuid4().hex
    crew: Any
    if workers is None:
        workers = max(1, min(cores(), tasks // _WORTH_A_PROCESS))
    if isinstance(workers, int) and not isinstance(workers, bool) and workers >= 1:
        crew = Alone(token, job) if workers == 1 else Pool(token, job, min(workers, max(tasks, 1)))
    elif isinstance(workers, str) or hasattr(workers, "get_executor"):
        crew = _cluster().on_cluster(workers, token, job)
    elif isinstance(workers, Executor):
        crew = Hired(token, job, workers)
    else:
        raise InputError(
            Problem(
                found=f"workers = {workers!r}",
                expected="a number of processes from 1 up, the address of a Dask scheduler, "
                "a Dask client or an executor of concurrent.futures",
                remedy="leave it out to use this machine",
            )
        )
    with crew:
        yield crew


def cores() -> int:
    """How many cores this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def _cluster() -> Any:
    try:
        return importlib.import_module("ladderfit.sweep.cluster")
    except ModuleNotFoundError as error:
        raise InputError(
            Problem(
                found=f"no module named {error.name!r}",
                expected="Dask, to work on a cluster",
                remedy="pip install 'ladderfit[dask]'",
            )
        ) from None


class Alone:
    """The calling process; a task is done when it is handed out."""

    window = 1

    def __init__(self, token: str, job: Job) -> None:
        self._token, self._job = token, job

    def __enter__(self) -> Alone:
        install(self._token, self._job)
        return self

    def __exit__(self, *_: object) -> None:
        remove(self._token)

    def submit(self, task: Task) -> Future[Outcome]:
        """Do a task."""
        future: Future[Outcome] = Future()
        future.set_result(work(self._token, task))
        return future

    def mend(self) -> None:
        """Nothing: this process does not outlive itself."""


class Pool:
    """Processes of this machine, each with one thread."""

    def __init__(self, token: str, job: Job, count: int) -> None:
        self._token, self._job, self._count = token, job, count
        self._executor: ProcessPoolExecutor | None = None

    @property
    def window(self) -> int:
        """How many tasks to have in flight."""
        return _AHEAD * self._count

    def __enter__(self) -> Pool:
        return self

    def __exit__(self, kind: type[BaseException] | None, *_: object) -> None:
        self._dismiss(at_once=kind is not None)

    def submit(self, task: Task) -> Future[Outcome]:
        """Hand out a task."""
        if self._executor is None:
            self._executor = ProcessPoolExecutor(
                self._count,
                mp_context=multiprocessing.get_context("spawn"),
                initializer=_start,
                initargs=(self._token, self._job),
            )
        return self._executor.submit(work, self._token, task)

    def mend(self) -> None:
        """Start afresh with the next task."""
        self._dismiss(at_once=False)

    def _dismiss(self, *, at_once: bool) -> None:
        executor, self._executor = self._executor, None
        if executor is None:
            return
        if at_once:  # their work is not wanted any more
            for process in list((executor._processes or {}).values()):
                process.terminate()
        executor.shutdown(wait=True, cancel_futures=True)


def _start(token: str, job: Job) -> None:
    """Make a new process of the pool ready: one thread, deaf to Ctrl-C, gone with its parent."""
    os.environ["LADDERFIT_THREADS"] = "1"
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    threading.Thread(target=_follow_parent, daemon=True).start()
    install(token, job)


def _follow_parent() -> None:
    """A pool whose owner was killed would wait for work for ever."""
    parent = multiprocessing.parent_process()
    if parent is not None:
        wait_for([parent.sentinel])
        os._exit(1)


class Hired:
    """An executor that somebody else owns; the job travels with every task."""

    def __init__(self, token: str, job: Job, executor: Executor) -> None:
        self._token, self._job, self._executor = token, job, executor
        self.window = _AHEAD * max(int(getattr(executor, "_max_workers", cores())), 1)

    def __enter__(self) -> Hired:
        return self

    def __exit__(self, *_: object) -> None:
        remove(self._token)

    def submit(self, task: Task) -> Future[Outcome]:
        """Hand out a task."""
        return self._executor.submit(install_and_work, self._token, self._job, task)

    def mend(self) -> None:
        """Nothing: the executor belongs to somebody else."""
