"""Faults: full and failing disks, killed jobs, clocks, two at once, damaged draws.

Afterwards work is resumed, or refused in clear words; no number is wrong, no draw is lost.
"""

from __future__ import annotations

import json
import os
import resource
import shutil
import subprocess
import sys
import threading
import time
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import Any

import killed_jobs
import numpy as np
import pytest
from failing_disk import BROKEN, DENIED, FULL, failing
from killed_jobs import ladder_in_files
from samplers import worked
from small_ladders import small_ladder
from sweep_jobs import job, tasks

import ladderfit.jobs.calibration
from ladderfit.cli import main
from ladderfit.errors import InputError
from ladderfit.files import lock, write_text_atomically
from ladderfit.jobs.calibration import calibrate
from ladderfit.report.write import clear_leftover, renew_report, write_report
from ladderfit.result import Result
from ladderfit.sampling.chain_reading import read_chain
from ladderfit.sampling.convergence import Goal
from ladderfit.sampling.live import lay_out, open_run
from ladderfit.sampling.run import draw
from ladderfit.sampling.run_folder import RunFolder, Status
from ladderfit.sampling.worker import Stopper, run
from ladderfit.store import read_result, write_netcdf, write_result
from ladderfit.sweep import read_records, sweep
from ladderfit.sweep.folder import OUTCOMES, sweep_folder

PER_ROW = 160  # draws of a row of an ensemble run


@pytest.fixture(scope="module")
def result(tmp_path_factory: pytest.TempPathFactory) -> Result:
    ladder = ladder_in_files(tmp_path_factory.mktemp("faults") / "data")
    return draw(ladder, seed=1, draws=200)


@pytest.fixture
def quick(result: Result, monkeypatch: pytest.MonkeyPatch) -> None:
    """Calibrations that only write: the draws are there, figures are a stand-in."""

    def figures(_: Result, folder: Path) -> None:
        folder.mkdir()
        (folder / "relation.png").write_bytes(b"\x89PNG")

    monkeypatch.setattr(ladderfit.jobs.calibration, "draw", lambda *_, **__: result)
    monkeypatch.setattr(ladderfit.jobs.calibration, "save_figures", figures)


def operations(count: int, in_full: bool, sample: int = 5) -> list[int]:
    """Which operations fail, one after the other: all in full, else some of them."""
    assert count > 3
    step = 1 if in_full else max(1, count // sample)
    return sorted({*range(1, count + 1, step), count})


KILLS = {  # reduced and in full; figures take seconds, and so do processes to start
    "calibrate": (3, 50),
    "alternatives": (3, 50),
    "coverage": (3, 50),
    "ensemble": (3, 50),
    "alternatives on two": (0, 10),
    "calibrate with figures": (0, 5),
    "alternatives with figures": (0, 5),
    "coverage with figures": (0, 5),
}


@pytest.mark.full
@pytest.mark.timeout(10_800)
@pytest.mark.parametrize("name", KILLS)
def test_killed_at_random_moments(name: str, tmp_path: Path, in_full: bool) -> None:
    """SIGKILL: no outcome is lost or altered; what is done again is the same to the last byte."""
    kills = KILLS[name][in_full]
    if not kills:
        pytest.skip("slow; runs with LADDERFIT_FULL=1")
    script = "import killed_jobs; killed_jobs.main()"  # as no file, which workers would import
    threads = ("LADDERFIT_THREADS", "OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS")  # none to fork with
    done = subprocess.run(
        [sys.executable, "-c", script, name, str(tmp_path / "jobs"), str(kills), "7"],
        cwd=Path(killed_jobs.__file__).parent,
        capture_output=True,
        text=True,
        check=False,
        env=os.environ | dict.fromkeys(threads, "1"),
    )
    assert done.returncode == 0, done.stderr[-2000:]
    print(done.stdout)  # how many kills left something halfway
    found = json.loads(done.stdout.splitlines()[-1])
    assert found["kills"] == kills
    assert found["halfway"] >= kills // 5
    assert (found["lost"], found["faults"]) == (0, [])


@pytest.mark.full
@pytest.mark.usefixtures("quick")
@pytest.mark.parametrize("code", [FULL, BROKEN])
def test_a_result_on_a_failing_disk(
    result: Result, tmp_path: Path, in_full: bool, code: int
) -> None:
    """The folder is there whole, or not at all and nothing is left of it."""
    with failing() as disk:
        calibrate(result.ladder, tmp_path / "whole")
    names = {path.name for path in (tmp_path / "whole").iterdir()}
    for number in operations(disk.count, in_full):
        with failing(number, code), pytest.raises(OSError, match=os.strerror(code)):
            calibrate(result.ladder, tmp_path / "out")
        assert [path.name for path in tmp_path.iterdir()] == ["whole"], number
    calibrate(result.ladder, tmp_path / "out")
    assert {path.name for path in (tmp_path / "out").iterdir()} == names


@pytest.mark.parametrize("limit", [0, 3_000, 30_000])
def test_draws_that_hdf5_cannot_write(result: Result, tmp_path: Path, limit: int) -> None:
    """A limit on the size of files is what HDF5 meets as a full disk."""
    write_netcdf(result, tmp_path / "whole.nc")
    assert (tmp_path / "whole.nc").stat().st_size > 30_000
    before = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (limit, before[1]))
    try:
        with pytest.raises(OSError) as caught:
            write_netcdf(result, tmp_path / "cut.nc")
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, before)
    assert "\n" not in str(caught.value)


@pytest.mark.full
def test_a_run_on_a_failing_disk(tmp_path: Path, in_full: bool) -> None:
    """Whatever fails, the chain keeps its commits, and ends as one that was never disturbed."""
    ladder, goal = small_ladder("flow"), Goal(total=6 * PER_ROW)
    reference = lay_out(ladder, tmp_path / "reference", seed=5, goal=goal)
    with failing() as disk:
        run(reference, Stopper(reference))
    whole, draws = read_chain(reference.chain), read_result(reference.path).draws
    for number in operations(disk.count, in_full, 4):
        folder = lay_out(ladder, tmp_path / f"run-{number}", seed=5, goal=goal)
        with failing(number) as disk:
            try:
                run(folder, Stopper(folder))
            except OSError as error:
                assert "No space" in str(error)
            else:  # commits follow the clock: this run had fewer
                assert 3 < disk.count < number
        rows = 0
        if folder.chain.exists():
            kept = read_chain(folder.chain, verify=True)
            rows = len(kept.z)
            np.testing.assert_array_equal(kept.z, whole.z[:rows])
        again = worked(folder)
        np.testing.assert_array_equal(read_chain(folder.chain, verify=True).z, whole.z)
        assert all(np.array_equal(again.draws[name], draws[name]) for name in draws)
        assert not [path for path in folder.path.iterdir() if path.name.endswith(".tmp")]


def test_a_worker_on_a_full_disk_says_so(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    from ladderfit.sampling import worker

    folder = lay_out(small_ladder("flow"), tmp_path / "run", goal=Goal(total=PER_ROW))
    with failing(9, once=True):
        assert worker.main([str(folder.path)]) == 1
    assert folder.status().state == "failed"
    assert "No space left" in folder.status().message
    with failing(1, DENIED):
        assert worker.main([str(folder.path)]) == 1
    said = capfd.readouterr().err
    assert "Traceback" not in said
    assert "Permission denied" in said
    assert worked(folder).size >= PER_ROW


def test_a_sweep_on_a_failing_disk(tmp_path: Path) -> None:
    """Every operation fails in its turn; what counted before is kept."""
    with failing() as disk:
        sweep(job(), tasks(4), workers=1, file=tmp_path / "whole.jsonl")
    for number in range(1, disk.count + 1):
        file = tmp_path / f"{number}.jsonl"
        with failing(number), pytest.raises(OSError, match="No space"):
            sweep(job(), tasks(4), workers=1, file=file)
        kept = read_records(file)[1] if file.exists() else {}
        found = sweep(job(base=0.0), tasks(4), workers=1, file=file)
        for place, outcome in enumerate(found):
            base = 100.0 if outcome.key in kept else 0.0
            assert outcome.values["sum"] == base + place
    assert not [path for path in tmp_path.iterdir() if path.suffix != ".jsonl"]


def test_a_sweep_killed_before_its_first_line(tmp_path: Path) -> None:
    """Its folder holds a lock and half a file, and is taken up; with anything else it is not."""
    out = tmp_path / "sweep"
    out.mkdir()
    (out / "outcomes.jsonl.lock").write_text("0\n", encoding="utf-8")
    (out / ".outcomes.jsonl.lock.k3x9a_0z").touch()
    (out / ".outcomes.jsonl.pxi2c4q7.tmp").write_text('{"format": "la', encoding="utf-8")
    assert sweep_folder(out) == out
    (out / "outcomes.jsonl.lock").unlink()
    sweep(job(), tasks(2), workers=1, file=out / OUTCOMES)
    assert not list(out.glob("*.tmp"))
    assert len(read_records(out / OUTCOMES)[1]) == 2
    (out / OUTCOMES).rename(out / "notes.txt")
    with pytest.raises(InputError, match="without outcomes of a sweep"):
        sweep_folder(out)


@pytest.fixture
def folder(result: Result, tmp_path: Path) -> Path:
    """A result folder with a report and a figure."""
    path = tmp_path / "result"
    (path / "figures").mkdir(parents=True)
    (path / "figures" / "relation.png").write_bytes(b"\x89PNG")
    write_result(result, path)
    write_report(result, path)
    return path


def contents(folder: Path) -> dict[str, bytes]:
    return {
        str(path.relative_to(folder)): path.read_bytes()
        for path in folder.rglob("*")
        if path.is_file()
    }


@pytest.mark.full
@pytest.mark.parametrize("once", [True, False])
def test_a_report_made_again_on_a_failing_disk(
    result: Result, folder: Path, in_full: bool, once: bool
) -> None:
    """A disk that fails once, or does not move files either: the old report is not lost.

    What such a disk does not put back is kept under a hidden name, and the next report does.
    """
    before = contents(folder)
    with failing() as disk:
        renew_report(result, folder)
    assert contents(folder) == before
    last = disk.count
    for number in (
        operations(last, in_full) if not once else [1, 2, last // 2, *range(last - 5, last + 1)]
    ):
        with failing(number, once=once), pytest.raises(OSError, match="No space") as caught:
            renew_report(result, folder)
        found = contents(folder)
        if found != before and not once:
            assert "what was there is kept in" in str(caught.value), number
            (hidden,) = folder.glob(".report.*.tmp")
            kept = {
                str(Path(name).relative_to(hidden.name)): data
                for name, data in found.items()
                if name.startswith(hidden.name)
            }
            assert {name: data for name, data in kept.items() if name.startswith("old-")} == {
                f"old-{name}": data for name, data in before.items() if name.startswith("tables")
            }
            clear_leftover(hidden, folder)
        assert contents(folder) == before, number


def test_a_folder_that_cannot_be_written(
    result: Result, folder: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """Injected, as whoever runs the tests may be allowed everything."""
    file = str(result.ladder.path)
    for arguments in (
        ["calibrate", file, "--out", str(tmp_path / "no" / "out")],
        ["coverage", file, "--out", str(tmp_path / "no" / "sweep")],
        ["report", str(folder)],
        ["draft", file.replace("small.toml", "flow.csv"), "--out", str(tmp_path / "no.toml")],
    ):
        with failing(1, DENIED):
            code = main(arguments)
        (line,) = capsys.readouterr().err.splitlines()
        assert code == 2, arguments
        assert "permission denied" in line.lower(), line
    assert not (tmp_path / "no" / "out").exists()


def test_a_clock_that_was_set_back(tmp_path: Path) -> None:
    """A status from the future does not keep a run from going on."""
    folder = lay_out(small_ladder("flow"), tmp_path / "run", goal=Goal(total=PER_ROW))
    folder.write_status(Status("starting", "", 1))
    assert folder.being_launched()
    for shift in (-86_400.0, 86_400.0):
        when = time.time() + shift
        os.utime(folder.path / "status.json", (when, when))
        assert not folder.being_launched()
        assert open_run(folder.path).state == "stopped"
    assert worked(RunFolder(folder.path)).size >= PER_ROW


@pytest.mark.usefixtures("quick")
def test_two_calibrations_into_one_folder(
    result: Result, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """One gets it, whole; the other is told that the name is taken."""
    together = threading.Barrier(2)

    def both(*_: Any, **__: Any) -> Result:
        together.wait(30.0)
        return result

    monkeypatch.setattr(ladderfit.jobs.calibration, "draw", both)

    def one(_: int) -> str:
        try:
            calibrate(result.ladder, tmp_path / "out")
        except InputError as error:
            return str(error)
        return "done"

    with ThreadPoolExecutor(2) as pool:
        found = sorted(pool.map(one, range(2)), key=len)
    assert found[0] == "done"
    assert found[1].endswith("choose another name, or move the old one away")
    assert read_result(tmp_path / "out").size == 200
    assert [path.name for path in tmp_path.iterdir()] == ["out"]


def test_two_reports_of_one_folder(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    with lock(folder / "report.lock", "a report is being written"):
        assert main(["report", str(folder)]) == 1
    (line,) = capsys.readouterr().err.splitlines()
    assert f"a report is being written, held by process {os.getpid()}" in line


def test_a_killed_report_leaves_nothing_behind(result: Result, folder: Path) -> None:
    (folder / ".report.killed.tmp").mkdir()
    write_text_atomically(folder / ".report.killed.tmp" / "report.html", "half")
    before = contents(folder)
    renew_report(result, folder)
    after = contents(folder)
    assert after == {name: data for name, data in before.items() if "killed" not in name}
    shutil.rmtree(folder)
