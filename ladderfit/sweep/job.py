"""What a sweep does many times, and how a worker does it once."""

from __future__ import annotations

import json
import threading
import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Any, Literal

from ladderfit.errors import LadderfitError
from ladderfit.kernels.compiling import one_blas_thread

Status = Literal["done", "failed", "lost"]


@dataclass(frozen=True)
class Job:
    """What is done with every task.

    Attributes
    ----------
    perform : callable
        A function of a module: ``perform(state, arguments)`` gives what to record, a
        mapping of names to plain JSON values.  It must depend on its arguments alone,
        not on what was done before, so that a table is the same whoever works.
    shared : object
        What all tasks have in common; sent to each worker once.
    prepare : callable, optional
        A function of a module that makes the state from `shared`, once per worker;
        without it the state is `shared` itself.
    """

    perform: Callable[[Any, Mapping[str, Any]], Mapping[str, Any]]
    shared: Any = None
    prepare: Callable[[Any], Any] | None = None


@dataclass(frozen=True)
class Task:
    """One piece of a sweep: `key` names it for good, `arguments` are small and plain."""

    key: str
    arguments: Mapping[str, Any] = field(default_factory=dict)


@dataclass(frozen=True)
class Outcome:
    """What came of a task.

    Attributes
    ----------
    key : str
        The task's.
    status : str
        ``done``; ``failed``, where the job said no; ``lost``, where the worker died
        over it, which is tried again when the sweep resumes.
    values : mapping
        What the job recorded; empty unless done.
    message : str
        Why not, in words; empty where done.
    seconds : float
        Processor time it took.
    """

    key: str
    status: Status
    values: Mapping[str, Any] = field(default_factory=dict)
    message: str = ""
    seconds: float = 0.0


class _State:
    """A job at a worker, its state made at first use; one task at a time."""

    def __init__(self, job: Job) -> None:
        self.job = job
        self._lock = threading.Lock()
        self._ready = False
        self._value: Any = None

    def perform(self, arguments: Mapping[str, Any]) -> dict[str, Any]:
        with self._lock, one_blas_thread():
            if not self._ready:
                prepare = self.job.prepare
                self._value = self.job.shared if prepare is None else prepare(self.job.shared)
                self._ready = True
            found = self.job.perform(self._value, arguments)
        plain: dict[str, Any] = json.loads(json.dumps(found, allow_nan=False))
        return plain


_STATES: dict[str, _State] = {}


def install(token: str, job: Job) -> None:
    """Have this process know a job, unless it does."""
    _STATES.setdefault(token, _State(job))


def remove(token: str) -> None:
    """Have this process forget a job."""
    _STATES.pop(token, None)


def work(token: str, task: Task) -> Outcome:
    """Do one task of an installed job; whatever goes wrong becomes its outcome."""
    start = time.process_time()
    try:
        values = _STATES[token].perform(task.arguments)
    except LadderfitError as error:
        return Outcome(task.key, "failed", {}, str(error), time.process_time() - start)
    except Exception as error:  # one fit's fault must not end the others
        words = f"an unexpected error ({type(error).__name__}: {error})"
        return Outcome(task.key, "failed", {}, words, time.process_time() - start)
    return Outcome(task.key, "done", values, "", time.process_time() - start)


def install_and_work(token: str, job: Job, task: Task) -> Outcome:
    """As `work`, for workers that could not be told of the job beforehand."""
    install(token, job)
    return work(token, task)
