"""The workbench in JupyterLab, driven in a real Chromium."""

from __future__ import annotations

import json
import re
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest
from lab_page import Lab

from ladderfit.rounding import rounded

pytest_plugins = ("lab_fixtures",)

pytestmark = [
    pytest.mark.browser,
    pytest.mark.filterwarnings("ignore::DeprecationWarning"),  # inside playwright
]


def button(lab: Lab, name: str) -> Any:
    return lab.page.locator(".lf-workbench").get_by_role("button", name=name, exact=True)


def open_rung(lab: Lab, key: str) -> None:
    lab.page.locator(f".lf-segment[data-rung={key}] .lf-name").click()


def anchor(lab: Lab, words: str) -> Any:
    return lab.page.locator(".lf-choices label", has_text=words).locator("input")


def test_a_session(lab: Lab, work: Path, tmp_path: Path) -> None:
    """Cut, drag, switch, undo, pin, theme, export: texts, numbers and pixels follow."""
    from playwright.sync_api import expect

    lab.run("01_calibrate.ipynb")
    page, picture, first = lab.page, lab.rested(), lab.number("slope")
    kept = page.locator(".lf-kept:visible")
    expect(kept).to_contain_text("1,264 of 1,356 stars kept")

    # the period range, dragged: numbers and sentence at once, the view on release
    thumb = page.get_by_label("Periods from", exact=True)
    box = thumb.bounding_box()
    share = float(thumb.input_value()) / 400.0
    x, y = box["x"] + 7 + share * (box["width"] - 14), box["y"] + box["height"] / 2
    page.mouse.move(x, y)
    page.mouse.down()
    page.mouse.move(x + 40, y, steps=4)
    expect(kept).not_to_contain_text("1,264 of")
    expect(page.locator(".lf-why")).to_contain_text("Cepheids instead of 1,264")
    assert lab.number("slope") != first
    assert lab.picture() == picture
    page.mouse.up()
    picture = lab.changed(picture)
    dragged = lab.number("slope")
    assert page.locator(".lf-number[data-name=slope] .lf-moved").inner_text() != "as pinned"
    button(lab, "Pin").click()
    expect(page.locator(".lf-number[data-name=slope] .lf-moved")).to_have_text("as pinned")

    # an anchor off, and undo
    open_rung(lab, "anchors")
    anchor(lab, "Tavin").uncheck()
    expect(page.locator(".lf-why")).to_contain_text(re.compile(r"Tavin's weight \d+ % to 0"))
    off = page.locator(".lf-rung-anchors .lf-mark.lf-off[aria-label^='Tavin']")
    expect(off).to_have_count(1)
    without = lab.changed(picture)
    button(lab, "Undo").click()
    expect(off).to_have_count(0)
    expect(anchor(lab, "Tavin")).to_be_checked()
    lab.changed(without)
    assert lab.number("slope") == dragged

    # the theme: the figure takes the page's colour
    assert min(lab.rested()[2:]) > 200
    lab.theme("JupyterLab Dark")
    lab.until(lambda picture: max(picture[2:]) < 60)
    lab.theme("JupyterLab Light")
    lab.until(lambda picture: min(picture[2:]) > 200)

    # the ladder file, fitted again by the command line
    button(lab, "Save ladder file").click()
    expect(page.locator(".lf-trust")).to_contain_text("Saved sample-01.toml")
    shown = {name: lab.number(name) for name in ("slope", "zero_point", "hubble_constant")}
    done = subprocess.run(
        [
            *(sys.executable, "-m", "ladderfit", "calibrate"),
            *(str(work / "sample-01.toml"), "--out", str(tmp_path / "again")),
        ],
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    summary = json.loads((tmp_path / "again" / "summary.json").read_text())["parameters"]
    again = {name: str(rounded(summary[name]["mean"], summary[name]["sd"])) for name in shown}
    assert again == shown


@pytest.mark.long
def test_a_star_set_aside(lab: Lab) -> None:
    """By click, with its reason; back by the button; the same by keyboard alone."""
    from playwright.sync_api import expect

    lab.run("01_calibrate.ipynb")
    page, picture = lab.page, lab.rested()
    kept = page.locator(".lf-kept:visible")
    name = page.get_by_placeholder("object", exact=True)
    canvas = page.locator(".jupyter-matplotlib-canvas-container canvas").last
    canvas.scroll_into_view_if_needed()
    box = canvas.bounding_box()
    for step in range(60):  # along the line in the upper panel
        page.mouse.move(
            box["x"] + box["width"] * (0.3 + 0.005 * step),
            box["y"] + box["height"] * (0.47 - 0.003 * step),
        )
        page.wait_for_timeout(120)
        if name.input_value():
            break
    star = name.input_value()
    assert star, "no star under the pointer"
    expect(page.locator(".lf-star")).to_contain_text(f"{star}")
    expect(page.locator(".lf-star")).to_contain_text("of the expected spread")
    page.mouse.down()
    page.mouse.up()
    expect(kept).to_contain_text("1,263 of 1,356 stars kept")
    expect(kept).to_contain_text("2 set aside by hand")
    expect(button(lab, "Put back")).to_be_visible()
    aside = lab.changed(picture)
    reason = page.get_by_placeholder("reason", exact=True)
    reason.fill("blended with a neighbour")
    reason.press("Enter")
    expect(page.locator(".lf-why")).to_contain_text("set_aside")
    button(lab, "Put back").click()
    expect(kept).to_contain_text("1,264 of 1,356 stars kept")
    lab.changed(aside)

    name.fill("Fen-017")
    name.press("Tab")
    expect(reason).to_have_value("at the edge of the H frame")
    button(lab, "Put back").focus()
    page.keyboard.press("Enter")
    expect(kept).to_contain_text("1,265 of 1,356 stars kept")
    button(lab, "Undo").focus()
    page.keyboard.press("Enter")
    expect(kept).to_contain_text("1,264 of 1,356 stars kept")


@pytest.mark.long
def test_the_last_anchor(lab: Lab) -> None:
    """Nothing sets the scale: controls live, the last posterior grey, words beside the control."""
    from playwright.sync_api import expect

    lab.run("02_anchors.ipynb")
    page = lab.page
    lab.rested()
    stale = page.locator(".lf-workbench.lf-stale")
    for words, whose in (("Orsell", "Orsell's"), ("Parallaxes", "the parallaxes'")):
        anchor(lab, words).uncheck()
        moved = re.compile(f"{whose} weight \\d+ % to 0")
        expect(page.locator(".lf-why")).to_contain_text(moved)
    alone = lab.number("zero_point")
    expect(stale).to_have_count(0)
    anchor(lab, "Tavin").uncheck()
    expect(stale).to_have_count(1)
    beside = page.locator(".lf-control", has_text="Tavin").get_by_role("alert")
    expect(beside).to_contain_text("no anchor in use, so undetermined: zero point")
    assert lab.number("zero_point") == alone
    opacity = page.locator(".lf-strip").evaluate("node => getComputedStyle(node).opacity")
    assert float(opacity) < 0.5
    anchor(lab, "Tavin").check()
    expect(stale).to_have_count(0)
    expect(beside).to_have_count(0)
    assert lab.number("zero_point") == alone


def test_by_keyboard_alone(lab: Lab) -> None:
    """Tab reaches everything; arrows and Enter walk the ladder; keys move a slider."""
    from playwright.sync_api import expect

    lab.run("01_calibrate.ipynb")
    page = lab.page
    lab.rested()
    page.locator(".lf-segment.lf-segment[data-rung=cepheids]").focus()
    page.keyboard.press("ArrowLeft")
    page.keyboard.press("Enter")
    expect(page.locator(".lf-heading:visible")).to_have_text("Anchors")
    page.keyboard.press("ArrowDown")
    focused = "document.activeElement.getAttribute('aria-label')"
    assert "parallax star" in page.evaluate(focused)
    page.keyboard.press("ArrowUp")
    page.keyboard.press("ArrowRight")
    page.keyboard.press("Enter")
    expect(page.locator(".lf-heading:visible")).to_have_text("Cepheids in galaxies")
    reached = []
    for _ in range(40):
        page.keyboard.press("Tab")
        reached.append(
            page.evaluate(
                """() => { const e = document.activeElement;
                  return e.getAttribute('aria-label') || e.labels?.[0]?.textContent || e.title
                    || e.textContent || e.placeholder || e.tagName; }"""
            )
        )
        if "Save ladder file" in str(reached[-1]) or "Write every choice" in str(reached[-1]):
            break
    listed = " | ".join(map(str, reached))
    for words in (
        "Periods from",
        "Periods to",
        "Overtone pulsators",
        "Ratio of absorption",
        "Metallicity term",
        "Break of the slope",
        "Prior of host distances",
        "relation with its residuals",
        "Every parameter",
        "numbers as a table",
        "Name of an object",
        "Reason",
        "Count changes",
        "Name of the file",
        "Write every choice",
    ):
        assert words in listed, f"{words!r} is not reached: {listed}"
    before = lab.number("slope")
    page.get_by_label("Periods from", exact=True).focus()
    for _ in range(12):
        page.keyboard.press("ArrowRight")
    expect(page.locator(".lf-number[data-name=slope] .lf-value")).not_to_have_text(before)
    expect(page.locator(".lf-trust")).to_contain_text("effective draws")
