"""Tables as they were read, and their columns as checked numbers or text.

A `DataTable` holds the cells of one table, whatever its format was.  Numbers
come out in the package's units: a column's own unit wins, a missing one means
the documented unit where that is safe, and the wrong kind of unit is a problem.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any

import numpy as np
import numpy.typing as npt
import pandas as pd

from ladderfit.errors import Problem, nearest
from ladderfit.inputs.kinds import Kind, conversion
from ladderfit.samples import FloatArray, IntArray, TextArray

BoolArray = npt.NDArray[np.bool_]

_ABSURD = 1e30  # in any unit: sums over products of larger numbers overflow


@dataclass(frozen=True, eq=False)
class Column:
    """The cells of one column: `values` as read, `missing` (n,), `unit` or None."""

    values: Any
    missing: BoolArray
    unit: Any = None


@dataclass(frozen=True, eq=False)
class Numbers:
    """A column as floats.

    Attributes
    ----------
    values : array, shape (n,)
        In the package's unit; NaN where missing or faulty.
    missing : array of bool, shape (n,)
        Empty or masked cells.
    faulty : array of int
        Rows (from 0) whose cell is text, or not finite.
    cells : tuple of str
        What stands in the faulty rows.
    """

    values: FloatArray
    missing: BoolArray
    faulty: IntArray
    cells: tuple[str, ...]


@dataclass(frozen=True, eq=False)
class Texts:
    """A column as stripped text.

    Attributes
    ----------
    labels : array of str, shape (k,)
        The distinct cells by first appearance; an empty one stands for missing cells.
    codes : array of int, shape (n,)
        Each cell's index into `labels`.
    missing : array of bool, shape (n,)
        Empty or masked cells.
    """

    labels: npt.NDArray[np.object_]
    codes: IntArray
    missing: BoolArray

    def cell(self, row: int) -> str:
        """The cell of a row (from 0)."""
        return str(self.labels[self.codes[row]])

    def equal(self, text: str) -> BoolArray:
        """Which cells hold `text`, shape (n,)."""
        return self.each(self.labels == text)

    def each(self, by_label: npt.ArrayLike) -> BoolArray:
        """What is known of each label, laid out over the cells, shape (n,)."""
        return np.asarray(by_label, bool)[self.codes]

    @cached_property
    def values(self) -> TextArray:
        """The cells, shape (n,)."""
        values = self.labels.astype(np.str_)[self.codes]
        values.setflags(write=False)
        return values

    @cached_property
    def longest(self) -> tuple[int, int]:
        """Row (from 0) and length of the longest cell."""
        lengths = np.array([len(label) for label in self.labels])
        label = int(np.argmax(lengths))
        return int(np.flatnonzero(self.codes == label)[0]), int(lengths[label])

    @property
    def known(self) -> list[str]:
        """The distinct cells that are not missing, by first appearance."""
        return [str(label) for label in self.labels if label]


@dataclass(frozen=True, eq=False)
class DataTable:
    """One table as read.

    Attributes
    ----------
    name : str
        For messages: the path, or the section an in-memory table belongs to.
    columns : mapping of str to Column
        In the table's order.
    rows : int
        Number of rows.
    sha256 : str
        Of the file, or of the arrays.
    text : bool
        Whether a person typed the cells, so that "nan" was written on purpose.
    states_units : bool
        Whether the format has a place for units.
    """

    name: str
    columns: Mapping[str, Column]
    rows: int
    sha256: str
    text: bool = False
    states_units: bool = False
    _known: dict[tuple[str, str], Any] = field(default_factory=dict, repr=False)

    def column_problem(self, role: str, name: str, key: str) -> Problem | None:
        """The problem with a column that is not there, or not one value per row."""
        if name not in self.columns:
            return Problem(
                found="no such column",
                expected=f"the column that holds the {role.replace('_', ' ')}",
                remedy=nearest(name, self.columns),
                file=self.name,
                column=name,
                key=key,
            )
        if np.ndim(self.columns[name].values) != 1:
            return Problem(
                found="an array in each cell",
                expected="one value in each cell",
                remedy="give the quantity a column of its own",
                file=self.name,
                column=name,
                key=key,
            )
        return None

    def unit_problem(self, name: str, kind: Kind) -> Problem | None:
        """The problem with a column's unit, if there is one."""
        unit = self.columns[name].unit
        if unit is None:
            if not (kind.must_be_stated and self.states_units):
                return None
            found, remedy = "no unit", f"state the column's unit in the table ({kind.unit}, say)"
        elif conversion(unit, kind) is None:
            found = f"the unit {str(unit).strip() or '(none)'!r}"
            remedy = "name the right column, or correct its unit"
        else:
            return None
        return Problem(
            found=found,
            expected=f"{kind.words}, in {kind.unit or 'no unit'} or what converts to it",
            remedy=remedy,
            file=self.name,
            column=name,
        )

    def numbers(self, name: str, kind: Kind) -> Numbers:
        """A column as floats in the unit of `kind` (read once, then remembered)."""
        place = (name, kind.words)
        if place not in self._known:
            column = self.columns[name]
            numbers = _numbers(column, typed=self.text)
            factor, shift = conversion(column.unit, kind) or (1.0, 0.0)
            if (factor, shift) != (1.0, 0.0):
                scaled = numbers.values * factor + shift
                numbers = Numbers(scaled, numbers.missing, numbers.faulty, numbers.cells)
            self._known[place] = numbers
        known: Numbers = self._known[place]
        return known

    def row_numbers(self) -> Texts:
        """Names for rows that have none of their own: "row 1", "row 2" and so on."""
        if ("", "text") not in self._known:
            labels = np.array([f"row {number}" for number in range(1, self.rows + 1)], object)
            codes = np.arange(self.rows, dtype=np.int64)
            self._known["", "text"] = Texts(labels, codes, np.zeros(self.rows, bool))
        known: Texts = self._known["", "text"]
        return known

    def texts(self, name: str) -> Texts:
        """A column as stripped text (read once, then remembered)."""
        place = (name, "text")
        if place not in self._known:
            self._known[place] = _texts(self.columns[name])
        known: Texts = self._known[place]
        return known

    def cell_problems(self, name: str, kind: Kind, judged: BoolArray) -> Iterator[Problem]:
        """The first faulty cell of a column among the rows that are `judged`."""
        numbers = self.numbers(name, kind)
        which = [i for i, row in enumerate(numbers.faulty) if judged[row]]
        if which:
            cell = numbers.cells[which[0]]
            finite = np.isfinite(_float_or_nan(cell))
            number = f"a number below {_ABSURD:g} in size" if finite else "a finite number"
            yield Problem(
                found=shown(cell) + and_more(len(which) - 1),
                expected=f"{kind.words}{f' in {kind.unit}' if kind.unit else ''}, {number}",
                remedy="correct the cell, or leave it empty where the value is missing",
                file=self.name,
                row=int(numbers.faulty[which[0]]) + 1,
                column=name,
            )


def shown(cell: str) -> str:
    """A cell as messages quote it."""
    return repr(cell if len(cell) <= 40 else cell[:37] + "...")


def and_more(count: int) -> str:
    """``(and 3 more such rows)``, or nothing."""
    return f" (and {count:,} more such row{'s' if count > 1 else ''})" if count else ""


def _numbers(column: Column, *, typed: bool) -> Numbers:
    values, missing = np.asarray(column.values), column.missing.copy()
    if values.dtype.kind in "fiub":
        floats = np.where(missing, np.nan, values.astype(np.float64))
        if not typed:
            missing |= np.isnan(floats)
    else:
        floats = _parsed(values, missing)
        if not typed:
            missing |= np.isnan(floats) & _spelt_nan(values)
    usable = np.abs(floats) < _ABSURD
    faulty = np.flatnonzero(~usable & ~missing)
    cells = tuple(str(values[row]) for row in faulty)
    floats = np.where(usable, floats, np.nan)
    for array in (floats, missing, faulty):
        array.setflags(write=False)
    return Numbers(floats, missing, faulty, cells)


def _parsed(values: npt.NDArray[Any], missing: BoolArray) -> FloatArray:
    """Cells as floats; NaN where missing or not a number."""
    filled = np.where(missing, "nan", values.astype(object))
    try:
        return filled.astype(np.float64)
    except (ValueError, TypeError, OverflowError):
        return np.array([_float_or_nan(cell) for cell in filled], dtype=np.float64)


def _float_or_nan(cell: Any) -> float:
    try:
        return float(cell)
    except (ValueError, TypeError, OverflowError):
        return float("nan")


def _spelt_nan(values: npt.NDArray[Any]) -> BoolArray:
    return np.array([isinstance(cell, float) and cell != cell for cell in values], dtype=bool)


def _texts(column: Column) -> Texts:
    values = np.asarray(column.values)
    cells = np.array(
        [
            "" if gone else _cell_text(cell)
            for cell, gone in zip(values, column.missing, strict=True)
        ],
        dtype=object,
    )
    codes, labels = pd.factorize(cells)
    labels = np.asarray(labels, dtype=object)
    missing = (labels == "")[codes]
    for array in (codes, labels, missing):
        array.setflags(write=False)
    return Texts(labels, codes, missing)


def _cell_text(cell: Any) -> str:
    if isinstance(cell, bytes):
        return cell.decode("utf-8", "replace").strip()
    if isinstance(cell, float | np.floating):
        return "" if np.isnan(cell) else f"{float(cell):.15g}"
    return str(cell).strip()
