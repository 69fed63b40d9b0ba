"""The command line, as a user meets it: in a process of its own, and called from Python."""

from __future__ import annotations

import io
import json
import os
import signal
import subprocess
import sys
import time
from importlib.metadata import version
from pathlib import Path

import builders
import handmade
import numpy as np
import pytest
import tomlkit

import ladderfit.jobs.calibration
from ladderfit.cli import main
from ladderfit.commands.terminal import progress_on
from ladderfit.errors import SamplingError
from ladderfit.rounding import Interval
from ladderfit.store import read_result

COMMAND = [sys.executable, "-m", "ladderfit"]


def run(folder: Path, *arguments: str, **variables: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [*COMMAND, *arguments],
        cwd=folder,
        capture_output=True,
        text=True,
        encoding="utf-8",
        env={**os.environ, **variables},
        check=False,
        timeout=240,
    )


def write_small(folder: Path, rung: str = "whole") -> Path:
    """A ladder file with its tables: only the relation and its parallax stars if asked."""
    builders.write_tables(folder)
    plain = builders.choices(tables=True)
    for section in handmade.RUNGS[rung]:
        del plain[section]
    if "cepheids" not in plain:
        plain["anchors"]["geometric"] = {}
        stars = plain["anchors"]["parallaxes"]
        stars["magnitude"] = builders.choices()["cepheids"]["magnitude"]
    plain["sampling"] = {"draws": 400, "seed": 7}
    path = folder / "small.toml"
    path.write_text(tomlkit.dumps(plain), encoding="utf-8")
    return path


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    made = tmp_path_factory.mktemp("job")
    write_small(made)
    return made


@pytest.fixture(scope="module")
def done(folder: Path) -> subprocess.CompletedProcess[str]:
    return run(folder, "calibrate", "small.toml")


# ---- the main job ---------------------------------------------------------------------


def test_calibrate_leaves_a_whole_folder(
    folder: Path, done: subprocess.CompletedProcess[str]
) -> None:
    assert done.returncode == 0, done.stderr
    assert done.stderr == ""  # silent in a pipe
    out = folder / "small-01"
    names = {str(path.relative_to(out)) for path in out.rglob("*") if path.is_file()}
    figures = {
        f"figures/{name}{kind}"
        for name in ("relation", "parallaxes", "corner", "moduli", "hubble")
        for kind in (".pdf", ".png", "_column.pdf")
    }
    files = {"summary.json", "summary.ecsv", "posterior.nc", "ladder.toml", "provenance.json"}
    tables = {name for name in names if name.startswith("tables/")}
    assert names - tables == files | figures | {"report.html"}
    assert {f"tables/parameters{kind}" for kind in (".tex", ".ecsv", ".csv")} <= tables
    assert not list(folder.glob(".*"))  # nothing temporary is left


def test_the_summary_says_what_the_files_hold(
    folder: Path, done: subprocess.CompletedProcess[str]
) -> None:
    result = read_result(folder / "small-01")
    text = done.stdout
    assert text.startswith("Small ladder\n")
    assert text.rstrip().endswith("Written to small-01")
    lines = text.splitlines()
    for name in result.headline:
        (line,) = (line for line in lines if f"  {name}  " in line and "±" in line)
        assert str(Interval.of(result.draws[name])) in line
    assert "36 of 36 kept" in text
    assert "8 of 8 kept" in text
    assert "Tavin, modulus 18.49 ± 0.025 mag by geometry" in text
    assert str(Interval.of(result.draws["modulus[Q07]"])) in text
    assert "normal(-3.3, 0.5) mag/dex" in text
    assert "Pareto k = " in text
    assert "mean ± standard deviation of 400 draws" in text
    assert max(len(line) for line in lines) <= 100


def test_a_second_run_takes_the_next_name_and_repeats(
    folder: Path, done: subprocess.CompletedProcess[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    assert done.returncode == 0
    monkeypatch.chdir(folder)
    monkeypatch.setattr(ladderfit.jobs.calibration, "save_figures", lambda *_: [])
    assert main(["calibrate", "small.toml"]) == 0
    assert main(["calibrate", "small.toml", "--seed", "8", "--draws", "500"]) == 0
    first, same, other = (read_result(folder / f"small-0{n}") for n in (1, 2, 3))
    for name, draws in first.draws.items():
        assert np.array_equal(draws, same.draws[name])
    assert other.size == 500
    assert not np.array_equal(first.draws["slope"], other.draws["slope"][:400])
    assert other.choices.sampling.seed == 8  # the folder's ladder file repeats this run
    assert other.choices.sampling.draws == 500


def test_an_existing_folder_is_refused(
    folder: Path, done: subprocess.CompletedProcess[str], capsys: pytest.CaptureFixture[str]
) -> None:
    assert done.returncode == 0
    before = (folder / "small-01" / "summary.json").read_bytes()
    code = main(["calibrate", str(folder / "small.toml"), "--out", str(folder / "small-01")])
    assert code == 2
    printed = capsys.readouterr()
    assert printed.out == ""
    (line,) = printed.err.splitlines()
    assert "small-01" in line
    assert "nothing is overwritten" in line
    assert (folder / "small-01" / "summary.json").read_bytes() == before


def test_without_a_file_the_sample_is_fitted(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    monkeypatch.setattr(ladderfit.jobs.calibration, "save_figures", lambda *_: [])
    assert main(["calibrate", "--draws", "200"]) == 0
    assert capsys.readouterr().out.startswith("Sample ladder\n")
    summary = json.loads((tmp_path / "sample-01" / "summary.json").read_text(encoding="utf-8"))
    assert summary["provenance"]["draws"] == 200


def test_one_rung_alone(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    path = write_small(tmp_path, "relation and parallaxes")
    monkeypatch.chdir(tmp_path)
    assert main(["calibrate", path.name, "--out", "deep/er"]) == 0
    text = capsys.readouterr().out
    assert "Distance moduli" not in text
    assert "hubble_constant" not in text
    assert (tmp_path / "deep/er/figures/relation.pdf").is_file()
    assert not (tmp_path / "deep/er/figures/hubble.pdf").exists()


# ---- bad input ------------------------------------------------------------------------


def test_each_problem_is_one_line(tmp_path: Path) -> None:
    path = write_small(tmp_path)
    text = path.read_text(encoding="utf-8").replace("pivot = 10.0", "pivot = -1.0\npivott = 3")
    path.write_text(text.replace('"cepheids.csv"', '"gone.csv"'), encoding="utf-8")
    failed = run(tmp_path, "calibrate", path.name, "--out", "out")
    assert failed.returncode == 2
    assert failed.stdout == ""
    lines = failed.stderr.splitlines()
    assert "Traceback" not in failed.stderr
    assert all(line.startswith("ladderfit: ") for line in lines)
    assert any("relation.pivott" in line and "did you mean 'pivot'" in line for line in lines)
    assert sorted(item.name for item in tmp_path.iterdir() if item.suffix != ".csv") == [path.name]


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["calibrate", "gone.toml"], "gone.toml"),
        (["calibrate", "small.toml", "--draws", "3"], "sampling.draws"),
        (["calibrate", "small.toml", "--out", "small.toml/inside"], "small.toml"),
        (["mock", "gone.toml", "--out", "new"], "gone.toml"),
        (["mock", "small.toml", "--out", "."], "nothing is overwritten"),
    ],
)
def test_bad_input_is_refused_in_one_line(
    folder: Path,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
    arguments: list[str],
    words: str,
) -> None:
    monkeypatch.chdir(folder)
    before = sorted(folder.iterdir())
    assert main(arguments) == 2
    printed = capsys.readouterr()
    assert printed.out == ""
    (line,) = printed.err.splitlines()
    assert words in line
    assert sorted(folder.iterdir()) == before


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["calibrat"], "invalid choice: 'calibrat'"),
        (["calibrate", "--seed", "x"], "found 'x', expected a whole number from 0 up"),
        (["mock", "a.toml", "--out", "b", "--seed", "-1"], "found '-1', expected a whole number"),
        (["mock", "a.toml"], "--out"),
        (["calibrate", "--quick"], "unrecognized arguments: --quick"),
    ],
)
def test_wrong_arguments_are_refused_in_one_line(
    capsys: pytest.CaptureFixture[str], arguments: list[str], words: str
) -> None:
    with pytest.raises(SystemExit) as stop:
        main(arguments)
    assert stop.value.code == 2
    (line,) = capsys.readouterr().err.splitlines()
    assert words in line
    assert "--help" in line


def test_a_posterior_that_cannot_be_drawn(
    folder: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    def fail(*_: object, **__: object) -> None:
        raise SamplingError("no mode was found;\nnarrow the priors")

    monkeypatch.setattr(ladderfit.jobs.calibration, "draw", fail)
    out = folder / "never"
    assert main(["calibrate", str(folder / "small.toml"), "--out", str(out)]) == 1
    assert capsys.readouterr().err == "ladderfit: no mode was found; narrow the priors\n"
    assert not out.exists()


# ---- interruption, pipes, terminals ---------------------------------------------------


INTERRUPTIBLE = """\
import signal, sys
signal.signal(signal.SIGINT, signal.default_int_handler)  # a job in the background ignores it
from ladderfit.cli import main
sys.exit(main(sys.argv[1:]))
"""


@pytest.mark.skipif(os.name != "posix", reason="signals as on POSIX")
def test_ctrl_c_leaves_nothing_behind(tmp_path: Path) -> None:
    write_small(tmp_path)
    before = sorted(tmp_path.iterdir())
    process = subprocess.Popen(
        [sys.executable, "-c", INTERRUPTIBLE, "calibrate", "small.toml", "--out", "stopped"],
        cwd=tmp_path,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )
    deadline = time.monotonic() + 120.0
    while not list(tmp_path.glob(".stopped.*")) and process.poll() is None:
        assert time.monotonic() < deadline
        time.sleep(0.02)
    process.send_signal(signal.SIGINT)
    out, err = process.communicate(timeout=120)
    assert (process.returncode, out) == (130, "")
    assert err == "ladderfit: interrupted; an unfinished folder is not kept\n"
    assert sorted(tmp_path.iterdir()) == before


def test_interrupted_while_writing(
    folder: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    def stop(*_: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(ladderfit.jobs.calibration, "save_figures", stop)
    before = sorted(folder.iterdir())
    code = main(["calibrate", str(folder / "small.toml"), "--out", str(folder / "stopped")])
    assert code == 130
    assert capsys.readouterr().err == "ladderfit: interrupted; an unfinished folder is not kept\n"
    assert sorted(folder.iterdir()) == before


class Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


def test_progress_is_one_line_and_is_cleared() -> None:
    screen = Terminal()
    with progress_on(screen) as report:
        assert report is not None
        report("drawing", 0.5)
        report("drawing", 0.501)  # nothing new to show
        report("writing", 0.0)
    text = screen.getvalue()
    assert "\n" not in text
    assert text.count("drawing") == 1
    assert "drawing  50 %" in text
    assert text.split("\r")[-2].strip() == ""
    assert text.endswith("\r")


def test_no_progress_in_a_pipe() -> None:
    stream = io.StringIO()
    with progress_on(stream) as report:
        assert report is None
    assert stream.getvalue() == ""


def test_plain_letters_where_the_output_knows_no_others(
    folder: Path, done: subprocess.CompletedProcess[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    written = io.BytesIO()
    plain = io.TextIOWrapper(written, encoding="ascii")
    monkeypatch.setattr(sys, "stdout", plain)
    monkeypatch.setattr(ladderfit.jobs.calibration, "save_figures", lambda *_: [])
    out = folder / "plain"
    assert main(["calibrate", str(folder / "small.toml"), "--out", str(out)]) == 0
    text = written.getvalue().decode("ascii")
    shown = done.stdout.replace("±", "+/-").replace("\N{MINUS SIGN}", "-")
    assert text.split("Written to")[0].split() == shown.split("Written to")[0].split()


@pytest.mark.skipif(os.name != "posix", reason="pipes as on POSIX")
def test_a_reader_that_goes_away_is_no_failure(folder: Path, tmp_path: Path) -> None:
    read_end, write_end = os.pipe()
    os.close(read_end)
    done = subprocess.run(
        [*COMMAND, "mock", str(folder / "small.toml"), "--out", "new"],
        cwd=tmp_path,
        stdout=write_end,
        stderr=subprocess.PIPE,
        text=True,
        check=False,
    )
    os.close(write_end)
    assert done.returncode == 0
    assert done.stderr == ""
    assert (tmp_path / "new" / "truth.toml").is_file()


# ---- help, version, mock --------------------------------------------------------------


def test_version_and_help(tmp_path: Path) -> None:
    assert run(tmp_path, "--version").stdout == f"ladderfit {version('ladderfit')}\n"
    top = run(tmp_path, "--help")
    assert top.returncode == 0
    assert "calibrate" in top.stdout
    assert "mock" in top.stdout
    bare = run(tmp_path)
    assert (bare.returncode, bare.stdout) == (0, top.stdout)
    words = run(tmp_path, "calibrate", "--help").stdout
    assert all(option in words for option in ("--out", "--seed", "--draws", "the sample"))


def test_help_loads_nothing_heavy() -> None:
    probe = (
        "import sys\nfrom ladderfit.cli import main\n"
        "try:\n    main(['--help'])\nexcept SystemExit:\n    pass\n"
        "print(sorted({'numpy', 'astropy', 'matplotlib', 'pandas'} & set(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", probe], capture_output=True, text=True, check=True)
    assert done.stdout.splitlines()[-1] == "[]"


def test_mock_makes_a_ladder_that_can_be_read(
    folder: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    source = str(folder / "small.toml")
    for name, seed in (("a", "4"), ("b", "4"), ("c", "5")):
        assert main(["mock", source, "--out", str(tmp_path / name), "--seed", seed]) == 0
    assert "fit it with: ladderfit calibrate" in capsys.readouterr().out
    tables = [(tmp_path / name / "cepheids.ecsv").read_bytes() for name in ("a", "b", "c")]
    assert tables[0] == tables[1] != tables[2]
    truth = tomlkit.parse((tmp_path / "a" / "truth.toml").read_text(encoding="utf-8"))
    assert "slope" in str(truth)
