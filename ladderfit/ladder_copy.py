"""A ladder laid down in a folder so that another process reads exactly the same one."""

from __future__ import annotations

import dataclasses
import os
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
from astropy.table import Column as AstropyColumn
from astropy.table import MaskedColumn, Table

from ladderfit.assembly import IN_MEMORY, SECTIONS, file_key
from ladderfit.errors import InputError, LadderfitError, Problem
from ladderfit.inputs.tables import Column, DataTable
from ladderfit.ladder import Ladder, read_ladder
from ladderfit.ladder_file import write_choices

LADDER = "ladder.toml"
_SAMPLES = ("cepheids", "parallax_stars", "peaks", "flow", "velocities")
_COVARIANCES = ("anchor_covariance", "peak_covariance")
_UNITS = {  # what a column without a unit means, where a file has to state it
    "period": "d",
    "period_error": "d",
    "parallax": "mas",
    "parallax_error": "mas",
    "distance": "Mpc",
    "velocity": "km/s",
}


def copy_ladder(ladder: Ladder, folder: Path) -> Ladder:
    """Write ``ladder.toml`` into `folder`, and tables that lie in memory as ECSV beside it.

    Tables in files stay where they are; their paths are written relative to the
    folder.  The copy is read back and compared.

    Parameters
    ----------
    ladder : Ladder
    folder : Path
        An existing folder; it may be moved to another name beside.

    Returns
    -------
    Ladder
        As read back from the copy.

    Raises
    ------
    InputError
        If a table changed since the ladder was read, naming it.
    LadderfitError
        If the copy does not read back as the same data.
    """
    changes: dict[str, Any] = {}
    base = ladder._parts.base.resolve()
    for section in SECTIONS:
        written = _table_of(ladder, section)
        if written is None:
            continue
        table = ladder._parts.tables.get((section, written))
        if table is None:
            absolute = Path(written).is_absolute()
            path = written if absolute else os.path.relpath(base / written, folder.resolve())
        else:
            path = f"tables/{section.rpartition('.')[2]}.ecsv"
            (folder / "tables").mkdir(exist_ok=True)
            _write_table(table, _roles(ladder, section), folder / path)
        changes[f"{section}.table"] = Path(path).as_posix()
    changes |= _matrices(ladder, base, folder)
    write_choices(ladder.choices.change(changes), folder / LADDER)
    copy = read_ladder(folder / LADDER)
    _compare(ladder, copy)
    return copy


def _matrices(ladder: Ladder, base: Path, folder: Path) -> dict[str, Any]:
    """Paths of covariances and of lists of names; matrices in memory are written."""
    changes: dict[str, Any] = {}
    for key, values in ladder.matrices.items():
        choice: Mapping[str, Any] = ladder.choices.value(key)
        for part in ("file", "names"):
            written = choice.get(part)
            if written is None:
                continue
            path = written
            if part == "file" and written == IN_MEMORY:
                path = f"tables/{key}.npy"
                (folder / "tables").mkdir(exist_ok=True)
                np.save(folder / path, values)
            elif not Path(written).is_absolute():
                path = os.path.relpath(base / written, folder.resolve())
            changes[f"{key}.{part}"] = Path(path).as_posix()
    return changes


def _table_of(ladder: Ladder, section: str) -> str | None:
    try:
        written = ladder.choices.value(f"{section}.table")
    except KeyError:
        return None
    return written if isinstance(written, str) else None


def _roles(ladder: Ladder, section: str) -> dict[str, str]:
    columns: Mapping[str, str] = ladder.choices.value(f"{section}.columns")
    return {column: role for role, column in columns.items()}


def _write_table(table: DataTable, roles: Mapping[str, str], path: Path) -> None:
    written = Table()
    for name, column in table.columns.items():
        if np.ndim(column.values) == 1:
            unit = column.unit if column.unit is not None else _UNITS.get(roles.get(name, ""))
            written[name] = _cells(column, unit)
    written.write(path, format="ascii.ecsv")


def _cells(column: Column, unit: Any) -> AstropyColumn:
    values, missing = np.asarray(column.values), np.asarray(column.missing, bool)
    if values.dtype.kind == "O":
        present = values[~missing]
        numeric = all(
            isinstance(cell, int | float | np.number) and not isinstance(cell, bool)
            for cell in present
        )
        whole = all(isinstance(cell, int | np.integer) for cell in present)
        kind: Any = (np.int64 if whole else float) if numeric and len(present) else np.str_
        filled = values.copy()
        filled[missing] = "" if kind is np.str_ else 0
        values = filled.astype(kind)
    if missing.any():
        return MaskedColumn(values, mask=missing, unit=unit)
    return AstropyColumn(values, unit=unit)


def _compare(ladder: Ladder, copy: Ladder) -> None:
    """Refuse a copy that differs in any number or name that takes part."""
    problems = [
        Problem(
            found="other contents than when the ladder was read",
            expected="the same table throughout",
            remedy="read the ladder again",
            file=source.path,
            key=file_key(section),
        )
        for section, source in ladder.sources.items()
        if (section, source.path) not in ladder._parts.tables
        and source.path != IN_MEMORY
        and copy.sources[section].sha256 != source.sha256
    ]
    if problems:
        raise InputError(problems)
    same = ladder.hosts == copy.hosts and all(
        _same(getattr(ladder, name), getattr(copy, name)) for name in _SAMPLES
    )
    same = same and all(
        np.array_equal(getattr(ladder, name), getattr(copy, name))
        if getattr(ladder, name) is not None
        else getattr(copy, name) is None
        for name in _COVARIANCES
    )
    if not same:
        raise LadderfitError(
            "a table in memory does not read back from a file as the same numbers; "
            "write it to a file of your own and name that in the ladder"
        )


def _same(one: Any, other: Any) -> bool:
    """Whether two samples hold the same arrays, missing numbers included."""
    if one is None or other is None:
        return one is other
    for part in dataclasses.fields(one):
        if not _alike(getattr(one, part.name), getattr(other, part.name)):
            return False
    return True


def _alike(mine: Any, theirs: Any) -> bool:
    if isinstance(mine, np.ndarray) and isinstance(theirs, np.ndarray):
        return np.array_equal(mine, theirs, equal_nan=mine.dtype.kind == "f")
    if isinstance(mine, Mapping) and isinstance(theirs, Mapping):
        keys = mine.keys() == theirs.keys()
        return keys and all(_alike(value, theirs[key]) for key, value in mine.items())
    if dataclasses.is_dataclass(mine) and type(mine) is type(theirs):
        return _same(mine, theirs)
    return bool(type(mine) is type(theirs) and mine == theirs)
