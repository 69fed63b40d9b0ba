"""Pins, long runs and slow views in JupyterLab: a page reloaded, a kernel killed."""

from __future__ import annotations

import json
import os
import re
import signal
import time
from pathlib import Path
from typing import Any

import builders
import pytest
from lab_page import Lab

from ladderfit.choices import Choices
from ladderfit.ladder import read_ladder
from ladderfit.ladder_file import write_choices
from ladderfit.rounding import rounded
from ladderfit.sampling.live import open_run

pytest_plugins = ("lab_fixtures",)

ENTRIES = ".lf-scroll select[size]"
GOAL = "input[title='Effective draws of the worst parameter']"

pytestmark = [
    pytest.mark.browser,
    pytest.mark.filterwarnings("ignore::DeprecationWarning"),  # inside playwright
]


@pytest.fixture(scope="module")
def ladder_files(tmp_path_factory: pytest.TempPathFactory) -> tuple[str, ...]:
    """A small ladder of the user's own."""
    data = tmp_path_factory.mktemp("data")
    builders.write_tables(data)
    write_choices(Choices.from_mapping(builders.choices(tables=True)), data / "mine.toml")
    return (str(data / "mine.toml"),)


def button(lab: Lab, name: str) -> Any:
    return lab.page.locator(".lf-workbench").last.get_by_role("button", name=name, exact=True)


def kernel_of(folder: Path) -> int:
    """The kernel's process, as the session's own file has it."""
    end = time.monotonic() + 20
    while time.monotonic() < end:
        for path in folder.glob("session-*.json"):
            return int(json.loads(path.read_text())["kernel"])
        time.sleep(0.05)
    raise AssertionError("no session was kept")


def run_all(lab: Lab) -> None:
    """Run all cells once more, and wait for the workbench they make."""
    from playwright.sync_api import expect

    page = lab.page
    idle = page.locator(".jp-StatusBar-TextItem", has_text=re.compile(r"\| Idle$"))
    expect(idle).to_be_visible(timeout=90_000)
    page.get_by_role("menuitem", name="Run", exact=True).click()
    page.locator(".lm-Menu-itemLabel").get_by_text("Run All Cells", exact=True).click()


def test_a_page_reloaded_and_a_kernel_killed_in_mid_run(lab: Lab, work: Path) -> None:
    """Nothing is lost: choices, pin, run; stopped, resumed, finished, shown beside."""
    from playwright.sync_api import expect

    lab.run("01_calibrate.ipynb")
    page, folder = lab.page, work / "mine.pins"
    lab.rested()
    trust = page.locator(".lf-trust").last
    kept = page.locator(".lf-kept:visible")
    page.get_by_label("Periods from, number", exact=True).fill("8")
    page.keyboard.press("Tab")
    expect(page.locator(".lf-why")).to_contain_text("Cepheids instead of 36")
    count = kept.inner_text()
    button(lab, "Pin").click()
    expect(trust).to_contain_text("Pinned as pin-01")
    assert read_ladder(folder / "pin-01.toml").choices.cepheids.periods[0] == 8.0  # type: ignore[union-attr]
    button(lab, "Pins, runs").click()
    page.locator(GOAL).fill("1000000")
    page.keyboard.press("Tab")
    button(lab, "Sample in full").click()
    expect(trust).to_contain_text("run-01 has started")
    run_line = page.locator(f"{ENTRIES} option", has_text="run-01")
    expect(run_line).to_contain_text("running", timeout=60_000)

    # the page reloaded: the kernel lives, the page asks on
    page.keyboard.press("Control+s")
    page.wait_for_timeout(300)
    page.reload()
    expect(page.locator(".lf-workbench")).to_be_visible(timeout=60_000)
    expect(run_line).to_contain_text("running")
    expect(kept).to_have_text(count)
    run = open_run(folder / "run-01")
    before = run.progress().draws

    # the kernel killed: the run goes on, and all is there again
    os.kill(kernel_of(folder), signal.SIGKILL)
    dialog = page.locator(".jp-Dialog")
    expect(dialog).to_contain_text("Kernel Restarting", timeout=60_000)
    dialog.get_by_role("button", name="Ok").click()
    assert run.state in ("running", "finished")
    run_all(lab)
    expect(trust).to_contain_text("Took up the session", timeout=60_000)
    expect(kept).to_have_text(count)
    expect(page.locator(".lf-number[data-name=slope] .lf-moved").last).to_have_text("as pinned")
    button(lab, "Pins, runs").click()
    page.locator(ENTRIES).select_option(index=1)
    details = page.locator(".lf-scroll [role=status]")
    expect(details).to_contain_text("Running", timeout=60_000)
    assert run.progress().draws >= before

    # stopped, resumed with a goal within reach, finished: beside the live numbers
    button(lab, "Stop").click()
    expect(details).to_contain_text("Stopped", timeout=120_000)
    page.locator(GOAL).fill("200")
    page.keyboard.press("Tab")
    button(lab, "Resume").click()
    beside = page.locator(".lf-number[data-name=slope] .lf-run").last
    expect(beside).to_contain_text("in full", timeout=120_000)
    assert run.state == "finished"
    assert run.progress().draws >= before
    result = run.result()
    shown = str(rounded(result.mean("slope"), result.sd("slope")))
    assert beside.inner_text() == f"in full {shown}"


@pytest.mark.long
def test_a_slow_view_does_not_hold_the_page(lab: Lab) -> None:
    """Numbers follow a control while fits go on; the view comes when they are done."""
    from playwright.sync_api import expect

    lab.run("02_anchors.ipynb")
    page = lab.page
    lab.rested()
    page.locator(".lf-bar-of-views select:visible").first.select_option("Distance priors")
    busy = page.locator(".lf-busy [role=status]")
    expect(busy).to_contain_text("fitting under each distance prior")
    zero_point = lab.number("zero_point")
    page.get_by_label("Width of its prior, number", exact=True).fill("0.002")
    page.keyboard.press("Tab")
    moved = page.locator(".lf-number[data-name=zero_point] .lf-value")
    expect(moved).not_to_have_text(zero_point)
    expect(busy).to_have_count(0, timeout=120_000)
    lab.until(lambda picture: picture[1] > 3000)  # drawn
    button(lab, "Table").click()
    rows = page.locator(".lf-scroll table tbody tr")
    expect(rows).to_have_count(3)  # a disc needs positions
    expect(rows.first).to_contain_text(moved.inner_text())
