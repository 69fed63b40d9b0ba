"""Jobs that sweeps in tests do; workers import them by name."""

from __future__ import annotations

import os
import signal
import sys
import time
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from ladderfit.errors import InputError, Problem
from ladderfit.sweep import Job, Task, sweep


def prepare(shared: Mapping[str, Any]) -> dict[str, Any]:
    return {**shared, "prepared": 1}


def perform(state: Mapping[str, Any], arguments: Mapping[str, Any]) -> dict[str, Any]:
    """Add two numbers; on the way do what the arguments say."""
    match arguments.get("do"):
        case "refuse":
            raise InputError(Problem("a bad value", "a good one", "correct it", key="x"))
        case "err":
            raise ZeroDivisionError("one over zero")
        case "nan":
            return {"sum": float("nan")}
        case "die":
            os.kill(os.getpid(), signal.SIGKILL)
        case "die once":
            mark = Path(arguments["mark"])
            if not mark.exists():
                mark.touch()
                os.kill(os.getpid(), signal.SIGKILL)
    time.sleep(arguments.get("sleep", 0.0))
    return {"sum": state["base"] + arguments["x"], "prepared": state["prepared"]}


def job(base: float = 100.0) -> Job:
    return Job(perform, {"base": base}, prepare)


def tasks(count: int, **special: Mapping[str, Any]) -> list[Task]:
    """Tasks t0, t1, ...; some with arguments of their own."""
    return [Task(f"t{i}", {"x": i, **special.get(f"t{i}", {})}) for i in range(count)]


def main(path: str, workers: str) -> None:
    """A sweep that takes its time, for a test to kill."""
    slow = {f"t{i}": {"sleep": 0.15} for i in range(40)}
    sweep(job(), tasks(40, **slow), workers=int(workers), file=Path(path), identity={"a": 1})


if __name__ == "__main__":
    main(*sys.argv[1:])
