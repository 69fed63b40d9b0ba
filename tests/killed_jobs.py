"""Run by itself: does a job in child processes and kills them at random moments.

Usage: python killed_jobs.py JOB FOLDER KILLS SEED, where JOB is calibrate, alternatives
or coverage.  Prints one line of JSON: kills, jobs that reached their end nevertheless,
outcomes lost, and whatever differs from a job that nobody disturbed.
"""

from __future__ import annotations

import json
import os
import random
import shutil
import signal
import sys
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
from builders import choices, write_tables

import ladderfit.jobs.alternatives
import ladderfit.jobs.calibration
import ladderfit.jobs.coverage
from ladderfit.choices import Choices
from ladderfit.jobs.alternatives import alternatives_in_folder
from ladderfit.jobs.calibration import calibrate
from ladderfit.jobs.coverage import coverage_with_figure
from ladderfit.ladder import Ladder, read_ladder
from ladderfit.ladder_file import write_choices
from ladderfit.store import read_result
from ladderfit.sweep import read_records

AXES = {
    "relation.pivot": [5.0, 8.0, 12.0, 15.0],
    "cepheids.periods": [[2, 60], [3, 80]],
}


def ladder_in_files(folder: Path) -> Ladder:
    """A ladder in files, from which parallaxes are left out to be quick."""
    plain = choices(tables=True)
    del plain["anchors"]["parallaxes"]
    folder.mkdir(parents=True)
    write_tables(folder)
    write_choices(Choices.from_mapping(plain), folder / "small.toml")
    return read_ladder(folder / "small.toml")


def calibration(ladder: Ladder, out: Path) -> None:
    calibrate(ladder, out, draws=200)


def alternatives(ladder: Ladder, out: Path) -> None:
    alternatives_in_folder(ladder, out, AXES, draws=200, workers=1)


def coverage(ladder: Ladder, out: Path) -> None:
    coverage_with_figure(ladder, out, 12, workers=1)


JOBS: dict[str, Callable[[Ladder, Path], None]] = {
    "calibrate": calibration,
    "alternatives": alternatives,
    "coverage": coverage,
}
TABLES = {
    "alternatives": ("alternatives.ecsv", "systematics.csv", "budget.ecsv"),
    "coverage": ("coverage.ecsv", "ranks.csv"),
}


def kept(out: Path) -> dict[str, tuple[str, object]]:
    """Outcomes on disk, by key; the seconds that they took left out."""
    path = out / "outcomes.jsonl"
    if not path.exists():
        return {}
    values = {key: dict(found.values) for key, found in read_records(path)[1].items()}
    for each in values.values():
        each.pop("seconds", None)
    return {key: (read_records(path)[1][key].status, each) for key, each in values.items()}


def fault(job: str, out: Path, reference: Path, ended: bool) -> str:
    """What is wrong with a folder, in words; nothing where all is well."""
    if job == "calibrate":
        if not out.exists():
            return "nothing of a job that ended" if ended else ""
        names = {path.relative_to(out) for path in out.rglob("*")}
        if names != {path.relative_to(reference) for path in reference.rglob("*")}:
            return "a folder that is not whole"
        one, two = read_result(out), read_result(reference)
        same = all(np.array_equal(one.draws[name], two.draws[name]) for name in two.draws)
        return "" if same and list(one.draws) == list(two.draws) else "other draws"
    whole, found = kept(reference), kept(out)
    if any(found[key] != whole.get(key) for key in found):
        return "an outcome that differs"
    if ended and found.keys() != whole.keys():
        return "outcomes that are missing at the end"
    for name in TABLES[job] if ended else ():
        if (out / name).read_bytes() != (reference / name).read_bytes():
            return f"another {name}"
    return ""


def without_figures() -> None:
    """To be quick: a stand-in for figures, which take most of the time."""

    def stand_in(*arguments: object, **_: object) -> None:
        folder = next(Path(each) for each in arguments if isinstance(each, Path))
        folder.mkdir(exist_ok=True)
        for number in range(20):
            (folder / f"{number}.png").write_bytes(bytes(1000))

    ladderfit.jobs.calibration.save_figures = stand_in
    ladderfit.jobs.alternatives.save_comparison_figures = stand_in
    ladderfit.jobs.coverage.save_coverage_figure = stand_in


def main() -> None:
    if os.environ.get("LADDERFIT_FULL") != "1":
        without_figures()
    job, folder, kills, seed = sys.argv[1], Path(sys.argv[2]), int(sys.argv[3]), int(sys.argv[4])
    dice, ladder = random.Random(seed), ladder_in_files(folder / "data")
    reference = folder / "reference"
    JOBS[job](ladder, folder / "first")  # what is compiled and imported by the way
    start = time.monotonic()
    JOBS[job](ladder, reference)
    lasting = time.monotonic() - start
    done, ends, lost, faults, before = 0, 0, 0, [], {}
    out = folder / "run"
    while done < kills:
        child = os.fork()
        if child == 0:
            code = 1
            try:
                JOBS[job](ladder, out)
                code = 0
            finally:
                os._exit(code)
        time.sleep(dice.uniform(0.0, lasting))
        os.kill(child, signal.SIGKILL)
        status = os.waitpid(child, 0)[1]
        done += os.WIFSIGNALED(status)
        if os.WIFEXITED(status) and os.WEXITSTATUS(status):
            faults.append("a job that failed")
        ended = status == 0
        faults += filter(None, [fault(job, out, reference, ended)])
        found = kept(out) if job != "calibrate" else {}
        lost += len(before.keys() - found.keys())
        before = found
        ends += ended
        if ended or (job == "calibrate" and out.exists()):
            shutil.rmtree(out)
            before = {}
    if not out.exists() or job != "calibrate":
        JOBS[job](ladder, out)
    faults += filter(None, [fault(job, out, reference, True)])
    print(json.dumps({"kills": done, "ends": ends, "lost": lost, "faults": sorted(set(faults))}))


if __name__ == "__main__":
    main()
