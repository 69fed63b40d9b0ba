"""Pins, long runs and what a session leaves: in files, compared, taken up again."""

from __future__ import annotations

import json
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

import builders
import numpy as np
import pytest

pytestmark = [
    pytest.mark.filterwarnings("ignore::DeprecationWarning"),  # inside ipywidgets
]

import ladderfit as lf  # noqa: E402
from ladderfit.choices import Choices  # noqa: E402
from ladderfit.ladder import Ladder, build_ladder, read_ladder  # noqa: E402
from ladderfit.ladder_file import write_choices  # noqa: E402
from ladderfit.sampling.live import lay_out  # noqa: E402
from ladderfit.workbench import Workbench  # noqa: E402
from ladderfit.workbench.keeping import Keeper  # noqa: E402
from ladderfit.workbench.pins import (  # noqa: E402
    changes_to,
    label_of,
    numbers_in,
    same_fit,
)

PERIODS = {"cepheids.periods": [8.0, 100.0]}


@pytest.fixture
def ladder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Ladder:
    """A ladder in files, in a folder beside the one where the notebook is."""
    data, work = tmp_path / "data", tmp_path / "work"
    data.mkdir()
    work.mkdir()
    builders.write_tables(data)
    plain = {**builders.choices(tables=True), "sampling": {"draws": 600}}
    write_choices(Choices.from_mapping(plain), data / "mine.toml")
    monkeypatch.chdir(work)
    monkeypatch.delenv("JPY_SESSION_NAME", raising=False)
    return read_ladder(data / "mine.toml")


@pytest.fixture
def bench(ladder: Ladder) -> Workbench:
    return Workbench(ladder)


def until(bench: Workbench, good: Callable[[], bool], seconds: float = 120.0) -> None:
    """Beat as the page does until something is so."""
    end = time.monotonic() + seconds
    while not good():
        assert time.monotonic() < end, bench.shelf.panel.details.value
        time.sleep(0.05)
        bench.pulse.beat += 1


def listed(bench: Workbench) -> list[str]:
    bench.bar.show_board()
    return [words for words, _ in bench.shelf.panel.entries.options]


def test_a_pin_is_a_ladder_file_with_its_numbers(bench: Workbench, ladder: Ladder) -> None:
    bench.change({**PERIODS, "anchors.geometric.Orrel.use": True})
    bench.foot.pin.click()
    assert "Pinned as pin-01" in bench.foot.trust.value
    folder = Path("mine.pins")
    again = read_ladder(folder / "pin-01.toml")
    assert again.choices.cepheids.periods == (8.0, 100.0)  # type: ignore[union-attr]
    assert again.kept == bench.ladder.kept
    summary = json.loads((folder / "pin-01.json").read_text())
    assert summary["label"] == "cepheids.periods [8, 100], Orrel.use true"
    for name in ("slope", "zero_point", "hubble_constant"):
        assert summary["parameters"][name]["mean"] == bench.result.mean(name)
    drawn = lf.draw(again)
    assert drawn.mean("slope") == pytest.approx(bench.result.mean("slope"), abs=0.01)
    (line,) = listed(bench)
    assert "pin-01" in line
    assert "2 changes" in line
    assert "counted from" in line


def test_back_to_a_pin_and_undone(bench: Workbench) -> None:
    bench.change(PERIODS)
    bench.foot.pin.click()
    pinned = bench.ladder.choices
    bench.change({"anchors.parallaxes.distance_prior": {"exponential": 2.0}})
    bench.change({"cepheids.periods": [5.0, 60.0], "anchors.geometric.Orrel.use": True})
    bench.foot.pin.click()
    second = bench.ladder.choices
    panel = bench.shelf.panel
    panel.choose("pin-01")
    panel.back.click()
    assert bench.ladder.choices == pinned
    assert "Undo takes them back" in bench.foot.trust.value
    panel.choose("pin-02")
    panel.back.click()
    assert bench.ladder.choices == second
    bench.foot.undo.click()
    assert bench.ladder.choices == pinned
    panel.choose("pin-01")
    panel.against.click()
    assert bench.session.pinned_name == "pin-01"
    moved = [abs(bench.result.mean(n) - bench.session.pinned.mean(n)) for n in ("slope",)]
    assert max(moved) < 0.2 * bench.result.sd("slope")


def test_two_pins_compared(bench: Workbench) -> None:
    """Choices that differ and numbers that differ, the one that moved most first."""
    bench.foot.pin.click()
    bench.change({**PERIODS, "cepheids.set_aside": [{"star": "Tavin-001", "reason": "<blend>"}]})
    bench.foot.pin.click()
    bench.bar.show_board()
    panel = bench.shelf.panel
    panel.choose("pin-02")
    panel.beside.value = "pin-01"
    text = panel.details.value
    assert "2 choices differ" in text
    assert "[5, 100]" in text
    assert "[8, 100]" in text
    assert "&lt;blend&gt;" in text
    numbers = {name: panel.board.find(name).numbers for name in ("pin-01", "pin-02")}
    change = (numbers["pin-02"]["slope"][0] - numbers["pin-01"]["slope"][0]) / numbers["pin-01"][
        "slope"
    ][1]
    row = next(part for part in text.split("<tr>") if "slope of the relation" in part)
    assert f"{change:+.1f}".replace("-", "−") in row or f"{abs(change):.1f}" == "0.0"
    panel.beside.value = "now"
    assert "No choice differs" in panel.details.value


def test_a_label_and_taking_off(bench: Workbench) -> None:
    bench.foot.pin.click()
    panel = bench.shelf.panel
    panel.choose("pin-01")
    panel.label.value = "the <first>"
    assert "the <first>" in listed(bench)[0]  # a list of plain text
    assert json.loads(Path("mine.pins/pin-01.json").read_text())["label"] == "the <first>"
    panel.remove.click()
    assert panel.remove.description == "Really?"
    assert len(listed(bench)) == 1
    panel.remove.click()
    assert listed(bench) == []
    assert "Nothing is pinned yet" in panel.details.value
    assert not list(Path("mine.pins").glob("pin-01*"))


def test_pins_of_another_day(bench: Workbench, ladder: Ladder) -> None:
    bench.change(PERIODS)
    bench.foot.pin.click()
    other = Workbench(read_ladder(ladder.path))  # type: ignore[arg-type]
    assert other.ladder.choices == ladder.choices
    other.shelf.panel.choose("pin-01")
    other.shelf.panel.back.click()
    assert other.ladder.choices == bench.ladder.choices
    (Path("mine.pins") / "by-hand.toml").write_text(
        Path("mine.pins/pin-01.toml").read_text(), encoding="utf-8"
    )
    (Path("mine.pins") / "spoiled.toml").write_text("cepheids = 3\n", encoding="utf-8")
    lines = listed(other)
    assert any(line.startswith("by-hand") for line in lines)
    other.shelf.panel.choose("spoiled")
    assert "lf-bad" in other.shelf.panel.details.value
    assert other.shelf.panel.back.disabled


def test_a_pin_whose_table_changed_says_so(bench: Workbench, ladder: Ladder) -> None:
    bench.foot.pin.click()
    table = ladder.base / "supernovae.csv"
    table.write_text(table.read_text().replace("10.1", "10.2"))
    other = Workbench(read_ladder(ladder.path))  # type: ignore[arg-type]
    other.bar.show_board()
    other.shelf.panel.choose("pin-01")
    assert "Drawn from other contents of" in other.shelf.panel.details.value
    assert "supernovae.csv" in other.shelf.panel.details.value


def test_a_ladder_in_memory_is_pinned_with_its_tables(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    made = build_ladder(builders.choices(), builders.tables()).change({"sampling.draws": 600})
    bench = Workbench(made)
    bench.change(PERIODS)
    bench.foot.pin.click()
    assert len(read_ladder("ladder.pins/pin-01/ladder.toml").hosts) == 3
    bench.foot.undo.click()
    bench.shelf.panel.choose("pin-01")
    bench.shelf.panel.back.click()
    assert bench.session.trouble is None
    assert bench.ladder.choices.cepheids.periods == (8.0, 100.0)  # type: ignore[union-attr]


def test_changes_to_anything(ladder: Ladder) -> None:
    """Sections that come, go, or change their kind."""
    away = ladder.change(
        {
            "priors.slope": {"fixed": -3.3},
            "anchors.parallaxes.distance_prior": {"exponential": 2.0},
            "expansion": None,
        }
    )
    assert ladder.change(changes_to(away.choices)).choices == away.choices
    assert away.change(changes_to(ladder.choices)).choices == ladder.choices
    assert same_fit(ladder.change({"sampling.draws": 700}).choices, ladder.choices)
    assert not same_fit(away.choices, ladder.choices)
    assert label_of(ladder.choices, ladder.choices) == "as in the ladder file"
    assert numbers_in({"parameters": {"a": {"mean": 1, "sd": None}, "b": 3}}) == {}


def test_a_killed_kernel_loses_nothing(
    bench: Workbench, ladder: Ladder, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Choices, baseline, published values and the view come back where the server is the same."""
    monkeypatch.setenv("JPY_PARENT_PID", "4711")
    bench.foot.pin.click()
    bench.change(PERIODS)
    bench.publish("slope", -3.31)
    bench.open("supernovae")
    bench.bar.choose("moduli")
    bench.shelf.keeper.flush()
    path = bench.shelf.keeper.path
    content = json.loads(path.read_text())
    ended = subprocess.run([sys.executable, "-c", "import os; print(os.getpid())"],
                           capture_output=True, text=True, check=True)  # fmt: skip
    path.write_text(json.dumps({**content, "kernel": int(ended.stdout)}))
    again = Workbench(read_ladder(ladder.path))  # type: ignore[arg-type]
    assert again.ladder.choices == bench.ladder.choices
    assert again.session.pinned_name == "pin-01"
    assert again.published == {"slope": -3.31}
    assert (again.axis.rung, again.bar.view) == ("supernovae", "moduli")
    assert "kernel was restarted" in again.foot.trust.value
    again.foot.undo.click()
    assert again.ladder.choices == ladder.choices


@pytest.mark.parametrize("why", ["other server", "same kernel"])
def test_a_new_session_begins_with_the_file_and_offers_the_earlier(
    bench: Workbench, ladder: Ladder, monkeypatch: pytest.MonkeyPatch, why: str
) -> None:
    monkeypatch.setenv("JPY_PARENT_PID", "4711")
    bench.change(PERIODS)
    bench.shelf.keeper.flush()
    if why == "other server":
        monkeypatch.setenv("JPY_PARENT_PID", "4712")
    again = Workbench(read_ladder(ladder.path))  # type: ignore[arg-type]
    assert again.ladder.choices == ladder.choices
    assert listed(again)[-1].startswith("earlier session   cepheids.periods [8, 100]")
    again.shelf.panel.choose("left")
    again.shelf.panel.back.click()
    assert again.ladder.choices == bench.ladder.choices


def test_what_was_left_for_another_ladder_file_is_not_taken_up(
    bench: Workbench, ladder: Ladder
) -> None:
    bench.change(PERIODS)
    bench.shelf.keeper.flush()
    folder = bench.shelf.board.folder
    assert Keeper(folder, ladder.choices).left() is not None
    edited = ladder.change({"relation.pivot": 12.0}).choices
    assert Keeper(folder, edited).left() is None
    bench.shelf.keeper.path.write_text("{", encoding="utf-8")
    assert Keeper(folder, ladder.choices).left() is None


def test_nothing_is_written_until_something_is_changed(bench: Workbench) -> None:
    bench.open("expansion")
    bench.shelf.keeper.flush()
    assert not Path("mine.pins").exists()


def test_a_folder_that_may_not_be_written(bench: Workbench) -> None:
    Path("mine.pins").write_text("a file in its place")
    bench.foot.pin.click()
    assert "lf-bad" in bench.foot.trust.value
    bench.change(PERIODS)
    assert bench.session.trouble is None


@pytest.fixture
def small(ladder: Ladder) -> Workbench:
    """Without parallaxes, to be sampled quickly; runs are read beside the page."""
    made = Workbench(ladder.change({"anchors.parallaxes": None}))
    made.shelf.runs.background = True
    made.shelf.panel.goal.value = "200"
    return made


def _draws(bench: Workbench) -> int:
    progress = bench.shelf.runs.find("run-01").progress
    return 0 if progress is None else progress.draws


def test_sampled_in_full_and_shown_beside(small: Workbench) -> None:
    small.foot.sample.click()
    assert "run-01 has started" in small.foot.trust.value
    assert small.bar.shows == "board"
    assert small.pulse.every > 0
    until(small, lambda: small.shelf.full() is not None)
    assert small.pulse.every == 0
    run = small.shelf.runs.find("run-01")
    assert run.state == "finished"
    assert run.progress.ess >= 200
    assert "in full" in small.numbers.value
    assert "run-01 is finished" in small.foot.trust.value
    for name in ("slope", "zero_point", "hubble_constant"):
        off = run.result.mean(name) - small.result.mean(name)
        assert abs(off) < 5.0 * small.result.sd(name) * np.hypot(200**-0.5, 600**-0.5), name
    small.bar.numbers.value = True
    assert "in full" in small.frame.table.value
    small.bar.choose("corner")
    assert any("dotted" in text.get_text() for text in small.picture.figure.texts)
    small.foot.sample.click()
    assert "those of run-01, which is finished" in small.foot.trust.value
    small.change(PERIODS)
    assert "in full" not in small.numbers.value  # the run is of other choices
    small.foot.undo.click()
    assert "in full" in small.numbers.value
    table = small.ladder.base / "supernovae.csv"
    before = table.read_text()
    table.write_text(before.replace("10.1", "10.2"))
    other = Workbench(read_ladder(small.ladder.path).change({"anchors.parallaxes": None}))  # type: ignore[arg-type]
    assert "in full" not in other.numbers.value
    assert "tables have changed" in other.shelf.runs.find("run-01").words
    table.write_text(before)
    small.bar.show_board()
    small.shelf.panel.choose("run-01")
    assert "No choice differs" in small.shelf.panel.details.value


def test_stopped_by_one_kernel_and_resumed_by_another(small: Workbench, ladder: Ladder) -> None:
    small.shelf.panel.goal.value = "1,000,000"
    small.foot.sample.click()
    panel = small.shelf.panel
    until(small, lambda: "effective of" in panel.details.value)
    assert _draws(small) > 0
    panel.stop.click()
    assert "Stopping" in panel.details.value
    until(small, lambda: small.shelf.runs.find("run-01").state == "stopped")
    kept = small.shelf.runs.find("run-01").progress.draws
    other = Workbench(small.ladder)
    other.shelf.runs.background = True
    until(other, lambda: bool(other.shelf.runs.runs))
    panel = other.shelf.panel
    other.bar.show_board()
    panel.choose("run-01")
    assert not panel.resume.disabled
    assert panel.goal.value == "1000000"  # the run's own, not that of a new run
    panel.goal.value = "many"
    panel.resume.click()
    assert "expected a number of draws" in panel.details.value
    panel.goal.value = "200"
    panel.resume.click()
    until(other, lambda: other.shelf.full() is not None)
    assert other.shelf.runs.find("run-01").progress.draws >= kept


def test_a_run_that_fails_says_why(small: Workbench, ladder: Ladder) -> None:
    lay_out(small.ladder, "mine.pins/run-01")
    table = ladder.base / "supernovae.csv"
    table.write_text(table.read_text().replace("10.1", "10.2"))
    other = Workbench(small.ladder)
    assert other.shelf.runs.find("run-01").state == "stopped"
    other.shelf.runs.background = True
    other.shelf.panel.choose("run-01")
    other.shelf.panel.resume.click()
    until(other, lambda: other.shelf.runs.find("run-01").state == "failed")
    other.bar.show_board()
    assert "SHA-256" in other.shelf.panel.details.value
    assert "lf-bad" in other.shelf.panel.details.value
    assert not other.shelf.runs.waits
    (Path("mine.pins") / "run-02").mkdir()
    (Path("mine.pins") / "run-02" / "run.json").write_text("{}")
    other.shelf.runs.refresh()
    until(other, lambda: not other.shelf.runs.waits)
    other.shelf.panel.choose("run-02")
    assert "do not fit" in other.shelf.panel.details.value
    assert other.shelf.panel.back.disabled
