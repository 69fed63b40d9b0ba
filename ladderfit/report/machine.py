"""Tables for machines: ECSV and CSV."""

from __future__ import annotations

import csv
import io

import numpy as np
from astropy.table import Column as AstropyColumn
from astropy.table import Table

from ladderfit.report.cells import PaperTable
from ladderfit.wording import printable

_FORMULA = ("=", "+", "-", "@", "\t", "\r", "\N{FULLWIDTH EQUALS SIGN}", "\N{FULLWIDTH PLUS SIGN}")
_DIGITS = 10


def ecsv(table: PaperTable, about: dict[str, str]) -> str:
    """A table as ECSV: units, notes and descriptions inside, text exactly as it was.

    Parameters
    ----------
    table : PaperTable
    about : mapping of str to str
        Added to the table's metadata.
    """
    made = Table()
    for column in table.columns:
        values = column.values
        filled = values if values.dtype.kind != "U" or len(values) else values.astype("<U1")
        made[column.name] = AstropyColumn(
            filled, unit=column.unit or None, description=column.words or None
        )
    made.meta = {"title": table.title, **about}
    if table.notes:
        made.meta["notes"] = list(table.notes)
    stream = io.StringIO(newline="")
    made.write(stream, format="ascii.ecsv")
    return stream.getvalue()


def comma_separated(table: PaperTable) -> str:
    """A table as CSV for spreadsheets: units in the header, and no cell that is a formula."""
    stream = io.StringIO(newline="")
    writer = csv.writer(stream, lineterminator="\n", quoting=csv.QUOTE_MINIMAL)
    writer.writerow(
        harmless(f"{column.name} [{column.unit}]" if column.unit else column.name)
        for column in table.columns
    )
    for row in zip(*(column.values for column in table.columns), strict=True):
        writer.writerow(_cell(value) for value in row)
    return stream.getvalue()


def harmless(text: str) -> str:
    """Text that a spreadsheet takes as text: what would be a formula gets an apostrophe.

    Control characters and line breaks are replaced.
    """
    shown = printable(text)
    return (
        f"'{shown}" if shown.lstrip().startswith(_FORMULA) or text.startswith(_FORMULA) else shown
    )


def _cell(value: object) -> str:
    if isinstance(value, bool | np.bool_):
        return "true" if value else "false"
    if isinstance(value, np.integer | int):
        return str(value)
    if isinstance(value, np.floating | float):
        return "" if np.isnan(value) else f"{value:.{_DIGITS}g}"
    return harmless(str(value))
