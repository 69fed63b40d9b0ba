"""Sweeps: outcomes from one process and several, faults, dead workers, resuming after a kill."""

from __future__ import annotations

import os
import re
import signal
import subprocess
import sys
import time
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from sweep_jobs import job, tasks

from ladderfit.errors import InputError, LadderfitError
from ladderfit.files import lock
from ladderfit.sweep import Outcome, Task, read_records, sweep, task_seed
from ladderfit.sweep.crews import Alone
from ladderfit.sweep.run import outcomes


def sums(found: list[Outcome]) -> list[float]:
    return [outcome.values["sum"] for outcome in found]


def test_outcomes_in_the_order_of_the_tasks() -> None:
    found = sweep(job(), tasks(5), workers=1)
    assert sums(found) == [100.0, 101.0, 102.0, 103.0, 104.0]
    assert [outcome.key for outcome in found] == ["t0", "t1", "t2", "t3", "t4"]
    assert all(outcome.values["prepared"] == 1 for outcome in found)


def test_a_fault_is_an_outcome_and_stops_nothing() -> None:
    special = {"t1": {"do": "refuse"}, "t2": {"do": "err"}, "t3": {"do": "nan"}}
    found = sweep(job(), tasks(5, **special), workers=1)
    assert [outcome.status for outcome in found] == ["done", "failed", "failed", "failed", "done"]
    assert found[1].message == "key x: found a bad value; expected a good one; correct it"
    assert found[2].message == "an unexpected error (ZeroDivisionError: one over zero)"
    assert "JSON" in found[3].message


def test_processes_give_the_same_and_survive_a_dead_worker(tmp_path: Path) -> None:
    """One dies once and is done again; one dies always and is given up; all others are done."""
    special = {
        "t3": {"do": "die once", "mark": str(tmp_path / "mark")},
        "t6": {"do": "die"},
        "t8": {"do": "refuse"},
    }
    file = tmp_path / "outcomes.jsonl"
    told: list[tuple[str, float]] = []
    found = sweep(
        job(), tasks(10, **special), workers=2, file=file, progress=lambda *a: told.append(a)
    )
    status = [outcome.status for outcome in found]
    assert status == [*["done"] * 6, "lost", "done", "failed", "done"]
    assert found[6].message == "its worker died over it, twice"
    wanted = [100.0 + i for i in (0, 1, 2, 3, 4, 5, 7, 9)]
    assert sums([outcome for outcome in found if outcome.status == "done"]) == wanted
    assert told[0] == ("0 of 10 fits", 0.0)
    assert told[-1] == ("10 of 10 fits", 1.0)
    _, kept = read_records(file)
    assert sorted(kept) == sorted(outcome.key for outcome in found)
    again = sweep(job(), tasks(10), workers=1, file=file)  # what was lost is tried again
    assert again[6].values["sum"] == 106.0
    assert again[8].status == "failed"


def test_any_executor() -> None:
    with ThreadPoolExecutor(3) as executor:
        assert sums(sweep(job(), tasks(20), workers=executor)) == [100.0 + i for i in range(20)]


@pytest.mark.parametrize("workers", [0, True, 2.5, object()])
def test_workers_that_are_none(workers: Any) -> None:
    with pytest.raises(InputError, match="expected a number of processes from 1 up"):
        sweep(job(), tasks(1), workers=workers)


def test_two_tasks_with_one_key() -> None:
    with pytest.raises(InputError, match="found 't0' more than once"):
        sweep(job(), [Task("t0"), Task("t0")], workers=1)


def test_a_resumed_sweep_does_only_what_is_left(tmp_path: Path) -> None:
    file = tmp_path / "outcomes.jsonl"
    sweep(job(), tasks(4), workers=1, file=file, identity={"a": 1})
    before = file.read_bytes()
    found = sweep(job(base=0.0), tasks(6), workers=1, file=file, identity={"a": 1})
    assert sums(found) == [100.0, 101.0, 102.0, 103.0, 4.0, 5.0]  # the old ones are the old ones
    assert file.read_bytes().startswith(before)
    assert sums(sweep(job(), tasks(2), workers=1, file=file, identity={"a": 1})) == [100.0, 101.0]


def test_a_file_of_another_sweep(tmp_path: Path) -> None:
    file = tmp_path / "outcomes.jsonl"
    sweep(job(), tasks(1), workers=1, file=file, identity={"draws": 1, "seed": 2})
    with pytest.raises(InputError, match=r"another sweep \(it differs in: seed\)"):
        sweep(job(), tasks(1), workers=1, file=file, identity={"draws": 1, "seed": 3})


@pytest.mark.parametrize("cut", [1, 7, 60])
def test_a_torn_last_line_is_done_again(tmp_path: Path, cut: int) -> None:
    file = tmp_path / "outcomes.jsonl"
    sweep(job(), tasks(4), workers=1, file=file)
    file.write_bytes(file.read_bytes()[:-cut])
    assert len(read_records(file)[1]) == 3
    assert sums(sweep(job(), tasks(4), workers=1, file=file)) == [100.0, 101.0, 102.0, 103.0]
    assert len(read_records(file)[1]) == 4


def test_damage_is_refused_and_left_alone(tmp_path: Path) -> None:
    file = tmp_path / "outcomes.jsonl"
    sweep(job(), tasks(4), workers=1, file=file)
    damaged = file.read_bytes().replace(b'"sum": 101.0', b'"sum": 111.0')
    file.write_bytes(damaged)
    with pytest.raises(InputError, match=r"row 3: found a line that is damaged"):
        sweep(job(), tasks(4), workers=1, file=file)
    assert file.read_bytes() == damaged
    file.write_text("hello\n")
    with pytest.raises(InputError, match="expected a file of outcomes"):
        read_records(file)
    with pytest.raises(InputError, match="no such file"):
        read_records(tmp_path / "absent.jsonl")


def test_an_outcome_twice_in_a_file_is_damage(tmp_path: Path) -> None:
    file = tmp_path / "outcomes.jsonl"
    sweep(job(), tasks(2), workers=1, file=file)
    lines = file.read_bytes().splitlines(keepends=True)
    file.write_bytes(b"".join([*lines, lines[1], lines[2]]))
    with pytest.raises(InputError, match="a second outcome of 't0'"):
        read_records(file)


def test_two_sweeps_on_one_file(tmp_path: Path) -> None:
    file = tmp_path / "outcomes.jsonl"
    with (
        lock(tmp_path / "outcomes.jsonl.lock", "a sweep is under way"),
        pytest.raises(LadderfitError, match="a sweep is under way, held by process"),
    ):
        sweep(job(), tasks(1), workers=1, file=file)


def test_a_full_disk_leaves_the_file_whole(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    file = tmp_path / "outcomes.jsonl"
    sweep(job(), tasks(2), workers=1, file=file)
    before = file.read_bytes()

    def full(_: int) -> None:
        raise OSError(28, "No space left on device")

    with monkeypatch.context() as patch:
        patch.setattr(os, "fsync", full)
        with pytest.raises(OSError, match="No space"):
            sweep(job(), tasks(3), workers=1, file=file)
    assert file.read_bytes() == before
    assert len(sweep(job(), tasks(3), workers=1, file=file)) == 3


@pytest.mark.skipif(os.name != "posix", reason="kills processes")
@pytest.mark.parametrize("workers", [1, 2])
def test_killed_in_the_middle_it_goes_on(tmp_path: Path, workers: int) -> None:
    """SIGKILL, no warning: what was done is kept, the rest is done, nothing twice."""
    file = tmp_path / "outcomes.jsonl"
    script = Path(__file__).with_name("sweep_jobs.py")
    command = [sys.executable, str(script), str(file), str(workers)]
    running = subprocess.Popen(command, cwd=script.parent.parent)
    deadline = time.monotonic() + 120.0
    while not (file.exists() and file.read_bytes().count(b"\n") > 4):
        assert running.poll() is None, "the sweep ended by itself"
        assert time.monotonic() < deadline
        time.sleep(0.02)
    family = children(running.pid)
    running.send_signal(signal.SIGKILL)
    running.wait()
    _, kept = read_records(file)
    assert 3 < len(kept) < 40
    found = sweep(job(base=0.0), tasks(40), workers=1, file=file, identity={"a": 1})
    old = [outcome for outcome in found if outcome.key in kept]
    assert [o.values["sum"] for o in old] == [100.0 + int(o.key[1:]) for o in old]
    new = [outcome for outcome in found if outcome.key not in kept]
    assert [o.values["sum"] for o in new] == [float(o.key[1:]) for o in new]
    keys = re.findall(r'"key": "(t\d+)"', file.read_text(encoding="utf-8"))
    assert sorted(keys) == sorted(f"t{i}" for i in range(40))
    until = time.monotonic() + 20.0
    while any(alive(process) for process in family):  # the workers do not stay behind
        assert time.monotonic() < until, "a worker outlives its sweep"
        time.sleep(0.05)


def children(process: int) -> list[int]:
    try:
        text = Path(f"/proc/{process}/task/{process}/children").read_text(encoding="ascii")
    except OSError:
        return []
    return [int(word) for word in text.split()]


def alive(process: int) -> bool:
    try:
        state = Path(f"/proc/{process}/stat").read_text(encoding="utf-8").rpartition(")")[2]
    except OSError:
        return False
    return state.split()[0] != "Z"


def test_seeds_of_tasks_differ_and_stay() -> None:
    seeds = [task_seed(root, f"t{i}") for root in (1, 2) for i in range(500)]
    assert len(set(seeds)) == 1000
    assert seeds[:2] == [task_seed(1, "t0"), task_seed(1, "t1")]
    assert all(0 <= seed < 2**63 for seed in seeds)
    bits = np.array([[seed >> place & 1 for place in range(63)] for seed in seeds])
    assert np.abs(bits.mean(axis=0) - 0.5).max() < 5.0 * 0.5 / np.sqrt(1000)


def test_a_crew_that_always_breaks_ends_in_words() -> None:
    from concurrent.futures import BrokenExecutor, Future

    class Broken(Alone):
        def submit(self, task: Task) -> Future[Outcome]:
            raise BrokenExecutor

    with pytest.raises(LadderfitError, match="worker processes die one after the other"):
        list(outcomes(Broken("token", job()), tasks(100)))
