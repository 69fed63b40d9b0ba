"""JupyterLab and Chromium as fixtures; import them into a module of browser tests."""

from __future__ import annotations

import tempfile
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from lab_page import ARGUMENTS, HERE, Lab, chromium_path, workbench_server


@pytest.fixture(scope="module")
def work(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The user's folder of notebooks."""
    return tmp_path_factory.mktemp("user") / "notebooks"


@pytest.fixture(scope="module")
def chromium() -> Iterator[Any]:
    """A browser."""
    path = chromium_path()
    from playwright.sync_api import expect, sync_playwright

    expect.set_options(timeout=30_000)
    with sync_playwright() as playwright:
        browser = playwright.chromium.launch(executable_path=path, args=ARGUMENTS)
        yield browser
        browser.close()


@pytest.fixture(scope="module")
def ladder_files() -> tuple[str, ...]:
    """What the workbench is started on; nothing for the sample."""
    return ()


@pytest.fixture(scope="module")
def server(chromium: Any, work: Path, ladder_files: tuple[str, ...]) -> Iterator[tuple[str, str]]:
    """Address and token of a server."""
    # names of sockets must not be long
    with (
        tempfile.TemporaryDirectory() as short,
        workbench_server(work, Path(short), *ladder_files) as found,
    ):
        yield found


@pytest.fixture
def lab(chromium: Any, server: tuple[str, str], tmp_path: Path) -> Iterator[Lab]:
    """A page that may talk to this machine only."""
    context = chromium.new_context(viewport={"width": 1280, "height": 1000})
    page = context.new_page()
    faults: list[str] = []
    page.on("pageerror", lambda error: faults.append(str(error)))
    page.on(
        "request",
        lambda request: faults.append(request.url) if not request.url.startswith(HERE) else None,
    )
    yield Lab(page, *server)
    page.screenshot(path=tmp_path / "last.png")
    context.close()
    assert not faults, faults
