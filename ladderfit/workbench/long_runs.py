"""Runs of the ensemble sampler on the pin board: detached, watched, taken up again; no widgets.

All that is known of a run lies in its folder ``NAME.pins/run-01``.  Reading a chain
takes a while, so one thread reads, stops and resumes, and the page asks for what
it has found.
"""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import Future, ThreadPoolExecutor
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from ladderfit.choices import Choices
from ladderfit.errors import LadderfitError
from ladderfit.ladder import Ladder
from ladderfit.ladder_file import read_choices
from ladderfit.result import Result
from ladderfit.sampling.live import Run, open_run, start
from ladderfit.sampling.progress import RunProgress
from ladderfit.workbench.pins import free_name, moved, same_fit
from ladderfit.workbench.state import in_words

GOING = ("starting", "running")


@dataclass(frozen=True)
class LongRun:
    """What is known of one run.

    Attributes
    ----------
    name : str
        ``run-01``, say.
    choices : Choices or None
        As the session's own would be; None where the run's ladder file cannot be read.
    progress : RunProgress or None
        None until it has been read.
    result : Result or None
        Once the run is finished.
    words : str
        What went wrong, or what is being waited for.
    unread : str
        Its state before it is read, or where it cannot be.
    """

    name: str
    choices: Choices | None = None
    progress: RunProgress | None = None
    result: Result | None = None
    words: str = ""
    unread: str = "starting"

    @property
    def state(self) -> str:
        """Of the run: starting, running, stopped, finished, failed or unreadable."""
        return self.unread if self.progress is None else self.progress.state

    @property
    def going(self) -> bool:
        """Whether it is under way."""
        return self.state in GOING


class LongRuns:
    """The runs of one ladder.

    Parameters
    ----------
    ladder : Ladder
    folder : Path
        The pin board's.
    background : bool
        Whether runs are read by a thread; else `look` returns with the news.
    """

    def __init__(self, ladder: Ladder, folder: Path, *, background: bool) -> None:
        self.folder = folder
        self.background = background
        self._ladder = ladder
        self._runs: dict[str, Run] = {}
        self._known: dict[str, LongRun] = {}
        self._pool = ThreadPoolExecutor(1, thread_name_prefix="ladderfit-runs")
        self._reading: Future[dict[str, LongRun]] | None = None
        self._doing: dict[str, Future[Any]] = {}
        self._wanted = False

    @property
    def runs(self) -> list[LongRun]:
        """What is known of every run, by name."""
        return [self._known[name] for name in sorted(self._known)]

    @property
    def waits(self) -> bool:
        """Whether there will be news: a run is under way, or something is being read or done."""
        going = any(run.going for run in self._known.values())
        return going or self._reading is not None or bool(self._doing)

    def find(self, name: str) -> LongRun | None:
        """A run by its name."""
        return self._known.get(name)

    def of(self, choices: Choices) -> LongRun | None:
        """The latest run of these choices; None where there is none."""
        fitting = [r for r in self.runs if r.choices is not None and same_fit(r.choices, choices)]
        return fitting[-1] if fitting else None

    def start(self, ladder: Ladder, ess: float) -> str:
        """Start a run in a process of its own; returns its name.

        Raises
        ------
        LadderfitError, OSError
            If it cannot be started.
        """
        self.folder.mkdir(exist_ok=True)
        name = free_name(self.folder, "run")
        self._runs[name] = start(ladder, self.folder / name, ess=ess)
        self._known[name] = LongRun(name, ladder.choices, words="starting ...")
        self.refresh()
        return name

    def stop(self, name: str) -> None:
        """Stop a run, keeping what is drawn."""
        self._do(name, "stopping at the next commit ...", lambda run: run.stop())

    def resume(self, name: str, ess: float) -> None:
        """Let a run go on until so many effective draws."""
        self._do(name, "starting again ...", lambda run: run.resume(ess=ess))

    def refresh(self) -> bool:
        """Have every run read again, also those of other sessions; as `look`."""
        for path in self.folder.glob("*/run.json"):  # listed at once, read beside the page
            self._known.setdefault(path.parent.name, LongRun(path.parent.name))
        self._wanted = True
        return self.look()

    def look(self) -> bool:
        """Take up what has been read, and have more read while something is under way.

        Returns
        -------
        bool
            Whether there is news.
        """
        before = dict(self._known)
        for name, done in list(self._doing.items()):
            if done.done():
                del self._doing[name]
                if name in self._known:
                    self._known[name] = replace(self._known[name], words=_trouble(done))
                self._wanted = True
        if self._reading is not None and self._reading.done():
            self._take(self._reading.result())
            self._reading = None
        going = self._wanted or any(run.going for run in self._known.values())
        if going and self._reading is None and self.folder.is_dir():
            self._wanted = False
            self._reading = self._pool.submit(self._read, dict(self._known))
            if not self.background:
                self._take(self._reading.result())
                self._reading = None
        return before != self._known

    def _take(self, found: dict[str, LongRun]) -> None:
        for name, run in found.items():
            known = self._known.get(name)
            waiting = known is not None and name in self._doing
            self._known[name] = replace(run, words=known.words) if waiting and known else run
        for name in set(self._known) - set(found):
            if self._known[name].unread == "unreadable" or self._known[name].progress:
                del self._known[name]

    def _do(self, name: str, words: str, action: Callable[[Run], Any]) -> None:
        run = self._runs.get(name)
        if run is None or name in self._doing:
            return
        self._known[name] = replace(self._known[name], words=words)
        self._doing[name] = self._pool.submit(action, run)

    def _read(self, known: dict[str, LongRun]) -> dict[str, LongRun]:
        """Read every run that may have changed; by the thread alone."""
        found = {}
        for path in sorted(self.folder.glob("*/run.json")):
            name = path.parent.name
            try:
                found[name] = self._look_at(name, known.get(name, LongRun(name)))
            except (LadderfitError, OSError) as error:
                words = in_words(error) if isinstance(error, LadderfitError) else str(error)
                found[name] = LongRun(name, words=words, unread="unreadable")
        return found

    def _look_at(self, name: str, known: LongRun) -> LongRun:
        if known.state == "finished" and known.result is not None:
            return known
        run = self._runs.setdefault(name, open_run(self.folder / name))
        choices = known.choices
        if choices is None:
            place = self.folder / name
            choices = moved(read_choices(place / "ladder.toml"), place, self._ladder)
        progress = run.progress()
        result = run.result() if progress.state == "finished" else None
        changed = result is not None and result.source is None
        words = "Its tables have changed since: it does not stand beside the live numbers."
        return LongRun(name, choices, progress, result, words if changed else "")


def _trouble(done: Future[Any]) -> str:
    """What went wrong with something that was done."""
    error = done.exception()
    if error is None:
        return ""
    return in_words(error) if isinstance(error, LadderfitError) else repr(error)
