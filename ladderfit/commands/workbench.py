"""`ladderfit workbench`: the live ladder in JupyterLab."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path

from ladderfit.commands.terminal import Add, say


def add(add_parser: Add) -> None:
    """Add the command and its options."""
    words = "open the live ladder in JupyterLab, on this machine only"
    command = add_parser("workbench", help=words, description=f"{words[0].upper()}{words[1:]}.")
    command.add_argument(
        "file", nargs="?", metavar="FILE", help="the ladder file; without it, the sample"
    )
    command.add_argument(
        "--folder",
        metavar="DIR",
        help="where notebooks are copied to; without it, workbench-NAME here",
    )
    command.add_argument("--port", type=int, metavar="N", help="the port, which must be free")
    command.add_argument("--no-browser", action="store_true", help="print the address only")
    command.set_defaults(run=_workbench)


def _workbench(chosen: argparse.Namespace) -> int:
    from ladderfit.launcher import FIRST, OWN_TABLES, default_folder, launch, prepare

    file, first = None if chosen.file is None else Path(chosen.file), FIRST
    if file is not None:
        if _undecided(file):
            first = OWN_TABLES
            say(f"{file} is a draft; what is undecided is asked in {first}", sys.stdout)
        else:
            from ladderfit.ladder import read_ladder

            read_ladder(file)  # what is wrong with it is said here, not in the browser
    folder = default_folder(file) if chosen.folder is None else Path(chosen.folder)
    prepare(folder, file)
    say(f"Notebooks in {folder}; to stop, press Ctrl-C twice", sys.stdout)
    return launch(folder, port=chosen.port, browser=not chosen.no_browser, first=first)


def _undecided(file: Path) -> bool:
    """Whether a draft left something open in the file."""
    from ladderfit.files import why_no_file

    if why_no_file(file) is not None:
        return False
    from ladderfit.draft.settle import open_keys

    return bool(open_keys(file))
