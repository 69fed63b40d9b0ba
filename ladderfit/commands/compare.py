"""`ladderfit compare`: results side by side."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path

from ladderfit.commands.terminal import Add, progress_on, say, seed


def add(add_parser: Add) -> None:
    """Add the command and its options."""
    words = "compare results: parameters, shifts with their errors, choices that differ"
    command = add_parser("compare", help=words, description=f"{words[0].upper()}{words[1:]}.")
    command.add_argument("first", metavar="DIR", help="the result that others are held against")
    command.add_argument("others", nargs="+", metavar="DIR", help="other results")
    command.add_argument(
        "--resamples",
        type=seed,
        default=100,
        metavar="N",
        help="joint resamples behind the errors of the shifts (default: 100; 0 for none)",
    )
    command.add_argument(
        "--seed", type=seed, default=1, metavar="N", help="of the resamples (default: 1)"
    )
    command.add_argument("--out", metavar="DIR", help="a folder to make for tables")
    command.set_defaults(run=_compare)


def _compare(chosen: argparse.Namespace) -> int:
    from ladderfit.comparison.files import comparison_text, write_comparison
    from ladderfit.comparison.results import compare_results
    from ladderfit.files import new_folder
    from ladderfit.store import read_result

    folders = [chosen.first, *chosen.others]
    results = {
        label: read_result(folder) for label, folder in zip(_labels(folders), folders, strict=True)
    }
    with progress_on(sys.stderr) as report:
        found = compare_results(
            results, resamples=chosen.resamples, seed=chosen.seed, progress=report
        )
    text = comparison_text(found)
    if chosen.out is not None:
        with new_folder(chosen.out) as temporary:
            write_comparison(found, temporary)
        text = f"{text}\n\nWritten to {chosen.out}"
    say(text, sys.stdout)
    return 0


def _labels(folders: list[str]) -> list[str]:
    """The folders' own names where they tell them apart, else their paths; each once."""
    names = [Path(folder).resolve().name for folder in folders]
    if len(set(names)) < len(names):
        names = list(folders)
    return [
        name if names.index(name) == place else f"{name} ({place + 1})"
        for place, name in enumerate(names)
    ]
