"""`ladderfit review`: published values against the table they came from."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path

from ladderfit.commands.terminal import Add, progress_on, say, seed, tell_outside, terminable


def add(add_parser: Add) -> None:
    """Add the command and its options."""
    words = "say whether published values hold, by which method, and what they rest on"
    command = add_parser("review", help=words, description=f"{words[0].upper()}{words[1:]}.")
    command.add_argument("file", metavar="FILE", help="the ladder file: table, columns, magnitude")
    command.add_argument(
        "claims", metavar="CLAIMS", help="the claims file: values, errors, what is said of methods"
    )
    command.add_argument(
        "--out",
        metavar="DIR",
        help="the folder to make; without it, the first free name NAME-review-01, ... here",
    )
    command.add_argument(
        "--seed", type=seed, default=1, metavar="N", help="seed of the resampling (1)"
    )
    command.set_defaults(run=_review)


def _review(chosen: argparse.Namespace) -> int:
    from ladderfit.files import first_free
    from ladderfit.jobs.review import review_into
    from ladderfit.ladder import read_ladder
    from ladderfit.review import read_claims

    path = Path(chosen.file)
    claims = read_claims(chosen.claims)
    ladder = read_ladder(path)
    tell_outside(ladder)
    free = first_free(Path(f"{path.stem}-review"))
    folder = free if chosen.out is None else Path(chosen.out)
    with terminable(), progress_on(sys.stderr) as report:
        found = review_into(folder, ladder, claims, seed=chosen.seed, progress=report)
    say(f"{found.summary()}\n\nWritten to {folder}", sys.stdout)
    return 0
