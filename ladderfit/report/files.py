"""The tables of a result as files: LaTeX, ECSV and CSV."""

from __future__ import annotations

from collections.abc import Sequence
from importlib import metadata
from pathlib import Path

from ladderfit.files import write_text_atomically
from ladderfit.report.cells import PaperTable
from ladderfit.report.latex import latex
from ladderfit.report.machine import comma_separated, ecsv
from ladderfit.report.objects import residual_tables
from ladderfit.report.parameters import (
    covariance_table,
    joint_covariance_table,
    modulus_covariance_table,
    modulus_table,
    parameter_table,
)
from ladderfit.result import Result


def tables_of(result: Result) -> list[PaperTable]:
    """Every table of a result, in the order of the report."""
    found = [
        parameter_table(result),
        covariance_table(result),
        modulus_table(result),
        modulus_covariance_table(result),
        joint_covariance_table(result),
        *residual_tables(result),
    ]
    return [table for table in found if table is not None]


def write_tables(tables: Sequence[PaperTable], folder: Path, title: str) -> list[Path]:
    """Write each table as ``NAME.ecsv``, ``NAME.csv`` and, where it has one, ``NAME.tex``.

    Parameters
    ----------
    tables : sequence of PaperTable
    folder : Path
        Made if absent.
    title : str
        Of the calibration.

    Returns
    -------
    list of Path
        The files written.

    Raises
    ------
    OSError
        If a file cannot be written.
    """
    folder.mkdir(parents=True, exist_ok=True)
    written_by = f"ladderfit {metadata.version('ladderfit')}"
    about = {"calibration": title, "written_by": written_by}
    comment = [f"{title} ({written_by})" if title else written_by]
    written = []
    for table in tables:
        texts = {".ecsv": ecsv(table, about), ".csv": comma_separated(table)}
        if table.head:
            texts[".tex"] = latex(table, comment)
        for suffix, text in texts.items():
            path = folder / f"{table.name}{suffix}"
            write_text_atomically(path, text)
            written.append(path)
    return written
