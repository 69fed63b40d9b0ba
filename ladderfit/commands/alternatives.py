"""`ladderfit alternatives`: one choice after another made otherwise, in one table."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path

from ladderfit.commands.terminal import (
    EXIT_FAILED,
    EXIT_INTERRUPTED,
    Add,
    add_crew,
    progress_on,
    say,
    seed,
    tell_outside,
    terminable,
)


def add(add_parser: Add) -> None:
    """Add the command and its options."""
    words = "fit a ladder with one choice after another made otherwise: what moves which number"
    command = add_parser(
        "alternatives",
        help=words,
        description=f"{words[0].upper()}{words[1:]}.  The choices to try are the dotted keys and "
        "lists of values under [alternatives] in the ladder file.",
    )
    command.add_argument(
        "file", nargs="?", metavar="FILE", help="the ladder file; without it, the sample"
    )
    command.add_argument(
        "--out",
        metavar="DIR",
        help="the folder to make, or that of a killed sweep to go on with; without it, the "
        "first free name NAME-alternatives-01, ... here",
    )
    command.add_argument(
        "--grid", action="store_true", help="all combinations, instead of one change at a time"
    )
    command.add_argument(
        "--draws",
        type=int,
        metavar="N",
        help="draws of each fit (default: the ladder's sampling.draws, at most 2000)",
    )
    command.add_argument(
        "--seed", type=seed, metavar="N", help="seed in place of the ladder's sampling.seed"
    )
    add_crew(command)
    command.set_defaults(run=_alternatives)


def _alternatives(chosen: argparse.Namespace) -> int:
    from ladderfit.alternatives.words import comparison_text
    from ladderfit.files import first_free
    from ladderfit.jobs.alternatives import alternatives_in_folder
    from ladderfit.ladder import read_ladder
    from ladderfit.shipped import sample_ladder

    path = sample_ladder() if chosen.file is None else Path(chosen.file)
    ladder = read_ladder(path)
    tell_outside(ladder)
    if chosen.draws is not None:
        ladder = ladder.change({"sampling.draws": chosen.draws})  # refuses what makes no sense
    free = first_free(Path(f"{path.stem}-alternatives"))
    folder = free if chosen.out is None else Path(chosen.out)
    try:
        with terminable(), progress_on(sys.stderr) as report:
            comparison, budget = alternatives_in_folder(
                ladder,
                folder,
                grid=chosen.grid,
                draws=chosen.draws,
                seed=chosen.seed,
                workers=chosen.dask or chosen.workers,
                progress=report,
            )
    except KeyboardInterrupt:
        words = f"interrupted; what was done is kept: to go on, repeat with --out {folder}"
        say(f"ladderfit: {words}", sys.stderr)
        return EXIT_INTERRUPTED
    say(f"{comparison_text(comparison, budget)}\n\nWritten to {folder}", sys.stdout)
    lost = any(fit.outcome.status == "lost" for fit in comparison.fits)
    return EXIT_FAILED if lost else 0
