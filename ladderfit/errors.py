"""What can go wrong, in words a person can act on.

Every error the package raises on purpose derives from `LadderfitError`.  Bad
input is an `InputError`: it carries one `Problem` per thing found, each of
which knows where it stands (file, row, column, key), what was found, what was
expected and what to do about it.
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

EXIT_BAD_INPUT = 2


@dataclass(frozen=True)
class Problem:
    """One thing wrong with the input.

    Attributes
    ----------
    found : str
        What stands there, in words.
    expected : str
        What should stand there.
    remedy : str
        What the reader can do about it.
    file, key, column : str or None
        Where it stands; `key` is a dotted key of the ladder file.
    row : int or None
        Row of the table, counted from 1 without the header.
    """

    found: str
    expected: str
    remedy: str
    file: str | None = None
    row: int | None = None
    column: str | None = None
    key: str | None = None

    def __str__(self) -> str:
        """One line: place, found, expected, remedy."""
        place = [
            text
            for text, known in (
                (_short(self.file or "", 400), self.file),
                (f"row {self.row}", self.row),
                (f"column {_short(repr(self.column))}", self.column),
                (f"key {_short(self.key or '')}", self.key),
            )
            if known is not None
        ]
        found, expected, remedy = (
            _short(text, 400) for text in (self.found, self.expected, self.remedy)
        )
        sentence = f"found {found}; expected {expected}; {remedy}"
        line = f"{', '.join(str(part) for part in place)}: {sentence}" if place else sentence
        return _one_line(line)


def _short(text: str, most: int = 120) -> str:
    """The text, its middle left out where it is long."""
    return text if len(text) <= most else f"{text[: most - 40]} ... {text[-30:]}"


def _one_line(text: str) -> str:
    """One line, without characters that a terminal obeys or hides."""
    words = " ".join(text.split())
    return "".join(c if c.isprintable() else c.encode("unicode_escape").decode() for c in words)


class LadderfitError(Exception):
    """Base of all errors raised on purpose."""


class InputError(LadderfitError):
    """The input cannot be used; `problems` says why, one entry each."""

    def __init__(self, problems: Problem | Iterable[Problem]) -> None:
        self.problems: tuple[Problem, ...] = (
            (problems,) if isinstance(problems, Problem) else tuple(problems)
        )
        super().__init__("\n".join(str(problem) for problem in self.problems))

    def __reduce__(self) -> tuple[type[InputError], tuple[tuple[Problem, ...]]]:
        """Survive the way through a process pool."""
        return (type(self), (self.problems,))


class UndeterminedError(InputError):
    """The data and the stated priors leave a parameter undetermined."""


class SamplingError(LadderfitError):
    """The posterior could not be drawn; the message names the next step."""


def raise_if(problems: Sequence[Problem]) -> None:
    """Raise one `InputError` with all `problems`, if there are any."""
    if problems:
        raise InputError(problems)


def nearest(word: str, known: Iterable[str]) -> str:
    """Return a phrase that offers the nearest known words, or lists them."""
    options = sorted(known)
    close = difflib.get_close_matches(word, options, n=1, cutoff=0.5)
    if not close:
        lowered = {option.lower(): option for option in options}
        close = [
            lowered[hit]
            for hit in difflib.get_close_matches(word.lower(), list(lowered), n=1, cutoff=0.5)
        ]
    if close:
        return f"did you mean {close[0]!r}?"
    return "known: " + (", ".join(repr(option) for option in options) or "nothing")
