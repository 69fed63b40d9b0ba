"""`ladderfit alternatives`: its folder, its words, a kill in the middle, bad input."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import builders
import pandas as pd
import pytest
from astropy.table import Table

from ladderfit.alternatives import run_alternatives
from ladderfit.choices import Choices
from ladderfit.cli import main
from ladderfit.ladder import read_ladder
from ladderfit.ladder_file import write_choices
from ladderfit.sweep import read_records

AXES = {
    "cepheids.periods": [[8.0, 100.0], [5.0, 50.0]],
    "relation.metallicity": ["none"],
    "anchors.parallaxes.use": [False],
}


@pytest.fixture
def file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    return written(tmp_path, monkeypatch, AXES)


def written(folder: Path, monkeypatch: pytest.MonkeyPatch, axes: dict[str, object]) -> Path:
    builders.write_tables(folder)
    plain = {**builders.choices(tables=True), "alternatives": axes}
    write_choices(Choices.from_mapping(plain), folder / "small.toml")
    monkeypatch.chdir(folder)
    return folder / "small.toml"


def test_the_folder(file: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["alternatives", str(file), "--draws", "500", "--workers", "1"]) == 0
    text = capsys.readouterr().out
    assert "cepheids.periods = [8, 100]" in text
    assert text.rstrip().endswith("Written to small-alternatives-01")
    folder = file.parent / "small-alternatives-01"
    assert sorted(path.name for path in folder.iterdir()) == [
        "alternatives.csv", "alternatives.ecsv", "budget.csv", "budget.ecsv", "figures",
        "outcomes.jsonl", "provenance.json", "systematics.csv", "systematics.ecsv",
    ]  # fmt: skip
    figures = sorted(path.name for path in (folder / "figures").iterdir())
    assert figures == ["alternatives.pdf", "alternatives.png", "budget.pdf", "budget.png"]
    assert len(Table.read(folder / "alternatives.ecsv")) == 5
    # more alternatives in the same folder: what is there is not done again
    before = (folder / "outcomes.jsonl").read_bytes()
    text = file.read_text(encoding="utf-8")
    file.write_text(text.replace('["none"]', '["none"]\n"expansion.q0" = [-0.5]'), encoding="utf-8")
    out = ["--out", str(folder), "--draws", "500", "--workers", "1"]
    assert main(["alternatives", str(file), *out]) == 0
    assert (folder / "outcomes.jsonl").read_bytes().startswith(before)
    assert len(Table.read(folder / "alternatives.ecsv")) == 6
    assert main(["alternatives", str(file), "--out", str(folder), "--draws", "600"]) == 2
    assert "the outcomes of another sweep" in capsys.readouterr().err


def test_the_grid(file: Path, capsys: pytest.CaptureFixture[str]) -> None:
    options = ["--grid", "--draws", "200", "--workers", "1", "--out", "grid"]
    assert main(["alternatives", str(file), *options]) == 0
    assert "all axes" in capsys.readouterr().out
    assert len(pd.read_csv(file.parent / "grid" / "alternatives.csv")) == 3 * 2 * 2


@pytest.mark.parametrize(
    ("axes", "options", "words"),
    [
        ({}, [], "key alternatives: found no axis"),
        (AXES, ["--out", "."], "a file or folder without outcomes of a sweep"),
        (AXES, ["--dask", "nowhere"], "no Dask scheduler at 'nowhere'"),
        (AXES, ["--draws", "7"], "found 7; expected 100 to 10,000,000 draws"),
    ],
)
def test_bad_input(
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
    axes: dict[str, object],
    options: list[str],
    words: str,
) -> None:
    monkeypatch.setattr("ladderfit.sweep.cluster._PATIENCE", 0.3)
    file = written(tmp_path, monkeypatch, axes)
    assert main(["alternatives", str(file), *options]) == 2
    (line,) = capsys.readouterr().err.splitlines()
    assert words in line


@pytest.mark.parametrize("count", ["0", "two"])
def test_no_such_number_of_workers(file: Path, count: str) -> None:
    with pytest.raises(SystemExit, match="2"):
        main(["alternatives", str(file), "--workers", count])


@pytest.mark.skipif(os.name != "posix", reason="sends signals")
@pytest.mark.parametrize("number", [signal.SIGKILL, signal.SIGTERM])
def test_killed_and_resumed_it_is_the_same(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, number: signal.Signals
) -> None:
    """The table of a sweep that was killed is that of one that was not."""
    axes = {"cepheids.periods": [[5.0, 30.0 + i] for i in range(30)]}
    file = written(tmp_path, monkeypatch, axes)
    command = [sys.executable, "-m", "ladderfit", "alternatives", str(file), "--out", "killed"]
    command += ["--draws", "300", "--workers", "1"]
    running = subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    outcomes = tmp_path / "killed" / "outcomes.jsonl"
    deadline = time.monotonic() + 120.0
    while not (outcomes.exists() and outcomes.read_bytes().count(b"\n") > 3):
        assert running.poll() is None, running.communicate()
        assert time.monotonic() < deadline
        time.sleep(0.01)
    running.send_signal(number)
    _, said = running.communicate()
    assert 2 < len(read_records(outcomes)[1]) < 30
    assert not (tmp_path / "killed" / "alternatives.csv").exists()
    if number == signal.SIGTERM:
        assert running.returncode == 130
        assert said == (
            "ladderfit: interrupted; what was done is kept: to go on, repeat with --out killed\n"
        )
        return
    ladder = read_ladder(file)
    resumed = run_alternatives(ladder, workers=1, draws=300, file=outcomes)
    whole = run_alternatives(ladder, workers=1, draws=300)
    pd.testing.assert_frame_equal(resumed.table(), whole.table(), check_exact=True)
