"""`ladderfit calibrate`: fit a ladder."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path

from ladderfit.commands.terminal import (
    EXIT_FAILED,
    EXIT_INTERRUPTED,
    Add,
    progress_on,
    refuse_besides,
    say,
    seed,
    tell_outside,
    terminable,
)


def add(add_parser: Add) -> None:
    """Add the command and its options."""
    words = "fit a ladder: numbers, draws and figures in a new folder"
    command = add_parser(
        "calibrate",
        help=words,
        description=f"{words[0].upper()}{words[1:]}, and a summary on standard output.",
    )
    command.add_argument(
        "file", nargs="?", metavar="FILE", help="the ladder file; without it, the sample"
    )
    command.add_argument(
        "--out",
        metavar="DIR",
        help="the folder to make; without it, the first free name NAME-01, NAME-02, ... here",
    )
    command.add_argument(
        "--seed", type=seed, metavar="N", help="seed in place of the ladder's sampling.seed"
    )
    command.add_argument(
        "--draws", type=int, metavar="N", help="number in place of the ladder's sampling.draws"
    )
    command.add_argument(
        "--sampler",
        choices=("direct", "ensemble"),
        help="in place of the ladder's sampling.sampler; an ensemble can be stopped and resumed",
    )
    former = command.add_mutually_exclusive_group()
    former.add_argument(
        "--again", metavar="DIR", help="repeat the result in DIR and say whether it is the same"
    )
    former.add_argument(
        "--resume", metavar="DIR", help="go on with the ensemble run in DIR, or watch it"
    )
    command.set_defaults(run=_calibrate)


def _calibrate(chosen: argparse.Namespace) -> int:
    with terminable():
        if chosen.again is not None:
            return _again(chosen)
        if chosen.resume is not None:
            return _resume(chosen)
        return _calibrate_anew(chosen)


def _calibrate_anew(chosen: argparse.Namespace) -> int:
    from ladderfit.files import first_free
    from ladderfit.jobs.calibration import StoppedError, calibrate
    from ladderfit.ladder import read_ladder
    from ladderfit.shipped import sample_ladder
    from ladderfit.wording import summary_text

    path = sample_ladder() if chosen.file is None else Path(chosen.file)
    ladder = read_ladder(path)
    tell_outside(ladder)
    stated = {
        "sampling.seed": chosen.seed,
        "sampling.draws": chosen.draws,
        "sampling.sampler": chosen.sampler,
    }
    ladder = ladder.change({key: value for key, value in stated.items() if value is not None})
    folder = first_free(Path(path.stem)) if chosen.out is None else Path(chosen.out)
    try:
        with progress_on(sys.stderr) as report:
            result = calibrate(ladder, folder, progress=report)
    except StoppedError as error:
        say(f"ladderfit: {error}", sys.stderr)
        return EXIT_INTERRUPTED
    say(f"{summary_text(result)}\n\nWritten to {folder}", sys.stdout)
    return 0


def _again(chosen: argparse.Namespace) -> int:
    from ladderfit.jobs.repeat import repeat

    refuse_besides("--again", chosen, ("file", "seed", "draws", "sampler"))
    with progress_on(sys.stderr) as report:
        found = repeat(chosen.again, chosen.out, report)
    say(str(found), sys.stdout)
    return 0 if found.equal else EXIT_FAILED


def _resume(chosen: argparse.Namespace) -> int:
    from ladderfit.jobs.calibration import StoppedError, finish
    from ladderfit.sampling.live import open_run
    from ladderfit.wording import summary_text

    refuse_besides("--resume", chosen, ("file", "out", "seed", "sampler"))
    run = open_run(chosen.resume)
    if chosen.draws is not None:
        run.set_goal(ess=chosen.draws)
    if run.state not in ("starting", "running"):
        run.resume()
    try:
        with progress_on(sys.stderr) as report:
            result = finish(run, report)
    except StoppedError as error:
        say(f"ladderfit: {error}", sys.stderr)
        return EXIT_INTERRUPTED
    say(f"{summary_text(result)}\n\nWritten to {run.path}", sys.stdout)
    return 0
