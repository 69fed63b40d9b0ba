"""Columns rounded as published tables are, and ECSV text that is the same everywhere."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
import numpy.typing as npt
from astropy.table import MaskedColumn, Table

_HEADER = "# %ECSV 1.0\n# ---\n# datatype:\n"


def number_column(
    name: str, values: npt.ArrayLike, decimals: int, unit: str | None, words: str
) -> MaskedColumn:
    """Column of numbers rounded to `decimals`; NaN becomes a missing value."""
    rounded = np.round(np.asarray(values, float), decimals)
    return MaskedColumn(
        rounded,
        name=name,
        mask=np.isnan(rounded),
        unit=unit,
        format=f".{decimals}f",
        description=words,
    )


def digits_column(
    name: str, values: npt.ArrayLike, digits: int, unit: str | None, words: str
) -> MaskedColumn:
    """Column of numbers rounded to so many significant digits."""
    form = f".{digits}g"
    rounded = [float(format(value, form)) for value in np.asarray(values, float).tolist()]
    return MaskedColumn(rounded, name=name, unit=unit, format=form, description=words)


def text_column(
    name: str, values: Sequence[str] | npt.NDArray[np.str_], words: str
) -> MaskedColumn:
    """Column of text."""
    return MaskedColumn(np.asarray(values, dtype=np.str_), name=name, description=words)


def lose(table: Table, rng: np.random.Generator, columns: Sequence[str], count: int) -> None:
    """Mask one value in each of `count` rows, taking the `columns` in turn."""
    rows = np.sort(rng.choice(len(table), size=min(count, len(table)), replace=False))
    for turn, row in enumerate(rows):
        table[columns[turn % len(columns)]].mask[row] = True


def ecsv(table: Table) -> str:
    """The table as ECSV text, numbers in the format of their column.

    Written here rather than by the library so that a table made again from its
    seed is the same file byte for byte, whatever the library's version.
    """
    lines = []
    for column in table.itercols():
        kind = "string" if column.dtype.kind == "U" else "float64"
        unit = f"unit: {column.unit}, " if column.unit is not None else ""
        words = f", description: '{_escaped(column.description)}'" if column.description else ""
        lines.append(f"# - {{name: {column.name}, {unit}datatype: {kind}{words}}}\n")
    cells = [_cells(column) for column in table.itercols()]
    rows = ["# schema: astropy-2.0\n", " ".join(table.colnames) + "\n"]
    rows += [" ".join(row) + "\n" for row in zip(*cells, strict=True)]
    return _HEADER + "".join(lines) + "".join(rows)


def truth_toml(truth: Mapping[str, float], seed: int, remark: str) -> str:
    """TOML text that records the seed and the true values by parameter name."""
    lines = [f"# True values of a simulation.  {remark}", f"seed = {seed}", "", "[truth]"]
    lines += [f'"{name}" = {value!r}' for name, value in truth.items()]
    return "\n".join(lines) + "\n"


def _cells(column: MaskedColumn) -> list[str]:
    missing = np.ma.getmaskarray(column)
    form = column.format or ""
    texts = [_quoted(format(value, form)) for value in np.ma.getdata(column).tolist()]
    return ['""' if gone else text for text, gone in zip(texts, missing, strict=True)]


def _quoted(text: str) -> str:
    plain = text and text.isprintable() and not set(text) & set(' "#,')
    return text if plain else '"' + text.replace('"', '""') + '"'


def _escaped(words: str) -> str:
    return words.replace("'", "''")
