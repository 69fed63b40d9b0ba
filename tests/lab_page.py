"""JupyterLab and Chromium, started and driven for the tests of the workbench."""

from __future__ import annotations

import contextlib
import os
import re
import shutil
import signal
import socket
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest

ARGUMENTS = [
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--disable-dev-shm-usage",
]
HERE = ("http://127.0.0.1", "ws://127.0.0.1", "data:", "blob:")
CANVAS = ".jupyter-matplotlib-canvas-container canvas"
_PICTURE = """s => { const c = document.querySelector(s); if (!c || !c.width) return null;
  const d = c.getContext('2d').getImageData(0, 0, c.width, c.height).data; let h = 0, n = 0;
  for (let i = 0; i < d.length; i += 4) {
    h = (Math.imul(h, 31) + d[i] + 7 * d[i + 1] + 13 * d[i + 2]) | 0;
    if (d[i] !== d[0] || d[i + 1] !== d[1] || d[i + 2] !== d[2]) n++;
  }
  return [h, n, d[0], d[1], d[2]]; }"""
_ALL_RUN = r"""[...document.querySelectorAll('.jp-CodeCell .jp-InputArea .jp-InputPrompt')]
  .every(e => /\[\d+\]/.test(e.textContent))"""


def chromium_path() -> str:
    """Where Chromium is; without it the test is skipped, or fails in the integration."""
    found = shutil.which("chromium") or shutil.which("chromium-browser")
    if found is None:
        words = "no chromium on this machine (apt-get install chromium)"
        if os.environ.get("CI") == "true":
            pytest.fail(words)
        pytest.skip(words)
    return found


def free_port() -> int:
    """A port that nobody listens on."""
    with socket.socket() as one:
        one.bind(("127.0.0.1", 0))
        return int(one.getsockname()[1])


def variables(folder: Path) -> dict[str, str]:
    """An environment in which Jupyter keeps everything in `folder`."""
    unwanted = ("JUPYTER", "MPLBACKEND", "IPYTHON")
    found = {key: value for key, value in os.environ.items() if not key.startswith(unwanted)}
    for name in (
        "JUPYTER_CONFIG_DIR",
        "JUPYTER_DATA_DIR",
        "JUPYTER_RUNTIME_DIR",
        "IPYTHONDIR",
        "JUPYTERLAB_SETTINGS_DIR",
        "JUPYTERLAB_WORKSPACES_DIR",
    ):
        (folder / name.lower()).mkdir()
        found[name] = str(folder / name.lower())
    found["PATH"] = f"{Path(sys.executable).parent}{os.pathsep}{found['PATH']}"
    return found


@contextlib.contextmanager
def workbench_server(work: Path, settings: Path, *more: str) -> Iterator[tuple[str, str]]:
    """Run ``ladderfit workbench`` in a folder; yields address and token."""
    log, port = settings / "lab.log", free_port()
    words = [sys.executable, "-m", "ladderfit", "workbench", *more]
    words += ["--folder", str(work), "--port", str(port), "--no-browser"]
    with log.open("w") as out:
        process = subprocess.Popen(
            words,
            env=variables(settings),
            cwd=settings,
            stdin=subprocess.DEVNULL,
            stdout=out,
            stderr=subprocess.STDOUT,
            start_new_session=True,
        )
    try:
        yield f"http://127.0.0.1:{port}", _token(process, log, port)
    finally:
        process.terminate()
        try:
            process.wait(15)
        except subprocess.TimeoutExpired:
            os.killpg(process.pid, signal.SIGKILL)
            process.wait()


def _token(process: subprocess.Popen[bytes], log: Path, port: int) -> str:
    end = time.monotonic() + 90
    while time.monotonic() < end:
        text = log.read_text()
        found = re.search(rf"http://127\.0\.0\.1:{port}/\S*token=(\w+)", text)
        if found:
            return found[1]
        if process.poll() is not None:
            raise RuntimeError(f"JupyterLab ended:\n{text[-3000:]}")
        time.sleep(0.1)
    raise TimeoutError(log.read_text()[-3000:])


class Lab:
    """A page with one notebook, and what is looked at in it."""

    def __init__(self, page: Any, address: str, token: str) -> None:
        self.page, self.address, self.token = page, address, token

    def run(self, notebook: str, shows: str = ".lf-workbench") -> None:
        """Open a notebook, run all its cells by the menu and look for what it shows."""
        from playwright.sync_api import expect

        page = self.page
        page.goto(f"{self.address}/lab/tree/{notebook}?token={self.token}&reset")
        cell = page.locator(".jp-NotebookPanel .jp-Cell").first
        expect(cell).to_be_visible(timeout=90_000)
        idle = page.locator(".jp-StatusBar-TextItem", has_text=re.compile(r"\| Idle$"))
        expect(idle).to_be_visible(timeout=90_000)
        page.get_by_role("menuitem", name="Run", exact=True).click()
        self._menu("Run All Cells").click()
        page.wait_for_function(_ALL_RUN, timeout=120_000)
        assert page.locator("[data-mime-type='application/vnd.jupyter.error']").count() == 0
        expect(page.locator(shows)).to_be_visible()
        page.locator(shows).scroll_into_view_if_needed()

    def picture(self) -> list[int]:
        """Hash of the pixels, how many are not background, and the background's colour."""
        return list(self.page.evaluate(_PICTURE, CANVAS) or [])

    def rested(self, quiet: float = 0.7) -> list[int]:
        """The picture once it has not changed for a while."""
        end, last, since = time.monotonic() + 30, [], time.monotonic()
        while time.monotonic() < end:
            now = self.picture()
            if not now or now[1] < 300 or now != last:
                last, since = now, time.monotonic()
            elif time.monotonic() - since > quiet:
                return now
            self.page.wait_for_timeout(50)
        raise AssertionError("the figure never came to rest")

    def changed(self, before: list[int]) -> list[int]:
        """The picture once it is another and rests."""
        self.until(lambda picture: picture[:1] != before[:1])
        return self.rested()

    def until(self, good: Callable[[list[int]], bool]) -> None:
        """Wait for a picture of some kind."""
        end = time.monotonic() + 30
        while time.monotonic() < end:
            picture = self.picture()
            if picture and good(picture):
                return
            self.page.wait_for_timeout(40)
        raise AssertionError(f"no such picture; the last is {self.picture()}")

    def number(self, name: str) -> str:
        """What the strip says of a parameter."""
        return str(self.page.locator(f".lf-number[data-name={name}] .lf-value").inner_text())

    def text(self, selector: str) -> str:
        """The text of one element."""
        return str(self.page.locator(selector).first.inner_text())

    def theme(self, words: str) -> None:
        """Choose a theme by the menu."""
        self.page.get_by_role("menuitem", name="Settings", exact=True).click()
        self._menu("Theme").hover()
        self._menu(words).click()

    def _menu(self, words: str) -> Any:
        return self.page.locator(".lm-Menu-itemLabel").get_by_text(words, exact=True)
