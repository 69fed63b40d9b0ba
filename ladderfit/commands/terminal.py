"""What every command does to a terminal: words, progress, an orderly end."""

from __future__ import annotations

import argparse
import contextlib
import os
import signal
import sys
import threading
from collections.abc import Callable, Iterator, Sequence
from typing import TYPE_CHECKING, TextIO

from ladderfit.errors import InputError, Problem

if TYPE_CHECKING:
    from ladderfit.ladder import Ladder

EXIT_FAILED = 1
EXIT_INTERRUPTED = 130

Add = Callable[..., argparse.ArgumentParser]  # the `add_parser` of the commands
_PLAIN = str.maketrans({"±": "+/-", "\N{MINUS SIGN}": "-", "×": "x"})


def say(text: str, stream: TextIO) -> None:
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


def tell_outside(ladder: Ladder) -> None:
    """Say on standard error which inputs lie outside the folder of the ladder file."""
    if ladder.path is None:
        return
    base = ladder.path.parent.resolve()
    found = [source.path for source in ladder.sources.values()]
    outside = [path for path in found if not (base / path).resolve().is_relative_to(base)]
    if outside:
        words = ", ".join(dict.fromkeys(" ".join(path.split()) for path in outside))
        say(f"ladderfit: outside the folder of the ladder file: {words}", sys.stderr)


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


@contextlib.contextmanager
def terminable() -> Iterator[None]:
    """Have SIGTERM end the command as Ctrl-C does: nothing half written, runs resumable."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return
    before = signal.signal(signal.SIGTERM, signal.default_int_handler)
    try:
        yield
    finally:
        signal.signal(signal.SIGTERM, before)


def seed(text: str) -> int:
    """The whole number of a --seed option."""
    if not text.isdecimal():
        raise argparse.ArgumentTypeError(f"found {text!r}, expected a whole number from 0 up")
    return int(text)


def count(text: str) -> int:
    """The number of an option that asks for at least one of something."""
    if not text.isdecimal() or int(text) < 1:
        raise argparse.ArgumentTypeError(f"found {text!r}, expected a whole number from 1 up")
    return int(text)


def add_crew(command: argparse.ArgumentParser) -> None:
    """Add the options that say who works on many fits."""
    where = command.add_mutually_exclusive_group()
    where.add_argument(
        "--workers",
        type=count,
        metavar="N",
        help="processes (default: as many as there are cores, fewer for few fits)",
    )
    where.add_argument(
        "--dask", metavar="ADDRESS", help="work on a Dask cluster, by its scheduler's address"
    )


def refuse_besides(option: str, chosen: argparse.Namespace, others: Sequence[str]) -> None:
    """Refuse options that say what `option` already says."""
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
