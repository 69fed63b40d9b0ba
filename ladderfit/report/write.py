"""Writes report.html and tables/ into a result folder."""

from __future__ import annotations

import contextlib
import json
import shutil
import tempfile
from collections.abc import Sequence
from pathlib import Path

from ladderfit.errors import InputError, Problem
from ladderfit.files import lock, write_text_atomically
from ladderfit.report.cells import PaperTable
from ladderfit.report.files import tables_of, write_tables
from ladderfit.report.page import report_page
from ladderfit.result import Result
from ladderfit.result_files import check_provenance

PAGE, TABLES, FIGURES = "report.html", "tables", "figures"
_OLD = "old-"  # before the name of a folder that a new one replaces
_ORDER = ("relation", "outliers", "moduli", "parallaxes", "hubble", "peaks", "corner")


def write_report(
    result: Result,
    folder: Path,
    *,
    name: str | None = None,
    into: Path | None = None,
    more: Sequence[PaperTable] = (),
) -> None:
    """Write the report and the tables of a result whose numbers and figures are written.

    Parameters
    ----------
    result : Result
    folder : Path
        Of the result, with ``provenance.json`` and ``figures/`` in it.
    name : str, optional
        What the folder will be called, if `folder` is a temporary name.
    into : Path, optional
        Where to write, if not into `folder`; an existing folder.
    more : sequence of PaperTable
        Further tables, such as those of alternatives.

    Raises
    ------
    InputError
        If the provenance cannot be read.
    OSError
        If a file cannot be read or written.
    """
    target = folder if into is None else into
    tables = [*tables_of(result), *more]
    write_tables(tables, target / TABLES, result.choices.title)
    found = pictures(folder / FIGURES)
    text = report_page(result, tables, found, _provenance(folder), name or folder.name)
    write_text_atomically(target / PAGE, text)


def renew_report(result: Result, folder: Path, *, more: Sequence[PaperTable] = ()) -> None:
    """Make the report and the tables of a result folder again; the old ones go once all is there.

    Raises
    ------
    InputError
        If the provenance cannot be read.
    LadderfitError
        If another process is at it.
    OSError
        If a file cannot be written; the old ones are then as they were, or are put back by
        the next report where the disk does not move them either.
    """
    folder = folder.resolve()
    with lock(folder / "report.lock", "a report is being written"):
        for leftover in folder.glob(".report.*.tmp"):  # of a process that was killed
            clear_leftover(leftover, folder)
        temporary = Path(tempfile.mkdtemp(prefix=".report.", suffix=".tmp", dir=folder))
        try:
            write_report(result, folder, into=temporary, more=more)
            move_report(temporary, folder)
        finally:
            if not _kept(temporary):
                shutil.rmtree(temporary, ignore_errors=True)


def clear_leftover(temporary: Path, folder: Path) -> None:
    """Remove the temporary folder of a report that failed; what it kept is put back first.

    Raises
    ------
    OSError
        If that cannot be moved.
    """
    for old in _kept(temporary):
        place = folder / old.name.removeprefix(_OLD)
        if not place.exists():
            old.rename(place)
    shutil.rmtree(temporary, ignore_errors=True)


def _kept(temporary: Path) -> list[Path]:
    """Folders of an older report that wait to be put back."""
    return [path for path in (temporary / f"{_OLD}{n}" for n in (FIGURES, TABLES)) if path.exists()]


def move_report(temporary: Path, folder: Path) -> None:
    """Put a finished report, its tables and figures in the place of older ones.

    Raises
    ------
    OSError
        If a file cannot be moved; what was there is then put back, or kept in the
        temporary folder where that fails as well, and the message says so.
    """
    moved: list[tuple[Path, Path]] = []
    try:
        for name in (FIGURES, TABLES):
            if (temporary / name).is_dir():
                if (folder / name).exists():
                    moved.append(_move(folder / name, temporary / f"{_OLD}{name}"))
                moved.append(_move(temporary / name, folder / name))
        (temporary / PAGE).replace(folder / PAGE)
    except OSError as error:
        for before, after in reversed(moved):
            with contextlib.suppress(OSError):
                after.rename(before)
        if not _kept(temporary):
            raise
        words = f"{error.strerror}; what was there is kept in {temporary}"
        raise OSError(error.errno, words, error.filename) from error
    for old in _kept(temporary):
        shutil.rmtree(old, ignore_errors=True)


def _move(before: Path, after: Path) -> tuple[Path, Path]:
    before.rename(after)
    return before, after


def _provenance(folder: Path) -> dict[str, object]:
    path = folder / "provenance.json"
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
        if not isinstance(content, dict):
            raise TypeError("no object at the top")
        check_provenance(content)
        return content
    except (OSError, ValueError, TypeError, RecursionError):
        raise InputError(
            Problem(
                found="a provenance that cannot be read",
                expected="a file written by ladderfit calibrate",
                remedy="repeat the calibration",
                file=str(path),
            )
        ) from None


def pictures(folder: Path) -> dict[str, bytes]:
    """The figures of page width in a folder, as PNG, in the order of the report."""
    found = {path.stem: path.read_bytes() for path in sorted(folder.glob("*.png"))}
    first = [name for name in _ORDER if name in found]
    return {name: found[name] for name in [*first, *(n for n in found if n not in first)]}
