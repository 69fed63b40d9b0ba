"""A researcher's first ten minutes: own CSV files, questions, live ladder, report."""

from __future__ import annotations

import subprocess
import sys
import tomllib
from pathlib import Path
from typing import Any

import pytest
from lab_page import Lab

from ladderfit.draft import write_draft
from ladderfit.draft.example import write_example

pytest_plugins = ("lab_fixtures",)

pytestmark = [
    pytest.mark.browser,
    pytest.mark.filterwarnings("ignore::DeprecationWarning"),  # inside playwright
]
WIDE = """() => [...document.querySelectorAll('.lf-draft, .lf-draft *')].filter(e => {
  const b = e.getBoundingClientRect();
  const p = document.querySelector('.lf-draft').getBoundingClientRect();
  return b.width && (b.right > p.right + 1 || e.scrollWidth > e.clientWidth + 1
    && getComputedStyle(e).overflowX !== 'visible' && e.tagName !== 'INPUT'); })
  .map(e => `${e.tagName}.${e.className}`)"""


def shell(folder: Path, *words: str) -> None:
    """Run a command of ours in a folder."""
    done = subprocess.run(
        [sys.executable, "-m", "ladderfit", *words],
        cwd=folder,
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stderr


@pytest.fixture(scope="module")
def ladder_files(tmp_path_factory: pytest.TempPathFactory) -> tuple[str, ...]:
    """Five CSV files, and what the draft makes of them."""
    folder = tmp_path_factory.mktemp("own")
    assert write_draft(write_example(folder), folder / "my.toml").undecided
    return (str(folder / "my.toml"),)


def question(lab: Lab, key: str) -> Any:
    return lab.page.locator(".lf-question", has=lab.page.get_by_text(key, exact=True))


def test_from_csv_files_to_a_report(lab: Lab, ladder_files: tuple[str, ...]) -> None:
    """Questions settled by mouse and keyboard, kept over a reload; the numbers are the report's."""
    from playwright.sync_api import expect

    file, page = Path(ladder_files[0]), lab.page
    lab.run("05_your_own_tables.ipynb", shows=".lf-draft")
    head, go = page.locator(".lf-draft h3 + p"), page.get_by_role("button", name="Open the workb")
    expect(head).to_contain_text("settled")
    before = int(head.inner_text().split()[0])
    expect(go).to_be_disabled()
    expect(page.locator(".lf-question:not(.lf-settled)")).to_have_count(before)

    # by keyboard: a wrong number, its one line, a right one, a reason
    ratio = question(lab, "cepheids.magnitude.wesenheit.ratio")
    ratio.get_by_label("Another").focus()
    page.keyboard.type("0,39")
    page.keyboard.press("Enter")
    expect(ratio.get_by_role("alert")).to_contain_text("Found '0,39'; expected a number such as")
    page.keyboard.press("Control+a")
    page.keyboard.type("0.39")
    page.keyboard.press("Enter")
    expect(ratio).to_contain_text("Settled")
    expect(ratio.get_by_role("alert")).to_have_count(0)
    page.keyboard.press("Tab")
    page.keyboard.type("our own passbands")
    page.keyboard.press("Tab")
    page.keyboard.press("Space")  # the first answer of the next question
    corrected = question(lab, "anchors.parallaxes.corrected")
    expect(corrected).to_contain_text("Settled")
    corrected.get_by_role("radio").first.focus()  # a busy machine may draw the page once more
    for _ in range(10):
        page.keyboard.press("ArrowDown")
        if corrected.get_by_label("no, apply one").is_checked():
            break
        page.wait_for_timeout(1_000)
        corrected.get_by_role("radio").first.focus()
    expect(corrected.get_by_label("no, apply one")).to_be_checked()
    page.keyboard.press("ArrowUp")
    expect(corrected.get_by_label("yes, it is applied")).to_be_checked()
    assert "ratio = 0.39  # our own passbands" in file.read_text()
    assert page.evaluate(WIDE) == []

    # reloaded, in the dark, on a wide screen: nothing is lost
    page.keyboard.press("Control+s")
    page.wait_for_timeout(300)
    page.reload()
    expect(ratio.get_by_label("Another")).to_have_value("0.39", timeout=60_000)
    expect(ratio.get_by_label("Reason")).to_have_value("our own passbands")
    expect(head).to_contain_text("2 settled")
    page.set_viewport_size({"width": 1920, "height": 1200})
    lab.theme("JupyterLab Dark")
    paper = "getComputedStyle(document.body).getPropertyValue('--jp-layout-color0').trim()"
    page.wait_for_function(f"{paper} === '#111111' || {paper} === '#111'")
    ink = page.locator(".lf-ask").first.evaluate("e => getComputedStyle(e).color")
    assert min(int(x) for x in ink.removeprefix("rgb(").strip(")a").split(",")[:3]) > 180
    assert page.evaluate(WIDE) == []

    # the rest by mouse, then the live ladder
    for key, words in (
        ("relation.metallicity.scale", "[O/H]"),
        ("relation.metallicity.reference", "0, solar"),
        ("anchors.geometric.Tavin.modulus", "18.453"),
        ("anchors.geometric.Tavin.error", "0.025"),
        ("expansion.columns.redshift", "z:"),
        ("expansion.columns.redshift_heliocentric", "z_hel:"),
    ):
        question(lab, key).get_by_label(words).check()
        expect(question(lab, key)).to_contain_text("Settled")
    assert "undecided:" not in file.read_text().split("\n", 3)[3]
    assert tomllib.loads(file.read_text())["expansion"]["columns"]["redshift"] == "z"
    go.click()
    expect(page.locator(".lf-workbench")).to_be_visible(timeout=90_000)
    lab.rested()
    expect(page.locator(".lf-kept:visible")).to_contain_text("1,312 of 1,324 stars kept")
    slope, hubble = lab.number("slope"), lab.number("hubble_constant")

    # the report, by the command that the page names
    expect(page.locator(".lf-ready")).to_contain_text("ladderfit calibrate")
    shell(file.parent, "calibrate", "my.toml", "--out", "first")
    report = page.context.new_page()
    report.goto((file.parent / "first" / "report.html").as_uri())
    for number in (slope, hubble):
        value = number.split(" ")[0]
        expect(report.locator("body")).to_contain_text(value)
    expect(report.locator("body")).to_contain_text("0.39")
