"""The values of a ladder file that is still being settled, by path; comments live."""

from __future__ import annotations

import tomllib
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import Any

import tomlkit
from tomlkit.items import InlineTable, Table

from ladderfit.errors import InputError, Problem
from ladderfit.files import write_text_atomically
from ladderfit.schema import UNDECIDED
from ladderfit.wording import printable

Place = tuple[str, ...]
Change = tuple[Place, Any]  # None takes a key out


class Pages:
    """One ladder file as it lies on disk, read anew for every change.

    Parameters
    ----------
    path : Path
        The file.
    fresh : mapping of path to value
        What a section is filled with when an answer brings it back.
    """

    def __init__(self, path: Path, fresh: Mapping[Place, Any]) -> None:
        self.path = path
        self._fresh = fresh
        self._document: Any = tomlkit.document()
        self.read()

    def read(self) -> None:
        """Take what the file says now.

        Raises
        ------
        InputError
            If it is no TOML in UTF-8, or cannot be read.
        """
        try:
            self._document = tomlkit.parse(self.path.read_text(encoding="utf-8-sig"))
        except OSError as error:
            raise self._unreadable(error.strerror or str(error), "put it back") from None
        except ValueError as error:  # of the syntax, or of UTF-8
            raise self._unreadable(f"no ladder file: {error}", "correct it there") from None

    def _unreadable(self, found: str, remedy: str) -> InputError:
        return InputError(Problem(found, "a ladder file", remedy, file=str(self.path)))

    def value(self, place: Place) -> Any:
        """What stands at a path, as plain Python; None where nothing does."""
        found = self._document
        for part in place:
            if not isinstance(found, Mapping) or part not in found:
                return None
            found = found[part]
        return found.unwrap() if hasattr(found, "unwrap") else found

    def open(self) -> Iterator[tuple[Place, str]]:
        """Paths that are undecided, and what is asked there."""
        yield from _open(self._document.unwrap(), ())

    def note(self, place: Place) -> str:
        """The comment behind a value; "" where there is none."""
        item = self._item(place)
        return "" if item is None else str(item.trivia.comment).lstrip("# ").rstrip()

    def can_note(self, place: Place) -> bool:
        """Whether a comment has a line to stand on."""
        return self._item(place) is not None

    def set(self, changes: Sequence[Change]) -> None:
        """Make changes and write the file.

        Raises
        ------
        InputError
            If the file cannot be read any more.
        OSError
            If it cannot be written.
        """
        self.read()
        for place, value in changes:
            self._put(place, value)
        self._write()

    def annotate(self, place: Place, words: str) -> None:
        """Put a comment behind a value, or take it away where `words` is empty."""
        self.read()
        item = self._item(place)
        if item is None:
            return
        plain = printable(" ".join(words.split()))
        if plain:
            item.comment(plain)
            item.trivia.comment_ws = "  "
        else:
            item.trivia.comment, item.trivia.comment_ws = "", ""
        self._write()

    def _item(self, place: Place) -> Any:
        parent: Any = self._document
        for part in place[:-1]:
            if not isinstance(parent, Mapping) or part not in parent:
                return None
            parent = parent[part]
        container = parent.value if isinstance(parent, Table) else parent
        if isinstance(container, InlineTable) or not hasattr(container, "item"):
            return None
        if place[-1] not in container:
            return None
        item = container.item(place[-1])
        return None if isinstance(item, Mapping) or not hasattr(item, "trivia") else item

    def _put(self, place: Place, value: Any) -> None:
        parent: Any = self._document
        for depth, part in enumerate(place[:-1], start=1):
            if not isinstance(parent.get(part), Mapping):
                if value is None:
                    return
                if part in parent:
                    del parent[part]
                parent[part] = self._filled(place[:depth])
            parent = parent[part]
        if value is None:
            if place[-1] in parent:
                del parent[place[-1]]
            return
        old = parent.get(place[-1])
        if isinstance(value, Mapping) or isinstance(old, Mapping):
            if old is not None:
                del parent[place[-1]]
            parent[place[-1]] = _item(value)
        else:
            parent[place[-1]] = value

    def _filled(self, section: Place) -> Any:
        """A section as the draft had it."""
        table = tomlkit.table()
        for place, value in self._fresh.items():
            if place[:-1] == section:
                table.add(place[-1], value)
        table.add(tomlkit.nl())
        return table

    def _write(self) -> None:
        text = tomlkit.dumps(self._document)
        tomllib.loads(text)
        write_text_atomically(self.path, text)
        self._document = tomlkit.parse(text)


def _item(value: Any) -> Any:
    if not isinstance(value, Mapping):
        return value
    inline = tomlkit.inline_table()
    inline.update(value)
    return inline


def _open(value: Any, place: Place) -> Iterator[tuple[Place, str]]:
    if isinstance(value, str) and value.startswith(UNDECIDED):
        yield place, value.removeprefix(UNDECIDED).strip()
    elif isinstance(value, Mapping):
        for key, inner in value.items():
            yield from _open(inner, (*place, str(key)))
