"""Reading tables: text, ECSV, FITS, VOTable and Parquet.

Each reader returns a `DataTable`, or raises one `InputError` that names the
file.  Nothing is unpickled, and nothing is fetched from elsewhere.
"""

from __future__ import annotations

import csv
import io
import itertools
import re
import warnings
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pyarrow
import pyarrow.parquet
from astropy.io import fits
from astropy.table import Table, meta

from ladderfit.errors import InputError, Problem
from ladderfit.files import by_suffix, need_file, sha256_of
from ladderfit.inputs.table_columns import ColumnsOnDemand
from ladderfit.inputs.table_memory import from_astropy, from_series, parsed_unit
from ladderfit.inputs.tables import Column, DataTable, shown
from ladderfit.packed import (
    PackedError,
    check_packed,
    check_parquet,
    opened,
    packing,
    text_stream,
    unpacked,
)

_PIECE = 100_000  # rows of a text table parsed at once
_ELSEWHERE = re.compile(  # an address in a STREAM, whatever stands in its other attributes
    rb"""STREAM\b(?:[^>"']|"[^"]*"|'[^']*')*?\bhref"""
)


class _UnreadableError(Exception):
    """What is wrong with a file, in words."""


def read_table(path: Path, key: str) -> DataTable:
    """Read a table by its extension.

    Parameters
    ----------
    path : Path
        The file.
    key : str
        Dotted key that names it, for messages.

    Raises
    ------
    InputError
        If the file is missing, of an unknown format, unreadable or empty.
    """
    reader = _reader(path, key)
    with warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always")
        try:
            check_packed(path)
            table = reader(path)
        except InputError:
            raise
        except (_UnreadableError, PackedError) as error:
            raise InputError(_damaged(path, key, str(error))) from None
        except Exception as error:  # readers raise anything on damaged files
            words = f"{type(error).__name__}: {error}"
            raise InputError(_damaged(path, key, words)) from error
    for warning in caught:
        if "truncated" in str(warning.message).lower():
            raise InputError(_damaged(path, key, str(warning.message)))
    if table.rows == 0:
        raise InputError(
            Problem(
                found="a table without rows",
                expected="at least one row",
                remedy="fill the table, or name another",
                file=str(path),
                key=key,
            )
        )
    return table


def _reader(path: Path, key: str) -> Callable[[Path], DataTable]:
    need_file(path, "a table", key)
    if path.stat().st_size == 0:
        raise InputError(_damaged(path, key, "an empty file"))
    return by_suffix(path, _READERS, "table", key)


def _damaged(path: Path, key: str, words: str) -> Problem:
    short = " ".join(words.split())
    return Problem(
        found=short if len(short) <= 200 else short[:197] + "...",
        expected="a readable table",
        remedy="repair or replace the file",
        file=str(path),
        key=key,
    )


def _read_csv(path: Path) -> DataTable:
    """Every cell as text, so that names keep their zeros and a bad cell is known by its row."""
    lines, separator, header = _csv_header(path)
    twice = sorted({name for name in header if header.count(name) > 1})
    if twice:
        raise _UnreadableError(f"the column name {twice[0]!r} twice")
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        pieces = pd.read_csv(
            path,
            sep=separator,
            skiprows=lines,
            names=header,
            header=0,
            index_col=False,
            dtype=str,
            keep_default_na=False,
            na_values=[""],
            skipinitialspace=True,
            encoding="utf-8-sig",
            compression=packing(path),
            chunksize=_PIECE,
        )
        kind = pyarrow.schema([(name, pyarrow.large_string()) for name in header])
        stored = pyarrow.concat_tables(
            pyarrow.Table.from_pandas(piece, schema=kind, preserve_index=False) for piece in pieces
        )

    def decode(name: str) -> Column:
        cells = stored[name].to_pandas().astype(object).to_numpy()
        blank = np.array([not isinstance(cell, str) or not cell.strip() for cell in cells], bool)
        return Column(cells, blank)

    columns = ColumnsOnDemand(tuple(header), decode)
    return DataTable(str(path), columns, stored.num_rows, sha256_of(path), text=True)


def _csv_header(path: Path) -> tuple[int, str, list[str]]:
    """Lines before the header, the separator, and the column names."""
    with opened(path) as stream:
        for number, line in enumerate(text_stream(stream)):
            if line.strip() and not line.startswith("#"):
                separator = next((mark for mark in "\t,;" if mark in line), ",")
                names = next(csv.reader([line], delimiter=separator))
                return number, separator, [name.strip() for name in names]
    raise _UnreadableError("no header line")


def _read_ecsv(path: Path) -> DataTable:
    try:
        table = Table.read(path, format="ascii.ecsv")
    except ValueError as error:
        place = _ecsv_fault(path)
        if place is None:
            raise
        raise InputError(place) from error
    return from_astropy(table, str(path), sha256_of(path), text=True)


def _ecsv_fault(path: Path) -> Problem | None:
    """The first cell of an ECSV file that does not fit its declared datatype."""
    lines = unpacked(path).decode("utf-8").splitlines()
    head = [line[1:].removeprefix(" ") for line in lines if line.startswith("#")]
    declared = meta.get_header_from_yaml(head[1:])
    body = "\n".join(line for line in lines if line.strip() and not line.startswith("#"))
    rows = csv.DictReader(io.StringIO(body), delimiter=declared.get("delimiter", " "))
    numeric = [
        item["name"]
        for item in declared["datatype"]
        if item["datatype"].startswith(("float", "int", "uint")) and "subtype" not in item
    ]
    for number, row in enumerate(rows, start=1):
        for name in numeric:
            cell = row.get(name)
            try:
                float(cell or "nan")
            except ValueError:
                return Problem(
                    found=shown(str(cell)),
                    expected="a number, as the header declares",
                    remedy="correct the cell, or leave it empty where the value is missing",
                    file=str(path),
                    row=number,
                    column=name,
                )
    return None


def _read_fits(path: Path) -> DataTable:
    with fits.open(path, memmap=False) as parts:
        table = Table.read(_first_table(parts), format="fits")
    return from_astropy(table, str(path), sha256_of(path))


def _first_table(parts: fits.HDUList) -> fits.BinTableHDU | fits.TableHDU:
    """Part by part: a damaged size may lead from one part back to itself, without end."""
    before = -1
    for number in itertools.count():
        try:
            part = parts[number]
        except IndexError:
            break
        place = part.fileinfo()["hdrLoc"] if hasattr(part, "fileinfo") else before
        if place <= before:
            raise _UnreadableError("a damaged header")
        if isinstance(part, fits.BinTableHDU | fits.TableHDU):
            return part
        before = place
    raise _UnreadableError("no table in the file")


def _read_votable(path: Path) -> DataTable:
    content = unpacked(path)
    if b"\0" in content:  # UTF-16, in which nothing below would be found
        raise _UnreadableError("XML that is not in UTF-8")
    if b"<!ENTITY" in content:  # text that swells, or that is put together while it is read
        raise _UnreadableError("XML that declares entities")
    if _ELSEWHERE.search(content):
        raise _UnreadableError("data that lie in another file or on a server")
    table = Table.read(path, format="votable", table_id=0)
    return from_astropy(table, str(path), sha256_of(path))


def _read_text(path: Path) -> DataTable:
    """Other text tables: fixed width, machine-readable with a byte-by-byte head, and so on."""
    with opened(path) as stream:
        head = stream.read(20_000).decode("utf-8", "replace")
    layout = "ascii.mrt" if "Byte-by-byte" in head else "ascii"
    table = Table.read(path, format=layout)
    return from_astropy(table, str(path), sha256_of(path), text=True, states_units=False)


def _read_parquet(path: Path) -> DataTable:
    """Through pyarrow, whose empty cells stay empty; units as astropy stores them."""
    check_parquet(path)
    file = pyarrow.parquet.ParquetFile(path)  # stays open: columns follow when they are used
    schema, rows = file.schema_arrow, file.metadata.num_rows
    described = (schema.metadata or {}).get(b"table_meta_yaml")
    units: dict[str, Any] = {}
    if described is not None:
        declared = meta.get_header_from_yaml(described.decode("utf-8").split("\n"))
        units = {item["name"]: item.get("unit") for item in declared["datatype"]}
    twice = sorted({name for name in schema.names if schema.names.count(name) > 1})
    if twice:
        raise _UnreadableError(f"the column name {twice[0]!r} twice")

    def decode(name: str) -> Column:
        try:
            series = file.read(columns=[name])[name].to_pandas(integer_object_nulls=True)
            return from_series(series, parsed_unit(units.get(name)))
        except Exception as error:  # damage shows only where it lies
            words = f"{type(error).__name__}: {error}"
            raise InputError(_damaged(path, "", words)) from error

    columns = ColumnsOnDemand(tuple(schema.names), decode)
    return DataTable(str(path), columns, rows, sha256_of(path), states_units=described is not None)


_READERS: dict[str, Callable[[Path], DataTable]] = {
    ".csv": _read_csv,
    ".tsv": _read_csv,
    ".ecsv": _read_ecsv,
    ".fits": _read_fits,
    ".fit": _read_fits,
    ".vot": _read_votable,
    ".votable": _read_votable,
    ".xml": _read_votable,
    ".parquet": _read_parquet,
    ".txt": _read_text,
    ".dat": _read_text,
    ".tbl": _read_text,
    ".mrt": _read_text,
}
