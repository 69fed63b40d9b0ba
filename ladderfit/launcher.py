"""Starts JupyterLab on the notebooks of the workbench; imports no widget."""

from __future__ import annotations

import json
import os
import shutil
import subprocess
import sys
from pathlib import Path
from uuid import uuid4

from jupyter_core.paths import jupyter_runtime_dir

from ladderfit.errors import InputError, Problem
from ladderfit.shipped import sample_ladder, shipped

FIRST = "01_calibrate.ipynb"
OWN_TABLES = "05_your_own_tables.ipynb"  # asks what a draft left undecided
_SETTINGS = Path(__file__).resolve().parent / "workbench" / "lab"
_LONGEST_SOCKET = 107  # bytes, sun_path of Linux
_SOCKET_NAME = len(f"/kernel-{uuid4()}-ipc-5")
_NO_FILE = "FILE = None"


def prepare(folder: Path, file: Path | None = None) -> Path:
    """Copy the notebooks into a folder of the user's; those already there stay as they are.

    Parameters
    ----------
    folder : Path
        Made if absent.
    file : Path, optional
        The ladder file that the copies shall read, in place of the sample.

    Returns
    -------
    Path
        The notebook to open first.

    Raises
    ------
    InputError
        If the folder cannot be one.
    LadderfitError
        If the installation lacks the notebooks.
    """
    if folder.exists() and not folder.is_dir():
        raise InputError(
            Problem(
                found="a file",
                expected="a folder for the notebooks, there already or new",
                remedy="name another one with --folder",
                file=str(folder),
            )
        )
    folder.mkdir(parents=True, exist_ok=True)
    for source in sorted(shipped("notebooks").glob("*.ipynb")):
        target = folder / source.name
        if target.exists():
            continue
        if file is None:
            shutil.copyfile(source, target)
        else:
            path = Path(os.path.relpath(file.resolve(), folder.resolve())).as_posix()
            target.write_text(with_file(source.read_text(encoding="utf-8"), path), encoding="utf-8")
    return folder / FIRST


def with_file(notebook: str, path: str) -> str:
    """The text of a notebook whose line ``FILE = None`` names a ladder file instead.

    Raises
    ------
    ValueError
        If there is not exactly one such line.
    """
    content = json.loads(notebook)
    lines = [
        (cell["source"], place)
        for cell in content["cells"]
        if cell["cell_type"] == "code"
        for place, line in enumerate(cell["source"])
        if line.startswith(_NO_FILE)
    ]
    if len(lines) != 1:
        raise ValueError(f"found {len(lines)} lines {_NO_FILE!r}, expected one")
    source, place = lines[0]
    literal = json.dumps(path, ensure_ascii=False) if path.isprintable() else repr(path)
    source[place] = source[place].replace(_NO_FILE, f"FILE = {literal}", 1)
    return json.dumps(content, indent=1, ensure_ascii=False) + "\n"


def command(
    folder: Path, *, port: int | None = None, browser: bool = True, first: str = FIRST
) -> list[str]:
    """The command that starts JupyterLab on a notebook: here only, with its token, quiet."""
    words = [
        sys.executable,
        "-m",
        "jupyterlab",
        f"--ServerApp.root_dir={folder.resolve()}",
        "--ServerApp.ip=127.0.0.1",
        "--LabApp.extension_manager=readonly",
        "--LabApp.check_for_updates_class=jupyterlab.NeverCheckForUpdate",
        f"--LabApp.default_url=/lab/tree/{first}",
    ]
    if sys.platform.startswith("linux") and sockets_fit(Path(jupyter_runtime_dir())):
        words.append("--KernelManager.transport=ipc")
    if port is not None:
        words += [f"--ServerApp.port={port}", "--ServerApp.port_retries=0"]
    if not browser:
        words.append("--no-browser")
    if hasattr(os, "geteuid") and os.geteuid() == 0:
        words.append("--allow-root")
    return words


def sockets_fit(folder: Path) -> bool:
    """Whether names of a kernel's sockets in this folder are short enough for Linux."""
    return len(os.fsencode(folder)) + _SOCKET_NAME <= _LONGEST_SOCKET


def environment() -> dict[str, str]:
    """The environment of this process, with our settings of JupyterLab among the defaults."""
    found = dict(os.environ)
    before = found.get("JUPYTER_CONFIG_PATH")
    found["JUPYTER_CONFIG_PATH"] = os.pathsep.join([str(_SETTINGS), *([before] if before else [])])
    return found


def default_folder(file: Path | None = None) -> Path:
    """Where notebooks go unless told otherwise: ``workbench-STEM`` in the current folder."""
    return Path(f"workbench-{(sample_ladder() if file is None else file).stem}")


def launch(
    folder: Path, *, port: int | None = None, browser: bool = True, first: str = FIRST
) -> int:
    """Become JupyterLab in a folder; where a process cannot, run it and return its exit code."""
    words = command(folder, port=port, browser=browser, first=first)
    variables = environment()
    if os.name == "posix":
        sys.stdout.flush()
        os.execve(words[0], words, variables)
    return subprocess.run(words, env=variables, check=False).returncode
