"""The command line: parses, calls, prints.

Exit codes: 0 done, 1 the posterior could not be drawn, 2 bad input, 130 interrupted.
"""

from __future__ import annotations

import argparse
import sys
from collections.abc import Sequence
from typing import NoReturn

from ladderfit.commands import COMMANDS
from ladderfit.commands.terminal import EXIT_FAILED, EXIT_INTERRUPTED, say
from ladderfit.errors import EXIT_BAD_INPUT, InputError, LadderfitError, Problem

_ABOUT = "Calibrate the cosmic distance ladder by one joint Bayesian fit."
_AFTER = """\
examples:
  ladderfit calibrate                        fit the sample that comes along
  ladderfit calibrate my.toml --out first    fit your own ladder
  ladderfit draft *.ecsv --out my.toml       begin a ladder file for your own tables
  ladderfit mock my.toml --out again         simulate data like yours, with known truth
  ladderfit workbench my.toml                move its choices and see the answer move
"""


class _Parser(argparse.ArgumentParser):
    """A parser that complains in one line."""

    def error(self, message: str) -> NoReturn:
        self.exit(EXIT_BAD_INPUT, f"{self.prog}: {message}; see {self.prog} --help\n")


class _Version(argparse.Action):
    """Look the version up only when it is asked for."""

    def __call__(self, parser: argparse.ArgumentParser, *_: object, **__: object) -> NoReturn:
        from importlib.metadata import version

        print(f"ladderfit {version('ladderfit')}")
        parser.exit()


def parser() -> argparse.ArgumentParser:
    """Every command and option."""
    top = _Parser(
        prog="ladderfit",
        description=_ABOUT,
        epilog=_AFTER,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    top.add_argument("--version", action=_Version, nargs=0, help="print the version and exit")
    commands = top.add_subparsers(title="commands", metavar="COMMAND", dest="command")
    for command in COMMANDS:
        command.add(commands.add_parser)
    return top


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command.

    Parameters
    ----------
    arguments : sequence of str, optional
        In place of the process's own.

    Returns
    -------
    int
        The exit code.

    Raises
    ------
    SystemExit
        After ``--help``, ``--version`` and arguments that cannot be understood.
    """
    top = parser()
    chosen = top.parse_args(arguments)
    if chosen.command is None:
        top.print_help()
        return 0
    try:
        return int(chosen.run(chosen))
    except InputError as error:
        for problem in error.problems:
            say(f"ladderfit: {problem}", sys.stderr)
        return EXIT_BAD_INPUT
    except LadderfitError as error:
        say(f"ladderfit: {' '.join(str(error).split())}", sys.stderr)
        return EXIT_FAILED
    except KeyboardInterrupt:
        say("ladderfit: interrupted; an unfinished folder is not kept", sys.stderr)
        return EXIT_INTERRUPTED
    except OSError as error:
        say(f"ladderfit: {_no_place(error)}", sys.stderr)
        return EXIT_BAD_INPUT


def _no_place(error: OSError) -> Problem:
    return Problem(
        found=(error.strerror or str(error)).lower(),
        expected="a place that can be written",
        remedy="choose another one with --out, or make room",
        file=None if error.filename is None else str(error.filename),
    )
