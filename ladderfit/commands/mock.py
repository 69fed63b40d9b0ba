"""`ladderfit mock`: simulated tables with known truth."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path

from ladderfit.commands.terminal import Add, say, seed


def add(add_parser: Add) -> None:
    """Add the command and its options."""
    words = "simulate tables like those of a ladder file, with known truth"
    command = add_parser("mock", help=words, description=f"{words[0].upper()}{words[1:]}.")
    command.add_argument("file", metavar="FILE", help="the ladder file to follow")
    command.add_argument("--out", metavar="DIR", required=True, help="the folder to make")
    command.add_argument("--seed", type=seed, default=1, metavar="N", help="seed (default: 1)")
    command.set_defaults(run=_mock)


def _mock(chosen: argparse.Namespace) -> int:
    from ladderfit.mock import write_mock

    written = write_mock(Path(chosen.file), Path(chosen.out), chosen.seed)
    say(f"Written to {written.parent}; fit it with: ladderfit calibrate {written}", sys.stdout)
    return 0
