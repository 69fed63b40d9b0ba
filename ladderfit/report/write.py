"""Writes report.html and tables/ into a result folder."""

from __future__ import annotations

import json
from collections.abc import Sequence
from pathlib import Path

from ladderfit.files import write_text_atomically
from ladderfit.report.cells import PaperTable
from ladderfit.report.files import tables_of, write_tables
from ladderfit.report.page import report_page
from ladderfit.result import Result


def write_report(
    result: Result, folder: Path, *, name: str | None = None, more: Sequence[PaperTable] = ()
) -> list[Path]:
    """Write the report and the tables of a result whose numbers and figures are written.

    Parameters
    ----------
    result : Result
    folder : Path
        Of the result, with ``provenance.json`` and ``figures/`` in it.
    name : str, optional
        What the folder will be called, if `folder` is a temporary name.
    more : sequence of PaperTable
        Further tables, such as those of alternatives.

    Returns
    -------
    list of Path
        The files written.

    Raises
    ------
    OSError
        If a file cannot be read or written.
    """
    tables = [*tables_of(result), *more]
    written = write_tables(tables, folder / "tables", result.choices.title)
    provenance = json.loads((folder / "provenance.json").read_text(encoding="utf-8"))
    path = folder / "report.html"
    text = report_page(
        result, tables, pictures(folder / "figures"), provenance, name or folder.name
    )
    write_text_atomically(path, text)
    return [*written, path]


ORDER = ("relation", "moduli", "parallaxes", "hubble", "corner")


def pictures(folder: Path) -> dict[str, bytes]:
    """The figures of page width in a folder, as PNG, in the order of the report."""
    found = {path.stem: path.read_bytes() for path in sorted(folder.glob("*.png"))}
    first = [name for name in ORDER if name in found]
    return {name: found[name] for name in [*first, *(n for n in found if n not in first)]}
