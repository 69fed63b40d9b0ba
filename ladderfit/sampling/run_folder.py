"""The folder of an ensemble run: what lies where, and how its processes talk.

``ladder.toml`` (and ``tables/``) hold the ladder, ``run.json`` the seed, the goal
and the inputs' hashes, ``chain.h5`` the draws, ``status.json`` how it stands,
``run.lock`` who is at work, ``worker.log`` what a worker had to say.  A file
``stop`` asks the worker to stop.  The result's own files join them at the end.
"""

from __future__ import annotations

import hashlib
import json
import time
from collections.abc import Mapping
from dataclasses import asdict, dataclass, replace
from pathlib import Path
from typing import Any, Literal

from ladderfit.assembly import file_key
from ladderfit.errors import InputError, Problem
from ladderfit.files import held, write_text_atomically
from ladderfit.ladder import Ladder
from ladderfit.ladder_copy import LADDER
from ladderfit.sampling.convergence import Goal, Report

State = Literal["starting", "running", "stopped", "finished", "failed"]
STATES = ("starting", "running", "stopped", "finished", "failed")
_FORMAT = 1
_LAUNCH = 60.0  # s that a worker may take to report


@dataclass(frozen=True)
class Settings:
    """What was asked for.

    Attributes
    ----------
    seed : int
    goal : Goal
    inputs : mapping of str to (table, SHA-256)
        By section of the ladder.
    """

    seed: int
    goal: Goal
    inputs: Mapping[str, tuple[str, str]]


@dataclass(frozen=True)
class Status:
    """How a run stands, as its worker last put it.

    Attributes
    ----------
    state : str
        One of starting, running, stopped, finished and failed.
    message : str
        What there is to say, for example why it failed.
    process : int
        Of the worker, or of whoever launched it.
    report : Report or None
        On all parameters, once finished.
    """

    state: State
    message: str = ""
    process: int = 0
    report: Report | None = None


@dataclass(frozen=True)
class RunFolder:
    """Paths of one run's folder; the folder itself may be read and written by several."""

    path: Path

    @property
    def ladder(self) -> Path:
        """The ladder file."""
        return self.path / LADDER

    @property
    def chain(self) -> Path:
        """The chain file."""
        return self.path / "chain.h5"

    @property
    def lock(self) -> Path:
        """Held by the worker."""
        return self.path / "run.lock"

    @property
    def log(self) -> Path:
        """What the worker wrote to its standard streams."""
        return self.path / "worker.log"

    @property
    def stop(self) -> Path:
        """Asks the worker to stop, by being there."""
        return self.path / "stop"

    def held(self) -> str | None:
        """Who is at work, in words; None where nobody is."""
        return held(self.lock)

    def being_launched(self) -> bool:
        """Whether somebody launched a worker a moment ago that has not reported yet."""
        if self.status().state != "starting":
            return False
        since = time.time() - (self.path / "status.json").stat().st_mtime
        return abs(since) < _LAUNCH  # below zero: the clock was set back meanwhile

    def settings(self) -> Settings:
        """What was asked for.

        Raises
        ------
        InputError
            If the folder is not that of a run.
        """
        path = self.path / "run.json"
        content = _read(path)
        try:
            if content["format"] != _FORMAT:
                raise ValueError(f"format {content['format']}, where {_FORMAT} is known")
            inputs = {key: (str(t), str(h)) for key, (t, h) in content["inputs"].items()}
            goal = Goal(**content["goal"])
            return Settings(int(content["seed"]), goal, inputs)
        except (KeyError, TypeError, ValueError, AttributeError) as error:
            raise _not_a_run(path, f"contents that do not fit ({error})") from None

    def write_settings(self, settings: Settings) -> None:
        """Put down what is asked for."""
        content = {"format": _FORMAT, **asdict(settings)}
        write_text_atomically(self.path / "run.json", json.dumps(content, indent=2) + "\n")

    def set_goal(self, goal: Goal) -> None:
        """Ask for another goal; a worker at work sees it at its next commit."""
        self.write_settings(replace(self.settings(), goal=goal))

    def status(self) -> Status:
        """How the run stands, as last put down; an unreadable status counts as none."""
        try:
            content = _read(self.path / "status.json")
            state = content["state"]
            if state not in STATES:
                raise ValueError(state)
            given = content["report"]
            report = None if given is None else Report(**given)
            return Status(state, str(content["message"]), int(content["process"]), report)
        except (InputError, KeyError, TypeError, ValueError):
            return Status("stopped", "nothing is known about an earlier run in this folder")

    def write_status(self, status: Status) -> None:
        """Put down how the run stands."""
        text = json.dumps(asdict(status), indent=2)
        write_text_atomically(self.path / "status.json", text + "\n")


def inputs_of(ladder: Ladder) -> dict[str, tuple[str, str]]:
    """Table and SHA-256 of every input, by section."""
    return {key: (source.path, source.sha256) for key, source in ladder.sources.items()}


def changed_inputs(ladder: Ladder, known: Mapping[str, tuple[str, str]]) -> list[Problem]:
    """One problem per table whose contents are not those recorded."""
    return [
        Problem(
            found=f"SHA-256 {ladder.sources[key].sha256[:12]}..."
            if key in ladder.sources
            else "no such table in use",
            expected=f"{sha256[:12]}..., the contents at the time of the first draws",
            remedy="restore the table, or start anew",
            file=table,
            key=file_key(key),
        )
        for key, (table, sha256) in known.items()
        if key not in ladder.sources or ladder.sources[key].sha256 != sha256
    ]


def fingerprint(ladder: Ladder) -> str:
    """A hash of every choice that the posterior depends on, and of the inputs."""
    choices = {
        key: value
        for key, value in ladder.choices.to_mapping().items()
        if key not in ("title", "sampling", "alternatives")
    }
    content = {"choices": choices, "inputs": inputs_of(ladder)}
    return hashlib.sha256(json.dumps(content, sort_keys=True, default=str).encode()).hexdigest()


def _read(path: Path) -> dict[str, Any]:
    if not path.is_file():
        raise _not_a_run(path, "no such file")
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError) as error:
        raise _not_a_run(path, f"a file that cannot be read ({error})") from None
    if not isinstance(content, dict):
        raise _not_a_run(path, "no object at the top")
    return content


def _not_a_run(path: Path, found: str) -> InputError:
    return InputError(
        Problem(
            found=found,
            expected="the folder of an ensemble run",
            remedy="name the folder that a run was started in",
            file=str(path),
        )
    )
