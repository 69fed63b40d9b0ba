"""A comparison on disk: tables as ECSV and CSV, and what a repeat needs."""

from __future__ import annotations

import io
import json
from pathlib import Path

import numpy as np
import pandas as pd
from astropy.table import MaskedColumn, Table

from ladderfit.alternatives.comparison import Comparison
from ladderfit.alternatives.systematics import systematics
from ladderfit.files import write_text_atomically
from ladderfit.names import parameter
from ladderfit.report.machine import harmless
from ladderfit.sensitivity.error_budget import budgeted
from ladderfit.store import provenance_of


def write_comparison(comparison: Comparison, budget: pd.DataFrame, folder: Path) -> None:
    """Write the tables into an existing folder, each in one step.

    ``alternatives``, ``systematics`` and ``budget``, as ``.ecsv`` and ``.csv``, and
    ``provenance.json``.

    Raises
    ------
    OSError
        If a file cannot be written.
    """
    title = comparison.title
    _write(comparison.table(), comparison.units(), title, folder / "alternatives")
    _write(systematics(comparison), {}, title, folder / "systematics")
    units = {name: parameter(name).unit for name in budgeted(budget)}
    _write(budget.rename_axis("source").reset_index(), units, title, folder / "budget")
    provenance = json.dumps(provenance_of(comparison.result), indent=2, ensure_ascii=False)
    write_text_atomically(folder / "provenance.json", provenance + "\n")


def _one_slash(unit: str) -> str:
    """A unit with one slash at most, as standards want it."""
    first, *below = unit.split("/")
    return first if not below else f"{first}/({' '.join(below)})"


def _write(frame: pd.DataFrame, units: dict[str, str], title: str, stem: Path) -> None:
    """As ECSV with units, and as CSV; what is not known is blank."""
    table = Table(meta={"title": title})
    for name in frame.columns:
        values = frame[name].to_numpy()
        if values.dtype.kind == "f":
            missing = np.isnan(values)
            whole = name.endswith("_kept")
            filled = np.where(missing, 0.0, values)
            column = MaskedColumn(filled.astype(int) if whole else filled, mask=missing)
            table[name] = column if missing.any() else column.filled()
        else:
            table[name] = [" ".join(str(cell).split()) for cell in values]
            if values.dtype.kind in "iu":
                table[name] = values
        if name in units:
            table[name].unit = _one_slash(units[name])
    for suffix, format_ in ((".ecsv", "ascii.ecsv"), (".csv", "ascii.csv")):
        text = io.StringIO()
        if suffix == ".csv":  # for spreadsheets, which take some words for formulas
            for name in table.colnames:
                if table[name].dtype.kind == "U":
                    table[name] = [_spread(cell) for cell in table[name]]
        table.write(text, format=format_)
        write_text_atomically(stem.with_suffix(suffix), text.getvalue())


def _spread(cell: str) -> str:
    try:
        float(cell)
    except ValueError:
        return harmless(cell)
    return cell
