"""Tables that lie in memory: pandas, astropy, or a mapping of arrays."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from typing import Any

import astropy.units as u
import numpy as np
import pandas as pd
from astropy.table import Column as AstropyColumn
from astropy.table import Table

from ladderfit.errors import InputError, Problem
from ladderfit.inputs.tables import Column, DataTable


def table_in_memory(value: Any, key: str) -> DataTable:
    """A `DataTable` from a pandas DataFrame, an astropy Table, or a mapping of arrays.

    Raises
    ------
    InputError
        If `value` is none of these, its columns differ in length, or it has no rows.
    """
    name = f"the table given for {key}"
    if isinstance(value, Table):
        table = from_astropy(value, name, "", states_units=False)
    elif isinstance(value, pd.DataFrame):
        if value.columns.has_duplicates:
            raise InputError(_in_memory_problem("a column name twice", key))
        columns = {str(label): from_series(value[label]) for label in value.columns}
        table = DataTable(name, columns, len(value), "")
    elif isinstance(value, Mapping):
        columns = {str(label): _from_array(cells) for label, cells in value.items()}
        lengths = {label: len(column.missing) for label, column in columns.items()}
        if len(set(lengths.values())) > 1:
            raise InputError(_in_memory_problem(f"columns of different lengths {lengths}", key))
        table = DataTable(name, columns, next(iter(lengths.values()), 0), "")
    else:
        raise InputError(_in_memory_problem(f"a {type(value).__name__}", key))
    if table.rows == 0:
        raise InputError(_in_memory_problem("a table without rows", key))
    return DataTable(name, table.columns, table.rows, _hash_of(table))


def _in_memory_problem(found: str, key: str) -> Problem:
    return Problem(
        found=found,
        expected="a pandas DataFrame, an astropy Table or a mapping of arrays of one length",
        remedy="pass one of these, with at least one row",
        key=key,
    )


def _hash_of(table: DataTable) -> str:
    digest = hashlib.sha256()
    for name, column in table.columns.items():
        values = np.asarray(column.values)
        unit = "" if column.unit is None else str(column.unit)
        digest.update(
            f"{name}\0{unit}\0{values.dtype.kind}{values.dtype.itemsize}{values.shape}\0".encode()
        )
        if values.dtype.kind in "fiub":
            digest.update(np.ascontiguousarray(values, values.dtype.newbyteorder("<")).tobytes())
        else:
            digest.update("\0".join(map(str, values.ravel())).encode())
        digest.update(np.ascontiguousarray(column.missing).tobytes())
    return digest.hexdigest()


def from_astropy(
    table: Table, name: str, sha256: str, *, text: bool = False, states_units: bool = True
) -> DataTable:
    """A `DataTable` from an astropy Table or QTable; columns that are no arrays are left out."""
    plain = Table(table, copy=False)  # quantities become columns with units
    columns = {
        str(label): _astropy_column(plain[label])
        for label in plain.colnames
        if isinstance(plain[label], AstropyColumn)
    }
    return DataTable(name, columns, len(plain), sha256, text=text, states_units=states_units)


def _astropy_column(column: Any) -> Column:
    mask = getattr(column, "mask", None)
    values = np.ma.getdata(column) if mask is not None else np.asarray(column)
    one_per_row = mask is not None and np.ndim(mask) == 1
    missing = np.array(mask, bool) if one_per_row else np.zeros(len(column), bool)
    if values.dtype.kind == "O":
        missing |= np.array([cell is None for cell in values], bool)
    return Column(np.array(values), missing, parsed_unit(column.unit))


def from_series(series: pd.Series[Any], unit: Any = None) -> Column:
    """Plain numbers stay as they are: a star's name may be an integer of 19 digits."""
    missing = np.array(series.isna(), bool)
    if isinstance(series.dtype, np.dtype) and series.dtype.kind in "fiub":
        return Column(series.to_numpy(copy=True), missing, unit)
    return Column(series.astype(object).to_numpy(copy=True), missing, unit)


def _from_array(cells: Any) -> Column:
    if isinstance(cells, u.Quantity | AstropyColumn | np.ma.MaskedArray):
        return _astropy_column(Table({"cells": cells}, copy=False)["cells"])
    if np.ndim(cells) > 1:
        array = np.asarray(cells)
        return Column(array, np.zeros(len(array), bool))
    if np.ndim(cells) == 0:
        cells = [cells]
    return from_series(pd.Series(list(cells) if not isinstance(cells, np.ndarray) else cells))


def parsed_unit(unit: Any) -> Any:
    """A parsed unit; what cannot be parsed stays an unrecognised one, nothing is None."""
    if unit is None or (isinstance(unit, str) and not unit.strip()):
        return None
    parsed = u.Unit(unit, parse_strict="silent")
    return None if parsed == u.dimensionless_unscaled else parsed
