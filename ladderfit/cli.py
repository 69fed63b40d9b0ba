"""The command line: parses, calls, prints.

Exit codes: 0 done, 1 the posterior could not be drawn, 2 bad input, 130 interrupted.
"""

from __future__ import annotations

import argparse
import contextlib
import os
import signal
import sys
import threading
from collections.abc import Callable, Iterator, Sequence
from pathlib import Path
from typing import NoReturn, TextIO

from ladderfit.errors import EXIT_BAD_INPUT, InputError, LadderfitError, Problem

EXIT_FAILED = 1
EXIT_INTERRUPTED = 130
_PLAIN = str.maketrans({"±": "+/-", "\N{MINUS SIGN}": "-", "×": "x"})

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
    _add_calibrate(commands.add_parser)
    _add_draft(commands.add_parser)
    _add_mock(commands.add_parser)
    _add_workbench(commands.add_parser)
    return top


def _add_calibrate(add: Callable[..., argparse.ArgumentParser]) -> None:
    words = "fit a ladder: numbers, draws and figures in a new folder"
    command = add(
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
        "--seed", type=_seed, metavar="N", help="seed in place of the ladder's sampling.seed"
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


def _add_draft(add: Callable[..., argparse.ArgumentParser]) -> None:
    words = "write a first ladder file for your tables; what is unclear is left undecided"
    command = add("draft", help=words, description=f"{words[0].upper()}{words[1:]}.")
    command.add_argument("tables", nargs="+", metavar="TABLE", help="a table, one of each kind")
    command.add_argument("--out", metavar="FILE", required=True, help="the ladder file to make")
    command.set_defaults(run=_draft)


def _add_mock(add: Callable[..., argparse.ArgumentParser]) -> None:
    words = "simulate tables like those of a ladder file, with known truth"
    command = add("mock", help=words, description=f"{words[0].upper()}{words[1:]}.")
    command.add_argument("file", metavar="FILE", help="the ladder file to follow")
    command.add_argument("--out", metavar="DIR", required=True, help="the folder to make")
    command.add_argument("--seed", type=_seed, default=1, metavar="N", help="seed (default: 1)")
    command.set_defaults(run=_mock)


def _add_workbench(add: Callable[..., argparse.ArgumentParser]) -> None:
    words = "open the live ladder in JupyterLab, on this machine only"
    command = add("workbench", help=words, description=f"{words[0].upper()}{words[1:]}.")
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


def _seed(text: str) -> int:
    if not text.isdecimal():
        raise argparse.ArgumentTypeError(f"found {text!r}, expected a whole number from 0 up")
    return int(text)


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
            _say(f"ladderfit: {problem}", sys.stderr)
        return EXIT_BAD_INPUT
    except LadderfitError as error:
        _say(f"ladderfit: {' '.join(str(error).split())}", sys.stderr)
        return EXIT_FAILED
    except KeyboardInterrupt:
        _say("ladderfit: interrupted; an unfinished folder is not kept", sys.stderr)
        return EXIT_INTERRUPTED
    except OSError as error:
        _say(f"ladderfit: {_no_place(error)}", sys.stderr)
        return EXIT_BAD_INPUT


def _calibrate(chosen: argparse.Namespace) -> int:
    with _terminable():
        if chosen.again is not None:
            return _again(chosen)
        if chosen.resume is not None:
            return _resume(chosen)
        return _calibrate_anew(chosen)


@contextlib.contextmanager
def _terminable() -> Iterator[None]:
    """Have SIGTERM end the command as Ctrl-C does: nothing half written, runs resumable."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return
    before = signal.signal(signal.SIGTERM, signal.default_int_handler)
    try:
        yield
    finally:
        signal.signal(signal.SIGTERM, before)


def _calibrate_anew(chosen: argparse.Namespace) -> int:
    from ladderfit.calibration import StoppedError, calibrate
    from ladderfit.files import first_free
    from ladderfit.ladder import read_ladder
    from ladderfit.shipped import sample_ladder
    from ladderfit.wording import summary_text

    path = sample_ladder() if chosen.file is None else Path(chosen.file)
    ladder = read_ladder(path)
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
        _say(f"ladderfit: {error}", sys.stderr)
        return EXIT_INTERRUPTED
    _say(f"{summary_text(result)}\n\nWritten to {folder}", sys.stdout)
    return 0


def _again(chosen: argparse.Namespace) -> int:
    from ladderfit.repeat import repeat

    _refuse_besides("--again", chosen, ("file", "seed", "draws", "sampler"))
    with progress_on(sys.stderr) as report:
        found = repeat(chosen.again, chosen.out, report)
    _say(str(found), sys.stdout)
    return 0 if found.equal else EXIT_FAILED


def _resume(chosen: argparse.Namespace) -> int:
    from ladderfit.calibration import StoppedError, finish
    from ladderfit.sampling.live import open_run
    from ladderfit.wording import summary_text

    _refuse_besides("--resume", chosen, ("file", "out", "seed", "sampler"))
    run = open_run(chosen.resume)
    if chosen.draws is not None:
        run.set_goal(ess=chosen.draws)
    if run.state not in ("starting", "running"):
        run.resume()
    try:
        with progress_on(sys.stderr) as report:
            result = finish(run, report)
    except StoppedError as error:
        _say(f"ladderfit: {error}", sys.stderr)
        return EXIT_INTERRUPTED
    _say(f"{summary_text(result)}\n\nWritten to {run.path}", sys.stdout)
    return 0


def _refuse_besides(option: str, chosen: argparse.Namespace, others: Sequence[str]) -> None:
    given = [name for name in others if getattr(chosen, name) is not None]
    if given:
        words = given[0].upper() if given[0] == "file" else f"--{given[0]}"
        raise InputError(
            Problem(
                found=f"{words} besides {option}",
                expected=f"{option} alone, as its folder says all that",
                remedy=f"leave {words} out",
            )
        )


def _draft(chosen: argparse.Namespace) -> int:
    from ladderfit.draft import write_draft

    out = Path(chosen.out)
    made = write_draft([Path(name) for name in chosen.tables], out)
    then = "decide what is undecided in it, then: " if made.undecided else "next: "
    _say(f"{made.summary()}\n\nWritten to {out}; {then}ladderfit calibrate {out}", sys.stdout)
    return 0


def _mock(chosen: argparse.Namespace) -> int:
    from ladderfit.mock import write_mock

    written = write_mock(Path(chosen.file), Path(chosen.out), chosen.seed)
    _say(f"Written to {written.parent}; fit it with: ladderfit calibrate {written}", sys.stdout)
    return 0


def _workbench(chosen: argparse.Namespace) -> int:
    from ladderfit.launcher import default_folder, launch, prepare

    file = None if chosen.file is None else Path(chosen.file)
    if file is not None:
        from ladderfit.ladder import read_ladder

        read_ladder(file)  # what is wrong with it is said here, not in the browser
    folder = default_folder(file) if chosen.folder is None else Path(chosen.folder)
    prepare(folder, file)
    _say(f"Notebooks in {folder}; to stop, press Ctrl-C twice", sys.stdout)
    return launch(folder, port=chosen.port, browser=not chosen.no_browser)


@contextlib.contextmanager
def progress_on(stream: TextIO) -> Iterator[Callable[[str, float], None] | None]:
    """Show progress on one line of a terminal and clear it at the end; None elsewhere."""
    if not stream.isatty():
        yield None
        return
    shown = ""

    def report(stage: str, fraction: float) -> None:
        nonlocal shown
        line = f"{stage} {100 * fraction:3.0f} %" if fraction > 0.0 else f"{stage} ..."
        if line != shown:
            stream.write(f"\r{line.ljust(len(shown))}")
            stream.flush()
            shown = line

    try:
        yield report
    finally:
        stream.write(f"\r{' ' * len(shown)}\r")
        stream.flush()


def _say(text: str, stream: TextIO) -> None:
    """Print, in plain letters where the stream knows no others."""
    encoding = stream.encoding or "ascii"
    try:
        text.encode(encoding)
    except UnicodeEncodeError:
        text = text.translate(_PLAIN).encode(encoding, "replace").decode(encoding)
    try:
        print(text, file=stream, flush=True)
    except BrokenPipeError:  # whoever read a pipe has gone; what was asked for is done
        os.dup2(os.open(os.devnull, os.O_WRONLY), stream.fileno())


def _no_place(error: OSError) -> Problem:
    return Problem(
        found=(error.strerror or str(error)).lower(),
        expected="a place that can be written",
        remedy="choose another one with --out, or make room",
        file=None if error.filename is None else str(error.filename),
    )
