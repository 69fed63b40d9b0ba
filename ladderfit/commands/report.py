"""`ladderfit report`: the report of a result, made again."""

from __future__ import annotations

import argparse
import sys

from ladderfit.commands.terminal import Add, say


def add(add_parser: Add) -> None:
    """Add the command and its options."""
    words = "make report.html and tables/ of a result again, with its alternatives if named"
    command = add_parser("report", help=words, description=f"{words[0].upper()}{words[1:]}.")
    command.add_argument("result", metavar="RESULT", help="the folder of a calibration")
    command.add_argument(
        "--alternatives",
        metavar="DIR",
        help="a folder of ladderfit alternatives, whose systematics and error budget to add",
    )
    command.set_defaults(run=_report)


def _report(chosen: argparse.Namespace) -> int:
    from pathlib import Path

    from ladderfit.report.budget import alternative_tables
    from ladderfit.report.write import renew_report
    from ladderfit.store import read_result

    folder = Path(chosen.result)
    result = read_result(folder)
    more = [] if chosen.alternatives is None else alternative_tables(chosen.alternatives)
    renew_report(result, folder, more=more)
    say(f"Written to {folder / 'report.html'} and {folder / 'tables'}", sys.stdout)
    return 0
