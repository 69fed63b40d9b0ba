"""Settles what a draft left open, in the ladder file itself: its state is the file."""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

from ladderfit.draft.answers import Change, Pages, Place
from ladderfit.draft.make import Draft, draft_ladder, write_draft
from ladderfit.draft.questions import (
    INDEX,
    NUMBER,
    Option,
    Question,
    fresh,
    questions_of,
    tables_of,
    unknown,
)
from ladderfit.errors import InputError, Problem
from ladderfit.ladder import Ladder, read_ladder
from ladderfit.schema import UNDECIDED

_INDEX = r"(\S+) - ([\d.]+) \((\S+) - (\S+)\)"


class Settling:
    """The questions of a draft, their answers, and the ladder file that holds these.

    Parameters
    ----------
    file : str or Path
        The ladder file; drafted from `tables` if absent.
    tables : sequence of path
        One table of each kind; without them those that the file names.

    Raises
    ------
    InputError
        If there is neither a file nor a table, a table cannot be used, or the file
        names other tables.
    OSError
        If the file cannot be written.
    """

    def __init__(self, file: str | Path, tables: Sequence[str | Path] = ()) -> None:
        self.file = Path(file)
        named = [Path(table) for table in tables]
        if not self.file.exists():
            if not named:
                problem = Problem("neither a file nor tables", "one of them", "name your tables")
                raise InputError(replace(problem, file=str(self.file)))
            write_draft(named, self.file)
        self._further: dict[Place, Question] = {}  # that no draft explains, while this lives
        self.pages = Pages(self.file, {})
        here = self.file.parent
        stated = [here / name for name in tables_of(self.pages.value(()))]
        self.draft: Draft | None = self._drafted(named, stated)
        if self.draft is not None:
            self.pages = Pages(self.file, fresh(self.draft))

    def _drafted(self, named: list[Path], stated: list[Path]) -> Draft | None:
        """The draft of the tables again, so that settled questions can be asked again."""
        if named:
            strange = {path.resolve() for path in stated} - {path.resolve() for path in named}
            if strange:
                raise InputError(_other(self.file, sorted(strange)[0]))
            return draft_ladder(named, self.file.parent)
        try:
            return draft_ladder(list(dict.fromkeys(stated)), self.file.parent) if stated else None
        except InputError:  # reading the ladder will say so
            return None

    @property
    def questions(self) -> list[Question]:
        """What is asked, settled or not, in the draft's order."""
        asked = [] if self.draft is None else questions_of(self.draft)
        known = {place for question in asked for place in question.places}
        for place, text in self.pages.open():
            if place not in known:
                self._further.setdefault(place, unknown(place, text))
        return asked + list(self._further.values())

    @property
    def open(self) -> list[Place]:
        """Keys that are still undecided."""
        return [place for place, _ in self.pages.open()]

    def is_open(self, question: Question) -> bool:
        """Whether a question waits for its answer."""
        return any(_undecided(self.pages.value(place)) for place in question.places)

    def chosen(self, question: Question) -> Option | None:
        """The option that the file holds."""
        for option in (*question.options, *question.others):
            if all(self._holds(change) for change in option.changes):
                return option
        return None

    def _holds(self, change: Change) -> bool:
        place, wanted = change
        found = self.pages.value(place)
        if _undecided(wanted):  # to be settled by a question of its own
            return found is not None
        return _same(found, wanted)

    def stated(self, question: Question) -> str:
        """A value of the file that no option has, as it would be typed; "" for none."""
        if self.is_open(question) or self.chosen(question) is not None:
            return ""
        value = self.pages.value(question.place)
        if question.typed == INDEX:
            index = self.pages.value((*question.place[:-1], "wesenheit"))
            if isinstance(index, dict) and isinstance(index.get("colour"), list):
                blue, red = index["colour"]
                return f"{index['band']} - {index['ratio']} ({blue} - {red})"
        if value is None or isinstance(value, dict):
            return ""
        return str(value).lower() if isinstance(value, bool) else str(value)

    def choose(self, question: Question, option: Option) -> None:
        """Write an option into the file.

        Raises
        ------
        InputError
            If the file cannot be read any more.
        OSError
            If it cannot be written.
        """
        changes = list(option.changes)
        if question.typed == INDEX:
            changes.append(((*question.place[:-1], "wesenheit"), None))
        self.pages.set(changes)

    def type(self, question: Question, words: str) -> None:
        """Write what was typed.

        Raises
        ------
        InputError
            If it is not what the question asks for, or as for `choose`.
        OSError
            As for `choose`.
        """
        self.pages.set(_typed(question, words.strip()))

    def note(self, question: Question, words: str) -> None:
        """Keep a reason as the comment behind the value; raises as `choose` does."""
        self.pages.annotate(question.place, words)

    def ladder(self) -> Ladder:
        """The ladder, once nothing is open.

        Raises
        ------
        InputError
            If something is open or wrong, a problem for each thing.
        """
        return read_ladder(self.file)


def open_keys(file: str | Path) -> list[Place]:
    """The keys of a ladder file that a draft left undecided.

    Raises
    ------
    InputError
        If the file cannot be read.
    """
    return [place for place, _ in Pages(Path(file), {}).open()]


def _typed(question: Question, words: str) -> list[Change]:
    place = question.place
    if question.typed == INDEX:
        parts = re.fullmatch(_INDEX, words)
        if parts is None:
            raise _unfit(words, INDEX)
        band, ratio, blue, red = parts.groups()
        index = {"band": band, "colour": [blue, red], "ratio": _number(ratio)}
        return [(place, None), ((*place[:-1], "wesenheit"), index)]
    if question.typed == NUMBER:
        return [(place, _number(words))]
    if not words or words.startswith(UNDECIDED):
        raise _unfit(words, "a value")
    return [(place, _plain(words))]


def _number(words: str) -> float:
    try:
        value = float(words)
    except ValueError:
        raise _unfit(words, "a number such as 0.39") from None
    if not math.isfinite(value):
        raise _unfit(words, "a finite number")
    return value


def _plain(words: str) -> Any:
    """true, false, a number, or text."""
    if words in ("true", "false"):
        return words == "true"
    try:
        value = float(words)
    except ValueError:
        return words
    return value if math.isfinite(value) else words


def _unfit(words: str, expected: str) -> InputError:
    return InputError(Problem(repr(words), expected, "correct what is typed"))


def _undecided(value: Any) -> bool:
    return isinstance(value, str) and value.startswith(UNDECIDED)


def _same(found: Any, wanted: Any) -> bool:
    """Equal values; 8 is 8.0, but 1 is not true."""
    return isinstance(found, bool) is isinstance(wanted, bool) and bool(found == wanted)


def _other(file: Path, table: Path) -> Problem:
    return Problem(
        found=f"a ladder file that names another table, {table}",
        expected="one of the tables named here",
        remedy="name a new ladder file, or the tables of this one",
        file=str(file),
    )
