"""`ladderfit coverage`: whether a ladder's errors mean what they say."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path

from ladderfit.commands.terminal import (
    EXIT_FAILED,
    EXIT_INTERRUPTED,
    Add,
    add_crew,
    count,
    progress_on,
    say,
    seed,
    tell_outside,
    terminable,
)

REPEATS = 200


def add(add_parser: Add) -> None:
    """Add the command and its options."""
    words = "simulate a ladder many times, fit every copy, and count how often truth is covered"
    command = add_parser(
        "coverage",
        help=words,
        description=f"{words[0].upper()}{words[1:]}.  Truths are drawn from a prior that the fits "
        "have too: the ladder's own posterior, five times as wide.",
    )
    command.add_argument("file", metavar="FILE", nargs="?", help="the ladder file; or the sample")
    command.add_argument(
        "--repeats",
        type=count,
        default=REPEATS,
        metavar="N",
        help=f"how many copies (default: {REPEATS})",
    )
    command.add_argument(
        "--fixed",
        action="store_true",
        help="keep the truth at the ladder's posterior means, and its own priors in the fits",
    )
    command.add_argument(
        "--out",
        metavar="DIR",
        help="the folder to make, or that of a killed run to go on with; without it, the "
        "first free name NAME-coverage-01, ... here",
    )
    command.add_argument("--seed", type=seed, default=1, metavar="N", help="seed (default: 1)")
    add_crew(command)
    command.set_defaults(run=_coverage)


def _coverage(chosen: argparse.Namespace) -> int:
    from ladderfit.coverage.words import statement
    from ladderfit.files import first_free
    from ladderfit.jobs.coverage import coverage_with_figure
    from ladderfit.ladder import read_ladder
    from ladderfit.shipped import sample_ladder

    path = sample_ladder() if chosen.file is None else Path(chosen.file)
    ladder = read_ladder(path)
    tell_outside(ladder)
    free = first_free(Path(f"{path.stem}-coverage"))
    folder = free if chosen.out is None else Path(chosen.out)
    try:
        with terminable(), progress_on(sys.stderr) as report:
            experiment = coverage_with_figure(
                ladder,
                folder,
                chosen.repeats,
                seed=chosen.seed,
                fixed=chosen.fixed,
                workers=chosen.dask or chosen.workers,
                progress=report,
            )
    except KeyboardInterrupt:
        words = f"interrupted; what was done is kept: to go on, repeat with --out {folder}"
        say(f"ladderfit: {words}", sys.stderr)
        return EXIT_INTERRUPTED
    say(f"{statement(experiment)}\n\nWritten to {folder}", sys.stdout)
    return EXIT_FAILED if experiment.failures else 0
