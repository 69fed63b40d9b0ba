"""Run by itself: does a job in child processes and kills them at random moments.

Usage: python -c "import killed_jobs; killed_jobs.main()" JOB FOLDER KILLS SEED, where JOB
is a name in `JOBS`.  Prints one line of JSON: kills; how many of them left something
unfinished on disk; jobs that reached their end nevertheless; outcomes or draws lost; and
whatever differs from a job that nobody disturbed.
"""

from __future__ import annotations

import json
import os
import random
import shutil
import signal
import sys
import time
from collections.abc import Callable, Mapping
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
from ladderfit.sampling import worker
from ladderfit.sampling.chain_reading import read_chain
from ladderfit.sampling.convergence import Goal
from ladderfit.sampling.live import lay_out
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


def sweep_on_two(ladder: Ladder, out: Path) -> None:
    alternatives_in_folder(ladder, out, AXES, draws=200, workers=2)


def ensemble(ladder: Ladder, out: Path) -> None:
    """What the process of a run does, from laying out its folder to the result."""
    if not out.exists():
        lay_out(ladder, out, seed=5, goal=Goal(total=40_000))
    if worker.main([str(out)]) != 0:
        raise RuntimeError("the run failed")


JOBS: dict[str, Callable[[Ladder, Path], None]] = {
    "calibrate": calibration,
    "calibrate with figures": calibration,
    "alternatives": alternatives,
    "alternatives with figures": alternatives,
    "alternatives on two": sweep_on_two,
    "coverage": coverage,
    "coverage with figures": coverage,
    "ensemble": ensemble,
}
TABLES = {
    "alternatives": ("alternatives.ecsv", "systematics.csv", "budget.ecsv"),
    "coverage": ("coverage.ecsv", "ranks.csv"),
    "ensemble": (),
}


def kept(out: Path) -> dict[str, object]:
    """Outcomes on disk by key, the seconds that they took left out; rows of a chain by number."""
    if (out / "chain.h5").exists():
        rows = read_chain(out / "chain.h5", verify=True).z
        return {str(number): row.tobytes() for number, row in enumerate(rows)}
    path = out / "outcomes.jsonl"
    if not path.exists():
        return {}
    found = read_records(path)[1]
    values = {key: dict(outcome.values) for key, outcome in found.items()}
    for each in values.values():
        each.pop("seconds", None)
    return {key: (found[key].status, each) for key, each in values.items()}


def halfway(job: str, out: Path) -> bool:
    """Whether a killed job left something unfinished; a hidden folder is removed."""
    hidden = list(out.parent.glob(f".{out.name}.*.tmp"))
    for each in hidden:
        shutil.rmtree(each)
    return bool(hidden) or (not job.startswith("calibrate") and out.exists())


def names(folder: Path) -> set[Path]:
    return {path.relative_to(folder) for path in folder.rglob("*")}


def same_draws(one: Mapping[str, np.ndarray], two: Mapping[str, np.ndarray]) -> bool:
    return list(one) == list(two) and all(np.array_equal(one[name], two[name]) for name in two)


def fault(job: str, out: Path, reference: Path, ended: bool) -> str:
    """What is wrong with a folder, in words; nothing where all is well."""
    kind = job.split(maxsplit=1)[0]
    if kind == "calibrate" and not out.exists():
        return "nothing of a job that ended" if ended else ""
    if kind == "calibrate" or (kind == "ensemble" and ended):
        if names(out) != names(reference):
            return "a folder that is not whole"
        if not same_draws(read_result(out).draws, read_result(reference).draws):
            return "other draws"
    if kind == "calibrate":
        return ""
    whole, found = kept(reference), kept(out)
    if any(found[key] != whole.get(key) for key in found):
        return "an outcome that differs"
    if ended and found.keys() != whole.keys():
        return "outcomes that are missing at the end"
    for name in TABLES[kind] if ended else ():
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


def killed(work: Callable[[], None], after: float) -> int:
    """The exit status of a job in a process of its own, killed after so many seconds."""
    child = os.fork()
    if child == 0:
        code = 1
        try:
            os.setsid()
            work()
            code = 0
        finally:
            os._exit(code)
    time.sleep(after)
    os.kill(child, signal.SIGKILL)
    status = os.waitpid(child, 0)[1]
    until = time.monotonic() + 120.0
    while alive(child):  # its workers follow it, once they have started
        if time.monotonic() > until:
            raise RuntimeError("a worker outlives its sweep")
        time.sleep(0.02)
    return status


def alive(group: int) -> bool:
    """Whether a process of a group is left."""
    try:
        os.killpg(group, 0)
    except ProcessLookupError:
        return False
    return True


def main() -> None:
    job, folder, kills, seed = sys.argv[1], Path(sys.argv[2]), int(sys.argv[3]), int(sys.argv[4])
    if not job.endswith("figures"):
        without_figures()
    dice, ladder = random.Random(seed), ladder_in_files(folder / "data")
    reference, out = folder / "reference", folder / "run"
    JOBS[job](ladder, folder / "first")  # what is compiled and imported by the way
    start = time.monotonic()
    JOBS[job](ladder, reference)
    lasting = time.monotonic() - start
    count = dict.fromkeys(("kills", "halfway", "ends", "lost"), 0)
    faults, before = set(), dict[str, object]()
    while count["kills"] < kills:
        status = killed(lambda: JOBS[job](ladder, out), dice.uniform(0.0, 1.5 * lasting))
        ended = status == 0
        count["kills"] += os.WIFSIGNALED(status)
        count["ends"] += ended
        if os.WIFEXITED(status) and not ended:
            faults.add("a job that failed")
            break
        count["halfway"] += not ended and halfway(job, out)
        faults.add(fault(job, out, reference, ended))
        found = kept(out)
        count["lost"] += len(before.keys() - found.keys())
        before = found
        if ended or (job.startswith("calibrate") and out.exists()):
            shutil.rmtree(out)
            before = {}
    JOBS[job](ladder, out)
    faults.add(fault(job, out, reference, True))
    print(json.dumps({**count, "faults": sorted(faults - {""})}))
