"""A draft as the text of a ladder file, each line with the reason for it."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import tomlkit

from ladderfit.draft.roles import Choice
from ladderfit.wording import printable

_HEAD = """\
# A draft: columns and jobs were guessed from names, units and values.
# What begins with "undecided:" was left open and is refused until it is decided.
"""


@dataclass(frozen=True)
class Entry:
    """One key: the table it stands in, its name, and what is written."""

    section: tuple[str, ...]
    key: str
    choice: Choice

    @property
    def dotted(self) -> str:
        """The whole key, as messages write it."""
        return ".".join((*self.section, self.key))


def file_text(entries: Sequence[Entry]) -> str:
    """The entries as TOML, section by section."""
    lines = [_HEAD]
    sections = dict.fromkeys(entry.section for entry in entries)
    for section in sections:
        if section:
            lines.append("\n[" + ".".join(_key(part) for part in section) + "]\n")
        inside = [entry for entry in entries if entry.section == section]
        lines.extend(_lines(inside))
    return "".join(lines)


def _lines(entries: Iterable[Entry]) -> list[str]:
    pairs = [
        (f"{_key(entry.key)} = {tomlkit.item(entry.choice.value).as_string()}", entry.choice.why)
        for entry in entries
    ]
    width = min(max(len(left) for left, _ in pairs), 44)
    return [f"{left:{width}}  # {printable(why)}\n" if why else f"{left}\n" for left, why in pairs]


def _key(name: str) -> str:
    return tomlkit.key(name).as_string()
