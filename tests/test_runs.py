"""Runs as processes: watched, stopped, killed, resumed, outliving whoever started them."""

from __future__ import annotations

import os
import random
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest
from builders import choices, write_tables
from samplers import by_ensemble, worked
from small_ladders import small_ladder

import ladderfit as lf
import ladderfit.shipped
from ladderfit.errors import InputError, LadderfitError
from ladderfit.files import first_free
from ladderfit.ladder import Ladder, read_ladder
from ladderfit.sampling.chain_reading import Chain, read_chain, read_commit
from ladderfit.sampling.convergence import Goal
from ladderfit.sampling.live import Run, lay_out, open_run, start
from ladderfit.sampling.run import draw
from ladderfit.sampling.run_folder import RunFolder, Status
from ladderfit.sampling.worker import Stopper, run
from ladderfit.store import read_result

PER_ROW = 160  # draws of a row, with two coordinates
LONG = 1_000_000  # draws that no test waits for


@pytest.fixture(scope="module")
def ladder() -> Ladder:
    return small_ladder("flow")


@pytest.fixture(scope="module")
def reference(ladder: Ladder, tmp_path_factory: pytest.TempPathFactory) -> RunFolder:
    """An uninterrupted run of 200 rows, in this process."""
    path = tmp_path_factory.mktemp("runs") / "reference"
    by_ensemble(ladder, path, goal=Goal(total=200 * PER_ROW), seed=5)
    return RunFolder(path)


@pytest.fixture
def from_files(tmp_path: Path) -> Ladder:
    """A ladder in files, from which parallaxes are left out to be quick."""
    from ladderfit.choices import Choices
    from ladderfit.ladder_file import write_choices

    plain = choices(tables=True)
    del plain["anchors"]["parallaxes"]
    (tmp_path / "data").mkdir()
    write_tables(tmp_path / "data")
    write_choices(Choices.from_mapping(plain), tmp_path / "data" / "small.toml")
    return read_ladder(tmp_path / "data" / "small.toml")


def assert_same_chain(one: Chain, two: Chain) -> None:
    np.testing.assert_array_equal(one.z, two.z)
    np.testing.assert_array_equal(one.log_density, two.log_density)
    assert (one.commit.rows, one.commit.warm_up) == (two.commit.rows, two.commit.warm_up)
    for mine, theirs in zip(one.generators, two.generators, strict=True):
        np.testing.assert_array_equal(mine[1], theirs[1])
        assert mine[2:] == theirs[2:]


def until(run_: Run, rows: int) -> None:
    """Wait until so many rows are committed."""
    end = time.monotonic() + 120.0
    while time.monotonic() < end:
        chain = run_.path / "chain.h5"
        if chain.exists() and read_commit(chain)[1].rows >= rows:
            return
        assert run_.state in ("starting", "running"), run_.progress()
        time.sleep(0.02)
    raise AssertionError(str(run_.progress()))


def worker_of(folder: Path) -> int:
    return int((folder / "run.lock").read_text().split()[0])


def test_from_start_to_result(ladder: Ladder, reference: RunFolder, tmp_path: Path) -> None:
    run_ = start(ladder, tmp_path / "run", seed=5, total=60 * PER_ROW)
    assert run_.state in ("starting", "running")
    told = []
    found = run_.wait(tell=told.append)
    assert (found.state, found.draws, found.fraction) == ("finished", 60 * PER_ROW, 1.0)
    assert found.worst in run_.result().draws
    assert 0.0 < found.ess < found.draws
    assert found.rate > 0.0
    assert str(found).startswith("finished. ")
    result = run_.result()
    direct = draw(ladder, seed=1, draws=200)
    assert list(result.draws) == list(direct.draws)
    assert list(result.summary()["unit"]) == list(direct.summary()["unit"])
    assert result.size == 60 * PER_ROW
    assert result.diagnostics.seed == 5
    chain, longer = read_chain(run_.path / "chain.h5"), read_chain(reference.chain)
    np.testing.assert_array_equal(chain.z, longer.z[: len(chain.z)])

    worked(RunFolder(run_.path))  # the total is reached already: nothing is added
    assert run_.progress().draws == 60 * PER_ROW
    again = open_run(run_.path)
    assert again.wait(total=200 * PER_ROW).draws == 200 * PER_ROW  # completed, not added to
    assert_same_chain(read_chain(run_.path / "chain.h5"), read_chain(reference.chain))
    assert again.result().size == 200 * PER_ROW
    for name, values in read_result(reference.path).draws.items():
        np.testing.assert_array_equal(again.result().draws[name], values)


def interrupt(_: object) -> None:
    raise KeyboardInterrupt


def test_stopped_and_resumed(ladder: Ladder, reference: RunFolder, tmp_path: Path) -> None:
    run_ = start(ladder, tmp_path / "run", seed=5, total=LONG)
    until(run_, 45)
    with pytest.raises(LadderfitError, match=r"a run is under way in this folder, held by process"):
        open_run(run_.path).resume()
    second = subprocess.run(
        [sys.executable, "-m", "ladderfit.sampling.worker", str(run_.path)],
        capture_output=True,
        text=True,
        check=False,
    )
    assert second.returncode == 1
    assert "a run is under way in this folder, held by process" in second.stderr
    assert "Traceback" not in second.stderr
    found = run_.wait(tell=interrupt)  # as the keyboard would
    assert found.state == "stopped"
    assert found.draws > 0
    assert not (run_.path / "stop").exists()
    assert not (run_.path / "run.lock").exists()
    partial = run_.result()
    assert partial.size == found.draws
    assert any("more draws for" in note for note in partial.diagnostics.notes)
    rows = found.draws // PER_ROW + 20
    run_.set_goal(total=rows * PER_ROW)
    worked(RunFolder(run_.path))
    assert run_.progress().draws == rows * PER_ROW
    chain, whole = read_chain(run_.path / "chain.h5"), read_chain(reference.chain)
    shared = min(len(chain.z), len(whole.z))
    np.testing.assert_array_equal(chain.z[:shared], whole.z[:shared])


@pytest.mark.full
@pytest.mark.timeout(7200)
def test_killed_at_random_moments(
    ladder: Ladder, reference: RunFolder, tmp_path: Path, in_full: bool
) -> None:
    """SIGKILL: no committed draw is lost, and the resumed chain equals the uninterrupted one."""
    dice = random.Random(9)
    run_ = start(ladder, tmp_path / "run", seed=5, total=200 * PER_ROW)
    kills, rows = 0, 0
    while kills < (50 if in_full else 2):
        time.sleep(dice.uniform(0.0, 4.0 if in_full else 2.0))
        lock = run_.path / "run.lock"
        if run_.state == "finished" or not lock.exists():
            if run_.state == "finished":  # begin again, kills are what counts
                assert_same_chain(read_chain(run_.path / "chain.h5"), read_chain(reference.chain))
                run_ = start(ladder, first_free(tmp_path / "run"), seed=5, total=200 * PER_ROW)
                rows = 0
            continue
        os.kill(worker_of(run_.path), signal.SIGKILL)
        kills += 1
        while run_.state in ("starting", "running"):
            time.sleep(0.02)
        assert run_.state == "stopped"
        if (run_.path / "chain.h5").exists():
            chain = read_chain(run_.path / "chain.h5", verify=True)
            assert len(chain.z) >= rows
            rows = len(chain.z)
            np.testing.assert_array_equal(chain.z, read_chain(reference.chain).z[:rows])
        run_.resume()
    assert run_.wait().state == "finished"
    assert_same_chain(read_chain(run_.path / "chain.h5", verify=True), read_chain(reference.chain))
    for name, values in read_result(reference.path).draws.items():
        np.testing.assert_array_equal(run_.result().draws[name], values)


def test_a_run_outlives_whoever_started_it(tmp_path: Path) -> None:
    script = (
        "import ladderfit as lf; from ladderfit.shipped import sample_ladder\n"
        f"run = lf.start(lf.read_ladder(sample_ladder()), {str(tmp_path / 'run')!r}, total=600)\n"
    )
    subprocess.run([sys.executable, "-c", script], check=True, timeout=120, capture_output=True)
    found = lf.open_run(tmp_path / "run").wait()
    assert found.state == "finished"
    assert found.draws == 768  # whole rows
    assert read_result(tmp_path / "run").size == 768


def kept_rows(folder: Path) -> int:
    chain = folder / "chain.h5"
    return read_commit(chain)[1].kept if chain.exists() else 0


COMMAND = """
import runpy, signal
signal.signal(signal.SIGINT, signal.default_int_handler)  # a job in the background ignores it
runpy.run_module("ladderfit", run_name="__main__")
"""


def interrupted(arguments: list[str], folder: Path, by: int) -> subprocess.CompletedProcess[str]:
    """Send a signal to a process once its run has kept some more draws."""
    before = kept_rows(folder)
    process = subprocess.Popen(
        [sys.executable, "-c", COMMAND, *arguments],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )
    end = time.monotonic() + 120.0
    while time.monotonic() < end and process.poll() is None and kept_rows(folder) == before:
        time.sleep(0.05)
    process.send_signal(by)
    try:
        out, err = process.communicate(timeout=120)
    finally:
        process.kill()
    return subprocess.CompletedProcess(arguments, process.returncode, out, err)


def test_the_command_line_is_interrupted_and_resumed(from_files: Ladder, tmp_path: Path) -> None:
    folder = tmp_path / "run"
    anew = ["calibrate", str(from_files.path), "--out", str(folder), "--sampler", "ensemble"]
    anew += ["--draws", str(LONG)]
    for arguments, by in (
        (anew, signal.SIGTERM),
        (["calibrate", "--resume", str(folder)], signal.SIGINT),
    ):
        done = interrupted(arguments, folder, by)
        assert done.returncode == 130, done.stderr
        assert done.stdout == ""
        (line,) = done.stderr.splitlines()
        assert line.startswith("ladderfit: stopped; ")
        assert line.endswith(f"to go on: ladderfit calibrate --resume {folder}")
    assert not (folder / "summary.json").exists()
    done = subprocess.run(
        [sys.executable, "-m", "ladderfit", "calibrate", "--resume", str(folder), "--draws", "200"],
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    assert done.stderr == ""
    assert "over independent ensembles" in done.stdout
    assert done.stdout.endswith(f"Written to {folder}\n")
    assert {path.name for path in folder.iterdir()} >= {"summary.json", "figures", "posterior.nc"}


def test_the_same_numbers_on_one_thread_and_on_two(tmp_path: Path) -> None:
    ladder = read_ladder(lf.shipped.sample_ladder())
    folders, workers = [], []
    for threads in ("1", "2"):
        folder = lay_out(ladder, tmp_path / threads, seed=1, goal=Goal(total=600))
        names = ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "NUMBA_NUM_THREADS")
        environment = os.environ | dict.fromkeys((*names, "LADDERFIT_THREADS"), threads)
        command = [sys.executable, "-m", "ladderfit.sampling.worker", str(folder.path)]
        workers.append(subprocess.Popen(command, env=environment))
        folders.append(folder)
    assert [worker.wait(timeout=200) for worker in workers] == [0, 0]
    assert_same_chain(*(read_chain(folder.chain) for folder in folders))
    one, two = (read_result(folder.path).draws for folder in folders)
    for name in one:
        np.testing.assert_array_equal(one[name], two[name])


def test_another_seed_gives_other_draws(
    ladder: Ladder, reference: RunFolder, tmp_path: Path
) -> None:
    other = by_ensemble(ladder, tmp_path / "run", goal=Goal(total=200 * PER_ROW), seed=6)
    same = read_result(reference.path)
    assert not np.isin(other.draws["scatter"], same.draws["scatter"]).any()
    assert not np.isin(other.draws["slope"], same.draws["slope"]).any()


def test_what_cannot_be_started(ladder: Ladder, tmp_path: Path) -> None:
    (tmp_path / "taken").mkdir()
    with pytest.raises(InputError, match="a file or folder of that name"):
        start(ladder, tmp_path / "taken")
    with pytest.raises(InputError, match="found ess = 0; expected 1 draw or more"):
        start(ladder, tmp_path / "run", ess=0)
    fixed = ladder.change({f"priors.{n}": {"fixed": 0.1} for n in ("scatter", "peak_scatter")})
    with pytest.raises(InputError, match='use sampler = "direct", whose draws are exact here'):
        start(fixed, tmp_path / "run")
    with pytest.raises(InputError, match=r"run\.json: found no such file"):
        open_run(tmp_path / "taken")
    assert [path.name for path in tmp_path.iterdir()] == ["taken"]


def append_line(path: Path) -> None:
    path.write_text(path.read_text(encoding="utf-8") + "\n", encoding="utf-8")


def test_a_table_that_changed_before_the_start_is_named(from_files: Ladder, tmp_path: Path) -> None:
    append_line(tmp_path / "data" / "flow.csv")
    with pytest.raises(InputError, match=r"flow\.csv.*key expansion\.table: found other contents"):
        start(from_files, tmp_path / "run")
    assert not (tmp_path / "run").exists()


def test_a_run_goes_on_only_with_what_it_began_with(from_files: Ladder, tmp_path: Path) -> None:
    folder = lay_out(from_files, tmp_path / "run", goal=Goal(total=10 * PER_ROW))
    worked(folder)
    before = folder.chain.read_bytes()
    folder.set_goal(Goal(total=20 * PER_ROW))
    ladder_file, table = folder.ladder.read_text(), tmp_path / "data" / "flow.csv"
    original = table.read_bytes()
    append_line(table)
    with pytest.raises(InputError, match=r"flow\.csv, key expansion\.table: found SHA-256"):
        run(folder, Stopper(folder))
    with pytest.raises(InputError, match=r"flow\.csv, key expansion\.table: found SHA-256"):
        _ = open_run(folder.path).ladder
    table.write_bytes(original)
    folder.ladder.write_text(ladder_file.replace("100.0", "90.0"))
    with pytest.raises(InputError, match="found draws of another ladder or seed"):
        run(folder, Stopper(folder))
    folder.ladder.write_text(ladder_file)
    assert folder.chain.read_bytes() == before
    assert run(folder, Stopper(folder)).state == "finished"


def test_a_run_that_fails_says_why(from_files: Ladder, tmp_path: Path) -> None:
    folder = lay_out(from_files, tmp_path / "run", goal=Goal(total=PER_ROW))
    folder.chain.write_bytes(b"not a chain")
    run_ = open_run(folder.path)
    run_.resume()
    with pytest.raises(LadderfitError, match=r"the run failed: .*chain\.h5: found a file that is"):
        run_.wait()
    assert run_.state == "failed"
    assert folder.chain.read_bytes() == b"not a chain"
    with pytest.raises(InputError, match=r"chain\.h5: found a file that is not HDF5"):
        run_.result()


def test_a_run_without_draws_says_so(from_files: Ladder, tmp_path: Path) -> None:
    folder = lay_out(from_files, tmp_path / "run")
    run_ = open_run(folder.path)
    assert (run_.state, run_.goal) == ("stopped", Goal(ess=4000.0))
    assert str(run_.progress()) == (
        "stopped: not started yet. 0 draws so far, as the warm-up comes first: resume the run."
    )
    with pytest.raises(LadderfitError, match="nothing is drawn yet; the run is stopped"):
        run_.result()


def test_a_process_that_vanished_counts_as_stopped(from_files: Ladder, tmp_path: Path) -> None:
    folder = lay_out(from_files, tmp_path / "run")
    folder.write_status(Status("running", "", 1))
    found = open_run(folder.path).progress()
    assert found.state == "stopped"
    assert "ended without a word; what is committed is kept" in found.message


def test_a_run_can_be_stopped_from_elsewhere_and_its_goal_moved(
    ladder: Ladder, tmp_path: Path
) -> None:
    run_ = start(ladder, tmp_path / "run", total=LONG)
    until(run_, 2)
    assert open_run(run_.path).stop().state == "stopped"
    run_.resume()
    until(run_, 31)
    found = run_.wait(ess=300)
    assert (found.state, found.goal) == ("finished", Goal(ess=300))
    assert 300 <= found.ess < found.draws < LONG
