"""Work that a view needs and that takes many fits: beside the page, in pieces; no widgets.

One thread works at a time, on its own core if there is one.  A newer change ends
it at its next evaluation.  It touches no widget: the page asks how it stands.
What was worked out lately is kept by its choices.
"""

from __future__ import annotations

import contextlib
import os
import sys
import threading
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

from ladderfit.choices import Choices
from ladderfit.errors import LadderfitError
from ladderfit.kernels.compiling import in_background
from ladderfit.result import Result
from ladderfit.workbench.shown import Tell
from ladderfit.workbench.state import in_words

Work = Callable[[Result, Tell], Any]
_KEPT = 12  # pieces of finished work
_NICENESS = 10  # of a working thread, so that the page comes first


class SupersededError(Exception):
    """A newer change made this work needless."""


@dataclass(eq=False)
class Job:
    """One piece of work: for which view and choices, and how it stands.

    Attributes
    ----------
    key : str
        Of the view.
    choices : Choices
    share : float
        Fraction done.
    value : object
        What came out, once `done`.
    words : str
        What went wrong, where it did.
    """

    key: str
    choices: Choices
    share: float = 0.0
    done: bool = False
    value: Any = None
    words: str = ""
    dropped: threading.Event = field(default_factory=threading.Event)

    def tell(self, share: float) -> None:
        """Take note of the fraction done.

        Raises
        ------
        SupersededError
            If nobody waits for it any more.
        """
        self.check()
        self.share = share

    def check(self) -> None:
        """Raise where nobody waits for it any more."""
        if self.dropped.is_set():
            raise SupersededError


class Slow:
    """The work of views, at most one at a time.

    Parameters
    ----------
    background : bool
        Whether to work in a thread; else `ask` returns when the work is done.

    Attributes
    ----------
    current : Job or None
        What is being worked on, or was finished and not asked for yet.
    """

    def __init__(self, *, background: bool) -> None:
        self.background = background
        self.current: Job | None = None
        self._finished: list[Job] = []
        self._turn = threading.Lock()

    def ask(self, key: str, result: Result, work: Work) -> Job:
        """The work of a view for a posterior's choices: kept, under way, or begun now."""
        now = self.current
        if now is not None and now.done:
            self._finished = [*self._finished, now][-_KEPT:]
            self.current = now = None
        for job in (*self._finished, *([] if now is None else [now])):
            if job.key == key and job.choices == result.choices:
                return job
        self.cancel()
        self.current = job = Job(key, result.choices)
        if self.background:
            arguments = (job, result, work)
            thread = threading.Thread(
                target=self._beside, args=arguments, daemon=True, name="ladderfit-view"
            )
            thread.start()
        else:
            self._do(job, result, work)
        return job

    def cancel(self) -> None:
        """Let go of what is under way."""
        if self.current is not None and not self.current.done:
            self.current.dropped.set()
            self.current = None

    def _beside(self, job: Job, result: Result, work: Work) -> None:
        if sys.platform == "linux":  # where a thread has a priority of its own
            with contextlib.suppress(OSError):
                os.setpriority(os.PRIO_PROCESS, threading.get_native_id(), _NICENESS)
        with self._turn, in_background(job.check):
            self._do(job, result, work)

    def _do(self, job: Job, result: Result, work: Work) -> None:
        try:
            job.tell(0.0)
            job.value = work(result, job.tell)
        except SupersededError:
            return
        except LadderfitError as error:
            job.words = in_words(error)
        except Exception as error:  # would be lost in a thread
            job.words = f"This went wrong inside ladderfit: {error!r}"
        job.done = True
