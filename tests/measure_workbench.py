"""Latency and memory of the workbench, measured in a real browser.

Run it by hand on a quiet machine: ``python tests/measure_workbench.py [CHANGES [FILE]]``;
without a ladder file, on the sample.
Printed are medians and 90 % points in ms, and the kernel's memory from change 20 on.
"""

from __future__ import annotations

import json
import os
import statistics
import sys
import tempfile
from pathlib import Path
from typing import Any

import psutil
from lab_page import ARGUMENTS, Lab, chromium_path, workbench_server
from playwright.sync_api import sync_playwright

_HOOKS = """() => {
  const draw = CanvasRenderingContext2D.prototype.drawImage;
  window.lfDrawn = 0;
  CanvasRenderingContext2D.prototype.drawImage = function (...all) {
    if (this.canvas.isConnected) window.lfDrawn = performance.now();
    return draw.apply(this, all);
  };
}"""
_DRAG = """async ([label, value, kind, wait]) => {
  const thumb = document.querySelector(`input[type=range][aria-label="${label}"]`);
  const strip = document.querySelector('.lf-strip-box'), why = document.querySelector('.lf-why');
  const start = performance.now();
  let numbers = 0, line = 0;
  const seen = (set) => new MutationObserver(() => set());
  const one = seen(() => { numbers = numbers || performance.now(); });
  const two = seen(() => { line = line || performance.now(); });
  one.observe(strip, {childList: true, subtree: true, characterData: true});
  two.observe(why, {childList: true, subtree: true, characterData: true});
  thumb.value = value;
  thumb.dispatchEvent(new Event(kind, {bubbles: true}));
  const done = () => numbers && (wait === 'view' ? window.lfDrawn > numbers : line);
  while (!done() && performance.now() - start < 8000) await new Promise(requestAnimationFrame);
  one.disconnect(); two.disconnect();
  return wait === 'view' ? window.lfDrawn - start : Math.max(numbers, line) - start;
}"""
LABEL = "Periods from"


def told(times: list[float]) -> str:
    """Median and 90 % point."""
    ordered = sorted(times)
    return f"median {statistics.median(times):.0f} ms, 90 % {ordered[int(0.9 * len(times))]:.0f} ms"


def kernel_memory() -> float:
    """Resident memory of the kernel [MB]."""
    kernels = [
        process.memory_info().rss
        for process in psutil.process_iter(["cmdline"])
        if "ipykernel_launcher" in " ".join(process.info["cmdline"] or [])
    ]
    return max(kernels) / 1e6


def measure(lab: Lab, changes: int) -> None:
    """Drag and release; then with the corner open; then memory."""
    page: Any = lab.page
    lab.run("01_calibrate.ipynb")
    lab.rested()
    page.evaluate(_HOOKS)

    def move(value: int, kind: str, wait: str) -> float:
        took = float(page.evaluate(_DRAG, [LABEL, value, kind, wait]))
        page.wait_for_timeout(60)
        return took

    drags = [move(40 + 3 * (step % 20), "input", "numbers") for step in range(30)][3:]
    print("drag to numbers and line:", told(drags))
    views = [move(40 + 7 * (step % 11), "change", "view") for step in range(25)][3:]
    print("release to view:", told(views))
    page.get_by_role("button", name="Corner", exact=True).click()
    page.wait_for_timeout(3000)
    corners = [move(40 + 7 * (step % 11), "change", "view") for step in range(12)][2:]
    print("release to corner:", told(corners))
    page.get_by_role("button", name="Relation", exact=True).click()
    page.wait_for_timeout(2000)
    memory = {}
    for step in range(1, changes + 1):
        move(40 + 7 * (step % 13), "change" if step % 2 else "input", "numbers")
        if step in (20, changes // 2, changes):
            memory[step] = kernel_memory()
    figures = page.locator(".jupyter-matplotlib canvas").count()
    print("kernel memory [MB]:", json.dumps(memory), "canvases in the page:", figures)


def main() -> None:
    """Start everything, measure, stop."""
    changes = int(sys.argv[1]) if len(sys.argv) > 1 else 200
    with (
        tempfile.TemporaryDirectory() as short,
        workbench_server(Path(short) / "work", Path(short), *sys.argv[2:3]) as (address, token),
        sync_playwright() as playwright,
    ):
        browser = playwright.chromium.launch(executable_path=chromium_path(), args=ARGUMENTS)
        page = browser.new_context(viewport={"width": 1280, "height": 1000}).new_page()
        print("load before:", os.getloadavg())
        measure(Lab(page, address, token), changes)
        print("load after:", os.getloadavg())
        browser.close()


if __name__ == "__main__":
    main()
