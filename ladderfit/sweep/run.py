"""Many tasks of one job: handed out, gathered, streamed to disk, resumed."""

from __future__ import annotations

from collections import Counter, deque
from collections.abc import Callable, Iterator, Mapping, Sequence
from concurrent.futures import FIRST_COMPLETED, BrokenExecutor, CancelledError, Future, wait
from pathlib import Path
from typing import Any

import numpy as np

from ladderfit.errors import InputError, LadderfitError, Problem
from ladderfit.sweep.crews import Crew, Workers, crew_for
from ladderfit.sweep.job import Job, Outcome, Task
from ladderfit.sweep.records import open_records

Progress = Callable[[str, float], None]

_DEATHS_ALONE = 2  # of workers over one task, nothing else in flight, until it is given up
_BREAKS = 8  # of the whole crew in a row, until all is given up


def sweep(
    job: Job,
    tasks: Sequence[Task],
    *,
    workers: Workers = None,
    file: Path | None = None,
    identity: Mapping[str, Any] | None = None,
    progress: Progress | None = None,
) -> list[Outcome]:
    """Do a job's tasks, on as many cores or machines as there are.

    Every outcome is on disk before it counts.  A sweep that was killed goes on where it
    stood when it is called again with the same file; tasks may have been added or
    taken out meanwhile.  A task that fails, or that its worker does not survive, is an
    outcome like any other and stops nothing.

    Parameters
    ----------
    job : Job
    tasks : sequence of Task
        With keys of their own.
    workers : int, str, Client, Executor or None
        See `ladderfit.sweep.crews.crew_for`.
    file : Path, optional
        Where outcomes are kept.
    identity : mapping, optional
        What the outcomes depend on besides their arguments, plain JSON.
    progress : callable, optional
        Told how many are done, in words, and the fraction.

    Returns
    -------
    list of Outcome
        In the order of the tasks.

    Raises
    ------
    InputError
        If two tasks have one key, the workers cannot be had, or the file is damaged or of
        another sweep.
    LadderfitError
        If another process is at work on the file.
    """
    _refuse_doubles(tasks)
    with open_records(file, identity or {}) as records:
        known = records.outcomes
        todo = [t for t in tasks if t.key not in known or known[t.key].status == "lost"]
        tell = _teller(progress, len(tasks))
        tell(len(tasks) - len(todo))
        if todo:
            with crew_for(workers, job, len(todo)) as crew:
                for number, outcome in enumerate(outcomes(crew, todo), start=1):
                    records.add(outcome)
                    tell(len(tasks) - len(todo) + number)
        return [records.outcomes[task.key] for task in tasks]


def outcomes(crew: Crew, tasks: Sequence[Task]) -> Iterator[Outcome]:
    """Outcomes as they come, one per task.

    Where the death of a worker breaks the whole crew, all tasks in flight are suspects.
    They are done again one by one, so that the guilty one is known, and given up after
    a second death.
    """
    waiting, flying = deque(tasks), dict[Future[Outcome], Task]()
    suspects: set[str] = set()
    deaths = Counter[str]()
    breaks = 0
    while waiting or flying:
        alone = bool(suspects)
        broken = _hand_out(crew, waiting, flying, 1 if alone else crew.window)
        if not broken:
            finished, _ = wait(flying, return_when=FIRST_COMPLETED)
            for future in finished:
                task = flying.pop(future)
                suspects.discard(task.key)
                found = _outcome(future, task)
                if found is None:
                    broken.append(task)
                else:
                    breaks = 0
                    yield found
        if broken:
            breaks += 1
            if breaks > _BREAKS:
                raise LadderfitError(_NO_WORKERS)
            wait(flying)  # the others of a broken crew end as well
            for future, task in list(flying.items()):
                found = _outcome(future, task)
                if found is None:
                    broken.append(task)
                else:
                    yield found
            flying.clear()
            crew.mend()
            deaths.update(task.key for task in broken if alone)
            lost = [task for task in broken if deaths[task.key] >= _DEATHS_ALONE]
            yield from (_lost(task, "its worker died over it, twice") for task in lost)
            suspects.update(task.key for task in broken if task not in lost)
            suspects.difference_update(task.key for task in lost)
            waiting.extendleft(task for task in reversed(broken) if task not in lost)


_NO_WORKERS = (
    "the worker processes die one after the other; is there enough memory?  In a script, "
    "let the call stand under: if __name__ == '__main__'; or use workers=1"
)


def _hand_out(
    crew: Crew, waiting: deque[Task], flying: dict[Future[Outcome], Task], window: int
) -> list[Task]:
    """Fill the window; tasks that a broken crew did not take."""
    while waiting and len(flying) < window:
        task = waiting.popleft()
        try:
            flying[crew.submit(task)] = task
        except BrokenExecutor:
            return [task]
    return []


def _outcome(future: Future[Outcome], task: Task) -> Outcome | None:
    """What came of a task; None where the crew broke."""
    try:
        return future.result()
    except BrokenExecutor:
        return None
    except CancelledError:
        return _lost(task, "it was cancelled")
    except Exception as error:  # the cluster's own, such as too many dead workers
        return _lost(task, f"{type(error).__name__}: {error}")


def _lost(task: Task, words: str) -> Outcome:
    return Outcome(task.key, "lost", {}, words)


def _teller(progress: Progress | None, total: int) -> Callable[[int], None]:
    def tell(done: int) -> None:
        if progress is not None:
            progress(f"{done:,} of {total:,} fits", done / total if total else 1.0)

    return tell


def _refuse_doubles(tasks: Sequence[Task]) -> None:
    double = [key for key, count in Counter(task.key for task in tasks).items() if count > 1]
    if double:
        raise InputError(
            Problem(
                found=f"{double[0]!r} more than once",
                expected="each task once",
                remedy="take the others out",
            )
        )


def task_seed(root: int, key: str) -> int:
    """A seed for one task: the same whoever does it and when, and unlike any other task's.

    Parameters
    ----------
    root : int
        The sweep's own seed, from 0 up.
    key : str
        The task's key.

    Returns
    -------
    int
        From 0 to 2^63 - 1.
    """
    words = list(key.encode("utf-8"))
    state = np.random.SeedSequence([root, len(words), *words]).generate_state(1, np.uint64)
    return int(state[0] >> np.uint64(1))
