"""Puts a draft together: tables in, a ladder file and a summary out."""

from __future__ import annotations

import os
import tempfile
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path

from ladderfit.draft.clues import SURE
from ladderfit.draft.entries import entries
from ladderfit.draft.facts import facts_of
from ladderfit.draft.jobs import (
    CEPHEIDS,
    EXPANSION,
    GEOMETRIC,
    PARALLAXES,
    SUPERNOVAE,
    WORDS,
    Sketch,
    job_of,
    sketch,
)
from ladderfit.draft.roles import Roles
from ladderfit.draft.text import Entry, file_text
from ladderfit.errors import InputError, Problem, raise_if
from ladderfit.files import mode_for
from ladderfit.inputs.table_files import read_table
from ladderfit.inputs.tables import DataTable
from ladderfit.schema import UNDECIDED
from ladderfit.wording import printable

_ORDER = (CEPHEIDS, PARALLAXES, GEOMETRIC, SUPERNOVAE, EXPANSION)


@dataclass(frozen=True, eq=False)
class Draft:
    """A first ladder file.

    Attributes
    ----------
    entries : tuple of Entry
        Every key with its value and the reason for it.
    sources : mapping of str to (path, Sketch)
        By section: the table, and what was told of it.
    """

    entries: tuple[Entry, ...]
    sources: Mapping[str, tuple[Path, Sketch]]

    @property
    def text(self) -> str:
        """The ladder file."""
        return file_text(self.entries)

    @property
    def undecided(self) -> tuple[Entry, ...]:
        """Keys that are left to the reader."""
        return tuple(entry for entry in self.entries if entry.choice.undecided)

    def summary(self) -> str:
        """What was guessed and why, and what is left open."""
        lines: list[str] = []
        for job, (path, found) in self.sources.items():
            lines.append(f"{path}: {WORDS[job]}, as {found.why}")
            told = {**found.columns, **(found.photometry.told if found.photometry else {})}
            lines += _aligned(
                (role, "?" if choice.undecided else str(choice.value), choice.why)
                for role, choice in told.items()
            )
            lines.append("")
        if self.undecided:
            lines.append("Undecided:")
            lines += _aligned(
                (entry.dotted, str(entry.choice.value).removeprefix(UNDECIDED).strip())
                for entry in self.undecided
            )
        else:
            lines.append("Nothing is left undecided.")
        return "\n".join(printable(line) for line in lines)


def write_draft(tables: Sequence[Path], out: Path) -> Draft:
    """Draft a ladder file from tables, and write it under a name that is free.

    Raises
    ------
    InputError
        If a table cannot be read or used, or `out` exists; nothing is written then.
    OSError
        If the folder cannot be written.
    """
    if out.exists() or out.is_symlink():
        raise InputError(_taken(out))
    draft = draft_ladder(tables, out.parent)
    out.parent.mkdir(parents=True, exist_ok=True)
    _write_new(out, draft.text)
    return draft


def _write_new(path: Path, text: str) -> None:
    """Write under a temporary name; the link to the final one fails if that is taken."""
    handle, name = tempfile.mkstemp(prefix=f".{path.name}.", suffix=".tmp", dir=path.parent)
    try:
        with os.fdopen(handle, "w", encoding="utf-8", newline="") as stream:
            stream.write(text)
        Path(name).chmod(mode_for(path))
        path.hardlink_to(name)
    except FileExistsError:
        raise InputError(_taken(path)) from None
    finally:
        Path(name).unlink()


def _taken(out: Path) -> Problem:
    return Problem(
        found="a file or folder of that name",
        expected="a name that is free, as nothing is overwritten",
        remedy="choose another name, or move the old one away",
        file=str(out),
    )


def draft_ladder(tables: Sequence[Path], folder: Path) -> Draft:
    """Draft a ladder file that will lie in `folder`.

    Raises
    ------
    InputError
        If a table cannot be read, fits no section, or two fit the same.
    """
    problems: list[Problem] = []
    read: dict[Path, DataTable] = {}
    for path in tables:
        if path in read:
            fault = Problem("the same table twice", "each once", "name it once", file=str(path))
            problems.append(fault)
        elif not path.exists():
            fault = Problem("no such file", "a table", "correct the path", file=str(path))
            problems.append(fault)
        else:
            try:
                read[path] = read_table(path, "")
            except InputError as error:
                problems.extend(replace(problem, key=None) for problem in error.problems)
    raise_if(problems)
    return draft_of(read, folder)


def draft_of(tables: Mapping[Path, DataTable], folder: Path) -> Draft:
    """Draft a ladder file from tables that have been read, by path.

    Raises
    ------
    InputError
        If a table fits no section, or two fit the same.
    """
    hosts = {path: _hosts(table) for path, table in tables.items()}
    found: dict[str, tuple[Path, Sketch]] = {}
    problems: list[Problem] = []
    for path, table in tables.items():
        elsewhere = frozenset().union(*(hosts[other] for other in tables if other != path))
        roles = Roles(facts_of(table), elsewhere)
        job = job_of(roles)
        if job is None:
            problems.append(_useless(path, roles))
        elif job[0] in found:
            problems.append(_twice(path, found[job[0]][0], job[0]))
        else:
            found[job[0]] = (path, sketch(roles, *job))
    raise_if(problems)
    ordered = {job: found[job] for job in _ORDER if job in found}
    return Draft(tuple(entries(ordered, tables, folder)), ordered)


def _hosts(table: DataTable) -> frozenset[str]:
    """The galaxies that a table of Cepheids names; nothing for other tables."""
    roles = Roles(facts_of(table))
    job, clues = job_of(roles), roles.clues("host")
    if job is None or job[0] != CEPHEIDS or not clues or clues[0].score < SURE:
        return frozenset()
    return frozenset(clues[0].column.labels)


def _useless(path: Path, roles: Roles) -> Problem:
    names = list(roles.by_name)
    listed = ", ".join(repr(name) for name in names[:8]) + (", ..." if len(names) > 8 else "")
    return Problem(
        found=f"no periods, redshifts, distance moduli or peak magnitudes among {listed}",
        expected="a table of " + ", of ".join(WORDS.values()),
        remedy="name its columns after what they hold, or leave the table out",
        file=str(path),
    )


def _twice(path: Path, first: Path, job: str) -> Problem:
    return Problem(
        found=f"a second table of {WORDS[job]}, after {first}",
        expected="one of each kind",
        remedy="put the rows of both into one table, or leave one out",
        file=str(path),
    )


def _aligned(rows: Iterable[Sequence[str]]) -> list[str]:
    """Columns of equal width, two blanks apart and indented."""
    table = [tuple(row) for row in rows]
    widths = [max(len(row[place]) for row in table) for place in range(len(table[0]))]
    return [
        "  " + "  ".join(f"{c:{w}}" for c, w in zip(row, widths, strict=True)).rstrip()
        for row in table
    ]
