"""`ladderfit draft`: a first ladder file for tables."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path

from ladderfit.commands.terminal import Add, say


def add(add_parser: Add) -> None:
    """Add the command and its options."""
    words = "write a first ladder file for your tables; what is unclear is left undecided"
    command = add_parser("draft", help=words, description=f"{words[0].upper()}{words[1:]}.")
    command.add_argument("tables", nargs="+", metavar="TABLE", help="a table, one of each kind")
    command.add_argument("--out", metavar="FILE", required=True, help="the ladder file to make")
    command.set_defaults(run=_draft)


def _draft(chosen: argparse.Namespace) -> int:
    from ladderfit.draft import write_draft

    out = Path(chosen.out)
    made = write_draft([Path(name) for name in chosen.tables], out)
    then = "decide what is undecided in it, then: " if made.undecided else "next: "
    say(f"{made.summary()}\n\nWritten to {out}; {then}ladderfit calibrate {out}", sys.stdout)
    return 0
